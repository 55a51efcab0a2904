package page

import (
	"fmt"
	"strings"

	"ferrule/cmd/ferrule/internal/table"
	"ferrule/scenarios/result"
)

// runPart says what one run amounts to.
func runPart(r *result.Run) part {
	p := part{Plan: r.Plan, Blocks: table.Blocks(r, everything), Cost: priceOf(&r.Price)}
	for _, x := range r.Periods {
		p.Heads = append(p.Heads, upper(x))
	}
	p.Heads = append(p.Heads, "limits")
	var met, missed, open []string
	for i := range r.Classes {
		c := &r.Classes[i]
		x := row{Class: c.Name}
		misses, said := 0, len(c.Limits) > 0
		for k := range c.Periods {
			o := &c.Periods[k]
			x.Cells = append(x.Cells, outcomeCell(o, p.Heads[k]))
			if o.Objective == nil {
				continue
			}
			misses += len(o.Objective.Misses)
			said = said && o.Objective.Met != nil
			for _, m := range o.Objective.Misses {
				x.miss(o.Period, m.Figure, table.Number(m.Value, m.Unit), table.Bound(m.Limit, m.Unit), m.Aggregate)
			}
		}
		switch {
		case len(c.Limits) == 0:
			x.Chip, x.Style = "no limits", "same"
		case misses > 0:
			x.Chip, x.Style = "▼ misses", "worse"
			missed = append(missed, c.Name)
		case said:
			x.Chip, x.Style = "▲ keeps all", "better"
			met = append(met, c.Name)
		default:
			x.Chip, x.Style = "? undecided", "undecided"
			open = append(open, c.Name)
		}
		p.Rows = append(p.Rows, x)
	}
	p.Sentences = []string{limitSentence(r.Plan, met, missed, open), "One seed says nothing about chance: compare and batch do."}
	p.log(r)
	return p
}

func (x *row) miss(period, figure string, value, limit table.Cell, who string) {
	text := fmt.Sprintf("MISSED: %s %s %s, limit %s", strings.ToUpper(period), table.FigureName(figure), value.Text, limit.Text)
	if who != "" {
		text += " (" + who + ")"
	}
	x.Limits = append(x.Limits, said{"missed", text})
}

func limitSentence(plan string, met, missed, open []string) string {
	var parts []string
	if len(missed) > 0 {
		parts = append(parts, list(missed)+" "+verb(missed, "misses a limit", "miss limits"))
	}
	if len(met) > 0 {
		parts = append(parts, list(met)+" "+verb(met, "keeps every limit", "keep every limit"))
	}
	if len(open) > 0 {
		parts = append(parts, "of "+list(open)+" too little was sent to decide every limit")
	}
	if len(parts) == 0 {
		return "Under " + plan + " no class has a limit."
	}
	return "Under " + plan + ", " + strings.Join(parts, "; ") + "."
}

// outcomeCell shows the loss and the tail of the delay of a class in a period.
func outcomeCell(o *result.Outcome, head string) gain {
	g := gain{Head: head, Note: "nothing was sent"}
	switch d := &o.DelayS; {
	case d.P99 != nil:
		g.Figure, g.Move = "delay p99", []table.Cell{table.Number(*d.P99, result.UnitSeconds)}
	case d.Max != nil:
		g.Figure, g.Move = "greatest delay", []table.Cell{table.Number(*d.Max, result.UnitSeconds)}
	default:
		return g
	}
	g.Note = ""
	if o.LossRatio != nil {
		g.Sure = table.Number(*o.LossRatio, result.UnitRatio)
		g.Sure.Text = "lost " + g.Sure.Text
	}
	if o.OutageS != nil && *o.OutageS > 0 {
		out := table.Number(*o.OutageS, result.UnitSeconds)
		out.Text = "silent for " + out.Text
		g.Sure = figures(", ", g.Sure, out)
	}
	return g
}

func priceOf(x *result.Price) []cost {
	out := []cost{
		{"slots held", table.Count(x.Slots, ""), ""}, {"slot-kilometres", table.Number(x.SlotKm, result.UnitSlotKm), ""},
		{"router ports", table.Count(x.Ports, ""), ""},
	}
	if x.Tightest != nil {
		out = append(out, cost{"free on the tightest fibre", table.Count(x.Tightest.FreeSlots, result.UnitSlots), x.Tightest.Fibre})
	}
	return out
}

// batchPart says what a batch amounts to.
func batchPart(b *result.Batch) part {
	p := part{Plan: b.Plan, Blocks: table.Blocks(b, everything), Cost: priceOf(&b.Price)}
	for _, x := range b.Periods {
		p.Heads = append(p.Heads, upper(x))
	}
	p.Heads = append(p.Heads, "limits")
	var met, missed, open []string
	for _, class := range classesOf(b) {
		x := row{Class: class}
		misses, said, limits := 0, true, 0
		for k, period := range b.Periods {
			x.Cells = append(x.Cells, meanCell(b, class, period.Name, p.Heads[k]))
			for _, m := range b.Figures {
				if m.Class != class || m.Period != period.Name || m.Limit == nil {
					continue
				}
				limits++
				switch {
				case m.Met == nil:
					said = false
				case !*m.Met:
					misses++
					value := table.Cell{Text: "–"}
					if m.Mean != nil {
						value = table.Number(*m.Mean, m.Unit)
					}
					x.miss(m.Period, m.Figure, value, table.Bound(*m.Limit, m.Unit), m.WorstPair)
				}
			}
		}
		switch {
		case limits == 0:
			x.Chip, x.Style = "no limits", "same"
		case misses > 0:
			x.Chip, x.Style = "▼ misses", "worse"
			missed = append(missed, class)
		case said:
			x.Chip, x.Style = "▲ keeps all", "better"
			met = append(met, class)
		default:
			x.Chip, x.Style = "? undecided", "undecided"
			open = append(open, class)
		}
		p.Rows = append(p.Rows, x)
	}
	p.Sentences = []string{limitSentence(b.Plan, met, missed, open),
		fmt.Sprintf("Figures are means over %d seeds; ± is the interval of %g %% confidence.", len(b.Seeds), b.Confidence*100)}
	if len(b.Runs) > 0 {
		p.log(b.Runs[0])
	}
	return p
}

func classesOf(b *result.Batch) []string {
	var out []string
	for _, m := range b.Figures {
		if n := len(out); n == 0 || out[n-1] != m.Class {
			out = append(out, m.Class)
		}
	}
	return out
}

// meanCell shows the tail of the delay of a class in a period, or its mean.
func meanCell(b *result.Batch, class, period, head string) gain {
	for _, id := range []string{result.FigDelayP99, result.FigDelayMean} {
		for _, m := range b.Figures {
			if m.Class == class && m.Period == period && m.Figure == id && m.Mean != nil {
				return gain{Head: head, Figure: table.FigureName(id), Move: []table.Cell{table.Number(*m.Mean, m.Unit)}, Sure: table.Interval(m.Interval, m.Unit)}
			}
		}
	}
	return gain{Head: head, Note: "nothing was sent"}
}
