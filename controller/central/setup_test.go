package central

import (
	"slices"
	"testing"

	"ferrule/controller"
	"ferrule/des"
	"ferrule/nodes"
)

// setUp is the order to set c up.
func setUp(name string, c nodes.CircuitID) controller.Order {
	return controller.Order{Kind: controller.SetUp, Name: name, Circuit: c}
}

// The duration of a set-up is the time to compute c, the one-way delay d_i to
// each site and the time x_i at its cross-connect: in parallel
// T = c + max(2 d_i + x_i), one after another T = c + sum(2 d_i + x_i).
// Computed from these formulas; the controller stands at the first site.
func TestSetUpDuration(t *testing.T) {
	const c, x = 7*des.Millisecond + 11, 10*des.Millisecond + 3
	d := des.Time(1*des.Millisecond + 1)
	cases := []struct {
		name            string
		sequence, whole bool
		want            des.Time
	}{
		{"parallel", false, false, c + 2*3*d + x},
		{"sequence", true, false, c + 2*(0+1+2+3)*d + 4*x},
		{"a whole channel is always in sequence", false, true, c + 2*(0+1+2+3)*d + 4*x},
	}
	for _, k := range cases {
		t.Run(k.name, func(t *testing.T) {
			p := plant(4, "ab", "bc", "cd")
			v := circuitOn(p, "v", "ad")
			if k.whole {
				v.Slots, v.Channel = 0, true
			}
			f := newFake(p, Config{Compute: c, Command: constant(x), Sequence: k.sequence, TrafficReady: ms(2)}, hops(d), setUp("s", 0)).start(t)
			f.run(des.Second)
			defer f.log(t)
			if r := f.report(0); r.SetUp != k.want || r.State != controller.Up || r.Incarnation != 1 {
				t.Errorf("set up in %d, state %v; want %d, up", r.SetUp, r.State, k.want)
			}
			// Then an activation goes to each end and traffic gets ready.
			if a, d := f.sites[0].upAt[0], f.sites[3].upAt[0]; a != k.want+ms(2) || d != k.want+3*(des.Millisecond+1)+ms(2) {
				t.Errorf("ports up at %d and %d", a, d)
			}
			if s := f.step(t, "s"); s.State != controller.Done || s.Done != k.want+2*3*d+ms(2) {
				t.Errorf("step %v at %d", s.State, s.Done)
			}
			f.sound(t)
			if want := []nodes.FibreID{2, 1, 0}; !slices.Equal(f.sites[3].trails[0].Fibres, want) || f.sites[3].trails[0].Dir != nodes.Back {
				t.Errorf("trail at the second end %v", f.sites[3].trails[0])
			}
		})
	}
}

// A batch of K that one server works off, s each from T0 on: the K-th is done
// at T0 + K s. Formula of the deterministic single-server queue. The server is
// the controller's computer, or the cross-connect that all circuits end at.
func TestBatch(t *testing.T) {
	const n, s = 30, 100 * des.Millisecond
	for _, k := range []struct {
		name string
		cfg  Config
		lag  des.Time // of what is not serial
	}{
		{"computing", Config{Compute: s}, 2 * des.Millisecond},
		{"commands", Config{Command: constant(s)}, 2 * des.Millisecond},
		{"commands, three at once", Config{Command: constant(s), CommandsAtOnce: 3}, 2 * des.Millisecond},
	} {
		t.Run(k.name, func(t *testing.T) {
			p := plant(2, "ab")
			p.Fibres[0].Slots = n
			var orders []controller.Order
			for i := range n {
				circuitOn(p, string(rune('A'+i)), "ab")
				orders = append(orders, setUp("s", nodes.CircuitID(i)))
			}
			f := newFake(p, k.cfg, hops(ms(1)), orders...).start(t)
			f.run(des.Minute)
			defer f.log(t)
			at := max(1, k.cfg.CommandsAtOnce)
			for i := range n {
				if got, want := f.report(nodes.CircuitID(i)).SetUp, des.Time(i/at+1)*s+k.lag; got != want {
					t.Errorf("circuit %d set up at %v, want %v", i, got, want)
				}
			}
			f.sound(t)
		})
	}
}

func TestLostMessagesAreRepeated(t *testing.T) {
	for _, k := range []struct {
		name string
		lose func(m *nodes.Message) bool
	}{
		{"a command", func(m *nodes.Message) bool { return m.Op == opAssign }},
		{"an answer", func(m *nodes.Message) bool { return m.Op == opAnswer }},
		{"an activation", func(m *nodes.Message) bool { return m.Op == opActivate }},
	} {
		t.Run(k.name, func(t *testing.T) {
			p := plant(3, "ab", "bc")
			circuitOn(p, "v", "ac")
			f := newFake(p, Config{Command: constant(ms(10))}, hops(ms(1)), setUp("s", 0)).start(t)
			lost := 0
			f.lose = func(_ des.Time, to nodes.SiteID, m *nodes.Message) bool {
				if lost == 0 && k.lose(m) {
					lost++
					return true
				}
				return false
			}
			f.run(des.Second)
			defer f.log(t)
			r := f.report(0)
			if r.State != controller.Up || r.Incarnation != 1 || lost != 1 {
				t.Errorf("state %v, incarnation %d, %d lost", r.State, r.Incarnation, lost)
			}
			if s := f.step(t, "s"); s.Done < ms(200) || s.Done > ms(230) {
				t.Errorf("done at %v, want soon after the repetition at 200 ms", s.Done)
			}
			if !f.net.Settled() {
				t.Error("not settled")
			}
			f.sound(t)
		})
	}
}

// A site that refuses, and one that never answers, are gone round.
func TestCrankBack(t *testing.T) {
	ring := func() (*nodes.Plant, *fakeNet) {
		p := plant(4, "ab", "bd", "ac", "cd") // least delay over b: the lower fibres
		p.Fibres[2].Delay = ms(2)
		circuitOn(p, "v", "ad")
		return p, newFake(p, Config{Compute: ms(1), Command: constant(ms(10))}, hops(ms(1)), setUp("s", 0)).start(t)
	}
	t.Run("refused", func(t *testing.T) {
		_, f := ring()
		f.net.elements[1].xc.Assign(1, streamThief, 8) // unknown to the controller
		f.run(des.Second)
		defer f.log(t)
		r := f.report(0)
		if r.State != controller.Up || r.Incarnation != 2 || !slices.Equal(r.Route, []nodes.FibreID{2, 3}) {
			t.Errorf("%+v", r)
		}
		if got := f.net.elements[0].xc.FreeSlots(0); got != 8 {
			t.Errorf("the refused route still holds slots: %d of 8 are free", got)
		}
		if a := f.net.Audit(); len(a) != 1 {
			t.Errorf("audit %q, want the thief alone", a)
		}
	})
	t.Run("no answer", func(t *testing.T) {
		_, f := ring()
		f.lose = func(_ des.Time, to nodes.SiteID, m *nodes.Message) bool { return to == 1 }
		f.run(3 * des.Second)
		defer f.log(t)
		r := f.report(0)
		if want := ms(1) + 3*ms(200) + ms(1) + 2*ms(3) + ms(10); r.SetUp != want || !slices.Equal(r.Route, []nodes.FibreID{2, 3}) {
			t.Errorf("set up in %v over %v, want %v", r.SetUp, r.Route, want)
		}
		f.sound(t)
	})
}

// streamThief holds slots that no circuit holds.
var streamThief = (&holding{incarnation: 9}).holder(0)

func TestBlockedIsAResult(t *testing.T) {
	p := plant(2, "ab")
	big := circuitOn(p, "big", "ab")
	big.Slots, big.InPlace = 7, true
	circuitOn(p, "v", "ab").Slots = 2
	circuitOn(p, "w", "ab")
	f := newFake(p, Config{}, hops(ms(1)), setUp("v in", 1), setUp("w in", 2),
		controller.Order{Kind: controller.Move, Name: "after v", After: controller.Condition{Kind: controller.CircuitUp, Circuit: 1}},
		controller.Order{Kind: controller.TearDown, Name: "after move", Circuit: 2, After: controller.Condition{Kind: controller.StepDone, Step: "after v"}},
	).start(t)
	f.run(des.Second)
	defer f.log(t)
	if r := f.report(1); r.State != controller.Blocked || r.Reason != "no route with 2 free slots" {
		t.Errorf("%v: %q", r.State, r.Reason)
	}
	if r := f.report(2); r.State != controller.Up {
		t.Errorf("the next one is %v", r.State)
	}
	for name, want := range map[string]controller.StepState{
		"v in": controller.Failed, "w in": controller.Done, "after v": controller.Never, "after move": controller.Never,
	} {
		if s := f.step(t, name); s.State != want || (want != controller.Done && s.Detail == "") {
			t.Errorf("step %s: %v (%s), want %v", name, s.State, s.Detail, want)
		}
	}
	f.sound(t)
}

func TestChannelsAreTheSameAllAlong(t *testing.T) {
	for _, converts := range []bool{false, true} {
		p := plant(3, "ab", "bc")
		p.Sites[1].Converts = converts
		for _, c := range []struct{ name, ends string }{{"ab1", "ab"}, {"bc1", "bc"}, {"bc2", "bc"}, {"ac", "ac"}, {"more", "ac"}} {
			v := circuitOn(p, c.name, c.ends)
			v.Slots, v.Channel = 0, true
		}
		for i := range 3 {
			p.Circuits[i].InPlace = true
		}
		f := newFake(p, Config{}, hops(ms(1)), setUp("ac", 3), setUp("more", 4)).start(t)
		f.run(des.Second)
		// Channel 1 is taken on ab, 1 and 2 on bc; 0 is cut into slots.
		want := []int32{3, 3}
		if converts {
			want = []int32{2, 3}
		}
		if r := f.report(3); !slices.Equal(r.Channels, want) {
			t.Errorf("converts %v: channels %v, want %v", converts, r.Channels, want)
		}
		if r := f.report(4); r.State != controller.Blocked {
			t.Errorf("converts %v: a fourth channel on bc is %v", converts, r.State)
		}
		f.sound(t)
		f.log(t)
	}
}

func TestStartNamesAllThatDoesNotFit(t *testing.T) {
	p := plant(3, "ab", "bc")
	p.Aggregates = []nodes.Aggregate{{Name: "agg", Ends: [2]nodes.SiteID{0, 2}}}
	for _, n := range []string{"one", "two", "three"} {
		v := circuitOn(p, n, "ac")
		v.Slots, v.InPlace = 5, true
	}
	p.Circuits[2].Along = []nodes.FibreID{1}
	f := newFake(p, Config{}, hops(ms(1)))
	err := f.net.Start(f.locals(), []controller.Order{{Kind: controller.Move, Name: "m", Circuits: []nodes.CircuitID{1}, Ways: []uint16{0}}})
	want := "circuit three: the fibres asked for do not join its ends\ncircuit two: no route with 5 free slots\nmove m: circuit two is not in place"
	if err == nil || err.Error() != want {
		t.Errorf("got %v, want %s", err, want)
	}
}

func TestChoices(t *testing.T) {
	for _, k := range []struct {
		choose nodes.Choice
		want   []nodes.FibreID
	}{
		{nodes.ChooseLeastDelay, []nodes.FibreID{0, 1}},
		{nodes.ChooseFewestRouters, []nodes.FibreID{2}},
		{nodes.ChooseMostSpare, []nodes.FibreID{3, 4}},
		{nodes.ChooseApart, []nodes.FibreID{3, 4}},
	} {
		p := plant(4, "ab", "bd", "ad", "ac", "cd")
		p.Fibres[2].Delay, p.Fibres[3].Delay, p.Fibres[4].Delay = ms(9), ms(5), ms(5)
		p.Fibres[2].RiskGroups, p.Fibres[1].RiskGroups = []int32{4}, []int32{4}
		p.Fibres[3].Slots, p.Fibres[4].Slots = 16, 16
		first := circuitOn(p, "first", "ad")
		first.Along, first.InPlace = []nodes.FibreID{0, 1}, true
		v := circuitOn(p, "v", "ad")
		v.Choose, v.ApartFrom, v.InPlace = k.choose, []nodes.CircuitID{0}, true
		f := newFake(p, Config{}, hops(ms(1))).start(t)
		if r := f.report(1); !slices.Equal(r.Route, k.want) {
			t.Errorf("choice %d: %v, want %v", k.choose, r.Route, k.want)
		}
	}
}
