package study

import (
	"context"
	"fmt"
	"math"
	"slices"
	"strings"

	"ferrule/des/measure"
	"ferrule/scenarios"
	"ferrule/scenarios/result"
)

// Compare sets each of plans beside base, on the same seeds. No plans stand
// for all plans of sc but base, no base for scenarios.AsIs, and no seeds for
// the ten from that of o on; the plan of o is not used. Runs are spread over
// the cores of o, all plans of a seed before the next seed.
//
// For every class and period the figures with a limit are compared, and with
// them loss, throughput, mean and 99th percentile of the delay, the 99.9th of
// its variation, reordering, outage and recovery; of the network those of
// ports, circuits and fibres. Differences are plan minus base, paired by seed,
// with intervals of Student's t. A figure is compared over the seeds in which
// it can be said under both; a caution states their number where it is not
// that of all seeds, and with fewer than two there is no difference. One seed
// in all gives differences, but no interval and no verdict.
//
// The figures with an objective are a family whose verdicts are corrected
// together, by Holm's procedure, per plan; all others are exploratory. A p value
// is that of Student's t, and never below the least that so many pairs can show
// by their signs alone, so that few seeds give no verdict. A difference is same
// when it is zero in every seed or surely within the margin of o, better or
// worse by the p value, else undecided; how many more seeds may decide it is
// then said. Objectives are judged as by [Batch].
//
// When ctx ends first, the result holds the seeds that finished under every
// plan and is marked partial; it is nil when there is none. The error is then
// that of ctx. Any other error is that of a run, and the result is nil.
func Compare(ctx context.Context, sc *scenarios.Scenario, o Options, base string, plans []string, seeds []uint64) (*result.Comparison, error) {
	if base == "" {
		base = scenarios.AsIs
	}
	if len(plans) == 0 {
		plans = slices.DeleteFunc(Plans(sc), func(p string) bool { return p == base })
	}
	for i, p := range append([]string{base}, plans...) {
		if _, err := sc.Plan(p); err != nil {
			return nil, err
		}
		if i > 0 && (p == base || slices.Contains(plans[:i-1], p)) {
			return nil, fmt.Errorf("plan %s is given twice", p)
		}
	}
	if len(plans) == 0 {
		return nil, fmt.Errorf("%s: there is no plan to set beside %s", sc.File, base)
	}
	if len(seeds) == 0 {
		seeds = Seeds(o.seed(sc), comparedSeeds)
	}
	return compare(ctx, o, append([]string{base}, plans...), seeds, replicatorOf(sc, o))
}

// compare is Compare with the runs of run; plans[0] is the base.
func compare(ctx context.Context, o Options, plans []string, seeds []uint64, run replicate) (*result.Comparison, error) {
	if err := checkSeeds(seeds); err != nil {
		return nil, err
	}
	var jobs []job
	for _, seed := range seeds {
		for _, plan := range plans {
			jobs = append(jobs, job{plan, seed})
		}
	}
	run, kept := keeping(run, o, plans, seeds[0])
	samples, err := sampleAll(ctx, jobs, o, run)
	if err != nil && ctx.Err() == nil {
		return nil, err
	}
	byPlan := make([][]*sample, len(plans))
	for i := 0; i < len(samples); i += len(plans) {
		of := samples[i : i+len(plans)]
		if slices.Contains(of, nil) {
			continue
		}
		for k := range plans {
			byPlan[k] = append(byPlan[k], of[k])
		}
	}
	if len(byPlan[0]) == 0 {
		return nil, err
	}
	c := foldComparison(plans, byPlan, terms{level: confidence, margin: o.margin()})
	c.Partial, c.Runs = err != nil, kept()
	if o.settled != nil {
		var gates []*result.Gate
		for k, plan := range plans {
			if g := gateOf(plan, byPlan[k], confidence, func(_ string, kind result.PeriodKind) bool { return settled(kind) }); g != nil {
				gates = append(gates, g)
			}
		}
		o.settled(gates)
	}
	return c, err
}

// foldComparison compares the samples of plans; those of plans[0] are the
// base, and all have the same seeds, at least one.
func foldComparison(plans []string, byPlan [][]*sample, t terms) *result.Comparison {
	base := byPlan[0]
	c := &result.Comparison{Head: base[0].head, Base: plans[0], Confidence: t.level, Margin: t.margin, Defaults: base[0].defaults}
	c.Partial = false
	for _, s := range base {
		c.Seeds = append(c.Seeds, s.seed)
	}
	var all []*sample
	for k, samples := range byPlan {
		for _, s := range samples {
			addAudit(&c.Audit, s.audit, fmt.Sprintf("plan %s, seed %d: ", plans[k], s.seed))
		}
		all = append(all, samples...)
	}
	c.Audit.OK = auditsOK(all)
	c.Cautions = cautionsOf(all)
	if seeds := tooShort(all); seeds != "" {
		t.short = true
		c.Cautions = append(c.Cautions, "No intervals and no verdicts: the warm-up took half of what there was in runs with the seeds "+seeds+".")
	}
	c.Cautions = append(c.Cautions, warmUpsDiffer(base)...)
	c.Gates = gatesOf(plans, byPlan, t.level)
	loose := 0
	for k := 1; k < len(plans); k++ {
		f := newPairing(base, byPlan[k], t)
		c.Plans = append(c.Plans, f.compared(plans[k]))
		if len(f.fewer) > 0 {
			c.Cautions = append(c.Cautions, fmt.Sprintf("Under %s, compared over fewer seeds: %s.", plans[k], shortList(f.fewer)))
		}
		loose += f.loose
	}
	c.Cautions = append(c.Cautions, cannotSay(c)...)
	if len(base) > 1 && loose > 0 {
		c.Cautions = append(c.Cautions, fmt.Sprintf("The %d verdicts marked exploratory stand each for itself: where nothing differs, chance alone makes about %.0f in 100 look better or worse.",
			loose, 100*(1-t.level)))
	}
	return c
}

// A pairing compares one plan with the base. Periods of its samples are called
// by their places, see aligned.
type pairing struct {
	base, plan []*sample
	terms
	periods map[string]result.Period // by place: of the plan or, where it has none, of the base
	fewer   []string                 // figures compared over fewer seeds than there are
	loose   int                      // exploratory verdicts given
}

// newPairing sets the samples of a plan beside those of the base.
func newPairing(base, plan []*sample, t terms) *pairing {
	f := &pairing{base: aligned(base), plan: aligned(plan), terms: t, periods: map[string]result.Period{}}
	for _, side := range [][][]*sample{{plan, f.plan}, {base, f.base}} {
		for i, s := range side[0] {
			for k, p := range s.periods {
				place := side[1][i].periods[k].Name
				if _, ok := f.periods[place]; !ok {
					f.periods[place] = p
				}
			}
		}
	}
	return f
}

// compared makes the comparison.
func (f *pairing) compared(plan string) result.Compared {
	figures := func(s *sample) []reading { return s.figures }
	ofNetwork := func(s *sample) []reading { return s.network }
	p := result.Compared{Plan: plan, Price: f.price()}
	for _, s := range f.plan[0].periods {
		p.Periods = append(p.Periods, f.periods[s.Name])
	}
	var contrasts []contrast
	for _, s := range f.pairs(figures) {
		if s.limit == nil && !slices.Contains(headline, s.figure) || s.figure == result.FigReordered && !s.tells() {
			continue
		}
		contrasts = append(contrasts, f.contrast(&s))
	}
	p.Family = f.decide(contrasts)
	for i := range contrasts {
		p.Figures = append(p.Figures, contrasts[i].Difference)
	}
	var network []contrast
	for _, s := range f.pairs(ofNetwork) {
		if s.tells() {
			network = append(network, f.contrast(&s))
		}
	}
	f.decide(network)
	for i := range network {
		p.Network = append(p.Network, network[i].Difference)
	}
	for _, class := range f.plan[0].classes {
		of := slices.DeleteFunc(slices.Clone(contrasts), func(x contrast) bool { return x.Class != class })
		p.Verdicts = append(p.Verdicts, verdictOf(class, of, len(f.base), p.Family))
	}
	return p
}

// headline lists the figures that are compared though they have no limit.
var headline = []string{
	result.FigLoss, result.FigThroughput, result.FigDelayMean, result.FigDelayP99, result.FigPDVP999,
	result.FigReordered, result.FigOut, result.FigRecovery, result.FigTransferP95, result.FigGoodput,
}

// pairs gathers figures over the samples of the plan, then those of the base.
func (f *pairing) pairs(pick func(*sample) []reading) []series {
	return collect(append(slices.Clone(f.plan), f.base...), pick)
}

// sense tells which way a figure gets better; figures of the network are
// neither good nor bad, but for waits, losses and being down.
func (f *pairing) sense(s *series) sense {
	if s.class != "" {
		return senseOf(s.figure)
	}
	switch s.figure {
	case "wait-mean", "lost", "down", "set-up":
		return lowerIsBetter
	default:
		return neither
	}
}

// nameOf names what a figure is of.
func nameOf(d *result.Difference) string {
	if d.Class == "" {
		return d.Subject
	}
	return d.Class + " " + strings.ToUpper(d.Period)
}

// meanOf is the mean, or nil of nothing.
func meanOf(x []float64) *float64 {
	if len(x) == 0 {
		return nil
	}
	return new(measure.MeanInterval(x, confidence).Mean)
}

// price sets what the plan holds beside what the base holds, in the first
// seed, and the transit traffic of each site, on average.
func (f *pairing) price() result.PriceChange {
	b, p := f.base[0].price, f.plan[0].price
	c := result.PriceChange{Base: b, Plan: p, Slots: p.Slots - b.Slots, SlotKm: p.SlotKm - b.SlotKm, Ports: p.Ports - b.Ports}
	for _, site := range f.base[0].transit {
		var freed float64
		for i := range f.base {
			freed += rateAt(f.base[i].transit, site.Site) - rateAt(f.plan[i].transit, site.Site)
		}
		if freed /= float64(len(f.base)); math.Abs(freed) >= 1 {
			c.TransitFreed = append(c.TransitFreed, result.SiteRate{Site: site.Site, Bps: freed})
		}
	}
	return c
}

// rateAt is the rate at a site, 0 when it is not listed.
func rateAt(list []result.SiteRate, site string) float64 {
	for _, s := range list {
		if s.Site == site {
			return s.Bps
		}
	}
	return 0
}

// aligned returns the samples with their periods called by their place in the
// run in place of their names, so that what belongs together is compared: each
// fault and each repair opens a new part of the run, and within a part there
// is one period of each kind. Where a plan changes the network while all is
// settled, the last settled period of the part, that after the change, has the
// place; earlier ones and changes have places of their own.
func aligned(samples []*sample) []*sample {
	out := make([]*sample, len(samples))
	for i, s := range samples {
		c := *s
		places := placesOf(s.periods)
		c.periods = slices.Clone(s.periods)
		for k := range c.periods {
			c.periods[k].Name = places[k]
		}
		c.figures = slices.Clone(s.figures)
		for k := range c.figures {
			r := &c.figures[k]
			if at := slices.IndexFunc(s.periods, func(p result.Period) bool { return p.Name == r.period }); at >= 0 {
				r.period = places[at]
			}
		}
		out[i] = &c
	}
	return out
}

// placesOf gives each period its place.
func placesOf(periods []result.Period) []string {
	places := make([]string, len(periods))
	part := 0
	for k, p := range periods {
		if p.Kind == result.Hit || p.Kind == result.Mend {
			part++
		}
		places[k] = fmt.Sprintf("%s %d", p.Kind, part)
	}
	for k := range places {
		later := 0
		for _, o := range places[k+1:] {
			if o == places[k] {
				later++
			}
		}
		if later > 0 {
			places[k] = fmt.Sprintf("%s, %d before", places[k], later)
		}
	}
	return places
}
