package main

import (
	"context"
	"errors"
	"io/fs"
	"math"
	"strings"
	"testing/fstest"

	"ferrule/scenarios/result"
	"ferrule/scenarios/study"
)

// fakeStudio stands for the packages below. The first word of a scenario's
// text says what its studies do; nothing is computed.
type fakeStudio struct{}

var fakeLibrary = fstest.MapFS{
	"demo":       {Data: []byte("sound demo\n")},
	"second":     {Data: []byte("sound second\n")},
	"demand.csv": {Data: []byte("from,to,class,rate\n")},
}

func (fakeStudio) Library() []entry { return []entry{{"demo", "What it shows."}, {"second", "More."}} }

func (fakeStudio) Open(name string) (input, error) {
	if name == "" {
		name = "demo"
	}
	data, err := fs.ReadFile(fakeLibrary, name)
	return input{name: name, data: data, files: fakeLibrary}, err
}

func (fakeStudio) Coverage(context.Context, options, int, float64) ([]covered, error) {
	return []covered{{"one queue", "mean", "4 ms", 380, 400, 0.92, 0.98, ""}, {"one queue", "p99", "9 ms", 300, 400, 0.92, 0.98, "a note"}, {cell: "none"}}, nil
}

func (fakeStudio) Load(in input) (scenario, error) {
	kind, _, _ := strings.Cut(strings.TrimSpace(string(in.data)), " ")
	if kind == "unsound" {
		return nil, errors.New(in.name + `:3:9: sites[1].name: "x y" is not a name; use letters`)
	}
	if len(in.cuts) > 0 && in.cuts[0] == "nowhere" {
		return nil, errors.New(`--cut nowhere: has no time; write NAME@6s`)
	}
	return &fakeScenario{kind: kind, in: in}, nil
}

type fakeScenario struct {
	kind string
	in   input
}

func (s *fakeScenario) Seed() uint64       { return 7 }
func (s *fakeScenario) Hash() string       { return "hash of " + s.kind }
func (s *fakeScenario) Matrices() []string { return []string{"demand.csv"} }

func (s *fakeScenario) Plans() []string {
	if s.kind == "planless" {
		return []string{"as-is"}
	}
	return []string{"as-is", "express", "express-live"}
}

// outcome waits, fails, or returns the head and the audit of a study.
func (s *fakeScenario) outcome(ctx context.Context) (result.Head, result.Audit, error) {
	h := result.Head{Scenario: s.in.name + " " + strings.Join(append(s.in.sets, s.in.cuts...), " "), LengthS: 10}
	a := result.Audit{OfferedPackets: 12345678, OK: true}
	switch s.kind {
	case "waits":
		<-ctx.Done()
		h.Partial = true
		return h, a, ctx.Err()
	case "fails":
		return h, a, errors.New("calendar ran dry")
	case "unaccounted":
		a.OK, a.Failures = false, []string{"offered 3, accounted for 2"}
	case "nan":
		h.WarmUpS = math.NaN()
	}
	return h, a, nil
}

func (s *fakeScenario) Run(ctx context.Context, opt options) (*result.Run, error) {
	if s.kind == "fails" || s.kind == "nothing" {
		<-ctxOr(ctx, s.kind == "fails")
		return nil, errors.Join(errors.New("calendar ran dry"), ctx.Err())
	}
	if s.kind == "empty" {
		return nil, nil
	}
	opt.progress(1, 2)
	opt.log.Info("running")
	h, a, err := s.outcome(ctx)
	return &result.Run{Head: h, Plan: opt.plan, Seed: opt.seed, Audit: a}, err
}

// ctxOr is a channel that is closed now, or when ctx ends.
func ctxOr(ctx context.Context, now bool) <-chan struct{} {
	if !now {
		return ctx.Done()
	}
	c := make(chan struct{})
	close(c)
	return c
}

func (s *fakeScenario) Batch(ctx context.Context, opt options, seeds []uint64) (*result.Batch, error) {
	h, a, err := s.outcome(ctx)
	return &result.Batch{Head: h, Plan: opt.plan, Seeds: seeds, Audit: a, Gates: fakeGates(string(s.in.data), opt.plan)}, err
}

func (s *fakeScenario) BatchUntil(ctx context.Context, opt options, p precision) (*result.Batch, error) {
	b, err := s.Batch(ctx, opt, seedsFrom(opt.seed, p.first))
	b.Stopping = &result.Stopping{Figure: p.figure, Precision: p.relative, AtMost: int64(p.atMost), Worst: strings.Join(p.periods, " ")}
	return b, err
}

func (s *fakeScenario) Compare(ctx context.Context, opt options, base string, plans []string, seeds []uint64) (*result.Comparison, error) {
	h, a, err := s.outcome(ctx)
	c := &result.Comparison{Head: h, Base: base, Seeds: seeds, Audit: a, Gates: fakeGates(string(s.in.data), append([]string{base}, plans...)...)}
	for _, p := range plans {
		c.Plans = append(c.Plans, result.Compared{Plan: p})
	}
	if opt.runs {
		c.Runs = []*result.Run{{Head: h, Plan: base, Seed: seeds[0]}}
	}
	return c, err
}

func (s *fakeScenario) Failures(ctx context.Context, opt options, w study.Sweep) (*result.Failures, error) {
	h, a, err := s.outcome(ctx)
	r := &result.Failures{Head: h, Seeds: w.Seeds, Scale: w.Scale, Audit: a}
	for _, p := range w.Plans {
		r.Plans = append(r.Plans, result.FailuresPlan{Plan: p})
	}
	return r, err
}

func (s *fakeScenario) Grow(ctx context.Context, opt options, base string, plans []string, seeds []uint64, factors []float64) (*result.Comparison, error) {
	c, err := s.Compare(ctx, opt, base, plans, seeds)
	c.Growth = []result.Growth{{Plan: base}}
	for _, f := range factors {
		c.Growth[0].Steps = append(c.Growth[0].Steps, result.GrowthStep{Factor: f, Standing: result.Open})
	}
	return c, err
}

func (s *fakeScenario) Size(ctx context.Context, opt options, q sizeQuestion) (*result.Sizing, error) {
	h, a, err := s.outcome(ctx)
	return &result.Sizing{Head: h, Plan: opt.plan, Circuit: q.circuit, Low: int64(q.low), High: int64(q.high), Least: new(int64(q.atMost)), Audit: a,
		Trail: []result.SizeStep{{Slots: 2, Seeds: 10, Standing: result.Met, Text: strings.Join(q.in.sets, " ")}}}, err
}

func (s *fakeScenario) Check(ctx context.Context, opt options) (*result.Check, error) {
	h, _, err := s.outcome(ctx)
	return &result.Check{Head: h, Plan: opt.plan}, err
}
