package packet

import (
	"cmp"
	"slices"

	"ferrule/des"
	"ferrule/nodes"
)

func sortEvents(e []nodes.Event) {
	slices.SortStableFunc(e, func(a, b nodes.Event) int {
		if c := cmp.Compare(a.At, b.At); c != 0 {
			return c
		}
		return cmp.Compare(a.Site, b.Site)
	})
}

// Clone returns a network in the same state that shares nothing that either
// will change. It must be called between windows.
func (n *Network) Clone() *Network {
	c := *n
	c.light, c.ways = n.light.Clone(), n.ways.Clone()
	c.history.s = slices.Clone(n.history.s)
	c.acts = n.acts.Clone()
	c.log = slices.Clone(n.log)
	c.flagged = make([]bool, len(n.flagged))
	c.meters = make([]Meter, len(n.meters))
	for i := range n.meters {
		c.meters[i] = n.meters[i].clone()
	}
	pipes := map[*pipe]*pipe{} // looked up only
	for _, s := range n.sites {
		for i := range s.inputs {
			p := s.inputs[i].pipe
			pipes[p] = p.clone()
		}
	}
	c.sites, c.regions, c.kernel = nil, nil, nil
	for _, s := range n.sites {
		c.sites = append(c.sites, s.clone(&c, pipes))
	}
	c.marks = slices.Clone(n.marks)
	c.siteSpans = slices.Clone(n.siteSpans)
	c.traceMeters()
	for _, r := range n.regions {
		d := &region{net: &c, inner: r.inner}
		for _, s := range r.sites {
			d.sites = append(d.sites, c.sites[s.id])
		}
		c.regions = append(c.regions, d)
		c.kernel = append(c.kernel, des.Region(d))
	}
	return &c
}

// SourceOf returns the source of a way, nil when it has none or is a loop of
// hosts. After Clone it is the clone's own.
func (n *Network) SourceOf(way uint16) nodes.Source {
	a, d := nodes.AggOf(way)
	s := n.sites[n.plant.Aggregates[a].Origin(d)]
	if i := s.sourceOf(way); i >= 0 {
		return s.sources[i].s
	}
	return nil
}

func (s *Site) clone(n *Network, pipes map[*pipe]*pipe) *Site {
	c := *s
	c.net = n
	c.latencies = s.latencies.Clone()
	lats := map[*latency]*latency{} // looked up only
	tails := map[*tail]*tail{}      // looked up only
	c.inputs = slices.Clone(s.inputs)
	for i := range c.inputs {
		in := &c.inputs[i]
		in.pipe = pipes[in.pipe]
		if lats[in.lat] == nil {
			l := *in.lat
			lats[in.lat] = &l
		}
		in.lat = lats[in.lat]
		if t := in.tail; t != nil {
			if tails[t] == nil {
				tails[t] = t.clone(pipes)
			}
			in.tail = tails[t]
		}
	}
	c.ports = make([]port, len(s.ports))
	for i := range s.ports {
		c.ports[i] = s.ports[i].clone(pipes)
	}
	c.sources = slices.Clone(s.sources)
	for i := range c.sources {
		if c.sources[i].host != nil {
			c.sources[i].host = s.sources[i].host.clone()
		} else {
			c.sources[i].s = s.sources[i].s.Clone()
		}
		c.sources[i].gate = s.sources[i].gate.clone()
	}
	c.next = slices.Clone(s.next)
	c.portOf = slices.Clone(s.portOf)
	c.steer = slices.Clone(s.steer)
	c.hop = slices.Clone(s.hop)
	c.sets = slices.Clone(s.sets)
	c.held = slices.Clone(s.held)
	for i := range c.held {
		c.held[i].buf = slices.Clone(s.held[i].buf)
	}
	if s.agent != nil {
		c.agent = s.agent.Clone()
	}
	c.agenda = s.agenda.Clone()
	c.out, c.fresh, c.dirty, c.scratch = nil, nil, nil, nil
	c.sink, c.via = arrivals{key: -1}, slices.Clone(s.via)
	c.traces = slices.Clone(s.traces)
	for i := range c.traces {
		c.traces[i] = s.traces[i].clone(n)
	}
	c.losses = slices.Clone(s.losses)
	for i := range c.losses {
		c.losses[i].Faults = slices.Clone(s.losses[i].Faults)
		c.losses[i].Count = slices.Clone(s.losses[i].Count)
	}
	c.lossOf = slices.Clone(s.lossOf)
	c.discarded = slices.Clone(s.discarded)
	c.events = slices.Clone(s.events)
	return &c
}
