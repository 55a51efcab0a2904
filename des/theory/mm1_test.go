package theory

import (
	"fmt"
	"math"
	"testing"
)

func TestMM1Means(t *testing.T) {
	for _, c := range []struct {
		lambda, mu, number, sojourn float64
		source                      string
	}{
		{100, 200, 1, 0.010, "course note on M/M/1 with packet examples, table of N and delay"},
		{150, 200, 3, 0.020, "same table"},
		{175, 200, 7, 0.040, "same table"},
		{1000, 2000, 1, 0.001, "same table for N; the delay computed from 1/(mu-lambda)"},
		{1000, 1250, 4, 0.004, "computed from the formulas of Kleinrock (1975)"},
	} {
		q := MM1{c.lambda, c.mu}
		exact(t, c.source+": number", q.MeanNumber(), c.number)
		exact(t, c.source+": sojourn", q.MeanSojourn(), c.sojourn)
		exact(t, c.source+": Little", q.MeanQueue(), c.lambda*q.MeanWait())
	}
	// 10 Mbit/s and exponential packets of 1000 B: computed from Kleinrock's formulas.
	q := MM1{1000, 1250}
	exact(t, "wait", q.MeanWait(), 0.0032)
	exact(t, "queue", q.MeanQueue(), 3.2)
}

// All computed from the formulas of Kleinrock (1975).
func TestMM1Quantiles(t *testing.T) {
	p := []float64{0.5, 0.9, 0.95, 0.99, 0.999}
	link := MM1{1000, 1250}
	for i, want := range []string{"2.772589", "9.210340", "11.982929", "18.420681", "27.631021"} {
		digits(t, "sojourn in ms", 1e3*link.SojournQuantile(p[i]), want)
		exact(t, "sojourn back", link.SojournCCDF(link.SojournQuantile(p[i])), 1-p[i])
	}
	for i, want := range []string{"1.880015", "8.317766", "11.090355", "17.528107", "26.738447"} {
		digits(t, "wait in ms", 1e3*link.WaitQuantile(p[i]), want)
		exact(t, "wait back", link.WaitCCDF(link.WaitQuantile(p[i])), 1-p[i])
	}
	p = []float64{0.5, 0.95, 0.99, 0.999}
	for _, c := range []struct {
		rho   float64
		waits [4]string
	}{
		{0.5, [4]string{"0.000000", "4.605170", "7.824046", "12.429216"}},
		{0.8, [4]string{"2.350018", "13.862944", "21.910133", "33.423059"}},
		{0.9, [4]string{"5.877867", "28.903718", "44.998097", "68.023948"}},
		{0.95, [4]string{"12.837078", "58.888780", "91.077538", "137.129240"}},
	} {
		for i, want := range c.waits {
			digits(t, fmt.Sprintf("rho %v: wait", c.rho), MM1{c.rho, 1}.WaitQuantile(p[i]), want)
		}
	}
	for i, want := range []string{"0.693147", "2.995732", "4.605170", "6.907755"} {
		digits(t, "change", MM1{0.7, 1}.ChangeQuantile(p[i]), want)
	}
}

func TestMM1Rest(t *testing.T) {
	q := MM1{0.8, 1}
	// Computed from rho^n, and from rho(2-rho)/(1-rho)^2.
	digits(t, "P(N >= 10)", q.NumberCCDF(10), "0.107374182")
	digits(t, "P(N >= 20)", q.NumberCCDF(20), "0.011529215")
	exact(t, "sd of sojourn", math.Sqrt(q.SojournVariance()), 5)
	digits(t, "sd of wait", math.Sqrt(q.WaitVariance()), "4.898979")
	exact(t, "mean change", MM1{300, 1250}.MeanChange(), 1.0/1250)
	// Computed from the formula; process in Daley (1968).
	for rho, want := range map[float64]string{0.5: "0.7777778", 0.8: "0.9629630", 0.9: "0.9904306", 0.95: "0.9975580"} {
		digits(t, "correlation", MM1{rho, 1}.WaitCorrelation(), want)
	}
	// Blomqvist (1967), Daley (1968), Law (1975), from memory, recomputed.
	for rho, want := range map[float64]string{0.5: "29", 0.8: "1976", 0.9: "35901", 0.95: "607601"} {
		digits(t, "variance of the mean wait", MM1{rho, 1}.MeanWaitVariance(1), want)
	}
	if s := 1e6 * math.Sqrt(MM1{0.8 * 1e6, 1e6}.MeanWaitVariance(1e6)); math.Abs(s/4-0.01111) > 5e-6 {
		t.Errorf("relative sd of a run of 1e6 customers: %v, want 1.111 %%", s/4)
	}
}

func TestOverload(t *testing.T) {
	for name, got := range map[string]float64{
		"M/M/1 wait": MM1{2, 1}.MeanWait(), "M/M/1 number": MM1{1, 1}.MeanNumber(), "M/M/1 p99": MM1{1, 1}.WaitQuantile(0.99),
		"M/M/1 sojourn p50": MM1{2, 1}.SojournQuantile(0.5), "M/M/1 run": MM1{1, 1}.MeanWaitVariance(10),
		"M/D/1 wait": MD1{1, 1}.MeanWait(), "M/D/1 p99": MD1{1.5, 1}.WaitQuantile(0.99),
		"M/G/1 variance": MG1{2, 1, 1, 1}.WaitVariance(), "M/G/1 second moment": MG1{2, 1, 1, 1}.WaitSecondMoment(),
		"M/G/1 busy": MG1{2, 1, 1, 1}.MeanBusy(), "bound": KingmanBound(1, 1, 1, 1), "two moments": TwoMomentWait(1, 1, 1, 1),
		"D/M/1 wait": DM1(1, 1).MeanWait(), "D/M/1 p99": DM1(2, 1).SojournQuantile(0.99), "M/M/n wait": MMN{2, 2, 1}.MeanWait(),
	} {
		if !math.IsInf(got, 1) {
			t.Errorf("%s from load 1 on: %v, want +Inf", name, got)
		}
	}
	for name, got := range map[string]float64{
		"M/M/1": MM1{2, 1}.WaitCCDF(7), "M/M/1 sojourn": MM1{2, 1}.SojournCCDF(7), "M/D/1": MD1{1, 1}.WaitCCDF(7),
		"M/M/n": MMN{2, 3, 1}.WaitCCDF(7), "M/M/n share": MMN{2, 3, 1}.WaitShare(), "before 0": MM1{1, 2}.WaitCCDF(-1),
	} {
		exact(t, name, got, 1)
	}
}

// The reference collection's rows of finite queues: M/M/1/K computed from the
// closed form, M/D/1/K from the embedded chain and checked against Brun and
// Garcia (2000). The service time is 1.
func TestFiniteQueues(t *testing.T) {
	for _, c := range []struct {
		rho                            float64
		k                              int
		lossM, sojournM, lossD, sojonD string
	}{
		{0.5, 4, "0.032258065", "1.733333", "0.007684247", "1.448953"},
		{0.8, 5, "0.088819499", "2.563065", "0.035290396", "2.209667"},
		{0.8, 10, "0.023492858", "3.797098", "0.003639231", "2.829773"},
		{0.8, 20, "0.002327309", "4.766726", "4.827176e-5", "2.995336"},
		{0.9, 10, "0.050813731", "4.646601", "0.016631748", "3.922436"},
		{0.9, 20, "0.013651386", "7.231935", "0.001853176", "5.141162"},
		{0.95, 50, "0.004150652", "15.832048", "0.000332847", "10.171500"},
		{1, 10, "0.090909091", "5.500000", "0.050847458", "5.336310"},
		{1.2, 10, "0.192586495", "6.926138", "0.170910769", "7.630497"},
		{1.5, 5, "0.365413534", "3.758294", "0.338448809", "3.957167"},
	} {
		name := fmt.Sprintf("rho %v, K %d: ", c.rho, c.k)
		m, d := MM1K{c.rho, 1, c.k}, MD1K{c.rho, 1, c.k}
		digits(t, name+"M/M/1/K loss", m.Loss(), c.lossM)
		digits(t, name+"M/M/1/K sojourn", m.MeanSojourn(), c.sojournM)
		digits(t, name+"M/D/1/K loss", d.Loss(), c.lossD)
		digits(t, name+"M/D/1/K sojourn", d.MeanSojourn(), c.sojonD)
		// A change of unit changes nothing but the unit.
		exact(t, name+"loss in us", MD1K{c.rho / 160, 160, c.k}.Loss(), d.Loss())
		exact(t, name+"sojourn in us", MD1K{c.rho / 160, 160, c.k}.MeanSojourn(), 160*d.MeanSojourn())
	}
	// Without room to wait both are Erlang's B(1, a), whatever the service law.
	exact(t, "M/M/1/1", MM1K{3, 1, 1}.Loss(), 0.75)
	exact(t, "M/D/1/1", MD1K{3, 1, 1}.Loss(), 0.75)
	// Far overload: 1 - 1/rho is lost whatever the room, if there is much.
	digits(t, "M/M/1/K overloaded", MM1K{2, 1, 5000}.Loss(), "0.500000000")
	digits(t, "M/D/1/K overloaded", MD1K{2, 1, 1000}.Loss(), "0.500000000")
}

// A rare loss keeps its digits: one more place divides it by exp(eta), the
// decay of the queue without end (COST 242, 1996), down to 1e-54.
func TestRareLoss(t *testing.T) {
	eta, _ := MD1{0.5, 1}.Tail()
	for k := 20; k <= 100; k += 20 {
		got := math.Log(MD1K{0.5, 1, k}.Loss() / MD1K{0.5, 1, k + 1}.Loss())
		if math.Abs(got-eta) > 1e-9 {
			t.Errorf("K %d: loss falls by exp(-%v), want exp(-%v)", k, got, eta)
		}
	}
}
