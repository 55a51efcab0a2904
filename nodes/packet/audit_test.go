package packet

import (
	"math/rand/v2"
	"strings"
	"testing"

	"ferrule/des"
	"ferrule/nodes"
)

// drip sends packets of one size at random gaps.
type drip struct {
	r    *rand.PCG
	way  uint16
	at   des.Time
	mean uint64
	size uint16
	seq  uint32
}

func newDrip(way uint16, mean des.Time, size uint16) *drip {
	return &drip{r: rand.NewPCG(uint64(way), 1), way: way, mean: uint64(mean), size: size}
}

func (d *drip) Next() des.Time { return d.at }

func (d *drip) Emit(end des.Time, buf []nodes.Packet) []nodes.Packet {
	for d.at < end {
		buf = append(buf, nodes.Packet{Born: d.at, Due: d.at, Seq: d.seq, Way: d.way, Size: d.size, TTL: nodes.InitialTTL})
		d.seq++
		d.at += des.Time(d.r.Uint64() % (2 * d.mean))
	}
	return buf
}

func (d *drip) Scale(des.Time, float64) {}

func (d *drip) Clone() nodes.Source {
	c := *d
	r := *d.r
	c.r = &r
	return &c
}

// tamperer changes the ports of its site at random instants.
type tamperer struct {
	r        *rand.PCG
	circuits int
}

func (a *tamperer) Clone() nodes.ControlAgent {
	r := *a.r
	return &tamperer{&r, a.circuits}
}

func (a *tamperer) Handle(x nodes.Local, now des.Time, m nodes.Message) {
	u := a.r.Uint64()
	c := nodes.CircuitID(u >> 8 % uint64(a.circuits))
	switch u % 4 {
	case 0:
		x.SetPort(c, nodes.PortDown)
	case 1, 2:
		x.SetPort(c, nodes.PortUp)
	case 3:
		x.SetRate(c, nodes.Rate(1+u>>16%20)*nodes.Mbps)
	}
	if u>>40%3 == 0 {
		x.SetPort(c, nodes.PortDraining)
	}
	x.Later(nodes.Message{At: now + des.Time(1+u>>20%uint64(5*des.Millisecond)), Op: nodes.OpFirstAgent})
}

// overloaded is two sites with three circuits: routed, moved and waiting when
// down, moved and dropped when down. Each is offered more than it can carry.
func overloaded(t *testing.T) *Network {
	t.Helper()
	p := &nodes.Plant{
		Sites:  []nodes.Site{{Name: "a"}, {Name: "b"}},
		Fibres: []nodes.Fibre{{Name: "f", Ends: [2]nodes.SiteID{0, 1}, Delay: 900 * des.Microsecond}},
		Classes: []nodes.Class{
			{Name: "high", BufferPackets: 5}, {Name: "mid", Queue: nodes.QueueWeight, Weight: 30, BufferBytes: 8000},
			{Name: "low", Queue: nodes.QueueWeight, Weight: 70, BufferTime: 20 * des.Millisecond},
		},
	}
	cfg := Config{Plant: p, Length: 2 * des.Second, WarmUp: 100 * des.Millisecond, Seed: 1}
	for i, when := range []nodes.WhenDown{nodes.DownReturn, nodes.DownWait, nodes.DownDrop} {
		c := nodes.Circuit{Name: string(rune('x' + i)), Ends: [2]nodes.SiteID{0, 1}, Rate: 10 * nodes.Mbps, WhenDown: when}
		if i > 0 {
			c.Carries = nodes.CarriesMoved
		}
		p.Circuits = append(p.Circuits, c)
		for class := range 3 {
			w := nodes.WayOf(nodes.AggID(len(p.Aggregates)), nodes.Out)
			p.Aggregates = append(p.Aggregates, nodes.Aggregate{Name: "w", Class: nodes.ClassID(class), Ends: [2]nodes.SiteID{0, 1}})
			cfg.Sources = append(cfg.Sources, Source{Way: w, Source: newDrip(w, des.Millisecond, uint16(500+100*class))})
		}
	}
	n, err := New(cfg)
	if err != nil {
		t.Fatal(err)
	}
	n.SetAgents([]nodes.ControlAgent{&tamperer{rand.NewPCG(1, 2), 3}, &tamperer{rand.NewPCG(3, 4), 3}})
	for s := range nodes.SiteID(2) {
		x := n.Local(s)
		for c := range nodes.CircuitID(3) {
			x.OpenTrail(nodes.Trail{Circuit: c, Dir: nodes.Direction(s), Fibres: []nodes.FibreID{0}})
			x.SetPort(c, nodes.PortUp)
			for class := range 3 {
				if w := nodes.WayOf(nodes.AggID(3*int(c)+class), nodes.Out); c > 0 {
					x.Steer(w, c)
				}
			}
		}
		x.Install(&nodes.Table{Next: [][]nodes.CircuitID{{0}, {0}}})
	}
	n.Begin()
	return n
}

// Little's law holds as an identity of integers at every instant, whatever
// happens to a queue: overload, flushes, waiting while down, new rates.
func TestLittleHoldsThroughEverything(t *testing.T) {
	n := overloaded(t)
	n.Local(0).Later(nodes.Message{At: 50 * des.Millisecond, Op: nodes.OpFirstAgent})
	k := des.NewKernel(n, nil)
	for at := des.Time(0); at < 2*des.Second; at += 7_777_777_777 {
		k.Advance(at, nil)
		if _, bad := n.Audit(); len(bad) > 0 {
			t.Fatalf("at %v: %q", at, bad)
		}
	}
	n.Run(k, nil)
	totals, bad := n.Audit()
	if len(bad) > 0 {
		t.Errorf("at the end: %q", bad)
	}
	for _, c := range []Cause{LostQueue, LostFlushed, LostNoRoute, LostTornDown} {
		if totals.Lost[c] == 0 {
			t.Errorf("nothing was lost as %v, which this is to test", c)
		}
	}
	held := false
	for i := range n.sites[0].ports {
		q := &n.sites[0].ports[i]
		held = held || q.hold && q.count.sent > 0 && q.waits.Float() > float64(des.Second)
	}
	if !held {
		t.Error("no packets waited in the port that holds")
	}
}

// Whatever is done to the books behind their back, the audit sees.
func TestAuditSeesTampering(t *testing.T) {
	n := overloaded(t)
	des.NewKernel(n, nil).Advance(500*des.Millisecond, nil)
	if totals, bad := n.Audit(); len(bad) > 0 || totals.Inside == 0 {
		t.Fatalf("before tampering: %+v %q", totals, bad)
	}
	for _, c := range []struct {
		what, want string
		do         func(n *Network)
	}{
		{"a packet gone from a fibre", "accounted for", func(n *Network) { n.sites[1].inputs[0].pipe.head++ }},
		{"a packet twice on a fibre", "accounted for", func(n *Network) {
			p := n.sites[1].inputs[0].pipe
			k := p.buf[p.head&uint64(len(p.buf)-1)]
			p.push(&k)
		}},
		{"a packet of another way", "accounted for", func(n *Network) {
			p := n.sites[1].inputs[0].pipe
			p.buf[p.head&uint64(len(p.buf)-1)].Way ^= 2
		}},
		{"a packet gone from a queue", "holds", func(n *Network) { n.sites[0].ports[0].disc.Dequeue(n.now) }},
		{"a packet sent that was not", "accounted for", func(n *Network) { n.sites[0].sources[0].packets++ }},
		{"a loss that was none", "accounted for", func(n *Network) { n.sites[0].losses[0].Count[1][LostQueue]++ }},
		{"a delivery that was none", "left the network", func(n *Network) { n.sites[1].delivered++ }},
		{"a delay twice in the histogram", "in the histogram", func(n *Network) { cell(n).Delay.Add(7) }},
		{"a packet metered twice", "accounted for", func(n *Network) { cell(n).Exact.Add(7); cell(n).Delay.Add(7) }},
		{"a picosecond more waited", "time waited", func(n *Network) { n.sites[0].ports[0].waits.Add(1) }},
		{"an area too large", "area under", func(n *Network) { n.sites[0].ports[1].area.Add(1) }},
		{"one more said to wait", "waiting", func(n *Network) { n.sites[0].ports[2].waiting++ }},
		{"a wait begun a picosecond early", "area under", func(n *Network) { n.sites[0].ports[2].changed-- }},
	} {
		m := n.Clone()
		c.do(m)
		_, bad := m.Audit()
		if !strings.Contains(strings.Join(bad, "\n"), c.want) {
			t.Errorf("%s: audit says %q, want something with %q", c.what, bad, c.want)
		}
	}
	if _, bad := n.Audit(); len(bad) > 0 {
		t.Errorf("tampering with clones shows in the original: %q", bad)
	}
}

func cell(n *Network) *Cell {
	for w := range n.meters {
		for _, c := range n.meters[w].Cells {
			if c != nil {
				return c
			}
		}
	}
	panic("nothing was delivered")
}

// The latency of an input never breaks the order, and exactly what arrives
// before the instant that before gives leaves before the end.
func TestLatencyKeepsOrder(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 1))
	for i, f := range []Forwarding{
		{Constant: 15 * des.Microsecond}, {}, {Median: 20 * des.Microsecond, P99: 90 * des.Microsecond},
		{Median: 1, P99: des.Second}, {Median: 500 * des.Microsecond, P99: 501 * des.Microsecond}, {Median: 7, P99: 7},
	} {
		l := newLatency(f, uint64(i), "an input")
		at, last := des.Time(0), des.Time(0)
		for range 20_000 {
			at += des.Time(r.Uint64() >> (20 + r.IntN(44)))
			if r.IntN(4) == 0 && l.step > 0 {
				at = max(at, at+l.step-at%l.step-des.Time(r.IntN(3))) // near where two pieces meet
			}
			out := l.out(at)
			if out < last || out < at {
				t.Fatalf("%+v: what comes at %d ps leaves at %d ps, after one that left at %d ps", f, at, out, last)
			}
			last = out
			end := at + des.Time(r.Int64N(int64(des.Millisecond)))
			b := l.before(end)
			if l.out(b) < end || b > 0 && l.out(b-1) >= end {
				t.Fatalf("%+v: before %d ps leave those that come before %d ps? the one then leaves at %d ps, the one a picosecond earlier at %d ps", f, end, b, l.out(b), l.out(b-1))
			}
		}
	}
}
