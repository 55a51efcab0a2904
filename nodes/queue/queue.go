// Package queue holds the disciplines by which a port serves its classes and
// the policies by which it refuses packets.
//
// A discipline owns the packets it has kept, as values in rings. It schedules
// nothing and holds no clock: now is handed in and never decreases. It belongs
// to one port and so to one goroutine at a time.
package queue

import (
	"ferrule/des"
	"ferrule/nodes"
)

// Verdict is what became of an offered packet.
type Verdict uint8

// Verdicts.
const (
	Kept    Verdict = iota
	Dropped         // no room: tail drop
	Refused         // by active queue management
)

// A Discipline decides which waiting packet leaves next and which is refused.
// queuetest holds every implementation to this contract.
type Discipline interface {
	// Enqueue offers *p at now; its class follows from its way. When it is
	// kept, the discipline has its own copy.
	Enqueue(now des.Time, p *nodes.Packet) Verdict

	// Dequeue returns the packet that leaves at now, or nil when none waits. It
	// serves whenever something waits. What it returns is valid, and the
	// caller's to change, until the next call of Enqueue or Drain.
	Dequeue(now des.Time) *nodes.Packet

	// Len is the number of packets waiting.
	Len() int

	// Backlog is the number of IP bytes waiting.
	Backlog() nodes.Bytes

	// SetRate tells the rate of the port, which buffers given in time follow.
	SetRate(r nodes.Rate)

	// Drain calls lost for every waiting packet, in the order in which they
	// would have been looked at class by class, and empties the queue.
	Drain(lost func(p *nodes.Packet))

	// Clone returns a copy that shares nothing.
	Clone() Discipline
}

// DefaultBuffer holds when a class gives no buffer.
const DefaultBuffer = 50 * des.Millisecond

// DefaultQuantum is the DRR quantum, in bytes, of the class with the least
// weight: at least one packet of the default MTU with its framing, so that
// service costs O(1) a packet (Shreedhar and Varghese, 1995).
const DefaultQuantum nodes.Bytes = 1600

// ring is a first-in first-out queue of packets that grows by doubling.
type ring struct {
	buf        []nodes.Packet
	head, tail uint32
}

func (r *ring) len() int { return int(r.tail - r.head) }

func (r *ring) push(p *nodes.Packet) {
	if int(r.tail-r.head) == len(r.buf) {
		r.grow()
	}
	r.buf[r.tail&uint32(len(r.buf)-1)] = *p
	r.tail++
}

//go:noinline
func (r *ring) grow() {
	buf := make([]nodes.Packet, max(16, 2*len(r.buf)))
	n := 0
	for i := r.head; i != r.tail; i++ {
		buf[n] = r.buf[i&uint32(len(r.buf)-1)]
		n++
	}
	r.buf, r.head, r.tail = buf, 0, uint32(n)
}

func (r *ring) front() *nodes.Packet { return &r.buf[r.head&uint32(len(r.buf)-1)] }

func (r *ring) clone() ring {
	c := *r
	c.buf = append([]nodes.Packet(nil), r.buf...)
	return c
}
