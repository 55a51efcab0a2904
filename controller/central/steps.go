package central

import (
	"fmt"
	"math/bits"
	"slices"

	"ferrule/controller"
	"ferrule/des"
	"ferrule/nodes"
)

// step is an order and what has become of it.
type step struct {
	order  *controller.Order
	state  controller.StepState
	asked  des.Time
	begun  des.Time
	done   des.Time
	detail string
	before before // what it is about to change
	undoes int    // an order of the controller's own: the step it takes back; -1: none
}

// newStep is an order that has not been given yet.
func newStep(o *controller.Order) step {
	return step{order: o, asked: des.Never, begun: des.Never, done: des.Never, undoes: -1}
}

// ordered takes in an order. Those known in advance come with their number;
// the number of one given while the network runs says something else.
func (c *Controller) ordered(m *nodes.Message) {
	o := m.Ref.(*controller.Order)
	i := int(m.N) - 1
	if i < 0 || i >= len(c.k.orders) || &c.k.orders[i] != o {
		i = len(c.steps)
		c.steps = append(c.steps, newStep(o))
	}
	c.steps[i].asked = c.now
	c.changed = true
}

// wake begins every order whose condition now holds, and ends those whose
// condition can no longer come, until nothing changes.
func (c *Controller) wake() {
	for c.changed {
		c.changed = false
		for i := range c.steps {
			s := &c.steps[i]
			if s.state != controller.Waiting || s.asked == des.Never {
				continue
			}
			holds, never := c.condition(i)
			switch {
			case never != "":
				s.state, s.done, s.detail = controller.Never, c.now, never
				c.x.Note("step never", s.order.Name, never)
				c.changed = true
			case holds && !c.inHand(s.order):
				s.state, s.begun = controller.Working, c.now
				c.take(i)
				c.changed = true
			}
		}
	}
}

// inHand says whether an order must wait because something else is in hand
// for its circuit or its ways.
func (c *Controller) inHand(o *controller.Order) bool {
	switch o.Kind {
	case controller.SetUp, controller.Resize:
		return c.circuits[o.Circuit].task != nodes.None
	case controller.TearDown:
		return c.circuits[o.Circuit].task != nodes.None || c.movesOver(o.Circuit)
	case controller.Move, controller.Return:
		return slices.ContainsFunc(o.Ways, c.moving)
	case controller.Request, controller.Drain, controller.Undrain:
		return false
	default:
		panic("central: unknown kind of order")
	}
}

// movesOver says whether a move onto or off a circuit is in hand.
func (c *Controller) movesOver(id nodes.CircuitID) bool {
	for _, t := range c.tasks {
		if t == nil {
			continue
		}
		for _, chain := range t.chains {
			if slices.Contains(chain, id) {
				return true
			}
		}
		for _, w := range t.ways {
			if slices.Contains(c.ways[w].chain, id) {
				return true
			}
		}
	}
	return false
}

// condition says whether the condition of a step holds, or why it never will.
func (c *Controller) condition(i int) (holds bool, never string) {
	a := &c.steps[i].order.After
	switch a.Kind {
	case controller.Always:
		return true, ""
	case controller.CircuitUp, controller.CircuitDown:
		s := c.circuits[a.Circuit].state
		up := s == controller.Up || s == controller.UpUnprotected
		down := s == controller.Down || s == controller.Restoring
		over := s == controller.Blocked || s == controller.TornDown
		if over && !c.setUpAhead(a.Circuit, i) {
			return false, "circuit " + c.k.circuitName(a.Circuit) + " is " + s.String()
		}
		return a.Kind == controller.CircuitUp && up || a.Kind == controller.CircuitDown && down, ""
	case controller.MoveDone:
		return c.ways[a.Way].chain != nil, ""
	case controller.StepDone, controller.StepOver:
		for j := range c.steps {
			if s := &c.steps[j]; j != i && s.order.Name == a.Step {
				over := s.state == controller.Failed || s.state == controller.Never
				if over && a.Kind == controller.StepOver {
					return true, ""
				}
				if over {
					return false, "step " + a.Step + " " + s.state.String() + ": " + s.detail
				}
				return s.state == controller.Done, ""
			}
		}
		return false, "there is no step " + a.Step
	default:
		panic("central: unknown kind of condition")
	}
}

// setUpAhead says whether a step other than i may still set the circuit up.
func (c *Controller) setUpAhead(id nodes.CircuitID, i int) bool {
	for j := range c.steps {
		s := &c.steps[j]
		open := s.state == controller.Waiting || s.state == controller.Working
		if j != i && open && s.order.Kind == controller.SetUp && s.order.Circuit == id {
			return true
		}
	}
	return false
}

// take begins an order.
func (c *Controller) take(i int) {
	o := c.steps[i].order
	c.x.Note("order", o.Name, o.Kind.String())
	c.remember(&c.steps[i])
	why := ""
	switch o.Kind {
	case controller.SetUp:
		why = c.takeSetUp(i, o)
	case controller.TearDown:
		switch s := c.circuits[o.Circuit].state; s {
		case controller.Planned, controller.Blocked, controller.TornDown:
			why = "the circuit is " + s.String()
		default:
			c.begin(task{kind: taskTearDown, circuit: o.Circuit, step: int32(i)}, rankOrder)
		}
	case controller.Resize:
		why = c.takeResize(i, o)
	case controller.Move, controller.Return:
		why = c.takeMove(i, o)
	case controller.Drain, controller.Undrain:
		why = c.takeDrain(i, o)
	case controller.Request:
		c.enqueue(job{kind: jobRequest, rank: rankOrder, stream: int32(len(c.streams) - 1), step: int32(i), number: uint64(i), hold: o.Hold})
	default:
		panic("central: unknown kind of order")
	}
	if why != "" {
		c.stepEnds(int32(i), why)
	}
}

// takeSetUp begins a set-up, or says why not.
func (c *Controller) takeSetUp(i int, o *controller.Order) string {
	switch s := c.circuits[o.Circuit].state; s {
	case controller.Planned, controller.Blocked, controller.TornDown:
		c.enter(o.Circuit, controller.SettingUp)
		c.begin(task{kind: taskSetUp, circuit: o.Circuit, step: int32(i)}, rankOrder)
		return ""
	default:
		return "the circuit is " + s.String()
	}
}

// takeResize begins a resize, or says why not.
func (c *Controller) takeResize(i int, o *controller.Order) string {
	p := &c.k.plant.Circuits[o.Circuit]
	if p.Channel {
		c.x.Note("resize refused", p.Name, "a whole channel has one size")
		return "a whole channel cannot be resized"
	}
	if o.Slots < 1 {
		return fmt.Sprintf("%d slots are no size", o.Slots)
	}
	r := o.Rate
	if r == 0 {
		hi, lo := bits.Mul64(uint64(p.Rate), uint64(o.Slots))
		q, _ := bits.Div64(hi, lo, uint64(max(1, p.Slots)))
		r = nodes.Rate(q)
	}
	c.begin(task{kind: taskResize, circuit: o.Circuit, step: int32(i), slots: o.Slots, rate: r}, rankOrder)
	return ""
}

// takeMove begins a move or a return, or says why not.
func (c *Controller) takeMove(i int, o *controller.Order) string {
	t := task{kind: taskReturn, circuit: nodes.None, step: int32(i), ways: o.Ways, keep: o.KeepOrder}
	if o.Kind == controller.Move {
		t.kind = taskMove
		for _, w := range o.Ways {
			chain, ok := c.k.orient(w, o.Circuits)
			if !ok {
				return c.wayName(w) + ": the circuits do not join its ends"
			}
			t.chains = append(t.chains, chain)
		}
	}
	c.begin(t, rankOrder)
	return ""
}

// wayName names a way in messages.
func (c *Controller) wayName(w uint16) string {
	agg, d := nodes.AggOf(w)
	if d == nodes.Out {
		return c.k.plant.Aggregates[agg].Name + ".out"
	}
	return c.k.plant.Aggregates[agg].Name + ".back"
}

// stepEnds closes a step, as done when failed is empty.
func (c *Controller) stepEnds(i int32, failed string) {
	s := &c.steps[i]
	s.state, s.done, s.detail = controller.Done, c.now, failed
	if failed != "" {
		s.state = controller.Failed
	}
	c.x.Note("step "+s.state.String(), s.order.Name, failed)
	c.changed = true
	switch {
	case !s.order.Undo:
	case c.undoing && failed == "":
		c.takeBack(int(i))
	case !c.undoing && failed != "":
		c.undo(i)
	}
}
