package packet_test

import (
	"fmt"
	"slices"
	"testing"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/packet"
)

// still is an agent that does nothing: tails change over without one.
type still struct{}

func (still) Clone() nodes.ControlAgent                           { return still{} }
func (still) Handle(x nodes.Local, now des.Time, m nodes.Message) {}

// onePlus is a 1+1 circuit between sites 0 and 1, first over fibre 0 of light
// d1, then over fibres 1 and 2 of light d2 together, with a constant stream of
// packets of tx on the line both ways.
func onePlus(d1, d2, gap des.Time, cfg packet.Config) (*packet.Network, des.Time) {
	p := plantOf(3, [3]des.Time{0, 1, d1}, [3]des.Time{0, 2, d2 / 2}, [3]des.Time{2, 1, d2 - d2/2})
	p.Circuits = p.Circuits[:1]
	p.Aggregates = []nodes.Aggregate{{Name: "a", Ends: [2]nodes.SiteID{0, 1}}}
	cfg.Plant, cfg.Forwarding = p, nil
	for way := range uint16(2) {
		cfg.Sources = append(cfg.Sources, packet.Source{Way: way, Source: &beat{way: way, at: 7, gap: gap, size: 1000, count: 1 << 31}})
	}
	n, err := packet.New(cfg)
	if err != nil {
		panic(err)
	}
	n.SetAgents(slices.Repeat([]nodes.ControlAgent{still{}}, 3))
	for d, s := range p.Circuits[0].Ends {
		x := n.Local(s)
		over := []nodes.FibreID{1, 2}
		if d == 1 {
			over = []nodes.FibreID{2, 1}
		}
		x.OpenTrail(nodes.Trail{Circuit: 0, Incarnation: 1, Dir: nodes.Direction(d), Fibres: []nodes.FibreID{0}})
		x.OpenTrail(nodes.Trail{Circuit: 0, Incarnation: 2, Dir: nodes.Direction(d), Fibres: over, Copies: 1})
		x.SetPort(0, nodes.PortUp)
		t := &nodes.Table{Version: 1, Next: make([][]nodes.CircuitID, 3)}
		t.Next[1-s] = []nodes.CircuitID{0}
		x.Install(t)
	}
	n.Begin()
	return n, p.Circuits[0].Rate.TxTime(1000 + p.Circuits[0].Overhead)
}

// lossesOf adds up what was lost of a way for a cause.
func lossesOf(n *packet.Network, way uint16, cause packet.Cause) (count uint64) {
	n.Losses(func(_ nodes.SiteID, l *packet.Loss) {
		for _, c := range l.Count {
			if l.Way == way {
				count += c[cause]
			}
		}
	})
	return count
}

func duplicatesOf(n *packet.Network, way uint16) (count uint64) {
	for _, c := range n.Meters()[way].Cells {
		if c != nil {
			count += c.Surplus
		}
	}
	return count
}

// A 1+1 circuit whose first trail is cut loses detection + switching time -
// (D2 - D1) of sending time, wherever the break is; a negative loss is
// duplicates. The formula follows from the arrivals at the tail: the packet
// that was at the break is due at the tail when the break is seen there. The
// count of packets is worked out one by one beside it.
func TestOnePlusLoss(t *testing.T) {
	const cut, gap = 200 * des.Millisecond, 20 * des.Microsecond
	for _, c := range []struct{ d1, d2, detect, change des.Time }{
		{2 * des.Millisecond, 7 * des.Millisecond, 3 * des.Millisecond, 9 * des.Millisecond},
		{2 * des.Millisecond, 7 * des.Millisecond, 3 * des.Millisecond, 1 * des.Millisecond},
		{2 * des.Millisecond, 12 * des.Millisecond, 3 * des.Millisecond, 0},
		{9 * des.Millisecond, 4 * des.Millisecond, 3 * des.Millisecond, 10 * des.Millisecond},
	} {
		for _, share := range []des.Time{1, 5, 9} {
			where := c.d1 * share / 10
			n, tx := onePlus(c.d1, c.d2, gap, packet.Config{Length: 400 * des.Millisecond, Detect: c.detect, Switch: c.change})
			n.Schedule(packet.Act{At: cut, Kind: packet.ActCut, Name: "cut", Where: where})
			totals := finish(t, n)
			for way := range uint16(2) {
				place := where
				if way == 1 {
					place = c.d1 - where
				}
				changed := cut + c.d1 - place + c.detect + c.change
				var lost, twice uint64
				for at := des.Time(7); at < 400*des.Millisecond; at += gap {
					one := at+tx+place <= cut && at+tx+c.d1 < changed
					two := at+c.d2 >= changed
					if !one && !two {
						lost++
					}
					if one && two {
						twice++
					}
				}
				name := fmt.Sprintf("%+v, break at %v, way %d", c, place, way)
				if got, dup := lossesOf(n, way, packet.LostCut), duplicatesOf(n, way); got != lost || dup != twice {
					t.Errorf("%s: %d lost and %d twice, want %d and %d", name, got, dup, lost, twice)
				}
				sending := c.detect + c.change - (c.d2 - c.d1)
				if d := des.Time(lost)*gap - des.Time(twice)*gap - sending; max(d, -d) > 2*gap {
					t.Errorf("%s: %d lost and %d twice is %v off the %v of the formula", name, lost, twice, d, sending)
				}
				if lossesOf(n, way, packet.LostSwitched) != 0 {
					t.Errorf("%s: losses at the change-over without darkness", name)
				}
			}
			if totals.Copies != totals.Offered || totals.Discarded+totals.Duplicates != totals.Copies {
				t.Errorf("%+v: books %+v", c, totals)
			}
		}
	}
}

// What goes back to the first trail after wait-to-restore meets the difference
// of delays again: D2 - D1 of sending time is lost, or comes twice when the
// first trail is the longer one. A new loss of light starts the wait anew.
func TestOnePlusReturns(t *testing.T) {
	const gap, wait = 20 * des.Microsecond, 100 * des.Millisecond
	for _, c := range []struct{ d1, d2 des.Time }{{2 * des.Millisecond, 7 * des.Millisecond}, {7 * des.Millisecond, 2 * des.Millisecond}} {
		cfg := packet.Config{Length: des.Second, Detect: 3 * des.Millisecond, Switch: 8 * des.Millisecond, Revert: true, Wait: wait}
		n, tx := onePlus(c.d1, c.d2, gap, cfg)
		n.Schedule(packet.Act{At: 100 * des.Millisecond, Kind: packet.ActCut, Where: des.Millisecond})
		n.Schedule(packet.Act{At: 200 * des.Millisecond, Kind: packet.ActRepair})
		n.Schedule(packet.Act{At: 250 * des.Millisecond, Kind: packet.ActCut, Where: des.Millisecond})
		n.Schedule(packet.Act{At: 400 * des.Millisecond, Kind: packet.ActRepair})
		finish(t, n)
		back := 400*des.Millisecond + c.d1 - des.Millisecond + cfg.Detect + wait
		var lost, twice uint64
		for at := des.Time(7); at < des.Second; at += gap {
			one, two := at+c.d1 >= back, at+tx+c.d2 < back
			if !one && !two {
				lost++
			}
			if one && two {
				twice++
			}
		}
		// The cut itself: 11 ms less the difference of delays of sending time.
		dup := duplicatesOf(n, 0)
		if got := lossesOf(n, 0, packet.LostSwitched); got != lost || dup != twice || lost+twice == 0 {
			t.Errorf("%v, %v: %d lost and %d twice on the return, want %d and %d", c.d1, c.d2, got, dup, lost, twice)
		}
		if d := des.Time(int64(lost)-int64(twice))*gap - (c.d2 - c.d1); max(d, -d) > 2*gap {
			t.Errorf("%v, %v: %d lost and %d twice is %v off the difference of delays", c.d1, c.d2, lost, twice, d)
		}
		var when []des.Time
		for _, e := range n.Events() {
			if e.What == "tail returned" && e.Site == 1 {
				when = append(when, e.At)
			}
		}
		if !slices.Equal(when, []des.Time{back}) {
			t.Errorf("returns at %v, want %v once", when, back)
		}
	}
}

// Each direction changes over for itself: a one-way fault leaves the other way
// alone, and without light on either trail nothing changes.
func TestOnePlusOneWay(t *testing.T) {
	n, _ := onePlus(2*des.Millisecond, 7*des.Millisecond, 20*des.Microsecond, packet.Config{Length: 500 * des.Millisecond, Detect: 3 * des.Millisecond, Switch: 8 * des.Millisecond})
	n.Schedule(packet.Act{At: 100 * des.Millisecond, Kind: packet.ActCut, OneWay: true, Dir: nodes.Back})
	finish(t, n)
	if lossesOf(n, 0, packet.LostCut) != 0 || lossesOf(n, 1, packet.LostCut) == 0 {
		t.Errorf("lost %d out and %d back of a fault of the way back", lossesOf(n, 0, packet.LostCut), lossesOf(n, 1, packet.LostCut))
	}

	n, _ = onePlus(2*des.Millisecond, 7*des.Millisecond, 20*des.Microsecond, packet.Config{Length: 500 * des.Millisecond, Detect: 3 * des.Millisecond, Switch: 8 * des.Millisecond})
	n.Schedule(packet.Act{At: 100 * des.Millisecond, Kind: packet.ActCut, Fibre: 1})
	n.Schedule(packet.Act{At: 200 * des.Millisecond, Kind: packet.ActCut, Fibre: 0})
	n.Schedule(packet.Act{At: 300 * des.Millisecond, Kind: packet.ActRepair, Fibre: 1})
	totals := finish(t, n)
	if switched := eventsOf(n, "tail switched"); switched != 2 {
		t.Errorf("%d tails change over, want both once the second trail has light", switched)
	}
	if out := des.Time(lossesOf(n, 0, packet.LostCut)) * 20 * des.Microsecond; out < 100*des.Millisecond || out > 125*des.Millisecond {
		t.Errorf("out for %v of sending time of two cuts; totals %+v", out, totals)
	}
}

func eventsOf(n *packet.Network, what string) (count int) {
	for _, e := range n.Events() {
		if e.What == what {
			count++
		}
	}
	return count
}

// The books of a 1+1 circuit do not depend on regions, windows or copies of
// the whole network.
func TestOnePlusRepeats(t *testing.T) {
	const length = 400 * des.Millisecond
	run := func(join des.Time, clone bool) packet.Totals {
		n, _ := onePlus(2*des.Millisecond, 3*des.Millisecond, 20*des.Microsecond, packet.Config{
			Length: length, Detect: 3 * des.Millisecond, Switch: des.Millisecond, JoinBelow: join, Revert: true, Wait: 50 * des.Millisecond,
		})
		n.Schedule(packet.Act{At: 100 * des.Millisecond, Kind: packet.ActCut, Where: 600 * des.Microsecond})
		n.Schedule(packet.Act{At: 200 * des.Millisecond, Kind: packet.ActRepair})
		if clone {
			k := des.NewKernel(n, nil)
			k.Advance(105_500*des.Microsecond, nil)
			n = n.Clone()
		}
		return finish(t, n)
	}
	want := run(-1, false)
	if want.Duplicates+want.Lost[packet.LostCut] == 0 || want.Lost[packet.LostSwitched] == 0 {
		t.Fatalf("nothing happens: %+v", want)
	}
	if got := run(10*des.Millisecond, false); got != want {
		t.Errorf("in one region: %+v, want %+v", got, want)
	}
	if got := run(-1, true); got != want {
		t.Errorf("from a copy: %+v, want %+v", got, want)
	}
}

// The timeline of a revertive switch: service is back detection + switching
// after the fault (10 + 50 ms), and reverts one wait-to-restore (5 min) after
// the repair at 4 h is seen; a second fault at 4 h 3 min, cleared at 4 h 10
// min, moves that to 4 h 15 min (computed from the rules of RFC 4428 section
// 6.1). The break is at the site looked at, so light takes no time.
func TestOnePlusTimeline(t *testing.T) {
	const detect, wait = 10 * des.Millisecond, 5 * des.Minute
	for _, again := range []bool{false, true} {
		n, _ := onePlus(2*des.Millisecond, 7*des.Millisecond, des.Minute, packet.Config{
			Length: 5 * des.Hour, Detect: detect, Switch: 50 * des.Millisecond, Revert: true, Wait: wait,
		})
		const fault = des.Second
		n.Schedule(packet.Act{At: fault, Kind: packet.ActCut})
		n.Schedule(packet.Act{At: fault + 4*des.Hour, Kind: packet.ActRepair})
		back := fault + 4*des.Hour + 5*des.Minute + detect
		if again {
			n.Schedule(packet.Act{At: fault + 4*des.Hour + 3*des.Minute, Kind: packet.ActCut})
			n.Schedule(packet.Act{At: fault + 4*des.Hour + 10*des.Minute, Kind: packet.ActRepair})
			back += 10 * des.Minute
		}
		finish(t, n)
		var switched, returned []des.Time
		for _, e := range n.Events() {
			switch {
			case e.Site == 0 && e.What == "tail switched":
				switched = append(switched, e.At)
			case e.Site == 0 && e.What == "tail returned":
				returned = append(returned, e.At)
			}
		}
		if !slices.Equal(switched, []des.Time{fault + 60*des.Millisecond}) || !slices.Equal(returned, []des.Time{back}) {
			t.Errorf("second fault %v: over at %v, back at %v; want %v and %v", again, switched, returned, fault+60*des.Millisecond, back)
		}
	}
}

// Packets on a 1+1 circuit need no memory of their own, also while the tail has
// changed over.
func TestOnePlusAllocatesNothing(t *testing.T) {
	n, _ := onePlus(2*des.Millisecond, 7*des.Millisecond, 20*des.Microsecond, packet.Config{Length: 20 * des.Second, Detect: 3 * des.Millisecond})
	n.Schedule(packet.Act{At: des.Second, Kind: packet.ActCut, Where: des.Millisecond})
	k := des.NewKernel(n, nil)
	k.Advance(2*des.Second, nil)
	before := memory()
	k.Advance(18*des.Second, nil)
	after := memory()
	if got := after.Mallocs - before.Mallocs; got > 100 {
		t.Errorf("%d allocations for 3.2 million copies", got)
	}
	if twice := duplicatesOf(n, 0); twice == 0 {
		t.Error("the tail has not changed over")
	}
}

// Routers, sites and ports that fail keep the books, and a copy of the network
// made while they are broken goes on in the same way.
func TestFailuresRepeat(t *testing.T) {
	run := func(join des.Time, clone bool) (packet.Totals, []nodes.Event) {
		n, _ := onePlus(2*des.Millisecond, 3*des.Millisecond, 20*des.Microsecond, packet.Config{
			Length: 900 * des.Millisecond, Detect: 3 * des.Millisecond, Switch: des.Millisecond, JoinBelow: join,
		})
		for _, a := range []packet.Act{
			{At: 100 * des.Millisecond, Kind: packet.ActFail, Part: packet.PartRouter, Site: 1},
			{At: 200 * des.Millisecond, Kind: packet.ActMend, Part: packet.PartRouter, Site: 1},
			{At: 300 * des.Millisecond, Kind: packet.ActFail, Part: packet.PartPort, Site: 0},
			{At: 400 * des.Millisecond, Kind: packet.ActMend, Part: packet.PartPort, Site: 0},
			{At: 500 * des.Millisecond, Kind: packet.ActFail, Part: packet.PartSite, Site: 2},
			{At: 520 * des.Millisecond, Kind: packet.ActCut, Fibre: 1, Where: des.Millisecond},
			{At: 600 * des.Millisecond, Kind: packet.ActMend, Part: packet.PartSite, Site: 2},
			{At: 700 * des.Millisecond, Kind: packet.ActRepair, Fibre: 1},
		} {
			n.Schedule(a)
		}
		if clone {
			for _, at := range []des.Time{150, 350, 550} {
				des.NewKernel(n, nil).Advance(at*des.Millisecond, nil)
				n = n.Clone()
			}
		}
		return finish(t, n), n.Events()
	}
	want, events := run(-1, false)
	// The stream out of site 1, and what comes to it, is lost for 100 ms and the
	// light on the way; the port takes as much, for both ways.
	if want.Lost[packet.LostFailed] < 9900 || want.Lost[packet.LostFailed] > 10200 || want.Lost[packet.LostCut] < 9900 {
		t.Errorf("%+v", want)
	}
	back := 0
	for _, e := range events {
		if e.What == "light back" && e.At > 600*des.Millisecond {
			back++
		}
	}
	if back != 2 {
		t.Errorf("light comes back %d times after the site is mended, want twice, when the cut is repaired too", back)
	}
	for _, other := range []struct {
		join  des.Time
		clone bool
	}{{10 * des.Millisecond, false}, {-1, true}} {
		if got, _ := run(other.join, other.clone); got != want {
			t.Errorf("%+v: %+v, want %+v", other, got, want)
		}
	}
}
