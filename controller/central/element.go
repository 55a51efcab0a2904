package central

import (
	"fmt"
	"maps"
	"math"
	"math/bits"
	"slices"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
	"ferrule/nodes/optical"
)

// Element is the agent of one site: it carries out what the controller
// commands and tells it what it sees.
type Element struct {
	k    *known
	site nodes.SiteID
	xc   *optical.CrossConnect

	queue   []nodes.Message // commands waiting for the cross-connect, in order of arrival
	running int             // commands it is carrying out
	books   map[optical.Holder]entry

	ends    []end // of the circuits that end here, as in known.endsAt
	alarms  []alarm
	unheard []nodes.Message // alarms given up, oldest first
	serial  int64           // of the last alarm or timer
	version int32           // of the table in force
	steered map[uint16]int64

	x   nodes.Local // during Handle only
	now des.Time    // during Handle only
}

// entry is the last command about one holder.
type entry struct {
	serial int64
	answer int32
	fibre  nodes.FibreID // refused
	done   bool
}

// newElement returns the agent of site s.
func newElement(k *known, s nodes.SiteID) *Element {
	e := &Element{
		k: k, site: s, xc: optical.NewCrossConnect(k.plant, s),
		books: map[optical.Holder]entry{}, steered: map[uint16]int64{},
	}
	for _, c := range k.endsAt[s] {
		d := nodes.Out
		if k.plant.Circuits[c].Ends[0] != s {
			d = nodes.Back
		}
		e.ends = append(e.ends, end{circuit: c, dir: d, state: nodes.PortDown})
	}
	return e
}

// Clone implements nodes.ControlAgent.
func (e *Element) Clone() nodes.ControlAgent { return e.clone() }

// clone copies e; the copy shares only what never changes.
func (e *Element) clone() *Element {
	c := *e
	c.xc = e.xc.Clone()
	c.queue = slices.Clone(e.queue)
	c.books = maps.Clone(e.books)
	c.ends = slices.Clone(e.ends)
	for i := range c.ends {
		if r := c.ends[i].ramp; r != nil {
			n := *r
			c.ends[i].ramp = &n
		}
	}
	c.alarms = slices.Clone(e.alarms)
	c.unheard = slices.Clone(e.unheard)
	c.steered = maps.Clone(e.steered)
	return &c
}

// Handle implements nodes.ControlAgent.
func (e *Element) Handle(x nodes.Local, now des.Time, m nodes.Message) {
	e.x, e.now = x, now
	e.dispatch(&m)
	e.x = nil
}

// dispatch calls what m is for.
func (e *Element) dispatch(m *nodes.Message) {
	switch m.Op {
	case opAssign:
		e.assign(m)
	case opSwitched:
		e.switched(m)
	case opActivate:
		e.activate(m)
	case opReady:
		e.ready(m)
	case opPortUp:
		e.portUp(m)
	case opPortDown:
		if n := e.end(m.Circuit); n.incarnation == m.N {
			e.setPort(n, nodes.PortDown)
		}
		e.answer(m, answerDone)
	case opDrain:
		e.drain(m)
	case opDrained:
		e.drained(m)
	case opRate:
		e.setRate(m)
	case opRamp:
		e.rampOn(m)
	case opPoll:
		r := &reading{e.x.Counters(m.Circuit), e.now}
		e.x.Send(e.k.cfg.Site, nodes.Message{Op: opAnswer, A: m.A, N: answerDone, Circuit: m.Circuit, Ref: r})
	case opInstall:
		e.install(m)
	case opSteer:
		e.steer(m)
	case nodes.OpLightLost, nodes.OpLightBack:
		e.light(m)
	case opHoldOff:
		e.heldOff(m)
	case nodes.OpFibreDark:
		e.raise(nodes.Message{Op: opFibreAlarm, Fibre: m.Fibre, B: alarmLost})
	case nodes.OpFibreLit:
		e.raise(nodes.Message{Op: opFibreAlarm, Fibre: m.Fibre, B: alarmBack})
	case nodes.OpEquipmentLost:
		e.raise(nodes.Message{Op: opEquipment, Circuit: m.Circuit, B: alarmLost})
	case nodes.OpEquipmentBack:
		e.raise(nodes.Message{Op: opEquipment, Circuit: m.Circuit, B: alarmBack})
	case opHeard:
		e.heard(m.A)
	case opAsk:
		e.sayAgain()
		e.answer(m, answerDone)
	case opAlarmAgain:
		e.alarmAgain(m.A)
	default:
		panic(fmt.Sprintf("central: site %s cannot handle op %d", e.k.siteName(e.site), m.Op))
	}
}

// answer replies to command m.
func (e *Element) answer(m *nodes.Message, a int32) { e.answerFibre(m, a, nodes.None) }

// answerFibre replies to command m and names the fibre that was refused.
func (e *Element) answerFibre(m *nodes.Message, a int32, f nodes.FibreID) {
	e.x.Send(e.k.cfg.Site, nodes.Message{Op: opAnswer, Settles: m.Settles, A: m.A, N: a, Circuit: m.Circuit, Fibre: f})
}

// assign takes in a command about ownership. What is a matter of books alone
// is done at once; the rest waits its turn.
func (e *Element) assign(m *nodes.Message) {
	h := optical.Holder{Circuit: m.Circuit, Incarnation: m.N}
	switch last, known := e.books[h]; {
	case known && m.A < last.serial:
		return // overtaken by a later command
	case known && m.A == last.serial:
		if last.done {
			e.answerFibre(m, last.answer, last.fibre)
		} else {
			e.answer(m, answerInHand)
		}
		return
	}
	e.books[h] = entry{serial: m.A}
	if m.Way&atOnce == 0 {
		e.queue = append(e.queue, *m)
		e.serve()
		return
	}
	e.own(m)
	e.finish(m, answerDone, nodes.None)
}

// serve starts as many waiting commands as may run together.
func (e *Element) serve() {
	for e.running < e.k.cfg.CommandsAtOnce && len(e.queue) > 0 {
		m := e.queue[0]
		e.queue = slices.Delete(e.queue, 0, 1)
		if e.books[optical.Holder{Circuit: m.Circuit, Incarnation: m.N}].serial != m.A {
			continue // withdrawn while it waited
		}
		if f := e.own(&m); f != nodes.None {
			e.finish(&m, answerRefused, f)
			continue
		}
		d := e.latency(&m)
		if d == 0 {
			e.finish(&m, answerDone, nodes.None)
			continue
		}
		e.running++
		m.Op = opSwitched
		later(e.x, e.now+d, m)
	}
}

// own changes the books as m says and returns None, or the fibre on which
// something is taken; then nothing has changed.
func (e *Element) own(m *nodes.Message) nodes.FibreID {
	h := optical.Holder{Circuit: m.Circuit, Incarnation: m.N}
	a := assignmentOf(m)
	var before [2]int
	for i, f := range a.fibres {
		if f == nodes.None {
			continue
		}
		if a.flags&release != 0 {
			e.xc.Release(f, h)
			continue
		}
		ok := false
		if a.flags&byChannel != 0 {
			ok = e.xc.AssignChannel(f, h, a.amounts[i])
		} else {
			before[i], _ = e.xc.Held(f, h)
			ok = e.xc.Assign(f, h, a.amounts[i])
		}
		if ok {
			continue
		}
		if i == 1 && a.flags&byChannel != 0 {
			e.xc.Release(a.fibres[0], h)
		} else if i == 1 {
			e.xc.Assign(a.fibres[0], h, before[0])
		}
		return f
	}
	return nodes.None
}

// latency draws how long the cross-connect takes over m. The draw belongs to
// the site, the circuit or stream, the incarnation and what is done.
func (e *Element) latency(m *nodes.Message) des.Time {
	if e.k.cfg.Command == nil {
		return 0
	}
	what := uint64(m.Way)
	if m.Way == 0 {
		what |= uint64(assignmentOf(m).amounts[0]) << 16
	}
	name := uint64(0)
	if s, ok := streamOf(m.Circuit); ok {
		name = e.k.streams[s]
	} else {
		name = e.k.names[m.Circuit]
	}
	u := random.Unit(random.Draw(e.k.cfg.Seed, e.k.siteHash[e.site]^bits.RotateLeft64(name, 17), uint64(m.N), what))
	return picoseconds(e.k.cfg.Command.At(u))
}

// picoseconds rounds a drawn duration to a whole picosecond, at least 0 and at
// most an hour.
func picoseconds(v float64) des.Time {
	return des.Time(min(max(math.Round(v), 0), float64(des.Hour)))
}

// switched ends a command that took time.
func (e *Element) switched(m *nodes.Message) {
	e.running--
	if e.books[optical.Holder{Circuit: m.Circuit, Incarnation: m.N}].serial == m.A {
		e.finish(m, answerDone, nodes.None)
	}
	e.serve()
}

// finish answers m and remembers the answer. A stream's holders come once and
// never again, so they are forgotten with their slots.
func (e *Element) finish(m *nodes.Message, a int32, f nodes.FibreID) {
	h := optical.Holder{Circuit: m.Circuit, Incarnation: m.N}
	if _, ok := streamOf(m.Circuit); ok && m.Way&release != 0 {
		delete(e.books, h)
	} else {
		e.books[h] = entry{serial: m.A, answer: a, fibre: f, done: true}
	}
	e.answerFibre(m, a, f)
}

// install makes a table the one in force unless a later one already is.
func (e *Element) install(m *nodes.Message) {
	t := m.Ref.(*nodes.Table)
	if t.Version > e.version {
		e.version = t.Version
		e.x.Install(t)
	}
	e.answer(m, answerDone)
}

// steer sends a way out by a circuit, or by the table again, unless a later
// command about it has been carried out.
func (e *Element) steer(m *nodes.Message) {
	if e.steered[m.Way] < m.A {
		e.steered[m.Way] = m.A
		if m.B > 0 {
			e.x.Hold(m.Way, e.now+des.Time(m.B))
		}
		e.x.Steer(m.Way, m.Circuit)
	}
	e.answer(m, answerDone)
}
