package study_test

import (
	"fmt"
	"runtime"
	"sync/atomic"
	"testing"
	"time"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
	"ferrule/nodes/packet"
	"ferrule/scenarios"
	"ferrule/scenarios/build"
	"ferrule/scenarios/library"
	"ferrule/scenarios/study"
)

var _ des.Executor = (*study.Executor)(nil)

// Every call is made once and has returned when Each returns, for any number
// of cores and calls, from crowds of calls to one now and then.
func TestExecutorDoesEachOnce(t *testing.T) {
	for _, cores := range []int{0, 1, 2, 3, 8} {
		e := study.NewExecutor(cores)
		var at atomic.Int64
		for round := range 3000 {
			n := round * 7 % 23
			done := make([]int32, n)
			e.Each(n, func(i int) {
				at.Add(1)
				done[i]++ // no lock: a race if made twice, or not over at the end
				at.Add(-1)
			})
			if at.Load() != 0 {
				t.Fatalf("%d cores, round %d: %d calls go on after Each", cores, round, at.Load())
			}
			for i, d := range done {
				if d != 1 {
					t.Fatalf("%d cores, round %d: call %d made %d times", cores, round, i, d)
				}
			}
			if round%1000 == 999 {
				time.Sleep(3 * time.Millisecond) // let the workers fall asleep
			}
		}
		e.Close()
		count := 0
		e.Each(5, func(int) { count++ })
		if count != 5 {
			t.Errorf("%d cores: %d of 5 calls made after Close", cores, count)
		}
	}
}

// Workers help: two calls that wait for each other both come to an end.
func TestExecutorRunsAtOnce(t *testing.T) {
	e := study.NewExecutor(2)
	defer e.Close()
	for range 100 {
		a, b := make(chan bool), make(chan bool)
		e.Each(2, func(i int) {
			if i == 0 {
				close(a)
				<-b
			} else {
				close(b)
				<-a
			}
		})
	}
}

func TestExecutorEndsItsWorkers(t *testing.T) {
	before := runtime.NumGoroutine()
	for range 20 {
		e := study.NewExecutor(4)
		e.Each(10, func(int) {})
		e.Close()
	}
	for range 1000 {
		if runtime.NumGoroutine() <= before {
			return
		}
		runtime.Gosched()
		time.Sleep(time.Millisecond)
	}
	t.Errorf("%d goroutines, %d before", runtime.NumGoroutine(), before)
}

func TestExecutorAllocatesNothing(t *testing.T) {
	e := study.NewExecutor(2)
	defer e.Close()
	var sum atomic.Int64
	do := func(i int) { sum.Add(int64(i)) }
	if n := testing.AllocsPerRun(500, func() { e.Each(8, do) }); n > 0 {
		t.Errorf("%v allocations for 8 calls, want 0", n)
	}
}

// gust is a Poisson source.
type gust struct {
	r     random.Stream
	sizes *random.Alias
	mean  float64
	at    des.Time
	way   uint16
	seq   uint32
}

func (g *gust) Next() des.Time { return g.at }

func (g *gust) Emit(end des.Time, buf []nodes.Packet) []nodes.Packet {
	for g.at < end {
		buf = append(buf, nodes.Packet{Born: g.at, Due: g.at, Seq: g.seq, Way: g.way, Size: g.sizes.Pick(g.r.Uint64()), TTL: nodes.InitialTTL})
		g.seq++
		g.at += des.Time(g.r.Exp() * g.mean)
	}
	return buf
}

func (g *gust) Scale(des.Time, float64) {}

func (g *gust) Clone() nodes.Source { c := *g; return &c }

// bothWays is six routers in a row, 10 Gb/s, 1 ms apart, with through and cross
// traffic in three classes either way at load 0.8, so that work is even.
func bothWays(tb testing.TB, length des.Time, seed uint64) *packet.Network {
	const sites = 6
	sizes := random.NewAlias([]uint16{64, 576, 1500}, []float64{4, 2, 4})
	p := &nodes.Plant{}
	cfg := packet.Config{Plant: p, Seed: seed, WarmUp: des.Millisecond, Length: length}
	for i := range sites {
		p.Sites = append(p.Sites, nodes.Site{Name: fmt.Sprint("r", i)})
		cfg.Forwarding = append(cfg.Forwarding, packet.Forwarding{Constant: 15 * des.Microsecond})
		if i > 0 {
			ends := [2]nodes.SiteID{nodes.SiteID(i - 1), nodes.SiteID(i)}
			p.Fibres = append(p.Fibres, nodes.Fibre{Name: fmt.Sprint("f", i), Ends: ends, Delay: des.Millisecond})
			p.Circuits = append(p.Circuits, nodes.Circuit{Name: fmt.Sprint("c", i), Ends: ends, Rate: 10 * nodes.Gbps})
		}
	}
	share := []float64{.2, .3, .5}
	for class := range 3 {
		p.Classes = append(p.Classes, nodes.Class{Name: fmt.Sprint("k", class), BufferBytes: 100_000})
		for i := range sites {
			a := nodes.AggID(len(p.Aggregates))
			ends := [2]nodes.SiteID{nodes.SiteID(i), nodes.SiteID(i + 1)}
			if i == sites-1 {
				ends = [2]nodes.SiteID{0, sites - 1}
			}
			p.Aggregates = append(p.Aggregates, nodes.Aggregate{Name: fmt.Sprint("a", a), Class: nodes.ClassID(class), Ends: ends})
			for d := range nodes.Direction(2) {
				w := nodes.WayOf(a, d)
				g := &gust{r: random.NewStream(seed, fmt.Sprint(w)), sizes: &sizes, mean: 740.8 * 800 / (.4 * share[class]), way: w}
				cfg.Sources = append(cfg.Sources, packet.Source{Way: w, Source: g})
			}
		}
	}
	n, err := packet.New(cfg)
	if err != nil {
		tb.Fatal(err)
	}
	for i := range p.Circuits {
		c := nodes.CircuitID(i)
		for d := range nodes.Direction(2) {
			x := n.Local(p.Circuits[i].Ends[d])
			x.OpenTrail(nodes.Trail{Circuit: c, Dir: d, Fibres: []nodes.FibreID{nodes.FibreID(i)}})
			x.SetPort(c, nodes.PortUp)
		}
	}
	for s := range p.Sites {
		t := &nodes.Table{Next: make([][]nodes.CircuitID, sites)}
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
	return n
}

// One run on two cores gives what one core gives.
func TestExecutorDoesNotShow(t *testing.T) {
	tell := func(exec des.Executor) string {
		n := bothWays(t, 20*des.Millisecond, 1)
		n.Run(des.NewKernel(n, exec), nil)
		totals, bad := n.Audit()
		out := fmt.Sprint(totals, bad, n.PortReports())
		for w := range n.Meters() {
			for _, c := range n.Meters()[w].Cells {
				if c != nil {
					out += fmt.Sprint(c.Exact, c.Queueing, c.Jitter)
				}
			}
		}
		return out
	}
	want := tell(nil)
	for _, cores := range []int{2, 3, 7} {
		e := study.NewExecutor(cores)
		if got := tell(e); got != want {
			t.Errorf("%d cores give another result than one", cores)
		}
		e.Close()
	}
}

// BenchmarkTwoCores times one run on two cores against two independent runs at
// once, which is what the machine can give. Quotient is the rate of the one by
// the rate of the two; the target is 0.8.
func BenchmarkTwoCores(b *testing.B) {
	const length = 150 * des.Millisecond
	twoCores(b, func() *packet.Network { return bothWays(b, length, 1) })
}

// The same with the country of the library: 19 towns, 1,710 aggregates.
func BenchmarkTwoCoresCountry(b *testing.B) {
	data, beside, err := library.Open("nineteen-towns")
	if err != nil {
		b.Fatal(err)
	}
	sc, err := scenarios.Load("nineteen-towns", data, beside, []string{"run.length=400ms", "run.warm-up=100ms"})
	if err != nil {
		b.Fatal(err)
	}
	plan, err := sc.Plan(scenarios.AsIs)
	if err != nil {
		b.Fatal(err)
	}
	twoCores(b, func() *packet.Network {
		m, err := build.New(sc, plan, 1)
		if err != nil {
			b.Fatal(err)
		}
		return m.Network
	})
}

// twoCores reports the median over rounds of what one run on two cores reaches
// of the rate of two independent runs at once, and of its speed-up over one
// core.
func twoCores(b *testing.B, network func() *packet.Network) {
	const rounds = 7
	var quotients, speedups []float64
	timed := func(f func()) float64 {
		from := time.Now()
		f()
		return time.Since(from).Seconds()
	}
	run := func(n *packet.Network, exec des.Executor) { n.Run(des.NewKernel(n, exec), nil) }
	for b.Loop() {
		for range rounds {
			a, c, d, one := network(), network(), network(), network()
			e := study.NewExecutor(2)
			both := timed(func() {
				done := make(chan bool)
				go func() { run(a, nil); close(done) }()
				run(c, nil)
				<-done
			})
			two := timed(func() { run(d, e) })
			e.Close()
			alone := timed(func() { run(one, nil) })
			quotients = append(quotients, both/2/two)
			speedups = append(speedups, alone/two)
		}
	}
	b.ReportMetric(median(quotients), "quotient")
	b.ReportMetric(median(speedups), "speed-up")
}

func median(v []float64) float64 {
	sorted := append([]float64(nil), v...)
	for i := range sorted {
		for j := i; j > 0 && sorted[j] < sorted[j-1]; j-- {
			sorted[j], sorted[j-1] = sorted[j-1], sorted[j]
		}
	}
	return sorted[len(sorted)/2]
}
