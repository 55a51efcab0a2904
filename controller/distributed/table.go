package distributed

import (
	"fmt"
	"slices"

	"ferrule/controller/path"
	"ferrule/des"
	"ferrule/nodes"
)

// standing is what was in force at a site from an instant on.
type standing struct {
	at    des.Time
	table *nodes.Table
	up    []bool // its ports, in the order of its adjacencies
}

// compute finds the site's table from what it has been told and has it
// installed if it is another one.
func (r *Router) compute() {
	r.backoff.Ran()
	r.computed++
	t := r.shortest()
	if r.table != nil && slices.EqualFunc(r.table.Next, t.Next, func(a, b []nodes.CircuitID) bool { return slices.Equal(a, b) }) {
		return
	}
	t.Version = r.table.Version + 1
	r.table = t
	r.later(r.k.cfg.Compute+r.k.cfg.Install, nodes.Message{Op: opInstall, Ref: t, Settles: true})
}

// shortest is the table of this site over the circuits that both ends say they
// use. The metric of a circuit is the larger of those that its ends give.
func (r *Router) shortest() *nodes.Table {
	n := len(r.db)
	var edges []path.Edge
	var ids []nodes.CircuitID
	for s, ad := range r.db {
		if ad == nil {
			continue
		}
		for _, l := range ad.links {
			c := &r.k.plant.Circuits[l.circuit]
			if int(c.Ends[0]) != s {
				continue // it is taken with its first end
			}
			far := r.db[c.Ends[1]]
			if far == nil {
				continue
			}
			i := slices.IndexFunc(far.links, func(o link) bool { return o.circuit == l.circuit })
			if i < 0 {
				continue
			}
			edges = append(edges, path.Edge{A: int32(c.Ends[0]), B: int32(c.Ends[1]), Cost: max(l.metric, far.links[i].metric)})
			ids = append(ids, l.circuit)
		}
	}
	t := &nodes.Table{Next: make([][]nodes.CircuitID, n)}
	find := path.NewFinder(path.NewGraph(n, edges))
	var hops path.NextHops
	for to := range n {
		find.NextHops(int32(to), path.Mask{}, &hops)
		for _, e := range hops.At(int32(r.site)) {
			t.Next[to] = append(t.Next[to], ids[e])
		}
		slices.Sort(t.Next[to])
	}
	return t
}

// install makes a table the one in force.
func (r *Router) install(t *nodes.Table) {
	r.x.Install(t)
	r.x.Note("table", "", fmt.Sprintf("version %d, after %d computations", t.Version, r.computed))
	r.past = append(r.past, standing{at: r.now, table: t, up: r.ups()})
}

// mostPast bounds what a site keeps of its past.
const mostPast = 1 << 14

// stand notes that ports have changed under the table in force.
func (r *Router) stand() {
	if n := len(r.past); n > 0 && n < mostPast {
		r.past = append(r.past, standing{at: r.now, table: r.past[n-1].table, up: r.ups()})
	}
}

func (r *Router) ups() []bool {
	up := make([]bool, len(r.adjs))
	for i := range r.adjs {
		up[i] = r.adjs[i].port == nodes.PortUp
	}
	return up
}
