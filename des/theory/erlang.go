package theory

import "math"

// LogErlangB returns the logarithm of [ErlangB], also where ErlangB itself is
// below the least float64. It panics unless n >= 0 and a > 0. The time
// complexity is O(n).
//
// It uses the recursion of the reciprocal, 1/B(0) = 1 and
//
//	1/B(k) = 1 + (k/a) / B(k-1),
//
// whose terms are all positive.
func LogErlangB(n int, a float64) float64 {
	need(n >= 0 && positive(a), "Erlang's formula needs n >= 0 and a positive load")
	y, one, log := 1.0, 1.0, 0.0 // 1/B is y exp(log), and 1 is one exp(log)
	for k := 1; k <= n; k++ {
		y = one + float64(float64(k)/a*y)
		if y > 1e200 {
			y *= 1e-200
			one *= 1e-200
			log += 200 * math.Ln10
		}
	}
	return -(math.Log(y) + log)
}

// ErlangB returns the share of requests refused by n circuits that are offered
// a erlang and queue nothing; it depends on the holding time's mean only. It
// panics unless n >= 0 and a >= 0. The time complexity is O(n).
//
// It uses the recursion B(0) = 1, B(k) = a B(k-1)/(k + a B(k-1)).
//
// Source: A. K. Erlang, P.O.E.E.J. 10 (1918).
func ErlangB(n int, a float64) float64 {
	need(n >= 0 && a >= 0 && !math.IsInf(a, 1), "Erlang's formula needs n >= 0 and a load at or above 0")
	b := 1.0
	for k := 1; k <= n; k++ {
		b = a * b / (float64(k) + float64(a*b))
	}
	return b
}

// ErlangBLoad returns the load in erlang at which n circuits refuse the share b
// of requests. It panics unless n >= 1 and 0 < b < 1.
func ErlangBLoad(n int, b float64) float64 {
	need(n >= 1 && b > 0 && b < 1, "the inverse of Erlang's formula needs n >= 1 and b in (0, 1)")
	return falling(func(a float64) float64 { return 1 - ErlangB(n, a) }, 1-b, 0, float64(n))
}

// ErlangCircuits returns the least number of circuits that refuse at most the
// share b of a erlang. It panics unless a >= 0 and 0 < b < 1.
func ErlangCircuits(a, b float64) int {
	need(a >= 0 && !math.IsInf(a, 1) && b > 0 && b < 1, "circuits need a load at or above 0 and b in (0, 1)")
	refused, n := 1.0, 0
	for refused > b {
		n++
		refused = a * refused / (float64(n) + float64(a*refused))
	}
	return n
}

// An MMN is a queue with n servers, exponential service of mean Hold each, and
// Poisson arrivals that offer A erlang. N must be at least 1, A not negative and
// Hold positive.
//
// Source: Kleinrock, Queueing Systems vol. 1 (1975), sec. 3.5.
type MMN struct {
	N       int
	A, Hold float64
}

// WaitShare returns the share of customers that wait, Erlang's C:
// n B/(n - a(1-B)), and 1 from a = n on.
func (q MMN) WaitShare() float64 {
	need(q.N >= 1 && q.A >= 0 && positive(q.Hold), "a queue with n servers needs n >= 1, a load and a holding time")
	n := float64(q.N)
	if q.A >= n {
		return 1
	}
	b := ErlangB(q.N, q.A)
	return n * b / (n - float64(q.A*(1-b)))
}

// MeanWait returns C hold/(n-a).
func (q MMN) MeanWait() float64 {
	c := q.WaitShare()
	if q.A >= float64(q.N) {
		return math.Inf(1)
	}
	return c * q.Hold / (float64(q.N) - q.A)
}

// WaitCCDF returns P(wait > t) = C exp(-(n-a)t/hold) for t >= 0.
func (q MMN) WaitCCDF(t float64) float64 {
	c := q.WaitShare()
	if t < 0 {
		return 1
	}
	return c * math.Exp(-max(0, float64(q.N)-q.A)*t/q.Hold)
}

// An Engset is a group of N circuits before S sources, each of which asks at a
// rate of Beta per holding time while it is free. N and S must be at least 1 and
// Beta not negative.
//
// Source: T. Engset (1918); T. Hossfeld, P. Tran-Gia (2021), ch. 4.3.
type Engset struct {
	S, N int
	Beta float64
}

// TimeCongestion returns the share of time that all circuits are busy, by the
// recursion E(0) = 1, E(i) = x E(i-1)/(i + x E(i-1)), x = (S-i+1) Beta.
func (g Engset) TimeCongestion() float64 {
	need(g.S >= 1 && g.N >= 1 && g.Beta >= 0, "Engset's formula needs sources, circuits and a rate at or above 0")
	return engset(g.S, g.N, g.Beta)
}

func engset(s, n int, beta float64) float64 {
	e := 1.0
	for i := 1; i <= n; i++ {
		x := float64(max(0, s-i+1)) * beta
		e = x * e / (float64(i) + float64(x*e))
	}
	return e
}

// CallCongestion returns the share of requests refused: the time congestion
// with one source fewer.
func (g Engset) CallCongestion() float64 {
	g.TimeCongestion()
	return engset(g.S-1, g.N, g.Beta)
}

// Carried returns the mean number of busy circuits: what comes,
// Beta (S - Y - (S-N)E), equals what goes, Y.
func (g Engset) Carried() float64 {
	free := float64(max(0, g.S-g.N))
	return g.Beta * (float64(g.S) - float64(free*g.TimeCongestion())) / (1 + g.Beta)
}

// TrafficCongestion returns (A-Y)/A with A = S Beta/(1+Beta) what would be
// carried without limit and Y what is: E(S-N)/S. It is 0 if nothing is offered.
func (g Engset) TrafficCongestion() float64 {
	return float64(max(0, g.S-g.N)) * g.TimeCongestion() / float64(g.S)
}

// A RateClass offers Erlangs of requests for Units slots each. It is refused
// unless Reserve slots would stay free beside it.
type RateClass struct {
	Erlangs        float64
	Units, Reserve int
}

// KaufmanRoberts returns the share of requests of each class that a link with
// the given number of slots refuses, and the mean number of slots taken, by
// q(0) = 1 and
//
//	j q(j) = sum over classes of erlangs units q(j-units).
//
// With reserved slots the term of a class is left out where it is refused; that
// is Roberts' approximation. It panics unless slots >= 0, Erlangs >= 0,
// Units >= 1 and Reserve >= 0. The time complexity is O(slots classes).
//
// Source: J. Kaufman, IEEE Trans. Commun. 29 (1981); J. Roberts (1981).
func KaufmanRoberts(slots int, classes []RateClass) (refused []float64, occupied float64) {
	need(slots >= 0, "a link needs slots at or above 0")
	for _, c := range classes {
		need(c.Erlangs >= 0 && c.Units >= 1 && c.Reserve >= 0, "a class needs a load, at least one unit and no negative reserve")
	}
	q := make([]float64, slots+1)
	q[0] = 1
	for j := 1; j <= slots; j++ {
		for _, c := range classes {
			if c.Units <= j && j <= slots-c.Reserve {
				q[j] += float64(c.Erlangs * float64(c.Units) * q[j-c.Units])
			}
		}
		if q[j] /= float64(j); q[j] > 1e200 {
			for i := range q[:j+1] {
				q[i] *= 1e-200
			}
		}
	}
	total := 0.0
	for _, v := range q {
		total += v
	}
	refused = make([]float64, len(classes))
	for i, c := range classes {
		for j := max(0, slots-c.Units-c.Reserve+1); j <= slots; j++ {
			refused[i] += q[j] / total
		}
	}
	return refused, meanOf(q) / total
}
