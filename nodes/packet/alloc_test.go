package packet_test

import (
	"runtime"
	"testing"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/packet"
)

func memory() (m runtime.MemStats) {
	runtime.GC()
	runtime.ReadMemStats(&m)
	return m
}

// In a steady state a packet's way through a router allocates nothing. What is
// left is rings that double when a queue or a fibre holds more than ever.
func TestPacketHopAllocatesNothing(t *testing.T) {
	for _, f := range []packet.Forwarding{{Constant: 15 * des.Microsecond}, {Median: 15 * des.Microsecond, P99: 80 * des.Microsecond}} {
		cfg := tandem(0.8, des.Second, f)
		n, err := packet.New(cfg)
		if err != nil {
			t.Fatal(err)
		}
		start(n, cfg.Plant)
		k := des.NewKernel(n, nil)
		k.Advance(300*des.Millisecond, nil)
		before, _ := n.Audit()
		a := memory()
		k.Advance(600*des.Millisecond, nil)
		b := memory()
		after, bad := n.Audit()
		if len(bad) > 0 {
			t.Error(bad)
		}
		hops := after.Hops - before.Hops
		if got := float64(b.Mallocs-a.Mallocs) / float64(hops); hops < 1_500_000 || got > 1e-5 {
			t.Errorf("forwarding %+v: %g allocations a hop over %d hops, want at most 1e-5 over 1.5 million", f, got, hops)
		}
	}
}

// watcher polls the ports of its site each second and tells the other site.
type watcher struct{ told int }

func (w *watcher) Clone() nodes.ControlAgent { c := *w; return &c }

func (w *watcher) Handle(x nodes.Local, now des.Time, m nodes.Message) {
	if m.Op == opTell {
		w.told++
		return
	}
	x.Send(1-x.Site(), nodes.Message{Op: opTell, A: int64(x.Counters(0).SentPackets)})
	x.Later(nodes.Message{At: now + des.Second, Op: opPoll})
}

// A million seconds in which agents poll and talk each second, and nothing
// else happens, need no more memory than the first thousand.
func TestQuietDoesNotGrow(t *testing.T) {
	p := plantOf(2, [3]des.Time{0, 1, des.Millisecond})
	n, err := packet.New(packet.Config{Plant: p, Length: 2_000_000 * des.Second})
	if err != nil {
		t.Fatal(err)
	}
	agents := []nodes.ControlAgent{&watcher{}, &watcher{}}
	n.SetAgents(agents)
	for s := range nodes.SiteID(2) {
		n.Local(s).Later(nodes.Message{At: des.Second, Op: opPoll})
	}
	n.Begin()
	k := des.NewKernel(n, nil)
	k.Advance(1000*des.Second, nil)
	a := memory()
	k.Advance(1_000_000*des.Second, nil)
	b := memory()
	if got := b.Mallocs - a.Mallocs; got > 1000 {
		t.Errorf("%d allocations in a million seconds of quiet", got)
	}
	if b.HeapAlloc > a.HeapAlloc+1<<16 {
		t.Errorf("heap grew from %d to %d bytes", a.HeapAlloc, b.HeapAlloc)
	}
	if w := k.Windows(); w > 4_000_000 {
		t.Errorf("%d windows for two polls and two messages a second", w)
	}
	for s, x := range agents {
		if got := x.(*watcher).told; got != 999_999 {
			t.Errorf("site %d was told %d times, want 999999", s, got)
		}
	}
}
