// Package queuetest is the conformance suite that every discipline passes.
package queuetest

import (
	"math/rand/v2"
	"slices"
	"testing"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/queue"
)

// Run checks a discipline made by make for ways 0..ways-1: nothing is lost,
// invented or returned twice; packets of one way stay in order; Len and
// Backlog count; it serves whenever something waits; a clone and its original
// go on alike and apart; Drain empties it.
func Run(t *testing.T, ways int, make func() queue.Discipline) {
	t.Run("conserves", func(t *testing.T) { conserve(t, ways, make()) })
	t.Run("clones", func(t *testing.T) { clone(t, ways, make()) })
	t.Run("drains", func(t *testing.T) { drain(t, ways, make()) })
	t.Run("allocates nothing", func(t *testing.T) { allocate(t, make()) })
}

// shedOf lists what the last call dropped of what was kept.
func shedOf(d queue.Discipline) []queue.Shed {
	if s, ok := d.(queue.Shedder); ok {
		return s.Shed()
	}
	return nil
}

func random(r *rand.Rand, ways int, seq []uint32) nodes.Packet {
	w := r.IntN(ways)
	seq[w]++
	return nodes.Packet{Way: uint16(w), Seq: seq[w], Size: uint16(1 + r.IntN(1500))}
}

func conserve(t *testing.T, ways int, d queue.Discipline) {
	r := rand.New(rand.NewPCG(1, 2))
	sent, last := make([]uint32, ways), make([]uint32, ways)
	waiting := map[[2]uint32]nodes.Packet{}
	var bytes nodes.Bytes
	kept, dropped := 0, 0
	shed := func(step int) {
		for _, x := range shedOf(d) {
			k := [2]uint32{uint32(x.Packet.Way), x.Packet.Seq}
			if p, ok := waiting[k]; !ok || p != x.Packet || x.Verdict == queue.Kept {
				t.Fatalf("step %d: shed %+v, kept %+v", step, x, p)
			}
			delete(waiting, k)
			bytes -= nodes.Bytes(x.Packet.Size)
			dropped++
		}
	}
	for i := range 20000 {
		now := des.Time(i) * des.Millisecond
		if r.IntN(100) < 55 {
			p := random(r, ways, sent)
			switch d.Enqueue(now, &p) {
			case queue.Kept:
				waiting[[2]uint32{uint32(p.Way), p.Seq}] = p
				bytes += nodes.Bytes(p.Size)
				kept++
			case queue.Dropped, queue.Refused:
				dropped++
			}
			shed(i)
		} else {
			q := d.Dequeue(now)
			ok := q != nil
			served := nodes.Packet{}
			if ok {
				served = *q
			}
			shed(i)
			if ok != (len(waiting) > 0) {
				t.Fatalf("step %d: Dequeue says %v with %d waiting", i, ok, len(waiting))
			}
			if ok {
				p := served
				k := [2]uint32{uint32(p.Way), p.Seq}
				if waiting[k] != p {
					t.Fatalf("step %d: returned %+v, kept %+v", i, p, waiting[k])
				}
				delete(waiting, k)
				if p.Seq <= last[p.Way] {
					t.Fatalf("step %d: way %d: %d after %d", i, p.Way, p.Seq, last[p.Way])
				}
				last[p.Way] = p.Seq
				bytes -= nodes.Bytes(p.Size)
			}
		}
		if d.Len() != len(waiting) || d.Backlog() != bytes {
			t.Fatalf("step %d: Len %d Backlog %d, want %d and %d", i, d.Len(), d.Backlog(), len(waiting), bytes)
		}
	}
	if kept == 0 || dropped == 0 {
		t.Errorf("kept %d and dropped %d: the test needs both; give the discipline a small buffer", kept, dropped)
	}
}

func clone(t *testing.T, ways int, d queue.Discipline) {
	r := rand.New(rand.NewPCG(3, 4))
	seq := make([]uint32, ways)
	for i := range 200 {
		p := random(r, ways, seq)
		d.Enqueue(des.Time(i), &p)
		if i%3 == 0 {
			d.Dequeue(des.Time(i))
		}
	}
	c := d.Clone()
	for i := range 2000 {
		p := random(r, ways, seq)
		q := p
		var a, b any
		if r.IntN(2) == 0 {
			a, b = d.Enqueue(des.Time(i), &p), c.Enqueue(des.Time(i), &q)
		} else {
			x, y := d.Dequeue(des.Time(i)), c.Dequeue(des.Time(i))
			if a, b = x == nil, y == nil; x != nil && y != nil {
				p, q = *x, *y
			}
		}
		if a != b || p != q || !slices.Equal(shedOf(d), shedOf(c)) {
			t.Fatalf("step %d: original %v %+v, clone %v %+v", i, a, p, b, q)
		}
	}
	n := c.Len()
	d.Drain(func(*nodes.Packet) {})
	if c.Len() != n || d.Len() != 0 {
		t.Errorf("after draining the original: original %d, clone %d, want 0 and %d", d.Len(), c.Len(), n)
	}
}

func drain(t *testing.T, ways int, d queue.Discipline) {
	r := rand.New(rand.NewPCG(5, 6))
	seq := make([]uint32, ways)
	kept := 0
	for i := range 300 {
		p := random(r, ways, seq)
		if d.Enqueue(des.Time(i), &p) == queue.Kept {
			kept++
		}
		kept -= len(shedOf(d))
	}
	n := 0
	d.Drain(func(*nodes.Packet) { n++ })
	if n != kept || d.Len() != 0 || d.Backlog() != 0 || d.Dequeue(1000) != nil {
		t.Errorf("drained %d of %d; left Len %d Backlog %d", n, kept, d.Len(), d.Backlog())
	}
}

func allocate(t *testing.T, d queue.Discipline) {
	p := nodes.Packet{Size: 100}
	for range 64 {
		d.Enqueue(0, &p)
	}
	d.Drain(func(*nodes.Packet) {})
	if n := testing.AllocsPerRun(1000, func() {
		d.Enqueue(0, &p)
		d.Dequeue(0)
	}); n != 0 {
		t.Errorf("%v allocations a packet, want none", n)
	}
}
