package packet

import (
	"slices"

	"ferrule/des"
	"ferrule/des/measure"
	"ferrule/nodes"
	"ferrule/nodes/conditioner"
)

// Endpoint is one end of an aggregate whose traffic is a closed loop: it stands
// where Way begins, sends on it, and is sent to on the way back.
type Endpoint struct {
	Way      uint16
	Endpoint nodes.Endpoint
	Meter    *conditioner.Meter // as of a Source
	Shaper   *conditioner.Shaper
}

// host is an endpoint at its site. It reacts as packets leave the network,
// within the segment in which they do, so that what it sends is there before
// ports are served; what is in the forwarding engine at the end of a segment
// waits for the next one.
type host struct {
	ep    nodes.Endpoint
	tally *nodes.Tally
	out   []nodes.Packet // sent, Due when they leave the forwarding engine
	head  int
	cells []*FlowCell
}

// FlowCell is what happened to transfers in one stretch.
type FlowCell struct {
	Began    uint64          // asked for
	Times    measure.Hist    // ns from a request to the last byte, of those complete
	Exact    measure.Moments // the same in ps
	Bytes    uint64          // payload of those complete
	Good     uint64          // payload that arrived for the first time, complete or not
	Resent   uint64          // segments sent again
	Timeouts uint64          // retransmission timers that ran out
}

// addHost puts an endpoint where its way begins.
func (n *Network) addHost(e *Endpoint) {
	a, d := nodes.AggOf(e.Way)
	s := n.sites[n.plant.Aggregates[a].Origin(d)]
	if s.hostOf == nil {
		s.hostOf = make([]int32, len(n.classOf))
	}
	s.sources = append(s.sources, source{
		way: e.Way, gate: newGate(&Source{Meter: e.Meter, Shaper: e.Shaper}),
		host: &host{ep: e.Endpoint, tally: e.Endpoint.Tally()},
	})
	s.next = append(s.next, des.Never)
	s.hostOf[e.Way^1] = int32(len(s.sources))
	s.hostMin = min(s.hostMin, e.Endpoint.Next())
}

// hear hands a packet that has left the network to the endpoint it was for.
func (s *Site) hear(k *nodes.Packet, now des.Time) {
	i := s.hostOf[k.Way]
	if i == 0 {
		return
	}
	src := &s.sources[i-1]
	h := src.host
	from := len(h.out)
	h.out = h.ep.Receive(now, k, h.out)
	s.hostMin = min(s.hostMin, now)
	s.sent(src, from, now)
}

// runHosts lets endpoints do what is due before end, and lets go what they have
// sent that leaves the forwarding engine before it.
func (s *Site) runHosts(end des.Time) {
	s.hostMin = des.Never
	for i := range s.sources {
		src := &s.sources[i]
		h := src.host
		if h == nil {
			continue
		}
		if until := min(end, s.net.cfg.Length); h.ep.Next() < until {
			from := len(h.out)
			h.out = h.ep.Advance(until, h.out)
			s.sent(src, from, until-1)
		}
		s.letGo(src, sourceKey+int32(i), end)
		if t := h.ep.Next(); t < s.net.cfg.Length {
			s.hostMin = min(s.hostMin, t)
		}
		if h.head < len(h.out) {
			s.hostMin = min(s.hostMin, h.out[h.head].Due)
		}
	}
}

// sent counts what an endpoint has just appended, from a place on, and what it
// has noted; sources have ended at the end of the run, and so has it.
func (s *Site) sent(src *source, from int, now des.Time) {
	h := src.host
	if t := h.tally; t.Good|t.Resent|t.Timeout|t.Began != 0 || len(t.Done) > 0 {
		s.file(h, now)
	}
	if now >= s.net.cfg.Length {
		h.out = h.out[:from]
		return
	}
	for j := from; j < len(h.out); j++ {
		k := &h.out[j]
		src.packets++
		src.bytes += uint64(k.Size)
		k.Due += s.access.at(k.Due)
	}
}

// letGo enters what an endpoint has sent and is due before end.
func (s *Site) letGo(src *source, key int32, end des.Time) {
	h := src.host
	hop := s.hop[src.way]
	for h.head < len(h.out) && h.out[h.head].Due < end {
		k := &h.out[h.head]
		h.head++
		if src.gate == nil || s.passGate(src.gate, k, k.Due) {
			s.enter(k, k.Due, hop, key)
		}
	}
	if h.head == len(h.out) {
		h.out, h.head = h.out[:0], 0
	} else if h.head > 1024 && h.head > len(h.out)/2 {
		h.out, h.head = h.out[:copy(h.out, h.out[h.head:])], 0
	}
}

// file adds what an endpoint has noted to the stretch it belongs to.
func (s *Site) file(h *host, now des.Time) {
	t := h.tally
	stretch := s.st.stretch
	if now < s.st.from || now >= s.st.to {
		stretch, _ = s.net.history.find(now, now)
	}
	c := h.cell(stretch)
	c.Good += t.Good
	c.Resent += t.Resent
	c.Timeouts += t.Timeout
	c.Began += t.Began
	for i := range t.Done {
		x := &t.Done[i]
		began, _ := s.net.history.find(x.Began, x.Began) // that in which it was asked for
		c := h.cell(began)
		c.Times.Add(uint64(x.Ended-x.Began) / 1000)
		c.Exact.Add(int64(x.Ended - x.Began))
		c.Bytes += uint64(x.Bytes)
	}
	t.Clear()
}

func (h *host) cell(stretch int32) *FlowCell {
	for int(stretch) >= len(h.cells) {
		h.cells = append(h.cells, nil)
	}
	if h.cells[stretch] == nil {
		h.cells[stretch] = &FlowCell{}
	}
	return h.cells[stretch]
}

// Flows reports what happened to the transfers of a way by stretch; nil where
// nothing did, or the way has no endpoints.
func (n *Network) Flows(way uint16) []*FlowCell {
	a, d := nodes.AggOf(way)
	agg := &n.plant.Aggregates[a]
	var out []*FlowCell
	to, from := n.sites[agg.Target(d)].hostFor(way), n.sites[agg.Origin(d)].hostFor(way^1)
	for i := range max(len(to.list()), len(from.list())) {
		var c *FlowCell
		if x := to.list(); i < len(x) && x[i] != nil {
			c = &FlowCell{Began: x[i].Began, Times: x[i].Times.Clone(), Exact: x[i].Exact, Bytes: x[i].Bytes, Good: x[i].Good}
		}
		if x := from.list(); i < len(x) && x[i] != nil {
			if c == nil {
				c = &FlowCell{}
			}
			c.Resent, c.Timeouts = x[i].Resent, x[i].Timeouts
		}
		out = append(out, c)
	}
	return out
}

// hostFor is the endpoint that a way leads to here, or nil.
func (s *Site) hostFor(way uint16) *host {
	if s.hostOf == nil || s.hostOf[way] == 0 {
		return nil
	}
	return s.sources[s.hostOf[way]-1].host
}

func (h *host) list() []*FlowCell {
	if h == nil {
		return nil
	}
	return h.cells
}

// scaleHost sets the load of what is asked for over a way.
func (s *Site) scaleHost(now des.Time, way uint16, factor float64) {
	h := s.hostFor(way)
	h.ep.Scale(now, factor)
	s.hostMin = min(s.hostMin, max(now, h.ep.Next()))
}

// hostsDone reports whether nothing that endpoints have sent waits.
func (s *Site) hostsDone() bool {
	for i := range s.sources {
		if h := s.sources[i].host; h != nil && h.head < len(h.out) {
			return false
		}
	}
	return true
}

// each calls f for every packet that waits.
func (h *host) each(f func(p *nodes.Packet)) {
	if h == nil {
		return
	}
	for i := h.head; i < len(h.out); i++ {
		f(&h.out[i])
	}
}

func (h *host) clone() *host {
	c := *h
	c.ep = h.ep.Clone()
	c.tally = c.ep.Tally()
	c.out = slices.Clone(h.out)
	c.cells = slices.Clone(h.cells)
	for i, x := range c.cells {
		if x != nil {
			y := *x
			y.Times = x.Times.Clone()
			c.cells[i] = &y
		}
	}
	return &c
}
