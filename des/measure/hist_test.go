package measure

import (
	"math"
	"math/bits"
	"math/rand/v2"
	"slices"
	"testing"
)

// nearestRank is the definition of RFC 2330, section 11.3: the smallest value
// of the sample with at least num/den of the sample at or below it.
func nearestRank(sample []uint64, num, den uint64) (uint64, bool) {
	sorted := slices.Sorted(slices.Values(sample))
	for i, v := range sorted {
		if uint64(i+1)*den >= num*uint64(len(sorted)) && num > 0 {
			return v, true
		}
	}
	return 0, false
}

func histOf(values ...uint64) *Hist {
	h := new(Hist)
	for _, v := range values {
		h.Add(v)
	}
	return h
}

type bar struct{ low, high, count uint64 }

func bars(h *Hist) (b []bar) {
	h.Each(func(low, high, count uint64) { b = append(b, bar{low, high, count}) })
	return b
}

func same(a, b *Hist) bool {
	return a.n == b.n && a.min == b.min && a.span == b.span && a.clipped == b.clipped && slices.Equal(bars(a), bars(b))
}

func TestBucketsTile(t *testing.T) {
	next := uint64(0)
	for i := range uint32(buckets) {
		low, high := boundsOf(i)
		if low != next || high < low {
			t.Fatalf("bucket %d is [%d, %d], want it to begin at %d", i, low, high, next)
		}
		if bucketOf(low) != i || bucketOf(high) != i {
			t.Fatalf("bucket %d: its ends fall in %d and %d", i, bucketOf(low), bucketOf(high))
		}
		if half := float64(high-low) / 2; half > float64(low)/256 {
			t.Fatalf("bucket [%d, %d]: the midpoint is off by more than 1/256", low, high)
		}
		next = high + 1
	}
	if next != HistLimit+1 {
		t.Errorf("buckets end at %d, want 2^43", next)
	}
	for _, v := range []uint64{HistLimit + 1, 1 << 50, math.MaxUint64} {
		if bucketOf(v) < buckets {
			t.Errorf("bucketOf(%d) = %d, want it past the last", v, bucketOf(v))
		}
	}
}

// Nearest rank on small samples. Sources: RFC 2330, section 11.3, shifted by 5
// to be non-negative; otherwise ceil(p·N) of the definition, worked by hand.
func TestQuantileWorked(t *testing.T) {
	rfc := []uint64{3, 12, 12, 9, 23, 0}
	five := []uint64{15, 20, 35, 40, 50}
	upTo := func(n uint64) (v []uint64) {
		for i := range n {
			v = append(v, i+1)
		}
		return v
	}
	for _, c := range []struct {
		sample   []uint64
		num, den uint64
		want     float64
		within   float64 // relative
	}{
		{rfc, 50, 100, 9, 0}, {rfc, 25, 100, 3, 0}, {rfc, 100, 100, 23, 0}, {rfc, 15, 100, 0, 0},
		{five, 5, 100, 15, 0}, {five, 30, 100, 20, 0}, {five, 40, 100, 20, 0},
		{five, 50, 100, 35, 0}, {five, 95, 100, 50, 0},
		{upTo(10), 50, 100, 5, 0}, {upTo(10), 90, 100, 9, 0}, {upTo(10), 95, 100, 10, 0}, {upTo(10), 99, 100, 10, 0},
		{upTo(1000), 50, 100, 500, 1.0 / 256}, {upTo(1000), 99, 100, 990, 1.0 / 256},
		{upTo(1000), 999, 1000, 999, 1.0 / 256}, {upTo(1000), 9999, 10000, 1000, 0},
		{upTo(100), 7, 100, 7, 0}, {upTo(100), 55, 100, 55, 0}, // 0.07·100 and 0.55·100 round up in floating point
	} {
		got, ok := histOf(c.sample...).Quantile(c.num, c.den)
		if !ok || math.Abs(got-c.want) > c.within*c.want {
			t.Errorf("quantile %d/%d of %d values = %v, %v; want %v", c.num, c.den, len(c.sample), got, ok, c.want)
		}
	}
	if r := Rank(999, 1000, 1000); r != 999 { // ceil(99.9/100·1000) is 1000 in floating point
		t.Errorf("Rank(999, 1000, 1000) = %d, want 999", r)
	}
	if r := Rank(1, 3, 4); r != 2 {
		t.Errorf("Rank(1, 3, 4) = %d, want 2", r)
	}
	if r := Rank(math.MaxUint64-1, math.MaxUint64, math.MaxUint64); r != math.MaxUint64-1 {
		t.Errorf("Rank of a product of 128 bits = %d", r)
	}
}

// The distribution of RFC 2330, section 11.3, shifted by 8 to be non-negative:
// F(-8) 0, F(-5) 1/6, F(-4.999) 1/6, F(7) 5/6, F(18) 1, F(239) 1.
func TestDistributionWorked(t *testing.T) {
	h := histOf(6, 15, 15, 12, 26, 3)
	for v, want := range map[uint64]uint64{0: 0, 2: 0, 3: 1, 4: 1, 15: 5, 26: 6, 247: 6} {
		if got := h.AtMost(v); got != want {
			t.Errorf("%d values at most %d, want %d", got, v, want)
		}
	}
}

func TestQuantileUndefined(t *testing.T) {
	var empty Hist
	if _, ok := empty.Quantile(1, 2); ok {
		t.Error("an empty histogram has a median")
	}
	if _, ok := empty.MedianWithLost(0); ok {
		t.Error("an empty histogram has a median of two")
	}
	if _, ok := histOf(1, 2).Quantile(0, 1); ok {
		t.Error("rank 0 has a value")
	}
	for _, c := range [][2]uint64{{1, 0}, {2, 1}} {
		func() {
			defer func() {
				if recover() == nil {
					t.Errorf("Quantile(%d, %d) did not panic", c[0], c[1])
				}
			}()
			histOf(1).Quantile(c[0], c[1])
		}()
	}
}

// Delays in ms with lost packets counted as greater than any. Sources: RFC
// 7679, sections 5.1 to 5.4.
func TestLostCountAsInfinite(t *testing.T) {
	h := histOf(100, 110, 90, 500)
	if v, ok := h.QuantileWithLost(50, 100, 1); !ok || v != 110 {
		t.Errorf("median of 100, 110, lost, 90, 500 = %v, %v; want 110", v, ok)
	}
	if v, ok := h.QuantileWithLost(1, 1, 1); ok {
		t.Errorf("maximum of a sample with a loss = %v, want none", v)
	}
	h = histOf(100, 110, 90)
	if v, ok := h.MedianWithLost(1); !ok || v != 105 {
		t.Errorf("median of 100, 110, lost, 90 = %v, %v; want 105", v, ok)
	}
	if v, ok := h.MedianWithLost(3); ok {
		t.Errorf("median with its upper value lost = %v, want none", v)
	}
	if v, ok := h.Min(); !ok || v != 90 {
		t.Errorf("minimum = %v, %v; want 90", v, ok)
	}
	if n := h.AtMost(103); n != 2 {
		t.Errorf("at most 103: %d, want 2", n)
	}
}

// The delivered delays of 2000 packets, in units of 100 us; the objectives of
// ITU-T Y.1541 take the quantile 0.999 less the minimum. With losses counted
// the quantile moves up (RFC 7679, section 5). Computed by hand.
func TestVariationObjective(t *testing.T) {
	var h Hist
	for range 1990 {
		h.Add(100)
	}
	for _, v := range []uint64{110, 120, 130, 140, 150, 160, 170, 400, 410, 600} {
		h.Add(v)
	}
	// The exact mean is 100.695; the midpoints of 400, 410 and 600 are 0.5, 0.5
	// and 1.5 above them.
	if m := h.Mean(); math.Abs(m-(100.695+2.5/2000)) > 1e-9 {
		t.Errorf("mean of midpoints %v, want 100.69625", m)
	}
	q, _ := h.Quantile(999, 1000)
	if lowest, _ := h.Min(); math.Abs(q-float64(lowest)-300) > 400.0/256 {
		t.Errorf("quantile less minimum = %v - %d, want 300", q, lowest)
	}
	for _, c := range []struct {
		lost uint64
		want float64
		ok   bool
	}{{0, 400, true}, {1, 410, true}, {2, 600, true}, {3, 0, false}} {
		q, ok := h.QuantileWithLost(999, 1000, c.lost)
		if ok != c.ok || math.Abs(q-c.want) > c.want/256 {
			t.Errorf("%d lost: %v, %v; want %v, %v", c.lost, q, ok, c.want, c.ok)
		}
	}
}

func TestClipped(t *testing.T) {
	h := histOf(1, HistLimit, HistLimit+1, math.MaxUint64, 5)
	if h.Clipped() != 2 || h.Count() != 5 {
		t.Errorf("clipped %d of %d, want 2 of 5", h.Clipped(), h.Count())
	}
	if b := bars(h); b[len(b)-1] != (bar{HistLimit - 1<<35 + 1, HistLimit, 3}) {
		t.Errorf("last bar %v", b[len(b)-1])
	}
	if v, _ := h.Max(); v != math.MaxUint64 {
		t.Errorf("maximum %d", v)
	}
	if v, _ := h.Quantile(1, 1); v != math.MaxUint64 {
		t.Errorf("quantile 1 = %v", v)
	}
}

func TestCounterPasses32Bits(t *testing.T) {
	h := histOf(7, 300)
	h.addMany(bucketOf(300), math.MaxUint32-1) // as 2^32-2 calls of Add would
	h.n += math.MaxUint32 - 1
	for range 3 {
		h.Add(300)
	}
	want := []bar{{7, 7, 1}, {300, 301, 1<<32 + 2}}
	if b := bars(h); !slices.Equal(b, want) {
		t.Fatalf("bars %v, want %v", b, want)
	}
	h.addMany(7, math.MaxUint32)
	h.n += math.MaxUint32
	o := h.Clone()
	h.Merge(&o)
	want = []bar{{7, 7, 1 << 33}, {300, 301, 1<<33 + 4}}
	if b := bars(h); !slices.Equal(b, want) || h.Count() != 1<<34+4 {
		t.Errorf("after the merge %v of %d, want %v", b, h.Count(), want)
	}
	if v, ok := h.Quantile(3, 4); !ok || v != 300 {
		t.Errorf("quantile 3/4 = %v, %v; want 300, the greatest", v, ok)
	}
	if h.Bytes() <= o.Bytes()-1000 || h.Bytes() > 2000 {
		t.Errorf("holds %d bytes", h.Bytes())
	}
}

// laws are the shapes of delay that quantiles are tried on, in ns.
var laws = []struct {
	name string
	draw func(r *rand.Rand) uint64
}{
	{"exponential", func(r *rand.Rand) uint64 { return uint64(1e5 * r.ExpFloat64()) }},
	{"lognormal", func(r *rand.Rand) uint64 { return uint64(2e4 * math.Exp(1.2*r.NormFloat64())) }},
	{"pareto", func(r *rand.Rand) uint64 { return uint64(1e3 * math.Pow(1-r.Float64(), -1/1.1)) }},
	{"constant", func(*rand.Rand) uint64 { return 123_457 }},
	{"small", func(r *rand.Rand) uint64 { return r.Uint64N(200) }},
}

func TestQuantileWithinBound(t *testing.T) {
	for _, law := range laws {
		r := rand.New(rand.NewPCG(1, 2))
		sample := make([]uint64, 20_011)
		for i := range sample {
			sample[i] = law.draw(r)
		}
		h := histOf(sample...)
		for _, p := range [][2]uint64{{1, 100_000}, {1, 100}, {1, 4}, {1, 2}, {9, 10}, {99, 100}, {999, 1000}, {9999, 10000}, {1, 1}} {
			want, _ := nearestRank(sample, p[0], p[1])
			got, ok := h.Quantile(p[0], p[1])
			if !ok || math.Abs(got-float64(want)) > 0.00390625*float64(want) {
				t.Errorf("%s: quantile %d/%d = %v, exact %d", law.name, p[0], p[1], got, want)
			}
		}
	}
}

func TestMergeIsExactInAnyOrder(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 4))
	var parts [6]Hist
	var whole Hist
	for i := range 30_000 {
		v := laws[i%3].draw(r) << (i % 31)
		parts[i%7%6].Add(v)
		whole.Add(v)
	}
	for range 20 {
		var h Hist
		for _, k := range r.Perm(len(parts)) {
			h.Merge(&parts[k])
		}
		if !same(&h, &whole) {
			t.Fatal("merged parts differ from the whole")
		}
	}
	var none Hist
	whole.Merge(&none)
	none.Merge(&parts[0])
	if !same(&none, &parts[0]) {
		t.Error("an empty histogram does not take over what is merged into it")
	}
}

func TestCloneSharesNothing(t *testing.T) {
	h := histOf(1, 500, 1<<20)
	c := h.Clone()
	h.Add(1)
	h.Add(1 << 30)
	c.Add(500)
	if !same(&c, histOf(1, 500, 500, 1<<20)) || !same(h, histOf(1, 1, 500, 1<<20, 1<<30)) {
		t.Errorf("clone %v, original %v", bars(&c), bars(h))
	}
}

func TestHistAddAllocatesNothing(t *testing.T) {
	h := histOf(100, 1000, 100_000)
	if n := testing.AllocsPerRun(1000, func() { h.Add(100); h.Add(1000); h.Add(100_000) }); n != 0 {
		t.Errorf("%v allocations, want 0", n)
	}
}

func TestHistBytes(t *testing.T) {
	var h Hist
	empty := h.Bytes()
	for v := uint64(1 << 14); v < 1<<16; v += 64 {
		h.Add(v)
	}
	// Two octaves are four pages of 256 bytes; the reserve is at most a quarter.
	if got := h.Bytes() - empty; got < 4*256 || got > 5*256 {
		t.Errorf("two octaves hold %d bytes, want 1024 to 1280", got)
	}
	if empty > 256 {
		t.Errorf("an empty histogram holds %d bytes, want at most 256", empty)
	}
}

func FuzzHist(f *testing.F) {
	f.Add([]byte{1, 2, 3, 200, 7, 63, 255}, uint64(1), uint64(2))
	f.Fuzz(func(t *testing.T, in []byte, num, den uint64) {
		var sample []uint64
		for i := 1; i < len(in); i += 2 {
			sample = append(sample, uint64(in[i])<<(in[i-1]%36)|uint64(in[i-1]))
		}
		den = den%10_000 + 1
		num %= den + 1
		h := histOf(sample...)
		want, wantOK := nearestRank(sample, num, den)
		got, ok := h.Quantile(num, den)
		if ok != wantOK || math.Abs(got-float64(want)) > float64(want)/256 {
			t.Fatalf("%v: quantile %d/%d = %v, %v; exact %d, %v", sample, num, den, got, ok, want, wantOK)
		}
		var total uint64
		h.Each(func(low, high, count uint64) {
			total += count
			if bits.Len64(low) != bits.Len64(high) {
				t.Fatalf("bar [%d, %d] crosses an octave", low, high)
			}
		})
		if total != uint64(len(sample)) || total != h.Count() {
			t.Fatalf("%d values, bars hold %d", len(sample), total)
		}
	})
}

func BenchmarkHistAdd(b *testing.B) {
	r := rand.New(rand.NewPCG(5, 6))
	values := make([]uint64, 4096)
	for i := range values {
		values[i] = laws[1].draw(r)
	}
	var h Hist
	for i := 0; b.Loop(); i++ {
		h.Add(values[i%4096])
	}
}

func BenchmarkHistAddOneOctave(b *testing.B) {
	var h Hist
	for i := uint64(0); b.Loop(); i++ {
		h.Add(1<<17 | i*2654435761&0x1ffff)
	}
}

func BenchmarkHistQuantile(b *testing.B) {
	r := rand.New(rand.NewPCG(5, 6))
	var h Hist
	for range 100_000 {
		h.Add(laws[1].draw(r))
	}
	for b.Loop() {
		h.Quantile(999, 1000)
	}
}
