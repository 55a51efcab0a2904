// Package build turns a scenario and a plan into the processes of a run: the
// plant, the sources, the controller, and the acts from outside. It holds the
// one table from the names in files to constructors. It starts nothing.
package build

import (
	"fmt"

	"ferrule/des/random"
	"ferrule/nodes"
	"ferrule/nodes/packet"
	"ferrule/scenarios"
)

// Bytes that a packet takes on the line beside its IP bytes.
const (
	frameBytes   nodes.Bytes = 18 // Ethernet header and check sequence (IEEE 802.3)
	mappingBytes nodes.Bytes = 8  // GFP core and payload headers (ITU-T G.7041)
	labelBytes   nodes.Bytes = 4  // one MPLS label (RFC 3032), on moved traffic
)

// Overhead reports the bytes each packet takes on the line of a circuit beside
// its IP bytes.
func Overhead(c *scenarios.Circuit) nodes.Bytes {
	switch c.Framing {
	case scenarios.FramingNone:
		return 0
	case scenarios.FramingGFP:
		if c.Carries == nodes.CarriesMoved {
			return frameBytes + mappingBytes + labelBytes
		}
		return frameBytes + mappingBytes
	}
	panic(fmt.Sprintf("build: unknown framing %d", c.Framing))
}

// Plant describes what stands in the ground and every circuit that may exist
// under plan, by the ids of the scenario.
func Plant(sc *scenarios.Scenario, plan *scenarios.Plan) (*nodes.Plant, error) {
	p := &nodes.Plant{}
	for i := range sc.Sites {
		p.Sites = append(p.Sites, nodes.Site{Name: sc.Sites[i].Name, Converts: sc.Sites[i].Convert})
	}
	for i := range sc.Fibres {
		f := &sc.Fibres[i]
		n := nodes.Fibre{
			Name: f.Name, Ends: [2]nodes.SiteID{f.A, f.B}, Length: f.Length, Delay: f.Length.Light(),
			Channels: f.Channels, ChannelRate: f.ChannelRate, Lit: f.Lit, Slots: f.Slots,
		}
		for _, g := range f.RiskGroups {
			n.RiskGroups = append(n.RiskGroups, int32(g))
		}
		p.Fibres = append(p.Fibres, n)
	}
	for i := range sc.Classes {
		c := &sc.Classes[i]
		p.Classes = append(p.Classes, nodes.Class{
			Name: c.Name, Queue: c.Queue, Weight: c.Weight, BufferTime: c.BufferTime, BufferBytes: c.BufferBytes, BufferPackets: c.BufferPackets,
			Drop: c.Drop, ECN: c.ECN,
		})
	}
	for i := range sc.Aggregates {
		a := &sc.Aggregates[i]
		p.Aggregates = append(p.Aggregates, nodes.Aggregate{
			Name: a.Name, Class: a.Class, Ends: [2]nodes.SiteID{a.From, a.To}, OneWay: !a.BothWays,
		})
	}
	for i := range plan.Circuits {
		c, err := circuit(sc, plan, nodes.CircuitID(i))
		if err != nil {
			return nil, err
		}
		p.Circuits = append(p.Circuits, c)
	}
	return p, nil
}

func circuit(sc *scenarios.Scenario, plan *scenarios.Plan, id nodes.CircuitID) (nodes.Circuit, error) {
	c := &plan.Circuits[id]
	n := nodes.Circuit{
		Name: c.Name, Ends: [2]nodes.SiteID{c.A, c.B}, Slots: c.Slots, Channel: c.Size == scenarios.SizeChannel,
		Payload: c.Payload, Rate: c.Rate, Along: c.Along, Choose: c.Choose, ApartFrom: c.ApartFrom,
		Recovery: c.Recovery, Shrink: c.Shrink, Carries: c.Carries, Metric: c.Metric, HoldOff: c.HoldOff, WhenDown: c.WhenDown,
		MTU: c.MTU, Overhead: Overhead(c), InPlace: c.InPlace,
	}
	n.Setup = priority(c.SetUpPriority, sc, plan, id)
	n.Hold = priority(c.HoldingPriority, sc, plan, id)
	n.Setup = max(n.Setup, n.Hold) // one given and one by default; RFC 3209 forbids the contrary
	return n, nil
}

// priority is the one given, or else the number of the highest class that the
// circuit carries: any class when it is routed, those moved onto it otherwise.
func priority(given int, sc *scenarios.Scenario, plan *scenarios.Plan, id nodes.CircuitID) uint8 {
	if given != nodes.None {
		return uint8(given)
	}
	if plan.Circuits[id].Carries == nodes.CarriesRouted {
		return 0
	}
	highest := 7
	carried := func(way uint16, chain []nodes.CircuitID) {
		for _, c := range chain {
			if c == id {
				agg, _ := nodes.AggOf(way)
				highest = min(highest, int(sc.Aggregates[agg].Class))
			}
		}
	}
	for _, m := range plan.Moves {
		carried(m.Way, m.Chain)
	}
	for _, acts := range [][]scenarios.Act{sc.Timeline, plan.Steps} {
		for i := range acts {
			for _, w := range acts[i].Moved {
				carried(w.Way, acts[i].Onto)
			}
		}
	}
	return uint8(highest)
}

// forwarding turns a site's law into what the packet layer takes.
func forwarding(s *scenarios.Site) (packet.Forwarding, error) {
	switch f := s.Forwarding; f.Kind {
	case random.Constant:
		return packet.Forwarding{Constant: psTime(f.Mean)}, nil
	case random.Lognormal:
		return packet.Forwarding{Median: psTime(f.Median), P99: psTime(f.P99)}, nil
	default:
		return packet.Forwarding{}, fmt.Errorf("%s:%d: site %s: forwarding is a duration or { median, p99 }", s.Pos.File, s.Pos.Line, s.Name)
	}
}
