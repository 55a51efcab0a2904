package scenarios

import (
	"ferrule/controller/path"
	"ferrule/nodes"
)

// twoRoutes notes a 1+1 circuit for which the fibres offer no two routes that
// share neither a fibre nor a risk group, whatever is free on them.
func (r *resolver) twoRoutes(p *place, c *Circuit) {
	if c.Recovery != nodes.RecoveryOnePlus || c.A < 0 || c.B < 0 || c.A == c.B {
		return
	}
	f := r.routeFinder()
	q := path.Query{From: int32(c.A), To: int32(c.B), By: path.LeastCost}
	at := p.field("recovery")
	if !at.given() {
		at = p
	}
	a, b := r.s.Sites[c.A].Name, r.s.Sites[c.B].Name
	if c.Along == nil {
		var pair path.Pair
		if !f.DisjointPair(&q, path.ApartGroups, &pair) {
			at.fault("write restore or none, or add fibres", "no two routes from %s to %s share neither a fibre nor a risk group, as 1+1 needs", a, b)
		}
		return
	}
	var given, second path.Route
	for _, id := range c.Along {
		given.Edges = append(given.Edges, int32(id))
	}
	q.Avoid = path.NewMask(f.Graph())
	q.Avoid.ExcludeRoute(f.Graph(), &given, q.From, q.To, path.ApartGroups)
	if !f.Shortest(&q, &second) {
		at.fault("write another route, or restore or none", "no second route from %s to %s shares neither a fibre nor a risk group with the one given, as 1+1 needs", a, b)
	}
}

// routeFinder finds routes over the fibres; it is made once, when all fibres
// are known.
func (r *resolver) routeFinder() *path.Finder {
	if r.finder != nil {
		return r.finder
	}
	var edges []path.Edge
	for i := range r.s.Fibres {
		f := &r.s.Fibres[i]
		e := path.Edge{A: int32(f.A), B: int32(f.B), Cost: int64(f.Length.Light())}
		if f.A < 0 || f.B < 0 || f.A == f.B { // noted already; it must keep its number
			e = path.Edge{A: 0, B: 0, Cost: 1}
		}
		for _, g := range f.RiskGroups {
			e.Groups = append(e.Groups, int32(g))
		}
		edges = append(edges, e)
	}
	r.finder = path.NewFinder(path.NewGraph(len(r.s.Sites), edges))
	return r.finder
}
