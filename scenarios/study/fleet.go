package study

import (
	"context"
	"errors"
	"fmt"
	"sync"

	"ferrule/des"
	"ferrule/scenarios"
	"ferrule/scenarios/build"
)

// A fleet carries out a sweep: for each plan and seed one prefix, and from a
// copy of it one trial for each failure.
type fleet struct {
	sc     *scenarios.Scenario
	w      *Sweep
	list   []breakage
	at     des.Time // of the failures
	groups []group  // all plans of a seed before the next seed
	bar    *tracker
	store  Store // nil: none

	mu      sync.Mutex
	changed *sync.Cond
	making  int // prefixes under way
	err     error
}

// A group is the trials of one plan and one seed.
type group struct {
	plan, seed int // in the sweep
	model      *build.Model
	begun      bool
	next       int      // trial to begin
	open       int      // trials not ended
	trials     []*trial // by failure
	share      int      // in the bar
}

func newFleet(sc *scenarios.Scenario, w *Sweep, list []breakage, at des.Time, o Options) *fleet {
	f := &fleet{sc: sc, w: w, list: list, at: at}
	f.changed = sync.NewCond(&f.mu)
	for s := range w.Seeds {
		for p := range w.Plans {
			f.groups = append(f.groups, group{plan: p, seed: s, open: len(list), trials: make([]*trial, len(list)), share: len(f.groups)})
		}
	}
	f.bar = newTracker(len(f.groups), o.Progress)
	f.store = o.Store
	return f
}

// run carries everything out on so many cores. The error is the first that a
// worker met, or that of ctx.
func (f *fleet) run(ctx context.Context, cores int) error {
	if err := f.recall(); err != nil {
		return err
	}
	inner, stop := context.WithCancel(ctx)
	defer stop()
	var wg sync.WaitGroup
	for range min(cores, len(f.groups)*len(f.list)) {
		wg.Go(func() {
			if f.work(inner) != nil {
				stop()
			}
		})
	}
	wg.Wait()
	if f.err != nil {
		return f.err
	}
	return ctx.Err()
}

// work begins prefixes and trials until there are none left, or one has failed.
func (f *fleet) work(ctx context.Context) error {
	f.mu.Lock()
	defer f.mu.Unlock()
	for f.err == nil && ctx.Err() == nil {
		switch g, i := f.pick(); {
		case g == nil && f.making == 0:
			return nil
		case g == nil:
			f.changed.Wait()
		case i < 0:
			f.prefix(ctx, g)
		default:
			f.trial(ctx, g, i)
		}
	}
	f.changed.Broadcast()
	return f.err
}

// pick is the next trial of a prefix that stands, or -1 for a prefix to make.
func (f *fleet) pick() (*group, int) {
	for i := range f.groups {
		g := &f.groups[i]
		for g.model != nil && g.next < len(f.list) {
			g.next++
			if g.trials[g.next-1] == nil {
				return g, g.next - 1
			}
		}
	}
	for i := range f.groups {
		if g := &f.groups[i]; !g.begun && g.open > 0 {
			g.begun = true
			return g, -1
		}
	}
	return nil, 0
}

// prefix runs one plan with one seed up to the failure. It holds the lock but
// while it runs.
func (f *fleet) prefix(ctx context.Context, g *group) {
	f.making++
	f.mu.Unlock()
	m, err := f.begin(ctx, g)
	f.mu.Lock()
	f.making--
	if err == nil {
		g.model = m
	}
	f.fail(g, err)
	f.changed.Broadcast()
}

func (f *fleet) begin(ctx context.Context, g *group) (*build.Model, error) {
	plan, err := f.sc.Plan(f.w.Plans[g.plan])
	if err != nil {
		return nil, err
	}
	own := *f.sc
	own.Run.Seed = f.w.Seeds[g.seed]
	m, err := build.New(&own, plan, own.Run.Seed)
	if err != nil {
		return nil, err
	}
	m.Kernel(des.Serial{}).Advance(f.at, func() bool { return ctx.Err() != nil })
	return m, errors.Join(ctx.Err(), m.Err())
}

// trial makes trial i of g. It holds the lock but while it runs.
func (f *fleet) trial(ctx context.Context, g *group, i int) {
	m := g.model
	f.mu.Unlock()
	t, err := trialOf(ctx, m.Clone(), &f.list[i], f.at)
	if err == nil {
		err = f.keep(g, i, t)
	}
	f.mu.Lock()
	if err == nil {
		g.trials[i] = t
	}
	if g.open--; g.open == 0 {
		g.model = nil
	}
	f.fail(g, err)
	if err == nil {
		f.bar.of(g.share)(float64(len(f.list)-g.open), float64(len(f.list)))
	}
}

// fail keeps the first error that is not an interruption.
func (f *fleet) fail(g *group, err error) {
	if err != nil && f.err == nil && !errors.Is(err, context.Canceled) && !errors.Is(err, context.DeadlineExceeded) {
		f.err = fmt.Errorf("plan %s, seed %d: %w", f.w.Plans[g.plan], f.w.Seeds[g.seed], err)
	}
}
