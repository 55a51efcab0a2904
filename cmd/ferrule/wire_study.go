package main

import (
	"context"
	"fmt"
	"slices"

	"ferrule/scenarios"
	"ferrule/scenarios/result"
	"ferrule/scenarios/study"
)

// Coverage implements studio.
func (wired) Coverage(ctx context.Context, opt options, experiments int, seconds float64) ([]covered, error) {
	lines, err := study.Coverage(ctx, opt.study(), experiments, seconds)
	var out []covered
	for _, l := range lines {
		c := covered{cell: l.Cell, what: l.What, truth: "-", hits: l.Hits, experiments: l.Experiments, low: l.Low, high: l.High, note: l.Note}
		switch {
		case l.Unit == result.UnitSeconds:
			c.truth = fmt.Sprintf("%.4g ms", 1e3*l.Truth)
		case l.Unit == result.UnitRatio:
			c.truth = fmt.Sprintf("%.4g %%", 100*l.Truth)
		}
		out = append(out, c)
	}
	return out, err
}

func (l loaded) Grow(ctx context.Context, opt options, base string, plans []string, seeds []uint64, factors []float64) (*result.Comparison, error) {
	return study.Grow(ctx, l.sc, opt.study(), base, plans, seeds, factors)
}

// Size loads the scenario anew for every size, so that all that follows from
// the number of slots is read and checked as if it stood in the file.
func (l loaded) Size(ctx context.Context, opt options, q sizeQuestion) (*result.Sizing, error) {
	with := func(slots int) (*scenarios.Scenario, error) {
		in := q.in
		in.sets = append(slices.Clone(in.sets), fmt.Sprintf("circuits.%s.slots=%d", q.circuit, slots))
		sc, err := wired{}.Load(in)
		if err != nil {
			return nil, err
		}
		return sc.(loaded).sc, nil
	}
	return study.Size(ctx, opt.study(), study.SizeQuestion{Circuit: q.circuit, Low: q.low, High: q.high, AtMost: q.atMost, With: with})
}
