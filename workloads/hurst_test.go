package workloads

import (
	"math"
	"math/cmplx"
	"testing"

	"gonum.org/v1/gonum/dsp/fourier"

	"ferrule/des"
	"ferrule/nodes"
)

// slope returns the slope of the least-squares line through the points.
func slope(x, y []float64) float64 {
	var sx, sy, sxx, sxy float64
	for i := range x {
		sx += x[i]
		sy += y[i]
		sxx += x[i] * x[i]
		sxy += x[i] * y[i]
	}
	n := float64(len(x))
	return (n*sxy - sx*sy) / (n*sxx - sx*sx)
}

// byVariance estimates the Hurst parameter from the variance of means of blocks
// of m counts, which falls as m^(2H-2) (W. Leland, M. Taqqu, W. Willinger,
// D. Wilson, "On the self-similar nature of Ethernet traffic", IEEE/ACM Trans.
// Networking 2, 1994). The variance of n block means about their own mean is
// too small by the share n^(2H-2), which is made good with the true H.
func byVariance(counts []float64, from, to int, h float64) float64 {
	var x, y []float64
	for m := from; m <= to; m = m*3/2 + 1 {
		var sum, sq float64
		n := len(counts) / m
		for b := range n {
			mean := 0.0
			for _, c := range counts[b*m : b*m+m] {
				mean += c / float64(m)
			}
			sum += mean
			sq += mean * mean
		}
		v := (sq - sum*sum/float64(n)) / float64(n) / (1 - math.Pow(float64(n), 2*h-2))
		x, y = append(x, math.Log(float64(m))), append(y, math.Log(v))
	}
	return 1 + slope(x, y)/2
}

// byPeriodogram estimates it from the lowest frequencies, where the spectrum
// goes as f^(1-2H) (J. Geweke, S. Porter-Hudak, "The estimation and application
// of long memory time series models", J. Time Series Analysis 4, 1983).
func byPeriodogram(counts []float64, lowest int) float64 {
	mean := 0.0
	for _, c := range counts {
		mean += c / float64(len(counts))
	}
	centred := make([]float64, len(counts))
	for i, c := range counts {
		centred[i] = c - mean
	}
	spectrum := fourier.NewFFT(len(counts)).Coefficients(nil, centred)
	var x, y []float64
	for k := 1; k <= lowest; k++ {
		x = append(x, math.Log(float64(k)))
		y = append(y, 2*math.Log(cmplx.Abs(spectrum[k])))
	}
	return (1 - slope(x, y)) / 2
}

// Both estimators are right on white noise: H = 1/2.
func TestEstimatorsOnPoisson(t *testing.T) {
	for name, estimate := range hurstEstimators(0.5) {
		mean, half := replicate(30, func(seed uint64) float64 {
			s := streamOf(t, StreamConfig{Common: Common{Load: 8 * nodes.Mbps, Seed: seed}})
			return estimate(countsOf(s, 1<<12, 5*des.Millisecond))
		})
		if math.Abs(mean-0.5) > 0.04 || half > 0.04 {
			t.Errorf("%s: %.3f ± %.3f, want 0.5 ± 0.04", name, mean, half)
		}
	}
}

// hurstEstimators returns the two estimators for 4096 counts.
func hurstEstimators(h float64) map[string]func([]float64) float64 {
	return map[string]func([]float64) float64{
		"variance":    func(c []float64) float64 { return byVariance(c, 2, 200, h) },
		"periodogram": func(c []float64) float64 { return byPeriodogram(c, 200) },
	}
}

// countsOf returns the packets born in n bins.
func countsOf(s Source, n int, bin des.Time) []float64 {
	counts := make([]float64, n)
	var buf []nodes.Packet
	for i := range counts {
		buf = s.Emit(des.Time(i+1)*bin, buf[:0])
		counts[i] = float64(len(buf))
	}
	return counts
}

// On/off flows with Pareto times of shape alpha have H = (3 - alpha)/2
// (W. Willinger et al., IEEE/ACM Trans. Networking 5, 1997), recovered within
// 0.08 over two decades of time well above the mean times of 4 and 8 ms.
func TestOnOffHurst(t *testing.T) {
	for _, h := range []float64{0.7, 0.9} {
		sums := map[string]float64{}
		const runs = 2
		for seed := range uint64(runs) {
			s := onOffOf(t, OnOffConfig{
				Common: Common{Load: 33 * nodes.Mbps, Seed: seed}, Hurst: h, Peak: nodes.Mbps, Packet: 500,
				On: 4 * des.Millisecond, Off: 8 * des.Millisecond,
			})
			counts := countsOf(s, 1<<12, 60*des.Millisecond)
			for name, estimate := range hurstEstimators(h) {
				sums[name] += estimate(counts) / runs
			}
		}
		for name, got := range sums {
			if math.Abs(got-h) > 0.08 {
				t.Errorf("%s: %.3f, want %v ± 0.08", name, got, h)
			}
		}
	}
}
