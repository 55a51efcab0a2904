package measure

import (
	"cmp"
	"math"
	"slices"
)

// Holm returns the p values of a family of tests, adjusted so that calling
// what is at most alpha a difference makes a false call anywhere in the family
// with a probability of at most alpha, however the tests depend on each other.
// Sorted upwards, value i of m becomes the greatest of
//
//	min(1, (m-j+1) p(j)),  j <= i.
//
// A NaN is no test: it stays and is not counted. The time complexity is
// O(m log m).
//
// Source: S. Holm, "A simple sequentially rejective multiple test procedure",
// Scand. J. Statist. 6, 1979.
func Holm(p []float64) []float64 {
	out := slices.Clone(p)
	var order []int
	for i, v := range p {
		if !math.IsNaN(v) {
			order = append(order, i)
		}
	}
	slices.SortStableFunc(order, func(a, b int) int { return cmp.Compare(p[a], p[b]) })
	least := 0.0
	for k, i := range order {
		least = max(least, min(1, float64(len(order)-k)*p[i]))
		out[i] = least
	}
	return out
}

// LeastP returns the least two-sided p value that n pairs can show without any
// trust in the law of their differences but its symmetry, 2^(1-n): all n
// differences have one sign. It is 1 for fewer than two pairs. A smaller p
// value from Student's t leans on normality alone.
//
// Source: R. A. Fisher, The Design of Experiments (1935), sec. 21 (the test
// by all changes of sign).
func LeastP(n int) float64 {
	if n < 2 {
		return 1
	}
	return math.Ldexp(1, 1-n)
}

// PairsFor returns the least number of pairs whose [LeastP] is at most p. It
// panics unless 0 < p < 1.
func PairsFor(p float64) int {
	checkProbability(p)
	n := 2
	for LeastP(n) > p {
		n++
	}
	return n
}

// SameWithin returns the p value of the claim that the mean of d, differences
// of pairs, lies within margin of zero: the greater of two one-sided tests by
// Student's t. The claim stands at level 1-alpha when the interval of level
// 1-2*alpha lies within the margin. It is NaN below two pairs. It panics unless
// margin is positive.
//
// Source: D. J. Schuirmann, "A comparison of the two one-sided tests procedure
// and the power approach", J. Pharmacokin. Biopharm. 15, 1987.
func SameWithin(d []float64, margin float64) float64 {
	if !(margin > 0) {
		panic("measure: a margin that is not positive")
	}
	if len(d) < 2 {
		return math.NaN()
	}
	mean, variance := meanVariance(d)
	room := margin - math.Abs(mean)
	if allEqual(d) {
		if math.Abs(d[0]) < margin {
			return 0
		}
		return 1
	}
	return oneSided(room/math.Sqrt(variance/float64(len(d))), float64(len(d)-1))
}

// oneSided returns P(T >= t), T Student's with df degrees of freedom.
func oneSided(t, df float64) float64 {
	p := twoSided(t, df) / 2
	if t < 0 {
		return 1 - p
	}
	return p
}

// Above returns the one-sided p value of the claim that the mean of x lies
// above limit: P(T >= t) of the statistic of Student's t. Of values that are all equal it
// is 0 or 1. It is NaN below two values.
func Above(x []float64, limit float64) float64 {
	if len(x) < 2 {
		return math.NaN()
	}
	if allEqual(x) {
		if x[0] > limit {
			return 0
		}
		return 1
	}
	mean, variance := meanVariance(x)
	return oneSided((mean-limit)/math.Sqrt(variance/float64(len(x))), float64(len(x)-1))
}

// PairsToShow returns the least number of values, above len(d), with which a
// mean of the size of that of d, less than far away from it, is shown with
// four chances in five: tail is the probability of a false call to one side,
//
//	(t(1-tail, n-1) + t(0.8, n-1)) · s / √n <= |far|.
//
// far is what is to be shown: the mean itself against zero, or the room it has
// to a limit. ok is false when d has fewer than two values, far is zero, or
// more than 2^20 values are needed.
//
// Source: the usual approximation of the power of a t test, as in J. Cohen,
// Statistical Power Analysis for the Behavioral Sciences (1988), ch. 2.
func PairsToShow(d []float64, far, tail float64) (n int, ok bool) {
	checkProbability(tail)
	far = math.Abs(far)
	if len(d) < 2 || !(far > 0) {
		return 0, false
	}
	_, variance := meanVariance(d)
	s := math.Sqrt(variance)
	if allEqual(d) {
		s = 0
	}
	short := func(n int) bool {
		df := float64(n - 1)
		return (TQuantile(1-tail, df)+TQuantile(power, df))*s/math.Sqrt(float64(n)) > far
	}
	const most = 1 << 20
	low, high := len(d), len(d)+1
	for short(high) {
		if high >= most {
			return 0, false
		}
		low, high = high, 2*high
	}
	return least(low+1, high, func(n int) bool { return !short(n) }), true
}

// power is the chance with which a planned number of values shows what is
// there. Common practice (J. Cohen, 1988).
const power = 0.8
