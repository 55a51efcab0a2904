package measure

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"
)

// near reports whether got is want within an absolute tolerance.
func near(got, want, tol float64) bool { return math.Abs(got-want) <= tol }

// One-sided quantiles of Student's t. Source: NIST/SEMATECH e-Handbook of
// Statistical Methods, section 1.3.6.7.2, to its printed digits; the fourth
// digit, and rows above 30, computed from the distribution by other programs.
func TestStudentTable(t *testing.T) {
	for _, r := range []struct{ df, q95, q975, q995 float64 }{
		{1, 6.3138, 12.7062, 63.6567}, {2, 2.9200, 4.3027, 9.9248}, {3, 2.3534, 3.1824, 5.8409},
		{4, 2.1318, 2.7764, 4.6041}, {5, 2.0150, 2.5706, 4.0321}, {9, 1.8331, 2.2622, 3.2498},
		{10, 1.8125, 2.2281, 3.1693}, {14, 1.7613, 2.1448, 2.9768}, {15, 1.7531, 2.1314, 2.9467},
		{19, 1.7291, 2.0930, 2.8609}, {20, 1.7247, 2.0860, 2.8453}, {29, 1.6991, 2.0452, 2.7564},
		{30, 1.6973, 2.0423, 2.7500}, {39, 1.6849, 2.0227, 2.7079}, {49, 1.6766, 2.0096, 2.6800},
		{60, 1.6706, 2.0003, 2.6603}, {99, 1.6604, 1.9842, 2.6264}, {120, 1.6577, 1.9799, 2.6174},
	} {
		for p, want := range map[float64]float64{0.95: r.q95, 0.975: r.q975, 0.995: r.q995} {
			if got := TQuantile(p, r.df); !near(got, want, 5.1e-5) {
				t.Errorf("t(%v, %v) = %.6f, want %v", p, r.df, got, want)
			}
		}
	}
	// Printed by the example programs of a numerical library's manual.
	if got := TQuantile(0.01, 7.5); !near(got, -2.9431, 5e-5) {
		t.Errorf("t(0.01, 7.5) = %v", got)
	}
	if got := TQuantile(0.995, 45); !near(got, 2.6896, 5e-5) {
		t.Errorf("t(0.995, 45) = %v", got)
	}
	// Standard tables of the normal distribution.
	for p, want := range map[float64]float64{0.95: 1.644854, 0.975: 1.959964, 0.995: 2.575829, 0.9995: 3.290527} {
		if got := NormalQuantile(p); !near(got, want, 5.1e-7) {
			t.Errorf("normal(%v) = %.8f, want %v", p, got, want)
		}
	}
}

// Chi-square quantiles 0.025 and 0.975 are not used here, but they check the
// library that the other distributions come from. Standard tables.
func TestLibraryChiSquare(t *testing.T) {
	for df, want := range map[float64][2]float64{
		9: {2.7004, 19.0228}, 20: {9.5908, 34.1696}, 29: {16.0471, 45.7223}, 100: {74.2219, 129.5612},
	} {
		d := distuv.ChiSquared{K: df}
		if !near(d.Quantile(0.025), want[0], 5.1e-5) || !near(d.Quantile(0.975), want[1], 5.1e-5) {
			t.Errorf("chi-square(%v) = %v, %v; want %v", df, d.Quantile(0.025), d.Quantile(0.975), want)
		}
	}
}

// Law, Simulation Modeling and Analysis: examples of ch. 4 and ch. 9 (bank).
var (
	lawChapter4 = []float64{1.20, 1.50, 1.68, 1.89, 0.95, 1.49, 1.58, 1.55, 0.50, 1.09}
	lawBank     = []float64{1.53, 1.66, 1.24, 2.34, 2.00, 1.69, 2.69, 2.86, 1.70, 2.60}
)

func TestMeanIntervalWorked(t *testing.T) {
	i := MeanInterval(lawChapter4, 0.90)
	if !near(i.Mean, 1.343, 1e-12) || !near(i.Half, 0.2372534, 5e-7) || i.N != 10 {
		t.Errorf("ch. 4: %+v, want 1.343 ± 0.2372534", i)
	}
	i = MeanInterval(lawBank, 0.90)
	if !near(i.Mean, 2.031, 1e-12) || !near(i.Half, 0.3222834, 5e-7) || !near(i.Relative(), 0.1586821, 5e-7) {
		t.Errorf("bank: %+v, want 2.031 ± 0.3222834", i)
	}
	if !near(i.Low(), i.Mean-i.Half, 0) || !near(i.High(), i.Mean+i.Half, 0) {
		t.Errorf("ends %v, %v", i.Low(), i.High())
	}
	if i := MeanInterval([]float64{4}, 0.9); i.Mean != 4 || !math.IsInf(i.Half, 1) || i.N != 1 {
		t.Errorf("one value: %+v", i)
	}
	if i := MeanInterval(nil, 0.9); !math.IsNaN(i.Mean) || !math.IsInf(i.Half, 1) {
		t.Errorf("no value: %+v", i)
	}
	if i := MeanInterval([]float64{0.1, 0.1, 0.1}, 0.9); i != (Interval{0.1, 0, 3}) || i.Relative() != 0 {
		t.Errorf("constant values: %+v", i)
	}
}

// Law, Simulation Modeling and Analysis, ch. 10 (inventory), and the same data
// taken as independent.
func TestComparisonsWorked(t *testing.T) {
	x := []float64{126.97, 124.31, 126.68, 122.66, 127.23}
	y := []float64{118.21, 120.22, 122.45, 122.68, 119.40}
	p := PairedT(x, y, 0.90)
	if !near(p.Diff.Mean, 4.978, 1e-9) || !near(p.Diff.Half, 3.328873, 5e-6) || p.Constant || p.Identical {
		t.Errorf("paired: %+v, want 4.978 ± 3.328873", p)
	}
	// The p value is where the interval just reaches zero.
	if at := PairedT(x, y, 1-p.P).Diff; !near(at.Low(), 0, 1e-9) {
		t.Errorf("interval at 1-p = %v: %+v, want its end at 0", p.P, at)
	}
	w := Welch(x, y, 0.90)
	if !near(w.DF, 7.992386, 5e-7) || !near(w.Diff.Half, 2.317214, 5e-7) || !near(w.Diff.Mean, 4.978, 1e-9) || w.Diff.N != 5 {
		t.Errorf("Welch: %+v, want 7.992386 d.o.f. and 4.978 ± 2.317214", w)
	}
	if at := Welch(x, y, 1-w.P).Diff; !near(at.Low(), 0, 1e-9) {
		t.Errorf("interval at 1-p = %v: %+v, want its end at 0", w.P, at)
	}
	// var(x-y) = var x + var y - 2 r sd x sd y, with the variances printed there.
	r := (4.00085 + 3.76127 - 5*2.438274) / (2 * math.Sqrt(4.00085*3.76127))
	if !near(p.Correlation, r, 1e-5) {
		t.Errorf("correlation %v, want %v", p.Correlation, r)
	}
	if back := PairedT(y, x, 0.90); back.Diff.Mean != -p.Diff.Mean || back.P != p.P || back.Diff.Half != p.Diff.Half {
		t.Errorf("exchanged: %+v", back)
	}
}

func TestComparisonsWithoutVariance(t *testing.T) {
	x := []float64{1.25, 2.5, 4}
	shifted := []float64{1.5, 2.75, 4.25}
	p := PairedT(x, x, 0.95)
	if !p.Identical || !p.Constant || p.P != 1 || p.Diff != (Interval{0, 0, 3}) || p.Correlation != 1 {
		t.Errorf("a series with itself: %+v", p)
	}
	p = PairedT(x, shifted, 0.95)
	if p.Identical || !p.Constant || p.P != 0 || p.Diff != (Interval{-0.25, 0, 3}) {
		t.Errorf("a constant difference: %+v", p)
	}
	if v := Verdict(p.Diff, true); v != Better {
		t.Errorf("a constant difference is %q", v)
	}
	c := []float64{2, 2}
	if w := Welch(c, c, 0.95); w.P != 1 || w.Diff != (Interval{0, 0, 2}) || !math.IsNaN(w.DF) {
		t.Errorf("constants: %+v", w)
	}
	if w := Welch(c, []float64{1}, 0.95); !math.IsInf(w.Diff.Half, 1) || !math.IsNaN(w.P) {
		t.Errorf("one value: %+v", w)
	}
	p = PairedT(x[:1], x[:1], 0.95)
	if p.Identical || !math.IsNaN(p.P) || !math.IsNaN(p.Correlation) || Verdict(p.Diff, true) != NoEvidence {
		t.Errorf("one pair: %+v", p)
	}
}

func TestVerdict(t *testing.T) {
	for _, c := range []struct {
		diff         Interval
		lower, other Outcome // when lower is better, when higher is
	}{
		{Interval{-2, 1, 5}, Better, Worse},
		{Interval{2, 1, 5}, Worse, Better},
		{Interval{1, 2, 5}, NoEvidence, NoEvidence},
		{Interval{1, 1, 5}, NoEvidence, NoEvidence}, // zero is in the interval
		{Interval{-1, 1, 5}, NoEvidence, NoEvidence},
		{Interval{0, 0, 5}, Identical, Identical},
		{Interval{3, 0, 5}, Worse, Better},
		{Interval{0, 0, 1}, NoEvidence, NoEvidence},
		{Interval{math.NaN(), math.NaN(), 5}, NoEvidence, NoEvidence},
	} {
		if a, b := Verdict(c.diff, true), Verdict(c.diff, false); a != c.lower || b != c.other {
			t.Errorf("%+v: %q and %q, want %q and %q", c.diff, a, b, c.lower, c.other)
		}
	}
}

// A nominal 95 % interval of normal values must cover the mean as often as the
// binomial distribution allows, paired and not; sharing noise must narrow it.
func TestIntervalsCover(t *testing.T) {
	const runs = 2000
	r := rand.New(rand.NewPCG(7, 8))
	var mean, paired, welch int
	var narrower int
	for range runs {
		x, y := make([]float64, 8), make([]float64, 8)
		for i := range x {
			shared := r.NormFloat64()
			x[i] = 10 + shared + 0.3*r.NormFloat64()
			y[i] = 9 + shared + 0.3*r.NormFloat64()
		}
		covers := func(i Interval, v float64) int {
			if i.Low() <= v && v <= i.High() {
				return 1
			}
			return 0
		}
		p, w := PairedT(x, y, 0.95), Welch(x, y, 0.95)
		mean += covers(MeanInterval(x, 0.95), 10)
		paired += covers(p.Diff, 1)
		welch += covers(w.Diff, 1)
		if p.Diff.Half < w.Diff.Half {
			narrower++
		}
	}
	low, high := CoverageRange(runs, 0.95, 0.99)
	for name, n := range map[string]int{"mean": mean, "paired": paired} {
		if n < low || n > high {
			t.Errorf("%s: %d of %d cover, want %d to %d", name, n, runs, low, high)
		}
	}
	// Welch takes the pairs as independent, and so must cover too often.
	if welch <= high || narrower < runs*95/100 {
		t.Errorf("Welch covers %d of %d, pairs are narrower in %d", welch, runs, narrower)
	}
}
