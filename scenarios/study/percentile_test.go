package study

import (
	"math"
	"slices"
	"testing"

	"ferrule/des/random"
	"ferrule/scenarios/result"
)

// exponentialTail is the distribution of n delays of mean 1 drawn by seed, with
// a point for every one of them.
func exponentialTail(seed uint64, n int) result.Tail {
	s := random.NewStream(seed, "tail")
	x := make([]float64, n)
	for i := range x {
		x[i] = s.Exp()
	}
	slices.Sort(x)
	t := result.Tail{DelayS: x}
	for i := range x {
		t.AtLeast = append(t.AtLeast, float64(n-i)/float64(n))
	}
	return t
}

func tailSeries(tails []result.Tail, n float64) *series {
	s := &series{key: key{figure: result.FigDelayP99}}
	for i := range tails {
		s.readings = append(s.readings, &reading{tail: &tails[i], packets: n, value: new(1.0)})
	}
	return s
}

// Delays that are independent and exponential have a 99th percentile of
// ln 100; of 12 runs of 2000 each has 20 independent delays beyond it, and the
// pooled percentile an interval of t(11) sqrt(0.99/0.01/24000) = 0.141.
func TestPooledPercentile(t *testing.T) {
	var tails []result.Tail
	for seed := range uint64(12) {
		tails = append(tails, exponentialTail(seed, 2000))
	}
	p, ok := poolOf(tailSeries(tails, 2000), 0.95)
	want := math.Log(100)
	if !ok || !(p.low < want && want < p.high) || math.Abs(p.value-want) > 0.2 {
		t.Errorf("%+v, want it to hold %v", p, want)
	}
	if half := (p.high - p.low) / 2; half < 0.07 || half > 0.28 {
		t.Errorf("half-width %v, want about 0.141", half)
	}
	if p.perRun < 7 || p.perRun > 80 {
		t.Errorf("%v effective delays beyond it per run, want about 20", p.perRun)
	}
	m := result.Mean{Interval: &result.Interval{}}
	tailSeries(tails, 2000).percentile(&m, 0.95)
	if m.Pooled == nil || m.PooledInterval == nil || m.Effective == nil || (*m.Effective < leastPerRun) != (m.Interval == nil) {
		t.Errorf("%+v", m)
	}
	// Three runs of few effective values: nothing is printed.
	few := []result.Tail{exponentialTail(1, 200), exponentialTail(2, 200), exponentialTail(30, 200)}
	m = result.Mean{Interval: &result.Interval{}}
	tailSeries(few, 200).percentile(&m, 0.95)
	if m.Interval != nil || m.Pooled != nil {
		t.Errorf("few: %+v", m)
	}
	if _, ok := poolOf(tailSeries(tails[:1], 2000), 0.95); ok {
		t.Error("one run has an interval")
	}
}

func TestShareAbove(t *testing.T) {
	tail := &result.Tail{DelayS: []float64{1, 2, 4}, AtLeast: []float64{1, 0.1, 0.001}}
	for _, c := range []struct{ x, want float64 }{{0.5, 1}, {1, 1}, {2, 0.1}, {3, 0.01}, {4, 0.001}, {5, 0}} {
		if got := shareAbove(tail, c.x); math.Abs(got-c.want) > 1e-12 {
			t.Errorf("at %v: %v, want %v", c.x, got, c.want)
		}
	}
}
