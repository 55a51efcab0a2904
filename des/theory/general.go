package theory

import "math"

// KingmanBound returns an upper bound of the mean wait in GI/G/1, a queue with
// independent gaps and services of any law: lambda (var gap + var service) /
// (2(1-rho)). It returns +Inf from load 1 on, and panics on a rate or a mean
// that is not positive or a variance that is negative.
//
// Source: J. Kingman, "Some inequalities for the queue GI/G/1", Biometrika 49
// (1962).
func KingmanBound(lambda, varGap, meanService, varService float64) float64 {
	need(positive(lambda, meanService) && varGap >= 0 && varService >= 0, "a bound needs positive means and variances at or above 0")
	rho := lambda * meanService
	if rho >= 1 {
		return math.Inf(1)
	}
	return lambda * (varGap + varService) / (2 * (1 - rho))
}

// TwoMomentWait returns an approximation of the mean wait in GI/G/1 from the
// squared coefficients of variation of gaps and services: rho/(1-rho) times
// their mean times the mean service. It is exact for M/G/1 and no bound else.
// It returns +Inf from load 1 on, and panics as [KingmanBound] does.
//
// Source: the heavy-traffic form of Kingman (1962), as in T. Hossfeld,
// P. Tran-Gia, Performance Modeling and Analysis of Communication Networks
// (2021), sec. 5.6.
func TwoMomentWait(lambda, scvGap, meanService, scvService float64) float64 {
	need(positive(lambda, meanService) && scvGap >= 0 && scvService >= 0, "an approximation needs positive means and variations at or above 0")
	rho := lambda * meanService
	if rho >= 1 {
		return math.Inf(1)
	}
	return rho / (1 - rho) * (scvGap + scvService) / 2 * meanService
}

// DepartureSCV returns the squared coefficient of variation of the gaps between
// departures, (1-rho^2) scvGap + rho^2 scvService: exact for M/G/1, an
// approximation else. It panics unless 0 <= rho <= 1.
//
// Source: K. Marshall, Oper. Res. 16 (1968).
func DepartureSCV(rho, scvGap, scvService float64) float64 {
	need(rho >= 0 && rho <= 1, "a load must lie in [0, 1]")
	return float64((1-float64(rho*rho))*scvGap) + float64(rho*rho*scvService)
}

// A GIM1 is a solved queue with independent gaps of any law and exponential
// service at rate Mu. Sigma is the chance that an arrival has to wait.
//
// Source: Kleinrock, Queueing Systems vol. 1 (1975), ch. 6.
type GIM1 struct{ Mu, Sigma float64 }

// SolveGIM1 solves the queue whose gaps have the mean 1/lambda and the Laplace
// transform a: sigma is the root below 1 of sigma = a(mu(1-sigma)). From load 1
// on sigma is 1. It panics unless the rates are positive.
func SolveGIM1(lambda, mu float64, a func(s float64) float64) GIM1 {
	need(positive(lambda, mu), "rates of a GI/M/1 queue must be positive")
	if lambda >= mu {
		return GIM1{mu, 1}
	}
	// a(mu(1-x)) - x is convex, positive at 0 and zero at 1: it is positive
	// before the root and negative between the root and 1.
	lo, hi := 0.0, 1.0
	for range 200 {
		mid := lo + (hi-lo)/2
		if mid == lo || mid == hi {
			break
		}
		if a(mu*(1-mid)) > mid {
			lo = mid
		} else {
			hi = mid
		}
	}
	return GIM1{mu, lo}
}

// DM1 solves the queue with constant gaps: a(s) = exp(-s/lambda).
func DM1(lambda, mu float64) GIM1 {
	return SolveGIM1(lambda, mu, func(s float64) float64 { return math.Exp(-s / lambda) })
}

// ErlangM1 solves the queue whose gaps are sums of k equal exponential stages:
// a(s) = (k lambda/(k lambda + s))^k. It panics unless k >= 1.
func ErlangM1(k int, lambda, mu float64) GIM1 {
	need(k >= 1, "an Erlang gap needs a stage")
	n := float64(k)
	return SolveGIM1(lambda, mu, func(s float64) float64 { return math.Pow(n*lambda/(float64(n*lambda)+s), n) })
}

// MeanWait returns sigma/(mu(1-sigma)).
func (q GIM1) MeanWait() float64 { return q.Sigma / (q.Mu * (1 - q.Sigma)) }

// MeanSojourn returns 1/(mu(1-sigma)).
func (q GIM1) MeanSojourn() float64 { return 1 / (q.Mu * (1 - q.Sigma)) }

// SojournQuantile returns -ln(1-p)/(mu(1-sigma)). It panics unless 0 <= p < 1.
func (q GIM1) SojournQuantile(p float64) float64 {
	need(probability(p), "quantile of a number outside [0, 1)")
	if q.Sigma >= 1 {
		return math.Inf(1)
	}
	return -math.Log1p(-p) * q.MeanSojourn()
}
