package central

import (
	"slices"

	"ferrule/des"
	"ferrule/nodes"
)

// end is the sending end of a circuit at this site, and the light it receives.
type end struct {
	circuit     nodes.CircuitID
	dir         nodes.Direction
	incarnation int32 // of the route that is open; 0: none
	copy        int32 // 1+1: of the second one; 0: none
	state       nodes.PortState
	dark        [2]bool // no light on a route
	told        [2]bool // the controller has been told of it
	opening     bool    // traffic is not ready yet
	timer       int64   // of the hold-off that runs; 0: none
	draining    int64   // command to drain; 0: none
	rated       int64   // last command about the rate
	ramp        *ramping
}

// busy says whether the port is about to change.
func (n end) busy() bool { return n.ramp != nil || n.opening || n.timer != 0 || n.draining != 0 }

// alarm is what the controller has not yet confirmed to have heard.
type alarm struct {
	serial int64
	tries  int
	m      nodes.Message
}

// end finds the end of c at this site. It panics when c does not end here.
func (e *Element) end(c nodes.CircuitID) *end {
	i := 0
	if e.k.plant.Circuits[c].Ends[0] != e.site {
		i = 1
	}
	n := &e.ends[e.k.endIndex[c][i]]
	if n.circuit != c {
		panic("central: circuit " + e.k.circuitName(c) + " does not end at " + e.k.siteName(e.site))
	}
	return n
}

// setPort changes the state of the port if it differs.
func (e *Element) setPort(n *end, s nodes.PortState) {
	if n.state != s {
		n.state = s
		e.x.SetPort(n.circuit, s)
	}
}

// activate opens a route; its port goes up when traffic is ready.
func (e *Element) activate(m *nodes.Message) {
	n := e.end(m.Circuit)
	if m.N < n.incarnation {
		return // of the past
	}
	if m.N == n.incarnation {
		if n.opening {
			e.answer(m, answerInHand)
		} else {
			e.answer(m, answerDone)
		}
		return
	}
	e.open(n, m.Ref.(*trails))
	if d := e.untilReady(m.Circuit, m.Ref.(*trails)); d > 0 {
		n.opening = true
		r := *m
		r.Op = opReady
		later(e.x, e.now+d, r)
		return
	}
	e.setPort(n, nodes.PortUp)
	e.answer(m, answerDone)
}

// untilReady is how long after its opening a route takes no traffic yet. On a
// wavelength the receiver has to lock, and the power is levelled station by
// station.
func (e *Element) untilReady(c nodes.CircuitID, t *trails) des.Time {
	d := e.k.cfg.TrafficReady
	if !e.k.plant.Circuits[c].Channel {
		return d
	}
	fibres := len(t.work.Fibres)
	if t.copy != nil {
		fibres = max(fibres, len(t.copy.Fibres))
	}
	return d + e.k.cfg.Relock + e.k.cfg.Level*des.Time(fibres)
}

// open makes t the route of n, or its two. Its light is taken for granted until
// the network says otherwise, and a hold-off that runs for an earlier one ends.
func (e *Element) open(n *end, t *trails) {
	n.incarnation, n.copy = t.work.Incarnation, 0
	e.stopTimer(n)
	n.dark, n.told, n.draining = [2]bool{}, [2]bool{}, 0
	e.x.OpenTrail(*t.work)
	if t.copy != nil {
		n.copy = t.copy.Incarnation
		e.x.OpenTrail(*t.copy)
	}
}

// blind says whether no route of n has light.
func (n *end) blind() bool { return n.dark[0] && (n.copy == 0 || n.dark[1]) }

// ready puts the port up after an activation, unless the light is gone again.
func (e *Element) ready(m *nodes.Message) {
	n := e.end(m.Circuit)
	if m.N != n.incarnation || !n.opening {
		return
	}
	n.opening = false
	if !n.blind() {
		e.setPort(n, nodes.PortUp)
	}
	e.answer(m, answerDone)
}

// portUp puts the port up on a route whose light came back.
func (e *Element) portUp(m *nodes.Message) {
	n := e.end(m.Circuit)
	if m.N != n.incarnation || n.blind() {
		n.told = n.dark // the return of its light will be news
		e.answer(m, answerRefused)
		return
	}
	e.setPort(n, nodes.PortUp)
	e.answer(m, answerDone)
}

// drain closes the port to new packets and answers when none waits any more.
func (e *Element) drain(m *nodes.Message) {
	n := e.end(m.Circuit)
	switch {
	case n.draining == m.A:
		e.answer(m, answerInHand)
		return
	case m.N != n.incarnation || n.state == nodes.PortDown:
		e.answer(m, answerDone)
		return
	}
	n.draining = m.A
	e.setPort(n, nodes.PortDraining)
	e.drained(m)
}

// drained closes the port when nothing waits, or looks again when what waits
// must have been sent.
func (e *Element) drained(m *nodes.Message) {
	n := e.end(m.Circuit)
	if n.draining != m.A {
		return
	}
	c := e.x.Counters(m.Circuit)
	if n.state == nodes.PortDraining && c.QueueBytes > 0 && c.Rate > 0 {
		again := *m
		again.Op = opDrained
		later(e.x, e.now+c.Rate.TxTime(c.QueueBytes)+des.Microsecond, again)
		return
	}
	n.draining = 0
	e.setPort(n, nodes.PortDown)
	e.answer(m, answerDone)
}

// light notes that the light of a route went or came back. The controller is
// told at once while another route has light; when none has, it and the packet
// layer are told once the hold-off is over.
func (e *Element) light(m *nodes.Message) {
	n := e.end(m.Circuit)
	r := 0
	switch {
	case m.N == n.incarnation:
	case n.copy != 0 && m.N == n.copy:
		r = 1
	default:
		return
	}
	if m.Op == nodes.OpLightBack {
		n.dark[r] = false
		e.stopTimer(n)
		if n.told[r] {
			n.told[r] = false
			e.raise(nodes.Message{Op: opAlarm, Circuit: m.Circuit, N: m.N, B: alarmBack})
		}
		e.tellDark(n)
		return
	}
	if n.dark[r] {
		return
	}
	n.dark[r] = true
	if !n.blind() {
		e.tellDark(n)
		return
	}
	e.serial++
	n.timer = e.serial
	e.x.Pending(1)
	t := nodes.Message{Op: opHoldOff, Circuit: m.Circuit, A: n.timer}
	if d := e.k.plant.Circuits[m.Circuit].HoldOff; d > 0 {
		later(e.x, e.now+d, t)
		return
	}
	e.heldOff(&t)
}

// heldOff stops the port when the light is still gone.
func (e *Element) heldOff(m *nodes.Message) {
	n := e.end(m.Circuit)
	if n.timer != m.A {
		return
	}
	e.stopTimer(n)
	e.setPort(n, nodes.PortDown)
	n.told = [2]bool{}
	e.tellDark(n)
}

// tellDark tells the controller of every route without light of which it has
// not been told.
func (e *Element) tellDark(n *end) {
	for r, incarnation := range [2]int32{n.incarnation, n.copy} {
		if n.dark[r] && !n.told[r] {
			n.told[r] = true
			e.raise(nodes.Message{Op: opAlarm, Circuit: n.circuit, N: incarnation, B: alarmLost})
		}
	}
}

// stopTimer ends the hold-off that runs for n, if any.
func (e *Element) stopTimer(n *end) {
	if n.timer != 0 {
		n.timer = 0
		e.x.Pending(-1)
	}
}

// raise sends an alarm and sees to it that it is heard.
func (e *Element) raise(m nodes.Message) {
	e.serial++
	m.From, m.A = e.site, e.serial
	e.outdate(&m)
	e.x.Pending(1)
	e.alarms = append(e.alarms, alarm{serial: m.A, m: m})
	e.alarmAgain(m.A)
}

// alarmAgain sends an unheard alarm, until it has been sent often enough.
func (e *Element) alarmAgain(serial int64) {
	for i := range e.alarms {
		a := &e.alarms[i]
		if a.serial != serial {
			continue
		}
		if a.tries == e.k.cfg.Attempts {
			e.unheard = append(e.unheard, a.m)
			e.heard(serial)
			e.x.Note("alarm unheard", e.k.siteName(e.site), "no answer from the controller")
			return
		}
		a.tries++
		e.x.Send(e.k.cfg.Site, a.m)
		later(e.x, e.now+e.k.cfg.Retry, nodes.Message{Op: opAlarmAgain, A: serial})
		return
	}
}

// outdate forgets what was to be told, or has gone unheard, about the thing
// that m is about.
func (e *Element) outdate(m *nodes.Message) {
	same := func(o *nodes.Message) bool {
		return o.Op == m.Op && o.Circuit == m.Circuit && o.N == m.N && o.Fibre == m.Fibre
	}
	e.unheard = slices.DeleteFunc(e.unheard, func(o nodes.Message) bool { return same(&o) })
	for i := len(e.alarms) - 1; i >= 0; i-- {
		if same(&e.alarms[i].m) {
			e.heard(e.alarms[i].serial)
		}
	}
}

// sayAgain raises what has gone unheard: the controller can hear again.
func (e *Element) sayAgain() {
	list := e.unheard
	e.unheard = nil
	for _, m := range list {
		e.raise(m)
	}
}

// heard forgets an alarm.
func (e *Element) heard(serial int64) {
	for i := range e.alarms {
		if e.alarms[i].serial == serial {
			e.alarms = append(e.alarms[:i], e.alarms[i+1:]...)
			e.x.Pending(-1)
			return
		}
	}
}
