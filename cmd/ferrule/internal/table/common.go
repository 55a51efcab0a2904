package table

import (
	"slices"
	"strings"

	"ferrule/scenarios/result"
)

// definitions names what the figures mean, under every report of a run.
var definitions = []string{
	"Delay: from the whole packet standing at the ingress router to its last bit leaving the egress router.",
	"PDV: RFC 5481, above the aggregate's least delay in the period. IPDV: RFC 3393. Jitter: RFC 3550.",
}

func (d *doc) definitions() {
	for _, s := range definitions {
		d.line(word(s))
	}
}

// cautions ends a report: what stands under every report, then what the study
// added.
func (d *doc) cautions(cs []string) {
	d.heading(word("CAUTIONS"))
	standing := result.StandingCautions()
	for _, s := range standing {
		d.line(word(s))
	}
	for _, s := range cs {
		if !slices.Contains(standing, s) {
			d.line(name(s))
		}
	}
}

// title opens a report.
func (d *doc) title(what string, h result.Head, rest ...cell) {
	cells := append([]cell{word(what + " of scenario "), name(h.Scenario)}, rest...)
	d.heading(append(cells, word(", length "), span(h.LengthS), word(", warm-up "), span(h.WarmUpS))...)
	if h.Partial {
		d.line(word("PARTIAL: interrupted; what follows is what was known by then, no more"))
	}
}

// periodHeading names a period and when it was.
func periodHeading(p result.Period) []cell {
	cells := []cell{word(strings.ToUpper(p.Name)), word("  from "), span(p.FromS), word(" to "), span(p.ToS)}
	cells[0].name = true
	if p.Act != "" {
		cells = append(cells, word(": "), name(p.Act))
	}
	if p.Unsettled {
		cells = append(cells, word(" (not settled by its end)"))
	}
	return cells
}

// audit shows the account of packets and slots.
func (d *doc) audit(a result.Audit) {
	outcome := "holds"
	if !a.OK {
		outcome = "FAILS"
	}
	if a.CopyPackets == 0 && a.DuplicatePackets == 0 && a.DiscardedCopiesPackets == 0 {
		d.line(word("audit: "), count(a.OfferedPackets, "packets"), word(" offered = "),
			count(a.DeliveredPackets, ""), word(" delivered + lost ("), losses(a.LostPackets), word(") + "),
			count(a.InsidePackets, ""), word(" inside: "+outcome))
	} else {
		d.line(word("audit: "), count(a.OfferedPackets, "packets"), word(" offered + "),
			count(a.CopyPackets, ""), word(" copies = "), count(a.DeliveredPackets, ""), word(" delivered + "),
			count(a.DiscardedCopiesPackets, ""), word(" discarded copies + "), count(a.DuplicatePackets, ""),
			word(" duplicates + lost ("), losses(a.LostPackets), word(") + "), count(a.InsidePackets, ""),
			word(" inside: "+outcome))
	}
	d.line(word("audit: "), count(a.SlotsOwned, "slots"), word(" owned by circuits, "), count(a.SlotsUsed, "slots"),
		word(" in use on fibres; Little's law checked at "), count(a.LittlePorts, "ports"))
	for _, f := range a.Failures {
		d.line(word("audit FAILED: "), name(f))
	}
}

// price shows what a plan holds, on one line.
func (d *doc) price(p result.Price) {
	cells := []cell{word("price: "), count(p.Slots, "slots"), word(", "), number(p.SlotKm, result.UnitSlotKm),
		word(", "), count(p.Ports, "router ports")}
	cells = append(cells, freed(p.TransitFreed)...)
	d.line(append(cells, tightest("; tightest fibre ", p.Tightest)...)...)
}

func freed(ss []result.SiteRate) []cell {
	if len(ss) == 0 {
		return nil
	}
	cells := []cell{word("; transit freed: ")}
	for i, s := range ss {
		if i > 0 {
			cells = append(cells, word(", "))
		}
		cells = append(cells, name(s.Site), word(" "), number(s.Bps, result.UnitBps))
	}
	return cells
}

func tightest(before string, t *result.Tightest) []cell {
	if t == nil {
		return nil
	}
	return []cell{word(before), name(t.Fibre), word(" with "), count(t.FreeSlots, "slots"), word(" free")}
}

// list joins names.
func list(ss []string, sep string) cell {
	cells := make([]cell, len(ss))
	for i, s := range ss {
		cells[i] = name(s)
	}
	c := join(sep, cells...)
	if c.text == "" {
		c.text = "-"
	}
	return c
}

// rest says how many rows of a list of n are not shown.
func (d *doc) rest(n int, what string) {
	if n > d.rows {
		d.line(word("and "), count(int64(n-d.rows), ""), word(" more "+what+"; --format json or csv has all"))
	}
}

// defaults lists the values the scenario did not give.
func (d *doc) defaults(ds []result.Default) {
	if len(ds) == 0 {
		return
	}
	d.heading(word("DEFAULTS (not given in the scenario)"))
	g := columns(wrapped("key"), wrapped("value"))
	for _, e := range ds {
		g.add(name(e.Key), name(e.Value))
	}
	d.grid(g)
}
