package central

import (
	"slices"
	"strings"
	"testing"

	"ferrule/controller"
	"ferrule/nodes"
)

// doubled is square with one circuit, doubled over ab and over ac, cd, bd.
func doubled() *nodes.Plant {
	p := square("v")
	p.Circuits[0].Recovery = nodes.RecoveryOnePlus
	return p
}

// A 1+1 circuit stays up while every direction has light on one of its routes,
// and is unprotected as long as some light is missing.
func TestOnePlusStates(t *testing.T) {
	f := newFake(doubled(), Config{Compute: ms(5), Command: constant(ms(10))}, hops(ms(1))).start(t)
	defer f.log(t)
	state := func(want controller.CircuitState, port nodes.PortState) {
		t.Helper()
		if got := f.report(0).State; got != want || f.sites[0].ports[0] != port || f.sites[1].ports[0] != port {
			t.Errorf("at %v: %v, ports %v and %v; want %v and %v", f.now, got, f.sites[0].ports[0], f.sites[1].ports[0], want, port)
		}
		f.sound(t)
	}
	r := f.report(0)
	if !slices.Equal(r.Route, []nodes.FibreID{0}) || !slices.Equal(r.Second, []nodes.FibreID{2, 3, 1}) {
		t.Fatalf("routes %v and %v", r.Route, r.Second)
	}
	if picture, owned := f.net.SlotsOwned(); picture != 8 || owned != 8 {
		t.Errorf("%d and %d slots owned, want one each way on each of four fibres", picture, owned)
	}
	tr, cp := f.sites[1].trails[0], f.sites[1].copies[0]
	if tr.Incarnation != 1 || cp.Incarnation != 2 || cp.Copies != 1 || !slices.Equal(cp.Fibres, []nodes.FibreID{1, 3, 2}) {
		t.Errorf("the far end opens %+v and %+v", tr, cp)
	}
	state(controller.Up, nodes.PortUp)
	f.light(ms(100), 0, true)
	f.run(ms(150))
	state(controller.UpUnprotected, nodes.PortUp)
	f.light(ms(200), 3, true)
	f.run(ms(250))
	state(controller.Down, nodes.PortDown)
	f.light(ms(300), 0, false)
	f.run(ms(400))
	state(controller.UpUnprotected, nodes.PortUp)
	f.light(ms(500), 3, false)
	f.run(ms(600))
	state(controller.Up, nodes.PortUp)
	if r := f.report(0); r.Outages != 1 || r.Incarnation != 1 || f.under != 0 {
		t.Errorf("%+v, %d things under way", r, f.under)
	}
}

// Light lost on one route in one direction and on the other route in the other
// direction leaves every direction with a copy.
func TestOnePlusEachDirection(t *testing.T) {
	f := newFake(doubled(), Config{}, hops(ms(1))).start(t)
	defer f.log(t)
	f.tell(ms(10), 1, nodes.Message{Op: nodes.OpLightLost, Circuit: 0, N: 1})
	f.tell(ms(20), 0, nodes.Message{Op: nodes.OpLightLost, Circuit: 0, N: 2})
	f.run(ms(100))
	if r := f.report(0); r.State != controller.UpUnprotected || f.sites[0].ports[0] != nodes.PortUp || f.sites[1].ports[0] != nodes.PortUp {
		t.Errorf("%v with one copy each way", r.State)
	}
	f.tell(ms(110), 1, nodes.Message{Op: nodes.OpLightLost, Circuit: 0, N: 2})
	f.run(ms(300))
	if r := f.report(0); r.State != controller.Down || f.sites[0].ports[0] != nodes.PortDown || f.sites[1].ports[0] != nodes.PortDown {
		t.Errorf("%v with no copy one way, ports %v and %v", r.State, f.sites[0].ports[0], f.sites[1].ports[0])
	}
}

// A 1+1 circuit is set up, resized and torn down on both routes.
func TestOnePlusLife(t *testing.T) {
	p := doubled()
	p.Circuits[0].InPlace = false
	f := newFake(p, Config{Command: constant(ms(10))}, hops(ms(1)),
		controller.Order{Kind: controller.SetUp, Name: "up"},
		controller.Order{Kind: controller.Resize, Name: "wide", Slots: 3, After: controller.Condition{Kind: controller.StepDone, Step: "up"}},
		controller.Order{Kind: controller.TearDown, Name: "gone", At: ms(500)}).start(t)
	defer f.log(t)
	f.run(ms(400))
	if _, owned := f.net.SlotsOwned(); f.report(0).State != controller.Up || owned != 24 || f.sites[0].copies[0].Copies != 1 {
		t.Errorf("%v, %d slots owned, want 3 each way on four fibres; copies %+v", f.report(0).State, owned, f.sites[0].copies[0])
	}
	f.sound(t)
	f.run(ms(1000))
	if _, owned := f.net.SlotsOwned(); f.report(0).State != controller.TornDown || owned != 0 || f.under != 0 {
		t.Errorf("%v, %d slots owned, %d things under way", f.report(0).State, owned, f.under)
	}
	f.sound(t)
}

// Two fibres in one duct are no two routes; a way round a trap, where the best
// route alone leaves no second one, is found; and a route asked for is kept.
func TestOnePlusRoutes(t *testing.T) {
	p := doubled()
	p.Fibres[0].RiskGroups, p.Fibres[3].RiskGroups = []int32{7}, []int32{7}
	f := newFake(p, Config{}, hops(ms(1)))
	if err := f.net.Start(f.locals(), nil); err == nil || !strings.Contains(err.Error(), "circuit v: no two routes apart") {
		t.Errorf("a duct for both: %v", err)
	}

	// a-c-d-b is the shortest; only a-c-...: without cd the two others remain.
	p = plant(4, "ac", "cd", "db", "cb", "ad")
	p.Fibres[3].Delay, p.Fibres[4].Delay = ms(5), ms(5)
	v := circuitOn(p, "v", "ab")
	v.InPlace, v.Recovery = true, nodes.RecoveryOnePlus
	f = newFake(p, Config{}, hops(ms(1))).start(t)
	if r := f.report(0); len(r.Route)+len(r.Second) != 4 || slices.Contains(slices.Concat(r.Route, r.Second), 1) {
		t.Errorf("through the trap by %v and %v", r.Route, r.Second)
	}

	p = doubled()
	p.Circuits[0].Along = []nodes.FibreID{2, 3, 1}
	f = newFake(p, Config{}, hops(ms(1))).start(t)
	if r := f.report(0); !slices.Equal(r.Route, p.Circuits[0].Along) || !slices.Equal(r.Second, []nodes.FibreID{0}) {
		t.Errorf("asked for %v, has %v and %v", p.Circuits[0].Along, r.Route, r.Second)
	}

	p = doubled()
	p.Circuits[0].Channel, p.Circuits[0].Slots = true, 0
	f = newFake(p, Config{}, hops(ms(1))).start(t)
	f.sound(t)
	if r := f.report(0); len(r.Channels) != 1 || len(r.Second) != 3 {
		t.Errorf("a wavelength over %v and %v", r.Route, r.Second)
	}
}
