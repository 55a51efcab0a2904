package table

import "ferrule/scenarios/result"

// calibration lays out what the scenario says beside what was measured.
func (d *doc) calibration(cs []result.Calibration) {
	if len(cs) == 0 {
		return
	}
	d.heading(word("MEASURED, and what the scenario says of it"))
	g := columns(abbreviated("what"), abbreviated("of"), abbreviated("from"), abbreviated("to"), right("measured"),
		right("model"), right("model - measured"), right("share"))
	for _, c := range cs {
		g.add(word(c.What), name(c.Of), name(c.From), name(c.To), number(c.Measured, c.Unit),
			optional(c.Model, c.Unit), optional(c.Difference, c.Unit), optional(c.Share, result.UnitRatio))
	}
	d.grid(g)
	d.line(word("a delay of the model is the mean without any wait for other packets; share: of what was measured"))
}
