package des_test

import (
	"cmp"
	"slices"
	"testing"

	"ferrule/des"
)

// note is a dated value of these tests.
type note struct {
	at  des.Time
	key int
}

func (n *note) When() des.Time      { return n.at }
func (n *note) Before(o *note) bool { return n.key < o.key }

type notes = des.Agenda[note, *note]

// FuzzAgenda puts and takes as the bytes say and compares with a sorted slice:
// even bytes put a value, odd ones take one.
func FuzzAgenda(f *testing.F) {
	f.Add([]byte{4, 2, 2, 6, 1, 1, 2, 1, 1, 1})
	f.Add([]byte{254, 0, 128, 3, 64, 32, 5, 16, 8, 4, 2, 7, 9, 11})
	f.Fuzz(func(t *testing.T, program []byte) {
		var a notes
		var want []note
		for i, b := range program {
			switch {
			case b == 255:
				a = a.Clone()
			case b%2 == 0:
				n := note{des.Time(b / 2 % 16), i}
				a.Put(n)
				want = append(want, n)
				slices.SortFunc(want, func(x, y note) int {
					return cmp.Or(cmp.Compare(x.at, y.at), cmp.Compare(x.key, y.key))
				})
			case len(want) > 0:
				if got := a.Take(); got != want[0] {
					t.Fatalf("step %d: took %v, want %v", i, got, want[0])
				}
				want = want[1:]
			}
			next := des.Never
			if len(want) > 0 {
				next = want[0].at
			}
			if a.Len() != len(want) || a.Next() != next {
				t.Fatalf("step %d: %d values, next at %v; want %d, %v", i, a.Len(), a.Next(), len(want), next)
			}
		}
		var seen []int
		a.Each(func(n *note) { seen = append(seen, n.key) })
		slices.Sort(seen)
		keys := make([]int, len(want))
		for i := range want {
			keys[i] = want[i].key
		}
		slices.Sort(keys)
		if !slices.Equal(seen, keys) {
			t.Fatalf("holds %v, want %v", seen, keys)
		}
	})
}

func TestAgendaClonesApart(t *testing.T) {
	var a notes
	a.Put(note{5, 1})
	b := a.Clone()
	b.Put(note{1, 2})
	if got := b.Take(); got != (note{1, 2}) {
		t.Errorf("the clone gave %v, want its own value at 1 ps", got)
	}
	if a.Len() != 1 || a.Next() != 5 {
		t.Errorf("after changing the clone: %d values, next at %v; want 1, 5 ps", a.Len(), a.Next())
	}
}

func TestAgendaAllocatesNothingOnceGrown(t *testing.T) {
	var a notes
	for i := range 64 {
		a.Put(note{des.Time(i), i})
	}
	if n := testing.AllocsPerRun(1000, func() {
		v := a.Take()
		v.at += 64
		a.Put(v)
	}); n != 0 {
		t.Errorf("%v allocations for taking and putting, want 0", n)
	}
}
