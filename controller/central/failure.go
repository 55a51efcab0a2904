package central

import (
	"slices"
	"strings"

	"ferrule/controller"
	"ferrule/nodes"
)

// endOf says which end of a pair site s is.
func endOf(ends [2]nodes.SiteID, s nodes.SiteID) int {
	if ends[1] == s {
		return 1
	}
	return 0
}

// fibreAlarm takes in what one end of a fibre says of its light.
func (c *Controller) fibreAlarm(m *nodes.Message) {
	f := &c.fibres[m.Fibre]
	e := endOf(c.k.plant.Fibres[m.Fibre].Ends, m.From)
	if m.A <= f.heard[e] {
		return // a repetition
	}
	was := f.dead()
	f.heard[e] = m.A
	f.dark[e] = m.B == alarmLost
	switch dead := f.dead(); {
	case dead && !was:
		c.fibreDies(m.Fibre, m.From)
	case was && !dead:
		f.since = c.now
		c.fibreLives(m.Fibre)
	}
}

// fibreDies takes every circuit over f for down: one report for one cut.
func (c *Controller) fibreDies(f nodes.FibreID, from nodes.SiteID) {
	var hit []nodes.CircuitID
	for i := range c.circuits {
		if k := &c.circuits[i]; k.held.over(f) && (carries(k.state) || k.state == controller.Down) {
			hit = append(hit, nodes.CircuitID(i))
		}
	}
	c.seeWhoIsCutOff()
	c.x.Note("fibre down", c.k.fibreName(f), "told by "+c.k.siteName(from)+"; "+c.counted(hit))
	for _, id := range hit {
		k := &c.circuits[id]
		if c.k.cfg.PerCircuit && !k.searching {
			continue // its ends will tell
		}
		c.located(id)
		if told := c.k.plant.Circuits[id].HoldOff == 0; k.held.copy != nil {
			c.assess(id, told)
		} else {
			c.fails(id, told)
		}
	}
	for i := range c.tasks {
		if t := c.tasks[i]; t != nil && t.h.over(f) {
			c.crankBack(int32(i), "fibre "+c.k.fibreName(f)+" went dark")
		}
	}
	c.gather(slices.DeleteFunc(hit, func(id nodes.CircuitID) bool { return c.circuits[id].state != controller.Down }))
}

// fails takes a circuit for down. With told, the packet layer is told too: its
// ports stop and nothing is routed over it.
func (c *Controller) fails(id nodes.CircuitID, told bool) {
	k := &c.circuits[id]
	if carries(k.state) {
		if k.task != nodes.None {
			c.interrupt(k.task)
		}
		k.class = c.carriedClasses()[id]
		c.enter(id, controller.Down)
	}
	if told && k.usable {
		k.usable = false
		if c.k.plant.Circuits[id].Carries == nodes.CarriesRouted {
			c.wantTables(rankTables)
		}
	}
}

// interrupt ends what is in hand for a circuit that fails. A return to the
// first route whose ends are being told goes on: it mends the fault.
func (c *Controller) interrupt(id int32) {
	switch t := c.tasks[id]; t.kind {
	case taskRevert:
		if t.phase == phaseActivate {
			return
		}
		c.giveUp(id)
		c.end(id, "")
	case taskResize:
		c.resizeFails(id, "the circuit went down")
	case taskTearDown, taskSetUp, taskRestore, taskRevive, taskMove, taskReturn:
	default:
		panic("central: unknown kind of task")
	}
}

// restore seeks a new route, without the fibres that avoid names, for each
// circuit of list that is down and is to have one. The old routes of all are
// given up first.
func (c *Controller) restore(list []nodes.CircuitID, avoid []nodes.FibreID) {
	var todo []nodes.CircuitID
	for _, id := range list {
		k := &c.circuits[id]
		if k.state != controller.Down || c.k.plant.Circuits[id].Recovery != nodes.RecoveryRestore {
			continue
		}
		if why := c.unfit(id); why != "" {
			k.reason = why
			continue
		}
		if k.task != nodes.None {
			if c.tasks[k.task].kind != taskRevive {
				continue
			}
			c.end(k.task, "")
		}
		if k.held.holds() {
			c.unreserve(&k.held)
			c.releaseAll(id, &k.held, k.held.parts(), true, ownerNone, 0)
			k.held = holding{}
		}
		c.enter(id, controller.Restoring)
		todo = append(todo, id)
	}
	for _, id := range todo {
		c.begin(task{kind: taskRestore, circuit: id, step: nodes.None, avoid: avoided{fibres: slices.Clone(avoid)}}, rankRestore)
	}
}

// sooner is the order in which circuits are restored: set-up priority, then
// the highest class carried, then bandwidth, more first, then name.
func (c *Controller) sooner(a, b nodes.CircuitID) bool {
	p, q := &c.k.plant.Circuits[a], &c.k.plant.Circuits[b]
	if p.Setup != q.Setup {
		return p.Setup < q.Setup
	}
	if x, y := c.circuits[a].class, c.circuits[b].class; x != y {
		return x < y
	}
	if p.Payload != q.Payload {
		return p.Payload > q.Payload
	}
	if p.Name != q.Name {
		return p.Name < q.Name
	}
	return a < b
}

// byImportance sorts circuits as they are restored.
func (c *Controller) byImportance(list []nodes.CircuitID) {
	slices.SortFunc(list, func(a, b nodes.CircuitID) int {
		if c.sooner(a, b) {
			return -1
		}
		return b2i(a != b)
	})
}

// circuitAlarm takes in what one end of a circuit says of its light.
func (c *Controller) circuitAlarm(m *nodes.Message) {
	k := &c.circuits[m.Circuit]
	e := endOf(c.k.plant.Circuits[m.Circuit].Ends, m.From)
	r := k.routeOf(m.N)
	if seen := &k.heard[max(r, 0)][e]; r != nodes.None {
		if m.A <= *seen {
			return // a repetition
		}
		*seen = m.A
	}
	if r == nodes.None {
		if k.task != nodes.None && m.B == alarmLost && c.tasks[k.task].phase == phaseActivate && c.tasks[k.task].h.is(m.N) {
			c.crankBack(k.task, "no light at "+c.k.siteName(m.From))
		}
		return // else of a route that is no longer in use
	}
	k.dark[r][e] = m.B == alarmLost
	if k.held.copy != nil {
		c.copyAlarm(m, e)
		return
	}
	if m.B == alarmBack {
		c.revive(m.Circuit)
		return
	}
	placed := !carries(k.state)
	c.fails(m.Circuit, true)
	if !k.dark[0][1-e] {
		c.stopFarEnd(m, e) // it sends into the dark, and cannot know
	}
	if placed {
		return // known already: absorbed
	}
	if c.hasDead(k.held.route) {
		c.gather([]nodes.CircuitID{m.Circuit})
		return
	}
	if c.k.plant.Circuits[m.Circuit].Recovery == nodes.RecoveryRestore {
		k.searching = true
		c.x.Pending(1)
	}
	later(c.x, c.now+c.k.cfg.Retry, nodes.Message{Op: opUnplaced, Circuit: m.Circuit, N: m.N})
}

// located ends the wait for a fibre that accounts for what a circuit suffers.
func (c *Controller) located(id nodes.CircuitID) {
	if k := &c.circuits[id]; k.searching {
		k.searching = false
		c.x.Pending(-1)
	}
}

// unplaced deals with a circuit that has been down for a while without a fibre
// to account for it: it is restored without any fibre of its old route.
func (c *Controller) unplaced(id nodes.CircuitID, incarnation int32) {
	k := &c.circuits[id]
	if k.active != incarnation || k.state != controller.Down || !k.held.holds() || c.hasDead(k.held.route) {
		return
	}
	c.located(id)
	c.x.Note("light lost", c.k.circuitName(id), "no fibre accounts for it after "+people(c.k.cfg.Retry))
	c.restore([]nodes.CircuitID{id}, k.held.route)
}

// hasDead says whether a fibre of a route is believed dead.
func (c *Controller) hasDead(route []nodes.FibreID) bool {
	return slices.ContainsFunc(route, func(f nodes.FibreID) bool { return c.fibres[f].dead() })
}

// revive asks both ends of a circuit that is down to send again on its old
// route, once both have light.
func (c *Controller) revive(id nodes.CircuitID) {
	k := &c.circuits[id]
	if k.state != controller.Down || k.task != nodes.None || !k.held.holds() || k.endsDark() || c.unfit(id) != "" {
		return
	}
	c.begin(task{kind: taskRevive, circuit: id, step: nodes.None}, rankOrder)
}

// revived takes a circuit for up on its old route.
func (c *Controller) revived(id int32) {
	t := c.tasks[id]
	k := &c.circuits[t.circuit]
	c.end(id, "")
	if k.endsDark() {
		return
	}
	c.comesUp(t.circuit, "up again", "light is back on "+c.routeList(&k.held), false)
}

// fibreLives takes a fibre for lit, and tries again what could not be done
// without it.
func (c *Controller) fibreLives(f nodes.FibreID) {
	c.x.Note("fibre up", c.k.fibreName(f), "light is back both ways")
	c.repay()
	c.resendTables()
	c.ask()
	for i := range c.circuits {
		id := nodes.CircuitID(i)
		k := &c.circuits[i]
		p := &c.k.plant.Circuits[i]
		switch {
		case k.state == controller.Down:
			c.revive(id) // unless an end has told that it is dark
		case k.held.copy != nil && carries(k.state):
			c.assess(id, true)
		case k.state == controller.Up && p.Recovery == nodes.RecoveryRestore && !k.held.over(f) && slices.Contains(k.home, f):
			c.homeMayReturn(id)
		}
	}
	c.tryAgain()
}

// seeWhoIsCutOff names the sites that no fibre believed lit joins to the
// controller's.
func (c *Controller) seeWhoIsCutOff() {
	p := c.k.plant
	joined := make([]bool, len(p.Sites))
	joined[c.k.cfg.Site] = true
	for range p.Sites {
		for f := range p.Fibres {
			if e := p.Fibres[f].Ends; !c.fibres[f].dead() && joined[e[0]] != joined[e[1]] {
				joined[e[0]], joined[e[1]] = true, true
			}
		}
	}
	var names []string
	for s := range joined {
		if !joined[s] {
			names = append(names, c.k.siteName(nodes.SiteID(s)))
		}
	}
	if len(names) > 0 && !c.deaf {
		c.x.Note("cut off", c.k.siteName(c.k.cfg.Site), "no lit way to "+strings.Join(names, ", "))
	}
	c.deaf = c.deaf || len(names) > 0
}

// ask has every site say again what has gone unheard, when some command has
// gone without an answer: its site may have been cut off, or this one.
func (c *Controller) ask() {
	if !c.deaf {
		return
	}
	c.deaf = false
	c.seeWhoIsCutOff()
	for s := range c.k.plant.Sites {
		c.command(nodes.SiteID(s), nodes.Message{Op: opAsk, Settles: true}, ownerAsk, 0)
	}
}

// homeMayReturn lets wait-to-restore of a restored circuit begin, or says that
// it stays where it is.
func (c *Controller) homeMayReturn(id nodes.CircuitID) {
	if !c.k.cfg.Revert {
		c.x.Note("stays", c.k.circuitName(id), "on its new route: "+c.fibreList(c.circuits[id].held.route))
		return
	}
	later(c.x, c.now+c.k.cfg.WaitToRestore, nodes.Message{Op: opWhole, Circuit: id, N: c.circuits[id].active})
}

// whole brings a restored circuit back to its first route, if that has been
// whole and the circuit where it was for all of wait-to-restore.
func (c *Controller) whole(id nodes.CircuitID, incarnation int32) {
	k := &c.circuits[id]
	if k.state != controller.Up || k.task != nodes.None || k.active != incarnation {
		return
	}
	for _, f := range k.home {
		if x := &c.fibres[f]; x.dead() || c.now-x.since < c.k.cfg.WaitToRestore {
			return
		}
	}
	c.begin(task{kind: taskRevert, circuit: id, step: nodes.None}, rankOrder)
}
