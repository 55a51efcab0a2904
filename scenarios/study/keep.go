package study

import (
	"context"
	"slices"

	"ferrule/scenarios/result"
)

// keeping returns run, or when o asks for runs one that also keeps those of
// the plans with the given seed. kept, called when all runs are over, lists
// them in the order of plans; it is nil unless all of them finished.
func keeping(run replicate, o Options, plans []string, seed uint64) (with replicate, kept func() []*result.Run) {
	if !o.Runs {
		return run, func() []*result.Run { return nil }
	}
	runs := make([]*result.Run, len(plans))
	with = func(ctx context.Context, j job, progress func(done, total float64)) (*result.Run, error) {
		r, err := run(ctx, j, progress)
		if i := slices.Index(plans, j.plan); i >= 0 && j.seed == seed && err == nil && !r.Partial {
			runs[i] = r // each by one goroutine, and read when all have ended
		}
		return r, err
	}
	return with, func() []*result.Run {
		if slices.Contains(runs, nil) {
			return nil
		}
		for _, r := range runs {
			r.Head = result.HeadOf(r)
		}
		return runs
	}
}
