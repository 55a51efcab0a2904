package packet_test

import (
	"testing"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/packet"
)

// What the wide bins of all classes count is what the books count, and a close
// bin is part of the wide one that holds it.
func TestSeriesAgreeWithTheBooks(t *testing.T) {
	_, make := mesh(0)
	n := make()
	totals := finish(t, n)
	var sum packet.Totals
	var bytes, metered, lost uint64
	for _, x := range n.Series() {
		for i, b := range x.Wide {
			sum.Delivered += b.Delivered
			lost += b.Lost
			bytes += b.Bytes
			sum.Inside += x.WideInside[i]
			if b.Delivered > 0 && (b.MaxDelay < b.Delay/b.Delivered || b.MaxDelay > b.Delay) {
				t.Errorf("bin %d: greatest delay %d ns, sum %d ns of %d", i, b.MaxDelay, b.Delay, b.Delivered)
			}
		}
		closed := map[int]uint64{}
		for _, b := range x.Close {
			closed[int(des.Time(b.No)*des.Millisecond/x.Width)] += b.Delivered
		}
		for i, delivered := range closed {
			if delivered > x.Wide[i].Delivered {
				t.Errorf("wide bin %d has %d delivered, the close ones in it %d", i, x.Wide[i].Delivered, delivered)
			}
		}
	}
	for w := range n.Meters() {
		for _, c := range n.Meters()[w].Cells {
			if c != nil {
				metered += c.Bytes
			}
		}
	}
	var lostByBooks uint64
	for _, v := range totals.Lost {
		lostByBooks += v
	}
	if sum.Delivered != totals.Delivered || lost != lostByBooks || sum.Inside != totals.Inside || bytes != metered {
		t.Errorf("series: %d delivered, %d lost, %d inside, %d B; books: %d, %d, %d, %d B",
			sum.Delivered, lost, sum.Inside, bytes, totals.Delivered, lostByBooks, totals.Inside, metered)
	}
}

// A constant stream over a fibre cut at 50 ms is seen to the millisecond: every
// bin offers the same, delay is that of the way in force, and bins are lost
// from the one that was in the glass beyond the break until the end reacted.
func TestSeriesShowACut(t *testing.T) {
	const cut, detect, react, ms = 50 * des.Millisecond, 3 * des.Millisecond, 1700 * des.Microsecond, des.Millisecond
	cfg, ways, p := triangle(detect)
	cfg.Sources = cfg.Sources[:1]
	cfg.Sources[0].Source = &beat{way: ways[0], at: 50 * des.Microsecond, gap: 100 * des.Microsecond, size: 500, count: 1 << 30}
	n := net(cfg, react)
	place := p.Fibres[0].Delay / 2
	n.Schedule(packet.Act{At: cut, Kind: packet.ActCut, Name: "cut", Where: place})
	finish(t, n)
	x := n.Series()[0]
	if x.Width != 10*ms || len(x.Wide) != 20 {
		t.Errorf("%d bins of %v, want 20 of 10 ms", len(x.Wide), x.Width)
	}
	if len(x.Close) != 200 {
		t.Fatalf("%d close bins, want all 200: the run ends less than 2 s after the cut", len(x.Close))
	}
	from := (cut - place) / ms              // the packet at the break left so long ago
	until := (cut + place + detect + react) // the sender's own receive side goes dark, is believed, acted on
	for i, b := range x.Close {
		at := des.Time(i) * ms
		if b.No != uint64(i) || b.Delivered+b.Lost != 10 {
			t.Errorf("bin %d: number %d, %d delivered and %d lost of 10", i, b.No, b.Delivered, b.Lost)
		}
		broken := at >= cut-place && at+ms <= until
		whole := at+ms <= from*ms || at >= until+ms
		switch light := b.MaxDelay / 1e6; {
		case broken && b.Lost != 10, whole && b.Lost != 0:
			t.Errorf("%v: %d lost of 10", at, b.Lost)
		case whole && at < cut && light != 2, whole && at > cut && light != 12:
			t.Errorf("%v: greatest delay %d ns, want the light of 2 ms before and 12 ms after", at, b.MaxDelay)
		}
	}
}

// Only the milliseconds near an act are kept apart: from 1 s before to 2 s
// after. A packet held for longer than the ring lasts is counted all the same.
func TestSeriesKeepWhatIsNear(t *testing.T) {
	p := plantOf(2, [3]des.Time{0, 1, des.Millisecond})
	way := between(p, 0, 0, 1)
	cfg := packet.Config{Plant: p, Length: 30 * des.Second, Sources: []packet.Source{{Way: way,
		Source: &beat{way: way, at: 500 * des.Microsecond, gap: 10 * des.Millisecond, size: 100, count: 1 << 30}}}}
	n := net(cfg, 0)
	n.Schedule(packet.Act{At: 10 * des.Second, Kind: packet.ActScale, Name: "nothing"})
	n.Schedule(packet.Act{At: 11 * des.Second, Kind: packet.ActScale, Name: "nothing"})
	k := des.NewKernel(n, nil)
	k.Advance(20*des.Second, nil)
	n.Local(0).Hold(way, 24*des.Second)
	n.Schedule(packet.Act{At: 20 * des.Second, Kind: packet.ActScale, Name: "tables are made again"})
	finish(t, n)
	x := n.Series()[0]
	if x.Width != 40*des.Millisecond || len(x.Wide) != 750 {
		t.Errorf("%d bins of %v, want 750 of 40 ms", len(x.Wide), x.Width)
	}
	if len(x.Close) != 700 || x.Close[0].No != 9000 || x.Close[399].No != 12990 || x.Close[400].No != 19000 || x.Close[699].No != 21990 {
		t.Errorf("%d close bins, the first %+v", len(x.Close), x.Close[0])
	}
	for _, b := range x.Close {
		if late := b.No >= 20000; b.Delivered != 1 || late != (b.MaxDelay > 2e9) {
			t.Errorf("close bin %+v: want one delivered, held for more than 2 s if sent after 20 s", b)
		}
	}
	for i, b := range x.Wide {
		if b.Delivered != 4 {
			t.Errorf("wide bin %d: %d delivered, want 4", i, b.Delivered)
		}
	}
	if late := x.Wide[502].MaxDelay; late < 3.9e9 || late > 4e9 {
		t.Errorf("held for nearly 4 s, greatest delay %d ns", late)
	}
}

// Between two acts a port sends what the sources of a class sent.
func TestLoadsBetweenActs(t *testing.T) {
	p := plantOf(2, [3]des.Time{0, 1, des.Millisecond})
	p.Classes = append(p.Classes, nodes.Class{Name: "other"})
	a, b := between(p, 0, 0, 1), between(p, 1, 0, 1)
	cfg := packet.Config{Plant: p, WarmUp: des.Second, Length: 4 * des.Second, Sources: []packet.Source{
		{Way: a, Source: &beat{way: a, at: 500 * des.Microsecond, gap: 10 * des.Millisecond, size: 100, count: 1 << 30}},
		{Way: b, Source: &beat{way: b, at: 700 * des.Microsecond, gap: 20 * des.Millisecond, size: 1000, count: 1 << 30}},
	}}
	n := net(cfg, 0)
	n.Schedule(packet.Act{At: 2 * des.Second, Kind: packet.ActScale, Name: "double", Ways: []uint16{a}, Factor: 2})
	finish(t, n)
	for _, c := range []struct {
		from, to des.Time
		want     [2]uint64
	}{{des.Second, 2 * des.Second, [2]uint64{10_000, 50_000}}, {2 * des.Second, 4 * des.Second, [2]uint64{40_000, 100_000}}} {
		l := n.Loads(c.from, c.to)
		if len(l) != 1 || l[0].Circuit != 0 || l[0].From != 0 {
			t.Fatalf("loads %+v, want those of one port", l)
		}
		// a scaled stream begins anew with its old next packet, so one more or less
		if got := l[0].IPBytes; max(got[0], c.want[0])-min(got[0], c.want[0]) > 100 || got[1] != c.want[1] {
			t.Errorf("%v to %v: %d B, want %d B", c.from, c.to, got, c.want)
		}
	}
	if turns := n.Turns(0, 0); len(turns) != 1 || turns[0].State != nodes.PortUp || len(turns[0].Fibres) != 1 {
		t.Errorf("turns %+v, want one: up over one fibre from the start", turns)
	}
}
