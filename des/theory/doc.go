// Package theory holds closed formulas and short exact algorithms of queueing,
// loss and availability. The product uses them to explain and to bound, the
// tests to check what is measured.
//
// Every function is pure. Times are in one unit of the caller's choice and
// rates are per that unit; traffic is in erlang. A wait excludes the
// customer's own service, a sojourn includes it. A queue offered as much as
// it can serve, or more, has infinite means and quantiles: the functions
// return +Inf and not an error. Arguments outside the stated domain are a
// caller's mistake and panic.
package theory

import "math"

// need panics with what was violated unless ok.
func need(ok bool, what string) {
	if !ok {
		panic("theory: " + what)
	}
}

// positive reports whether every x is positive and finite.
func positive(x ...float64) bool {
	for _, v := range x {
		if !(v > 0) || math.IsInf(v, 1) {
			return false
		}
	}
	return true
}

// probability reports whether p lies in [0, 1).
func probability(p float64) bool { return p >= 0 && p < 1 }

// falling returns the x in [lo, hi] where the decreasing function f crosses
// target, to the last digit or two, by bisection. If f(hi) is still above
// target, hi is doubled first.
func falling(f func(float64) float64, target, lo, hi float64) float64 {
	for f(hi) > target {
		lo, hi = hi, 2*hi
	}
	for range 200 {
		mid := lo + (hi-lo)/2
		if mid == lo || mid == hi {
			break
		}
		if f(mid) > target {
			lo = mid
		} else {
			hi = mid
		}
	}
	return hi
}
