package theory

import "math"

// An MD1 is a queue with Poisson arrivals at rate Lambda and one server that
// takes the time D for each. Both must be positive and finite, else its
// methods panic.
type MD1 struct{ Lambda, D float64 }

// Load returns rho = Lambda D.
func (q MD1) Load() float64 {
	need(positive(q.Lambda, q.D), "an M/D/1 queue needs a positive rate and service time")
	return q.Lambda * q.D
}

// MG1 returns the same queue as one with general service.
func (q MD1) MG1() MG1 {
	q.Load()
	return MG1{q.Lambda, q.D, q.D * q.D, q.D * q.D * q.D}
}

// MeanWait returns rho D/(2(1-rho)).
//
// Source: A. K. Erlang, "The theory of probabilities and telephone
// conversations" (1909).
func (q MD1) MeanWait() float64 { return q.MG1().MeanWait() }

// WaitVariance returns D^2 (rho/(3(1-rho)) + rho^2/(4(1-rho)^2)).
func (q MD1) WaitVariance() float64 { return q.MG1().WaitVariance() }

// MeanChange returns the mean absolute difference between the sojourns of
// successive customers, 2D(1 - (1-exp(-rho))/rho). It panics if the queue is
// not stable.
//
// Source: derived from the Lindley recursion; the difference is D less the
// smaller of the gap and the sojourn before.
func (q MD1) MeanChange() float64 {
	rho := q.Load()
	need(rho < 1, "successive sojourns need a stable queue")
	return 2 * q.D * (1 + math.Expm1(-rho)/rho)
}

// Above this load the all-positive series of WaitCCDF needs too many terms.
// Beyond this many service times the exponential tail is then exact to about
// 1e-12, as the next roots of rho(e^z - 1) = z have a real part above 2.
const (
	seriesLoad = 0.8
	tailFrom   = 15
)

// WaitCCDF returns P(wait > t). It is 1 for t < 0 and for a queue that is not
// stable.
//
// Up to a load of 0.8 it sums the all-positive series, with x = t/D,
//
//	P(W > t) = (1-rho) sum over k > x of (rho(k-x))^k / k! exp(-rho(k-x)),
//
// to about 1e-11 of itself. Above, it uses for x < 15 the finite positive form
//
//	P(W <= t) = sum over j = 0..k-1 of P(N <= k-j) (rho(k-x))^j / j! exp(-rho(k-x)),
//
// with k = floor(x)+1 and N the number present, and beyond that the
// exponential tail of [MD1.Tail].
//
// Source: series, COST 242, Broadband Network Teletraffic (1996); finite form,
// G. Franx, Oper. Res. Letters 29 (2001).
func (q MD1) WaitCCDF(t float64) float64 {
	rho, x := q.Load(), t/q.D
	switch {
	case t < 0 || rho >= 1:
		return 1
	case rho <= seriesLoad:
		return min(1, (1-rho)*positiveSeries(rho, x))
	case x < tailFrom:
		return 1 - finiteForm(rho, x)
	default:
		eta, c := q.Tail()
		return c * math.Exp(-eta*t)
	}
}

// positiveSeries sums the all-positive series. Its terms rise to one peak and
// then fall at least as fast as a geometric series of ratio rho e^(1-rho).
func positiveSeries(rho, x float64) float64 {
	sum, last := 0.0, 0.0
	for k := math.Floor(x) + 1; ; k++ {
		a := rho * (k - x)
		lg, _ := math.Lgamma(k + 1)
		term := math.Exp(float64(k*math.Log(a)) - lg - a)
		sum += term
		if term <= last && term < sum*1e-17 || sum == 0 && k > float64(10*x)+1000 {
			return sum
		}
		last = term
	}
}

// finiteForm returns P(W <= x) for a service time of 1.
func finiteForm(rho, x float64) float64 {
	k := int(x) + 1
	p := departures(rho, k+1)
	up := make([]float64, k+1) // up[n] = P(N <= n)
	sum := 0.0
	for n := range up {
		sum += p[n]
		up[n] = sum * (1 - rho) / p[0]
	}
	a := rho * (float64(k) - x)
	term, total := math.Exp(-a), 0.0
	for j := range k {
		total += float64(up[k-j] * term)
		term *= a / float64(j+1)
	}
	return min(1, total)
}

// departures returns weights proportional to the probabilities of 0, 1, ...,
// n-1 present just after a departure from a queue with Poisson arrivals and a
// constant service time of 1. They also hold for a queue with room for n. The
// flow up across each level equals the flow down,
//
//	w(i+1) P(A = 0) = w(0) P(A > i) + sum over j = 1..i of w(j) P(A > i+1-j),
//
// with A the arrivals in a service; no term is negative, so no digits are
// lost. The time complexity is O(n^2).
//
// Source: the embedded chain of Kleinrock (1975), ch. 5, in the form of cuts.
func departures(rho float64, n int) []float64 {
	_, above := poisson(rho, n+1)
	w := make([]float64, n)
	w[0] = 1
	none := math.Exp(-rho)
	for i := 0; i+1 < n; i++ {
		up := w[0] * above[i]
		for j := 1; j <= i; j++ {
			up += float64(w[j] * above[i+1-j])
		}
		w[i+1] = up / none
		if w[i+1] > 1e200 { // keep the weights of an overloaded queue finite
			for j := range w[:i+2] {
				w[j] *= 1e-200
			}
		}
	}
	return w
}

// poisson returns P(A = i) and P(A > i) for i = 0..n-1, A Poisson with mean m.
// Tails are summed from their far end, so that small ones keep their digits.
func poisson(m float64, n int) (at, above []float64) {
	far := n + int(m+float64(20*math.Sqrt(m))) + 40
	at, above = make([]float64, far), make([]float64, far)
	for i := range at {
		lg, _ := math.Lgamma(float64(i + 1))
		at[i] = math.Exp(float64(float64(i)*math.Log(m)) - lg - m)
	}
	for i := far - 2; i >= 0; i-- {
		above[i] = above[i+1] + at[i+1]
	}
	return at[:n], above[:n]
}

// Tail returns eta and c such that P(wait > t) tends to c exp(-eta t): eta D is
// the positive root z of rho(e^z - 1) = z, and c = (1-rho)/(rho e^z - 1). It
// panics if the queue is not stable.
//
// Source: COST 242 (1996).
func (q MD1) Tail() (eta, c float64) {
	rho := q.Load()
	need(rho < 1, "the tail of the wait needs a stable queue")
	// (e^z-1)/z rises from 1, so its reciprocal falls to rho.
	z := falling(func(z float64) float64 {
		if z == 0 {
			return 1
		}
		return z / math.Expm1(z)
	}, rho, 0, 1)
	return z / q.D, (1 - rho) / (float64(rho*math.Exp(z)) - 1)
}

// WaitQuantile returns the wait that a share p of customers does not exceed:
// the root of WaitCCDF(t) = 1-p, or 0 if p <= 1-rho. It panics unless
// 0 <= p < 1.
func (q MD1) WaitQuantile(p float64) float64 {
	need(probability(p), "quantile of a number outside [0, 1)")
	rho := q.Load()
	switch {
	case rho >= 1:
		return math.Inf(1)
	case p <= 1-rho:
		return 0
	}
	return falling(q.WaitCCDF, 1-p, 0, q.D)
}

// NumberShares returns the probabilities of 0..n-1 present, at a random time
// and as an arrival sees it. It panics if the queue is not stable or n < 1.
func (q MD1) NumberShares(n int) []float64 {
	rho := q.Load()
	need(rho < 1 && n >= 1, "shares of the number present need a stable queue and n >= 1")
	p := departures(rho, n)
	scale := (1 - rho) / p[0]
	for i := range p {
		p[i] *= scale
	}
	return p
}

// An MD1K is an [MD1] with room for K customers, the one in service counted;
// whoever finds it full is lost. Every load up to 500 is allowed. K must be at
// least 1. The time complexity is O(K^2).
//
// Source: the embedded chain; O. Brun, J.-M. Garcia, "Analytical solution of
// finite capacity M/D/1 queues", J. Appl. Prob. 37 (2000).
type MD1K struct {
	Lambda, D float64
	K         int
}

// solve returns the probabilities of 0..K-1 just after a departure, the
// customers lost per departure, and the load. All sums are of positive terms,
// so a rare loss keeps its digits.
func (q MD1K) solve() (after []float64, lost, rho float64) {
	need(positive(q.Lambda, q.D) && q.K >= 1, "an M/D/1/K queue needs a positive rate and service time, and room for one")
	rho = q.Lambda * q.D
	need(rho <= 500, "an M/D/1/K queue is solved up to a load of 500")
	after = departures(rho, q.K)
	sum := 0.0
	for _, w := range after {
		sum += w
	}
	_, above := poisson(rho, q.K+int(rho+float64(20*math.Sqrt(rho)))+40)
	over := make([]float64, len(above)+1) // over[m] = E[(A-m)+]
	for m := len(above) - 1; m >= 0; m-- {
		over[m] = over[m+1] + above[m]
	}
	for j := range after {
		after[j] /= sum
		lost += float64(after[j] * over[q.K-max(j, 1)])
	}
	return after, lost, rho
}

// Loss returns the share of customers lost: with v lost per departure,
// v/(1+v).
func (q MD1K) Loss() float64 {
	_, v, _ := q.solve()
	return v / (1 + v)
}

// MeanSojourn returns the mean sojourn of those that are let in. The number
// present is n < K for a share w(n)/(w(0)+rho) of the time, w as after a
// departure, and K for the rest, which is the loss; Little's law does the
// rest.
func (q MD1K) MeanSojourn() float64 {
	w, v, rho := q.solve()
	loss := v / (1 + v)
	number := meanOf(w)/(w[0]+rho) + float64(float64(q.K)*loss)
	return number / (q.Lambda * (1 - loss))
}
