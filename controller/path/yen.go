package path

import (
	"fmt"
	"math"
)

// yen is the memory of KShortest.
type yen struct {
	mask  Mask
	cands []Route // found and not yet returned, the first n of them
	n     int
	dev   []int // where each candidate left the route it came from
	spur  Route
}

// KShortest finds the k best loopless routes under q.By, best first, and fewer
// if there are fewer. It overwrites into from its start and returns it with
// that length; memory of the routes in it is reused. It panics if k < 1.
//
// It is Yen's algorithm with Lawler's rule: a route is split only from where
// it left its parent on. Every sub-problem is solved in the total order of the
// objective, so the answer is the first k routes of that order, not merely k
// routes of the right lengths. The time complexity is O(k n m log m).
//
// Source: J. Y. Yen, "Finding the k shortest loopless paths in a network",
// Management Science 17(11), 1971; E. L. Lawler, Management Science 18(7), 1972.
func (f *Finder) KShortest(q *Query, k int, into []Route) []Route {
	if k < 1 {
		panic(fmt.Sprintf("path: %d shortest routes", k))
	}
	f.yenBegin()
	y := &f.yen
	routes := into[:0]
	for len(routes) < k {
		dev := 0
		if len(routes) == 0 {
			if !f.Shortest(q, &y.spur) {
				return routes
			}
			routes = grow(routes)
			y.spur.copyTo(&routes[0])
		} else {
			best := f.bestCandidate(q.By)
			if best < 0 {
				return routes
			}
			routes = grow(routes)
			y.cands[best].copyTo(&routes[len(routes)-1])
			dev = y.dev[best]
			y.n--
			y.cands[best], y.cands[y.n] = y.cands[y.n], y.cands[best]
			y.dev[best] = y.dev[y.n]
		}
		if len(routes) < k {
			f.branch(q, routes, dev)
		}
	}
	return routes
}

func (f *Finder) yenBegin() {
	y := &f.yen
	if len(y.mask.Nodes) == 0 {
		y.mask = NewMask(f.g)
	}
	y.n, y.dev = 0, y.dev[:0]
}

// grow lengthens s by one and keeps the memory of the route that was there.
func grow(s []Route) []Route {
	if len(s) < cap(s) {
		return s[:len(s)+1]
	}
	return append(s, Route{})
}

func (f *Finder) bestCandidate(by Objective) int {
	best := -1
	for i := range f.yen.n {
		if best < 0 || f.yen.cands[i].Compare(&f.yen.cands[best], by) < 0 {
			best = i
		}
	}
	return best
}

// branch adds, for each node of the last route from index dev on, the best
// route that follows it up to there and then differs from all those returned.
func (f *Finder) branch(q *Query, routes []Route, dev int) {
	y := &f.yen
	last := &routes[len(routes)-1]
	for i := dev; i < len(last.Edges); i++ {
		y.mask.Clear()
		copy(y.mask.Edges, q.Avoid.Edges)
		copy(y.mask.Nodes, q.Avoid.Nodes)
		for _, v := range last.Nodes[:i] {
			y.mask.Nodes.Add(int(v))
		}
		for r := range routes {
			if e := routes[r].Edges; len(e) > i && equal(e[:i], last.Edges[:i]) {
				y.mask.Edges.Add(int(e[i]))
			}
		}
		if f.spurFrom(q, last, i) {
			f.keep(i)
		}
	}
}

// spurFrom completes the first i edges of last under the mask, into y.spur.
func (f *Finder) spurFrom(q *Query, last *Route, i int) bool {
	y := &f.yen
	f.begin(q)
	f.q.Avoid = y.mask
	room := int64(math.MaxInt64)
	if q.By == Widest {
		for _, e := range last.Edges[:i] {
			room = min(room, q.Width[e])
		}
	}
	if !f.search(last.Nodes[i], room) {
		return false
	}
	y.spur.Nodes = append(y.spur.Nodes[:0], last.Nodes[:i+1]...)
	y.spur.Edges = append(y.spur.Edges[:0], last.Edges[:i]...)
	f.walk(&y.spur)
	f.measure(&y.spur)
	return true
}

func (f *Finder) keep(dev int) {
	y := &f.yen
	if y.n == len(y.cands) {
		y.cands = append(y.cands, Route{})
	}
	y.spur.copyTo(&y.cands[y.n])
	y.dev = append(y.dev[:y.n], dev)
	y.n++
}

func equal(a, b []int32) bool {
	for i := range a {
		if a[i] != b[i] {
			return false
		}
	}
	return true
}
