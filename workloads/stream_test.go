package workloads

import (
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
				c := StreamConfig{Common: Common{Load: 333_333_337, Start: des.Millisecond / 2, Stop: 9 * des.Millisecond}, Gaps: gaps, Size: law}
				testContract(t, func() Source { return streamOf(t, c) }, c.Start, c.Stop, 10*des.Millisecond)
			})
		}
	}
}

func BenchmarkStream(b *testing.B) {
	for _, x := range []struct {
		name string
		gaps Gaps
		size random.Spec
	}{
		{"poisson/mix", Poisson, imix}, {"poisson/exponential", Poisson, random.Spec{Kind: random.Exponential, Mean: 700}},
		{"poisson/fixed", Poisson, random.Spec{Mean: 700}}, {"constant/fixed", Constant, random.Spec{Mean: 700}},
	} {
		b.Run(x.name, func(b *testing.B) {
			s := streamOf(b, StreamConfig{Common: Common{Load: 10 * nodes.Gbps}, Gaps: x.gaps, Size: x.size})
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
