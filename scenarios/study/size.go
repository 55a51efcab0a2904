package study

import (
	"context"
	"fmt"
	"math"
	"math/bits"
	"slices"
	"strings"

	"ferrule/des/theory"
	"ferrule/nodes"
	"ferrule/scenarios"
	"ferrule/scenarios/result"
)

// SizeQuestion asks for the least size of a circuit.
type SizeQuestion struct {
	Circuit   string
	Low, High int // slots; 0: 1, and four times what carries the load at all
	AtMost    int // seeds for one size; 0: 40

	// With is the scenario with so many slots for the circuit.
	With func(slots int) (*scenarios.Scenario, error)
}

// Looks at one size: after so many seeds, twice and four times as many.
const (
	firstSizeSeeds = 10
	sizeLooks      = 3
)

// Size finds the least slots with which a circuit keeps, under the plan of o,
// the objectives of the classes that it carries, in the settled periods. It
// searches as if more slots were never worse: from the size that theory
// predicts, then by halving. Each size is judged as a gate is, after 10, 20 and
// 40 seeds until it is met or missed; the confidence of a look is raised so
// that, over all the looks that the search can take, the answer as a whole has
// 95 % (Bonferroni). A size that stays undecided counts as not met, and the
// answer then says how far it is from one that is missed.
func Size(ctx context.Context, o Options, q SizeQuestion) (*result.Sizing, error) {
	sc, err := q.With(max(1, q.Low))
	if err != nil {
		return nil, err
	}
	z := &sizer{ctx: ctx, o: o, q: q, tried: map[int]result.Standing{}}
	r, err := z.begin(sc)
	if err != nil {
		return nil, err
	}
	err = z.search(r)
	if err != nil && (ctx.Err() == nil || len(r.Trail) == 0) {
		return nil, err
	}
	r.Partial = err != nil
	return r, err
}

// A sizer is a search under way.
type sizer struct {
	ctx   context.Context
	o     Options
	q     SizeQuestion
	r     *result.Sizing
	tried map[int]result.Standing
	first int
}

// plansWith hints at the plans that have a circuit of that name.
func plansWith(sc *scenarios.Scenario, circuit string) string {
	var have []string
	for i := range sc.Plans {
		if slices.ContainsFunc(sc.Plans[i].Circuits, func(c scenarios.Circuit) bool { return c.Name == circuit }) {
			have = append(have, sc.Plans[i].Name)
		}
	}
	if have == nil {
		return ""
	}
	return "; it is in the plans " + strings.Join(have, ", ")
}

// begin checks the question and predicts.
func (z *sizer) begin(sc *scenarios.Scenario) (*result.Sizing, error) {
	plan, err := sc.Plan(z.o.plan())
	if err != nil {
		return nil, err
	}
	at := slices.IndexFunc(plan.Circuits, func(c scenarios.Circuit) bool { return c.Name == z.q.Circuit })
	switch {
	case at < 0:
		return nil, fmt.Errorf("plan %s has no circuit %q%s", plan.Name, z.q.Circuit, plansWith(sc, z.q.Circuit))
	case plan.Circuits[at].Slots == 0:
		return nil, fmt.Errorf("circuit %s is a whole channel and has no number of slots", z.q.Circuit)
	}
	if z.q.AtMost == 0 {
		z.q.AtMost = firstSizeSeeds << (sizeLooks - 1)
	}
	if z.q.AtMost < firstSizeSeeds {
		return nil, fmt.Errorf("%d seeds for a size are too few; take %d at least", z.q.AtMost, firstSizeSeeds)
	}
	c := &plan.Circuits[at]
	r := &result.Sizing{Plan: plan.Name, Circuit: c.Name, Confidence: confidence}
	perSlot := float64(c.Payload) / float64(c.Slots)
	classes := predict(sc, plan, nodes.CircuitID(at), perSlot, &r.Prediction)
	for _, k := range classes {
		r.Classes = append(r.Classes, sc.Classes[k].Name)
		if len(sc.Classes[k].Objective) > 0 {
			z.first = max(z.first, 1)
		}
	}
	if z.first == 0 {
		return nil, fmt.Errorf("circuit %s carries no class with an objective under plan %s", c.Name, plan.Name)
	}
	low, high := max(1, z.q.Low), z.q.High
	if high == 0 {
		high = max(low, 4*int(*r.Prediction.Full))
	}
	if high < low {
		return nil, fmt.Errorf("%d to %d slots is no range", low, high)
	}
	r.Low, r.High = int64(low), int64(high)
	z.first = low
	if t := r.Prediction.ByTheory; t != nil {
		z.first = min(max(low, int(*t)), high)
	}
	sizes := bits.Len(uint(high-low)) + 2
	r.StepLevel = 1 - (1-confidence)/float64(sizes*sizeLooks)
	z.r = r
	return r, nil
}

// predict fills in what can be said before anything runs, and lists the
// classes that a circuit carries when a run begins: those moved onto it or,
// for a routed circuit, all.
func predict(sc *scenarios.Scenario, plan *scenarios.Plan, id nodes.CircuitID, perSlot float64, p *result.Prediction) []nodes.ClassID {
	var classes []nodes.ClassID
	var bps, pps [2]float64
	routed := plan.Circuits[id].Carries == nodes.CarriesRouted
	for _, s := range streamsOf(sc, plan) {
		if !routed && !slices.Contains(s.chain, id) {
			continue
		}
		if !slices.Contains(classes, s.class) {
			classes = append(classes, s.class)
		}
		if !routed {
			_, d := nodes.AggOf(s.way)
			bps[d] += s.bps
			pps[d] += s.pps
		}
	}
	slices.Sort(classes)
	d := 0
	if bps[1] > bps[0] {
		d = 1
	}
	p.LoadBps = bps[d]
	full := max(1, int(math.Ceil(bps[d]/perSlot)))
	p.Full = new(int64(full))
	if pps[d] == 0 {
		return classes
	}
	p.PacketB = bps[d] / 8 / pps[d]
	tightest(sc, classes, p)
	for s := full; p.TightestS != nil && s <= full+1000; s++ {
		q := theory.MM1{Lambda: pps[d], Mu: float64(s) * perSlot / 8 / p.PacketB}
		if q.Load() < 1 && q.WaitQuantile(p.Percentile) <= *p.TightestS {
			p.ByTheory = new(int64(s))
			break
		}
	}
	return classes
}

// tightest finds the least limit on the variation of delay.
func tightest(sc *scenarios.Scenario, classes []nodes.ClassID, p *result.Prediction) {
	share := map[scenarios.Figure]float64{scenarios.FigurePDVP50: 0.5, scenarios.FigurePDVP95: 0.95, scenarios.FigurePDVP99: 0.99, scenarios.FigurePDVP999: 0.999}
	for _, k := range classes {
		for _, l := range sc.Classes[k].Objective {
			if q, is := share[l.Figure]; is && (p.TightestS == nil || l.Time.Seconds() < *p.TightestS) {
				p.TightestS, p.Percentile = new(l.Time.Seconds()), q
			}
		}
	}
}

// search finds the boundary between sizes that are met and those that are not.
func (z *sizer) search(r *result.Sizing) error {
	low, high := int(r.Low)-1, int(r.High)+1 // low is not met, high is, or they were not tried
	try := z.first
	for low+1 < high {
		s, err := z.judge(try)
		if err != nil {
			return err
		}
		if s == result.Met {
			high = try
			r.Least = new(int64(try))
		} else {
			low = try
		}
		if s == result.Missed && (r.Missed == nil || int64(try) > *r.Missed) {
			r.Missed = new(int64(try))
		}
		switch {
		case s == result.Met && len(z.tried) == 1 && try > int(r.Low):
			try-- // the prediction is often one too many or right
		case r.Least == nil:
			try = min(2*try, high-1)
			if try <= low {
				try = low + (high-low)/2
			}
		default:
			try = low + (high-low)/2
		}
	}
	z.caution(r)
	return nil
}

// caution says what the search leaves open.
func (z *sizer) caution(r *result.Sizing) {
	switch {
	case r.Least == nil:
		r.Cautions = append(r.Cautions, fmt.Sprintf("No size up to %d slots is met with confidence.", r.High))
	case *r.Least == r.Low:
		r.Cautions = append(r.Cautions, "The least size searched is enough; there is nothing below it to be missed.")
	case r.Missed == nil || *r.Missed < *r.Least-1:
		r.Cautions = append(r.Cautions, fmt.Sprintf("Below %d slots the sizes next to it are undecided, not missed: more seeds may show that fewer are enough.", *r.Least))
	}
}

// judge tries one size.
func (z *sizer) judge(slots int) (result.Standing, error) {
	sc, err := z.q.With(slots)
	if err != nil {
		return "", err
	}
	run := replicatorOf(sc, z.o)
	first := z.o.seed(sc)
	var samples []*sample
	for n := firstSizeSeeds; ; n = min(2*n, z.q.AtMost) {
		var jobs []job
		for _, seed := range Seeds(first, n)[len(samples):] {
			jobs = append(jobs, job{z.o.plan(), seed})
		}
		more, err := sampleAll(z.ctx, jobs, z.o, run)
		if err != nil {
			return "", fmt.Errorf("%d slots: %w", slots, err)
		}
		samples = append(samples, more...)
		g := gateOf(z.o.plan(), samples, z.r.StepLevel, func(class string, kind result.PeriodKind) bool {
			return settled(kind) && slices.Contains(z.r.Classes, class)
		})
		if g == nil {
			return "", fmt.Errorf("no objective of %v was judged in a settled period", z.r.Classes)
		}
		if g.Standing != result.Open || n >= z.q.AtMost {
			z.note(slots, g, samples)
			return g.Standing, nil
		}
	}
}

// note adds a size to the trail.
func (z *sizer) note(slots int, g *result.Gate, samples []*sample) {
	z.tried[slots] = g.Standing
	step := result.SizeStep{Slots: int64(slots), Seeds: int64(len(samples)), Standing: g.Standing, Text: "every objective is met"}
	if h := decisive(g); h != nil {
		step.Text = fmt.Sprintf("%s %s %s: %s", h.Class, h.Period, h.Figure, h.Text)
	}
	ok := len(z.r.Trail) == 0 || z.r.Audit.OK
	if len(z.r.Trail) == 0 {
		z.r.Head, z.r.Defaults = samples[0].head, samples[0].defaults
		z.r.Cautions = cautionsOf(samples)
	}
	z.r.Trail = append(z.r.Trail, step)
	for _, s := range samples {
		addAudit(&z.r.Audit, s.audit, fmt.Sprintf("%d slots, seed %d: ", slots, s.seed))
	}
	z.r.Audit.OK = ok && auditsOK(samples)
}
