package study

import (
	"fmt"
	"math"
	"strings"

	"ferrule/des"
	"ferrule/des/measure"
	"ferrule/nodes"
	"ferrule/nodes/packet"
	"ferrule/scenarios"
	"ferrule/scenarios/build"
	"ferrule/scenarios/result"
)

// tail is how many values must lie beyond a quantile for it to be said: the
// 99.9th percentile of fewer than 10,000 packets is absent. Common practice,
// no source.
const tail = 10

// gatherer turns a finished model into plain data.
type gatherer struct {
	m       *build.Model
	n       *packet.Network
	r       *result.Run
	periods []int        // stretches that are periods
	end     des.Time     // sources ended, or the run was stopped
	ways    []uint16     // in the order of aggregates
	losses  [][]lossCell // way -> stretch
	inside  [][]uint64   // way -> stretch
	faults  [][]packet.FaultLoss
}

// lossCell is what was lost of one way in one stretch.
type lossCell [packet.Causes]uint64

// gather reads everything a result holds from a model at rest.
func gather(m *build.Model, partial bool) *result.Run {
	g := newGatherer(m, partial)
	g.listPeriods()
	g.collectLosses()
	g.aggregates()
	g.classes()
	g.circuits()
	g.policies()
	g.ports()
	g.fibres()
	g.steps()
	g.events()
	g.asked()
	g.price()
	g.audit()
	g.defaults()
	g.cautions()
	g.drawings()
	g.r.Within = withinOf(g.r)
	return g.r
}

// newGatherer is a gatherer with the head of its result.
func newGatherer(m *build.Model, partial bool) *gatherer {
	sc := m.Scenario
	g := &gatherer{m: m, n: m.Network, r: &result.Run{}}
	r := g.r
	r.Scenario, r.ScenarioHash = sc.Name, sc.Hash
	r.LengthS, r.WarmUpS = sc.Run.Length.Seconds(), sc.Run.WarmUp.Seconds()
	r.Plan, r.Seed, r.Partial = m.Plan.Name, m.Seed, partial
	g.end = min(g.n.Now(), sc.Run.Length)
	for i := range sc.Aggregates {
		g.ways = append(g.ways, nodes.WayOf(nodes.AggID(i), nodes.Out))
		if sc.Aggregates[i].BothWays {
			g.ways = append(g.ways, nodes.WayOf(nodes.AggID(i), nodes.Back))
		}
	}
	return g
}

// defaults lists the values that the scenario did not give.
func (g *gatherer) defaults() {
	for _, d := range g.m.Scenario.Defaults {
		key, value, _ := strings.Cut(d, " = ")
		g.r.Defaults = append(g.r.Defaults, result.Default{Key: key, Value: value})
	}
}

// listPeriods names the stretches after the warm-up, each once.
func (g *gatherer) listPeriods() {
	st := g.n.Stretches()
	count := [packet.Kinds]int{}
	for i, s := range st {
		if s.Kind == packet.WarmUp || s.From >= g.end {
			continue
		}
		to, unsettled := g.end, s.Kind != packet.Normal && s.Kind != packet.After
		if i+1 < len(st) && st[i+1].From < g.end {
			to = st[i+1].From
			unsettled = unsettled && st[i+1].Act != ""
		}
		count[s.Kind]++
		name := s.Kind.String()
		if c := count[s.Kind]; c > 1 {
			name = fmt.Sprintf("%s %d", name, c)
		}
		g.periods = append(g.periods, i)
		g.r.Periods = append(g.r.Periods, result.Period{
			Name: name, Kind: result.PeriodKind(s.Kind.String()), FromS: s.From.Seconds(), ToS: to.Seconds(), Act: s.Act, Unsettled: unsettled,
		})
	}
}

// collectLosses brings together what each site lost of each way.
func (g *gatherer) collectLosses() {
	stretches := len(g.n.Stretches())
	ways := 2 * len(g.m.Scenario.Aggregates)
	g.losses = make([][]lossCell, ways)
	g.inside = make([][]uint64, ways)
	g.faults = make([][]packet.FaultLoss, ways)
	g.n.Losses(func(_ nodes.SiteID, l *packet.Loss) {
		if g.losses[l.Way] == nil {
			g.losses[l.Way] = make([]lossCell, stretches)
		}
		for s, causes := range l.Count {
			for c, n := range causes {
				g.losses[l.Way][s][c] += n
			}
		}
		for _, f := range l.Faults {
			g.addFault(l.Way, f)
		}
	})
	now := g.n.Now()
	g.n.Inside(func(p *nodes.Packet) {
		if p.Bits&nodes.BitCopy != 0 { // its first copy counts
			return
		}
		if g.inside[p.Way] == nil {
			g.inside[p.Way] = make([]uint64, stretches)
		}
		g.inside[p.Way][g.n.StretchOf(p.Born, now)]++
	})
}

func (g *gatherer) addFault(way uint16, f packet.FaultLoss) {
	for i := range g.faults[way] {
		if o := &g.faults[way][i]; o.Fault == f.Fault {
			o.Packets += f.Packets
			o.First, o.Last = min(o.First, f.First), max(o.Last, f.Last)
			return
		}
	}
	g.faults[way] = append(g.faults[way], f)
}

// wayName names a way as results do.
func (g *gatherer) wayName(way uint16) string {
	a, d := nodes.AggOf(way)
	return build.WayName(&g.m.Scenario.Aggregates[a], d)
}

// aggregates fills one entry for each way.
func (g *gatherer) aggregates() {
	sc := g.m.Scenario
	for _, way := range g.ways {
		id, d := nodes.AggOf(way)
		a := &g.m.Plant.Aggregates[id]
		x := result.Aggregate{
			Name: g.wayName(way), From: sc.Sites[a.Origin(d)].Name, To: sc.Sites[a.Target(d)].Name,
			Class: sc.Classes[a.Class].Name, CarriedBy: g.m.Control.Carried(way),
		}
		for k := range g.periods {
			o := g.outcome(way, k)
			o.Objective = judge(&o, sc.Classes[a.Class].Objective, "")
			x.Periods = append(x.Periods, o)
		}
		g.r.Aggregates = append(g.r.Aggregates, x)
	}
}

// outcome is what one way got in period k.
func (g *gatherer) outcome(way uint16, k int) result.Outcome {
	s := g.periods[k]
	m := &g.n.Meters()[way]
	f := fold{seconds: g.r.Periods[k].ToS - g.r.Periods[k].FromS}
	f.lost(g.lossesOf(way, s), g.insideOf(way, s))
	if s < len(m.Cells) && m.Cells[s] != nil {
		f.add(m.Cells[s], m.Floor)
	}
	o := f.outcome()
	o.Period = g.r.Periods[k].Name
	o.OutageS = g.outage(way, s)
	var t transfers
	t.add(g.n.Flows(way), s)
	o.Transfers = t.outcome(f.seconds)
	return o
}

func (g *gatherer) lossesOf(way uint16, s int) *lossCell {
	if g.losses[way] == nil {
		return nil
	}
	return &g.losses[way][s]
}

func (g *gatherer) insideOf(way uint16, s int) uint64 {
	if g.inside[way] == nil {
		return 0
	}
	return g.inside[way][s]
}

// outage is the longest run of packets of a way lost to the fault that opened
// stretch s, in sending time: from the first lost to the next delivered, or to
// the end of the run if none was. It is nil when s was opened by no fault.
func (g *gatherer) outage(way uint16, s int) *float64 {
	st := g.n.Stretches()[s]
	if st.Kind != packet.Hit || st.Fault < 0 || s > 0 && g.n.Stretches()[s-1].Fault == st.Fault {
		return nil
	}
	var none float64
	i := 0
	for ; i < len(g.faults[way]) && g.faults[way][i].Fault != st.Fault; i++ {
	}
	if i == len(g.faults[way]) {
		return &none
	}
	f := g.faults[way][i]
	m := &g.n.Meters()[way]
	if last := m.Last(); last < f.Last { // nothing was delivered after it
		out := (g.end - max(f.First, last)).Seconds()
		return &out
	}
	for _, o := range m.Outages {
		if o.Fault == st.Fault {
			from := o.From
			if f.First > from && f.First < o.To {
				from = f.First
			}
			out := (o.To - from).Seconds()
			return &out
		}
	}
	return &none
}

// classes folds the ways of each class.
func (g *gatherer) classes() {
	sc := g.m.Scenario
	meters := g.n.Meters()
	for c := range sc.Classes {
		class := result.Class{Name: sc.Classes[c].Name, Limits: limits(sc.Classes[c].Objective)}
		for k, s := range g.periods {
			f := fold{seconds: g.r.Periods[k].ToS - g.r.Periods[k].FromS}
			var members []*result.Aggregate
			var t transfers
			for i, way := range g.ways {
				if a, _ := nodes.AggOf(way); int(sc.Aggregates[a].Class) != c {
					continue
				}
				members = append(members, &g.r.Aggregates[i])
				f.lost(g.lossesOf(way, s), g.insideOf(way, s))
				t.add(g.n.Flows(way), s)
				if m := &meters[way]; s < len(m.Cells) && m.Cells[s] != nil {
					f.add(m.Cells[s], m.Floor)
				}
			}
			o := f.outcome()
			o.Period = g.r.Periods[k].Name
			o.Transfers = t.outcome(f.seconds)
			g.tail(class.Name, o.Period, &f)
			judgeClass(&o, members, k, sc.Classes[c].Objective)
			class.Periods = append(class.Periods, o)
		}
		class.WorstPair = worstOver(class.Periods, g.r.Aggregates, class.Limits)
		g.r.Classes = append(g.r.Classes, class)
	}
}

// fold adds up cells: of one way, or of all ways of a class.
type fold struct {
	seconds    float64
	cells      int
	base       des.Time     // least light of the pairs so far
	delay, pdv measure.Hist // ns; delay is that above base
	ipdv       measure.Hist
	exact      measure.Moments
	bytes      uint64
	reordered  uint64
	duplicates uint64
	jitter     float64
	jitters    uint64
	losses     lossCell
	inside     uint64
}

func (f *fold) lost(l *lossCell, inside uint64) {
	if l != nil {
		for c, n := range l {
			f.losses[c] += n
		}
	}
	f.inside += inside
}

// add folds a cell. Delays are kept above the light of their pair, and summed
// above the least light of all pairs, so that long fibres do not blur short
// waits; variation is over the least delay of the cell.
func (f *fold) add(c *packet.Cell, floor des.Time) {
	if f.cells == 0 {
		f.base = floor
	} else if floor < f.base {
		var h measure.Hist
		h.MergeShifted(&f.delay, int64((f.base-floor)/des.Nanosecond))
		f.delay, f.base = h, floor
	}
	f.cells++
	f.duplicates += c.Surplus
	if c.Exact.N == 0 {
		return
	}
	if floor == f.base {
		f.delay.Merge(&c.Delay)
	} else {
		f.delay.MergeShifted(&c.Delay, int64((floor-f.base)/des.Nanosecond))
	}
	f.pdv.MergeShifted(&c.Delay, -(c.Exact.Min-int64(floor))/int64(des.Nanosecond))
	f.ipdv.Merge(&c.Variation)
	f.exact.Merge(c.Exact)
	f.bytes += c.Bytes
	f.reordered += c.Reordered
	f.jitter += c.Jitter
	f.jitters += c.Jitters
}

func (f *fold) outcome() result.Outcome {
	o := result.Outcome{DeliveredPackets: int64(f.exact.N), DuplicatePackets: int64(f.duplicates), InsidePackets: int64(f.inside)}
	lost := uint64(0)
	for c, n := range f.losses {
		o.LostPackets.Add(packet.Cause(c).String(), int64(n))
		lost += n
	}
	offered := f.exact.N + lost + f.inside
	o.OfferedPackets = int64(offered)
	if offered > 0 {
		o.LossRatio = ratio(lost, offered)
	}
	if f.seconds > 0 {
		bps := float64(f.bytes) * 8 / f.seconds
		o.ThroughputBps = &bps
	}
	if f.exact.N == 0 {
		return o
	}
	o.DelayS = distribution(&f.delay)
	for _, q := range []*float64{o.DelayS.P50, o.DelayS.P95, o.DelayS.P99, o.DelayS.P999} {
		if q != nil {
			*q += f.base.Seconds()
		}
	}
	lo, mean, hi := ps(float64(f.exact.Min)), ps(f.exact.Mean()), ps(float64(f.exact.Max))
	o.DelayS.Min, o.DelayS.Mean, o.DelayS.Max = &lo, &mean, &hi
	o.PDVS = distribution(&f.pdv)
	if f.ipdv.Count() > 0 {
		o.IPDVS = distribution(&f.ipdv)
	}
	if f.jitters > 0 {
		j := ps(math.Round(f.jitter / float64(f.jitters))) // below a picosecond it is none
		o.JitterS = &j
	}
	o.ReorderedRatio = ratio(f.reordered, f.exact.N)
	return o
}

func ps(t float64) float64 { return t / float64(des.Second) }

func ratio(a, b uint64) *float64 {
	v := float64(a) / float64(b)
	return &v
}

// distribution summarises a histogram of nanoseconds; a quantile with fewer
// than tail values beyond it is absent.
func distribution(h *measure.Hist) result.Distribution {
	q := func(num, den uint64) *float64 {
		if h.Count()*(den-num) < tail*den {
			return nil
		}
		v, ok := h.Quantile(num, den)
		if !ok {
			return nil
		}
		v /= 1e9
		return &v
	}
	d := result.Distribution{P50: q(1, 2), P95: q(95, 100), P99: q(99, 100), P999: q(999, 1000)}
	if least, ok := h.Min(); ok {
		v := float64(least) / 1e9
		d.Min = &v
	}
	if most, ok := h.Max(); ok {
		v := float64(most) / 1e9
		d.Max = &v
	}
	mean := h.Mean() / 1e9
	d.Mean = &mean
	return d
}

// figureOf gives the words and unit of a limit's figure.
func figureOf(f scenarios.Figure) (id, unit string) {
	if f == scenarios.FigureLoss {
		return f.String(), result.UnitRatio
	}
	return f.String(), result.UnitSeconds
}

func limitValue(l scenarios.Limit) float64 {
	if l.Figure == scenarios.FigureLoss {
		return l.Ratio
	}
	return l.Time.Seconds()
}

func limits(ls []scenarios.Limit) []result.Limit {
	var out []result.Limit
	for _, l := range ls {
		id, unit := figureOf(l.Figure)
		out = append(out, result.Limit{Figure: id, Unit: unit, Limit: limitValue(l)})
	}
	return out
}
