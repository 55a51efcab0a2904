package packet

import (
	"slices"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/optical"
)

// loadAt is what a port had sent of each class by an instant, in IP bytes.
type loadAt struct {
	at   des.Time
	sent []uint64
}

// mostLoads bounds what a port keeps in a run with acts without number.
const mostLoads = 1024

// markLoads notes what each port has sent by now. It is called at outside
// acts, at which stretches begin and end.
func (n *Network) markLoads(now des.Time) {
	for _, s := range n.sites {
		for i := range s.ports {
			q := &s.ports[i]
			if k := len(q.loads); k == 0 || k < mostLoads && q.loads[k-1].at != now {
				q.loads = append(q.loads, loadAt{now, slices.Clone(q.load)})
			}
		}
	}
}

// PortLoad is what one port sent of each class between two instants.
type PortLoad struct {
	Circuit nodes.CircuitID
	From    nodes.SiteID
	IPBytes []uint64 // by class
}

// Loads reports what the ports that sent anything sent between two outside
// acts, by site and circuit. An instant at which there was no act, or to which
// the run has not come, stands for the present. Packets are counted at the
// instant at which their sending begins.
func (n *Network) Loads(from, to des.Time) []PortLoad {
	var out []PortLoad
	for _, s := range n.sites {
		for i := range s.ports {
			q := &s.ports[i]
			a, b := q.sentBy(from), q.sentBy(to)
			x := PortLoad{Circuit: q.circuit, From: s.id, IPBytes: make([]uint64, len(a))}
			any := false
			for c := range a {
				x.IPBytes[c] = b[c] - a[c]
				any = any || x.IPBytes[c] > 0
			}
			if any {
				out = append(out, x)
			}
		}
	}
	return out
}

// Sent reports what every port has sent since the start of the run, by site and
// circuit.
func (n *Network) Sent() []PortLoad {
	var out []PortLoad
	for _, s := range n.sites {
		for i := range s.ports {
			q := &s.ports[i]
			out = append(out, PortLoad{Circuit: q.circuit, From: s.id, IPBytes: slices.Clone(q.load)})
		}
	}
	return out
}

// sentBy is what the port had sent at the act at the given instant.
func (q *port) sentBy(at des.Time) []uint64 {
	for i := range q.loads {
		if q.loads[i].at == at {
			return q.loads[i].sent
		}
	}
	return q.load
}

// Turn is a change in the life of a port: from At on it was in State and sent
// along Fibres, nil when it has never been given a way.
type Turn struct {
	At     des.Time
	State  nodes.PortState
	Fibres []nodes.FibreID
}

// mostTurns bounds what a port keeps of its life.
const mostTurns = 4096

// turn notes how the port stands at now.
func (q *port) turn(now des.Time) {
	t := Turn{At: now, State: q.state}
	if q.pipe != nil {
		t.Fibres = q.pipe.fibres
	}
	if k := len(q.turns); k > 0 && q.turns[k-1].At == now {
		q.turns[k-1] = t
	} else if k < mostTurns {
		q.turns = append(q.turns, t)
	}
}

// Turns lists the changes in the life of the port that a circuit has at a site,
// in order of time; nil when it has none there.
func (n *Network) Turns(s nodes.SiteID, c nodes.CircuitID) []Turn {
	if q := n.sites[s].portOfCircuit(c); q != nil {
		return q.turns
	}
	return nil
}

// Dark lists when and where fibre f was dark, in the order in which it became
// so; the caller must not change it.
func (n *Network) Dark(f nodes.FibreID) []optical.Span { return n.light.Spans(int(f)) }
