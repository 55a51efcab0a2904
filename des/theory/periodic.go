package theory

import (
	"math"

	"gonum.org/v1/gonum/integrate/quad"
)

// A Periodic is the queue nD/D/1: N sources with a packet each per Period,
// their phases independent and uniform, before a server that takes D for a
// packet. N D must not exceed Period. All figures are averages over phases: a
// single system repeats itself for ever and has figures of its own.
//
// Source: A. Eckberg, IEEE Trans. Commun. 27 (1979); J. Roberts, J. Virtamo,
// "The superposition of periodic cell arrival streams in an ATM multiplexer",
// IEEE Trans. Commun. 39 (1991).
type Periodic struct {
	N         int
	Period, D float64
}

// services returns the period in service times.
func (q Periodic) services() float64 {
	need(q.N >= 1 && positive(q.Period, q.D), "a periodic queue needs a source, a period and a service time")
	p := q.Period / q.D
	need(float64(q.N) <= p*(1+1e-12), "periodic sources must not offer more than the server can take")
	return p
}

// Load returns N D / Period.
func (q Periodic) Load() float64 { return float64(q.N) / q.services() }

// WorkCCDF returns the probability that at a random time more than t of work
// is present: with x = t/D, P = Period/D and n = N, the sum over x < k <= n of
//
//	C(n,k) ((k-x)/P)^k (1-(k-x)/P)^(n-k) (P-n+x)/(P-k+x).
//
// No term is negative. It is 1 for t < 0 and 0 from N D on.
func (q Periodic) WorkCCDF(t float64) float64 {
	return workCCDF(q.N, q.services(), t/q.D)
}

func workCCDF(n int, p, x float64) float64 {
	if x < 0 {
		return 1
	}
	sum := 0.0
	whole := lgamma(n)
	for k := int(min(float64(n), x)) + 1; k <= n; k++ {
		share := (float64(k) - x) / p
		others := 0.0
		if k < n {
			others = float64(n-k) * math.Log1p(-share)
		}
		choose := whole - lgamma(k) - lgamma(n-k)
		term := math.Exp(choose + float64(float64(k)*math.Log(share)) + others)
		left := p - float64(k) + x
		if left <= 0 { // only if n = p and x = 0, where the last factor tends to 1
			sum += term
			continue
		}
		sum += float64(term * max(0, p-float64(n)+x) / left)
	}
	return min(1, sum)
}

// lgamma returns ln n!.
func lgamma(n int) float64 {
	v, _ := math.Lgamma(float64(n) + 1)
	return v
}

// WaitCCDF returns the probability that a packet waits for more than t: the
// work that the N-1 other sources present, as a packet sees their phases
// uniform.
func (q Periodic) WaitCCDF(t float64) float64 {
	return workCCDF(q.N-1, q.services(), t/q.D)
}

// WaitQuantile returns the wait that a share p of packets does not exceed. It
// panics unless 0 <= p < 1.
func (q Periodic) WaitQuantile(p float64) float64 {
	need(probability(p), "quantile of a number outside [0, 1)")
	if q.WaitCCDF(0) <= 1-p {
		return 0
	}
	return falling(q.WaitCCDF, 1-p, 0, q.D)
}

// MeanWait returns the mean wait of a packet, the integral of WaitCCDF.
func (q Periodic) MeanWait() float64 { return q.D * meanWork(q.N-1, q.services()) }

// MeanWork returns the mean work present at a random time, the integral of
// WorkCCDF.
func (q Periodic) MeanWork() float64 { return q.D * meanWork(q.N, q.services()) }

// meanWork integrates the work's distribution. Between whole numbers it is a
// smooth ratio of polynomials, for which 24 Gauss-Legendre points give all
// digits; it stops where the rest is below 1e-16.
func meanWork(n int, p float64) float64 {
	sum := 0.0
	for k := range n {
		lo := float64(k)
		part := quad.Fixed(func(x float64) float64 { return workCCDF(n, p, x) }, lo, lo+1, 24, quad.Legendre{}, 0)
		sum += part
		if part < 1e-16 {
			break
		}
	}
	return sum
}

// BridgeCCDF returns the approximation of WorkCCDF by a Brownian bridge,
// exp(-2x(x/n + (1-rho)/rho)).
//
// Source: COST 242, Broadband Network Teletraffic (1996).
func (q Periodic) BridgeCCDF(t float64) float64 {
	rho, x := q.Load(), max(0, t/q.D)
	return math.Exp(-2 * x * (x/float64(q.N) + (1-rho)/rho))
}
