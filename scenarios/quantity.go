package scenarios

import (
	"fmt"
	"math"
	"math/big"
	"strings"

	"ferrule/des"
	"ferrule/nodes"
)

// A fault is what a decoder of one value reports; the place is added by who
// called it. Under is the path below the value, such as "lognormal.p95".
type fault struct {
	under     []string
	onKey     bool // the key of under is at fault, not its value
	msg, hint string
}

// Error gives what is wrong, with the hint.
func (f *fault) Error() string { return f.msg + "; " + f.hint }

// A unit is a name and how many base units it stands for.
type unit struct {
	name string
	of   int64
}

// A measure is a kind of quantity: its units, largest first.
type measure struct {
	what  string // with its article, for messages
	base  string // what the base unit is called
	units []unit
}

var (
	timeMeasure = measure{"a time", "picosecond", []unit{
		{"h", int64(des.Hour)}, {"min", int64(des.Minute)}, {"s", int64(des.Second)},
		{"ms", int64(des.Millisecond)}, {"us", int64(des.Microsecond)}, {"ns", int64(des.Nanosecond)}, {"ps", 1},
	}}
	rateMeasure = measure{"a rate", "bit per second", []unit{
		{"Tbps", int64(1000 * nodes.Gbps)}, {"Gbps", int64(nodes.Gbps)}, {"Mbps", int64(nodes.Mbps)},
		{"kbps", int64(nodes.Kbps)}, {"bps", 1},
	}}
	lengthMeasure = measure{"a length", "millimetre", []unit{
		{"km", int64(nodes.Kilometre)}, {"m", int64(nodes.Metre)}, {"mm", 1},
	}}
	bytesMeasure = measure{"an amount of data", "byte", []unit{
		{"GB", 1e9}, {"MB", 1e6}, {"kB", 1e3}, {"B", 1},
	}}
	measures = []*measure{&timeMeasure, &rateMeasure, &lengthMeasure, &bytesMeasure}
)

// names lists the units from the smallest.
func (m *measure) names() string {
	var out []string
	for i := len(m.units) - 1; i >= 0; i-- {
		out = append(out, m.units[i].name)
	}
	return strings.Join(out, " ")
}

// find returns the unit called name.
func (m *measure) find(name string) (unit, bool) {
	for _, u := range m.units {
		if u.name == name {
			return u, true
		}
	}
	return unit{}, false
}

// parse reads a number and a unit, exactly: what is no whole number of base
// units, or passes 63 bits, is a fault.
func (m *measure) parse(text string) (int64, *fault) {
	num, name := splitNumber(text)
	if num == "" {
		return 0, &fault{msg: fmt.Sprintf("%q is not %s", text, m.what), hint: "write a number and one of " + m.names()}
	}
	u, ok := m.find(name)
	if !ok {
		return 0, m.wrongUnit(text, num, name)
	}
	x, f := number(num, text)
	if f != nil {
		return 0, f
	}
	x.Mul(x, new(big.Rat).SetInt64(u.of))
	if !x.IsInt() {
		return 0, &fault{msg: fmt.Sprintf("%q is finer than a %s", text, m.base), hint: "write fewer decimals"}
	}
	if !x.Num().IsInt64() {
		most := m.format(math.MaxInt64 / m.units[0].of * m.units[0].of)
		return 0, &fault{msg: fmt.Sprintf("%q is out of range", text), hint: "write at most " + most}
	}
	return x.Num().Int64(), nil
}

// wrongUnit explains a unit that m does not have.
func (m *measure) wrongUnit(text, num, name string) *fault {
	if name == "" {
		return &fault{
			msg:  fmt.Sprintf("%q has no unit", text),
			hint: fmt.Sprintf("write %s with one of %s, such as %s%s", m.what, m.names(), num, m.usual()),
		}
	}
	for _, o := range measures {
		if u, ok := o.find(name); ok && o != m {
			return &fault{
				msg:  fmt.Sprintf("%q is %s, not %s", text, o.what, m.what),
				hint: fmt.Sprintf("write a number and one of %s (not %s)", m.names(), u.name),
			}
		}
	}
	f := &fault{msg: fmt.Sprintf("%q has no unit that is known", text), hint: "write a number and one of " + m.names()}
	if u := m.closest(name); u != "" {
		f.hint = "write " + num + u
	}
	return f
}

// usual is the unit a person most likely forgot.
func (m *measure) usual() string {
	switch m {
	case &timeMeasure:
		return "s"
	case &rateMeasure:
		return "Mbps"
	case &lengthMeasure:
		return "km"
	default:
		return "B"
	}
}

// closest guesses which unit was meant by name.
func (m *measure) closest(name string) string {
	plain := strings.NewReplacer("bit/s", "bps", "b/s", "bps", "µ", "u", "μ", "u").Replace(name)
	var names []string
	for i := len(m.units) - 1; i >= 0; i-- {
		u := m.units[i].name
		if u == plain || strings.EqualFold(u, plain) {
			return u
		}
		names = append(names, u)
	}
	switch strings.ToLower(plain) {
	case "sec", "second", "seconds":
		return "s"
	case "minute", "minutes", "mins":
		return "min"
	case "hour", "hours", "hr":
		return "h"
	}
	guess := ""
	for _, u := range names {
		if len(plain) < 2 || distance(strings.ToLower(plain), strings.ToLower(u)) > 1 {
			continue
		}
		if plain[0] == u[0] {
			return u
		}
		if guess == "" {
			guess = u
		}
	}
	return guess
}

// format writes n base units with the largest unit that keeps it at or above
// one, exactly; parse gives n again.
func (m *measure) format(n int64) string {
	if n == 0 {
		return "0" + m.usual()
	}
	neg, a := "", uint64(n)
	if n < 0 {
		neg, a = "-", -a
	}
	for _, u := range m.units {
		of := uint64(u.of)
		if a < of {
			continue
		}
		// A minute or an hour has no exact decimals in general; whole ones only.
		if (u.name == "min" || u.name == "h") && a%of != 0 {
			continue
		}
		out := fmt.Sprintf("%s%d", neg, a/of)
		if rest := a % of; rest != 0 {
			width := len(fmt.Sprint(of)) - 1
			out += "." + strings.TrimRight(fmt.Sprintf("%0*d", width, rest), "0")
		}
		return out + u.name
	}
	panic("scenarios: a measure without a base unit")
}

// splitNumber parts a text into a decimal number and what follows it; one
// space may stand between them. num is "" if there is no number.
func splitNumber(text string) (num, rest string) {
	i, digits := 0, 0
	if i < len(text) && (text[i] == '+' || text[i] == '-') {
		i++
	}
	for dot := false; i < len(text); i++ {
		if c := text[i]; c >= '0' && c <= '9' {
			digits++
		} else if c == '.' && !dot {
			dot = true
		} else {
			break
		}
	}
	if digits == 0 {
		return "", text
	}
	if j := exponent(text[i:]); j > 0 {
		i += j
	}
	return text[:i], strings.TrimPrefix(text[i:], " ")
}

// exponent reports how many bytes of an exponent such as "e-3" text begins with.
func exponent(text string) int {
	if len(text) < 2 || text[0] != 'e' && text[0] != 'E' {
		return 0
	}
	i := 1
	if text[i] == '+' || text[i] == '-' {
		i++
	}
	start := i
	for i < len(text) && text[i] >= '0' && text[i] <= '9' {
		i++
	}
	if i == start {
		return 0
	}
	return i
}

// number reads a decimal number exactly. Numbers of absurd length or exponent
// are refused before they cost anything.
func number(num, text string) (*big.Rat, *fault) {
	odd := &fault{msg: fmt.Sprintf("%q is out of range", text), hint: "write a number of at most 40 characters, with an exponent within 30"}
	if len(num) > 40 {
		return nil, odd
	}
	if i := strings.IndexAny(num, "eE"); i >= 0 {
		if exp := strings.TrimLeft(num[i+1:], "+-0"); len(exp) > 2 || len(exp) == 2 && exp > "30" {
			return nil, odd
		}
	}
	x, ok := new(big.Rat).SetString(num)
	if !ok {
		return nil, &fault{msg: fmt.Sprintf("%q does not begin with a number", text), hint: "write a decimal number"}
	}
	return x, nil
}

// suffixed reads a number that ends in suffix, such as "60%" or "25/s".
func suffixed(text, suffix, what string) (float64, *fault) {
	num, rest := splitNumber(text)
	if num == "" || rest != suffix {
		f := &fault{msg: fmt.Sprintf("%q is not %s", text, what), hint: "write a number and " + suffix}
		if num != "" {
			f.hint = "write " + num + suffix
		}
		return 0, f
	}
	x, f := number(num, text)
	if f != nil {
		return 0, f
	}
	v, _ := x.Float64()
	return v, nil
}

// FormatTime writes t as a scenario file would, exactly.
func FormatTime(t des.Time) string { return timeMeasure.format(int64(t)) }

// FormatRate writes r as a scenario file would, exactly.
func FormatRate(r nodes.Rate) string { return rateMeasure.format(int64(r)) }

// FormatLength writes l as a scenario file would, exactly.
func FormatLength(l nodes.Length) string { return lengthMeasure.format(int64(l)) }

// FormatBytes writes b as a scenario file would, exactly.
func FormatBytes(b nodes.Bytes) string { return bytesMeasure.format(int64(b)) }
