package study

import (
	"cmp"
	"fmt"
	"slices"
	"strings"

	"ferrule/des"
	"ferrule/des/theory"
	"ferrule/nodes"
	"ferrule/scenarios/result"
)

// secondsPerYear is the year of availability figures.
const secondsPerYear = theory.HoursPerYear * 3600

// fold makes a result of the trials that ended; nil when there is none.
func (f *fleet) fold() *result.Failures {
	r := &result.Failures{Seeds: f.w.Seeds, Scale: f.w.Scale, BeforeS: f.w.Before.Seconds(), AtS: f.at.Seconds(),
		AfterS: f.w.After.Seconds(), CutsPerY: max(f.w.Cuts, 0), RepairS: f.w.Repair.Seconds()}
	for i := range f.list[1:] {
		if k := f.list[i+1].kind; !slices.Contains(r.Kinds, k) {
			r.Kinds = append(r.Kinds, k)
		}
	}
	for i := range f.sc.Classes {
		r.Classes = append(r.Classes, f.sc.Classes[i].Name)
	}
	r.Audit.OK = true
	var unsettled, waiting []string
	for p := range f.w.Plans {
		x := &folding{fleet: f, plan: p}
		out := result.FailuresPlan{Plan: f.w.Plans[p]}
		for i := range f.list {
			trials := x.of(i)
			if len(trials) == 0 {
				continue
			}
			for _, t := range trials {
				r.Head, r.Defaults = t.Head, t.Defaults
				r.Runs++
				addAudit(&r.Audit, t.Audit, fmt.Sprintf("plan %s, %s %s: ", out.Plan, f.list[i].kind, f.list[i].name))
				r.Audit.OK = r.Audit.OK && t.Audit.OK
				for _, s := range t.Waiting {
					if s = out.Plan + ": " + s; !slices.Contains(waiting, s) {
						waiting = append(waiting, s)
					}
				}
			}
			fail := x.failure(i, trials)
			if i == 0 {
				out.Nothing = &fail
				continue
			}
			out.Failures = append(out.Failures, fail)
			if fail.Unsettled > 0 {
				unsettled = append(unsettled, fmt.Sprintf("%s (%s)", f.list[i].name, out.Plan))
			}
		}
		if len(out.Failures) == 0 {
			continue
		}
		x.year(&out)
		slices.SortStableFunc(out.Failures, worseFirst)
		for i := range out.Failures {
			out.Failures[i].Rank = int64(i + 1)
		}
		r.Plans = append(r.Plans, out)
	}
	if len(r.Plans) == 0 {
		return nil
	}
	r.Cautions = f.cautions(unsettled, waiting)
	return r
}

// cautions says what a reader must know.
func (f *fleet) cautions(unsettled, waiting []string) []string {
	list := []string{
		"An expectation over a year takes one failure at a time: what is cut off stays so until the repair, the rest loses its outage.",
	}
	if len(unsettled) > 0 {
		list = append(list, "Not settled by the end, so without figures for after: "+shortList(unsettled)+". A longer time after the failure has them.")
	}
	if len(waiting) > 0 {
		list = append(list, "Steps that had not been carried out by the end: "+shortList(waiting)+".")
	}
	if f.w.Scale != 1 {
		list = append(list, fmt.Sprintf("All loads are %g %% of those of the scenario: losses, waits and utilisations are those of that load.", 100*f.w.Scale))
	}
	if slices.ContainsFunc(f.list[1:], func(x breakage) bool { return x.length == 0 }) {
		list = append(list, "Only the rate of cuts of single fibres is known: nothing else is part of the expectations over a year.")
	}
	var untried []string
	for _, k := range FailureKinds() {
		if !slices.Contains(f.w.Kinds, k) && (k != FailGroup || len(f.sc.RiskGroups) > 0) {
			untried = append(untried, k)
		}
	}
	if len(untried) > 0 {
		list = append(list, "Not tried: failures of every "+strings.Join(untried, ", every ")+".")
	}
	return list
}

// A folding puts together what happened under one plan.
type folding struct {
	*fleet
	plan int
}

// of lists the trials of failure i that ended, in the order of seeds.
func (x *folding) of(i int) []*trial {
	var list []*trial
	for g := range x.groups {
		if t := x.groups[g].trials[i]; x.groups[g].plan == x.plan && t != nil {
			list = append(list, t)
		}
	}
	return list
}

// perYear is how often failure i happens, in time in and out of service; 0
// when that is not known.
func (x *folding) perYear(i int) float64 {
	f := &x.list[i]
	if f.kind != FailFibre || x.w.Cuts < 0 {
		return 0
	}
	km := float64(f.length) / float64(nodes.Kilometre)
	return theory.Failures(theory.FibreMTTF(km, x.w.Cuts), float64(x.w.Repair)/float64(des.Hour))
}

// failure folds the trials of failure i, at least one.
func (x *folding) failure(i int, trials []*trial) result.Failure {
	f := &x.list[i]
	r := result.Failure{Name: f.name, Kind: f.kind, Seeds: int64(len(trials))}
	if f.length > 0 {
		r.LengthKm = new(kilometres(f.length))
	}
	if rate := x.perYear(i); rate > 0 {
		r.PerYear = &rate
	}
	use, settled := 0.0, 0
	for _, t := range trials {
		for _, c := range t.Unrestored {
			if !slices.Contains(r.Unrestored, c) {
				r.Unrestored = append(r.Unrestored, c)
			}
		}
		if t.Use == nil {
			r.Unsettled++
			continue
		}
		if settled == 0 {
			r.WorstPort = t.Port
		}
		use += *t.Use
		settled++
	}
	if settled > 0 {
		r.WorstUse = new(use / float64(settled))
	}
	for w := range trials[0].Ways {
		if slices.ContainsFunc(trials, func(t *trial) bool { return t.Ways[w].CutOff }) {
			r.CutOff = append(r.CutOff, trials[0].Ways[w].Name)
		}
	}
	for c := range x.sc.Classes {
		r.Classes = append(r.Classes, hurtOf(x.sc.Classes[c].Name, trials, x.of(0), i == 0))
	}
	return r
}

// hurtOf folds one class. What is missed is counted where it is met when
// nothing fails, with the same seed; of the trial in which nothing fails itself
// all is counted.
func hurtOf(class string, trials, nothing []*trial, self bool) result.Hurt {
	h := result.Hurt{Class: class}
	var outages []float64
	for w := range trials[0].Ways {
		if trials[0].Ways[w].Class != class {
			continue
		}
		var hit, cutOff, missed bool
		for _, t := range trials {
			a := &t.Ways[w]
			h.LostPackets += float64(a.Lost)
			hit, cutOff, missed = hit || a.Hit, cutOff || a.CutOff, missed || a.Missed && (self || !missedWith(nothing, t.Seed, w))
			if !a.Hit {
				continue
			}
			outages = append(outages, a.Outage)
			if h.OutageWorstS == nil || a.Outage > *h.OutageWorstS {
				h.OutageWorstS, h.WorstPair = new(a.Outage), a.Name
			}
		}
		h.Hit += one(hit)
		h.CutOff += one(cutOff)
		h.Missed += one(missed)
	}
	h.LostPackets /= float64(len(trials))
	if n := len(outages); n > 0 {
		slices.Sort(outages)
		h.OutageMedianS = new((outages[(n-1)/2] + outages[n/2]) / 2)
	}
	return h
}

// missedWith reports whether way w missed its objective with the given seed.
func missedWith(trials []*trial, seed uint64, w int) bool {
	return slices.ContainsFunc(trials, func(t *trial) bool { return t.Seed == seed && t.Ways[w].Missed })
}

func one(b bool) int64 {
	if b {
		return 1
	}
	return 0
}

// worseFirst puts the failure first that hurts the highest class more: by
// aggregates cut off, then by packets lost, then by the next class.
func worseFirst(a, b result.Failure) int {
	for i := range a.Classes {
		p, q := &a.Classes[i], &b.Classes[i]
		if c := cmp.Or(cmp.Compare(q.CutOff, p.CutOff), cmp.Compare(q.LostPackets, p.LostPackets)); c != 0 {
			return c
		}
	}
	return 0
}

// A year is what each way may expect in a year, in seconds.
type year struct {
	lost, below []float64
	first       *trial // tells the names, classes and loads of the ways
	rated       bool   // a rate is known of something
}

// expect adds up over all failures. A cut counts in time in service: a fibre
// that is down is not cut again. What misses its objective once all has settled
// does so until the repair.
func (x *folding) expect() year {
	repair := x.w.Repair.Seconds()
	var y year
	nothing := x.of(0)
	for i := range x.list {
		trials, rate := x.of(i), x.perYear(i)
		if len(trials) == 0 {
			continue
		}
		if y.first == nil {
			y.first = trials[0]
			y.lost, y.below = make([]float64, len(y.first.Ways)), make([]float64, len(y.first.Ways))
		}
		if rate == 0 {
			continue
		}
		y.rated = true
		for w := range y.lost {
			out, below := 0.0, 0.0
			for _, t := range trials {
				switch a := &t.Ways[w]; {
				case a.CutOff:
					out += repair
				case a.Hit:
					out += a.Outage
				}
				if a := &t.Ways[w]; a.Missed && !a.CutOff && !missedWith(nothing, t.Seed, w) {
					below += repair
				}
			}
			y.lost[w] += float64(rate * out / float64(len(trials)))
			y.below[w] += float64(rate * below / float64(len(trials)))
		}
	}
	return y
}

// year adds to out what each class and aggregate may expect in a year.
func (x *folding) year(out *result.FailuresPlan) {
	y := x.expect()
	for c := range x.sc.Classes {
		out.Classes = append(out.Classes, x.yearOf(out, c, &y))
	}
	for w := range y.first.Ways {
		if a := &y.first.Ways[w]; y.rated {
			out.Each = append(out.Each, result.YearOfTraffic{Aggregate: a.Name, Class: a.Class,
				Lost: y.lost[w], Below: y.below[w], Availability: 1 - y.lost[w]/secondsPerYear})
		}
	}
}

// yearOf is the year of class c: means over its ways by load.
func (x *folding) yearOf(out *result.FailuresPlan, c int, y *year) result.YearOfClass {
	r := result.YearOfClass{Class: x.sc.Classes[c].Name}
	x.hurtMost(out, c, &r)
	lost, below, weights := 0.0, 0.0, 0.0
	for w := range y.first.Ways {
		a := &y.first.Ways[w]
		if a.Class != r.Class {
			continue
		}
		lost += float64(y.first.Asked[w] * y.lost[w])
		below += float64(y.first.Asked[w] * y.below[w])
		weights += y.first.Asked[w]
		if y.rated && (r.WorstLost == nil || y.lost[w] > *r.WorstLost) {
			r.WorstLost, r.WorstPair = new(y.lost[w]), a.Name
		}
	}
	if y.rated && weights > 0 {
		r.Lost, r.Availability = new(lost/weights), new(1-lost/weights/secondsPerYear)
		if len(x.sc.Classes[c].Objective) > 0 {
			r.Below = new(below / weights)
		}
	}
	return r
}

// hurtMost names the failure that loses most packets of class c.
func (x *folding) hurtMost(out *result.FailuresPlan, c int, y *result.YearOfClass) {
	for i := range out.Failures {
		f := &out.Failures[i]
		if n := f.Classes[c].LostPackets; n > y.LostPackets {
			y.HurtMostBy, y.LostPackets = f.Name, n
		}
	}
}
