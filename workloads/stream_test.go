package workloads

import (
	"math"
	"math/bits"
	"slices"
	"testing"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
)

// imix is the 7:4:1 mix of 40, 576 and 1500 bytes in common use by testers.
var imix = random.Spec{Kind: random.Mix, Values: []float64{40, 576, 1500}, Weights: []float64{7, 4, 1}}

func streamOf(t testing.TB, c StreamConfig) *Stream {
	t.Helper()
	if c.Name == "" {
		c.Name = "s"
	}
	c.Way = 6
	s, err := NewStream(c)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

func TestStreamContract(t *testing.T) {
	laws := map[string]random.Spec{
		"fixed": {Kind: random.Constant, Mean: 700}, "exponential": {Kind: random.Exponential, Mean: 500},
		"mix": imix, "gamma": {Kind: random.Gamma, Mean: 800, CoV: 0.5},
	}
	for name, law := range laws {
		for _, gaps := range []Gaps{Poisson, Constant} {
			t.Run(name+"/"+gaps.String(), func(t *testing.T) {
				c := StreamConfig{Common: Common{Load: 333_333_337, Start: des.Millisecond / 2, Stop: 9 * des.Millisecond}, Gaps: gaps, Size: law, Flows: 5}
				testContract(t, func() Source { return streamOf(t, c) }, c.Start, c.Stop, 10*des.Millisecond)
			})
		}
	}
}

// Of Poisson gaps every flow is a Poisson stream of the same rate; of constant
// gaps every flow has constant gaps. The spreading moves no packet.
func TestStreamFlows(t *testing.T) {
	const flows, end = 7, 300 * des.Millisecond
	for _, gaps := range []Gaps{Poisson, Constant} {
		c := StreamConfig{Common: Common{Load: nodes.Gbps}, Gaps: gaps, Size: random.Spec{Mean: 500}}
		plain := streamOf(t, c).Emit(end, nil)
		c.Flows = flows
		ps := streamOf(t, c).Emit(end, nil)
		if len(ps) != len(plain) {
			t.Fatalf("%d packets of 7 flows, %d of one", len(ps), len(plain))
		}
		var last [flows]des.Time
		var count, same [flows]float64
		var spans []float64
		for i, p := range ps {
			if p.Born != plain[i].Born || p.Size != plain[i].Size || plain[i].Flow != 0 {
				t.Fatalf("packet %d is %+v, of one flow %+v", i, p, plain[i])
			}
			if i > 0 && ps[i-1].Flow == p.Flow {
				same[p.Flow]++
			}
			if gap := p.Born - last[p.Flow]; count[p.Flow] > 0 && p.Flow == 3 {
				spans = append(spans, float64(gap)/(flows*4e6))
			}
			last[p.Flow] = p.Born
			count[p.Flow]++
		}
		if gaps == Constant {
			for i, x := range spans {
				if x != 1 {
					t.Fatalf("gap %d of a flow is %v of the mean", i, x)
				}
			}
			continue
		}
		if d, limit := ks(spans, func(x float64) float64 { return -math.Expm1(-x) }); d > limit {
			t.Errorf("distance %.2f of the gaps of a flow from the exponential law, limit %.2f", d, limit)
		}
		chi, n := 0.0, float64(len(ps))
		for f := range flows {
			chi += (count[f] - n/flows) * (count[f] - n/flows) / (n / flows)
			if mean := n / flows / flows; math.Abs(same[f]-mean) > 3.89*math.Sqrt(mean) { // 0.01 %
				t.Errorf("flow %d follows itself %v times in %v packets, want %.0f", f, same[f], n, mean)
			}
		}
		if chi > 22.458 { // chi-square, 6 degrees of freedom, 0.1 %
			t.Errorf("chi-square of the flows %.1f: %v", chi, count)
		}
	}
}

func BenchmarkStream(b *testing.B) {
	for _, x := range []struct {
		name string
		gaps Gaps
		size random.Spec
		flow int
	}{
		{"poisson/mix", Poisson, imix, 1}, {"poisson/exponential", Poisson, random.Spec{Kind: random.Exponential, Mean: 700}, 1},
		{"poisson/fixed", Poisson, random.Spec{Mean: 700}, 1}, {"constant/fixed", Constant, random.Spec{Mean: 700}, 1},
		{"poisson/mix/flows", Poisson, imix, 1000}, {"constant/fixed/flows", Constant, random.Spec{Mean: 700}, 1000},
	} {
		b.Run(x.name, func(b *testing.B) {
			s := streamOf(b, StreamConfig{Common: Common{Load: 10 * nodes.Gbps}, Gaps: x.gaps, Size: x.size, Flows: x.flow})
			var buf []nodes.Packet
			end, n := des.Time(0), 0
			for b.Loop() {
				end += 500 * des.Microsecond
				buf = s.Emit(end, buf[:0])
				n += len(buf)
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(n), "ns/packet")
		})
	}
}

// The k-th packet of a constant stream of whole sizes is born exactly
// floor(k·size·8/rate) after the first, however uneven the rate.
func TestConstantGapsAreExact(t *testing.T) {
	const n = 100_000
	for _, x := range []struct{ rate, size uint64 }{{999_999_937, 777}, {3 * 1e9, 1}, {7 * 1e9, 1500}} {
		s := streamOf(t, StreamConfig{Common: Common{Load: nodes.Rate(x.rate)}, Gaps: Constant, Size: random.Spec{Mean: float64(x.size)}})
		ps := s.Emit(des.Time(n*8e12/float64(x.rate)*float64(x.size)), nil)
		if len(ps) < n-1 {
			t.Fatalf("%d packets", len(ps))
		}
		for k, p := range ps {
			hi, lo := bits.Mul64(uint64(k)*x.size*8, uint64(des.Second))
			q, _ := bits.Div64(hi, lo, x.rate)
			if want := ps[0].Born + des.Time(q); p.Born != want {
				t.Fatalf("packet %d of %d B at %d bit/s is born at %v, want %v", k, x.size, x.rate, p.Born, want)
			}
		}
	}
}

// ks returns the Kolmogorov-Smirnov distance of xs from a law, times the root
// of their number, and the value that it exceeds with a chance of 0.1 %.
//
// Source: N. Smirnov, "Table for estimating the goodness of fit of empirical
// distributions", Ann. Math. Stat. 19 (1948): 1.95 at 0.001.
func ks(xs []float64, cdf func(float64) float64) (d, limit float64) {
	slices.Sort(xs)
	n := float64(len(xs))
	for i, x := range xs {
		p := cdf(x)
		d = max(d, float64(i+1)/n-p, p-float64(i)/n)
	}
	return d * math.Sqrt(n), 1.95
}

func TestPoissonGapsFollowTheirLaw(t *testing.T) {
	s := streamOf(t, StreamConfig{Common: Common{Load: nodes.Gbps}, Size: random.Spec{Mean: 500}})
	ps := s.Emit(400*des.Millisecond, nil)
	gaps := make([]float64, len(ps)-1)
	for i := range gaps {
		gaps[i] = float64(ps[i+1].Born-ps[i].Born) / 4e6 // 4 us
	}
	if d, limit := ks(gaps, func(x float64) float64 { return -math.Expm1(-x) }); d > limit {
		t.Errorf("distance %.2f of the gaps from the exponential law, limit %.2f", d, limit)
	}
	// Counts in equal spans of a Poisson process: the index of dispersion
	// has mean 1 and standard deviation sqrt(2/(spans-1)); 3.29 hold 99.9 %.
	const spans = 4000
	var count [spans]float64
	var sum, sq float64
	for _, p := range ps {
		count[p.Born/(100*des.Microsecond)]++
	}
	for _, c := range count {
		sum += c
		sq += c * c
	}
	iod := (sq - sum*sum/spans) / (spans - 1) / (sum / spans)
	if half := 3.29 * math.Sqrt(2.0/(spans-1)); math.Abs(iod-1) > half || half > 0.08 {
		t.Errorf("index of dispersion %.3f, want 1 ± %.3f", iod, half)
	}
}

func TestSizesFollowTheirLaw(t *testing.T) {
	sizesOf := func(s random.Spec) []float64 {
		ps := streamOf(t, StreamConfig{Common: Common{Load: nodes.Gbps}, Size: s}).Emit(300*des.Millisecond, nil)
		xs := make([]float64, len(ps))
		for i, p := range ps {
			xs[i] = float64(p.Size)
		}
		return xs
	}
	// A law rounded to whole bytes has the chance of x bytes or fewer that the
	// law has of x + 1/2; the distance is then at most that of the law itself.
	for _, s := range []random.Spec{{Kind: random.Exponential, Mean: 400}, {Kind: random.Gamma, Mean: 600, CoV: 0.7}} {
		law, err := s.Law()
		if err != nil {
			t.Fatal(err)
		}
		xs := sizesOf(s)
		slices.Sort(xs)
		d, n := 0.0, float64(len(xs))
		for i, x := range xs {
			if i+1 == len(xs) || xs[i+1] != x {
				d = max(d, math.Abs(float64(i+1)/n-law.CDF(x+0.5))*math.Sqrt(n))
			}
		}
		if d > 1.95 {
			t.Errorf("%v: distance %.2f of the sizes from their law, limit 1.95", s.Kind, d)
		}
	}
	xs := sizesOf(imix)
	var got [3]float64
	for _, x := range xs {
		got[slices.Index(imix.Values, x)]++
	}
	chi := 0.0
	for i, w := range imix.Weights {
		want := float64(len(xs)) * w / 12
		chi += (got[i] - want) * (got[i] - want) / want
	}
	if chi > 13.816 { // chi-square, 2 degrees of freedom, 0.1 %
		t.Errorf("chi-square of the mix %.1f, limit 13.8: %v of %d", chi, got, len(xs))
	}
}

func TestMeanSizes(t *testing.T) {
	sumExponential := func(m float64) float64 {
		sum := 1.0
		for k := 2; k <= 65535; k++ {
			sum += math.Exp(-(float64(k) - 0.5) / m)
		}
		return sum
	}
	for _, x := range []struct {
		name string
		spec random.Spec
		want float64
	}{
		// Arithmetic on mixes in common use: 4084/12, 4246/12, 4342/12 B.
		{"40/576/1500", imix, 4084.0 / 12},
		{"64/570/1518", random.Spec{Kind: random.Mix, Values: []float64{64, 570, 1518}, Weights: imix.Weights}, 4246.0 / 12},
		{"64/594/1518", random.Spec{Kind: random.Mix, Values: []float64{64, 594, 1518}, Weights: imix.Weights}, 4342.0 / 12},
		// Sums of the chances of k bytes or more.
		{"exponential 500", random.Spec{Kind: random.Exponential, Mean: 500}, sumExponential(500)},
		{"exponential 2", random.Spec{Kind: random.Exponential, Mean: 2}, sumExponential(2)},
		{"exponential 30000", random.Spec{Kind: random.Exponential, Mean: 30000}, sumExponential(30000)},
		// Rounding a uniform law on [100.5, 200.5] gives 101 to 200 (and 201 at its very end).
		{"uniform", random.Spec{Kind: random.Uniform, From: 100.5, To: 200.5}, 150.5},
		{"fixed", random.Spec{Mean: 99.5}, 100},
	} {
		s, err := newSizes(x.spec)
		if err != nil {
			t.Fatal(err)
		}
		if math.Abs(s.mean/x.want-1) > 1e-12 {
			t.Errorf("%s: mean %v, want %v", x.name, s.mean, x.want)
		}
	}
}

func TestStreamOffersWhatIsAsked(t *testing.T) {
	for _, size := range []random.Spec{imix, {Kind: random.Exponential, Mean: 30}, {Mean: 900}} {
		for _, gaps := range []Gaps{Poisson, Constant} {
			c := StreamConfig{Common: Common{Load: 80 * nodes.Mbps}, Gaps: gaps, Size: size}
			mean, half := replicate(30, func(seed uint64) float64 {
				c.Seed = seed
				return rateOf(streamOf(t, c).Emit(50*des.Millisecond, nil), 50*des.Millisecond)
			})
			// An equal stream of one size differs by its phase alone: by one packet.
			if math.Abs(mean-80e6) > half || half > 5e6 {
				t.Errorf("%v %v: %.5g ± %.2g bit/s, want 80e6", gaps, size.Kind, mean, half)
			}
			if asked := streamOf(t, c).MeanRate(); asked != 80e6 {
				t.Errorf("MeanRate %v", asked)
			}
		}
	}
}

// A change of load and back moves packets and draws nothing anew: packet i
// keeps its size and, in time counted at the load, its gap.
func TestScaleKeepsDraws(t *testing.T) {
	c := StreamConfig{Common: Common{Load: 100 * nodes.Mbps}, Size: imix}
	const up, down, end = 20 * des.Millisecond, 50 * des.Millisecond, 100 * des.Millisecond
	plain := emit(streamOf(t, c), end)
	scaled := emit(streamOf(t, c), end, scaling{up, 1.3}, scaling{down, 1})
	if len(scaled) <= len(plain) {
		t.Fatalf("%d packets at 130 %% for a while, %d without", len(scaled), len(plain))
	}
	for i, p := range plain {
		at := float64(p.Born)
		switch busy := float64(up) + 1.3*float64(down-up); {
		case p.Born < up:
		case at < busy:
			at = float64(up) + (at-float64(up))/1.3
		default:
			at += float64(down) - busy
		}
		// Each gap is rounded to a picosecond, at random.
		if q := scaled[i]; q.Size != p.Size || math.Abs(float64(q.Born)-at) > 4*math.Sqrt(float64(i)+4) {
			t.Fatalf("packet %d: %d B at %v, want %d B at %v", i, q.Size, q.Born, p.Size, des.Time(at))
		}
	}
}

func TestStreamFaults(t *testing.T) {
	_, err := NewStream(StreamConfig{Common: Common{Start: 2, Stop: 1}, Gaps: 9, Size: random.Spec{Kind: random.Exponential, Mean: 1e6}, Flows: -1})
	const want = "name: missing\nstop: 1ps is not after the start, 2ps\nload: 0 bit/s is not between 1 bit/s and 4 Tbit/s\n" +
		"gaps: no kind 9\nsize: mean 1e+06 B is above 65535 B, the longest IP packet\nflows: -1 is not between 1 and 65536"
	if err == nil || err.Error() != want {
		t.Errorf("faults:\n%v\nwant:\n%s", err, want)
	}
}

func TestScalePanics(t *testing.T) {
	for _, x := range [][2]scaling{{{0, -1}, {}}, {{0, math.NaN()}, {}}, {{2, 1}, {1, 1}}} {
		func() {
			defer func() {
				if recover() == nil {
					t.Errorf("Scale%v does not panic", x)
				}
			}()
			s := streamOf(t, StreamConfig{Common: Common{Load: nodes.Mbps}})
			s.Scale(x[0].at, x[0].factor)
			s.Scale(x[1].at, x[1].factor)
		}()
	}
}
