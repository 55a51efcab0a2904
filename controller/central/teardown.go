package central

import (
	"fmt"
	"slices"

	"ferrule/controller"
	"ferrule/nodes"
)

// unroute sends the traffic of a circuit that is to be torn down elsewhere.
func (c *Controller) unroute(id int32) {
	t := c.tasks[id]
	k := &c.circuits[t.circuit]
	t.phase, t.waiting = phaseUnroute, 0
	up := carries(k.state)
	c.enter(t.circuit, controller.TearingDown)
	moved := 0
	for w := range c.ways {
		chain := c.ways[w].chain
		if !slices.Contains(chain, t.circuit) {
			continue
		}
		moved++
		for _, s := range c.stationsOf(uint16(w), chain) {
			t.waiting++
			c.command(s, nodes.Message{Op: opSteer, Settles: true, Way: uint16(w), Circuit: nodes.None}, ownerTask, id)
		}
		c.setChain(uint16(w), nil)
	}
	c.x.Note("tear-down", c.k.circuitName(t.circuit), fmt.Sprintf("%d ways sent elsewhere first", moved))
	if k.usable {
		k.usable = false
		if c.k.plant.Circuits[t.circuit].Carries == nodes.CarriesRouted {
			c.wantTables(rankOrder)
		}
	}
	if !up {
		t.sent = 1 // its ports are down: nothing to drain
	}
	if t.waiting == 0 {
		c.tearDownGoesOn(id)
	}
}

// tearDownGoesOn takes the next step of a tear-down when the last is done.
func (c *Controller) tearDownGoesOn(id int32) {
	t := c.tasks[id]
	k := &c.circuits[t.circuit]
	switch t.phase {
	case phaseUnroute:
		if !c.tablesQuiet() {
			return
		}
		if t.sent == 0 {
			t.phase, t.waiting = phaseDrain, 2
			for _, s := range c.k.plant.Circuits[t.circuit].Ends {
				c.command(s, nodes.Message{Op: opDrain, Settles: true, Circuit: t.circuit, N: k.active}, ownerTask, id)
			}
			return
		}
		c.disconnect(id)
	case phaseDrain:
		t.phase = phaseEmpty
		d := c.delayOf(k.held.route)
		if k.held.copy != nil {
			d = max(d, c.delayOf(k.held.copy.route))
		}
		c.delayTask(id, d)
	case phaseEmpty:
		c.disconnect(id)
	case phaseConnect:
		if k.held.holds() {
			c.unreserve(&k.held)
			k.held = holding{}
		}
		k.home = nil
		c.enter(t.circuit, controller.TornDown)
		c.x.Note("torn down", c.k.circuitName(t.circuit), "after "+people(c.now-t.begun))
		c.end(id, "")
		c.tryAgain()
	default:
		panic("central: a tear-down has no such phase")
	}
}

// disconnect has every site of the route release what the circuit holds.
func (c *Controller) disconnect(id int32) {
	t := c.tasks[id]
	h := &c.circuits[t.circuit].held
	t.phase, t.waiting = phaseConnect, h.parts()
	if !h.holds() {
		c.tearDownGoesOn(id)
		return
	}
	c.releaseAll(t.circuit, h, h.parts(), false, ownerTask, id)
}

// quiet goes on with the tear-downs that waited for the tables.
func (c *Controller) quiet() {
	if !c.tablesQuiet() {
		return
	}
	for id, t := range c.tasks {
		if t != nil && t.kind == taskTearDown && t.phase == phaseUnroute && t.waiting == 0 {
			c.tearDownGoesOn(int32(id))
		}
	}
}
