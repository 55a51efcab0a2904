package path

import (
	"math"
	"math/rand/v2"
	"testing"

	gpath "gonum.org/v1/gonum/graph/path"
	"gonum.org/v1/gonum/graph/simple"
)

// randomGraph returns a small multigraph with many ties, some zero costs, some
// one-way edges and some risk groups, and a width for each edge.
func randomGraph(seed uint64) (*Graph, []int64) {
	rng := rand.New(rand.NewPCG(seed, 7))
	n := 2 + rng.IntN(6)
	edges := make([]Edge, 0, 12)
	width := make([]int64, 0, 12)
	for range 1 + rng.IntN(12) {
		a := rng.IntN(n)
		b := (a + 1 + rng.IntN(n-1)) % n
		e := Edge{A: int32(a), B: int32(b), Cost: int64(rng.IntN(5)), OneWay: rng.IntN(3) == 0}
		if rng.IntN(3) == 0 {
			e.Groups = []int32{int32(rng.IntN(4))}
		}
		edges = append(edges, e)
		width = append(width, int64(rng.IntN(5)))
	}
	return NewGraph(n, edges), width
}

// enumerate returns every loopless route of a query, in no useful order. It
// shares nothing with the algorithms but the graph.
func enumerate(g *Graph, q *Query) []Route {
	var out []Route
	var visit func(r Route, seen uint64)
	visit = func(r Route, seen uint64) {
		v := r.Nodes[len(r.Nodes)-1]
		if v == q.To {
			out = append(out, r)
			return
		}
		for e, x := range g.edges {
			next := x.B
			if x.A != v {
				if x.B != v || x.OneWay {
					continue
				}
				next = x.A
			}
			if seen>>next&1 != 0 || q.Avoid.Edges.Has(e) || q.Avoid.Nodes.Has(int(next)) {
				continue
			}
			w := r.Width
			if q.Width != nil {
				if q.Width[e] < q.Need {
					continue
				}
				w = min(w, q.Width[e])
			}
			visit(Route{
				Nodes: append(append([]int32(nil), r.Nodes...), next),
				Edges: append(append([]int32(nil), r.Edges...), int32(e)),
				Cost:  r.Cost + x.Cost, Width: w,
			}, seen|1<<next)
		}
	}
	if !q.Avoid.Nodes.Has(int(q.From)) && !q.Avoid.Nodes.Has(int(q.To)) {
		visit(Route{Nodes: []int32{q.From}, Width: math.MaxInt64}, 1<<q.From)
	}
	return out
}

// gonum's Dijkstra is an implementation by others: distances must agree.
func TestDistancesAgainstGonum(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	for range 20 {
		n := 20 + rng.IntN(60)
		m := simple.NewUndirectedMatrix(n, math.Inf(1), 0, math.Inf(1))
		var edges []Edge
		for range 2 * n {
			a, b := rng.IntN(n), rng.IntN(n)
			if a == b || m.HasEdgeBetween(int64(a), int64(b)) {
				continue
			}
			c := int64(1 + rng.IntN(1000))
			edges = append(edges, Edge{A: int32(a), B: int32(b), Cost: c})
			m.SetWeightedEdge(simple.WeightedEdge{F: simple.Node(a), T: simple.Node(b), W: float64(c)})
		}
		f := NewFinder(NewGraph(n, edges))
		var hops NextHops
		var r Route
		for dst := range int32(n) {
			want := gpath.DijkstraFrom(simple.Node(dst), m)
			f.NextHops(dst, Mask{}, &hops)
			for v := range int32(n) {
				w := want.WeightTo(int64(v))
				got := hops.Distance(v)
				if math.IsInf(w, 1) != (got == Unreachable) || got != Unreachable && float64(got) != w {
					t.Fatalf("distance %d to %d = %d, gonum has %v", v, dst, got, w)
				}
				if ok := f.Shortest(&Query{From: v, To: dst}, &r); ok == math.IsInf(w, 1) || ok && r.Cost != got {
					t.Fatalf("route %d to %d: %v, cost %d, distance %d", v, dst, ok, r.Cost, got)
				}
			}
		}
	}
}
