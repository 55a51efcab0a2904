package packet_test

import (
	"math"
	"testing"

	dice "ferrule/des/random"

	"ferrule/des"
	"ferrule/des/theory"
	"ferrule/nodes"
	"ferrule/nodes/packet"
)

// flow is a Poisson stream of packets of one size.
type flow struct {
	size    uint16
	rate    float64 // packets a second
	service float64 // s
}

// oneQueue sends the flows, one class each, over a line and reports the mean
// wait of each in seconds.
func oneQueue(t *testing.T, rate nodes.Rate, kind nodes.Queueing, length des.Time, flows []flow) []float64 {
	t.Helper()
	p := plantOf(2, [3]des.Time{0, 1, des.Millisecond})
	p.Circuits[0].Rate, p.Circuits[0].Overhead = rate, 0
	p.Classes = nil
	cfg := packet.Config{Plant: p, Length: length, WarmUp: 100 * des.Millisecond}
	for i := range flows {
		f := &flows[i]
		f.service = rate.TxTime(nodes.Bytes(f.size)).Seconds()
		p.Classes = append(p.Classes, nodes.Class{Name: "k", Queue: kind, BufferBytes: 1 << 40})
		w := between(p, i, 0, 1)
		cfg.Sources = append(cfg.Sources, packet.Source{Way: w, Source: newPoisson(w, 1, dice.NewAlias([]uint16{f.size}, []float64{1}), 1e12/f.rate)})
	}
	n := net(cfg, 0)
	finish(t, n)
	waits := make([]float64, len(flows))
	for i := range flows {
		c := n.Meters()[2*i].Cells[1]
		waits[i] = float64(c.Queueing) / float64(c.Exact.N) * 1e-9
	}
	return waits
}

// Non-preemptive priority, 100 Mbit/s, constant sizes, loads 0.08, 0.32, 0.30:
// W1, W2, W3 = 34.17, 56.96, 174.67 us, and 104.8 us under FIFO. Computed from
// the formula of A. Cobham, "Priority assignment in waiting line problems", J.
// Oper. Res. Soc. America 2 (1954); tolerances are those of 10^6 packets.
func TestPriorityWaits(t *testing.T) {
	const length = 88 * des.Second // 11,500 packets a second
	flows := []flow{{size: 200, rate: 5000}, {size: 1000, rate: 4000}, {size: 1500, rate: 2500}}
	waits := oneQueue(t, 100*nodes.Mbps, nodes.QueueStrict, length, flows)
	var classes []theory.PriorityClass
	for _, f := range flows {
		classes = append(classes, theory.PriorityClass{Lambda: f.rate, S1: f.service, S2: f.service * f.service})
	}
	for i, want := range theory.PriorityWaits(classes) {
		if known := []float64{34.173913e-6, 56.956522e-6, 174.666667e-6}[i]; math.Abs(want-known) > 1e-6*known {
			t.Fatalf("class %d: the formula gives %.9g s, want %.9g s", i, want, known)
		}
		if tolerance := []float64{.01, .013, .028}[i]; math.Abs(waits[i]-want) > tolerance*want {
			t.Errorf("class %d waits %.5g s, theory %.5g s within %.1f %%", i, waits[i], want, 100*tolerance)
		}
	}
	// Conservation: the work that waits does not depend on the order.
	fifo := oneQueue(t, 100*nodes.Mbps, nodes.QueueFIFO, length, flows)
	for i, w := range fifo {
		if math.Abs(w-104.8e-6) > .03*104.8e-6 {
			t.Errorf("FIFO, class %d waits %.5g s, theory 104.8 us within 3 %%", i, w)
		}
	}
}

// The mean wait in M/D/1 is rho D/(2(1-rho)): 0.5 D and 2 D. A. K. Erlang,
// "The theory of probabilities and telephone conversations" (1909); tolerances
// are those of 10^6 packets.
func TestConstantServiceWait(t *testing.T) {
	for _, c := range []struct{ rho, want, tolerance float64 }{{.5, .5, .012}, {.8, 2, .025}} {
		const d = 100e-6 // 1250 bytes at 100 Mbit/s
		waits := oneQueue(t, 100*nodes.Mbps, nodes.QueueStrict, des.Time(100/c.rho)*des.Second, []flow{{size: 1250, rate: c.rho / d}})
		if got := waits[0] / d; math.Abs(got-c.want) > c.tolerance*c.want {
			t.Errorf("load %v: mean wait %.4f D, theory %.4f D within %.1f %%", c.rho, got, c.want, 100*c.tolerance)
		}
	}
}

// A router is asked for a median and a 99th percentile and gives them at any
// packet rate; packets keep their order. The path in time has one independent
// draw about every two cells of 16 pieces of 32/7 of the percentile asked; the
// tolerance is 3.3 standard errors of a quantile of so many draws.
func TestForwardingLatencyAsked(t *testing.T) {
	const median, p99 = 20 * des.Microsecond, 90 * des.Microsecond
	for _, c := range []struct {
		rate   float64
		length des.Time
	}{{1e3, 60 * des.Second}, {1e5, 15 * des.Second}, {1e6, 4 * des.Second}} {
		p := plantOf(2, [3]des.Time{0, 1, des.Millisecond})
		p.Circuits[0].Rate, p.Circuits[0].Overhead = 100*nodes.Gbps, 0
		w := between(p, 0, 0, 1)
		n := net(packet.Config{
			Plant: p, Length: c.length, Forwarding: []packet.Forwarding{{}, {Median: median, P99: p99}}, Seed: 3,
			Sources: []packet.Source{{Way: w, Source: &beat{way: w, gap: des.Time(1e12 / c.rate), size: 64, count: 1 << 31}}},
		}, 0)
		finish(t, n)
		cell := n.Meters()[w].Cells[1]
		if cell.Reordered != 0 {
			t.Errorf("%g packets/s: %d reordered", c.rate, cell.Reordered)
		}
		draws := float64(c.length) / float64(p99*32/7*16) / 2
		sigma := math.Log(float64(p99)/float64(median)) / 2.3263
		for _, q := range []struct {
			num, den uint64
			want     des.Time
			density  float64 // of the standard normal at the quantile
		}{{50, 100, median, .3989}, {99, 100, p99, .02665}} {
			share := float64(q.num) / float64(q.den)
			tolerance := 3.3 * sigma * math.Sqrt(share*(1-share)/draws) / q.density
			got, ok := cell.Delay.Quantile(q.num, q.den)
			if off := math.Log(got * 1000 / float64(q.want)); !ok || math.Abs(off) > tolerance || tolerance > .5 {
				t.Errorf("%g packets/s: quantile %v is %v ns, asked %v, within a factor exp(%.2f)", c.rate, share, got, q.want, tolerance)
			}
			inside, ok := n.Latencies(1).Quantile(q.num, q.den)
			if off := math.Log(inside * 1000 / float64(q.want)); !ok || math.Abs(off) > tolerance {
				t.Errorf("%g packets/s: the router's own samples put quantile %v at %v ns, asked %v", c.rate, share, inside, q.want)
			}
		}
	}
}
