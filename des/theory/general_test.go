package theory

import (
	"fmt"
	"testing"
)

// Computed from sigma = a(mu(1-sigma)) of Kleinrock (1975), ch. 6, and from
// Kingman's bound (1962); the service time is 1.
func TestGIM1(t *testing.T) {
	for _, c := range []struct {
		rho                   float64
		stages                int // of the gap; 0: constant
		sigma, wait, p99, max string
	}{
		{0.5, 0, "0.20318787", "0.25500097", "5.779493", "0.50000000"},
		{0.8, 0, "0.62862980", "1.69273084", "12.400484", "2.00000000"},
		{0.9, 0, "0.80689983", "4.17865942", "23.848608", "4.50000000"},
		{0.95, 0, "0.90169511", "9.17243395", "", "9.50000000"},
		{0.8, 2, "0.73985295", "2.84397977", "", "3.56250000"},
	} {
		name := fmt.Sprintf("rho %v, %d stages: ", c.rho, c.stages)
		q, varGap := DM1(c.rho, 1), 0.0
		if c.stages > 0 {
			q, varGap = ErlangM1(c.stages, c.rho, 1), 1/(float64(c.stages)*c.rho*c.rho)
		}
		digits(t, name+"sigma", q.Sigma, c.sigma)
		digits(t, name+"wait", q.MeanWait(), c.wait)
		if c.p99 != "" {
			digits(t, name+"p99", q.SojournQuantile(0.99), c.p99)
		}
		bound := KingmanBound(c.rho, varGap, 1, 1)
		digits(t, name+"bound", bound, c.max)
		if q.MeanWait() > bound {
			t.Errorf("%swait %v above its bound %v", name, q.MeanWait(), bound)
		}
		exact(t, name+"sojourn", q.MeanSojourn(), q.MeanWait()+1)
	}
	// One stage is M/M/1.
	exact(t, "M/M/1", ErlangM1(1, 0.7, 1).MeanWait(), MM1{0.7, 1}.MeanWait())
}

func TestTwoMoments(t *testing.T) {
	// van Foreest, exercise from R. Hall, Queueing Methods, 5.19: gaps uniform
	// from 3 to 9 min, service mean 5, sd 2; then Poisson arrivals.
	digits(t, "Hall 5.19", TwoMomentWait(1.0/6, 3.0/36, 5, 4.0/25), "3.0416667")
	exact(t, "Hall 5.19, Poisson", MG1{1.0 / 6, 5, 29, 0}.MeanWait(), 14.5)
	exact(t, "exact for Poisson arrivals", TwoMomentWait(1.0/6, 1, 5, 4.0/25), 14.5)
	// van Foreest, tandem exercise, in hours.
	w1 := TwoMomentWait(2, 2, 1.0/3, 0.5)
	digits(t, "station 1", w1, "0.8333333")
	scv := DepartureSCV(2.0/3, 2, 0.5)
	digits(t, "departures", scv, "1.3333333")
	w2 := TwoMomentWait(2, scv, 25.0/60, 0.5)
	digits(t, "station 2", w2, "1.9097222")
	digits(t, "sum of sojourns", w1+20.0/60+w2+25.0/60, "3.4930556")
	// Departures of M/D/1: 1 - rho^2, Marshall (1968).
	exact(t, "M/D/1 departures", DepartureSCV(0.8, 1, 0), 0.36)
}

func TestPriority(t *testing.T) {
	rate := func(bitPerSecond, bytes float64) float64 { return bytes * 8 / bitPerSecond } // seconds
	a, b, c := rate(10e6, 200), rate(10e6, 1000), rate(10e6, 1500)
	d, e, f := rate(100e6, 200), rate(100e6, 1000), rate(100e6, 1500)
	for _, v := range []struct {
		name    string // inputs; waits computed from the formula of Cobham (1954)
		classes []PriorityClass
		unit    float64
		waits   [3]string
		work    string
	}{
		{"three exponential classes of load 0.25", []PriorityClass{{0.25, 1, 2}, {0.25, 1, 2}, {0.25, 1, 2}}, 1,
			[3]string{"1.0000000", "2.0000000", "6.0000000"}, "2.2500000"},
		{"10 Mbit/s: constant 200 B, exponential 1000 B, constant 1500 B; ms",
			[]PriorityClass{{1250, a, a * a}, {375, b, 2 * b * b}, {250, c, c * c}}, 1e3,
			[3]string{"0.5450000", "1.0900000", "4.3600000"}, "1.7440000"},
		{"100 Mbit/s: constant 200, 1000, 1500 B; us",
			[]PriorityClass{{5000, d, d * d}, {4000, e, e * e}, {2500, f, f * f}}, 1e6,
			[3]string{"34.173913", "56.956522", "174.666667"}, "73.360000"},
	} {
		work := 0.0
		for i, w := range PriorityWaits(v.classes) {
			digits(t, v.name, v.unit*w, v.waits[i])
			work += v.classes[i].Lambda * v.classes[i].S1 * w
		}
		digits(t, v.name+": conserved", v.unit*ConservedWork(v.classes), v.work)
		exact(t, v.name+": conservation", work, ConservedWork(v.classes))
	}
	three := []PriorityClass{{0.25, 1, 2}, {0.25, 1, 2}, {0.25, 1, 2}}
	// Bertsekas and Gallager (1992), sec. 3.5.3, computed.
	for i, want := range []string{"1.3333333", "2.6666667", "8.0000000"} {
		digits(t, "preemptive", PreemptiveSojourns(three)[i], want)
	}
	over := PriorityWaits([]PriorityClass{{0.5, 1, 2}, {0.6, 1, 2}})
	exact(t, "above an overloaded class", over[0], 2.2)
	if over[1] < 1e300 {
		t.Errorf("wait of an overloaded class: %v, want +Inf", over[1])
	}
}
