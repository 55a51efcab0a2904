package queue

import (
	"slices"
	"testing"

	"ferrule/nodes"
)

// A trace of four queues with a quantum of 500 each, worked by hand in the
// manner of Shreedhar and Varghese (1995): each round adds 500 to a deficit,
// which must cover what leaves.
func TestDeficitRoundRobinTrace(t *testing.T) {
	w := nodes.Class{Queue: nodes.QueueWeight, Weight: 25, BufferBytes: 1 << 20}
	d := NewTiers([]nodes.Class{w, w, w, w}, []uint8{0, 1, 2, 3}, nodes.Gbps)
	for i := range d.q {
		d.q[i].quantum = 500
	}
	for way, sizes := range [][]uint16{{200, 750, 20}, {500, 500}, {100, 600, 200}, {180, 700, 50}} {
		for _, s := range sizes {
			d.Enqueue(0, &nodes.Packet{Way: uint16(way), Size: s})
		}
	}
	var got []uint16
	for range 4 {
		got = append(got, d.Dequeue(0).Size)
	}
	// The deficits that remain after the first round; a queue's turn ends when
	// its front no longer fits, which the next Dequeue finds out.
	if def := []nodes.Bytes{d.q[0].deficit, d.q[1].deficit, d.q[2].deficit, d.q[3].deficit}; !slices.Equal(def, []nodes.Bytes{300, 0, 400, 320}) {
		t.Errorf("deficits after round 1: %v, want 300 0 400 320", def)
	}
	for p := d.Dequeue(0); p != nil; p = d.Dequeue(0) {
		got = append(got, p.Size)
	}
	want := []uint16{200, 500, 100, 180, 750, 20, 500, 600, 200, 700, 50}
	if !slices.Equal(got, want) {
		t.Errorf("order of sizes %v, want %v", got, want)
	}
	for i := range d.q {
		if d.q[i].deficit != 0 {
			t.Errorf("deficit of empty queue %d is %d", i, d.q[i].deficit)
		}
	}
}
