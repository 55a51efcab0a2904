package central

import (
	"fmt"
	"math/bits"
	"slices"

	"ferrule/controller"
	"ferrule/controller/path"
	"ferrule/nodes"
)

// search is what a route is looked for with.
type search struct {
	along []nodes.FibreID // the route asked for; nil: chosen
	avoid *avoided
	width []int64 // slots that may be taken on each fibre
	slots int     // wanted on each
}

// mayLose says whether a circuit can be pushed out by a set-up of priority s:
// one of a lower holding priority, with nothing in hand (RFC 3209 section
// 4.7). Whole channels are never pushed out.
func (c *Controller) mayLose(id nodes.CircuitID, s uint8) bool {
	k := &c.circuits[id]
	p := &c.k.plant.Circuits[id]
	return p.Hold > s && k.task == nodes.None && k.held.holds() && !p.Channel
}

// unreserved adds up for each fibre what a set-up of priority s may take: what
// is free, and what circuits of lower holding priority have (RFC 3209 section
// 4.7.3). A circuit does not push out itself.
func (c *Controller) unreserved(s uint8, self nodes.CircuitID) []int64 {
	width := slices.Clone(c.free)
	for i := range c.circuits {
		if id := nodes.CircuitID(i); id != self && c.mayLose(id, s) {
			for _, f := range c.circuits[i].held.routes() {
				width[f] += int64(c.circuits[i].held.slots)
			}
		}
	}
	return width
}

// victims chooses who must go so that h fits: of lowest holding priority first,
// among equals the one that would be restored last, until enough is free on
// every fibre; then whoever has turned out to be unnecessary is spared, the
// most important first.
func (c *Controller) victims(h *holding, s uint8, self nodes.CircuitID) []nodes.CircuitID {
	var order []nodes.CircuitID
	for i := range c.circuits {
		if id := nodes.CircuitID(i); id != self && c.mayLose(id, s) {
			order = append(order, id)
		}
	}
	slices.SortFunc(order, func(a, b nodes.CircuitID) int {
		if x, y := c.k.plant.Circuits[a].Hold, c.k.plant.Circuits[b].Hold; x != y {
			return int(y) - int(x)
		}
		if c.sooner(a, b) {
			return 1
		}
		return -1
	})
	free := slices.Clone(c.free)
	need := func(f nodes.FibreID) bool { return free[f] < int64(h.slots) }
	var chosen []nodes.CircuitID
	for _, id := range order {
		k := &c.circuits[id].held
		if !slices.ContainsFunc(h.routes(), func(f nodes.FibreID) bool { return need(f) && k.over(f) }) {
			continue
		}
		chosen = append(chosen, id)
		for _, f := range k.routes() {
			free[f] += int64(k.slots)
		}
	}
	for i := len(chosen) - 1; i >= 0; i-- {
		k := &c.circuits[chosen[i]].held
		for _, f := range k.routes() {
			free[f] -= int64(k.slots)
		}
		if !slices.ContainsFunc(h.routes(), need) {
			chosen = slices.Delete(chosen, i, i+1)
			continue
		}
		for _, f := range k.routes() {
			free[f] += int64(k.slots)
		}
	}
	return chosen
}

// pushOut takes from circuits all they hold, for the sake of circuit by. Their
// ends stop sending; those to be restored are, behind it.
func (c *Controller) pushOut(list []nodes.CircuitID, by nodes.CircuitID) {
	for _, id := range list {
		k := &c.circuits[id]
		k.preempted++
		k.reason = "pre-empted by " + c.k.circuitName(by)
		c.x.Note("pre-empted", c.k.circuitName(id), fmt.Sprintf("%d slots, holding priority %d, by %s of set-up priority %d",
			k.held.slots, c.k.plant.Circuits[id].Hold, c.k.circuitName(by), c.k.plant.Circuits[by].Setup))
		for _, s := range c.k.plant.Circuits[id].Ends {
			c.command(s, nodes.Message{Op: opPortDown, Settles: true, Circuit: id, N: k.active}, ownerNone, 0)
		}
		c.unreserve(&k.held)
		c.releaseAll(id, &k.held, k.held.parts(), true, ownerNone, 0)
		k.held = holding{}
		c.fails(id, true)
	}
}

// seek finds a route for the task, with what is free if that will do; else, by
// pushing out circuits of lower holding priority; else, for one that is
// restored and may shrink, with fewer slots. It returns whom to push out.
func (c *Controller) seek(t *task, along []nodes.FibreID) (h holding, out []nodes.CircuitID, why string) {
	k := &c.circuits[t.circuit]
	p := &c.k.plant.Circuits[t.circuit]
	want := search{along: along, avoid: &t.avoid, width: c.free, slots: k.slots}
	if h, why = c.find(t.circuit, &want); why == "" || p.Channel || t.kind == taskRevert {
		return h, nil, why
	}
	want.width = c.unreserved(p.Setup, t.circuit)
	if more, no := c.find(t.circuit, &want); no == "" {
		return more, c.victims(&more, p.Setup, t.circuit), ""
	}
	if !p.Shrink || t.kind != taskRestore || p.Recovery == nodes.RecoveryOnePlus {
		return h, nil, why
	}
	want.width, want.slots = c.free, 1
	if less, no := c.find(t.circuit, &want); no == "" {
		less.slots = k.slots
		for _, f := range less.route {
			less.slots = min(less.slots, int(c.free[f]))
		}
		return less, nil, ""
	}
	return h, nil, why
}

// rateFor is what the ports of a circuit send at with so many slots.
func (c *Controller) rateFor(id nodes.CircuitID, slots int) nodes.Rate {
	k := &c.circuits[id]
	if slots == k.slots || k.slots == 0 {
		return k.whole
	}
	hi, lo := bits.Mul64(uint64(k.whole), uint64(slots))
	q, _ := bits.Div64(hi, lo, uint64(k.slots))
	return max(1, nodes.Rate(q))
}

// objective is how the query of a circuit chooses; one that shrinks goes where
// most is free.
func (c *Controller) objective(p *nodes.Circuit, shrunk bool) path.Objective {
	if shrunk {
		return path.Widest
	}
	switch p.Choose {
	case nodes.ChooseLeastDelay, nodes.ChooseApart:
		return path.LeastCost
	case nodes.ChooseFewestRouters:
		return path.FewestHops
	case nodes.ChooseMostSpare:
		return path.Widest
	default:
		panic("central: unknown choice of route")
	}
}

// gather has the circuits of list restored, when no more reports of the same
// fault are expected: after the correlation window, in order of importance.
func (c *Controller) gather(list []nodes.CircuitID) {
	if c.k.cfg.Correlate == 0 {
		c.byImportance(list)
		c.restore(list, nil)
		return
	}
	if len(list) == 0 {
		return
	}
	if len(c.gathered) == 0 {
		c.x.Pending(1)
		later(c.x, c.now+c.k.cfg.Correlate, nodes.Message{Op: opGathered})
	}
	for _, id := range list {
		if !slices.Contains(c.gathered, id) {
			c.gathered = append(c.gathered, id)
		}
	}
}

// gatherEnds restores what was gathered.
func (c *Controller) gatherEnds() {
	list := c.gathered
	c.gathered = nil
	c.x.Pending(-1)
	c.x.Note("fault reported", "", fmt.Sprintf("%d circuits gathered in %s", len(list), people(c.k.cfg.Correlate)))
	c.byImportance(list)
	c.restore(list, nil)
}

// tryAgain seeks routes for all circuits that wait for one, after something has
// become free, and lets those that have shrunk grow again if all of it is there.
func (c *Controller) tryAgain() {
	var again []nodes.CircuitID
	for i := range c.circuits {
		k := &c.circuits[i]
		if k.state == controller.Down && !k.held.holds() && k.task == nodes.None && c.k.plant.Circuits[i].Recovery == nodes.RecoveryRestore {
			again = append(again, nodes.CircuitID(i))
		}
	}
	c.byImportance(again)
	c.restore(again, nil)
	for i := range c.circuits {
		k := &c.circuits[i]
		more := int64(k.slots - k.held.slots)
		short := func(f nodes.FibreID) bool { return c.free[f] < more }
		if carries(k.state) && k.task == nodes.None && k.held.channels == nil && more > 0 && len(again) == 0 && !slices.ContainsFunc(k.held.routes(), short) {
			c.begin(task{kind: taskResize, circuit: nodes.CircuitID(i), step: nodes.None, slots: k.slots, rate: k.whole}, rankOrder)
		}
	}
}
