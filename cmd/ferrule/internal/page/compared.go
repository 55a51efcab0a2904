package page

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"ferrule/cmd/ferrule/internal/table"
	"ferrule/scenarios/result"
)

// comparedPart says what plan i of a comparison amounts to.
func comparedPart(c *result.Comparison, i int) part {
	plan := &c.Plans[i]
	p := part{No: i + 1, Plan: plan.Plan}
	only := *c
	only.Plans, only.Runs = []result.Compared{*plan}, nil
	p.Blocks = table.Blocks(&only, everything)
	periods := spoken(plan)
	for _, x := range periods {
		p.Heads = append(p.Heads, upper(x))
	}
	p.Heads = append(p.Heads, "limits")
	for _, v := range plan.Verdicts {
		p.Rows = append(p.Rows, comparedRow(plan, v, periods))
	}
	p.Cost = costOf(c.Base, &plan.Price)
	p.Sentences = []string{verdictSentence(plan), costSentence(c, plan)}
	if len(c.Runs) > i+1 {
		p.Changes = changes(c.Runs[0], c.Runs[i+1])
		p.log(c.Runs[i+1])
	}
	return p
}

// spoken lists the periods that figures speak of, normal ones first.
func spoken(plan *result.Compared) []result.Period {
	var out []result.Period
	for _, kind := range result.PeriodKinds() {
		for _, p := range plan.Periods {
			if p.Kind == kind && slices.ContainsFunc(plan.Figures, func(d result.Difference) bool { return d.Period == p.Name }) {
				out = append(out, p)
			}
		}
	}
	return out
}

func verdictSentence(plan *result.Compared) string {
	words := []struct{ style, one, several string }{
		{"better", "gets better", "get better"}, {"worse", "gets worse", "get worse"},
		{"mixed", "gains in one period and loses in another", "gain in one period and lose in another"},
		{"undecided", "is undecided", "are undecided"}, {"same", "stays as it is", "stay as they are"},
	}
	var parts []string
	for _, w := range words {
		var names []string
		for _, v := range plan.Verdicts {
			if _, style := chip(v.Verdict); style == w.style {
				names = append(names, v.Class)
			}
		}
		if len(names) > 0 {
			parts = append(parts, list(names)+" "+verb(names, w.one, w.several))
		}
	}
	if len(parts) == 0 {
		return "Nothing is decided."
	}
	return "With " + plan.Plan + ", " + strings.Join(parts, "; ") + "."
}

func costSentence(c *result.Comparison, plan *result.Compared) string {
	x := &plan.Price
	what := fmt.Sprintf("It takes %s and %s.", more(x.Slots, "slot"), more(x.Ports, "router port"))
	if x.Slots == 0 && x.Ports == 0 {
		what = "It takes no slot and no router port more."
	}
	if len(c.Seeds) < 2 {
		return what + " One seed says nothing about chance."
	}
	return fmt.Sprintf("%s Changes are means over %d seeds under the same traffic; ± is the interval of %g %% confidence.", what, len(c.Seeds), c.Confidence*100)
}

func more(n int64, what string) string {
	word := "more"
	if n < 0 {
		n, word = -n, "fewer"
	}
	s := "s"
	if n == 1 {
		s = ""
	}
	return fmt.Sprintf("%d %s%s %s", n, what, s, word)
}

func costOf(base string, x *result.PriceChange) []cost {
	signed := func(n int64, unit string) table.Cell {
		c := table.Change(float64(n), nil, unit)
		return c
	}
	out := []cost{
		{"slots", signed(x.Slots, result.UnitSlots), fmt.Sprintf("%d under %s, %d now", x.Base.Slots, base, x.Plan.Slots)},
		{"slot-kilometres", table.Change(x.SlotKm, nil, result.UnitSlotKm), table.Number(x.Base.SlotKm, result.UnitCount).Text + " under " + base},
		{"router ports", signed(x.Ports, result.UnitPorts), fmt.Sprintf("%d under %s", x.Base.Ports, base)},
	}
	if t := x.Plan.Tightest; t != nil {
		out = append(out, cost{"free on the tightest fibre", table.Count(t.FreeSlots, result.UnitSlots), t.Fibre})
	}
	var most *result.SiteRate
	for i := range x.TransitFreed {
		if s := &x.TransitFreed[i]; most == nil || s.Bps > most.Bps {
			most = s
		}
	}
	if most != nil && most.Bps > 0 {
		out = append(out, cost{"transit freed, most at", table.Number(most.Bps, result.UnitBps), most.Site})
	}
	return out
}

func chip(v result.Verdict) (word, style string) {
	switch v {
	case result.Better:
		return "▲ better", "better"
	case result.Worse:
		return "▼ worse", "worse"
	case result.Same:
		return "= the same", "same"
	case result.Mixed:
		return "▲▼ mixed", "mixed"
	case result.Undecided, "":
		return "? undecided", "undecided"
	default:
		panic("page: unknown verdict " + string(v))
	}
}

// limitsOf counts the limits of a class that a plan misses.
func limitsOf(plan *result.Compared, v result.ClassVerdict) said {
	limits, missed, fresh := 0, 0, 0
	for _, d := range plan.Figures {
		if d.Class != v.Class || d.Limit == nil {
			continue
		}
		limits++
		if d.PlanMet != nil && !*d.PlanMet {
			missed++
			if d.BaseMet != nil && *d.BaseMet {
				fresh++
			}
		}
	}
	switch {
	case limits == 0:
		return said{"", "no limits"}
	case fresh > 0:
		return said{"missed", fmt.Sprintf("misses %d of %d, %d newly", missed, limits, fresh)}
	case missed > 0:
		return said{"missed", fmt.Sprintf("misses %d of %d, none newly", missed, limits)}
	case v.PlanMet != nil && *v.PlanMet:
		return said{"met", "keeps all limits"}
	default:
		return said{"", "not all decided"}
	}
}

func comparedRow(plan *result.Compared, v result.ClassVerdict, periods []result.Period) row {
	r := row{Class: v.Class}
	r.Chip, r.Style = chip(v.Verdict)
	met, missed := []string{}, []string{}
	for _, p := range periods {
		var figures []result.Difference
		for _, d := range plan.Figures {
			if d.Class != v.Class || d.Period != p.Name {
				continue
			}
			figures = append(figures, d)
			if d.Limit == nil || d.PlanMet == nil {
				continue
			}
			what := strings.ToUpper(p.Name) + " " + table.FigureName(d.Figure)
			changed := d.BaseMet != nil && *d.BaseMet != *d.PlanMet
			switch {
			case !*d.PlanMet && changed:
				missed = append(missed, what+" (was met)")
			case !*d.PlanMet:
				missed = append(missed, what)
			case changed:
				met = append(met, what)
			}
		}
		r.Cells = append(r.Cells, telling(figures, upper(p)))
	}
	if len(missed) > 0 {
		r.Limits = append(r.Limits, said{"missed", "MISSED: " + strings.Join(missed, ", ")})
	}
	if len(met) > 0 {
		r.Limits = append(r.Limits, said{"met", "now met: " + strings.Join(met, ", ")})
	}
	if len(r.Limits) == 0 {
		switch {
		case v.PlanMet != nil && *v.PlanMet:
			r.Limits = []said{{"met", "all met"}}
		case slices.ContainsFunc(plan.Figures, func(d result.Difference) bool { return d.Class == v.Class && d.Limit != nil }):
			r.Limits = []said{{"", "none missed, not all decided: too few packets"}}
		default:
			r.Limits = []said{{"", "it has none"}}
		}
	}
	return r
}

// telling picks the figure of a class and period that says most: one whose
// limit is met under one plan only, else the loss, outage, delay or variation
// that changes by the largest factor.
func telling(figures []result.Difference, head string) gain {
	g := gain{Head: head, Note: "no difference that matters"}
	best, score := -1, 0.0
	for i, d := range figures {
		if d.Verdict != result.Better && d.Verdict != result.Worse || d.Base == nil || d.Plan == nil || d.Difference == nil {
			continue
		}
		s := math.Abs(math.Log((*d.Plan+1e-9)/(*d.Base+1e-9))) + 1e-3
		switch d.Figure {
		case result.FigThroughput, result.FigReordered, result.FigDelayMean:
			s *= 1e-3
		}
		if d.Limit != nil {
			s *= 3
		}
		if d.Kind == result.Hit && (d.Figure == result.FigLoss || d.Figure == result.FigOut) {
			s *= 3 // what a fault is about
		}
		if d.BaseMet != nil && d.PlanMet != nil && *d.BaseMet != *d.PlanMet {
			s += 100
		}
		if s > score {
			best, score = i, s
		}
	}
	if best < 0 {
		return g
	}
	d := figures[best]
	a, b := table.Pair(*d.Base, *d.Plan, d.Unit)
	sign, tone := "▲", "good"
	if d.Verdict == result.Worse {
		sign, tone = "▼", "bad"
	}
	return gain{Head: head, Sign: sign, Tone: tone, Figure: table.FigureName(d.Figure), Move: []table.Cell{a, b}, Sure: table.Change(*d.Difference, d.Interval, d.Unit)}
}

func matrixOf(c *result.Comparison) *matrix {
	m := &matrix{}
	for i := range c.Plans {
		m.Plans = append(m.Plans, c.Plans[i].Plan)
	}
	for _, first := range c.Plans[0].Verdicts {
		r := matrixRow{Class: first.Class}
		for i := range c.Plans {
			var cell row
			cell.Chip, cell.Style = "–", ""
			for _, v := range c.Plans[i].Verdicts {
				if v.Class != first.Class {
					continue
				}
				cell.Chip, cell.Style = chip(v.Verdict)
				cell.Limits = []said{limitsOf(&c.Plans[i], v)}
			}
			r.Chips = append(r.Chips, cell)
		}
		m.Rows = append(m.Rows, r)
	}
	rows := []matrixCost{{What: "slots more"}, {What: "slot-km more"}, {What: "router ports more"}}
	for i := range c.Plans {
		x := &c.Plans[i].Price
		for k, v := range []struct {
			n    float64
			unit string
		}{{float64(x.Slots), result.UnitCount}, {x.SlotKm, result.UnitCount}, {float64(x.Ports), result.UnitCount}} {
			rows[k].Cells = append(rows[k].Cells, table.Change(v.n, nil, v.unit))
		}
	}
	m.Cost = rows
	return m
}

// changes says in what the networks of two runs differ.
func changes(base, plan *result.Run) []string {
	var out []string
	find := func(r *result.Run, name string) *result.Circuit {
		for i := range r.Circuits {
			if r.Circuits[i].Name == name {
				return &r.Circuits[i]
			}
		}
		return nil
	}
	size := func(c *result.Circuit) string {
		if c.Slots == nil {
			return "a whole channel"
		}
		if *c.Slots == 1 {
			return "1 slot"
		}
		return fmt.Sprintf("%d slots", *c.Slots)
	}
	for i := range plan.Circuits {
		c := &plan.Circuits[i]
		old := find(base, c.Name)
		switch {
		case (old == nil || len(old.Turns) == 0) && len(c.Turns) > 0:
			out = append(out, fmt.Sprintf("Circuit %s is new, between %s: %s on %s; recovery: %s; at the end %s.",
				c.Name, list(c.Ends), size(c), list(c.Turns[0].Fibres), c.Recovery, c.State))
		case old != nil && size(old) != size(c):
			out = append(out, fmt.Sprintf("Circuit %s has another size (%s, was %s).", c.Name, size(c), size(old)))
		case old != nil && !slices.Equal(old.Fibres, c.Fibres):
			out = append(out, fmt.Sprintf("Circuit %s ends on another way: %s.", c.Name, list(c.Fibres)))
		}
	}
	for i := range base.Circuits {
		if c := &base.Circuits[i]; len(c.Turns) > 0 && find(plan, c.Name) == nil {
			out = append(out, "Circuit "+c.Name+" is gone.")
		}
	}
	for i := range plan.Aggregates {
		a := &plan.Aggregates[i]
		for j := range base.Aggregates {
			if b := &base.Aggregates[j]; b.Name == a.Name && !slices.Equal(b.CarriedBy, a.CarriedBy) {
				was := "the routed network"
				if len(b.CarriedBy) > 0 {
					was = list(b.CarriedBy)
				}
				now := "the routed network"
				if len(a.CarriedBy) > 0 {
					now = list(a.CarriedBy)
				}
				out = append(out, fmt.Sprintf("Aggregate %s (%s, %s to %s) is carried by %s at the end; under %s it is by %s.", a.Name, a.Class, a.From, a.To, now, base.Plan, was))
			}
		}
	}
	if len(out) == 0 {
		out = append(out, "Nothing in the network differs at the end of the run.")
	}
	return out
}
