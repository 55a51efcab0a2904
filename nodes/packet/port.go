package packet

import (
	"slices"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/queue"
)

// Port is the sending end of a circuit: a queue and a line. It is a seam: it
// is handed a segment with its sorted runs of arrivals and leaves departures
// in its pipe.
type port struct {
	disc     queue.Discipline
	shedder  queue.Shedder // disc, if it may drop what it has kept; or nil
	line     nodes.Line
	free     des.Time // when the line is free for its next decision
	waiting  int
	pipe     *pipe
	copy     *pipe    // 1+1: takes a copy of each packet; or nil
	copied   []uint64 // copies made, by way; nil: none
	state    nodes.PortState
	overhead nodes.Bytes
	dead     int  // failures that keep it from sending and receiving
	hold     bool // what waits when it goes down is kept
	circuit  nodes.CircuitID
	dir      nodes.Direction

	in arrivals // of this segment

	// Little's law as an identity in integers: the area under the number
	// waiting equals the waits of those that left plus the ages of those that
	// are there.
	area    des.Sum
	waits   des.Sum
	changed des.Time // when waiting last changed

	load    []uint64 // IP bytes sent, by class
	turns   []Turn   // of its life
	loads   []loadAt // the same at each outside act
	classOf []uint8  // way -> class, shared

	count portCount
	mark  portCount // at the end of the warm-up
	final portCount // at the end of the sources
}

// portCount are a port's counters since the start of the run.
type portCount struct {
	sent, lost  uint64
	ipBytes     uint64
	area, waits des.Sum
	maxBytes    nodes.Bytes
	delayed     uint64   // packets that waited
	service     des.Time // line time
	service2    float64  // ps^2: sum of squares of line times
	packetsIn   uint64
	lastIn      des.Time // of the newest arrival
	gap2        float64  // ps^2: sum of squares of the gaps between arrivals
}

// segment serves the arrivals of the segment that ends at end.
func (q *port) segment(s *Site, end des.Time) {
	q.in.close()
	q.count.packetsIn += uint64(len(q.in.arena))
	switch len(q.in.runs) {
	case 0:
	case 1:
		q.serveRun(s)
	case 2:
		q.servePair(s)
	default:
		q.serveMany(s)
	}
	q.in.reset()
	if q.waiting > 0 && q.free < end && q.state != nodes.PortDown {
		q.catch(s, end)
	}
}

func (q *port) serveRun(s *Site) {
	a := q.in.arena
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
	runs := q.in.runs
	x, y := q.in.arena[runs[0].from:runs[0].to], q.in.arena[runs[1].from:runs[1].to]
	if runs[1].key < runs[0].key {
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

// serveMany merges three runs or more.
func (q *port) serveMany(s *Site) {
	q.in.merge()
	for range q.in.arena {
		p, next := q.in.take()
		q.arrive(s, p, next)
	}
}

// arrive takes one arrival; next is when the next one comes. Of what happens
// at one instant arrivals come before decisions.
func (q *port) arrive(s *Site, p *nodes.Packet, next des.Time) {
	t := p.Due
	gap := float64(t - q.count.lastIn)
	q.count.gap2 += float64(gap * gap)
	q.count.lastIn = t
	if q.state != nodes.PortDown {
		if q.waiting > 0 && q.free < t {
			q.catch(s, t)
		}
		if q.waiting == 0 && q.free <= t {
			q.free = t
			if next > t && q.shedder == nil {
				k := q.send(p, t)
				if q.copy != nil {
					q.double(k)
				}
				return
			}
		}
	} else if !q.hold { // it went down at this very instant
		s.lose(p, t, LostFlushed)
		return
	}
	if v := q.disc.Enqueue(t, p); v != queue.Kept {
		q.count.lost++
		s.lose(p, t, refusedBy(v))
		return
	}
	q.area.AddProduct(uint64(q.waiting), uint64(t-q.changed))
	q.changed = t
	q.waiting++
	if b := q.disc.Backlog(); b > q.count.maxBytes {
		q.count.maxBytes = b
	}
	if q.shedder != nil {
		q.shed(s, t)
	}
}

// refusedBy is the cause of a loss that a discipline decides.
func refusedBy(v queue.Verdict) Cause {
	if v == queue.Refused {
		return LostAQM
	}
	return LostQueue
}

// shed loses what the discipline has just dropped of what was waiting; the area
// under the number waiting is up to date.
//
//go:noinline
func (q *port) shed(s *Site, now des.Time) {
	dropped := q.shedder.Shed()
	for i := range dropped {
		p := &dropped[i].Packet
		q.waiting--
		q.waits.Add(uint64(now - p.Due))
		q.count.lost++
		s.lose(p, now, refusedBy(dropped[i].Verdict))
	}
}

// catch takes every decision due before end.
func (q *port) catch(s *Site, end des.Time) {
	for q.waiting > 0 && q.free < end {
		t := q.free
		p := q.disc.Dequeue(t)
		q.area.AddProduct(uint64(q.waiting), uint64(t-q.changed))
		q.changed = t
		q.waiting--
		wait := t - p.Due
		q.waits.Add(uint64(wait))
		if q.shedder != nil {
			q.shed(s, t)
		}
		if wait > 0 {
			q.count.delayed++
		}
		k := q.send(p, t)
		k.Word += uint32(wait/des.Nanosecond) & waitMask(k.Bits)
		if q.copy != nil {
			q.double(k)
		}
	}
}

// send puts a copy of p on the line at t and returns it. What changes is
// changed in the copy: a copy of what was just written in parts is slow.
func (q *port) send(p *nodes.Packet, t des.Time) *nodes.Packet {
	size := nodes.Bytes(p.Size) + q.overhead
	tx := q.line.TxTime(size)
	q.free = t + tx
	q.count.sent++
	q.count.ipBytes += uint64(p.Size)
	q.load[q.classOf[p.Way]] += uint64(p.Size)
	q.count.service += tx
	q.count.service2 += float64(float64(tx) * float64(tx))
	c := q.pipe.push(p)
	c.Due = q.free + q.pipe.delay
	return c
}

// lineBytes are the bytes that n packets of so many IP bytes take on the line.
func (q *port) lineBytes(n, ipBytes uint64) uint64 { return ipBytes + n*uint64(q.overhead) }

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
	for _, p := range [2]*pipe{q.pipe, q.copy} {
		if p != nil {
			p.setLine(max(now, q.free), q.line)
		}
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
	c.shedder, _ = c.disc.(queue.Shedder)
	c.load, c.loads, c.turns = slices.Clone(q.load), slices.Clone(q.loads), slices.Clone(q.turns)
	c.pipe, c.copy, c.copied = pipes[q.pipe], pipes[q.copy], slices.Clone(q.copied)
	c.in = arrivals{key: -1}
	return c
}
