package table

import (
	"strconv"
	"strings"

	"ferrule/scenarios/result"
)

// family says how the verdicts of a plan are guarded against chance, and
// shows what stands behind each.
func (d *doc) family(p result.Compared) {
	f := p.Family
	if f.Method == "" {
		return
	}
	d.heading(word("EVIDENCE, the family of figures with an objective"))
	d.line(count(f.Figures, "figures"), word(" judged together by the procedure of "), name(f.Method), word("; "),
		count(f.Still, "more"), word(" identical in every seed; least p so many seeds can show "), number(f.LeastP, ""),
		word("; seeds needed for a verdict: "), count(f.Seeds, ""), word(" in the family, "), count(f.Loose, ""), word(" outside it"))
	g := columns(abbreviated("class"), left("period"), left("figure"), right("p"), right("p, family"), right("p same"),
		right("correlation"), right("pairing"), right("more seeds"), left("verdict"))
	for _, x := range p.Figures {
		if x.PFamily != nil {
			g.add(name(x.Class), name(x.Period), word(figureName(x.Figure)), plainNumber(x.P), plainNumber(x.PFamily), plainNumber(x.PSame),
				plainNumber(x.Correlation), timesAsMany(x.PairingGain), optionalCount(x.MoreSeeds), verdict(x.Verdict))
		}
	}
	d.grid(g)
}

// plainNumber shows a number without a unit, to two digits.
func plainNumber(v *float64) cell {
	if v == nil {
		return cell{text: "-"}
	}
	return cell{text: digits(*v, 2), values: []float64{*v}}
}

// timesAsMany shows how many times the seeds it would take.
func timesAsMany(v *float64) cell {
	c := plainNumber(v)
	if v != nil {
		c.text += " x"
	}
	return c
}

func optionalCount(n *int64) cell {
	if n == nil {
		return cell{text: "-"}
	}
	return count(*n, "")
}

// gates shows how the objectives stand, with confidence.
func (d *doc) gates(gs []result.Gate) {
	for i, g := range gs {
		if i == 0 {
			d.heading(word("OBJECTIVES, at "), limit(g.Confidence, result.UnitRatio), word(" confidence"))
		}
		d.line(name(g.Plan), word(": "), standing(g.Standing))
		t := columns(abbreviated(""), left(""), left(""), left(""), wrapped(""))
		for _, h := range g.Holds {
			if h.Standing != result.Met {
				t.add(join("  ", word(""), name(h.Class)), name(strings.ToUpper(h.Period)), word(figureName(h.Figure)), standing(h.Standing), name(h.Text))
			}
		}
		d.grid(t)
	}
}

func standing(s result.Standing) cell {
	switch s {
	case result.Met:
		return toned(word("met"), good)
	case result.Missed:
		return toned(word("MISSED"), bad)
	case result.Open:
		return word("undecided")
	default:
		panic("table: unknown standing " + strconv.Quote(string(s)))
	}
}

// within shows what one run says of its own precision.
func (d *doc) within(r *result.Run) {
	if r.WarmUpFound {
		d.line(word("the end of the warm-up was found from the run itself"))
	}
	if len(r.Within) == 0 {
		return
	}
	d.heading(word("WITHIN THIS RUN, mean delay by means of batches"))
	g := columns(abbreviated("class"), abbreviated("period"), right("mean delay"), right("interval"), right("batches"), right("lag-1"),
		wrapped("no interval because"))
	for _, w := range r.Within {
		g.add(name(w.Class), name(w.Period), optional(w.MeanS, result.UnitSeconds), interval(w.Interval, result.UnitSeconds),
			count(w.Batches, ""), plainNumber(w.Lag1), name(w.Refused))
	}
	d.grid(g)
}

// opinions sets the waits of ports beside those that theory predicts.
func (d *doc) opinions(ps []result.Port) {
	g := columns(abbreviated("circuit"), abbreviated("from"), right("mean wait"), right("theory"), right("ceiling"), right("gaps"), right("services"),
		wrapped("they part because"))
	for _, p := range ps[:min(len(ps), d.rows)] {
		if t := p.Theory; t != nil {
			s := result.UnitSeconds
			g.add(name(p.Circuit), name(p.From), optional(p.MeanWaitS, s), number(t.WaitS, s), number(t.CeilingS, s),
				plainNumber(&t.GapCoV2), plainNumber(&t.ServiceCoV2), name(t.Because))
		}
	}
	if len(g.rows) == 0 {
		return
	}
	d.heading(word("SECOND OPINION, mean waits by queueing theory from what each port measured"))
	d.grid(g)
	d.line(word("Theory: as if packets came at random. Ceiling: with any independent gaps. Gaps, services: squared variation."))
}
