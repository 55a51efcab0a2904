package build

import (
	"fmt"

	"ferrule/des/random"
	"ferrule/nodes"
	"ferrule/nodes/packet"
	"ferrule/scenarios"
	"ferrule/workloads/transport"
)

// closed reports whether an aggregate is a closed loop: hosts at its ends
// rather than sources.
func (m *maker) closed(id nodes.AggID) bool {
	model := m.sc.Traffic[m.sc.Aggregates[id].Traffic].Model
	return model == scenarios.ModelWeb || model == scenarios.ModelBulk
}

// Segments as hosts cut transfers into them, in bytes.
const (
	segmentPayload = 1460
	segmentHeader  = 40
)

// onWire is the mean of the IP bytes of a transfer, headers of its data
// included: the mean of the law and a header for each segment, of which there
// are as many on average as the sum over k of the chance of more than k.
func onWire(law random.Law) float64 {
	segments := 1.0
	for k := 1; k <= transport.Endless/segmentPayload; k++ {
		p := 1 - law.CDF(float64(k*segmentPayload)+0.5)
		if p < 1e-12 {
			break
		}
		segments += p
	}
	return law.Mean() + float64(segmentHeader*segments)
}

// fetched describes what is fetched over one way of an aggregate.
func (m *maker) fetched(id nodes.AggID, d nodes.Direction) (*transport.Config, error) {
	a := &m.sc.Aggregates[id]
	t := &m.sc.Traffic[a.Traffic]
	c := &transport.Config{
		Name: WayName(a, d), Seed: m.seed, Algorithm: t.Transport, ECN: m.sc.Classes[a.Class].ECN,
		Start: max(a.Start, t.Start), Stop: min(a.Stop, t.Stop),
	}
	if t.Model == scenarios.ModelBulk {
		c.Standing = a.Flows
		return c, nil
	}
	law, err := t.Size.Law()
	if err != nil {
		return nil, err
	}
	if m.wire[a.Traffic] == 0 {
		m.wire[a.Traffic] = onWire(law)
	}
	c.Size, c.PerSecond = law, float64(a.Load)/8/m.wire[a.Traffic]
	return c, nil
}

// endpoints makes the hosts at both ends of an aggregate, and notes what it
// means to send.
func (m *maker) endpoints(id nodes.AggID, asked []float64) ([]packet.Endpoint, error) {
	a := &m.sc.Aggregates[id]
	fail := func(err error) ([]packet.Endpoint, error) {
		return nil, fmt.Errorf("%s:%d: aggregate %s: %w", a.Pos.File, a.Pos.Line, a.Name, err)
	}
	var over [2]*transport.Config
	for d := range nodes.Direction(2) {
		if d == nodes.Back && !a.BothWays {
			continue
		}
		c, err := m.fetched(id, d)
		if err != nil {
			return fail(err)
		}
		over[d] = c
		asked[nodes.WayOf(id, d)] = float64(a.Load)
	}
	var ends []packet.Endpoint
	for d := range nodes.Direction(2) { // at the end where way d begins
		h, err := transport.NewHost(nodes.WayOf(id, d), over[d.Reverse()], over[d])
		if err != nil {
			return fail(err)
		}
		s := conditioned(a, packet.Source{})
		ends = append(ends, packet.Endpoint{Way: nodes.WayOf(id, d), Endpoint: h, Meter: s.Meter, Shaper: s.Shaper})
	}
	return ends, nil
}
