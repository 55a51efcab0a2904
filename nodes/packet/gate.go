package packet

import (
	"slices"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/conditioner"
)

// gate conditions what one way sends, after the forwarding engine of its
// ingress: a meter discards what is red, a shaper delays what is left.
type gate struct {
	meter  *conditioner.Meter
	shaper *conditioner.Shaper
	buf    []nodes.Packet // waiting, Due when they leave
	head   int
}

// newGate makes the gate of a source, or nil.
func newGate(s *Source) *gate {
	if s.Meter == nil && s.Shaper == nil {
		return nil
	}
	g := &gate{}
	if s.Meter != nil {
		g.meter = s.Meter.Clone()
	}
	if s.Shaper != nil {
		g.shaper = s.Shaper.Clone()
	}
	return g
}

// passGate reports whether k, which is due, goes straight on. If not, it was
// lost or waits at the gate.
func (s *Site) passGate(g *gate, k *nodes.Packet, due des.Time) bool {
	size := nodes.Bytes(k.Size)
	if g.meter != nil {
		c := g.meter.Colour(due, size, k.Bits&nodes.ColourMask)
		k.Bits = k.Bits&^nodes.ColourMask | c
		if c == nodes.Red {
			s.lose(k, due, LostPoliced)
			return false
		}
	}
	if g.shaper == nil {
		return true
	}
	at, ok := g.shaper.Release(due, size)
	if !ok {
		s.lose(k, due, LostPoliced)
		return false
	}
	if g.head == len(g.buf) {
		g.buf, g.head = g.buf[:0], 0
	} else if g.head > 1024 && g.head > len(g.buf)/2 {
		g.buf, g.head = g.buf[:copy(g.buf, g.buf[g.head:])], 0
	}
	g.buf = append(g.buf, *k)
	w := &g.buf[len(g.buf)-1]
	w.Due = at
	w.Word += uint32((at-due)/des.Nanosecond) & waitMask(k.Bits)
	s.gateMin = min(s.gateMin, at)
	return false
}

// openGates lets go what leaves the shapers before end.
func (s *Site) openGates(end des.Time) {
	s.gateMin = des.Never
	for i := range s.sources {
		src := &s.sources[i]
		g := src.gate
		if g == nil || g.head == len(g.buf) {
			continue
		}
		h, key := s.hop[src.way], sourceKey+int32(i)
		for g.head < len(g.buf) && g.buf[g.head].Due < end {
			k := &g.buf[g.head]
			g.head++
			s.enter(k, k.Due, h, key)
		}
		if g.head < len(g.buf) {
			s.gateMin = min(s.gateMin, g.buf[g.head].Due)
		}
	}
}

// each calls f for every packet that waits.
func (g *gate) each(f func(p *nodes.Packet)) {
	if g == nil {
		return
	}
	for i := g.head; i < len(g.buf); i++ {
		f(&g.buf[i])
	}
}

func (g *gate) clone() *gate {
	if g == nil {
		return nil
	}
	c := *g
	if g.meter != nil {
		c.meter = g.meter.Clone()
	}
	if g.shaper != nil {
		c.shaper = g.shaper.Clone()
	}
	c.buf = slices.Clone(g.buf)
	return &c
}
