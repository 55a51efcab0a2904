package packet

import (
	"ferrule/des"
	"ferrule/nodes"
)

// local is a Site as its agent sees it.
type local Site

// Site implements nodes.Local.
func (x *local) Site() nodes.SiteID { return x.id }

// Later implements nodes.Local.
func (x *local) Later(m nodes.Message) {
	if m.At < x.now {
		panic("packet: Later in the past")
	}
	m.From, m.To, m.Sent, m.Remote, m.Over = x.id, x.id, x.now, false, false
	x.serial++
	m.Serial = x.serial
	(*Site)(x).book(m)
}

// Send implements nodes.Local.
func (x *local) Send(to nodes.SiteID, m nodes.Message) {
	if to == x.id {
		m.At = x.now
		x.Later(m)
		return
	}
	n := x.net
	m.From, m.To, m.Sent, m.Remote, m.Over = x.id, to, x.now, true, false
	m.Epoch = n.ways.Epoch(x.now)
	x.serial++
	m.Serial = x.serial
	x.messages.Sent++
	d := n.ways.Delay(m.Epoch, x.id, to)
	if d == des.Never {
		x.messages.Lost++
		return
	}
	m.At = x.now + d
	x.out = append(x.out, m)
}

// OpenTrail implements nodes.Local.
func (x *local) OpenTrail(t nodes.Trail) {
	s := (*Site)(x)
	q := s.portOfCircuit(t.Circuit)
	if q == nil {
		panic("packet: OpenTrail of a circuit that does not end here")
	}
	p := &pipe{
		circuit: t.Circuit, dir: t.Dir, incarnation: t.Incarnation, fibres: t.Fibres, from: s.id, overhead: q.overhead,
		lines: []lineFrom{{x.now, q.line}}, open: true, buf: make([]nodes.Packet, 16),
	}
	p.to = s.id
	for _, f := range t.Fibres {
		fibre := &s.net.plant.Fibres[f]
		p.delay += fibre.Delay
		p.to = fibre.Other(p.to)
	}
	if t.Copies != 0 {
		q.openCopy(p, t.Copies, len(x.hop))
		s.fresh = append(s.fresh, p)
		return
	}
	q.closePipes()
	q.pipe = p
	q.free = max(q.free, x.now)
	q.turn(x.now)
	s.fresh = append(s.fresh, p)
}

// SetPort implements nodes.Local.
func (x *local) SetPort(c nodes.CircuitID, state nodes.PortState) {
	s := (*Site)(x)
	q := s.portOfCircuit(c)
	if q == nil || q.state == state {
		return
	}
	switch state {
	case nodes.PortDown:
		if !q.hold {
			cause := LostFlushed
			if q.state == nodes.PortDraining {
				cause = LostTornDown
			}
			q.flush(s, x.now, cause)
		}
	case nodes.PortUp, nodes.PortDraining:
		q.free = max(q.free, x.now)
	default:
		panic("packet: unknown port state")
	}
	q.state = state
	q.turn(x.now)
	s.stale = true
	if x.now > 0 {
		s.note(x.now, [...]string{"port down", "port up", "port draining"}[state], s.net.plant.Circuits[c].Name)
	}
}

// SetRate implements nodes.Local.
func (x *local) SetRate(c nodes.CircuitID, r nodes.Rate) {
	if q := (*Site)(x).portOfCircuit(c); q != nil {
		q.setRate(r, x.now)
	}
}

// Install implements nodes.Local.
func (x *local) Install(t *nodes.Table) {
	x.table = t
	x.stale = true
}

// Steer implements nodes.Local.
func (x *local) Steer(way uint16, c nodes.CircuitID) {
	if x.steer == nil {
		x.steer = make([]nodes.CircuitID, len(x.hop))
		for i := range x.steer {
			x.steer[i] = nodes.None
		}
	}
	x.steer[way] = c
	x.stale = true
}

// Hold implements nodes.Local.
func (x *local) Hold(way uint16, until des.Time) {
	s := (*Site)(x)
	if until <= x.now || s.sourceOf(way) < 0 {
		return
	}
	s.stale = true
	s.book(nodes.Message{At: until, From: x.id, To: x.id, Op: nodes.OpRelease, Way: way, Settles: true})
	for i := range s.held {
		if s.held[i].way == way {
			s.held[i].until = max(s.held[i].until, until)
			return
		}
	}
	s.held = append(s.held, held{way: way, until: until})
}

// Counters implements nodes.Local.
func (x *local) Counters(c nodes.CircuitID) nodes.PortCounters {
	q := (*Site)(x).portOfCircuit(c)
	if q == nil {
		return nodes.PortCounters{}
	}
	return nodes.PortCounters{
		SentBytes: q.lineBytes(q.count.sent, q.count.ipBytes), SentPackets: q.count.sent, LostPackets: q.count.lost,
		QueueBytes: q.disc.Backlog(), Rate: q.line.Rate(),
	}
}

// Pending implements nodes.Local.
func (x *local) Pending(delta int) {
	x.pending += delta
	x.lastAct = x.now
}

// Note implements nodes.Local.
func (x *local) Note(what, subject, detail string) {
	x.events = append(x.events, nodes.Event{At: x.now, Site: x.id, What: what, Subject: subject, Detail: detail})
}

// note adds to the site's event log what the network itself saw or did.
func (s *Site) note(now des.Time, what, subject string) {
	s.events = append(s.events, nodes.Event{At: now, Site: s.id, What: what, Subject: subject})
}

// book puts a message into the site's agenda.
func (s *Site) book(m nodes.Message) {
	if m.Settles {
		s.pending++
	}
	s.agenda.Put(letter{m})
}
