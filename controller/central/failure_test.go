package central

import (
	"slices"
	"testing"

	"ferrule/controller"
	"ferrule/des"
	"ferrule/nodes"
)

// square is sites a to d in a ring, with a circuit of 1 slot over fibre ab for
// each name, all restored.
func square(names ...string) *nodes.Plant {
	p := plant(4, "ab", "bd", "ac", "cd")
	for _, n := range names {
		v := circuitOn(p, n, "ab")
		v.InPlace, v.Recovery = true, nodes.RecoveryRestore
	}
	return p
}

func TestRestore(t *testing.T) {
	p := square("v")
	p.Circuits[0].Carries = nodes.CarriesRouted
	f := newFake(p, Config{Compute: ms(5), Command: constant(ms(10))}, hops(ms(1))).start(t)
	f.light(des.Second, 0, true)
	if f.run(des.Second); f.sites[0].ports[0] != nodes.PortDown || f.sites[1].ports[0] != nodes.PortDown {
		t.Error("ports stay up in the dark")
	}
	f.run(2 * des.Second)
	defer f.log(t)
	r := f.report(0)
	if r.State != controller.Up || !slices.Equal(r.Route, []nodes.FibreID{2, 3, 1}) || r.Incarnation != 2 || r.Outages != 1 {
		t.Errorf("%+v", r)
	}
	// a stands with the controller: known at once; tables are decided first,
	// then the route; d is 3 ms away.
	if want := 2*ms(5) + 2*ms(3) + ms(10); r.SetUp != want {
		t.Errorf("restored in %v, want %v", r.SetUp, want)
	}
	if want := r.SetUp + 2*ms(1); r.DownTime != want {
		t.Errorf("down for %v, want %v", r.DownTime, want)
	}
	if f.sites[0].ports[0] != nodes.PortUp || f.sites[1].ports[0] != nodes.PortUp || len(f.sites[0].table.Next[1]) != 1 {
		t.Error("not in use again")
	}
	if got := f.happened("fibre down"); len(got) != 1 {
		t.Errorf("one cut is reported %d times", len(got))
	}
	if got := f.happened("light lost"); len(got) != 0 {
		t.Errorf("alarms of circuits are not absorbed: %v", got)
	}
	f.sound(t)

	f.light(3*des.Second, 0, false)
	f.run(4 * des.Second)
	if got := f.happened("stays"); !slices.Equal(got, []string{"v"}) || len(f.report(0).Route) != 3 {
		t.Errorf("it does not stay where it is: %v", got)
	}
}

// Restored first: set-up priority, then the highest class carried, then
// bandwidth, then name.
func TestRestoreOrder(t *testing.T) {
	p := square("by name 2", "by name 1", "wide", "gold", "first")
	p.Circuits[2].Payload *= 2
	p.Circuits[4].Setup, p.Circuits[4].Payload = 1, nodes.Mbps
	for i := range 4 {
		p.Circuits[i].Setup = 3
	}
	p.Aggregates = []nodes.Aggregate{{Name: "g", Class: 0, Ends: [2]nodes.SiteID{0, 1}}, {Name: "h", Class: 1, Ends: [2]nodes.SiteID{0, 1}}}
	var moves []controller.Order
	for w, c := range []nodes.CircuitID{3, 3, 2, 1} {
		moves = append(moves, controller.Order{Kind: controller.Move, Name: "m", Circuits: []nodes.CircuitID{c}, Ways: []uint16{uint16(w)}})
	}
	moves[3].Circuits = []nodes.CircuitID{0}
	p.Aggregates = append(p.Aggregates, nodes.Aggregate{Name: "i", Class: 1, Ends: [2]nodes.SiteID{0, 1}})
	moves = append(moves, controller.Order{Kind: controller.Move, Name: "m", Circuits: []nodes.CircuitID{1}, Ways: []uint16{4}})
	// Room for four on the way round.
	p.Fibres[3].Slots = 4
	f := newFake(p, Config{Compute: ms(5), Command: constant(ms(1))}, hops(ms(1))).start(t, moves...)
	f.light(ms(100), 0, true)
	f.run(des.Second)
	defer f.log(t)
	if got, want := f.happened("route"), []string{"first", "gold", "wide", "by name 1"}; !slices.Equal(got, want) {
		t.Errorf("restored in the order %q, want %q", got, want)
	}
	if r := f.report(0); r.State != controller.Down || r.Reason == "" || !slices.Equal(f.happened("not restorable"), []string{"by name 2"}) {
		t.Errorf("%v, %q", r.State, r.Reason)
	}
	f.sound(t)

	f.light(2*des.Second, 0, false)
	f.run(3 * des.Second)
	if r := f.report(0); r.State != controller.Up || !slices.Equal(r.Route, []nodes.FibreID{0}) || r.DownTime < des.Second {
		t.Errorf("not restored when the fibre is whole: %+v", r)
	}
	f.sound(t)
}

// A circuit without recovery waits for its light.
func TestNoRecoveryWaits(t *testing.T) {
	p := square("v")
	p.Circuits[0].Recovery, p.Circuits[0].Carries = nodes.RecoveryNone, nodes.CarriesRouted
	f := newFake(p, Config{Compute: ms(5)}, hops(ms(1))).start(t)
	f.light(ms(100), 0, true)
	f.run(ms(900))
	defer f.log(t)
	if r := f.report(0); r.State != controller.Down || len(f.sites[0].table.Next[1]) != 0 || len(r.Route) != 1 {
		t.Errorf("%+v", r)
	}
	f.light(des.Second, 0, false)
	f.run(2 * des.Second)
	// The other end's light is known 1 ms later; decided in 5 ms; there and back.
	r := f.report(0)
	if want := des.Second + ms(1) + ms(5) + 2*ms(1); r.UpSince != want || r.Incarnation != 1 || r.DownTime != want-ms(100) {
		t.Errorf("%+v, want up since %v", r, want)
	}
	if f.sites[1].ports[0] != nodes.PortUp || len(f.sites[0].table.Next[1]) != 1 {
		t.Error("not in use again")
	}
	f.sound(t)
}

// Within its hold-off nobody is told of a fault; the controller knows the
// fibre is dead, but routes on over the circuit.
func TestHoldOff(t *testing.T) {
	for _, dark := range []des.Time{ms(30), ms(300)} {
		p := square("v")
		p.Circuits[0].Recovery, p.Circuits[0].Carries, p.Circuits[0].HoldOff = nodes.RecoveryNone, nodes.CarriesRouted, ms(50)
		f := newFake(p, Config{}, hops(ms(1))).start(t)
		f.light(ms(100), 0, true)
		f.light(ms(100)+dark, 0, false)
		lost := f.sites[0].ports[0] == nodes.PortDown
		f.run(des.Second)
		if r := f.report(0); r.State != controller.Up || f.sites[0].ports[0] != nodes.PortUp || f.sites[1].ports[0] != nodes.PortUp {
			t.Errorf("dark for %v: %+v", dark, r)
		}
		if lost != (dark > ms(50)) {
			t.Errorf("dark for %v: port stopped %v", dark, lost)
		}
		if want := 2 * b2i(dark > ms(50)); len(f.happened("tables")) != want {
			t.Errorf("dark for %v: %d jobs for tables, want %d", dark, len(f.happened("tables")), want)
		}
		f.log(t)
	}
}

// A fault that no fibre accounts for: the whole old route is avoided.
func TestUnplacedFault(t *testing.T) {
	p := square("v")
	f := newFake(p, Config{}, hops(ms(1))).start(t)
	f.tell(ms(100), 1, nodes.Message{Op: nodes.OpLightLost, Circuit: 0, N: 1})
	f.run(des.Second)
	defer f.log(t)
	if r := f.report(0); r.State != controller.Up || len(r.Route) != 3 || len(f.happened("light lost")) != 1 {
		t.Errorf("%+v", r)
	}
	f.sound(t)
}

// A second cut while a restoration is under way cranks it back.
func TestCutDuringRestoration(t *testing.T) {
	p := plant(4, "ab", "bd", "ac", "cd", "bc")
	v := circuitOn(p, "v", "ab")
	v.InPlace, v.Recovery = true, nodes.RecoveryRestore
	p.Fibres[4].Delay = ms(1) / 2
	f := newFake(p, Config{Command: constant(ms(50))}, hops(ms(1))).start(t)
	f.light(ms(100), 0, true)
	f.light(ms(120), 4, true) // a-c-b was being connected
	f.run(des.Second)
	defer f.log(t)
	if r := f.report(0); r.State != controller.Up || !slices.Equal(r.Route, []nodes.FibreID{2, 3, 1}) || r.Incarnation != 3 || r.Outages != 1 {
		t.Errorf("%+v", r)
	}
	f.sound(t)
}

// What a site that cannot be reached still holds is released when it can be.
func TestOwedReleases(t *testing.T) {
	p := square("v")
	f := newFake(p, Config{}, hops(ms(1))).start(t)
	cut := true
	f.lose = func(now des.Time, to nodes.SiteID, m *nodes.Message) bool { return cut && (to == 1 || m.From == 1) }
	f.light(ms(100), 0, true)
	f.run(10 * des.Second)
	defer f.log(t)
	if r := f.report(0); r.State != controller.Down || f.net.elements[1].xc.FreeSlots(0) != 7 {
		t.Errorf("%+v", r)
	}
	f.sound(t)
	cut = false
	f.light(11*des.Second, 0, false)
	f.run(12 * des.Second)
	if r := f.report(0); r.State != controller.Up || !f.net.Settled() {
		t.Errorf("%+v", r)
	}
	f.sound(t)
}

// Reversion waits until the first route has been whole for long enough, and
// loses nothing: the old route is held until both ends send on the new one.
func TestReversion(t *testing.T) {
	p := square("v")
	f := newFake(p, Config{Revert: true, WaitToRestore: 2 * des.Second, Command: constant(ms(10))}, hops(ms(1))).start(t)
	f.light(ms(100), 0, true)
	f.light(des.Second, 0, false)
	f.light(2*des.Second, 0, true) // not yet
	f.light(3*des.Second, 0, false)
	f.run(5*des.Second - 1)
	defer f.log(t)
	if r := f.report(0); len(r.Route) != 3 {
		t.Errorf("returned too soon: %+v", r)
	}
	f.run(6 * des.Second)
	r := f.report(0)
	if !slices.Equal(r.Route, []nodes.FibreID{0}) || r.State != controller.Up || r.Outages != 1 || r.Incarnation != 3 {
		t.Errorf("%+v", r)
	}
	f.sound(t)
}

// The end that cannot see a one-way fault is told to stop by the controller.
func TestOneWayFault(t *testing.T) {
	p := square("v")
	p.Circuits[0].Recovery = nodes.RecoveryNone
	f := newFake(p, Config{}, hops(ms(1))).start(t)
	f.tell(ms(100), 0, nodes.Message{Op: nodes.OpLightLost, Circuit: 0, N: 1})
	f.tell(ms(100), 0, nodes.Message{Op: nodes.OpFibreDark, Fibre: 0})
	f.run(ms(101))
	defer f.log(t)
	if f.sites[0].ports[0] != nodes.PortDown || f.sites[1].ports[0] != nodes.PortDown || f.report(0).State != controller.Down {
		t.Error("an end still sends into the dark")
	}
	f.tell(ms(200), 0, nodes.Message{Op: nodes.OpLightBack, Circuit: 0, N: 1})
	f.tell(ms(200), 0, nodes.Message{Op: nodes.OpFibreLit, Fibre: 0})
	f.run(ms(300))
	if f.sites[0].ports[0] != nodes.PortUp || f.sites[1].ports[0] != nodes.PortUp || f.report(0).State != controller.Up {
		t.Error("not up again")
	}
}

// A resize that a fault interrupts leaves the slots the circuit had, and the
// restored circuit has them too.
func TestResizeInterrupted(t *testing.T) {
	p := square("v")
	f := newFake(p, Config{Command: constant(ms(50))}, hops(ms(1)),
		controller.Order{Kind: controller.Resize, Name: "r", Slots: 5}).start(t)
	f.light(ms(20), 0, true)
	f.run(des.Second)
	defer f.log(t)
	if s := f.step(t, "r"); s.State != controller.Failed || s.Detail != "the circuit went down" {
		t.Errorf("%v: %s", s.State, s.Detail)
	}
	if r := f.report(0); r.State != controller.Up || r.Slots != 1 || len(r.Route) != 3 || r.Rate != nodes.Gbps {
		t.Errorf("%+v", r)
	}
	f.sound(t)
}

// TestNothingUnderWayOnceRestored holds the count of consequences to its
// purpose: it ends with the last of them, not with the timers of repetitions
// that have become idle.
func TestNothingUnderWayOnceRestored(t *testing.T) {
	p := plant(3, "ab", "ac", "cb")
	circuitOn(p, "x", "ab").Recovery = nodes.RecoveryRestore
	p.Circuits[0].InPlace = true
	f := newFake(p, Config{Compute: ms(10), Retry: des.Second, Command: constant(ms(5))}, hops(ms(1))).start(t)
	f.light(ms(100), 0, true)
	f.run(ms(105))
	if f.under == 0 {
		t.Error("nothing is under way while the circuit is restored")
	}
	f.run(ms(200)) // all timers of repetitions are later
	if s := f.report(0).State; s != controller.Up || f.under != 0 {
		t.Errorf("circuit is %v, %d things under way; want up and none", s, f.under)
	}
	f.sound(t)
	f.log(t)
}

// TestPeople checks that durations in details have three significant digits.
func TestPeople(t *testing.T) {
	for d, want := range map[des.Time]string{
		0: "0 s", 36422838677: "36.4 ms", 9996 * des.Microsecond: "10.0 ms", 181 * des.Millisecond: "181 ms",
		1200 * des.Millisecond: "1.20 s", 5410 * des.Nanosecond: "5.41 us", 7: "7.00 ps", -36 * des.Millisecond: "-36.0 ms",
	} {
		if got := people(d); got != want {
			t.Errorf("people(%v) = %q, want %q", d, got, want)
		}
	}
}
