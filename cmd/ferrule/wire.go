package main

import (
	"context"
	"slices"

	"ferrule/scenarios"
	"ferrule/scenarios/library"
	"ferrule/scenarios/result"
	"ferrule/scenarios/study"
)

// wired is the studio of the program: the packages below, joined.
type wired struct{}

// Load implements studio.
func (wired) Load(in input) (scenario, error) {
	sc, err := scenarios.Load(in.name, in.data, in.files, in.sets)
	if err != nil {
		return nil, err
	}
	if sc, err = withCuts(sc, in.cuts); err != nil {
		return nil, err
	}
	return loaded{sc}, nil
}

// Library implements studio.
func (wired) Library() []entry {
	var es []entry
	for _, e := range library.Names() {
		es = append(es, entry{e.Name, e.About})
	}
	return es
}

// Open implements studio.
func (wired) Open(name string) (input, error) {
	if name == "" {
		name = library.Demo
	}
	data, files, err := library.Open(name)
	return input{name: name, data: data, files: files}, err
}

// loaded is a scenario that study can take.
type loaded struct{ sc *scenarios.Scenario }

func (l loaded) Seed() uint64       { return l.sc.Run.Seed }
func (l loaded) Hash() string       { return l.sc.Hash }
func (l loaded) Matrices() []string { return slices.Concat(l.sc.Matrices, l.sc.Captures) }

func (l loaded) Plans() []string {
	names := make([]string, len(l.sc.Plans))
	for i := range l.sc.Plans {
		names[i] = l.sc.Plans[i].Name
	}
	return names
}

func (o options) study() study.Options {
	return study.Options{Plan: o.plan, Seed: o.seed, Cores: o.cores, Log: o.log, Progress: o.progress, Margin: o.margin, Store: o.store, Runs: o.runs}
}

func (l loaded) Run(ctx context.Context, opt options) (*result.Run, error) {
	return study.Run(ctx, l.sc, opt.study())
}

func (l loaded) Batch(ctx context.Context, opt options, seeds []uint64) (*result.Batch, error) {
	return study.Batch(ctx, l.sc, opt.study(), seeds)
}

func (l loaded) BatchUntil(ctx context.Context, opt options, p precision) (*result.Batch, error) {
	return study.BatchUntil(ctx, l.sc, opt.study(), study.Precision{Figure: p.figure, Relative: p.relative, Periods: p.periods, First: p.first, AtMost: p.atMost})
}

func (l loaded) Compare(ctx context.Context, opt options, base string, plans []string, seeds []uint64) (*result.Comparison, error) {
	return study.Compare(ctx, l.sc, opt.study(), base, plans, seeds)
}

func (l loaded) Failures(ctx context.Context, opt options, w study.Sweep) (*result.Failures, error) {
	return study.Failures(ctx, l.sc, opt.study(), w)
}

func (l loaded) Check(ctx context.Context, opt options) (*result.Check, error) {
	var ms []scenarios.Measured
	if opt.measured.name != "" {
		var err error
		if ms, err = scenarios.ParseMeasured(opt.measured.name, opt.measured.data, l.sc); err != nil {
			return nil, err
		}
	}
	r, err := study.Check(ctx, l.sc, opt.study())
	if err == nil && ms != nil {
		r.Measured, err = study.Calibrate(l.sc, opt.study(), ms)
	}
	return r, err
}
