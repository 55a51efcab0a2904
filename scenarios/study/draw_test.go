package study_test

import (
	"bytes"
	"context"
	"encoding/json"
	"math"
	"testing"

	"ferrule/scenarios/result"
	"ferrule/scenarios/study"
)

const drawn = `scenario: drawn
run: { length: 4s, warm-up: 500ms, seed: 7 }
classes:
  - { name: gold, queue: strict, buffer: 5ms, traffic: even }
  - { name: dust, queue: strict, buffer: 20ms, traffic: wild }
traffic:
  - { name: even, model: constant, packet: 500B }
  - { name: wild, model: poisson, packet: 1200B }
sites: [ { name: a, position: [0km, 0km] }, { name: b, position: [100km, 0km] }, { name: c } ]
fibres:
  - { between: [a, b], length: 200km, risk-groups: [duct] }
  - { between: [a, c], length: 300km }
  - { between: [c, b], length: 300km }
circuits:
  - { name: ab, along: [a-b], slots: 1, rate: 10Mbps, recovery: restore }
aggregates:
  - { name: g, from: a, to: b, class: gold, load: 2Mbps }
  - { name: d, from: a, to: b, class: dust, load: 6Mbps }
timeline: [ { at: 2s, cut: a-b, where: 150km from a } ]
plans: [ { name: same, on: as-is, in-place: [ { resize: ab, slots: 2 } ] } ]
`

// What is drawn agrees with what the tables say.
func TestDrawingsAgreeWithTables(t *testing.T) {
	r := run(t, parse(t, drawn), study.Options{})
	if len(r.Cuts) != 1 || r.Cuts[0].Fibre != "a-b" || math.Abs(r.Cuts[0].WhereKm-150) > 1e-6 || r.Cuts[0].FromS != 2 || r.Cuts[0].ToS != nil {
		t.Errorf("cuts %+v, want one of a-b, 150 km out, from 2 s on", r.Cuts)
	}
	if r.Sites[1].XKm == nil || *r.Sites[1].XKm != 100 || r.Sites[2].XKm != nil {
		t.Errorf("sites %+v: want b 100 km east and c nowhere", r.Sites)
	}
	if f := r.Fibres[0]; len(f.RiskGroups) != 1 || f.RiskGroups[0] != "duct" || f.Channels == 0 || f.Ends[0] != "a" || f.Ends[1] != "b" {
		t.Errorf("fibre %+v", f)
	}
	turns := r.Circuits[0].Turns
	if len(turns) != 3 || turns[0].State != "up" || turns[1].State != "down" || turns[1].AtS <= 2 || turns[2].State != "up" || len(turns[2].Fibres) != 2 {
		t.Errorf("turns %+v: want up, down by the cut, up again over two fibres", turns)
	}
	var offered, lost int64
	for _, s := range r.Series {
		if s.Close {
			if s.FromS != 1 || s.WidthS != 1e-3 || len(s.LostPackets) != 3000 {
				t.Errorf("close-up of %s: %d bins of %g s from %g s, want 3000 of 1 ms from 1 s", s.Class, len(s.LostPackets), s.WidthS, s.FromS)
			}
			continue
		}
		for i := range s.OfferedPackets {
			offered += s.OfferedPackets[i]
			lost += s.LostPackets[i]
			if (s.MeanDelayS[i] == nil) != (s.DeliveredPackets[i] == 0) {
				t.Errorf("%s, bin %d: %d delivered, mean delay %v", s.Class, i, s.DeliveredPackets[i], s.MeanDelayS[i])
			}
		}
	}
	if offered != r.Audit.OfferedPackets || lost != r.Audit.Lost() || lost == 0 {
		t.Errorf("series: %d offered, %d lost; audit: %d and %d", offered, lost, r.Audit.OfferedPackets, r.Audit.Lost())
	}
	tails(t, r)
	for _, l := range r.Loads {
		for _, c := range l.Classes {
			if want := map[string]float64{"gold": 2e6, "dust": 6e6}[c.Class]; l.Period != "hit" && math.Abs(c.Bps/want-1) > 0.06 {
				t.Errorf("%s carries %g bit/s of %s in %s, want about %g", l.Circuit, c.Bps, c.Class, l.Period, want)
			}
		}
	}
}

// tails holds every distribution against the quantiles of the tables.
func tails(t *testing.T, r *result.Run) {
	t.Helper()
	seen := 0
	for _, c := range r.Classes {
		for _, o := range c.Periods {
			for _, x := range r.Tails {
				if x.Class != c.Name || x.Period != o.Period {
					continue
				}
				seen++
				n := len(x.DelayS)
				if n > 200 || x.AtLeast[0] != 1 || math.Abs(x.DelayS[0]-*o.DelayS.Min) > 2e-9 || math.Abs(x.DelayS[n-1]-*o.DelayS.Max) > 2e-9 {
					t.Errorf("%s %s: %d points from %g s (share %g) to %g s; the table has %g to %g s",
						c.Name, o.Period, n, x.DelayS[0], x.AtLeast[0], x.DelayS[n-1], *o.DelayS.Min, *o.DelayS.Max)
				}
				for i := 1; i < n; i++ {
					if x.DelayS[i] < x.DelayS[i-1] || x.AtLeast[i] > x.AtLeast[i-1] {
						t.Fatalf("%s %s: point %d goes back", c.Name, o.Period, i)
					}
				}
				if o.DelayS.P99 == nil {
					continue
				}
				i := 0
				for i < n-1 && x.AtLeast[i] > 0.01 {
					i++
				}
				if d := x.DelayS[i]; math.Abs(d-*o.DelayS.P99) > 0.1**o.DelayS.P99 {
					t.Errorf("%s %s: a share of 0.01 takes %g s, p99 is %g s", c.Name, o.Period, d, *o.DelayS.P99)
				}
			}
		}
	}
	if seen < 4 {
		t.Errorf("%d distributions, want one for each class before and after at least", seen)
	}
}

// Runs are handed out when asked for, on any number of cores the same, and
// they equal single runs.
func TestCompareKeepsRuns(t *testing.T) {
	sc := parse(t, drawn)
	var files [2][]byte
	for i, cores := range []int{1, 2} {
		c, err := study.Compare(context.Background(), sc, study.Options{Cores: cores, Runs: true}, "", nil, study.Seeds(7, 2))
		if err != nil {
			t.Fatal(err)
		}
		if len(c.Runs) != 2 || c.Runs[0].Plan != "as-is" || c.Runs[1].Plan != "same" || c.Runs[1].Seed != 7 || c.Runs[0].Kind != result.KindRun {
			t.Fatalf("kept %d runs, want those of as-is and same with seed 7", len(c.Runs))
		}
		if files[i], err = result.Encode(c); err != nil {
			t.Fatal(err)
		}
	}
	if !bytes.Equal(files[0], files[1]) {
		t.Error("the runs differ with the number of cores")
	}
	var back result.Comparison
	if err := json.Unmarshal(files[0], &back); err != nil {
		t.Fatal(err)
	}
	alone, err := result.Encode(run(t, sc, study.Options{Cores: 2}))
	if err != nil {
		t.Fatal(err)
	}
	if kept, err := result.Encode(back.Runs[0]); err != nil || !bytes.Equal(kept, alone) {
		t.Errorf("the kept run is not the run alone (%v)", err)
	}
	c, err := study.Compare(context.Background(), sc, study.Options{}, "", nil, study.Seeds(7, 2))
	if err != nil || c.Runs != nil {
		t.Errorf("%d runs kept that nobody asked for (%v)", len(c.Runs), err)
	}
	b, err := study.Batch(context.Background(), sc, study.Options{Runs: true}, study.Seeds(7, 2))
	if err != nil || len(b.Runs) != 1 || b.Runs[0].Seed != 7 {
		t.Errorf("a batch keeps %d runs, want that of seed 7 (%v)", len(b.Runs), err)
	}
}
