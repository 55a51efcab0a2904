package packet_test

import (
	"testing"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/conditioner"
	"ferrule/nodes/packet"
)

// Managed queues show no window, keep Little's law and account for each packet.
func TestManagedQueuesInMesh(t *testing.T) {
	for name, c := range map[string][]nodes.Class{
		"early and by wait": {
			{Name: "strict", BufferBytes: 90_000, Drop: nodes.DropCoDel},
			{Name: "heavy", Queue: nodes.QueueWeight, Weight: 60, BufferPackets: 60, Drop: nodes.DropRED},
			{Name: "light", Queue: nodes.QueueWeight, Weight: 40, BufferTime: 80 * des.Millisecond, Drop: nodes.DropFQCoDel},
		},
		"fair": {
			{Name: "strict", BufferBytes: 90_000, Drop: nodes.DropRED},
			{Name: "heavy", Queue: nodes.QueueFair, Weight: 60, BufferPackets: 12},
			{Name: "light", Queue: nodes.QueueFair, Weight: 40, BufferTime: 80 * des.Millisecond, Drop: nodes.DropCoDel},
		},
	} {
		run := func(join des.Time, exec des.Executor, set func(*des.Kernel, *packet.Network)) (string, packet.Totals) {
			cfg, make := mesh(join)
			cfg.Plant.Classes = c
			n := make()
			k := des.NewKernel(n, exec)
			if set != nil {
				set(k, n)
			}
			n.Run(k, nil)
			totals, bad := n.Audit()
			if len(bad) > 0 {
				t.Errorf("%s: audit: %q", name, bad)
			}
			return dump(n), totals
		}
		want, totals := run(0, nil, nil)
		if totals.Lost[packet.LostAQM] == 0 {
			t.Errorf("%s: nothing was lost to active queue management", name)
		}
		if got, _ := run(-1, crew{}, seventh); got != want {
			t.Errorf("%s: a seventh: %s", name, differ(want, got))
		}
		if got, _ := run(des.Second, nil, uneven(3)); got != want {
			t.Errorf("%s: random: %s", name, differ(want, got))
		}
	}
}

// conditioned sends 1000 packets of 1000 B, 100 us apart (80 Mb/s), through a
// conditioner.
func conditioned(m *conditioner.Meter, sh *conditioner.Shaper) func() *packet.Network {
	p := plantOf(2, [3]des.Time{0, 1, des.Millisecond})
	way := between(p, 0, 0, 1)
	return func() *packet.Network {
		return net(packet.Config{
			Plant: p, Length: 200 * des.Millisecond,
			Sources: []packet.Source{{Way: way, Source: &beat{way: way, gap: 100 * des.Microsecond, size: 1000, count: 1000}, Meter: m, Shaper: sh}},
		}, 0)
	}
}

// Of 80 Mb/s for 100 ms, a meter of 40 Mb/s with bursts of 5000 B and 5000 B
// lets pass 99.9 ms x 40 Mb/s = 499.5 packets and the 10 of the bursts.
func TestPolicerDiscards(t *testing.T) {
	n := conditioned(conditioner.NewSingleRate(40*nodes.Mbps, 5000, 5000, false), nil)()
	totals := finish(t, n)
	if totals.Delivered != 509 || totals.Lost[packet.LostPoliced] != 491 {
		t.Errorf("%d delivered, %d policed; want 509 and 491", totals.Delivered, totals.Lost[packet.LostPoliced])
	}
}

// A shaper of 40 Mb/s makes the packets leave 200 us apart: packet n, counted
// from 0, is born at n x 100 us and leaves at n x 200 us, so the last one waits
// 99.9 ms; it holds none back for longer than it may.
func TestShaperDelays(t *testing.T) {
	make := conditioned(nil, conditioner.NewShaper(40*nodes.Mbps, 1000, des.Second))
	n := make()
	totals := finish(t, n)
	const base = des.Millisecond + 8208*des.Nanosecond // light, and 1026 B at 1 Gb/s
	if got, least, most := exact(n, 0); got != 1000 || least != base || most != base+99_900*des.Microsecond {
		t.Errorf("%d delivered after %v to %v; want 1000 after %v to %v", got, least, most, des.Time(base), base+99_900*des.Microsecond)
	}
	if totals.Inside != 0 {
		t.Errorf("%d inside", totals.Inside)
	}
	want := dump(n)
	for name, set := range map[string]func(*des.Kernel, *packet.Network){"a seventh": seventh, "random": uneven(2)} {
		n := make()
		k := des.NewKernel(n, nil)
		set(k, n)
		n.Run(k, nil)
		if got := dump(n); got != want {
			t.Errorf("%s: %s", name, differ(want, got))
		}
	}
	// The copy of a network half-way goes on as the network does.
	a := make()
	des.NewKernel(a, nil).Advance(70*des.Millisecond, nil)
	b := a.Clone()
	finish(t, a)
	finish(t, b)
	if dump(a) != dump(b) {
		t.Errorf("clone: %s", differ(dump(a), dump(b)))
	}
}

// One that may hold packets for 10 ms refuses those that would wait longer:
// what it lets pass in the 99.9 ms and the 10 ms after them goes out at 40 Mb/s.
func TestShaperRefuses(t *testing.T) {
	totals := finish(t, conditioned(nil, conditioner.NewShaper(40*nodes.Mbps, 1000, 10*des.Millisecond))())
	if d := totals.Delivered; d < 549 || d > 551 || totals.Lost[packet.LostPoliced] != 1000-d {
		t.Errorf("%d delivered, %d policed; want 550 or so", d, totals.Lost[packet.LostPoliced])
	}
}

// A flow that keeps to a token bucket of 15,000 B and 50 Mb/s and has half of
// three lines of 100 Mb/s by WFQ is never late: (sigma + (K-1) L)/g plus the
// sum of Lmax/r, light apart (A. K. Parekh and R. G. Gallager, IEEE/ACM
// Transactions on Networking 2(2), 1994; statement from memory). The other
// class overloads every line.
func TestFairQueueingKeepsItsBound(t *testing.T) {
	const hops, size, burst = 3, 1000, 15
	p := plantOf(hops+1, [3]des.Time{0, 1, des.Millisecond}, [3]des.Time{1, 2, des.Millisecond}, [3]des.Time{2, 3, des.Millisecond})
	p.Classes = []nodes.Class{
		{Name: "kept", Queue: nodes.QueueFair, Weight: 50, BufferBytes: 1 << 20},
		{Name: "cross", Queue: nodes.QueueFair, Weight: 50, BufferBytes: 60_000},
	}
	cfg := packet.Config{Plant: p, Length: 300 * des.Millisecond}
	for i := range p.Circuits {
		p.Circuits[i].Rate, p.Circuits[i].Overhead = 100*nodes.Mbps, 0
		w := between(p, 1, nodes.SiteID(i), nodes.SiteID(i+1))
		cfg.Sources = append(cfg.Sources, packet.Source{Way: w, Source: &beat{way: w, gap: 100 * des.Microsecond, size: 1500, count: 2900}})
	}
	kept := between(p, 0, 0, hops)
	shaper := conditioner.NewShaper(50*nodes.Mbps, (burst-1)*size, des.Second) // the first packet goes beside it
	cfg.Sources = append(cfg.Sources, packet.Source{Way: kept, Source: &gust{beat{way: kept, size: size}, shaper}})
	n := net(cfg, 0)
	finish(t, n)
	count, _, most := exact(n, kept)
	bound := (50 * nodes.Mbps).TxTime((burst+hops-1)*size) + hops*(100*nodes.Mbps).TxTime(1500) + hops*des.Millisecond
	if count < 1500 || most > bound || most < bound/2 {
		t.Errorf("%d delivered, the last after %v; want none after %v, nor all long before", count, most, bound)
	}
}

// gust sends as much as a token bucket allows: the burst at once, then at the
// rate.
type gust struct {
	beat
	s *conditioner.Shaper
}

func (g *gust) Next() des.Time { return g.at }

func (g *gust) Emit(end des.Time, buf []nodes.Packet) []nodes.Packet {
	for g.at < end {
		buf = append(buf, nodes.Packet{Born: g.at, Due: g.at, Seq: g.seq, Way: g.way, Size: g.size, TTL: nodes.InitialTTL})
		g.seq++
		g.at, _ = g.s.Release(g.at, nodes.Bytes(g.size))
	}
	return buf
}

func (g *gust) Clone() nodes.Source { return &gust{g.beat, g.s.Clone()} }
