package queue_test

import (
	"testing"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/queue"
	"ferrule/nodes/queue/queuetest"
)

var classOf = []uint8{0, 0, 1, 1, 2, 2, 3, 3}

func classes(q ...nodes.Queueing) []nodes.Class {
	c := make([]nodes.Class, len(q))
	for i := range q {
		c[i] = nodes.Class{Queue: q[i], Weight: 10 * (i + 1), BufferBytes: 20_000}
	}
	return c
}

func TestTiersContract(t *testing.T) {
	s, w, f := nodes.QueueStrict, nodes.QueueWeight, nodes.QueueFIFO
	for _, c := range []struct {
		name string
		q    []nodes.Queueing
	}{
		{"strict", []nodes.Queueing{s, s, s, s}},
		{"weighted", []nodes.Queueing{w, w, w, w}},
		{"fifo", []nodes.Queueing{f, f, f, f}},
		{"mixed", []nodes.Queueing{s, w, f, w}},
	} {
		t.Run(c.name, func(t *testing.T) {
			queuetest.Run(t, 8, func() queue.Discipline { return queue.NewTiers(classes(c.q...), classOf, nodes.Gbps) })
		})
	}
}

func TestBufferInPackets(t *testing.T) {
	c := []nodes.Class{{Queue: nodes.QueueFIFO, BufferPackets: 3}}
	d := queue.NewTiers(c, []uint8{0}, nodes.Gbps)
	p := nodes.Packet{Size: 1}
	for i := range 5 {
		want := queue.Kept
		if i >= 3 {
			want = queue.Dropped
		}
		if got := d.Enqueue(0, &p); got != want {
			t.Errorf("packet %d of a buffer of 3: %v, want %v", i+1, got, want)
		}
	}
}

// A buffer of 5 ms at 100 Mb/s is 62,500 bytes, at 200 Mb/s twice that.
func TestBufferInTimeFollowsRate(t *testing.T) {
	c := []nodes.Class{{Queue: nodes.QueueStrict, BufferTime: 5 * des.Millisecond}}
	d := queue.NewTiers(c, []uint8{0}, 100*nodes.Mbps)
	p := nodes.Packet{Size: 1250}
	fill := func() (n int) {
		for d.Enqueue(0, &p) == queue.Kept {
			n++
		}
		return n
	}
	if n := fill(); n != 50 {
		t.Errorf("at 100 Mb/s %d packets of 1250 B fit, want 50", n)
	}
	d.SetRate(200 * nodes.Mbps)
	if n := fill(); n != 50 {
		t.Errorf("at 200 Mb/s %d more fit, want 50", n)
	}
}

// Two backlogged weighted classes share in proportion to weight: over any
// interval the normalised service differs by at most 2 Max + Quantum
// (Shreedhar and Varghese 1995, theorem; statement from memory).
func TestWeightedShare(t *testing.T) {
	c := []nodes.Class{{Queue: nodes.QueueWeight, Weight: 60, BufferBytes: 1 << 30}, {Queue: nodes.QueueWeight, Weight: 40, BufferBytes: 1 << 30}}
	d := queue.NewTiers(c, []uint8{0, 1}, nodes.Gbps)
	sizes := []uint16{64, 1500, 576, 900}
	for i := range 40_000 {
		p := nodes.Packet{Way: uint16(i % 2), Size: sizes[i/2%4]}
		d.Enqueue(0, &p)
	}
	var sent [2]float64
	for range 15_000 {
		p := d.Dequeue(0)
		sent[p.Way] += float64(p.Size)
		if diff := sent[0]/1.5 - sent[1]; diff > 2*1500+1600 || diff < -2*1500-1600 {
			t.Fatalf("normalised service differs by %.0f B", diff)
		}
	}
}
