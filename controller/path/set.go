package path

import "math/bits"

// A Set is a set of small non-negative integers: free channels or slots of a
// fibre, or excluded edges and nodes. The zero value is empty. Methods that
// only read accept any index and treat what lies beyond the words held as
// absent.
type Set []uint64

// NewSet returns an empty set with room for 0..n-1.
func NewSet(n int) Set { return make(Set, (n+63)/64) }

// NewFullSet returns the set of 0..n-1.
func NewFullSet(n int) Set {
	s := NewSet(n)
	for i := range s {
		s[i] = ^uint64(0)
	}
	if n%64 != 0 {
		s[len(s)-1] >>= 64 - n%64
	}
	return s
}

// Has reports whether i is in the set.
func (s Set) Has(i int) bool { return uint(i)>>6 < uint(len(s)) && s[uint(i)>>6]>>(uint(i)&63)&1 != 0 }

// Add puts i in. It panics if the set has no room for i.
func (s Set) Add(i int) { s[i>>6] |= 1 << (i & 63) }

// Remove takes i out. It panics if the set has no room for i.
func (s Set) Remove(i int) { s[i>>6] &^= 1 << (i & 63) }

// Clear takes everything out.
func (s Set) Clear() { clear(s) }

// Count reports how many are in the set.
func (s Set) Count() int {
	n := 0
	for _, w := range s {
		n += bits.OnesCount64(w)
	}
	return n
}

// Next returns the lowest member at or above i; ok is false when there is
// none. i must not be negative.
func (s Set) Next(i int) (member int, ok bool) {
	for w := i >> 6; w < len(s); w++ {
		word := s[w]
		if w == i>>6 {
			word &= ^uint64(0) << (i & 63)
		}
		if word != 0 {
			return w<<6 + bits.TrailingZeros64(word), true
		}
	}
	return 0, false
}
