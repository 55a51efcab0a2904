package measure

import "math"

// Jitter is the interarrival jitter of RTP receivers, a running mean of how
// much the transit time changes from one arrival to the next:
//
//	J += (|D| - J) / 16,  D = delay of this packet - delay of the one before.
//
// Packets are taken in the order of arrival. The unit is that of the delays,
// picoseconds. The statistic forgets within about 16 packets. It holds no
// pointer. The zero value has seen no packet.
//
// Source: RFC 3550, sections 6.4.1 and A.8 (2003).
type Jitter struct {
	last int64
	j    float64
	peak float64
	n    uint64
}

// Add takes the delay of the packet that arrived, in picoseconds.
func (j *Jitter) Add(delay int64) {
	d := math.Abs(float64(delay - j.last))
	j.last = delay
	j.n++
	if j.n == 1 {
		return
	}
	j.j += float64((d - j.j) * (1.0 / 16))
	j.peak = max(j.peak, j.j)
}

// Value returns the jitter after the last arrival, in picoseconds; ok is false
// before the second.
func (j *Jitter) Value() (ps float64, ok bool) { return j.j, j.n > 1 }

// Peak returns the greatest value that the jitter has had, in picoseconds; ok
// is false before the second arrival.
func (j *Jitter) Peak() (ps float64, ok bool) { return j.peak, j.n > 1 }

// JitterScaled is one step of the integer form of [Jitter]: s is the jitter
// times 16 before, d the magnitude of the change of transit time, the result
// the jitter times 16 after. The jitter reported is the result shifted right
// by four bits.
//
// Source: RFC 3550, section A.8 (2003).
func JitterScaled(s, d int64) int64 { return s + d - (s+8)>>4 }

// consecutiveGaps is how many gaps of sequence numbers a Consecutive keeps open.
const consecutiveGaps = 8

// Consecutive finds the differences of delay between packets sent one after
// the other, IPDV: delay(i) - delay(i-1), signed, for i-1 and i both delivered,
// in whatever order. It holds no pointer. The zero value has seen no packet.
//
// It remembers the highest sequence number and the packets on either side of
// the eight highest gaps. A pair is missed only when its first packet to
// arrive borders on none of these, that is, when eight newer gaps were open
// before the second came.
//
// Sources: RFC 3393, section 4 (2002); RFC 5481, section 4.1 (2009).
type Consecutive struct {
	top   edge
	seen  bool
	holes uint8 // how many of gaps are open
	gaps  [consecutiveGaps]gap
}

// edge is a delivered packet beside a gap.
type edge struct {
	delay int64
	seq   uint32
}

// gap is a run of sequence numbers that have not arrived, between two that have.
type gap struct{ left, right edge }

// Next takes a delivered packet. It returns the difference of its delay and
// that of the packet sent just before; ok is false if that one has not arrived
// (yet). A packet that arrives after one sent later may complete a second
// pair: see [Consecutive.Overtaken]. Duplicates must have been taken out.
func (c *Consecutive) Next(seq uint32, delay int64) (diff int64, ok bool) {
	if c.seen && seq == c.top.seq+1 {
		diff = delay - c.top.delay
		c.top = edge{delay, seq}
		return diff, true
	}
	diff, _, ok, _ = c.outOfLine(seq, delay)
	return diff, ok
}

// Overtaken does what Next does and also returns the difference later of the
// delay of the packet sent just after this one and the delay of this one;
// laterOK is false if that one has not arrived. A meter calls Overtaken instead
// of Next for packets that are reordered, see [Order.Add].
func (c *Consecutive) Overtaken(seq uint32, delay int64) (diff, later int64, ok, laterOK bool) {
	if c.seen && seq == c.top.seq+1 {
		diff, ok = c.Next(seq, delay)
		return diff, 0, ok, false
	}
	return c.outOfLine(seq, delay)
}

// outOfLine takes a packet that is not the one after the highest so far.
func (c *Consecutive) outOfLine(seq uint32, delay int64) (diff, later int64, ok, laterOK bool) {
	now := edge{delay, seq}
	switch {
	case !c.seen:
		// Packets with numbers below the first may follow: the gap that they
		// fill has no left edge, which number 2^32-1 stands for.
		c.seen = true
		c.top = now
		if seq > 0 {
			c.open(int(c.holes), gap{edge{0, ^uint32(0)}, now})
		}
		return 0, 0, false, false
	case seq > c.top.seq:
		c.open(int(c.holes), gap{c.top, now})
		c.top = now
		return 0, 0, false, false
	}
	for k := int(c.holes) - 1; k >= 0; k-- {
		g := c.gaps[k]
		first := g.left.seq + 1 // 0 when there is no left edge
		if seq < first || seq >= g.right.seq {
			continue
		}
		if ok = seq == first && seq > 0; ok {
			diff = delay - g.left.delay
		}
		if laterOK = seq == g.right.seq-1; laterOK {
			later = g.right.delay - delay
		}
		c.split(k, now)
		return diff, later, ok, laterOK
	}
	return 0, 0, false, false
}

// split puts e into gap k.
func (c *Consecutive) split(k int, e edge) {
	g := c.gaps[k]
	low, high := e.seq != g.left.seq+1, e.seq != g.right.seq-1
	switch {
	case low && high:
		c.gaps[k].right = e
		c.open(k+1, gap{e, g.right})
	case low:
		c.gaps[k].right = e
	case high:
		c.gaps[k].left = e
	default:
		copy(c.gaps[k:], c.gaps[k+1:c.holes])
		c.holes--
	}
}

// open inserts g at place k; if there is no room the lowest gap is forgotten.
func (c *Consecutive) open(k int, g gap) {
	if c.holes == consecutiveGaps {
		if k == 0 {
			return
		}
		copy(c.gaps[:], c.gaps[1:k])
		c.gaps[k-1] = g
		return
	}
	copy(c.gaps[k+1:c.holes+1], c.gaps[k:c.holes])
	c.gaps[k] = g
	c.holes++
}
