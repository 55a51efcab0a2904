package workloads

import (
	"math"

	"ferrule/des/random"
)

// within is a lognormal law that is drawn again until it falls between two
// ends. It is read-only.
type within struct {
	law            random.Law // without the ends
	low, high      float64
	below, inside  float64 // chances of the law without the ends
	mean, variance float64
}

// lognormalWithin returns the lognormal law of parameters mu and sigma (of the
// logarithm), drawn again outside low and high.
//
// Its k-th moment is that of the law without ends, exp(k·mu + k²·sigma²/2),
// times the chance that a standard normal variate falls between the ends
// (ln x - mu)/sigma - k·sigma, over the same chance for k = 0.
func lognormalWithin(mu, sigma, low, high float64) within {
	s2 := sigma * sigma
	law, err := random.Spec{Kind: random.Lognormal, Mean: math.Exp(mu + s2/2), CoV: math.Sqrt(math.Expm1(s2))}.Law()
	if err != nil {
		panic("workloads: " + err.Error())
	}
	phi := func(x float64) float64 { return math.Erfc(-x/math.Sqrt2) / 2 }
	a, b := (math.Log(low)-mu)/sigma, (math.Log(high)-mu)/sigma
	moment := func(k float64) float64 {
		return math.Exp(float64(k*mu)+k*k*s2/2) * (phi(b-float64(k*sigma)) - phi(a-float64(k*sigma)))
	}
	w := within{law: law, low: low, high: high, below: phi(a), inside: moment(0)}
	w.mean = moment(1) / w.inside
	w.variance = moment(2)/w.inside - float64(w.mean*w.mean)
	return w
}

// Mean implements random.Law.
func (w within) Mean() float64 { return w.mean }

// Variance implements random.Law.
func (w within) Variance() float64 { return w.variance }

// Quantile implements random.Law.
func (w within) Quantile(p float64) float64 {
	switch p {
	case 0:
		return w.low
	case 1:
		return w.high
	}
	x := w.law.Quantile(min(1, w.below+float64(p*w.inside)))
	return max(w.low, min(w.high, x))
}

// CDF implements random.Law.
func (w within) CDF(x float64) float64 {
	switch {
	case x < w.low:
		return 0
	case x >= w.high:
		return 1
	default:
		return max(0, min(1, (w.law.CDF(x)-w.below)/w.inside))
	}
}

// Draw implements random.Law.
func (w within) Draw(s *random.Stream) float64 { return w.Quantile(s.Float64()) }

// At implements random.Law.
func (w within) At(u float64) float64 { return w.Quantile(u) }
