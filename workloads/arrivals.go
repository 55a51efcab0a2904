package workloads

import (
	"fmt"
	"math"
	"math/bits"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
)

// Gaps says how the arrivals of packets, flows or requests are spaced.
type Gaps uint8

// The ways of spacing arrivals.
const (
	Poisson  Gaps = iota // independent exponential gaps
	Constant             // equal gaps; the first arrival falls anywhere in one
)

// String returns the name used in scenario files.
func (g Gaps) String() string {
	switch g {
	case Poisson:
		return "poisson"
	case Constant:
		return "constant"
	default:
		panic(fmt.Sprintf("workloads: gaps %d", g))
	}
}

// longest is the gap, in ps, from which on a next arrival is never.
const longest = 1 << 62

// A spacing is an equal gap as an exact number of picoseconds, whole + part/of.
// of is 0 if the gap is longer than any run.
type spacing struct {
	whole    des.Time
	part, of uint64
}

// spacingOf returns gap, in ps, to 2^-32 ps.
func spacingOf(gap float64) spacing {
	if !(gap < longest) {
		return spacing{}
	}
	whole := math.Floor(gap)
	return spacing{des.Time(whole), uint64(float64((gap-whole)*(1<<32)) + 0.5), 1 << 32}
}

// exactSpacing returns the gap of units of n bits at r, without error. n is
// below 2^20.
func exactSpacing(n uint64, r nodes.Rate) spacing {
	if r <= 0 {
		return spacing{}
	}
	hi, lo := bits.Mul64(n, uint64(des.Second))
	if hi >= uint64(r) {
		return spacing{}
	}
	q, rem := bits.Div64(hi, lo, uint64(r))
	if q >= longest {
		return spacing{}
	}
	return spacing{des.Time(q), rem, uint64(r)}
}

// A clock gives the instants of a process of arrivals, one ahead. Its load can
// change: what remains of the gap under way is then stretched or shortened in
// the ratio of the loads. A Poisson process stays a Poisson process, of the new
// rate, and no draw is repeated or skipped.
type clock struct {
	next   des.Time      // the next arrival, or des.Never
	factor float64       // of the load
	mean   float64       // mean gap in ps at factor 1
	gap    float64       // mean gap in ps at the factor; +Inf at factor 0
	kind   Gaps          //
	unit   uint64        // Constant with a gap known exactly: bits per arrival,
	rate   nodes.Rate    // at this rate; else unit is 0
	equal  spacing       // Constant: the gap at the factor
	over   uint64        // Constant: fraction of a ps dropped so far, over/equal.of
	since  des.Time      // the start; while next is des.Never, the instant from
	rest   float64       // which the arrival lies rest ps away at factor 1
	draws  random.Stream // of gaps and nothing else
}

// start sets the clock going at the instant at, at factor f.
func (c *clock) start(at des.Time, f float64) {
	c.setFactor(f)
	c.since, c.next = at, des.Never
	switch c.kind {
	case Poisson:
		c.rest = c.draws.Exp() * c.mean
	case Constant:
		c.rest = math.Floor(c.draws.Float64() * c.mean)
	default:
		panic(fmt.Sprintf("workloads: gaps %d", c.kind))
	}
	c.resume()
}

// setFactor prepares the gaps of factor f.
func (c *clock) setFactor(f float64) {
	c.factor, c.gap, c.over = f, c.mean/f, 0
	if c.kind != Constant {
		return
	}
	if c.unit > 0 {
		c.equal = exactSpacing(c.unit, nodes.Rate(math.Round(float64(c.rate)*f)))
	} else {
		c.equal = spacingOf(c.gap)
	}
}

// resume places next, which lies rest ps at factor 1 after since.
func (c *clock) resume() {
	x := c.rest/c.factor + 0.5 // rest 0 at factor 0: NaN, never
	if x < longest {
		c.next = c.since.Plus(des.Time(x))
	} else {
		c.next = des.Never
	}
}

// retime changes the factor at the instant at, which is after no arrival that
// was taken and not after next.
func (c *clock) retime(at des.Time, f float64) {
	at = max(at, c.since) // not before the start
	if c.next != des.Never {
		c.rest = float64(c.next-at) * c.factor
	} else {
		c.rest -= float64(float64(at-c.since) * c.factor)
	}
	c.since = at
	c.setFactor(f)
	c.resume()
}

// advance takes the arrival at next and moves to the one after it.
func (c *clock) advance() {
	switch c.kind {
	case Poisson:
		e := c.draws.Exp()
		if x := float64(e*c.gap) + 0.5; x < longest {
			c.next = c.next.Plus(des.Time(x))
			return
		}
		c.since, c.next, c.rest = c.next, des.Never, e*c.mean
	case Constant:
		c.step()
	default:
		panic(fmt.Sprintf("workloads: gaps %d", c.kind))
	}
}

// step is advance for equal gaps.
func (c *clock) step() {
	if c.equal.of == 0 {
		c.since, c.next, c.rest = c.next, des.Never, c.mean
		return
	}
	c.over += c.equal.part
	whole := c.equal.whole
	if c.over >= c.equal.of {
		c.over -= c.equal.of
		whole++
	}
	c.next = c.next.Plus(whole)
}
