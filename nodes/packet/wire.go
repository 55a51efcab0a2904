package packet

import "ferrule/nodes"

// SendOver implements nodes.Wire.
func (x *local) SendOver(c nodes.CircuitID, m nodes.Message) {
	q := (*Site)(x).portOfCircuit(c)
	if q == nil {
		panic("packet: SendOver of a circuit that does not end here")
	}
	m.From, m.Sent, m.Circuit, m.Remote, m.Over = x.id, x.now, c, true, true
	x.serial++
	m.Serial = x.serial
	x.messages.Sent++
	if q.pipe == nil || q.state == nodes.PortDown || q.dead > 0 || x.deadRouter > 0 {
		x.messages.Lost++
		return
	}
	m.To, m.At, m.Epoch = q.pipe.to, x.now+q.pipe.delay, q.pipe.incarnation
	x.out = append(x.out, m)
}

// passed reports whether a message over a circuit met no darkness on its way,
// on one of the two routes of a 1+1 circuit.
func (s *Site) passed(m *nodes.Message) bool {
	for i := range s.inputs {
		p := s.inputs[i].pipe
		if p.circuit != m.Circuit || p.from != m.From || p.incarnation != m.Epoch && p.copies != m.Epoch {
			continue
		}
		dark := false
		for j := range p.dark {
			d := &p.dark[j]
			at := m.Sent + d.offset
			dark = dark || d.from <= at && at < d.to
		}
		if !dark {
			return true
		}
	}
	return false
}
