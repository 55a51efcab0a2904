package central

import (
	"fmt"
	"slices"

	"ferrule/controller"
	"ferrule/controller/path"
	"ferrule/nodes"
	"ferrule/nodes/optical"
)

// trails is the way, or for 1+1 both ways, that one end is to open.
type trails struct {
	work, copy *nodes.Trail
}

// trailsOf is what the sending end of a direction opens for h.
func (h *holding) trailsOf(id nodes.CircuitID, d nodes.Direction) *trails {
	t := &trails{work: h.trail(id, d)}
	if h.copy != nil {
		t.copy = h.copy.trail(id, d)
		t.copy.Copies = h.incarnation
	}
	return t
}

// parts is how many sites own something for h, each counted once for each of
// its routes.
func (h *holding) parts() int {
	if h.copy != nil {
		return len(h.sites) + len(h.copy.sites)
	}
	return len(h.sites)
}

// part is what the i-th of them owns, and for which incarnation.
func (h *holding) part(i int) (nodes.SiteID, assignment, int32) {
	if i >= len(h.sites) {
		return h.copy.part(i - len(h.sites))
	}
	return h.sites[i], h.assignmentAt(i), h.incarnation
}

// withSlots is h with another number of slots on every fibre.
func (h *holding) withSlots(n int) holding {
	c := *h
	c.slots = n
	if h.copy != nil {
		d := h.copy.withSlots(n)
		c.copy = &d
	}
	return c
}

// routes lists the fibres of all routes of h.
func (h *holding) routes() []nodes.FibreID {
	if h.copy == nil {
		return h.route
	}
	return slices.Concat(h.route, h.copy.route)
}

// routeOf is which route of a circuit an incarnation is: 0, its first, 1, that
// of the copies, or None.
func (k *circuit) routeOf(incarnation int32) int {
	switch {
	case incarnation == k.active:
		return 0
	case k.held.copy != nil && incarnation == k.held.copy.incarnation:
		return 1
	default:
		return nodes.None
	}
}

// findPair looks for two routes of a 1+1 circuit that share no fibre, no risk
// group and, where that is possible, no site between the ends. One may be
// given. The query says what to keep away from.
func (c *Controller) findPair(h holding, p *nodes.Circuit, want *search, q *path.Query) (holding, string) {
	s := &c.scratch
	if p.Channel {
		s.width = path.Spare(c.spare, s.width[:0])
		q.Width, q.Need = s.width, 1
	}
	var pair path.Pair
	found := false
	if want.along != nil {
		var why string
		if h, why = c.check(h, p, want); why != "" {
			return h, why
		}
		found = c.besideGiven(&h, q, &pair)
	} else {
		for _, how := range [2]path.Apart{path.ApartNodes | path.ApartGroups, path.ApartGroups} {
			if found = c.finder.DisjointPair(q, how, &pair); found {
				h.setRoute(&pair.Working)
				break
			}
		}
	}
	if !found {
		if p.Channel {
			return h, "no two routes apart with a free channel on every fibre"
		}
		return h, fmt.Sprintf("no two routes apart with %d free slots", h.slots)
	}
	h.copy = &holding{slots: h.slots}
	h.copy.setRoute(&pair.Protect)
	if !p.Channel {
		return h, ""
	}
	var ok [2]bool
	h.channels, ok[0] = path.Channels(&pair.Working, c.spare, s.sites, nil)
	h.copy.channels, ok[1] = path.Channels(&pair.Protect, c.spare, s.sites, nil)
	if !ok[0] || !ok[1] {
		return h, "no channel free all along on two routes apart"
	}
	return h, ""
}

// besideGiven finds the best second route beside the one that h has.
func (c *Controller) besideGiven(h *holding, q *path.Query, pair *path.Pair) bool {
	w := &pair.Working
	for _, v := range h.sites {
		w.Nodes = append(w.Nodes, int32(v))
	}
	for _, f := range h.route {
		w.Edges = append(w.Edges, int32(f))
	}
	g := c.finder.Graph()
	for _, how := range [2]path.Apart{path.ApartNodes | path.ApartGroups, path.ApartGroups} {
		try := *q
		try.Avoid = path.NewMask(g)
		copy(try.Avoid.Edges, q.Avoid.Edges)
		copy(try.Avoid.Nodes, q.Avoid.Nodes)
		try.Avoid.ExcludeRoute(g, w, q.From, q.To, how)
		if c.finder.Shortest(&try, &pair.Protect) {
			return true
		}
	}
	return false
}

// wayDark says whether light of one direction of a route is believed lost.
func (c *Controller) wayDark(h *holding, d nodes.Direction) bool {
	for i, f := range h.route {
		far := h.sites[i+1]
		if d == nodes.Back {
			far = h.sites[i]
		}
		if c.fibres[f].dark[endOf(c.k.plant.Fibres[f].Ends, far)] {
			return true
		}
	}
	return false
}

// impaired says what is wrong with a circuit on the routes it holds: whether
// some direction has no light on any route, and whether some route lacks light.
func (c *Controller) impaired(k *circuit) (lost, partly bool) {
	for d := range nodes.Direction(2) {
		first := k.dark[0][1-d] || c.wayDark(&k.held, d)
		second := k.held.copy == nil || k.dark[1][1-d] || c.wayDark(k.held.copy, d)
		lost = lost || first && second
		partly = partly || first || second && k.held.copy != nil
	}
	return lost, partly
}

// upState is the state of a circuit that carries packets.
func (c *Controller) upState(id nodes.CircuitID) controller.CircuitState {
	k := &c.circuits[id]
	if _, partly := c.impaired(k); k.held.copy != nil && partly {
		return controller.UpUnprotected
	}
	return controller.Up
}

// darkFibres names the fibres of h without light, or, when none is known to be
// so, says that.
func (c *Controller) darkFibres(h *holding) string {
	var dark []nodes.FibreID
	for _, f := range h.routes() {
		if c.fibres[f].dead() {
			dark = append(dark, f)
		}
	}
	if dark == nil {
		return "one route"
	}
	return c.fibreList(dark)
}

// assess brings the state of a 1+1 circuit up to date after news of light.
// With told, its ends stop sending by themselves when all is lost.
func (c *Controller) assess(id nodes.CircuitID, told bool) {
	k := &c.circuits[id]
	if lost, _ := c.impaired(k); lost || c.unfit(id) != "" {
		if carries(k.state) || k.state == controller.Down {
			c.fails(id, told)
		}
		return
	}
	switch is := c.upState(id); {
	case k.state == controller.Down:
		c.revive(id)
	case (k.state == controller.Up || k.state == controller.UpUnprotected) && k.state != is:
		c.enter(id, is)
		detail := "both routes have light"
		if is == controller.UpUnprotected {
			detail = "light is missing on " + c.darkFibres(&k.held)
		}
		c.x.Note(is.String(), c.k.circuitName(id), detail)
	}
}

// copyAlarm takes in what one end of a 1+1 circuit says of the light of one of
// its routes, already noted.
func (c *Controller) copyAlarm(m *nodes.Message, e int) {
	k := &c.circuits[m.Circuit]
	c.assess(m.Circuit, true)
	if k.dark[0][e] && k.dark[1][e] && !(k.dark[0][1-e] && k.dark[1][1-e]) {
		c.stopFarEnd(m, e) // it sends into the dark, and cannot know
	}
}

// stopFarEnd has the other end of a circuit stop sending.
func (c *Controller) stopFarEnd(m *nodes.Message, e int) {
	far := c.k.plant.Circuits[m.Circuit].Ends[1-e]
	c.command(far, nodes.Message{Op: opPortDown, Settles: true, Circuit: m.Circuit, N: c.circuits[m.Circuit].active}, ownerNone, 0)
}

// endsDark says whether some end has told that it sees no light on any route.
func (k *circuit) endsDark() bool {
	for e := range 2 {
		if k.dark[0][e] && (k.held.copy == nil || k.dark[1][e]) {
			return true
		}
	}
	return false
}

// ownedBy is what a site owns for an incarnation of h; false: nothing.
func (h *holding) ownedBy(s nodes.SiteID, incarnation int32) (assignment, bool) {
	for i := range h.parts() {
		if at, a, n := h.part(i); at == s && n == incarnation {
			return a, true
		}
	}
	return assignment{}, false
}

// holders adds how cross-connects know the routes of h.
func (h *holding) holders(list []optical.Holder, id nodes.CircuitID) []optical.Holder {
	list = append(list, h.holder(id))
	if h.copy != nil {
		list = append(list, h.copy.holder(id))
	}
	return list
}

// routeList names the fibres of all routes of h for a note.
func (c *Controller) routeList(h *holding) string {
	if h.copy == nil {
		return c.fibreList(h.route)
	}
	return c.fibreList(h.route) + " and " + c.fibreList(h.copy.route)
}

// is says whether an incarnation is that of one of h's routes.
func (h *holding) is(incarnation int32) bool {
	return h.incarnation == incarnation || h.copy != nil && h.copy.incarnation == incarnation
}
