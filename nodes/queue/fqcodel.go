package queue

import (
	"ferrule/des"
	"ferrule/nodes"
)

// Constants of FQ-CoDel (RFC 8290, sections 4.1.1 and 5.2).
const (
	flowQueues = 1024
	mostBatch  = 64 // packets dropped at once from the longest queue
)

// flows is FQ-CoDel: a queue with CoDel for each flow, or several flows whose
// hashes meet, served by deficit round robin; what has just become busy goes
// first.
//
// Source: RFC 8290.
type flows struct {
	cells []cell
	free  int32 // head of the list of unused cells
	q     []flowQueue
	fresh chain // queues that have just become busy
	old   chain
	n     int
}

// cell is a waiting packet and the cell behind it.
type cell struct {
	p    nodes.Packet
	next int32
}

// chain is a list of queues by number; -1: none.
type chain struct{ head, tail int32 }

type flowQueue struct {
	head, tail int32 // cells; -1: none
	next       int32 // queue in its chain
	listed     bool
	credits    int32
	bytes      int32
	codel      CoDel
}

func newFlows() *flows {
	f := &flows{free: -1, fresh: chain{-1, -1}, old: chain{-1, -1}, q: make([]flowQueue, flowQueues)}
	for i := range f.q {
		f.q[i].head, f.q[i].tail = -1, -1
	}
	return f
}

// hash finds the queue of a flow.
func (f *flows) hash(p *nodes.Packet) int32 {
	x := (uint64(p.Way)<<16 | uint64(p.Flow)) * 0x9e3779b97f4a7c15
	x ^= x >> 32
	x *= 0xd6e8feb86659fd93
	return int32(x >> 54) // ten bits
}

func (f *flows) append(c *chain, i int32) {
	f.q[i].next = -1
	if c.tail < 0 {
		c.head = i
	} else {
		f.q[c.tail].next = i
	}
	c.tail = i
}

func (f *flows) pop(c *chain) int32 {
	i := c.head
	if c.head = f.q[i].next; c.head < 0 {
		c.tail = -1
	}
	return i
}

// push adds a copy of p behind its flow; quantum is what a queue that becomes
// busy may send at first.
func (f *flows) push(p *nodes.Packet, quantum nodes.Bytes) {
	c := f.free
	if c >= 0 {
		f.free = f.cells[c].next
		f.cells[c] = cell{*p, -1}
	} else {
		c = int32(len(f.cells))
		f.cells = append(f.cells, cell{*p, -1})
	}
	i := f.hash(p)
	q := &f.q[i]
	if q.tail < 0 {
		q.head = c
	} else {
		f.cells[q.tail].next = c
	}
	q.tail = c
	q.bytes += int32(p.Size)
	f.n++
	if !q.listed {
		q.listed, q.credits = true, int32(quantum)
		f.append(&f.fresh, i)
	}
}

// takeFrom removes the front packet of queue i. It stays readable until the
// next push.
func (f *flows) takeFrom(i int32) *nodes.Packet {
	q := &f.q[i]
	c := q.head
	if q.head = f.cells[c].next; q.head < 0 {
		q.tail = -1
	}
	f.cells[c].next, f.free = f.free, c
	p := &f.cells[c].p
	q.bytes -= int32(p.Size)
	f.n--
	return p
}

// turn finds the queue to be served, which is not empty if any is.
func (f *flows) turn(quantum nodes.Bytes) int32 {
	for {
		c := &f.fresh
		if c.head < 0 {
			c = &f.old
		}
		if c.head < 0 {
			return -1
		}
		q := &f.q[c.head]
		switch {
		case q.credits <= 0:
			q.credits += int32(quantum)
			f.append(&f.old, f.pop(c))
		case q.head >= 0:
			return c.head
		case c == &f.fresh && f.old.head >= 0: // it does not come back as new at once
			q.codel.Emptied()
			f.append(&f.old, f.pop(c))
		default:
			q.codel.Emptied()
			f.q[f.pop(c)].listed = false
		}
	}
}

// longest is the queue with the most bytes, the first of several.
func (f *flows) longest() int32 {
	best := int32(0)
	for i := range f.q {
		if f.q[i].bytes > f.q[best].bytes {
			best = int32(i)
		}
	}
	return best
}

func (f *flows) clone() *flows {
	if f == nil {
		return nil
	}
	c := *f
	c.cells = append([]cell(nil), f.cells...)
	c.q = append([]flowQueue(nil), f.q...)
	return &c
}

// serveFlow takes the packet of f that leaves at now, or nil; dropped ones are
// told of.
func (m *Managed) serveFlow(f *flows, now des.Time) *nodes.Packet {
	i := f.turn(m.mtu)
	if i < 0 {
		return nil
	}
	q := &f.q[i]
	for {
		p := f.takeFrom(i)
		class := m.classOf[p.Way]
		switch q.codel.Judge(now, now-p.Due, nodes.Bytes(q.bytes), m.mtu, m.marks(class, p)) {
		case FateMark:
			p.Bits |= nodes.CE
			fallthrough
		case FateServe:
			q.credits -= int32(p.Size)
			return p
		default:
			m.forget(p, now, Refused)
		}
	}
}
