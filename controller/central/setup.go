package central

import (
	"fmt"

	"ferrule/controller"
	"ferrule/nodes"
)

// route finds a route for a set-up, reserves it in the picture and commands
// the cross-connects.
func (c *Controller) route(id int32) {
	t := c.tasks[id]
	k := &c.circuits[t.circuit]
	p := &c.k.plant.Circuits[t.circuit]
	along := p.Along
	if why := c.unfit(t.circuit); why != "" {
		c.blocked(id, why)
		return
	}
	switch {
	case t.away:
		along = nil
	case t.kind == taskRevert:
		along = k.home
	case t.kind == taskRestore || t.tries > 0:
		along = nil
	}
	if t.kind == taskSetUp && p.Along != nil && t.tries > 0 {
		c.blocked(id, "refused on the route asked for")
		return
	}
	h, out, why := c.seek(t, along)
	t.tries++
	if why != "" {
		c.blocked(id, why)
		return
	}
	k.last++
	h.incarnation = k.last
	if h.copy != nil {
		k.last++
		h.copy.incarnation = k.last
	}
	t.h = h
	c.pushOut(out, t.circuit)
	c.reserve(&t.h)
	c.x.Note("route", p.Name, fmt.Sprintf("%s; %d slots, light %s, try %d", c.routeList(&h), h.slots, people(c.delayOf(h.route)), t.tries))
	t.phase, t.sent = phaseConnect, 0
	defer c.restore(out, nil)
	if c.k.cfg.Sequence || p.Channel {
		t.waiting = 0
		c.connectNext(id)
		return
	}
	t.waiting = t.h.parts()
	for t.sent < t.h.parts() {
		c.connectSite(id)
	}
}

// connectNext commands the next site in sequence.
func (c *Controller) connectNext(id int32) {
	c.tasks[id].waiting = 1
	c.connectSite(id)
}

// connectSite commands the next site of the route.
func (c *Controller) connectSite(id int32) {
	t := c.tasks[id]
	s, a, incarnation := t.h.part(t.sent)
	t.sent++
	c.command(s, a.message(t.circuit, incarnation, true), ownerTask, id)
}

// connected tells both ends of a route that stands.
func (c *Controller) connected(id int32) {
	t := c.tasks[id]
	k := &c.circuits[t.circuit]
	k.setUp = c.now - t.begun
	c.x.Note("connected", c.k.circuitName(t.circuit), fmt.Sprintf("%d sites after %s", t.h.parts(), people(k.setUp)))
	t.phase, t.waiting = phaseActivate, 2
	if r := c.rateFor(t.circuit, t.h.slots); r != k.rate && !c.k.plant.Circuits[t.circuit].Channel {
		k.rate = r
		t.waiting = 4
		for _, s := range c.k.plant.Circuits[t.circuit].Ends {
			c.command(s, c.rateMessage(t.circuit, r), ownerTask, id)
		}
	}
	for e, s := range c.k.plant.Circuits[t.circuit].Ends {
		m := nodes.Message{Op: opActivate, Settles: true, Circuit: t.circuit, N: t.h.incarnation, Ref: t.h.trailsOf(t.circuit, nodes.Direction(e))}
		c.command(s, m, ownerTask, id)
	}
}

// activated takes a circuit whose ends both send on the new route for up.
func (c *Controller) activated(id int32) {
	t := c.tasks[id]
	k := &c.circuits[t.circuit]
	old := k.held
	if old.holds() {
		c.unreserve(&old)
		c.releaseAll(t.circuit, &old, old.parts(), false, ownerNone, 0)
	}
	k.held, k.active, k.dark, k.reason = t.h, t.h.incarnation, [2][2]bool{}, ""
	k.delay = c.delayOf(k.held.route)
	if k.home == nil {
		k.home = k.held.route
	}
	c.end(id, "")
	c.comesUp(t.circuit, "up", fmt.Sprintf("incarnation %d, light %s", k.active, people(k.delay)), true)
	if old.holds() {
		c.tryAgain()
	}
}

// comesUp takes a circuit for up, on a new route or the one it had, and routes
// over it.
func (c *Controller) comesUp(id nodes.CircuitID, what, detail string, newRoute bool) {
	k := &c.circuits[id]
	was := k.usable
	k.usable, k.reason = true, ""
	c.enter(id, c.upState(id))
	c.x.Note(what, c.k.circuitName(id), detail)
	if c.k.plant.Circuits[id].Carries == nodes.CarriesRouted && (!was || newRoute) {
		c.wantTables(rankOrder)
	}
}

// giveUp frees what a set-up has reserved and closes what it has opened.
func (c *Controller) giveUp(id int32) {
	t := c.tasks[id]
	c.withdraw(ownerTask, id)
	if t.phase == phaseActivate {
		for _, s := range c.k.plant.Circuits[t.circuit].Ends {
			c.command(s, nodes.Message{Op: opDrain, Settles: true, Circuit: t.circuit, N: t.h.incarnation}, ownerNone, 0)
		}
	}
	if t.phase != phaseDecide {
		c.unreserve(&t.h)
		c.releaseAll(t.circuit, &t.h, t.sent, true, ownerNone, 0)
	}
	t.h, t.phase, t.waiting, t.sent = holding{}, phaseDecide, 0, 0
}

// crankBack gives up a route and tries again without what failed, as often as
// the configuration allows.
func (c *Controller) crankBack(id int32, why string) {
	t := c.tasks[id]
	torn := t.kind == taskRevert && t.phase == phaseActivate
	c.giveUp(id)
	c.x.Note("crank-back", c.k.circuitName(t.circuit), fmt.Sprintf("%s; try %d of %d", why, t.tries, c.k.cfg.Attempts))
	switch {
	case torn: // its ends may be on either route: neither is good any more
		c.end(id, why)
		c.fails(t.circuit, true)
		c.restore([]nodes.CircuitID{t.circuit}, nil)
	case t.tries >= c.k.cfg.Attempts:
		c.blocked(id, why)
	case t.kind == taskRestore:
		c.enqueueTask(id, rankRestore)
	default:
		c.enqueueTask(id, rankOrder)
	}
}

// blocked ends a set-up for which there is no route: a result, not an error.
func (c *Controller) blocked(id int32, why string) {
	t := c.tasks[id]
	k := &c.circuits[t.circuit]
	name := c.k.circuitName(t.circuit)
	switch t.kind {
	case taskSetUp:
		k.reason = why
		c.enter(t.circuit, controller.Blocked)
		c.x.Note("blocked", name, why)
	case taskRestore:
		k.reason = why
		c.enter(t.circuit, controller.Down)
		c.x.Note("not restorable", name, why)
	case taskRevert:
		if t.away {
			c.x.Note("stays", name, "on its route: "+why)
		} else {
			c.x.Note("stays", name, "on its new route: "+why)
		}
	default:
		panic("central: this task seeks no route")
	}
	c.end(id, why)
}
