package study

import (
	"context"
	"errors"
	"fmt"
	"sync"
	"sync/atomic"

	"ferrule/scenarios"
	"ferrule/scenarios/result"
)

// replicate makes one run of a plan with a seed. It is called from several
// goroutines at once. Tests put hand-made runs in its place.
type replicate func(ctx context.Context, j job, progress func(done, total float64)) (*result.Run, error)

// A job is one run of a study.
type job struct {
	plan string
	seed uint64
}

// replicator is the replicate that runs sc, each run on one core.
func replicator(sc *scenarios.Scenario, o Options) replicate {
	warm := &warmUps{}
	return func(ctx context.Context, j job, progress func(done, total float64)) (*result.Run, error) {
		own := *sc // a seed of 0 is no less a seed
		own.Run.Seed = j.seed
		return runFrom(ctx, &own, Options{Plan: j.plan, Seed: j.seed, Cores: 1, Log: o.Log, Progress: progress}, warm)
	}
}

// replicatorOf is the replicator of sc that takes from the store of o what it
// holds, and saves there.
func replicatorOf(sc *scenarios.Scenario, o Options) replicate {
	return resuming(replicator(sc, o), o.Store, sc.Hash)
}

// sampleAll carries out jobs on so many cores and keeps of each run what a
// study needs, by index; nil for a run that did not finish. The error is that
// of the first job that failed, in the order of jobs, or that of ctx; all
// runs stop at the first failure.
func sampleAll(ctx context.Context, jobs []job, o Options, run replicate) ([]*sample, error) {
	inner, stop := context.WithCancel(ctx)
	defer stop()
	samples := make([]*sample, len(jobs))
	errs := make([]error, len(jobs))
	bar := newTracker(len(jobs), o.Progress)
	var next atomic.Int64
	var wg sync.WaitGroup
	for range min(o.cores(), len(jobs)) {
		wg.Go(func() {
			for inner.Err() == nil {
				i := int(next.Add(1)) - 1
				if i >= len(jobs) {
					return
				}
				samples[i], errs[i] = sampleOne(inner, jobs[i], run, bar.of(i))
				if errs[i] != nil {
					stop()
				}
			}
		})
	}
	wg.Wait()
	for i, err := range errs {
		if err != nil && !(errors.Is(err, context.Canceled) || errors.Is(err, context.DeadlineExceeded)) {
			return samples, fmt.Errorf("plan %s, seed %d: %w", jobs[i].plan, jobs[i].seed, err)
		}
	}
	return samples, ctx.Err()
}

// sampleOne makes one run; a run that was interrupted counts for nothing.
func sampleOne(ctx context.Context, j job, run replicate, progress func(done, total float64)) (*sample, error) {
	r, err := run(ctx, j, progress)
	if err != nil {
		return nil, err
	}
	if r.Partial {
		return nil, context.Canceled
	}
	progress(1, 1)
	return sampleOf(r), nil
}

// A tracker adds up the progress of runs that go on side by side and calls
// report for one of them at a time.
type tracker struct {
	mu     sync.Mutex
	report func(done, total float64)
	share  []float64
	sum    float64
}

func newTracker(runs int, report func(done, total float64)) *tracker {
	return &tracker{report: report, share: make([]float64, runs)}
}

// of is the progress of run i.
func (t *tracker) of(i int) func(done, total float64) {
	return func(done, total float64) {
		if t.report == nil || !(total > 0) {
			return
		}
		t.mu.Lock()
		defer t.mu.Unlock()
		share := min(max(done/total, t.share[i]), 1)
		t.sum += share - t.share[i]
		t.share[i] = share
		t.report(t.sum, float64(len(t.share)))
	}
}
