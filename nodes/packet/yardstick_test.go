package packet_test

import (
	"math/bits"

	"ferrule/des"
	dice "ferrule/des/random"
	"ferrule/nodes/packet"
)

// Two minimal engines for the tandem of the benchmark, to measure the network
// against: they move the same packets and do nothing else. No meters, no
// tables, no latency, no audit. slots keeps one pending event for each end of
// a line and each source in a winner tree; streams has no event at all.

const (
	tandemHops   = 5
	tandemRate   = 800 // ps a byte at 10 Gb/s
	tandemBuffer = 100_000
	tandemFlows  = 3 + 3*tandemHops // three through all lines, then three for each
	tandemFar    = int64(1) << 50
)

// parcel is a packet of the minimal engines: flow modulo 3 is its class.
type parcel struct {
	due, born  int64
	size, flow uint16
}

// spring is a source of the minimal engines: the draws of a poisson.
type spring struct {
	r     dice.Stream
	sizes dice.Alias
	mean  float64
	at    int64
	flow  uint16
}

func springs(load float64) []spring {
	var out []spring
	cfg := tandem(load, des.Second, packet.Forwarding{})
	for i, s := range cfg.Sources {
		p := s.Source.(*poisson)
		out = append(out, spring{p.r, p.sizes, p.mean, int64(p.at), uint16(i)})
	}
	return out
}

// draw returns the packet due at s.at and draws the gap to the next.
func (s *spring) draw() parcel {
	p := parcel{s.at, s.at, s.sizes.Pick(s.r.Uint64()), s.flow}
	s.at += int64(s.r.Exp() * s.mean)
	return p
}

// tally is what the engines are compared by.
type tally struct {
	sent  [tandemHops]uint64
	lost  [tandemFlows]uint64
	count [tandemFlows]uint64
	delay [tandemFlows]uint64 // ps
}

func (t *tally) hops() (n uint64) {
	for _, s := range t.sent {
		n += s
	}
	return n
}

func (t *tally) deliver(p *parcel) {
	t.count[p.flow]++
	t.delay[p.flow] += uint64(p.due - p.born)
}

// ends reports whether p leaves the row after line i.
func (p *parcel) ends(i int) bool { return p.flow >= 3 || i == tandemHops-1 }

// lane is a ring of parcels.
type lane struct {
	buf        []parcel
	head, tail uint32
}

func (l *lane) push(p *parcel) *parcel {
	if l.tail-l.head == uint32(len(l.buf)) {
		l.grow()
	}
	c := &l.buf[l.tail&uint32(len(l.buf)-1)]
	*c = *p
	l.tail++
	return c
}

//go:noinline
func (l *lane) grow() {
	buf := make([]parcel, max(16, 2*len(l.buf)))
	n := copy(buf, l.buf[l.head&uint32(max(len(l.buf), 1)-1):])
	n += copy(buf[n:], l.buf[:len(l.buf)-n])
	l.buf, l.head, l.tail = buf, 0, uint32(n)
}

func (l *lane) front() *parcel { return &l.buf[l.head&uint32(len(l.buf)-1)] }

func (l *lane) next() int64 {
	if l.head == l.tail {
		return tandemFar
	}
	return l.front().due
}

// slotRouter is one router of the slot engine: slot 0 is the line that ends
// here, the others are sources.
type slotRouter struct {
	tree  []uint64 // time<<slotBits | slot
	half  int
	in    *lane
	out   *lane
	src   []spring
	queue [3]lane
	bytes [3]int
	mask  uint32
	free  int64
}

const slotBits = 4

// slots runs the tandem by events and reports its tally.
func slots(load float64, length int64) *tally {
	t := &tally{}
	pipes := [tandemHops + 1]lane{}
	routers := make([]slotRouter, tandemHops+1)
	all := springs(load)
	for i := range routers {
		r := &routers[i]
		r.in, r.out = &pipes[0], nil // nothing ends at the first
		if i > 0 {
			r.in = &pipes[i]
		}
		if i < tandemHops {
			r.out = &pipes[i+1]
			if i == 0 {
				r.src = append(r.src, all[:3]...)
			}
			r.src = append(r.src, all[3+3*i:6+3*i]...)
		}
		r.half = 8
		r.tree = make([]uint64, 2*r.half)
		for k := range r.tree {
			r.tree[k] = ^uint64(0)
		}
		for k := range r.src {
			r.set(1+k, r.src[k].at, length)
		}
	}
	const window = int64(des.Millisecond)
	for end := window; ; end += window {
		busy := false
		for i := range routers {
			r := &routers[i]
			if i > 0 {
				r.set(0, r.in.next(), tandemFar)
			}
			r.run(t, i, end, length)
			busy = busy || r.tree[1] != ^uint64(0) || r.mask != 0 || i > 0 && r.in.next() < tandemFar
		}
		if !busy && end > length {
			return t
		}
	}
}

// set appoints slot at the given time, or never from the limit on.
func (r *slotRouter) set(slot int, at, limit int64) {
	v := uint64(at)<<slotBits | uint64(slot)
	if at >= limit {
		v = ^uint64(0)
	}
	k := r.half + slot
	r.tree[k] = v
	for k > 1 {
		v = min(v, r.tree[k^1])
		k >>= 1
		r.tree[k] = v
	}
}

func (r *slotRouter) run(t *tally, i int, end, length int64) {
	for {
		v := r.tree[1]
		at := int64(v >> slotBits)
		if at >= end {
			break
		}
		if slot := int(v & (1<<slotBits - 1)); slot == 0 {
			p := r.in.front()
			r.in.head++
			r.set(0, r.in.next(), tandemFar)
			if p.ends(i - 1) {
				t.deliver(p)
			} else {
				r.arrive(t, i, p, at)
			}
		} else {
			s := &r.src[slot-1]
			p := s.draw()
			r.set(slot, s.at, length)
			r.arrive(t, i, &p, at)
		}
	}
	r.catch(t, i, end)
}

// arrive takes a packet: of one instant, arrivals come before decisions.
func (r *slotRouter) arrive(t *tally, i int, p *parcel, at int64) {
	if r.free < at {
		r.catch(t, i, at)
	}
	if r.mask == 0 && r.free <= at {
		r.free = at
		if int64(r.tree[1]>>slotBits) > at {
			r.send(t, i, p)
			return
		}
	}
	c := p.flow % 3
	if r.bytes[c]+int(p.size) > tandemBuffer {
		t.lost[p.flow]++
		return
	}
	r.bytes[c] += int(p.size)
	r.queue[c].push(p)
	r.mask |= 1 << c
}

// catch takes the decisions due before end.
func (r *slotRouter) catch(t *tally, i int, end int64) {
	for r.mask != 0 && r.free < end {
		c := bits.TrailingZeros32(r.mask) & 3
		q := &r.queue[c]
		p := q.front()
		q.head++
		if q.head == q.tail {
			r.mask &^= 1 << c
		}
		r.bytes[c] -= int(p.size)
		r.send(t, i, p)
	}
}

func (r *slotRouter) send(t *tally, i int, p *parcel) {
	r.free += int64(p.size) * tandemRate
	t.sent[i]++
	r.out.push(p).due = r.free + int64(des.Millisecond)
}

// streamLine is one line of the streaming engine: each class is one sorted
// stream of what waits and what arrives in the window.
type streamLine struct {
	in    [3]lane   // through traffic from the line before, by class
	first [3]spring // through traffic that starts here; only at the first line
	cross [3]spring
	class [3]streamClass
	free  int64
	from  bool // through traffic starts here
}

// streamClass holds [head, kept) admitted and [next, len) not yet looked at.
type streamClass struct {
	buf, spare       []parcel
	x, y             []parcel // the window's two runs
	head, kept, next int
	bytes            int
}

// streams runs the tandem without events and reports its tally.
func streams(load float64, length int64) *tally {
	t := &tally{}
	all := springs(load)
	lines := make([]streamLine, tandemHops)
	for i := range lines {
		copy(lines[i].cross[:], all[3+3*i:6+3*i])
	}
	copy(lines[0].first[:], all[:3])
	lines[0].from = true
	const window = int64(des.Millisecond)
	for end := window; ; end += window {
		busy := false
		for i := range lines {
			l := &lines[i]
			l.fill(end, length)
			var next *streamLine
			if i+1 < len(lines) {
				next = &lines[i+1]
			}
			l.serve(t, i, end, next)
			for c := range l.class {
				k := &l.class[c]
				busy = busy || k.head < k.kept || k.next < len(k.buf) || l.in[c].head != l.in[c].tail
			}
		}
		if !busy && end > length {
			return t
		}
	}
}

// fill lays out each class: what waits, then the window's arrivals merged.
func (l *streamLine) fill(end, length int64) {
	for c := range l.class {
		k := &l.class[c]
		k.x, k.y = k.x[:0], k.y[:0]
		if l.from {
			k.x = l.first[c].until(min(end, length), k.x)
		} else {
			for l.in[c].next() < end {
				k.x = append(k.x, *l.in[c].front())
				l.in[c].head++
			}
		}
		k.y = l.cross[c].until(min(end, length), k.y)
		buf := append(k.spare[:0], k.buf[k.head:k.kept]...)
		buf = append(buf, k.buf[k.next:]...)
		k.kept -= k.head
		k.head, k.next = 0, k.kept
		x, y := k.x, k.y
		for len(x) > 0 && len(y) > 0 {
			if y[0].due < x[0].due {
				buf = append(buf, y[0])
				y = y[1:]
			} else {
				buf = append(buf, x[0])
				x = x[1:]
			}
		}
		buf = append(append(buf, x...), y...)
		k.spare, k.buf = k.buf, buf
	}
}

func (s *spring) until(end int64, buf []parcel) []parcel {
	for s.at < end {
		buf = append(buf, s.draw())
	}
	return buf
}

// due is when the class's first packet is there, or far off.
func (k *streamClass) due(t *tally) int64 {
	if k.head == k.kept {
		k.admit(t, -1)
	}
	if k.head < k.kept {
		return k.buf[k.head].due
	}
	return tandemFar
}

// admit looks at arrivals: a whole batch if it fits whatever leaves meanwhile,
// else those that come by now, one by one; the first of an empty class always.
func (k *streamClass) admit(t *tally, now int64) {
	const batch = 32
	for k.next < len(k.buf) {
		to := min(k.next+batch, len(k.buf))
		sum := 0
		for i := k.next; i < to; i++ {
			sum += int(k.buf[i].size)
		}
		if k.bytes+sum <= tandemBuffer {
			if k.kept != k.next {
				copy(k.buf[k.kept:], k.buf[k.next:to])
			}
			k.kept += to - k.next
			k.next = to
			k.bytes += sum
			return
		}
		p := &k.buf[k.next]
		if p.due > now && k.head < k.kept {
			return
		}
		k.next++
		if k.bytes+int(p.size) > tandemBuffer {
			t.lost[p.flow]++
			continue
		}
		k.bytes += int(p.size)
		k.buf[k.kept] = *p
		k.kept++
		if now < 0 {
			return
		}
	}
}

// serve takes every decision of the window: one step a packet.
func (l *streamLine) serve(t *tally, i int, end int64, next *streamLine) {
	k := &l.class
	var due [3]int64
	for c := range due {
		due[c] = k[c].due(t)
	}
	for {
		s := max(l.free, min(due[0], due[1], due[2]))
		if s >= end {
			break
		}
		c := 2
		if due[1] <= s {
			c = 1
		}
		if due[0] <= s {
			c = 0
		}
		q := &k[c]
		if q.next < len(q.buf) && q.buf[q.next].due <= s {
			q.admit(t, s)
		}
		p := &q.buf[q.head]
		q.head++
		q.bytes -= int(p.size)
		l.free = s + int64(p.size)*tandemRate
		t.sent[i]++
		p.due = l.free + int64(des.Millisecond)
		if p.ends(i) {
			t.deliver(p)
		} else {
			next.in[c].push(p)
		}
		due[c] = q.due(t)
	}
}
