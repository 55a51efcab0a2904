package queue

import (
	"math"
	"math/bits"

	"ferrule/des"
	"ferrule/nodes"
)

// fair is weighted fair queueing of the queues of a tier, also called
// packetised generalised processor sharing: it serves packets in the order in
// which an ideal server would finish them that shares its rate among busy
// queues by weight at every instant. No packet leaves later than the ideal
// server would finish it by more than one packet's time.
//
// What higher tiers send is taken from the ideal server as well.
//
// Source: A. K. Parekh, R. G. Gallager, "A generalized processor sharing
// approach to flow control in integrated services networks: the single-node
// case", IEEE/ACM Transactions on Networking 1(3), 1993.
type fair struct {
	q        []fairQueue // by queue; weight 0: not of this tier
	busy     uint64      // queues that the ideal server serves
	weight   float64     // of those together
	virtual  float64     // bytes per weight that a busy queue has been served
	debt     float64     // bytes that higher tiers took and that have not passed yet
	rate     float64     // bytes per ps
	at       des.Time
	overhead nodes.Bytes
}

type fairQueue struct {
	weight float64
	finish float64 // of the last packet that arrived
	tags   tags    // of those waiting, in order of arrival
}

func newFair(classes []nodes.Class, queueOf []uint8, queues int, overhead nodes.Bytes) *fair {
	f := &fair{q: make([]fairQueue, queues), overhead: overhead}
	for i := range classes {
		if classes[i].Queue == nodes.QueueFair {
			f.q[queueOf[i]].weight = float64(classes[i].Weight)
		}
	}
	return f
}

func (f *fair) setRate(r nodes.Rate) { f.rate = float64(r) / 8 / float64(des.Second) }

// advance brings the ideal server up to now.
func (f *fair) advance(now des.Time) {
	work := float64(float64(now-f.at) * f.rate)
	f.at = now
	paid := min(work, f.debt)
	f.debt -= paid
	work -= paid
	for work > 0 && f.busy != 0 {
		next, which := math.Inf(1), 0
		for b := f.busy; b != 0; b &= b - 1 {
			if i := bits.TrailingZeros64(b); f.q[i].finish < next {
				next, which = f.q[i].finish, i
			}
		}
		need := float64((next - f.virtual) * f.weight)
		if need > work {
			f.virtual += work / f.weight
			return
		}
		work -= need
		f.virtual = next
		f.busy &^= 1 << which
		f.weight -= f.q[which].weight
	}
}

// arrive gives a packet its tag.
func (f *fair) arrive(now des.Time, q uint8, size nodes.Bytes) {
	f.advance(now)
	x := &f.q[q]
	start := f.virtual
	if f.busy&(1<<q) != 0 {
		start = x.finish
	} else {
		f.busy |= 1 << q
		f.weight += x.weight
	}
	x.finish = start + float64(size+f.overhead)/x.weight
	x.tags.push(x.finish)
}

// first is the queue whose front the ideal server finishes first.
func (f *fair) first(waiting uint64) uint8 {
	best, at := uint8(0), math.Inf(1)
	for b := waiting; b != 0; b &= b - 1 {
		if i := bits.TrailingZeros64(b); f.q[i].tags.front() < at {
			best, at = uint8(i), f.q[i].tags.front()
		}
	}
	return best
}

// left notes that a packet has left a queue.
func (f *fair) left(q uint8) { f.q[q].tags.head++ }

// steal notes that a higher tier sends.
func (f *fair) steal(now des.Time, size nodes.Bytes) {
	f.advance(now)
	f.debt += float64(size + f.overhead)
}

func (f *fair) clone() *fair {
	if f == nil {
		return nil
	}
	c := *f
	c.q = append([]fairQueue(nil), f.q...)
	for i := range c.q {
		c.q[i].tags.buf = append([]float64(nil), f.q[i].tags.buf...)
	}
	return &c
}

// tags is a first-in first-out queue of numbers that grows by doubling.
type tags struct {
	buf        []float64
	head, tail uint32
}

func (t *tags) push(x float64) {
	if int(t.tail-t.head) == len(t.buf) {
		buf := make([]float64, max(16, 2*len(t.buf)))
		n := 0
		for i := t.head; i != t.tail; i++ {
			buf[n] = t.buf[i&uint32(len(t.buf)-1)]
			n++
		}
		t.buf, t.head, t.tail = buf, 0, uint32(n)
	}
	t.buf[t.tail&uint32(len(t.buf)-1)] = x
	t.tail++
}

func (t *tags) front() float64 { return t.buf[t.head&uint32(len(t.buf)-1)] }
