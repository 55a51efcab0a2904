package central

import (
	"errors"
	"fmt"
	"slices"

	"ferrule/controller"
	"ferrule/controller/path"
	"ferrule/nodes"
)

// singleRequests names the stream of requests that are orders.
const singleRequests = "requests"

// Net is the controller and all agents of one network.
type Net struct {
	Agents   []nodes.ControlAgent // one for each site, by id
	k        *known
	ctl      *Controller
	elements []*Element
}

// New returns the agents of p with nothing set up. Start books those of orders
// that it is given: each is handed to the controller at its instant At.
// It panics on a configuration that no plan can ask for.
func New(p *nodes.Plant, cfg Config, orders []controller.Order) *Net {
	k := newKnown(p, cfg.withDefaults(p), orders)
	n := &Net{k: k}
	for s := range p.Sites {
		e := newElement(k, nodes.SiteID(s))
		n.elements = append(n.elements, e)
		n.Agents = append(n.Agents, e)
	}
	n.ctl = &Controller{k: k, el: n.elements[k.cfg.Site]}
	n.ctl.newPicture()
	for i := range orders {
		n.ctl.steps = append(n.ctl.steps, newStep(&orders[i]))
	}
	n.ctl.watched = make([]watched, len(cfg.Policies))
	for i := range n.ctl.watched {
		n.ctl.watched[i].forget()
	}
	for i := range cfg.Streams {
		n.ctl.streams = append(n.ctl.streams, stream{demand: cfg.Streams[i].Demand})
	}
	n.ctl.streams = append(n.ctl.streams, stream{})
	n.Agents[k.cfg.Site] = n.ctl
	return n
}

// Start puts in place, at instant 0, what stands when the run begins: circuits
// with their routes, slots and open ports, the tables of all sites, and moves.
// locals has one entry for each site. The error names every circuit and move
// that does not fit.
func (n *Net) Start(locals []nodes.Local, moves []controller.Order) error {
	var faults []error
	for _, fixed := range [2]bool{true, false} {
		for i := range n.k.plant.Circuits {
			p := &n.k.plant.Circuits[i]
			if p.InPlace && (p.Along != nil) == fixed {
				if why := n.place(locals, nodes.CircuitID(i)); why != "" {
					faults = append(faults, fmt.Errorf("circuit %s: %s", p.Name, why))
				}
			}
		}
	}
	c := n.ctl
	c.tables = c.computeTables()
	for s, t := range c.tables {
		c.version++
		t.Version = c.version
		n.elements[s].version = c.version
		locals[s].Install(t)
	}
	for i := range moves {
		if why := n.placeMove(locals, &moves[i]); why != "" {
			faults = append(faults, fmt.Errorf("move %s: %s", moves[i].Name, why))
		}
	}
	home := locals[n.k.cfg.Site]
	for i := range n.k.orders {
		o := &n.k.orders[i]
		later(home, o.At, nodes.Message{Op: nodes.OpOrder, N: int32(i + 1), Ref: o})
	}
	for i := range n.k.cfg.Streams {
		c.bookArrival(i, home)
	}
	c.bookPoll(home, 0)
	return errors.Join(faults...)
}

// place sets up a circuit that is in place from the start, or says why not.
func (n *Net) place(locals []nodes.Local, id nodes.CircuitID) string {
	c := n.ctl
	p := &n.k.plant.Circuits[id]
	h, why := c.find(id, &search{along: p.Along, avoid: &avoided{}, width: c.free, slots: c.circuits[id].slots})
	if why != "" {
		return why
	}
	last := int32(1)
	h.incarnation = last
	if h.copy != nil {
		last++
		h.copy.incarnation = last
	}
	c.reserve(&h)
	for i := range h.parts() {
		s, a, incarnation := h.part(i)
		m := a.message(id, incarnation, false)
		if f := n.elements[s].own(&m); f != nodes.None {
			panic("central: a cross-connect refuses what the picture has free")
		}
	}
	for e, s := range p.Ends {
		x, el := locals[s], n.elements[s]
		el.x = x
		y := el.end(id)
		el.open(y, h.trailsOf(id, nodes.Direction(e)))
		el.setPort(y, nodes.PortUp)
		el.x = nil
	}
	k := &c.circuits[id]
	k.held, k.active, k.last, k.home = h, 1, last, h.route
	k.delay, k.usable = c.delayOf(h.route), true
	k.state, k.upSince = controller.Up, 0
	return ""
}

// placeMove steers what is moved from the start, or says why not.
func (n *Net) placeMove(locals []nodes.Local, o *controller.Order) string {
	c := n.ctl
	for _, id := range o.Circuits {
		if !c.circuits[id].usable {
			return "circuit " + n.k.circuitName(id) + " is not in place"
		}
	}
	for _, w := range o.Ways {
		chain, ok := n.k.orient(w, o.Circuits)
		if !ok {
			return c.wayName(w) + ": the circuits do not join its ends"
		}
		for j, s := range c.stationsOf(w, chain) {
			locals[s].Steer(w, chain[j])
		}
		c.ways[w].chain = chain
	}
	return ""
}

// Reports tells what the controller knows of each circuit, by id, and what has
// become of each order, those of New first.
func (n *Net) Reports() ([]controller.Report, []controller.StepReport) {
	c := n.ctl
	reports := make([]controller.Report, len(c.circuits))
	for i := range c.circuits {
		k := &c.circuits[i]
		reports[i] = controller.Report{
			Circuit: nodes.CircuitID(i), State: k.state, Route: slices.Clone(k.held.route), Channels: slices.Clone(k.held.channels),
			Slots: k.held.slots, Rate: k.rate, Delay: c.delayOf(k.held.route), SetUp: k.setUp, UpSince: k.upSince,
			DownSince: k.downSince, DownTime: k.downTime, Outages: k.outages, Resizes: k.resizes, Incarnation: k.active, Reason: k.reason,
			Preempted: k.preempted,
		}
		if k.held.copy != nil {
			reports[i].Second = slices.Clone(k.held.copy.route)
		}
	}
	steps := make([]controller.StepReport, len(c.steps))
	for i := range c.steps {
		s := &c.steps[i]
		steps[i] = controller.StepReport{
			Name: s.order.Name, Kind: s.order.Kind, Asked: s.asked, Begun: s.begun, Done: s.done, State: s.state, Detail: s.detail, Undoes: s.undoes,
		}
	}
	return reports, steps
}

// Demand tells what became of the requests of each stream, and last of those
// that were orders.
func (n *Net) Demand() []controller.DemandReport {
	list := make([]controller.DemandReport, len(n.ctl.streams))
	for i := range n.ctl.streams {
		s := &n.ctl.streams[i]
		name := singleRequests
		if i < len(n.k.cfg.Streams) {
			name = n.k.cfg.Streams[i].Name
		}
		list[i] = controller.DemandReport{Name: name, Offered: s.offered, Blocked: s.blocked, Refused: s.refused, Active: s.active, SlotTime: s.slotTime}
	}
	return list
}

// Clone returns a copy that goes on identically and shares nothing that either
// will change.
func (n *Net) Clone() *Net {
	d := &Net{k: n.k, ctl: n.ctl.clone()}
	for s, e := range n.elements {
		if nodes.SiteID(s) == n.k.cfg.Site {
			d.elements = append(d.elements, d.ctl.el)
			d.Agents = append(d.Agents, d.ctl)
			continue
		}
		f := e.clone()
		d.elements = append(d.elements, f)
		d.Agents = append(d.Agents, f)
	}
	return d
}

// clone copies the controller and the agent of its own site.
func (c *Controller) clone() *Controller {
	d := *c
	d.el = c.el.clone()
	d.circuits, d.fibres = slices.Clone(c.circuits), slices.Clone(c.fibres)
	d.sites, d.drains = slices.Clone(c.sites), slices.Clone(c.drains)
	d.free, d.spare = slices.Clone(c.free), slices.Clone(c.spare)
	for i := range d.spare {
		d.spare[i] = slices.Clone(d.spare[i])
	}
	d.ways = slices.Clone(c.ways)
	for i := range d.ways {
		d.ways[i].left = slices.Clone(d.ways[i].left)
	}
	d.tables = slices.Clone(c.tables)
	d.finder = path.NewFinder(c.finder.Graph())
	d.scratch = scratch{mask: path.NewMask(c.finder.Graph()), sites: slices.Clone(c.scratch.sites)}
	d.commands = c.commands.clone()
	d.owed = slices.Clone(c.owed)
	d.watched = slices.Clone(c.watched)
	d.gathered = slices.Clone(c.gathered)
	d.tasks = make([]*task, len(c.tasks))
	for i, t := range c.tasks {
		if t != nil {
			u := *t
			u.avoid = avoided{slices.Clone(t.avoid.fibres), slices.Clone(t.avoid.sites)}
			d.tasks[i] = &u
		}
	}
	d.jobs.list = slices.Clone(c.jobs.list)
	d.steps = slices.Clone(c.steps)
	d.streams = slices.Clone(c.streams)
	for i := range d.streams {
		if s := &d.streams[i]; s.demand != nil {
			s.demand = s.demand.Clone()
		}
	}
	d.requests = cloneRequests(c.requests)
	d.unused = slices.Clone(c.unused)
	return &d
}

// Settled says whether nothing is under way but circuit demand: no task, job,
// command without an answer or owed, alarm unheard, hold-off, search for a
// fault, or port that is about to change. Timers that have become idle do not
// count, unlike messages that settle. Wait-to-restore does not count either.
func (n *Net) Settled() bool {
	c := n.ctl
	for _, t := range c.tasks {
		if t != nil {
			return false
		}
	}
	for i := range c.commands.list {
		if cmd := &c.commands.list[i]; cmd.serial != 0 && cmd.m.Settles {
			return false
		}
	}
	for i := range c.circuits {
		if c.circuits[i].searching {
			return false
		}
	}
	for _, e := range n.elements {
		if len(e.alarms) > 0 || slices.ContainsFunc(e.ends, end.busy) {
			return false
		}
	}
	return c.jobs.head == len(c.jobs.list) && !c.jobs.busy && len(c.owed) == 0 && len(c.gathered) == 0
}
