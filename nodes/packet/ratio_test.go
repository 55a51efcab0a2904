package packet_test

import (
	"slices"
	"testing"
	"time"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/packet"
)

// whole runs the real network on the tandem.
func whole(tb testing.TB, load float64, length des.Time, f packet.Forwarding) *packet.Network {
	cfg := tandem(load, length, f)
	n, err := packet.New(cfg)
	if err != nil {
		tb.Fatal(err)
	}
	start(n, cfg.Plant)
	n.Run(des.NewKernel(n, nil), nil)
	return n
}

// The two minimal engines and the network agree to the picosecond on every
// transmission, drop and delay, in underload and in overload.
func TestEnginesAgree(t *testing.T) {
	for _, load := range []float64{0.8, 1.15} {
		const length = 60 * des.Millisecond
		a, b := slots(load, int64(length)), streams(load, int64(length))
		if *a != *b {
			t.Errorf("load %v: events give %+v\nstreams give %+v", load, *a, *b)
		}
		n := whole(t, load, length, packet.Forwarding{})
		var c tally
		totals, bad := n.Audit()
		if len(bad) > 0 {
			t.Error(bad)
		}
		n.Losses(func(_ nodes.SiteID, l *packet.Loss) {
			for _, k := range l.Count {
				c.lost[l.Way/2] += k[packet.LostQueue]
			}
		})
		for f := range c.count {
			for _, x := range n.Meters()[2*f].Cells {
				if x != nil {
					c.count[f] += x.Exact.N
					c.delay[f] += x.Exact.Sum.Lo
				}
			}
		}
		for i := range c.sent {
			c.sent[i] = n.Local(nodes.SiteID(i)).Counters(nodes.CircuitID(i)).SentPackets
		}
		if c != *a || totals.Hops != a.hops() {
			t.Errorf("load %v: the network gives %+v\nthe minimal engines %+v", load, c, *a)
		}
		if lost := totals.Lost[packet.LostQueue]; (lost > 0) != (load > 1) || a.hops() < 400_000 {
			t.Errorf("load %v: %d lost of %d hops", load, lost, a.hops())
		}
	}
}

// BenchmarkRatio runs the network and the minimal engines in turn on one
// workload and reports medians over the rounds of the ratios within a round:
// what meters, tables, latency and books cost. The target is 2.0 times the
// slot engine.
func BenchmarkRatio(b *testing.B) {
	const load, length, rounds = 0.8, 300 * des.Millisecond, 7
	constant := packet.Forwarding{Constant: 15 * des.Microsecond}
	varying := packet.Forwarding{Median: 15 * des.Microsecond, P99: 80 * des.Microsecond}
	var ns, toSlot, toStream, variesToSlot []float64
	timed := func(f func()) float64 {
		from := time.Now()
		f()
		return float64(time.Since(from).Nanoseconds())
	}
	for b.Loop() {
		for range rounds {
			var hops uint64
			slot := timed(func() { hops = slots(load, int64(length)).hops() })
			stream := timed(func() { streams(load, int64(length)) })
			real := timed(func() { whole(b, load, length, constant) })
			varies := timed(func() { whole(b, load, length, varying) })
			ns = append(ns, real/float64(hops))
			toSlot = append(toSlot, real/slot)
			toStream = append(toStream, real/stream)
			variesToSlot = append(variesToSlot, varies/slot)
		}
	}
	median := func(v []float64) float64 {
		slices.Sort(v)
		return v[len(v)/2]
	}
	b.ReportMetric(median(ns), "ns/hop")
	b.ReportMetric(median(toSlot), "real/slot")
	b.ReportMetric(median(toStream), "real/stream")
	b.ReportMetric(median(variesToSlot), "varying/slot")
}
