package study

import (
	"math"
	"sort"

	"ferrule/des/measure"
	"ferrule/scenarios/result"
)

// A percentile of few effective values is a figure of another kind: packets
// wait for the same crowd, so a thousand of them may hold the news of ten. The
// percentile of one run is then too small on average, and so is the mean over
// seeds, whatever its interval says. leastPerRun is how many independent
// exceedances a run must have for a mean of percentiles to be given an
// interval, and leastInAll how many all runs together for a percentile pooled
// over them. Computed from the study of coverage.
const (
	leastPerRun = 30
	leastInAll  = 40
)

// shareOfPercentile is the share of values above a percentile of the delay.
var shareOfPercentile = map[string]float64{
	result.FigDelayP50: 0.5, result.FigDelayP95: 0.05, result.FigDelayP99: 0.01, result.FigDelayP999: 0.001,
}

// A pool is the percentile of all packets of all runs of one class in one
// period.
type pool struct {
	value     float64
	low, high float64 // of its interval
	perRun    float64 // effective exceedances in a run; +Inf when they do not vary
	runs      int
}

// poolOf pools the percentile that s is; ok is false when s is none, when a
// run lacks its distribution, or when there are fewer than two.
//
// The interval holds every x at which the numbers of packets above x, less the
// share of the percentile of all packets, have a mean over the runs that a t
// test at the given level does not tell from zero. Those numbers are sums over
// a whole run, so that no independence of packets is asked for, and a mean, so
// that no run must be long enough to have a percentile of its own.
//
// Source: the inversion of a test, E. C. Fieller, J. Roy. Statist. Soc. B 16,
// 1954, for a ratio; P. W. Glynn, "Importance sampling for Monte Carlo
// estimation of quantiles", 1996, for a quantile from its distribution.
func poolOf(s *series, level float64) (p pool, ok bool) {
	q, is := shareOfPercentile[s.figure]
	if !is {
		return p, false
	}
	var tails []*result.Tail
	var packets []float64
	for _, r := range s.readings {
		if r == nil || r.packets == 0 {
			continue
		}
		if r.tail == nil {
			return p, false
		}
		tails, packets = append(tails, r.tail), append(packets, r.packets)
	}
	if len(tails) < 2 {
		return p, false
	}
	excess := make([]float64, len(tails))
	above := func(x float64) measure.Interval {
		for i, t := range tails {
			excess[i] = packets[i] * (shareAbove(t, x) - q)
		}
		return measure.MeanInterval(excess, level)
	}
	least, most := math.Inf(1), math.Inf(-1)
	for _, t := range tails {
		least, most = min(least, t.DelayS[0]), max(most, t.DelayS[len(t.DelayS)-1])
	}
	p.runs = len(tails)
	p.value = crossing(least, most, func(x float64) bool { return above(x).Mean <= 0 })
	p.low = crossing(least, p.value, func(x float64) bool { return above(x).Low() <= 0 })
	p.high = crossing(p.value, most, func(x float64) bool { return above(x).High() < 0 })
	var m, v float64
	for i, t := range tails {
		excess[i] = packets[i] * shareAbove(t, p.value)
		m += excess[i] / float64(len(tails))
	}
	for _, e := range excess {
		v += float64((e-m)*(e-m)) / float64(len(tails)-1)
	}
	p.perRun = float64(m*m) / v
	return p, true
}

// crossing is where f turns from false to true between low and high, to a part
// in 10^12 of their distance.
func crossing(low, high float64, f func(x float64) bool) float64 {
	for range 40 {
		if mid := low + (high-low)/2; f(mid) {
			high = mid
		} else {
			low = mid
		}
	}
	return high
}

// shareAbove is the share of values of at least x, with straight lines between
// the points of t in the logarithm of the share.
func shareAbove(t *result.Tail, x float64) float64 {
	n := len(t.DelayS)
	i := sort.Search(n, func(i int) bool { return t.DelayS[i] >= x })
	switch {
	case i == n:
		return 0
	case i == 0 || t.DelayS[i] == x:
		return t.AtLeast[i]
	}
	part := (x - t.DelayS[i-1]) / (t.DelayS[i] - t.DelayS[i-1])
	a, b := math.Log(t.AtLeast[i-1]), math.Log(t.AtLeast[i])
	return math.Exp(a + float64(part*(b-a)))
}

// percentile makes m honest when it is a percentile of the delay: the interval
// of the mean over seeds stands only with enough effective values per run, and
// the percentile pooled over all seeds stands beside it with one of its own.
func (s *series) percentile(m *result.Mean, level float64) {
	p, ok := poolOf(s, level)
	if !ok {
		return
	}
	in := p.perRun * float64(p.runs)
	if !math.IsInf(p.perRun, 0) && !math.IsNaN(p.perRun) {
		m.Effective = new(math.Floor(p.perRun))
	}
	if p.perRun < leastPerRun {
		m.Interval = nil
	}
	if in >= leastInAll {
		low, high := p.low, p.high
		m.Pooled, m.PooledInterval = &p.value, &result.Interval{Low: &low, High: &high}
	}
}
