package random

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"
	"unsafe"

	"gonum.org/v1/gonum/mathext/prng"
	"gonum.org/v1/gonum/stat/distuv"
)

var _ rand.Source = (*Stream)(nil)

// The values are those of this package's first release. Results depend on
// them: a change here changes every run ever published.
func TestGolden(t *testing.T) {
	s := NewStream(1, "flow/12/gap")
	got := []uint64{
		Hash(""), Hash("a"), Hash("video-tn.out"),
		Draw(0, 0, 0, 0), Draw(1, Hash("tarn"), 7, 3), Draw(1, Hash("tarn"), 3, 7),
		s.Uint64(), s.Uint64(), s.Uint64(),
		math.Float64bits(s.Exp()), math.Float64bits(s.Norm()), math.Float64bits(s.Float64()),
	}
	want := []uint64{
		0xf52a15e9a9b5e89b, 0x2c0bdbf481420f8, 0xa615753970dadc74,
		0x2ffe1695153414e0, 0xb0d4e735e5cd784f, 0x2608fe8e9d91ac00,
		0x370b7aefba464370, 0x342cf41da4bd8aa, 0x6706f9701c2bd4f9,
		0x3fe89a7cf7b6de5e, 0x3fe2937385f226ea, 0x3fdaf79d9a4c8e2e,
	}
	if !slices.Equal(got, want) {
		t.Errorf("got %#x\nwant %#x", got, want)
	}
}

// FNV-1a of "a" is 0xaf63dc4c8601ec8c (RFC 9923, test values); SplitMix64
// seeded with 1234567 begins with 6457827717110365317 (value from memory, as
// widely published).
func TestHashParts(t *testing.T) {
	if got, want := Hash("a"), mix(0xaf63dc4c8601ec8c); got != want {
		t.Errorf("Hash(a) = %#x, want %#x", got, want)
	}
	if got := mix(1234567 + golden); got != 6457827717110365317 {
		t.Errorf("SplitMix64 begins with %d, want 6457827717110365317", got)
	}
}

// gonum's generator of the same name, an independent implementation, seeds
// itself by SplitMix64, which is repeated here.
func TestStreamAgainstGonum(t *testing.T) {
	const seed = 42
	var s Stream
	for i, w := range []*uint64{&s.s0, &s.s1, &s.s2, &s.s3} {
		*w = mix(seed + golden*uint64(i+1))
	}
	ref := prng.NewXoshiro256plusplus(seed)
	for i := range 1000 {
		if g, w := s.Uint64(), ref.Uint64(); g != w {
			t.Fatalf("word %d: %#x, want %#x", i, g, w)
		}
	}
}

func TestStreamIsAValue(t *testing.T) {
	a := NewStream(1, "x")
	a.Exp()
	b := a
	for range 1000 {
		if a.Norm() != b.Norm() || a.Exp() != b.Exp() {
			t.Fatal("a copy of a stream went another way")
		}
	}
	if n := unsafe.Sizeof(a); n != 32 {
		t.Errorf("a Stream has %d bytes, want 32", n)
	}
}

func TestUnitIsOpen(t *testing.T) {
	if u := Unit(0); u != 0x1p-53 {
		t.Errorf("Unit(0) = %v, want 2^-53", u)
	}
	if u := Unit(math.MaxUint64); u != 1-0x1p-53 {
		t.Errorf("Unit(max) = %v, want 1-2^-53", u)
	}
}

// Flipping any one bit of any part of a key must flip each bit of the draw
// about half of the time. Over 4096 keys the count of flips of one output bit
// is binomial with standard deviation 0.5/sqrt(4096) = 0.0078; among the
// 4 x 64 x 64 = 16384 pairs of bits the largest deviation expected is about
// 4 standard deviations, 6 are allowed.
func TestDrawAvalanche(t *testing.T) {
	const keys = 4096
	var flips [4][64][64]int
	for k := range uint64(keys) {
		key := [4]uint64{k % 8, Hash(string(rune('a' + k%26))), k, k % 5}
		base := Draw(key[0], key[1], key[2], key[3])
		for part := range key {
			for bit := range 64 {
				other := key
				other[part] ^= 1 << bit
				d := base ^ Draw(other[0], other[1], other[2], other[3])
				for o := range 64 {
					flips[part][bit][o] += int(d >> o & 1)
				}
			}
		}
	}
	worst := 0.0
	for part := range flips {
		for bit := range flips[part] {
			for _, n := range flips[part][bit] {
				worst = max(worst, math.Abs(float64(n)/keys-0.5))
			}
		}
	}
	if limit := 6 * 0.5 / math.Sqrt(keys); worst > limit {
		t.Errorf("a bit of the draw flips with probability off 0.5 by %v, limit %v", worst, limit)
	}
}

// Draws along each part of the key are uniform and uncorrelated with their
// neighbour.
func TestDrawIsUniform(t *testing.T) {
	const n = 100_000
	for part, at := range []func(i uint64) uint64{
		func(i uint64) uint64 { return Draw(i, 5, 0, 0) },
		func(i uint64) uint64 { return Draw(1, i, 0, 0) },
		func(i uint64) uint64 { return Draw(1, 5, i, 0) },
		func(i uint64) uint64 { return Draw(1, 5, 0, i) },
	} {
		x := make([]float64, n)
		lag := 0.0
		for i := range x {
			x[i] = Unit(at(uint64(i)))
			if i > 0 {
				lag += (x[i] - 0.5) * (x[i-1] - 0.5) * 12 / n
			}
		}
		ksTest(t, "part "+string(rune('0'+part)), x, func(x float64) float64 { return x })
		if limit := 4 / math.Sqrt(n); math.Abs(lag) > limit {
			t.Errorf("part %d: correlation of neighbours %v, limit %v", part, lag, limit)
		}
	}
}

// Two named streams of one seed, and one name under two seeds, are
// uncorrelated within four standard deviations, 4/sqrt(n).
func TestStreamsAreApart(t *testing.T) {
	const n = 1_000_000
	base := NewStream(1, "flow/1")
	for _, other := range []Stream{NewStream(1, "flow/2"), NewStream(2, "flow/1"), NewStream(1, "")} {
		a, sum := base, 0.0
		for range n {
			sum += (a.Float64() - 0.5) * (other.Float64() - 0.5) * 12
		}
		if r, limit := sum/n, 4/math.Sqrt(n); math.Abs(r) > limit {
			t.Errorf("correlation %v, limit %v", r, limit)
		}
	}
}

// The tables must be what the method's definition says: equal areas, edges
// falling to zero, densities of the edges.
func TestZigguratTables(t *testing.T) {
	check := func(name string, x, y *[layers + 1]float64, density func(float64) float64, tail float64) {
		area := x[0] * density(x[1])
		if got := x[1]*y[1] + tail; math.Abs(got/area-1) > 1e-13 {
			t.Errorf("%s: base area %v, want %v", name, got, area)
		}
		for i := 1; i <= layers; i++ {
			if math.Abs(y[i]/density(x[i])-1) > 1e-13 {
				t.Errorf("%s: density at edge %d is %v", name, i, y[i])
			}
			if i < layers {
				if got := x[i] * (y[i+1] - y[i]); math.Abs(got/area-1) > 1e-11 {
					t.Errorf("%s: layer %d has area %v, want %v", name, i, got, area)
				}
			}
		}
		if x[layers] != 0 || y[layers] != 1 {
			t.Errorf("%s: ends at (%v, %v), want (0, 1)", name, x[layers], y[layers])
		}
	}
	check("exp", &expX, &expY, func(x float64) float64 { return math.Exp(-x) }, math.Exp(-expX[1]))
	check("norm", &normX, &normY, func(x float64) float64 { return math.Exp(-x * x / 2) },
		math.Sqrt(math.Pi/2)*math.Erfc(normX[1]/math.Sqrt2))
}

// A point at x of layer i beside the sure part must be kept with probability
// (f(x) - f(lower edge)) / (f(upper) - f(lower)), by the definition of the
// method; the share of 20000 trials is within four standard deviations.
func TestZigguratEdges(t *testing.T) {
	const n = 20_000
	s := NewStream(4, "edges")
	check := func(name string, l *[layers]layer, y *[layers + 1]float64, f func(float64) float64, slow func(uint64) float64) {
		for _, i := range []uint64{1, 2, 60, 128, 200, 254, 255} {
			for _, at := range []float64{0.1, 0.5, 0.9} {
				m := l[i].sure + uint64(at*float64(1<<53-l[i].sure)) | 1
				x := float64(m) * l[i].width
				kept := 0.0
				for range n {
					if math.Abs(slow(m<<11|i)) == x {
						kept++
					}
				}
				p := (f(x) - y[i]) / (y[i+1] - y[i])
				if d, limit := math.Abs(kept/n-p), 4*math.Sqrt(p*(1-p)/n); d > limit {
					t.Errorf("%s: layer %d at %v keeps %v, want %v within %v", name, i, at, kept/n, p, limit)
				}
			}
		}
	}
	check("exp", &expLayers, &expY, func(x float64) float64 { return math.Exp(-x) }, s.expSlow)
	check("norm", &normLayers, &normY, func(x float64) float64 { return math.Exp(-x * x / 2) }, s.normSlow)

	// Beyond the last edge the law is what it is given that it lies there.
	e, z := make([]float64, n), make([]float64, n)
	for i := range n {
		e[i], z[i] = s.expSlow(1<<64-layers), s.normTail() // the last point of layer 0
	}
	r := normX[1]
	ksTest(t, "exp tail", e, func(x float64) float64 { return -math.Expm1(expX[1] - x) })
	ksTest(t, "norm tail", z, func(x float64) float64 { return 1 - math.Erfc(x/math.Sqrt2)/math.Erfc(r/math.Sqrt2) })
}

func TestExpAndNorm(t *testing.T) {
	const n = 1_000_000
	for _, seed := range []uint64{1, 2, 3} {
		s := NewStream(seed, "variates")
		e, z, u := make([]float64, n), make([]float64, n), make([]float64, n)
		for i := range n {
			e[i], z[i], u[i] = s.Exp(), s.Norm(), s.Float64()
		}
		ksTest(t, "Exp", e, distuv.Exponential{Rate: 1}.CDF)
		ksTest(t, "Norm", z, distuv.UnitNormal.CDF)
		ksTest(t, "Float64", u, func(x float64) float64 { return x })
		// Each end of the ziggurat: the top layers, the tail, and its tail.
		tails(t, "Exp", e, distuv.Exponential{Rate: 1}.CDF, 0.001, 0.01, expX[1], 10)
		tails(t, "Norm", z, distuv.UnitNormal.CDF, -4, -normX[1], -0.01, 0, 0.01, normX[1], 4)
	}
}

func TestFillExp(t *testing.T) {
	a := NewStream(1, "fill")
	b := a
	got := make([]float64, 100_000)
	for _, n := range []int{0, 1, 7, len(got)} {
		a.FillExp(got[:n])
		for i := range n {
			if want := b.Exp(); got[i] != want {
				t.Fatalf("element %d of %d is %v, want %v", i, n, got[i], want)
			}
		}
		if a != b {
			t.Fatalf("after %d elements the streams differ", n)
		}
	}
}

// tails compares the share of samples at or below each x with its
// probability, to four standard deviations of the binomial.
func tails(t *testing.T, name string, samples []float64, cdf func(float64) float64, at ...float64) {
	t.Helper()
	n := float64(len(samples))
	for _, x := range at {
		below := 0.0
		for _, v := range samples {
			if v <= x {
				below++
			}
		}
		p := cdf(x)
		if d, limit := math.Abs(below/n-p), 4*math.Sqrt(p*(1-p)/n); d > limit {
			t.Errorf("%s: P(X <= %v) = %v, want %v within %v", name, x, below/n, p, limit)
		}
	}
}

// ksTest fails if sqrt(n) D exceeds 1.949475, the 0.1 % critical value of the
// Kolmogorov-Smirnov statistic in the limit of many samples (computed from
// Kolmogorov's series, 1933). The law must be continuous.
func ksTest(t *testing.T, name string, samples []float64, cdf func(float64) float64) {
	t.Helper()
	slices.Sort(samples)
	n := float64(len(samples))
	d := 0.0
	for i, x := range samples {
		p := cdf(x)
		d = max(d, float64(i+1)/n-p, p-float64(i)/n)
	}
	if got := math.Sqrt(n) * d; got > 1.949475 {
		t.Errorf("%s: Kolmogorov-Smirnov statistic %v exceeds 1.949475", name, got)
	}
}

func TestDrawsAllocateNothing(t *testing.T) {
	s := NewStream(1, "x")
	a := NewAlias([]uint16{40, 576, 1500}, []float64{7, 4, 1})
	var sink float64
	if n := testing.AllocsPerRun(1000, func() {
		sink += s.Exp() + s.Norm() + s.Float64() + Unit(Draw(1, 2, 3, 4)) + float64(a.Pick(s.Uint64())) + float64(Hash("name"))
	}); n != 0 {
		t.Errorf("%v allocations, want 0", n)
	}
	for _, c := range lawCases {
		law, err := c.spec.Law()
		if err != nil {
			t.Fatal(err)
		}
		if n := testing.AllocsPerRun(100, func() { sink += law.Draw(&s) + law.At(s.Float64()) }); n != 0 {
			t.Errorf("%v: %v allocations, want 0", c.spec.Kind, n)
		}
	}
}
