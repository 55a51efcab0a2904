package random

import (
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"
)

var sink float64
var sinkBits uint64

func BenchmarkUint64(b *testing.B) {
	s := NewStream(1, "bench")
	for b.Loop() {
		sinkBits += s.Uint64()
	}
}

func BenchmarkUint64RandV2PCG(b *testing.B) {
	s := rand.NewPCG(1, 2)
	for b.Loop() {
		sinkBits += s.Uint64()
	}
}

func BenchmarkExp(b *testing.B) {
	s := NewStream(1, "bench")
	for b.Loop() {
		sink += s.Exp()
	}
}

// BenchmarkFillExp reports the time of one variate, not of the whole slice.
func BenchmarkFillExp(b *testing.B) {
	s := NewStream(1, "bench")
	var dst [256]float64
	for b.Loop() {
		s.FillExp(dst[:])
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/float64(len(dst)), "ns/variate")
}

func BenchmarkExpRandV2PCG(b *testing.B) {
	r := rand.New(rand.NewPCG(1, 2))
	for b.Loop() {
		sink += r.ExpFloat64()
	}
}

func BenchmarkNorm(b *testing.B) {
	s := NewStream(1, "bench")
	for b.Loop() {
		sink += s.Norm()
	}
}

func BenchmarkNormRandV2PCG(b *testing.B) {
	r := rand.New(rand.NewPCG(1, 2))
	for b.Loop() {
		sink += r.NormFloat64()
	}
}

func BenchmarkKeyedDraw(b *testing.B) {
	var i uint64
	for b.Loop() {
		sinkBits += Draw(1, 2, i, 3)
		i++
	}
}

func BenchmarkPick(b *testing.B) {
	s := NewStream(1, "bench")
	a := NewAlias([]uint16{40, 576, 1500}, []float64{7, 4, 1})
	for b.Loop() {
		sinkBits += uint64(a.Pick(s.Uint64()))
	}
}

// BenchmarkLaws draws from each law of the table by stream and by key.
func BenchmarkLaws(b *testing.B) {
	for _, c := range lawCases {
		law := mustLaw(b, c.spec)
		s := NewStream(1, "bench")
		b.Run(c.spec.Kind.String()+"/draw", func(b *testing.B) {
			for b.Loop() {
				sink += law.Draw(&s)
			}
		})
		b.Run(c.spec.Kind.String()+"/at", func(b *testing.B) {
			for b.Loop() {
				sink += law.At(s.Float64())
			}
		})
	}
}

// BenchmarkDistuv is what the laws' own draws are measured against.
func BenchmarkDistuv(b *testing.B) {
	s := NewStream(1, "bench")
	for name, law := range map[string]distuv.Rander{
		"exponential": distuv.Exponential{Rate: 1, Src: &s},
		"lognormal":   distuv.LogNormal{Sigma: 1, Src: &s},
		"pareto":      distuv.Pareto{Xm: 1, Alpha: 1.5, Src: &s},
		"weibull":     distuv.Weibull{K: 2, Lambda: 3, Src: &s},
	} {
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				sink += law.Rand()
			}
		})
	}
}
