package queue

import (
	"math"

	"ferrule/des"
	"ferrule/nodes"
)

// Constants of CoDel (RFC 8289, section 4).
const (
	CoDelTarget   = 5 * des.Millisecond
	CoDelInterval = 100 * des.Millisecond
)

// CoDel decides about packets as they leave a queue, by how long they have
// waited. The zero value is ready.
//
// Source: RFC 8289, section 5.
type CoDel struct {
	above    des.Time // when waiting longer than the target becomes a reason; 0: it is not
	next     des.Time // drop, while dropping
	count    uint32   // drops since dropping began
	last     uint32   // count when dropping last began
	dropping bool
	step     codelStep
}

// codelStep is where CoDel is in one service.
type codelStep uint8

const (
	codelFirst   codelStep = iota // packet of a service
	codelDropped                  // one was dropped while dropping
	codelEntered                  // one was dropped, and dropping began
)

// Fate is what CoDel does with a packet.
type Fate uint8

// Fates. After FateDrop the next packet is taken and judged at the same instant.
const (
	FateServe Fate = iota
	FateMark       // served with congestion experienced set
	FateDrop
)

// Judge says what becomes of a packet that was just taken from the front of the
// queue: it has waited so long, left bytes wait behind it, and mark says that
// it can be marked instead of dropped. It never drops the last packet: left
// must be above mtu for that.
func (c *CoDel) Judge(now, waited des.Time, left, mtu nodes.Bytes, mark bool) Fate {
	step := c.step
	c.step = codelFirst
	high := c.high(now, waited, left, mtu)
	switch {
	case step == codelEntered:
		return FateServe
	case !high:
		c.dropping = false
		return FateServe
	case c.dropping:
		if step == codelDropped {
			c.next = codelLaw(c.next, c.count)
		}
		if now < c.next {
			return FateServe
		}
		c.count++
		if mark {
			c.next = codelLaw(c.next, c.count)
			return FateMark
		}
		c.step = codelDropped
		return FateDrop
	}
	c.dropping = true
	if delta := int64(c.count) - int64(c.last); delta > 1 && now-c.next < 16*CoDelInterval {
		c.count = uint32(delta)
	} else {
		c.count = 1
	}
	c.next = codelLaw(now, c.count)
	c.last = c.count
	if mark {
		return FateMark
	}
	c.step = codelEntered
	return FateDrop
}

// high reports whether packets have waited longer than the target for an
// interval, more than a packet waiting behind.
func (c *CoDel) high(now, waited des.Time, left, mtu nodes.Bytes) bool {
	switch {
	case waited < CoDelTarget || left <= mtu:
		c.above = 0
	case c.above == 0:
		c.above = now + CoDelInterval
	default:
		return now >= c.above
	}
	return false
}

// Emptied notes that a service found the queue empty.
func (c *CoDel) Emptied() { c.above, c.dropping = 0, false }

// codelLaw is the control law: t + interval/sqrt(count).
func codelLaw(t des.Time, count uint32) des.Time {
	return t + des.Time(float64(CoDelInterval)/math.Sqrt(float64(count)))
}
