package central

import (
	"fmt"

	"ferrule/controller"
	"ferrule/nodes"
)

// resize decides whether a circuit can have the slots asked for on the route
// it has. What it gains is reserved everywhere before its ports send faster;
// they send slower before what it loses is released.
func (c *Controller) resize(id int32) {
	t := c.tasks[id]
	k := &c.circuits[t.circuit]
	name := c.k.circuitName(t.circuit)
	if !carries(k.state) {
		c.end(id, "the circuit is "+k.state.String())
		return
	}
	more := t.slots - k.held.slots
	t.had = k.held.slots
	for _, f := range k.held.routes() {
		if int64(more) > c.free[f] {
			why := fmt.Sprintf("fibre %s has %d free slots, not %d", c.k.fibreName(f), c.free[f], more)
			c.x.Note("resize blocked", name, why)
			c.policyBlocked(t)
			c.end(id, why)
			return
		}
	}
	c.enter(t.circuit, controller.Resizing)
	c.x.Note("resize", name, fmt.Sprintf("%d to %d slots, %s to %s", k.held.slots, t.slots, rateWords(k.rate), rateWords(t.rate)))
	if more > 0 {
		grown := k.held.withSlots(more)
		c.reserve(&grown)
		c.assignSlots(id)
		return
	}
	t.phase = phaseDrain
	c.sendRate(id)
}

// assignSlots has every site of the route hold what was asked for.
func (c *Controller) assignSlots(id int32) {
	t := c.tasks[id]
	h := c.circuits[t.circuit].held.withSlots(t.slots)
	t.phase, t.waiting = phaseConnect, h.parts()
	for i := range h.parts() {
		s, a, incarnation := h.part(i)
		c.command(s, a.message(t.circuit, incarnation, t.settles()), ownerTask, id)
	}
}

// sendRate has both ends send at the new rate.
func (c *Controller) sendRate(id int32) {
	t := c.tasks[id]
	t.waiting = 2
	m := c.rateMessage(t.circuit, t.rate)
	m.Settles = t.settles()
	if r := c.rampFor(t.had, t.slots); r != nil {
		m.Ref = r
	}
	for _, s := range c.k.plant.Circuits[t.circuit].Ends {
		c.command(s, m, ownerTask, id)
	}
}

// rateMessage is the command to send at r.
func (c *Controller) rateMessage(id nodes.CircuitID, r nodes.Rate) nodes.Message {
	return nodes.Message{Op: opRate, Settles: true, Circuit: id, B: int64(r)}
}

// resizeGoesOn takes the next step of a resize when the last is done.
func (c *Controller) resizeGoesOn(id int32) {
	t := c.tasks[id]
	k := &c.circuits[t.circuit]
	switch {
	case t.phase == phaseDrain && t.slots < k.held.slots:
		k.rate, k.whole = t.rate, t.rate
		c.assignSlots(id)
	case t.phase == phaseConnect && t.slots > k.held.slots:
		k.held, k.slots = k.held.withSlots(t.slots), t.slots
		t.phase = phaseActivate
		c.sendRate(id)
	default:
		if less := k.held.slots - t.slots; less > 0 {
			gone := k.held.withSlots(less)
			c.unreserve(&gone)
		}
		k.held, k.slots, k.rate, k.whole = k.held.withSlots(t.slots), t.slots, t.rate, t.rate
		k.resizes++
		c.enter(t.circuit, c.upState(t.circuit))
		c.x.Note("resized", c.k.circuitName(t.circuit), fmt.Sprintf("%d slots after %s", t.slots, people(c.now-t.begun)))
		fewer := k.held.slots < t.had
		c.end(id, "")
		if fewer {
			c.tryAgain()
		}
	}
}

// resizeFails leaves every site with the smaller of what the circuit had and
// what it was to have, or with what it has gained already, and both ends with
// the rate that was known to be in force.
func (c *Controller) resizeFails(id int32, why string) {
	t := c.tasks[id]
	k := &c.circuits[t.circuit]
	c.withdraw(ownerTask, id)
	if t.phase == phaseConnect {
		differ := k.held.withSlots(max(t.slots, k.held.slots) - min(t.slots, k.held.slots))
		c.unreserve(&differ)
		k.held = k.held.withSlots(min(t.slots, k.held.slots))
		k.slots = k.held.slots
		for i := range k.held.parts() {
			s, a, incarnation := k.held.part(i)
			a.flags |= atOnce
			c.command(s, a.message(t.circuit, incarnation, true), ownerNone, 0)
		}
	}
	if t.phase == phaseDrain || t.phase == phaseActivate {
		for _, s := range c.k.plant.Circuits[t.circuit].Ends {
			c.command(s, c.rateMessage(t.circuit, k.rate), ownerNone, 0)
		}
	}
	if k.state == controller.Resizing {
		c.enter(t.circuit, c.upState(t.circuit))
	}
	c.x.Note("resize failed", c.k.circuitName(t.circuit), why)
	c.policyBlocked(t)
	c.end(id, why)
}
