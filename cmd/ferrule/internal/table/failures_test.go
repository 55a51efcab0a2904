package table

import (
	"strings"
	"testing"

	"ferrule/scenarios/result"
)

// sampleFailures is made by hand.
func sampleFailures() *result.Failures {
	hurt := func(class string, lost float64, median, worst *float64, off int64) result.Hurt {
		return result.Hurt{Class: class, LostPackets: lost, Hit: 3, OutageMedianS: median, OutageWorstS: worst, WorstPair: "voice-tn.out", CutOff: off, Missed: off}
	}
	first := result.Failure{Rank: 1, Name: "tarn-holm", Kind: "fibre", LengthKm: new(310.0), PerYear: new(0.8446), Seeds: 3,
		Classes:    []result.Hurt{hurt("voice", 1234.5, new(0.0187), new(0.219), 0), hurt("web", 12.25, new(0.7), new(0.7), 2)},
		Unrestored: []string{"vx"}, CutOff: []string{"web-tn.out", "web-tn.back"}, WorstUse: new(1.0312), WorstPort: "th from holm"}
	second := result.Failure{Rank: 2, Name: "harbour-duct", Kind: "group", Seeds: 3,
		Classes: []result.Hurt{hurt("voice", 0, nil, nil, 0), hurt("web", 0.5, new(1.5e-5), new(2.5e-5), 0)}, Unsettled: 3}
	nothing := result.Failure{Name: "nothing", Kind: "nothing", Seeds: 3,
		Classes: []result.Hurt{{Class: "voice"}, {Class: "web", LostPackets: 0.25}}, WorstUse: new(0.61)}
	return &result.Failures{Head: sampleHead(), Seeds: []uint64{1, 2, 3}, Kinds: []string{"fibre", "group"}, Scale: 0.8, BeforeS: 0.2, AtS: 1.2, AfterS: 0.7,
		CutsPerY: 0.0027278, RepairS: 43200, Classes: []string{"voice", "web"}, Runs: 18,
		Plans: []result.FailuresPlan{
			{Plan: "as-is", Nothing: &nothing, Failures: []result.Failure{first, second},
				Classes: []result.YearOfClass{
					{Class: "voice", HurtMostBy: "tarn-holm", LostPackets: 1234.5, Lost: new(0.185), Availability: new(0.99999999413), WorstLost: new(61.5), WorstPair: "voice-tn.out"},
					{Class: "web", HurtMostBy: "tarn-holm", LostPackets: 12.25, Lost: new(36486.72), Below: new(1260.0), Availability: new(0.998843), WorstLost: new(36486.72), WorstPair: "web-tn.out"}},
				Each: []result.YearOfTraffic{{Aggregate: "voice-tn.out", Class: "voice", Lost: 0.185, Availability: 0.99999999413}}},
			{Plan: "express", Failures: []result.Failure{second}, Classes: []result.YearOfClass{{Class: "voice"}, {Class: "web"}}}},
		Audit:    result.Audit{OfferedPackets: 7000000, DeliveredPackets: 6999000, LostPackets: result.Losses{{Cause: "cut", Packets: 1000}}, OK: true},
		Defaults: []result.Default{{Key: "controller.attempts", Value: "3"}}, Cautions: []string{"Loads are scaled."}}
}

// Many classes make several matrices, none too wide, and nothing is left out.
func TestMatrixOfManyClasses(t *testing.T) {
	r := sampleFailures()
	for i := range 11 {
		class := strings.Repeat(string(rune('a'+i)), 20)
		r.Classes = append(r.Classes, class)
		for p := range r.Plans {
			r.Plans[p].Classes = append(r.Plans[p].Classes, result.YearOfClass{Class: class})
			for f := range r.Plans[p].Failures {
				h := &r.Plans[p].Failures[f].Classes
				*h = append((*h)[:2+i:2+i], result.Hurt{Class: class, LostPackets: float64(777000 + i), OutageMedianS: new(0.1), OutageWorstS: new(0.2)})
			}
		}
		n := &r.Plans[0].Nothing.Classes
		*n = append(*n, result.Hurt{Class: class})
	}
	got := text(t, r, Options{})
	for i := range 11 {
		if n := "777,0" + string(rune('0'+i/10)) + string(rune('0'+i%10)); strings.Count(got, n) < 2 {
			t.Errorf("%s packets of class %d are not shown", n, i)
		}
	}
	for l := range strings.Lines(got) {
		if n := len([]rune(strings.TrimRight(l, "\n"))); n > Width {
			t.Errorf("%d columns: %s", n, l)
		}
	}
}
