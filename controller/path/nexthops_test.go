package path

import (
	"slices"
	"testing"
)

// packetLinks turns each edge of a network into two one-way links, 2e from A
// to B and 2e+1 back, as packet links over circuits are.
func packetLinks(n *network, length []int64) *Graph {
	var links []Edge
	for i, e := range n.ends {
		links = append(links,
			Edge{A: e[0], B: e[1], Cost: length[i], OneWay: true},
			Edge{A: e[1], B: e[0], Cost: length[i], OneWay: true})
	}
	return NewGraph(len(n.sites), links)
}

// A square with equal sides, one side doubled: worked by hand.
func TestNextHopsEqualCost(t *testing.T) {
	g := NewGraph(4, []Edge{
		{A: 1, B: 3, Cost: 1, OneWay: true}, // 0
		{A: 0, B: 2, Cost: 1, OneWay: true}, // 1
		{A: 0, B: 1, Cost: 1, OneWay: true}, // 2
		{A: 2, B: 3, Cost: 1, OneWay: true}, // 3
		{A: 0, B: 1, Cost: 1, OneWay: true}, // 4, beside 2
		{A: 0, B: 3, Cost: 3, OneWay: true}, // 5, longer
		{A: 3, B: 0, Cost: 1, OneWay: true}, // 6, the wrong way
	})
	var hops NextHops
	f := NewFinder(g)
	f.NextHops(3, Mask{}, &hops)
	for v, want := range [][]int32{{1, 2, 4}, {0}, {3}, nil} {
		if got := hops.At(int32(v)); !slices.Equal(got, want) {
			t.Errorf("next hops of %d = %v, want %v", v, got, want)
		}
	}
	down := NewMask(g)
	down.Edges.Add(0)
	down.Nodes.Add(2)
	f.NextHops(3, down, &hops)
	for v, want := range [][]int32{{5}, nil, nil, nil} { // 1 has only 0; 2 is excluded
		if got := hops.At(int32(v)); !slices.Equal(got, want) {
			t.Errorf("masked: next hops of %d = %v, want %v", v, got, want)
		}
	}
	if hops.Distance(0) != 3 || hops.Distance(1) != Unreachable || hops.Distance(3) != 0 {
		t.Errorf("masked: distances %d %d %d", hops.Distance(0), hops.Distance(1), hops.Distance(3))
	}
	down.Nodes.Add(3)
	if f.NextHops(3, down, &hops); len(hops.At(0)) != 0 || hops.Distance(3) != Unreachable {
		t.Errorf("excluded destination: %v at distance %d", hops.At(0), hops.Distance(3))
	}
}

// On random multigraphs with zero costs, next hops are exactly the first edges
// of the shortest routes found by enumeration (those of fewest edges where a
// zero cost leaves a choice), and no choice of them runs in a circle.
func TestNextHopsAgainstEnumeration(t *testing.T) {
	for seed := range uint64(300) {
		g, _ := randomGraph(seed)
		checkNextHops(t, g)
	}
}

func checkNextHops(t *testing.T, g *Graph) {
	t.Helper()
	f := NewFinder(g)
	var hops NextHops
	for dst := range int32(g.Nodes()) {
		f.NextHops(dst, Mask{}, &hops)
		least := make([]key, g.Nodes()) // by enumeration
		for v := range least {
			least[v] = far
			for _, r := range enumerate(g, &Query{From: int32(v), To: dst}) {
				if k := r.key(LeastCost); k.less(least[v]) {
					least[v] = k
				}
			}
		}
		for v := range int32(g.Nodes()) {
			if hops.Distance(v) != least[v].major {
				t.Fatalf("distance %d to %d = %d, want %d", v, dst, hops.Distance(v), least[v].major)
			}
			var want []int32
			for e, x := range g.edges {
				to := x.B
				if x.B == v && !x.OneWay {
					to = x.A
				} else if x.A != v {
					continue
				}
				// The rule of the comment on NextHops, from enumerated lengths.
				if v != dst && least[to] != far && least[to].major+x.Cost == least[v].major && least[to].less(least[v]) &&
					(x.Cost > 0 || least[to].minor+1 == least[v].minor) {
					want = append(want, int32(e))
				}
			}
			if got := hops.At(v); !slices.Equal(got, want) || least[v] != far && v != dst && len(got) == 0 {
				t.Fatalf("next hops of %d to %d = %v, want %v", v, dst, got, want)
			}
		}
		if circle(g, &hops) {
			t.Fatalf("next hops to %d run in a circle", dst)
		}
	}
}

// circle reports whether some choice of next hops never ends: it removes nodes
// all of whose next hops lead to removed nodes until nothing changes.
func circle(g *Graph, hops *NextHops) bool {
	gone := NewSet(g.Nodes())
	for changed := true; changed; {
		changed = false
		for v := range int32(g.Nodes()) {
			ends := true
			for _, e := range hops.At(v) {
				to := g.edges[e].B
				if to == v {
					to = g.edges[e].A
				}
				ends = ends && gone.Has(int(to))
			}
			if ends && !gone.Has(int(v)) {
				gone.Add(int(v))
				changed = true
			}
		}
	}
	return gone.Count() != g.Nodes()
}

// Over packet links of a published network, following the first next hop from
// anywhere costs the distance.
func TestNextHopsLeadToDestination(t *testing.T) {
	g := packetLinks(nobelUS, nobelUS.paper)
	f := NewFinder(g)
	var hops NextHops
	for dst := range int32(g.Nodes()) {
		f.NextHops(dst, Mask{}, &hops)
		for v := range int32(g.Nodes()) {
			cost, at := int64(0), v
			for at != dst {
				link := g.Edge(hops.At(at)[len(hops.At(at))-1])
				cost, at = cost+link.Cost, link.B
			}
			if cost != hops.Distance(v) {
				t.Errorf("%d to %d costs %d, distance %d", v, dst, cost, hops.Distance(v))
			}
		}
	}
}
