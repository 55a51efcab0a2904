package workloads

import (
	"fmt"
	"math"

	"ferrule/des"
	"ferrule/des/random"
)

// Pattern says how flows, such as calls, come and go.
type Pattern uint8

// The patterns of flows.
const (
	Standing Pattern = iota // as many flows throughout
	Random                  // flows arrive as a Poisson process, and end
	Regular                 // flows arrive at equal gaps, and end
)

// gaps returns how flows that arrive are spaced.
func (p Pattern) gaps() Gaps {
	switch p {
	case Random:
		return Poisson
	case Regular:
		return Constant
	default:
		panic(fmt.Sprintf("workloads: flows of pattern %d do not arrive", p))
	}
}

// A crowd is what is met at one instant of flows that arrive and leave. The
// units of a flow, packets or frames, are equally spaced, the first at its
// arrival.
type crowd struct {
	flows         *lengths // law of the number of units of a flow
	interval      float64  // ps from one unit of a flow to the next
	seed, name    uint64   // of the keyed draws, which are about
	phase, length uint64   // where in the interval a flow sends, and its length
}

// A meeting is a flow met under way.
type meeting struct {
	index   uint64   // counts the flows; keys what else is drawn for this one
	wait    des.Time // until its next unit
	left    int64    // units, the next included
	carries float64  // what flows.law drew for it; NaN if only left is known
}

// meet returns the flows met at the instant at, from which on they arrive as c
// says; none if c stands still. key is the name of the source.
func (w crowd) meet(c *clock, at des.Time, key string) []meeting {
	switch {
	case c.factor == 0:
		return nil
	case c.kind == Poisson:
		return w.random(c.gap, random.NewStream(w.seed, key+"/standing"))
	default:
		return w.regular(c.gap, float64(c.next-at))
	}
}

// draw returns the uniform draw of flow i about a quantity.
func (w crowd) draw(i, quantity uint64) float64 {
	return random.Unit(random.Draw(w.seed, w.name, i, quantity))
}

// random returns the flows of Poisson arrivals: a Poisson number of them, at
// independent phases, with what a flow met at random has left. That is exactly
// the stationary state, because units of one flow are equally spaced.
func (w crowd) random(gap float64, draws random.Stream) []meeting {
	mean := w.flows.mean * w.interval / gap
	var met []meeting
	for sum := draws.Exp(); sum < mean; sum += draws.Exp() {
		i := uint64(len(met))
		left := w.flows.left(w.draw(i, w.length))
		wait := des.Time(w.draw(i, w.phase) * w.interval)
		met = append(met, meeting{i, wait, left, math.NaN()})
	}
	return met
}

// regular returns those flows of arrivals gap ps apart that still send; the
// next one arrives first ps after the meeting.
func (w crowd) regular(gap, first float64) []meeting {
	var met []meeting
	gone, looked := 0.0, int64(0) // draws up to gone have ended when looked units are sent
	for i := uint64(0); ; i++ {
		age := float64(float64(i+1)*gap) - first
		sent := int64(math.Ceil(age / w.interval))
		if sent > w.flows.most() {
			return met
		}
		if sent > looked+looked/16 {
			gone, looked = 1-w.flows.atLeast(sent+1), sent
		}
		u := w.draw(i, w.length)
		if u < gone {
			continue
		}
		x := w.flows.law.At(u)
		if left := w.flows.count(x) - sent; left > 0 {
			met = append(met, meeting{i, des.Time(float64(float64(sent)*w.interval) - age), left, x})
		}
	}
}
