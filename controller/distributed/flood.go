package distributed

import "ferrule/nodes"

// originate says anew what circuits of this site are used, to all neighbours.
func (r *Router) originate() {
	ad := &advert{origin: r.site, number: 1}
	if old := r.db[r.site]; old != nil {
		ad.number = old.number + 1
	}
	for i := range r.adjs {
		if a := &r.adjs[i]; a.full {
			ad.links = append(ad.links, link{a.circuit, a.metric})
		}
	}
	r.db[r.site] = ad
	r.flood(ad, nodes.None)
	r.changed()
}

// flood passes an advertisement on to all neighbours but the one it came from.
func (r *Router) flood(ad *advert, except nodes.CircuitID) {
	for i := range r.adjs {
		if a := &r.adjs[i]; a.full && a.circuit != except {
			r.tell(a, ad)
		}
	}
}

// tell sends an advertisement, again and again until it is answered.
func (r *Router) tell(a *adjacency, ad *advert) {
	a.owed[ad.origin] = ad.number
	r.over(a.circuit, nodes.Message{Op: opAdvert, Ref: ad, Settles: true})
	if !a.again {
		a.again = true
		r.later(r.k.cfg.Again, nodes.Message{Op: opAgain, Circuit: a.circuit})
	}
}

// again repeats what is unanswered on a circuit.
func (r *Router) again(c nodes.CircuitID) {
	a := r.adj(c)
	a.again = false
	for origin, number := range a.owed {
		if number != 0 {
			r.tell(a, r.db[origin])
		}
	}
}

// learn takes in an advertisement and answers it. One that is older than what
// is known is answered with the newer one.
func (r *Router) learn(m *nodes.Message) {
	ad := m.Ref.(*advert)
	a := r.adj(m.Circuit)
	if a.heard < 0 {
		return // the neighbour is gone, and will repeat it when it is back
	}
	r.over(a.circuit, nodes.Message{Op: opAck, N: int32(ad.origin), A: ad.number})
	old := r.db[ad.origin]
	switch {
	case ad.origin == r.site || old != nil && old.number > ad.number:
		if a.full && old.number > ad.number {
			r.tell(a, old)
		}
	case old != nil && old.number == ad.number:
		a.owed[ad.origin] = 0
	default:
		r.db[ad.origin] = ad
		r.flood(ad, a.circuit)
		r.changed()
	}
}

// changed has shortest paths computed when the back-off allows it.
func (r *Router) changed() {
	if at, start := r.backoff.Event(r.now); start {
		r.x.Later(nodes.Message{At: at, Op: opCompute, Settles: true})
	}
}
