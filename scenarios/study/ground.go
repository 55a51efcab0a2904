package study

import (
	"cmp"
	"fmt"
	"slices"

	"ferrule/controller/path"
	"ferrule/nodes"
	"ferrule/scenarios"
	"ferrule/scenarios/build"
)

// A ground is the circuits of a plan over the fibres, at the start of the run
// or after a failure, found by the rules of the controller without running it.
type ground struct {
	sc     *scenarios.Scenario
	plan   *scenarios.Plan
	plant  *nodes.Plant
	finder *path.Finder // over the fibres, by light

	lines []line     // by circuit
	free  []int64    // slots, by fibre
	spare []path.Set // channels, by fibre
}

// A line is one circuit as it stands.
type line struct {
	up       bool
	route    []nodes.FibreID // nil: it holds nothing
	channels []int32         // on each fibre of route; nil: slots
	second   []nodes.FibreID // of 1+1: the route of the other copy
	why      string          // it is not up
	shared   string          // of 1+1: why its copies can fail together
}

// newGround places the circuits that stand at the start, those whose route is
// given first, as the controller does.
func newGround(sc *scenarios.Scenario, plan *scenarios.Plan) (*ground, error) {
	plant, err := build.Plant(sc, plan)
	if err != nil {
		return nil, err
	}
	g := &ground{sc: sc, plan: plan, plant: plant, lines: make([]line, len(plant.Circuits))}
	edges := make([]path.Edge, len(plant.Fibres))
	for i := range plant.Fibres {
		f := &plant.Fibres[i]
		edges[i] = path.Edge{A: int32(f.Ends[0]), B: int32(f.Ends[1]), Cost: int64(f.Delay), Groups: f.RiskGroups}
		g.free = append(g.free, int64(f.Slots))
		s := path.NewFullSet(f.Channels)
		for ch := range min(f.Lit, f.Channels) {
			s.Remove(ch)
		}
		g.spare = append(g.spare, s)
	}
	g.finder = path.NewFinder(path.NewGraph(len(plant.Sites), edges))
	for _, fixed := range [2]bool{true, false} {
		for i := range plant.Circuits {
			if c := &plant.Circuits[i]; c.InPlace && (c.Along != nil) == fixed {
				g.lines[i] = g.place(nodes.CircuitID(i), c.Along, nil)
			}
		}
	}
	return g, nil
}

// place finds and books a route for circuit id, without the dead fibres.
func (g *ground) place(id nodes.CircuitID, along, dead []nodes.FibreID) line {
	c := &g.plant.Circuits[id]
	q := path.Query{From: int32(c.Ends[0]), To: int32(c.Ends[1]), By: path.LeastCost, Width: g.free, Need: int64(c.Slots), Avoid: g.avoid(dead)}
	if c.Channel {
		q.Width, q.Need = path.Spare(g.spare, nil), 1
	}
	switch c.Choose {
	case nodes.ChooseLeastDelay:
	case nodes.ChooseFewestRouters:
		q.By = path.FewestHops
	case nodes.ChooseMostSpare:
		q.By = path.Widest
	case nodes.ChooseApart:
		for _, o := range c.ApartFrom {
			g.excludeGroups(&q.Avoid, g.lines[o].route)
		}
	default:
		panic(fmt.Sprintf("study: unknown choice of route %d", c.Choose))
	}
	if along == nil && g.plan.Circuits[id].Recovery == nodes.RecoveryOnePlus {
		return g.placePair(c, &q)
	}
	var routes []path.Route
	switch {
	case along != nil:
		routes = []path.Route{g.routeOf(c, along)}
	case c.Channel:
		routes = g.finder.KShortest(&q, 16, nil) // as many as the controller looks at
	default:
		var r path.Route
		if g.finder.Shortest(&q, &r) {
			routes = append(routes, r)
		}
	}
	for i := range routes {
		if l, ok := g.fit(c, &routes[i]); ok {
			g.book(c, &l, -1)
			if g.plan.Circuits[id].Recovery == nodes.RecoveryOnePlus {
				g.protect(c, &q, &l)
			}
			return l
		}
	}
	if c.Channel {
		return line{why: "no channel is free all along"}
	}
	return line{why: fmt.Sprintf("no route with %d free slots", c.Slots)}
}

// avoid is a mask of dead fibres.
func (g *ground) avoid(dead []nodes.FibreID) path.Mask {
	m := path.NewMask(g.finder.Graph())
	for _, f := range dead {
		m.Edges.Add(int(f))
	}
	return m
}

// excludeGroups excludes the fibres of a route and all that share a risk group
// with one of them.
func (g *ground) excludeGroups(m *path.Mask, route []nodes.FibreID) {
	for _, f := range route {
		m.Edges.Add(int(f))
		for _, group := range g.plant.Fibres[f].RiskGroups {
			m.ExcludeGroup(g.finder.Graph(), group)
		}
	}
}

// routeOf is a route given by its fibres.
func (g *ground) routeOf(c *nodes.Circuit, along []nodes.FibreID) path.Route {
	r := path.Route{Nodes: []int32{int32(c.Ends[0])}}
	at := c.Ends[0]
	for _, f := range along {
		at = g.plant.Fibres[f].Other(at)
		r.Nodes = append(r.Nodes, int32(at))
		r.Edges = append(r.Edges, int32(f))
	}
	return r
}

// fit sees whether a route has what c needs.
func (g *ground) fit(c *nodes.Circuit, r *path.Route) (line, bool) {
	l := line{up: true}
	for _, e := range r.Edges {
		if !c.Channel && g.free[e] < int64(c.Slots) {
			return line{}, false
		}
		l.route = append(l.route, nodes.FibreID(e))
	}
	if !c.Channel {
		return l, true
	}
	converts := path.NewSet(len(g.plant.Sites))
	for i := range g.plant.Sites {
		if g.plant.Sites[i].Converts {
			converts.Add(i)
		}
	}
	var ok bool
	l.channels, ok = path.Channels(r, g.spare, converts, nil)
	return l, ok
}

// placePair finds two routes that are apart for a 1+1 circuit: also by risk
// group if they can be.
func (g *ground) placePair(c *nodes.Circuit, q *path.Query) line {
	var pair path.Pair
	if q.By == path.Widest {
		q.By = path.LeastCost
	}
	if !g.finder.DisjointPair(q, path.ApartGroups, &pair) && !g.finder.DisjointPair(q, path.ApartEdges, &pair) {
		return line{why: "no two routes with enough free that are apart"}
	}
	l, ok := g.fit(c, &pair.Working)
	if !ok {
		return line{why: "no channel is free all along"}
	}
	g.book(c, &l, -1)
	g.second(c, &pair.Protect, &l)
	return l
}

// protect finds the second route of a 1+1 circuit whose first is given.
func (g *ground) protect(c *nodes.Circuit, q *path.Query, l *line) {
	var r path.Route
	edges := q.Avoid
	edges.Edges = slices.Clone(q.Avoid.Edges)
	for _, f := range l.route {
		edges.Edges.Add(int(f))
	}
	g.excludeGroups(&q.Avoid, l.route)
	if g.finder.Shortest(q, &r) {
		g.second(c, &r, l)
		return
	}
	q.Avoid = edges
	if g.finder.Shortest(q, &r) {
		g.second(c, &r, l)
		return
	}
	l.shared = "there is no second route"
}

// second books the second route of a 1+1 circuit and says what it shares with
// the first.
func (g *ground) second(c *nodes.Circuit, r *path.Route, l *line) {
	s, ok := g.fit(c, r)
	if !ok {
		l.shared = "the second route has no channel free all along"
		return
	}
	g.book(c, &s, -1)
	l.second = s.route
	if both := g.inCommon(l.route, l.second); both != "" {
		l.shared = "both copies use " + both
	}
}

// inCommon names the first fibre or risk group that two routes share, or
// nothing.
func (g *ground) inCommon(a, b []nodes.FibreID) string {
	for _, f := range a {
		if slices.Contains(b, f) {
			return "the fibre " + g.plant.Fibres[f].Name
		}
	}
	for _, f := range a {
		for _, o := range b {
			for _, group := range g.plant.Fibres[f].RiskGroups {
				if slices.Contains(g.plant.Fibres[o].RiskGroups, group) {
					return "the risk group " + g.sc.RiskGroups[group].Name
				}
			}
		}
	}
	return ""
}

// book adds sign times what l holds to what is free.
func (g *ground) book(c *nodes.Circuit, l *line, sign int64) {
	for i, f := range l.route {
		switch {
		case l.channels == nil:
			g.free[f] += sign * int64(c.Slots)
		case sign > 0:
			g.spare[f].Add(int(l.channels[i]))
		default:
			g.spare[f].Remove(int(l.channels[i]))
		}
	}
}

// without is the ground after fibres have failed and the controller has done
// what it can: circuits that restore are given new routes in the order of
// importance, those that do not are down.
func (g *ground) without(dead []nodes.FibreID, order []nodes.CircuitID) *ground {
	f := *g
	f.lines, f.free = slices.Clone(g.lines), slices.Clone(g.free)
	f.spare = make([]path.Set, len(g.spare))
	for i, s := range g.spare {
		f.spare[i] = slices.Clone(s)
	}
	var again []nodes.CircuitID
	for _, id := range order {
		l := &f.lines[id]
		if !l.up || !touches(l.route, dead) {
			continue
		}
		if l.second != nil && !touches(l.second, dead) {
			l.route = l.second
			continue
		}
		l.up, l.why = false, "its route is dark"
		if g.plant.Circuits[id].Recovery == nodes.RecoveryRestore {
			f.book(&g.plant.Circuits[id], l, 1)
			again = append(again, id)
		}
	}
	for _, id := range again {
		f.lines[id] = f.place(id, nil, dead)
	}
	return &f
}

// touches reports whether a route uses one of some fibres.
func touches(route, fibres []nodes.FibreID) bool {
	return slices.ContainsFunc(route, func(f nodes.FibreID) bool { return slices.Contains(fibres, f) })
}

// importance orders circuits as they are restored: by set-up priority, then
// the highest class they carry, then bandwidth, then name.
func (g *ground) importance(classes []nodes.ClassID) []nodes.CircuitID {
	order := make([]nodes.CircuitID, len(g.lines))
	for i := range order {
		order[i] = nodes.CircuitID(i)
	}
	slices.SortFunc(order, func(a, b nodes.CircuitID) int {
		p, q := &g.plant.Circuits[a], &g.plant.Circuits[b]
		return cmp.Or(cmp.Compare(p.Setup, q.Setup), cmp.Compare(classes[a], classes[b]),
			cmp.Compare(q.Payload, p.Payload), cmp.Compare(p.Name, q.Name), cmp.Compare(a, b))
	})
	return order
}

// bestWay is the way of least delay between two sites, whatever is free on it;
// nil when there is none.
func (g *ground) bestWay(from, to nodes.SiteID) []nodes.FibreID {
	var r path.Route
	q := path.Query{From: int32(from), To: int32(to), By: path.LeastCost}
	if !g.finder.Shortest(&q, &r) {
		return nil
	}
	way := make([]nodes.FibreID, len(r.Edges))
	for i, e := range r.Edges {
		way[i] = nodes.FibreID(e)
	}
	return way
}
