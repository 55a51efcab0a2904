package table

import (
	"strconv"

	"ferrule/scenarios/result"
)

// check lays out what can be said before a run: findings, loads, candidates,
// estimate, defaults.
func (d *doc) check(c *result.Check) {
	d.title("Check", c.Head, word(": plan "), name(c.Plan))
	d.links(c.Links)
	d.calibration(c.Measured)
	d.findings(c.Findings)
	d.candidates(c.Candidates)
	d.heading(word("ESTIMATE"))
	e := c.Estimate
	cells := []cell{word("one run takes about "), number(e.PacketHops, "packet-hops"), word(", "),
		number(e.MemoryBytes, result.UnitBytes), word(" of memory")}
	if e.WallS != nil {
		cells = append(cells, word(" and "), number(*e.WallS, result.UnitSeconds), word(" on this machine"))
	}
	d.line(cells...)
	d.defaults(c.Defaults)
	if len(c.Cautions) > 0 {
		d.heading(word("CAUTIONS"))
		for _, s := range c.Cautions {
			d.line(name(s))
		}
	}
}

func (d *doc) links(ls []result.Link) {
	if len(ls) == 0 {
		return
	}
	d.heading(word("LINKS, load as routed"))
	g := columns(abbreviated("circuit"), abbreviated("from"), abbreviated("to"), right("load"), right("payload"),
		right("normal"), right("worst failure"), abbreviated("cut of"), right("room to grow"))
	for _, l := range ls {
		g.add(name(l.Circuit), name(l.From), name(l.To), number(l.LoadBps, result.UnitBps),
			number(l.PayloadBps, result.UnitBps), use(l.Utilisation), use(l.WorstUtilisation), name(l.WorstFibre),
			factor(l.GrowthLeft))
	}
	d.grid(g)
	d.line(word("normal and worst failure: share of the payload, nothing broken and after the worst single fibre cut;"),
		word(" room to grow: factor on all loads that fills the link"))
}

// use shows a utilisation; more than the whole is marked.
func use(u *float64) cell {
	c := optional(u, result.UnitRatio)
	if u != nil && *u > 1 {
		c.tone = bad
	}
	return c
}

// factor shows a multiple.
func factor(v *float64) cell {
	if v == nil {
		return cell{text: "-"}
	}
	return cell{text: "x " + strconv.FormatFloat(*v, 'f', 2, 64), values: []float64{*v}}
}

func (d *doc) findings(fs []result.Finding) {
	d.heading(word("FINDINGS"))
	if len(fs) == 0 {
		d.line(word("none"))
		return
	}
	g := columns(left("severity"), abbreviated("subject"), wrapped("finding"))
	for _, f := range fs {
		s := name(string(f.Severity))
		if f.Severity == result.Fault {
			s.tone = bad
		}
		g.add(s, name(f.Subject), name(f.Text))
	}
	d.grid(g)
}

func (d *doc) candidates(cs []result.Candidate) {
	if len(cs) == 0 {
		return
	}
	d.heading(word("CANDIDATES for a circuit of their own"))
	load := columns(abbreviated("aggregate"), abbreviated("class"), abbreviated("from"), abbreviated("to"), right("load"),
		right("routers passed"), wrapped("share of their transit"))
	gain := columns(abbreviated("aggregate"), right("slots needed"), right("free slots"), wrapped("best way"),
		right("ports freed"), right("transit freed"))
	for _, c := range cs {
		shares := make([]cell, len(c.Transit))
		for i, s := range c.Transit {
			shares[i] = join(" ", name(s.Site), number(s.Share, result.UnitRatio))
		}
		share := join(", ", shares...)
		if share.text == "" {
			share.text = "-"
		}
		load.add(name(c.Aggregate), name(c.Class), name(c.From), name(c.To), number(c.Bps, result.UnitBps),
			count(c.RoutersPassed, ""), share)
		free := cell{text: "-"}
		if c.FreeSlots != nil {
			free = count(*c.FreeSlots, "")
		}
		gain.add(name(c.Aggregate), count(c.SlotsNeeded, ""), free, list(c.BestWay, " > "), count(c.PortsFreed, ""),
			number(c.TransitFreedBps, result.UnitBps))
	}
	d.grid(load)
	d.grid(gain)
	d.line(word("slots needed: filled to 80 % at most; free slots: on the best way"))
}
