package table

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"ferrule/scenarios/result"
)

// seed shows a seed as it is written in a scenario.
func seed(s uint64) cell {
	return cell{text: strconv.FormatUint(s, 10), values: []float64{float64(s)}}
}

// seeds shows the seeds of a study.
func seeds(ss []uint64) cell {
	cells := make([]cell, len(ss))
	for i, s := range ss {
		cells[i] = seed(s)
	}
	return join(" ", cells...)
}

// batch lays out several replications of one plan.
func (d *doc) batch(b *result.Batch) {
	d.title("Batch", b.Head, word(": plan "), name(b.Plan))
	d.line(word("seeds: "), seeds(b.Seeds), word("; intervals of "), limit(b.Confidence, result.UnitRatio), word(" confidence"))
	for _, p := range periodsOf(b.Periods, means(b.Figures)) {
		d.heading(p.heading...)
		g := meanGrid(figures())
		class := ""
		for _, m := range b.Figures {
			if m.Period != p.name {
				continue
			}
			if m.Class != class {
				class = m.Class
				g.add(toned(name(class), strong), cell{}, cell{}, cell{}, cell{}, cell{}, cell{})
			}
			g.add(meanRow(word("  "+figureName(m.Figure)), m)...)
			if m.Pooled != nil {
				g.add(word("    all seeds together"), cell{}, optional(m.Pooled, m.Unit), interval(m.PooledInterval, m.Unit), cell{}, cell{}, cell{})
			}
		}
		d.grid(g)
	}
	if len(b.Network) > 0 {
		d.heading(word("NETWORK"))
		g := meanGrid(abbreviated("figure"))
		for _, m := range b.Network {
			g.add(meanRow(join(": ", name(m.Subject), word(figureName(m.Figure))), m)...)
		}
		d.grid(g)
	}
	d.gates(b.Gates)
	d.stopping(b.Stopping)
	d.definitions()
	d.line(word("A percentile is the mean of the seeds' percentiles; it has no interval when a seed holds too few independent"))
	d.line(word("delays beyond it, for it is then too small on average. \"All seeds together\" is the percentile of all packets."))
	d.heading(word("PRICE AND AUDIT"))
	d.price(b.Price)
	d.audit(b.Audit)
	d.cautions(b.Cautions)
}

func meanGrid(figure column) *grid {
	return columns(figure, right("limit"), right("mean"), right("± or from..to"), right("seeds"),
		abbreviated("worst pair"), left("objective"))
}

func meanRow(figure cell, m result.Mean) []cell {
	return []cell{figure, optionalLimit(m.Limit, m.Unit), optional(m.Mean, m.Unit), interval(m.Interval, m.Unit),
		count(m.Seeds, ""), name(m.WorstPair), met(m.Met)}
}

// interval shows a half-width or two ends.
func interval(i *result.Interval, unit string) cell {
	switch {
	case i == nil:
		return cell{text: "-"}
	case i.Half != nil:
		c := number(*i.Half, unit)
		c.text = "± " + c.text
		return c
	case i.Low != nil && i.High != nil:
		return join("..", number(*i.Low, unit), number(*i.High, unit))
	default:
		return cell{text: "-"}
	}
}

// A stretch is a period of a report: its name and its heading.
type stretch struct {
	name    string
	heading []cell
}

// A named is the period of one figure and the kind of that period, if known.
type named struct {
	period string
	kind   result.PeriodKind
}

func means(ms []result.Mean) []named {
	out := make([]named, len(ms))
	for i, m := range ms {
		out[i] = named{period: m.Period}
	}
	return out
}

func differences(ds []result.Difference) []named {
	out := make([]named, len(ds))
	for i, d := range ds {
		out[i] = named{d.Period, d.Kind}
	}
	return out
}

// periodsOf orders the periods that figures speak of: by kind as reports show
// kinds, then as ps lists them, then those ps does not list.
func periodsOf(ps []result.Period, figures []named) []stretch {
	kinds := append(result.PeriodKinds(), "")
	byKind := make([][]stretch, len(kinds))
	seen := map[string]bool{}
	place := func(kind result.PeriodKind, s stretch) {
		seen[s.name] = true
		for i, k := range kinds {
			if k == kind || k == "" {
				byKind[i] = append(byKind[i], s)
				return
			}
		}
	}
	spoken := map[string]bool{}
	for _, f := range figures {
		spoken[f.period] = true
	}
	for _, p := range ps {
		if spoken[p.Name] && !seen[p.Name] {
			place(p.Kind, stretch{p.Name, periodHeading(p)})
		}
	}
	for _, f := range figures {
		if !seen[f.period] {
			h := word(strings.ToUpper(f.period))
			h.name = true
			place(f.kind, stretch{f.period, []cell{h}})
		}
	}
	var out []stretch
	for _, ss := range byKind {
		out = append(out, ss...)
	}
	return out
}

// comparison lays out plans beside a base, each in the order a change board
// reads: verdicts, price, periods, network.
func (d *doc) comparison(c *result.Comparison) {
	d.title("Comparison", c.Head, word(": base "), name(c.Base))
	d.line(word("seeds: "), seeds(c.Seeds), word("; paired differences, intervals of "),
		limit(c.Confidence, result.UnitRatio), word(" confidence"))
	for _, p := range c.Plans {
		d.compared(c.Base, p)
	}
	d.gates(c.Gates)
	d.growth(c.Growth)
	d.definitions()
	d.line(word("pp: percentage points. Objectives: every aggregate of the class, under the plan. Verdicts in brackets are"))
	d.line(word("exploratory. Same: identical, or surely less apart than "), limit(c.Margin, result.UnitRatio),
		word(" of the limit or, without one, of the figure."))
	d.heading(word("AUDIT"))
	d.audit(c.Audit)
	d.cautions(c.Cautions)
}

func (d *doc) compared(base string, p result.Compared) {
	d.heading(word("PLAN "), name(p.Plan), word(" against "), name(base))
	g := columns(abbreviated(""), left(""), left(""), wrapped(""))
	for _, v := range p.Verdicts {
		g.add(name(v.Class), verdict(v.Verdict), metBoth(v.BaseMet, v.PlanMet), name(v.Text))
	}
	d.grid(g)
	d.priceChange(base, p.Price)
	for _, s := range periodsOf(p.Periods, differences(p.Figures)) {
		d.heading(s.heading...)
		g := differenceGrid(figures(), base)
		class := ""
		for _, f := range p.Figures {
			if f.Period != s.name {
				continue
			}
			if f.Class != class {
				class = f.Class
				g.add(toned(name(class), strong), cell{}, cell{}, cell{}, cell{}, cell{}, cell{}, cell{})
			}
			g.add(differenceRow(word("  "+figureName(f.Figure)), f)...)
		}
		d.grid(g)
	}
	d.family(p)
	if len(p.Network) > 0 {
		d.network(base, p.Network)
	}
}

// network lays out the figures of the network that change, by subject; the
// rest is counted.
func (d *doc) network(base string, ds []result.Difference) {
	d.heading(word("NETWORK, what changes"))
	g := differenceGrid(abbreviated("figure"), base)
	subject, still := "", 0
	for _, f := range ds {
		if !stirs(f) {
			still++
			continue
		}
		if f.Subject != subject {
			subject = f.Subject
			g.add(toned(name(subject), strong), cell{}, cell{}, cell{}, cell{}, cell{}, cell{}, cell{})
		}
		g.add(differenceRow(word("  "+figureName(f.Figure)), f)...)
	}
	d.grid(g)
	if still > 0 {
		d.line(word(fmt.Sprintf("%d further figures of the network differ by less than a hundredth; files hold them all.", still)))
	}
}

// stirs reports whether a figure of the network is worth a line: it exists on
// one side only, or differs by a hundredth.
func stirs(f result.Difference) bool {
	if f.Base == nil || f.Plan == nil {
		return f.Base != nil || f.Plan != nil
	}
	return math.Abs(*f.Plan-*f.Base) >= 0.01*max(math.Abs(*f.Base), math.Abs(*f.Plan)) && *f.Plan != *f.Base
}

func differenceGrid(figure column, base string) *grid {
	if len([]rune(base)) > 12 {
		base = "base"
	}
	return columns(figure, right("limit"), right(base), right("plan"), right("change"),
		abbreviated("worst pair"), left("verdict"), left("objective"))
}

func differenceRow(figure cell, f result.Difference) []cell {
	b, p, most := optional(f.Base, f.Unit), optional(f.Plan, f.Unit), optionalLimit(f.Limit, f.Unit)
	if f.Base != nil && f.Plan != nil { // one unit for both, so that they compare at a glance
		s := scaleOf(f.Unit, max(*f.Base, *f.Plan))
		most = limitBeside(f.Limit, f.Unit, s)
		b, p = scaled(*f.Base, f.Unit, s), scaled(*f.Plan, f.Unit, s)
	}
	return []cell{figure, most, b, p, change(f.Difference, f.Interval, f.Unit),
		name(f.WorstPair), verdictOn(f), metBoth(f.BaseMet, f.PlanMet)}
}

// verdictOn shows the verdict on a figure, in brackets when it is exploratory.
func verdictOn(f result.Difference) cell {
	c := verdict(f.Verdict)
	if f.Exploratory && f.Verdict != "" {
		c.text = "(" + c.text + ")"
	}
	return c
}

// stopping says how a batch found its number of seeds.
func (d *doc) stopping(s *result.Stopping) {
	if s == nil {
		return
	}
	d.heading(word("PRECISION"))
	what := "reached"
	if !s.Reached {
		what = "NOT reached within the cap"
	}
	cells := []cell{word("relative precision of "), limit(s.Precision, result.UnitRatio), word(" asked for "), word(figureName(s.Figure)),
		word(", "), count(s.AtMost, "seeds"), word(" at most: "), word(what)}
	if s.Worst != "" {
		cells = append(cells, word("; widest "), name(s.Worst), word(", half-width over mean "), number(s.WorstHalf, result.UnitRatio))
	}
	d.line(cells...)
	looks := make([]cell, len(s.Looks))
	for i, n := range s.Looks {
		looks[i] = count(n, "")
	}
	d.line(word("looked at after so many seeds: "), join(" ", looks...))
}

// priceChange is the one line of price.
func (d *doc) priceChange(base string, p result.PriceChange) {
	cells := []cell{word("price: "), plus(count(p.Slots, "slots")), word(" ("), count(p.Base.Slots, ""), word(" to "),
		count(p.Plan.Slots, ""), word("), "), plus(number(p.SlotKm, result.UnitSlotKm)), word(", "),
		plus(count(p.Ports, "router ports"))}
	cells = append(cells, freed(p.TransitFreed)...)
	cells = append(cells, tightest("; tightest fibre ", p.Plan.Tightest)...)
	if p.Base.Tightest != nil {
		cells = append(cells, word(" ("), name(base), word(": "))
		cells = append(cells, tightest("", p.Base.Tightest)...)
		cells = append(cells, word(")"))
	}
	d.line(cells...)
}
