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

// Precision says when a batch has enough seeds.
type Precision struct {
	Figure   string   // such as result.FigDelayP99, of every class that has it
	Relative float64  // half-width over mean to be reached, in (0, 0.5]
	Periods  []string // names; nil: every period
	First    int      // seeds before the first look, at least 10; 0: 10
	AtMost   int      // seeds in all, at least First; 0: 200
}

// leastFirst is how many replications a sequential procedure begins with, so
// that its first estimate of the variance can be trusted (A. M. Law, Simulation
// Modeling and Analysis, ch. 9).
const (
	leastFirst    = 10
	defaultAtMost = 200
)

// with fills defaults in and checks.
func (p Precision) with() (Precision, error) {
	if p.First == 0 {
		p.First = leastFirst
	}
	if p.AtMost == 0 {
		p.AtMost = max(defaultAtMost, p.First)
	}
	switch {
	case !(p.Relative > 0 && p.Relative <= 0.5):
		return p, fmt.Errorf("a relative precision of %v is out of range; it lies above 0 and up to 0.5", p.Relative)
	case p.First < leastFirst:
		return p, fmt.Errorf("%d seeds are too few to begin with; take %d at least", p.First, leastFirst)
	case p.AtMost < p.First:
		return p, fmt.Errorf("%d seeds at most are fewer than the %d to begin with", p.AtMost, p.First)
	}
	return p, nil
}

// BatchUntil is Batch with as many seeds as it takes, from that of o on, until
// in every class and period asked for the half-width of the interval of the
// figure is at most γ/(1+γ) of the mean, so that the relative error of the mean
// is at most γ with the confidence of the interval. It looks after p.First
// seeds and then after as many as the variance so far asks for, at least a
// fifth more and at most twice as many: few looks, none before ten seeds, are
// what keeps the coverage. It gives up at p.AtMost and says so. A figure that
// no class has is an error.
//
// Source: the sequential procedure of A. M. Law and W. D. Kelton; Y. S. Chow
// and H. Robbins, Ann. Math. Statist. 36, 1965.
func BatchUntil(ctx context.Context, sc *scenarios.Scenario, o Options, p Precision) (*result.Batch, error) {
	if _, err := sc.Plan(o.plan()); err != nil {
		return nil, err
	}
	p, err := p.with()
	if err != nil {
		return nil, err
	}
	return batchUntil(ctx, o, p, o.seed(sc), replicatorOf(sc, o))
}

// batchUntil is BatchUntil with the runs of run.
func batchUntil(ctx context.Context, o Options, p Precision, first uint64, run replicate) (*result.Batch, error) {
	run, kept := keeping(run, o, []string{o.plan()}, first)
	stop := &result.Stopping{Figure: p.Figure, Precision: p.Relative, AtMost: int64(p.AtMost)}
	var samples []*sample
	for n := p.First; ; {
		var jobs []job
		for _, seed := range Seeds(first, n)[len(samples):] {
			jobs = append(jobs, job{o.plan(), seed})
		}
		more, err := sampleAll(ctx, jobs, o, run)
		if err != nil && ctx.Err() == nil {
			return nil, err
		}
		samples = append(samples, slices.DeleteFunc(more, func(s *sample) bool { return s == nil })...)
		if err != nil {
			if len(samples) == 0 {
				return nil, err
			}
			b := foldBatch(o.plan(), samples, confidence)
			b.Partial, b.Runs, b.Stopping = true, kept(), stop
			return b, err
		}
		stop.Looks = append(stop.Looks, int64(n))
		next, err := p.look(samples, stop)
		if err != nil {
			return nil, err
		}
		if stop.Reached || n == p.AtMost {
			break
		}
		n = p.next(n, next)
	}
	b := foldBatch(o.plan(), samples, confidence)
	b.Runs, b.Stopping = kept(), stop
	if !stop.Reached {
		b.Cautions = append(b.Cautions, fmt.Sprintf("The precision asked for was not reached with %d seeds, the most allowed: %s is at %.2g %%.",
			p.AtMost, stop.Worst, 100*stop.WorstHalf))
	}
	return b, nil
}

// next is the number of seeds at which to look after n, when the variance asks
// for asked in all.
func (p Precision) next(n, asked int) int {
	return min(max(asked, n+max(1, n/5)), 2*n, p.AtMost)
}

// look notes in stop how precise the figure is, and returns how many seeds in
// all the variance so far asks for.
func (p Precision) look(samples []*sample, stop *result.Stopping) (next int, err error) {
	stop.Reached, stop.Worst, stop.WorstHalf = true, "", 0
	target := p.Relative / (1 + p.Relative)
	seen := false
	for _, s := range collect(samples, func(s *sample) []reading { return s.figures }) {
		if s.figure != p.Figure || p.Periods != nil && !slices.Contains(p.Periods, s.period) {
			continue
		}
		v := s.values()
		if len(v) == 0 {
			continue
		}
		seen = true
		relative, n := p.precisionOf(&s, v)
		if stop.Worst == "" || relative > stop.WorstHalf {
			stop.Worst, stop.WorstHalf = s.class+" "+strings.ToUpper(s.period), relative
		}
		if relative > target {
			stop.Reached = false
			next = max(next, n)
		}
	}
	if !seen {
		return 0, fmt.Errorf("no class has the figure %s in the periods asked for", p.Figure)
	}
	return next, nil
}

// unknown stands for a half-width over a mean that cannot be said: a result
// holds no infinity.
const unknown = 1e9

// precisionOf is the half-width over the value of the interval that a batch
// shows of a figure with values v, and how many seeds the variance so far asks
// for. Of a percentile of the delay it is that pooled over the seeds.
func (p Precision) precisionOf(s *series, v []float64) (relative float64, seeds int) {
	target := p.Relative / (1 + p.Relative)
	if _, is := shareOfPercentile[s.figure]; is {
		q, ok := poolOf(s, confidence)
		if !ok || q.perRun*float64(q.runs) < leastInAll {
			return unknown, 2 * len(v)
		}
		relative = (q.high - q.low) / 2 / q.value
		return relative, int(min(math.Ceil(float64(len(v))*relative*relative/(target*target)), float64(p.AtMost)))
	}
	i := measure.MeanInterval(v, confidence)
	relative = i.Relative()
	if math.IsInf(relative, 0) || math.IsNaN(relative) { // a mean of zero, or one value
		relative = unknown
	}
	n, ok := measure.Replications(v, measure.RelativeHalf(i.Mean, p.Relative), confidence)
	if !ok || n > p.AtMost {
		n = p.AtMost
	}
	return relative, n
}
