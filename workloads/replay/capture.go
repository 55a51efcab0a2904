package replay

import (
	"encoding/binary"
	"math/bits"
)

// Limits of a capture.
const (
	mostCaptured = 256 << 10 // bytes of one packet
	mostLinks    = 1024      // interfaces of a pcapng section
)

// raw is a packet of a capture. The time is since the epoch that the file has.
type raw struct {
	sec, ps int64
	link    uint32
	line    uint32 // bytes on the line
	b       []byte // what was captured, mostHead at most; good until the next one
}

// capture reads the packets of a pcap or pcapng file one by one.
type capture struct {
	window
	ng    bool
	order binary.ByteOrder // of the section
	nano  bool             // pcap: fractions are nanoseconds
	link  uint32           // pcap
	links []ngLink         // pcapng: of the section
	spare [mostHead]byte   // pcapng: head of a packet in a long block
}

// le and be are the two byte orders as values that cost no allocation.
var (
	le binary.ByteOrder = binary.LittleEndian
	be binary.ByteOrder = binary.BigEndian
)

// Marks that begin a file. The first and the third are written in the order of
// the writer; that of pcapng reads the same in both.
const (
	magicMicro = 0xa1b2c3d4
	magicNano  = 0xa1b23c4d
	magicNG    = 0x0a0d0d0a
	magicOrder = 0x1a2b3c4d
)

// begin reads what stands before the first packet. The window is at 0.
func (c *capture) begin() *Fault {
	if c.ng {
		c.links = c.links[:0]
		return nil // the first block is read with the others
	}
	h := c.peek(24)
	if len(h) < 24 {
		return c.cut("the header of the file")
	}
	c.order = le
	if m := be.Uint32(h); m == magicMicro || m == magicNano {
		c.order = be
	}
	c.nano = c.order.Uint32(h) == magicNano
	if v := c.order.Uint16(h[4:]); v != 2 {
		return fault("version", "write the capture as version 2.4", "%d is not known", v)
	}
	if c.link = c.order.Uint32(h[20:]) & 0xffff; !knownLink(c.link) {
		return badLink(c.link)
	}
	c.skip(24)
	return nil
}

// badLink is the fault of a link type that is not known.
func badLink(link uint32) *Fault {
	return fault("link type", "capture on Ethernet, or as raw IP, PPP, HDLC, MPLS or cooked", "%d is not known", link)
}

// cut is the fault of a file that ends too early.
func (c *capture) cut(what string) *Fault {
	if c.err != nil {
		return c.err
	}
	return fault("", "leave out what is not whole", "the file ends within %s", what)
}

// next reads the next packet. At the end of the file ok is false.
func (c *capture) next(p *raw) (ok bool, f *Fault) {
	if c.ng {
		return c.nextNG(p)
	}
	if c.left() == 0 {
		return false, nil
	}
	h := c.peek(16 + mostHead)
	if len(h) < 16 {
		return false, c.cut("the header of the packet")
	}
	o := c.order
	if c.order == le { // without the interface
		p.sec, p.ps = int64(binary.LittleEndian.Uint32(h)), int64(binary.LittleEndian.Uint32(h[4:]))
	} else {
		p.sec, p.ps = int64(binary.BigEndian.Uint32(h)), int64(binary.BigEndian.Uint32(h[4:]))
	}
	whole, unit := int64(1e6), int64(1e6) // parts of a second, picoseconds of a part
	if c.nano {
		whole, unit = 1e9, 1e3
	}
	if p.ps >= whole {
		return false, fault("time", "", "%d parts of a second are more than the %d of a whole one", p.ps, whole)
	}
	p.ps *= unit
	captured := o.Uint32(h[8:])
	p.line = max(o.Uint32(h[12:]), captured)
	p.link = c.link
	if captured > mostCaptured {
		return false, tooLong(captured)
	}
	if int64(captured) > c.left()-16 {
		return false, c.cut("the packet")
	}
	p.b = h[16:min(len(h), 16+int(captured))]
	c.skip(16 + int64(captured))
	return true, nil
}

// tooLong is the fault of a captured length that no capture has.
func tooLong(n uint32) *Fault {
	return fault("captured length", "", "%d bytes are more than %d", n, mostCaptured)
}

// ngLink is an interface of a pcapng section.
type ngLink struct {
	link   uint32
	resol  uint8 // as if_tsresol has it
	offset int64 // seconds
}

// Types of blocks.
const (
	blockInterface = 1
	blockPacket    = 2 // obsolete form
	blockSimple    = 3
	blockEnhanced  = 6
)

// nextNG reads blocks up to and including one with a packet.
func (c *capture) nextNG(p *raw) (ok bool, f *Fault) {
	for c.left() > 0 {
		h := c.peek(12)
		if len(h) < 12 {
			return false, c.cut("a block")
		}
		if be.Uint32(h) == magicNG {
			if f = c.section(h); f != nil {
				return false, f
			}
		} else if c.order == nil {
			return false, fault("", "", "the file does not begin with a section")
		}
		kind, total := c.order.Uint32(h), int64(c.order.Uint32(h[4:]))
		if total < 12 || total%4 != 0 {
			return false, fault("block length", "", "%d is not a multiple of 4 from 12", total)
		}
		if total > c.left() {
			return false, c.cut("a block")
		}
		end := c.left() - total // left behind the block
		switch kind {
		case magicNG:
			c.links = c.links[:0]
		case blockInterface:
			f = c.describe(total)
		case blockEnhanced, blockPacket:
			f = c.enhanced(p, kind, total)
			ok = true
		case blockSimple:
			f = fault("time", "capture with times", "a simple packet block has none")
		}
		if f != nil {
			return false, f
		}
		c.skip(c.left() - end - 4)
		if t := c.peek(4); len(t) < 4 || int64(c.order.Uint32(t)) != total {
			if c.err != nil {
				return false, c.err
			}
			return false, fault("block length", "", "is given as %d before the block and otherwise behind it", total)
		}
		if ok { // what p.b points to must stay until the next call
			c.skip(4)
			return true, nil
		}
		c.skip(4)
	}
	return false, nil
}

// section reads the byte order that the block at h begins.
func (c *capture) section(h []byte) *Fault {
	switch {
	case le.Uint32(h[8:]) == magicOrder:
		c.order = le
	case be.Uint32(h[8:]) == magicOrder:
		c.order = be
	default:
		return fault("byte order", "", "%#x is not known", be.Uint32(h[8:]))
	}
	if b := c.peek(16); len(b) == 16 {
		if v := c.order.Uint16(b[12:]); v != 1 {
			return fault("version", "write the capture as version 1.0", "%d is not known", v)
		}
	}
	return nil
}

// describe reads the block of an interface, of total bytes, without its end.
func (c *capture) describe(total int64) *Fault {
	if total < 20 {
		return fault("block length", "", "%d is too short for an interface", total)
	}
	if len(c.links) == mostLinks {
		return fault("", "", "a section has more than %d interfaces", mostLinks)
	}
	h := c.peek(16)
	if len(h) < 16 {
		return c.cut("a block")
	}
	l := ngLink{link: uint32(c.order.Uint16(h[8:])), resol: 6}
	c.skip(16)
	for left := total - 20; left >= 4; {
		o := c.peek(12)
		if len(o) < 4 {
			return c.cut("an option")
		}
		code, n := c.order.Uint16(o), int64(c.order.Uint16(o[2:]))
		size := 4 + (n+3)&^3
		if code == 0 {
			break
		}
		if size > left || int64(len(o)) < min(12, 4+n) {
			return fault("option", "", "option %d is longer than its block", code)
		}
		switch {
		case code == 9 && n == 1:
			l.resol = o[4]
		case code == 14 && n == 8:
			l.offset = int64(c.order.Uint64(o[4:]))
		}
		c.skip(size)
		left -= size
	}
	if l.resol&0x80 == 0 && l.resol > 18 || l.resol&0x7f > 63 {
		return fault("time resolution", "", "%#x is too fine", l.resol)
	}
	const most = 1 << 40 // seconds, 35 thousand years
	if l.offset > most || l.offset < -most {
		return fault("time offset", "", "%d s are out of range", l.offset)
	}
	c.links = append(c.links, l)
	return nil
}

// enhanced reads a block with a packet, of total bytes, up to its data.
func (c *capture) enhanced(p *raw, kind uint32, total int64) *Fault {
	h := c.peek(int(min(total, mostPeek)))
	if total < 32 || len(h) < 28 {
		return fault("block length", "", "%d is too short for a packet", total)
	}
	id := c.order.Uint32(h[8:])
	if kind == blockPacket {
		id = uint32(c.order.Uint16(h[8:]))
	}
	if int64(id) >= int64(len(c.links)) {
		return fault("interface", "", "%d was not described before", id)
	}
	l := c.links[id]
	if !knownLink(l.link) {
		return badLink(l.link)
	}
	captured := c.order.Uint32(h[20:])
	if captured > mostCaptured {
		return tooLong(captured)
	}
	if int64(captured) > total-32 {
		return fault("captured length", "", "%d bytes do not fit into a block of %d", captured, total)
	}
	p.sec, p.ps = l.time(uint64(c.order.Uint32(h[12:]))<<32 | uint64(c.order.Uint32(h[16:])))
	p.line = max(c.order.Uint32(h[24:]), captured)
	p.link = l.link
	p.b = h[28:min(len(h), 28+mostHead, 28+int(captured))]
	if int64(len(h)) < total { // the window moves before the block is over
		p.b = c.spare[:copy(c.spare[:], p.b)]
	}
	return nil
}

// tens are the powers of ten.
var tens = [19]uint64{1, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18}

// time converts a number of parts of a second; what is finer than a picosecond
// is left off.
func (l *ngLink) time(n uint64) (sec, ps int64) {
	if l.resol&0x80 != 0 {
		k := l.resol & 0x7f
		hi, lo := bits.Mul64(n&(1<<k-1), 1e12)
		part := lo
		if k > 0 {
			part = lo>>k | hi<<(64-k)
		}
		return int64(n>>k) + l.offset, int64(part)
	}
	whole := tens[l.resol]
	part := n % whole
	if l.resol <= 12 {
		part *= tens[12-l.resol]
	} else {
		part /= tens[l.resol-12]
	}
	return int64(n/whole) + l.offset, int64(part)
}
