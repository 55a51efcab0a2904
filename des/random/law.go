package random

import (
	"fmt"
	"math"
	"slices"
	"strings"
)

// A Law is the distribution of one quantity, in the unit its scenario key has.
// Laws are read-only, so copies and goroutines may share one.
type Law interface {
	// Mean returns the expected value; +Inf when it does not exist.
	Mean() float64
	// Variance returns the variance; +Inf when it does not exist.
	Variance() float64
	// Quantile returns the least x with CDF(x) >= p. It panics unless p lies
	// in [0, 1]. Quantile(1) is +Inf for a law without an upper end.
	Quantile(p float64) float64
	// CDF returns the probability of a value at or below x.
	CDF(x float64) float64
	// Draw takes what it needs from s. Laws take different numbers of words.
	Draw(s *Stream) float64
	// At returns Quantile(u), the variate of a keyed draw: u = Unit(Draw(...)).
	At(u float64) float64
}

// Kind says which family a law belongs to.
type Kind uint8

// The kinds of law and the parameters each takes; [Spec.Law] checks their
// ranges.
const (
	Constant    Kind = iota // Mean
	Uniform                 // From, To
	Exponential             // Mean
	Lognormal               // Median with P95 or P99, or Mean with CoV
	Pareto                  // Shape with Mean or Min; AtMost puts the tail's mass at a cap
	Gamma                   // Mean, CoV
	Weibull                 // Shape, Scale
	Mix                     // Values, Weights
	kinds
)

var kindNames = [kinds]string{"constant", "uniform", "exponential", "lognormal", "pareto", "gamma", "weibull", "mix"}

// String returns the name of k in scenario files.
func (k Kind) String() string {
	if k >= kinds {
		return fmt.Sprintf("Kind(%d)", uint8(k))
	}
	return kindNames[k]
}

// ParseKind returns the kind with the given name in scenario files.
func ParseKind(name string) (Kind, error) {
	if i := slices.Index(kindNames[:], name); i >= 0 {
		return Kind(i), nil
	}
	return 0, fmt.Errorf("%q is not a law; write one of %s", name, strings.Join(kindNames[:], ", "))
}

// A Spec is a law as a scenario names it. Mean, Median, P95, P99, Scale, From,
// To, Min, AtMost and Values are in the base unit of the key they stand at;
// CoV (standard deviation over mean), Shape and Weights have none. A parameter
// that is zero is not given.
type Spec struct {
	Kind                                                             Kind
	Mean, CoV, Median, P95, P99, Shape, Scale, From, To, Min, AtMost float64
	Values, Weights                                                  []float64
}

// Law returns the law that s names. The error says which parameters the kind
// needs and what their ranges are, in the words of the scenario file.
func (s Spec) Law() (Law, error) {
	if s.Kind >= kinds {
		return nil, fmt.Errorf("%v is not a law", s.Kind)
	}
	if name, x := s.faulty(); name != "" {
		return nil, fmt.Errorf("%s is %v; parameters of a law must be finite and not negative", name, x)
	}
	switch s.Kind {
	case Constant:
		if !s.only("mean") {
			return nil, s.needs("one value, at or above 0")
		}
		return constant(s.Mean), nil
	case Uniform:
		if !s.only("from", "to") || s.From >= s.To {
			return nil, s.needs("from and to, with 0 <= from < to")
		}
		return newUniform(s.From, s.To), nil
	case Exponential:
		if !s.only("mean") || s.Mean == 0 {
			return nil, s.needs("mean, above 0")
		}
		return newExponential(s.Mean), nil
	case Lognormal:
		return s.lognormal()
	case Pareto:
		return s.pareto()
	case Gamma:
		if !s.only("mean", "cov") || s.Mean == 0 || s.CoV < minGammaCoV || s.CoV > maxGammaCoV {
			return nil, s.needs(fmt.Sprintf("mean, above 0, and cov, from %v to %v", minGammaCoV, maxGammaCoV))
		}
		return newGamma(s.Mean, s.CoV), nil
	case Weibull:
		if !s.only("shape", "scale") || s.Shape < minWeibullShape || s.Scale == 0 {
			return nil, s.needs(fmt.Sprintf("shape, at or above %v, and scale, above 0", minWeibullShape))
		}
		return newWeibull(s.Shape, s.Scale), nil
	case Mix:
		return s.mix()
	default:
		panic("random: unknown kind of law " + s.Kind.String())
	}
}

// Ranges within which a law's quantiles are tested to be accurate.
const (
	minGammaCoV, maxGammaCoV = 0.01, 5.0
	minWeibullShape          = 0.1
)

// Standard normal quantiles at 0.95 and 0.99.
const (
	z95 = 1.6448536269514722
	z99 = 2.3263478740408408
)

// lognormal reads the parameters of a Lognormal: sigma is ln(p95/median)/z95
// or ln(p99/median)/z99, or sigma^2 = ln(1 + cov^2) and mu = ln mean - sigma^2/2.
func (s Spec) lognormal() (Law, error) {
	switch {
	case s.only("median", "p95") && s.Median > 0 && s.P95 > s.Median:
		return newLognormal(math.Log(s.Median), math.Log(s.P95/s.Median)/z95), nil
	case s.only("median", "p99") && s.Median > 0 && s.P99 > s.Median:
		return newLognormal(math.Log(s.Median), math.Log(s.P99/s.Median)/z99), nil
	case s.only("mean", "cov") && s.Mean > 0 && s.CoV > 0:
		v := math.Log1p(s.CoV * s.CoV)
		return newLognormal(math.Log(s.Mean)-v/2, math.Sqrt(v)), nil
	}
	return nil, s.needs("median, above 0, with p95 or p99, above the median; or mean and cov, both above 0")
}

// pareto reads the parameters of a Pareto.
func (s Spec) pareto() (Law, error) {
	err := s.needs("shape, above 0, with either mean or min, above 0, and if wanted at-most, above them; " +
		"without at-most a mean needs a shape above 1")
	if !s.only("shape", "mean", "min", "at-most") || s.Shape == 0 || (s.Mean > 0) == (s.Min > 0) {
		return nil, err
	}
	least := s.Min
	switch {
	case s.AtMost > 0 && (s.Mean >= s.AtMost || s.Min >= s.AtMost):
		return nil, err
	case s.Mean > 0 && s.AtMost > 0:
		least = cappedLeast(s.Shape, s.Mean, s.AtMost)
		if least == 0 {
			return nil, fmt.Errorf("no pareto law of shape %v capped at %v has so small a mean as %v", s.Shape, s.AtMost, s.Mean)
		}
	case s.Mean > 0 && s.Shape <= 1:
		return nil, err
	case s.Mean > 0:
		least = s.Mean * (s.Shape - 1) / s.Shape
	}
	if s.AtMost > 0 {
		return cappedPareto{newPareto(s.Shape, least), s.AtMost}, nil
	}
	return newPareto(s.Shape, least), nil
}

// mix reads the parameters of a Mix.
func (s Spec) mix() (Law, error) {
	err := s.needs("values, at or above 0, and as many weights, at or above 0 and not all 0")
	if !s.only() || len(s.Values) == 0 || len(s.Values) != len(s.Weights) {
		return nil, err
	}
	total, ok := sumWeights(s.Weights)
	if !ok {
		return nil, err
	}
	for _, v := range s.Values {
		if !(v >= 0) || !finite(v) {
			return nil, err
		}
	}
	return newMix(s.Values, s.Weights, total), nil
}

// needs says what the kind of s needs, after what was given.
func (s Spec) needs(what string) error {
	var given []string
	for _, p := range s.parameters() {
		if p.value != 0 {
			given = append(given, fmt.Sprintf("%s %v", p.name, p.value))
		}
	}
	if s.Values != nil || s.Weights != nil {
		given = append(given, fmt.Sprintf("%d values, %d weights", len(s.Values), len(s.Weights)))
	}
	if given == nil {
		given = []string{"nothing"}
	}
	return fmt.Errorf("%v takes %s; got %s", s.Kind, what, strings.Join(given, ", "))
}

type parameter struct {
	name  string
	value float64
}

// parameters lists the numbers of s under their names in scenario files.
func (s Spec) parameters() [11]parameter {
	return [11]parameter{
		{"mean", s.Mean}, {"cov", s.CoV}, {"median", s.Median}, {"p95", s.P95}, {"p99", s.P99},
		{"shape", s.Shape}, {"scale", s.Scale}, {"from", s.From}, {"to", s.To}, {"min", s.Min}, {"at-most", s.AtMost},
	}
}

// faulty returns the first parameter that is negative or not finite.
func (s Spec) faulty() (name string, x float64) {
	for _, p := range s.parameters() {
		if !(p.value >= 0) || !finite(p.value) {
			return p.name, p.value
		}
	}
	return "", 0
}

// only reports whether no parameter but the named ones is given; Values and
// Weights belong to Mix alone.
func (s Spec) only(names ...string) bool {
	for _, p := range s.parameters() {
		if p.value != 0 && !slices.Contains(names, p.name) {
			return false
		}
	}
	return s.Kind == Mix || s.Values == nil && s.Weights == nil
}

func finite(x float64) bool { return !math.IsInf(x, 0) && !math.IsNaN(x) }
