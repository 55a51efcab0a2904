package transport

import "ferrule/des"

// timer is that of one connection at one end. An entry in the heap may be
// earlier than it is due: then it is put back when it comes up.
type timer struct {
	at    des.Time // when it is due, or Never
	entry des.Time // the entry in the heap that counts, or Never
	id    uint32   // of the connection
}

// entry is a place in the heap: 2 x flow number, plus one for a sender.
type entry struct {
	at des.Time
	id uint32
}

func (e entry) before(o entry) bool { return e.at < o.at || e.at == o.at && e.id < o.id }

// heap is a binary heap of entries.
type heap []entry

func (q *heap) push(e entry) {
	*q = append(*q, e)
	h := *q
	i := len(h) - 1
	for i > 0 {
		up := (i - 1) / 2
		if !e.before(h[up]) {
			break
		}
		h[i] = h[up]
		i = up
	}
	h[i] = e
}

func (q *heap) pop() entry {
	h := *q
	top, last := h[0], h[len(h)-1]
	h = h[:len(h)-1]
	*q = h
	if len(h) == 0 {
		return top
	}
	i := 0
	for {
		c := 2*i + 1
		if c >= len(h) {
			break
		}
		if c+1 < len(h) && h[c+1].before(h[c]) {
			c++
		}
		if !h[c].before(last) {
			break
		}
		h[i] = h[c]
		i = c
	}
	h[i] = last
	return top
}

func (q heap) next() des.Time {
	if len(q) == 0 {
		return des.Never
	}
	return q[0].at
}

// arm sets a timer.
func (h *Host) arm(t *timer, id uint32, at des.Time) {
	t.at = at
	if at < t.entry {
		t.entry = at
		h.heap.push(entry{at, id})
	}
}

// rings is a pool of slices whose lengths are powers of two.
type rings struct{ free [32][][]uint64 }

const leastRing = 16

func (r *rings) get(n int) []uint64 {
	c := log2(n)
	if k := len(r.free[c]); k > 0 {
		x := r.free[c][k-1]
		r.free[c] = r.free[c][:k-1]
		clear(x)
		return x
	}
	return make([]uint64, n)
}

func (r *rings) put(x []uint64) {
	if len(x) > 0 {
		c := log2(len(x))
		r.free[c] = append(r.free[c], x)
	}
}

func log2(n int) (c int) {
	for n > 1 {
		n >>= 1
		c++
	}
	return c
}
