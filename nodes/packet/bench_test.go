package packet_test

import (
	"fmt"
	"testing"
	"time"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
	"ferrule/nodes/packet"
)

// poisson is a plain Poisson source for tests of this package.
type poisson struct {
	r     random.Stream
	sizes random.Alias
	mean  float64
	at    des.Time
	way   uint16
	seq   uint32
}

func newPoisson(way uint16, seed uint64, sizes random.Alias, mean float64) *poisson {
	p := &poisson{r: random.NewStream(seed, fmt.Sprint("way ", way)), sizes: sizes, mean: mean, way: way}
	p.at = des.Time(p.r.Exp() * mean)
	return p
}

func (p *poisson) Next() des.Time { return p.at }

func (p *poisson) Emit(end des.Time, buf []nodes.Packet) []nodes.Packet {
	for p.at < end {
		if n := len(buf); n < cap(buf) {
			buf = buf[:n+1]
		} else {
			buf = append(buf, nodes.Packet{})
		}
		k := &buf[len(buf)-1] // field by field: a literal would be put together elsewhere and copied
		k.Due, k.Born, k.Word, k.Seq, k.Flow, k.Way = p.at, p.at, 0, p.seq, uint16(p.seq), p.way
		k.Size, k.TTL, k.Bits = p.sizes.Pick(p.r.Uint64()), nodes.InitialTTL, 0
		p.seq++
		p.at += des.Time(p.r.Exp() * p.mean)
	}
	return buf
}

func (p *poisson) Scale(at des.Time, factor float64) { p.mean /= factor }

func (p *poisson) Clone() nodes.Source { c := *p; return &c }

// threeSizes is 64, 576 and 1500 bytes with weights 4:2:4, 740.8 on average.
var threeSizes = random.NewAlias([]uint16{64, 576, 1500}, []float64{4, 2, 4})

const meanSize = 740.8

// tandem is five routers in a row at 10 Gb/s, 1 ms apart, three classes in
// strict priority (20, 30, 50 % of the load), half of the load transit over
// all five links and half crossing one of them.
func tandem(load float64, length des.Time, fwd packet.Forwarding) packet.Config {
	const hops = 5
	p := &nodes.Plant{}
	for i := range hops + 1 {
		p.Sites = append(p.Sites, nodes.Site{Name: fmt.Sprint("r", i)})
	}
	for i := range hops {
		ends := [2]nodes.SiteID{nodes.SiteID(i), nodes.SiteID(i + 1)}
		p.Fibres = append(p.Fibres, nodes.Fibre{Name: fmt.Sprint("f", i), Ends: ends, Delay: des.Millisecond})
		p.Circuits = append(p.Circuits, nodes.Circuit{Name: fmt.Sprint("c", i), Ends: ends, Rate: 10 * nodes.Gbps, Payload: 10 * nodes.Gbps})
	}
	for c := range 3 {
		p.Classes = append(p.Classes, nodes.Class{Name: fmt.Sprint("class", c), BufferBytes: 100_000})
	}
	cfg := packet.Config{Plant: p, Seed: 1, WarmUp: des.Millisecond, Length: length, JoinBelow: -1}
	for range p.Sites {
		cfg.Forwarding = append(cfg.Forwarding, fwd)
	}
	share := []float64{.2, .3, .5}
	add := func(from, to, class int) {
		a := nodes.AggID(len(p.Aggregates))
		p.Aggregates = append(p.Aggregates, nodes.Aggregate{Name: fmt.Sprint("a", a), Class: nodes.ClassID(class), Ends: [2]nodes.SiteID{nodes.SiteID(from), nodes.SiteID(to)}, OneWay: true})
		w := nodes.WayOf(a, nodes.Out)
		cfg.Sources = append(cfg.Sources, packet.Source{Way: w, Source: newPoisson(w, 1, threeSizes, meanSize*800/(load/2*share[class]))})
	}
	for c := range 3 {
		add(0, hops, c)
	}
	for i := range hops {
		for c := range 3 {
			add(i, i+1, c)
		}
	}
	return cfg
}

// start makes every circuit a one-fibre trail and routes along the row.
func start(n *packet.Network, p *nodes.Plant) {
	for i := range p.Circuits {
		c := nodes.CircuitID(i)
		for d := range nodes.Direction(2) {
			x := n.Local(p.Circuits[c].Ends[d])
			x.OpenTrail(nodes.Trail{Circuit: c, Dir: d, Fibres: []nodes.FibreID{nodes.FibreID(i)}})
			x.SetPort(c, nodes.PortUp)
		}
	}
	for s := range p.Sites {
		t := &nodes.Table{Next: make([][]nodes.CircuitID, len(p.Sites))}
		for to := range p.Sites {
			if to > s {
				t.Next[to] = []nodes.CircuitID{nodes.CircuitID(s)}
			} else if to < s {
				t.Next[to] = []nodes.CircuitID{nodes.CircuitID(s - 1)}
			}
		}
		n.Local(nodes.SiteID(s)).Install(t)
	}
	n.Begin()
}

func BenchmarkTandem(b *testing.B) {
	for _, c := range []struct {
		name string
		fwd  packet.Forwarding
	}{{"constant", packet.Forwarding{Constant: 15 * des.Microsecond}}, {"varying", packet.Forwarding{Median: 15 * des.Microsecond, P99: 80 * des.Microsecond}}} {
		b.Run(c.name, func(b *testing.B) {
			var hops uint64
			var spent time.Duration
			for b.Loop() {
				cfg := tandem(0.8, 2963200*des.Microsecond, c.fwd)
				n, err := packet.New(cfg)
				if err != nil {
					b.Fatal(err)
				}
				start(n, cfg.Plant)
				from := time.Now()
				n.Run(des.NewKernel(n, nil), nil)
				spent += time.Since(from)
				t, bad := n.Audit()
				if len(bad) > 0 {
					b.Fatal(bad)
				}
				hops += t.Hops
			}
			b.ReportMetric(float64(spent.Nanoseconds())/float64(hops), "ns/hop")
		})
	}
}
