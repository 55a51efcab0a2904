package central

import (
	"fmt"
	"slices"

	"ferrule/controller"
	"ferrule/controller/path"
	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/optical"
)

// circuit is what the controller believes of a circuit.
type circuit struct {
	state     controller.CircuitState
	held      holding    // what it holds; no route: nothing
	active    int32      // incarnation that is open at its ends; 0: none
	last      int32      // incarnations numbered so far
	slots     int        // it should hold
	rate      nodes.Rate // its ports send at
	whole     nodes.Rate // with all slots it should hold
	preempted int
	portDead  [2]bool         // the port at an end, as it has told
	portHeard [2]int64        // last alarm of each end about it
	home      []nodes.FibreID // first route
	delay     des.Time        // of light over the route in use, or the last one
	usable    bool            // packets may go over it
	dark      [2][2]bool      // by route and end, as its ends have told
	heard     [2][2]int64     // last alarm of each route and end
	task      int32           // in hand for it, or None
	searching bool            // for a fibre that accounts for its loss of light
	setUp     des.Time
	upSince   des.Time
	downSince des.Time
	downTime  des.Time
	outages   int
	resizes   int
	reason    string
	class     nodes.ClassID // highest it carried when it last failed
}

// fibre is what the controller believes of a fibre.
type fibre struct {
	dark  [2]bool  // as its ends have told
	heard [2]int64 // last alarm of each end
	since des.Time // when it was last found lit again
}

// dead says whether any of its ways is believed dark.
func (f *fibre) dead() bool { return f.dark[0] || f.dark[1] }

// holding is what one incarnation of a circuit, or a request, owns.
type holding struct {
	incarnation int32
	route       []nodes.FibreID
	sites       []nodes.SiteID // one more than route
	channels    []int32        // number on each fibre; nil: slots
	slots       int
	copy        *holding // 1+1: the second route; never changed
}

// scratch is memory of searches, kept from one to the next.
type scratch struct {
	route  path.Route
	routes []path.Route
	mask   path.Mask
	width  []int64
	sites  path.Set // that convert
}

// newPicture sets c up with everything free and nothing set up.
func (c *Controller) newPicture() {
	p := c.k.plant
	for i := range p.Circuits {
		c.circuits = append(c.circuits, circuit{
			slots: p.Circuits[i].Slots, rate: p.Circuits[i].Rate, whole: p.Circuits[i].Rate,
			task: nodes.None, setUp: -1, upSince: des.Never, downSince: des.Never,
		})
	}
	c.fibres = make([]fibre, len(p.Fibres))
	c.sites = make([]site, len(p.Sites))
	edges := make([]path.Edge, len(p.Fibres))
	for i := range p.Fibres {
		f := &p.Fibres[i]
		edges[i] = path.Edge{A: int32(f.Ends[0]), B: int32(f.Ends[1]), Cost: int64(f.Delay), Groups: f.RiskGroups}
		c.free = append(c.free, int64(f.Slots))
		s := path.NewFullSet(f.Channels)
		for ch := range min(f.Lit, f.Channels) {
			s.Remove(ch)
		}
		c.spare = append(c.spare, s)
	}
	c.finder = path.NewFinder(path.NewGraph(len(p.Sites), edges))
	c.ways = make([]way, 2*len(p.Aggregates))
	c.tables = make([]*nodes.Table, len(p.Sites))
	c.scratch.mask = path.NewMask(c.finder.Graph())
	c.scratch.sites = path.NewSet(len(p.Sites))
	for i := range p.Sites {
		if p.Sites[i].Converts {
			c.scratch.sites.Add(i)
		}
	}
}

// reserve takes what h owns out of what is believed free; it is there.
func (c *Controller) reserve(h *holding) { c.book(h, -1) }

// unreserve gives it back.
func (c *Controller) unreserve(h *holding) { c.book(h, 1) }

// book adds sign times what h owns to what is believed free.
func (c *Controller) book(h *holding, sign int64) {
	for i, f := range h.route {
		switch {
		case h.channels == nil:
			c.free[f] += sign * int64(h.slots)
		case sign > 0:
			c.spare[f].Add(int(h.channels[i]))
		default:
			c.spare[f].Remove(int(h.channels[i]))
		}
	}
	if h.copy != nil {
		c.book(h.copy, sign)
	}
}

// delayOf is the delay of light over a route.
func (c *Controller) delayOf(route []nodes.FibreID) (d des.Time) {
	for _, f := range route {
		d += c.k.plant.Fibres[f].Delay
	}
	return d
}

// sitesAlong lists the sites of a route from one end; false when its fibres do
// not join from to to.
func (k *known) sitesAlong(route []nodes.FibreID, from, to nodes.SiteID) ([]nodes.SiteID, bool) {
	sites := []nodes.SiteID{from}
	at := from
	for _, f := range route {
		e := k.plant.Fibres[f].Ends
		if e[0] != at && e[1] != at {
			return nil, false
		}
		at = k.plant.Fibres[f].Other(at)
		sites = append(sites, at)
	}
	return sites, at == to
}

// assignmentAt is what h owns at the i-th site of its route.
func (h *holding) assignmentAt(i int) assignment {
	a := assignment{fibres: [2]nodes.FibreID{nodes.None, nodes.None}}
	n := 0
	for j := max(0, i-1); j <= min(i, len(h.route)-1); j++ {
		a.fibres[n] = h.route[j]
		a.amounts[n] = h.slots
		if h.channels != nil {
			a.amounts[n] = int(h.channels[j])
			a.flags = byChannel
		}
		n++
	}
	return a
}

// holds says whether it owns anything.
func (h *holding) holds() bool { return len(h.route) > 0 }

// over says whether it uses fibre f.
func (h *holding) over(f nodes.FibreID) bool {
	return slices.Contains(h.route, f) || h.copy != nil && h.copy.over(f)
}

// find looks for a route of circuit id over fibres that are not believed dead
// and have enough to take, without what is to be avoided. It returns the
// holding, not reserved, or the reason why there is none.
func (c *Controller) find(id nodes.CircuitID, want *search) (holding, string) {
	p := &c.k.plant.Circuits[id]
	avoid := want.avoid
	h := holding{slots: want.slots}
	if p.Channel {
		h.slots = 0
	}
	if want.along != nil && p.Recovery != nodes.RecoveryOnePlus {
		return c.check(h, p, want)
	}
	s := &c.scratch
	s.mask.Clear()
	for f := range c.fibres {
		if c.fibres[f].dead() || slices.Contains(avoid.fibres, nodes.FibreID(f)) {
			s.mask.Edges.Add(f)
		}
	}
	for _, v := range avoid.sites {
		s.mask.Nodes.Add(int(v))
	}
	for v := range c.sites {
		if c.sites[v].drained && !slices.Contains(p.Ends[:], nodes.SiteID(v)) {
			s.mask.Nodes.Add(v)
		}
	}
	q := path.Query{From: int32(p.Ends[0]), To: int32(p.Ends[1]), Avoid: s.mask, Width: want.width, Need: int64(h.slots)}
	q.By = c.objective(p, want.slots < c.circuits[id].slots)
	if p.Choose == nodes.ChooseApart {
		for _, o := range p.ApartFrom {
			c.excludeRoute(&c.circuits[o].held)
		}
	}
	if p.Recovery == nodes.RecoveryOnePlus {
		return c.findPair(h, p, want, &q)
	}
	if p.Channel {
		return c.findChannel(h, &q)
	}
	if !c.finder.Shortest(&q, &s.route) {
		return h, fmt.Sprintf("no route with %d free slots", h.slots)
	}
	h.setRoute(&s.route)
	return h, ""
}

// avoided is what a set-up keeps away from after a refusal.
type avoided struct {
	fibres []nodes.FibreID
	sites  []nodes.SiteID
}

// excludeRoute excludes the fibres of h and all that share a risk group.
func (c *Controller) excludeRoute(h *holding) {
	g := c.finder.Graph()
	for _, f := range h.routes() {
		c.scratch.mask.Edges.Add(int(f))
		for _, group := range c.k.plant.Fibres[f].RiskGroups {
			c.scratch.mask.ExcludeGroup(g, group)
		}
	}
}

// setRoute copies a route that was found into h.
func (h *holding) setRoute(r *path.Route) {
	h.route = make([]nodes.FibreID, len(r.Edges))
	h.sites = make([]nodes.SiteID, len(r.Nodes))
	for i, e := range r.Edges {
		h.route[i] = nodes.FibreID(e)
	}
	for i, v := range r.Nodes {
		h.sites[i] = nodes.SiteID(v)
	}
}

// routesTried is how many routes are looked at for a channel that is free all
// along.
const routesTried = 16

// findChannel looks for the best route along which a channel is free: the same
// on all fibres between sites that convert.
func (c *Controller) findChannel(h holding, q *path.Query) (holding, string) {
	s := &c.scratch
	s.width = path.Spare(c.spare, s.width[:0])
	q.Width, q.Need = s.width, 1
	s.routes = c.finder.KShortest(q, routesTried, s.routes)
	for i := range s.routes {
		ch, ok := path.Channels(&s.routes[i], c.spare, s.sites, nil)
		if ok {
			h.setRoute(&s.routes[i])
			h.channels = ch
			return h, ""
		}
	}
	return h, fmt.Sprintf("no channel free all along on the best %d routes", len(s.routes))
}

// check sees whether the route asked for will do.
func (c *Controller) check(h holding, p *nodes.Circuit, want *search) (holding, string) {
	along := want.along
	sites, ok := c.k.sitesAlong(along, p.Ends[0], p.Ends[1])
	if !ok {
		return h, "the fibres asked for do not join its ends"
	}
	for _, f := range along {
		if c.fibres[f].dead() {
			return h, "fibre " + c.k.fibreName(f) + " is believed dead"
		}
		if !p.Channel && want.width[f] < int64(h.slots) {
			return h, fmt.Sprintf("fibre %s has %d free slots, not %d", c.k.fibreName(f), want.width[f], h.slots)
		}
	}
	h.route, h.sites = slices.Clone(along), sites
	if !p.Channel {
		return h, ""
	}
	r := path.Route{}
	for _, v := range sites {
		r.Nodes = append(r.Nodes, int32(v))
	}
	for _, f := range along {
		r.Edges = append(r.Edges, int32(f))
	}
	if h.channels, ok = path.Channels(&r, c.spare, c.scratch.sites, nil); !ok {
		return holding{}, "no channel is free all along the route asked for"
	}
	return h, ""
}

// holder is how cross-connects know h of circuit id.
func (h *holding) holder(id nodes.CircuitID) optical.Holder {
	return optical.Holder{Circuit: id, Incarnation: h.incarnation}
}

// trail is the route of h as the sender at one end needs it.
func (h *holding) trail(id nodes.CircuitID, d nodes.Direction) *nodes.Trail {
	t := &nodes.Trail{Circuit: id, Incarnation: h.incarnation, Dir: d, Fibres: slices.Clone(h.route)}
	if d == nodes.Back {
		slices.Reverse(t.Fibres)
	}
	return t
}

// fibreList names the fibres of a route for a note.
func (c *Controller) fibreList(route []nodes.FibreID) string {
	b := []byte(nil)
	for i, f := range route {
		if i > 0 {
			b = append(b, ", "...)
		}
		b = append(b, c.k.fibreName(f)...)
	}
	return string(b)
}

// releaseAll tells every site of h's routes, up to part upto of them, to free
// what it owns there. With quick it is a matter of books alone.
func (c *Controller) releaseAll(id nodes.CircuitID, h *holding, upto int, quick bool, owner ownerKind, index int32) {
	for i := range upto {
		s, a, incarnation := h.part(i)
		a.flags |= release
		if quick {
			a.flags |= atOnce
		}
		c.command(s, a.message(id, incarnation, true), owner, index)
	}
}
