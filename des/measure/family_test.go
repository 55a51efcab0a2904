package measure

import (
	"math"
	"testing"
)

// Worked by hand from the definition: 0.01*4, max(0.04, 0.013*3), ...
func TestHolm(t *testing.T) {
	got := Holm([]float64{0.04, 0.01, math.NaN(), 0.013, 0.03})
	want := []float64{0.06, 0.04, math.NaN(), 0.04, 0.06}
	for i := range want {
		if math.IsNaN(want[i]) != math.IsNaN(got[i]) || math.Abs(got[i]-want[i]) > 1e-15 {
			t.Errorf("value %d: %v, want %v", i, got[i], want[i])
		}
	}
	if got := Holm([]float64{0.6, 0.7})[1]; got != 1 {
		t.Errorf("adjusted to %v, want 1", got)
	}
}

// 2^(1-n): 1/2, 1/32, 1/512.
func TestLeastP(t *testing.T) {
	for _, c := range []struct {
		n    int
		want float64
	}{{0, 1}, {1, 1}, {2, 0.5}, {6, 1.0 / 32}, {10, 1.0 / 512}} {
		if got := LeastP(c.n); got != c.want {
			t.Errorf("LeastP(%d) = %v, want %v", c.n, got, c.want)
		}
	}
	for _, c := range []struct {
		p    float64
		want int
	}{{0.5, 2}, {0.05, 6}, {0.05 / 14, 10}, {0.05 / 26, 11}} {
		if got := PairsFor(c.p); got != c.want {
			t.Errorf("PairsFor(%v) = %d, want %d", c.p, got, c.want)
		}
	}
}

// The claim of two one-sided tests at 5 % is that the 90 % interval lies within
// the margin: A. M. Law's ten values of ch. 4 (from memory) have a 90 %
// half-width of 0.2372534, so around their mean the margin at which p is 5 % is
// that half-width.
func TestSameWithin(t *testing.T) {
	x := []float64{1.20, 1.50, 1.68, 1.89, 0.95, 1.49, 1.58, 1.55, 0.50, 1.09}
	d := make([]float64, len(x))
	for i := range x {
		d[i] = x[i] - 1.343 + 0.1
	}
	if p := SameWithin(d, 0.1+0.2372534); math.Abs(p-0.05) > 1e-6 {
		t.Errorf("p = %v, want 0.05", p)
	}
	for _, c := range []struct {
		d    []float64
		m, p float64
	}{{[]float64{0, 0}, 1, 0}, {[]float64{2, 2}, 1, 1}} {
		if p := SameWithin(c.d, c.m); p != c.p {
			t.Errorf("%v within %v: %v, want %v", c.d, c.m, p, c.p)
		}
	}
	if !math.IsNaN(SameWithin([]float64{1}, 1)) || !math.IsNaN(Above([]float64{1}, 1)) {
		t.Error("one value has a p value")
	}
	// The same interval: the mean lies above its lower end at 5 %.
	if p := Above(x, 1.343-0.2372534); math.Abs(p-0.05) > 1e-6 {
		t.Errorf("above the lower end: p = %v, want 0.05", p)
	}
	if p := Above(x, 1.343+0.2372534); math.Abs(p-0.95) > 1e-6 {
		t.Errorf("above the upper end: p = %v, want 0.95", p)
	}
	if Above([]float64{2, 2}, 1) != 0 || Above([]float64{2, 2}, 2) != 1 {
		t.Error("values that are all equal")
	}
}

// J. Cohen (1988), table 2.4.1, values from memory: a one-sample effect of 0.5
// standard deviations at two-sided 5 % and power 0.8 takes 33 or 34 values.
func TestPairsToShow(t *testing.T) {
	d := []float64{-1, 1, -1, 1, -1, 1, -1, 1, -1, 1} // s = sqrt(10/9)
	n, ok := PairsToShow(d, 0.5*math.Sqrt(10.0/9), 0.025)
	if !ok || n < 33 || n > 35 {
		t.Errorf("%d values, %v; want 33 to 35", n, ok)
	}
	if n, ok = PairsToShow([]float64{3, 3, 3}, 3, 0.025); n != 4 || !ok {
		t.Errorf("no variance: %d, %v, want one more", n, ok)
	}
	if _, ok = PairsToShow(d, 0, 0.025); ok {
		t.Error("nothing to show")
	}
}
