package theory

import (
	"fmt"
	"math"
	"testing"
)

func TestPeriodicSmall(t *testing.T) {
	// Two sources: P(W > x) = (1-x)/P, computed from the geometry of one phase.
	for _, p := range []float64{4, 10} {
		q := Periodic{2, p, 1}
		for _, x := range []float64{0, 0.25, 0.9, 1} {
			exact(t, "two sources", q.WaitCCDF(x), (1-x)/p)
		}
		exact(t, "mean of two", q.MeanWait(), 1/(2*p))
		exact(t, "mean of three", Periodic{3, p, 1}.MeanWait(), (p+1)/(p*p))
	}
	// Three sources, period 4: enumeration of the two other phases.
	for x, want := range map[float64]float64{0: 0.5, 0.25: 0.40234375, 0.5: 0.296875, 1: 0.0625, 1.5: 0.015625} {
		exact(t, fmt.Sprintf("three sources at %v", x), Periodic{3, 4, 1}.WaitCCDF(x), want)
	}
	exact(t, "one source never waits", Periodic{1, 2, 1}.WaitCCDF(0), 0)
	exact(t, "quantile of no wait", Periodic{2, 10, 1}.WaitQuantile(0.5), 0)
	exact(t, "full server", Periodic{3, 3, 1}.WorkCCDF(0), 1)
}

// Computed from the formula of Eckberg (1979) and Roberts and Virtamo (1991);
// the bridge from its own.
func TestPeriodicWork(t *testing.T) {
	for _, c := range []struct {
		n          int
		p          float64
		mean       string
		x          float64
		ccdf, appr string
	}{
		{10, 12.5, "1.05302933", 2, "0.164001842", "0.165298888"},
		{10, 12.5, "1.05302933", 4, "0.006808499", "0.005516564"},
		{10, 12.5, "1.05302933", 6, "4.171150e-5", "3.717032e-5"},
		{20, 25, "1.28641513", 2, "0.245386603", "0.246596964"},
		{20, 25, "1.28641513", 4, "0.034059482", "0.027323722"},
		{20, 25, "1.28641513", 6, "0.002196455", "0.001360368"},
		{20, 25, "1.28641513", 8, "6.150543e-5", "3.043248e-5"},
		{100, 125, "1.72562025", 2, "0.337535943", "0.339595526"},
		{100, 125, "1.72562025", 4, "0.114701112", "0.098273586"},
		{100, 125, "1.72562025", 8, "0.008643266", "0.005092431"},
		{100, 110, "3.17336878", 2, "0.591371981", "0.618783392"},
		{100, 110, "3.17336878", 4, "0.320620320", "0.326279795"},
		{100, 110, "3.17336878", 8, "0.059759123", "0.056134763"},
		{200, 210, "5.33100025", 2, "0.762563616", "0.786627861"},
		{200, 210, "5.33100025", 8, "0.234210528", "0.236927759"},
	} {
		name := fmt.Sprintf("n %d, P %v: ", c.n, c.p)
		q := Periodic{c.n, c.p, 1}
		digits(t, name+"mean work", q.MeanWork(), c.mean)
		digits(t, name+"work", q.WorkCCDF(c.x), c.ccdf)
		digits(t, name+"bridge", q.BridgeCCDF(c.x), c.appr)
		// M/D/1 of the same load is an upper bound.
		if bound := (MD1{q.Load(), 1}).WaitCCDF(c.x); q.WorkCCDF(c.x) > bound {
			t.Errorf("%sP(V > %v) exceeds that of M/D/1, %v", name, c.x, bound)
		}
	}
	// M/D/1 at load 0.8, computed for the same table.
	for x, want := range map[float64]string{2: "0.365480064", 4: "0.154624888", 6: "0.065319108"} {
		digits(t, "M/D/1", MD1{0.8, 1}.WaitCCDF(x), want)
	}
}

// Voice on 10 Mbit/s, a 238 B frame (190.4 us) per 20 ms and call; waits in us,
// computed from the same formula.
func TestPeriodicVoice(t *testing.T) {
	p := []float64{0.5, 0.95, 0.99, 0.999, 0.9999}
	for _, c := range []struct {
		calls int
		mean  string
		waits [5]string
	}{
		{80, "255.9049", [5]string{"171.8694", "831.8555", "1223.1982", "1718.3641", "2158.95"}},
		{90, "412.1950", [5]string{"309.2498", "1203.1151", "1683.0993", "2264.0479", "2765.14"}},
		{100, "751.2137", [5]string{"654.4725", "1818.3614", "2371.0739", "3015.6200", "3559.07"}},
		{105, "1093.1168", [5]string{"1018.7306", "2253.1073", "2822.0068", "3480.9221", "4034.36"}},
	} {
		q := Periodic{c.calls, 20000, 190.4}
		digits(t, fmt.Sprintf("%d calls: mean", c.calls), q.MeanWait(), c.mean)
		for i, want := range c.waits {
			digits(t, fmt.Sprintf("%d calls: p%v", c.calls, 100*p[i]), q.WaitQuantile(p[i]), want)
		}
	}
}

// Computed from Reich (1957): Erlang quantiles in units of 1/(mu-lambda).
func TestTandem(t *testing.T) {
	p := []float64{0.5, 0.95, 0.99, 0.999}
	for k, waits := range map[int][4]string{
		2:  {"1.678347", "4.743865", "6.638352", "9.233413"},
		3:  {"2.674060", "6.295794", "8.405947", "11.228872"},
		5:  {"4.670909", "9.153519", "11.604626", "14.794149"},
		8:  {"7.669249", "13.148114", "15.999963", "19.626177"},
		10: {"9.668715", "15.705216", "18.783117", "22.657373"},
	} {
		for i, want := range waits {
			digits(t, fmt.Sprintf("%d nodes", k), ErlangQuantile(k, 1, p[i]), want)
		}
	}
	// mu 1250 and 2000, lambda 1000 per second; ms.
	for i, want := range []string{"3.867966", "13.133605", "19.571409", "28.781749"} {
		digits(t, "two nodes", 1e3*TwoNodeQuantile(250, 1000, p[i]), want)
		exact(t, "either order", TwoNodeQuantile(1000, 250, p[i]), TwoNodeQuantile(250, 1000, p[i]))
	}
	// Two equal nodes are Erlang-2, and nearly equal ones nearly so.
	want := ErlangQuantile(2, 5, 0.99)
	for _, b := range []float64{5, 5 * (1 + 1e-12)} {
		if got := TwoNodeQuantile(5, b, 0.99); math.Abs(got/want-1) > 1e-9 {
			t.Errorf("nodes 5 and %v: p99 %v, want %v", b, got, want)
		}
	}
	exact(t, "one node", ErlangQuantile(1, 250, 0.99), MM1{1000, 1250}.SojournQuantile(0.99))
}
