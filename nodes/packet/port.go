package packet

import (
	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/queue"
)

// Port is the sending end of a circuit: a queue and a line. It is a seam: it
// is handed a segment with its sorted runs of arrivals and leaves departures
// in its pipe.
type port struct {
	disc     queue.Discipline
	line     nodes.Line
	free     des.Time // when the line is free for its next decision
	waiting  int
	pipe     *pipe
	state    nodes.PortState
	overhead nodes.Bytes
	hold     bool // what waits when it goes down is kept
	circuit  nodes.CircuitID
	dir      nodes.Direction

	arena []nodes.Packet // this segment's arrivals
	runs  []run
	key   int32 // of the run being filled; -1: none
	tree  []uint64

	// Little's law as an identity in integers: the area under the number
	// waiting equals the waits of those that left plus the ages of those that
	// are there.
	area    des.Sum
	waits   des.Sum
	changed des.Time // when waiting last changed

	count portCount
	mark  portCount // at the end of the warm-up
}

// portCount are a port's counters since the start of the run.
type portCount struct {
	sent, lost  uint64
	lineBytes   uint64
	ipBytes     uint64
	area, waits des.Sum
	maxBytes    nodes.Bytes
	delayed     uint64  // packets that waited
	service     des.Sum // line time, ps
	service2    float64 // ps^2: sum of squares of line times
	packetsIn   uint64
}

// run is a sorted stretch of the arena from one input.
type run struct {
	from, to int32
	key      int32
}

// put adds an arrival from input key; arrivals of one key come together and in
// order.
func (q *port) put(p *nodes.Packet, key int32) {
	if key != q.key {
		q.key = key
		q.runs = append(q.runs, run{int32(len(q.arena)), int32(len(q.arena)), key})
	}
	q.arena = append(q.arena, *p)
	q.runs[len(q.runs)-1].to++
}

// segment serves the arrivals of the segment that ends at end.
func (q *port) segment(s *Site, end des.Time) {
	switch len(q.runs) {
	case 0:
	case 1:
		q.serveRun(s)
	case 2:
		q.servePair(s)
	default:
		q.serveMany(s)
	}
	q.arena, q.runs, q.key = q.arena[:0], q.runs[:0], -1
	if q.waiting > 0 && q.free < end && q.state != nodes.PortDown {
		q.catch(end)
	}
}

func (q *port) serveRun(s *Site) {
	a := q.arena
	for i := range a {
		next := des.Never
		if i+1 < len(a) {
			next = a[i+1].Due
		}
		q.arrive(s, &a[i], next)
	}
}

// servePair merges two runs; on a tie the one with the lower key goes first.
func (q *port) servePair(s *Site) {
	x, y := q.arena[q.runs[0].from:q.runs[0].to], q.arena[q.runs[1].from:q.runs[1].to]
	if q.runs[1].key < q.runs[0].key {
		x, y = y, x
	}
	for len(x) > 0 && len(y) > 0 {
		var p *nodes.Packet
		if y[0].Due < x[0].Due {
			p, y = &y[0], y[1:]
		} else {
			p, x = &x[0], x[1:]
		}
		next := des.Never
		if len(x) > 0 {
			next = x[0].Due
		}
		if len(y) > 0 && y[0].Due < next {
			next = y[0].Due
		}
		q.arrive(s, p, next)
	}
	if len(x) == 0 {
		x = y
	}
	for i := range x {
		next := des.Never
		if i+1 < len(x) {
			next = x[i+1].Due
		}
		q.arrive(s, &x[i], next)
	}
}

// runBits is the room for a run's number in a node of the merge tree; the rest
// holds the time since the segment's first arrival.
const runBits = 16

// serveMany merges the runs by a winner tree, ties by key and then by run.
func (q *port) serveMany(s *Site) {
	sortRuns(q.runs)
	half := 1
	for half < len(q.runs) {
		half *= 2
	}
	if len(q.tree) < 2*half {
		q.tree = make([]uint64, 2*half)
	}
	tree := q.tree[:2*half]
	base := des.Never
	for _, r := range q.runs {
		base = min(base, q.arena[r.from].Due)
	}
	for i := range half {
		tree[half+i] = ^uint64(0)
		if i < len(q.runs) {
			tree[half+i] = uint64(q.arena[q.runs[i].from].Due-base)<<runBits | uint64(i)
		}
	}
	for i := half - 1; i > 0; i-- {
		tree[i] = min(tree[2*i], tree[2*i+1])
	}
	for n := len(q.arena); n > 0; n-- {
		i := int(tree[1] & (1<<runBits - 1))
		r := &q.runs[i]
		p := &q.arena[r.from]
		r.from++
		v := ^uint64(0)
		if r.from < r.to {
			v = uint64(q.arena[r.from].Due-base)<<runBits | uint64(i)
		}
		k := half + i
		tree[k] = v
		for k > 1 {
			v = min(v, tree[k^1])
			k >>= 1
			tree[k] = v
		}
		next := des.Never
		if v != ^uint64(0) {
			next = base + des.Time(v>>runBits)
		}
		q.arrive(s, p, next)
	}
}

// sortRuns orders runs by key; runs of one key keep their order.
func sortRuns(r []run) {
	for i := 1; i < len(r); i++ {
		for j := i; j > 0 && r[j].key < r[j-1].key; j-- {
			r[j], r[j-1] = r[j-1], r[j]
		}
	}
}

// arrive takes one arrival; next is when the next one comes. Of what happens
// at one instant arrivals come before decisions.
func (q *port) arrive(s *Site, p *nodes.Packet, next des.Time) {
	t := p.Due
	q.count.packetsIn++
	if q.state != nodes.PortDown {
		if q.waiting > 0 && q.free < t {
			q.catch(t)
		}
		if q.waiting == 0 && q.free <= t {
			q.free = t
			if next > t {
				q.send(p, t)
				return
			}
		}
	}
	if q.disc.Enqueue(t, p) != queue.Kept {
		q.count.lost++
		s.lose(p, t, LostQueue)
		return
	}
	q.area.AddProduct(uint64(q.waiting), uint64(t-q.changed))
	q.changed = t
	q.waiting++
	if b := q.disc.Backlog(); b > q.count.maxBytes {
		q.count.maxBytes = b
	}
}

// catch takes every decision due before end.
func (q *port) catch(end des.Time) {
	for q.waiting > 0 && q.free < end {
		t := q.free
		p := q.disc.Dequeue(t)
		q.area.AddProduct(uint64(q.waiting), uint64(t-q.changed))
		q.changed = t
		q.waiting--
		wait := t - p.Due
		q.waits.Add(uint64(wait))
		if wait > 0 {
			q.count.delayed++
			p.Word += uint32(wait / des.Nanosecond)
		}
		q.send(p, t)
	}
}

// send puts p on the line at t.
func (q *port) send(p *nodes.Packet, t des.Time) {
	size := nodes.Bytes(p.Size) + q.overhead
	tx := q.line.TxTime(size)
	q.free = t + tx
	q.count.sent++
	q.count.lineBytes += uint64(size)
	q.count.ipBytes += uint64(p.Size)
	q.count.service.Add(uint64(tx))
	q.count.service2 += float64(float64(tx) * float64(tx))
	pipe := q.pipe
	pipe.push(p)
	pipe.buf[(pipe.tail-1)&uint64(len(pipe.buf)-1)].Due = q.free + pipe.delay
}

// next reports when the port next decides, or Never.
func (q *port) next() des.Time {
	if q.waiting == 0 || q.state == nodes.PortDown {
		return des.Never
	}
	return q.free
}

// counters brings the running sums up to now.
func (q *port) counters(now des.Time) portCount {
	c := q.count
	c.area, c.waits = q.area, q.waits
	c.area.AddProduct(uint64(q.waiting), uint64(now-q.changed))
	return c
}

func (q *port) setRate(r nodes.Rate, now des.Time) {
	q.line = nodes.NewLine(r)
	q.disc.SetRate(r)
	if q.pipe != nil {
		q.pipe.lines = append(q.pipe.lines, lineFrom{max(now, q.free), q.line})
	}
}

// flush loses everything that waits.
func (q *port) flush(s *Site, now des.Time, cause Cause) {
	q.area.AddProduct(uint64(q.waiting), uint64(now-q.changed))
	q.changed = now
	q.waiting = 0
	q.disc.Drain(func(p *nodes.Packet) {
		q.waits.Add(uint64(now - p.Due))
		s.lose(p, now, cause)
	})
}

func (q *port) clone(pipes map[*pipe]*pipe) port {
	c := *q
	c.disc = q.disc.Clone()
	c.pipe = pipes[q.pipe]
	c.arena, c.runs, c.tree, c.key = nil, nil, nil, -1
	return c
}
