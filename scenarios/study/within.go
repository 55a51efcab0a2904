package study

import (
	"fmt"
	"math"

	"ferrule/des/measure"
	"ferrule/scenarios/result"
)

// Batches of one period of one run: as many, of so many bins at least.
const (
	batches     = 20
	leastOfEach = 5
)

// withinOf gives the mean delay of each class in each period with an interval
// from the run itself. Bins of time that lie wholly within the period are cut
// into 20 batches; a batch never reaches over an act, for the period ends
// there. There is no interval when a batch would have fewer than five bins or
// one without a packet, or when the batches are correlated: their lag-1
// autocorrelation is then beyond what independent ones show in 95 of 100
// cases, 2/√20 (M. S. Bartlett, 1946), and the interval would be too narrow.
func withinOf(r *result.Run) []result.Within {
	var out []result.Within
	for i := range r.Series {
		s := &r.Series[i]
		if s.Close {
			continue
		}
		for k := range r.Periods {
			if w, ok := withinPeriod(s, &r.Periods[k]); ok {
				out = append(out, w)
			}
		}
	}
	return out
}

// withinPeriod is that of one class in one period; ok is false when nothing
// was delivered.
func withinPeriod(s *result.Series, p *result.Period) (w result.Within, ok bool) {
	w = result.Within{Class: s.Class, Period: p.Name, Batches: batches}
	var bins []int
	for i := range s.DeliveredPackets {
		from := s.FromS + float64(float64(i)*s.WidthS)
		if from >= p.FromS-1e-9 && from+s.WidthS <= p.ToS+1e-9 {
			bins = append(bins, i)
			ok = ok || s.DeliveredPackets[i] > 0
		}
	}
	size := len(bins) / batches
	if !ok || size < leastOfEach {
		w.Batches, w.Refused = 0, fmt.Sprintf("the period is shorter than %d batches of %d bins", batches, leastOfEach)
		return w, ok
	}
	var means []float64
	for b := range batches {
		sum, n := 0.0, int64(0)
		for _, i := range bins[b*size : (b+1)*size] {
			if d := s.MeanDelayS[i]; d != nil {
				sum += float64(*d * float64(s.DeliveredPackets[i]))
				n += s.DeliveredPackets[i]
			}
		}
		if n == 0 {
			w.Refused = "a batch has no packet"
			return w, true
		}
		means = append(means, sum/float64(n))
	}
	i := measure.BatchMeans(means, batches, confidence)
	w.MeanS = &i.Mean
	if !math.IsNaN(i.Lag1) {
		w.Lag1 = &i.Lag1
	}
	if i.Lag1 > 2/math.Sqrt(batches) {
		w.Refused = "batches are correlated: the period is too short for an interval"
		return w, true
	}
	w.Interval = intervalOf(i.Interval)
	return w, true
}
