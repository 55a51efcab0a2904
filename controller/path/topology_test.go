package path

import (
	"math"
	"testing"
)

// load routes every demand on its shortest route, except over cut, and returns
// the volume on each edge, the volume x hops, the volume x length, and the
// demands and volume that touch each edge's end sites in transit.
func (n *network) load(t *testing.T, g *Graph, avoid Mask) (volume, count []int64, hops, length float64, transit []int64) {
	t.Helper()
	f := NewFinder(g)
	volume, count, transit = make([]int64, g.Edges()), make([]int64, g.Edges()), make([]int64, g.Nodes())
	var r Route
	for _, d := range n.demands {
		if !f.Shortest(&Query{From: d.a, To: d.b, Avoid: avoid}, &r) {
			t.Fatalf("no route from %s to %s", n.sites[d.a], n.sites[d.b])
		}
		for i, e := range r.Edges {
			volume[e] += d.volume
			count[e]++
			if i > 0 {
				transit[r.Nodes[i]] += d.volume
			}
		}
		hops += float64(d.volume * int64(len(r.Edges)))
		length += float64(d.volume * r.Cost)
	}
	return volume, count, hops, length, transit
}

func (n *network) edge(a, b string) int {
	for i, e := range n.ends {
		if e == [2]int32{n.site(a), n.site(b)} || e == [2]int32{n.site(b), n.site(a)} {
			return i
		}
	}
	panic("no link " + a + "-" + b)
}

func (n *network) total() (sum int64) {
	for _, d := range n.demands {
		sum += d.volume
	}
	return sum
}

func heaviest(volume []int64) int {
	best := 0
	for e, v := range volume {
		if v > volume[best] {
			best = e
		}
	}
	return best
}

// Mean hops under uniform traffic. 2.14 (NSFNET) and 1.56 (COST 239) are the
// values usually printed; four decimals, and the diameters, were computed
// independently from the data sets.
func TestMeanHops(t *testing.T) {
	for _, c := range []struct {
		name     string
		n        *network
		mean     float64
		diameter int
	}{{"nobel-us", nobelUS, 2.142857, 3}, {"nobel-germany", germany, 2.698529, 6}, {"cost239", cost239, 1.563636, 3}} {
		f := NewFinder(c.n.graph(c.n.airline))
		var r Route
		sum, count, diameter := 0, 0, 0
		c.n.pairs(func(a, b int32) {
			if !f.Shortest(&Query{From: a, To: b, By: FewestHops}, &r) {
				t.Fatalf("%s: no route", c.name)
			}
			sum, count, diameter = sum+len(r.Edges), count+1, max(diameter, len(r.Edges))
		})
		near(t, c.name+" mean hops", float64(sum)/float64(count), c.mean, 1e-6)
		if diameter != c.diameter {
			t.Errorf("%s: diameter %d hops, want %d", c.name, diameter, c.diameter)
		}
	}
}

// Sums over the published data sets, computed independently of this package.
func TestShortestSums(t *testing.T) {
	for _, c := range []struct {
		name                 string
		n                    *network
		length               []int64
		scale                float64
		total, mean, longest float64 // km
	}{
		{"nobel-us, literature lengths", nobelUS, nobelUS.paper, 1, 22700, 2309.89, 4500},
		{"nobel-germany, airline", germany, germany.airline, 100, 3727.73, 347.46, 790.48},
		{"nobel-germany, route lengths", germany, germany.paper, 1, 4428, 413.63, 951},
	} {
		g := c.n.graph(c.length)
		f := NewFinder(g)
		var r Route
		var sum, total, longest int64
		count := 0
		for _, l := range c.length {
			total += l
		}
		c.n.pairs(func(a, b int32) {
			f.Shortest(&Query{From: a, To: b}, &r)
			sum, count, longest = sum+r.Cost, count+1, max(longest, r.Cost)
		})
		near(t, c.name+" total", float64(total)/c.scale, c.total, 0.011)
		near(t, c.name+" mean shortest", float64(sum)/float64(count)/c.scale, c.mean, 0.01)
		near(t, c.name+" longest shortest", float64(longest)/c.scale, c.longest, 0.01)
	}
}

// Loads of the published demands on shortest airline routes (no two routes
// tie), computed independently of this package.
func TestDemandLoadsUS(t *testing.T) {
	n := nobelUS
	g := n.graph(n.airline)
	volume, _, hops, length, _ := n.load(t, g, Mask{})
	if n.total() != 5420 {
		t.Fatalf("demands sum to %d, data set has 5420", n.total())
	}
	near(t, "weighted hops", hops/5420, 2.1295, 5e-5)
	near(t, "weighted length", length/5420/100, 1821.14, 0.01)
	for _, c := range []struct {
		a, b   string
		volume int64
	}{{"N05", "N11", 1404}, {"N10", "N11", 1350}, {"N11", "N06", 1148}} {
		if v := volume[n.edge(c.a, c.b)]; v != c.volume {
			t.Errorf("load on %s-%s = %d, want %d", c.a, c.b, v, c.volume)
		}
	}

	cut := NewMask(g)
	cut.Edges.Add(n.edge("N05", "N11"))
	after, _, _, _, _ := n.load(t, g, cut)
	if e := heaviest(after); e != n.edge("N05", "N12") || after[e] != 1292 {
		t.Errorf("after the cut the heaviest link is %v with %d, want N05-N12 with 1292", n.ends[e], after[e])
	}
	var r Route
	NewFinder(g).Shortest(&Query{From: n.site("N05"), To: n.site("N11"), Avoid: cut}, &r)
	if r.Cost != 381850 {
		t.Errorf("way round the cut = %d, want 3818.50 km", r.Cost)
	}
}

func TestDemandLoadsGermany(t *testing.T) {
	n := germany
	g := n.graph(n.airline)
	volume, count, hops, length, transit := n.load(t, g, Mask{})
	if n.total() != 660 || hops != 1552 {
		t.Fatalf("demands sum to %d over %v hops, want 660 over 1552", n.total(), hops)
	}
	near(t, "weighted airline length", length/660/100, 305.81, 0.01)
	byRoute, _, hops2, length2, _ := n.load(t, n.graph(n.paper), Mask{})
	near(t, "weighted route length", length2/660, 364.48, 0.01)
	if hops2 != 1552 || byRoute[n.edge("Frankfurt", "Koeln")] != 166 {
		t.Errorf("route lengths: %v hops and %d on Frankfurt-Koeln, want 1552 and 166", hops2, byRoute[n.edge("Frankfurt", "Koeln")])
	}
	for _, c := range []struct {
		a, b          string
		volume, count int64 // count 0: not known
	}{
		{"Frankfurt", "Koeln", 166, 30}, {"Frankfurt", "Mannheim", 126, 37}, {"Karlsruhe", "Mannheim", 102, 30},
		{"Dortmund", "Koeln", 98, 0}, {"Karlsruhe", "Stuttgart", 88, 0}, {"Dortmund", "Hannover", 78, 0}, {"Norden", "Bremen", 0, 0},
	} {
		e := n.edge(c.a, c.b)
		if volume[e] != c.volume || c.count != 0 && count[e] != c.count {
			t.Errorf("load on %s-%s = %d by %d demands, want %d by %d", c.a, c.b, volume[e], count[e], c.volume, c.count)
		}
	}
	for name, want := range map[string]int64{"Koeln": 128, "Hannover": 122, "Frankfurt": 122, "Dortmund": 106} {
		if got := transit[n.site(name)]; got != want {
			t.Errorf("transit through %s = %d, want %d", name, got, want)
		}
	}

	cut := NewMask(g)
	cut.Edges.Add(n.edge("Frankfurt", "Koeln"))
	after, _, _, longer, _ := n.load(t, g, cut)
	if e := heaviest(after); e != n.edge("Hannover", "Frankfurt") || after[e] != 202 {
		t.Errorf("after the cut the heaviest link is %v with %d, want Hannover-Frankfurt with 202", n.ends[e], after[e])
	}
	near(t, "mean extra length of what was hit", (longer-length)/166/100, 214.00, 0.01)
}

// Capacity x length with a dedicated disjoint pair over the same without,
// weighted by the published demands; computed independently of this package.
func TestDedicatedProtectionRatio(t *testing.T) {
	for _, c := range []struct {
		name string
		n    *network
		want float64
	}{{"nobel-us", nobelUS, 2.7448}, {"nobel-germany", germany, 2.6441}} {
		g := c.n.graph(c.n.airline)
		f := NewFinder(g)
		_, _, _, length, _ := c.n.load(t, g, Mask{})
		var p Pair
		both := 0.0
		for _, d := range c.n.demands {
			if !f.DisjointPair(&Query{From: d.a, To: d.b}, ApartEdges, &p) {
				t.Fatalf("%s: no pair", c.name)
			}
			both += float64(d.volume * (p.Working.Cost + p.Protect.Cost))
		}
		near(t, c.name+" protected over unprotected", both/length, c.want, 1e-3)
	}
}

// Both networks are 2-connected: every pair of sites has two routes without a
// common node, and some site has only two edges.
func TestConnectivity(t *testing.T) {
	for _, n := range []*network{nobelUS, germany} {
		g := n.graph(n.airline)
		f := NewFinder(g)
		least := math.MaxInt
		for v := range int32(g.Nodes()) {
			least = min(least, len(g.at(v)))
		}
		if least != 2 {
			t.Errorf("least degree %d, want 2", least)
		}
		var p Pair
		n.pairs(func(a, b int32) {
			if !f.DisjointPair(&Query{From: a, To: b}, ApartNodes, &p) || Shares(g, &p.Working, &p.Protect, ApartNodes) {
				t.Errorf("no node-disjoint pair from %s to %s", n.sites[a], n.sites[b])
			}
		})
	}
}
