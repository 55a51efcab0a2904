package queue_test

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/queue"
	"ferrule/nodes/queue/queuetest"
)

func TestManagedContract(t *testing.T) {
	s, w, f, g := nodes.QueueStrict, nodes.QueueWeight, nodes.QueueFIFO, nodes.QueueFair
	for _, drop := range []nodes.DropPolicy{nodes.DropTail, nodes.DropRED, nodes.DropCoDel, nodes.DropFQCoDel} {
		for _, q := range [][]nodes.Queueing{{s, s, s, s}, {w, w, w, w}, {f, f, f, f}, {s, w, s, w}, {g, g, g, g}, {s, g, g, g}} {
			t.Run(fmt.Sprint(drop, q), func(t *testing.T) {
				queuetest.Run(t, 8, func() queue.Discipline {
					c := classes(q...)
					for i := range c {
						c[i].Drop = drop
					}
					return queue.New(queue.Config{Classes: c, ClassOf: classOf, Rate: nodes.Gbps, Seed: 1, Name: "a b"})
				})
			})
		}
	}
}

// one makes the discipline of a single class.
func one(drop nodes.DropPolicy, ecn bool, buffer nodes.Bytes) queue.Shedder {
	c := []nodes.Class{{Queue: nodes.QueueFIFO, BufferBytes: buffer, Drop: drop, ECN: ecn}}
	return queue.New(queue.Config{Classes: c, ClassOf: []uint8{0}, Rate: nodes.Gbps, Seed: 1}).(queue.Shedder)
}

// codelDrops serves a queue with a large backlog each millisecond from 1 ms on
// and lists the milliseconds at which CoDel dropped.
func codelDrops(until int, waited func(ms int) des.Time) (drops []int) {
	var c queue.CoDel
	for ms := 1; ms <= until; ms++ {
		now := des.Time(ms) * des.Millisecond
		for c.Judge(now, waited(ms), 1<<20, 1500, false) == queue.FateDrop {
			drops = append(drops, ms)
		}
	}
	return drops
}

// The drops that the pseudo-code of RFC 8289, section 5, makes when it is
// carried out by hand: once a millisecond, with a wait of 20 ms throughout; and
// with one of 1 ms from 600 ms to 650 ms, after which dropping begins again
// with a count of 10 - 1.
func TestCoDelByPseudoCode(t *testing.T) {
	want := []int{101, 201, 272, 330, 380, 425, 465, 503, 539, 572, 604, 634, 663, 690, 717, 743, 768, 792}
	if got := codelDrops(800, func(int) des.Time { return 20 * des.Millisecond }); !slices.Equal(got, want) {
		t.Errorf("drops at %v ms, want %v", got, want)
	}
	want = append(slices.Clone(want[:10]), 750, 784, 815, 846, 874, 902, 929, 955, 980, 1004)
	got := codelDrops(1010, func(ms int) des.Time {
		if ms >= 600 && ms < 650 {
			return des.Millisecond
		}
		return 20 * des.Millisecond
	})
	if !slices.Equal(got, want) {
		t.Errorf("drops at %v ms, want %v", got, want)
	}
}

// The control law of RFC 8289, section 4: T(n) = 100 ms (1 + the sum over k
// from 1 to n-1 of 1/sqrt(k)), computed from the formula. Looked at every
// microsecond, a drop is late by one at most.
func TestCoDelLaw(t *testing.T) {
	want := []float64{100, 200, 270.7107, 328.4457, 378.4457, 423.1671, 463.9919, 501.7883, 537.1437, 570.4770, 602.0998, 632.2509, 661.1184, 688.8534, 715.5796, 741.3995}
	var c queue.CoDel
	n := 0
	for us := 0; n < len(want); us++ {
		now := des.Time(us) * des.Microsecond
		for c.Judge(now, 20*des.Millisecond, 1<<20, 1500, false) == queue.FateDrop {
			if late := now.Seconds()*1000 - want[n]; late < -1e-4 || late > 1.1e-3 {
				t.Errorf("drop %d at %.4f ms, want %.4f", n+1, now.Seconds()*1000, want[n])
			}
			n++
		}
	}
}

// The queue is never emptied by drops, and marks replace drops for packets of
// ECN-capable transports only (RFC 3168).
func TestCoDelMarks(t *testing.T) {
	for _, drop := range []nodes.DropPolicy{nodes.DropCoDel, nodes.DropFQCoDel} {
		for _, capable := range []bool{false, true} {
			d := one(drop, true, 1<<24)
			p := nodes.Packet{Size: 1000}
			if capable {
				p.Bits |= nodes.ECT0
			}
			for range 1000 {
				d.Enqueue(0, &p)
			}
			marked, shed := 0, 0
			for ms := 1; d.Len() > 0; ms++ {
				k := d.Dequeue(des.Time(ms) * des.Millisecond)
				if k.Bits&nodes.ECNMask == nodes.CE {
					marked++
				}
				shed += len(d.Shed())
			}
			if capable != (marked > 0) || capable == (shed > 0) {
				t.Errorf("policy %d, capable %v: %d marked, %d dropped", drop, capable, marked, shed)
			}
		}
	}
}

// Values of the average computed from avg = (1-w) avg + w q, and for idle time
// from avg (1-w)^m (Floyd and Jacobson 1993).
func TestREDAverage(t *testing.T) {
	near := func(what string, got, want, within float64) {
		t.Helper()
		if math.Abs(got-want) > within {
			t.Errorf("%s: average %.9f, want %.9f", what, got, want)
		}
	}
	for _, c := range []struct{ w, want float64 }{{0.002, 2.468662184}, {0.0042, 5.005453551}} {
		r := queue.RED{Min: 5, Max: 15, MaxP: 0.02, Weight: c.w, Slot: des.Millisecond}
		for q := range 51 { // the queue grows by one at each arrival, to 50
			r.Observe(0, float64(q))
		}
		near("a burst from empty", r.Average(), c.want, 1e-9)
	}
	r := queue.RED{Min: 5, Max: 15, MaxP: 0.02, Weight: 0.002, Slot: des.Millisecond}
	for i := 1; i <= 1000; i++ {
		r.Observe(0, 20)
		switch i {
		case 100:
			near("100 arrivals at 20", r.Average(), 3.628664, 1e-6)
		case 500:
			near("500 arrivals at 20", r.Average(), 12.649775, 1e-6)
		case 1000:
			near("1000 arrivals at 20", r.Average(), 17.298710, 1e-6)
		}
	}
	r = queue.RED{Min: 5, Max: 15, MaxP: 0.02, Weight: 1, Slot: des.Millisecond}
	r.Observe(0, 10)
	r.Weight = 0.002
	r.Emptied(des.Second)
	r.Observe(1500*des.Millisecond, 0)
	near("10 after 500 idle slots", r.Average(), 3.675112549, 1e-9)
}

// pb = 0.01 at an average of 10 between 5 and 15, and pa = pb/(1 - count pb),
// computed from the formula.
func TestREDProbability(t *testing.T) {
	at := func(avg float64, count int) float64 {
		r := queue.RED{Min: 5, Max: 15, MaxP: 0.02, Weight: 1, Slot: 1}
		r.Observe(0, avg)
		for range count {
			if refused, _ := r.Refuse(0.999999); refused {
				t.Fatalf("refused at an average of %g", avg)
			}
		}
		return r.Probability()
	}
	for _, c := range []struct {
		avg    float64
		count  int
		want   float64
		within float64
	}{{10, 0, 0.01, 1e-12}, {10, 25, 0.01 / 0.75, 1e-9}, {10, 50, 0.02, 1e-9}, {10, 99, 1, 1e-9}, {14.9, 40, 0.0951923, 1e-7}, {4.9, 0, 0, 0}, {15, 0, 1, 0}} {
		if got := at(c.avg, c.count); math.Abs(got-c.want) > c.within {
			t.Errorf("average %g, %d since the last: %.7f, want %.7f", c.avg, c.count, got, c.want)
		}
	}
}

// With pb constant the distance from mark to mark is uniform on 1..1/pb (Floyd
// and Jacobson 1993, section 7): no distance above it, and each as often.
func TestREDSpacing(t *testing.T) {
	red := queue.RED{Min: 5, Max: 15, MaxP: 0.1, Weight: 1, Slot: 1}
	red.Observe(0, 10) // pb = 0.05: distances 1..20
	r := rand.New(rand.NewPCG(7, 8))
	const marks = 20_000
	var count [21]int
	gap := 0
	for n := 0; n < marks; {
		gap++
		if refused, _ := red.Refuse(r.Float64()); refused {
			if gap > 20 {
				t.Fatalf("a distance of %d", gap)
			}
			count[gap]++
			gap = 0
			n++
		}
	}
	chi2 := 0.0
	for _, c := range count[1:] {
		d := float64(c) - marks/20
		chi2 += d * d / (marks / 20)
	}
	if chi2 > 43.8 { // chi-squared, 19 degrees of freedom, 0.999 quantile
		t.Errorf("distances %v: chi-squared %.1f", count[1:], chi2)
	}
}

// Far above the upper threshold RED drops also what could be marked (RFC 3168,
// section 7).
func TestREDMarksBetweenThresholds(t *testing.T) {
	d := one(nodes.DropRED, true, 100_000)
	p := nodes.Packet{Size: 500, Bits: nodes.ECT0}
	marked, refused := 0, 0
	for i := range 200_000 {
		switch d.Enqueue(des.Time(i), &p) {
		case queue.Refused:
			refused++
		case queue.Kept:
		default:
			t.Fatal("the buffer overflowed below the upper threshold")
		}
		for d.Backlog() > 30_000 { // between the thresholds of 16,667 B and 50,000 B
			if d.Dequeue(des.Time(i)).Bits&nodes.ECNMask == nodes.CE {
				marked++
			}
		}
	}
	if marked == 0 || refused > 0 {
		t.Errorf("held at 30,000 B: %d marked, %d refused", marked, refused)
	}
	for range 400 {
		d.Enqueue(0, &p)
	}
	for d.Len() > 0 {
		d.Dequeue(0)
	}
}

// FQ-CoDel shares by flow whatever the sizes, and one that has just begun goes
// before those that have a backlog (RFC 8290).
func TestFlowsShare(t *testing.T) {
	d := one(nodes.DropFQCoDel, false, 1<<24)
	for range 2000 {
		d.Enqueue(0, &nodes.Packet{Flow: 1, Size: 1500})
		d.Enqueue(0, &nodes.Packet{Flow: 2, Size: 500})
		d.Enqueue(0, &nodes.Packet{Flow: 2, Size: 500})
	}
	var sent [4]int
	for range 1500 {
		p := d.Dequeue(des.Millisecond)
		sent[p.Flow] += int(p.Size)
	}
	if diff := sent[1] - sent[2]; diff > 3000 || diff < -3000 {
		t.Errorf("flows of 1500 B and 500 B were sent %d B and %d B", sent[1], sent[2])
	}
	d.Enqueue(des.Millisecond, &nodes.Packet{Flow: 3, Size: 100})
	if p := d.Dequeue(des.Millisecond); p.Flow != 3 {
		t.Errorf("flow %d was served before the one that had just begun", p.Flow)
	}
}

// A full buffer takes from the longest queue: the flow that fills it.
func TestFlowsMakeRoom(t *testing.T) {
	d := one(nodes.DropFQCoDel, false, 100_000)
	for range 1000 {
		d.Enqueue(0, &nodes.Packet{Flow: 1, Size: 1000})
		for _, x := range d.Shed() {
			if x.Packet.Flow != 1 || x.Verdict != queue.Dropped {
				t.Fatalf("shed %+v", x)
			}
		}
	}
	if d.Enqueue(0, &nodes.Packet{Flow: 2, Size: 1000}) != queue.Kept || d.Backlog() > 100_000 {
		t.Errorf("a light flow was refused by a buffer of %d B", d.Backlog())
	}
	for _, x := range d.Shed() {
		if x.Packet.Flow != 1 {
			t.Errorf("shed of the light flow")
		}
	}
}

// No packet served by WFQ leaves later than an ideal server that shares its
// rate at every instant by weight would finish it, by more than the time of
// the largest packet (Parekh and Gallager 1993, theorem 1). The ideal server
// here is stepped from one event to the next by itself.
func TestFairAgainstIdealServer(t *testing.T) {
	const n, rate = 4, 1e9 / 8 // B/s
	weights := [n]float64{10, 20, 30, 40}
	c := classes(nodes.QueueFair, nodes.QueueFair, nodes.QueueFair, nodes.QueueFair)
	for i := range c {
		c[i].BufferBytes = 1 << 30
	}
	d := queue.New(queue.Config{Classes: c, ClassOf: []uint8{0, 1, 2, 3}, Rate: nodes.Gbps})
	r := rand.New(rand.NewPCG(11, 12))
	var arrive []des.Time
	var what []nodes.Packet
	now := des.Time(0)
	for i := range 5000 {
		now += des.Time(r.ExpFloat64() * 6.3e6)
		arrive = append(arrive, now)
		what = append(what, nodes.Packet{Way: uint16(r.IntN(n)), Seq: uint32(i), Size: uint16(64 + r.IntN(1437)), Due: now})
	}
	ideal := idealFinish(arrive, what, weights[:], rate)
	free, next := des.Time(0), 0
	worst, early := math.Inf(-1), 0
	for served := 0; served < len(what); served++ {
		if d.Len() == 0 {
			free = max(free, arrive[next])
		}
		for next < len(what) && arrive[next] <= free {
			d.Enqueue(arrive[next], &what[next])
			next++
		}
		p := d.Dequeue(free)
		free += nodes.Gbps.TxTime(nodes.Bytes(p.Size))
		late := free.Seconds() - ideal[p.Seq]
		worst = max(worst, late)
		if late < 0 {
			early++
		}
	}
	if bound := 1500 / rate; worst > bound+1e-9 {
		t.Errorf("a packet left %.3g us after the ideal server, bound %.3g us", worst*1e6, bound*1e6)
	}
	if early == 0 || worst < 1e-6 {
		t.Errorf("worst %.3g s, %d early: the load does not try the bound", worst, early)
	}
}

func idealFinish(arrive []des.Time, what []nodes.Packet, weight []float64, rate float64) []float64 {
	out := make([]float64, len(what))
	type item struct {
		no   int
		left float64
	}
	q := make([][]item, len(weight))
	now := 0.0
	for next := 0; ; {
		total := 0.0
		for i := range q {
			if len(q[i]) > 0 {
				total += weight[i]
			}
		}
		stop := math.Inf(1)
		if next < len(arrive) {
			stop = arrive[next].Seconds()
		}
		if total == 0 && math.IsInf(stop, 1) {
			return out
		}
		done := -1
		for i := range q {
			if len(q[i]) > 0 {
				if end := now + q[i][0].left*total/weight[i]/rate; end < stop {
					stop, done = end, i
				}
			}
		}
		for i := range q {
			if len(q[i]) > 0 {
				q[i][0].left -= (stop - now) * rate * weight[i] / total
			}
		}
		now = stop
		if done >= 0 {
			out[q[done][0].no] = now
			q[done] = q[done][1:]
		} else {
			q[what[next].Way] = append(q[what[next].Way], item{next, float64(what[next].Size)})
			next++
		}
	}
}
