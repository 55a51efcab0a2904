package central

import (
	"math/bits"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/optical"
)

// ramp is how long a change of rate takes. It never changes.
type ramp struct {
	lasts des.Time
}

// ramping is a change of rate under way at an end.
type ramping struct {
	command  nodes.Message // answered when it is done
	from, to nodes.Rate
	begun    des.Time
	lasts    des.Time
}

// rampTick is the time between two steps of a rate on its way.
const rampTick = 20 * des.Millisecond

// rampFor is how a circuit's rate goes from one number of slots to another: at
// the slope of an ODUflex (ITU-T G.7044), or at once.
func (c *Controller) rampFor(from, to int) *ramp {
	if !c.k.cfg.Ramp {
		return nil
	}
	d, err := optical.RampTime(from, to)
	if err != nil || d == 0 {
		return nil
	}
	return &ramp{d}
}

// setRate carries out a command about the rate of an end.
func (e *Element) setRate(m *nodes.Message) {
	n := e.end(m.Circuit)
	if n.rated == m.A && n.ramp != nil {
		e.answer(m, answerInHand)
		return
	}
	if n.rated >= m.A {
		e.answer(m, answerDone)
		return
	}
	n.rated, n.ramp = m.A, nil
	r, _ := m.Ref.(*ramp)
	now := e.x.Counters(m.Circuit).Rate
	if r == nil || now == 0 || now == nodes.Rate(m.B) {
		e.x.SetRate(m.Circuit, nodes.Rate(m.B))
		e.answer(m, answerDone)
		return
	}
	n.ramp = &ramping{command: *m, from: now, to: nodes.Rate(m.B), begun: e.now, lasts: r.lasts}
	later(e.x, e.now+min(rampTick, r.lasts), nodes.Message{Op: opRamp, Circuit: m.Circuit, A: m.A})
}

// rampOn takes the next step of a rate on its way.
func (e *Element) rampOn(m *nodes.Message) {
	n := e.end(m.Circuit)
	r := n.ramp
	if r == nil || n.rated != m.A {
		return
	}
	e.x.SetRate(m.Circuit, r.at(e.now))
	if left := r.begun + r.lasts - e.now; left > 0 {
		later(e.x, e.now+min(rampTick, left), *m)
		return
	}
	n.ramp = nil
	e.answer(&r.command, answerDone)
}

// at is the rate at an instant: it changes linearly.
func (r *ramping) at(now des.Time) nodes.Rate {
	part := func(d nodes.Rate) nodes.Rate {
		hi, lo := bits.Mul64(uint64(d), uint64(min(now-r.begun, r.lasts)))
		q, _ := bits.Div64(hi, lo, uint64(r.lasts))
		return nodes.Rate(q)
	}
	if r.to >= r.from {
		return r.from + part(r.to-r.from)
	}
	return r.from - part(r.from-r.to)
}
