package central

import (
	"slices"

	"ferrule/des"
	"ferrule/nodes"
)

// ownerKind says whose command it is.
type ownerKind uint8

// Owners of commands.
const (
	ownerNone    ownerKind = iota // nobody waits for it
	ownerTask                     // a task, by number
	ownerRequest                  // a request, by place
	ownerTable                    // the table of the site it went to
	ownerPoll                     // a circuit under a policy, by place
	ownerAsk                      // a question that is asked again when a fibre is lit
)

// command is one message that wants an answer.
type command struct {
	serial int64 // 0: free
	tries  int   // since the last sign of life
	owner  ownerKind
	index  int32
	to     nodes.SiteID
	m      nodes.Message
}

// commands are those not answered yet. The low bits of a serial are the
// command's place, the high bits count up.
type commands struct {
	list  []command
	free  []int32
	count int64
	ring  ring // deadlines
}

// placeBits is how many low bits of a serial hold the place.
const placeBits = 24

// deadline is when a command will be repeated or given up.
type deadline struct {
	at     des.Time
	serial int64
}

// ring is deadlines in order of time. One timer runs for the first.
type ring struct {
	list   []deadline
	head   int
	booked bool
}

// place finds the command with that serial; nil when it has been answered.
func (q *commands) place(serial int64) *command {
	i := serial & (1<<placeBits - 1)
	if int(i) >= len(q.list) || q.list[i].serial != serial {
		return nil
	}
	return &q.list[i]
}

// drop frees the place of cmd, for which nobody waits any more.
func (c *Controller) drop(cmd *command) {
	if cmd.m.Settles {
		c.x.Pending(-1)
	}
	q := &c.commands
	q.free = append(q.free, int32(cmd.serial&(1<<placeBits-1)))
	cmd.serial = 0
	cmd.m.Ref = nil
}

// clone copies q.
func (q *commands) clone() commands {
	n := *q
	n.list, n.free, n.ring.list = slices.Clone(q.list), slices.Clone(q.free), slices.Clone(q.ring.list)
	return n
}

// command sends m to the agent of site to on behalf of an owner.
func (c *Controller) command(to nodes.SiteID, m nodes.Message, owner ownerKind, index int32) {
	q := &c.commands
	if len(q.free) == 0 {
		if len(q.list) == 1<<placeBits {
			panic("central: too many commands without an answer")
		}
		q.free = append(q.free, int32(len(q.list)))
		q.list = append(q.list, command{})
	}
	i := q.free[len(q.free)-1]
	q.free = q.free[:len(q.free)-1]
	q.count++
	m.A = q.count<<placeBits | int64(i)
	m.From = c.k.cfg.Site
	if m.Settles {
		c.x.Pending(1)
	}
	q.list[i] = command{serial: m.A, owner: owner, index: index, to: to, m: m}
	c.transmit(&q.list[i])
}

// transmit sends a command, for the first time or again.
func (c *Controller) transmit(cmd *command) {
	cmd.tries++
	r := &c.commands.ring
	r.list = append(r.list, deadline{at: c.now + c.k.cfg.Retry, serial: cmd.serial})
	c.x.Send(cmd.to, cmd.m)
	c.watch()
}

// watch books the timer for the first deadline, if there is one and no timer
// runs.
func (c *Controller) watch() {
	r := &c.commands.ring
	for r.head < len(r.list) && c.commands.place(r.list[r.head].serial) == nil {
		r.head++
	}
	if r.head == len(r.list) {
		r.list, r.head = r.list[:0], 0
		return
	}
	if r.head > 1024 && r.head > len(r.list)/2 {
		r.list, r.head = slices.Delete(r.list, 0, r.head), 0
	}
	if r.booked {
		return
	}
	r.booked = true
	later(c.x, r.list[r.head].at, nodes.Message{Op: opOverdue})
}

// overdue repeats or gives up the commands whose time is over.
func (c *Controller) overdue() {
	r := &c.commands.ring
	r.booked = true // so that no timer is booked until all that is due is done
	for r.head < len(r.list) && r.list[r.head].at <= c.now {
		serial := r.list[r.head].serial
		r.head++
		cmd := c.commands.place(serial)
		switch {
		case cmd == nil:
		case cmd.tries < c.k.cfg.Attempts:
			c.transmit(cmd)
		default:
			gone := *cmd
			c.drop(cmd)
			c.unanswered(&gone)
		}
	}
	r.booked = false
	c.watch()
}

// answered hands an answer to whoever waits for it. Answers that come twice
// are dropped.
func (c *Controller) answered(m *nodes.Message) {
	cmd := c.commands.place(m.A)
	if cmd == nil {
		return
	}
	if m.N == answerInHand {
		cmd.tries = 0 // it is only slow
		return
	}
	done := *cmd
	c.drop(cmd)
	switch done.owner {
	case ownerNone, ownerAsk:
	case ownerPoll:
		c.polled(done.index, done.to, m.Ref.(*reading))
	case ownerTask:
		if m.N == answerDone {
			c.carriedOut(done.index, &done)
		} else {
			c.refused(done.index, &done, m.Fibre)
		}
	case ownerRequest:
		c.requestAnswered(done.index, m.N == answerDone)
	case ownerTable:
		c.tableConfirmed()
	default:
		panic("central: unknown owner of a command")
	}
}

// unanswered deals with a command that was sent often enough.
func (c *Controller) unanswered(cmd *command) {
	if cmd.m.Settles {
		c.x.Note("no answer", c.k.siteName(cmd.to), attempts(cmd.tries))
	}
	c.deaf = c.deaf || cmd.m.Settles
	switch cmd.owner {
	case ownerAsk, ownerPoll:
	case ownerNone:
		c.owed = append(c.owed, owed{to: cmd.to, m: cmd.m})
	case ownerTask:
		c.refused(cmd.index, cmd, nodes.None)
	case ownerRequest:
		c.requestAnswered(cmd.index, false)
	case ownerTable:
		c.tables[cmd.to] = nil
		c.tableConfirmed()
	default:
		panic("central: unknown owner of a command")
	}
}

// owed is a command that must still be carried out one day.
type owed struct {
	to nodes.SiteID
	m  nodes.Message
}

// repay sends again what was given up, as it should be by now. What a task in
// hand is about to change waits for its end.
func (c *Controller) repay() {
	list := c.owed
	c.owed = nil
	for _, o := range list {
		m := o.m
		switch {
		case m.Op == opSteer && c.moving(m.Way), m.Op == opRate && c.circuits[m.Circuit].task != nodes.None,
			m.Op == opAssign && m.Way&release == 0 && c.circuits[m.Circuit].task != nodes.None:
			c.owed = append(c.owed, o)
			continue
		case m.Op == opAssign && m.Way&release == 0:
			h := &c.circuits[m.Circuit].held
			a, ok := h.ownedBy(o.to, m.N)
			if !ok {
				continue
			}
			a.flags |= atOnce
			m = a.message(m.Circuit, m.N, true)
		case m.Op == opSteer:
			m.Circuit, m.B = nodes.None, 0
			if i := slices.Index(c.stationsOf(m.Way, c.ways[m.Way].chain), o.to); i >= 0 {
				m.Circuit = c.ways[m.Way].chain[i]
			}
		case m.Op == opRate:
			m = c.rateMessage(m.Circuit, c.circuits[m.Circuit].rate)
		case m.Op == opPortDown:
			continue
		}
		c.command(o.to, m, ownerNone, 0)
	}
}

// withdraw forgets all commands of an owner.
func (c *Controller) withdraw(owner ownerKind, index int32) {
	for i := range c.commands.list {
		cmd := &c.commands.list[i]
		if cmd.serial != 0 && cmd.owner == owner && cmd.index == index {
			c.drop(cmd)
		}
	}
}

func b2i(b bool) int {
	if b {
		return 1
	}
	return 0
}
