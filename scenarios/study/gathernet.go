package study

import (
	"cmp"
	"fmt"
	"slices"
	"strings"

	"ferrule/controller"
	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/packet"
	"ferrule/scenarios"
	"ferrule/scenarios/build"
	"ferrule/scenarios/result"
)

// circuits reports how each circuit stands.
func (g *gatherer) circuits() {
	reports, _ := g.m.Control.Reports()
	busy := make([]float64, len(g.m.Plant.Circuits))
	for _, p := range g.n.PortReports() {
		busy[p.Circuit] = max(busy[p.Circuit], g.utilisation(&p))
	}
	for i := range reports {
		rep := &reports[i]
		c := &g.m.Plant.Circuits[rep.Circuit]
		x := result.Circuit{
			Name: c.Name, Carries: carries(c.Carries), Recovery: recovery(c.Recovery), State: rep.State.String(),
			Ends: g.siteNames(c.Ends[:]), Turns: g.turns(rep.Circuit),
			PayloadBps: float64(c.Payload), Resizes: int64(rep.Resizes), Reason: rep.Reason,
		}
		if rep.Rate > 0 && rep.Rate != c.Rate {
			x.PayloadBps = float64(rep.Rate)
		}
		at := c.Ends[0]
		for _, f := range rep.Route {
			x.Fibres = append(x.Fibres, g.m.Plant.Fibres[f].Name)
			if len(x.Route) == 0 {
				x.Route = append(x.Route, g.m.Plant.Sites[at].Name)
			}
			at = g.m.Plant.Fibres[f].Other(at)
			x.Route = append(x.Route, g.m.Plant.Sites[at].Name)
		}
		for _, f := range rep.Second {
			x.SecondFibres = append(x.SecondFibres, g.m.Plant.Fibres[f].Name)
		}
		if !c.Channel {
			slots := int64(c.Slots)
			if rep.Slots > 0 {
				slots = int64(rep.Slots)
			}
			x.Slots = &slots
		}
		if rep.Route != nil {
			d := rep.Delay.Seconds()
			x.DelayS = &d
			u := busy[rep.Circuit]
			x.Utilisation = &u
		}
		if rep.SetUp >= 0 {
			s := rep.SetUp.Seconds()
			x.SetUpS = &s
		}
		x.DownS = rep.DownTime.Seconds()
		if rep.DownSince != des.Never && rep.DownSince < g.end {
			x.DownS += (g.end - rep.DownSince).Seconds()
		}
		x.Preempted = int64(rep.Preempted)
		g.r.Circuits = append(g.r.Circuits, x)
	}
}

// policies reports what the policies of circuits have decided, once those are
// listed.
func (g *gatherer) policies() {
	for _, p := range g.m.Control.Policies() {
		g.r.Circuits[p.Circuit].Policy = &result.Policy{
			Grown: int64(p.Grown), Shrunk: int64(p.Shrunk), Blocked: int64(p.Blocked), Reversals: int64(p.Reversals),
		}
	}
}

// swings is from how many reversals on a policy is said to oscillate. Common
// practice, no source.
const swings = 3

func carries(c nodes.Carriage) string {
	switch c {
	case nodes.CarriesRouted:
		return "routed"
	case nodes.CarriesMoved:
		return "moved"
	}
	panic(fmt.Sprintf("study: unknown carriage %d", c))
}

func recovery(r nodes.Recovery) string {
	switch r {
	case nodes.RecoveryNone:
		return "none"
	case nodes.RecoveryOnePlus:
		return "1+1"
	case nodes.RecoveryRestore:
		return "restore"
	}
	panic(fmt.Sprintf("study: unknown recovery %d", r))
}

// utilisation is the share of its line's time a port was sending, from the end
// of the warm-up to the end of the sources.
func (g *gatherer) utilisation(p *packet.PortReport) float64 { return min(p.Utilisation, 1) }

// ports reports the queues, in the order of sites.
func (g *gatherer) ports() {
	for _, p := range g.n.PortReports() {
		u, wait := g.utilisation(&p), ps(p.MeanWait)
		most := int64(p.MaxBytes)
		x := result.Port{
			Circuit: g.m.Plant.Circuits[p.Circuit].Name, From: g.m.Plant.Sites[p.From].Name,
			Utilisation: &u, SentPackets: int64(p.Sent), MaxQueueBytes: &most,
		}
		x.LostPackets.Add(packet.LostQueue.String(), int64(p.Lost))
		if p.Sent > 0 {
			x.MeanWaitS = &wait
			queue := p.MeanQueue * float64(p.IPBytes) / float64(p.Sent)
			x.MeanQueueBytes = &queue
			x.Theory = g.theory(&p)
		}
		g.r.Ports = append(g.r.Ports, x)
	}
}

func (g *gatherer) fibres() {
	used := g.m.Control.SlotsOnFibres()
	for i := range g.m.Plant.Fibres {
		f := &g.m.Plant.Fibres[i]
		g.r.Fibres = append(g.r.Fibres, result.Fibre{
			Name: f.Name, LengthKm: float64(f.Length) / float64(nodes.Kilometre), Slots: int64(f.Slots), SlotsUsed: used[i],
			Ends: g.siteNames(f.Ends[:]), Channels: int64(f.Channels), RiskGroups: g.riskGroups(f),
		})
	}
}

// steps reports what became of every act of the timeline and the plan.
func (g *gatherer) steps() {
	_, reports := g.m.Control.Reports()
	for _, s := range g.m.Steps {
		x := result.Step{Act: s.Act.Verb.String(), Subject: build.Describe(s.Act), State: controller.Done.String()}
		if s.Live != "" {
			x.State = controller.Waiting.String()
			for i := range reports {
				if reports[i].Name == s.Live {
					stand(&x, &reports[i])
				}
			}
		} else if s.Order < 0 {
			if at := s.Act.At; at < g.end {
				t := at.Seconds()
				x.OrderedS, x.DoneS = &t, &t
			} else {
				x.State = controller.Waiting.String()
			}
		} else {
			stand(&x, &reports[s.Order])
		}
		g.r.Steps = append(g.r.Steps, x)
	}
	for i := range reports {
		for _, s := range g.m.Steps {
			if rep := &reports[i]; rep.Undoes >= 0 && s.Order == rep.Undoes {
				x := result.Step{Act: "undo of " + s.Act.Verb.String(), Subject: build.Describe(s.Act)}
				stand(&x, rep)
				g.r.Steps = append(g.r.Steps, x)
			}
		}
	}
}

// stand says how an order stands.
func stand(x *result.Step, rep *controller.StepReport) {
	x.State, x.Detail = rep.State.String(), rep.Detail
	if rep.Begun != des.Never {
		t := rep.Begun.Seconds()
		x.OrderedS = &t
	}
	if rep.Done != des.Never {
		t := rep.Done.Seconds()
		x.DoneS = &t
	}
}

func (g *gatherer) events() {
	for _, e := range g.n.Events() {
		detail := e.Detail
		if e.Site != nodes.None {
			where := "at " + g.m.Plant.Sites[e.Site].Name
			if detail != "" {
				where += ": "
			}
			detail = where + detail
		}
		g.r.Events = append(g.r.Events, result.Event{AtS: e.At.Seconds(), What: e.What, Subject: e.Subject, Detail: detail})
	}
	g.loops()
}

// loops adds the loops that routers made among themselves to the events.
func (g *gatherer) loops() {
	if g.m.Routing == nil {
		return
	}
	all := g.m.Routing.Loops()
	for _, l := range all {
		detail := strings.Join(g.siteNames(l.Sites), ", ")
		if l.To < des.Never {
			detail += fmt.Sprintf(", for %.3g ms", 1e3*(l.To-l.From).Seconds())
		}
		g.r.Events = append(g.r.Events, result.Event{AtS: l.From.Seconds(), What: "loop", Subject: "to " + g.m.Plant.Sites[l.Target].Name, Detail: detail})
	}
	slices.SortStableFunc(g.r.Events, func(a, b result.Event) int { return cmp.Compare(a.AtS, b.AtS) })
	if len(all) > 0 {
		g.r.Cautions = append(g.r.Cautions, fmt.Sprintf("The routers sent packets round in %d loops before they agreed; the events name them.", len(all)))
	}
}

// asked sets loads and forwarding latencies asked for beside those measured.
func (g *gatherer) asked() {
	sc := g.m.Scenario
	offered := g.n.Offered()
	span := (g.end - sc.Run.WarmUp).Seconds()
	for c := range sc.Classes {
		var ask, got float64
		for _, way := range g.ways {
			if a, _ := nodes.AggOf(way); int(sc.Aggregates[a].Class) == c {
				ask += g.m.Asked[way]
				got += float64(offered[way].Bytes) * 8
			}
		}
		x := result.Asked{Subject: sc.Classes[c].Name, Figure: "load", Unit: result.UnitBps, Asked: ask}
		if span > 0 {
			got /= span
			x.Measured = &got
		}
		g.r.Asked = append(g.r.Asked, x)
	}
	cfg := g.n.Config()
	for s := range sc.Sites {
		f, h := cfg.Forwarding[s], g.n.Latencies(nodes.SiteID(s))
		if f.Median == 0 || h.Count() == 0 {
			continue
		}
		d := distribution(h)
		for _, q := range []struct {
			name string
			ask  des.Time
			got  *float64
		}{{"forwarding-p50", f.Median, d.P50}, {"forwarding-p99", f.P99, d.P99}} {
			g.r.Asked = append(g.r.Asked, result.Asked{Subject: sc.Sites[s].Name, Figure: q.name, Unit: result.UnitSeconds, Asked: q.ask.Seconds(), Measured: q.got})
		}
	}
	for _, d := range g.m.Control.Demand() {
		if d.Offered == 0 {
			continue
		}
		blocked := float64(d.Blocked) / float64(d.Offered)
		g.r.Demands = append(g.r.Demands, result.Demand{Name: d.Name, Offered: int64(d.Offered), Blocked: int64(d.Blocked), Active: int64(d.Active), BlockedRatio: blocked})
	}
}

// price is what the circuits hold, in plain quantities.
func (g *gatherer) price() {
	p := &g.r.Price
	reports, _ := g.m.Control.Reports()
	for i := range reports {
		rep := &reports[i]
		if rep.Route == nil {
			continue
		}
		p.Ports += 2
		for _, f := range slices.Concat(rep.Route, rep.Second) {
			p.Slots += int64(rep.Slots)
			p.SlotKm += float64(float64(rep.Slots) * float64(g.m.Plant.Fibres[f].Length) / float64(nodes.Kilometre))
		}
	}
	for i, used := range g.m.Control.SlotsOnFibres() {
		f := &g.m.Plant.Fibres[i]
		if free := int64(f.Slots) - used; f.Slots > 0 && (p.Tightest == nil || free < p.Tightest.FreeSlots) {
			p.Tightest = &result.Tightest{Fibre: f.Name, FreeSlots: free}
		}
	}
	span := (g.end - g.m.Scenario.Run.WarmUp).Seconds()
	for s, bytes := range g.n.Transit() {
		if span > 0 {
			g.r.Transit = append(g.r.Transit, result.SiteRate{Site: g.m.Plant.Sites[s].Name, Bps: float64(bytes) * 8 / span})
		}
	}
}

func (g *gatherer) audit() {
	t, failures := g.n.Audit()
	a := &g.r.Audit
	a.OfferedPackets, a.DeliveredPackets, a.InsidePackets = int64(t.Offered), int64(t.Delivered), int64(t.Inside)
	a.CopyPackets, a.DiscardedCopiesPackets, a.DuplicatePackets = int64(t.Copies), int64(t.Discarded), int64(t.Duplicates)
	for c, n := range t.Lost {
		a.LostPackets.Add(packet.Cause(c).String(), int64(n))
	}
	a.LittlePorts = int64(t.Ports)
	a.SlotsOwned, a.SlotsUsed = g.m.Control.SlotsOwned()
	a.PacketHops = int64(t.Hops)
	a.Failures = append(failures, g.m.Control.Audit()...)
	if a.OfferedPackets+a.CopyPackets != a.DeliveredPackets+a.DiscardedCopiesPackets+a.DuplicatePackets+a.Lost()+a.InsidePackets {
		a.Failures = append(a.Failures, fmt.Sprintf("offered %d packets, copied %d, delivered %d, discarded %d copies, %d duplicates, lost %d, inside %d",
			a.OfferedPackets, a.CopyPackets, a.DeliveredPackets, a.DiscardedCopiesPackets, a.DuplicatePackets, a.Lost(), a.InsidePackets))
	}
	a.OK = len(a.Failures) == 0
}

// cautions adds what a reader of this run must know.
func (g *gatherer) cautions() {
	sc := g.m.Scenario
	var open []string
	for i := range sc.Classes {
		for j := range sc.Aggregates {
			a := &sc.Aggregates[j]
			if m := sc.Traffic[a.Traffic].Model; int(a.Class) == i && (m == scenarios.ModelFiles || m == scenarios.ModelPages) && !slices.Contains(open, sc.Classes[i].Name) {
				open = append(open, sc.Classes[i].Name)
			}
		}
	}
	for _, c := range open {
		g.r.Cautions = append(g.r.Cautions, "Class "+c+" is open loop: its transfers do not slow down when packets are lost, as real ones would.")
	}
	for _, p := range g.n.PortReports() {
		if p.Utilisation > 0.999 {
			g.r.Cautions = append(g.r.Cautions, fmt.Sprintf("Overload: %s from %s was busy all the time and lost %d packets; delays there are those of a full buffer.",
				g.m.Plant.Circuits[p.Circuit].Name, g.m.Plant.Sites[p.From].Name, p.Lost))
		}
	}
	for i := range g.r.Circuits {
		if p := g.r.Circuits[i].Policy; p != nil && p.Reversals >= swings {
			g.r.Cautions = append(g.r.Cautions, fmt.Sprintf("The policy of %s oscillates: it grew %d times and shrank %d times; its thresholds are too close together for its step, or its holding times too short.",
				g.r.Circuits[i].Name, p.Grown, p.Shrunk))
		}
	}
	for i, p := range g.r.Periods {
		if p.Unsettled {
			g.r.Cautions = append(g.r.Cautions, fmt.Sprintf("Period %s (%s) had not settled when it ended.", g.r.Periods[i].Name, p.Act))
		}
	}
}
