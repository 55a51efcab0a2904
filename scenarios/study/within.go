package study

import (
	"fmt"
	"math"

	"ferrule/des/measure"
	"ferrule/scenarios/result"
)

// A period of one run is cut into so many batches, each of as many parts, of a
// bin at least; above this autocorrelation of parts, batches count as
// correlated.
const (
	batches = 10
	parts   = 8
	mostLag = 0.2
)

// withinOf gives the mean delay of each class in each period with an interval
// from the run itself. Bins of time that lie wholly within the period are cut
// into 80 parts, which make 10 batches; a batch never reaches over an act, for
// the period ends there. There is no interval when there are fewer bins than
// parts, when a batch has no packet, or when the parts have a lag-1
// autocorrelation above 0.2: eight of them are then too few for batches that
// know nothing of each other.
//
// Source: after the rule of A. M. Law and J. S. Carson, "A sequential procedure
// for determining the length of a steady-state simulation", Oper. Res. 27, 1979,
// which joins ten batches to one below 0.4; the lower limit is a finding of the study
// of coverage, as runs that pass by chance are those whose mean is too small.
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
	size := len(bins) / (batches * parts)
	if !ok || size == 0 {
		w.Batches, w.Refused = 0, fmt.Sprintf("the period is shorter than %d bins", batches*parts)
		return w, ok
	}
	means, small := meansOf(s, bins, size*parts, batches), meansOf(s, bins, size, batches*parts)
	if means == nil || small == nil {
		w.Refused = "a batch has no packet"
		return w, true
	}
	i := measure.MeanInterval(means, confidence)
	w.MeanS = &i.Mean
	lag := measure.Lag1(small)
	if !math.IsNaN(lag) {
		w.Lag1 = &lag
	}
	if lag > mostLag {
		w.Refused = "batches are correlated: the period is too short for an interval"
		return w, true
	}
	// What correlation is left widens the interval, as that of a first-order
	// autoregression would.
	if lag > 0 {
		i.Half = float64(i.Half * math.Sqrt((1+lag)/(1-lag)))
	}
	w.Interval = intervalOf(i)
	return w, true
}

// meansOf is the mean delay of n stretches of so many bins each; nil when one
// has no packet.
func meansOf(s *result.Series, bins []int, size, n int) []float64 {
	means := make([]float64, n)
	for b := range means {
		sum, packets := 0.0, int64(0)
		for _, i := range bins[b*size : (b+1)*size] {
			if d := s.MeanDelayS[i]; d != nil {
				sum += float64(*d * float64(s.DeliveredPackets[i]))
				packets += s.DeliveredPackets[i]
			}
		}
		if packets == 0 {
			return nil
		}
		means[b] = sum / float64(packets)
	}
	return means
}
