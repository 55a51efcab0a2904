package measure

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Interval is a mean with the half-width of its confidence interval, from N
// independent values.
type Interval struct {
	Mean float64 // NaN when N is 0
	Half float64 // +Inf when N is below 2: nothing is known
	N    int
}

// Low returns the lower end.
func (i Interval) Low() float64 { return i.Mean - i.Half }

// High returns the upper end.
func (i Interval) High() float64 { return i.Mean + i.Half }

// Relative returns Half over the magnitude of Mean; +Inf when Mean is 0 and
// Half is not, 0 when both are.
func (i Interval) Relative() float64 {
	if i.Half == 0 {
		return 0
	}
	return i.Half / math.Abs(i.Mean)
}

// TQuantile returns the quantile p of Student's t distribution with df degrees
// of freedom. It panics unless 0 < p < 1 and df > 0.
func TQuantile(p, df float64) float64 {
	if !(p > 0 && p < 1 && df > 0) {
		panic("measure: Student quantile out of range")
	}
	// Mu and Sigma must be given: a Sigma of zero makes every quantile zero.
	t := distuv.StudentsT{Mu: 0, Sigma: 1, Nu: df}
	return t.Quantile(p)
}

// NormalQuantile returns the quantile p of the standard normal distribution.
// It panics unless 0 < p < 1.
func NormalQuantile(p float64) float64 {
	if !(p > 0 && p < 1) {
		panic("measure: normal quantile out of range")
	}
	return distuv.UnitNormal.Quantile(p)
}

// twoSided returns the p value of statistic t with df degrees of freedom.
func twoSided(t, df float64) float64 {
	d := distuv.StudentsT{Mu: 0, Sigma: 1, Nu: df}
	return min(1, 2*d.CDF(-math.Abs(t)))
}

// upperTail turns a two-sided confidence level into the quantile it needs.
func upperTail(level float64) float64 {
	if !(level > 0 && level < 1) {
		panic("measure: confidence level outside (0, 1)")
	}
	return 0.5 + float64(0.5*level)
}

// meanVariance returns the mean and the sample variance of x, in two passes
// and in index order. The variance of fewer than two values is NaN.
func meanVariance(x []float64) (mean, variance float64) {
	var sum, squares float64
	for _, v := range x {
		sum += v
	}
	mean = sum / float64(len(x))
	for _, v := range x {
		squares += float64((v - mean) * (v - mean))
	}
	if len(x) < 2 {
		return mean, math.NaN()
	}
	return mean, squares / float64(len(x)-1)
}

// MeanInterval returns the mean of independent, roughly normal values, such as
// one per replication, with the half-width
//
//	t(1-α/2, n-1) · s / √n,  level = 1-α.
//
// Source: A. M. Law, Simulation Modeling and Analysis, ch. 4.
func MeanInterval(x []float64, level float64) Interval {
	q := upperTail(level)
	mean, variance := meanVariance(x)
	n := len(x)
	if n < 2 {
		return Interval{mean, math.Inf(1), n}
	}
	if allEqual(x) {
		return Interval{x[0], 0, n} // free of what the sum rounds away
	}
	half := float64(TQuantile(q, float64(n-1)) * math.Sqrt(variance/float64(n)))
	return Interval{mean, half, n}
}

// allEqual reports whether x holds one value only.
func allEqual(x []float64) bool {
	for _, v := range x {
		if v != x[0] {
			return false
		}
	}
	return true
}

// Paired compares two series whose i-th values share their random numbers.
type Paired struct {
	Diff        Interval // of x[i] - y[i]
	P           float64  // two-sided, of no difference; NaN below two pairs
	Correlation float64  // of x and y, achieved by sharing; NaN if either is constant
	Gain        float64  // variances of x and y over that of the differences; NaN if Constant
	Constant    bool     // every difference is the same
	Identical   bool     // every difference is zero
}

// PairedT compares x with y, pair by pair, by Student's t on the differences.
// It panics if their lengths differ. Two series that differ by a constant have
// a half-width of zero, and the p value is 1 if it is zero, 0 otherwise. Gain
// is how many times the pairs it would take to be as sure with series that
// share nothing.
//
// Source: A. M. Law, Simulation Modeling and Analysis, ch. 10 (paired-t
// interval).
func PairedT(x, y []float64, level float64) Paired {
	if len(x) != len(y) {
		panic("measure: paired series differ in length")
	}
	d := make([]float64, len(x))
	for i := range x {
		d[i] = x[i] - y[i]
	}
	r := Paired{Diff: MeanInterval(d, level), P: math.NaN(), Correlation: correlation(x, y), Gain: math.NaN()}
	if len(d) < 2 {
		return r
	}
	if r.Constant = allEqual(d); r.Constant {
		r.Identical = d[0] == 0
		r.P = constantP(d[0])
		return r
	}
	mean, variance := meanVariance(d)
	_, vx := meanVariance(x)
	_, vy := meanVariance(y)
	r.Gain = (vx + vy) / variance
	r.P = twoSided(mean/math.Sqrt(variance/float64(len(d))), float64(len(d)-1))
	return r
}

// constantP is the p value of a difference that has no variance.
func constantP(diff float64) float64 {
	if diff == 0 {
		return 1
	}
	return 0
}

// correlation returns Pearson's coefficient; NaN if a series is constant.
func correlation(x, y []float64) float64 {
	if len(x) < 2 || allEqual(x) || allEqual(y) {
		return math.NaN()
	}
	mx, _ := meanVariance(x)
	my, _ := meanVariance(y)
	var xx, yy, xy float64
	for i := range x {
		dx, dy := x[i]-mx, y[i]-my
		xx += float64(dx * dx)
		yy += float64(dy * dy)
		xy += float64(dx * dy)
	}
	return max(-1, min(1, xy/(math.Sqrt(xx)*math.Sqrt(yy))))
}

// Unpaired compares two independent series.
type Unpaired struct {
	Diff Interval // of mean x - mean y; N is the smaller of the two lengths
	DF   float64  // degrees of freedom, estimated; NaN when undefined
	P    float64  // two-sided, of no difference; NaN when undefined
}

// Welch compares the means of two independent series of any variances, by
// Student's t with the degrees of freedom
//
//	(a+b)² / (a²/(n-1) + b²/(m-1)),  a = var x / n,  b = var y / m.
//
// Source: B. L. Welch, "The generalization of Student's problem when several
// different population variances are involved", Biometrika 34, 1947.
func Welch(x, y []float64, level float64) Unpaired {
	q := upperTail(level)
	mx, vx := meanVariance(x)
	my, vy := meanVariance(y)
	n := min(len(x), len(y))
	r := Unpaired{Diff: Interval{mx - my, math.Inf(1), n}, DF: math.NaN(), P: math.NaN()}
	if n < 2 {
		return r
	}
	if allEqual(x) && allEqual(y) {
		r.Diff = Interval{x[0] - y[0], 0, n}
		r.P = constantP(r.Diff.Mean)
		return r
	}
	a, b := vx/float64(len(x)), vy/float64(len(y))
	under := float64(a*a/float64(len(x)-1)) + float64(b*b/float64(len(y)-1))
	r.DF = (a + b) * (a + b) / under
	se := math.Sqrt(a + b)
	r.Diff.Half = float64(TQuantile(q, r.DF) * se)
	r.P = twoSided(r.Diff.Mean/se, r.DF)
	return r
}

// Outcome says what an interval of a difference shows.
type Outcome string

// The outcomes.
const (
	Better     Outcome = "better"      // the interval lies wholly on the good side of zero
	Worse      Outcome = "worse"       // wholly on the bad side
	NoEvidence Outcome = "no evidence" // it holds zero, or there are fewer than two values
	Identical  Outcome = "identical"   // every difference is zero
)

// Verdict judges a difference, what is tried minus what it is compared with.
func Verdict(diff Interval, lowerIsBetter bool) Outcome {
	better, worse := Better, Worse
	if !lowerIsBetter {
		better, worse = Worse, Better
	}
	switch {
	case diff.N < 2:
		return NoEvidence
	case diff.Mean == 0 && diff.Half == 0:
		return Identical
	case diff.High() < 0:
		return better
	case diff.Low() > 0:
		return worse
	default:
		return NoEvidence
	}
}
