package workloads

import (
	"cmp"
	"math"
	"slices"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
)

// What keyed draws of a train are about.
const (
	ofPhase  uint64 = iota // of a flow that stands at the start
	ofLength               // of a flow that stands at the start
	ofLast                 // size of the last packet of such a flow
)

// forever is the number of packets left to a flow that never ends.
const forever = math.MaxInt64

// A flow of a train. It has at least one packet to send.
type flow struct {
	due  des.Time // its next packet
	left int64    // packets, the next included
	id   uint32
	last uint16 // IP bytes of the last packet
}

// A train sends flows of equally spaced packets that all have one spacing.
// Whatever packet is sent, the next one of its flow comes one interval later
// and so after all that are waiting: a queue holds the flows in the right
// order and a packet costs the same however many flows there are.
//
// Flows stand for the whole run (count is above 0), or arrive and leave.
type train struct {
	ring       []flow // length is a power of two
	head, size int
	interval   des.Time
	full       uint16 // IP bytes of all packets but the last of a flow

	count    int           // of standing flows at factor 1; 0 if flows arrive
	arrivals clock         // never if flows stand
	first    random.Stream // arrivals.draws before any draw
	flows    *lengths
	draws    random.Stream // of what flows carry and nothing else

	ahead       changes
	start, stop des.Time
	mean        float64 // bit/s
	seed, name  uint64
	key         string
	seq, nextID uint32
	way         uint16
}

// newTrain returns a train without flows.
func newTrain(c Common, interval des.Time, full uint16) train {
	return train{
		ring: make([]flow, 16), interval: interval, full: full,
		arrivals: clock{next: des.Never},
		start:    c.Start, stop: c.Stop, mean: float64(c.Load),
		seed: c.Seed, name: random.Hash(c.Name), key: c.Name, way: c.Way,
	}
}

// stand gives the train count flows that last for ever. Flow i sends at a
// phase of its own, whatever the number of flows is.
func (t *train) stand(count int) {
	t.count = count
	t.rebuild(t.start, count)
}

// rebuild sets the train to count standing flows from the instant at on.
func (t *train) rebuild(at des.Time, count int) {
	flows := make([]flow, count)
	for i := range flows {
		due := t.start + t.phase(uint64(i))
		if due < at {
			due += (at - due + t.interval - 1) / t.interval * t.interval
		}
		flows[i] = flow{due, forever, uint32(i), t.full}
	}
	t.fill(flows)
}

// phase returns where in the interval flow i sends.
func (t *train) phase(i uint64) des.Time {
	u := random.Unit(random.Draw(t.seed, t.name, i, ofPhase))
	return des.Time(u * float64(t.interval))
}

// fill puts flows, which are all due within one interval, into the empty queue.
func (t *train) fill(flows []flow) {
	slices.SortFunc(flows, func(a, b flow) int {
		if c := cmp.Compare(a.due, b.due); c != 0 {
			return c
		}
		return cmp.Compare(a.id, b.id)
	})
	t.head, t.size = 0, 0
	for _, f := range flows {
		t.push(f)
	}
}

// arrive gives the train flows that arrive with a mean gap of gap ps, carry
// what flows says. At the start it stands as if it had been running for ever.
func (t *train) arrive(kind Gaps, gap float64, flows *lengths) {
	t.first = random.NewStream(t.seed, t.key+"/gap")
	t.draws = random.NewStream(t.seed, t.key+"/length")
	t.flows = flows
	t.arrivals = clock{kind: kind, mean: gap}
	t.populate(1)
}

// populate sets the train to what stands at the start at the given factor.
func (t *train) populate(factor float64) {
	t.arrivals.draws = t.first
	t.arrivals.start(t.start, factor)
	c := crowd{t.flows, float64(t.interval), t.seed, t.name, ofPhase, ofLength}
	met := c.meet(&t.arrivals, t.start, t.key)
	flows := make([]flow, len(met))
	for i, m := range met {
		last := t.lastOf(m.carries)
		if t.arrivals.kind == Poisson {
			last = t.lastOfStanding(m.index)
		}
		flows[i] = flow{t.start + m.wait, m.left, uint32(m.index), last}
	}
	t.fill(flows)
	for i := range flows { // numbered in the order in which they appear
		t.ring[(t.head+i)&(len(t.ring)-1)].id = uint32(i)
	}
	t.nextID = uint32(len(flows))
}

// lastOf returns the size of the last packet of a flow that carries x.
func (t *train) lastOf(x float64) uint16 {
	if t.flows.half == 0 {
		return t.full
	}
	return lastOfFile(x)
}

// lastOfStanding returns the size of the last packet of flow i met at the
// start: any size is as likely as another if packets can be shorter than full.
func (t *train) lastOfStanding(i uint64) uint16 {
	if t.flows.half == 0 {
		return t.full
	}
	u := random.Unit(random.Draw(t.seed, t.name, i, ofLast))
	return uint16(header + 1 + int(u*payload))
}

// push puts f last in the queue.
func (t *train) push(f flow) {
	if t.size == len(t.ring) {
		t.grow()
	}
	t.ring[(t.head+t.size)&(len(t.ring)-1)] = f
	t.size++
}

// grow doubles the queue.
func (t *train) grow() {
	ring := make([]flow, 2*len(t.ring))
	n := copy(ring, t.ring[t.head:])
	copy(ring[n:], t.ring[:t.head])
	t.ring, t.head = ring, 0
}

// due reports when the next packet is born, whether or not before stop.
func (t *train) due() des.Time {
	if t.size > 0 {
		return min(t.ring[t.head].due, t.arrivals.next)
	}
	return t.arrivals.next
}

// MeanRate implements [Source].
func (t *train) MeanRate() float64 { return t.mean }

// Next implements nodes.Source.
func (t *train) Next() des.Time {
	if at := t.due(); at < t.stop {
		return at
	}
	return des.Never
}

// Emit implements nodes.Source.
func (t *train) Emit(end des.Time, buf []nodes.Packet) []nodes.Packet {
	end = min(end, t.stop)
	for t.due() < end {
		limit := min(end, t.ahead.until())
		for t.due() < limit {
			buf = t.run(min(limit, t.arrivals.next), buf)
			if t.arrivals.next < limit {
				buf = t.admit(buf)
			}
		}
		t.settle()
	}
	return buf
}

// run appends the packets born before limit of flows that have begun.
func (t *train) run(limit des.Time, buf []nodes.Packet) []nodes.Packet {
	ring, head, seq, full := t.ring, t.head, t.seq, t.full
	mask := len(ring) - 1
	for t.size > 0 {
		f := &ring[head&mask]
		if f.due >= limit {
			break
		}
		size := full
		if f.left == 1 {
			size = f.last
		}
		buf = longer(buf)
		birth(&buf[len(buf)-1], f.due, seq, f.id, t.way, size)
		seq++
		if f.left > 1 {
			g := &ring[(head+t.size)&mask]
			g.due, g.left, g.id, g.last = f.due+t.interval, f.left-1, f.id, f.last
		} else {
			t.size--
		}
		head = (head + 1) & mask
	}
	t.head, t.seq = head, seq
	return buf
}

// admit appends the first packet of the flow that arrives next.
func (t *train) admit(buf []nodes.Packet) []nodes.Packet {
	x := t.flows.law.Draw(&t.draws)
	f := flow{t.arrivals.next, t.flows.count(x), t.nextID, t.lastOf(x)}
	size := t.full
	if f.left == 1 {
		size = f.last
	}
	buf = longer(buf)
	birth(&buf[len(buf)-1], f.due, t.seq, f.id, t.way, size)
	t.seq++
	t.nextID++
	t.arrivals.advance()
	if f.left > 1 {
		f.due, f.left = f.due+t.interval, f.left-1
		t.push(f)
	}
	return buf
}

// settle makes the changes of load that lie before the next packet.
func (t *train) settle() {
	for len(t.ahead.ahead) > 0 && t.ahead.until() <= t.due() {
		x := t.ahead.take()
		switch {
		case t.count > 0:
			t.rebuild(x.at, int(math.Round(float64(t.count)*x.factor)))
		case x.at <= t.start:
			t.populate(x.factor)
		default:
			t.arrivals.retime(x.at, x.factor)
		}
	}
}

// Scale implements nodes.Source. Where flows stand for the whole run their
// number changes at once, the latest numbers going first. Where they arrive and
// leave the rate of arrivals changes, and the load follows as flows end. A
// change at or before the start is in full force at the start.
func (t *train) Scale(at des.Time, factor float64) {
	t.ahead.add(at, factor)
	t.settle()
}

// clone returns a copy that shares only what never changes.
func (t *train) clone() train {
	c := *t
	c.ring = slices.Clone(t.ring)
	c.ahead = t.ahead.clone()
	return c
}
