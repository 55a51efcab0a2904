package table

import (
	"math"
	"strconv"
	"strings"

	"ferrule/scenarios/result"
)

// A scale turns an SI value into a human unit.
type scale struct {
	per  float64 // SI value of one unit
	name string
}

var (
	times  = []scale{{1, "s"}, {1e-3, "ms"}, {1e-6, "us"}, {1e-9, "ns"}}
	rates  = []scale{{1e9, "Gb/s"}, {1e6, "Mb/s"}, {1e3, "kb/s"}, {1, "b/s"}}
	octets = []scale{{1e9, "GB"}, {1e6, "MB"}, {1e3, "kB"}, {1, "B"}}
	ratios = []scale{{1e-2, "%"}, {1e-6, "ppm"}}
)

// scaleOf picks the unit for a value of the size of v, in the given SI unit.
func scaleOf(unit string, v float64) scale {
	v = math.Abs(v)
	switch unit {
	case result.UnitSeconds:
		return largest(times, v, 1)
	case result.UnitBps:
		return largest(rates, v, 1)
	case result.UnitBytes:
		return largest(octets, v, 1)
	case result.UnitRatio:
		return largest(ratios, v, 1e-2) // below 0.01 % in parts per million
	default:
		return scale{1, unit}
	}
}

// largest is the first unit that leaves v at or above least, else the last.
func largest(ss []scale, v, least float64) scale {
	if v == 0 {
		return zero(ss)
	}
	for _, s := range ss {
		if v/s.per >= least {
			return s
		}
	}
	return ss[len(ss)-1]
}

// zero is the unit a zero is shown in: the plain one, or % for a ratio.
func zero(ss []scale) scale {
	for _, s := range ss {
		if s.per == 1 {
			return s
		}
	}
	return ss[0]
}

// number shows v with three significant digits in a human unit.
func number(v float64, unit string) cell { return scaled(v, unit, scaleOf(unit, v)) }

// scaled shows v in the unit s, unless that would round it to nothing.
func scaled(v float64, unit string, s scale) cell {
	x := v / s.per
	if x != 0 && math.Abs(x) < 1e-3 {
		s = scaleOf(unit, v)
		x = v / s.per
	}
	text := digits(x, 3)
	if s.per == 1 && s.name == unit && x == math.Trunc(x) && math.Abs(x) < 1<<53 && !continuous(unit) {
		text = decimal(x, 0) // a count has no digits after its point
	}
	return cell{text: suffix(text, s.name), values: []float64{v}}
}

// continuous reports whether figures in the given unit are measured, not
// counted.
func continuous(unit string) bool {
	switch unit {
	case result.UnitSeconds, result.UnitBps, result.UnitBytes, result.UnitRatio, result.UnitKm:
		return true
	default:
		return false
	}
}

// suffix sets a unit behind a number.
func suffix(text, unit string) string {
	if unit == "" || unit == result.UnitCount {
		return text
	}
	return text + " " + unit
}

// digits writes x with n significant digits and at least its whole part, with
// thousands grouped, without an exponent unless x is tiny.
func digits(x float64, n int) string {
	if x == 0 {
		return "0"
	}
	decimals := n - 1 - int(math.Floor(math.Log10(math.Abs(x))))
	if decimals > 9 {
		return strconv.FormatFloat(x, 'e', n-1, 64)
	}
	return decimal(x, decimals)
}

// decimal writes x with the given number of decimals, at least none, and
// thousands grouped.
func decimal(x float64, decimals int) string {
	return group(strconv.FormatFloat(x, 'f', max(decimals, 0), 64))
}

// group sets a comma between thousands of the whole part of a decimal.
func group(s string) string {
	sign := ""
	if strings.HasPrefix(s, "-") {
		sign, s = "-", s[1:]
	}
	whole, frac, _ := strings.Cut(s, ".")
	var b strings.Builder
	for i, c := range whole {
		if i > 0 && (len(whole)-i)%3 == 0 {
			b.WriteByte(',')
		}
		b.WriteRune(c)
	}
	if frac != "" {
		frac = "." + frac
	}
	return sign + b.String() + frac
}

// optional shows *v, or "-" when it cannot be said.
func optional(v *float64, unit string) cell {
	if v == nil {
		return cell{text: "-"}
	}
	return number(*v, unit)
}

// limit shows an objective: as number does, without trailing zeros.
func limit(v float64, unit string) cell {
	s := scaleOf(unit, v)
	x := strconv.FormatFloat(v/s.per, 'g', 6, 64)
	return cell{text: suffix(x, s.name), values: []float64{v}}
}

func optionalLimit(v *float64, unit string) cell {
	if v == nil {
		return cell{text: "-"}
	}
	return limit(*v, unit)
}

// limitBeside shows an objective in the unit of the figures beside it, if it
// is short in that unit.
func limitBeside(v *float64, unit string, s scale) cell {
	c := optionalLimit(v, unit)
	if v == nil {
		return c
	}
	if x := strconv.FormatFloat(*v/s.per, 'g', 6, 64); len(x) <= 3 && !strings.Contains(x, "e") {
		c.text = suffix(x, s.name)
	}
	return c
}

// count shows a whole number with its unit; the unit may be "".
func count(n int64, unit string) cell {
	return cell{text: suffix(group(strconv.FormatInt(n, 10)), unit), values: []float64{float64(n)}}
}

// instant shows a time of the run in seconds, to the microsecond.
func instant(s float64) cell {
	return cell{text: strconv.FormatFloat(s, 'f', 6, 64) + " s", values: []float64{s}}
}

// span shows a stretch of seconds with as few digits as it has, six at most.
func span(s float64) cell {
	text := strconv.FormatFloat(s, 'f', 6, 64)
	text = strings.TrimRight(strings.TrimRight(text, "0"), ".")
	return cell{text: text + " s", values: []float64{s}}
}

func optionalInstant(s *float64) cell {
	if s == nil {
		return cell{text: "-"}
	}
	return instant(*s)
}

// plus marks a positive change with a sign.
func plus(c cell) cell {
	if !strings.HasPrefix(c.text, "-") && c.values[0] != 0 {
		c.text = "+" + c.text
	}
	return c
}

// change shows a difference with its interval, in one unit, with two digits of
// the half-width.
func change(v *float64, i *result.Interval, unit string) cell {
	if v == nil {
		return cell{text: "-"}
	}
	if i == nil {
		c := plus(number(*v, unit))
		c.text = points(c.text)
		return c
	}
	size := math.Abs(*v)
	for _, x := range []*float64{i.Half, i.Low, i.High} {
		if x != nil {
			size = max(size, math.Abs(*x))
		}
	}
	s := scaleOf(unit, size)
	show := func(x float64, decimals int) cell {
		return cell{text: decimal(x/s.per, decimals), values: []float64{x}}
	}
	switch {
	case i.Half != nil:
		n := decimalsFor(*i.Half/s.per, size/s.per)
		c := join(" ± ", plus(show(*v, n)), show(*i.Half, n))
		c.text = points(suffix(c.text, s.name))
		return c
	case i.Low != nil && i.High != nil:
		n := decimalsFor((*i.High-*i.Low)/2/s.per, size/s.per)
		ends := join("..", plus(show(*i.Low, n)), plus(show(*i.High, n)))
		ends.text = "(" + ends.text + ")"
		c := join(" ", plus(show(*v, n)), ends)
		c.text = points(suffix(c.text, s.name))
		return c
	default:
		return change(v, nil, unit)
	}
}

// points turns the unit of a difference of percentages, which is not a
// percentage of anything, into percentage points.
func points(text string) string {
	if s, ok := strings.CutSuffix(text, " %"); ok {
		return s + " pp"
	}
	return text
}

// decimalsFor picks decimals that show two digits of half, or three of size
// when half is zero, six decimals at most.
func decimalsFor(half, size float64) int {
	lead, n := half, 1
	if half == 0 {
		lead, n = size, 2
	}
	if lead == 0 {
		return 0
	}
	return min(max(n-int(math.Floor(math.Log10(lead))), 0), 6)
}

// figureName is the name of a figure for readers.
func figureName(id string) string {
	switch id {
	case result.FigOut:
		return "outage"
	case result.FigJitter:
		return "jitter"
	}
	if cause, ok := strings.CutPrefix(id, result.FigLostPrefix); ok {
		return "lost: " + cause
	}
	head, rest, ok := strings.Cut(id, "-p")
	if !ok {
		return strings.ReplaceAll(id, "-", " ")
	}
	switch head {
	case "pdv", "ipdv":
		head = strings.ToUpper(head)
	}
	return head + " p" + rest
}

// losses shows each cause that lost packets, or "none".
func losses(ls result.Losses) cell {
	var cs []cell
	for _, l := range ls {
		if l.Packets != 0 {
			cs = append(cs, join(" ", word(l.Cause), count(l.Packets, "")))
		}
	}
	if cs == nil {
		return word("none")
	}
	return join(", ", cs...)
}

// met shows whether an objective held: met, MISSED, or "-" when not said.
func met(m *bool) cell {
	switch {
	case m == nil:
		return cell{text: "-"}
	case *m:
		return toned(word("met"), good)
	default:
		return toned(word("MISSED"), bad)
	}
}

// metBoth shows the plan's outcome and, where it differs, the base's.
func metBoth(base, plan *bool) cell {
	c := met(plan)
	if plan == nil || base == nil || *plan == *base {
		return c
	}
	c.text += ", was " + met(base).text
	return c
}

func verdict(v result.Verdict) cell {
	switch v {
	case "":
		return cell{text: "-"}
	case result.Better:
		return toned(word(string(v)), good)
	case result.Worse:
		return toned(word(string(v)), bad)
	case result.Same, result.Mixed, result.Undecided:
		return word(string(v))
	default:
		panic("table: unknown verdict " + strconv.Quote(string(v)))
	}
}
