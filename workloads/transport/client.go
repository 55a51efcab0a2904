package transport

import (
	"ferrule/des"
	"ferrule/nodes"
)

// client is the receiving end of one transfer.
type client struct {
	timer
	state   state
	gen     uint8
	tries   uint8
	pending uint8 // segments in order not acknowledged
	echo    bool  // congestion was experienced, and the sender has not yet answered
	began   des.Time
	bytes   uint32
	total   uint32
	next    uint32   // segments before it are there
	beyond  int32    // segments there beyond it
	there   []uint64 // ring of bits by number; nil: none beyond
}

// delay is how long an acknowledgement waits for a second segment: common
// practice, no source; RFC 5681 allows 500 ms.
const delay = 40 * des.Millisecond

// ask begins a transfer of so many bytes, if there is a connection for it.
func (h *Host) ask(now des.Time, bytes uint32) {
	h.tally.Began++
	id := uint32(0)
	switch {
	case h.freeLen > 0 && (len(h.clients) >= reuseAbove || h.free[h.freeHead].since < now-quiet):
		id = h.free[h.freeHead].id
		h.freeHead = (h.freeHead + 1) & (len(h.free) - 1)
		h.freeLen--
	case len(h.clients) < mostFlows:
		id = uint32(len(h.clients))
		h.clients = append(h.clients, client{timer: timer{entry: des.Never, at: des.Never, id: id << 1}})
	default:
		h.blocked++
		return
	}
	c := &h.clients[id]
	t := c.timer
	*c = client{timer: t, gen: (c.gen + 1) & 3, state: stateOpening, began: now, bytes: bytes}
	c.total, _ = segmentsOf(bytes)
	h.request(c, now)
}

// A flow number is used again when it has been quiet for so long, or when
// there are many.
const (
	quiet      = 4 * des.Second
	reuseAbove = 1 << 14
	mostFlows  = 1 << 16
)

// request asks, or asks again.
func (h *Host) request(c *client, now des.Time) {
	h.send(now, uint16(c.id>>1), header, kindOpen, uint32(c.gen)<<genShift|c.bytes)
	h.arm(&c.timer, c.id, now+min(rtoInitial<<min(c.tries, 7), rtoCeiling))
}

// confirm ends the handshake.
func (h *Host) confirm(c *client, now des.Time) {
	c.state = stateAsked
	h.acknowledge(c, now, 0)
	h.arm(&c.timer, c.id, now+min(rtoInitial<<min(c.tries, 7), rtoCeiling))
}

// lapsed answers the timer of a client.
func (h *Host) lapsed(c *client, now des.Time) {
	c.tries = min(c.tries+1, 7)
	switch c.state {
	case stateOpening:
		h.request(c, now)
	case stateAsked:
		h.confirm(c, now)
	case stateMoving:
		h.acknowledge(c, now, 0)
	default:
		panic("transport: a timer of a client that waits for nothing")
	}
}

// acknowledge tells the sender what is there; beyond is that of the segment
// that was the cause.
func (h *Host) acknowledge(c *client, now des.Time, beyond uint32) {
	c.pending = 0
	c.timer.at = des.Never
	h.send(now, uint16(c.id>>1), header, nodes.KindAck, ackWord(c.gen, c.echo, c.next, beyond))
}

// takes answers a segment of data.
func (h *Host) takes(c *client, now des.Time, p *nodes.Packet) {
	w := p.Word
	if c.state == stateComplete {
		h.acknowledge(c, now, 0)
		return
	}
	if c.state != stateMoving {
		c.state = stateMoving
		c.timer.at = des.Never
	}
	if w&dataReduced != 0 {
		c.echo = false
	}
	if p.Bits&nodes.ECNMask == nodes.CE {
		c.echo = true
	}
	no := near(c.next, w&serialMask)
	off := no - c.next
	switch {
	case int32(off) < 0 || off >= Window:
		h.acknowledge(c, now, 0)
	case off > 0:
		if h.holds(c, no) {
			h.tally.Good += uint64(p.Size - header)
		}
		h.acknowledge(c, now, off)
	default:
		h.tally.Good += uint64(p.Size - header)
		c.next++
		filled := c.beyond > 0
		for c.beyond > 0 && c.there[c.next>>6&uint32(len(c.there)-1)]>>(c.next&63)&1 != 0 {
			c.there[c.next>>6&uint32(len(c.there)-1)] &^= 1 << (c.next & 63)
			c.next++
			c.beyond--
		}
		if c.beyond == 0 && c.there != nil {
			h.rings.put(c.there)
			c.there = nil
		}
		c.pending++
		switch {
		case c.next == c.total && c.bytes != Endless:
			h.acknowledge(c, now, 0)
			h.complete(c, now)
		case filled || int(c.pending) >= h.fetch.AckEvery || w&dataLast != 0:
			h.acknowledge(c, now, 0)
		case c.timer.at == des.Never:
			h.arm(&c.timer, c.id, now+delay)
		}
	}
}

// holds keeps a segment that lies beyond those in order; it reports whether it
// is new.
func (h *Host) holds(c *client, no uint32) bool {
	if c.there == nil {
		c.there = h.rings.get(1)
	}
	for (no>>6)-(c.next>>6) >= uint32(len(c.there)) {
		wide := h.rings.get(2 * len(c.there))
		for i := range uint32(len(c.there)) {
			at := c.next>>6 + i
			wide[at&uint32(len(wide)-1)] = c.there[at&uint32(len(c.there)-1)]
		}
		h.rings.put(c.there)
		c.there = wide
	}
	word, bit := &c.there[no>>6&uint32(len(c.there)-1)], uint64(1)<<(no&63)
	if *word&bit != 0 {
		return false
	}
	*word |= bit
	c.beyond++
	return true
}

// complete tells of a transfer that is all there and gives its number back.
func (h *Host) complete(c *client, now des.Time) {
	c.state = stateComplete
	h.tally.Done = append(h.tally.Done, nodes.Transfer{Began: c.began, Ended: now, Bytes: nodes.Bytes(c.bytes)})
	if h.freeLen == len(h.free) {
		wide := make([]idle, max(16, 2*len(h.free)))
		for i := range h.freeLen {
			wide[i] = h.free[(h.freeHead+i)&(len(h.free)-1)]
		}
		h.free, h.freeHead = wide, 0
	}
	h.free[(h.freeHead+h.freeLen)&(len(h.free)-1)] = idle{now, c.id >> 1}
	h.freeLen++
}

// idle is a flow number that is not in use.
type idle struct {
	since des.Time
	id    uint32
}
