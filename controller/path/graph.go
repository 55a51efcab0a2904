// Package path finds routes over the graph of either layer and assigns slots
// and channels along them: shortest, widest and disjoint routes over the
// fibres, and the next hops of every site over the packet links.
//
// Everything here is a pure function of its arguments: no clock, no random
// draw, no map, no input or output. Ids are dense and index slices. Wherever
// several routes are equally good, a total order written in one place decides,
// so an answer never depends on the order in which something was built, except
// through the ids the caller chose.
//
// A [Graph] is read-only once made and may be shared. A [Finder] holds scratch
// memory, belongs to one goroutine, and allocates nothing once it has grown to
// the size of its graph. Caller's mistakes (an id out of range, a negative
// cost) panic; "there is no route" is a result.
package path

import (
	"fmt"
	"math"
)

// An Edge joins two nodes. Parallel edges are allowed, loops are not.
type Edge struct {
	A, B   int32   // nodes it joins
	Cost   int64   // at least 0, in any unit of the caller's; often picoseconds
	OneWay bool    // usable from A to B only, as a packet link is
	Groups []int32 // risk groups it belongs to: what fails together with it
}

// half is one edge seen from one of its ends.
type half struct {
	edge, peer int32
	out, in    bool // usable away from this node, towards this node
}

// A Graph is a set of nodes 0..n-1 and edges 0..m-1. It is read-only.
type Graph struct {
	edges  []Edge
	start  []int32   // halves of node v are halves[start[v]:start[v+1]]
	halves []half    // in ascending order of edge id per node
	member [][]int32 // edges of each risk group, ascending
}

// NewGraph builds a graph of n nodes. Edges keep their index as id. It keeps
// the slice edges, which must not be changed afterwards. It panics if an end
// is out of range or both ends are equal, if a cost is negative, if a group is
// negative, or if all costs together pass a quarter of the range of int64.
func NewGraph(n int, edges []Edge) *Graph {
	g := &Graph{edges: edges, start: make([]int32, n+1), halves: make([]half, 2*len(edges))}
	var sum int64
	for i, e := range edges {
		if e.A < 0 || int(e.A) >= n || e.B < 0 || int(e.B) >= n || e.A == e.B {
			panic(fmt.Sprintf("path: edge %d joins %d and %d in a graph of %d nodes", i, e.A, e.B, n))
		}
		if e.Cost < 0 || e.Cost > math.MaxInt64/4-sum {
			panic(fmt.Sprintf("path: edge %d: cost %d is negative or too large", i, e.Cost))
		}
		sum += e.Cost
		g.start[e.A+1]++
		g.start[e.B+1]++
		g.join(int32(i), e.Groups)
	}
	for v := range n {
		g.start[v+1] += g.start[v]
	}
	next := append([]int32(nil), g.start[:n]...)
	for i, e := range edges {
		g.halves[next[e.A]] = half{int32(i), e.B, true, !e.OneWay}
		g.halves[next[e.B]] = half{int32(i), e.A, !e.OneWay, true}
		next[e.A]++
		next[e.B]++
	}
	return g
}

func (g *Graph) join(edge int32, groups []int32) {
	for _, group := range groups {
		if group < 0 {
			panic(fmt.Sprintf("path: edge %d: risk group %d", edge, group))
		}
		for int(group) >= len(g.member) {
			g.member = append(g.member, nil)
		}
		g.member[group] = append(g.member[group], edge)
	}
}

// Nodes reports the number of nodes.
func (g *Graph) Nodes() int { return len(g.start) - 1 }

// Edges reports the number of edges.
func (g *Graph) Edges() int { return len(g.edges) }

// Edge returns edge e; its Groups must not be changed.
func (g *Graph) Edge(e int32) Edge { return g.edges[e] }

// Members returns the edges of a risk group in ascending order, none if no
// edge names the group. The slice must not be changed.
func (g *Graph) Members(group int32) []int32 {
	if int(group) >= len(g.member) {
		return nil
	}
	return g.member[group]
}

func (g *Graph) at(v int32) []half { return g.halves[g.start[v]:g.start[v+1]] }
