package study

import (
	"context"
	"fmt"
	"slices"
	"strings"

	"ferrule/des/measure"
	"ferrule/scenarios"
	"ferrule/scenarios/result"
)

// confidence is the level of every interval of a study.
const confidence = 0.95

// Batch runs one replication for each seed under the plan of o, spread over
// the cores of o, and gives means with intervals for each class, period and
// figure, and for the network. No seeds stand for the eight from that of o on.
// A figure that cannot be said in some seed is averaged over the others, whose
// number is stated.
//
// An objective holds for every aggregate of its class and for every period. It
// counts as met when the mean, over the seeds, of the worst aggregate's figure
// is within the limit; a caution says so when it was met in some seeds only.
//
// When ctx ends first, the result holds the seeds that finished, in order, and
// is marked partial; it is nil when there is none. The error is then that of
// ctx. Any other error is that of a run, and the result is nil.
func Batch(ctx context.Context, sc *scenarios.Scenario, o Options, seeds []uint64) (*result.Batch, error) {
	if _, err := sc.Plan(o.plan()); err != nil {
		return nil, err
	}
	if len(seeds) == 0 {
		seeds = Seeds(o.seed(sc), defaultSeeds)
	}
	return batch(ctx, o, seeds, replicatorOf(sc, o))
}

// defaultSeeds is how many seeds a study takes when none are given.
const defaultSeeds = 8

// batch is Batch with the runs of run.
func batch(ctx context.Context, o Options, seeds []uint64, run replicate) (*result.Batch, error) {
	if err := checkSeeds(seeds); err != nil {
		return nil, err
	}
	jobs := make([]job, len(seeds))
	for i, seed := range seeds {
		jobs[i] = job{o.plan(), seed}
	}
	run, kept := keeping(run, o, []string{o.plan()}, seeds[0])
	samples, err := sampleAll(ctx, jobs, o, run)
	if err != nil && ctx.Err() == nil {
		return nil, err
	}
	samples = slices.DeleteFunc(samples, func(s *sample) bool { return s == nil })
	if len(samples) == 0 {
		return nil, err
	}
	b := foldBatch(o.plan(), samples, confidence)
	b.Partial, b.Runs = err != nil, kept()
	return b, err
}

// foldBatch makes a batch of samples, of which there is at least one.
func foldBatch(plan string, samples []*sample, level float64) *result.Batch {
	first := samples[0]
	b := &result.Batch{Head: first.head, Plan: plan, Confidence: level, Periods: first.periods,
		Price: first.price, Defaults: first.defaults}
	b.Partial = false
	for _, s := range samples {
		b.Seeds = append(b.Seeds, s.seed)
		addAudit(&b.Audit, s.audit, fmt.Sprintf("seed %d: ", s.seed))
	}
	b.Audit.OK = auditsOK(samples)
	b.Gates = gatesOf([]string{plan}, [][]*sample{samples}, level)
	figures := collect(samples, func(s *sample) []reading { return s.figures })
	var divided []string
	for i := range figures {
		b.Figures = append(b.Figures, figures[i].mean(level))
		if j := figures[i].judge(); j.times > 0 && j.times < j.of {
			divided = append(divided, fmt.Sprintf("%s %s %s in %d of %d", figures[i].class, strings.ToUpper(figures[i].period),
				figures[i].figure, j.times, j.of))
		}
	}
	network := collect(samples, func(s *sample) []reading { return s.network })
	for i := range network {
		if network[i].tells() {
			b.Network = append(b.Network, network[i].mean(level))
		}
	}
	b.Cautions = cautionsOf(samples)
	if len(divided) > 0 {
		b.Cautions = append(b.Cautions, "Limits met in some seeds only: "+shortList(divided)+".")
	}
	b.Cautions = append(b.Cautions, lossless(b.Figures)...)
	if len(samples) == 1 {
		b.Cautions = append(b.Cautions, "One seed says nothing about chance: there is no interval.")
	}
	if seeds := tooShort(samples); seeds != "" {
		b.Cautions = append(b.Cautions, "No intervals: the warm-up took half of what there was with the seeds "+seeds+".")
		for _, means := range [][]result.Mean{b.Figures, b.Network} {
			for i := range means {
				means[i].Interval, means[i].PooledInterval = nil, nil
			}
		}
	}
	b.Cautions = append(b.Cautions, warmUpsDiffer(samples)...)
	if pricesDiffer(samples) {
		b.Cautions = append(b.Cautions, fmt.Sprintf("The price differs from seed to seed; it is that of seed %d.", first.seed))
	}
	return b
}

// mean is the mean of a series over the samples in which it can be said.
func (s *series) mean(level float64) result.Mean {
	v := s.values()
	m := result.Mean{Class: s.class, Subject: s.subject, Period: s.period, Figure: s.figure, Unit: s.unit,
		Limit: s.limit, Seeds: int64(len(v)), WorstPair: s.worstPair(), Met: s.judge().met}
	if len(v) == 0 {
		return m
	}
	i := measure.MeanInterval(v, level)
	m.Mean = &i.Mean
	m.Interval = intervalOf(i)
	s.percentile(&m, level)
	return m
}

// tells reports whether a figure of the network is worth a line: those that
// are zero in every sample are not, save the utilisation.
func (s *series) tells() bool {
	return s.figure == "utilisation" || slices.ContainsFunc(s.values(), func(v float64) bool { return v != 0 })
}

// intervalOf is the interval of a result, or nil below two values.
func intervalOf(i measure.Interval) *result.Interval {
	if i.N < 2 {
		return nil
	}
	half, low, high := i.Half, i.Low(), i.High()
	return &result.Interval{Half: &half, Low: &low, High: &high}
}

// addAudit adds one account to a sum. Its failures are kept, with who had
// them.
func addAudit(sum *result.Audit, a result.Audit, who string) {
	sum.OfferedPackets += a.OfferedPackets
	sum.CopyPackets += a.CopyPackets
	sum.DeliveredPackets += a.DeliveredPackets
	sum.DuplicatePackets += a.DuplicatePackets
	sum.DiscardedCopiesPackets += a.DiscardedCopiesPackets
	for _, l := range a.LostPackets {
		sum.LostPackets.Add(l.Cause, l.Packets)
	}
	sum.InsidePackets += a.InsidePackets
	sum.SlotsOwned += a.SlotsOwned
	sum.SlotsUsed += a.SlotsUsed
	sum.LittlePorts += a.LittlePorts
	sum.PacketHops += a.PacketHops
	for _, f := range a.Failures {
		sum.Failures = append(sum.Failures, who+f)
	}
}

// auditsOK reports whether every account was in order.
func auditsOK(samples []*sample) bool {
	return !slices.ContainsFunc(samples, func(s *sample) bool { return !s.audit.OK })
}

// cautionsOf lists the cautions of all samples, each once, in order of first
// mention.
func cautionsOf(samples []*sample) []string {
	var out []string
	for _, s := range samples {
		for _, c := range s.cautions {
			if !slices.Contains(out, c) {
				out = append(out, c)
			}
		}
	}
	return out
}

// lossless says what a loss of zero in every seed bounds: not the ratio, for
// losses come in clumps, but how often a run of this length has any.
func lossless(figures []result.Mean) []string {
	var none []string
	seeds := int64(0)
	for _, m := range figures {
		if m.Figure == result.FigLoss && m.Mean != nil && *m.Mean == 0 {
			none = append(none, m.Class+" "+strings.ToUpper(m.Period))
			if seeds == 0 || m.Seeds < seeds {
				seeds = m.Seeds
			}
		}
	}
	if none == nil {
		return nil
	}
	return []string{fmt.Sprintf("Nothing was lost of %s: %s. That bounds episodes of loss, not their size.", shortList(none), noneSeen(seeds))}
}

// warmUpsDiffer says so when the warm-up is not the same in all samples.
func warmUpsDiffer(samples []*sample) []string {
	least, most := samples[0].head.WarmUpS, samples[0].head.WarmUpS
	for _, s := range samples {
		least, most = min(least, s.head.WarmUpS), max(most, s.head.WarmUpS)
	}
	if least == most {
		return nil
	}
	return []string{fmt.Sprintf("The warm-up was found for each seed by itself and lasted from %s to %s.", quantity(least, result.UnitSeconds), quantity(most, result.UnitSeconds))}
}

// pricesDiffer reports whether what is held at the end differs between
// samples.
func pricesDiffer(samples []*sample) bool {
	a := &samples[0].price
	return slices.ContainsFunc(samples, func(s *sample) bool {
		return s.price.Slots != a.Slots || s.price.SlotKm != a.SlotKm || s.price.Ports != a.Ports
	})
}

// shortList joins the first few of a list and says how many others there are.
func shortList(list []string) string {
	const most = 8
	if len(list) <= most {
		return strings.Join(list, ", ")
	}
	return fmt.Sprintf("%s and %d others", strings.Join(list[:most], ", "), len(list)-most)
}
