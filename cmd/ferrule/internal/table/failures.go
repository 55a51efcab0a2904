package table

import (
	"math"
	"strconv"
	"strings"

	"ferrule/scenarios/result"
)

// classesAbreast is how many classes stand side by side in a matrix.
const classesAbreast = 5

// failures lays out what single failures do: what hurts each class most and
// what a year costs, then for each plan the matrices of failures and classes.
func (d *doc) failures(r *result.Failures) {
	d.title("Failures", r.Head, word(": load "), number(r.Scale, result.UnitRatio))
	d.line(word("each thing fails at "), span(r.AtS), word(" of a run and is watched for "), span(r.AfterS), word("; "),
		count(r.Runs, "runs"), word(" in all; packets lost are means over the seeds"))
	d.yearly(r)
	for i := range r.Plans {
		p := &r.Plans[i]
		for from := 0; from < len(r.Classes); from += classesAbreast {
			classes := r.Classes[from:min(from+classesAbreast, len(r.Classes))]
			d.lostTo(p, classes, from)
			d.outages(p, classes, from)
			d.missedAfter(p, classes, from)
		}
		d.cutOff(p)
	}
	d.heading(word("AUDIT, summed over all runs"))
	d.audit(r.Audit)
	d.defaults(r.Defaults)
	d.cautions(r.Cautions)
}

// yearly sets plans beside each other, class by class.
func (d *doc) yearly(r *result.Failures) {
	most := columns(abbreviated("class"), abbreviated("plan"), abbreviated("hurt most by"), right("packets lost"))
	cost := columns(abbreviated("class"), abbreviated("plan"), right("out"), right("availability"), right("below objective"),
		abbreviated("worst aggregate"), right("out"))
	rated := false
	for c := range r.Classes {
		for i := range r.Plans {
			y := &r.Plans[i].Classes[c]
			most.add(name(y.Class), name(r.Plans[i].Plan), name(y.HurtMostBy), mean(y.LostPackets))
			cost.add(name(y.Class), name(r.Plans[i].Plan), minutes(y.Lost), available(y.Availability), minutes(y.Below),
				name(y.WorstPair), minutes(y.WorstLost))
			rated = rated || y.Lost != nil
		}
	}
	d.heading(word("WHAT HURTS EACH CLASS MOST"))
	d.grid(most)
	if !rated {
		return
	}
	d.heading(word("A YEAR of single cuts, "), number(r.CutsPerY, ""), word(" per km, each repaired after "), minutes(&r.RepairS))
	d.grid(cost)
	d.line(word("mean over the aggregates of a class, by load; out: nothing arrives;" +
		" below objective: it arrives, and misses until the repair what it keeps when nothing fails"))
}

// mean shows a mean number of packets: as a count where it is large.
func mean(v float64) cell {
	if v >= 100 {
		return cell{text: group(strconv.FormatFloat(v, 'f', 0, 64)), values: []float64{v}}
	}
	return number(v, "")
}

// minutes shows a time in minutes where it is one or more.
func minutes(v *float64) cell {
	if v == nil {
		return cell{text: "-"}
	}
	if *v < 60 {
		return number(*v, result.UnitSeconds)
	}
	return scaled(*v, result.UnitSeconds, scale{60, "min"})
}

// available shows an availability with as many digits as tell it from 1.
func available(v *float64) cell {
	if v == nil {
		return cell{text: "-"}
	}
	decimals := 2
	if out := 100 * (1 - *v); out > 0 && out < 1 {
		decimals = min(2+int(-math.Log10(out)), 9)
	}
	return cell{text: strconv.FormatFloat(100**v, 'f', decimals, 64) + " %", values: []float64{*v}}
}

// lostTo is the matrix of packets lost.
func (d *doc) lostTo(p *result.FailuresPlan, classes []string, from int) {
	d.heading(word("PACKETS LOST under "), name(p.Plan), word(": what hurts the highest class most comes first"))
	g := columns(right("rank"), abbreviated("failure"), right("length"))
	for _, c := range classes {
		g.cols = append(g.cols, column{head: abbreviate(name(c).text, 10), right: true})
	}
	g.cols = append(g.cols, wrapped("not back"), right("busiest"))
	for i := range p.Failures {
		f := &p.Failures[i]
		if i == d.rows {
			break
		}
		row := []cell{count(f.Rank, ""), name(f.Name), optional(f.LengthKm, result.UnitKm)}
		for c := range classes {
			row = append(row, mean(f.Classes[from+c].LostPackets))
		}
		g.add(append(row, toned(list(f.Unrestored, ", "), bad), use(f.WorstUse))...)
	}
	if n := p.Nothing; n != nil {
		row := []cell{word("-"), name(n.Name), word("-")}
		for c := range classes {
			row = append(row, mean(n.Classes[from+c].LostPackets))
		}
		g.add(append(row, word("-"), use(n.WorstUse))...)
	}
	d.grid(g)
	d.rest(len(p.Failures), "failures")
	d.line(word("not back: circuits that were down at the end; busiest: the fullest port once all had settled, IP bits over payload"))
}

// outages is the matrix of outages, in the same order.
func (d *doc) outages(p *result.FailuresPlan, classes []string, from int) {
	d.heading(word("OUTAGE under "), name(p.Plan), word(": median / worst of the aggregates hit, over all seeds"))
	g := columns(abbreviated("failure"))
	for _, c := range classes {
		g.cols = append(g.cols, column{head: abbreviate(name(c).text, 16), right: true})
	}
	for i := range p.Failures {
		f := &p.Failures[i]
		if i == d.rows {
			break
		}
		row := []cell{name(f.Name)}
		for c := range classes {
			row = append(row, outage(&f.Classes[from+c]))
		}
		g.add(row...)
	}
	d.grid(g)
	d.rest(len(p.Failures), "failures")
	d.line(word("+: some were cut off until the end, and stay so until the repair"))
}

// outage shows the median and the worst in one unit. What was cut off is
// marked: its outage is longer than was watched.
func outage(h *result.Hurt) cell {
	if h.OutageMedianS == nil || h.OutageWorstS == nil {
		return cell{text: "-"}
	}
	s := scaleOf(result.UnitSeconds, *h.OutageWorstS)
	median, worst := scaled(*h.OutageMedianS, result.UnitSeconds, s), scaled(*h.OutageWorstS, result.UnitSeconds, s)
	median.text = strings.TrimSuffix(median.text, " "+s.name)
	c := join(" / ", median, worst)
	if h.CutOff > 0 {
		c.text += " +"
		c.tone = bad
	}
	return c
}

// missedAfter counts aggregates that miss their objective once all has
// settled and that keep it while nothing is broken.
func (d *doc) missedAfter(p *result.FailuresPlan, classes []string, from int) {
	g := columns(abbreviated("failure"))
	for _, c := range classes {
		g.cols = append(g.cols, column{head: abbreviate(name(c).text, 10), right: true})
	}
	for i := range p.Failures {
		f := &p.Failures[i]
		row, any := []cell{name(f.Name)}, false
		for _, h := range f.Classes[from : from+len(classes)] {
			c := count(h.Missed, "")
			if h.Missed > 0 {
				c.tone, any = bad, true
			}
			row = append(row, c)
		}
		if any {
			g.add(row...)
		}
	}
	d.heading(word("OBJECTIVES MISSED in after under "), name(p.Plan), word(": aggregates that keep theirs when nothing fails"))
	if len(g.rows) == 0 {
		d.line(word("none"))
		return
	}
	d.grid(g)
}

// cutOff names what each failure cuts off.
func (d *doc) cutOff(p *result.FailuresPlan) {
	g := columns(abbreviated("failure"), wrapped("cut off until it is repaired"))
	for i := range p.Failures {
		if f := &p.Failures[i]; len(f.CutOff) > 0 {
			g.add(name(f.Name), list(f.CutOff, ", "))
		}
	}
	if len(g.rows) > 0 {
		d.heading(word("CUT OFF under "), name(p.Plan))
		d.grid(g)
	}
}
