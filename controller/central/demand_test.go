package central

import (
	"math"
	"testing"

	"gonum.org/v1/gonum/stat"

	"ferrule/controller"
	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
)

// poisson is requests at random with exponential holding times.
type poisson struct {
	gaps, holds random.Stream
	gap, hold   float64 // means in ps
	next        des.Time
	until       des.Time // no request comes later; 0: no end
	n           uint64
}

// newPoisson makes perSecond requests a second of the given mean hold.
func newPoisson(seed uint64, name string, perSecond float64, hold des.Time) *poisson {
	p := &poisson{
		gaps: random.NewStream(seed, name+"/gap"), holds: random.NewStream(seed, name+"/hold"),
		gap: float64(des.Second) / perSecond, hold: float64(hold),
	}
	p.next = des.Time(p.gaps.Exp() * p.gap)
	return p
}

func (p *poisson) Next() des.Time { return p.next }

func (p *poisson) Take() (at, hold des.Time, index uint64) {
	at, index = p.next, p.n
	p.n++
	p.next += des.Time(p.gaps.Exp() * p.gap)
	if p.until > 0 && p.next > p.until {
		p.next = des.Never
	}
	return at, des.Time(p.holds.Exp() * p.hold), index
}

func (p *poisson) Clone() Demand { q := *p; return &q }

// With nothing to compute and no time at the cross-connects, blocking is that
// of the loss formulas whatever messages take: Erlang B (A. K. Erlang, P.O.E.E.J.
// 10, 1918) and, for several sizes on one group, J. Kaufman, IEEE Trans. Commun.
// 29, 1981. Values computed from the recursions of those papers. The seeds are
// fixed; the tolerance is the interval of 20 replications.
func TestBlockingFollowsTheLossFormulas(t *testing.T) {
	const runs, t999 = 20, 3.883 // Student's t, 19 degrees of freedom, 99.9 % two-sided
	type class struct {
		erlang float64
		slots  int
		want   float64
	}
	for _, k := range []struct {
		name    string
		servers int
		classes []class
		length  des.Time
	}{
		{"8 servers, 4 erlang", 8, []class{{4, 1, 0.03042006}}, 10 * des.Second},
		{"16 servers, 10 erlang", 16, []class{{10, 1, 0.02230187}}, 5 * des.Second},
		{"two sizes on 8 slots", 8, []class{{2, 1, 0.0420325}, {1, 2, 0.1096166}}, 10 * des.Second},
	} {
		t.Run(k.name, func(t *testing.T) {
			p := plant(3, "ab", "bc")
			for i := range p.Fibres {
				p.Fibres[i].Slots = k.servers
			}
			ratios := make([][]float64, len(k.classes))
			for seed := range uint64(runs) {
				var cfg Config
				for i, c := range k.classes {
					name := string(rune('q' + i))
					cfg.Streams = append(cfg.Streams, Stream{
						Name: name, Ends: [2]nodes.SiteID{0, 2}, Slots: c.slots,
						Demand: newPoisson(seed, name, c.erlang*100, ms(10)), // 10 ms each
					})
				}
				f := newFake(p, cfg, hops(ms(1))).start(t)
				f.run(k.length)
				f.sound(t)
				for i := range k.classes {
					d := f.net.Demand()[i]
					ratios[i] = append(ratios[i], float64(d.Blocked)/float64(d.Offered))
					if d.Refused != 0 {
						t.Errorf("%d requests refused by cross-connects", d.Refused)
					}
				}
			}
			for i, c := range k.classes {
				mean, sd := stat.MeanStdDev(ratios[i], nil)
				half := t999 * sd / math.Sqrt(runs)
				if math.Abs(mean-c.want) > half || half > 0.2*c.want {
					t.Errorf("%d slots: %.5f +- %.5f blocked, theory %.5f", c.slots, mean, half, c.want)
				}
			}
		})
	}
}

func TestRequestOrders(t *testing.T) {
	p := plant(2, "ab")
	ask := func(name string, at des.Time, slots int) controller.Order {
		return controller.Order{Kind: controller.Request, Name: name, At: at, Slots: slots, Ends: [2]nodes.SiteID{0, 1}, Hold: ms(100)}
	}
	f := newFake(p, Config{Compute: ms(2), Command: constant(ms(3))}, hops(ms(1)),
		ask("one", 0, 5), ask("two", ms(50), 5), ask("three", ms(150), 5)).start(t)
	f.run(ms(160))
	defer f.log(t)
	for name, want := range map[string]controller.StepState{"one": controller.Done, "two": controller.Failed, "three": controller.Done} {
		if s := f.step(t, name); s.State != want {
			t.Errorf("%s: %v", name, s.State)
		}
	}
	d := f.net.Demand()[0]
	if d.Offered != 3 || d.Blocked != 1 || d.Active != 1 || d.SlotTime.Float() != float64(2*5*ms(100)) {
		t.Errorf("%+v", d)
	}
	if got := f.net.elements[1].xc.FreeSlots(0); got != 3 {
		t.Errorf("%d slots are free at b, want 3", got)
	}
	f.run(des.Second)
	if got := f.net.elements[1].xc.FreeSlots(0); got != 8 {
		t.Errorf("%d slots are free at b, want all", got)
	}
	f.sound(t)
}

// A request whose command is lost and whose hold ends before it is repeated
// leaves nothing behind.
func TestShortRequestsUnderLoss(t *testing.T) {
	p := plant(3, "ab", "bc")
	q := newPoisson(3, "q", 40, ms(100))
	q.until = 19 * des.Second
	f := newFake(p, Config{Attempts: 30, Streams: []Stream{{Name: "q", Ends: [2]nodes.SiteID{0, 2}, Slots: 2, Demand: q}}}, hops(ms(1))).start(t)
	n := 0
	f.lose = func(now des.Time, to nodes.SiteID, m *nodes.Message) bool {
		n++
		return n%5 == 0 && now < 20*des.Second
	}
	f.run(19 * des.Second)
	f.sound(t)
	f.run(30 * des.Second)
	f.sound(t)
	if d := f.net.Demand()[0]; d.Active != 0 || d.Offered < 500 || f.net.elements[1].xc.FreeSlots(0) != 8 {
		t.Errorf("%+v, %d slots free", d, f.net.elements[1].xc.FreeSlots(0))
	}
}

func BenchmarkRequest(b *testing.B) {
	p := plant(3, "ab", "bc")
	cfg := Config{Streams: []Stream{{Name: "q", Ends: [2]nodes.SiteID{0, 2}, Slots: 1, Demand: newPoisson(7, "q", 400, ms(10))}}}
	f := newFake(p, cfg, hops(ms(1)))
	if err := f.net.Start(f.locals(), nil); err != nil {
		b.Fatal(err)
	}
	f.run(des.Second)
	b.ReportAllocs()
	b.ResetTimer()
	from := f.net.Demand()[0].Offered
	for f.net.Demand()[0].Offered-from < uint64(b.N) {
		f.run(f.now + 100*des.Millisecond)
	}
}
