package study

import (
	"math"
	"strings"
	"testing"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes/packet"
	"ferrule/scenarios"
	"ferrule/scenarios/result"
)

// White (1997) and Franklin and White (2008): of these means of blocks of five
// the first eight go; numbers computed from the rule.
var settlingBlocks = []float64{12, 9, 7, 4, 2, 1.0, 1.4, 0.6, 1.2, 0.8, 1.1, 0.9, 1.3, 0.7, 1.0, 1.2, 0.8, 1.1, 0.9, 1.0}

func TestSettling(t *testing.T) {
	s := packet.Series{Width: 10 * des.Millisecond}
	for _, z := range settlingBlocks {
		for range 5 {
			s.Wide = append(s.Wide, packet.Tally{Delivered: 10, Delay: uint64(10 * z * 1e6)})
		}
	}
	at, settled, ok := settling(&s, des.Second)
	if at != 400*des.Millisecond || !settled || !ok {
		t.Errorf("cut at %v, settled %v, %v; want 400 ms", at, settled, ok)
	}
	// Half of the stretch is where it settles: too short.
	if at, settled, ok = settling(&s, 400*des.Millisecond); settled || !ok {
		t.Errorf("over 400 ms: cut at %v, settled %v, %v", at, settled, ok)
	}
	// Every second bin empty: pairs of bins, as long as there are twenty.
	for i := range s.Wide {
		if i%2 == 1 {
			s.Wide[i] = packet.Tally{}
		}
	}
	if at, settled, ok = settling(&s, des.Second); !settled || !ok || at%(100*des.Millisecond) != 0 {
		t.Errorf("half empty: cut at %v, settled %v, %v", at, settled, ok)
	}
	s.Wide = make([]packet.Tally, 100)
	if _, _, ok = settling(&s, des.Second); ok {
		t.Error("a class that sent nothing says something")
	}
}

// The cut of a seed is the same under every plan and whichever plan is asked
// for first, and a run measures nothing before it.
func TestWarmUpIsOneForAllPlans(t *testing.T) {
	sc, err := sized(3)
	if err != nil {
		t.Fatal(err)
	}
	sc.Run.Length, sc.Run.WarmUp, sc.Run.AutoWarmUp = 600*des.Millisecond, 0, true
	c, err := warmUp(t.Context(), sc, 3)
	if err != nil {
		t.Fatal(err)
	}
	if c.stretch != 600*des.Millisecond || c.at > c.stretch/2 {
		t.Errorf("cut at %v of %v", c.at, c.stretch)
	}
	for _, plan := range []string{"moved", scenarios.AsIs} {
		r, err := Run(t.Context(), sc, Options{Plan: plan, Seed: 3, Cores: 1})
		if err != nil {
			t.Fatal(err)
		}
		if r.WarmUpS != c.at.Seconds() || r.Periods[0].FromS != c.at.Seconds() || r.WarmUpShort != (c.short != "") || !r.WarmUpFound {
			t.Errorf("%s: warm-up %v, first period from %v; want %v", plan, r.WarmUpS, r.Periods[0].FromS, c.at)
		}
	}
}

func TestFirstAct(t *testing.T) {
	sc := &scenarios.Scenario{Run: scenarios.Run{Length: 10 * des.Second}}
	if at := firstAct(sc); at != 10*des.Second {
		t.Errorf("without acts: %v", at)
	}
	sc.Timeline = []scenarios.Act{{At: 6 * des.Second}, {At: des.Never}}
	sc.Plans = []scenarios.Plan{{}, {Steps: []scenarios.Act{{At: 2 * des.Second}}, InPlace: []scenarios.Act{{At: 0}}}}
	if at := firstAct(sc); at != 2*des.Second {
		t.Errorf("a plan acts at 2 s: %v", at)
	}
}

// When a run is too short for its warm-up there is no interval anywhere.
func TestTooShort(t *testing.T) {
	samples, others := hands(1, 2, 3, 4, 5, 6, 7), hands(1.1, 2.1, 3.1, 4.1, 5.1, 6.1, 7.2)
	samples[2].short = true
	b := foldBatch("as-is", samples, 0.95)
	if m := meanFigure(t, b, result.FigDelayP99); m.Interval != nil || !strings.Contains(strings.Join(b.Cautions, "\n"), "with the seeds 3.") {
		t.Errorf("%+v, %q", m, b.Cautions)
	}
	c := foldComparison([]string{"as-is", "other"}, [][]*sample{others, samples}, at(0.95))
	if d := differenceOf(t, c, result.FigDelayP99); d.Interval != nil || d.Verdict != "" || d.P != nil {
		t.Errorf("%+v", d)
	}
	if v := c.Plans[0].Verdicts[0]; v.Verdict != result.Undecided || !strings.Contains(v.Text, "too short") {
		t.Errorf("%+v", v)
	}
	limited := sampleOf(hand{seed: 1, p99: new(1.0), limit: 9}.run())
	limited.short = true
	if g := gateOf("as-is", []*sample{limited, limited, limited, limited, limited, limited}, 0.95, nil); g.Standing != result.Open {
		t.Errorf("gate %+v", g)
	}
}

// Batches of independent bins give the interval of the t distribution; those
// of a slow wave are refused, and so is a period that is too short.
func TestWithin(t *testing.T) {
	make := func(delay func(i int, noise float64) float64, bins int) *result.Run {
		s := result.Series{Class: "voice", WidthS: 0.01}
		draw := random.NewStream(1, "within")
		for i := range bins {
			s.DeliveredPackets = append(s.DeliveredPackets, 100)
			s.MeanDelayS = append(s.MeanDelayS, new(delay(i, draw.Float64())))
		}
		return &result.Run{Series: []result.Series{s}, Periods: []result.Period{{Name: "normal", FromS: 0.1, ToS: float64(bins) * 0.01}}}
	}
	noise := func(_ int, u float64) float64 { return 1 + u }
	w := withinOf(make(noise, 410))[0]
	// Uniform on [1, 2]: variance 1/12 over 400 bins; t of 9 degrees is 2.262.
	if want := 2.262 * math.Sqrt(1.0/12/400); w.Interval == nil || math.Abs(*w.MeanS-1.5) > 3*want || *w.Interval.Half < 0.6*want || *w.Interval.Half > 1.4*want {
		t.Errorf("noise: %+v", w)
	}
	w = withinOf(make(func(i int, u float64) float64 { return 2 + math.Sin(float64(i)/60) + u/100 }, 410))[0]
	if w.Interval != nil || *w.Lag1 < 0.5 || !strings.Contains(w.Refused, "correlated") {
		t.Errorf("a wave: %+v", w)
	}
	if w = withinOf(make(noise, 89))[0]; w.Interval != nil || w.Refused == "" || w.MeanS != nil {
		t.Errorf("79 bins: %+v", w)
	}
}
