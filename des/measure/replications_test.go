package measure

import (
	"math"
	"testing"
)

// Law, Simulation Modeling and Analysis, ch. 9: 16 and 27 replications of the
// bank; 92 computed from the same formula.
func TestReplicationsWorked(t *testing.T) {
	mean := MeanInterval(lawBank, 0.90).Mean
	for _, c := range []struct {
		half float64
		want int
	}{{0.25, 16}, {RelativeHalf(mean, 0.10), 27}, {RelativeHalf(mean, 0.05), 92}, {100, 10}} {
		if n, ok := Replications(lawBank, c.half, 0.90); !ok || n != c.want {
			t.Errorf("half-width %v: %d, %v; want %d", c.half, n, ok, c.want)
		}
	}
	for _, c := range []struct {
		x    []float64
		half float64
	}{{lawBank, 0}, {lawBank, math.NaN()}, {lawBank[:1], 1}, {lawBank, 1e-9}} {
		if n, ok := Replications(c.x, c.half, 0.90); ok {
			t.Errorf("%d values to ± %v: %d, want none", len(c.x), c.half, n)
		}
	}
	// gamma/(1+gamma) of 1, by hand.
	if !near(RelativeHalf(-1, 0.05), 1.0/21, 1e-15) || !near(RelativeHalf(1, 0.10), 1.0/11, 1e-15) {
		t.Errorf("relative half-widths %v, %v", RelativeHalf(-1, 0.05), RelativeHalf(1, 0.10))
	}
	// 1.959964² / half², Chow and Robbins (1965).
	if !near(SequentialSize(1, 0.1, 0.95), 384.146, 5e-4) || !near(SequentialSize(1, 0.05, 0.95), 1536.584, 5e-4) {
		t.Errorf("sizes %v, %v", SequentialSize(1, 0.1, 0.95), SequentialSize(1, 0.05, 0.95))
	}
}

// Ten batches; figures computed from the formulas of Law, Simulation Modeling
// and Analysis, ch. 9. Each batch is its mean less, plus and equal to itself.
func TestBatchMeansWorked(t *testing.T) {
	var x []float64
	for _, m := range []float64{4.1, 3.7, 4.4, 3.9, 4.2, 3.6, 4.0, 4.5, 3.8, 4.3} {
		x = append(x, m-1, m+1, m)
	}
	b := BatchMeans(append(x, 99, 99), 10, 0.95)
	if !near(b.Mean, 4.05, 1e-12) || !near(b.Half, 0.2165851, 5e-7) || !near(b.Lag1, -0.5545455, 5e-7) {
		t.Errorf("%+v, want 4.05 ± 0.2165851, lag-1 -0.5545455", b)
	}
	if b.N != 10 || b.Size != 3 || b.Left != 2 {
		t.Errorf("%d batches of %d, %d left; want 10 of 3, 2 left", b.N, b.Size, b.Left)
	}
	if b := BatchMeans(x[:4], 5, 0.95); b.N != 0 || b.Left != 4 || !math.IsNaN(b.Mean) || !math.IsNaN(b.Lag1) {
		t.Errorf("fewer values than batches: %+v", b)
	}
	if v := Lag1([]float64{3, 3, 3}); !math.IsNaN(v) {
		t.Errorf("lag-1 of a constant = %v", v)
	}
}

// slowMSER is the definition, for each number of values to drop.
func slowMSER(z []float64, d int) float64 {
	mean, _ := meanVariance(z[d:])
	var sum float64
	for _, v := range z[d:] {
		sum += (v - mean) * (v - mean)
	}
	return sum / float64((len(z)-d)*(len(z)-d))
}

// The rule of White (1997); figures computed from its formula.
func TestMSERWorked(t *testing.T) {
	z := []float64{12, 9, 7, 4, 2, 1.0, 1.4, 0.6, 1.2, 0.8, 1.1, 0.9, 1.3, 0.7, 1.0, 1.2, 0.8, 1.1, 0.9, 1.0}
	for d, want := range map[int]float64{0: 0.474125, 4: 0.006396484, 5: 0.003111111, 7: 0.003122440, 8: 0.002638889, 9: 0.002779865} {
		if got := slowMSER(z, d); !near(got, want, 5e-10) {
			t.Errorf("by definition, dropping %d gives %v, want %v", d, got, want)
		}
	}
	d, v, settled := MSER(z)
	if d != 8 || !settled || !near(v, 0.002638889, 5e-10) {
		t.Errorf("MSER = %d, %v, %v; want 8, 0.002638889", d, v, settled)
	}
	if mean, _ := meanVariance(z[d:]); !near(mean, 1, 1e-12) {
		t.Errorf("mean of the rest %v, want 1", mean)
	}
	var raw []float64
	for _, m := range z {
		raw = append(raw, m-0.5, m, m, m, m+0.5)
	}
	if drop, settled := MSER5(append(raw, 50)); drop != 40 || !settled {
		t.Errorf("MSER5 = %d, %v; want 40", drop, settled)
	}
	// A ramp has no end of its warm-up; too few blocks say nothing.
	if d, _, settled := MSER([]float64{9, 8, 7, 6, 5, 4, 3, 2}); d != 4 || settled {
		t.Errorf("a ramp: %d, %v; want 4, unsettled", d, settled)
	}
	if d, v, settled := MSER(nil); d != 0 || !math.IsNaN(v) || settled {
		t.Errorf("no block: %d, %v, %v", d, v, settled)
	}
	if d, _, settled := MSER([]float64{2, 2, 2}); d != 0 || settled {
		t.Errorf("three blocks: %d, %v; want 0, unsettled", d, settled)
	}
	if d, v, settled := MSER([]float64{2, 2, 2, 2, 2}); d != 0 || v != 0 || !settled {
		t.Errorf("a constant: %d, %v, %v", d, v, settled)
	}
}

// The rule of Welch (1983), worked by hand.
func TestMovingAverageWorked(t *testing.T) {
	got := MovingAverage([]float64{0, 2, 4, 6, 8, 8, 8, 8, 8, 8}, 2)
	want := []float64{0, 2, 4, 5.6, 6.8, 7.6, 8, 8}
	if len(got) != len(want) {
		t.Fatalf("%v, want %v", got, want)
	}
	for i := range want {
		if !near(got[i], want[i], 1e-12) {
			t.Errorf("%v, want %v", got, want)
		}
	}
	if got := MovingAverage([]float64{1}, 3); len(got) != 0 {
		t.Errorf("a window wider than the series gives %v", got)
	}
}

func FuzzMSER(f *testing.F) {
	f.Add([]byte{90, 50, 20, 10, 11, 9, 10, 10, 11, 9})
	f.Fuzz(func(t *testing.T, in []byte) {
		in = in[:min(len(in), 200)]
		z := make([]float64, len(in))
		for i, b := range in {
			z[i] = float64(b) / 8
		}
		if len(z) == 0 {
			return
		}
		d, v, _ := MSER(z)
		if d > len(z)/2 || !near(v, slowMSER(z, d), 1e-9*(1+v)) {
			t.Fatalf("MSER(%v) = %d, %v; by definition %v", z, d, v, slowMSER(z, d))
		}
		for k := range len(z)/2 + 1 {
			if slow := slowMSER(z, k); slow < v-1e-9*(1+v) {
				t.Fatalf("MSER(%v) = %d, %v; dropping %d gives %v", z, d, v, k, slow)
			}
		}
	})
}
