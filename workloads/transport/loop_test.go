package transport_test

import (
	"fmt"
	"math/rand/v2"
	"runtime"
	"strings"
	"testing"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
	"ferrule/nodes/packet"
	"ferrule/workloads"
	"ferrule/workloads/transport"
)

// busy is many short transfers and some endless ones over a line too small for
// them, with losses and marks, both ways.
func busy(t testing.TB) line {
	t.Helper()
	size, err := random.Spec{Kind: random.Pareto, Mean: 60e3, Shape: 1.3, AtMost: 20e6}.Law()
	if err != nil {
		t.Fatal(err)
	}
	l := line{rate: 20 * nodes.Mbps, delay: 4 * des.Millisecond, length: 6 * des.Second, class: nodes.Class{BufferTime: 30 * des.Millisecond, Queue: nodes.QueueFIFO, Drop: nodes.DropRED, ECN: true}}
	for i, a := range []transport.Algorithm{transport.Reno, transport.NewReno, transport.Cubic} {
		l.pairs = append(l.pairs, transport.Config{Name: fmt.Sprint("x", i), Seed: 4, PerSecond: 15, Size: size, Standing: 2 - i, Algorithm: a, ECN: i == 1})
	}
	return l
}

// told writes down what a network of transports can tell.
func told(n *packet.Network) string {
	var b strings.Builder
	totals, bad := n.Audit()
	fmt.Fprintf(&b, "now %v totals %+v audit %q offered %v\n", n.Now(), totals, bad, n.Offered())
	for w := range n.Meters() {
		for i, c := range n.Meters()[w].Cells {
			if c != nil {
				fmt.Fprintf(&b, "way %d stretch %d %+v queueing %d bytes %d reordered %d jitter %x\n", w, i, c.Exact, c.Queueing, c.Bytes, c.Reordered, c.Jitter)
			}
		}
		for i, c := range n.Flows(uint16(w)) {
			if c != nil {
				fmt.Fprintf(&b, "flows of way %d stretch %d %+v began %d good %d resent %d time-outs %d", w, i, c.Exact, c.Began, c.Good, c.Resent, c.Timeouts)
				c.Times.Each(func(low, high, count uint64) { fmt.Fprintf(&b, " %d:%d", low, count) })
				fmt.Fprintln(&b)
			}
		}
	}
	n.Losses(func(site nodes.SiteID, l *packet.Loss) { fmt.Fprintf(&b, "loss at %d: %+v\n", site, *l) })
	for _, r := range n.PortReports() {
		fmt.Fprintf(&b, "port %+v\n", r)
	}
	n.Inside(func(p *nodes.Packet) { fmt.Fprintf(&b, "inside %+v\n", *p) })
	return b.String()
}

// How a run is cut into windows never shows in what a closed loop does, nor
// does it when the run is copied half-way.
func TestWindowsDoNotShow(t *testing.T) {
	l := busy(t)
	n, _ := l.build(t)
	run(t, n)
	want := told(n)
	totals, _ := n.Audit()
	f := flows(n, 1)
	if totals.Lost[packet.LostAQM] == 0 || f.Resent == 0 || f.Exact.N < 50 {
		t.Fatalf("%d lost to queue management, %d sent again, %d complete: the loop is not tried", totals.Lost[packet.LostAQM], f.Resent, f.Exact.N)
	}
	r := rand.New(rand.NewPCG(5, 6))
	for name, set := range map[string]func(k *des.Kernel){
		"a seventh": func(k *des.Kernel) { k.Window = n.Lookahead() / 7 },
		"random": func(k *des.Kernel) {
			k.WindowFunc = func() des.Time { return des.Time(r.Int64N(int64(n.Lookahead()))) >> r.IntN(3) }
		},
	} {
		m, _ := l.build(t)
		k := des.NewKernel(m, nil)
		set(k)
		m.Run(k, nil)
		if got := told(m); got != want {
			t.Errorf("windows %s show", name)
		}
	}
	a, _ := l.build(t)
	des.NewKernel(a, nil).Advance(2*des.Second, nil)
	b := a.Clone()
	run(t, a)
	run(t, b)
	if told(a) != want || told(b) != want {
		t.Errorf("a copy goes its own way")
	}
}

// Transfers are asked for at the rate given, all over the run, whatever the
// network does with them: those of a faster line are the same.
func TestDemandIsTheSame(t *testing.T) {
	l := busy(t)
	slow, _ := l.build(t)
	run(t, slow)
	l.rate *= 10
	fast, _ := l.build(t)
	run(t, fast)
	for a := range nodes.AggID(3) {
		x, y := flows(slow, a), flows(fast, a)
		if x.Began != y.Began || y.Exact.N < x.Exact.N || x.Began < 60 || x.Began > 130 { // 90 +- 4 sigma, 0 to 2 endless
			t.Errorf("aggregate %d: %d and %d asked for, %d and %d complete", a, x.Began, y.Began, x.Exact.N, y.Exact.N)
		}
	}
}

// A transfer is complete also when handshakes, data, acknowledgements are lost.
func TestEverythingMayBeLost(t *testing.T) {
	for _, a := range []transport.Algorithm{transport.Reno, transport.NewReno, transport.Cubic} {
		r := rand.New(rand.NewPCG(9, uint64(a)))
		l := line{rate: 100 * nodes.Mbps, delay: 5 * des.Millisecond, length: 2 * des.Hour, class: nodes.Class{BufferPackets: 12, Queue: nodes.QueueFIFO}}
		l.pairs = []transport.Config{{Name: "x", PerSecond: 20, Most: 300, Size: fixed(t, 50_000), Algorithm: a}}
		l.lossy = func(*nodes.Packet) bool { return r.Float64() < 0.2 }
		l.deaf = func(*nodes.Packet) bool { return r.Float64() < 0.2 }
		n, _ := l.build(t)
		run(t, n)
		if f := flows(n, 0); f.Exact.N != 300 || f.Good != 300*50_000 || f.Timeouts == 0 {
			t.Errorf("algorithm %d: %d of 300 complete, %d B arrived, %d time-outs", a, f.Exact.N, f.Good, f.Timeouts)
		}
	}
}

// Once buffers and pools have grown a closed loop allocates nothing.
func TestLoopAllocatesNothing(t *testing.T) {
	l := line{rate: 200 * nodes.Mbps, delay: 5 * des.Millisecond, length: 30 * des.Second, class: nodes.Class{BufferTime: 20 * des.Millisecond, Queue: nodes.QueueFIFO, Drop: nodes.DropCoDel}}
	l.pairs = []transport.Config{
		{Name: "x", Standing: 20, Algorithm: transport.Cubic},
		{Name: "y", PerSecond: 100, Size: fixed(t, 30_000), Algorithm: transport.NewReno},
	}
	n, _ := l.build(t)
	k := des.NewKernel(n, nil)
	k.Advance(14*des.Second, nil)
	var a, b runtime.MemStats
	before, _ := n.Audit()
	runtime.ReadMemStats(&a)
	k.Advance(20*des.Second, nil)
	runtime.ReadMemStats(&b)
	after, bad := n.Audit()
	hops := after.Hops - before.Hops
	if got := float64(b.Mallocs-a.Mallocs) / float64(hops); len(bad) > 0 || hops < 100_000 || got > 2e-3 {
		t.Errorf("%g allocations a hop over %d hops; audit %q", got, hops, bad)
	}
}

// State is bounded by the flows that there are: over a line that many endless
// transfers crowd, memory does not go on growing.
func TestStateIsBounded(t *testing.T) {
	l := line{rate: 200 * nodes.Mbps, delay: 5 * des.Millisecond, length: des.Hour, class: nodes.Class{BufferTime: 20 * des.Millisecond, Queue: nodes.QueueFIFO}}
	l.pairs = append(l.pairs, transport.Config{Name: "x", Standing: 2000, Algorithm: transport.Cubic})
	n, _ := l.build(t)
	k := des.NewKernel(n, nil)
	var used [2]uint64
	for i, s := range []des.Time{20, 80} {
		k.Advance(s*des.Second, nil)
		var m runtime.MemStats
		runtime.GC()
		runtime.ReadMemStats(&m)
		used[i] = m.HeapAlloc
	}
	runtime.KeepAlive(n)
	t.Logf("%d B a flow after 20 s, %d B after 80 s", used[0]/2000, used[1]/2000)
	if used[1] > used[0]*3/2 || used[1]/2000 > 6000 {
		t.Errorf("%d B a flow after 20 s, %d B after 80 s", used[0]/2000, used[1]/2000)
	}
}

// BenchmarkHop is a packet-hop of a closed loop: endless transfers that share a
// line of 10 Gb/s, beside an open loop of as many packets a second over it.
func BenchmarkHop(b *testing.B) {
	for _, flows := range []int{0, 10, 1000, 50_000, 100_000} {
		b.Run(fmt.Sprint(flows), func(b *testing.B) {
			l := line{rate: 10 * nodes.Gbps, delay: 5 * des.Millisecond, length: des.Hour, class: nodes.Class{BufferTime: 20 * des.Millisecond, Queue: nodes.QueueFIFO}}
			for i := range max(1, flows/50_000) {
				l.pairs = append(l.pairs, transport.Config{Name: fmt.Sprint("x", i), Standing: min(flows, 50_000), Algorithm: transport.Cubic})
			}
			var n *packet.Network
			if flows == 0 {
				n = l.open(b)
			} else {
				n, _ = l.build(b)
			}
			k := des.NewKernel(n, nil)
			at := des.Second / 2
			k.Advance(at, nil)
			before, _ := n.Audit()
			for b.Loop() {
				at += 10 * des.Millisecond
				k.Advance(at, nil)
			}
			after, _ := n.Audit()
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(after.Hops-before.Hops), "ns/hop")
			var m runtime.MemStats
			runtime.GC()
			runtime.ReadMemStats(&m)
			b.ReportMetric(float64(m.HeapAlloc)/(1<<20), "MiB")
			runtime.KeepAlive(n)
		})
	}
}

// open is the line with Poisson packets of 1500 B that load it to 0.9 one way,
// and half as many of 40 B the other way.
func (l line) open(b *testing.B) *packet.Network {
	b.Helper()
	cfg := packet.Config{Plant: l.plant(), Length: l.length, JoinBelow: -1}
	for d, size := range []int{1500, 40} {
		way := nodes.WayOf(0, nodes.Direction(d))
		pps := 0.9 * float64(l.rate) / 8 / 1500 / float64(1+d)
		s, err := workloads.NewStream(workloads.StreamConfig{
			Common: workloads.Common{Name: fmt.Sprint(way), Way: way, Load: nodes.Rate(pps * 8 * float64(size))},
			Gaps:   workloads.Poisson, Size: random.Spec{Kind: random.Constant, Mean: float64(size)}, Flows: 1000,
		})
		if err != nil {
			b.Fatal(err)
		}
		cfg.Sources = append(cfg.Sources, packet.Source{Way: way, Source: s})
	}
	n, err := packet.New(cfg)
	if err != nil {
		b.Fatal(err)
	}
	start(n)
	return n
}
