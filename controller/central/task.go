package central

import (
	"fmt"
	"slices"

	"ferrule/controller"
	"ferrule/des"
	"ferrule/nodes"
)

// taskKind says what a task is about.
type taskKind uint8

// Kinds of task.
const (
	taskSetUp   taskKind = iota // a circuit that an order asks for
	taskRestore                 // a new route for one whose light is lost
	taskRevert                  // the first route again for a restored one
	taskRevive                  // the same route: its light is back
	taskTearDown
	taskResize
	taskMove
	taskReturn
)

// phase says how far a task has come.
type phase uint8

// Phases of tasks, in the order in which a task goes through those it has.
const (
	phaseDecide   phase = iota // in the queue of jobs
	phaseUnroute               // its traffic is being sent elsewhere
	phaseDrain                 // its ports send what waits
	phaseEmpty                 // what is under way arrives
	phaseConnect               // cross-connects are at work
	phaseActivate              // its ends are told
	phaseJunction              // ways are steered within chains
	phaseOrigin                // ways are steered where they begin
)

// task is something in hand that takes messages and time.
type task struct {
	kind    taskKind
	phase   phase
	circuit nodes.CircuitID // None for moves
	step    int32           // of the order behind it, or None
	number  int64           // tells it from others in the same place
	waiting int             // commands without an answer
	begun   des.Time
	tries   int // set-ups tried
	avoid   avoided
	away    bool // revert: not to the first route, but off a drained site

	h    holding // what is being set up; reserved from phaseConnect on
	sent int     // sites commanded, in sequence

	slots int // resize: asked for
	had   int // resize: before
	rate  nodes.Rate

	ways   []uint16 // moves
	chains [][]nodes.CircuitID
	keep   bool
}

// settles says whether the network is unsettled while t is in hand. What a
// policy decides for itself is no consequence of an act: it may go on for ever.
func (t *task) settles() bool { return t.kind != taskResize || t.step != nodes.None }

// begin takes a task in hand and lets it wait to be decided.
func (c *Controller) begin(t task, rank uint8) {
	c.number++
	t.number, t.begun = c.number, c.now
	id := int32(slices.Index(c.tasks, nil))
	if id < 0 {
		id = int32(len(c.tasks))
		c.tasks = append(c.tasks, nil)
	}
	c.tasks[id] = &t
	if t.circuit != nodes.None {
		c.circuits[t.circuit].task = id
	}
	c.enqueueTask(id, rank)
}

// enqueueTask lets a task wait to be decided.
func (c *Controller) enqueueTask(id int32, rank uint8) {
	c.enqueue(job{kind: jobTask, rank: rank, task: id, number: uint64(c.tasks[id].number)})
}

// end lets go of a task, and of a step that waits for it.
func (c *Controller) end(id int32, failed string) {
	t := c.tasks[id]
	c.withdraw(ownerTask, id)
	q := &c.jobs
	all := len(q.list)
	left := slices.DeleteFunc(q.list[q.head:], func(j job) bool { return j.kind == jobTask && j.task == id })
	if q.list = q.list[:q.head+len(left)]; len(q.list) < all {
		c.x.Pending(len(q.list) - all)
	}
	c.tasks[id] = nil
	if t.circuit != nodes.None && c.circuits[t.circuit].task == id {
		c.circuits[t.circuit].task = nodes.None
	}
	if t.step != nodes.None {
		c.stepEnds(t.step, failed)
	}
	c.changed = true
	c.repay()
}

// run decides the next thing about a task.
func (c *Controller) run(id int32) {
	switch t := c.tasks[id]; t.kind {
	case taskSetUp, taskRestore, taskRevert:
		c.route(id)
	case taskRevive:
		t.phase, t.waiting = phaseActivate, 2
		m := nodes.Message{Op: opPortUp, Settles: true, Circuit: t.circuit, N: c.circuits[t.circuit].active}
		for _, s := range c.k.plant.Circuits[t.circuit].Ends {
			c.command(s, m, ownerTask, id)
		}
	case taskTearDown:
		c.unroute(id)
	case taskResize:
		c.resize(id)
	case taskMove, taskReturn:
		c.steer(id)
	default:
		panic("central: unknown kind of task")
	}
}

// carriedOut goes on with a task one of whose commands has been carried out.
func (c *Controller) carriedOut(id int32, cmd *command) {
	t := c.tasks[id]
	t.waiting--
	if t.phase == phaseConnect && t.sent < t.h.parts() {
		c.connectNext(id)
		return
	}
	if t.waiting > 0 {
		return
	}
	switch t.kind {
	case taskSetUp, taskRestore, taskRevert:
		if t.phase == phaseConnect {
			c.connected(id)
		} else {
			c.activated(id)
		}
	case taskRevive:
		c.revived(id)
	case taskTearDown:
		c.tearDownGoesOn(id)
	case taskResize:
		c.resizeGoesOn(id)
	case taskMove, taskReturn:
		c.steerGoesOn(id)
	default:
		panic("central: unknown kind of task")
	}
}

// refused deals with a task one of whose commands was refused, f says where,
// or never answered, when f is None.
func (c *Controller) refused(id int32, cmd *command, f nodes.FibreID) {
	t := c.tasks[id]
	why := "no answer from " + c.k.siteName(cmd.to)
	if f != nodes.None {
		why = fmt.Sprintf("refused at %s on %s", c.k.siteName(cmd.to), c.k.fibreName(f))
	}
	switch t.kind {
	case taskSetUp, taskRestore, taskRevert:
		if f != nodes.None {
			t.avoid.fibres = append(t.avoid.fibres, f)
		} else if !slices.Contains(c.k.plant.Circuits[t.circuit].Ends[:], cmd.to) {
			t.avoid.sites = append(t.avoid.sites, cmd.to)
		}
		c.crankBack(id, why)
	case taskRevive:
		c.end(id, "")
	case taskTearDown:
		// What cannot be reached now is released when it can.
		if cmd.m.Op == opAssign || cmd.m.Op == opSteer {
			c.owed = append(c.owed, owed{to: cmd.to, m: cmd.m})
		}
		c.carriedOut(id, cmd)
	case taskResize:
		c.resizeFails(id, why)
	case taskMove, taskReturn:
		c.steerFails(id, why)
	default:
		panic("central: unknown kind of task")
	}
}

// delayTask goes on with a task after d.
func (c *Controller) delayTask(id int32, d des.Time) {
	later(c.x, c.now+d, nodes.Message{Op: opAfter, Settles: true, N: id, A: c.tasks[id].number})
}

// afterwards goes on with a task that has waited, unless it is gone.
func (c *Controller) afterwards(id int32, number int64) {
	if t := c.tasks[id]; t != nil && t.number == number {
		c.tearDownGoesOn(id)
	}
}

// enter changes the state of a circuit and keeps its times.
func (c *Controller) enter(id nodes.CircuitID, s controller.CircuitState) {
	k := &c.circuits[id]
	if k.state == s {
		return
	}
	was := carries(k.state)
	k.state = s
	c.located(id)
	c.changed = true
	switch is := carries(s); {
	case is && !was:
		k.upSince = c.now
		if k.downSince != des.Never {
			k.downTime += c.now - k.downSince
			k.downSince = des.Never
		}
	case was && !is:
		k.upSince = des.Never
	}
	lost := s == controller.Down || s == controller.Restoring
	if lost && k.downSince == des.Never {
		k.downSince = c.now
		k.outages++
	}
	if s == controller.TornDown && k.downSince != des.Never {
		k.downTime += c.now - k.downSince
		k.downSince = des.Never
	}
}

// carries says whether packets go over a circuit in state s.
func carries(s controller.CircuitState) bool {
	return s == controller.Up || s == controller.UpUnprotected || s == controller.Resizing
}
