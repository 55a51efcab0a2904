package path

import (
	"fmt"
	"math"
)

// A Query asks for routes from From to To.
type Query struct {
	From, To int32
	By       Objective
	Avoid    Mask

	// Width is how much each edge has to spare, indexed by edge id: free slots
	// or channels. Nil stands for enough on every edge. Widest needs it.
	Width []int64
	// Need is the least width an edge must have to be used at all.
	Need int64
}

// A Finder answers queries about one graph.
type Finder struct {
	g    *Graph
	q    Query
	dist []key  // of every node to the end searched from, or far
	done []bool // dist is final
	heap heap
	flow []int8 // if in use: only edges with 1 (A to B) or 2 (B to A), that way

	yen  yen
	pair pairScratch
}

// NewFinder returns a finder for g.
func NewFinder(g *Graph) *Finder {
	return &Finder{g: g, dist: make([]key, g.Nodes()), done: make([]bool, g.Nodes())}
}

// Graph returns the graph that f searches.
func (f *Finder) Graph() *Graph { return f.g }

// Shortest finds the best route of all under q.By and puts it in into, whose
// memory it reuses; it reports whether there is one, and leaves into alone if
// not. A route from a node to itself has no edges. It panics if an end of the
// query is out of range, or if q.Width, where given or needed (Widest), is
// shorter than the list of edges.
//
// It runs Dijkstra's algorithm from the far end over pairs (cost, edges) and
// then walks from the near end, at each node along the lowest edge id that
// keeps the best pair. The number of edges left falls at each step, so the
// walk ends also where costs are zero. The time complexity is O(m log m).
//
// Source: E. W. Dijkstra, "A note on two problems in connexion with graphs",
// Numerische Mathematik 1, 1959.
func (f *Finder) Shortest(q *Query, into *Route) bool {
	f.begin(q)
	if !f.search(q.From, math.MaxInt64) {
		return false
	}
	into.Nodes = append(into.Nodes[:0], q.From)
	into.Edges = into.Edges[:0]
	f.walk(into)
	f.measure(into)
	return true
}

func (f *Finder) begin(q *Query) {
	n := int32(f.g.Nodes())
	if q.From < 0 || q.From >= n || q.To < 0 || q.To >= n {
		panic(fmt.Sprintf("path: query from %d to %d in a graph of %d nodes", q.From, q.To, n))
	}
	if (q.Width != nil || q.By == Widest) && len(q.Width) < f.g.Edges() {
		panic(fmt.Sprintf("path: %d widths for %d edges", len(q.Width), f.g.Edges()))
	}
	f.q = *q
	f.flow = nil
}

// usable reports whether the query allows e.
func (f *Finder) usable(e int32) bool {
	return !f.q.Avoid.Edges.Has(int(e)) && (f.q.Width == nil || f.q.Width[e] >= f.q.Need)
}

// towards reports whether the half h of node v may be walked towards v.
func (f *Finder) towards(v int32, h half) bool {
	if !h.in || !f.usable(h.edge) || f.q.Avoid.Nodes.Has(int(h.peer)) {
		return false
	}
	return f.flow == nil || f.flow[h.edge] == f.heading(h.edge, h.peer)
}

// heading is 1 if a walk from v along e goes from A to B, else 2.
func (f *Finder) heading(e, v int32) int8 {
	if f.g.edges[e].A == v {
		return 1
	}
	return 2
}

// search fills dist with lengths to q.To until from is final. Under Widest it
// first raises q.Need to the widest way from from, at most cap, so that what
// remains is a question of cost.
func (f *Finder) search(from int32, cap int64) bool {
	if f.q.Avoid.Nodes.Has(int(from)) || f.q.Avoid.Nodes.Has(int(f.q.To)) {
		return false
	}
	if f.q.By == Widest {
		w := f.widest(from)
		if w < 0 {
			return false
		}
		f.q.Need = max(f.q.Need, min(w, cap))
	}
	f.spread(from)
	return f.done[from]
}

// spread runs Dijkstra's algorithm from q.To against the direction of travel,
// until stop is final, or to the end if stop is negative.
func (f *Finder) spread(stop int32) {
	f.reset(key{})
	for len(f.heap) > 0 {
		top := f.heap.pop()
		v := top.node
		if f.done[v] {
			continue
		}
		f.done[v] = true
		if v == stop {
			return
		}
		for _, h := range f.g.at(v) {
			if !f.towards(v, h) {
				continue
			}
			d := top.at.plus(f.step(h.edge))
			if d.less(f.dist[h.peer]) {
				f.dist[h.peer] = d
				f.heap.push(entry{d, h.peer})
			}
		}
	}
}

func (f *Finder) step(e int32) key { return stepKey(f.q.By, f.g.edges[e].Cost, 1) }

func (f *Finder) reset(zero key) {
	for i := range f.dist {
		f.dist[i] = far
	}
	clear(f.done)
	f.dist[f.q.To] = zero
	f.heap = f.heap[:0]
	f.heap.push(entry{zero, f.q.To})
}

// widest returns the largest width w such that edges of width w or more lead
// from from to q.To, math.MaxInt64 if they are one node, -1 if nothing leads
// there. Widths are negated in the heap so that the widest comes first.
func (f *Finder) widest(from int32) int64 {
	f.reset(key{-math.MaxInt64, 0})
	for len(f.heap) > 0 {
		top := f.heap.pop()
		v := top.node
		if f.done[v] {
			continue
		}
		f.done[v] = true
		if v == from {
			return -top.at.major
		}
		for _, h := range f.g.at(v) {
			if !f.towards(v, h) {
				continue
			}
			d := key{max(top.at.major, -f.q.Width[h.edge]), 0}
			if d.less(f.dist[h.peer]) {
				f.dist[h.peer] = d
				f.heap.push(entry{d, h.peer})
			}
		}
	}
	return -1
}

// walk extends r from its last node to q.To along what search found.
func (f *Finder) walk(r *Route) {
	v := r.Nodes[len(r.Nodes)-1]
	for v != f.q.To {
		h := f.best(v)
		r.Edges = append(r.Edges, h.edge)
		r.Nodes = append(r.Nodes, h.peer)
		v = h.peer
	}
}

// best returns the lowest edge at v that begins a best way to q.To.
func (f *Finder) best(v int32) half {
	for _, h := range f.g.at(v) {
		if f.onward(v, h) && f.dist[h.peer].plus(f.step(h.edge)) == f.dist[v] {
			return h
		}
	}
	panic("path: search left no way on")
}

// onward reports whether h leads from v to a node with a final distance.
func (f *Finder) onward(v int32, h half) bool {
	if !h.out || !f.done[h.peer] || !f.usable(h.edge) {
		return false
	}
	return f.flow == nil || f.flow[h.edge] == f.heading(h.edge, v)
}

// measure fills Cost and Width from Edges.
func (f *Finder) measure(r *Route) {
	r.Cost, r.Width = 0, math.MaxInt64
	for _, e := range r.Edges {
		r.Cost += f.g.edges[e].Cost
		if f.q.Width != nil {
			r.Width = min(r.Width, f.q.Width[e])
		}
	}
}
