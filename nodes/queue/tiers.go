package queue

import (
	"fmt"
	"math/bits"

	"ferrule/des"
	"ferrule/nodes"
)

// Tiers serves classes in tiers: a strict class is a tier of its own, all
// weighted classes together are one tier shared by deficit round robin (M.
// Shreedhar, G. Varghese, "Efficient fair queueing using deficit round robin",
// 1995), and all FIFO classes together are one queue. A tier stands where its
// first class stands; a packet leaves from the highest tier that has one.
// Each class has a buffer of its own and is dropped from the tail.
type Tiers struct {
	q        []lane
	queueOf  []uint8 // class -> index in q
	classOf  []uint8 // way -> class, shared and never written
	nonEmpty uint64  // bit per queue
	wrr      uint64  // bits of the queues in the weighted tier
	class    []budget
	n        int
	bytes    nodes.Bytes
	turn     uint8 // queue whose turn it is in the weighted tier
	granted  bool  // it has had its quantum this turn
}

// lane is one queue.
type lane struct {
	ring    ring
	quantum nodes.Bytes // weighted tier only
	deficit nodes.Bytes
	class   int32 // of all packets in it, or several
}

// budget is a class's room.
type budget struct {
	waiting, limit nodes.Bytes
	count, most    int
	time           des.Time
}

const unlimited = 1 << 62

// several says that a queue holds packets of several classes.
const several = -1

// NewTiers builds the discipline for the classes, highest first, of a port of
// rate r; classOf gives each way's class and must not change. It panics on
// more than 64 classes or a weight outside 1..100.
func NewTiers(classes []nodes.Class, classOf []uint8, r nodes.Rate) *Tiers {
	if len(classes) > 64 {
		panic(fmt.Sprintf("queue: %d classes", len(classes)))
	}
	t := &Tiers{queueOf: make([]uint8, len(classes)), classOf: classOf, class: make([]budget, len(classes))}
	fifo, least := -1, 101
	for _, c := range classes {
		if c.Queue == nodes.QueueWeight || c.Queue == nodes.QueueFair {
			if c.Weight < 1 || c.Weight > 100 {
				panic(fmt.Sprintf("queue: class %s has weight %d %%", c.Name, c.Weight))
			}
			least = min(least, c.Weight)
		}
	}
	add := func(l lane, class int) uint8 {
		l.class = int32(class)
		t.q = append(t.q, l)
		return uint8(len(t.q) - 1)
	}
	weighted := false
	for i, c := range classes {
		switch c.Queue {
		case nodes.QueueStrict:
			t.queueOf[i] = add(lane{}, i)
		case nodes.QueueFIFO:
			if fifo < 0 {
				fifo = int(add(lane{}, several))
			}
			t.queueOf[i] = uint8(fifo)
		case nodes.QueueWeight, nodes.QueueFair:
			if weighted {
				if t.queueOf[i] == 0 && t.wrr&1 == 0 {
					panic("queue: classes served by DRR beside classes served by WFQ")
				}
				continue
			}
			weighted = true
			for j := i; j < len(classes); j++ { // the whole tier stands here
				if d := classes[j]; d.Queue == c.Queue {
					q := add(lane{quantum: DefaultQuantum * nodes.Bytes(d.Weight) / nodes.Bytes(least)}, j)
					t.queueOf[j] = q
					t.wrr |= 1 << q
				}
			}
			t.turn = t.queueOf[i]
		default:
			panic(fmt.Sprintf("queue: unknown queueing %d", c.Queue))
		}
	}
	for i, c := range classes {
		b := &t.class[i]
		b.most, b.limit, b.time = unlimited, unlimited, 0
		switch {
		case c.BufferPackets > 0:
			b.most = c.BufferPackets
		case c.BufferBytes > 0:
			b.limit = c.BufferBytes
		case c.BufferTime > 0:
			b.time = c.BufferTime
		default:
			b.time = DefaultBuffer
		}
	}
	t.SetRate(r)
	return t
}

// SetRate implements Discipline.
func (t *Tiers) SetRate(r nodes.Rate) {
	for i := range t.class {
		if b := &t.class[i]; b.time > 0 {
			hi, lo := bits.Mul64(uint64(b.time), uint64(r))
			v, _ := bits.Div64(hi, lo, 8*uint64(des.Second))
			b.limit = nodes.Bytes(v)
		}
	}
}

// Enqueue implements Discipline.
func (t *Tiers) Enqueue(_ des.Time, p *nodes.Packet) Verdict {
	class := t.classOf[p.Way]
	b := &t.class[class]
	size := nodes.Bytes(p.Size)
	if b.waiting+size > b.limit || b.count >= b.most {
		return Dropped
	}
	b.waiting += size
	b.count++
	t.bytes += size
	t.n++
	q := t.queueOf[class]
	t.q[q].ring.push(p)
	t.nonEmpty |= 1 << q
	return Kept
}

// Dequeue implements Discipline.
func (t *Tiers) Dequeue(des.Time) *nodes.Packet {
	if t.nonEmpty == 0 {
		return nil
	}
	q := uint8(bits.TrailingZeros64(t.nonEmpty))
	if t.wrr&(1<<q) != 0 {
		q = t.robin()
	}
	return t.take(q)
}

// robin moves the turn of the weighted tier, which is not empty, to the queue
// that may send next.
func (t *Tiers) robin() uint8 {
	for {
		l := &t.q[t.turn]
		if t.nonEmpty&(1<<t.turn) != 0 {
			if !t.granted {
				l.deficit += l.quantum
				t.granted = true
			}
			if size := nodes.Bytes(l.ring.front().Size); size <= l.deficit {
				l.deficit -= size
				return t.turn
			}
		}
		t.pass()
	}
}

// pass gives the turn to the next queue of the weighted tier that waits.
func (t *Tiers) pass() {
	t.granted = false
	waiting := t.nonEmpty & t.wrr
	later := waiting &^ (2<<t.turn - 1)
	if later == 0 {
		later = waiting
	}
	t.turn = uint8(bits.TrailingZeros64(later))
}

// take removes the front of queue q.
func (t *Tiers) take(q uint8) *nodes.Packet {
	l := &t.q[q]
	p := l.ring.front()
	l.ring.head++
	if l.ring.head == l.ring.tail {
		l.ring.head, l.ring.tail = 0, 0
		t.nonEmpty &^= 1 << q
		if l.deficit = 0; q == t.turn {
			t.granted = false
		}
	}
	class := l.class
	if class == several {
		class = int32(t.classOf[p.Way])
	}
	b := &t.class[class]
	size := nodes.Bytes(p.Size)
	b.waiting -= size
	b.count--
	t.bytes -= size
	t.n--
	return p
}

// Len implements Discipline.
func (t *Tiers) Len() int { return t.n }

// Backlog implements Discipline.
func (t *Tiers) Backlog() nodes.Bytes { return t.bytes }

// Drain implements Discipline.
func (t *Tiers) Drain(lost func(p *nodes.Packet)) {
	for q := range t.q {
		for t.q[q].ring.len() > 0 {
			lost(t.take(uint8(q)))
		}
	}
}

// Clone implements Discipline.
func (t *Tiers) Clone() Discipline {
	c := *t
	c.q = append([]lane(nil), t.q...)
	for i := range c.q {
		c.q[i].ring = t.q[i].ring.clone()
	}
	c.class = append([]budget(nil), t.class...)
	return &c
}
