package packet

import (
	"ferrule/des"
	"ferrule/des/measure"
	"ferrule/des/random"
	"ferrule/nodes"
)

// Site is a router and the control agent beside it. A window is run in
// segments cut at the site's control instants; within a segment tables and
// rates are constant and data flows one way: inputs and sources, then ports.
type Site struct {
	id      nodes.SiteID
	net     *Network
	inputs  []input // in stable order
	access  latency // of what sources send
	ports   []port
	portOf  []int16 // circuit -> port, or -1
	sources []source
	next    []des.Time // of each source
	srcMin  des.Time
	gateMin des.Time // when the next packet leaves a shaper, or Never
	hostOf  []int32  // way -> source that is the endpoint it leads to, plus one; nil: there is none
	hostMin des.Time // when an endpoint next does something or something it has sent is due, or Never

	table *nodes.Table
	steer []nodes.CircuitID // way -> circuit it is moved onto; nil: none is
	hop   []int32           // way -> what to do: see the hop constants
	sets  [][]int16         // equal-cost sets of ports
	stale bool              // hop must be built again
	held  []held

	deadRouter int // failures that keep the router from working

	agent   nodes.ControlAgent
	agenda  des.Agenda[letter, *letter]
	serial  uint64
	out     []nodes.Message
	fresh   []*pipe  // opened, not yet known to the other end
	dirty   []*pipe  // filled since the last edge
	pending int      // settling messages in the agenda, and what the agent counts
	lastAct des.Time // when a settling message was last handled, or the agent's count changed
	now     des.Time

	st        view
	losses    []Loss
	traces    []trace  // by class
	lossOf    []int32  // way -> index in losses plus one
	sink      arrivals // delivered in this segment, when from several inputs
	via       []uint64 // way -> run that last delivered it, numbered from 1
	viaRun    uint64   // runs of deliveries so far
	scratch   []nodes.Packet
	transit   uint64       // IP bytes received from a fibre and sent on
	markT     uint64       // at the end of the warm-up
	latencies measure.Hist // ns: one in 64 of what came through a varying input
	delivered uint64
	lost      uint64
	discarded []uint64 // copies not passed on, by way; nil: none
	messages  MessageCount
	events    []nodes.Event
}

// MessageCount counts control messages between sites.
type MessageCount struct{ Sent, Arrived, Lost uint64 }

// input is the receiving end of a circuit: its pipes in order of incarnation.
type input struct {
	pipe *pipe
	lat  *latency // shared by all pipes of the circuit's end
	tail *tail    // shared by the two pipes of a 1+1 circuit; or nil
	role int8     // of the pipe at that tail
}

// ready reports whether something leaves the forwarding engine before end.
func (in *input) ready(end des.Time) bool {
	p := in.pipe
	return p.head != p.vis && in.lat.out(p.next()) < end
}

// source is one way of an aggregate that starts here.
type source struct {
	s       nodes.Source
	way     uint16
	packets uint64
	bytes   uint64
	markP   uint64 // at the end of the warm-up
	markB   uint64
	gate    *gate // what conditions it; or nil
	host    *host // an endpoint, and then s is nil; or nil
}

// held is a way whose packets wait at the ingress.
type held struct {
	way   uint16
	until des.Time
	buf   []nodes.Packet
}

// letter is a message in an agenda.
type letter struct{ nodes.Message }

// When implements des.Dated.
func (l *letter) When() des.Time { return l.At }

// Before implements des.Dated: the network's own first, then messages from
// other sites, then what the site booked itself; by sender and serial number.
func (l *letter) Before(o *letter) bool {
	a, b := l.rank(), o.rank()
	switch {
	case a != b:
		return a < b
	case l.From != o.From:
		return l.From < o.From
	case l.Serial != o.Serial:
		return l.Serial < o.Serial
	case l.Op != o.Op:
		return l.Op < o.Op
	case l.Circuit != o.Circuit:
		return l.Circuit < o.Circuit
	case l.Fibre != o.Fibre:
		return l.Fibre < o.Fibre
	}
	return l.N < o.N
}

func (l *letter) rank() int {
	switch {
	case l.Op < nodes.OpFirstAgent:
		return 0
	case l.Remote:
		return 1
	}
	return 2
}

// portOfCircuit returns the sending end of c at this site.
func (s *Site) portOfCircuit(c nodes.CircuitID) *port {
	if i := s.portOf[c]; i >= 0 {
		return &s.ports[i]
	}
	return nil
}

// nextWork reports when the site next has something to do.
func (s *Site) nextWork() des.Time {
	t := min(s.agenda.Next(), s.gateMin, s.hostMin)
	if s.srcMin < des.Never {
		t = min(t, s.access.out(s.srcMin))
	}
	for i := range s.inputs {
		in := &s.inputs[i]
		if due := in.pipe.next(); due < t {
			t = min(t, in.lat.out(due))
		}
	}
	for i := range s.ports {
		t = min(t, s.ports[i].next())
	}
	return t
}

// run does everything due before end.
func (s *Site) run(end des.Time) {
	for {
		stop := min(end, s.agenda.Next())
		s.segment(stop)
		if stop >= end {
			return
		}
		s.control(stop)
	}
}

// control handles every message due now.
func (s *Site) control(now des.Time) {
	s.now = now
	for s.agenda.Next() == now {
		m := s.agenda.Take()
		if m.Settles {
			s.pending--
			s.lastAct = now
		}
		s.handle(now, m.Message)
	}
	if s.stale {
		s.rebuild()
	}
}

// handle gives a message to the agent, unless it is lost or no longer true.
func (s *Site) handle(now des.Time, m nodes.Message) {
	n := s.net
	switch {
	case m.Over:
		if !s.passed(&m) || s.deadRouter > 0 || n.dropped(m) {
			s.messages.Lost++
			return
		}
		s.messages.Arrived++
	case m.Remote:
		if !n.ways.Passes(n.light, m.Epoch, m.From, s.id, m.Sent) || n.dropped(m) {
			s.messages.Lost++
			return
		}
		s.messages.Arrived++
	case m.Op == nodes.OpRelease:
		s.release(now)
		return
	case m.Op == nodes.OpSwitch || m.Op == nodes.OpReturn:
		s.changeOver(now, &m)
		return
	case m.Op == nodes.OpLightLost || m.Op == nodes.OpLightBack:
		if !s.lightNews(now, &m) {
			return
		}
	case m.Op == nodes.OpFibreDark:
		if sp := n.light.Spans(int(m.Fibre))[m.N]; sp.To <= sp.From+n.cfg.Detect {
			return
		}
	case m.Op == nodes.OpFibreLit:
		if n.light.DarkTowards(int(m.Fibre), now-des.Time(m.A), n.plant.Fibres[m.Fibre].From(n.plant.Fibres[m.Fibre].Other(s.id))) {
			return
		}
	}
	if s.agent != nil {
		s.agent.Handle((*local)(s), now, m)
	}
}

// lightNews reports whether news of a circuit's light is true and new: darkness
// must have lasted the detection time, and each end is told once of each change.
func (s *Site) lightNews(now des.Time, m *nodes.Message) bool {
	for i := range s.inputs {
		p := s.inputs[i].pipe
		if p.circuit != m.Circuit || p.incarnation != m.N {
			continue
		}
		if m.Op == nodes.OpLightLost {
			if p.told || !p.darkSince(now-s.net.cfg.Detect, now) {
				return false
			}
		} else if !p.told || p.darkAtEnd(now) {
			return false
		}
		p.told = m.Op == nodes.OpLightLost
		what := "light back"
		if p.told {
			what = "light lost"
		}
		s.note(now, what, s.net.plant.Circuits[m.Circuit].Name)
		if t := s.inputs[i].tail; t != nil {
			s.tailSees(now, t, s.inputs[i].role)
		}
		return true
	}
	return false
}

// dropped reports whether a message is lost for no reason of the plant's.
func (n *Network) dropped(m nodes.Message) bool {
	if n.cfg.MessageLoss <= 0 {
		return false
	}
	u := random.Unit(random.Draw(n.cfg.Seed, messageName, m.Serial, uint64(m.From)))
	return u < n.cfg.MessageLoss
}

var messageName = random.Hash("message loss")
