package measure

import (
	"math"
	"math/rand/v2"
	"testing"
)

// Intervals for a ratio, 95 %. Source of the first three: R. G. Newcombe,
// "Two-sided confidence intervals for the single proportion", Statist. in Med.
// 17, 1998, table I, to four digits; the others, and the further digits, are
// computed from the two definitions.
func TestRatioIntervals(t *testing.T) {
	for _, c := range []struct {
		hits, trials                     uint64
		wilsonLow, wilsonHigh, low, high float64
	}{
		{81, 263, 0.255289, 0.366210, 0.252737, 0.367622},
		{0, 20, 0, 0.161125, 0, 0.168433},
		{1, 29, 0.006113, 0.171755, 0.000873, 0.177644},
		{0, 1000, 0, 0.00382676, 0, 0.00368208},
		{0, 10000, 0, 0.000383998, 0, 0.00036882},
		{1, 1000, 0.000176546, 0.00564256, 2.53175e-5, 0.00555892},
		{10, 1000, 0.00544075, 0.0183095, 0.00480551, 0.0183132},
		{3, 100000, 1.02028e-5, 8.82080e-5, 6.18676e-6, 8.76702e-5},
		{17, 1000000, 1.06145e-5, 2.72268e-5, 9.90316e-6, 2.72185e-5},
		{100, 10000, 0.00822934, 0.0121470, 0.00814360, 0.0121495},
	} {
		tol := func(v float64) float64 { return max(5.1e-7*min(1, 1000*v), 6e-6*v) }
		low, high := Wilson(c.hits, c.trials, 0.95)
		if !near(low, c.wilsonLow, tol(c.wilsonLow)) || !near(high, c.wilsonHigh, tol(c.wilsonHigh)) {
			t.Errorf("Wilson(%d, %d) = %v, %v; want %v, %v", c.hits, c.trials, low, high, c.wilsonLow, c.wilsonHigh)
		}
		low, high = ClopperPearson(c.hits, c.trials, 0.95)
		if !near(low, c.low, tol(c.low)) || !near(high, c.high, tol(c.high)) {
			t.Errorf("ClopperPearson(%d, %d) = %v, %v; want %v, %v", c.hits, c.trials, low, high, c.low, c.high)
		}
		// What did not happen has the mirrored interval.
		mirrorLow, mirrorHigh := ClopperPearson(c.trials-c.hits, c.trials, 0.95)
		if !near(mirrorLow, 1-high, 1e-9) || !near(mirrorHigh, 1-low, 1e-9) {
			t.Errorf("mirror of ClopperPearson(%d, %d) = %v, %v", c.hits, c.trials, mirrorLow, mirrorHigh)
		}
	}
	for name, f := range map[string]func(uint64, uint64, float64) (float64, float64){"Wilson": Wilson, "ClopperPearson": ClopperPearson} {
		if low, high := f(0, 0, 0.95); low != 0 || high != 1 {
			t.Errorf("%s of no trial = %v, %v; want 0, 1", name, low, high)
		}
		if low, high := f(5, 5, 0.95); high != 1 || low < 0.4 {
			t.Errorf("%s(5, 5) = %v, %v", name, low, high)
		}
	}
}

// 1-0.05^(1/n), close to 3/n: Hanley and Lippman-Hand (1983).
func TestNoneSeenUpper(t *testing.T) {
	for n, want := range map[uint64]float64{100: 0.0295130, 1000: 0.00299125, 10000: 0.000299528} {
		if got := NoneSeenUpper(n, 0.95); !near(got, want, 5e-6*want) {
			t.Errorf("NoneSeenUpper(%d) = %v, want %v", n, got, want)
		}
	}
	if got := NoneSeenUpper(0, 0.95); got != 1 {
		t.Errorf("NoneSeenUpper(0) = %v, want 1", got)
	}
}

// The range that holds the central 99 % of a binomial distribution; computed
// from the distribution by another program.
func TestCoverageRange(t *testing.T) {
	for _, c := range []struct {
		runs      int
		nominal   float64
		low, high int
	}{
		{100, 0.95, 89, 100}, {200, 0.95, 181, 197}, {400, 0.95, 368, 390}, {1000, 0.95, 931, 967},
		{2000, 0.95, 1874, 1924}, {10000, 0.95, 9443, 9555}, {1000, 0.90, 875, 924},
	} {
		if low, high := CoverageRange(c.runs, c.nominal, 0.99); low != c.low || high != c.high {
			t.Errorf("%d runs of nominal %v: %d to %d, want %d to %d", c.runs, c.nominal, low, high, c.low, c.high)
		}
	}
}

// Coverage of the interval between two order statistics. Sources: the first
// seven are printed, in per cent, in statistics textbooks' tables of intervals
// for a median; all are recomputed from the binomial sum.
func TestRankCoverage(t *testing.T) {
	for _, c := range []struct {
		n, j, k int
		p, want float64
	}{
		{6, 1, 6, 0.5, 0.968750}, {8, 2, 7, 0.5, 0.929688}, {10, 2, 9, 0.5, 0.978516}, {12, 3, 10, 0.5, 0.961426},
		{15, 4, 12, 0.5, 0.964844}, {17, 5, 13, 0.5, 0.950958}, {20, 6, 15, 0.5, 0.958611},
		{35, 17, 19, 0.5, 0.264121},
	} {
		if got := RankCoverage(c.n, c.j, c.k, c.p); !near(got, c.want, 5.1e-7) {
			t.Errorf("n %d, ranks %d and %d: %v, want %v", c.n, c.j, c.k, got, c.want)
		}
	}
}

// Ranks by the rule in the comment of QuantileRanks, 95 %; computed from the
// binomial distribution by another program.
func TestQuantileRanks(t *testing.T) {
	for _, c := range []struct {
		n    int
		p    float64
		j, k int
		want float64
	}{
		{31, 0.5, 10, 22, 0.970551}, {50, 0.5, 18, 33, 0.967161}, {100, 0.5, 40, 61, 0.964800}, {1000, 0.5, 469, 532, 0.953709},
		{100, 0.95, 90, 100, 0.982607}, {200, 0.95, 184, 197, 0.967152}, {500, 0.95, 465, 485, 0.960499},
		{1000, 0.95, 936, 964, 0.958095}, {1000, 0.99, 983, 997, 0.976095}, {5000, 0.99, 4936, 4964, 0.953740},
		{10000, 0.99, 9880, 9920, 0.955755}, {10000, 0.999, 9983, 9997, 0.975457},
		{100000, 0.999, 99880, 99920, 0.954789}, {1000000, 0.9999, 999880, 999920, 0.954692},
	} {
		j, k, coverage, ok := QuantileRanks(c.n, c.p, 0.95)
		if !ok || j != c.j || k != c.k || !near(coverage, c.want, 5.1e-7) {
			t.Errorf("n %d, p %v: ranks %d and %d, %v, %v; want %d and %d, %v", c.n, c.p, j, k, coverage, ok, c.j, c.k, c.want)
		}
	}
	for _, n := range []int{0, 1, 5} { // P(B = 0) = 2^-5 is above 2.5 %
		if _, _, _, ok := QuantileRanks(n, 0.5, 0.95); ok {
			t.Errorf("%d values give an interval for a median", n)
		}
	}
}

// Of 100 values none need lie above the quantile 0.999, nor below 0.001.
func TestQuantileRanksBeyondTheSample(t *testing.T) {
	for _, p := range []float64{0.999, 0.001} {
		if j, k, _, ok := QuantileRanks(100, p, 0.95); ok {
			t.Errorf("100 values give ranks %d and %d for the quantile %v", j, k, p)
		}
	}
}

// Wilks (1941); the formula with the least number that meets it.
func TestWilksSizes(t *testing.T) {
	for level, want := range map[float64][3]int{0.90: {45, 230, 2302}, 0.95: {59, 299, 2995}, 0.99: {90, 459, 4603}} {
		for i, p := range []float64{0.95, 0.99, 0.999} {
			if got := SizeForMaximum(p, level); got != want[i] {
				t.Errorf("SizeForMaximum(%v, %v) = %d, want %d", p, level, got, want[i])
			}
		}
	}
	for p, want := range map[float64]int{0.90: 46, 0.95: 93, 0.99: 473} {
		if got := SizeForRange(p, 0.95); got != want {
			t.Errorf("SizeForRange(%v, 0.95) = %d, want %d", p, got, want)
		}
	}
}

// Independent exponential delays: the interval holds the true quantile as
// often as it should, or more, because coverage goes in steps.
func TestHistQuantileIntervalCovers(t *testing.T) {
	const runs, n = 1000, 500
	r := rand.New(rand.NewPCG(9, 10))
	truth := 1e5 * -math.Log(1-0.95)
	covers := 0
	for range runs {
		var h Hist
		for range n {
			h.Add(uint64(1e5 * r.ExpFloat64()))
		}
		low, high, ok := h.QuantileInterval(95, 100, 0.95)
		if !ok || high < low {
			t.Fatalf("interval %v, %v, %v", low, high, ok)
		}
		if low <= truth && truth <= high {
			covers++
		}
	}
	// The ranks reach 0.960499 (see TestQuantileRanks).
	if low, high := CoverageRange(runs, 0.960499, 0.999); covers < low || covers > high {
		t.Errorf("%d of %d cover, want %d to %d", covers, runs, low, high)
	}
	if _, _, ok := new(Hist).QuantileInterval(1, 2, 0.95); ok {
		t.Error("an empty histogram has an interval")
	}
}
