package distributed

import (
	"ferrule/des"
	"ferrule/nodes"
)

// measured takes in the route that a circuit was given: its light delay is the
// metric of a circuit that has none of its own.
func (r *Router) measured(a *adjacency, t *nodes.Trail) {
	metric := r.k.plant.Circuits[a.circuit].Metric
	if metric == 0 {
		var d des.Time
		for _, f := range t.Fibres {
			d += r.k.plant.Fibres[f].Delay
		}
		metric = max(1, int64(d))
	}
	if metric != a.metric {
		a.metric = metric
		if a.full {
			r.originate()
		}
	}
}

// ported takes in what became of a port. Loss of light brings it down, which
// is noticed long before three hellos are missed.
func (r *Router) ported(a *adjacency, s nodes.PortState) {
	if a.port == s {
		return
	}
	a.port = s
	r.stand()
	if s != nodes.PortUp {
		r.down(a)
		return
	}
	if r.x != nil && !r.dead {
		r.greet(a)
	}
}

// equipment takes in that the router itself stopped or works again.
func (r *Router) equipment(lost bool) {
	if r.dead == lost {
		return
	}
	r.dead = lost
	for i := range r.adjs {
		if lost {
			r.down(&r.adjs[i])
		} else if r.adjs[i].port == nodes.PortUp {
			r.greet(&r.adjs[i])
		}
	}
}

// tick sends hellos over every circuit whose port is up.
func (r *Router) tick() {
	r.later(r.k.cfg.Hello, nodes.Message{Op: opTick})
	for i := range r.adjs {
		if a := &r.adjs[i]; !r.dead && a.port == nodes.PortUp {
			r.greet(a)
		}
	}
}

// greet sends one hello.
func (r *Router) greet(a *adjacency) {
	m := nodes.Message{Op: opHello}
	if a.heard >= 0 {
		m.A = 1
	}
	r.over(a.circuit, m)
}

// hello takes one in.
func (r *Router) hello(m *nodes.Message) {
	a := r.adj(m.Circuit)
	if a.port != nodes.PortUp {
		return
	}
	first := a.heard < 0
	a.heard, a.hears = r.now, m.A == 1
	r.watch(a)
	if first {
		r.greet(a)
	}
	switch {
	case a.full && !a.hears: // it has begun anew
		a.full = false
		r.originate()
	case !a.full && a.hears && a.wait == 0:
		r.serial++
		a.wait = r.serial
		r.later(r.k.cfg.AdjacencyUp, nodes.Message{Op: opUp, Circuit: a.circuit, A: a.wait, Settles: true})
	}
}

// watch books the instant at which a neighbour will have been silent too long.
func (r *Router) watch(a *adjacency) {
	if !a.watched {
		a.watched = true
		r.x.Later(nodes.Message{At: max(r.now, a.heard+r.k.cfg.Hello*des.Time(r.k.cfg.Lost)), Op: opSilent, Circuit: a.circuit})
	}
}

// silent ends an adjacency unless a hello has come meanwhile.
func (r *Router) silent(c nodes.CircuitID) {
	a := r.adj(c)
	a.watched = false
	if a.heard < 0 {
		return
	}
	if r.now < a.heard+r.k.cfg.Hello*des.Time(r.k.cfg.Lost) {
		r.watch(a)
		return
	}
	r.x.Note("hellos lost", r.k.plant.Circuits[c].Name, "")
	r.down(a)
}

// up begins to use a circuit over which both have heard each other for long
// enough, and tells the neighbour all that is known here.
func (r *Router) up(m *nodes.Message) {
	a := r.adj(m.Circuit)
	if a.wait != m.A {
		return
	}
	a.wait = 0
	if a.heard < 0 || !a.hears {
		return
	}
	a.full = true
	r.x.Note("adjacency up", r.k.plant.Circuits[a.circuit].Name, "")
	for _, ad := range r.db {
		if ad != nil && ad.origin != r.site {
			r.tell(a, ad)
		}
	}
	r.originate()
}

// down ends an adjacency.
func (r *Router) down(a *adjacency) {
	was := a.full
	a.heard, a.hears, a.full, a.wait = -1, false, false, 0
	clear(a.owed)
	if was {
		r.originate()
	}
}
