package packet

import (
	"ferrule/des"
	"ferrule/nodes"
)

// arrivals are what reaches one place in a segment: a sorted run of packets
// from each input, one after the other in an arena.
type arrivals struct {
	arena []nodes.Packet
	runs  []run
	key   int32    // of the run being filled; -1: none
	tree  []uint64 // of merge
	base  des.Time // of merge
}

// run is a sorted stretch of the arena from one input.
type run struct {
	from, to int32
	key      int32
}

// sourceKey is the least key of a run from a source; inputs have lower ones.
const sourceKey = 1 << 24

// put adds a copy of an arrival from input key and returns it, so that the
// caller can say when it is due. Arrivals of one key come together and in order.
func (a *arrivals) put(p *nodes.Packet, key int32) *nodes.Packet {
	if key != a.key {
		a.begin(key)
	}
	a.arena = append(a.arena, *p)
	return &a.arena[len(a.arena)-1]
}

// begin begins a run, or goes on with that of the same key.
//
//go:noinline
func (a *arrivals) begin(key int32) {
	if key == a.key {
		return
	}
	a.close()
	a.key = key
	a.runs = append(a.runs, run{from: int32(len(a.arena)), key: key})
}

// close ends the run being filled, and forgets it if it is empty.
func (a *arrivals) close() {
	if n := len(a.runs); n > 0 && a.key >= 0 {
		r := &a.runs[n-1]
		if r.to = int32(len(a.arena)); r.to == r.from {
			a.runs = a.runs[:n-1]
		}
	}
	a.key = -1
}

func (a *arrivals) reset() {
	a.arena, a.runs, a.key = a.arena[:0], a.runs[:0], -1
}

// runBits is the room for a run's number in a node of the merge tree; the rest
// holds the time since the segment's first arrival.
const runBits = 16

// merge prepares to take the arrivals of all runs in order of time, ties by key
// and then by run: a winner tree over the runs' heads.
func (a *arrivals) merge() {
	sortRuns(a.runs)
	half := 1
	for half < len(a.runs) {
		half *= 2
	}
	if cap(a.tree) < 2*half {
		a.tree = make([]uint64, 2*half)
	}
	a.tree = a.tree[:2*half]
	a.base = des.Never
	for _, r := range a.runs {
		a.base = min(a.base, a.arena[r.from].Due)
	}
	for i := range half {
		v := ^uint64(0)
		if i < len(a.runs) {
			v = uint64(a.arena[a.runs[i].from].Due-a.base)<<runBits | uint64(i)
		}
		a.tree[half+i] = v
	}
	for i := half - 1; i > 0; i-- {
		a.tree[i] = min(a.tree[2*i], a.tree[2*i+1])
	}
}

// take returns the earliest arrival not yet taken, and when the one after it
// is due, or Never.
func (a *arrivals) take() (p *nodes.Packet, next des.Time) {
	tree := a.tree
	i := int(tree[1] & (1<<runBits - 1))
	r := &a.runs[i]
	p = &a.arena[r.from]
	r.from++
	v := ^uint64(0)
	if r.from < r.to {
		v = uint64(a.arena[r.from].Due-a.base)<<runBits | uint64(i)
	}
	k := len(tree)/2 + i
	tree[k] = v
	for k > 1 {
		v = min(v, tree[k^1])
		k >>= 1
		tree[k] = v
	}
	if v == ^uint64(0) {
		return p, des.Never
	}
	return p, a.base + des.Time(v>>runBits)
}

// sortRuns orders runs by key; runs of one key keep their order.
func sortRuns(r []run) {
	for i := 1; i < len(r); i++ {
		for j := i; j > 0 && r[j].key < r[j-1].key; j-- {
			r[j], r[j-1] = r[j-1], r[j]
		}
	}
}
