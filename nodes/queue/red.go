package queue

import (
	"ferrule/des"
)

// RED is random early detection: it estimates the average queue and refuses
// arrivals with a probability that grows with it, so that refusals are spread
// evenly. Queues may be measured in packets or bytes, as long as Min, Max and
// what is handed in agree.
//
// Source: S. Floyd, V. Jacobson, "Random early detection gateways for
// congestion avoidance", IEEE/ACM Transactions on Networking 1(4), 1993.
type RED struct {
	Min, Max float64  // thresholds on the average
	MaxP     float64  // probability as the average comes to Max
	Weight   float64  // of a sample in the average
	Slot     des.Time // for each so long that the queue is empty, the average ages by a sample of 0

	avg   float64
	count int      // arrivals since the last refusal, -1 below Min
	empty des.Time // since when the queue is empty; meaningful if idle
	idle  bool
}

// Values that the author of RED advises: "Max three times Min, MaxP 0.1", and
// the weight of the paper.
const (
	redWeight = 0.002
	redMaxP   = 0.1
	redRatio  = 3
)

// Average is the estimated queue.
func (r *RED) Average() float64 { return r.avg }

// Observe brings the average up to an arrival at now that finds a queue of q,
// itself not counted.
func (r *RED) Observe(now des.Time, q float64) {
	if r.idle {
		r.idle = false
		r.avg = float64(r.avg * power(1-r.Weight, uint64((now-r.empty)/r.Slot)))
		return
	}
	r.avg += float64(r.Weight * (q - r.avg))
}

// Emptied notes that the queue has become empty at now.
func (r *RED) Emptied(now des.Time) { r.idle, r.empty = true, now }

// Probability is that with which the next arrival is refused: pb = MaxP (avg -
// Min)/(Max - Min), and pb/(1 - count pb) when count arrivals have passed since
// the last refusal. It is 0 below Min and 1 from Max on.
func (r *RED) Probability() float64 {
	switch {
	case r.avg < r.Min:
		return 0
	case r.avg >= r.Max:
		return 1
	}
	pb := float64(r.MaxP*(r.avg-r.Min)) / (r.Max - r.Min)
	left := 1 - float64(float64(max(r.count, 0))*pb)
	if left <= pb {
		return 1
	}
	return pb / left
}

// Refuse decides about the arrival just observed with a draw u from [0, 1).
// hard says that the average has reached Max.
func (r *RED) Refuse(u float64) (refused, hard bool) {
	p := r.Probability()
	switch {
	case p == 0:
		r.count = -1
		return false, false
	case r.avg >= r.Max:
		r.count = 0
		return true, true
	}
	if r.count < 0 {
		r.count = 0
	}
	if u < p {
		r.count = 0
		return true, false
	}
	r.count++
	return false, false
}

// power is x to the n, by squaring, so that no platform fuses anything.
func power(x float64, n uint64) float64 {
	y := 1.0
	for ; n > 0; n >>= 1 {
		if n&1 != 0 {
			y = float64(y * x)
		}
		x = float64(x * x)
	}
	return y
}
