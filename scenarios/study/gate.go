package study

import (
	"fmt"
	"math"
	"strings"

	"ferrule/des/measure"
	"ferrule/scenarios/result"
)

// gatesOf judges the objectives of each plan; none when no class has one.
func gatesOf(plans []string, byPlan [][]*sample, level float64) []result.Gate {
	var out []result.Gate
	for k, plan := range plans {
		if g := gateOf(plan, byPlan[k], level, nil); g != nil {
			out = append(out, *g)
		}
	}
	return out
}

// gateOf judges the objectives of a plan over its samples; nil when there are
// none. The interval of the mean of the worst pair's figure is held against
// the limit. An objective is met when the interval lies within the limit; all
// being met needs no correction, for it takes every one of them to err at once
// (R. L. Berger, Technometrics 24, 1982). One is missed when the mean lies
// beyond and its one-sided p value, corrected by Holm over the objectives,
// says so at half of what the interval bears, since any one of them is enough.
// Too few seeds for their signs alone to say it (measure.LeastP) decide
// nothing. pick says which objectives count; nil stands for all.
func gateOf(plan string, samples []*sample, level float64, pick func(class string, kind result.PeriodKind) bool) *result.Gate {
	tooShort := tooShort(samples) != ""
	figures := collect(samples, func(s *sample) []reading { return s.figures })
	g := &result.Gate{Plan: plan, Confidence: level}
	var limited []series
	var values [][]float64
	ps := []float64{}
	for _, s := range figures {
		if s.limit == nil || pick != nil && !pick(s.class, kindOf(samples, s.period)) {
			continue
		}
		v, p := s.worsts(), math.NaN()
		if len(v) >= 2 {
			p = max(measure.Above(v, *s.limit), measure.LeastP(len(v))/2)
		}
		limited, values, ps = append(limited, s), append(values, v), append(ps, p)
	}
	if len(limited) == 0 {
		return nil
	}
	met, missed := true, false
	for i, p := range measure.Holm(ps) {
		h := limited[i].hold(values[i], p, level, len(limited))
		if tooShort {
			h.Standing, h.Interval, h.PMissed, h.MoreSeeds = result.Open, nil, nil, nil
			h.Text = "too short for its warm-up"
		}
		met = met && h.Standing == result.Met
		missed = missed || h.Standing == result.Missed
		g.Holds = append(g.Holds, h)
	}
	switch {
	case missed:
		g.Standing = result.Missed
	case met:
		g.Standing = result.Met
	default:
		g.Standing = result.Open
	}
	return g
}

// worsts lists the worst pair's figure of each sample in which it can be said.
func (s *series) worsts() []float64 {
	var out []float64
	for _, r := range s.readings {
		if r != nil && r.worst != nil {
			out = append(out, *r.worst)
		}
	}
	return out
}

// hold judges one objective of several by values, the worst pair's figure of
// each sample, and the corrected p value that it is missed.
func (s *series) hold(values []float64, p, level float64, of int) result.Hold {
	j := s.judge()
	h := result.Hold{Class: s.class, Period: s.period, Figure: s.figure, Unit: s.unit, Limit: *s.limit,
		WorstPair: s.worstPair(), Mean: j.mean, Seeds: int64(len(values)), SeedsMet: int64(j.times), Standing: result.Open}
	tail := (1 - level) / 2
	if len(values) >= 2 {
		i := measure.MeanInterval(values, level)
		h.Mean, h.Interval, h.PMissed = &i.Mean, intervalOf(i), &p
		enough := len(values) == j.of && measure.LeastP(len(values)) <= 1-level && s.short() == 0
		switch {
		case p <= tail:
			h.Standing = result.Missed
		case enough && j.met != nil && *j.met && i.High() <= *s.limit:
			h.Standing = result.Met
		}
	}
	if h.Standing == result.Open && len(values) >= 2 {
		step, room := tail, *s.limit-*h.Mean
		if room < 0 {
			step /= float64(of)
		}
		n, ok := measure.PairsToShow(values, room, step)
		n = max(n, measure.PairsFor(2*step))
		if ok && j.of == len(values) && n > len(values) {
			h.MoreSeeds = new(int64(n - len(values)))
		}
	}
	h.Text = s.holdText(&h, j)
	return h
}

// short is in how many samples the figure of some pair could not be said.
func (s *series) short() int {
	n := 0
	for _, r := range s.readings {
		if r != nil && !r.sure {
			n++
		}
	}
	return n
}

// holdText words how an objective stands.
func (s *series) holdText(h *result.Hold, j judgement) string {
	if j.of == 0 || len(s.worsts()) == 0 {
		return "nothing was measured"
	}
	var b strings.Builder
	fmt.Fprintf(&b, "%s", quantity(*h.Mean, h.Unit))
	if h.Interval != nil {
		fmt.Fprintf(&b, " ± %s", quantity(*h.Interval.Half, h.Unit))
	}
	if h.WorstPair != "" {
		fmt.Fprintf(&b, " for %s", h.WorstPair)
	}
	fmt.Fprintf(&b, ", limit %s", quantity(h.Limit, h.Unit))
	if n := s.short(); n > 0 {
		fmt.Fprintf(&b, "; some pair sent too few packets to tell in %d of %d seeds", n, j.of)
	}
	if h.Standing == result.Open && h.MoreSeeds != nil {
		fmt.Fprintf(&b, "; about %d more seeds would decide it", *h.MoreSeeds)
	}
	if h.Figure == result.FigLoss && *h.Mean == 0 && h.Seeds > 0 {
		fmt.Fprintf(&b, "; %s", noneSeen(h.Seeds))
	}
	return b.String()
}

// noneSeen bounds what was never seen, by whole runs, which are independent.
func noneSeen(seeds int64) string {
	return fmt.Sprintf("no loss in %d seeds: at 95 %% at most %.2g of 100 such runs have an episode of loss",
		seeds, 100*measure.NoneSeenUpper(uint64(seeds), confidence))
}

// kindOf is the kind of a period, of whichever sample has it.
func kindOf(samples []*sample, period string) result.PeriodKind {
	for _, s := range samples {
		for _, p := range s.periods {
			if p.Name == period {
				return p.Kind
			}
		}
	}
	return ""
}

// settled reports whether periods of a kind are those in which a network does
// what it was sized for: nothing is being changed or put right.
func settled(kind result.PeriodKind) bool { return kind == result.Normal || kind == result.After }
