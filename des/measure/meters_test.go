package measure

import (
	"fmt"
	"math"
	"slices"
	"testing"

	"ferrule/des"
)

func fastConsecutive(in []arrival) map[uint32]int64 {
	var c Consecutive
	diffs := map[uint32]int64{}
	for _, a := range in {
		diff, later, ok, laterOK := c.Overtaken(a.seq, a.delay)
		if ok {
			diffs[a.seq] = diff
		}
		if laterOK {
			diffs[a.seq+1] = later
		}
	}
	return diffs
}

// The recursion of RFC 3550, section A.8, in exact fractions: clock of 8 kHz,
// packets of 20 ms. The last real value is 97661566193/2^32.
func TestJitterWorked(t *testing.T) {
	rows := []struct {
		transit int64
		real    float64
		scaled  int64
	}{
		{800, 0, 0}, {816, 1, 16}, {800, 1.9375, 31}, {840, 4.31640625, 69}, {800, 6.546630859375, 105},
		{800, 6.1374664306640625, 98}, {960, 15.753874778747559, 252}, {800, 24.769257605075836, 396},
		{808, 23.721179004758596, 379}, {800, 97661566193.0 / (1 << 32), 363},
	}
	var j Jitter
	var s int64
	for i, r := range rows {
		j.Add(r.transit)
		if i > 0 {
			s = JitterScaled(s, max(r.transit-rows[i-1].transit, rows[i-1].transit-r.transit))
		}
		if v, ok := j.Value(); v != r.real || ok != (i > 0) || s != r.scaled {
			t.Errorf("arrival %d: jitter %v, %v, scaled %d; want %v, %d", i+1, v, ok, s, r.real, r.scaled)
		}
	}
	if p, ok := j.Peak(); !ok || p != 24.769257605075836 {
		t.Errorf("peak %v, %v", p, ok)
	}
}

// A constant |D| = c from rest gives c(1-(15/16)^n): solved from the recursion.
func TestJitterStep(t *testing.T) {
	const c = 80
	var j Jitter
	j.Add(0)
	for n := 1; n <= 100; n++ {
		j.Add(int64(n % 2 * c))
		v, _ := j.Value()
		if want := c * (1 - math.Pow(15.0/16, float64(n))); math.Abs(v-want) > 1e-12*want {
			t.Errorf("after %d: %v, want %v", n, v, want)
		}
		if n == 16 && math.Abs(v-51.5141) > 5e-5 || n == 100 && math.Abs(v-79.8740) > 5e-5 {
			t.Errorf("after %d: %v", n, v)
		}
	}
}

func TestConsecutiveWorked(t *testing.T) {
	for _, c := range []struct {
		source string
		in     []arrival
		want   map[uint32]int64
	}{
		{"RFC 5481, section 4.4", []arrival{{1, 20}, {2, 10}, {3, 20}, {4, 25}, {5, 20}},
			map[uint32]int64{2: -10, 3: 10, 4: 5, 5: -5}},
		{"RFC 5481, section 4.1, by hand: the second is lost", []arrival{{1, 20}, {3, 30}, {4, 25}},
			map[uint32]int64{4: -5}},
		{"RFC 4737, table 1", []arrival{{1, 68}, {2, 68}, {3, 68}, {5, 68}, {6, 68}, {7, 68}, {8, 68}, {4, 150}, {9, 68}, {10, 68}},
			map[uint32]int64{2: 0, 3: 0, 4: 82, 5: -82, 6: 0, 7: 0, 8: 0, 9: 0, 10: 0}},
		{"RFC 4737, table 2", []arrival{{1, 68}, {2, 68}, {3, 68}, {4, 68}, {7, 68}, {5, 109}, {6, 90}, {8, 68}, {9, 68}, {10, 68}},
			map[uint32]int64{2: 0, 3: 0, 4: 0, 5: 41, 6: -19, 7: -22, 8: 0, 9: 0, 10: 0}},
		{"by hand: a gap filled from within", []arrival{{0, 1}, {7, 0}, {3, 30}, {5, 50}, {4, 4}, {6, 6}, {1, 2}, {2, 20}},
			map[uint32]int64{1: 1, 2: 18, 3: 10, 4: -26, 5: 46, 6: -44, 7: -6}},
		{"by hand: backwards from 2 to 0", []arrival{{2, 9}, {1, 5}, {0, 2}}, map[uint32]int64{1: 3, 2: 4}},
	} {
		if slow := slowConsecutive(c.in); fmt.Sprint(slow) != fmt.Sprint(c.want) {
			t.Errorf("%s: the definition gives %v, want %v", c.source, slow, c.want)
		}
		if got := fastConsecutive(c.in); fmt.Sprint(got) != fmt.Sprint(c.want) {
			t.Errorf("%s: got %v, want %v", c.source, got, c.want)
		}
	}
}

// RFC 5481, section 4.4: one-way delays of 20, 10, 20, 25, 20 ms have PDV 10, 0,
// 10, 15, 10 of range 15, and IPDV of range 20.
func TestVariationWorked(t *testing.T) {
	in := []arrival{{1, 20}, {2, 10}, {3, 20}, {4, 25}, {5, 20}}
	if got, want := slowVariation(in), []int64{10, 0, 10, 15, 10}; !slices.Equal(got, want) {
		t.Errorf("PDV by definition %v, want %v", got, want)
	}
	if got, want := slowVariation([]arrival{{1, 20}, {3, 30}, {4, 25}}), []int64{0, 10, 5}; !slices.Equal(got, want) {
		t.Errorf("PDV with one lost, by definition %v, want %v", got, want)
	}
	var delay, diff Moments
	var c Consecutive
	for _, a := range in {
		delay.Add(a.delay)
		if d, ok := c.Next(a.seq, a.delay); ok {
			diff.Add(d)
		}
	}
	if delay.Max-delay.Min != 15 || diff.Max-diff.Min != 20 || diff.N != 4 {
		t.Errorf("ranges %d and %d of %d, want 15 and 20 of 4", delay.Max-delay.Min, diff.Max-diff.Min, diff.N)
	}
	// Differences telescope: their mean is (last - first)/(n-1), here 0.
	if diff.Mean() != 0 || diff.Sum != (des.Sum{}) {
		t.Errorf("mean difference %v, want 0", diff.Mean())
	}
}

func TestNextIsTheFirstHalfOfOvertaken(t *testing.T) {
	var a, b Consecutive
	for _, p := range []arrival{{3, 7}, {4, 9}, {8, 1}, {6, 4}, {7, 2}, {9, 0}, {5, 5}, {0, 3}, {1, 4}} {
		diff, ok := a.Next(p.seq, p.delay)
		wantDiff, _, want, _ := b.Overtaken(p.seq, p.delay)
		if diff != wantDiff || ok != want || a != b {
			t.Errorf("packet %d: Next gives %d, %v; Overtaken %d, %v", p.seq, diff, ok, wantDiff, want)
		}
	}
}

func TestConsecutiveForgetsTheLowestGap(t *testing.T) {
	var c Consecutive
	c.Next(0, 0)
	for i := range uint32(consecutiveGaps + 1) { // gaps at 1, 3, 5 ...
		c.Next(2*i+2, 100)
	}
	if _, ok := c.Next(1, 5); ok {
		t.Error("a pair beside a forgotten gap was found")
	}
	if diff, ok := c.Next(3, 5); !ok || diff != -95 {
		t.Errorf("beside the lowest gap kept: %d, %v; want -95", diff, ok)
	}
}

func TestMetersAllocateNothing(t *testing.T) {
	var j Jitter
	var c Consecutive
	var o Order
	var l LossRuns
	var m Moments
	var a TimeAverage
	var e Extents
	seq := uint32(0)
	if n := testing.AllocsPerRun(2000, func() {
		seq += 1 + seq%3
		late := seq - seq%5
		j.Add(int64(seq % 17))
		c.Next(seq, 5)
		c.Overtaken(late, 9)
		o.Add(late)
		e.Add(late, des.Time(seq))
		l.Lost(late)
		m.Add(int64(seq))
		a.Set(des.Time(seq), 3)
	}); n != 0 {
		t.Errorf("%v allocations, want 0", n)
	}
}

// shuffled turns bytes into packets: some lost, the others moved back in
// arrival by at most limit places.
func shuffled(in []byte, limit int) (arrivals []arrival, lost []uint32) {
	type late struct {
		arrival
		place int
	}
	var q []late
	for i, b := range in {
		if b%4 == 0 {
			lost = append(lost, uint32(i))
			continue
		}
		q = append(q, late{arrival{uint32(i), int64(b)}, i + int(b>>2)%limit})
	}
	slices.SortStableFunc(q, func(a, b late) int { return a.place - b.place })
	for _, a := range q {
		arrivals = append(arrivals, a.arrival)
	}
	return arrivals, lost
}

func FuzzMeters(f *testing.F) {
	f.Add([]byte{1, 255, 3, 4, 5, 0, 0, 9, 250, 2, 2, 2}, uint8(2))
	f.Add([]byte("a sequence with packets lost and packets out of order in it"), uint8(0))
	f.Fuzz(func(t *testing.T, in []byte, delta uint8) {
		in = in[:min(len(in), 400)]
		arrivals, lost := shuffled(in, 6)
		var o Order
		var e Extents
		var j Jitter
		var m Moments
		var seqs []uint32
		var times []des.Time
		var extents []behind
		var delays []int64
		for i, a := range arrivals {
			now := des.Time(3 * i)
			seqs, times, delays = append(seqs, a.seq), append(times, now), append(delays, a.delay)
			reordered := o.Add(a.seq)
			extent, late, ok := e.Add(a.seq, now)
			if reordered != ok {
				t.Fatalf("%v: packet %d: reordered %v, has an extent %v", seqs, a.seq, reordered, ok)
			}
			if ok {
				extents = append(extents, behind{seq: a.seq, extent: int(extent), late: late})
			}
			j.Add(a.delay)
			m.Add(a.delay)
		}
		three := uint64(0)
		slow := slowOrder(seqs, times, 1)
		for i, b := range slow {
			if b.n >= 3 {
				three++
			}
			slow[i].bytes, slow[i].n = 0, 0
		}
		if !slices.Equal(slow, extents) || o.Three != three || o.Reordered != uint64(len(slow)) || o.Received != uint64(len(seqs)) {
			t.Fatalf("%v: %+v, %v; by definition %v, %d", seqs, o, extents, slow, three)
		}
		if v, _ := j.Value(); math.Abs(v-slowJitter(arrivals)) > 1e-12*256 {
			t.Fatalf("%v: jitter %v; by definition %v", arrivals, v, slowJitter(arrivals))
		}
		if len(delays) > 1 {
			if mean, variance := slowMoments(delays); m.Mean() != mean || m.Variance() != variance {
				t.Fatalf("%v: mean %v, variance %v; by definition %v, %v", delays, m.Mean(), m.Variance(), mean, variance)
			}
		}

		// Gaps stay open when packets are lost, and a packet at most five places
		// late can be below no more than five newer gaps: all pairs are found.
		want, got := slowConsecutive(arrivals), fastConsecutive(arrivals)
		if fmt.Sprint(want) != fmt.Sprint(got) {
			t.Fatalf("%v: %v; by definition %v", arrivals, got, want)
		}

		l := LossRuns{Delta: uint32(delta)}
		for i, s := range lost { // out of order: blocks of eight backwards
			if i^7 < len(lost) {
				s = lost[i^7]
			}
			l.Lost(s)
		}
		if r := l.Report(); r != slowLoss(lost, uint32(delta)) {
			t.Fatalf("lost %v: %+v; by definition %+v", lost, r, slowLoss(lost, uint32(delta)))
		}
	})
}

func BenchmarkMeters(b *testing.B) {
	var j Jitter
	var c Consecutive
	var o Order
	var m Moments
	var e Extents
	var l LossRuns
	for _, bench := range []struct {
		name string
		call func(i uint32)
	}{
		{"jitter", func(i uint32) { j.Add(int64(i * 7 % 64)) }},
		{"consecutive", func(i uint32) { c.Next(i, int64(i%64)) }},
		{"order", func(i uint32) { o.Add(i) }},
		{"moments", func(i uint32) { m.Add(int64(i)) }},
		{"extents", func(i uint32) { e.Add(i, des.Time(i)) }},
		{"loss", func(i uint32) { l.Lost(2 * i) }},
	} {
		b.Run(bench.name, func(b *testing.B) {
			for i := uint32(0); b.Loop(); i++ {
				bench.call(i)
			}
		})
	}
}
