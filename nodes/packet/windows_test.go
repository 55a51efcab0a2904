package packet_test

import (
	"fmt"
	"math/rand/v2"
	"strings"
	"sync"
	"sync/atomic"
	"testing"

	"ferrule/des"
	"ferrule/nodes/packet"
)

// crew is an executor of two goroutines to a call.
type crew struct{}

func (crew) Each(n int, do func(i int)) {
	var next atomic.Int64
	var wg sync.WaitGroup
	for range 2 {
		wg.Go(func() {
			for i := int(next.Add(1)) - 1; i < n; i = int(next.Add(1)) - 1 {
				do(i)
			}
		})
	}
	wg.Wait()
}

// seventh and uneven are ways to cut windows; natural is nil.
func seventh(k *des.Kernel, n *packet.Network) { k.Window = max(n.Lookahead()/7, 1) }

func uneven(seed uint64) func(k *des.Kernel, n *packet.Network) {
	return func(k *des.Kernel, n *packet.Network) {
		r := rand.New(rand.NewPCG(seed, 0))
		longest := int64(min(n.Lookahead(), 3*des.Millisecond))
		k.WindowFunc = func() des.Time { return des.Time(r.Int64N(longest)) >> r.IntN(3) }
	}
}

// No window length, drawing of regions or executor shows in anything that a
// network tells: not in a bucket, a loss, an event, a counter or the end.
func TestWindowsDoNotShow(t *testing.T) {
	run := func(join des.Time, exec des.Executor, set func(*des.Kernel, *packet.Network)) string {
		_, make := mesh(join)
		n := make()
		k := des.NewKernel(n, exec)
		if set != nil {
			set(k, n)
		}
		n.Run(k, nil)
		return dump(n)
	}
	want := run(0, nil, nil)
	for _, must := range []string{"cut", "repair", "scale", "told", "light", "order", "poll", "fibre"} {
		if !strings.Contains(want, "What:"+must) {
			t.Errorf("the run has no %s event", must)
		}
	}
	exercised(t)
	for _, join := range []des.Time{-1, 0, des.Second} {
		for name, set := range map[string]func(*des.Kernel, *packet.Network){"natural": nil, "a seventh": seventh, "random": uneven(1)} {
			for _, exec := range []des.Executor{nil, crew{}} {
				if exec != nil && (name == "a seventh" || join == des.Second) {
					continue // one region has nothing to run at once
				}
				if testing.Short() && exec == nil && name == "random" {
					continue
				}
				if got := run(join, exec, set); got != want {
					t.Errorf("windows %s, sites joined below %v, executor %T: %s", name, join, exec, differ(want, got))
				}
			}
		}
	}
}

// exercised makes sure that the mesh meets every cause of loss it can, queues,
// deliveries over several inputs, reordering and lost messages.
func exercised(t *testing.T) {
	t.Helper()
	_, make := mesh(0)
	n := make()
	n.Run(des.NewKernel(n, nil), nil)
	totals, bad := n.Audit()
	if len(bad) > 0 {
		t.Errorf("audit: %q", bad)
	}
	for _, c := range []packet.Cause{packet.LostQueue, packet.LostCut, packet.LostFlushed} {
		if totals.Lost[c] == 0 {
			t.Errorf("nothing lost by cause %v", c)
		}
	}
	if totals.Messages.Lost == 0 || totals.Messages.Arrived == 0 {
		t.Errorf("messages %+v: want some lost and some arrived", totals.Messages)
	}
	var reordered uint64
	for w := range n.Meters() {
		for _, c := range n.Meters()[w].Cells {
			if c != nil {
				reordered += c.Reordered
			}
		}
	}
	if reordered == 0 || totals.Delivered < 5000 {
		t.Errorf("%d reordered of %d delivered: want some of 5000 or more", reordered, totals.Delivered)
	}
}

// A clone made in the middle goes on as its original does, however either is
// run, and an act given to the clone alone changes the clone alone.
func TestCloneGoesOnAlike(t *testing.T) {
	_, make := mesh(0)
	whole := make()
	whole.Run(des.NewKernel(whole, nil), nil)
	want := dump(whole)
	for _, at := range []des.Time{10, 81, 96, 130, 200, 349} {
		at *= des.Millisecond
		n := make()
		k := des.NewKernel(n, nil)
		k.Advance(at, nil)
		c, apart := n.Clone(), n.Clone()
		if a, b := dump(n), dump(c); a != b {
			t.Errorf("clone at %v: %s", at, differ(a, b))
		}
		apart.Schedule(packet.Act{At: at, Kind: packet.ActCut, Name: "only here", Fibre: 8})
		apart.Run(des.NewKernel(apart, nil), nil)
		l := des.NewKernel(c, crew{})
		uneven(uint64(at))(l, c)
		c.Run(l, nil)
		if got := dump(c); got != want {
			t.Errorf("clone at %v goes on otherwise: %s", at, differ(want, got))
		}
		n.Run(k, nil)
		if got := dump(n); got != want {
			t.Errorf("original cloned at %v goes on otherwise: %s", at, differ(want, got))
		}
		if got := dump(apart); got == want {
			t.Errorf("an act given to the clone at %v changed nothing", at)
		}
		if _, bad := apart.Audit(); len(bad) > 0 {
			t.Errorf("clone at %v with a cut of its own: %q", at, bad)
		}
	}
}

// Advancing in steps with looks in between changes nothing.
func TestLookingChangesNothing(t *testing.T) {
	_, make := mesh(-1)
	a, b := make(), make()
	a.Run(des.NewKernel(a, nil), nil)
	k := des.NewKernel(b, nil)
	for at := des.Time(0); at < 350*des.Millisecond; at += 11 * des.Millisecond {
		k.Advance(at, nil)
		if _, bad := b.Audit(); len(bad) > 0 {
			t.Fatalf("at %v: %q", at, bad)
		}
		if b.Now() != at {
			t.Fatalf("advanced to %v, now %v", at, b.Now())
		}
		_ = fmt.Sprint(b.PortReports(), b.Events())
	}
	b.Run(k, nil)
	if x, y := dump(a), dump(b); x != y {
		t.Error(differ(x, y))
	}
}
