package quality

import (
	"fmt"
	"math"

	"ferrule/des"
	"ferrule/des/measure"
)

// MOS returns the mean opinion score, 1 (bad) to 4.5, that belongs to rating r.
// It is the cubic of the Recommendation as it stands: between R = 0 and 6.5 it
// dips below 1, to 0.989 at the least.
//
// Source: ITU-T G.107 (06/2015), equation B-4.
func MOS(r float64) float64 {
	switch {
	case r <= 0:
		return 1
	case r >= 100:
		return 4.5
	default:
		return 1 + float64(0.035*r) + float64(r*(r-60)*(100-r)*7e-6)
	}
}

// RatingOf returns the rating at or above 6.5 whose [MOS] is mos. It panics
// unless mos lies in [1, 4.5].
//
// Source: ITU-T G.107 (06/2015), Appendix I.
func RatingOf(mos float64) float64 {
	if !(mos >= 1 && mos <= 4.5) {
		panic(fmt.Sprintf("quality: rating of the mean opinion score %v", mos))
	}
	y := 15 * math.Sqrt(max(0, -903522+float64(1113960*mos)-float64(202500*mos*mos)))
	h := math.Atan2(y, 18566-float64(6750*mos)) / 3
	return 20.0 / 3 * (8 - float64(math.Sqrt(226)*math.Cos(h+math.Pi/3)))
}

// GoodOrBetter returns the share of users, in [0, 1], who find a call of rating
// r good or better.
//
// Source: ITU-T G.107 (06/2015), equations B-1 and B-2.
func GoodOrBetter(r float64) float64 { return normal((r - 60) / 16) }

// PoorOrWorse returns the share of users, in [0, 1], who find a call of rating r
// poor or worse.
//
// Source: ITU-T G.107 (06/2015), equation B-3.
func PoorOrWorse(r float64) float64 { return normal((45 - r) / 16) }

// normal is the distribution function of the standard normal law.
func normal(x float64) float64 { return math.Erfc(-x/math.Sqrt2) / 2 }

// BurstRatio returns how much longer losses last, in packets, than they would
// at random: the mean length of a loss period times 1 - lost/sent, since random
// losses of share p last 1/(1-p) in the mean. ok is false when no loss belongs
// to a period or everything is lost. It panics if more is lost than sent.
//
// Source: ITU-T G.107 (06/2015), 3.7 and equation 7-30.
func BurstRatio(sent uint64, r *measure.LossReport) (ratio float64, ok bool) {
	if r.Lost > sent {
		panic(fmt.Sprintf("quality: %d lost of %d", r.Lost, sent))
	}
	length, ok := r.MeanLength()
	if !ok || r.Lost == sent {
		return 0, false
	}
	return length * (1 - float64(r.Lost)/float64(sent)), true
}

// A Curve is one of the curves of equipment impairment of the simplified form.
type Curve uint8

// The curves.
const (
	CurveG711  Curve = iota // G.711 with loss concealment
	CurveG729A              // G.729A
)

// Bases of the simplified form.
const (
	BaseOriginal = 94.2 // of the paper: the default rating of its time
	BaseToday    = 93.2 // the default rating of G.107 (06/2015)
)

// SimplifiedRating returns the rating of the simplified form,
//
//	R = base - Id - Ie,  Id = 0.024 d + 0.11 (d - 177.3) H(d - 177.3),
//
// for a one-way delay of d ms, where H is the unit step, and a fraction of loss
// that counts late packets. It is a fit to the E-model with echo; beyond 350 ms
// it falls off too fast and below 0. It panics if the delay is negative or the
// loss outside [0, 1].
//
// Source: R. Cole, J. Rosenbluth, "Voice over IP performance monitoring", ACM
// SIGCOMM CCR 31(2), 2001; formulas from memory.
func SimplifiedRating(base float64, c Curve, delay des.Time, loss float64) float64 {
	return base - simplifiedDelay(delay) - simplifiedLoss(c, loss)
}

// simplifiedDelay returns Id.
func simplifiedDelay(delay des.Time) float64 {
	if delay < 0 {
		panic(fmt.Sprintf("quality: delay %v", delay))
	}
	d := float64(delay) / float64(des.Millisecond)
	return float64(0.024*d) + float64(0.11*max(0, d-177.3))
}

// simplifiedLoss returns Ie.
func simplifiedLoss(c Curve, loss float64) float64 {
	if !(loss >= 0 && loss <= 1) {
		panic(fmt.Sprintf("quality: loss %v", loss))
	}
	switch c {
	case CurveG711:
		return float64(30 * math.Log1p(15*loss))
	case CurveG729A:
		return 11 + float64(40*math.Log1p(10*loss))
	default:
		panic(fmt.Sprintf("quality: curve %d", c))
	}
}
