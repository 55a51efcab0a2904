package theory

import (
	"math"
	"testing"
)

func TestMG1(t *testing.T) {
	// van Foreest, Analysis of Queueing Systems, exercise: 3 a day of 8 h, mean
	// service 2 h; squared coefficient of variation 1/2 and 0.
	exact(t, "van Foreest", MG1{3.0 / 8, 2, 6, 0}.MeanWait(), 4.5)
	exact(t, "van Foreest, constant", MG1{3.0 / 8, 2, 4, 0}.MeanWait(), 3)

	// 10 Mbit/s = 1.25 B/us, 40/576/1500 B as 7:4:1, load 0.8; computed from
	// the formulas of Pollaczek, Khinchine and Takacs.
	m1, m2, m3 := MixMoments([]float64{40, 576, 1500}, []float64{7, 4, 1})
	exact(t, "mean size", m1, 4084.0/12)
	digits(t, "scv of size", m2/(m1*m1)-1, "1.58165978")
	s1, s2, s3 := Scaled(0.8, m1, m2, m3)
	q := MG1{0.8 / s1, s1, s2, s3}
	digits(t, "rate per s", 1e6*q.Lambda, "2938.29579")
	digits(t, "wait", q.MeanWait(), "1405.7998")
	digits(t, "sd of wait", math.Sqrt(q.WaitVariance()), "1685.609")
	digits(t, "sojourn", q.MeanSojourn(), "1678.0665")
	digits(t, "sd of sojourn", math.Sqrt(q.SojournVariance()), "1720.036")
	exact(t, "second moment", q.WaitSecondMoment(), q.WaitVariance()+q.MeanWait()*q.MeanWait())

	// 64/570/1518 B, same link.
	m1, m2, m3 = MixMoments([]float64{64, 570, 1518}, []float64{7, 4, 1})
	s1, s2, s3 = Scaled(0.8, m1, m2, m3)
	q = MG1{0.8 / s1, s1, s2, s3}
	digits(t, "rate per s", 1e6*q.Lambda, "2826.18935")
	digits(t, "wait", q.MeanWait(), "1368.8539")

	// Load 0.8, unit mean, computed: Erlang-2 service has S2 = 1.5; balanced
	// hyperexponential of squared coefficient of variation 4 has S2 = 5.
	exact(t, "Erlang-2", MG1{0.8, 1, 1.5, 0}.MeanWait(), 3)
	exact(t, "hyperexponential", MG1{0.8, 1, 5, 0}.MeanWait(), 10)
	exact(t, "exponential", MG1{0.8, 1, 2, 6}.WaitVariance(), 24)

	// Bertsekas and Gallager (1992), sec. 3.5, computed in ms: constant 0.16,
	// load 0.4, low packets of 1.2.
	digits(t, "vacations", MD1{0.4 / 0.16, 0.16}.MG1().MeanWaitVacations(1.2, 1.2*1.2), "0.6533333")

	// van Foreest, M/G/1 exercise.
	exact(t, "idle", MG1{0.8, 1, 2, 6}.MeanIdle(), 1.25)
	exact(t, "busy", MG1{0.8, 1, 2, 6}.MeanBusy(), 5)
}

// The closed forms against the sum over all sizes of the definition: P(size =
// 1) = P(X < 3/2), P(size = n) = P(n-1/2 <= X < n+1/2).
func TestRoundedExponential(t *testing.T) {
	for _, mean := range []float64{0.3, 1, 12.5, 1000} {
		var w1, w2, w3 float64
		for n := 1.0; n < 60*mean+60; n++ {
			lo := n - 0.5
			if n == 1 {
				lo = 0
			}
			p := math.Exp(-lo/mean) * -math.Expm1((lo-n-0.5)/mean)
			w1 += n * p
			w2 += n * n * p
			w3 += n * n * n * p
		}
		m1, m2, m3 := RoundedExponential(mean)
		for i, v := range [][2]float64{{m1, w1}, {m2, w2}, {m3, w3}} {
			if math.Abs(v[0]/v[1]-1) > 1e-10 {
				t.Errorf("mean %v: moment %d is %v, want %v", mean, i+1, v[0], v[1])
			}
		}
	}
	// Of a large mean little is left but the exponential law.
	m1, m2, m3 := RoundedExponential(1e5)
	e1, e2, e3 := ExponentialMoments(1e5)
	if math.Abs(m1/e1-1) > 1e-9 || math.Abs(m2/e2-1) > 1e-9 || math.Abs(m3/e3-1) > 1e-9 {
		t.Errorf("moments %v, %v, %v of mean 1e5, want %v, %v, %v", m1, m2, m3, e1, e2, e3)
	}
}
