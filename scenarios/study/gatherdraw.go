package study

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/optical"
	"ferrule/nodes/packet"
	"ferrule/scenarios/result"
)

// drawings adds what a report draws and a table does not show.
func (g *gatherer) drawings() {
	for i := range g.m.Scenario.Sites {
		s := &g.m.Scenario.Sites[i]
		x := result.Site{Name: s.Name}
		if s.Placed {
			x.XKm, x.YKm = new(kilometres(s.X)), new(kilometres(s.Y))
		}
		g.r.Sites = append(g.r.Sites, x)
	}
	g.cuts()
	g.loads()
	g.series()
}

func kilometres(l nodes.Length) float64 { return float64(l) / float64(nodes.Kilometre) }

func (g *gatherer) siteNames(ids []nodes.SiteID) []string {
	var out []string
	for _, s := range ids {
		out = append(out, g.m.Plant.Sites[s].Name)
	}
	return out
}

func (g *gatherer) fibreNames(ids []nodes.FibreID) []string {
	out := []string{}
	for _, f := range ids {
		out = append(out, g.m.Plant.Fibres[f].Name)
	}
	return out
}

func (g *gatherer) riskGroups(f *nodes.Fibre) []string {
	var out []string
	for _, i := range f.RiskGroups {
		out = append(out, g.m.Scenario.RiskGroups[i].Name)
	}
	return out
}

// turns is the life of a circuit as its first end saw it.
func (g *gatherer) turns(c nodes.CircuitID) []result.Turn {
	var out []result.Turn
	for _, t := range g.n.Turns(g.m.Plant.Circuits[c].Ends[0], c) {
		if t.At < g.end {
			out = append(out, result.Turn{AtS: t.At.Seconds(), State: stateWord(t.State), Fibres: g.fibreNames(t.Fibres)})
		}
	}
	return out
}

func stateWord(s nodes.PortState) string {
	switch s {
	case nodes.PortDown:
		return "down"
	case nodes.PortUp:
		return "up"
	case nodes.PortDraining:
		return "draining"
	}
	panic(fmt.Sprintf("study: unknown port state %d", s))
}

// cuts lists where and when fibres were dark.
func (g *gatherer) cuts() {
	for i := range g.m.Plant.Fibres {
		f := &g.m.Plant.Fibres[i]
		for _, s := range g.n.Dark(nodes.FibreID(i)) {
			if s.From >= g.end {
				continue
			}
			x := result.Cut{Fibre: f.Name, FromS: s.From.Seconds(), WhereKm: kilometres(f.Length) * float64(s.Place) / float64(f.Delay)}
			if s.To < g.end {
				x.ToS = new(s.To.Seconds())
			}
			switch s.Dirs {
			case optical.DirOut:
				x.OneWay = g.m.Plant.Sites[f.Ends[0]].Name
			case optical.DirBack:
				x.OneWay = g.m.Plant.Sites[f.Ends[1]].Name
			case optical.DirBoth:
			}
			g.r.Cuts = append(g.r.Cuts, x)
		}
	}
	slices.SortStableFunc(g.r.Cuts, func(a, b result.Cut) int { return cmp.Compare(a.FromS, b.FromS) })
}

// loads reports what each port carried of each class in each period.
func (g *gatherer) loads() {
	st := g.n.Stretches()
	for k, s := range g.periods {
		to := g.m.Scenario.Run.Length
		if s+1 < len(st) {
			to = min(to, st[s+1].From)
		}
		p := &g.r.Periods[k]
		span := p.ToS - p.FromS
		if span <= 0 {
			continue
		}
		for _, l := range g.n.Loads(st[s].From, to) {
			x := result.Load{Circuit: g.m.Plant.Circuits[l.Circuit].Name, From: g.m.Plant.Sites[l.From].Name, Period: p.Name}
			for c, bytes := range l.IPBytes {
				if bytes > 0 {
					x.Classes = append(x.Classes, result.ClassRate{Class: g.m.Scenario.Classes[c].Name, Bps: float64(bytes) * 8 / span})
				}
			}
			g.r.Loads = append(g.r.Loads, x)
		}
	}
}

// series reports what became of packets over the time of their sending.
func (g *gatherer) series() {
	all := g.n.Series()
	for c := range all {
		s := &all[c]
		x := newSeries(g.m.Scenario.Classes[c].Name, 0, s.Width)
		for i := range s.Wide {
			if des.Time(i)*s.Width >= g.end {
				break
			}
			appendBin(&x, &s.Wide[i], s.WideInside[i])
		}
		g.r.Series = append(g.r.Series, x)
	}
	for c := range all {
		g.r.Series = append(g.r.Series, closeUps(&all[c], g.m.Scenario.Classes[c].Name, g.n.Marks(), g.end)...)
	}
}

// closeUps makes a series of each stretch around acts, with the empty bins
// that the network does not keep.
func closeUps(s *packet.Series, class string, marks []des.Time, end des.Time) []result.Series {
	const width = packet.CloseWidth
	var out []result.Series
	next, at := uint64(0), 0
	for k := 0; k < len(marks); {
		from := uint64(max(marks[k]-packet.CloseBefore, 0) / width)
		until := marks[k]
		for ; k < len(marks) && marks[k]-packet.CloseBefore <= until+packet.CloseAfter; k++ {
			until = marks[k]
		}
		to := uint64((min(until+packet.CloseAfter, end) + width - 1) / width)
		x := newSeries(class, des.Time(from)*width, width)
		for next = from; next < to; next++ {
			for at < len(s.Close) && s.Close[at].No < next {
				at++
			}
			if at < len(s.Close) && s.Close[at].No == next {
				appendBin(&x, &s.Close[at].Tally, s.CloseInside[at])
			} else {
				appendBin(&x, &packet.Tally{}, 0)
			}
		}
		x.Close = true
		out = append(out, x)
	}
	return out
}

func newSeries(class string, from, width des.Time) result.Series {
	return result.Series{Class: class, FromS: from.Seconds(), WidthS: width.Seconds()}
}

func appendBin(x *result.Series, b *packet.Tally, inside uint64) {
	x.OfferedPackets = append(x.OfferedPackets, int64(b.Delivered+b.Lost+inside))
	x.DeliveredPackets = append(x.DeliveredPackets, int64(b.Delivered))
	x.LostPackets = append(x.LostPackets, int64(b.Lost))
	x.DeliveredBits = append(x.DeliveredBits, int64(b.Bytes)*8)
	var mean, most *float64
	if b.Delivered > 0 {
		mean, most = new(math.Round(float64(b.Delay)/float64(b.Delivered))/1e9), new(float64(b.MaxDelay)/1e9)
	}
	x.MeanDelayS, x.MaxDelayS = append(x.MeanDelayS, mean), append(x.MaxDelayS, most)
}

// Points of a tail: at most one for each 30th of a decade of the share, and
// none below the least share.
const (
	tailStep  = 30
	leastTail = 1e-5
)

// tail adds the distribution of the delay of a class in a period.
func (g *gatherer) tail(class, period string, f *fold) {
	n := f.delay.Count()
	if n == 0 {
		return
	}
	x := result.Tail{Class: class, Period: period}
	least, _ := f.delay.Min()
	most, _ := f.delay.Max()
	base := f.base.Seconds()
	add := func(ns uint64, share float64) {
		x.DelayS, x.AtLeast = append(x.DelayS, base+float64(ns)/1e9), append(x.AtLeast, share)
	}
	below, drawn := uint64(0), 0.0
	f.delay.Each(func(low, _, count uint64) {
		share := float64(n-below) / float64(n)
		below += count
		// Linear steps show the body, logarithmic ones the tail.
		step := math.Floor(math.Log10(share)*tailStep) + math.Floor(share*100)
		if share < leastTail || len(x.DelayS) > 0 && (step == drawn || low <= least) {
			return
		}
		add(max(low, least), share)
		drawn = step
	})
	if most > least {
		add(most, 1/float64(n))
	}
	g.r.Tails = append(g.r.Tails, x)
}
