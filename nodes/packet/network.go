// Package packet moves packets: sources, routers with their forwarding
// latency, ports with their queues, pipes of packets in flight, and the meters
// that judge what arrives.
//
// Trails that are cut, routers, ports and sites that fail, and the two trails of
// 1+1 circuits with the tail that selects between them are physical: what is
// lost to them does not depend on what anybody knows.
//
// A Network is a des.Model. Its sites are touched only by their own events
// while a window runs; pipes and messages change hands at the window's edge.
package packet

import (
	"errors"
	"fmt"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/conditioner"
	"ferrule/nodes/optical"
)

// Config describes a network. A zero field takes the default beside it.
type Config struct {
	Plant       *nodes.Plant
	Forwarding  []Forwarding // per site; nil: no latency
	Sources     []Source
	Endpoints   []Endpoint
	Seed        uint64
	WarmUp      des.Time
	Length      des.Time // when sources end
	Grace       des.Time // what is under way is awaited that long; default 3 s
	Detect      des.Time // darkness to loss-of-light
	Converge    des.Time // a cut to new management ways
	Switch      des.Time // loss-of-light to the other trail, at the tail of a 1+1 circuit
	Revert      bool     // such a tail goes back to its first trail once that has light again
	Wait        des.Time // how long it must have had light before: wait-to-restore
	MessageLoss float64  // share of control messages lost beside those in a cut
	JoinBelow   des.Time // default DefaultJoinBelow; negative: join no sites
}

// DefaultGrace is how long a packet is awaited: ITU-T Y.1540 takes a packet
// for lost after 3 s.
const DefaultGrace = 3 * des.Second

// Source is what one way sends.
type Source struct {
	Way    uint16
	Source nodes.Source
	Meter  *conditioner.Meter  // at its ingress; red packets are discarded; nil: none
	Shaper *conditioner.Shaper // after it; nil: none
}

// maxWindow bounds windows so that times within one fit the merge of arrivals.
const maxWindow = 100 * des.Second

// Network is the packet layer of a run.
type Network struct {
	cfg       Config
	plant     *nodes.Plant
	classOf   []uint8
	sites     []*Site
	regions   []*region
	kernel    []des.Region
	regionOf  []int32
	between   des.Time
	meters    []Meter
	light     *optical.Light
	ways      *optical.Ways
	history   history
	acts      des.Agenda[dated, *dated]
	actNo     int
	faults    int32
	broken    int // fibres dark, and parts of sites that have failed
	siteSpans []siteSpan
	unsettled bool
	mark      bool // the warm-up is over
	ended     bool // the sources are
	now       des.Time
	flagged   []bool // regions touched at this edge
	log       []nodes.Event
	marks     []des.Time // acts that have close bins around them
	wideWidth des.Time   // of the wide bins of time series
	wideBins  int
}

// New builds the network; everything is dark and still until agents start it.
func New(cfg Config) (*Network, error) {
	if err := cfg.check(); err != nil {
		return nil, err
	}
	p := cfg.Plant
	n := &Network{cfg: cfg, plant: p, history: newHistory(cfg.WarmUp)}
	n.classOf = make([]uint8, 2*len(p.Aggregates))
	n.meters = make([]Meter, 2*len(p.Aggregates))
	n.light = optical.NewLight(len(p.Fibres))
	n.ways = optical.NewWays(p, cfg.Converge)
	for i := range p.Aggregates {
		a := &p.Aggregates[i]
		floor := n.ways.Delay(0, a.Ends[0], a.Ends[1])
		for d := range nodes.Direction(2) {
			n.classOf[nodes.WayOf(nodes.AggID(i), d)] = uint8(a.Class)
			n.meters[nodes.WayOf(nodes.AggID(i), d)].Floor = floor
		}
	}
	below := cfg.JoinBelow
	var count int
	var within []des.Time
	n.regionOf, count, n.between, within = draw(p, below)
	for i := range count {
		n.regions = append(n.regions, &region{net: n, inner: within[i]})
	}
	for i := range p.Sites {
		s := &Site{id: nodes.SiteID(i), net: n, srcMin: des.Never, gateMin: des.Never, hostMin: des.Never, st: view{to: cfg.WarmUp, fault: -1}}
		s.hop = make([]int32, len(n.classOf))
		s.lossOf = make([]int32, len(n.classOf))
		s.via, s.sink.key = make([]uint64, len(n.classOf)), -1
		s.portOf = make([]int16, len(p.Circuits))
		for c := range s.portOf {
			s.portOf[c] = -1
		}
		s.access = newLatency(cfg.Forwarding[i], cfg.Seed, p.Sites[i].Name+" access")
		n.sites = append(n.sites, s)
		r := n.regions[n.regionOf[i]]
		r.sites = append(r.sites, s)
	}
	for c := range p.Circuits {
		n.sites[p.Circuits[c].Ends[0]].addPort(nodes.CircuitID(c), nodes.Out)
		n.sites[p.Circuits[c].Ends[1]].addPort(nodes.CircuitID(c), nodes.Back)
	}
	for _, src := range cfg.Sources {
		a, d := nodes.AggOf(src.Way)
		s := n.sites[p.Aggregates[a].Origin(d)]
		s.sources = append(s.sources, source{s: src.Source, way: src.Way, gate: newGate(&src)})
		s.next = append(s.next, src.Source.Next())
		s.srcMin = min(s.srcMin, src.Source.Next())
	}
	for i := range cfg.Endpoints {
		n.addHost(&cfg.Endpoints[i])
	}
	n.traceSites()
	for _, s := range n.sites {
		s.rebuild()
	}
	for _, r := range n.regions {
		n.kernel = append(n.kernel, r)
	}
	n.flagged = make([]bool, len(n.regions))
	n.Schedule(Act{At: cfg.WarmUp, Kind: actMeasure})
	n.Schedule(Act{At: cfg.Length, Kind: actEnd})
	return n, nil
}

func (c *Config) check() error {
	if c.Plant == nil {
		return errors.New("packet: no plant")
	}
	if c.Forwarding == nil {
		c.Forwarding = make([]Forwarding, len(c.Plant.Sites))
	}
	if c.Grace == 0 {
		c.Grace = DefaultGrace
	}
	if c.JoinBelow == 0 {
		c.JoinBelow = DefaultJoinBelow
	}
	var errs []error
	if len(c.Forwarding) != len(c.Plant.Sites) {
		errs = append(errs, fmt.Errorf("packet: %d forwarding latencies for %d sites", len(c.Forwarding), len(c.Plant.Sites)))
	}
	for _, f := range c.Forwarding {
		errs = append(errs, f.Check())
	}
	if len(c.Plant.Aggregates) >= nodes.MaxAggregates {
		errs = append(errs, fmt.Errorf("packet: %d aggregates; at most %d", len(c.Plant.Aggregates), nodes.MaxAggregates-1))
	}
	if c.WarmUp < 0 || c.Length <= c.WarmUp {
		errs = append(errs, fmt.Errorf("packet: length %v after a warm-up of %v", c.Length, c.WarmUp))
	}
	for _, f := range c.Plant.Fibres {
		if f.Delay <= 0 {
			errs = append(errs, fmt.Errorf("packet: fibre %s has no delay", f.Name))
		}
	}
	return errors.Join(errs...)
}

// Local returns a site as its agent sees it, to start a run with.
func (n *Network) Local(s nodes.SiteID) nodes.Local { return (*local)(n.sites[s]) }

// SetAgents gives each site its agent.
func (n *Network) SetAgents(agents []nodes.ControlAgent) {
	for i, s := range n.sites {
		s.agent = agents[i]
	}
}

// Begin is called once agents have started the network at time 0: it makes
// what they set up known at the other ends.
func (n *Network) Begin() {
	for _, s := range n.sites {
		s.rebuild()
	}
	n.Edge(0, func(int) {})
}

// Regions implements des.Model.
func (n *Network) Regions() []des.Region { return n.kernel }

// Lookahead implements des.Model.
func (n *Network) Lookahead() des.Time { return n.between }

// MaxWindow implements des.Model.
func (n *Network) MaxWindow() des.Time {
	if n.unsettled {
		return SettleTime / 2
	}
	return maxWindow
}

// Edge implements des.Model.
func (n *Network) Edge(now des.Time, touched func(int)) {
	n.now = now
	for _, s := range n.sites {
		for _, p := range s.fresh {
			n.register(p, now)
			n.flagged[n.regionOf[p.to]] = true
		}
		s.fresh = s.fresh[:0]
		for _, p := range s.dirty {
			p.publish()
			n.flagged[n.regionOf[p.to]] = true
		}
		s.dirty = s.dirty[:0]
		for i := range s.out {
			to := s.out[i].To
			n.sites[to].book(s.out[i])
			n.flagged[n.regionOf[to]] = true
		}
		s.out = s.out[:0]
	}
	for r, f := range n.flagged {
		if f {
			n.flagged[r] = false
			touched(r)
		}
	}
	if n.unsettled {
		n.settle()
	}
}

// settle books the end of the stretch once nothing settling is pending.
func (n *Network) settle() {
	var last des.Time
	for _, s := range n.sites {
		if s.pending > 0 {
			return
		}
		last = max(last, s.lastAct)
	}
	last = max(last, n.history.s[len(n.history.s)-1].From)
	n.unsettled = false
	n.Schedule(Act{At: last + SettleTime, Kind: actSettled, where: last})
}

// register makes a new pipe known to the site that receives from it.
func (n *Network) register(p *pipe, now des.Time) {
	to := n.sites[p.to]
	to.addInput(p)
	if p.copies != 0 {
		to.addTail(p)
	}
	p.publish()
	var before des.Time
	at := p.from
	for _, f := range p.fibres {
		fibre := &n.plant.Fibres[f]
		for i, sp := range n.light.Spans(int(f)) {
			if !sp.Dirs.Has(fibre.From(at)) {
				continue
			}
			place := sp.Place
			if fibre.From(at) == nodes.Back {
				place = fibre.Delay - place
			}
			d := darkSpan{fibre: f, span: i, offset: before + place, from: sp.From, to: sp.To}
			p.darken(d)
			if sp.To == des.Never {
				// Light is missed once it should have come: no news outruns it.
				seen := max(p.lines[0].from+p.delay, sp.From+p.delay-d.offset) + n.cfg.Detect
				to.book(nodes.Message{At: max(seen, now), From: to.id, To: to.id, Op: nodes.OpLightLost, Circuit: p.circuit, N: p.incarnation, Settles: true})
			}
		}
		before += fibre.Delay
		at = fibre.Other(at)
	}
	n.darkEquipment(to, p)
}

// Finished reports, once the sources have ended, whether nothing is under way.
func (n *Network) Finished() bool {
	if n.now < n.cfg.Length {
		return false
	}
	for _, s := range n.sites {
		for i := range s.ports {
			if q := &s.ports[i]; q.waiting > 0 && q.state != nodes.PortDown || len(q.in.arena) > 0 {
				return false
			}
		}
		for i := range s.inputs {
			if p := s.inputs[i].pipe; p.head != p.vis {
				return false
			}
		}
		for _, h := range s.held {
			if len(h.buf) > 0 {
				return false
			}
		}
		if s.srcMin < n.cfg.Length || s.gateMin < des.Never || !s.hostsDone() {
			return false
		}
	}
	return true
}

// Run advances the whole run on exec: sources to the end of the run, and then
// what is under way until it has arrived or the grace is over. stop, if not
// nil, is asked after each window and ends the run early. It reports the
// instant it reached.
func (n *Network) Run(k *des.Kernel, stop func() bool) des.Time {
	k.Advance(n.cfg.Length, stop)
	for i := range graceSteps {
		if stop != nil && stop() {
			break
		}
		k.Advance(n.cfg.Length+n.cfg.Grace*(i+1)/graceSteps, stop)
		if n.Finished() {
			break
		}
	}
	return k.Now()
}

// graceSteps is how often it is asked during the grace whether all packets have
// met their fate: at fixed instants, so that windows do not show.
const graceSteps des.Time = 30
