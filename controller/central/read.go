package central

import (
	"slices"

	"ferrule/nodes"
)

// Carried names the circuits that carry a way in the controller's picture, in
// the order its packets pass them: the chain it was moved onto, or the routed
// circuits of a shortest way, the lowest where several are equal. It is nil
// when no way is known.
func (n *Net) Carried(way uint16) []string {
	c := n.ctl
	a, d := nodes.AggOf(way)
	agg := &n.k.plant.Aggregates[a]
	var names []string
	if chain := c.ways[way].chain; chain != nil {
		for _, id := range chain {
			names = append(names, n.k.circuitName(id))
		}
		return names
	}
	at, target := agg.Origin(d), agg.Target(d)
	for range n.k.plant.Sites {
		if at == target {
			return names
		}
		if int(at) >= len(c.tables) || c.tables[at] == nil || int(target) >= len(c.tables[at].Next) || len(c.tables[at].Next[target]) == 0 {
			return nil
		}
		id := c.tables[at].Next[target][0]
		names = append(names, n.k.circuitName(id))
		p := &n.k.plant.Circuits[id]
		if p.Ends[0] == at {
			at = p.Ends[1]
		} else {
			at = p.Ends[0]
		}
	}
	return nil
}

// SlotsOwned adds up, over the sending side of every fibre at every site, the
// slots that circuits and requests should own by the controller's picture, and
// those that the cross-connects say are owned.
func (n *Net) SlotsOwned() (picture, owned int64) {
	want, _ := n.ctl.claims()
	for i := range want {
		picture += int64(want[i].Slots)
	}
	for _, e := range n.elements {
		for _, o := range e.xc.Ownerships() {
			owned += int64(o.Slots)
		}
	}
	return picture, owned
}

// SlotsOnFibres reports, for each fibre, the slots that the cross-connects at
// its ends say are owned, the larger of its two directions.
func (n *Net) SlotsOnFibres() []int64 {
	most := make([]int64, len(n.k.plant.Fibres))
	for _, e := range n.elements {
		here := make([]int64, len(most))
		for _, o := range e.xc.Ownerships() {
			here[o.Fibre] += int64(o.Slots)
		}
		for f, slots := range here {
			most[f] = max(most[f], slots)
		}
	}
	return most
}

// Tables lists the tables that each site should have in the controller's
// picture, by site; the caller must not change them.
func (n *Net) Tables() []*nodes.Table { return slices.Clone(n.ctl.tables) }
