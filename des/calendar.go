package des

import (
	"fmt"
	"math/bits"
)

// Calendar finds the earliest of a fixed set of appointments, one per slot. It
// is a winner tree with one packed word per node, the time since an epoch in
// the high bits and the slot in the low ones, so that the earlier time wins
// and, between equal times, the lower slot. Setting a slot is O(log slots)
// without an unpredictable branch.
//
// The zero Calendar has no slot; make one with NewCalendar.
type Calendar struct {
	tree  []uint64 // tree[1] is the winner; leaves start at half
	half  int
	shift uint
	epoch Time
	at    []Time // exact times, to move the epoch
}

const noAppointment = ^uint64(0)

// NewCalendar returns a calendar of n slots, all without appointment. It
// panics if n is negative.
func NewCalendar(n int) Calendar {
	if n < 0 {
		panic(fmt.Sprintf("des: calendar of %d slots", n))
	}
	half := 1
	for half < n {
		half *= 2
	}
	c := Calendar{tree: make([]uint64, 2*half), half: half, shift: uint(bits.Len(uint(half - 1))), at: make([]Time, n)}
	for i := range c.tree {
		c.tree[i] = noAppointment
	}
	for i := range c.at {
		c.at[i] = Never
	}
	return c
}

// Len is the number of slots.
func (c *Calendar) Len() int { return len(c.at) }

// At reports the appointment of slot, or Never.
func (c *Calendar) At(slot int) Time { return c.at[slot] }

// Min reports the earliest appointment and its slot; (Never, -1) if none.
func (c *Calendar) Min() (Time, int) {
	if len(c.at) == 0 || c.tree[1] == noAppointment {
		return Never, -1
	}
	if c.tree[1]>>c.shift == c.farthest() {
		return c.scan()
	}
	slot := int(c.tree[1] & (1<<c.shift - 1))
	return c.at[slot], slot
}

// farthest is the packed time of everything beyond the range.
func (c *Calendar) farthest() uint64 { return noAppointment>>c.shift - 1 }

// scan finds the earliest appointment when all are beyond the packed range.
//
//go:noinline
func (c *Calendar) scan() (t Time, slot int) {
	t, slot = Never, -1
	for s, at := range c.at {
		if at < t {
			t, slot = at, s
		}
	}
	return t, slot
}

// Set gives slot the appointment t; Never takes it away. t must not be before
// the epoch last given to MoveEpoch.
func (c *Calendar) Set(slot int, t Time) {
	c.at[slot] = t
	v := c.pack(slot, t)
	i := c.half + slot
	c.tree[i] = v
	for i > 1 {
		v = min(v, c.tree[i^1])
		i >>= 1
		c.tree[i] = v
	}
}

// pack puts times too far from the epoch at the end of the range, where Min
// tells them apart by their exact times.
func (c *Calendar) pack(slot int, t Time) uint64 {
	if t == Never {
		return noAppointment
	}
	d := uint64(t - c.epoch)
	return min(d, c.farthest())<<c.shift | uint64(slot)
}

// MoveEpoch makes now the instant from which times are counted and rebuilds
// the tree. No appointment may be before now. Call it when [Calendar.Stale].
func (c *Calendar) MoveEpoch(now Time) {
	c.epoch = now
	for s, t := range c.at {
		c.tree[c.half+s] = c.pack(s, t)
	}
	for i := c.half - 1; i > 0; i-- {
		c.tree[i] = min(c.tree[2*i], c.tree[2*i+1])
	}
}

// Stale reports whether now is so far from the epoch that appointments could
// soon be beyond the packed range.
func (c *Calendar) Stale(now Time) bool {
	return uint64(now-c.epoch) > noAppointment>>(c.shift+2)
}

// Clone returns a copy that shares nothing.
func (c *Calendar) Clone() Calendar {
	d := *c
	d.tree = append([]uint64(nil), c.tree...)
	d.at = append([]Time(nil), c.at...)
	return d
}
