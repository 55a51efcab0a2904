package study

import (
	"context"
	"fmt"

	"go.uber.org/zap"

	"ferrule/des"
	"ferrule/scenarios"
	"ferrule/scenarios/build"
	"ferrule/scenarios/result"
)

// Run makes one replication of sc. A scenario that does not fit, such as one
// whose circuits find no slots, is an error. When ctx is done the run stops at
// the next window's end: Run then returns what is known, marked partial, and
// ctx's error. When the scenario leaves the warm-up to the run, pilots of all
// plans come first: see warmUp.
func Run(ctx context.Context, sc *scenarios.Scenario, o Options) (*result.Run, error) {
	return runFrom(ctx, sc, o, &warmUps{})
}

// runFrom is Run with the ends of warm-ups found so far.
func runFrom(ctx context.Context, sc *scenarios.Scenario, o Options, warm *warmUps) (*result.Run, error) {
	if !sc.Run.AutoWarmUp {
		return runOnce(ctx, sc, o)
	}
	if _, err := sc.Plan(o.plan()); err != nil {
		return nil, err
	}
	c, err := warm.find(ctx, sc, o.seed(sc))
	if err != nil {
		return nil, err
	}
	own := *sc
	own.Run.WarmUp = c.at
	r, err := runOnce(ctx, &own, o)
	if r != nil {
		r.WarmUpFound, r.WarmUpShort = true, c.short != ""
		if text := c.caution(); text != "" {
			r.Cautions = append(r.Cautions, text)
			for i := range r.Within {
				r.Within[i].Interval, r.Within[i].Refused = nil, "too short for its warm-up"
			}
		}
	}
	return r, err
}

// runOnce makes one replication with the warm-up that the scenario says.
func runOnce(ctx context.Context, sc *scenarios.Scenario, o Options) (*result.Run, error) {
	plan, err := sc.Plan(o.plan())
	if err != nil {
		return nil, err
	}
	m, err := build.New(sc, plan, o.seed(sc))
	if err != nil {
		return nil, err
	}
	log := o.Log
	if log == nil {
		log = zap.NewNop()
	}
	log.Info("run begins", zap.String("scenario", sc.Name), zap.String("plan", plan.Name), zap.Uint64("seed", m.Seed))
	var exec des.Executor = des.Serial{}
	if n := o.cores(); n > 1 && len(m.Plant.Sites) > 1 {
		e := NewExecutor(n)
		defer e.Close()
		exec = e
	}
	at := advance(ctx, m, m.Kernel(exec), o.Progress)
	if err := m.Err(); err != nil {
		return nil, fmt.Errorf("run of %s: %w", sc.Name, err)
	}
	partial := ctx.Err() != nil
	r := gather(m, partial)
	log.Info("run ends", zap.Float64("sim_s", at.Seconds()), zap.Int64("packets", r.Audit.OfferedPackets), zap.Bool("audit", r.Audit.OK), zap.Bool("partial", partial))
	for _, f := range r.Audit.Failures {
		log.Error("audit", zap.String("failure", f))
	}
	if partial {
		return r, fmt.Errorf("run of %s: %w", sc.Name, ctx.Err())
	}
	return r, nil
}

// advance runs the model to its end or until ctx is done, and tells progress
// in simulated seconds.
func advance(ctx context.Context, m *build.Model, k *des.Kernel, progress func(done, total float64)) des.Time {
	total := m.Scenario.Run.Length.Seconds()
	var told des.Time
	return m.Network.Run(k, func() bool {
		if progress != nil && k.Now()-told >= m.Scenario.Run.Length/200 {
			told = k.Now()
			progress(min(told.Seconds(), total), total)
		}
		return ctx.Err() != nil
	})
}
