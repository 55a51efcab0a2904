package path

import (
	"math/rand/v2"
	"slices"
	"testing"
)

func setOf(members ...int) Set {
	s := NewSet(96)
	for _, m := range members {
		s.Add(m)
	}
	return s
}

func TestSet(t *testing.T) {
	for _, n := range []int{0, 1, 40, 63, 64, 65, 80, 96, 128} {
		s := NewFullSet(n)
		if s.Count() != n || s.Has(n) || s.Has(-1) || n > 0 && !s.Has(n-1) {
			t.Errorf("full set of %d: %d members, has(%d) = %v", n, s.Count(), n, s.Has(n))
		}
	}
	s := setOf(0, 63, 64, 95)
	s.Remove(63)
	var got []int
	for m, ok := s.Next(0); ok; m, ok = s.Next(m + 1) {
		got = append(got, m)
	}
	if !slices.Equal(got, []int{0, 64, 95}) {
		t.Errorf("members %v, want 0, 64, 95", got)
	}
	if s.Clear(); s.Count() != 0 {
		t.Errorf("%d members after Clear", s.Count())
	}
}

// First fit by its definition (Zang, Jue, Mukherjee 2000), worked by hand.
func TestFirstFit(t *testing.T) {
	for _, c := range []struct {
		free []Set
		want int // -1: blocked
	}{
		{[]Set{setOf(2, 5, 7), setOf(1, 2, 7), setOf(2, 3, 7)}, 2},
		{[]Set{setOf(5, 7), setOf(1, 7), setOf(3, 7)}, 7},
		{[]Set{setOf(1), setOf(2)}, -1},
		{[]Set{setOf(3, 70), setOf(4, 70)}, 70},
		{[]Set{setOf(70), {1 << 3}}, -1}, // the second has no word for 70
		{nil, -1},
	} {
		got, ok := FirstFit(c.free...)
		if ok != (c.want >= 0) || ok && got != c.want {
			t.Errorf("first fit of %v = %d, %v; want %d", c.free, got, ok, c.want)
		}
	}
}

// The smallest case of continuity blocking (textbook: Ramaswami, Sivarajan,
// Optical Networks): each fibre has a free channel, the route has none, unless
// the site between converts.
func TestChannelContinuity(t *testing.T) {
	r := Route{Nodes: []int32{0, 1, 2}, Edges: []int32{0, 1}}
	free := []Set{setOf(1), setOf(0)} // A-B holds 0, B-C holds 1
	if got, ok := Channels(&r, free, nil, nil); ok || len(got) != 0 {
		t.Errorf("without conversion: %v, want blocked", got)
	}
	at := NewSet(3)
	at.Add(1)
	got, ok := Channels(&r, free, at, nil)
	if !ok || !slices.Equal(got, []int32{1, 0}) {
		t.Fatalf("with conversion at B: %v, %v", got, ok)
	}
	Take(&r, free, got)
	if free[0].Count() != 0 || free[1].Count() != 0 {
		t.Errorf("after Take: %v", free)
	}
	if _, ok := Channels(&r, free, at, nil); ok {
		t.Error("channels assigned twice")
	}
	Give(&r, free, got)
	if !free[0].Has(1) || !free[1].Has(0) {
		t.Errorf("after Give: %v", free)
	}
}

// One circuit for every pair of sites of a ring with an odd number of sites
// needs (N²-1)/8 channels (A. Elrefaie 1993, from memory), and first fit,
// longest routes first, meets it where the order of equals is right. Fewer
// cannot do: each pair takes the shorter side, in all N(N²-1)/8 edges.
func TestRingFullMesh(t *testing.T) {
	for _, c := range []struct{ sites, channels int }{{5, 3}, {7, 6}, {9, 10}} {
		if !ringFits(c.sites, c.channels) {
			t.Errorf("ring of %d does not fit %d channels", c.sites, c.channels)
		}
		if ringFits(c.sites, c.channels-1) {
			t.Errorf("ring of %d fits %d channels, which is impossible", c.sites, c.channels-1)
		}
	}
}

// ringFits tries first fit over seeded orders of the pairs, longest first.
func ringFits(sites, channels int) bool {
	rng := rand.New(rand.NewPCG(uint64(sites), 1))
	var edges []Edge
	for i := range sites {
		edges = append(edges, Edge{A: int32(i), B: int32((i + 1) % sites), Cost: 1})
	}
	f := NewFinder(NewGraph(sites, edges))
	var routes []Route
	for a := range int32(sites) {
		for b := a + 1; b < int32(sites); b++ {
			var r Route
			f.Shortest(&Query{From: a, To: b}, &r)
			routes = append(routes, r)
		}
	}
	for range 3000 {
		rng.Shuffle(len(routes), func(i, j int) { routes[i], routes[j] = routes[j], routes[i] })
		slices.SortStableFunc(routes, func(a, b Route) int { return len(b.Edges) - len(a.Edges) })
		if assignAll(routes, sites, channels) {
			return true
		}
	}
	return false
}

func assignAll(routes []Route, edges, channels int) bool {
	free := make([]Set, edges)
	for e := range free {
		free[e] = NewFullSet(channels)
	}
	var buf []int32
	for i := range routes {
		got, ok := Channels(&routes[i], free, nil, buf[:0])
		if !ok {
			return false
		}
		Take(&routes[i], free, got)
		buf = got
	}
	return true
}

func TestSlotsNeedNoContinuity(t *testing.T) {
	r := Route{Nodes: []int32{0, 1, 2}, Edges: []int32{1, 0}}
	free := []Set{setOf(3, 70, 79), setOf(0, 9)}
	widths := Spare(free, nil)
	if !slices.Equal(widths, []int64{3, 2}) {
		t.Errorf("spare %v, want 3 and 2", widths)
	}
	got, ok := Slots(&r, free, 2, nil)
	if !ok || !slices.Equal(got, []int32{0, 9, 3, 70}) {
		t.Fatalf("slots %v, %v; want 0 9 on edge 1 and 3 70 on edge 0", got, ok)
	}
	if s, ok := Slots(&r, free, 3, got); ok || len(s) != len(got) {
		t.Errorf("3 slots where 2 are free: %v", s)
	}
	TakeSlots(&r, free, 2, got)
	if free[1].Count() != 0 || !slices.Equal(free[0], setOf(79)) {
		t.Errorf("after TakeSlots: %v", free)
	}
	GiveSlots(&r, free, 2, got)
	if !slices.Equal(Spare(free, widths), []int64{3, 2}) {
		t.Errorf("after GiveSlots: %v", free)
	}
}
