package des_test

import (
	"math/rand/v2"
	"testing"

	"ferrule/des"
)

// list is the slow reference of a Calendar: it looks at every slot.
type list []des.Time

func newList(n int) list {
	l := make(list, n)
	for i := range l {
		l[i] = des.Never
	}
	return l
}

func (l list) min() (des.Time, int) {
	at, slot := des.Never, -1
	for s, t := range l {
		if t < at {
			at, slot = t, s
		}
	}
	return at, slot
}

// drive applies a program of three bytes a step to a calendar of n slots and
// to the reference, and compares them after each step. Spans reach from a
// picosecond to beyond what a packed word can hold.
func drive(t *testing.T, n int, program []byte) {
	t.Helper()
	c, want := des.NewCalendar(n), newList(n)
	var now des.Time
	for i := 0; i+3 <= len(program); i += 3 {
		op, a, b := program[i], program[i+1], program[i+2]
		slot := int(a) % max(n, 1)
		switch {
		case n == 0:
		case op%8 < 4: // an appointment up to 2^61 ps ahead
			at := now.Plus(des.Time(b) << (op / 8 * 2 % 54))
			c.Set(slot, at)
			want[slot] = at
		case op%8 == 4:
			c.Set(slot, des.Never)
			want[slot] = des.Never
		case op%8 == 5: // time goes on to the earliest, which is put back later
			if at, s := want.min(); s >= 0 && at < 1<<61 {
				now = at
				next := now + des.Time(b)<<(a%40)
				c.Set(s, next)
				want[s] = next
			}
		case op%8 == 6:
			if at, _ := want.min(); at < des.Never {
				now = at
			}
			c.MoveEpoch(now)
		default:
			c = c.Clone()
		}
		at, s := c.Min()
		if wantAt, wantS := want.min(); at != wantAt || s != wantS {
			t.Fatalf("step %d: earliest %d ps in slot %d, by looking at all %d ps in slot %d", i/3, at, s, wantAt, wantS)
		}
		if n > 0 && c.At(slot) != want[slot] {
			t.Fatalf("step %d: slot %d has %d ps, set to %d ps", i/3, slot, c.At(slot), want[slot])
		}
	}
	if c.Len() != n {
		t.Errorf("%d slots, want %d", c.Len(), n)
	}
}

func TestCalendarAgainstList(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 1))
	for _, n := range []int{0, 1, 2, 3, 4, 5, 7, 8, 9, 31, 64, 100, 255} {
		program := make([]byte, 3*4000)
		for i := range program {
			program[i] = byte(r.Uint32())
		}
		drive(t, n, program)
	}
}

func FuzzCalendar(f *testing.F) {
	f.Add(uint8(3), []byte{0, 0, 1, 0, 1, 1, 5, 0, 0})
	f.Add(uint8(200), []byte{208, 7, 255, 208, 3, 254, 6, 0, 0, 5, 39, 255})
	f.Fuzz(func(t *testing.T, n uint8, program []byte) { drive(t, int(n), program) })
}

// Two appointments beyond the packed range, the later one in the lower slot.
func TestCalendarBeyondRange(t *testing.T) {
	c := des.NewCalendar(4096) // 12 bits of slot leave 2^52 ps, about 75 minutes
	c.Set(0, 30*des.Hour)
	c.Set(4095, 20*des.Hour)
	if at, slot := c.Min(); at != 20*des.Hour || slot != 4095 {
		t.Errorf("earliest %v in slot %d, want 20 h in slot 4095", at, slot)
	}
	if !c.Stale(2 * des.Hour) {
		t.Error("not stale two hours from the epoch, beyond the packed range")
	}
	c.MoveEpoch(20 * des.Hour)
	if c.Stale(20*des.Hour + des.Minute) {
		t.Error("stale a minute after its epoch moved")
	}
	c.Set(7, 20*des.Hour+1)
	c.Set(4095, des.Never)
	if at, slot := c.Min(); at != 20*des.Hour+1 || slot != 7 {
		t.Errorf("earliest %v in slot %d, want 20 h + 1 ps in slot 7", at, slot)
	}
}

func TestCalendarClonesApart(t *testing.T) {
	c := des.NewCalendar(3)
	c.Set(1, 10)
	d := c.Clone()
	d.Set(2, 5)
	if at, _ := c.Min(); at != 10 {
		t.Errorf("setting a slot of the clone gave the original %d ps, want 10", at)
	}
	if at, _ := d.Min(); at != 5 {
		t.Errorf("the clone's earliest is %d ps, want 5", at)
	}
}

func TestCalendarAllocatesNothing(t *testing.T) {
	c := des.NewCalendar(100)
	var now des.Time
	if n := testing.AllocsPerRun(1000, func() {
		now += 1000
		c.Set(int(now/1000)%100, now)
		c.Min()
		c.MoveEpoch(now - 100_000)
	}); n != 0 {
		t.Errorf("%v allocations a step, want 0", n)
	}
}

func BenchmarkCalendar(b *testing.B) {
	c := des.NewCalendar(128)
	r := rand.New(rand.NewPCG(1, 1))
	for i := range c.Len() {
		c.Set(i, des.Time(r.IntN(1000)))
	}
	for b.Loop() {
		at, slot := c.Min()
		if c.Stale(at) {
			c.MoveEpoch(at)
		}
		c.Set(slot, at+des.Time(r.Uint32()>>12))
	}
}
