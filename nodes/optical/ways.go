package optical

import (
	"ferrule/des"
	"ferrule/nodes"
)

// Ways are the management ways between sites: the least-delay ways over fibres
// not known to be dark. After a cut or a repair the old ways stay in force for
// the convergence time; then an epoch with new ones begins.
type Ways struct {
	plant    *nodes.Plant
	converge des.Time
	epochs   []epoch
}

// epoch holds the ways in force from an instant on.
type epoch struct {
	from des.Time
	hop  []nodes.FibreID // [from*n+to] first fibre of the way, or None
	cost []des.Time      // [from*n+to] its delay, or des.Never
}

// NewWays computes the ways with all fibres lit.
func NewWays(p *nodes.Plant, converge des.Time) *Ways {
	w := &Ways{plant: p, converge: converge}
	w.epochs = []epoch{w.compute(0, func(nodes.FibreID) bool { return false })}
	return w
}

// Changed tells that fibres went dark or were lit at now; dark says which are.
func (w *Ways) Changed(now des.Time, dark func(nodes.FibreID) bool) {
	w.epochs = append(w.epochs, w.compute(now+w.converge, dark))
}

// Epoch reports which epoch is in force at t.
func (w *Ways) Epoch(t des.Time) int32 {
	e := len(w.epochs) - 1
	for w.epochs[e].from > t {
		e--
	}
	return int32(e)
}

// Delay reports the delay of the way from a to b in an epoch; des.Never if
// there is none.
func (w *Ways) Delay(e int32, a, b nodes.SiteID) des.Time {
	return w.epochs[e].cost[int(a)*len(w.plant.Sites)+int(b)]
}

// Passes reports whether a message sent from a to b at the given instant gets
// through: no place it crosses is dark as it crosses.
func (w *Ways) Passes(l *Light, e int32, a, b nodes.SiteID, sent des.Time) bool {
	n := len(w.plant.Sites)
	t := sent
	for a != b {
		f := w.epochs[e].hop[int(a)*n+int(b)]
		if f == nodes.None {
			return false
		}
		fibre := &w.plant.Fibres[f]
		for _, s := range l.Spans(int(f)) {
			if !s.Dirs.Has(fibre.From(a)) {
				continue
			}
			place := s.Place
			if fibre.From(a) == nodes.Back {
				place = fibre.Delay - place
			}
			if at := t + place; s.From <= at && at < s.To {
				return false
			}
		}
		t += fibre.Delay
		a = fibre.Other(a)
	}
	return true
}

// compute finds least-delay ways from every site; of equal ones the one over
// fewer fibres, then over the lower fibre id at each site.
func (w *Ways) compute(from des.Time, dark func(nodes.FibreID) bool) epoch {
	p := w.plant
	n := len(p.Sites)
	e := epoch{from: from, hop: make([]nodes.FibreID, n*n), cost: make([]des.Time, n*n)}
	hops := make([]int, n)
	done := make([]bool, n)
	for to := range n { // towards each site, so that ways are consistent hop by hop
		for s := range n {
			e.cost[s*n+to], e.hop[s*n+to] = des.Never, nodes.None
			done[s] = false
		}
		e.cost[to*n+to], hops[to] = 0, 0
		for range n {
			best := -1
			for s := range n {
				if !done[s] && e.cost[s*n+to] < des.Never && (best < 0 || e.cost[s*n+to] < e.cost[best*n+to]) {
					best = s
				}
			}
			if best < 0 {
				break
			}
			done[best] = true
			for f := range p.Fibres {
				fibre := &p.Fibres[f]
				if dark(nodes.FibreID(f)) || fibre.Ends[0] != nodes.SiteID(best) && fibre.Ends[1] != nodes.SiteID(best) {
					continue
				}
				s := int(fibre.Other(nodes.SiteID(best)))
				c, h := e.cost[best*n+to]+fibre.Delay, hops[best]+1
				old, tie := e.hop[s*n+to], c == e.cost[s*n+to]
				if c < e.cost[s*n+to] || tie && h < hops[s] || tie && h == hops[s] && nodes.FibreID(f) < old {
					e.cost[s*n+to], e.hop[s*n+to], hops[s] = c, nodes.FibreID(f), h
				}
			}
		}
	}
	return e
}

// Clone returns a copy that shares nothing that changes.
func (w *Ways) Clone() *Ways {
	c := *w
	c.epochs = append([]epoch(nil), w.epochs...)
	return &c
}
