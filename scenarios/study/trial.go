package study

import (
	"slices"

	"ferrule/controller"
	"ferrule/des"
	"ferrule/nodes/packet"
	"ferrule/scenarios/build"
	"ferrule/scenarios/result"
)

// A trial is what one failure did under one plan with one seed. Its fields are
// exported so that it can be stored.
type trial struct {
	Head       result.Head
	Seed       uint64
	Defaults   []result.Default
	Asked      []float64 // by way in the order of aggregates: the load asked for
	Ways       []wayTrial
	Unrestored []string
	Use        *float64 // the busiest port in after, nil when nothing settled
	Port       string
	Waiting    []string // steps of the plan that were not done before the failure
	Audit      result.Audit
}

// A wayTrial is what a failure did to one way of an aggregate.
type wayTrial struct {
	Name, Class string
	Lost        int64   // from the failure on
	Hit         bool    // it lost packets to the failure
	Outage      float64 // seconds
	CutOff      bool    // nothing of it arrived after the last one lost
	Missed      bool    // its objective, once all had settled
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
	t := &trial{Head: g.r.Head, Seed: m.Seed, Defaults: g.r.Defaults, Audit: g.r.Audit}
	for i, way := range g.ways {
		t.Asked = append(t.Asked, m.Asked[way])
		t.Ways = append(t.Ways, g.wayTrial(&g.r.Aggregates[i], way, at))
	}
	reports, _ := m.Control.Reports()
	for i := range reports {
		if s := reports[i].State; s == controller.Down || s == controller.Restoring {
			t.Unrestored = append(t.Unrestored, m.Plant.Circuits[reports[i].Circuit].Name)
		}
	}
	t.Use, t.Port = g.busiest()
	for i := range g.r.Steps {
		if s := &g.r.Steps[i]; s.State != controller.Done.String() {
			t.Waiting = append(t.Waiting, s.Act+" "+s.Subject)
		}
	}
	return t
}

// wayTrial reads one way; the failure came at the instant at.
func (g *gatherer) wayTrial(a *result.Aggregate, way uint16, at des.Time) wayTrial {
	w := wayTrial{Name: a.Name, Class: a.Class}
	settled := g.end - packet.SettleTime
	for k := range a.Periods {
		o, p := &a.Periods[k], &g.r.Periods[k]
		if p.FromS < at.Seconds() {
			continue
		}
		w.Lost += o.LostPackets.Total()
		if o.OutageS != nil {
			w.Outage = max(w.Outage, *o.OutageS)
		}
		if k == len(a.Periods)-1 && quietKind(p.Kind) {
			settled = g.n.Stretches()[g.periods[k]].From
			w.Missed = o.Objective != nil && o.Objective.Met != nil && !*o.Objective.Met
		}
	}
	for _, f := range g.faults[way] {
		w.Hit = true
		if g.n.Meters()[way].Last() > f.Last {
			continue
		}
		// Nothing has arrived since. It may have sent nothing since.
		w.CutOff = f.Last >= settled || g.m.Control.Carried(way) == nil
		if !w.CutOff {
			w.Outage = (f.Last - f.First).Seconds()
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
