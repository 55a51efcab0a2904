package central

import (
	"slices"
	"testing"

	"ferrule/controller"
	"ferrule/des"
	"ferrule/nodes"
)

// onLink is one fibre of 80 slots between a and b that holds three circuits,
// as in RFC 3209 section 4.7: 31 slots at holding priority 7, 31 at 4, 8 at 2,
// and one circuit more that is to be set up.
func onLink(slots int, setup uint8) *nodes.Plant {
	p := plant(2, "ab")
	p.Fibres[0].Slots = 80
	for i, c := range []struct {
		name  string
		slots int
		hold  uint8
	}{{"A", 31, 7}, {"B", 31, 4}, {"C", 8, 2}, {"new", slots, setup}} {
		v := circuitOn(p, c.name, "ab")
		v.Slots, v.Setup, v.Hold, v.InPlace = c.slots, c.hold, c.hold, i < 3
	}
	return p
}

// What may be taken at a priority is what is not held at that priority or a
// better one, and the lowest priorities go first, as few as will do (computed
// from the rules of RFC 3209 section 4.7.3; an OTU4 link with 10 of 80 slots
// free).
func TestPreemption(t *testing.T) {
	for _, c := range []struct {
		slots int
		setup uint8
		up    bool
		lost  []string
	}{
		{31, 3, true, []string{"A"}},
		{31, 5, true, []string{"A"}},
		{62, 3, true, []string{"A", "B"}},
		{31, 7, false, nil},
		{80, 3, false, nil},
		{10, 7, true, nil},
	} {
		p := onLink(c.slots, c.setup)
		f := newFake(p, Config{}, hops(ms(1)), controller.Order{Kind: controller.SetUp, Name: "new", Circuit: 3}).start(t)
		if got := f.net.ctl.unreserved(3, 3)[0]; got != 72 {
			t.Errorf("%d slots unreserved at priority 3, want 72", got)
		}
		if got := f.net.ctl.unreserved(7, 3)[0]; got != 10 {
			t.Errorf("%d slots unreserved at priority 7, want 10", got)
		}
		f.run(ms(100))
		if up := f.report(3).State == controller.Up; up != c.up {
			t.Errorf("%d slots at priority %d: %v", c.slots, c.setup, f.report(3).State)
		}
		if got := f.happened("pre-empted"); !slices.Equal(got, c.lost) {
			t.Errorf("%d slots at priority %d: %q lost, want %q", c.slots, c.setup, got, c.lost)
		}
		for i := range 3 {
			gone := slices.Contains(c.lost, p.Circuits[i].Name)
			r := f.report(nodes.CircuitID(i))
			if gone != (r.State == controller.Down) || gone != (f.sites[1].ports[i] == nodes.PortDown) || gone != (r.Preempted == 1) || gone != (r.Reason != "") {
				t.Errorf("%s is %+v, its port %v", p.Circuits[i].Name, r, f.sites[1].ports[i])
			}
		}
		f.sound(t)
		f.log(t)
	}
}

// Circuits are restored by priority, and push out others only when not all
// fit, those of lowest holding priority first (RFC 3386 section 3.4). Who is
// pushed out is restored elsewhere if it may be, with fewer slots if need be.
func TestRestorePushesOut(t *testing.T) {
	build := func(room int) *nodes.Plant {
		p := plant(4, "ab", "bd", "ac", "cd") // the way round: ac, cd, bd
		p.Fibres[0].Slots = 20
		p.Fibres[2].Slots, p.Fibres[3].Slots, p.Fibres[1].Slots = room, room, room
		for _, c := range []struct {
			name, ends  string
			slots       int
			setup, hold uint8
		}{{"high", "ab", 3, 1, 1}, {"low", "ab", 2, 6, 6}, {"local", "cd", 3, 7, 7}} {
			v := circuitOn(p, c.name, c.ends)
			v.Slots, v.Setup, v.Hold, v.InPlace, v.Recovery = c.slots, c.setup, c.hold, true, nodes.RecoveryRestore
		}
		p.Circuits[2].Along = []nodes.FibreID{3}
		return p
	}
	f := newFake(build(8), Config{Compute: ms(5)}, hops(ms(1))).start(t)
	f.light(ms(100), 0, true)
	f.run(ms(900))
	if got := f.happened("pre-empted"); len(got) != 0 {
		t.Errorf("%q pushed out though all fit", got)
	}
	for i := range 3 {
		if f.report(nodes.CircuitID(i)).State != controller.Up {
			t.Errorf("circuit %d is %v", i, f.report(nodes.CircuitID(i)).State)
		}
	}

	// Room for six: high and local fit; low, of better holding priority, takes
	// the place of local, for which nothing is left.
	f = newFake(build(6), Config{Compute: ms(5)}, hops(ms(1))).start(t)
	f.light(ms(100), 0, true)
	f.run(ms(900))
	if got := f.happened("route"); !slices.Equal(got, []string{"high", "low"}) {
		t.Errorf("routes for %q", got)
	}
	if got := f.happened("pre-empted"); !slices.Equal(got, []string{"local"}) {
		t.Errorf("%q pushed out", got)
	}
	if r := f.report(2); r.State != controller.Down || r.Preempted != 1 {
		t.Errorf("local: %+v", r)
	}
	f.sound(t)
	// When the others are back on their first route, local comes back too.
	f = newFake(build(6), Config{Compute: ms(5), Revert: true, WaitToRestore: ms(500)}, hops(ms(1))).start(t)
	f.light(ms(100), 0, true)
	f.light(ms(1000), 0, false)
	f.run(ms(3000))
	for i := range 3 {
		if r := f.report(nodes.CircuitID(i)); r.State != controller.Up || len(r.Route) != 1 {
			t.Errorf("after the repair circuit %d is %v on %v", i, r.State, r.Route)
		}
	}
	f.sound(t)

	// The same, but local may shrink: it comes back with the slot that is left.
	p := build(6)
	p.Circuits[2].Shrink = true
	f = newFake(p, Config{Compute: ms(5), Revert: true, WaitToRestore: ms(500)}, hops(ms(1))).start(t)
	f.light(ms(100), 0, true)
	f.run(ms(900))
	third := p.Circuits[2].Rate / 3
	if r := f.report(2); r.State != controller.Up || r.Slots != 1 || r.Rate != third || f.sites[2].rates[2] != third {
		t.Errorf("shrunk: %+v, port at %d", r, f.sites[2].rates[2])
	}
	f.sound(t)
	// When there is room again it has all its slots.
	f.light(ms(1000), 0, false)
	f.run(ms(3000))
	if r := f.report(2); r.State != controller.Up || r.Slots != 3 || r.Rate != p.Circuits[2].Rate || f.sites[3].rates[2] != r.Rate {
		t.Errorf("with room again: %+v", r)
	}
	f.sound(t)
	f.log(t)
}

// Without a correlation window each circuit's own report has it restored in
// the order in which reports come; with one they are restored by importance;
// the report of a fibre is one for all (RFC 4428 section 4.4).
func TestCorrelation(t *testing.T) {
	build := func() *nodes.Plant {
		p := square("late", "first")
		p.Circuits[0].Setup, p.Circuits[1].Setup = 5, 0
		return p
	}
	for _, c := range []struct {
		cfg   Config
		order []string
	}{
		{Config{}, []string{"first", "late"}},
		{Config{PerCircuit: true}, []string{"late", "first"}},
		{Config{PerCircuit: true, Correlate: ms(15)}, []string{"first", "late"}},
	} {
		c.cfg.Compute = ms(20)
		f := newFake(build(), c.cfg, hops(ms(1)))
		f.start(t)
		f.dark[0] = true
		for _, s := range []nodes.SiteID{0, 1} {
			f.tell(ms(100), s, nodes.Message{Op: nodes.OpFibreDark, Fibre: 0})
			f.tell(ms(105), s, nodes.Message{Op: nodes.OpLightLost, Circuit: 0, N: 1})
			f.tell(ms(110), s, nodes.Message{Op: nodes.OpLightLost, Circuit: 1, N: 1})
		}
		f.run(ms(900))
		if got := f.happened("route"); !slices.Equal(got, c.order) {
			t.Errorf("%+v: restored in the order %q, want %q", c.cfg, got, c.order)
		}
		if f.under != 0 {
			t.Errorf("%+v: %d things under way", c.cfg, f.under)
		}
		f.sound(t)
		f.log(t)
	}
}

// A fault that comes back during wait-to-restore ends the wait, which starts
// anew with the next repair (RFC 4428 section 6.1).
func TestWaitToRestoreStartsAnew(t *testing.T) {
	f := newFake(square("v"), Config{Revert: true, WaitToRestore: ms(5000)}, hops(ms(1))).start(t)
	f.light(ms(100), 0, true)
	f.light(ms(1000), 0, false)
	f.light(ms(4000), 0, true)
	f.light(ms(7000), 0, false)
	f.run(ms(11900))
	if r := f.report(0); len(r.Route) != 3 {
		t.Errorf("back on %v before the wait is over", r.Route)
	}
	f.run(ms(12100))
	if r := f.report(0); len(r.Route) != 1 || r.State != controller.Up {
		t.Errorf("%v on %v after the wait", r.State, r.Route)
	}
	f.sound(t)
	f.log(t)
}

// A wavelength takes traffic once its receivers have locked and the power is
// levelled on every fibre.
func TestRelock(t *testing.T) {
	p := square("v")
	p.Circuits[0].Channel, p.Circuits[0].Slots = true, 0
	f := newFake(p, Config{Relock: ms(700), Level: ms(50)}, hops(ms(1))).start(t)
	f.light(ms(100), 0, true)
	f.run(ms(2000))
	// In sequence over a, c, d, b; the activation of b takes 1 ms more.
	r := f.report(0)
	if want := ms(100) + r.SetUp + ms(1) + ms(700) + 3*ms(50); f.sites[1].upAt[0] != want {
		t.Errorf("traffic at %v, want %v", f.sites[1].upAt[0], want)
	}
	f.sound(t)
	f.log(t)
}

// A controller that is cut off cannot restore anything and hears of nothing; as
// soon as a fibre to it is lit it asks, and what happened meanwhile is mended.
func TestControllerCutOff(t *testing.T) {
	p := plant(5, "ab", "bc", "cd", "de", "be", "ac")
	v := circuitOn(p, "v", "be")
	v.InPlace, v.Recovery = true, nodes.RecoveryRestore
	f := newFake(p, Config{}, hops(ms(1))) // at a, with fibres to b and c
	f.lose = func(now des.Time, to nodes.SiteID, m *nodes.Message) bool {
		return (to == 0 || m.From == 0) && f.dark[0] && f.dark[5]
	}
	f.start(t)
	f.light(ms(100), 0, true)
	f.light(ms(200), 5, true)
	f.light(ms(300), 4, true) // be: nobody can tell
	f.run(ms(3000))
	if r := f.report(0); r.State != controller.Up || f.sites[1].ports[0] != nodes.PortDown {
		t.Errorf("the controller takes v for %v, its port is %v", r.State, f.sites[1].ports[0])
	}
	f.light(ms(4000), 5, false)
	f.run(ms(6000))
	if r := f.report(0); r.State != controller.Up || !slices.Equal(r.Route, []nodes.FibreID{1, 2, 3}) || f.sites[1].ports[0] != nodes.PortUp {
		t.Errorf("v is %v on %v", r.State, r.Route)
	}
	f.sound(t)
	f.log(t)
}
