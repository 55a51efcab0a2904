package path

import (
	"math"
	"slices"
)

// Objective says which of two routes is better.
type Objective uint8

// Objectives, each a total order of routes: what comes first decides, what
// follows decides among equals, and the list of edge ids from the first end,
// compared lexicographically, decides last. No two routes compare equal.
const (
	LeastCost  Objective = iota // cost, then number of edges
	FewestHops                  // number of edges, then cost
	Widest                      // width (more is better), then cost, then number of edges
)

// A Route leads from Nodes[0] along Edges to the last of Nodes.
type Route struct {
	Nodes []int32 // one more than Edges
	Edges []int32
	Cost  int64 // sum over Edges
	Width int64 // least width over Edges; math.MaxInt64 if none was given
}

// copyTo copies r into o and reuses o's memory.
func (r *Route) copyTo(o *Route) {
	o.Nodes = append(o.Nodes[:0], r.Nodes...)
	o.Edges = append(o.Edges[:0], r.Edges...)
	o.Cost, o.Width = r.Cost, r.Width
}

// Compare orders two routes with the same ends under an objective: negative
// when r is better than o, zero when they are the same route.
func (r *Route) Compare(o *Route, by Objective) int {
	if by == Widest && r.Width != o.Width {
		if r.Width > o.Width {
			return -1
		}
		return 1
	}
	a, b := r.key(by), o.key(by)
	switch {
	case a.less(b):
		return -1
	case b.less(a):
		return 1
	}
	return slices.Compare(r.Edges, o.Edges)
}

func (r *Route) key(by Objective) key { return stepKey(by, r.Cost, int64(len(r.Edges))) }

// key is a length under an objective: the first component decides, then the
// second. Keys add component by component, so they order routes the way sums
// of plain costs do and every algorithm for costs works on keys.
type key struct{ major, minor int64 }

var far = key{math.MaxInt64, math.MaxInt64}

func (k key) less(o key) bool {
	return k.major < o.major || k.major == o.major && k.minor < o.minor
}

func (k key) plus(o key) key { return key{k.major + o.major, k.minor + o.minor} }

func (k key) minus(o key) key { return key{k.major - o.major, k.minor - o.minor} }

func stepKey(by Objective, cost, hops int64) key {
	switch by {
	case LeastCost, Widest:
		return key{cost, hops}
	case FewestHops:
		return key{hops, cost}
	default:
		panic("path: unknown objective")
	}
}

// entry is a node that waits in the heap.
type entry struct {
	at   key
	node int32
}

func (e entry) before(o entry) bool {
	return e.at.less(o.at) || e.at == o.at && e.node < o.node
}

// heap is a binary min-heap of entries. A node may be in it several times; its
// first appearance counts.
type heap []entry

func (h *heap) push(e entry) {
	s := append(*h, e)
	i := len(s) - 1
	for i > 0 {
		up := (i - 1) / 2
		if !e.before(s[up]) {
			break
		}
		s[i] = s[up]
		i = up
	}
	s[i] = e
	*h = s
}

func (h *heap) pop() entry {
	s := *h
	top, e := s[0], s[len(s)-1]
	s = s[:len(s)-1]
	*h = s
	if len(s) == 0 {
		return top
	}
	i := 0
	for {
		c := 2*i + 1
		if c >= len(s) {
			break
		}
		if c+1 < len(s) && s[c+1].before(s[c]) {
			c++
		}
		if !s[c].before(e) {
			break
		}
		s[i] = s[c]
		i = c
	}
	s[i] = e
	return top
}
