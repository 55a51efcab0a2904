package study

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"ferrule/scenarios/result"
)

// verdictOf sums up a class in one line. seeds is how many the study has. The figures that count are those with
// a limit or, where none has one, all. A class is better when some of them are
// and none is worse, worse the other way round, same when none differs at all,
// mixed when there is evidence of both, and undecided when there is none.
func verdictOf(class string, of []contrast, seeds int, family result.Family) result.ClassVerdict {
	v := result.ClassVerdict{Class: class}
	limited := slices.DeleteFunc(slices.Clone(of), func(x contrast) bool { return x.Limit == nil })
	v.BaseMet = allMet(limited, func(x contrast) *bool { return x.BaseMet })
	v.PlanMet = allMet(limited, func(x contrast) *bool { return x.PlanMet })
	need := family.Seeds
	if len(limited) > 0 {
		of = limited
	} else {
		need = family.Loose
	}
	better, worse := withVerdict(of, result.Better), withVerdict(of, result.Worse)
	same, open := withVerdict(of, result.Same), withVerdict(of, result.Undecided)
	var parts []string
	switch {
	case seeds < 2:
		parts = append(parts, "no verdict from one seed")
	case slices.ContainsFunc(of, func(x contrast) bool { return x.tooShort }):
		v.Verdict = result.Undecided
		parts = append(parts, "no verdict: too short for its warm-up")
	case len(better)+len(worse)+len(same)+len(open) == 0:
		parts = append(parts, "nothing to compare")
	case len(better) > 0 && len(worse) > 0:
		v.Verdict = result.Mixed
		parts = append(parts, "better "+places(better)+", worse "+places(worse))
	case len(better) > 0:
		v.Verdict = result.Better
		parts = append(parts, "better "+places(better))
	case len(worse) > 0:
		v.Verdict = result.Worse
		parts = append(parts, "worse "+places(worse))
	case len(open) == 0:
		v.Verdict = result.Same
		parts = append(parts, sameness(same))
	case int64(seeds) < need:
		v.Verdict = result.Undecided
		parts = append(parts, fmt.Sprintf("no verdict from %d seeds, %d are needed", seeds, need))
	default:
		v.Verdict = result.Undecided
		parts = append(parts, "no evidence either way"+moreText(open))
	}
	if len(limited) == 0 && (v.Verdict == result.Better || v.Verdict == result.Worse) {
		parts[0] += ", exploratory"
	}
	v.Text = strings.Join(append(parts, limitsText(limited)...), "; ")
	return v
}

// moreText says how many more seeds would decide the nearest of those that are
// open.
func moreText(open []contrast) string {
	var least *int64
	for i := range open {
		if n := open[i].MoreSeeds; n != nil && (least == nil || *n < *least) {
			least = n
		}
	}
	if least == nil {
		return ""
	}
	return fmt.Sprintf(" (about %d more seeds would decide a figure)", *least)
}

// sameness words that nothing got better or worse.
func sameness(of []contrast) string {
	for i := range of {
		if d := of[i].Difference.Difference; d != nil && *d != 0 {
			return "no difference that matters"
		}
	}
	return "identical"
}

// allMet is whether every limit was kept: false if one was not, nil if that
// cannot be said of one or there is none.
func allMet(of []contrast, met func(contrast) *bool) *bool {
	sure := len(of) > 0
	for _, x := range of {
		switch m := met(x); {
		case m == nil:
			sure = false
		case !*m:
			return new(false)
		}
	}
	if !sure {
		return nil
	}
	return new(true)
}

// withVerdict lists those with a verdict.
func withVerdict(of []contrast, v result.Verdict) []contrast {
	return slices.DeleteFunc(slices.Clone(of), func(x contrast) bool { return x.Verdict != v })
}

// places names each period once, with the figure that changed most there
// against its limit or, without one, against the base.
func places(of []contrast) string {
	var parts []string
	for i := 0; i < len(of); {
		j, most := i, i
		for ; j < len(of) && of[j].Period == of[i].Period; j++ {
			if weight(&of[j]) > weight(&of[most]) {
				most = j
			}
		}
		x := &of[most]
		parts = append(parts, fmt.Sprintf("in %s (%s %s)", strings.ToUpper(x.Period), x.Figure, signed(*x.Difference.Difference, x.Unit)))
		i = j
	}
	return strings.Join(parts, ", ")
}

// weight is how much a difference weighs in the summing up.
func weight(x *contrast) float64 {
	against := *x.Base
	if x.Limit != nil {
		against = *x.Limit
	}
	if against == 0 {
		return math.Inf(1)
	}
	return math.Abs(*x.Difference.Difference / against)
}

// limitsText says where limits are kept no longer, are kept now, or are still not
// kept, period by period, or that all are kept.
func limitsText(of []contrast) []string {
	if len(of) == 0 {
		return nil
	}
	var lost, gained, still, missed, unsaid []string
	for i := range of {
		x := &of[i]
		place := strings.ToUpper(x.Period)
		switch b, p := x.BaseMet, x.PlanMet; {
		case x.plan.of == 0: // the plan has no such period
		case p == nil:
			unsaid = append(unsaid, place+" "+x.Figure)
		case *p && b != nil && !*b:
			gained = append(gained, place+" "+x.Figure+seedsMet(x.plan))
		case *p:
		case b != nil && *b:
			lost = append(lost, place+" "+beyond(x))
		case b == nil:
			missed = append(missed, place+" "+beyond(x))
		default:
			still = append(still, place+" "+beyond(x))
		}
	}
	var parts []string
	add := func(what string, list []string) {
		if len(list) > 0 {
			parts = append(parts, what+" "+shortest(list))
		}
	}
	add("met -> MISSED in", lost)
	add("MISSED -> met in", gained)
	add("still MISSED in", still)
	add("MISSED in", missed)
	add("limit not decided in", unsaid)
	if len(parts) == 0 {
		return []string{"every limit met"}
	}
	return parts
}

// beyond says by how much the worst pair passes a limit.
func beyond(x *contrast) string {
	text := fmt.Sprintf("%s %s (limit %s)", x.Figure, quantity(*x.plan.mean, x.Unit), quantity(*x.Limit, x.Unit))
	if x.WorstPair != "" {
		text += " for " + x.WorstPair
	}
	return text + seedsMet(x.plan)
}

// seedsMet says in how many seeds a limit was met, where not in all or none.
func seedsMet(j judgement) string {
	if j.times == 0 || j.times == j.of {
		return ""
	}
	return fmt.Sprintf(" (met in %d of %d seeds)", j.times, j.of)
}

// shortest joins the first two of a list and counts the others.
func shortest(list []string) string {
	const most = 2
	if len(list) <= most {
		return strings.Join(list, ", ")
	}
	return fmt.Sprintf("%s and %d more", strings.Join(list[:most], ", "), len(list)-most)
}

// signed shows a difference with its sign; a difference of ratios in
// percentage points.
func signed(v float64, unit string) string {
	text := quantity(v, unit)
	if unit == result.UnitRatio {
		text = digits(v*100) + " pp"
	}
	if v > 0 {
		return "+" + text
	}
	return text
}

// A step is a unit that a quantity is shown in.
type step struct {
	per  float64
	name string
}

var (
	timeSteps = []step{{1, "s"}, {1e-3, "ms"}, {1e-6, "us"}, {1e-9, "ns"}}
	rateSteps = []step{{1e9, "Gb/s"}, {1e6, "Mb/s"}, {1e3, "kb/s"}, {1, "b/s"}}
)

// quantity shows a value with three significant digits in a handy unit.
func quantity(v float64, unit string) string {
	switch unit {
	case result.UnitSeconds:
		return stepped(v, timeSteps)
	case result.UnitBps:
		return stepped(v, rateSteps)
	case result.UnitRatio:
		return digits(v*100) + " %"
	default:
		return digits(v) + " " + unit
	}
}

// stepped shows v in the largest unit in which it rounds to at least 1, else in the
// smallest; zero in the first.
func stepped(v float64, steps []step) string {
	i := slices.IndexFunc(steps, func(s step) bool { return math.Abs(v) >= 0.9995*s.per })
	switch {
	case v == 0:
		i = 0
	case i < 0:
		i = len(steps) - 1
	}
	return digits(v/steps[i].per) + " " + steps[i].name
}

// digits writes v with three significant digits, without an exponent where
// that stays readable.
func digits(v float64) string {
	if a := math.Abs(v); a >= 999.5 {
		return strconv.FormatFloat(v, 'f', 0, 64)
	}
	return strconv.FormatFloat(v, 'g', 3, 64)
}
