package study

import (
	"cmp"
	"fmt"
	"slices"
	"strings"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/scenarios"
	"ferrule/scenarios/build"
	"ferrule/scenarios/result"
)

// findings lists what a check noticed, gravest first.
func (c *checker) findings() []result.Finding {
	l := &findingList{}
	c.unplaced(l)
	c.unreachable(l)
	c.fullLinks(l)
	c.cuts(l)
	c.sharedFate(l)
	c.noFallBack(l)
	c.inversions(l)
	c.objectives(l)
	c.timers(l)
	c.traffic(l)
	c.growth(l)
	rank := []result.Severity{result.Fault, result.Warning, result.Note}
	slices.SortStableFunc(l.list, func(a, b result.Finding) int {
		return cmp.Compare(slices.Index(rank, a.Severity), slices.Index(rank, b.Severity))
	})
	return l.list
}

// A findingList collects findings.
type findingList struct{ list []result.Finding }

func (l *findingList) add(s result.Severity, subject, format string, args ...any) {
	l.list = append(l.list, result.Finding{Severity: s, Subject: subject, Text: fmt.Sprintf(format, args...)})
}

// unplaced finds circuits that do not fit, and what a run cannot do.
func (c *checker) unplaced(l *findingList) {
	for i := range c.g.lines {
		if p := &c.g.plant.Circuits[i]; p.InPlace && !c.g.lines[i].up {
			l.add(result.Fault, p.Name, "it cannot be in place: %s", c.g.lines[i].why)
		}
	}
	if _, err := build.Plant(c.g.sc, c.g.plan); err != nil {
		l.add(result.Fault, c.g.plan.Name, "a run cannot start: %v", err)
	}
}

// unreachable finds streams without a way.
func (c *checker) unreachable(l *findingList) {
	if n := len(c.load.stranded); n > 0 {
		l.add(result.Fault, c.streams[c.load.stranded[0]].name, "%s no way to where %s: none of the packets will arrive",
			count(n, "aggregate has", "aggregates have"), pick(n, "it goes", "they go"))
	}
}

// fullLinks finds links that are full or nearly so.
func (c *checker) fullLinks(l *findingList) {
	for i := range c.g.lines {
		id, p := nodes.CircuitID(i), &c.g.plant.Circuits[i]
		if !c.g.lines[i].up {
			continue
		}
		var use, worst float64
		var from string
		var by *failure
		for d := range nodes.Direction(2) {
			if u := c.routes.use(c.load, id, d); u > use {
				use, from = u, c.g.plant.Sites[p.Ends[d]].Name
			}
			if u, f := c.worst(id, d); u > worst {
				worst, by = u, f
			}
		}
		switch {
		case use > 1:
			l.add(result.Fault, p.Name, "it is loaded to %s from %s with nothing broken: its queue fills and packets are lost", percent(use), from)
		case use > 0.9:
			l.add(result.Warning, p.Name, "it is loaded to %s from %s with nothing broken: bursts will wait long", percent(use), from)
		}
		switch {
		case worst > 1 && use <= 1:
			l.add(result.Warning, p.Name, "a failure of %s loads it to %s: its queue fills and packets are lost until the repair", by.name, percent(worst))
		case worst > 0.9 && use <= 0.9:
			l.add(result.Note, p.Name, "a failure of %s loads it to %s", by.name, percent(worst))
		}
	}
}

// cuts finds failures after which streams have no way.
func (c *checker) cuts(l *findingList) {
	for i := range c.broken {
		f := &c.broken[i]
		if len(f.fibres) > 1 || len(f.stranded) == 0 {
			continue
		}
		var bps float64
		for _, s := range f.stranded {
			bps += c.streams[s].bps
		}
		l.add(result.Warning, f.name, "a cut leaves %s (%s) without a way until the repair, such as %s",
			count(len(f.stranded), "aggregate", "aggregates"), quantity(bps, result.UnitBps), c.streams[f.stranded[0]].name)
	}
}

// sharedFate finds what is meant to stand apart and does not.
func (c *checker) sharedFate(l *findingList) {
	for i := range c.g.lines {
		p, x := &c.g.plant.Circuits[i], &c.g.lines[i]
		if x.shared != "" {
			l.add(result.Warning, p.Name, "it is 1+1, and %s", x.shared)
		}
		for _, o := range p.ApartFrom {
			if both := c.g.inCommon(x.route, c.g.lines[o].route); both != "" {
				l.add(result.Warning, p.Name, "it is meant to be apart from %s and shares %s with it", c.g.plant.Circuits[o].Name, both)
			}
		}
	}
	for i := range c.broken {
		f := &c.broken[i]
		if len(f.fibres) < 2 {
			continue
		}
		alone := f.stranded // by the whole group, and by no fibre of it alone
		for k := range c.broken {
			if o := &c.broken[k]; len(o.fibres) == 1 && slices.Contains(f.fibres, o.fibres[0]) {
				alone = slices.DeleteFunc(slices.Clone(alone), func(s int) bool { return slices.Contains(o.stranded, s) })
			}
		}
		if len(alone) == 0 {
			continue
		}
		s := &c.streams[alone[0]]
		l.add(result.Warning, f.name, "the way and its only alternative share this risk group for %s, such as %s: a failure of %s leaves no way, though a cut of one fibre does not",
			count(len(alone), "aggregate", "aggregates"), s.name, c.names(f.fibres))
	}
}

// names lists fibres.
func (c *checker) names(fibres []nodes.FibreID) string {
	var out []string
	for _, f := range fibres {
		out = append(out, c.g.plant.Fibres[f].Name)
	}
	return strings.Join(out, " and ")
}

// noFallBack finds moved streams that have nowhere to go when their circuit is
// down.
func (c *checker) noFallBack(l *findingList) {
	for i := range c.g.lines {
		p := &c.g.plant.Circuits[i]
		var on []int
		for k := range c.streams {
			if slices.Contains(c.streams[k].chain, nodes.CircuitID(i)) {
				on = append(on, k)
			}
		}
		if len(on) == 0 {
			continue
		}
		first := c.streams[on[0]].name
		switch p.WhenDown {
		case nodes.DownDrop, nodes.DownWait:
			if c.g.plan.Circuits[i].Recovery == nodes.RecoveryNone {
				l.add(result.Warning, p.Name, "when it is down %s moved onto it, such as %s, %s until the repair: it has no recovery",
					count(len(on), "aggregate", "aggregates"), first, lot(len(on), p.WhenDown))
			}
		case nodes.DownReturn:
			on = slices.DeleteFunc(on, func(k int) bool { return c.routes.walkRouted(&c.streams[k]) })
			if len(on) > 0 {
				l.add(result.Warning, p.Name, "when it is down %s moved onto it, such as %s, cannot return: no routed circuit leads there",
					count(len(on), "aggregate", "aggregates"), first)
			}
		default:
			panic(fmt.Sprintf("study: unknown choice when down %d", p.WhenDown))
		}
	}
}

// lot says what becomes of n aggregates that do not return.
func lot(n int, w nodes.WhenDown) string {
	if w == nodes.DownDrop {
		return pick(n, "loses all packets", "lose all packets")
	}
	return pick(n, "waits", "wait")
}

// inversions finds circuits that restore before one that carries a higher
// class.
func (c *checker) inversions(l *findingList) {
	for at, late := range c.order {
		if !c.restores(late) {
			continue
		}
		q := &c.g.plant.Circuits[late]
		for _, early := range c.order[:at] {
			p := &c.g.plant.Circuits[early]
			if !c.restores(early) || p.Setup >= q.Setup || c.load.classes[early] <= c.load.classes[late] || c.className(early) == "" {
				continue
			}
			l.add(result.Warning, q.Name, "it carries %s and is restored after %s, which carries %s at most: its set-up priority is %d, not %d (0 is the highest)",
				c.className(late), p.Name, c.className(early), q.Setup, p.Setup)
			break
		}
	}
}

// restores says whether a circuit stands and restores.
func (c *checker) restores(id nodes.CircuitID) bool {
	return c.g.lines[id].up && c.g.plant.Circuits[id].Recovery == nodes.RecoveryRestore
}

// className names the highest class a circuit carries, if any.
func (c *checker) className(id nodes.CircuitID) string {
	if k := int(c.load.classes[id]); k < len(c.g.plant.Classes) {
		return c.g.plant.Classes[k].Name
	}
	return ""
}

// objectives finds limits that light alone breaks, and percentiles of which
// too few packets are sent to say anything.
func (c *checker) objectives(l *findingList) {
	for k := range c.g.sc.Classes {
		class := &c.g.sc.Classes[k]
		for _, lim := range class.Objective {
			c.impossible(l, nodes.ClassID(k), lim)
			c.tooFew(l, nodes.ClassID(k), lim)
		}
	}
}

// impossible looks for pairs whose light alone takes longer than a limit of
// the delay.
func (c *checker) impossible(l *findingList, class nodes.ClassID, lim scenarios.Limit) {
	switch lim.Figure {
	case scenarios.FigureDelayMean, scenarios.FigureDelayP50, scenarios.FigureDelayP95, scenarios.FigureDelayP99, scenarios.FigureDelayP999:
	default:
		return
	}
	n, worst, most := 0, -1, des.Time(0)
	for i := range c.streams {
		s := &c.streams[i]
		if s.class != class || s.seconds == 0 {
			continue
		}
		if light := c.g.light(c.g.bestWay(s.from, s.to)); light > lim.Time {
			if n++; light > most {
				worst, most = i, light
			}
		}
	}
	if n > 0 {
		l.add(result.Fault, c.g.plant.Classes[class].Name, "%s within %s is impossible for %s: light alone takes %s at least for %s",
			lim.Figure, quantity(lim.Time.Seconds(), result.UnitSeconds), count(n, "aggregate", "aggregates"),
			quantity(most.Seconds(), result.UnitSeconds), c.streams[worst].name)
	}
}

// beyondOneIn is how many packets there are for each one beyond a percentile;
// 0 if the figure is none.
func beyondOneIn(f scenarios.Figure) float64 {
	switch f {
	case scenarios.FigureDelayP50, scenarios.FigurePDVP50:
		return 2
	case scenarios.FigureDelayP95, scenarios.FigurePDVP95:
		return 20
	case scenarios.FigureDelayP99, scenarios.FigurePDVP99:
		return 100
	case scenarios.FigureDelayP999, scenarios.FigurePDVP999, scenarios.FigureIPDVP999:
		return 1000
	case scenarios.FigureDelayMean, scenarios.FigureJitter, scenarios.FigureLoss, scenarios.FigureOut,
		scenarios.FigureTransferP50, scenarios.FigureTransferP95, scenarios.FigureTransferP99: // of transfers, not of packets
		return 0
	default:
		panic("study: unknown figure " + f.String())
	}
}

// tooFew looks for streams that send too few packets in the whole run for a
// percentile to be said.
func (c *checker) tooFew(l *findingList, class nodes.ClassID, lim scenarios.Limit) {
	need := tail * beyondOneIn(lim.Figure)
	n, all, least, fewest := 0, 0, -1, need
	for i := range c.streams {
		s := &c.streams[i]
		if s.class != class || s.seconds == 0 {
			continue
		}
		all++
		if sent := float64(s.pps * s.measured); sent < need {
			if n++; sent < fewest {
				least, fewest = i, sent
			}
		}
	}
	if n > 0 {
		l.add(result.Warning, c.g.plant.Classes[class].Name, "%s cannot be said of %d of %d aggregates: it takes %.0f packets, and %s sends about %.0f in the run",
			lim.Figure, n, all, need, c.streams[least].name, fewest)
	}
}

// timers finds timers that the run is too short for.
func (c *checker) timers(l *findingList) {
	sc := c.g.sc
	length := scenarios.FormatTime(sc.Run.Length)
	if sc.Timing.WaitToRestore > sc.Run.Length && slices.ContainsFunc(c.order, c.restores) {
		l.add(result.Note, "timing", "wait-to-restore (%s) is longer than the run (%s): no circuit returns to its first route", scenarios.FormatTime(sc.Timing.WaitToRestore), length)
	}
	if sc.Controller.Poll > sc.Run.Length {
		l.add(result.Note, "controller", "poll (%s) is longer than the run (%s): no port is ever read", scenarios.FormatTime(sc.Controller.Poll), length)
	}
	for i := range c.g.lines {
		if p := &c.g.plant.Circuits[i]; p.HoldOff > sc.Run.Length {
			l.add(result.Warning, p.Name, "hold-off (%s) is longer than the run (%s): the packet layer never learns of a failure", scenarios.FormatTime(p.HoldOff), length)
		}
	}
}

// traffic finds classes without any, aggregates that are not measured, and
// changes during the run that the loads do not show.
func (c *checker) traffic(l *findingList) {
	silent, first := 0, ""
	sent := make([]bool, len(c.g.plant.Classes))
	for i := range c.streams {
		s := &c.streams[i]
		sent[s.class] = sent[s.class] || s.seconds > 0
		if s.measured > 0 {
			continue
		}
		if silent++; first == "" {
			first = s.name
		}
	}
	for k := range sent {
		if !sent[k] {
			l.add(result.Note, c.g.plant.Classes[k].Name, "no aggregate sends in this class")
		}
	}
	if silent > 0 {
		l.add(result.Warning, first, "%s during the warm-up only: nothing is measured", count(silent, "aggregate sends", "aggregates send"))
	}
	for _, list := range [][]scenarios.Act{c.g.sc.Timeline, c.g.plan.Steps} {
		for i := range list {
			switch a := &list[i]; a.Verb {
			case scenarios.VerbCut, scenarios.VerbRepair, scenarios.VerbFail, scenarios.VerbMend:
			case scenarios.VerbScale, scenarios.VerbSetUp, scenarios.VerbTearDown, scenarios.VerbResize, scenarios.VerbMove, scenarios.VerbReturn,
				scenarios.VerbDrain, scenarios.VerbUndrain:
				l.add(result.Note, a.Subject, "%s happens during the run; the loads here are those before it", a.Verb)
			default:
				panic("study: unknown verb " + a.Verb.String())
			}
		}
	}
}

// growth says by how much all loads may grow until the first link is full.
func (c *checker) growth(l *findingList) {
	var use, worst float64
	var link, hit string
	var by *failure
	for i := range c.g.lines {
		p := &c.g.plant.Circuits[i]
		for d := range nodes.Direction(2) {
			name := p.Name + " from " + c.g.plant.Sites[p.Ends[d]].Name
			if u := c.routes.use(c.load, nodes.CircuitID(i), d); u > use {
				use, link = u, name
			}
			if u, f := c.worst(nodes.CircuitID(i), d); u > worst {
				worst, hit, by = u, name, f
			}
		}
	}
	switch {
	case use > 0 && by != nil:
		l.add(result.Note, "all loads", "times %.2f they fill the first link, %s; after a failure of %s, times %.2f fill %s", 1/use, link, by.name, 1/worst, hit)
	case use > 0:
		l.add(result.Note, "all loads", "times %.2f they fill the first link, %s", 1/use, link)
	}
}

// percent shows a share of one.
func percent(u float64) string { return fmt.Sprintf("%.0f %%", 100*u) }

// count shows a number with its noun.
func count(n int, one, many string) string { return fmt.Sprintf("%d %s", n, pick(n, one, many)) }

// pick is the word for one or for many.
func pick(n int, one, many string) string {
	if n == 1 {
		return one
	}
	return many
}
