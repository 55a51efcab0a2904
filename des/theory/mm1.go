package theory

import "math"

// An MM1 is a queue with Poisson arrivals at rate Lambda, one server with
// exponential service at rate Mu, and room without end. Both rates must be
// positive and finite, else its methods panic.
//
// Source of all formulas, unless said otherwise: L. Kleinrock, Queueing
// Systems vol. 1 (1975), ch. 3 and 5.
type MM1 struct{ Lambda, Mu float64 }

// Load returns rho = Lambda/Mu, the share of time the server would be busy.
func (q MM1) Load() float64 {
	need(positive(q.Lambda, q.Mu), "rates of an M/M/1 queue must be positive")
	return q.Lambda / q.Mu
}

// slack returns Mu-Lambda, the rate of the sojourn's exponential law, or 0.
func (q MM1) slack() float64 {
	if q.Load() >= 1 {
		return 0
	}
	return q.Mu - q.Lambda
}

// MeanSojourn returns 1/(mu-lambda).
func (q MM1) MeanSojourn() float64 { return 1 / q.slack() }

// MeanWait returns rho/(mu-lambda).
func (q MM1) MeanWait() float64 { return q.Load() / q.slack() }

// MeanNumber returns the mean number present, rho/(1-rho).
func (q MM1) MeanNumber() float64 { return q.Lambda / q.slack() }

// MeanQueue returns the mean number waiting, rho^2/(1-rho).
func (q MM1) MeanQueue() float64 { return q.Load() * q.Lambda / q.slack() }

// SojournVariance returns 1/(mu-lambda)^2.
func (q MM1) SojournVariance() float64 { return 1 / (q.slack() * q.slack()) }

// WaitVariance returns rho(2-rho)/(mu-lambda)^2.
func (q MM1) WaitVariance() float64 {
	rho := q.Load()
	return rho * (2 - rho) * q.SojournVariance()
}

// NumberCCDF returns the probability that n or more are present, rho^n, at a
// random time and as an arrival sees it. n must not be negative.
func (q MM1) NumberCCDF(n int) float64 {
	need(n >= 0, "number present must not be negative")
	return math.Pow(min(1, q.Load()), float64(n))
}

// WaitCCDF returns P(wait > t) = rho exp(-(mu-lambda)t) for t >= 0.
func (q MM1) WaitCCDF(t float64) float64 {
	if t < 0 {
		return 1
	}
	return min(1, q.Load()) * math.Exp(-q.slack()*t)
}

// SojournCCDF returns P(sojourn > t) = exp(-(mu-lambda)t) for t >= 0.
func (q MM1) SojournCCDF(t float64) float64 { return math.Exp(-q.slack() * max(0, t)) }

// WaitQuantile returns the wait that a share p of customers does not exceed,
// max(0, ln(rho/(1-p))/(mu-lambda)). It panics unless 0 <= p < 1.
func (q MM1) WaitQuantile(p float64) float64 {
	need(probability(p), "quantile of a number outside [0, 1)")
	if q.slack() == 0 {
		return math.Inf(1)
	}
	return max(0, (math.Log(q.Load())-math.Log1p(-p))/q.slack())
}

// SojournQuantile returns -ln(1-p)/(mu-lambda). It panics unless 0 <= p < 1.
func (q MM1) SojournQuantile(p float64) float64 {
	need(probability(p), "quantile of a number outside [0, 1)")
	if q.slack() == 0 {
		return math.Inf(1)
	}
	return -math.Log1p(-p) / q.slack()
}

// MeanChange returns the mean absolute difference between the sojourns of
// successive customers. In a stable queue it is 1/mu at every load: the
// difference has Laplace's law, as a sojourn and the next gap, both
// exponential, have an exponential minimum of rate mu. It panics if the queue
// is not stable.
//
// Source: derived from Kleinrock's sojourn law.
func (q MM1) MeanChange() float64 {
	need(q.Load() < 1, "successive sojourns need a stable queue")
	return 1 / q.Mu
}

// ChangeQuantile returns the quantile of the same difference, -ln(1-p)/mu. It
// panics unless the queue is stable and 0 <= p < 1.
func (q MM1) ChangeQuantile(p float64) float64 {
	need(probability(p), "quantile of a number outside [0, 1)")
	return -math.Log1p(-p) * q.MeanChange()
}

// WaitCorrelation returns the correlation of successive waits,
// 1 - 2(1-rho)^2/((1+rho)(2-rho)). It panics if the queue is not stable.
//
// Source: derived from the Lindley recursion; the process is that of D. Daley,
// J. Austral. Math. Soc. 8 (1968).
func (q MM1) WaitCorrelation() float64 {
	rho := q.Load()
	need(rho < 1, "correlation of waits needs a stable queue")
	return 1 - 2*(1-rho)*(1-rho)/((1+rho)*(2-rho))
}

// MeanWaitVariance returns the variance of the average wait of n successive
// customers, for large n: rho(2+5rho-4rho^2+rho^3)/(n mu^2 (1-rho)^4). It is
// what a run of n customers may miss the mean by. It panics if n <= 0, and
// returns +Inf for a queue that is not stable.
//
// Source: N. Blomqvist, Skand. Aktuarietidskr. 50 (1967); D. Daley (1968).
func (q MM1) MeanWaitVariance(n float64) float64 {
	need(n > 0, "a run needs customers")
	rho := q.Load()
	if rho >= 1 {
		return math.Inf(1)
	}
	poly := 2 + float64(rho*(5+float64(rho*(rho-4))))
	return rho * poly / (n * q.Mu * q.Mu * math.Pow(1-rho, 4))
}

// An MM1K is an [MM1] with room for K customers, the one in service counted;
// whoever finds it full is lost. Every load is allowed. K must be at least 1.
//
// Source: Kleinrock (1975), ch. 3.
type MM1K struct {
	Lambda, Mu float64
	K          int
}

// shares returns the probability of each number present, 0..K, proportional
// to rho^n. Powers are taken of a number at or below 1, so none overflows.
func (q MM1K) shares() []float64 {
	need(positive(q.Lambda, q.Mu) && q.K >= 1, "an M/M/1/K queue needs positive rates and room for one")
	rho, sum := q.Lambda/q.Mu, 0.0
	p := make([]float64, q.K+1)
	for n := range p {
		if rho <= 1 {
			p[n] = math.Pow(rho, float64(n))
		} else {
			p[n] = math.Pow(1/rho, float64(q.K-n))
		}
		sum += p[n]
	}
	for n := range p {
		p[n] /= sum
	}
	return p
}

// Loss returns the share of customers lost, (1-rho)rho^K/(1-rho^(K+1)), which
// is 1/(K+1) at rho = 1.
func (q MM1K) Loss() float64 { return q.shares()[q.K] }

// MeanSojourn returns the mean sojourn of those that are let in, by Little's
// law.
func (q MM1K) MeanSojourn() float64 {
	p := q.shares()
	return meanOf(p) / (q.Lambda * (1 - p[q.K]))
}

// meanOf returns the sum of n p[n].
func meanOf(p []float64) float64 {
	m := 0.0
	for n, v := range p {
		m += float64(float64(n) * v)
	}
	return m
}
