package central

import (
	"fmt"
	"slices"

	"ferrule/controller/path"
	"ferrule/nodes"
)

// wantTables asks for new tables, unless a job for them waits already.
func (c *Controller) wantTables(rank uint8) {
	if !c.tablesQueued {
		c.tablesQueued = true
		c.enqueue(job{kind: jobTables, rank: rank})
	}
}

// tablesQuiet says whether every site has confirmed the tables it should have.
func (c *Controller) tablesQuiet() bool { return !c.tablesQueued && c.tablesSent == 0 }

// renewTables computes all tables and sends those that changed.
func (c *Controller) renewTables() {
	tables := c.computeTables()
	sent := 0
	for s, t := range tables {
		if c.tables[s] != nil && sameTable(c.tables[s], t) {
			continue
		}
		c.version++
		t.Version = c.version
		c.tables[s] = t
		c.tablesSent++
		sent++
		c.command(nodes.SiteID(s), nodes.Message{Op: opInstall, Settles: true, Ref: t}, ownerTable, 0)
	}
	c.classes = nil
	c.x.Note("tables", "", fmt.Sprintf("%d of %d changed", sent, len(tables)))
	c.quiet()
}

// tableConfirmed counts a table that a site has, or could not be given.
func (c *Controller) tableConfirmed() {
	c.tablesSent--
	c.quiet()
}

// resendTables asks for new tables when a site could not be given its own.
func (c *Controller) resendTables() {
	if slices.Contains(c.tables, nil) {
		c.wantTables(rankTables)
	}
}

// sameTable says whether two tables send everything the same way.
func sameTable(a, b *nodes.Table) bool {
	return slices.EqualFunc(a.Next, b.Next, func(x, y []nodes.CircuitID) bool { return slices.Equal(x, y) })
}

// drainedMetric is what a circuit that ends at a drained site costs more, so
// that only what begins or ends there goes over it.
const drainedMetric = 1 << 50

// computeTables finds the next hops of every site to every site over routed
// circuits that packets may go over. The metric of a circuit is its own or the
// delay of its route in picoseconds.
func (c *Controller) computeTables() []*nodes.Table {
	n := len(c.k.plant.Sites)
	var edges []path.Edge
	var ids []nodes.CircuitID
	for i := range c.circuits {
		p := &c.k.plant.Circuits[i]
		if !c.circuits[i].usable || p.Carries != nodes.CarriesRouted {
			continue
		}
		metric := p.Metric
		if metric == 0 {
			metric = max(1, int64(c.circuits[i].delay))
		}
		for _, s := range p.Ends {
			if c.sites[s].drained {
				metric += drainedMetric
			}
		}
		edges = append(edges, path.Edge{A: int32(p.Ends[0]), B: int32(p.Ends[1]), Cost: metric})
		ids = append(ids, nodes.CircuitID(i))
	}
	tables := make([]*nodes.Table, n)
	for s := range tables {
		tables[s] = &nodes.Table{Next: make([][]nodes.CircuitID, n)}
	}
	find := path.NewFinder(path.NewGraph(n, edges))
	var hops path.NextHops
	var flat []nodes.CircuitID
	for to := range n {
		find.NextHops(int32(to), path.Mask{}, &hops)
		for s := range n {
			from := len(flat)
			for _, e := range hops.At(int32(s)) {
				flat = append(flat, ids[e])
			}
			if len(flat) > from {
				tables[s].Next[to] = flat[from:len(flat):len(flat)]
			}
		}
	}
	return tables
}
