package central

import (
	"fmt"

	"ferrule/controller"
	"ferrule/nodes"
)

// before is what an order may have to restore when it is undone.
type before struct {
	slots  int
	rate   nodes.Rate
	chains [][]nodes.CircuitID // of its ways
}

// remember notes what an order is about to change.
func (c *Controller) remember(s *step) {
	switch o := s.order; o.Kind {
	case controller.Resize:
		k := &c.circuits[o.Circuit]
		s.before.slots, s.before.rate = k.slots, k.whole
	case controller.Move, controller.Return:
		for _, w := range o.Ways {
			s.before.chains = append(s.before.chains, c.ways[w].chain)
		}
	case controller.SetUp, controller.TearDown, controller.Request, controller.Drain, controller.Undrain:
	default:
		panic("central: unknown kind of order")
	}
}

// undo takes back, the last first, what the steps that belong together have
// done, when one of them has failed, and what is still to come is not begun.
func (c *Controller) undo(failed int32) {
	why := c.steps[failed].order.Name + " failed"
	c.undoing = true
	c.x.Note("undo", c.steps[failed].order.Name, c.steps[failed].detail)
	var done []int
	for i := range c.steps {
		s := &c.steps[i]
		if !s.order.Undo {
			continue
		}
		switch s.state {
		case controller.Waiting:
			s.state, s.done, s.detail = controller.Never, c.now, why
		case controller.Done:
			done = append(done, i)
		case controller.Working, controller.Failed, controller.Never:
		default:
			panic("central: unknown state of a step")
		}
	}
	for len(done) > 0 { // the last first, by the instant at which they were done
		last := 0
		for j := range done {
			if c.steps[done[j]].done >= c.steps[done[last]].done {
				last = j
			}
		}
		c.takeBack(done[last])
		done = append(done[:last], done[last+1:]...)
	}
}

// takeBack gives the orders that undo a step, each behind the one before it.
func (c *Controller) takeBack(i int) {
	s := &c.steps[i]
	o := controller.Order{Name: "undo of " + s.order.Name, Circuit: s.order.Circuit, KeepOrder: s.order.KeepOrder, Site: s.order.Site}
	switch s.order.Kind {
	case controller.SetUp:
		o.Kind = controller.TearDown
	case controller.TearDown:
		o.Kind = controller.SetUp
	case controller.Resize:
		o.Kind, o.Slots, o.Rate = controller.Resize, s.before.slots, s.before.rate
	case controller.Drain:
		o.Kind = controller.Undrain
	case controller.Undrain:
		o.Kind = controller.Drain
	case controller.Request:
		return // it ends by itself
	case controller.Move, controller.Return:
		c.moveBack(i, o)
		return
	default:
		panic("central: unknown kind of order")
	}
	c.orderAgain(o, i)
}

// moveBack gives the orders that bring the ways of a step back to the chains
// they had.
func (c *Controller) moveBack(step int, o controller.Order) {
	was, chains, name := c.steps[step].order, c.steps[step].before.chains, o.Name
	for i, w := range was.Ways {
		o.Name, o.Ways, o.Circuits = name, []uint16{w}, chains[i]
		if len(was.Ways) > 1 {
			o.Name = fmt.Sprintf("%s, %s", name, c.wayName(w))
		}
		o.Kind = controller.Move
		if chains[i] == nil {
			o.Kind = controller.Return
		}
		c.orderAgain(o, step)
	}
}

// orderAgain gives an order of the controller's own, which takes back a step,
// to be taken up once its last one is over.
func (c *Controller) orderAgain(o controller.Order, step int) {
	if n := len(c.steps); c.steps[n-1].undoes >= 0 {
		o.After = controller.Condition{Kind: controller.StepOver, Step: c.steps[n-1].order.Name}
	}
	s := newStep(&o)
	s.asked, s.undoes = c.now, step
	c.steps = append(c.steps, s)
	c.changed = true
}
