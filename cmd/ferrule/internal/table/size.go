package table

import (
	"ferrule/scenarios/result"
)

// sizing lays out the search for the size of a circuit.
func (d *doc) sizing(r *result.Sizing) {
	d.title("Size of a circuit", r.Head, word(": circuit "), name(r.Circuit), word(", plan "), name(r.Plan))
	d.line(word("objectives of "), list(r.Classes, ", "), word(" in settled periods; "), limit(r.Confidence, result.UnitRatio),
		word(" confidence in all, "), limit(r.StepLevel, result.UnitRatio), word(" for each look; "),
		count(r.Low, ""), word(" to "), count(r.High, "slots"), word(" searched"))
	d.heading(word("ANSWER"))
	if r.Least != nil {
		d.line(word("least that is met: "), count(*r.Least, "slots"))
	} else {
		d.line(word("no size searched is met"))
	}
	if r.Missed != nil {
		d.line(word("most that is missed: "), count(*r.Missed, "slots"))
	}
	d.prediction(r.Prediction)
	d.heading(word("TRAIL, in the order of trying"))
	g := columns(right("slots"), right("seeds"), left("objectives"), wrapped("decided by"))
	for _, s := range r.Trail {
		g.add(count(s.Slots, ""), count(s.Seeds, ""), standing(s.Standing), name(s.Text))
	}
	d.grid(g)
	d.heading(word("AUDIT"))
	d.audit(r.Audit)
	d.cautions(r.Cautions)
}

// prediction shows what theory says beside it.
func (d *doc) prediction(p result.Prediction) {
	if p.LoadBps == 0 {
		return
	}
	cells := []cell{word("prediction: "), number(p.LoadBps, result.UnitBps)}
	if p.Full != nil {
		cells = append(cells, word(" fill "), count(*p.Full, "slots"))
	}
	if p.ByTheory != nil {
		cells = append(cells, word("; a queue with Poisson arrivals and exponential packets of "), number(p.PacketB, result.UnitBytes),
			word(" keeps "), number(*p.TightestS, result.UnitSeconds), word(" at "), limit(p.Percentile, result.UnitRatio),
			word(" with "), count(*p.ByTheory, "slots"))
	}
	d.line(cells...)
}

// growth shows how much more load each plan bears.
func (d *doc) growth(gs []result.Growth) {
	for i, g := range gs {
		if i == 0 {
			d.heading(word("GROWTH, objectives in settled periods with all loads times a factor"))
		}
		cells := []cell{name(g.Plan), word(": ")}
		if g.HoldsTo != nil {
			cells = append(cells, word("holds up to "), limit(*g.HoldsTo, result.UnitRatio))
		} else {
			cells = append(cells, word("holds nowhere with confidence"))
		}
		if g.Breaks != nil {
			cells = append(cells, word(", breaks at "), limit(*g.Breaks, result.UnitRatio))
		} else {
			cells = append(cells, word(", breaks at none of the loads tried"))
		}
		d.line(cells...)
		t := columns(right(""), left(""), wrapped(""))
		for _, s := range g.Steps {
			t.add(limit(s.Factor, result.UnitRatio), standing(s.Standing), name(s.First))
		}
		d.grid(t)
	}
}
