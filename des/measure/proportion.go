package measure

import (
	"math"

	"gonum.org/v1/gonum/mathext"
	"gonum.org/v1/gonum/stat/distuv"
)

// Wilson returns an interval for a ratio, such as lost over sent, from
// independent trials. With no trial it is [0, 1]. It panics if hits > trials.
// Losses from one queue are not independent: use it on counts that are.
//
// Source: E. B. Wilson, "Probable inference, the law of succession, and
// statistical inference", J. Amer. Statist. Assoc. 22, 1927.
func Wilson(hits, trials uint64, level float64) (low, high float64) {
	z := NormalQuantile(upperTail(level))
	checkRatio(hits, trials)
	if trials == 0 {
		return 0, 1
	}
	n := float64(trials)
	p, q := float64(hits)/n, float64(trials-hits)/n
	zz := z * z
	mid := p + float64(zz/(2*n))
	half := float64(z * math.Sqrt(float64(p*q/n)+float64(zz/(4*n*n))))
	under := 1 + float64(zz/n)
	low, high = (mid-half)/under, (mid+half)/under
	if hits == 0 {
		low = 0
	}
	if hits == trials {
		high = 1
	}
	return low, high
}

// ClopperPearson returns the interval for a ratio that covers it at least as
// often as level says, from independent trials. With no trial it is [0, 1]. It
// panics if hits > trials.
//
// Source: C. J. Clopper and E. S. Pearson, "The use of confidence or fiducial
// limits illustrated in the case of the binomial", Biometrika 26, 1934.
func ClopperPearson(hits, trials uint64, level float64) (low, high float64) {
	q := upperTail(level)
	checkRatio(hits, trials)
	high = 1
	if hits > 0 {
		d := distuv.Beta{Alpha: float64(hits), Beta: float64(trials-hits) + 1}
		low = d.Quantile(1 - q)
	}
	if hits < trials {
		d := distuv.Beta{Alpha: float64(hits) + 1, Beta: float64(trials - hits)}
		high = d.Quantile(q)
	}
	return low, high
}

func checkRatio(hits, trials uint64) {
	if hits > trials {
		panic("measure: more hits than trials")
	}
}

// NoneSeenUpper returns the one-sided upper limit of a ratio of which n
// independent trials showed none, 1-(1-level)^(1/n): about 3/n for 95 %. With
// no trial it is 1.
//
// Source: J. A. Hanley and A. Lippman-Hand, "If nothing goes wrong, is
// everything all right?", J. Amer. Med. Assoc. 249, 1983.
func NoneSeenUpper(n uint64, level float64) float64 {
	upperTail(level)
	if n == 0 {
		return 1
	}
	return -math.Expm1(math.Log1p(-level) / float64(n))
}

// atMost returns P(B <= k) and atLeast P(B >= k), B binomial with n trials of
// probability p in (0, 1), by the regularised incomplete beta function, which
// keeps its accuracy in either tail.
func atMost(n, k int, p float64) float64 {
	switch {
	case k < 0:
		return 0
	case k >= n:
		return 1
	}
	return mathext.RegIncBeta(float64(n-k), float64(k+1), 1-p)
}

func atLeast(n, k int, p float64) float64 {
	switch {
	case k <= 0:
		return 1
	case k > n:
		return 0
	}
	return mathext.RegIncBeta(float64(k), float64(n-k+1), p)
}

// least returns the least k in [low, high] for which f holds; f must go from
// false to true and hold at high.
func least(low, high int, f func(k int) bool) int {
	for low < high {
		if mid := low + (high-low)/2; f(mid) {
			high = mid
		} else {
			low = mid + 1
		}
	}
	return high
}

// CoverageRange returns the numbers of covering intervals out of runs that a
// true coverage of nominal explains: the central share of its binomial
// distribution, such as 0.99, both ends included.
func CoverageRange(runs int, nominal, central float64) (low, high int) {
	q := upperTail(central)
	checkProbability(nominal)
	low = least(0, runs, func(k int) bool { return atMost(runs, k, nominal) >= 1-q })
	high = least(0, runs, func(k int) bool { return atMost(runs, k, nominal) >= q })
	return low, high
}

func checkProbability(p float64) {
	if !(p > 0 && p < 1) {
		panic("measure: probability outside (0, 1)")
	}
}

// QuantileRanks returns the numbers j < k, counted from 1, of two order
// statistics of n independent values between which the quantile p lies with at
// least the given confidence: each tail is at most (1-level)/2. coverage is
// what they reach. ok is false when n is too small for such two to exist.
//
// Source: H. A. David and H. N. Nagaraja, Order Statistics, ch. 7 (intervals
// for a quantile free of the distribution).
func QuantileRanks(n int, p, level float64) (j, k int, coverage float64, ok bool) {
	tail := 1 - upperTail(level)
	checkProbability(p)
	// j-1 is the greatest number with P(B <= j-1) below the tail.
	j = least(0, max(n, 0), func(b int) bool { return atMost(n, b, p) >= tail })
	k = least(0, max(n, 0)+1, func(b int) bool { return atLeast(n, b, p) <= tail })
	if j < 1 || k > n {
		return 0, 0, 0, false
	}
	return j, k, RankCoverage(n, j, k, p), true
}

// RankCoverage returns the probability that the quantile p lies between order
// statistics j and k, 1 <= j < k <= n, of n independent values:
//
//	Σ_{i=j}^{k-1} C(n,i) p^i (1-p)^(n-i).
func RankCoverage(n, j, k int, p float64) float64 {
	checkProbability(p)
	if j < 1 || j >= k || k > n {
		panic("measure: ranks out of order")
	}
	return 1 - atMost(n, j-1, p) - atLeast(n, k, p)
}

// QuantileInterval returns the interval of [QuantileRanks] for the quantile
// num/den of what h counts, as if its values were independent; consecutive
// delays are not, so over one run it is too narrow. ok is false when h counts
// too little.
func (h *Hist) QuantileInterval(num, den uint64, level float64) (low, high float64, ok bool) {
	p := float64(num) / float64(den)
	j, k, _, ok := QuantileRanks(int(h.n), p, level)
	if !ok {
		return 0, 0, false
	}
	low, _ = h.Ranked(uint64(j))
	high, _ = h.Ranked(uint64(k))
	return low, high, true
}

// SizeForMaximum returns how many independent values it takes for the greatest
// to lie above the quantile p with the given confidence: p^n <= 1-level.
//
// Source: S. S. Wilks, "Determination of sample sizes for setting tolerance
// limits", Ann. Math. Statist. 12, 1941.
func SizeForMaximum(p, level float64) int {
	return sizeFor(p, level, func(n float64) float64 { return math.Pow(p, n) })
}

// SizeForRange returns how many independent values it takes for a share of at
// least p of the distribution to lie between the least and the greatest with
// the given confidence: n·p^(n-1) - (n-1)·p^n <= 1-level. Source: as for
// [SizeForMaximum].
func SizeForRange(p, level float64) int {
	return sizeFor(p, level, func(n float64) float64 {
		return math.Pow(p, n-1) * (n - float64((n-1)*p))
	})
}

// sizeFor returns the least n whose risk is at most 1-level.
func sizeFor(p, level float64, risk func(n float64) float64) int {
	checkProbability(p)
	upperTail(level)
	high := 1
	for risk(float64(high)) > 1-level {
		high *= 2
	}
	return least(1, high, func(n int) bool { return risk(float64(n)) <= 1-level })
}
