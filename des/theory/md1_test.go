package theory

import (
	"fmt"
	"math"
	"math/big"
	"testing"
)

// Computed from the law of Erlang (1909) and Crommelin (1932) in high
// precision, by the all-positive series, and by Franx (2001), which agreed.
func TestMD1Wait(t *testing.T) {
	p := []float64{0.5, 0.95, 0.99, 0.999}
	for _, c := range []struct {
		rho          float64
		mean, sd     string
		quantiles    [4]string
		eta, c, diff string
	}{
		{0.5, "0.5000000", "0.763763", [4]string{"0.0000000", "2.0506384", "3.3362560", "5.1683850"}, "1.25643121", "0.66099864", "0.4261226"},
		{0.8, "2.0000000", "2.309401", [4]string{"1.2759399", "6.6203250", "10.3558868", "15.7002682"}, "0.43084221", "0.86639268", "0.6233224"},
		{0.9, "4.5000000", "4.821825", [4]string{"3.0130475", "14.1286738", "21.8982373", "33.0139697"}, "0.20714650", "0.93330158", ""},
		{0.95, "9.5000000", "9.827682", [4]string{"6.4806679", "29.1162044", "44.9377655", "67.5733022"}, "0.10172434", "0.96666283", "0.7089285"},
	} {
		name := fmt.Sprintf("rho %v: ", c.rho)
		q := MD1{c.rho, 1}
		digits(t, name+"mean", q.MeanWait(), c.mean)
		digits(t, name+"sd", math.Sqrt(q.WaitVariance()), c.sd)
		for i, want := range c.quantiles {
			digits(t, name+fmt.Sprintf("p%v", 100*p[i]), q.WaitQuantile(p[i]), want)
		}
		eta, factor := q.Tail()
		digits(t, name+"eta", eta, c.eta)
		digits(t, name+"factor", factor, c.c)
		if c.diff != "" { // derived from the Lindley recursion
			digits(t, name+"mean change", q.MeanChange(), c.diff)
		}
		exact(t, name+"half of M/M/1", q.MeanWait(), MM1{c.rho, 1}.MeanWait()/2) // van Foreest, Analysis of Queueing Systems
		// A change of unit changes nothing but the unit.
		scaled := MD1{c.rho / 160, 160}
		if got, want := scaled.WaitQuantile(0.99), 160*q.WaitQuantile(0.99); math.Abs(got/want-1) > 1e-9 {
			t.Errorf("%sp99 in other units %v, want %v", name, got, want)
		}
	}
}

// crommelin sums the alternating series of the wait in 400-bit arithmetic:
// an independent and slow reference for D = 1,
//
//	P(W <= t) = (1-rho) sum over k = 0..floor(t) of (rho(k-t))^k / k! exp(-rho(k-t)).
func crommelin(rho, t float64) float64 {
	f := func(x float64) *big.Float { return new(big.Float).SetPrec(400).SetFloat64(x) }
	exp := func(x *big.Float) *big.Float {
		y := new(big.Float).Quo(x, f(1<<20))
		sum, term := f(1), f(1)
		for k := 1; k < 60; k++ {
			term.Mul(term, y).Quo(term, f(float64(k)))
			sum.Add(sum, term)
		}
		for range 20 {
			sum.Mul(sum, sum)
		}
		return sum
	}
	total := f(0)
	for k := 0; float64(k) <= t; k++ {
		a := new(big.Float).Mul(f(rho), new(big.Float).Sub(f(float64(k)), f(t)))
		term := exp(new(big.Float).Neg(a))
		for j := 1; j <= k; j++ {
			term.Mul(term, a).Quo(term, f(float64(j)))
		}
		total.Add(total, term)
	}
	total.Mul(total, new(big.Float).Sub(f(1), f(rho)))
	got, _ := new(big.Float).Sub(f(1), total).Float64()
	return got
}

// Each of the three forms agrees with the reference, also next to the seams.
func TestMD1AgainstReference(t *testing.T) {
	for _, rho := range []float64{0.1, 0.5, 0.8, 0.80001, 0.9, 0.97} {
		q := MD1{rho, 1}
		for _, x := range []float64{0, 0.3, 0.999999, 1, 1.5, 4, 9.75, 14.9999, 15, 15.0001, 22.2, 40} {
			want := crommelin(rho, x)
			if got := q.WaitCCDF(x); math.Abs(got-want) > 1e-10*want {
				t.Errorf("rho %v: P(W > %v) = %v, want %v", rho, x, got, want)
			}
		}
	}
}

// Computed by the recursion of Kleinrock (1975), ch. 5.
func TestMD1Number(t *testing.T) {
	p := MD1{0.8, 1}.NumberShares(41)
	for n, want := range []string{"0.20000000", "0.24510819", "0.18941175", "0.12757958", "0.08327559", "0.05412765"} {
		digits(t, fmt.Sprintf("P(N = %d)", n), p[n], want)
	}
	above := func(n int) float64 {
		sum := 0.0
		for _, v := range p[:n+1] {
			sum += v
		}
		return 1 - sum
	}
	digits(t, "P(N > 10)", above(10), "0.01165711")
	digits(t, "P(N > 20)", above(20), "0.000156844")
}
