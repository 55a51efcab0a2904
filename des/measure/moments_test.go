package measure

import (
	"math"
	"testing"

	"ferrule/des"
)

func TestMoments(t *testing.T) {
	// Law, Simulation Modeling and Analysis, ch. 4: mean 1.343, variance
	// 0.1675122; here in hundredths.
	var m, first, second Moments
	for i, v := range []int64{120, 150, 168, 189, 95, 149, 158, 155, 50, 109} {
		m.Add(v)
		if i < 4 {
			first.Add(v)
		} else {
			second.Add(v)
		}
	}
	if m.Mean() != 134.3 || math.Abs(m.Variance()-1675.122222) > 1e-6 || m.Min != 50 || m.Max != 189 {
		t.Errorf("mean %v, variance %v, in [%d, %d]", m.Mean(), m.Variance(), m.Min, m.Max)
	}
	forward, backward := first, second
	forward.Merge(second)
	backward.Merge(first)
	backward.Merge(Moments{})
	if forward != m || backward != m {
		t.Errorf("merged %+v and %+v, want %+v", forward, backward, m)
	}
	// ITU-T Y.1541 bounds the mean: 1990 delays of 10 ms and ten more, by hand.
	var y Moments
	for range 1990 {
		y.Add(10_000)
	}
	for _, us := range []int64{11_000, 12_000, 13_000, 14_000, 15_000, 16_000, 17_000, 40_000, 41_000, 60_000} {
		y.Add(us)
	}
	if y.Mean() != 10_069.5 {
		t.Errorf("mean delay %v us, want 10069.5", y.Mean())
	}
	// Values that cancel in floating point: 10^15 + {-1, 0, 1}, by hand.
	var c Moments
	for _, d := range []int64{-1, 0, 1} {
		c.Add(-1e15 + d)
	}
	if c.Mean() != -1e15 || c.Variance() != 1 || c.StdDev() != 1 {
		t.Errorf("mean %v, variance %v; want -1e15, 1", c.Mean(), c.Variance())
	}
	var x Moments
	x.Add(math.MinInt64)
	x.Add(math.MaxInt64)
	if x.Mean() != -0.5 {
		t.Errorf("mean of the extremes %v, want -0.5", x.Mean())
	}
	var none Moments
	if !math.IsNaN(none.Mean()) || !math.IsNaN(none.Variance()) {
		t.Error("moments of nothing are defined")
	}
}

func TestTimeAverage(t *testing.T) {
	var a TimeAverage
	a.Set(0, 2)
	a.Set(10, 0)
	a.Set(15, 6)
	// (2·10 + 0·5 + 6·5) / 20, by hand.
	if got := a.Mean(20); got != 2.5 || a.Peak() != 6 || a.Level() != 6 {
		t.Errorf("mean %v, peak %d, level %d; want 2.5, 6, 6", got, a.Peak(), a.Level())
	}
	a.Restart(20)
	a.Set(24, 1)
	if got := a.Mean(30); got != (6*4+1*6)/10.0 {
		t.Errorf("mean after the restart %v, want 3", got)
	}
	if !math.IsNaN(new(TimeAverage).Mean(0)) {
		t.Error("a mean over no time is defined")
	}
	var big TimeAverage
	big.Set(0, math.MaxInt64)
	if got := big.Area(4 * des.Second); got != (des.Sum{Hi: 1_999_999_999_999, Lo: 1<<64 - 4_000_000_000_000}) {
		t.Errorf("area %v passes 64 bits wrongly", got)
	}
}
