package central

import (
	"slices"
	"strings"

	"ferrule/controller"
	"ferrule/nodes"
)

// site is what the controller believes of a site.
type site struct {
	dead    bool  // its router does not work
	heard   int64 // last alarm about it
	drained bool  // nothing shall go through it
}

// drain is a site that is being emptied, or filled again, for an order.
type drain struct {
	site nodes.SiteID
	step int32
}

// equipmentAlarm takes in what a site says of its router or of a port.
func (c *Controller) equipmentAlarm(m *nodes.Message) {
	lost := m.B == alarmLost
	what, subject, detail := "router", c.k.siteName(m.From), ""
	var about []nodes.CircuitID
	if m.Circuit == nodes.None {
		s := &c.sites[m.From]
		if m.A <= s.heard {
			return
		}
		s.heard, s.dead = m.A, lost
		about = c.k.endsAt[m.From]
	} else {
		k := &c.circuits[m.Circuit]
		e := endOf(c.k.plant.Circuits[m.Circuit].Ends, m.From)
		if m.A <= k.portHeard[e] {
			return
		}
		k.portHeard[e], k.portDead[e] = m.A, lost
		what, subject, detail = "port", c.k.circuitName(m.Circuit), "at "+c.k.siteName(m.From)
		about = []nodes.CircuitID{m.Circuit}
	}
	if lost {
		c.x.Note(what+" down", subject, detail)
		c.equipmentFails(about)
		return
	}
	c.x.Note(what+" up", subject, detail)
	for _, id := range about {
		c.revive(id)
	}
	c.tryAgain()
}

// equipmentFails takes circuits for down whose end has failed: no other route
// helps them.
func (c *Controller) equipmentFails(about []nodes.CircuitID) {
	for _, id := range about {
		k := &c.circuits[id]
		if t := k.task; t != nodes.None {
			switch c.tasks[t].kind {
			case taskSetUp, taskRestore:
				c.giveUp(t)
				c.blocked(t, c.unfit(id))
			case taskRevert, taskRevive, taskTearDown, taskResize, taskMove, taskReturn:
			default:
				panic("central: unknown kind of task")
			}
		}
		c.located(id)
		c.fails(id, true)
		if k.state == controller.Down {
			k.reason = c.unfit(id)
		}
	}
}

// unfit says why a circuit cannot carry anything, whatever its route; empty
// when it can.
func (c *Controller) unfit(id nodes.CircuitID) string {
	k := &c.circuits[id]
	for e, s := range c.k.plant.Circuits[id].Ends {
		if c.sites[s].dead {
			return "the router at " + c.k.siteName(s) + " is down"
		}
		if k.portDead[e] {
			return "its port at " + c.k.siteName(s) + " is down"
		}
	}
	return ""
}

// takeDrain begins to empty a site, or ends that. Routing goes round it,
// aggregates moved over its router return to the tables, and circuits that pass
// its cross-connect are led another way, each made before the old one is left.
func (c *Controller) takeDrain(i int, o *controller.Order) string {
	s := &c.sites[o.Site]
	on := o.Kind == controller.Drain
	if s.drained == on {
		if on {
			return "the site is drained already"
		}
		return "the site is not drained"
	}
	s.drained = on
	c.wantTables(rankOrder)
	c.drains = append(c.drains, drain{o.Site, int32(i)})
	if !on {
		return ""
	}
	for w := range c.ways {
		chain := c.ways[w].chain
		if at := c.stationsOf(uint16(w), chain); len(at) > 1 && slices.Contains(at[1:], o.Site) && !c.moving(uint16(w)) {
			c.begin(task{kind: taskReturn, circuit: nodes.None, step: nodes.None, ways: []uint16{uint16(w)}, keep: true}, rankOrder)
		}
	}
	for i := range c.circuits {
		if k := &c.circuits[i]; carries(k.state) && k.task == nodes.None && k.held.through(o.Site) {
			c.begin(task{kind: taskRevert, away: true, circuit: nodes.CircuitID(i), step: nodes.None}, rankOrder)
		}
	}
	return ""
}

// through says whether a route of h passes a site between its ends.
func (h *holding) through(s nodes.SiteID) bool {
	n := len(h.sites)
	return n > 2 && slices.Contains(h.sites[1:n-1], s) || h.copy != nil && h.copy.through(s)
}

// checkDrains ends the orders to drain a site whose work is done.
func (c *Controller) checkDrains() {
	if len(c.drains) == 0 || !c.tablesQuiet() {
		return
	}
	for _, t := range c.tasks {
		if t != nil && (t.away || t.kind == taskReturn && t.step == nodes.None) {
			return
		}
	}
	list := c.drains
	c.drains = nil
	for _, d := range list {
		why := ""
		if c.sites[d.site].drained {
			why = c.stillThrough(d.site)
		}
		c.stepEnds(d.step, why)
	}
}

// stillThrough names what still goes through a drained site.
func (c *Controller) stillThrough(s nodes.SiteID) string {
	var names []string
	for i := range c.circuits {
		if k := &c.circuits[i]; carries(k.state) && k.held.through(s) {
			names = append(names, c.k.circuitName(nodes.CircuitID(i)))
		}
	}
	for w := range c.ways {
		if at := c.stationsOf(uint16(w), c.ways[w].chain); len(at) > 1 && slices.Contains(at[1:], s) {
			names = append(names, c.wayName(uint16(w)))
		}
	}
	if len(names) == 0 {
		return ""
	}
	return "no way round it for " + strings.Join(names, ", ")
}
