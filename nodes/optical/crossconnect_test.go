package optical

import (
	"slices"
	"testing"

	"ferrule/nodes"
)

// twoFibres is a plant of three sites in a row; each fibre has 4 channels, one
// of them lit and cut into 8 slots.
func twoFibres() *nodes.Plant {
	fibre := func(name string, a, b nodes.SiteID) nodes.Fibre {
		return nodes.Fibre{Name: name, Ends: [2]nodes.SiteID{a, b}, Channels: 4, Lit: 1, Slots: 8}
	}
	return &nodes.Plant{
		Sites:  []nodes.Site{{Name: "a"}, {Name: "b"}, {Name: "c"}},
		Fibres: []nodes.Fibre{fibre("ab", 0, 1), fibre("bc", 1, 2)},
	}
}

func TestAssignTakesAndGives(t *testing.T) {
	p := twoFibres()
	x := NewCrossConnect(p, 1)
	g, h := Holder{1, 1}, Holder{2, 1}
	steps := []struct {
		who        Holder
		n          int
		ok         bool
		free       int
		gHas, hHas int
	}{
		{g, 3, true, 5, 3, 0},
		{h, 5, true, 0, 3, 5},
		{g, 4, false, 0, 3, 5}, // nothing changes when refused
		{g, 3, true, 0, 3, 5},  // the same again is no change
		{h, 2, true, 3, 3, 2},
		{g, 6, true, 0, 6, 2},
		{g, 0, true, 6, 0, 2},
	}
	for i, s := range steps {
		if ok := x.Assign(0, s.who, s.n); ok != s.ok {
			t.Fatalf("step %d: Assign = %v, want %v", i, ok, s.ok)
		}
		gHas, _ := x.Held(0, g)
		hHas, _ := x.Held(0, h)
		if x.FreeSlots(0) != s.free || gHas != s.gHas || hHas != s.hHas {
			t.Fatalf("step %d: free %d, held %d and %d; want %d, %d and %d", i, x.FreeSlots(0), gHas, hHas, s.free, s.gHas, s.hHas)
		}
		if a := x.Audit(p); a != nil {
			t.Fatalf("step %d: %v", i, a)
		}
	}
	if x.FreeSlots(1) != 8 {
		t.Errorf("the other fibre has %d free slots, want all 8", x.FreeSlots(1))
	}
}

func TestLowestFreeSlotIsTaken(t *testing.T) {
	x := NewCrossConnect(twoFibres(), 0)
	for c := range nodes.CircuitID(8) {
		x.Assign(0, Holder{c, 1}, 1)
	}
	x.Assign(0, Holder{5, 1}, 0)
	x.Assign(0, Holder{2, 1}, 0)
	x.Assign(0, Holder{9, 1}, 1)
	if got := slices.Index(x.ports[0].slots, Holder{9, 1}); got != 2 {
		t.Errorf("took slot %d, want 2: the lowest that is free", got)
	}
}

func TestChannels(t *testing.T) {
	x := NewCrossConnect(twoFibres(), 0)
	g, h := Holder{1, 1}, Holder{2, 1}
	for _, c := range []struct {
		who Holder
		ch  int
		ok  bool
	}{
		{g, 0, false}, // cut into slots
		{g, 1, true},
		{g, 1, true}, // its own already
		{h, 1, false},
		{h, 3, true},
		{h, 4, false}, // does not exist
		{h, -1, false},
	} {
		if ok := x.AssignChannel(0, c.who, c.ch); ok != c.ok {
			t.Errorf("AssignChannel(%v, %d) = %v, want %v", c.who, c.ch, ok, c.ok)
		}
	}
	if x.Channel(0, g) != 1 || x.Channel(0, h) != 3 {
		t.Errorf("channels %d and %d, want 1 and 3", x.Channel(0, g), x.Channel(0, h))
	}
	x.Release(0, g)
	if x.Channel(0, g) != nodes.None || !x.AssignChannel(0, h, 1) {
		t.Error("a released channel is not free")
	}
}

func TestOwnershipsAreSorted(t *testing.T) {
	x := NewCrossConnect(twoFibres(), 1)
	x.Assign(1, Holder{7, 2}, 2)
	x.Assign(1, Holder{3, 1}, 1)
	x.Assign(0, Holder{7, 2}, 2)
	x.AssignChannel(1, Holder{3, 1}, 2)
	want := []Ownership{
		{0, Holder{7, 2}, 2, nil},
		{1, Holder{3, 1}, 1, []int{2}},
		{1, Holder{7, 2}, 2, nil},
	}
	got := x.Ownerships()
	if !slices.EqualFunc(got, want, func(a, b Ownership) bool {
		return a.Fibre == b.Fibre && a.Holder == b.Holder && a.Slots == b.Slots && slices.Equal(a.Channels, b.Channels)
	}) {
		t.Errorf("got %v, want %v", got, want)
	}
}

func TestAuditSeesABrokenCount(t *testing.T) {
	p := twoFibres()
	x := NewCrossConnect(p, 1)
	x.Assign(0, Holder{1, 1}, 2)
	x.ports[0].slots[0] = nobody // a slot lost without a word
	if got := x.Audit(p); len(got) != 2 {
		t.Errorf("audit says %q, want a wrong count and a slot below the search", got)
	}
}

func TestCloneSharesNothing(t *testing.T) {
	x := NewCrossConnect(twoFibres(), 0)
	x.Assign(0, Holder{1, 1}, 2)
	y := x.Clone()
	y.Assign(0, Holder{2, 1}, 6)
	y.AssignChannel(0, Holder{2, 1}, 1)
	if x.FreeSlots(0) != 6 || x.Channel(0, Holder{2, 1}) != nodes.None {
		t.Error("what happens to the clone shows in the original")
	}
}

func TestForeignFibrePanics(t *testing.T) {
	defer func() {
		if recover() == nil {
			t.Error("no panic for a fibre that does not leave the site")
		}
	}()
	NewCrossConnect(twoFibres(), 0).FreeSlots(1)
}
