package theory

import (
	"math"

	"gonum.org/v1/gonum/mathext"
)

// ErlangQuantile returns the p-quantile of the sum of k independent exponential
// times of the same rate: the end-to-end delay through k equal M/M/1 nodes, the
// rate being mu-lambda. Each node must draw its service afresh: packets that
// keep their length have another, smaller delay. It panics unless k >= 1, the
// rate is positive and 0 <= p < 1.
//
// Source: E. Reich, "Waiting times when queues are in tandem", Ann. Math.
// Stat. 28 (1957).
func ErlangQuantile(k int, rate, p float64) float64 {
	need(k >= 1 && positive(rate) && probability(p), "an Erlang quantile needs k >= 1, a positive rate and p in [0, 1)")
	if p == 0 {
		return 0
	}
	return mathext.GammaIncRegCompInv(float64(k), 1-p) / rate
}

// TwoNodeCCDF returns P(delay > t) through two M/M/1 nodes in tandem with
// a = mu1-lambda and b = mu2-lambda: (b exp(-at) - a exp(-bt))/(b-a), and
// (1+at) exp(-at) if they are equal. It panics unless both are positive.
//
// Source: Reich (1957); P. Burke, Oper. Res. 4 (1956).
func TwoNodeCCDF(a, b, t float64) float64 {
	need(positive(a, b), "two nodes in tandem must both be stable")
	if t <= 0 {
		return 1
	}
	if a > b {
		a, b = b, a
	}
	// exp(-at) (1 + a (1-exp(-dt))/d) with d = b-a loses no digits near d = 0.
	between := t
	if d := b - a; d > 0 {
		between = -math.Expm1(-d*t) / d
	}
	return math.Exp(-a*t) * (1 + float64(a*between))
}

// TwoNodeQuantile returns the delay that a share p of customers does not
// exceed. It panics unless a and b are positive and 0 <= p < 1.
func TwoNodeQuantile(a, b, p float64) float64 {
	need(positive(a, b) && probability(p), "two nodes in tandem must both be stable, and p in [0, 1)")
	if p == 0 {
		return 0
	}
	return falling(func(t float64) float64 { return TwoNodeCCDF(a, b, t) }, 1-p, 0, 1/a+1/b)
}
