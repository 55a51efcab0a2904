package path

import (
	"math/bits"
	"slices"
)

// FirstFit returns the lowest index that is in every one of the sets: the
// channel that is free on all fibres of a route. It returns false when there
// is none, and when there are no sets.
//
// Source: the first-fit rule as defined in H. Zang, J. P. Jue, B. Mukherjee,
// Optical Networks Magazine 1(1), 2000.
func FirstFit(free ...Set) (index int, ok bool) {
	return common(len(free), func(i int) Set { return free[i] })
}

// common returns the lowest index that is in all of n sets.
func common(n int, set func(int) Set) (int, bool) {
	if n == 0 {
		return 0, false
	}
	for w, word := range set(0) {
		for i := 1; i < n && word != 0; i++ {
			if s := set(i); w < len(s) {
				word &= s[w]
			} else {
				return 0, false
			}
		}
		if word != 0 {
			return w*64 + bits.TrailingZeros64(word), true
		}
	}
	return 0, false
}

// Channels assigns one channel to each edge of r by first fit: the same on all
// edges between two sites that convert, so the same all along if none does.
// free holds the free channels of each edge by its id, and converts the nodes
// that can change a circuit's channel (nil for none). It appends the channels
// to into, in the order of r.Edges, and returns false, and into as it was, when
// some stretch has no common channel. It takes nothing: see Take.
func Channels(r *Route, free []Set, converts Set, into []int32) ([]int32, bool) {
	out := into
	for i := 0; i < len(r.Edges); {
		j := i + 1
		for j < len(r.Edges) && !converts.Has(int(r.Nodes[j])) {
			j++
		}
		stretch := r.Edges[i:j]
		index, ok := common(len(stretch), func(k int) Set { return free[stretch[k]] })
		if !ok {
			return into, false
		}
		for ; i < j; i++ {
			out = append(out, int32(index))
		}
	}
	return out, true
}

// Take removes channel[i] from the free set of edge r.Edges[i], for every i,
// and Give puts it back.
func Take(r *Route, free []Set, channel []int32) {
	for i, e := range r.Edges {
		free[e].Remove(int(channel[i]))
	}
}

// Give undoes Take.
func Give(r *Route, free []Set, channel []int32) {
	for i, e := range r.Edges {
		free[e].Add(int(channel[i]))
	}
}

// Slots assigns n slots on each edge of r by first fit, each edge for itself:
// where every site switches electrically, a circuit's slots need be neither
// neighbours nor the same from fibre to fibre. It appends to into n slots, in
// ascending order, for each edge in the order of r.Edges, and returns false,
// and into as it was, when an edge has fewer than n free. It takes nothing: see
// TakeSlots.
func Slots(r *Route, free []Set, n int, into []int32) ([]int32, bool) {
	out := into
	for _, e := range r.Edges {
		slot := -1
		for range n {
			next, ok := free[e].Next(slot + 1)
			if !ok {
				return into, false
			}
			slot = next
			out = append(out, int32(slot))
		}
	}
	return out, true
}

// TakeSlots removes from the free sets what Slots assigned with the same n.
func TakeSlots(r *Route, free []Set, n int, slots []int32) {
	for i, e := range r.Edges {
		for _, s := range slots[i*n : (i+1)*n] {
			free[e].Remove(int(s))
		}
	}
}

// GiveSlots undoes TakeSlots.
func GiveSlots(r *Route, free []Set, n int, slots []int32) {
	for i, e := range r.Edges {
		for _, s := range slots[i*n : (i+1)*n] {
			free[e].Add(int(s))
		}
	}
}

// Spare writes the number of members of each set to into, one for each edge:
// the widths of a Query.
func Spare(free []Set, into []int64) []int64 {
	into = slices.Grow(into[:0], len(free))
	for _, s := range free {
		into = append(into, int64(s.Count()))
	}
	return into
}
