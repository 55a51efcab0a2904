package theory

import "math"

// An MG1 is a queue with Poisson arrivals at rate Lambda and one server whose
// service time has the moments S1 = E[S], S2 = E[S^2], S3 = E[S^3]. The rate
// and S1 must be positive and finite; S2 and S3 may be infinite.
type MG1 struct{ Lambda, S1, S2, S3 float64 }

// Load returns rho = Lambda S1.
func (q MG1) Load() float64 {
	need(positive(q.Lambda, q.S1), "an M/G/1 queue needs a positive rate and service time")
	return q.Lambda * q.S1
}

// MeanWait returns Lambda S2/(2(1-rho)), the formula of Pollaczek and
// Khinchine.
//
// Source: Kleinrock, Queueing Systems vol. 1 (1975), sec. 5.6.
func (q MG1) MeanWait() float64 {
	rho := q.Load()
	if rho >= 1 {
		return math.Inf(1)
	}
	return q.Lambda * q.S2 / (2 * (1 - rho))
}

// MeanSojourn returns the mean wait and service together.
func (q MG1) MeanSojourn() float64 { return q.MeanWait() + q.S1 }

// WaitSecondMoment returns 2 E[W]^2 + Lambda S3/(3(1-rho)).
//
// Source: L. Takacs, Introduction to the Theory of Queues (1962); Kleinrock
// (1975), sec. 5.7.
func (q MG1) WaitSecondMoment() float64 {
	w := q.MeanWait()
	if math.IsInf(w, 1) {
		return w
	}
	return 2*float64(w*w) + q.Lambda*q.S3/(3*(1-q.Load()))
}

// WaitVariance returns E[W]^2 + Lambda S3/(3(1-rho)).
func (q MG1) WaitVariance() float64 {
	w := q.MeanWait()
	if math.IsInf(w, 1) {
		return w
	}
	return float64(w*w) + q.Lambda*q.S3/(3*(1-q.Load()))
}

// SojournVariance returns the variance of wait and service together, which are
// independent.
func (q MG1) SojournVariance() float64 {
	return q.WaitVariance() + (q.S2 - float64(q.S1*q.S1))
}

// MeanIdle returns the mean idle period, 1/Lambda.
func (q MG1) MeanIdle() float64 {
	q.Load()
	return 1 / q.Lambda
}

// MeanBusy returns the mean busy period, S1/(1-rho).
func (q MG1) MeanBusy() float64 {
	if q.Load() >= 1 {
		return math.Inf(1)
	}
	return q.S1 / (1 - q.Load())
}

// MeanWaitVacations returns the mean wait if the server, whenever it finds
// nobody, takes a vacation with the moments v1 and v2, again and again:
// E[W] + v2/(2 v1). A high class over a low one that always has a packet waits
// so, a vacation being one low packet. It panics unless v1 > 0 and v2 >= 0.
//
// Source: D. Bertsekas, R. Gallager, Data Networks 2e (1992), sec. 3.5.
func (q MG1) MeanWaitVacations(v1, v2 float64) float64 {
	need(positive(v1) && v2 >= 0, "a vacation needs a positive mean")
	return q.MeanWait() + v2/(2*v1)
}

// ConstantMoments returns the first three moments of the constant d.
func ConstantMoments(d float64) (m1, m2, m3 float64) { return d, d * d, d * d * d }

// ExponentialMoments returns the first three moments of the exponential law:
// m, 2m^2, 6m^3.
func ExponentialMoments(mean float64) (m1, m2, m3 float64) {
	return mean, 2 * mean * mean, 6 * mean * mean * mean
}

// MixMoments returns the first three moments of the law that takes values[i]
// with probability weights[i]/sum(weights). It panics unless there are as many
// weights as values and their sum is positive.
func MixMoments(values, weights []float64) (m1, m2, m3 float64) {
	need(len(values) == len(weights), "a mix needs as many weights as values")
	total := 0.0
	for i, v := range values {
		total += weights[i]
		m1 += float64(weights[i] * v)
		m2 += float64(weights[i] * v * v)
		m3 += float64(weights[i] * v * v * v)
	}
	need(total > 0, "weights of a mix must not all be zero")
	return m1 / total, m2 / total, m3 / total
}

// RoundedExponential returns the first three moments of max(1, round(X)), X
// exponential with the given mean: a size in whole bytes. The mean must be
// positive and finite. With q = exp(-1/mean), P(size > n) = q^(n+1/2) for
// n >= 1, and the moments are the sums over n >= 0 of 1, 2n+1 and 3n^2+3n+1
// times P(size > n).
//
// Source: computed from the definition.
func RoundedExponential(mean float64) (m1, m2, m3 float64) {
	need(positive(mean), "the mean of a size must be positive")
	q, r := math.Exp(-1/mean), -math.Expm1(-1/mean) // r = 1-q
	half := math.Exp(-0.5 / mean)
	s0 := half * q / r                   // sum over n >= 1 of q^(n+1/2)
	s1 := s0 / r                         // of n q^(n+1/2)
	s2 := half * q * (1 + q) / r / r / r // of n^2 q^(n+1/2)
	return 1 + s0, 1 + 2*s1 + s0, 1 + float64(3*s2) + float64(3*s1) + s0
}

// Scaled returns the moments of c times a quantity: a service time from a
// size, with c the time for one unit.
func Scaled(c, m1, m2, m3 float64) (float64, float64, float64) {
	return c * m1, c * c * m2, c * c * c * m3
}
