package distributed

import (
	"cmp"
	"slices"

	"ferrule/des"
	"ferrule/nodes"
)

// Net is the routers of one network.
type Net struct {
	Agents  []nodes.ControlAgent // one for each site, by id: what the network is given
	k       *known
	routers []*Router
}

// New puts a router before each of the agents of p, by site.
func New(p *nodes.Plant, cfg Config, inner []nodes.ControlAgent) *Net {
	n := &Net{k: &known{plant: p, cfg: cfg.withDefaults()}}
	for s := range p.Sites {
		n.add(newRouter(n.k, nodes.SiteID(s), inner[s]))
	}
	return n
}

func (n *Net) add(r *Router) {
	n.routers = append(n.routers, r)
	n.Agents = append(n.Agents, r)
}

// Locals is what the inner agents must start the network through, so that the
// routers see what stands.
func (n *Net) Locals(locals []nodes.Local) []nodes.Local {
	taps := make([]nodes.Local, len(locals))
	for s := range locals {
		taps[s] = &tap{locals[s], n.routers[s]}
	}
	return taps
}

// Start is called at instant 0, once the circuits stand: neighbours have heard
// each other, all has been flooded, and the tables are in force.
func (n *Net) Start(locals []nodes.Local) {
	for _, r := range n.routers {
		ad := &advert{origin: r.site, number: 1}
		for i := range r.adjs {
			if a := &r.adjs[i]; a.port == nodes.PortUp {
				a.heard, a.hears, a.full = 0, true, true
				ad.links = append(ad.links, link{a.circuit, a.metric})
			}
		}
		for _, o := range n.routers {
			o.db[r.site] = ad
		}
	}
	for s, r := range n.routers {
		r.x = locals[s]
		r.table = r.shortest()
		r.table.Version = 1
		r.x.Install(r.table)
		r.past = append(r.past, standing{table: r.table, up: r.ups()})
		r.later(r.phase(), nodes.Message{Op: opTick})
		for i := range r.adjs {
			if a := &r.adjs[i]; a.full {
				r.watch(a)
			}
		}
		r.x = nil
	}
}

// Clone returns routers in the same state before other agents.
func (n *Net) Clone(inner []nodes.ControlAgent) *Net {
	c := &Net{k: n.k}
	for s, r := range n.routers {
		c.add(r.clone(inner[s]))
	}
	return c
}

// Tables lists the tables in force, by site.
func (n *Net) Tables() []*nodes.Table {
	list := make([]*nodes.Table, len(n.routers))
	for s, r := range n.routers {
		list[s] = r.past[len(r.past)-1].table
	}
	return list
}

// Computations adds up how often shortest paths were computed.
func (n *Net) Computations() int {
	sum := 0
	for _, r := range n.routers {
		sum += r.computed
	}
	return sum
}

// A Loop is a round of sites that packets to one target were sent along for a
// time.
type Loop struct {
	Target   nodes.SiteID
	Sites    []nodes.SiteID // in order, the lowest first
	From, To des.Time       // To is des.Never when it never ended
}

// Loops finds every loop that the tables made, in order of time and target. Of
// several at one time towards one target it names one.
func (n *Net) Loops() []Loop {
	type change struct {
		site int
		standing
	}
	var all []change
	for s, r := range n.routers {
		for _, p := range r.past {
			all = append(all, change{s, p})
		}
	}
	slices.SortStableFunc(all, func(a, b change) int { return cmp.Compare(a.at, b.at) })
	now := make([]standing, len(n.routers))
	open := make([]*Loop, len(n.routers)) // by target
	var loops []Loop
	for i, c := range all {
		now[c.site] = c.standing
		if i+1 < len(all) && all[i+1].at == c.at {
			continue
		}
		for to := range open {
			round := n.round(now, to)
			if o := open[to]; o != nil && !slices.Equal(o.Sites, round) {
				o.To = c.at
				loops = append(loops, *o)
				open[to] = nil
			}
			if round != nil && open[to] == nil {
				open[to] = &Loop{Target: nodes.SiteID(to), Sites: round, From: c.at, To: des.Never}
			}
		}
	}
	for _, o := range open {
		if o != nil {
			loops = append(loops, *o)
		}
	}
	slices.SortStableFunc(loops, func(a, b Loop) int { return cmp.Or(cmp.Compare(a.From, b.From), cmp.Compare(a.Target, b.Target)) })
	return loops
}

// round finds a round of sites towards a target; nil when there is none.
func (n *Net) round(now []standing, to int) []nodes.SiteID {
	const fresh, onWay, done = 0, 1, 2
	state := make([]uint8, len(now))
	var way []nodes.SiteID
	var found []nodes.SiteID
	var visit func(s nodes.SiteID)
	visit = func(s nodes.SiteID) {
		state[s] = onWay
		way = append(way, s)
		r := n.routers[s]
		if t := now[s].table; t != nil && int(s) != to && !r.dead {
			for _, c := range t.Next[to] {
				i, _ := slices.BinarySearchFunc(r.adjs, c, func(a adjacency, c nodes.CircuitID) int { return int(a.circuit - c) })
				if !now[s].up[i] || found != nil {
					continue
				}
				switch peer := r.adjs[i].peer; state[peer] {
				case fresh:
					visit(peer)
				case onWay:
					found = slices.Clone(way[slices.Index(way, peer):])
				}
			}
		}
		state[s] = done
		way = way[:len(way)-1]
	}
	for s := range now {
		if state[s] == fresh && found == nil {
			visit(nodes.SiteID(s))
		}
	}
	if found == nil {
		return nil
	}
	least := slices.Index(found, slices.Min(found))
	return append(slices.Clone(found[least:]), found[:least]...)
}
