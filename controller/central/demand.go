package central

import (
	"slices"

	"ferrule/controller/path"
	"ferrule/des"
	"ferrule/nodes"
)

// stream is a source of requests and what became of them.
type stream struct {
	demand   Demand // nil for single orders
	offered  uint64
	blocked  uint64
	refused  uint64
	active   int
	slotTime des.Sum
}

// request is slots held without packets, from the decision until its end. The
// hold counts from the decision, so that delays of messages add nothing to the
// load.
type request struct {
	serial  int64 // 0: free
	stream  int32
	waiting int // answers still to come
	h       holding
}

// arrival takes the next request of a stream and books the one after it.
func (c *Controller) arrival(i int) {
	d := c.streams[i].demand
	_, hold, number := d.Take()
	c.bookArrival(i, c.x)
	c.enqueue(job{kind: jobRequest, rank: rankOrder, stream: int32(i), step: nodes.None, number: number, hold: hold})
}

// bookArrival books the next request of a stream.
func (c *Controller) bookArrival(i int, x nodes.Local) {
	if at := c.streams[i].demand.Next(); at != des.Never {
		later(x, at, nodes.Message{Op: opArrival, N: int32(i)})
	}
}

// asked is what a request asks for.
func (c *Controller) asked(j *job) (ends [2]nodes.SiteID, slots int, choose nodes.Choice) {
	if j.step != nodes.None {
		o := c.steps[j.step].order
		return o.Ends, o.Slots, nodes.ChooseLeastDelay
	}
	s := &c.k.cfg.Streams[j.stream]
	return s.Ends, s.Slots, s.Choose
}

// admit decides a request: slots on the best route that has enough, or
// blocked.
func (c *Controller) admit(j *job) {
	ends, slots, choose := c.asked(j)
	s := &c.streams[j.stream]
	s.offered++
	found := c.findSlots(ends, slots, choose)
	if !found {
		s.blocked++
	}
	if j.step != nodes.None {
		why := ""
		if !found {
			why = "blocked"
		}
		c.stepEnds(j.step, why)
	}
	if !found {
		return
	}
	s.active++
	s.slotTime.AddProduct(uint64(slots), uint64(j.hold))
	place := c.newRequest()
	r := &c.requests[place]
	r.stream = j.stream
	r.h.take(&c.scratch.route)
	r.h.slots, r.h.incarnation = slots, int32(j.number)
	r.waiting = len(r.h.sites)
	c.reserve(&r.h)
	for i, site := range r.h.sites {
		m := r.h.assignmentAt(i).message(streamHolder(int(j.stream)), r.h.incarnation, false)
		c.command(site, m, ownerRequest, place)
	}
	later(c.x, c.now.Plus(j.hold), nodes.Message{Op: opExpire, N: place, A: r.serial})
}

// findSlots puts into the scratch route the best one with so many slots free.
func (c *Controller) findSlots(ends [2]nodes.SiteID, slots int, choose nodes.Choice) bool {
	s := &c.scratch
	s.mask.Clear()
	for f := range c.fibres {
		if c.fibres[f].dead() {
			s.mask.Edges.Add(f)
		}
	}
	for v := range c.sites {
		if c.sites[v].drained && nodes.SiteID(v) != ends[0] && nodes.SiteID(v) != ends[1] {
			s.mask.Nodes.Add(v)
		}
	}
	q := path.Query{From: int32(ends[0]), To: int32(ends[1]), Avoid: s.mask, Width: c.free, Need: int64(slots)}
	switch choose {
	case nodes.ChooseLeastDelay:
		q.By = path.LeastCost
	case nodes.ChooseFewestRouters:
		q.By = path.FewestHops
	case nodes.ChooseMostSpare:
		q.By = path.Widest
	default:
		panic("central: a stream cannot choose its route so")
	}
	return c.finder.Shortest(&q, &s.route)
}

// take copies a route into the memory h has.
func (h *holding) take(r *path.Route) {
	h.route, h.sites = h.route[:0], h.sites[:0]
	for _, e := range r.Edges {
		h.route = append(h.route, nodes.FibreID(e))
	}
	for _, v := range r.Nodes {
		h.sites = append(h.sites, nodes.SiteID(v))
	}
}

// newRequest finds a free place.
func (c *Controller) newRequest() int32 {
	if len(c.unused) == 0 {
		c.unused = append(c.unused, int32(len(c.requests)))
		c.requests = append(c.requests, request{})
	}
	place := c.unused[len(c.unused)-1]
	c.unused = c.unused[:len(c.unused)-1]
	c.number++
	c.requests[place].serial = c.number
	return place
}

// requestAnswered counts an answer, and ends a request that was refused: it
// was blocked after all.
func (c *Controller) requestAnswered(place int32, ok bool) {
	r := &c.requests[place]
	r.waiting--
	if ok {
		return
	}
	s := &c.streams[r.stream]
	s.blocked++
	s.refused++
	c.endRequest(place)
}

// expire ends a request whose time is over, unless it has ended before.
func (c *Controller) expire(place int32, serial int64) {
	if c.requests[place].serial == serial {
		c.endRequest(place)
	}
}

// endRequest releases what a request holds.
func (c *Controller) endRequest(place int32) {
	r := &c.requests[place]
	if r.waiting > 0 {
		c.withdraw(ownerRequest, place)
	}
	c.unreserve(&r.h)
	for i, site := range r.h.sites {
		a := r.h.assignmentAt(i)
		a.flags |= release | atOnce
		c.command(site, a.message(streamHolder(int(r.stream)), r.h.incarnation, false), ownerNone, 0)
	}
	c.streams[r.stream].active--
	r.serial, r.waiting = 0, 0
	c.unused = append(c.unused, place)
}

// cloneRequests copies them and the routes they hold, whose memory is reused.
func cloneRequests(list []request) []request {
	list = slices.Clone(list)
	for i := range list {
		list[i].h.route = slices.Clone(list[i].h.route)
		list[i].h.sites = slices.Clone(list[i].h.sites)
	}
	return list
}
