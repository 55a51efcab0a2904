package path

import (
	"math"
	"slices"
)

// A Pair is two routes between the same ends that share nothing a query
// forbids. Working is the better of the two under the objective.
type Pair struct {
	Working, Protect Route

	// Exact says that no disjoint pair has a smaller sum. It is false only
	// where risk groups had to be kept apart by search and the search was cut
	// short; see Finder.DisjointPair.
	Exact bool
}

// pairScratch is the memory of DisjointPair. A state is a node, or, when nodes
// must be apart, one of its two sides.
type pairScratch struct {
	first  Route
	second Route
	flow   []int8
	enter  []half // by which the first route enters a node; edge -1 if it does not
	dist   []key
	by     []int32 // edge by which a state was reached; -1 for the inside of a node
	prev   []int32
	queue  []int32
	queued []bool
	widths []int64
	mask   Mask
	routes []Route
}

// candidates bounds the routes tried where risk groups must be kept apart.
const candidates = 64

// DisjointPair finds the pair of routes from q.From to q.To that share no edge
// and, as how says, no node between the ends and no risk group, with the least
// sum of costs, then the least number of edges in all (FewestHops: the other
// way round; Widest: the largest width at which there is a pair, then the
// least sum). It puts them in into and reports whether there are two. Pairs
// of equal sums are told apart by edge ids, in a fixed way. It panics as
// Shortest does, and if q.From and q.To are equal.
//
// Without risk groups the sum is always the least: two augmentations of a
// flow, the second in the residual graph with negative lengths. Routes that
// are removed one after the other would miss pairs that exist. With risk
// groups the least sum is NP-hard (J. Q. Hu, IEEE Transactions on
// Communications 51(3), 2003), so it is a search: if the pair found without
// looking at groups keeps them apart, it is the best; else each of the 64
// shortest routes in turn is paired with the best route apart from it, until
// twice the length of the next one exceeds the best sum. Pair.Exact says
// whether the bound ended the search; if it did not, a better pair, or any, may
// have been missed. Where there is no pair, the routes in into mean nothing.
//
// Source: J. W. Suurballe, "Disjoint paths in a network", Networks 4, 1974;
// R. Bhandari, "Survivable Networks", Kluwer, 1999.
func (f *Finder) DisjointPair(q *Query, how Apart, into *Pair) bool {
	if q.From == q.To {
		panic("path: disjoint pair from a node to itself")
	}
	f.begin(q)
	if q.By != Widest {
		return f.leastPair(q, how, into)
	}
	// Fewer edges are usable as the width asked for rises, so the largest width
	// with a pair is found by bisection of the widths there are.
	p := &f.pair
	p.widths = append(p.widths[:0], q.Width[:f.g.Edges()]...)
	slices.Sort(p.widths)
	p.widths = slices.Compact(p.widths)
	try, lo, hi, ok := *q, 0, len(p.widths), false
	try.By = LeastCost
	for lo < hi {
		mid := (lo + hi) / 2
		try.Need = max(q.Need, p.widths[mid])
		if f.leastPair(&try, how, into) {
			lo, ok = mid+1, true
		} else {
			hi = mid
		}
	}
	if !ok {
		return false
	}
	try.Need = max(q.Need, p.widths[lo-1])
	f.leastPair(&try, how, into)
	into.order(Widest)
	return true
}

func (p *Pair) order(by Objective) {
	if p.Protect.Compare(&p.Working, by) < 0 {
		p.Working, p.Protect = p.Protect, p.Working
	}
}

// leastPair is DisjointPair for sums.
func (f *Finder) leastPair(q *Query, how Apart, into *Pair) bool {
	if !f.flowPair(q, how, into) {
		return false
	}
	if how&ApartGroups == 0 || !Shares(f.g, &into.Working, &into.Protect, ApartGroups) {
		return true
	}
	return f.groupPair(q, how, into)
}

// flowPair finds the pair of least sum without looking at risk groups.
func (f *Finder) flowPair(q *Query, how Apart, into *Pair) bool {
	p := &f.pair
	into.Exact = true
	if !f.Shortest(q, &p.first) {
		return false
	}
	f.flowBegin()
	if !f.augment(how&ApartNodes != 0) {
		return false
	}
	f.apply(how&ApartNodes != 0)
	f.split(q, into)
	return true
}

// flowBegin lays the first route into the flow.
func (f *Finder) flowBegin() {
	p, n := &f.pair, f.g.Nodes()
	if len(p.enter) == 0 {
		p.enter = make([]half, n)
		p.flow = make([]int8, f.g.Edges())
		p.dist = make([]key, 2*n)
		p.by = make([]int32, 2*n)
		p.prev = make([]int32, 2*n)
		p.queued = make([]bool, 2*n)
	}
	clear(p.flow)
	for v := range p.enter {
		p.enter[v].edge = -1
	}
	for i, e := range p.first.Edges {
		v := p.first.Nodes[i]
		p.flow[e] = f.heading(e, v)
		p.enter[p.first.Nodes[i+1]] = half{edge: e, peer: v}
	}
}

// inside numbers the states of node v: where edges arrive and where they
// leave. They are one state unless nodes must be apart.
func inside(v int32, apart bool) (arrive, leave int32) {
	if apart {
		return 2 * v, 2*v + 1
	}
	return 2 * v, 2 * v
}

// augment finds the shortest way through the residual graph from q.From to
// q.To, with the first route's edges walked backwards at negative length. It
// corrects labels in a queue (Bellman-Ford), for negative lengths rule out
// Dijkstra's algorithm.
func (f *Finder) augment(apart bool) bool {
	p := &f.pair
	for i := range p.dist {
		p.dist[i] = far
		p.queued[i] = false
	}
	_, s := inside(f.q.From, apart)
	t, _ := inside(f.q.To, apart)
	p.dist[s] = key{}
	p.queue = append(p.queue[:0], s)
	for head := 0; head < len(p.queue); head++ {
		x := p.queue[head]
		p.queued[x] = false
		if x != t {
			f.relaxAll(x, apart)
		}
	}
	return p.dist[t] != far
}

// relaxAll tries every residual arc that leaves state x.
func (f *Finder) relaxAll(x int32, apart bool) {
	p, v := &f.pair, x/2
	arrive, leave := inside(v, apart)
	on := p.enter[v].edge >= 0 // the first route passes v or ends there
	if x == arrive {
		if on {
			back := p.enter[v]
			_, to := inside(back.peer, apart)
			f.relax(x, to, back.edge, key{}.minus(f.step(back.edge)))
		}
		if apart && !on {
			f.relax(x, leave, -1, key{})
		}
	}
	if x == leave {
		if apart && on {
			f.relax(x, arrive, -1, key{})
		}
		for _, h := range f.g.at(v) {
			if !h.out || p.flow[h.edge] != 0 || !f.usable(h.edge) || f.q.Avoid.Nodes.Has(int(h.peer)) {
				continue
			}
			to, _ := inside(h.peer, apart)
			f.relax(x, to, h.edge, f.step(h.edge))
		}
	}
}

func (f *Finder) relax(from, to, by int32, length key) {
	p := &f.pair
	d := p.dist[from].plus(length)
	if !d.less(p.dist[to]) {
		return
	}
	p.dist[to], p.by[to], p.prev[to] = d, by, from
	if !p.queued[to] {
		p.queued[to] = true
		p.queue = append(p.queue, to)
	}
}

// apply adds the way that augment found to the flow: an edge walked backwards
// falls out of it.
func (f *Finder) apply(apart bool) {
	p := &f.pair
	_, s := inside(f.q.From, apart)
	x, _ := inside(f.q.To, apart)
	for x != s {
		if e := p.by[x]; e >= 0 {
			if p.flow[e] != 0 {
				p.flow[e] = 0
			} else {
				p.flow[e] = f.heading(e, p.prev[x]/2)
			}
		}
		x = p.prev[x]
	}
}

// split takes the flow of two apart: the working route is the shortest within
// it, the other is what remains. What remains is one simple route: were there
// a cycle in it, the flow without the cycle would be shorter.
func (f *Finder) split(q *Query, into *Pair) {
	p := &f.pair
	f.begin(q)
	f.q.By = sumObjective(q.By)
	f.flow = p.flow
	if !f.search(q.From, math.MaxInt64) {
		panic("path: a flow without a route")
	}
	w, r := &into.Working, &into.Protect
	w.Nodes, w.Edges = append(w.Nodes[:0], q.From), w.Edges[:0]
	f.walk(w)
	f.measure(w)
	for _, e := range w.Edges {
		p.flow[e] = 0
	}
	r.Nodes, r.Edges = append(r.Nodes[:0], q.From), r.Edges[:0]
	for v := q.From; v != q.To; v = r.Nodes[len(r.Nodes)-1] {
		f.follow(v, r)
	}
	f.measure(r)
	f.flow = nil
}

func (f *Finder) follow(v int32, r *Route) {
	for _, h := range f.g.at(v) {
		if h.out && f.pair.flow[h.edge] == f.heading(h.edge, v) {
			r.Edges, r.Nodes = append(r.Edges, h.edge), append(r.Nodes, h.peer)
			return
		}
	}
	panic("path: a flow that ends on the way")
}

func sumObjective(by Objective) Objective {
	if by == Widest {
		return LeastCost
	}
	return by
}

// groupPair searches for a pair that also keeps risk groups apart.
func (f *Finder) groupPair(q *Query, how Apart, into *Pair) bool {
	p := &f.pair
	if len(p.mask.Nodes) == 0 {
		p.mask = NewMask(f.g)
	}
	p.routes = f.KShortest(q, candidates, p.routes)
	found := false
	var best key
	into.Exact = len(p.routes) < candidates
	for i := range p.routes {
		r := &p.routes[i]
		half := r.key(q.By)
		if found && best.less(half.plus(half)) {
			into.Exact = true
			break
		}
		try := *q
		p.mask.Clear()
		copy(p.mask.Edges, q.Avoid.Edges)
		copy(p.mask.Nodes, q.Avoid.Nodes)
		p.mask.ExcludeRoute(f.g, r, q.From, q.To, how)
		try.Avoid = p.mask
		if !f.Shortest(&try, &p.second) {
			continue
		}
		if sum := half.plus(p.second.key(q.By)); !found || sum.less(best) {
			found, best = true, sum
			r.copyTo(&into.Working)
			p.second.copyTo(&into.Protect)
		}
	}
	into.order(q.By)
	return found
}
