package path

import "math"

// Unreachable is the distance of a node from which nothing leads.
const Unreachable int64 = math.MaxInt64

// NextHops is, for one destination, the set of edges by which each node may
// send on along a route of least cost. A NextHops is reused from call to call.
type NextHops struct {
	start []int32
	edges []int32
	dist  []int64
}

// At returns the edges by which node v sends on, in ascending order; none at
// the destination and where nothing leads to it. The slice is valid until the
// next call of Finder.NextHops with the same NextHops.
func (n *NextHops) At(v int32) []int32 { return n.edges[n.start[v]:n.start[v+1]] }

// Distance returns the cost from v to the destination, or Unreachable.
func (n *NextHops) Distance(v int32) int64 { return n.dist[v] }

// NextHops finds the next hops of every node towards dst by cost, and puts
// them in into. Nothing that avoid excludes is used.
//
// Following any choice of next hops reaches dst without a loop. Where costs
// are positive the set is every edge on a shortest route; an edge of cost
// zero counts only if it also brings the packet one edge nearer, without which
// two nodes could send to each other for ever. The time complexity is
// O(m log m).
func (f *Finder) NextHops(dst int32, avoid Mask, into *NextHops) {
	f.begin(&Query{From: dst, To: dst, By: LeastCost, Avoid: avoid})
	n := f.g.Nodes()
	into.start = append(into.start[:0], 0)
	into.edges = into.edges[:0]
	into.dist = into.dist[:0]
	if avoid.Nodes.Has(int(dst)) {
		for range n {
			into.start = append(into.start, 0)
			into.dist = append(into.dist, Unreachable)
		}
		return
	}
	f.spread(-1)
	for v := range int32(n) {
		into.dist = append(into.dist, f.dist[v].major) // far.major is Unreachable
		if f.done[v] && v != dst {
			into.edges = f.hops(v, into.edges)
		}
		into.start = append(into.start, int32(len(into.edges)))
	}
}

func (f *Finder) hops(v int32, edges []int32) []int32 {
	for _, h := range f.g.at(v) {
		if !f.onward(v, h) {
			continue
		}
		cost, d, here := f.g.edges[h.edge].Cost, f.dist[h.peer], f.dist[v]
		if d.major+cost == here.major && (cost > 0 || d.minor+1 == here.minor) {
			edges = append(edges, h.edge)
		}
	}
	return edges
}
