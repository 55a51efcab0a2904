package scenarios

import (
	"fmt"
	"maps"
	"slices"
	"strings"

	"ferrule/des/random"
)

// A timeLaw is a law of picoseconds, a byteLaw one of bytes: a plain quantity
// or one word with its parameters, such as
// {lognormal: {median: 10ms, p95: 50ms}}.
type (
	timeLaw random.Spec
	byteLaw random.Spec
)

// lawKinds are the laws that a file can name; a constant is a plain quantity.
var lawKinds = []random.Kind{
	random.Uniform, random.Exponential, random.Lognormal, random.Pareto, random.Gamma, random.Weibull, random.Mix,
}

// lawWords are their names.
func lawWords() []string {
	out := make([]string, len(lawKinds))
	for i, k := range lawKinds {
		out[i] = k.String()
	}
	return out
}

// law decodes data, whose quantities are of measure m.
func (m *measure) law(data any) (random.Spec, *fault) {
	params, ok := data.(map[string]any)
	if !ok {
		v, f := m.decode(data)
		if f == nil && v < 0 {
			f = &fault{msg: fmt.Sprintf("%q is negative", data), hint: "write a value at or above 0"}
		}
		return random.Spec{Mean: float64(v)}, f
	}
	keys := slices.Sorted(maps.Keys(params))
	if slices.Contains(keys, "median") || slices.Contains(keys, "p99") {
		return m.parameters(random.Lognormal, params, nil)
	}
	if len(keys) != 1 {
		return random.Spec{}, &fault{
			msg:  fmt.Sprintf("a law is one word with its parameters, not %d keys", len(keys)),
			hint: oneOf(lawWords()) + ", or a plain quantity",
		}
	}
	kind, err := random.ParseKind(keys[0])
	if err != nil || kind == random.Constant {
		return random.Spec{}, &fault{
			under: keys[:1], onKey: true,
			msg: fmt.Sprintf("%q is not a law", keys[0]), hint: didYouMean(keys[0], lawWords()),
		}
	}
	inner, ok := params[keys[0]].(map[string]any)
	if !ok {
		return random.Spec{}, &fault{under: keys[:1], msg: "the parameters of a law are wanted here", hint: lawExample(kind, m)}
	}
	return m.parameters(kind, inner, keys[:1])
}

// lawExample shows how a law of kind k is written.
func lawExample(k random.Kind, m *measure) string {
	u := m.usual()
	return "write for instance " + map[random.Kind]string{
		random.Uniform:     "{uniform: {from: 1" + u + ", to: 2" + u + "}}",
		random.Exponential: "{exponential: {mean: 1" + u + "}}",
		random.Lognormal:   "{lognormal: {median: 1" + u + ", p95: 5" + u + "}}",
		random.Pareto:      "{pareto: {mean: 1" + u + ", shape: 1.3, at-most: 1000" + u + "}}",
		random.Gamma:       "{gamma: {mean: 1" + u + ", cov: 0.5}}",
		random.Weibull:     "{weibull: {shape: 0.8, scale: 1" + u + "}}",
		random.Mix:         "{mix: {sizes: [1" + u + ", 2" + u + "], weights: [3, 1]}}",
	}[k]
}

// parameters decodes the parameters of a law and has it checked.
func (m *measure) parameters(kind random.Kind, params map[string]any, under []string) (random.Spec, *fault) {
	s := random.Spec{Kind: kind}
	quantities := map[string]*float64{
		"mean": &s.Mean, "median": &s.Median, "p95": &s.P95, "p99": &s.P99,
		"scale": &s.Scale, "from": &s.From, "to": &s.To, "min": &s.Min, "at-most": &s.AtMost,
	}
	numbers := map[string]*float64{"cov": &s.CoV, "shape": &s.Shape}
	for _, k := range slices.Sorted(maps.Keys(params)) {
		var f *fault
		if p := quantities[k]; p != nil {
			var v int64
			v, f = m.decode(params[k])
			*p = float64(v)
		} else if p := numbers[k]; p != nil {
			*p, f = plainNumber(params[k])
		} else if k == "sizes" || k == "values" {
			s.Values, f = list(params[k], func(x any) (float64, *fault) { v, f := m.decode(x); return float64(v), f })
		} else if k == "weights" {
			s.Weights, f = list(params[k], plainNumber)
		} else {
			known := append(slices.Sorted(maps.Keys(quantities)), "cov", "shape", "sizes", "weights")
			f = &fault{onKey: true, msg: fmt.Sprintf("unknown key %q", k), hint: didYouMean(k, known)}
		}
		if f != nil {
			f.under = append(append(slices.Clone(under), k), f.under...)
			return s, f
		}
	}
	if _, err := s.Law(); err != nil {
		msg, _, _ := strings.Cut(err.Error(), "; got ")
		return s, &fault{under: under, msg: msg, hint: lawExample(kind, m)}
	}
	return s, nil
}

// decode reads a quantity out of a decoded value.
func (m *measure) decode(data any) (int64, *fault) {
	switch x := data.(type) {
	case string:
		return m.parse(x)
	case int, int64, uint64, float64:
		return 0, m.wrongUnit(fmt.Sprint(x), fmt.Sprint(x), "")
	default:
		return 0, &fault{msg: "is not " + m.what, hint: "write a number and one of " + m.names()}
	}
}

// plainNumber reads a number without a unit.
func plainNumber(data any) (float64, *fault) {
	switch x := data.(type) {
	case int:
		return float64(x), nil
	case int64:
		return float64(x), nil
	case uint64:
		return float64(x), nil
	case float64:
		return x, nil
	case string:
		return 0, &fault{msg: fmt.Sprintf("%q is not a number", x), hint: "write a plain number"}
	default:
		return 0, &fault{msg: "a number is wanted here", hint: "write a plain number"}
	}
}

// list reads a list of at most 1000 values.
func list(data any, one func(any) (float64, *fault)) ([]float64, *fault) {
	xs, ok := data.([]any)
	if !ok || len(xs) == 0 || len(xs) > 1000 {
		return nil, &fault{msg: "a list of 1 to 1000 values is wanted here", hint: "write [a, b, c]"}
	}
	out := make([]float64, len(xs))
	for i, x := range xs {
		v, f := one(x)
		if f != nil {
			f.under = []string{fmt.Sprintf("[%d]", i)}
			return nil, f
		}
		out[i] = v
	}
	return out, nil
}
