package random

import (
	"math"
	"strings"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"
)

// A lawCase is a law with its moments; each row says where they come from.
type lawCase struct {
	spec           Spec
	mean, variance float64
	within         float64 // relative tolerance of both
}

var lawCases = []lawCase{
	// By definition.
	{Spec{Kind: Constant, Mean: 15e-6}, 15e-6, 0, 1e-12},
	{Spec{Kind: Uniform, From: 3, To: 9}, 6, 3, 1e-12},
	{Spec{Kind: Exponential, Mean: 0.25}, 0.25, 0.0625, 1e-12},
	// Barford and Crovella, SIGMETRICS 1998 (parameters from memory): body of
	// web files, lognormal(9.357, 1.318): median 11579.6, mean 27599.75. The
	// variance is computed from mean^2 (exp(sigma^2) - 1).
	{Spec{Kind: Lognormal, Median: math.Exp(9.357), P95: math.Exp(9.357 + 1.318*1.6448536269514722)},
		27599.75, 27599.75 * 27599.75 * math.Expm1(1.318*1.318), 1e-6},
	// 3GPP R1-070674 (parameters from memory): FTP file, lognormal(14.45,
	// 0.35): mean 2005191, standard deviation 723869, computed from them.
	{Spec{Kind: Lognormal, Median: math.Exp(14.45), P99: math.Exp(14.45 + 0.35*2.3263478740408408)}, 2005191, 723869 * 723869, 2e-6},
	{Spec{Kind: Lognormal, Mean: 1400, CoV: 0.66}, 1400, 924 * 924, 1e-12},
	// Barford and Crovella: tail of web files, Pareto k = 133000, alpha 1.1:
	// mean 1463000, no variance.
	{Spec{Kind: Pareto, Shape: 1.1, Min: 133000}, 1463000, math.Inf(1), 1e-9},
	{Spec{Kind: Pareto, Shape: 2.5, Mean: 5}, 5, 20, 1e-12}, // k = 3; k^2 a/((a-1)^2 (a-2)) = 9 x 2.5 / (2.25 x 0.5)
	// Near-real-time video of the same 3GPP family: packets alpha 1.2, 20 to
	// 125 B, mean 50.68552; gaps alpha 1.2, 2.5 to 12.5 ms, mean 5.940254 (both
	// computed from alpha k/(alpha-1) - m (k/m)^alpha/(alpha-1)). Variances
	// computed from the second moment alpha k^2/(alpha-2) - 2 m^2 (k/m)^alpha/(alpha-2).
	{Spec{Kind: Pareto, Shape: 1.2, Min: 20, AtMost: 125}, 50.68551568, 1163.13377, 1e-8},
	{Spec{Kind: Pareto, Shape: 1.2, Mean: 5.940254, AtMost: 12.5}, 5.940254, 11.96179, 1e-6},
	{Spec{Kind: Pareto, Shape: 1, Mean: 2, AtMost: 20}, 2, 0, math.Inf(1)},
	{Spec{Kind: Pareto, Shape: 0.5, Mean: 2, AtMost: 20}, 2, 0, math.Inf(1)},
	{Spec{Kind: Pareto, Shape: 1.3, Mean: 80e3, AtMost: 100e6}, 80e3, 0, math.Inf(1)},
	// Rose, Wuerzburg report 101 (1995) models frames by a gamma law.
	{Spec{Kind: Gamma, Mean: 1400, CoV: 0.66}, 1400, 924 * 924, 1e-12},
	{Spec{Kind: Gamma, Mean: 1, CoV: 1}, 1, 1, 1e-12},
	{Spec{Kind: Gamma, Mean: 1, CoV: 0.01}, 1, 1e-4, 1e-12},
	{Spec{Kind: Gamma, Mean: 1, CoV: 1.1}, 1, 1.21, 1e-12},
	{Spec{Kind: Gamma, Mean: 1, CoV: 5}, 1, 25, 1e-12},
	{Spec{Kind: Gamma, Mean: 2, CoV: 3}, 2, 36, 1e-12},
	// Gamma(3/2) = sqrt(pi)/2: shape 2 is Rayleigh's law.
	{Spec{Kind: Weibull, Shape: 2, Scale: 3}, 3 * math.Sqrt(math.Pi) / 2, 9 * (1 - math.Pi/4), 1e-12},
	{Spec{Kind: Weibull, Shape: 0.5, Scale: 1}, 2, 20, 1e-12}, // Gamma(3) = 2, Gamma(5) - 4 = 20
	// Sizes 40, 576, 1500 B as 7:4:1: mean 4084/12, squared coefficient of
	// variation 1.58165978 (weights from a kernel packet generator's change
	// note; arithmetic ours).
	{Spec{Kind: Mix, Values: []float64{1500, 40, 576}, Weights: []float64{1, 7, 4}},
		4084.0 / 12, 1.58165978 * (4084.0 / 12) * (4084.0 / 12), 1e-8},
}

func mustLaw(t testing.TB, s Spec) Law {
	t.Helper()
	law, err := s.Law()
	if err != nil {
		t.Fatal(err)
	}
	return law
}

func near(got, want, within float64) bool {
	return got == want || math.Abs(got-want) <= within*math.Abs(want)
}

func TestLawMoments(t *testing.T) {
	for _, c := range lawCases {
		law := mustLaw(t, c.spec)
		if m := law.Mean(); !near(m, c.mean, min(c.within, 1e-6)) {
			t.Errorf("%+v: mean %v, want %v", c.spec, m, c.mean)
		}
		if v := law.Variance(); !math.IsInf(c.within, 1) && !near(v, c.variance, c.within) {
			t.Errorf("%+v: variance %v, want %v", c.spec, v, c.variance)
		}
	}
}

// Samples follow the law's own distribution function, and have its mean.
// Finite laws are tested by their weights instead, in TestMixDraws.
func TestLawDraws(t *testing.T) {
	const n = 100_000
	for _, c := range lawCases {
		if c.spec.Kind == Constant || c.spec.Kind == Mix {
			continue
		}
		law := mustLaw(t, c.spec)
		s := NewStream(11, "laws")
		x, keyed := make([]float64, n), make([]float64, n/5)
		sum := 0.0
		for i := range x {
			x[i] = law.Draw(&s)
			sum += x[i]
		}
		for i := range keyed {
			keyed[i] = law.At(Unit(Draw(1, Hash("laws"), uint64(i), 0)))
		}
		cdf := law.CDF
		if c.spec.AtMost > 0 { // spread the mass at the cap over an interval
			spread(x, c.spec.AtMost, &s)
			spread(keyed, c.spec.AtMost, &s)
			below := law.CDF(math.Nextafter(c.spec.AtMost, 0))
			cdf = func(v float64) float64 {
				if v < c.spec.AtMost {
					return law.CDF(v)
				}
				return below + (1-below)*(v-c.spec.AtMost)
			}
		}
		if v := law.Variance(); !math.IsInf(v, 1) {
			// Four standard errors of the mean.
			if m, limit := sum/n, 4*math.Sqrt(v/n); math.Abs(m-law.Mean()) > limit {
				t.Errorf("%+v: sample mean %v, want %v within %v", c.spec, m, law.Mean(), limit)
			}
		}
		ksTest(t, c.spec.Kind.String(), x, cdf)
		ksTest(t, c.spec.Kind.String()+" keyed", keyed, cdf)
	}
}

func spread(x []float64, most float64, s *Stream) {
	for i := range x {
		if x[i] == most {
			x[i] += s.Float64()
		}
	}
}

func TestQuantiles(t *testing.T) {
	for _, c := range lawCases {
		law := mustLaw(t, c.spec)
		last := math.Inf(-1)
		for _, p := range []float64{0, 1e-9, 0.001, 0.05, 0.25, 0.5, 0.75, 0.9, 0.95, 0.99, 0.999, 1 - 1e-9} {
			q := law.Quantile(p)
			if q < last || law.At(p) != q {
				t.Errorf("%+v: quantile %v at %v after %v, At %v", c.spec, q, p, last, law.At(p))
			}
			last = q
			back := law.CDF(q)
			switch atom := q == c.spec.AtMost || c.spec.Kind == Mix || c.spec.Kind == Constant; {
			case atom && back < p:
				t.Errorf("%+v: CDF(Quantile(%v)) = %v, want at least that", c.spec, p, back)
			case !atom && math.Abs(back-p) > 1e-9:
				t.Errorf("%+v: CDF(Quantile(%v)) = %v", c.spec, p, back)
			}
		}
		if below := law.CDF(-1); below != 0 {
			t.Errorf("%+v: CDF(-1) = %v, want 0", c.spec, below)
		}
	}
}

// The parameters that a lognormal or gamma law of mean 1400 and coefficient of
// variation 0.66 has; the formulas are those of Krunz and Hughes, SIGMETRICS
// 1995, and Rose 1995, the values computed from them.
func TestParametersFromMoments(t *testing.T) {
	l := mustLaw(t, Spec{Kind: Lognormal, Mean: 1400, CoV: 0.66}).(lognormal)
	if !near(l.Mu, 7.0634361, 1e-8) || !near(l.Sigma, 0.6013176, 1e-7) {
		t.Errorf("lognormal mu %v, sigma %v, want 7.0634361, 0.6013176", l.Mu, l.Sigma)
	}
	g := mustLaw(t, Spec{Kind: Gamma, Mean: 1400, CoV: 0.66}).(gamma)
	if !near(g.Alpha, 2.2956841, 1e-7) || !near(1/g.Beta, 609.84, 1e-9) {
		t.Errorf("gamma shape %v, scale %v, want 2.2956841, 609.84", g.Alpha, 1/g.Beta)
	}
	// A command's latency of median 10 ms and 95th percentile 50 ms has sigma
	// ln 5 / 1.644854 = 0.978.
	l = mustLaw(t, Spec{Kind: Lognormal, Median: 0.010, P95: 0.050}).(lognormal)
	if math.Abs(l.Sigma-0.978) > 5e-4 || !near(l.Quantile(0.95), 0.050, 1e-12) || !near(l.Quantile(0.5), 0.010, 1e-12) {
		t.Errorf("sigma %v, median %v, p95 %v, want 0.978, 0.010, 0.050", l.Sigma, l.Quantile(0.5), l.Quantile(0.95))
	}
}

// 3GPP R1-070674 (from memory): embedded objects per page, Pareto alpha 1.1,
// k = 2, capped at 55, minus 2: mean 5.641908, stated as 5.64.
func TestCappedParetoMean(t *testing.T) {
	for _, spec := range []Spec{
		{Kind: Pareto, Shape: 1.1, Min: 2, AtMost: 55},
		{Kind: Pareto, Shape: 1.1, Mean: 7.641908, AtMost: 55},
	} {
		law := mustLaw(t, spec)
		if !near(law.Mean(), 7.641908, 1e-7) || !near(law.Quantile(0), 2, 1e-6) || law.Quantile(1) != 55 {
			t.Errorf("%+v: mean %v, least %v, most %v, want 7.641908, 2, 55", spec, law.Mean(), law.Quantile(0), law.Quantile(1))
		}
		// The mass at the cap is (k/m)^alpha.
		if got, want := 1-law.CDF(54.999999999), math.Pow(2.0/55, 1.1); !near(got, want, 1e-6) {
			t.Errorf("%+v: mass at the cap %v, want %v", spec, got, want)
		}
	}
}

// distuv draws by its own methods; both must follow one law.
func TestDrawsAgainstDistuv(t *testing.T) {
	const n = 100_000
	s, other := NewStream(5, "ours"), NewStream(5, "theirs")
	for _, c := range []struct {
		spec   Spec
		theirs distuv.Rander
	}{
		{Spec{Kind: Exponential, Mean: 2}, distuv.Exponential{Rate: 0.5, Src: &other}},
		{Spec{Kind: Lognormal, Median: math.E, P95: math.Exp(1 + z95)}, distuv.LogNormal{Mu: 1, Sigma: 1, Src: &other}},
		{Spec{Kind: Pareto, Shape: 1.5, Min: 2}, distuv.Pareto{Xm: 2, Alpha: 1.5, Src: &other}},
		{Spec{Kind: Weibull, Shape: 0.7, Scale: 2}, distuv.Weibull{K: 0.7, Lambda: 2, Src: &other}},
	} {
		law := mustLaw(t, c.spec)
		x, y := make([]float64, n), make([]float64, n)
		for i := range x {
			x[i], y[i] = law.Draw(&s), c.theirs.Rand()
		}
		ksTest(t, c.spec.Kind.String(), x, law.CDF)
		ksTest(t, c.spec.Kind.String()+" of distuv", y, law.CDF)
	}
}

// chiSquare999 is the 0.1 % critical value of chi-square with 2 degrees of
// freedom, -2 ln 0.001.
const chiSquare999 = 13.815510557964274

func chiSquare(counts map[uint16]int, values []uint16, weights []float64) float64 {
	total, n := 0.0, 0
	for i, v := range values {
		total += weights[i]
		n += counts[v]
	}
	x := 0.0
	for i, v := range values {
		want := float64(n) * weights[i] / total
		x += (float64(counts[v]) - want) * (float64(counts[v]) - want) / want
	}
	return x
}

func TestPickAndMixDraws(t *testing.T) {
	const n = 300_000
	values, weights := []uint16{40, 576, 1500}, []float64{7, 4, 1}
	a := NewAlias(values, weights)
	m := mustLaw(t, Spec{Kind: Mix, Values: []float64{40, 576, 1500}, Weights: weights})
	s := NewStream(3, "sizes")
	picked, mixed := map[uint16]int{}, map[uint16]int{}
	for range n {
		picked[a.Pick(s.Uint64())]++
		mixed[uint16(m.Draw(&s))]++
	}
	for name, counts := range map[string]map[uint16]int{"Pick": picked, "Mix": mixed} {
		if len(counts) != 3 {
			t.Errorf("%s: drew %d values, want 3", name, len(counts))
		}
		if x := chiSquare(counts, values, weights); x > chiSquare999 {
			t.Errorf("%s: chi-square %v exceeds %v: %v", name, x, chiSquare999, counts)
		}
	}
}

// The cells of an Alias add up to the weights whatever their order, exactly
// but for rounding.
func TestAliasShares(t *testing.T) {
	s := NewStream(9, "alias")
	for n := 1; n <= 40; n++ {
		values, weights, total := make([]uint16, n), make([]float64, n), 0.0
		for i := range values {
			values[i] = uint16(i)
			weights[i] = math.Floor(s.Exp() * 3)
			total += weights[i]
		}
		if total == 0 {
			weights[0], total = 1, 1
		}
		a := NewAlias(values, weights)
		got := make([]float64, n)
		for _, c := range a.cells {
			p := float64(c.limit) * 0x1p-64
			got[c.below] += p / float64(n)
			got[c.above] += (1 - p) / float64(n)
		}
		for i := range got {
			if math.Abs(got[i]-weights[i]/total) > 1e-12 {
				t.Errorf("n %d: value %d has probability %v, want %v", n, i, got[i], weights[i]/total)
			}
		}
	}
}

func TestAliasPanics(t *testing.T) {
	for _, c := range []struct {
		values  []uint16
		weights []float64
	}{
		{nil, nil}, {[]uint16{1}, nil}, {[]uint16{1}, []float64{0}}, {[]uint16{1}, []float64{-1}},
		{[]uint16{1}, []float64{math.NaN()}}, {[]uint16{1}, []float64{math.Inf(1)}},
	} {
		func() {
			defer func() {
				if r, _ := recover().(string); !strings.HasPrefix(r, "random: ") {
					t.Errorf("%v: panic %q, want one of random", c, r)
				}
			}()
			NewAlias(c.values, c.weights)
		}()
	}
}

func TestSpecErrors(t *testing.T) {
	for _, c := range []struct {
		spec Spec
		want string
	}{
		{Spec{Kind: Constant, CoV: 1}, "constant takes one value, at or above 0; got cov 1"},
		{Spec{Kind: Uniform, From: 2, To: 2}, "uniform takes from and to, with 0 <= from < to; got from 2, to 2"},
		{Spec{Kind: Exponential}, "exponential takes mean, above 0; got nothing"},
		{Spec{Kind: Exponential, Mean: -1}, "mean is -1; parameters of a law must be finite and not negative"},
		{Spec{Kind: Exponential, Mean: math.NaN()}, "mean is NaN; parameters of a law must be finite and not negative"},
		{Spec{Kind: Exponential, Mean: 1, Values: []float64{1}}, "exponential takes mean, above 0; got mean 1, 1 values, 0 weights"},
		{Spec{Kind: Lognormal, Median: 10, P95: 5},
			"lognormal takes median, above 0, with p95 or p99, above the median; or mean and cov, both above 0; got median 10, p95 5"},
		{Spec{Kind: Lognormal, Median: 10, P95: 50, P99: 90},
			"lognormal takes median, above 0, with p95 or p99, above the median; or mean and cov, both above 0; got median 10, p95 50, p99 90"},
		{Spec{Kind: Pareto, Shape: 1, Mean: 5}, "pareto takes shape, above 0, with either mean or min, above 0, and if wanted at-most, above them; " +
			"without at-most a mean needs a shape above 1; got mean 5, shape 1"},
		{Spec{Kind: Pareto, Shape: 2, Mean: 5, AtMost: 5}, "pareto takes shape, above 0, with either mean or min, above 0, and if wanted at-most, above them; " +
			"without at-most a mean needs a shape above 1; got mean 5, shape 2, at-most 5"},
		{Spec{Kind: Pareto, Shape: 0.01, Mean: 1e-9, AtMost: 1}, "no pareto law of shape 0.01 capped at 1 has so small a mean as 1e-09"},
		{Spec{Kind: Gamma, Mean: 1}, "gamma takes mean, above 0, and cov, from 0.01 to 5; got mean 1"},
		{Spec{Kind: Weibull, Shape: 1}, "weibull takes shape, at or above 0.1, and scale, above 0; got shape 1"},
		{Spec{Kind: Mix, Values: []float64{1, 2}, Weights: []float64{1}},
			"mix takes values, at or above 0, and as many weights, at or above 0 and not all 0; got 2 values, 1 weights"},
		{Spec{Kind: 200}, "Kind(200) is not a law"},
	} {
		law, err := c.spec.Law()
		if err == nil || err.Error() != c.want {
			t.Errorf("%+v: law %v, error %v\nwant %s", c.spec, law, err, c.want)
		}
	}
}

func TestParseKind(t *testing.T) {
	for k := Constant; k < kinds; k++ {
		if got, err := ParseKind(k.String()); got != k || err != nil {
			t.Errorf("ParseKind(%q) = %v, %v", k, got, err)
		}
	}
	if _, err := ParseKind("normal"); err == nil || !strings.Contains(err.Error(), "lognormal") {
		t.Errorf("ParseKind(normal): error %v, want a list of the laws", err)
	}
}
