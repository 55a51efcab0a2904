package study

import (
	"fmt"
	"math"
	"slices"

	"ferrule/des/measure"
	"ferrule/scenarios/result"
)

// comparedSeeds is how many seeds a comparison takes when none are given: as
// many as can call one of 25 figures with an objective better or worse.
const comparedSeeds = 10

// terms are what verdicts are given by.
type terms struct {
	level  float64 // of confidence
	margin float64 // share of a limit, or of a figure, that does not matter
	short  bool    // some run is too short for its warm-up: no interval, no verdict
}

// alpha is the chance of a false call that is borne.
func (t terms) alpha() float64 { return 1 - t.level }

// A contrast is one figure under the base and the plan.
type contrast struct {
	result.Difference
	base, plan judgement
	way        sense
	seeds      int       // of the study
	tooShort   bool      // as terms have it
	diffs      []float64 // plan minus base, by pair
}

// tested reports whether chance could have made the difference: it is not the
// same zero in every seed.
func (x *contrast) tested() bool {
	return x.P != nil && slices.ContainsFunc(x.diffs, func(d float64) bool { return d != 0 })
}

// contrast compares one figure; decide gives its verdict.
func (f *pairing) contrast(s *series) contrast {
	n := len(f.base)
	b, p := *s, *s
	p.readings, b.readings = s.readings[:n], s.readings[n:]
	x := contrast{base: b.judge(), plan: p.judge(), way: f.sense(s), seeds: n, tooShort: f.short}
	period := f.periods[s.period]
	x.Difference = result.Difference{Class: s.class, Subject: s.subject, Period: period.Name, Kind: period.Kind,
		Figure: s.figure, Unit: s.unit, Limit: s.limit, WorstPair: p.worstPair(), BaseMet: x.base.met, PlanMet: x.plan.met,
		Exploratory: s.limit == nil}
	var tried, had []float64
	for i := range n {
		u, v := b.readings[i], p.readings[i]
		if u != nil && v != nil && u.value != nil && v.value != nil {
			had, tried = append(had, *u.value), append(tried, *v.value)
		}
	}
	if len(had) == 0 || len(had) < 2 && n >= 2 {
		x.Base, x.Plan = meanOf(b.values()), meanOf(p.values())
		return x
	}
	if len(had) < n {
		f.fewer = append(f.fewer, fmt.Sprintf("%s %s (%d of %d)", nameOf(&x.Difference), s.figure, len(had), n))
	}
	x.Base, x.Plan = meanOf(had), meanOf(tried)
	x.weigh(tried, had, f.terms)
	return x
}

// leastPairs is how many pairs a correlation takes: any two lie on a line. dust
// is the gain from which on the differences vary by no more than rounding does.
const (
	leastPairs = 3
	dust       = 1e9
)

// weigh sets what was tried against what was there before, pair by pair.
func (x *contrast) weigh(tried, had []float64, by terms) {
	t := measure.PairedT(tried, had, by.level)
	x.Difference.Difference, x.Interval, x.Seeds = new(t.Diff.Mean), intervalOf(t.Diff), int64(len(had))
	if by.short {
		x.Interval = nil
	}
	if len(had) < 2 || by.short {
		return
	}
	x.diffs = make([]float64, len(had))
	differ := 0
	for i := range had {
		if x.diffs[i] = tried[i] - had[i]; x.diffs[i] != 0 {
			differ++
		}
	}
	x.P = new(max(t.P, measure.LeastP(differ)))
	if len(had) >= leastPairs && !math.IsNaN(t.Correlation) {
		x.Correlation = new(t.Correlation)
	}
	if len(had) >= leastPairs && t.Gain > 0 && t.Gain < dust { // a NaN is neither
		x.PairingGain = new(t.Gain)
	}
	if least := by.margin * scaleOf(&x.Difference); least > 0 {
		x.SameWithin = &least
		// One-sided, so half of what two signs can show.
		x.PSame = new(max(measure.SameWithin(x.diffs, least), measure.LeastP(len(had))/2))
	}
}

// scaleOf is what the margin is a share of.
func scaleOf(x *result.Difference) float64 {
	if x.Limit != nil {
		return *x.Limit
	}
	return max(math.Abs(*x.Base), math.Abs(*x.Plan))
}

// decide gives verdicts: to the figures with an objective as a family, to each
// of the others for itself.
func (f *pairing) decide(xs []contrast) result.Family {
	alpha := f.alpha()
	ps := make([]float64, len(xs))
	fam := result.Family{LeastP: measure.LeastP(len(f.base)), Loose: int64(measure.PairsFor(alpha)), Method: "Holm"}
	for i := range xs {
		x := &xs[i]
		ps[i] = math.NaN()
		switch {
		case x.Exploratory || x.P == nil || x.way == neither:
		case x.tested():
			ps[i] = *x.P
			fam.Figures++
		default:
			fam.Still++
		}
	}
	fam.Seeds = int64(measure.PairsFor(alpha / max(1, float64(fam.Figures))))
	for i, p := range measure.Holm(ps) {
		x := &xs[i]
		if x.P == nil || x.way == neither {
			continue
		}
		step := alpha
		if !math.IsNaN(p) {
			x.PFamily = &p
			step = alpha / float64(fam.Figures)
		}
		x.verdict(alpha)
		if x.Verdict == result.Undecided {
			x.MoreSeeds = x.more(step, alpha)
		}
		if x.Exploratory {
			f.loose++
		}
	}
	return fam
}

// verdict says what the difference amounts to when a chance of alpha of a
// false call is borne.
func (x *contrast) verdict(alpha float64) {
	p := x.P
	if x.PFamily != nil {
		p = x.PFamily
	}
	lower := *x.Difference.Difference < 0
	switch {
	case !x.tested(), x.PSame != nil && *x.PSame <= alpha:
		x.Verdict = result.Same
	case *p > alpha:
		x.Verdict = result.Undecided
	case lower == (x.way == lowerIsBetter):
		x.Verdict = result.Better
	default:
		x.Verdict = result.Worse
	}
}

// more is how many seeds beyond those of the study decide the difference with
// a chance of four in five, if it is as it looks: as one that is there, at
// step, or as one that does not matter, at alpha. It is nil when that cannot
// be said.
func (x *contrast) more(step, alpha float64) *int64 {
	mean := *x.Difference.Difference
	need := 0
	if n, ok := measure.PairsToShow(x.diffs, mean, step/2); ok {
		need = max(n, measure.PairsFor(step))
	}
	if x.SameWithin != nil && math.Abs(mean) < *x.SameWithin {
		n, ok := measure.PairsToShow(x.diffs, *x.SameWithin-math.Abs(mean), alpha)
		if n = max(n, measure.PairsFor(2*alpha)); ok && (need == 0 || n < need) {
			need = n
		}
	}
	if need == 0 {
		return nil
	}
	return new(int64(max(1, need-x.seeds)))
}

// cannotSay lists what the number of seeds rules out.
func cannotSay(c *result.Comparison) []string {
	n := len(c.Seeds)
	if n == 1 {
		return []string{"One seed says nothing about chance: there is no interval and no verdict. " +
			fmt.Sprintf("%d seeds can call a single figure better or worse.", measure.PairsFor(1-c.Confidence))}
	}
	var out []string
	for _, p := range c.Plans {
		f := p.Family
		if int64(n) >= f.Seeds || f.Figures == 0 {
			continue
		}
		out = append(out, fmt.Sprintf("Under %s no figure with an objective can be called better or worse: %d seeds show p values down to %.2g at best, and the first of %d figures needs %.2g. %d seeds can.",
			p.Plan, n, f.LeastP, f.Figures, (1-c.Confidence)/float64(f.Figures), f.Seeds))
	}
	if need := measure.PairsFor(1 - c.Confidence); n < need {
		out = append(out, fmt.Sprintf("With %d seeds no exploratory figure can be called better or worse either: %d are needed.", n, need))
	}
	return out
}
