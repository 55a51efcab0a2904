package study

import (
	"slices"

	"ferrule/controller"
	"ferrule/des"
	"ferrule/nodes/packet"
	"ferrule/scenarios/build"
	"ferrule/scenarios/result"
)

// A trial is what one failure did under one plan with one seed.
type trial struct {
	head       result.Head
	seed       uint64
	defaults   []result.Default
	asked      []float64 // by way in the order of aggregates: the load asked for
	ways       []wayTrial
	unrestored []string
	use        *float64 // the busiest port in after, nil when nothing settled
	port       string
	waiting    []string // steps of the plan that were not done before the failure
	audit      result.Audit
}

// A wayTrial is what a failure did to one way of an aggregate.
type wayTrial struct {
	name, class string
	lost        int64   // from the failure on
	hit         bool    // it lost packets to the failure
	outage      float64 // seconds
	cutOff      bool    // nothing of it arrived after the last one lost
	missed      bool    // its objective, once all had settled
}

// newTrial reads a model that has run to its end; the failure came at the
// instant at.
func newTrial(m *build.Model, at des.Time) *trial {
	g := newGatherer(m, false)
	g.listPeriods()
	g.collectLosses()
	g.aggregates()
	g.circuits()
	g.loads()
	g.steps()
	g.audit()
	g.defaults()
	t := &trial{head: g.r.Head, seed: m.Seed, defaults: g.r.Defaults, audit: g.r.Audit}
	for i, way := range g.ways {
		t.asked = append(t.asked, m.Asked[way])
		t.ways = append(t.ways, g.wayTrial(&g.r.Aggregates[i], way, at))
	}
	reports, _ := m.Control.Reports()
	for i := range reports {
		if s := reports[i].State; s == controller.Down || s == controller.Restoring {
			t.unrestored = append(t.unrestored, m.Plant.Circuits[reports[i].Circuit].Name)
		}
	}
	t.use, t.port = g.busiest()
	for i := range g.r.Steps {
		if s := &g.r.Steps[i]; s.State != controller.Done.String() {
			t.waiting = append(t.waiting, s.Act+" "+s.Subject)
		}
	}
	return t
}

// wayTrial reads one way; the failure came at the instant at.
func (g *gatherer) wayTrial(a *result.Aggregate, way uint16, at des.Time) wayTrial {
	w := wayTrial{name: a.Name, class: a.Class}
	settled := g.end - packet.SettleTime
	for k := range a.Periods {
		o, p := &a.Periods[k], &g.r.Periods[k]
		if p.FromS < at.Seconds() {
			continue
		}
		w.lost += o.LostPackets.Total()
		if o.OutageS != nil {
			w.outage = max(w.outage, *o.OutageS)
		}
		if k == len(a.Periods)-1 && quietKind(p.Kind) {
			settled = g.n.Stretches()[g.periods[k]].From
			w.missed = o.Objective != nil && o.Objective.Met != nil && !*o.Objective.Met
		}
	}
	for _, f := range g.faults[way] {
		w.hit = true
		if g.n.Meters()[way].Last() > f.Last {
			continue
		}
		// Nothing has arrived since. It may have sent nothing since.
		w.cutOff = f.Last >= settled || g.m.Control.Carried(way) == nil
		if !w.cutOff {
			w.outage = (f.Last - f.First).Seconds()
		}
	}
	return w
}

// quietKind reports whether all has settled in a period of kind k.
func quietKind(k result.PeriodKind) bool { return k == result.Normal || k == result.After }

// busiest is the port that carried most of its payload in the last period, if
// that is one in which the network had settled after the failure.
func (g *gatherer) busiest() (use *float64, port string) {
	last := len(g.r.Periods) - 1
	if last < 0 || !quietKind(g.r.Periods[last].Kind) {
		return nil, ""
	}
	for i := range g.r.Loads {
		l := &g.r.Loads[i]
		if l.Period != g.r.Periods[last].Name {
			continue
		}
		bps := 0.0
		for _, c := range l.Classes {
			bps += c.Bps
		}
		c := slices.IndexFunc(g.r.Circuits, func(c result.Circuit) bool { return c.Name == l.Circuit })
		if u := bps / g.r.Circuits[c].PayloadBps; use == nil || u > *use {
			use, port = &u, l.Circuit+" from "+l.From
		}
	}
	return use, port
}
