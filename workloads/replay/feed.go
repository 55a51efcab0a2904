package replay

import (
	"bytes"

	"ferrule/nodes"
)

// record is a packet as it is to be sent.
type record struct {
	at   int64 // ps since the earliest of the file
	size uint16
	flow uint16
}

// feed reads the packets of a trace from the first to the last, as often as it
// is rewound: all of them, or those of one class and direction.
type feed struct {
	t     *Trace
	class int16 // or nodes.None for all
	way   uint8 // bit of the direction
	seen  int64 // packets of the file so far

	cap  capture
	head head
	pkt  raw

	tab    table
	guess  int16 // class of the row before
	fields [8][]byte
	cols   [8]int

	flows  flowHeap
	sort   sorter
	counts *tally // nil: nobody asks
}

// newFeed returns a feed of one class and direction.
func newFeed(t *Trace, class int16, way uint8) *feed {
	f := &feed{t: t, class: class, way: way}
	switch t.format {
	case PCAP, PCAPNG:
		f.cap = capture{window: newWindow(t.file, t.size, t.held), ng: t.format == PCAPNG}
	case Packets:
		f.tab = table{window: newWindow(t.file, t.size, t.held)}
	case Flows:
	default:
		panic("replay: no such format")
	}
	if t.disordered {
		f.sort.ring = make([]record, orderWindow)
	}
	return f
}

// rewind goes back to the first packet.
func (f *feed) rewind() *Fault {
	f.seen = 0
	f.sort.head, f.sort.n, f.sort.over = 0, 0, false
	switch f.t.format {
	case PCAP, PCAPNG:
		f.cap.rewind()
		f.cap.order = nil
		return f.cap.begin()
	case Packets:
		return f.tab.restart(packetHead)
	default:
		f.flows.rewind()
		return nil
	}
}

// next returns the next packet of the class. At the end of the file ok is
// false.
func (f *feed) next(r *record) (ok bool, bad *Fault) {
	if f.sort.ring == nil {
		return f.read(r)
	}
	for !f.sort.full() && !f.sort.over {
		ok, bad = f.read(r)
		if bad != nil {
			return false, bad
		}
		if ok {
			f.sort.push(*r)
		} else {
			f.sort.over = true
		}
	}
	return f.sort.pop(r), nil
}

// read returns the next packet of the class in the order of the file.
func (f *feed) read(r *record) (ok bool, bad *Fault) {
	switch f.t.format {
	case PCAP, PCAPNG:
		return f.readCapture(r)
	case Packets:
		return f.readRow(r)
	default:
		return f.flows.next(f.t.flows, f.class, f.way, r), nil
	}
}

// wanted reports whether the feed is of a class and of one of ways.
func (f *feed) wanted(class int16, ways uint8) bool {
	return class == f.class && ways&f.way != 0
}

// readCapture returns the next packet of a capture.
func (f *feed) readCapture(r *record) (ok bool, bad *Fault) {
	for {
		if ok, bad = f.cap.next(&f.pkt); !ok || bad != nil {
			if bad != nil {
				bad.Packet = f.seen + 1
			}
			return false, bad
		}
		f.seen++
		p, h := &f.pkt, &f.head
		what := h.parse(p.link, p.b, p.line)
		class, ways := int16(nodes.None), uint8(0)
		if what == isIP {
			class, ways = assign(f.t.rules, h.dscp, h.from, h.to)
		}
		if f.counts != nil {
			if bad = f.t.meet(f.seen, p.sec, p.ps, f.counts); bad != nil {
				bad.Packet, bad.Field = f.seen, "time"
				return false, bad
			}
			f.counts.add(what, class, ways, int64(h.size))
		}
		if what == isIP && f.wanted(class, ways) {
			r.at, r.size, r.flow = f.t.since(p.sec, p.ps), h.size, h.flow
			return true, nil
		}
	}
}

// readRow returns the next packet of a table.
func (f *feed) readRow(r *record) (ok bool, bad *Fault) {
	t := &f.tab
	for {
		if ok, bad = t.next(); !ok || bad != nil {
			return false, bad
		}
		f.seen++
		if bad = t.fields(&f.fields, &f.cols); bad != nil {
			return false, bad
		}
		x := &f.fields
		sec, ps, ok := seconds(x[0])
		if !ok {
			return false, t.bad(0, x[0], f.cols[0], "is not a time", "write seconds, such as 0.000125, to the picosecond at most")
		}
		size, ok := number(x[1], 65535)
		if !ok || size == 0 {
			return false, t.bad(1, x[1], f.cols[1], "is not the size of a packet", "write the bytes of the IP packet, 1 to 65535")
		}
		class, ok := f.classOf(x[2])
		if !ok {
			return false, t.bad(2, x[2], f.cols[2], "is not a class", "write the name of a class of the scenario")
		}
		flow := int64(0)
		if len(t.head) > 3 {
			if flow, ok = number(x[3], 65535); !ok {
				return false, t.bad(3, x[3], f.cols[3], "is not a number of a flow", "write 0 to 65535")
			}
		}
		ways := waysBits(Both)
		if f.counts != nil {
			if bad = f.t.meet(f.seen, sec, ps, f.counts); bad != nil {
				bad.Field = t.head[0]
				return false, t.at(f.cols[0], bad)
			}
			f.counts.add(isIP, class, ways, size)
		}
		if f.wanted(class, ways) {
			r.at, r.size, r.flow = f.t.since(sec, ps), uint16(size), uint16(flow)
			return true, nil
		}
	}
}

// classOf finds a class by its name; that of the row before is tried first.
func (f *feed) classOf(name []byte) (class int16, ok bool) {
	names := f.t.classes
	if int(f.guess) < len(names) && string(name) == names[f.guess] {
		return f.guess, true
	}
	for i := range names {
		if string(name) == names[i] {
			f.guess = int16(i)
			return f.guess, true
		}
	}
	return nodes.None, false
}

// clone returns a feed at the same place that shares nothing that changes.
func (f *feed) clone() *feed {
	c := *f
	c.cap.window = f.cap.window.clone()
	c.cap.links = append([]ngLink(nil), f.cap.links...)
	c.tab.window = f.tab.window.clone()
	c.tab.row, c.fields, c.pkt.b = nil, [8][]byte{}, nil
	c.flows.heap = append([]sending(nil), f.flows.heap...)
	if f.sort.ring != nil {
		c.sort.ring = append([]record(nil), f.sort.ring...)
	}
	return &c
}

// orderWindow is how many packets are looked at to find the earliest.
const orderWindow = 512

// sorter puts packets in order of time that are nearly so. Packets of one time
// keep their order.
type sorter struct {
	ring    []record // length is orderWindow; nil: all are in order
	head, n int
	over    bool // no more will come
}

func (s *sorter) full() bool { return s.n == len(s.ring) }

// push adds a packet, from behind.
func (s *sorter) push(r record) {
	i := s.n
	for ; i > 0; i-- {
		before := s.ring[(s.head+i-1)%orderWindow]
		if before.at <= r.at {
			break
		}
		s.ring[(s.head+i)%orderWindow] = before
	}
	s.ring[(s.head+i)%orderWindow] = r
	s.n++
}

// pop takes the first packet.
func (s *sorter) pop(r *record) bool {
	if s.n == 0 {
		return false
	}
	*r = s.ring[s.head]
	s.head = (s.head + 1) % orderWindow
	s.n--
	return true
}

// isText reports whether the beginning of a table is that of head.
func isText(b []byte, head []string) bool {
	b = bytes.TrimPrefix(b, []byte("\ufeff"))
	for len(b) > 0 && (b[0] == '#' || b[0] == '\n' || b[0] == '\r') {
		i := bytes.IndexByte(b, '\n')
		if i < 0 {
			return false
		}
		b = b[i+1:]
	}
	return bytes.HasPrefix(b, []byte(head[0])) && bytes.HasPrefix(bytes.TrimLeft(b[len(head[0]):], " "), []byte(","))
}
