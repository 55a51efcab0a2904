package study

import (
	"context"
	"fmt"
	"math"
	"slices"
	"strings"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/packet"
	"ferrule/scenarios"
	"ferrule/scenarios/build"
	"ferrule/scenarios/result"
)

// Kinds of failure that a sweep can try.
const (
	FailFibre  = "fibre"  // each fibre, cut in the middle
	FailGroup  = "group"  // each risk group: all its fibres at once
	FailRouter = "router" // each router; the cross-connect beside it lives
	FailSite   = "site"   // each site: router, cross-connect and the ends of its fibres
	FailPort   = "port"   // each end of each circuit that stands from the start
	FailPair   = "pair"   // two fibres or risk groups together, as asked for

	failNothing = "nothing" // what all others are set against
)

// FailureKinds lists the kinds that a sweep can try by itself, in order.
func FailureKinds() []string { return []string{FailFibre, FailGroup, FailRouter, FailSite, FailPort} }

// usualKinds are those it tries unless it is told otherwise.
var usualKinds = []string{FailFibre, FailGroup}

// A Sweep says what Failures tries and how. The zero value of a field stands
// for what is written beside it.
type Sweep struct {
	Plans  []string    // all plans, scenarios.AsIs first
	Seeds  []uint64    // three, from that of the options on
	Kinds  []string    // fibres and risk groups
	Pairs  [][2]string // none; names of what fails together
	Scale  float64     // 1: all loads as in the scenario, else times this
	Before des.Time    // 200 ms: measured before the failure
	After  des.Time    // 700 ms: from the failure to the end
	Cuts   float64     // CutsPerKmYear; negative: no rate is known
	Repair des.Time    // 12 h: until what has failed is repaired (To and Neusy 1994, value from memory)
}

// CutsPerKmYear is the rate at which a buried cable is cut: 4.39 a year for
// every 1000 miles of sheath.
//
// Source: M. To, P. Neusy, IEEE JSAC 12 (1994), 7; value from memory.
const CutsPerKmYear = 4.39 / 1609.344

// withDefaults checks w and fills in what is zero.
func (w Sweep) withDefaults(sc *scenarios.Scenario, o Options) (Sweep, error) {
	if len(w.Plans) == 0 {
		w.Plans = Plans(sc)
	}
	for i, p := range w.Plans {
		if _, err := sc.Plan(p); err != nil {
			return w, err
		}
		if slices.Contains(w.Plans[:i], p) {
			return w, fmt.Errorf("plan %s is given twice", p)
		}
	}
	if len(w.Seeds) == 0 {
		w.Seeds = Seeds(o.seed(sc), 3)
	}
	if err := checkSeeds(w.Seeds); err != nil {
		return w, err
	}
	if len(w.Kinds) == 0 && len(w.Pairs) == 0 {
		w.Kinds = usualKinds
	}
	w.Scale = orElse(w.Scale, 1)
	w.Before = orElse(w.Before, 200*des.Millisecond)
	w.After = orElse(w.After, 700*des.Millisecond)
	w.Cuts = orElse(w.Cuts, CutsPerKmYear)
	w.Repair = orElse(w.Repair, 12*des.Hour)
	if w.Before < 0 || w.After < 0 || w.Repair < 0 || !(w.Scale > 0) {
		return w, fmt.Errorf("a sweep needs positive times and a positive scale")
	}
	return w, nil
}

// orElse is v, or d where v is zero.
func orElse[T comparable](v, d T) T {
	var zero T
	if v == zero {
		return d
	}
	return v
}

// A breakage is one thing that a sweep tries.
type breakage struct {
	kind, name string
	length     nodes.Length // of a fibre, else 0
	acts       []packet.Act // at instant 0, to be moved
}

// failures lists what w tries, in the order of the scenario, after a trial in
// which nothing fails.
func (w *Sweep) failures(sc *scenarios.Scenario) ([]breakage, error) {
	fibres := make([]breakage, len(sc.Fibres))
	for i := range sc.Fibres {
		f := &sc.Fibres[i]
		fibres[i] = breakage{kind: FailFibre, name: f.Name, length: f.Length, acts: cutsOf(sc, f.Name, nodes.FibreID(i))}
	}
	groups := make([]breakage, len(sc.RiskGroups))
	for i := range sc.RiskGroups {
		g := &sc.RiskGroups[i]
		groups[i] = breakage{kind: FailGroup, name: g.Name, acts: cutsOf(sc, g.Name, g.Fibres...)}
	}
	parts := partsOf(sc)
	list := []breakage{{kind: failNothing, name: failNothing, acts: []packet.Act{{Kind: packet.ActOrder, Name: failNothing, Site: sc.Controller.At}}}}
	for _, k := range w.Kinds {
		switch k {
		case FailFibre:
			list = append(list, fibres...)
		case FailGroup:
			list = append(list, groups...)
		case FailRouter, FailSite, FailPort:
			for _, p := range parts {
				if p.kind == k {
					list = append(list, p)
				}
			}
		default:
			return nil, fmt.Errorf("%q is no kind of failure; write %s", k, strings.Join(FailureKinds(), ", "))
		}
	}
	known := slices.Concat(fibres, groups)
	for _, p := range w.Pairs {
		both := breakage{kind: FailPair, name: p[0] + " + " + p[1]}
		for _, name := range p {
			i := slices.IndexFunc(known, func(f breakage) bool { return f.name == name })
			if i < 0 {
				return nil, fmt.Errorf("pair %s: no fibre or risk group is called %q", both.name, name)
			}
			both.acts = append(both.acts, known[i].acts...)
		}
		list = append(list, both)
	}
	if len(list) == 1 {
		return nil, fmt.Errorf("%s: there is nothing of the kind %s that can fail", sc.File, strings.Join(w.Kinds, ", "))
	}
	return list, nil
}

// partsOf lists the routers, the sites and the ports that can fail.
func partsOf(sc *scenarios.Scenario) []breakage {
	var list []breakage
	add := func(kind, name string, part packet.Part, s nodes.SiteID, c nodes.CircuitID) {
		list = append(list, breakage{kind: kind, name: name, acts: []packet.Act{{Kind: packet.ActFail, Name: kind + " " + name, Part: part, Site: s, Circuit: c}}})
	}
	for i := range sc.Sites {
		s, name := nodes.SiteID(i), sc.Sites[i].Name
		add(FailRouter, name+" router", packet.PartRouter, s, nodes.None)
		add(FailSite, name, packet.PartSite, s, nodes.None)
	}
	for i := range sc.Circuits {
		c := &sc.Circuits[i]
		if !c.InPlace {
			continue
		}
		for _, s := range [2]nodes.SiteID{c.A, c.B} {
			add(FailPort, c.Name+" at "+sc.Sites[s].Name, packet.PartPort, s, nodes.CircuitID(i))
		}
	}
	return list
}

// cutsOf cuts fibres in the middle.
func cutsOf(sc *scenarios.Scenario, name string, fibres ...nodes.FibreID) []packet.Act {
	acts := make([]packet.Act, len(fibres))
	for i, f := range fibres {
		acts[i] = packet.Act{Kind: packet.ActCut, Name: "cut " + name, Fibre: f, Where: (sc.Fibres[f].Length / 2).Light()}
	}
	return acts
}

// quiet is sc as w runs it, without the faults of its timeline and with its
// loads scaled, the instant of the failure, and what was left out.
func (w *Sweep) quiet(sc *scenarios.Scenario) (own *scenarios.Scenario, at des.Time, left []string) {
	c := *sc
	own = &c
	own.Timeline, left = withoutFaults(sc.Timeline)
	at = sc.Run.WarmUp
	last := func(acts []scenarios.Act) {
		for i := range acts {
			if acts[i].At != des.Never {
				at = max(at, acts[i].At)
			}
		}
	}
	last(own.Timeline)
	for _, p := range w.Plans {
		if plan, err := sc.Plan(p); err == nil {
			last(plan.Steps)
		}
	}
	at += w.Before
	own.Run.Length = at + w.After
	if w.Scale != 1 {
		own.Aggregates = slices.Clone(sc.Aggregates)
		for i := range own.Aggregates {
			a := &own.Aggregates[i]
			a.Load = nodes.Rate(w.Scale * float64(a.Load))
			if a.Flows > 0 {
				a.Flows = max(1, int(math.Round(w.Scale*float64(a.Flows))))
			}
		}
	}
	return own, at, left
}

// withoutFaults leaves out of a timeline what breaks and what mends, and what
// waits for that.
func withoutFaults(acts []scenarios.Act) (kept []scenarios.Act, left []string) {
	at := make([]int, len(acts)) // of act i among those kept, or nodes.None
	for again := true; again; {
		again = false
		kept, left = kept[:0], left[:0]
		before := slices.Clone(at)
		for i := range acts {
			a := acts[i]
			waits := a.After != nodes.None && before[a.After] == nodes.None
			if at[i] == nodes.None || waits || breaks(a.Verb) {
				again = again || at[i] != nodes.None
				at[i] = nodes.None
				left = append(left, a.Verb.String()+" "+a.Subject)
				continue
			}
			at[i] = len(kept)
			kept = append(kept, a)
		}
	}
	for i := range kept {
		if kept[i].After != nodes.None {
			kept[i].After = at[kept[i].After]
		}
	}
	return kept, left
}

// breaks reports whether an act breaks or mends something.
func breaks(v scenarios.Verb) bool {
	switch v {
	case scenarios.VerbSetUp, scenarios.VerbTearDown, scenarios.VerbResize, scenarios.VerbMove, scenarios.VerbReturn, scenarios.VerbScale:
		return false
	default:
		return true
	}
}

// Failures breaks one thing after another under each plan, on the same seeds,
// and tells what each class lost. All runs of a plan and a seed share what goes
// before the failure: it is run once, and each failure goes on from a copy of
// it, byte for byte as a run of its own would. Faults of the scenario's own
// timeline are left out; the failure comes after every other act of it.
//
// An aggregate is hit when it loses packets to the failure, and cut off when
// nothing of it arrives any more by the end of the run. In expectations over a
// year an aggregate that is cut off stays so until the repair, any other loses
// its outage; failures are taken one at a time, and reversion as harmless.
//
// With a store in o, each trial is kept in it as it ends, and none that it holds
// is made again.
//
// When ctx ends first, the result holds the failures that were tried with at
// least one seed and is marked partial; it is nil when there is none. The error
// is then that of ctx. Any other error is that of a run, and the result is nil.
func Failures(ctx context.Context, sc *scenarios.Scenario, o Options, w Sweep) (*result.Failures, error) {
	w, err := w.withDefaults(sc, o)
	if err != nil {
		return nil, err
	}
	list, err := w.failures(sc)
	if err != nil {
		return nil, err
	}
	own, at, left := w.quiet(sc)
	f := newFleet(own, &w, list, at, o)
	err = f.run(ctx, o.cores())
	if err != nil && ctx.Err() == nil {
		return nil, err
	}
	r := f.fold()
	if r == nil {
		return nil, err
	}
	r.Partial = err != nil
	if len(left) > 0 {
		r.Cautions = append(r.Cautions, "Left out of the timeline of the scenario: "+shortList(left)+".")
	}
	return r, err
}

// trialOf carries on from the instant before a failure to the end of the run
// and reads what came of it. The model is the caller's to use up.
func trialOf(ctx context.Context, m *build.Model, fail *breakage, at des.Time) (*trial, error) {
	for _, a := range fail.acts {
		a.At = at
		m.Network.Schedule(a)
	}
	advance(ctx, m, m.Kernel(des.Serial{}), nil)
	if ctx.Err() != nil {
		return nil, ctx.Err()
	}
	if err := m.Err(); err != nil {
		return nil, err
	}
	return newTrial(m, at), nil
}
