package random

import (
	"math"
	"sort"

	"gonum.org/v1/gonum/mathext"
	"gonum.org/v1/gonum/stat/distuv"
)

// The laws take moments, quantiles and probabilities from distuv. Draws go
// through the stream's own exponential and normal variates, whose inverse or
// exponential gives the law in one step, except for Gamma, which distuv draws.
// BenchmarkLaws and BenchmarkDistuv compare the two.

// checked returns p and panics unless it is a probability.
func checked(p float64) float64 {
	if !(p >= 0 && p <= 1) {
		panic("random: quantile of a number outside [0, 1]")
	}
	return p
}

// constant is the law of a quantity that does not vary.
type constant float64

func (c constant) Mean() float64     { return float64(c) }
func (c constant) Variance() float64 { return 0 }
func (c constant) Quantile(p float64) float64 {
	checked(p)
	return float64(c)
}
func (c constant) CDF(x float64) float64 {
	if x < float64(c) {
		return 0
	}
	return 1
}
func (c constant) Draw(*Stream) float64 { return float64(c) }
func (c constant) At(u float64) float64 { return c.Quantile(u) }

type uniform struct{ distuv.Uniform }

func newUniform(from, to float64) uniform { return uniform{distuv.Uniform{Min: from, Max: to}} }

// Quantile is pinned here because distuv's form may be fused.
func (l uniform) Quantile(p float64) float64 {
	return float64((l.Max-l.Min)*checked(p)) + l.Min
}
func (l uniform) Draw(s *Stream) float64 { return l.Quantile(s.Float64()) }
func (l uniform) At(u float64) float64   { return l.Quantile(u) }

type exponential struct {
	distuv.Exponential
	mean float64
}

func newExponential(mean float64) exponential {
	return exponential{distuv.Exponential{Rate: 1 / mean}, mean}
}

// Quantile uses log1p, which keeps its digits when p is small.
func (l exponential) Quantile(p float64) float64 { return -math.Log1p(-checked(p)) * l.mean }
func (l exponential) Draw(s *Stream) float64     { return s.Exp() * l.mean }

// Mean is as given; distuv would round the reciprocal of a reciprocal.
func (l exponential) Mean() float64        { return l.mean }
func (l exponential) At(u float64) float64 { return l.Quantile(u) }

type lognormal struct{ distuv.LogNormal }

func newLognormal(mu, sigma float64) lognormal {
	return lognormal{distuv.LogNormal{Mu: mu, Sigma: sigma}}
}

// CDF is zero up to and at zero, where distuv takes the logarithm.
func (l lognormal) CDF(x float64) float64 {
	if x <= 0 {
		return 0
	}
	return l.LogNormal.CDF(x)
}

// Quantile is pinned here because distuv's form may be fused.
func (l lognormal) Quantile(p float64) float64 {
	return math.Exp(float64(l.Sigma*distuv.UnitNormal.Quantile(checked(p))) + l.Mu)
}
func (l lognormal) Draw(s *Stream) float64 {
	return math.Exp(float64(l.Sigma*s.Norm()) + l.Mu)
}
func (l lognormal) At(u float64) float64 { return l.Quantile(u) }

type pareto struct{ distuv.Pareto }

func newPareto(shape, least float64) pareto {
	return pareto{distuv.Pareto{Xm: least, Alpha: shape}}
}

// Quantile uses log1p, which keeps its digits when p is small.
func (l pareto) Quantile(p float64) float64 {
	return l.Xm * math.Exp(-math.Log1p(-checked(p))/l.Alpha)
}
func (l pareto) Draw(s *Stream) float64 { return l.Xm * math.Exp(s.Exp()/l.Alpha) }
func (l pareto) At(u float64) float64   { return l.Quantile(u) }

// cappedPareto is the law of min(X, most) with X Pareto: what would lie beyond
// the cap lies at it.
type cappedPareto struct {
	pareto
	most float64
}

func (l cappedPareto) Mean() float64 { return l.Xm * (1 + power(1-l.Alpha, l.most/l.Xm)) }

func (l cappedPareto) Variance() float64 {
	second := l.Xm * l.Xm * (1 + 2*power(2-l.Alpha, l.most/l.Xm))
	m := l.Mean()
	return max(0, second-float64(m*m))
}
func (l cappedPareto) CDF(x float64) float64 {
	if x >= l.most {
		return 1
	}
	return l.pareto.CDF(x)
}
func (l cappedPareto) Quantile(p float64) float64 { return min(l.most, l.pareto.Quantile(p)) }
func (l cappedPareto) Draw(s *Stream) float64     { return min(l.most, l.pareto.Draw(s)) }
func (l cappedPareto) At(u float64) float64       { return l.Quantile(u) }

// power returns the integral of t^(b-1) for t from 1 to r, (r^b - 1)/b, also
// near b = 0 where it is ln r.
func power(b, r float64) float64 {
	if b == 0 {
		return math.Log(r)
	}
	return math.Expm1(b*math.Log(r)) / b
}

// cappedLeast returns the least value k for which a Pareto of the given shape
// has the given mean after capping at most, or 0 if k would be below 1e-300 of
// the cap. It needs mean < most. The mean
//
//	shape·k/(shape-1) - most·(k/most)^shape/(shape-1)
//
// (for shape 1 its limit k·(1 + ln(most/k))) grows with k from 0 to most, so
// bisection of ln k finds it; 200 halvings exhaust the digits.
func cappedLeast(shape, mean, most float64) float64 {
	lo, hi := most*1e-300, most
	if (cappedPareto{newPareto(shape, lo), most}).Mean() > mean {
		return 0
	}
	for range 200 {
		k := math.Sqrt(lo) * math.Sqrt(hi)
		if (cappedPareto{newPareto(shape, k), most}).Mean() < mean {
			lo = k
		} else {
			hi = k
		}
	}
	return hi
}

type gamma struct{ distuv.Gamma }

func newGamma(mean, cov float64) gamma {
	a := 1 / (cov * cov)
	return gamma{distuv.Gamma{Alpha: a, Beta: a / mean}}
}

// CDF is zero below zero, where distuv panics.
func (l gamma) CDF(x float64) float64 {
	if x <= 0 {
		return 0
	}
	return l.Gamma.CDF(x)
}
func (l gamma) Quantile(p float64) float64 { return gammaQuantile(l.Alpha, checked(p)) / l.Beta }
func (l gamma) Draw(s *Stream) float64 {
	l.Src = s
	return l.Rand()
}
func (l gamma) At(u float64) float64 { return l.Quantile(u) }

// gammaQuantile returns the x with P(a, x) = p, P the regularised lower
// incomplete gamma function. For a >= 1 it asks gonum, whose inverse loses all
// digits of small results when a < 1. There it starts from the bound
// P(a, x) <= x^a / Gamma(a+1), which lies left of the root, and takes Newton
// steps for ln P against ln x in the lower half and for ln(1-P) against x in
// the upper half. The first is concave and rises, the second is convex and
// falls, so the steps never pass the root.
func gammaQuantile(a, p float64) float64 {
	if a >= 1 || p == 0 || p == 1 {
		return mathext.GammaIncRegInv(a, p)
	}
	lg, _ := math.Lgamma(a + 1)
	x := math.Exp((math.Log(p) + lg) / a)
	for range 100 {
		if x == 0 {
			return 0 // below the least float64
		}
		slope := math.Exp(float64(a*math.Log(x)) - x - lg + math.Log(a)) // x times the density
		next := x
		if p <= 0.5 {
			c := mathext.GammaIncReg(a, x)
			next *= math.Exp(math.Log(p/c) * c / slope)
		} else {
			c := mathext.GammaIncRegComp(a, x)
			next *= 1 + float64(math.Log(c/(1-p))*c/slope)
		}
		if next <= x*(1+1e-15) {
			return x
		}
		x = next
	}
	return x
}

type weibull struct{ distuv.Weibull }

func newWeibull(shape, scale float64) weibull {
	return weibull{distuv.Weibull{K: shape, Lambda: scale}}
}

// CDF is zero below zero.
func (l weibull) CDF(x float64) float64 {
	if x <= 0 {
		return 0
	}
	return l.Weibull.CDF(x)
}

// Quantile uses log1p, which keeps its digits when p is small.
func (l weibull) Quantile(p float64) float64 {
	return l.Lambda * math.Pow(-math.Log1p(-checked(p)), 1/l.K)
}
func (l weibull) Draw(s *Stream) float64 { return l.Lambda * math.Pow(s.Exp(), 1/l.K) }
func (l weibull) At(u float64) float64   { return l.Quantile(u) }

// mixture is a finite law: values ascending, upTo[i] the probability of values[i]
// or less.
type mixture struct {
	values, upTo   []float64
	mean, variance float64
}

func newMix(values, weights []float64, total float64) *mixture {
	order := make([]int, len(values))
	for i := range order {
		order[i] = i
	}
	sort.SliceStable(order, func(i, j int) bool { return values[order[i]] < values[order[j]] })
	m := &mixture{}
	sum := 0.0
	for _, i := range order {
		if weights[i] == 0 {
			continue
		}
		sum += weights[i]
		m.values = append(m.values, values[i])
		m.upTo = append(m.upTo, sum/total)
		m.mean += float64(values[i] * (weights[i] / total))
	}
	m.upTo[len(m.upTo)-1] = 1 // whatever rounding left
	for i, v := range values {
		d := v - m.mean
		m.variance += float64(d * d * (weights[i] / total))
	}
	return m
}

func (l *mixture) Mean() float64     { return l.mean }
func (l *mixture) Variance() float64 { return l.variance }
func (l *mixture) CDF(x float64) float64 {
	i := sort.Search(len(l.values), func(i int) bool { return l.values[i] > x })
	if i == 0 {
		return 0
	}
	return l.upTo[i-1]
}
func (l *mixture) Quantile(p float64) float64 {
	return l.values[sort.SearchFloat64s(l.upTo, checked(p))]
}
func (l *mixture) Draw(s *Stream) float64 { return l.Quantile(s.Float64()) }
func (l *mixture) At(u float64) float64   { return l.Quantile(u) }
