package path

import (
	"slices"
	"strings"
	"testing"
)

// The standard teaching example of Yen's algorithm (values from memory; the
// seven costs were computed by enumeration).
func TestKShortestTeachingExample(t *testing.T) {
	n := &network{sites: strings.Fields("C D E F G H")}
	var edges []Edge
	for _, s := range strings.Fields("CD3 CE2 DF4 ED1 EF2 EG3 FG2 FH1 GH2") {
		edges = append(edges, Edge{A: n.site(s[:1]), B: n.site(s[1:2]), Cost: int64(s[2] - '0'), OneWay: true})
	}
	f := NewFinder(NewGraph(6, edges))
	got := f.KShortest(&Query{From: n.site("C"), To: n.site("H")}, 10, nil)
	want := []struct {
		name string
		cost int64
	}{
		{"C-E-F-H", 5}, {"C-E-G-H", 7},
		{"C-D-F-H", 8}, {"C-E-D-F-H", 8}, {"C-E-F-G-H", 8}, // a tie: fewest edges, then edge ids
		{"C-D-F-G-H", 11}, {"C-E-D-F-G-H", 11},
	}
	if len(got) != len(want) {
		t.Fatalf("%d routes, want %d", len(got), len(want))
	}
	for i, w := range want {
		if n.names(&got[i]) != w.name || got[i].Cost != w.cost {
			t.Errorf("route %d: %s = %d, want %s = %d", i+1, n.names(&got[i]), got[i].Cost, w.name, w.cost)
		}
	}
}

// Costs computed with an independent implementation of Yen's algorithm over
// the published data sets.
func TestKShortestOnPublishedNetworks(t *testing.T) {
	for _, c := range []struct {
		n        *network
		length   []int64
		from, to string
		want     []int64
	}{
		{nobelUS, nobelUS.paper, "N01", "N09", []int64{4200, 4300, 4800, 4900}},
		{nobelUS, nobelUS.paper, "N14", "N05", []int64{4400, 4800, 4900, 5000}},
		{nobelUS, nobelUS.paper, "N02", "N04", []int64{4000, 4900, 4900, 5100}},
		{germany, germany.airline, "Norden", "Muenchen", []int64{79048, 81287, 81718, 82360}},
		{germany, germany.paper, "Berlin", "Koeln", []int64{594, 620, 709, 728}},
	} {
		f := NewFinder(c.n.graph(c.length))
		got := f.KShortest(&Query{From: c.n.site(c.from), To: c.n.site(c.to)}, 4, nil)
		var costs []int64
		for i := range got {
			costs = append(costs, got[i].Cost)
		}
		for i := range costs {
			if i >= len(c.want) || costs[i] < c.want[i]-1 || costs[i] > c.want[i]+1 {
				t.Errorf("%s to %s: %v, want %v within 0.01 km", c.from, c.to, costs, c.want)
				break
			}
		}
		if len(costs) != 4 {
			t.Errorf("%s to %s: %d routes, want 4", c.from, c.to, len(costs))
		}
		if c.from == "N01" {
			if a, b := c.n.names(&got[0]), c.n.names(&got[1]); a != "N01-N13-N07-N09" || b != "N01-N13-N03-N08-N06-N11-N09" {
				t.Errorf("N01 to N09: %s, %s", a, b)
			}
		}
	}
}

// Every loopless route, sorted, must be what KShortest returns in that order.
func TestKShortestAgainstEnumeration(t *testing.T) {
	for seed := range uint64(300) {
		g, width := randomGraph(seed)
		f := NewFinder(g)
		for _, by := range []Objective{LeastCost, FewestHops, Widest} {
			q := Query{From: 0, To: int32(g.Nodes() - 1), By: by, Width: width, Need: int64(seed % 3)}
			checkKShortest(t, f, &q, 12)
		}
	}
}

func checkKShortest(t *testing.T, f *Finder, q *Query, k int) {
	t.Helper()
	want := enumerate(f.Graph(), q)
	slices.SortFunc(want, func(a, b Route) int { return a.Compare(&b, q.By) })
	got := f.KShortest(q, k, nil)
	if len(got) != min(k, len(want)) {
		t.Fatalf("query %+v: %d routes, want %d", q, len(got), min(k, len(want)))
	}
	for i := range got {
		w := &want[i]
		if !slices.Equal(got[i].Edges, w.Edges) || !slices.Equal(got[i].Nodes, w.Nodes) || got[i].Cost != w.Cost || got[i].Width != w.Width {
			t.Fatalf("query %+v: route %d is %+v, want %+v", q, i, got[i], *w)
		}
	}
	var r Route
	if ok := f.Shortest(q, &r); ok != (len(want) > 0) || ok && !slices.Equal(r.Edges, want[0].Edges) {
		t.Fatalf("query %+v: Shortest %v %+v, enumeration has %d", q, ok, r, len(want))
	}
}
