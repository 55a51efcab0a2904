package distributed

import (
	"fmt"
	"slices"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
)

// What routers tell each other and themselves. Other agents' ops lie below.
const (
	opFirst   = nodes.OpFirstAgent + 1000
	opHello   = opFirst + iota // over Circuit; A is 1 when the sender hears the receiver
	opAdvert                   // Ref = *advert, over Circuit
	opAck                      // of the advertisement of site N, numbered A
	opTick                     // send hellos
	opSilent                   // has Circuit been silent too long?
	opUp                       // Circuit may be used: A
	opLearn                    // an advertisement has been taken in
	opAgain                    // repeat what is unanswered on Circuit
	opCompute                  // compute shortest paths
	opInstall                  // Ref = *nodes.Table is in force
)

// known is what never changes; all routers read it.
type known struct {
	plant *nodes.Plant
	cfg   Config
}

// An advert is what one router says of its own circuits. It never changes.
type advert struct {
	origin nodes.SiteID
	number int64
	links  []link
}

// A link is a circuit over which the router and its neighbour hear each other.
type link struct {
	circuit nodes.CircuitID
	metric  int64
}

// adjacency is what a router knows of one of its own routed circuits.
type adjacency struct {
	circuit nodes.CircuitID
	peer    nodes.SiteID
	port    nodes.PortState
	metric  int64
	heard   des.Time // the last hello; -1: none
	watched bool     // opSilent is booked
	hears   bool     // the neighbour hears this site
	full    bool     // the circuit is used
	wait    int64    // of opUp; 0: none
	owed    []int64  // by origin: number of the advertisement not answered; 0: none
	again   bool     // opAgain is booked
}

// A Router is the agent of one site.
type Router struct {
	k     *known
	site  nodes.SiteID
	inner nodes.ControlAgent

	adjs     []adjacency // ascending by circuit
	db       []*advert   // by origin; nil: not heard of
	backoff  Backoff
	dead     bool
	serial   int64
	table    *nodes.Table // the last computed
	past     []standing   // what was in force since when
	computed int

	x   nodes.Local // during Handle only
	now des.Time    // during Handle only
}

func newRouter(k *known, s nodes.SiteID, inner nodes.ControlAgent) *Router {
	r := &Router{k: k, site: s, inner: inner, db: make([]*advert, len(k.plant.Sites)), backoff: Backoff{Delays: k.cfg.Delays}}
	for i := range k.plant.Circuits {
		c := &k.plant.Circuits[i]
		if c.Carries != nodes.CarriesRouted {
			continue
		}
		for e, end := range c.Ends {
			if end == s {
				r.adjs = append(r.adjs, adjacency{circuit: nodes.CircuitID(i), peer: c.Ends[1-e], heard: -1, owed: make([]int64, len(k.plant.Sites))})
			}
		}
	}
	return r
}

// Clone implements nodes.ControlAgent.
func (r *Router) Clone() nodes.ControlAgent { return r.clone(r.inner.Clone()) }

func (r *Router) clone(inner nodes.ControlAgent) *Router {
	c := *r
	c.inner = inner
	c.adjs = slices.Clone(r.adjs)
	for i := range c.adjs {
		c.adjs[i].owed = slices.Clone(r.adjs[i].owed)
	}
	c.db = slices.Clone(r.db)
	c.past = slices.Clone(r.past)
	return &c
}

// Handle implements nodes.ControlAgent.
func (r *Router) Handle(x nodes.Local, now des.Time, m nodes.Message) {
	r.x, r.now = x, now
	if m.Op < opFirst {
		r.inner.Handle(&tap{x, r}, now, m)
		if m.Circuit == nodes.None && (m.Op == nodes.OpEquipmentLost || m.Op == nodes.OpEquipmentBack) {
			r.equipment(m.Op == nodes.OpEquipmentLost)
		}
	} else {
		r.dispatch(&m)
	}
	r.x = nil
}

// dispatch calls what m is for. A router that does not work hears nothing.
func (r *Router) dispatch(m *nodes.Message) {
	if m.Op == opTick {
		r.tick()
		return
	}
	if r.dead && m.Op != opInstall {
		if m.Op == opSilent {
			r.adj(m.Circuit).watched = false
		} else if m.Op == opAgain {
			r.adj(m.Circuit).again = false
		} else if m.Op == opCompute {
			r.backoff.Ran()
		}
		return
	}
	switch m.Op {
	case opHello:
		r.hello(m)
	case opAdvert:
		l := *m
		l.Op, l.At, l.Settles = opLearn, r.now+r.k.cfg.Flood, true
		r.x.Later(l)
	case opLearn:
		r.learn(m)
	case opAck:
		if a := r.adj(m.Circuit); a.owed[m.N] == m.A {
			a.owed[m.N] = 0
		}
	case opSilent:
		r.silent(m.Circuit)
	case opUp:
		r.up(m)
	case opAgain:
		r.again(m.Circuit)
	case opCompute:
		r.compute()
	case opInstall:
		r.install(m.Ref.(*nodes.Table))
	default:
		panic(fmt.Sprintf("distributed: unknown op %d", m.Op))
	}
}

// adj finds the adjacency of a circuit that ends here.
func (r *Router) adj(c nodes.CircuitID) *adjacency {
	i, ok := slices.BinarySearchFunc(r.adjs, c, func(a adjacency, c nodes.CircuitID) int { return int(a.circuit - c) })
	if !ok {
		panic("distributed: a routed circuit that does not end here")
	}
	return &r.adjs[i]
}

// over sends m to the neighbour at the other end of a circuit.
func (r *Router) over(c nodes.CircuitID, m nodes.Message) {
	r.x.(nodes.Wire).SendOver(c, m)
}

// later books m at this site after a time.
func (r *Router) later(d des.Time, m nodes.Message) {
	m.At = r.now + d
	r.x.Later(m)
}

// phase spreads the hellos of sites over the interval, by their names.
func (r *Router) phase() des.Time {
	return des.Time(random.Hash(r.k.plant.Sites[r.site].Name) % uint64(r.k.cfg.Hello))
}

// A tap is a Local through which the inner agent acts: what it does to ports is
// seen, and its tables go nowhere.
type tap struct {
	nodes.Local
	r *Router
}

// Install implements nodes.Local and does nothing.
func (t *tap) Install(*nodes.Table) {}

// OpenTrail implements nodes.Local.
func (t *tap) OpenTrail(x nodes.Trail) {
	t.Local.OpenTrail(x)
	if x.Copies == 0 && t.r.k.plant.Circuits[x.Circuit].Carries == nodes.CarriesRouted {
		t.r.measured(t.r.adj(x.Circuit), &x)
	}
}

// SetPort implements nodes.Local.
func (t *tap) SetPort(c nodes.CircuitID, s nodes.PortState) {
	t.Local.SetPort(c, s)
	if t.r.k.plant.Circuits[c].Carries == nodes.CarriesRouted {
		t.r.ported(t.r.adj(c), s)
	}
}
