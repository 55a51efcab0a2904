package central

import (
	"fmt"
	"slices"

	"ferrule/controller"
	"ferrule/des"
	"ferrule/nodes"
)

// way is what the controller believes of one way of an aggregate.
type way struct {
	chain []nodes.CircuitID // from its origin on; nil: by the tables
	left  []nodes.SiteID    // sites still steered for a chain it has left
	swept int64             // number of the sweep that runs for left
}

// setChain notes that a way goes over chain.
func (c *Controller) setChain(w uint16, chain []nodes.CircuitID) {
	c.ways[w].chain = chain
	c.classes = nil
	c.changed = true
}

// orient turns a chain so that it joins the ends of a way.
func (k *known) orient(w uint16, chain []nodes.CircuitID) ([]nodes.CircuitID, bool) {
	agg, d := nodes.AggOf(w)
	from, to := k.plant.Aggregates[agg].Origin(d), k.plant.Aggregates[agg].Target(d)
	out := slices.Clone(chain)
	if k.joins(out, from, to) {
		return out, true
	}
	slices.Reverse(out)
	return out, k.joins(out, from, to)
}

// joins says whether chain leads from from to to.
func (k *known) joins(chain []nodes.CircuitID, from, to nodes.SiteID) bool {
	at := from
	for _, id := range chain {
		e := k.plant.Circuits[id].Ends
		switch at {
		case e[0]:
			at = e[1]
		case e[1]:
			at = e[0]
		default:
			return false
		}
	}
	return at == to && len(chain) > 0
}

// stationsOf lists where each circuit of a way's chain begins.
func (c *Controller) stationsOf(w uint16, chain []nodes.CircuitID) []nodes.SiteID {
	agg, d := nodes.AggOf(w)
	at := c.k.plant.Aggregates[agg].Origin(d)
	var list []nodes.SiteID
	for _, id := range chain {
		list = append(list, at)
		e := c.k.plant.Circuits[id].Ends
		at = e[0] + e[1] - at
	}
	return list
}

// steer decides a move or a return: within the chains first, so that they lead
// to their ends before anything enters them.
func (c *Controller) steer(id int32) {
	t := c.tasks[id]
	t.phase, t.waiting = phaseJunction, 0
	if t.kind == taskMove {
		for _, chain := range t.chains {
			for _, o := range chain {
				switch s := c.circuits[o].state; s {
				case controller.Up, controller.UpUnprotected, controller.Resizing, controller.Down, controller.Restoring:
				case controller.Planned, controller.SettingUp, controller.TearingDown, controller.TornDown, controller.Blocked:
					for _, w := range t.ways {
						c.leave(w, nil)
					}
					c.end(id, "circuit "+c.k.circuitName(o)+" is "+s.String())
					return
				default:
					panic("central: unknown state of a circuit")
				}
			}
		}
		for i, w := range t.ways {
			for j, s := range c.stationsOf(w, t.chains[i]) {
				if j > 0 {
					t.waiting++
					c.command(s, nodes.Message{Op: opSteer, Settles: true, Way: w, Circuit: t.chains[i][j]}, ownerTask, id)
				}
			}
		}
	}
	if t.waiting == 0 {
		c.steerGoesOn(id)
	}
}

// steerGoesOn steers the ways at their origins, and ends the task after that.
func (c *Controller) steerGoesOn(id int32) {
	t := c.tasks[id]
	if t.phase == phaseJunction {
		t.phase, t.waiting = phaseOrigin, len(t.ways)
		for i, w := range t.ways {
			m := nodes.Message{Op: opSteer, Settles: true, Way: w, Circuit: nodes.None}
			var chain []nodes.CircuitID
			if t.kind == taskMove {
				chain = t.chains[i]
				m.Circuit = chain[0]
			}
			if t.keep {
				m.B = int64(c.holdFor(w, chain))
			}
			agg, d := nodes.AggOf(w)
			c.command(c.k.plant.Aggregates[agg].Origin(d), m, ownerTask, id)
		}
		return
	}
	for i, w := range t.ways {
		old := c.ways[w].chain
		var chain []nodes.CircuitID
		if t.kind == taskMove {
			chain = t.chains[i]
		}
		c.setChain(w, chain)
		c.leave(w, old)
	}
	what, name := c.taskName(t)
	c.x.Note(what+" done", name, fmt.Sprintf("%d ways after %s", len(t.ways), people(c.now-t.begun)))
	c.end(id, "")
}

// taskName words what a move or a return is for.
func (c *Controller) taskName(t *task) (what, name string) {
	if t.step == nodes.None {
		return controller.Return.String(), c.wayName(t.ways[0])
	}
	o := c.steps[t.step].order
	return o.Kind.String(), o.Name
}

// steerFails undoes a move or a return that could not be brought to its end.
func (c *Controller) steerFails(id int32, why string) {
	t := c.tasks[id]
	c.withdraw(ownerTask, id)
	for i, w := range t.ways {
		if t.phase == phaseOrigin {
			m := nodes.Message{Op: opSteer, Settles: true, Way: w, Circuit: nodes.None}
			if chain := c.ways[w].chain; chain != nil {
				m.Circuit = chain[0]
			}
			agg, d := nodes.AggOf(w)
			c.command(c.k.plant.Aggregates[agg].Origin(d), m, ownerNone, 0)
		}
		if t.kind == taskMove {
			c.leave(w, t.chains[i])
		} else {
			c.leave(w, nil)
		}
	}
	_, name := c.taskName(t)
	c.x.Note("move failed", name, why)
	c.end(id, why)
}

// leave has the sites within a chain that a way goes over no longer forget it,
// once what is under way there has arrived.
func (c *Controller) leave(w uint16, chain []nodes.CircuitID) {
	y := &c.ways[w]
	if len(chain) > 1 {
		y.left = append(y.left, c.stationsOf(w, chain)[1:]...)
	}
	if len(y.left) == 0 {
		return
	}
	c.number++
	y.swept = c.number
	later(c.x, c.now+c.chainDelay(chain)+c.k.cfg.OrderBound, nodes.Message{Op: opSweep, Settles: true, Way: w, A: y.swept})
}

// sweep ends the steering of a way at sites where it is of no use any more. A
// move that is in hand needs some of it, and sweeps when it is done.
func (c *Controller) sweep(w uint16, number int64) {
	y := &c.ways[w]
	if y.swept != number || c.moving(w) {
		return
	}
	in := c.stationsOf(w, y.chain)
	for _, s := range y.left {
		if !slices.Contains(in, s) {
			c.command(s, nodes.Message{Op: opSteer, Settles: true, Way: w, Circuit: nodes.None}, ownerNone, 0)
		}
	}
	y.left = nil
}

// moving says whether a move or a return of a way is in hand.
func (c *Controller) moving(w uint16) bool {
	return slices.ContainsFunc(c.tasks, func(t *task) bool { return t != nil && slices.Contains(t.ways, w) })
}

// chainDelay is the delay of light over a chain.
func (c *Controller) chainDelay(chain []nodes.CircuitID) (d des.Time) {
	for _, id := range chain {
		d += c.circuits[id].delay
	}
	return d
}

// holdFor is how long packets of a way must be held at its origin so that none
// overtakes another as it moves to chain: what the old path takes longer than
// the new one, in the picture of the controller, and a bound on what the
// picture does not know.
func (c *Controller) holdFor(w uint16, chain []nodes.CircuitID) des.Time {
	return max(0, c.pathDelay(w, c.ways[w].chain)-c.pathDelay(w, chain)) + c.k.cfg.OrderBound
}

// pathDelay is the delay of light over a chain, or over the longest of the
// ways that the tables offer when chain is nil.
func (c *Controller) pathDelay(w uint16, chain []nodes.CircuitID) des.Time {
	if chain != nil {
		return c.chainDelay(chain)
	}
	agg, d := nodes.AggOf(w)
	a := &c.k.plant.Aggregates[agg]
	memo := make([]des.Time, len(c.k.plant.Sites))
	for i := range memo {
		memo[i] = -1
	}
	return c.longest(a.Origin(d), a.Target(d), memo)
}

// longest is the delay of the longest way from s to to by the tables.
func (c *Controller) longest(s, to nodes.SiteID, memo []des.Time) des.Time {
	if s == to {
		return 0
	}
	if memo[s] >= 0 {
		return memo[s]
	}
	memo[s] = 0 // also ends a loop, which tables made together do not have
	var most des.Time
	for _, id := range c.nextAt(s, to) {
		e := c.k.plant.Circuits[id].Ends
		most = max(most, c.circuits[id].delay+c.longest(e[0]+e[1]-s, to, memo))
	}
	memo[s] = most
	return most
}

// nextAt is what the table of s, as far as the controller knows, offers
// towards to.
func (c *Controller) nextAt(s, to nodes.SiteID) []nodes.CircuitID {
	if t := c.tables[s]; t != nil {
		return t.Next[to]
	}
	return nil
}

// carriedClasses is the highest class that each circuit carries by the tables
// and moves in force; the number of classes when it carries none.
func (c *Controller) carriedClasses() []nodes.ClassID {
	if c.classes != nil {
		return c.classes
	}
	p := c.k.plant
	list := make([]nodes.ClassID, len(p.Circuits))
	for i := range list {
		list[i] = nodes.ClassID(len(p.Classes))
	}
	seen := make([]int, len(p.Sites))
	for w := range c.ways {
		agg, d := nodes.AggOf(uint16(w))
		a := &p.Aggregates[agg]
		if a.OneWay && d == nodes.Back {
			continue
		}
		for _, id := range c.ways[w].chain {
			list[id] = min(list[id], a.Class)
		}
		if c.ways[w].chain == nil {
			c.carry(list, a.Class, a.Origin(d), a.Target(d), seen, w+1)
		}
	}
	c.classes = list
	return list
}

// carry marks the circuits that the tables offer from s to to with a class.
func (c *Controller) carry(list []nodes.ClassID, class nodes.ClassID, s, to nodes.SiteID, seen []int, mark int) {
	if s == to || seen[s] == mark {
		return
	}
	seen[s] = mark
	for _, id := range c.nextAt(s, to) {
		list[id] = min(list[id], class)
		e := c.k.plant.Circuits[id].Ends
		c.carry(list, class, e[0]+e[1]-s, to, seen, mark)
	}
}
