package measure

import (
	"fmt"
	"math"
	"math/bits"
	"slices"
	"testing"

	"ferrule/des"
)

// arrival is one delivered packet of a worked sequence.
type arrival struct {
	seq   uint32
	delay int64
}

// slowConsecutive is the definition of RFC 5481, section 4.1, over the whole:
// by number of the later packet, for pairs of which both arrived.
func slowConsecutive(in []arrival) map[uint32]int64 {
	delay := map[uint32]int64{}
	for _, a := range in {
		delay[a.seq] = a.delay
	}
	diffs := map[uint32]int64{}
	for seq, d := range delay {
		if before, ok := delay[seq-1]; ok && seq > 0 {
			diffs[seq] = d - before
		}
	}
	return diffs
}

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

// slowOrder is the definition of RFC 4737, sections 3.3 and 5.2, over the whole.
func slowOrder(in []uint32) (reordered, three []uint32) {
	next := uint64(0)
	for i, s := range in {
		if uint64(s) >= next {
			next = uint64(s) + 1
			continue
		}
		reordered = append(reordered, s)
		if i >= 3 && in[i-1] > s && in[i-2] > s && in[i-3] > s {
			three = append(three, s)
		}
	}
	return reordered, three
}

// slowLoss is the definition of RFC 3357, sections 4 to 6, over the whole.
func slowLoss(lost []uint32, delta uint32) (r LossReport) {
	sorted := slices.Sorted(slices.Values(lost))
	length := uint64(0)
	end := func() {
		if length > 0 {
			r.Lengths[bits.Len64(length)]++
			r.Longest = max(r.Longest, length)
		}
	}
	for i, s := range sorted {
		r.Lost++
		if i > 0 && s-sorted[i-1] <= delta {
			r.Noticeable++
		}
		if i > 0 && s-sorted[i-1] == 1 {
			length++
			continue
		}
		end()
		length = 1
		r.Periods++
		if i > 0 {
			r.Apart[bits.Len32(s-sorted[i-1])]++
		}
	}
	end()
	return r
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

// Arrivals of RFC 4737, tables 1 to 3 and section 5.4.
func TestOrderWorked(t *testing.T) {
	for _, c := range []struct {
		in               []uint32
		reordered, three []uint32
	}{
		{[]uint32{1, 2, 3, 5, 6, 7, 8, 4, 9, 10}, []uint32{4}, []uint32{4}},
		{[]uint32{1, 2, 3, 4, 7, 5, 6, 8, 9, 10}, []uint32{5, 6}, nil},
		{[]uint32{1, 2, 3, 7, 8, 9, 10, 4, 5, 6, 11}, []uint32{4, 5, 6}, []uint32{4}},
		{[]uint32{1, 2, 3, 7, 8, 9, 4, 5, 6}, []uint32{4, 5, 6}, []uint32{4}},
	} {
		slow, slowThree := slowOrder(c.in)
		if !slices.Equal(slow, c.reordered) || !slices.Equal(slowThree, c.three) {
			t.Errorf("%v: the definition gives %v and %v", c.in, slow, slowThree)
		}
		var o Order
		var got []uint32
		for _, s := range c.in {
			if o.Add(s) {
				got = append(got, s)
			}
		}
		want := Order{Received: uint64(len(c.in)), Reordered: uint64(len(c.reordered)), Three: uint64(len(c.three))}
		if o.next, o.before = 0, [3]uint32{}; o != want || !slices.Equal(got, c.reordered) {
			t.Errorf("%v: %+v, reordered %v; want %+v, %v", c.in, o, got, want, c.reordered)
		}
	}
}

// Sources: RFC 3357, sections 4, 5.4.3 and 6.
func TestLossWorked(t *testing.T) {
	at := func(pairs ...uint64) (a [33]uint64) {
		for i := 0; i < len(pairs); i += 2 {
			a[bits.Len64(pairs[i])] += pairs[i+1]
		}
		return a
	}
	for _, c := range []struct {
		lost  []uint32
		delta uint32
		want  LossReport
	}{
		// Lengths 1, 1, 1, 2; distances 3, 2, 2, 1.
		{[]uint32{2, 5, 7, 9, 10}, 2, LossReport{Lost: 5, Periods: 4, Noticeable: 3, Longest: 2,
			Lengths: at(1, 3, 2, 1), Apart: at(3, 1, 2, 2)}},
		{[]uint32{20, 50}, 0, LossReport{Lost: 2, Periods: 2, Longest: 1, Lengths: at(1, 2), Apart: at(30, 1)}},
		{[]uint32{50, 125, 126, 127}, 99, LossReport{Lost: 4, Periods: 2, Noticeable: 3, Longest: 3,
			Lengths: at(1, 1, 3, 1), Apart: at(75, 1)}},
	} {
		if slow := slowLoss(c.lost, c.delta); slow != c.want {
			t.Errorf("%v: the definition gives %+v, want %+v", c.lost, slow, c.want)
		}
		l, back := LossRuns{Delta: c.delta}, LossRuns{Delta: c.delta}
		for i, s := range c.lost {
			l.Lost(s)
			back.Lost(c.lost[len(c.lost)-1-i])
		}
		if l.Report() != c.want || back.Report() != c.want {
			t.Errorf("%v: got %+v, backwards %+v; want %+v", c.lost, l.Report(), back.Report(), c.want)
		}
	}
	r := slowLoss([]uint32{2, 5, 7, 9, 10}, 2)
	if rate, ok := r.NoticeableRate(); !ok || rate != 3.0/5 {
		t.Errorf("noticeable rate %v, %v; want 3/5", rate, ok)
	}
	if m, ok := r.MeanLength(); !ok || m != 5.0/4 {
		t.Errorf("mean length %v, %v; want 5/4", m, ok)
	}
	var none LossReport
	if _, ok := none.NoticeableRate(); ok {
		t.Error("a rate of no losses is defined")
	}
	r.Merge(&none)
	twice := r
	twice.Merge(&r)
	if twice.Lost != 10 || twice.Periods != 8 || twice.Longest != 2 || twice.Lengths[1] != 6 || twice.Apart[2] != 6 {
		t.Errorf("merged with itself: %+v", twice)
	}
}

func TestLossOutsideTheWindow(t *testing.T) {
	var l LossRuns
	var all []uint32
	for i := range uint32(10 * lossWindow) {
		all = append(all, 10*i+100)
		l.Lost(10*i + 100)
	}
	if l.Report() != slowLoss(all, 0) {
		t.Errorf("more runs than the window, in order: %+v", l.Report())
	}
	l.Lost(105) // below what is settled
	l.Lost(100)
	l.Lost(all[len(all)-1]) // twice
	if r := l.Report(); r.Unplaced != 3 || r.Lost != uint64(len(all))+3 || r.Periods != uint64(len(all)) {
		t.Errorf("unplaced %d of %d in %d periods", r.Unplaced, r.Lost, r.Periods)
	}
	settled := all[9*lossWindow-1]
	l.Lost(settled + 1) // goes on where the last settled run ended
	if r := l.Report(); r.Lengths[2] != 1 || r.Periods != uint64(len(all)) || r.Longest != 2 {
		t.Errorf("a run that goes on past the settled: %+v", r)
	}
}

func TestMoments(t *testing.T) {
	// Law, Simulation Modeling and Analysis, ch. 4: mean 1.343, variance
	// 0.1675122; here in hundredths.
	var m, first, second Moments
	for i, v := range []int64{120, 150, 168, 189, 95, 149, 158, 155, 50, 109} {
		m.Add(v)
		if i < 4 {
			first.Add(v)
		} else {
			second.Add(v)
		}
	}
	if m.Mean() != 134.3 || math.Abs(m.Variance()-1675.122222) > 1e-6 || m.Min != 50 || m.Max != 189 {
		t.Errorf("mean %v, variance %v, in [%d, %d]", m.Mean(), m.Variance(), m.Min, m.Max)
	}
	second.Merge(first)
	second.Merge(Moments{})
	if second != m {
		t.Errorf("merged %+v, want %+v", second, m)
	}
	// Values that cancel in floating point: 10^15 + {-1, 0, 1}, by hand.
	var c Moments
	for _, d := range []int64{-1, 0, 1} {
		c.Add(-1e15 + d)
	}
	if c.Mean() != -1e15 || c.Variance() != 1 || c.StdDev() != 1 {
		t.Errorf("mean %v, variance %v; want -1e15, 1", c.Mean(), c.Variance())
	}
	var x Moments
	x.Add(math.MinInt64)
	x.Add(math.MaxInt64)
	if x.Mean() != -0.5 {
		t.Errorf("mean of the extremes %v, want -0.5", x.Mean())
	}
	var none Moments
	if !math.IsNaN(none.Mean()) || !math.IsNaN(none.Variance()) {
		t.Error("moments of nothing are defined")
	}
}

func TestTimeAverage(t *testing.T) {
	var a TimeAverage
	a.Set(0, 2)
	a.Set(10, 0)
	a.Set(15, 6)
	// (2·10 + 0·5 + 6·5) / 20, by hand.
	if got := a.Mean(20); got != 2.5 || a.Peak() != 6 || a.Level() != 6 {
		t.Errorf("mean %v, peak %d, level %d; want 2.5, 6, 6", got, a.Peak(), a.Level())
	}
	a.Restart(20)
	a.Set(24, 1)
	if got := a.Mean(30); got != (6*4+1*6)/10.0 {
		t.Errorf("mean after the restart %v, want 3", got)
	}
	if !math.IsNaN(new(TimeAverage).Mean(0)) {
		t.Error("a mean over no time is defined")
	}
	var big TimeAverage
	big.Set(0, math.MaxInt64)
	if got := big.Area(4 * des.Second); got != (des.Sum{Hi: 1_999_999_999_999, Lo: 1<<64 - 4_000_000_000_000}) {
		t.Errorf("area %v passes 64 bits wrongly", got)
	}
}

func TestMetersAllocateNothing(t *testing.T) {
	var j Jitter
	var c Consecutive
	var o Order
	var l LossRuns
	var m Moments
	var a TimeAverage
	seq := uint32(0)
	if n := testing.AllocsPerRun(2000, func() {
		seq += 1 + seq%3
		late := seq - seq%5
		j.Add(int64(seq % 17))
		c.Next(seq, 5)
		c.Overtaken(late, 9)
		o.Add(seq)
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
		var seqs []uint32
		for _, a := range arrivals {
			o.Add(a.seq)
			seqs = append(seqs, a.seq)
		}
		reordered, three := slowOrder(seqs)
		if o.Reordered != uint64(len(reordered)) || o.Three != uint64(len(three)) || o.Received != uint64(len(seqs)) {
			t.Fatalf("%v: %+v; by definition %v, %v", seqs, o, reordered, three)
		}

		// Gaps stay open when packets are lost, and a packet at most five places
		// late can be below no more than five newer gaps: all pairs are found.
		want, got := slowConsecutive(arrivals), fastConsecutive(arrivals)
		if fmt.Sprint(want) != fmt.Sprint(got) {
			t.Fatalf("%v: %v; by definition %v", arrivals, got, want)
		}

		l := LossRuns{Delta: uint32(delta)}
		for i, s := range lost { // every other pair swapped: reported out of order
			if i^1 < len(lost) {
				s = lost[i^1]
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
	var l LossRuns
	for _, bench := range []struct {
		name string
		call func(i uint32)
	}{
		{"jitter", func(i uint32) { j.Add(int64(i * 7 % 64)) }},
		{"consecutive", func(i uint32) { c.Next(i, int64(i%64)) }},
		{"order", func(i uint32) { o.Add(i) }},
		{"moments", func(i uint32) { m.Add(int64(i)) }},
		{"loss", func(i uint32) { l.Lost(2 * i) }},
	} {
		b.Run(bench.name, func(b *testing.B) {
			for i := uint32(0); b.Loop(); i++ {
				bench.call(i)
			}
		})
	}
}
