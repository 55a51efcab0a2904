package result

import (
	"encoding/csv"
	"io"
	"strconv"
)

// WriteCSV writes the figures of r as one long table with the columns scope,
// name, period, figure, unit and value. A figure that cannot be said has no
// row. In a Comparison the scope is the plan and the kind of thing, as
// "video-express/class", and each figure has rows "F base", "F plan", "F
// difference" and the ends of its interval.
func WriteCSV(w io.Writer, r Result) error {
	t := &longTable{w: csv.NewWriter(w)}
	t.row("scope", "name", "period", "figure", "unit", "value")
	switch r := r.(type) {
	case *Run:
		t.run(r)
	case *Batch:
		t.batch(r)
	case *Comparison:
		t.comparison(r)
	case *Check:
		t.check(r)
	case *Sizing:
		t.sizing(r)
	case *Failures:
		t.failures(r)
	default:
		panic("result: unknown kind of result")
	}
	t.w.Flush()
	if t.err == nil {
		t.err = t.w.Error()
	}
	return t.err
}

// A longTable writes rows until the first error, which it keeps.
type longTable struct {
	w   *csv.Writer
	err error
}

func (t *longTable) row(cells ...string) {
	if t.err == nil {
		t.err = t.w.Write(cells)
	}
}

// value writes one row with the shortest decimal that reads back as v.
func (t *longTable) value(scope, name, period, figure, unit string, v float64) {
	if v == 0 {
		v = 0 // never "-0"
	}
	t.row(scope, name, period, figure, unit, strconv.FormatFloat(v, 'g', -1, 64))
}

func (t *longTable) count(scope, name, figure, unit string, n int64) {
	t.row(scope, name, "", figure, unit, strconv.FormatInt(n, 10))
}

func (t *longTable) optional(scope, name, period, figure, unit string, v *float64) {
	if v != nil {
		t.value(scope, name, period, figure, unit, *v)
	}
}

func (t *longTable) outcomes(scope, name string, os []Outcome) {
	for _, o := range os {
		for _, v := range o.Figures() {
			t.value(scope, name, o.Period, v.Figure, v.Unit, v.Value)
		}
	}
}

func (t *longTable) losses(scope, name string, ls Losses) {
	for _, l := range ls {
		t.count(scope, name, FigLostPrefix+l.Cause, UnitPackets, l.Packets)
	}
}

func (t *longTable) run(r *Run) {
	t.row("run", r.Plan, "", "seed", "", strconv.FormatUint(r.Seed, 10))
	t.value("run", r.Plan, "", "length", UnitSeconds, r.LengthS)
	t.value("run", r.Plan, "", "warm-up", UnitSeconds, r.WarmUpS)
	for _, p := range r.Periods {
		t.value("period", p.Name, p.Name, "from", UnitSeconds, p.FromS)
		t.value("period", p.Name, p.Name, "to", UnitSeconds, p.ToS)
	}
	for _, c := range r.Classes {
		t.outcomes("class", c.Name, c.Periods)
	}
	for _, a := range r.Aggregates {
		t.outcomes("aggregate", a.Name, a.Periods)
	}
	t.circuits(r.Circuits)
	for _, p := range r.Ports {
		name := p.Circuit + " from " + p.From
		t.optional("port", name, "", "utilisation", UnitRatio, p.Utilisation)
		t.count("port", name, "sent", UnitPackets, p.SentPackets)
		t.losses("port", name, p.LostPackets)
		t.optional("port", name, "", "wait-mean", UnitSeconds, p.MeanWaitS)
		t.optional("port", name, "", "queue-mean", UnitBytes, p.MeanQueueBytes)
		if p.MaxQueueBytes != nil {
			t.count("port", name, "queue-max", UnitBytes, *p.MaxQueueBytes)
		}
	}
	for _, f := range r.Fibres {
		t.value("fibre", f.Name, "", "length", UnitKm, f.LengthKm)
		t.count("fibre", f.Name, "slots", UnitSlots, f.Slots)
		t.count("fibre", f.Name, "slots-used", UnitSlots, f.SlotsUsed)
	}
	for _, a := range r.Asked {
		t.value("asked", a.Subject, "", a.Figure+" asked", a.Unit, a.Asked)
		t.optional("asked", a.Subject, "", a.Figure+" measured", a.Unit, a.Measured)
	}
	t.price("price", r.Plan, r.Price)
	t.audit(r.Audit)
}

func (t *longTable) circuits(cs []Circuit) {
	for _, c := range cs {
		if c.Slots != nil {
			t.count("circuit", c.Name, "slots", UnitSlots, *c.Slots)
		}
		t.value("circuit", c.Name, "", "payload", UnitBps, c.PayloadBps)
		t.optional("circuit", c.Name, "", "utilisation", UnitRatio, c.Utilisation)
		t.optional("circuit", c.Name, "", "set-up", UnitSeconds, c.SetUpS)
		t.optional("circuit", c.Name, "", "delay", UnitSeconds, c.DelayS)
		t.count("circuit", c.Name, "resizes", UnitCount, c.Resizes)
		t.value("circuit", c.Name, "", "down", UnitSeconds, c.DownS)
	}
}

func (t *longTable) price(scope, name string, p Price) {
	t.count(scope, name, "slots", UnitSlots, p.Slots)
	t.value(scope, name, "", "slot-km", UnitSlotKm, p.SlotKm)
	t.count(scope, name, "ports", UnitPorts, p.Ports)
	for _, s := range p.TransitFreed {
		t.value(scope, name, "", "transit-freed "+s.Site, UnitBps, s.Bps)
	}
	if p.Tightest != nil {
		t.count(scope, name, "free-slots "+p.Tightest.Fibre, UnitSlots, p.Tightest.FreeSlots)
	}
}

func (t *longTable) audit(a Audit) {
	t.count("audit", "", FigOffered, UnitPackets, a.OfferedPackets)
	t.count("audit", "", "copies", UnitPackets, a.CopyPackets)
	t.count("audit", "", FigDelivered, UnitPackets, a.DeliveredPackets)
	t.count("audit", "", FigDuplicates, UnitPackets, a.DuplicatePackets)
	t.count("audit", "", "discarded-copies", UnitPackets, a.DiscardedCopiesPackets)
	t.losses("audit", "", a.LostPackets)
	t.count("audit", "", FigInside, UnitPackets, a.InsidePackets)
	t.count("audit", "", "slots-owned", UnitSlots, a.SlotsOwned)
	t.count("audit", "", "slots-used", UnitSlots, a.SlotsUsed)
	t.count("audit", "", "little-ports", UnitCount, a.LittlePorts)
	t.count("audit", "", "failures", UnitCount, int64(len(a.Failures)))
}

func (t *longTable) interval(scope, name, period, figure, unit string, i *Interval) {
	if i == nil {
		return
	}
	t.optional(scope, name, period, figure+" half-width", unit, i.Half)
	t.optional(scope, name, period, figure+" low", unit, i.Low)
	t.optional(scope, name, period, figure+" high", unit, i.High)
}

func (t *longTable) batch(b *Batch) {
	t.count("batch", b.Plan, "seeds", UnitCount, int64(len(b.Seeds)))
	t.value("batch", b.Plan, "", "confidence", UnitRatio, b.Confidence)
	for _, m := range b.Figures {
		t.mean("class", m.Class, m)
	}
	for _, m := range b.Network {
		t.mean("network", m.Subject, m)
	}
	t.price("price", b.Plan, b.Price)
	t.audit(b.Audit)
}

func (t *longTable) mean(scope, name string, m Mean) {
	t.optional(scope, name, m.Period, m.Figure+" limit", m.Unit, m.Limit)
	t.optional(scope, name, m.Period, m.Figure+" mean", m.Unit, m.Mean)
	t.interval(scope, name, m.Period, m.Figure, m.Unit, m.Interval)
}

func (t *longTable) comparison(c *Comparison) {
	t.count("comparison", c.Base, "seeds", UnitCount, int64(len(c.Seeds)))
	t.value("comparison", c.Base, "", "confidence", UnitRatio, c.Confidence)
	for _, p := range c.Plans {
		for _, d := range p.Figures {
			t.difference(p.Plan+"/class", d.Class, d)
		}
		for _, d := range p.Network {
			t.difference(p.Plan+"/network", d.Subject, d)
		}
		t.price(p.Plan+"/price", "base", p.Price.Base)
		t.price(p.Plan+"/price", "plan", p.Price.Plan)
		t.price(p.Plan+"/price", "difference", Price{Slots: p.Price.Slots, SlotKm: p.Price.SlotKm,
			Ports: p.Price.Ports, TransitFreed: p.Price.TransitFreed})
	}
	t.audit(c.Audit)
}

func (t *longTable) difference(scope, name string, d Difference) {
	t.optional(scope, name, d.Period, d.Figure+" limit", d.Unit, d.Limit)
	t.optional(scope, name, d.Period, d.Figure+" base", d.Unit, d.Base)
	t.optional(scope, name, d.Period, d.Figure+" plan", d.Unit, d.Plan)
	t.optional(scope, name, d.Period, d.Figure+" difference", d.Unit, d.Difference)
	t.interval(scope, name, d.Period, d.Figure, d.Unit, d.Interval)
}

func (t *longTable) check(c *Check) {
	for _, l := range c.Links {
		name := l.Circuit + " from " + l.From
		t.value("link", name, "", "load", UnitBps, l.LoadBps)
		t.value("link", name, "", "payload", UnitBps, l.PayloadBps)
		t.optional("link", name, "", "utilisation", UnitRatio, l.Utilisation)
		t.optional("link", name, "", "worst-utilisation", UnitRatio, l.WorstUtilisation)
		t.optional("link", name, "", "growth-left", UnitRatio, l.GrowthLeft)
	}
	for _, m := range c.Measured {
		name := m.Of + " from " + m.From + " to " + m.To
		t.value(m.What, name, "", "measured", m.Unit, m.Measured)
		t.optional(m.What, name, "", "model", m.Unit, m.Model)
		t.optional(m.What, name, "", "model-minus-measured", m.Unit, m.Difference)
	}
	for _, a := range c.Candidates {
		t.value("candidate", a.Aggregate, "", "load", UnitBps, a.Bps)
		t.count("candidate", a.Aggregate, "routers-passed", UnitCount, a.RoutersPassed)
		for _, s := range a.Transit {
			t.value("candidate", a.Aggregate, "", "transit-share "+s.Site, UnitRatio, s.Share)
		}
		t.count("candidate", a.Aggregate, "slots-needed", UnitSlots, a.SlotsNeeded)
		if a.FreeSlots != nil {
			t.count("candidate", a.Aggregate, "free-slots", UnitSlots, *a.FreeSlots)
		}
		t.count("candidate", a.Aggregate, "ports-freed", UnitPorts, a.PortsFreed)
		t.value("candidate", a.Aggregate, "", "transit-freed", UnitBps, a.TransitFreedBps)
	}
	t.value("estimate", "", "", "packet-hops", UnitPackets, c.Estimate.PacketHops)
	t.value("estimate", "", "", "memory", UnitBytes, c.Estimate.MemoryBytes)
	t.optional("estimate", "", "", "wall", UnitSeconds, c.Estimate.WallS)
}

func (t *longTable) sizing(r *Sizing) {
	for _, s := range r.Trail {
		name := strconv.FormatInt(s.Slots, 10) + " slots"
		t.count("size/"+r.Circuit, name, "seeds", UnitCount, s.Seeds)
		t.row("size/"+r.Circuit, name, "", "standing", "", string(s.Standing))
	}
	if r.Least != nil {
		t.count("size/"+r.Circuit, "", "least", UnitSlots, *r.Least)
	}
	if r.Missed != nil {
		t.count("size/"+r.Circuit, "", "missed", UnitSlots, *r.Missed)
	}
	t.value("size/"+r.Circuit, "", "", "load", UnitBps, r.Prediction.LoadBps)
}
