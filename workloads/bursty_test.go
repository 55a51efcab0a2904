package workloads

import (
	"math"
	"testing"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
)

// made fails the test if a source was refused.
func made[S Source](t testing.TB) func(S, error) S {
	return func(s S, err error) S {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
		return s
	}
}

func onOffOf(t testing.TB, c OnOffConfig) *Spurts {
	t.Helper()
	c.Name, c.Way = "o", 6
	return made[*Spurts](t)(NewOnOff(c))
}

func talkOf(t testing.TB, c TalkConfig) *Spurts {
	t.Helper()
	c.Name, c.Way = "t", 6
	return made[*Spurts](t)(NewTalk(c))
}

func mmppOf(t testing.TB, c MMPPConfig) *MMPP {
	t.Helper()
	c.Name, c.Way = "m", 6
	return made[*MMPP](t)(NewMMPP(c))
}

func pagesOf(t testing.TB, c PagesConfig) *Pages {
	t.Helper()
	c.Name, c.Way = "p", 6
	return made[*Pages](t)(NewPages(c))
}

func TestBurstyContracts(t *testing.T) {
	c := Common{Load: 4 * nodes.Mbps, Start: 30 * des.Millisecond, Stop: 1900 * des.Millisecond}
	const end = 2 * des.Second
	for name, fresh := range map[string]func() Source{
		"on-off": func() Source {
			return onOffOf(t, OnOffConfig{Common: c, Peak: nodes.Mbps, On: 20 * des.Millisecond, Off: 50 * des.Millisecond})
		},
		"talk": func() Source {
			return talkOf(t, TalkConfig{Common: c, Spurt: 200 * des.Millisecond, Silence: 100 * des.Millisecond})
		},
		"interrupted": func() Source {
			return mmppOf(t, MMPPConfig{Common: c, Size: imix, Flows: 9, HighFor: 10 * des.Millisecond, LowFor: 30 * des.Millisecond})
		},
		"modulated": func() Source {
			return mmppOf(t, MMPPConfig{Common: c, Low: 0.4, HighFor: des.Millisecond, LowFor: 3 * des.Millisecond})
		},
		"pages": func() Source { return pagesOf(t, PagesConfig{Common: c, Pace: 20 * nodes.Mbps}) },
	} {
		t.Run(name, func(t *testing.T) { testContract(t, fresh, c.Start, c.Stop, end) })
	}
}

// Every source offers its load in the mean from the start and later.
func TestBurstyOffersWhatIsAsked(t *testing.T) {
	const span = 500 * des.Millisecond
	for name, x := range map[string]struct {
		fresh func(seed uint64) Source
		want  float64
		tight float64 // of the interval, relative
	}{
		"on-off": {func(seed uint64) Source {
			return onOffOf(t, OnOffConfig{Common: Common{Load: 200 * nodes.Mbps, Seed: seed}, Hurst: 0.75, On: 5 * des.Millisecond, Off: 10 * des.Millisecond})
		}, 200e6, 0.06},
		"talk": {func(seed uint64) Source {
			return talkOf(t, TalkConfig{Common: Common{Seed: seed}, Calls: 1000})
		}, 1000 * 30999.61404, 0.04},
		"interrupted": {func(seed uint64) Source {
			return mmppOf(t, MMPPConfig{Common: Common{Load: 50 * nodes.Mbps, Seed: seed}, HighFor: des.Millisecond, LowFor: 3 * des.Millisecond})
		}, 50e6, 0.09},
		"modulated": {func(seed uint64) Source {
			return mmppOf(t, MMPPConfig{Common: Common{Load: 50 * nodes.Mbps, Seed: seed}, Low: 0.3, HighFor: des.Millisecond, LowFor: 3 * des.Millisecond})
		}, 50e6, 0.05},
		"pages": {func(seed uint64) Source {
			return pagesOf(t, PagesConfig{Common: Common{Load: 800 * nodes.Mbps, Seed: seed}})
		}, 800e6, 0.09},
	} {
		for _, from := range []des.Time{0, 300 * des.Millisecond} {
			mean, half := replicate(30, func(seed uint64) float64 {
				s := x.fresh(seed)
				s.Emit(from, nil)
				return rateOf(s.Emit(from+span, nil), span)
			})
			if math.Abs(mean-x.want) > half || half > x.tight*x.want {
				t.Errorf("%s from %v: %.4g ± %.2g bit/s, want %.4g", name, from, mean, half, x.want)
			}
		}
		if got := x.fresh(1).MeanRate(); math.Abs(got/x.want-1) > 1e-7 {
			t.Errorf("%s: MeanRate %v, want %v", name, got, x.want)
		}
	}
}

// gapsOf returns the gaps between packets of flow 0, in seconds.
func gapsOf(ps []nodes.Packet) []float64 {
	var gaps []float64
	for i := range ps[:len(ps)-1] {
		gaps = append(gaps, (ps[i+1].Born - ps[i].Born).Seconds())
	}
	return gaps
}

// squaredCoV returns the variance of xs over the square of their mean.
func squaredCoV(xs []float64) float64 {
	var sum, sq float64
	for _, x := range xs {
		sum += x
	}
	mean := sum / float64(len(xs))
	for _, x := range xs {
		sq += (x - mean) * (x - mean)
	}
	return sq / float64(len(xs)-1) / (mean * mean)
}

// Gaps of an interrupted Poisson process are independent and hyperexponential:
// with rate L when on, g from on to off, w back, S = L + g + w, their rates are
// (S ± sqrt(S² - 4Lw))/2 and the weight of the faster is (L - k2)/(k1 - k2)
// (A. Kuczura, BSTJ 52, 1973). c² computed from that law: 11, 2, 1.8.
func TestInterruptedPoissonGaps(t *testing.T) {
	for _, x := range []struct{ l, g, w, c2, tight float64 }{{2, 0.1, 0.1, 11, 1.2}, {2, 1, 1, 2, 0.06}, {10, 1, 4, 1.8, 0.05}} {
		s := x.l + x.g + x.w
		root := math.Sqrt(s*s - 4*x.l*x.w)
		k1, k2 := (s+root)/2, (s-root)/2
		p := (x.l - k2) / (k1 - k2)
		cdf := func(y float64) float64 { return 1 - p*math.Exp(-k1*y) - (1-p)*math.Exp(-k2*y) }
		fresh := func(seed uint64) *MMPP { // 1000 times as fast
			return mmppOf(t, MMPPConfig{
				Common: Common{Load: nodes.Rate(math.Round(8e6 * x.l * x.w / (x.g + x.w))), Seed: seed}, Size: random.Spec{Mean: 1000},
				HighFor: des.Time(1e9 / x.g), LowFor: des.Time(1e9 / x.w),
			})
		}
		var all []float64
		mean, half := replicate(30, func(seed uint64) float64 {
			gaps := gapsOf(fresh(seed).Emit(10*des.Second, nil))
			for i := range gaps {
				gaps[i] *= 1000
			}
			if seed == 1 {
				all = gaps
			}
			return squaredCoV(gaps)
		})
		if math.Abs(mean-x.c2) > half || half > x.tight {
			t.Errorf("c² of gaps %.3f ± %.3f, want %v", mean, half, x.c2)
		}
		if d, limit := ks(all, cdf); d > limit {
			t.Errorf("c² %v: distance %.2f of %d gaps from their law, limit %.2f", x.c2, d, len(all), limit)
		}
	}
}

// Of two Poisson rates in equal shares of time the counts over times short
// against the states have an index of dispersion of
// 1 + T·var(rate)/mean(rate) for a span T (arithmetic: a mixed Poisson count).
func TestModulatedCounts(t *testing.T) {
	const span = 2 * des.Millisecond
	mean, half := replicate(30, func(seed uint64) float64 {
		s := mmppOf(t, MMPPConfig{Common: Common{Load: 80 * nodes.Mbps, Seed: seed}, Low: 0.25, HighFor: 2 * des.Second, LowFor: 2 * des.Second})
		var sum, sq, n float64
		for end := span; end < 20*des.Second; end += span {
			x := float64(len(s.Emit(end, nil)))
			sum, sq, n = sum+x, sq+x*x, n+1
		}
		// Rates r and r/4, 10000/s in the mean if the shares are equal, as they
		// nearly are; the sample's own mean rate 1+3a over 4 says the share a.
		high := 16000.0
		got := sum / n / span.Seconds()
		a := (got/high - 0.25) / 0.75
		variance := a * (1 - a) * 0.75 * 0.75 * high * high
		return (sq/n-sum*sum/n/n)/(sum/n) - 1 - variance/got*span.Seconds()
	})
	if math.Abs(mean) > half || half > 0.1 {
		t.Errorf("index of dispersion off by %.3f ± %.3f", mean, half)
	}
}

// Gaps of speech: an interval, and one silence after the last packet of a
// spurt. For 22 packets in the mean at 16 ms and silences of 650 ms K. Sriram
// and W. Whitt, IEEE JSAC 4 (1986), print 18.1; 18.095 is computed from the law.
// The same for ITU-T P.59 means at 20 ms, computed: 37.291.
func TestTalkGaps(t *testing.T) {
	for _, x := range []struct {
		interval, spurt, silence des.Time
		c2, rate                 float64
	}{
		// 16 ms stands between the intervals that codecs allow: all times by 20/16.
		{20 * des.Millisecond, 440 * des.Millisecond, 812500 * des.Microsecond, 18.09505, 21.956 * 16 / 20},
		{20 * des.Millisecond, 1004 * des.Millisecond, 1587 * des.Millisecond, 37.29112, 19.37476},
	} {
		var rate float64
		mean, half := replicate(30, func(seed uint64) float64 {
			s := talkOf(t, TalkConfig{Common: Common{Seed: seed}, Calls: 1, Interval: x.interval, Spurt: x.spurt, Silence: x.silence})
			rate = s.MeanRate() / 8 / 200
			return squaredCoV(gapsOf(s.Emit(3000*des.Second, nil)))
		})
		if math.Abs(mean-x.c2) > half || half > 0.03*x.c2 {
			t.Errorf("c² of gaps %.3f ± %.3f, want %v", mean, half, x.c2)
		}
		if math.Abs(rate/x.rate-1) > 1e-4 {
			t.Errorf("%v packets a second, want %v", rate, x.rate)
		}
	}
}

// The number of active speakers at any instant is binomial: of 24, 30 or 100 of
// activity 0.3874952 more than 12, 16 or 50 are active with the chances given
// (computed from the binomial law), at the start and 5 s later.
func TestTalkersAreBinomial(t *testing.T) {
	const runs = 1500
	for _, x := range []struct {
		calls, above int
		want         float64
	}{{24, 12, 0.09134479}, {30, 16, 0.03539225}, {100, 50, 0.00852924}} {
		for _, from := range []des.Time{0, 5 * des.Second} {
			hits := 0.0
			for seed := range uint64(runs) {
				s := talkOf(t, TalkConfig{Common: Common{Seed: seed}, Calls: x.calls})
				s.Emit(from, nil)
				// Packets of a call are at least 20 ms apart, so 20 ms hold one of
				// it or none: one with the chance of the activity.
				if len(s.Emit(from+20*des.Millisecond, nil)) > x.above {
					hits++
				}
			}
			if p := hits / runs; math.Abs(p-x.want) > 3.29*math.Sqrt(x.want*(1-x.want)/runs) {
				t.Errorf("at %v more than %d of %d are active with %.4f, want %.4f", from, x.above, x.calls, p, x.want)
			}
			if x.calls == 100 {
				break // the start alone, to be quick
			}
		}
	}
}

// Activities from published means: ITU-T P.59 (1993), and G.729B speech as
// measured by W. Jiang, H. Schulzrinne (ICCCN 2000): spurts of 362 ms, silences
// of 488 ms.
func TestActivity(t *testing.T) {
	for _, x := range []struct {
		spurt, silence des.Time
		want           float64
	}{{1004, 1587, 0.3874952}, {362, 488, 0.4258824}} {
		c := TalkConfig{Spurt: x.spurt * des.Millisecond, Silence: x.silence * des.Millisecond}
		if a := c.Activity(); math.Abs(a-x.want) > 1e-7 {
			t.Errorf("activity %v, want %v", a, x.want)
		}
	}
}

// The laws of web objects against their published moments: 3GPP R1-070674
// states a mean of 10710 B for main objects, 7758 B for embedded ones before
// truncation, 5.64 embedded objects. The moments between the ends are computed
// from the law.
func TestPageLaws(t *testing.T) {
	p := pagesOf(t, PagesConfig{Common: Common{Load: nodes.Mbps}})
	for _, x := range []struct {
		name      string
		got, want float64
		digits    float64
	}{
		{"main mean", p.main.Mean(), 11053.5, 0.05},
		{"main mean, published", p.main.Mean(), 10710, 0.04 * 10710},
		{"embedded mean", p.embedded.Mean(), 8199.7, 0.05},
		{"embedded deviation", math.Sqrt(p.embedded.Variance()), 46503.6, 0.05},
		{"objects", p.number.Mean() - 2, 5.641908, 1e-6},
	} {
		if math.Abs(x.got-x.want) > x.digits {
			t.Errorf("%s: %v, want %v", x.name, x.got, x.want)
		}
	}
	for _, w := range []within{p.main, p.embedded} {
		for _, q := range []float64{0.001, 0.2, 0.5, 0.9, 0.9999} {
			if x := w.Quantile(q); math.Abs(w.CDF(x)-q) > 1e-9 || x < w.low || x > w.high {
				t.Errorf("CDF(Quantile(%v)) = %v", q, w.CDF(x))
			}
		}
		if w.Quantile(0) != w.low || w.Quantile(1) != w.high || w.CDF(w.low-1) != 0 || w.CDF(w.high) != 1 {
			t.Error("the ends are not kept")
		}
	}
	const n = 100_000
	var objects, bytes, sum float64
	for key := range uint64(n) {
		k := p.objectsOf(key)
		objects += float64(k) / n
		for i := range k {
			bytes += float64(p.bytesOf(key, i+1))
			sum++
		}
	}
	// 3.29 standard errors: 8.6 objects and 46503.6 B are the deviations.
	if math.Abs(objects-5.641908) > 3.29*8.6/math.Sqrt(n) || math.Abs(bytes/sum-8199.7) > 3.29*46503.6/math.Sqrt(sum) {
		t.Errorf("%.3f objects of %.0f B in the mean, want 5.642 of 8200", objects, bytes/sum)
	}
}

// A page is one main object, a time to parse it, and its embedded objects: the
// packets of a flow carry the bytes drawn for it.
func TestPagePackets(t *testing.T) {
	p := pagesOf(t, PagesConfig{Common: Common{Load: 20 * nodes.Mbps}})
	fresh := pagesOf(t, PagesConfig{Common: Common{Load: 20 * nodes.Mbps}})
	first := p.nextID
	carried := map[uint16]int64{}
	for _, q := range p.Emit(20*des.Second, nil) {
		carried[q.Flow] += int64(q.Size) - 40
	}
	checked := 0
	for key := range uint64(p.serial) / 2 { // the later ones may be under way
		want := int64(0)
		for i := range fresh.objectsOf(key) + 1 {
			want += fresh.bytesOf(key, i)
		}
		if got := carried[uint16(first+uint32(key))]; got != want {
			t.Fatalf("page %d carries %d B, want %d", key, got, want)
		}
		checked++
	}
	if checked < 200 {
		t.Errorf("only %d pages", checked)
	}
}

func TestBurstyFaults(t *testing.T) {
	c := Common{Name: "x", Load: nodes.Mbps}
	refusal := func(_ Source, err error) string {
		if err == nil {
			return ""
		}
		return err.Error()
	}
	for _, x := range []struct{ got, want string }{
		{refusal(NewOnOff(OnOffConfig{Common: c, Hurst: 1, Peak: 1, Packet: 70000, On: -1})),
			"hurst: 1 is not between 0.51 and 0.99\npeak: 1 bit/s is not between 1 kbit/s and 4 Tbit/s\n" +
				"packet: 70000 B is not between 1 B and 65535 B\non: -1ps is not between 1 ns and 1000 s"},
		{refusal(NewOnOff(OnOffConfig{Common: c, Peak: nodes.Mbps, On: des.Millisecond})), "on: 1ms is shorter than a packet at the peak, 8ms"},
		{refusal(NewTalk(TalkConfig{Common: c, Spurt: des.Millisecond, Silence: -1})),
			"spurt: 1ms is not between an interval, 20ms, and 1000 s\nsilence: -1ps is not between 1 ms and 1000 s"},
		{refusal(NewMMPP(MMPPConfig{Common: c, Low: 1, HighFor: 1, Flows: 1 << 20})),
			"flows: 1048576 is not between 1 and 65536\nlow: 1 is not at least 0 and below 1\nhigh-for: 1ps is not between 1 ns and 1000 s"},
		{refusal(NewPages(PagesConfig{Pace: 1, Parse: -1})),
			"name: missing\nload: 0 bit/s is not between 1 bit/s and 4 Tbit/s\n" +
				"pace: 1 bit/s is not between 100 kbit/s and 4 Tbit/s\nparse: -1ps is not between 0 and 60 s"},
	} {
		if x.got != x.want {
			t.Errorf("faults:\n%s\nwant:\n%s", x.got, x.want)
		}
	}
}

func BenchmarkBursty(b *testing.B) {
	for name, s := range map[string]Source{
		"on-off": onOffOf(b, OnOffConfig{Common: Common{Load: nodes.Gbps}}),
		"talk":   talkOf(b, TalkConfig{Common: Common{Load: 300 * nodes.Mbps}}),
		"mmpp":   mmppOf(b, MMPPConfig{Common: Common{Load: 5 * nodes.Gbps}, Size: imix}),
		"pages":  pagesOf(b, PagesConfig{Common: Common{Load: nodes.Gbps}}),
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
