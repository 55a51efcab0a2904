package study

import (
	"context"
	"fmt"
	"math"
	"slices"

	"ferrule/nodes"
	"ferrule/scenarios"
	"ferrule/scenarios/result"
)

// Grow is [Compare] with all loads of aggregates times each of the factors,
// which rise. The comparison is that of the first factor; beside it stands, of
// the base and each plan, how far its objectives are kept in settled periods.
// A number of flows is rounded; requests for circuits do not grow.
func Grow(ctx context.Context, sc *scenarios.Scenario, o Options, base string, plans []string, seeds []uint64, factors []float64) (*result.Comparison, error) {
	if err := checkFactors(factors); err != nil {
		return nil, err
	}
	var first *result.Comparison
	var growth []result.Growth
	for k, factor := range factors {
		of := o
		of.Runs = o.Runs && k == 0
		var settledGates []*result.Gate
		of.settled = func(g []*result.Gate) { settledGates = g }
		c, err := Compare(ctx, grown(sc, factor), of, base, plans, seeds)
		if c == nil && first == nil {
			return nil, err
		}
		if c != nil && err == nil {
			growth = addFactor(growth, factor, settledGates)
			if first != nil {
				first.Audit = joinAudits(first.Audit, c.Audit, factor)
			}
		}
		if first == nil {
			first = c
		}
		if err != nil {
			first.Partial, first.Growth = true, summed(growth)
			if ctx.Err() == nil {
				return nil, fmt.Errorf("at %g %% of the load: %w", 100*factor, err)
			}
			return first, err
		}
	}
	first.Growth = summed(growth)
	return first, nil
}

func checkFactors(factors []float64) error {
	for i, f := range factors {
		if !(f > 0 && f <= 100) {
			return fmt.Errorf("growth by %v is out of range; a factor lies above 0 and up to 100", f)
		}
		if i > 0 && f <= factors[i-1] {
			return fmt.Errorf("factors of growth must rise: %v does not follow %v", f, factors[i-1])
		}
	}
	if len(factors) == 0 {
		return fmt.Errorf("no factor of growth is given")
	}
	return nil
}

// grown is sc with all loads times a factor.
func grown(sc *scenarios.Scenario, factor float64) *scenarios.Scenario {
	if factor == 1 {
		return sc
	}
	own := *sc
	own.Aggregates = slices.Clone(sc.Aggregates)
	for i := range own.Aggregates {
		a := &own.Aggregates[i]
		a.Load = nodes.Rate(math.Round(float64(a.Load) * factor))
		if a.Flows > 0 {
			a.Flows = max(1, int(math.Round(float64(a.Flows)*factor)))
		}
	}
	own.Hash = scenarios.Hash([]byte(sc.Hash), []string{fmt.Sprintf("growth %v", factor)}, nil)
	return &own
}

// joinAudits adds the account of another factor.
func joinAudits(sum, a result.Audit, factor float64) result.Audit {
	ok := sum.OK && a.OK
	addAudit(&sum, a, fmt.Sprintf("growth %v: ", factor))
	sum.OK = ok
	return sum
}

// addFactor adds what the gates of one factor say.
func addFactor(growth []result.Growth, factor float64, gates []*result.Gate) []result.Growth {
	for _, g := range gates {
		i := slices.IndexFunc(growth, func(x result.Growth) bool { return x.Plan == g.Plan })
		if i < 0 {
			i = len(growth)
			growth = append(growth, result.Growth{Plan: g.Plan})
		}
		step := result.GrowthStep{Factor: factor, Standing: g.Standing}
		if h := decisive(g); h != nil {
			step.First = fmt.Sprintf("%s %s %s: %s", h.Class, h.Period, h.Figure, h.Text)
		}
		growth[i].Steps = append(growth[i].Steps, step)
	}
	return growth
}

// decisive is the objective for which a gate is not met: the first that is
// missed or, without one, the first that is undecided; nil when all are met.
func decisive(g *result.Gate) *result.Hold {
	for _, s := range []result.Standing{result.Missed, result.Open} {
		for i := range g.Holds {
			if g.Holds[i].Standing == s {
				return &g.Holds[i]
			}
		}
	}
	return nil
}

// summed finds where each plan breaks.
func summed(growth []result.Growth) []result.Growth {
	for i := range growth {
		g := &growth[i]
		holding := true
		for k := range g.Steps {
			s := &g.Steps[k]
			if holding = holding && s.Standing == result.Met; holding {
				g.HoldsTo = &s.Factor
			}
			if s.Standing == result.Missed && g.Breaks == nil {
				g.Breaks = &s.Factor
			}
		}
	}
	return growth
}
