package packet

import (
	"slices"

	"ferrule/nodes"
	"ferrule/nodes/queue"
)

// What to do with a packet of a way: a port, an equal-cost set, or one of these.
const (
	hopNone int32 = -1 // no route
	hopHere int32 = -2 // it has arrived
	hopDead int32 = -3 // the router has failed
	hopSets int32 = 1 << 20
	hopHeld int32 = 1 << 21 // bit: it waits at the ingress
)

// rebuild computes what to do with each way from the table, the steering and
// the states of the ports.
func (s *Site) rebuild() {
	s.stale = false
	s.sets = s.sets[:0]
	for w := range s.hop {
		s.hop[w] = s.resolve(uint16(w))
	}
	for i := range s.held {
		s.hop[s.held[i].way] = hopHeld
	}
}

func (s *Site) resolve(way uint16) int32 {
	if s.deadRouter > 0 {
		return hopDead
	}
	n := s.net
	agg, dir := nodes.AggOf(way)
	target := n.plant.Aggregates[agg].Target(dir)
	if target == s.id {
		return hopHere
	}
	if s.steer != nil && s.steer[way] != nodes.None {
		c := s.steer[way]
		if q := s.portOfCircuit(c); q != nil {
			switch {
			case q.state == nodes.PortUp:
				return int32(s.portOf[c])
			case n.plant.Circuits[c].WhenDown == nodes.DownWait && q.pipe != nil:
				return int32(s.portOf[c])
			case n.plant.Circuits[c].WhenDown == nodes.DownDrop:
				return hopNone
			}
		}
	}
	if s.table == nil || int(target) >= len(s.table.Next) {
		return hopNone
	}
	var set []int16
	for _, c := range s.table.Next[target] {
		if q := s.portOfCircuit(c); q != nil && q.state == nodes.PortUp {
			set = append(set, s.portOf[c])
		}
	}
	switch len(set) {
	case 0:
		return hopNone
	case 1:
		return int32(set[0])
	}
	for i, o := range s.sets {
		if slices.Equal(o, set) {
			return hopSets + int32(i)
		}
	}
	s.sets = append(s.sets, set)
	return hopSets + int32(len(s.sets)-1)
}

// addPort gives the site the sending end of a circuit.
func (s *Site) addPort(c nodes.CircuitID, d nodes.Direction) {
	p := s.net.plant
	circuit := &p.Circuits[c]
	s.portOf[c] = int16(len(s.ports))
	disc := queue.New(queue.Config{
		Classes: p.Classes, ClassOf: s.net.classOf, Rate: circuit.Rate, MTU: circuit.MTU, Overhead: circuit.Overhead,
		Seed: s.net.cfg.Seed, Name: p.Sites[s.id].Name + " " + circuit.Name,
	})
	shedder, _ := disc.(queue.Shedder)
	s.ports = append(s.ports, port{
		disc: disc, shedder: shedder, line: nodes.NewLine(circuit.Rate),
		overhead: circuit.Overhead, circuit: c, dir: d, in: arrivals{key: -1},
		classOf: s.net.classOf, load: make([]uint64, len(p.Classes)),
		hold: circuit.Carries == nodes.CarriesMoved && circuit.WhenDown == nodes.DownWait,
	})
}

// addInput makes the site receive from p, in the order of circuit, direction
// and incarnation; of the two pipes of a 1+1 circuit the shorter goes first.
func (s *Site) addInput(p *pipe) {
	at, _ := slices.BinarySearchFunc(s.inputs, p, func(in input, p *pipe) int {
		a, b := in.pipe, p
		if a.circuit != b.circuit {
			return int(a.circuit - b.circuit)
		}
		return int(s.rank(a) - s.rank(b))
	})
	s.inputs = slices.Insert(s.inputs, at, input{pipe: p, lat: s.latencyOf(p.circuit)})
}

// latencyOf returns the forwarding path of a circuit's end.
func (s *Site) latencyOf(c nodes.CircuitID) *latency {
	for i := range s.inputs {
		if s.inputs[i].pipe.circuit == c {
			return s.inputs[i].lat
		}
	}
	p := s.net.plant
	l := newLatency(s.net.cfg.Forwarding[s.id], s.net.cfg.Seed, p.Sites[s.id].Name+" "+p.Circuits[c].Name)
	return &l
}
