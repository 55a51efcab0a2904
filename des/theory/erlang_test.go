package theory

import (
	"fmt"
	"math"
	"testing"
)

func TestErlangB(t *testing.T) {
	// Small fractions by hand from a^n/n! / sum a^k/k!; the rest computed from
	// Erlang's formula (1918).
	for _, c := range []struct {
		n    int
		a    float64
		want string
	}{
		{1, 1, "0.5000000000"}, {2, 1, "0.2000000000"}, {2, 2, "0.4000000000"}, {3, 2, "0.2105263158"},
		{4, 2, "0.0952380952"}, {5, 3, "0.1100543478"}, {10, 5, "0.0183845703"}, {10, 8, "0.1216610643"},
		{20, 15, "0.0455932156"}, {30, 25, "0.0526031722"}, {40, 40, "0.1161559843"}, {100, 80, "0.0039920286"},
	} {
		digits(t, fmt.Sprintf("B(%d, %v)", c.n, c.a), ErlangB(c.n, c.a), c.want)
		exact(t, "by the logarithm", math.Exp(LogErlangB(c.n, c.a)), ErlangB(c.n, c.a))
	}
	// Reference values of a public unit test, from a general maths system.
	for _, c := range []struct {
		n    int
		a    float64
		want float64
	}{
		{100, 120, -1.62826407041}, {10000, 12000, -1.78927734649}, {100, 20, -84.1661482002},
		{10000, 200, -29325.7541713}, {100, 10000, -0.01004931576},
	} {
		if got := LogErlangB(c.n, c.a); math.Abs(got/c.want-1) > 1e-9 {
			t.Errorf("ln B(%d, %v) = %v, want %v", c.n, c.a, got, c.want)
		}
	}
	exact(t, "no traffic", ErlangB(3, 0), 0)
	exact(t, "no circuits", ErlangB(0, 7), 1)
	digits(t, "carried of 15 by 20", 15*(1-ErlangB(20, 15)), "14.3161017662")
}

// Roots of the recursion, checked against the incomplete gamma function.
func TestErlangBLoad(t *testing.T) {
	refused := []float64{0.001, 0.01, 0.02, 0.05}
	for n, loads := range map[int][4]string{
		1: {"0.00100", "0.01010", "0.02041", "0.05263"}, 2: {"0.04576", "0.15259", "0.22347", "0.38132"},
		3: {"0.19384", "0.45549", "0.60221", "0.89940"}, 5: {"0.76211", "1.36079", "1.65714", "2.21847"},
		10: {"3.09204", "4.46118", "5.08400", "6.21571"}, 15: {"6.07718", "8.10804", "9.00962", "10.63272"},
		24: {"12.24317", "15.29500", "16.63058", "19.03071"}, 32: {"18.20470", "22.04833", "23.72488", "26.74566"},
		50: {"32.51185", "37.90140", "40.25514", "44.53305"}, 80: {"57.81037", "65.36276", "68.68808", "74.81990"},
		96: {"71.72937", "80.30588", "84.10034", "91.14618"}, 100: {"75.24198", "84.06416", "87.97198", "95.24037"},
		200: {"165.62392", "179.73802", "186.15820", "198.50732"},
	} {
		for i, want := range loads {
			load := ErlangBLoad(n, refused[i])
			digits(t, fmt.Sprintf("%d circuits at %v", n, refused[i]), load, want)
			if got := ErlangCircuits(load*(1-1e-9), refused[i]); got != n {
				t.Errorf("%v erlang at %v need %d circuits, want %d", load, refused[i], got, n)
			}
		}
	}
	// A carrier's course page "Read an Erlang Table", 2 %, within its 0.001.
	for n, want := range map[int]float64{7: 2.935, 17: 10.656, 31: 22.827, 47: 37.462, 65: 54.376, 89: 77.342} {
		if got := ErlangBLoad(n, 0.02); math.Abs(got-want) > 0.001 {
			t.Errorf("%d circuits at 2 %%: %v, want %v", n, got, want)
		}
	}
	// T. Rappaport, Wireless Communications, table 3.4 (from memory), which is
	// rounded by up to 0.4 %: 0.5 % of blocking.
	for n, want := range map[int]float64{2: 0.105, 4: 0.701, 10: 3.96, 20: 11.1, 40: 27.3, 70: 53.7, 100: 80.9} {
		if got := ErlangBLoad(n, 0.005); math.Abs(got/want-1) > 0.005 {
			t.Errorf("%d circuits at 0.5 %%: %v, want %v", n, got, want)
		}
	}
}

// Computed from the formulas of Kleinrock (1975), sec. 3.5.
func TestErlangC(t *testing.T) {
	for _, c := range []struct {
		n                  int
		a                  float64
		share, wait, above string
	}{
		{1, 0.8, "0.800000000", "4.000000000", "0.654984602"},
		{2, 1, "0.333333333", "0.333333333", "0.122626480"},
		{2, 1.6, "0.711111111", "1.777777778", "0.476672033"},
		{3, 2, "0.444444444", "0.444444444", "0.163501974"},
		{4, 3, "0.509433962", "0.509433962", "0.187410281"},
		{5, 4, "0.554112554", "0.554112554", "0.203846617"},
		{8, 6, "0.356981086", "0.178490543", "0.048312136"},
		{10, 8, "0.409180151", "0.204590075", "0.055376512"},
		{20, 16, "0.256077794", "0.064019448", "0.004690228"},
		{20, 18, "0.550769005", "0.275384502", "0.074538479"},
		{50, 45, "0.363864467", "0.072772893", "0.002451699"},
		{100, 90, "0.216940481", "0.021694048", "9.849083e-6"},
	} {
		name := fmt.Sprintf("n %d, a %v: ", c.n, c.a)
		q := MMN{c.n, c.a, 3}
		digits(t, name+"C", q.WaitShare(), c.share)
		digits(t, name+"wait", q.MeanWait()/3, c.wait)
		digits(t, name+"P(wait > hold)", q.WaitCCDF(3), c.above)
	}
}

func TestEngset(t *testing.T) {
	// V. Iversen, Teletraffic Engineering, Engset example (from memory).
	g := Engset{4, 3, 1.0 / 3}
	exact(t, "E", g.TimeCongestion(), 4.0/85)
	exact(t, "B", g.CallCongestion(), 1.0/64)
	exact(t, "Y", g.Carried(), 84.0/85)
	exact(t, "traffic congestion", g.TrafficCongestion(), 1.0/85)
	// Computed from the formulas.
	for _, c := range []struct {
		s, n       int
		beta       float64
		e, b, y, r string
	}{
		{10, 5, 0.25, "0.026593499", "0.016565869", "1.973406501", "0.013296750"},
		{20, 10, 0.5, "0.056381198", "0.041698151", "6.478729339", "0.028190599"},
		{15, 10, 1, "0.097414604", "0.062900591", "7.256463490", "0.032471535"},
		{100, 10, 0.05, "0.012960763", "0.012240781", "4.706358637", "0.011664686"},
	} {
		g := Engset{c.s, c.n, c.beta}
		name := fmt.Sprintf("%+v: ", g)
		digits(t, name+"E", g.TimeCongestion(), c.e)
		digits(t, name+"B", g.CallCongestion(), c.b)
		digits(t, name+"Y", g.Carried(), c.y)
		digits(t, name+"traffic congestion", g.TrafficCongestion(), c.r)
		offered := float64(c.s) * c.beta / (1 + c.beta)
		if got := 1 - g.Carried()/offered; math.Abs(got-g.TrafficCongestion()) > 1e-12 {
			t.Errorf("%s1 - Y/A = %v, traffic congestion %v", name, got, g.TrafficCongestion())
		}
	}
	exact(t, "no more sources than circuits", Engset{3, 3, 0.5}.CallCongestion(), 0)
	exact(t, "all carried", Engset{3, 5, 0.5}.Carried(), 1)
}

func TestKaufmanRoberts(t *testing.T) {
	for _, c := range []struct {
		slots    int
		classes  []RateClass
		refused  []string
		occupied string
		source   string
	}{
		{3, []RateClass{{1, 1, 0}, {1, 2, 0}}, []string{"0.2500000", "0.5714286"}, "1.6071429",
			"Moscholios and Logothetis (2019), first example, from memory"},
		{4, []RateClass{{2, 1, 0}, {1, 2, 0}}, []string{"0.2533333", "0.5200000"}, "",
			"test data of a public implementation of that book"},
		{5, []RateClass{{2, 1, 0}, {1, 2, 0}}, []string{"0.1721854", "0.3818985"}, "2.8918322",
			"same, and enumeration of all states"},
		{5, []RateClass{{2, 1, 1}, {1, 2, 0}}, []string{"0.3253012", "0.3253012"}, "",
			"same, one slot reserved against the first class"},
		{30, []RateClass{{10, 1, 0}, {2, 6, 0}}, []string{"0.029823775", "0.226098899"}, "18.98857546",
			"computed, and enumeration of all states"},
		{100, []RateClass{{40, 1, 0}, {6, 4, 0}, {2, 10, 0}}, []string{"0.016056796", "0.068982655", "0.195513788"}, "77.79186867",
			"computed, and enumeration of all states"},
	} {
		refused, occupied := KaufmanRoberts(c.slots, c.classes)
		for i, want := range c.refused {
			digits(t, c.source, refused[i], want)
		}
		if c.occupied != "" {
			digits(t, c.source+": occupied", occupied, c.occupied)
		}
	}
	// One class of one unit is Erlang's B, also where weights are scaled down.
	refused, occupied := KaufmanRoberts(1000, []RateClass{{1100, 1, 0}})
	if b := ErlangB(1000, 1100); math.Abs(refused[0]/b-1) > 1e-10 || math.Abs(occupied/(1100*(1-b))-1) > 1e-10 {
		t.Errorf("1100 erlang on 1000 slots: refused %v, occupied %v, want %v, %v", refused[0], occupied, b, 1100*(1-b))
	}
	exact(t, "too wide a class", func() float64 { r, _ := KaufmanRoberts(2, []RateClass{{1, 3, 0}}); return r[0] }(), 1)
}
