package central

import (
	"slices"
	"strings"
	"testing"

	"ferrule/controller"
	"ferrule/nodes"
)

// chainOf is sites a, b, c in a row with a way round by d: routed circuits ab
// and bc, and v from a to c over both fibres, past the router of b.
func chainOf() *nodes.Plant {
	p := plant(4, "ab", "bc", "ad", "dc")
	p.Fibres[2].Delay, p.Fibres[3].Delay = ms(5), ms(5)
	for _, ends := range []string{"ab", "bc", "ad", "dc"} {
		v := circuitOn(p, ends, ends)
		v.InPlace, v.Recovery, v.Carries = true, nodes.RecoveryRestore, nodes.CarriesRouted
	}
	v := circuitOn(p, "v", "ac")
	v.InPlace, v.Recovery = true, nodes.RecoveryRestore
	p.Aggregates = []nodes.Aggregate{{Name: "g", Ends: [2]nodes.SiteID{0, 2}}}
	return p
}

// When a router fails the circuits that end there are down, and no other route
// is sought for them; what passes its cross-connect does not notice.
func TestRouterFails(t *testing.T) {
	f := newFake(chainOf(), Config{Compute: ms(5)}, hops(ms(1))).start(t)
	defer f.log(t)
	f.tell(ms(100), 1, nodes.Message{Op: nodes.OpEquipmentLost, Circuit: nodes.None})
	for _, x := range []struct{ site, circuit int }{{0, 0}, {2, 1}} {
		f.tell(ms(101), nodes.SiteID(x.site), nodes.Message{Op: nodes.OpLightLost, Circuit: nodes.CircuitID(x.circuit), N: 1})
	}
	f.run(ms(1500))
	for c, want := range []controller.CircuitState{controller.Down, controller.Down, controller.Up, controller.Up, controller.Up} {
		if r := f.report(nodes.CircuitID(c)); r.State != want || r.Incarnation != 1 {
			t.Errorf("%s is %v in incarnation %d, want %v", f.plant.Circuits[c].Name, r.State, r.Incarnation, want)
		}
	}
	if next := f.sites[0].table.Next; !slices.Equal(next[2], []nodes.CircuitID{2}) || len(next[1]) != 0 {
		t.Errorf("a routes to c by %v and to b by %v", next[2], next[1])
	}
	if why := f.report(0).Reason; !strings.Contains(why, "router at b") {
		t.Errorf("the reason is %q", why)
	}
	f.sound(t)
	f.tell(ms(2000), 1, nodes.Message{Op: nodes.OpEquipmentBack, Circuit: nodes.None})
	for _, x := range []struct{ site, circuit int }{{0, 0}, {2, 1}} {
		f.tell(ms(2001), nodes.SiteID(x.site), nodes.Message{Op: nodes.OpLightBack, Circuit: nodes.CircuitID(x.circuit), N: 1})
	}
	f.run(ms(3000))
	for c := range f.plant.Circuits {
		if r := f.report(nodes.CircuitID(c)); r.State != controller.Up || r.Incarnation != 1 {
			t.Errorf("%s is %v in incarnation %d after the router is mended", f.plant.Circuits[c].Name, r.State, r.Incarnation)
		}
	}
	if f.under != 0 {
		t.Errorf("%d things under way", f.under)
	}
	f.sound(t)
}

// A port that fails takes its circuit down, whatever its recovery; a set-up
// that needs a failed router is blocked.
func TestPortFails(t *testing.T) {
	p := doubled()
	circuitOn(p, "w", "ac")
	f := newFake(p, Config{}, hops(ms(1)), controller.Order{Kind: controller.SetUp, Name: "w", Circuit: 1, At: ms(500)}).start(t)
	defer f.log(t)
	f.tell(ms(100), 1, nodes.Message{Op: nodes.OpEquipmentLost, Circuit: 0})
	for _, s := range []nodes.SiteID{0, 1} {
		for _, inc := range []int32{1, 2} {
			f.tell(ms(103), s, nodes.Message{Op: nodes.OpLightLost, Circuit: 0, N: inc})
		}
	}
	f.tell(ms(200), 2, nodes.Message{Op: nodes.OpEquipmentLost, Circuit: nodes.None})
	f.run(ms(900))
	if r := f.report(0); r.State != controller.Down || f.sites[0].ports[0] != nodes.PortDown {
		t.Errorf("v is %v without a port", r.State)
	}
	if r := f.report(1); r.State != controller.Blocked || !strings.Contains(r.Reason, "router at c") {
		t.Errorf("w is %v: %q", r.State, r.Reason)
	}
	f.tell(ms(1000), 1, nodes.Message{Op: nodes.OpEquipmentBack, Circuit: 0})
	for _, s := range []nodes.SiteID{0, 1} {
		for _, inc := range []int32{1, 2} {
			f.tell(ms(1001), s, nodes.Message{Op: nodes.OpLightBack, Circuit: 0, N: inc})
		}
	}
	f.run(ms(1500))
	if r := f.report(0); r.State != controller.Up || f.sites[0].ports[0] != nodes.PortUp || f.under != 0 {
		t.Errorf("v is %v with its port mended", r.State)
	}
	f.sound(t)
}

// A drained site is passed by nothing: circuits go another way, made before the
// old one is left, moved aggregates return, and tables lead round it but for
// what begins or ends there.
func TestDrain(t *testing.T) {
	p := chainOf()
	f := newFake(p, Config{Compute: ms(5)}, hops(ms(1)),
		controller.Order{Kind: controller.Drain, Name: "drain b", Site: 1, At: ms(500)},
		controller.Order{Kind: controller.Drain, Name: "again", Site: 1, At: ms(800)},
		controller.Order{Kind: controller.Undrain, Name: "undrain b", Site: 1, At: ms(1000)},
	).start(t, controller.Order{Kind: controller.Move, Name: "g", Ways: []uint16{0, 1}, Circuits: []nodes.CircuitID{4}})
	defer f.log(t)
	f.run(ms(900))
	if r := f.report(4); r.State != controller.Up || !slices.Equal(r.Route, []nodes.FibreID{2, 3}) || r.Outages != 0 {
		t.Errorf("v: %+v", r)
	}
	if next := f.sites[0].table.Next; !slices.Equal(next[2], []nodes.CircuitID{2}) || !slices.Equal(next[1], []nodes.CircuitID{0}) {
		t.Errorf("a routes to c by %v and to b by %v", next[2], next[1])
	}
	if s := f.step(t, "drain b"); s.State != controller.Done {
		t.Errorf("%+v", s)
	}
	if s := f.step(t, "again"); s.State != controller.Failed {
		t.Errorf("%+v", s)
	}
	f.sound(t)
	f.run(ms(2000))
	if next := f.sites[0].table.Next; !slices.Equal(next[2], []nodes.CircuitID{0}) || f.step(t, "undrain b").State != controller.Done {
		t.Errorf("a routes to c by %v", next[2])
	}
	f.sound(t)

	p = chainOf() // no way round for v
	p.Fibres[2].Slots = 1
	f = newFake(p, Config{Compute: ms(5)}, hops(ms(1)), controller.Order{Kind: controller.Drain, Name: "drain b", Site: 1}).start(t)
	f.run(ms(900))
	if s := f.step(t, "drain b"); s.State != controller.Failed || s.Detail != "no way round it for v" {
		t.Errorf("%+v", s)
	}
	f.sound(t)
}

// When a step of a plan is blocked, what its other steps have done is taken
// back, the last first.
func TestUndo(t *testing.T) {
	p := square("v")
	p.Circuits[0].Carries = nodes.CarriesRouted
	circuitOn(p, "w", "ab")
	wide := circuitOn(p, "wide", "ab")
	wide.Slots = 9 // a fibre has 8
	p.Aggregates = []nodes.Aggregate{{Name: "g", Ends: [2]nodes.SiteID{0, 1}}}
	after := func(s string) controller.Condition { return controller.Condition{Kind: controller.StepDone, Step: s} }
	f := newFake(p, Config{Compute: ms(5)}, hops(ms(1)),
		controller.Order{Kind: controller.SetUp, Name: "1", Circuit: 1, Undo: true},
		controller.Order{Kind: controller.Move, Name: "2", Circuits: []nodes.CircuitID{1}, Ways: []uint16{0, 1}, Undo: true, After: after("1")},
		controller.Order{Kind: controller.Resize, Name: "3", Circuit: 0, Slots: 3, Undo: true, After: after("2")},
		controller.Order{Kind: controller.SetUp, Name: "4", Circuit: 2, Undo: true, After: after("3")},
		controller.Order{Kind: controller.Return, Name: "5", Ways: []uint16{0}, Undo: true, After: after("4")},
	).start(t)
	defer f.log(t)
	f.run(ms(3000))
	want := map[string]controller.StepState{
		"1": controller.Done, "2": controller.Done, "3": controller.Done, "4": controller.Failed, "5": controller.Never,
		"undo of 1": controller.Done, "undo of 2, g.out": controller.Done, "undo of 2, g.back": controller.Done, "undo of 3": controller.Done,
	}
	for name, state := range want {
		if s := f.step(t, name); s.State != state {
			t.Errorf("step %s is %v, want %v: %s", name, s.State, state, s.Detail)
		}
	}
	if third, first := f.step(t, "undo of 3"), f.step(t, "undo of 1"); third.Done > first.Begun {
		t.Errorf("the first step is undone at %v, before the third at %v", first.Begun, third.Done)
	}
	if r := f.report(1); r.State != controller.TornDown || f.report(0).Slots != 1 || f.sites[0].ways[0] != nodes.None || f.sites[0].rates[0] != p.Circuits[0].Rate {
		t.Errorf("w is %v, v has %d slots, way 0 goes by %d", r.State, f.report(0).Slots, f.sites[0].ways[0])
	}
	if f.under != 0 {
		t.Errorf("%d things under way", f.under)
	}
	f.sound(t)
}
