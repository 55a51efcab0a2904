package packet

import (
	"slices"

	"ferrule/des"
	"ferrule/nodes"
)

// pipe is a trail with its packets in flight: a ring sorted by Due that one
// site fills and another empties. The filler's and the emptier's fields lie on
// different cache lines; publish, called alone, lets the emptier see what was
// filled.
type pipe struct {
	// Of the sending site.
	buf  []nodes.Packet
	tail uint64
	seen uint64 // head as last published: what lies before it may be overwritten
	open bool   // the sending port's present pipe

	_ [64]byte

	// Of the receiving site.
	rbuf   []nodes.Packet
	rlines []lineFrom
	head   uint64
	vis    uint64 // packets before it may be read
	dark   []darkSpan
	told   bool // the circuit's end has been told of darkness on this pipe

	_ [64]byte

	// Fixed, or changed only when the pipe is made and at outside acts.
	delay       des.Time
	circuit     nodes.CircuitID
	dir         nodes.Direction
	incarnation int32
	copies      int32  // incarnation of the pipe it is the second copy of; 0: none
	base        uint64 // packets that pipe had taken before
	from, to    nodes.SiteID
	fibres      []nodes.FibreID
	lines       []lineFrom // rates it is filled at; of the sending site
	overhead    nodes.Bytes
}

// darkSpan is a dark place on the way of a pipe.
type darkSpan struct {
	fibre  nodes.FibreID
	span   int
	offset des.Time // light from the sender to the place
	from   des.Time
	to     des.Time
}

// lineFrom is a rate and the instant from which it held.
type lineFrom struct {
	from des.Time
	line nodes.Line
}

// push adds a copy of k and returns it.
func (p *pipe) push(k *nodes.Packet) *nodes.Packet {
	if p.tail-p.seen == uint64(len(p.buf)) {
		p.grow()
	}
	c := &p.buf[p.tail&uint64(len(p.buf)-1)]
	*c = *k
	p.tail++
	return c
}

// grow doubles the ring. The emptier may still read the old one: it has its
// own view of it, and never writes to either.
//
//go:noinline
func (p *pipe) grow() {
	buf := make([]nodes.Packet, max(16, 2*len(p.buf)))
	for i := p.seen; i != p.tail; i++ {
		buf[i&uint64(len(buf)-1)] = p.buf[i&uint64(len(p.buf)-1)]
	}
	p.buf = buf
}

func (p *pipe) publish() {
	p.rbuf, p.rlines, p.vis, p.seen = p.buf, p.lines, p.tail, p.head
}

// next reports when the earliest visible packet is due, or Never.
func (p *pipe) next() des.Time {
	if p.head == p.vis {
		return des.Never
	}
	return p.rbuf[p.head&uint64(len(p.rbuf)-1)].Due
}

// lost reports whether k, due at the far end, met darkness on its way: whether
// the interval from its first to its last bit at a dark place meets the span.
func (p *pipe) lost(k *nodes.Packet) bool {
	left := k.Due - p.delay // its last bit left the sender
	ser := des.Time(-1)
	for i := range p.dark {
		d := &p.dark[i]
		if left+d.offset <= d.from {
			continue
		}
		if ser < 0 {
			ser = p.serialisation(left, nodes.Bytes(k.Size))
		}
		if left-ser+d.offset < d.to {
			return true
		}
	}
	return false
}

// setLine notes the rate at which p is filled from an instant on, and forgets
// rates of which nothing can be under way any more.
func (p *pipe) setLine(from des.Time, l nodes.Line) {
	p.lines = append(p.lines, lineFrom{from, l})
	for len(p.lines) > 2 && p.lines[1].from < from-p.delay-des.Second {
		p.lines = p.lines[1:]
	}
}

// serialisation reports how long a packet whose last bit left at the given
// instant took to send.
func (p *pipe) serialisation(left des.Time, size nodes.Bytes) des.Time {
	i := len(p.rlines) - 1
	for ; i > 0; i-- {
		if t := p.rlines[i].line.TxTime(size + p.overhead); p.rlines[i].from+t <= left {
			return t
		}
	}
	return p.rlines[0].line.TxTime(size + p.overhead)
}

// darken notes a dark place; lighten ends the spans of a fibre.
func (p *pipe) darken(d darkSpan) { p.dark = append(p.dark, d) }

// lighten reports whether it ended any, and how long after now the receiver
// sees light again: that from the farthest of the dark places.
func (p *pipe) lighten(f nodes.FibreID, now des.Time, spans []int) (gone des.Time, lit bool) {
	for i := range p.dark {
		if d := &p.dark[i]; d.fibre == f && d.to == des.Never && slices.Contains(spans, d.span) {
			d.to = now
			gone, lit = max(gone, p.delay-d.offset), true
		}
	}
	return gone, lit
}

// darkAtEnd reports whether the light that arrives at the receiver at t is
// missing.
func (p *pipe) darkAtEnd(t des.Time) bool {
	for i := range p.dark {
		d := &p.dark[i]
		gone := p.delay - d.offset
		if d.from+gone <= t && (d.to == des.Never || t < d.to+gone) {
			return true
		}
	}
	return false
}

// darkSince reports whether the light that arrives at the receiver has been
// missing from the one instant to the other.
func (p *pipe) darkSince(from, to des.Time) bool {
	for i := range p.dark {
		d := &p.dark[i]
		gone := p.delay - d.offset
		if d.from+gone <= from && (d.to == des.Never || to < d.to+gone) {
			return true
		}
	}
	return false
}

// prune forgets spans that no packet still under way can meet.
func (p *pipe) prune(now des.Time) {
	keep := p.dark[:0]
	for _, d := range p.dark {
		if d.to == des.Never || d.to+p.delay+des.Second > now {
			keep = append(keep, d)
		}
	}
	p.dark = keep
}

// over reports whether the pipe crosses fibre f, the light from its sender to
// the near end of f, and the way in which it crosses.
func (p *pipe) over(plant *nodes.Plant, f nodes.FibreID) (ok bool, before des.Time, dir nodes.Direction) {
	at := p.from
	for _, g := range p.fibres {
		fibre := &plant.Fibres[g]
		if g == f {
			return true, before, fibre.From(at)
		}
		before += fibre.Delay
		at = fibre.Other(at)
	}
	return false, 0, nodes.Out
}

func (p *pipe) clone() *pipe {
	c := *p
	c.buf = append([]nodes.Packet(nil), p.buf...)
	c.rbuf = c.buf
	c.dark = append([]darkSpan(nil), p.dark...)
	c.lines = append([]lineFrom(nil), p.lines...)
	c.rlines = c.lines[:len(p.rlines):len(p.rlines)]
	return &c
}
