package central

import (
	"slices"
	"testing"

	"ferrule/controller"
	"ferrule/des"
	"ferrule/nodes"
)

func TestTearDown(t *testing.T) {
	p := plant(3, "ab", "bc")
	p.Aggregates = []nodes.Aggregate{{Name: "agg", Ends: [2]nodes.SiteID{0, 2}}}
	v := circuitOn(p, "v", "ac")
	v.InPlace, v.Slots, v.Carries = true, 3, nodes.CarriesRouted
	move := controller.Order{Kind: controller.Move, Name: "m", Circuits: []nodes.CircuitID{0}, Ways: []uint16{0, 1}}
	f := newFake(p, Config{Command: constant(ms(20))}, hops(ms(1))).start(t, move)
	if f.sites[0].ways[0] != 0 || f.sites[2].ways[1] != 0 || len(f.sites[0].table.Next[2]) != 1 {
		t.Fatal("not in place")
	}
	f.sites[0].queue[0] = 125_000 // 1 ms at 1 Gb/s
	f.order(ms(100), controller.Order{Kind: controller.TearDown, Name: "d", Circuit: 0})
	f.run(des.Second)
	defer f.log(t)
	if f.sites[0].ways[0] != nodes.None || f.sites[2].ways[1] != nodes.None || len(f.sites[0].table.Next[2]) != 0 {
		t.Error("traffic still goes over it")
	}
	// Steering and tables 2 x 2 ms, then draining a (1 ms and 1 us to look
	// again) and c (2 x 2 ms), then 2 ms of light, then the commands.
	want := ms(100) + 2*ms(2) + 2*ms(2) + ms(2) + (2*ms(2) + ms(20))
	if s := f.step(t, "d"); s.State != controller.Done || s.Done != want {
		t.Errorf("step %v at %v, want %v", s.State, s.Done, want)
	}
	if r := f.report(0); r.State != controller.TornDown || r.Route != nil || r.Outages != 0 {
		t.Errorf("%+v", r)
	}
	if f.sites[0].ports[0] != nodes.PortDown || f.net.elements[1].xc.FreeSlots(1) != 8 {
		t.Error("a port is open or slots are held")
	}
	f.sound(t)
}

func TestResize(t *testing.T) {
	grow := controller.Order{Kind: controller.Resize, Name: "r", Slots: 4}
	for _, k := range []struct {
		name    string
		slots   int // asked for
		channel bool
		thief   int // slots taken at b unknown to the controller
		other   int // slots of another circuit
		state   controller.StepState
		held    int
		rate    nodes.Rate
	}{
		{"grow", 4, false, 0, 0, controller.Done, 4, 2 * nodes.Gbps},
		{"shrink", 1, false, 0, 0, controller.Done, 1, nodes.Gbps / 2},
		{"no room in the picture", 4, false, 0, 5, controller.Failed, 2, nodes.Gbps},
		{"no room in truth", 4, false, 5, 0, controller.Failed, 2, nodes.Gbps},
		{"a whole channel", 4, true, 0, 0, controller.Failed, 0, nodes.Gbps},
	} {
		t.Run(k.name, func(t *testing.T) {
			p := plant(3, "ab", "bc")
			v := circuitOn(p, "v", "ac")
			v.InPlace, v.Slots, v.Channel = true, 2, k.channel
			o := circuitOn(p, "o", "bc")
			o.InPlace, o.Slots = k.other > 0, k.other
			g := grow
			g.Slots = k.slots
			f := newFake(p, Config{Command: constant(ms(20))}, hops(ms(1)), g).start(t)
			if k.thief > 0 {
				f.net.elements[1].xc.Assign(1, streamThief, k.thief)
			}
			f.run(des.Second)
			defer f.log(t)
			s := f.step(t, "r")
			r := f.report(0)
			if s.State != k.state || r.Slots != k.held || r.Rate != k.rate || r.State != controller.Up {
				t.Errorf("step %v (%s), %d slots, %d bit/s, %v", s.State, s.Detail, r.Slots, r.Rate, r.State)
			}
			if f.sites[0].rates[0] != k.rate || f.sites[2].rates[0] != k.rate {
				t.Errorf("ports send at %d and %d", f.sites[0].rates[0], f.sites[2].rates[0])
			}
			if k.state == controller.Done && r.Resizes != 1 {
				t.Errorf("%d resizes", r.Resizes)
			}
			if k.thief > 0 {
				f.net.elements[1].xc.Release(1, streamThief)
			}
			f.sound(t)
		})
	}
}

// A chain is given once and serves both ways, each from its own origin; its
// inner site is steered before anything enters it.
func TestMoveOverAChain(t *testing.T) {
	p := plant(3, "ab", "bc", "ac")
	p.Fibres[2].Delay = ms(10)
	p.Aggregates = []nodes.Aggregate{{Name: "agg", Ends: [2]nodes.SiteID{2, 0}}}
	for _, n := range []string{"ab", "bc"} {
		circuitOn(p, n, n).InPlace = true
	}
	routed := circuitOn(p, "ac", "ac")
	routed.InPlace, routed.Carries, routed.Along = true, nodes.CarriesRouted, []nodes.FibreID{2}
	chain := []nodes.CircuitID{0, 1} // from a; the aggregate begins at c
	f := newFake(p, Config{Compute: ms(3)}, hops(ms(1)),
		controller.Order{Kind: controller.Move, Name: "m", Circuits: chain, Ways: []uint16{0, 1}, KeepOrder: true},
		controller.Order{Kind: controller.Return, Name: "r", At: ms(500), Ways: []uint16{0, 1}, KeepOrder: true},
	).start(t)
	f.run(ms(400))
	defer f.log(t)
	a, b, c := &f.sites[0], &f.sites[1], &f.sites[2]
	if c.ways[0] != 1 || b.ways[0] != 0 || a.ways[1] != 0 || b.ways[1] != 1 {
		t.Errorf("out %d then %d, back %d then %d", c.ways[0], b.ways[0], a.ways[1], b.ways[1])
	}
	// Decided at 3 ms; b steers at 4 ms and answers at 5 ms; then a at once.
	if a.steers[0].at != ms(5) || b.steers[0].at != ms(4) || c.steers[0].at != ms(7) {
		t.Errorf("steered at %v, %v, %v", a.steers[0].at, b.steers[0].at, c.steers[0].at)
	}
	// Old delay 10 ms, new 2 ms, bound 5 ms.
	if hold := a.until[1] - a.heldAt[1]; hold != ms(13) {
		t.Errorf("held for %v, want 13 ms", hold)
	}
	f.run(des.Second)
	// The way back is longer, so nothing can overtake: the bound alone.
	if hold := a.until[1] - a.heldAt[1]; hold != ms(5) || a.ways[1] != nodes.None || c.ways[0] != nodes.None {
		t.Errorf("return: held for %v, ways %d and %d", hold, a.ways[1], c.ways[0])
	}
	// b forgets the ways when what was under way has passed: light 2 ms + 5 ms.
	if b.ways[0] != nodes.None || b.steers[len(b.steers)-1].at < ms(503)+ms(7) {
		t.Errorf("b still steers, or forgot too soon: %v", b.steers)
	}
	if s := f.step(t, "m"); s.State != controller.Done || f.step(t, "r").State != controller.Done {
		t.Errorf("%+v", s)
	}
}

func TestMoveThatDoesNotJoin(t *testing.T) {
	p := plant(3, "ab", "bc")
	p.Aggregates = []nodes.Aggregate{{Name: "agg", Ends: [2]nodes.SiteID{0, 2}}}
	circuitOn(p, "ab", "ab").InPlace = true
	circuitOn(p, "bc", "bc")
	f := newFake(p, Config{}, hops(ms(1)),
		controller.Order{Kind: controller.Move, Name: "short", Circuits: []nodes.CircuitID{0}, Ways: []uint16{0}},
		controller.Order{Kind: controller.Move, Name: "not up", Circuits: []nodes.CircuitID{0, 1}, Ways: []uint16{0}},
	).start(t)
	f.run(des.Second)
	for name, want := range map[string]string{"short": "agg.out: the circuits do not join its ends", "not up": "circuit bc is planned"} {
		if s := f.step(t, name); s.State != controller.Failed || s.Detail != want {
			t.Errorf("%s: %v, %q", name, s.State, s.Detail)
		}
	}
	if len(f.sites[0].steers) != 0 {
		t.Error("steered all the same")
	}
}

// Tables follow the metric; equal costs are spread; only what changed is sent.
func TestTables(t *testing.T) {
	p := plant(4, "ab", "bd", "ac", "cd")
	for i, n := range []string{"ab", "bd", "ac", "cd"} {
		v := circuitOn(p, n, n)
		v.InPlace, v.Carries, v.Along = true, nodes.CarriesRouted, []nodes.FibreID{nodes.FibreID(i)}
	}
	circuitOn(p, "x", "ad").Carries = nodes.CarriesRouted
	p.Circuits[4].Metric = 1
	f := newFake(p, Config{Compute: ms(1)}, hops(ms(1)), controller.Order{Kind: controller.SetUp, Name: "s", At: ms(10), Circuit: 4}).start(t)
	defer f.log(t)
	if got := f.sites[0].table.Next[3]; !slices.Equal(got, []nodes.CircuitID{0, 2}) {
		t.Errorf("a to d by %v, want both sides", got)
	}
	b := f.sites[1].table
	f.run(des.Second)
	if got := f.sites[0].table.Next[3]; !slices.Equal(got, []nodes.CircuitID{4}) {
		t.Errorf("a to d by %v, want the new circuit", got)
	}
	if f.sites[1].table != b {
		t.Error("nothing changes at b, but it was sent a table")
	}
	// bd's metric is its delay: b reaches a by ab still, and c by either side.
	if got := f.sites[1].table.Next[0]; !slices.Equal(got, []nodes.CircuitID{0}) {
		t.Errorf("b to a by %v", got)
	}
	detail := ""
	for _, e := range f.events {
		if e.What == "tables" {
			detail = e.Detail
		}
	}
	if detail != "2 of 4 changed" {
		t.Errorf("event %q", detail)
	}
}

func TestCloneGoesOnEqually(t *testing.T) {
	p := plant(4, "ab", "bd", "ac", "cd")
	for i, n := range []string{"ab", "bd", "ac", "cd"} {
		v := circuitOn(p, n, n)
		v.InPlace, v.Carries, v.Along = true, nodes.CarriesRouted, []nodes.FibreID{nodes.FibreID(i)}
		v.Recovery = nodes.RecoveryRestore
	}
	circuitOn(p, "x", "ad").Recovery = nodes.RecoveryRestore
	cfg := Config{Compute: ms(1), Command: constant(ms(10)), Streams: []Stream{{Name: "q", Ends: [2]nodes.SiteID{0, 3}, Slots: 1, Demand: newPoisson(1, "q", 50, ms(30))}}}
	f := newFake(p, cfg, hops(ms(1)), setUp("s", 4)).start(t)
	f.light(ms(15), 1, true)
	f.run(ms(26)) // restorations are under way
	g := f.clone()
	want := len(f.events)
	for _, x := range []*fakeNet{f, g} {
		x.light(ms(300), 1, false)
		x.run(des.Second)
		x.sound(t)
	}
	if len(f.events) <= want || !slices.Equal(f.events, g.events) {
		t.Errorf("%d events after cloning, then %d and %d", want, len(f.events), len(g.events))
	}
	if a, b := f.net.Demand()[0], g.net.Demand()[0]; a != b || a.Offered == 0 {
		t.Errorf("%+v, %+v", a, b)
	}
	for i := range p.Circuits {
		a, b := f.report(nodes.CircuitID(i)), g.report(nodes.CircuitID(i))
		if a.State != b.State || !slices.Equal(a.Route, b.Route) || a.Incarnation != b.Incarnation || a.DownTime != b.DownTime {
			t.Errorf("%+v\n%+v", a, b)
		}
	}
}

func TestAuditSeesALostSlot(t *testing.T) {
	p := plant(3, "ab", "bc")
	v := circuitOn(p, "v", "ac")
	v.InPlace, v.Slots = true, 3
	f := newFake(p, Config{}, hops(ms(1))).start(t)
	f.sound(t)
	h := f.net.ctl.circuits[0].held.holder(0)
	f.net.elements[1].xc.Assign(1, h, 2)
	f.net.ctl.free[0]++
	want := []string{
		"site b, fibre bc: circuit v (incarnation 1) owns 2 slots and channels [], should own 3 and []",
		"controller, fibre ab: 6 slots believed free and 3 held, of 8",
	}
	if got := f.net.Audit(); !slices.Equal(got, want) {
		t.Errorf("got %q", got)
	}
}

// Each kind of condition holds when it should.
func TestConditions(t *testing.T) {
	p := plant(2, "ab", "ab")
	p.Aggregates = []nodes.Aggregate{{Name: "agg", Ends: [2]nodes.SiteID{0, 1}}}
	for _, n := range []string{"v", "w", "x"} {
		circuitOn(p, n, "ab").Along = []nodes.FibreID{0}
	}
	p.Circuits[0].InPlace = true
	after := func(k controller.ConditionKind, c nodes.CircuitID, step string) controller.Condition {
		return controller.Condition{Kind: k, Circuit: c, Step: step}
	}
	f := newFake(p, Config{}, hops(ms(1)),
		controller.Order{Kind: controller.Move, Name: "move", At: ms(100), After: after(controller.CircuitUp, 0, ""), Circuits: []nodes.CircuitID{0}, Ways: []uint16{0}},
		controller.Order{Kind: controller.SetUp, Name: "moved", After: after(controller.MoveDone, 0, ""), Circuit: 1},
		controller.Order{Kind: controller.SetUp, Name: "then", After: after(controller.StepDone, 0, "moved"), Circuit: 2},
		controller.Order{Kind: controller.Return, Name: "down", After: after(controller.CircuitDown, 0, ""), Ways: []uint16{0}},
		controller.Order{Kind: controller.Return, Name: "typo", After: after(controller.StepDone, 0, "mvoed"), Ways: []uint16{0}},
		controller.Order{Kind: controller.Return, Name: "not yet", At: des.Minute, Ways: []uint16{0}},
	).start(t)
	f.light(ms(500), 0, true)
	f.run(des.Second)
	defer f.log(t)
	for _, k := range []struct {
		name  string
		state controller.StepState
		begun des.Time
	}{
		{"move", controller.Done, ms(100)},
		{"moved", controller.Done, ms(100)},
		{"then", controller.Done, ms(104)}, // two messages there and back
		{"down", controller.Done, ms(500)},
		{"typo", controller.Never, des.Never},
		{"not yet", controller.Waiting, des.Never},
	} {
		if s := f.step(t, k.name); s.State != k.state || s.Begun != k.begun {
			t.Errorf("%s: %v, begun %v; want %v, %v", k.name, s.State, s.Begun, k.state, k.begun)
		}
	}
}

// A tear-down waits for a move of the same circuit that is in hand.
func TestTearDownWaitsForAMove(t *testing.T) {
	p := plant(3, "ab", "bc")
	p.Aggregates = []nodes.Aggregate{{Name: "agg", Ends: [2]nodes.SiteID{0, 2}}}
	for _, n := range []string{"ab", "bc"} {
		circuitOn(p, n, n).InPlace = true
	}
	f := newFake(p, Config{}, hops(ms(1)),
		controller.Order{Kind: controller.Move, Name: "m", Circuits: []nodes.CircuitID{0, 1}, Ways: []uint16{0, 1}},
		controller.Order{Kind: controller.TearDown, Name: "d", At: ms(1), Circuit: 1},
	).start(t)
	f.run(des.Second)
	defer f.log(t)
	if m, d := f.step(t, "m"), f.step(t, "d"); m.State != controller.Done || d.Begun != m.Done || d.State != controller.Done {
		t.Errorf("move done at %v, tear-down begun at %v, %v", m.Done, d.Begun, d.State)
	}
	f.agree(t)
}

// A whole channel takes the route asked for, with a channel that is free all
// along it.
func TestChannelAlong(t *testing.T) {
	p := plant(3, "ab", "bc", "ac")
	for _, n := range []string{"one", "two", "three", "four"} {
		v := circuitOn(p, n, "ac")
		v.Slots, v.Channel, v.Along = 0, true, []nodes.FibreID{0, 1}
		v.InPlace = n != "four"
	}
	f := newFake(p, Config{}, hops(ms(1)), setUp("s", 3)).start(t)
	f.run(des.Second)
	for i := range 3 {
		if r := f.report(nodes.CircuitID(i)); !slices.Equal(r.Channels, []int32{int32(i + 1), int32(i + 1)}) || len(r.Route) != 2 {
			t.Errorf("circuit %d: channels %v of %v", i, r.Channels, r.Route)
		}
	}
	if r := f.report(3); r.Reason != "no channel is free all along the route asked for" {
		t.Errorf("%v: %q", r.State, r.Reason)
	}
	f.sound(t)
}
