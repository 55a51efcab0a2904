package path

import (
	"math"
	"slices"
	"testing"
)

// Ties worked by hand: the order is cost, number of edges, edge ids.
func TestTies(t *testing.T) {
	g := NewGraph(5, []Edge{
		{A: 0, B: 1, Cost: 0}, // 0
		{A: 1, B: 4, Cost: 2}, // 1
		{A: 0, B: 2, Cost: 1}, // 2
		{A: 2, B: 4, Cost: 1}, // 3
		{A: 0, B: 3, Cost: 1}, // 4
		{A: 3, B: 2, Cost: 0}, // 5
		{A: 0, B: 4, Cost: 9}, // 6
		{A: 0, B: 1, Cost: 0}, // 7, beside 0
	})
	f := NewFinder(g)
	width := []int64{1, 9, 5, 5, 6, 5, 0, 9}
	for _, c := range []struct {
		q    Query
		want []int32
	}{
		{Query{From: 0, To: 4}, []int32{0, 1}},
		{Query{From: 4, To: 0}, []int32{1, 0}},
		{Query{From: 0, To: 4, By: FewestHops}, []int32{6}},
		{Query{From: 0, To: 4, By: FewestHops, Width: width, Need: 1}, []int32{0, 1}},
		{Query{From: 0, To: 4, Width: width, Need: 2}, []int32{2, 3}}, // ties with 7, 1; 2 is below 7
		{Query{From: 0, To: 4, By: Widest, Width: width}, []int32{7, 1}},
		{Query{From: 0, To: 2, By: Widest, Width: width}, []int32{2}}, // width 5 by 2 and by 4, 5: equal costs, fewer edges
		{Query{From: 3, To: 3, By: Widest, Width: width}, nil},
	} {
		var r Route
		if !f.Shortest(&c.q, &r) || !slices.Equal(r.Edges, c.want) {
			t.Errorf("%+v: edges %v, want %v", c.q, r.Edges, c.want)
		}
		if len(r.Nodes) != len(r.Edges)+1 || r.Nodes[0] != c.q.From || r.Nodes[len(r.Nodes)-1] != c.q.To {
			t.Errorf("%+v: nodes %v", c.q, r.Nodes)
		}
	}
}

func TestMasks(t *testing.T) {
	g := NewGraph(4, []Edge{
		{A: 0, B: 1, Groups: []int32{2}}, {A: 1, B: 3}, // 0, 1
		{A: 0, B: 2, Groups: []int32{2, 0}}, {A: 2, B: 3}, // 2, 3
		{A: 1, B: 2}, {A: 0, B: 3, Cost: 5}, // 4, 5
	})
	f := NewFinder(g)
	r := Route{Nodes: []int32{0, 1, 3}, Edges: []int32{0, 1}}
	for how, want := range map[Apart][]int32{
		ApartEdges:               {2, 3},
		ApartNodes:               {2, 3},
		ApartGroups:              {5},
		ApartNodes | ApartGroups: {5},
	} {
		m := NewMask(g)
		m.ExcludeRoute(g, &r, 0, 3, how)
		var o Route
		if !f.Shortest(&Query{From: 0, To: 3, Avoid: m}, &o) || !slices.Equal(o.Edges, want) {
			t.Errorf("apart %d: %v, want %v", how, o.Edges, want)
		}
		if Shares(g, &r, &o, how) {
			t.Errorf("apart %d: %v shares with %v", how, o.Edges, r.Edges)
		}
	}
	for _, end := range []int{0, 3} {
		m := NewMask(g)
		m.Nodes.Add(end)
		var o Route
		if f.Shortest(&Query{From: 0, To: 3, Avoid: m}, &o) || f.Shortest(&Query{From: 3, To: 0, Avoid: m}, &o) {
			t.Errorf("route from or to the excluded node %d", end)
		}
		if m.Clear(); !f.Shortest(&Query{From: 0, To: 3, Avoid: m}, &o) {
			t.Error("no route after Clear")
		}
	}
	if got := g.Members(2); !slices.Equal(got, []int32{0, 2}) || g.Members(9) != nil || g.Members(1) != nil {
		t.Errorf("members of group 2: %v", got)
	}
}

func TestCallersMistakesPanic(t *testing.T) {
	g := NewGraph(2, []Edge{{A: 0, B: 1}})
	for name, do := range map[string]func(){
		"end":     func() { NewGraph(2, []Edge{{A: 0, B: 2}}) },
		"loop":    func() { NewGraph(2, []Edge{{A: 1, B: 1}}) },
		"cost":    func() { NewGraph(2, []Edge{{A: 0, B: 1, Cost: -1}}) },
		"sum":     func() { NewGraph(2, []Edge{{A: 0, B: 1, Cost: math.MaxInt64 / 4}, {A: 0, B: 1, Cost: 1}}) },
		"group":   func() { NewGraph(2, []Edge{{A: 0, B: 1, Groups: []int32{-1}}}) },
		"query":   func() { NewFinder(g).Shortest(&Query{From: 0, To: 2}, new(Route)) },
		"width":   func() { NewFinder(g).Shortest(&Query{To: 1, By: Widest}, new(Route)) },
		"self":    func() { NewFinder(g).DisjointPair(&Query{}, ApartEdges, new(Pair)) },
		"k":       func() { NewFinder(g).KShortest(&Query{To: 1}, 0, nil) },
		"unknown": func() { NewFinder(g).Shortest(&Query{To: 1, By: 99}, new(Route)) },
	} {
		t.Run(name, func(t *testing.T) {
			defer func() {
				if recover() == nil {
					t.Error("no panic")
				}
			}()
			do()
		})
	}
}

// A finder that has answered once allocates nothing for the same kind of query.
func TestNoAllocations(t *testing.T) {
	g := nobelUS.graph(nobelUS.paper)
	width := make([]int64, g.Edges())
	for e := range width {
		width[e] = int64(e*7%11 + 1)
	}
	f := NewFinder(g)
	var r Route
	var p Pair
	var hops NextHops
	var routes []Route
	least, wide := Query{From: 0, To: 8}, Query{From: 0, To: 8, By: Widest, Width: width}
	for name, do := range map[string]func(){
		"Shortest":     func() { f.Shortest(&least, &r) },
		"Widest":       func() { f.Shortest(&wide, &r) },
		"NextHops":     func() { f.NextHops(8, Mask{}, &hops) },
		"KShortest":    func() { routes = f.KShortest(&least, 5, routes) },
		"DisjointPair": func() { f.DisjointPair(&least, ApartNodes, &p) },
		"Pair, widest": func() { f.DisjointPair(&wide, ApartEdges, &p) },
	} {
		for range 3 {
			do()
		}
		if n := testing.AllocsPerRun(100, do); n != 0 {
			t.Errorf("%s: %v allocations, want 0", name, n)
		}
	}
}
