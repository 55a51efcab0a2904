package workloads

import (
	"math"
	"reflect"
	"testing"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
)

func voiceOf(t testing.TB, c VoiceConfig) *Voice {
	t.Helper()
	if c.Name == "" {
		c.Name = "v"
	}
	c.Way = 6
	v, err := NewVoice(c)
	if err != nil {
		t.Fatal(err)
	}
	return v
}

func filesOf(t testing.TB, c FilesConfig) *Files {
	t.Helper()
	if c.Name == "" {
		c.Name = "f"
	}
	c.Way = 6
	f, err := NewFiles(c)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

func TestVoiceContract(t *testing.T) {
	for _, p := range []Pattern{Standing, Random, Regular} {
		c := VoiceConfig{Common: Common{Load: 800 * nodes.Kbps, Start: 30 * des.Millisecond, Stop: 9 * des.Second}, Pattern: p}
		if p != Standing {
			c.Hold = random.Spec{Kind: random.Exponential, Mean: 1.5}
		}
		testContract(t, func() Source { return voiceOf(t, c) }, c.Start, c.Stop, 10*des.Second)
	}
}

func TestFilesContract(t *testing.T) {
	c := FilesConfig{Common: Common{Load: 40 * nodes.Mbps, Start: des.Millisecond, Stop: 900 * des.Millisecond}}
	testContract(t, func() Source { return filesOf(t, c) }, c.Start, c.Stop, des.Second)
}

// IP rates of calls over whole seconds, one direction: published tables of
// bandwidth per call (80 kbit/s for G.711 at 20 ms, 24 for G.729), the rest
// payload + 40 B times packets per second.
func TestVoiceRates(t *testing.T) {
	for _, x := range []struct {
		codec    Codec
		interval des.Time
		size     uint16
		bps      float64 // of one call, over 3 s
	}{
		{G711, 20 * des.Millisecond, 200, 80_000},
		{G711, 30 * des.Millisecond, 280, 224_000 / 3.0},
		{G711, 10 * des.Millisecond, 120, 96_000},
		{G729, 20 * des.Millisecond, 60, 24_000},
		{G729, 30 * des.Millisecond, 70, 56_000 / 3.0},
	} {
		const calls, span = 17, 3 * des.Second
		v := voiceOf(t, VoiceConfig{Codec: x.codec, Interval: x.interval, Calls: calls})
		ps := v.Emit(span, nil)
		if got := float64(len(ps)) * float64(x.size) * 8 / 3; math.Abs(got-calls*x.bps) > 1e-6 || math.Abs(rateOf(ps, span)-got) > 1e-6 {
			t.Errorf("%v %v: %v bit/s of packets, %v of bytes, want %v", x.codec, x.interval, got, rateOf(ps, span), calls*x.bps)
		}
		if math.Abs(v.MeanRate()-calls*x.bps) > 1e-6 {
			t.Errorf("%v %v: MeanRate %v, want %v", x.codec, x.interval, v.MeanRate(), calls*x.bps)
		}
		last := map[uint16]des.Time{}
		for _, p := range ps {
			if at, ok := last[p.Flow]; ok && p.Born-at != x.interval {
				t.Fatalf("%v: call %d sends after %v", x.codec, p.Flow, p.Born-at)
			}
			last[p.Flow] = p.Born
		}
		if len(last) != calls {
			t.Errorf("%d flows, want %d", len(last), calls)
		}
	}
}

// A load is met by the nearest number of calls: 300 Mbit/s are 3750 calls of
// 80 kbit/s.
func TestVoiceCallsOfLoad(t *testing.T) {
	v := voiceOf(t, VoiceConfig{Common: Common{Load: 300 * nodes.Mbps}})
	if n := len(v.Emit(des.Second, nil)); n != 3750*50 {
		t.Errorf("%d packets in a second, want %d", n, 3750*50)
	}
}

// Scaling standing calls keeps the phases of those that stay.
func TestVoiceScaleKeepsPhases(t *testing.T) {
	c := VoiceConfig{Calls: 100}
	plain := emit(voiceOf(t, c), des.Second)
	scaled := emit(voiceOf(t, c), des.Second, scaling{0, 1.3}, scaling{des.Second / 2, 1}, scaling{3 * des.Second / 4, 0.5})
	count := [4]int{}
	var kept []nodes.Packet
	for _, p := range scaled {
		count[p.Born*4/des.Second]++
		if p.Flow < 50 {
			p.Seq = 0
			kept = append(kept, p)
		}
	}
	// 250 ms are 12.5 packets of each call, so quarters are compared in halves.
	if count[0]+count[1] != 130*25 || count[2] < 1200 || count[2] > 1300 || count[3] < 600 || count[3] > 650 {
		t.Errorf("packets per quarter %v", count)
	}
	for _, p := range plain {
		if p.Flow < 50 {
			if p.Seq = 0; len(kept) == 0 || kept[0] != p {
				t.Fatalf("packet %+v is not among those of the scaled load", p)
			}
			kept = kept[1:]
		}
	}
}

// replicate returns the mean of run over seeds 1..n and the half-width of its
// 99.9 % interval.
func replicate(n int, run func(seed uint64) float64) (mean, half float64) {
	const t999 = 3.646 // Student's t, 29 degrees of freedom, two-sided
	if n != 30 {
		panic("the quantile is for 30 runs")
	}
	var sum, sq float64
	for seed := 1; seed <= n; seed++ {
		x := run(uint64(seed))
		sum += x
		sq += x * x
	}
	mean = sum / float64(n)
	return mean, t999 * math.Sqrt((sq/float64(n)-mean*mean)/float64(n-1))
}

// Calls that come and go are stationary from the first interval on: their
// number has the mean of the load over the rate of a call, for Poisson arrivals
// a variance equal to it (A. Erlang, 1917: M/G/infinity is Poisson), and later
// the same mean, whatever the law of holding times.
func TestCallsAreStationary(t *testing.T) {
	for _, hold := range []random.Spec{
		{Kind: random.Exponential, Mean: 2}, {Kind: random.Constant, Mean: 2}, {Kind: random.Lognormal, Mean: 2, CoV: 1},
	} {
		for _, pattern := range []Pattern{Random, Regular} {
			calls := func(from des.Time) func(seed uint64) float64 {
				return func(seed uint64) float64 {
					v := voiceOf(t, VoiceConfig{Common: Common{Load: 16 * nodes.Mbps, Seed: seed}, Pattern: pattern, Hold: hold})
					v.Emit(from, nil)
					return float64(len(v.Emit(from+20*des.Millisecond, nil)))
				}
			}
			for _, from := range []des.Time{0, 3 * des.Second} {
				mean, half := replicate(30, calls(from))
				if math.Abs(mean-200) > half || half > 12 {
					t.Errorf("%v calls, %v holding: %.1f ± %.1f calls at %v, want 200", pattern, hold.Kind, mean, half, from)
				}
			}
		}
	}
	var sum, sq float64
	const runs = 1000
	for seed := range uint64(runs) {
		v := voiceOf(t, VoiceConfig{Common: Common{Load: 4 * nodes.Mbps, Seed: seed}, Pattern: Random})
		n := float64(v.size)
		sum += n
		sq += n * n
	}
	mean := sum / runs
	// The index of dispersion times the degrees of freedom is chi-square;
	// its standard deviation is sqrt(2/runs), and 3.29 of them hold 99.9 %.
	if iod := (sq - sum*mean) / (runs - 1) / mean; math.Abs(iod-1) > 3.29*math.Sqrt(2.0/runs) {
		t.Errorf("variance over mean of the calls at the start is %.3f, want 1", iod)
	}
}

// A change of load before the start is in full force at the start, also for
// calls that last hundreds of times longer than the test.
func TestScaleBeforeStart(t *testing.T) {
	for _, pattern := range []Pattern{Standing, Random, Regular} {
		mean, half := replicate(30, func(seed uint64) float64 {
			v := voiceOf(t, VoiceConfig{Common: Common{Load: 16 * nodes.Mbps, Seed: seed, Start: des.Second}, Pattern: pattern})
			v.Scale(des.Second/2, 1.5)
			return float64(len(v.Emit(des.Second+20*des.Millisecond, nil)))
		})
		if math.Abs(mean-300) > half || half > 15 {
			t.Errorf("pattern %d: %.1f ± %.1f calls at 150 %%, want 300", pattern, mean, half)
		}
	}
}

// The residual holding time of an exponential call is exponential again, so
// calls met at the start thin out by 1/e in a mean holding time.
func TestResidualHolding(t *testing.T) {
	mean, half := replicate(30, func(seed uint64) float64 {
		v := voiceOf(t, VoiceConfig{Common: Common{Load: 16 * nodes.Mbps, Seed: seed}, Pattern: Random, Hold: random.Spec{Kind: random.Exponential, Mean: 2}})
		at := v.size
		left := 0
		for i := range at {
			if v.ring[(v.head+i)&(len(v.ring)-1)].left > 100 { // 2 s of 20 ms
				left++
			}
		}
		return float64(left) / float64(at)
	})
	if want := math.Exp(-1); math.Abs(mean-want) > half || half > 0.03 {
		t.Errorf("%.3f ± %.3f of the calls outlast the mean, want %.3f", mean, half, want)
	}
}

// Packets of a file: 1500 B each but the last, which holds the rest; spaced by
// 120 us at 100 Mbit/s.
func TestFilePackets(t *testing.T) {
	for _, x := range []struct {
		bytes   float64
		packets int
		last    uint16
	}{{1, 1, 41}, {1460, 1, 1500}, {1461, 2, 41}, {80_000, 55, 1200}} {
		f := filesOf(t, FilesConfig{Common: Common{Load: nodes.Mbps}, Size: random.Spec{Kind: random.Mix, Values: []float64{x.bytes, 1e6}, Weights: []float64{1, 1e-9}}})
		sent := map[uint16][]nodes.Packet{}
		first := uint16(f.nextID) // later ones are seen from their first packet on
		end := max(des.Second, 100*des.Time(f.arrivals.mean))
		for _, p := range f.Emit(end, nil) {
			sent[p.Flow] = append(sent[p.Flow], p)
		}
		for id, ps := range sent {
			if id < first || ps[0].Born > end-des.Second/10 {
				continue
			}
			if len(ps) != x.packets || ps[len(ps)-1].Size != x.last {
				t.Fatalf("file of %v B: %d packets, the last of %d B; want %d, %d B", x.bytes, len(ps), ps[len(ps)-1].Size, x.packets, x.last)
			}
			for i := 1; i < len(ps); i++ {
				if ps[i-1].Size != 1500 || ps[i].Born-ps[i-1].Born != 120*des.Microsecond {
					t.Fatalf("file of %v B: packet %d of %d B, the next after %v", x.bytes, i-1, ps[i-1].Size, ps[i].Born-ps[i-1].Born)
				}
			}
		}
		if len(sent) < 50 {
			t.Errorf("file of %v B: only %d files", x.bytes, len(sent))
		}
	}
}

// Files offer the load asked for, from the start.
func TestFilesRate(t *testing.T) {
	mean, half := replicate(30, func(seed uint64) float64 {
		f := filesOf(t, FilesConfig{
			Common: Common{Load: 200 * nodes.Mbps, Seed: seed}, Pace: 20 * nodes.Mbps,
			Size: random.Spec{Kind: random.Lognormal, Mean: 10e3, CoV: 1},
		})
		return rateOf(f.Emit(500*des.Millisecond, nil), 500*des.Millisecond)
	})
	if math.Abs(mean-200e6) > half || half > 8e6 {
		t.Errorf("%.4g ± %.2g bit/s, want 200e6", mean, half)
	}
}

// The numbers of packets against sums made term by term.
func TestLengths(t *testing.T) {
	for _, s := range []random.Spec{
		{Kind: random.Pareto, Mean: 80e3, Shape: 1.3, AtMost: 100e6},
		{Kind: random.Exponential, Mean: 30e3},
		{Kind: random.Constant, Mean: 5e7},
		{Kind: random.Mix, Values: []float64{100, 7e6}, Weights: []float64{9, 1}},
	} {
		law, err := s.Law()
		if err != nil {
			t.Fatal(err)
		}
		l, err := newLengths(law, payload, 0.5)
		if err != nil {
			t.Fatal(err)
		}
		want, left := 0.0, 0.0
		for j := int64(1); j < 80_000; j++ {
			p := l.atLeast(j)
			want += p
			left += float64(j) * p
		}
		if math.Abs(l.mean/want-1) > 2e-5 {
			t.Errorf("%v: mean %v, sum of the terms %v", s.Kind, l.mean, want)
		}
		left /= want // mean of what is left, from the terms
		got := 0.0
		const n = 100_000
		for i := range n {
			got += float64(l.left((float64(i)+0.5)/n)) / n
		}
		if math.Abs(got/left-1) > 2e-3 {
			t.Errorf("%v: mean of what is left %v, from the terms %v", s.Kind, got, left)
		}
	}
	law, _ := random.Spec{Kind: random.Pareto, Min: 1000, Shape: 1.2}.Law()
	if _, err := newLengths(law, payload, 0.5); err == nil {
		t.Error("a tail without a cap is accepted")
	}
}

func BenchmarkTrain(b *testing.B) {
	for name, s := range map[string]Source{
		"voice": voiceOf(b, VoiceConfig{Common: Common{Load: 300 * nodes.Mbps}}),
		"calls": voiceOf(b, VoiceConfig{Common: Common{Load: 300 * nodes.Mbps}, Pattern: Random}),
		"files": filesOf(b, FilesConfig{Common: Common{Load: 5 * nodes.Gbps}}),
	} {
		b.Run(name, func(b *testing.B) {
			var buf []nodes.Packet
			end, n := des.Time(0), 0
			for b.Loop() {
				end += des.Millisecond
				buf = s.Emit(end, buf[:0])
				n += len(buf)
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(n), "ns/packet")
		})
	}
}

func TestVoiceAndFilesFaults(t *testing.T) {
	for _, x := range []struct {
		c    VoiceConfig
		want string
	}{
		{VoiceConfig{Codec: 9}, "codec: no codec 9"},
		{VoiceConfig{Calls: 5, Interval: 25 * des.Millisecond, Pattern: Random},
			"interval: 25ms is not 10 ms, 20 ms ... 60 ms\n" +
				"calls: 5; a number of calls stands alone, without a load, for calls that last\n" +
				"name: missing\nload: 0 bit/s is not between 1 bit/s and 4 Tbit/s"},
		{VoiceConfig{Common: Common{Name: "v", Load: 1}, Hold: random.Spec{Mean: 3}}, "hold: calls that last have no length"},
		{VoiceConfig{Common: Common{Name: "v", Load: 1}, Pattern: 7}, "pattern: no pattern 7"},
	} {
		if _, err := NewVoice(x.c); err == nil || err.Error() != x.want {
			t.Errorf("faults:\n%v\nwant:\n%s", err, x.want)
		}
	}
	_, err := NewFiles(FilesConfig{Common: Common{Name: "f", Load: 1}, Pace: -1, Size: random.Spec{Kind: random.Pareto, Min: 100, Shape: 0.9}})
	const want = "pace: -1 bit/s is not between 1 bit/s and 4 Tbit/s\n" +
		"size: the tail is so heavy that there is no mean to speak of; write at-most, or a larger shape"
	if err == nil || err.Error() != want {
		t.Errorf("faults:\n%v\nwant:\n%s", err, want)
	}
}

// checkTwice holds a Check method to changing nothing of what it has checked.
func checkTwice[C interface{ Check() (C, error) }](t *testing.T, c C) {
	t.Helper()
	once, err := c.Check()
	if err != nil {
		t.Fatal(err)
	}
	if twice, err := once.Check(); err != nil || !reflect.DeepEqual(once, twice) {
		t.Errorf("%+v, then %+v, %v", once, twice, err)
	}
}

func TestCheckTwice(t *testing.T) {
	named, loaded := Common{Name: "v"}, Common{Name: "w", Load: 100_000_001}
	checkTwice(t, VoiceConfig{Common: named, Calls: 7, Codec: G729, Interval: 30 * des.Millisecond})
	checkTwice(t, TalkConfig{Common: named, Calls: 7})
	checkTwice(t, TalkConfig{Common: loaded})
	checkTwice(t, VideoConfig{Common: loaded, Rate: 7_654_321})
	checkTwice(t, VideoConfig{Common: loaded, Rate: 7_654_321, Pattern: Regular})
	checkTwice(t, StreamConfig{Common: loaded})
	checkTwice(t, MMPPConfig{Common: loaded})
	checkTwice(t, OnOffConfig{Common: loaded})
	checkTwice(t, FilesConfig{Common: loaded})
	checkTwice(t, PagesConfig{Common: loaded})
}
