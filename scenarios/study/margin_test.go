package study

import (
	"math"
	"strings"
	"testing"

	"ferrule/scenarios/result"
)

// A difference that surely lies within the margin does not matter, whether it
// is there or not; one that may be larger does. Eight pairs with a mean and a
// half-width at 95 % as given: the interval at 90 %, by which two one-sided
// tests go, is 0.801 of that (t of 7 degrees of freedom: 1.895 and 2.365).
func TestSameWithinTheMargin(t *testing.T) {
	limit := 20e-3
	for _, c := range []struct {
		mean, half float64
		limit      *float64
		margin     float64
		want       result.Verdict
		why        string
	}{
		{-4e-6, 1e-6, &limit, 0.01, result.Same, "sure, 0.02 % of the limit"},
		{-300e-6, 1e-6, &limit, 0.01, result.Better, "sure, 1.5 % of the limit"},
		{-300e-6, 1e-6, &limit, 0.02, result.Same, "the same, with a margin of 2 %"},
		{50e-6, 100e-6, &limit, 0.01, result.Same, "unsure, surely below 0.2 ms"},
		{50e-6, 180e-6, &limit, 0.01, result.Same, "at 90 %, up to 194 us"},
		{50e-6, 195e-6, &limit, 0.01, result.Undecided, "at 90 %, up to 206 us"},
		{0.5e-3, 0.1e-3, nil, 0.01, result.Worse, "5 % of a figure of 10 ms"},
		{0.05e-3, 0.01e-3, nil, 0.01, result.Same, "0.5 % of a figure of 10 ms"},
	} {
		x := pairsOf(c.mean, c.half, 8, c.limit, c.margin)
		if x.verdict(0.05); x.Verdict != c.want {
			t.Errorf("%s: %s (p %v, same %v), want %s", c.why, x.Verdict, *x.P, *x.PSame, c.want)
		}
	}
}

// pairsOf is a contrast of n pairs, n even, whose difference has the mean and
// the half-width at 95 % given, around a base of 10 ms.
func pairsOf(mean, half float64, n int, limit *float64, margin float64) contrast {
	unit := measureHalf(n)
	var had, tried []float64
	for i := range n {
		sign := float64(1 - 2*(i%2))
		had = append(had, 10e-3+sign*1e-3)
		tried = append(tried, 10e-3+sign*1e-3+mean+sign*half/unit)
	}
	x := contrast{way: lowerIsBetter, seeds: n}
	x.Limit, x.Exploratory = limit, limit == nil
	x.Base, x.Plan = meanOf(had), meanOf(tried)
	x.weigh(tried, had, terms{level: 0.95, margin: margin})
	return x
}

// measureHalf is the half-width at 95 % of n values of +1 and -1.
func measureHalf(n int) float64 {
	v := make([]float64, n)
	for i := range v {
		v[i] = float64(1 - 2*(i%2))
	}
	h := hands(v...)
	return *meanFigureOf(foldBatch("as-is", h, 0.95)).Interval.Half
}

func meanFigureOf(b *result.Batch) result.Mean {
	for _, m := range b.Figures {
		if m.Figure == result.FigDelayP99 {
			return m
		}
	}
	panic("no figure")
}

// Three figures with p values of 1, 2 and 30 in a thousand, of which Holm at
// 5 % lets all pass: 3, 4 and 30. A fourth at 20 takes the third with it: 4, 6,
// 40, 40; with one at 30 and one at 28: 5, 8, 84.
func TestFamily(t *testing.T) {
	f := pairing{base: hands(1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 11, 12), terms: terms{level: 0.95, margin: 0.01}}
	limit := 1.0
	of := func(ps ...float64) (out []contrast) {
		for _, p := range ps {
			x := contrast{way: lowerIsBetter, seeds: 12, diffs: []float64{-1, -2}}
			x.Limit, x.P, x.Difference.Difference = &limit, new(p), new(-1.5)
			out = append(out, x)
		}
		return out
	}
	for _, c := range []struct {
		ps, want []float64
		better   int
	}{
		{[]float64{0.001, 0.002, 0.030}, []float64{0.003, 0.004, 0.030}, 3},
		{[]float64{0.001, 0.030, 0.002, 0.020}, []float64{0.004, 0.040, 0.006, 0.040}, 4},
		{[]float64{0.001, 0.002, 0.030, 0.028, 0.029}, []float64{0.005, 0.008, 0.084, 0.084, 0.084}, 2},
	} {
		xs := of(c.ps...)
		fam := f.decide(xs)
		better := 0
		for i := range xs {
			if math.Abs(*xs[i].PFamily-c.want[i]) > 1e-12 {
				t.Errorf("%v: corrected %v, want %v", c.ps, *xs[i].PFamily, c.want[i])
			}
			if xs[i].Verdict == result.Better {
				better++
			}
		}
		if better != c.better || fam.Figures != int64(len(c.ps)) {
			t.Errorf("%v: %d better, want %d; family %+v", c.ps, better, c.better, fam)
		}
	}
}

// What never differs is no test and makes no figure of the family harder to
// call; what has no objective is exploratory.
func TestFamilyLeavesOut(t *testing.T) {
	base, plan := hands(5, 6, 7, 5, 6, 7), hands(4, 5, 6, 4, 5, 6.1)
	c := foldComparison([]string{"as-is", "other"}, [][]*sample{base, plan}, at(0.95))
	d := differenceOf(t, c, result.FigDelayP99)
	if !d.Exploratory || d.PFamily != nil || d.P == nil || *d.P < 1.0/32 {
		t.Errorf("%+v: want it exploratory, with a p value that six pairs can show", d)
	}
	if l := differenceOf(t, c, result.FigLoss); l.Verdict != result.Same || *l.P != 1 {
		t.Errorf("loss, which is equal in every seed: %+v", l)
	}
	if d.Correlation == nil || *d.Correlation < 0.9 || *d.PairingGain < 10 {
		t.Errorf("pairing: %v, %v", d.Correlation, d.PairingGain)
	}
	if f := c.Plans[0].Family; f.Figures != 0 || f.LeastP != 1.0/32 || f.Loose != 6 {
		t.Errorf("family %+v", f)
	}
}

// With two seeds nothing can be said, and the report says how many it takes.
func TestTwoSeeds(t *testing.T) {
	with := func(pairs ...float64) (out []*sample) {
		for i, p := range pairs {
			out = append(out, sampleOf(hand{seed: uint64(i), p99: new(p), limit: 0.04, pairs: []float64{p}}.run()))
		}
		return out
	}
	c := foldComparison([]string{"as-is", "other"}, [][]*sample{with(0.01, 0.02), with(0.03, 0.039)}, at(0.95))
	if d := differenceOf(t, c, result.FigDelayP99); d.Verdict != result.Undecided || *d.P < 0.5 || d.MoreSeeds == nil || *d.MoreSeeds < 4 ||
		d.Correlation != nil || d.PairingGain != nil {
		t.Errorf("two seeds: %+v", d)
	}
	if s := strings.Join(c.Cautions, "\n"); !strings.Contains(s, "2 seeds show p values down to 0.5 at best") || !strings.Contains(s, "6 seeds can") {
		t.Errorf("cautions %q", s)
	}
}
