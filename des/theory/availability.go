package theory

import "math"

// HoursPerYear is the year of availability figures: 365 days.
const HoursPerYear = 8760

// Availability returns the share of time in service of a unit with the given
// mean times to failure and to repair: mttf/(mttf+mttr). It panics unless
// mttf > 0 and mttr >= 0.
func Availability(mttf, mttr float64) float64 {
	need(positive(mttf) && mttr >= 0, "availability needs mttf > 0 and mttr >= 0")
	return mttf / (mttf + mttr)
}

// Downtime returns the part of a period that is lost at availability a.
func Downtime(a, period float64) float64 {
	need(a >= 0 && a <= 1, "an availability must lie in [0, 1]")
	return (1 - a) * period
}

// Series returns the availability of units that are all needed and fail
// independently: the product.
func Series(a ...float64) float64 {
	p := 1.0
	for _, v := range a {
		need(v >= 0 && v <= 1, "an availability must lie in [0, 1]")
		p *= v
	}
	return p
}

// Parallel returns the availability of units of which one suffices and that
// fail independently: 1 - product(1-a).
func Parallel(a ...float64) float64 {
	down := 1.0
	for _, v := range a {
		need(v >= 0 && v <= 1, "an availability must lie in [0, 1]")
		down *= 1 - v
	}
	return 1 - down
}

// KOutOfN returns the availability of n equal, independent units of which k are
// needed: the upper tail of the binomial law. It panics unless 0 <= k <= n and a
// lies in [0, 1].
func KOutOfN(k, n int, a float64) float64 {
	need(0 <= k && k <= n && a >= 0 && a <= 1, "k out of n needs 0 <= k <= n and an availability in [0, 1]")
	sum := 0.0
	for i := k; i <= n; i++ {
		choose := math.Round(math.Exp(lgamma(n) - lgamma(i) - lgamma(n-i)))
		sum += float64(choose * math.Pow(a, float64(i)) * math.Pow(1-a, float64(n-i)))
	}
	return sum
}

// Failures returns the mean number of failures per year of something that is up
// for mttf hours and down for mttr hours in turn.
func Failures(mttf, mttr float64) float64 {
	need(positive(mttf) && mttr >= 0, "failures need mttf > 0 and mttr >= 0")
	return HoursPerYear / (mttf + mttr)
}

// FibreMTTF returns the mean hours between cuts of a fibre of the given length
// at a rate of cuts per year and unit of length, counted in time in service. It
// panics unless both are positive.
//
// Source: the form of M. To, P. Neusy, IEEE JSAC 12 (1994).
func FibreMTTF(length, cutsPerYear float64) float64 {
	need(positive(length, cutsPerYear), "a fibre needs a length and a rate of cuts")
	return HoursPerYear / (length * cutsPerYear)
}

// FITMTTF returns the mean hours to failure of a part of so many failures in
// 1e9 hours. It panics unless fit is positive.
func FITMTTF(fit float64) float64 {
	need(positive(fit), "a failure rate must be positive")
	return 1e9 / fit
}

// UnavailabilityStdDev returns the standard deviation of the share of downtime
// seen over a long time, sqrt(2 U A/((1/mttf + 1/mttr) over)): the tolerance of
// a test of a failure process. It panics unless all are positive.
//
// Source: the two-state Markov chain.
func UnavailabilityStdDev(mttf, mttr, over float64) float64 {
	need(positive(mttf, mttr, over), "a failure process needs positive times")
	a := Availability(mttf, mttr)
	return math.Sqrt(2 * a * (1 - a) / ((1/mttf + 1/mttr) * over))
}
