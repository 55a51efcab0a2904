package central

import (
	"fmt"
	"math/rand/v2"
	"slices"
	"testing"

	"ferrule/controller"
	"ferrule/des"
	"ferrule/nodes"
)

// mesh is six sites in a ring with three chords, circuits of all kinds, some
// in place, and aggregates to move.
func mesh() *nodes.Plant {
	p := plant(6, "ab", "bc", "cd", "de", "ef", "fa", "ad", "be", "cf")
	for i, ends := range []string{"ab", "bc", "cd", "de", "ef", "fa", "ad", "be", "ac", "bd", "ce", "df"} {
		v := circuitOn(p, fmt.Sprintf("v%d", i), ends)
		v.Slots, v.InPlace = 1+i%3, i < 9
		v.Recovery = nodes.Recovery(i % 2 * int(nodes.RecoveryRestore))
		v.HoldOff = ms(des.Time(i%3) * 20)
		v.Setup, v.Hold = uint8(i%4), uint8(i%4/2)
		v.Shrink = i%4 == 1
		if i == 7 || i == 11 {
			v.Recovery = nodes.RecoveryOnePlus
		}
		if i < 6 {
			v.Carries = nodes.CarriesRouted
		}
		if i%5 == 4 {
			v.Slots, v.Channel = 0, true
		}
	}
	for i, ends := range []string{"ab", "ac", "bd", "ad", "ce"} {
		p.Aggregates = append(p.Aggregates, nodes.Aggregate{
			Name: fmt.Sprintf("g%d", i), Class: nodes.ClassID(i % 2), Ends: [2]nodes.SiteID{nodes.SiteID(ends[0] - 'a'), nodes.SiteID(ends[1] - 'a')},
		})
	}
	return p
}

// randomOrder asks for something that may or may not make sense.
func randomOrder(r *rand.Rand, p *nodes.Plant) controller.Order {
	o := controller.Order{Name: "o", Circuit: nodes.CircuitID(r.IntN(len(p.Circuits))), Hold: ms(des.Time(r.IntN(2000)))}
	switch r.IntN(6) {
	case 0:
		o.Kind = controller.SetUp
	case 1:
		o.Kind = controller.TearDown
	case 2:
		o.Kind, o.Slots = controller.Resize, 1+r.IntN(4)
	case 3, 4:
		o.Kind, o.KeepOrder = controller.Move, r.IntN(2) == 0
		k := r.IntN(4)
		o.Circuits = [][]nodes.CircuitID{{0}, {8}, {0, 1}, {7, 3, 2, 1}}[k]
		o.Ways = [][]uint16{{0, 1}, {2, 3}, {3}, {0}}[k]
		if k == 3 {
			o.Circuits, o.Ways = []nodes.CircuitID{7, 3}, []uint16{4, 5}
		}
	default:
		o.Kind, o.Ways = controller.Return, []uint16{uint16(r.IntN(6))}
	}
	return o
}

// Whatever happens, once every fibre is lit and nothing is lost any more, the
// controller, the cross-connects, the ports, the tables and the steering agree.
func TestAllAgreeInTheEnd(t *testing.T) {
	for seed := range uint64(60) {
		r := rand.New(rand.NewPCG(seed, 1))
		p := mesh()
		cfg := Config{
			Site: nodes.SiteID(r.IntN(6)), Compute: ms(des.Time(r.IntN(3) * 5)), Command: constant(ms(des.Time(r.IntN(3) * 40))),
			TrafficReady: ms(des.Time(r.IntN(2) * 3)), Revert: r.IntN(2) == 0, WaitToRestore: des.Second, Attempts: 3 + r.IntN(3),
			Streams: []Stream{{Name: "q", Ends: [2]nodes.SiteID{0, 3}, Slots: 1, Demand: newPoisson(seed, "q", 10, ms(200))}},
		}
		cfg.PerCircuit, cfg.Correlate = r.IntN(2) == 0, ms(des.Time(r.IntN(2)*20))
		cfg.Streams[0].Demand.(*poisson).until = 25 * des.Second
		f := newFake(p, cfg, hops(ms(1))).start(t)
		loss := r.IntN(3) * 10 // per cent
		f.lose = func(now des.Time, to nodes.SiteID, m *nodes.Message) bool {
			return now < 25*des.Second && r.IntN(100) < loss
		}
		for at := des.Time(0); at < 20*des.Second; at += ms(des.Time(r.IntN(800))) {
			switch r.IntN(3) {
			case 0:
				f.light(at, nodes.FibreID(r.IntN(len(p.Fibres))), true)
			case 1:
				f.light(at, nodes.FibreID(r.IntN(len(p.Fibres))), false)
			default:
				f.order(at, randomOrder(r, p))
			}
			f.run(at)
			if f.sound(t); t.Failed() {
				f.log(t)
				t.Fatalf("seed %d", seed)
			}
		}
		var copied *fakeNet
		if loss == 0 {
			copied = f.clone() // in the middle of everything
		}
		f.endInLight()
		f.agree(t)
		if copied != nil {
			copied.endInLight()
			copied.agree(t)
			want, steps := f.net.Reports()
			got, stepsToo := copied.net.Reports()
			if fmt.Sprint(got, stepsToo, copied.under) != fmt.Sprint(want, steps, f.under) {
				t.Errorf("a copy ends otherwise:\n%v\n%v", got, want)
			}
		}
		if t.Failed() {
			f.log(t)
			t.Fatalf("seed %d", seed)
		}
	}
}

// endInLight darkens every fibre once more and lights it again: alarms may have
// been lost for good, and now, with nothing lost, all is told.
func (f *fakeNet) endInLight() {
	for i := range f.plant.Fibres {
		f.light(40*des.Second, nodes.FibreID(i), true)
	}
	for i := range f.plant.Fibres {
		f.light(60*des.Second, nodes.FibreID(i), false)
	}
	f.run(100 * des.Second)
}

// agree checks that all state is what the controller believes.
func (f *fakeNet) agree(t *testing.T) {
	t.Helper()
	f.sound(t)
	if !f.net.Settled() {
		t.Errorf("not settled: %d owed", len(f.net.ctl.owed))
	}
	reports, steps := f.net.Reports()
	for c, r := range reports {
		p := &f.plant.Circuits[c]
		up := r.State == controller.Up
		switch r.State {
		case controller.Up, controller.Planned, controller.TornDown, controller.Blocked:
		case controller.Down:
			if r.Reason == "" {
				t.Errorf("circuit %s is down for no reason", p.Name)
			}
		default:
			t.Errorf("circuit %s is %v", p.Name, r.State)
		}
		for e, s := range p.Ends {
			x := &f.sites[s]
			if (x.ports[c] == nodes.PortUp) != up {
				t.Errorf("circuit %s is %v, its port at %s %d", p.Name, r.State, f.plant.Sites[s].Name, x.ports[c])
			}
			if !up {
				continue
			}
			want := slices.Clone(r.Route)
			if e == 1 {
				slices.Reverse(want)
			}
			if tr := &x.trails[c]; !slices.Equal(tr.Fibres, want) || tr.Incarnation != r.Incarnation {
				t.Errorf("circuit %s at %s goes by %v (%d), not %v (%d)", p.Name, f.plant.Sites[s].Name, tr.Fibres, tr.Incarnation, want, r.Incarnation)
			}
			if x.rates[c] != r.Rate {
				t.Errorf("circuit %s at %s sends at %d, not %d", p.Name, f.plant.Sites[s].Name, x.rates[c], r.Rate)
			}
		}
	}
	for s, want := range f.net.ctl.computeTables() {
		if !sameTable(f.sites[s].table, want) {
			t.Errorf("table of %s is out of date", f.plant.Sites[s].Name)
		}
	}
	for w := range f.net.ctl.ways {
		chain := f.net.ctl.ways[w].chain
		at := f.net.ctl.stationsOf(uint16(w), chain)
		for s := range f.sites {
			want := nodes.CircuitID(nodes.None)
			if i := slices.Index(at, nodes.SiteID(s)); i >= 0 {
				want = chain[i]
			}
			if got := f.sites[s].ways[w]; got != want {
				t.Errorf("way %d at %s goes by %d, not %d", w, f.plant.Sites[s].Name, got, want)
			}
		}
	}
	for _, s := range steps {
		if s.State != controller.Done && s.State != controller.Failed {
			t.Errorf("step %v is %v", s.Kind, s.State)
		}
	}
}
