package table

import (
	"cmp"
	"slices"

	"ferrule/scenarios/result"
)

// run lays out one replication: header, periods, figures by class in each
// period, circuits, ports, steps, events, price, audit, cautions.
func (d *doc) run(r *result.Run) {
	d.title("Run", r.Head, word(": plan "), name(r.Plan), word(", seed "), seed(r.Seed))
	d.periods(r.Periods)
	for i, p := range r.Periods {
		d.outcomes(p, r.Classes, i)
	}
	d.within(r)
	d.definitions()
	d.circuits(r.Circuits)
	d.ports(r.Ports)
	d.asked(r.Asked)
	d.demands(r.Demands)
	d.steps(r.Steps)
	d.events(r.Events)
	d.heading(word("PRICE AND AUDIT"))
	d.price(r.Price)
	d.audit(r.Audit)
	d.cautions(r.Cautions)
}

func (d *doc) periods(ps []result.Period) {
	if len(ps) == 0 {
		return
	}
	d.heading(word("PERIODS"))
	g := columns(abbreviated("period"), left("kind"), right("from"), right("to"), wrapped("opened by"), left("settled"))
	for _, p := range ps {
		settled := "yes"
		if p.Unsettled {
			settled = "NO"
		}
		g.add(name(p.Name), name(string(p.Kind)), instant(p.FromS), instant(p.ToS), name(p.Act), word(settled))
	}
	d.grid(g)
}

// outcomes shows what every class got in period p, number i of the run.
func (d *doc) outcomes(p result.Period, classes []result.Class, i int) {
	d.heading(periodHeading(p)...)
	packets := columns(abbreviated("class"), right("offered packets"), right("delivered packets"), wrapped("lost packets by cause"),
		right("loss"), right("rate"), right("outage"), left("objective"))
	delays := columns(abbreviated("class"), right("delay p50"), right("p95"), right("p99"), right("p99.9"), right("max"),
		right("PDV p99"), right("PDV p99.9"), right("IPDV p99"), right("jitter"))
	var misses [][]cell
	var worst []cell
	for _, c := range classes {
		if i >= len(c.Periods) {
			continue // an interrupted run may know fewer periods of a class
		}
		o := c.Periods[i]
		objective := cell{text: "-"}
		if o.Objective != nil {
			objective = met(o.Objective.Met)
			for _, m := range o.Objective.Misses {
				misses = append(misses, miss(c.Name, m))
			}
		}
		if o.WorstPair != "" {
			worst = append(worst, join(" ", name(c.Name), name(o.WorstPair)))
		}
		packets.add(name(c.Name), count(o.OfferedPackets, ""), count(o.DeliveredPackets, ""), losses(o.LostPackets),
			optional(o.LossRatio, result.UnitRatio), optional(o.ThroughputBps, result.UnitBps),
			optional(o.OutageS, result.UnitSeconds), objective)
		s := result.UnitSeconds
		delays.add(name(c.Name), optional(o.DelayS.P50, s), optional(o.DelayS.P95, s), optional(o.DelayS.P99, s),
			optional(o.DelayS.P999, s), optional(o.DelayS.Max, s), optional(o.PDVS.P99, s), optional(o.PDVS.P999, s),
			optional(o.IPDVS.P99, s), optional(o.JitterS, s))
	}
	d.grid(packets)
	d.grid(delays)
	d.transfers(classes, i)
	if worst != nil {
		d.line(word("worst pair: "), join(", ", worst...))
	}
	for _, m := range misses {
		d.line(m...)
	}
}

// transfers shows what closed-loop transports did in period number i.
func (d *doc) transfers(classes []result.Class, i int) {
	g := columns(abbreviated("class"), right("transfers"), right("complete"), right("time p50"), right("p95"), right("p99"), right("max"),
		right("goodput"), right("sent again"), right("time-outs"))
	for _, c := range classes {
		if i >= len(c.Periods) || c.Periods[i].Transfers == nil {
			continue
		}
		t, s := c.Periods[i].Transfers, result.UnitSeconds
		g.add(name(c.Name), count(t.Asked, ""), count(t.Complete, ""), optional(t.TimeS.P50, s), optional(t.TimeS.P95, s), optional(t.TimeS.P99, s),
			optional(t.TimeS.Max, s), optional(t.GoodputBps, result.UnitBps), count(t.ResentCount, ""), count(t.Timeouts, ""))
	}
	if len(g.rows) > 0 {
		d.grid(g)
	}
}

func miss(class string, m result.Miss) []cell {
	cells := []cell{word("MISSED by "), name(class), word(": " + figureName(m.Figure) + " "), number(m.Value, m.Unit),
		word(", limit "), limit(m.Limit, m.Unit)}
	if m.Aggregate != "" {
		cells = append(cells, word(" ("), name(m.Aggregate), word(")"))
	}
	return cells
}

func (d *doc) circuits(cs []result.Circuit) {
	if len(cs) == 0 {
		return
	}
	d.heading(word("CIRCUITS"))
	g := columns(abbreviated("circuit"), wrapped("route"), right("payload"), wrapped("state"), right("set-up time"),
		right("utilisation"), right("down time"))
	for _, c := range cs {
		state := name(c.State)
		if c.Reason != "" {
			state = join(": ", state, name(c.Reason))
		}
		g.add(name(c.Name), list(c.Route, " > "), number(c.PayloadBps, result.UnitBps), state,
			optional(c.SetUpS, result.UnitSeconds), optional(c.Utilisation, result.UnitRatio),
			number(c.DownS, result.UnitSeconds))
	}
	d.grid(g)
}

// ports shows the busiest first; those of unknown use come last.
func (d *doc) ports(ps []result.Port) {
	if len(ps) == 0 {
		return
	}
	ps = slices.Clone(ps)
	slices.SortStableFunc(ps, func(a, b result.Port) int { return cmp.Compare(busy(b), busy(a)) })
	d.heading(word("PORTS, busiest first"))
	g := columns(abbreviated("circuit"), abbreviated("from"), right("utilisation"), right("sent packets"),
		wrapped("lost packets by cause"), right("mean wait"), right("mean queue"), right("max queue"))
	for _, p := range ps[:min(len(ps), d.rows)] {
		longest := cell{text: "-"}
		if p.MaxQueueBytes != nil {
			longest = number(float64(*p.MaxQueueBytes), result.UnitBytes)
		}
		g.add(name(p.Circuit), name(p.From), optional(p.Utilisation, result.UnitRatio), count(p.SentPackets, ""),
			losses(p.LostPackets), optional(p.MeanWaitS, result.UnitSeconds),
			optional(p.MeanQueueBytes, result.UnitBytes), longest)
	}
	d.grid(g)
	d.rest(len(ps), "ports")
	d.opinions(ps)
}

func busy(p result.Port) float64 {
	if p.Utilisation == nil {
		return -1
	}
	return *p.Utilisation
}

func (d *doc) asked(as []result.Asked) {
	if len(as) == 0 {
		return
	}
	d.heading(word("ASKED AND MEASURED"))
	g := columns(wrapped("of"), left("figure"), right("asked"), right("measured"))
	for _, a := range as {
		g.add(name(a.Subject), word(figureName(a.Figure)), limit(a.Asked, a.Unit), optional(a.Measured, a.Unit))
	}
	d.grid(g)
}

func (d *doc) steps(ss []result.Step) {
	if len(ss) == 0 {
		return
	}
	d.heading(word("STEPS"))
	g := columns(left("act"), abbreviated("subject"), right("ordered at"), right("done at"), left("state"), wrapped("detail"))
	for _, s := range ss {
		g.add(name(s.Act), name(s.Subject), optionalInstant(s.OrderedS), optionalInstant(s.DoneS), name(s.State), name(s.Detail))
	}
	d.grid(g)
}

// demands lays out what became of requests for circuits.
func (d *doc) demands(ds []result.Demand) {
	if len(ds) == 0 {
		return
	}
	d.heading(word("REQUESTS FOR CIRCUITS"))
	g := columns(abbreviated("stream"), right("asked for"), right("blocked"), right("share blocked"), right("held at the end"))
	for _, x := range ds {
		g.add(name(x.Name), count(x.Offered, ""), count(x.Blocked, ""), number(x.BlockedRatio, result.UnitRatio), count(x.Active, ""))
	}
	d.grid(g)
}

func (d *doc) events(es []result.Event) {
	if len(es) == 0 {
		return
	}
	d.heading(word("EVENTS"))
	g := columns(right("at"), left("what"), wrapped("subject"), wrapped("detail"))
	together := alike(es)
	for _, e := range together[:min(len(together), eventRows*d.rows)] {
		g.add(instant(e.AtS), name(e.What), name(e.Subject), name(e.Detail))
	}
	d.grid(g)
	if n := len(together) - eventRows*d.rows; n > 0 {
		d.line(word("and "), count(int64(n), ""), word(" more lines; --format json or csv has all"))
	}
}

// eventRows is how many lines of events stand for one row of the limit: a cut
// and its repair take some fifty.
const eventRows = 3

// alike makes one line of what befell several subjects alike, at one instant
// and with the same detail, such as every circuit over one fibre.
func alike(es []result.Event) []result.Event {
	var out []result.Event
	from := 0 // first line of the instant
	for _, e := range es {
		if from < len(out) && out[from].AtS != e.AtS {
			from = len(out)
		}
		i := from
		for ; i < len(out) && (out[i].What != e.What || out[i].Detail != e.Detail); i++ {
		}
		if i < len(out) {
			out[i].Subject += ", " + e.Subject
			continue
		}
		out = append(out, e)
	}
	return out
}
