package packet_test

import (
	"fmt"
	"slices"
	"strings"

	"ferrule/des"
	"ferrule/des/measure"
	"ferrule/nodes"
	"ferrule/nodes/packet"
)

// Ops of the toy agents of these tests.
const (
	opReact = nodes.OpFirstAgent + iota // to itself: carry out what was seen
	opTell                              // to others: circuit N up (1) or down (0)
	opPoll                              // to itself
)

// warden is a toy agent: it takes ports down and up when light goes and comes,
// tells all others, routes by fewest circuits over what it believes to be up,
// opens a new trail for the express circuit, and moves a way when ordered.
type warden struct {
	plant   *nodes.Plant
	down    []bool // by circuit, as far as known here
	react   des.Time
	poll    des.Time
	until   des.Time // last poll
	version int32
	express nodes.CircuitID // has another route: other
	other   []nodes.FibreID
	opened  int32
}

func (w *warden) Clone() nodes.ControlAgent {
	c := *w
	c.down = slices.Clone(w.down)
	return &c
}

// begin brings all circuits up at a site and installs its first table.
func (w *warden) begin(x nodes.Local) {
	for i := range w.plant.Circuits {
		c := &w.plant.Circuits[i]
		for d, s := range c.Ends {
			if s == x.Site() {
				w.open(x, nodes.CircuitID(i), nodes.Direction(d), c.Along, 1)
				x.SetPort(nodes.CircuitID(i), nodes.PortUp)
			}
		}
	}
	x.Install(w.table(x.Site()))
	if w.poll > 0 {
		x.Later(nodes.Message{At: w.poll, Op: opPoll})
	}
}

func (w *warden) open(x nodes.Local, c nodes.CircuitID, d nodes.Direction, along []nodes.FibreID, incarnation int32) {
	fibres := slices.Clone(along)
	if d == nodes.Back {
		slices.Reverse(fibres)
	}
	x.OpenTrail(nodes.Trail{Circuit: c, Incarnation: incarnation, Dir: d, Fibres: fibres})
}

// table routes by fewest circuits over routed circuits believed up.
func (w *warden) table(at nodes.SiteID) *nodes.Table {
	w.version++
	t := &nodes.Table{Version: w.version, Next: make([][]nodes.CircuitID, len(w.plant.Sites))}
	for to := range w.plant.Sites {
		far := make([]int, len(w.plant.Sites))
		for s := range far {
			far[s] = 1 << 20
		}
		far[to] = 0
		for range far {
			for i, c := range w.plant.Circuits {
				if !w.down[i] && c.Carries == nodes.CarriesRouted {
					far[c.Ends[0]] = min(far[c.Ends[0]], far[c.Ends[1]]+1)
					far[c.Ends[1]] = min(far[c.Ends[1]], far[c.Ends[0]]+1)
				}
			}
		}
		for i, c := range w.plant.Circuits {
			for d, s := range c.Ends {
				if s == at && !w.down[i] && c.Carries == nodes.CarriesRouted && far[c.Ends[1-d]]+1 == far[at] {
					t.Next[to] = append(t.Next[to], nodes.CircuitID(i))
				}
			}
		}
	}
	return t
}

func (w *warden) Handle(x nodes.Local, now des.Time, m nodes.Message) {
	switch m.Op {
	case nodes.OpLightLost, nodes.OpLightBack:
		lit := int64(m.Op - nodes.OpLightLost)
		x.Note("light", w.plant.Circuits[m.Circuit].Name, fmt.Sprint(lit, " on ", m.N))
		x.Later(nodes.Message{At: now + w.react, Op: opReact, Circuit: m.Circuit, A: lit, Settles: true})
	case nodes.OpFibreDark, nodes.OpFibreLit:
		x.Note("fibre", w.plant.Fibres[m.Fibre].Name, fmt.Sprint(m.Op-nodes.OpFibreDark))
	case opReact:
		for s := range w.plant.Sites {
			if nodes.SiteID(s) != x.Site() {
				x.Send(nodes.SiteID(s), nodes.Message{Op: opTell, Circuit: m.Circuit, A: m.A, Settles: true})
			}
		}
		w.change(x, m.Circuit, m.A == 1)
	case opTell:
		x.Note("told", w.plant.Circuits[m.Circuit].Name, fmt.Sprint(m.A, " from ", m.From, " sent ", m.Sent))
		w.change(x, m.Circuit, m.A == 1)
	case opPoll:
		for i := range w.plant.Circuits {
			if c := x.Counters(nodes.CircuitID(i)); c.Rate > 0 {
				x.Note("poll", w.plant.Circuits[i].Name, fmt.Sprint(c))
			}
		}
		if now < w.until {
			x.Later(nodes.Message{At: now + w.poll, Op: opPoll})
		}
	case nodes.OpOrder:
		o := m.Ref.(*order)
		x.Note("order", "", fmt.Sprint(m.N, o.way, o.onto))
		x.Hold(o.way, now+o.hold)
		x.Steer(o.way, o.onto)
		if o.rate > 0 {
			x.SetRate(o.onto, o.rate)
		}
	}
}

// order is what an outside order asks of a warden.
type order struct {
	way  uint16
	onto nodes.CircuitID
	hold des.Time
	rate nodes.Rate
}

func (w *warden) change(x nodes.Local, c nodes.CircuitID, up bool) {
	w.down[c] = !up
	state := nodes.PortDown
	if up {
		state = nodes.PortUp
	}
	for d, s := range w.plant.Circuits[c].Ends {
		if s != x.Site() {
			continue
		}
		x.SetPort(c, state)
		if !up && c == w.express && w.opened == 0 {
			w.opened++
			w.open(x, c, nodes.Direction(d), w.other, 2)
			x.SetPort(c, nodes.PortUp)
			w.down[c] = false
		}
	}
	x.Install(w.table(x.Site()))
}

// mesh is seven sites and ten fibres of 2 to 400 km, circuits over each and one
// express over three of them, three classes, and wardens that react.
func mesh(joinBelow des.Time) (packet.Config, func() *packet.Network) {
	p := &nodes.Plant{}
	for i := range 7 {
		p.Sites = append(p.Sites, nodes.Site{Name: fmt.Sprint("site", i)})
	}
	for i, f := range [][3]int{{0, 1, 2}, {1, 2, 30}, {2, 3, 350}, {3, 4, 5}, {4, 5, 250}, {5, 0, 400}, {0, 6, 120}, {6, 3, 200}, {6, 5, 60}, {1, 4, 300}} {
		l := nodes.Length(f[2]) * nodes.Kilometre
		ends := [2]nodes.SiteID{nodes.SiteID(f[0]), nodes.SiteID(f[1])}
		p.Fibres = append(p.Fibres, nodes.Fibre{Name: fmt.Sprint("f", f[0], f[1]), Ends: ends, Length: l, Delay: l.Light()})
		p.Circuits = append(p.Circuits, nodes.Circuit{
			Name: fmt.Sprint("c", f[0], f[1]), Ends: ends, Rate: nodes.Rate(20+3*i) * nodes.Mbps,
			Overhead: 26, Along: []nodes.FibreID{nodes.FibreID(i)},
		})
	}
	twin := p.Circuits[2]
	twin.Name, twin.Rate = "twin", 21*nodes.Mbps
	express := nodes.Circuit{
		Name: "express", Ends: [2]nodes.SiteID{0, 4}, Rate: 30 * nodes.Mbps, Carries: nodes.CarriesMoved,
		Along: []nodes.FibreID{0, 1, 2, 3}, WhenDown: nodes.DownReturn,
	}
	wait := nodes.Circuit{
		Name: "wait", Ends: [2]nodes.SiteID{3, 6}, Rate: 9 * nodes.Mbps, Carries: nodes.CarriesMoved,
		Along: []nodes.FibreID{7}, WhenDown: nodes.DownWait,
	}
	p.Circuits = append(p.Circuits, twin, express, wait)
	p.Classes = []nodes.Class{
		{Name: "strict", BufferBytes: 9000},
		{Name: "heavy", Queue: nodes.QueueWeight, Weight: 60, BufferPackets: 12},
		{Name: "light", Queue: nodes.QueueWeight, Weight: 40, BufferTime: 8 * des.Millisecond},
	}
	cfg := packet.Config{
		Plant: p, Seed: 5, WarmUp: 30 * des.Millisecond, Length: 350 * des.Millisecond, Grace: 60 * des.Millisecond,
		Detect: 3 * des.Millisecond, Converge: 20 * des.Millisecond, MessageLoss: 0.05, JoinBelow: joinBelow,
	}
	for i := range p.Sites {
		f := packet.Forwarding{Constant: des.Time(i) * 7 * des.Microsecond}
		if i%3 == 1 {
			f = packet.Forwarding{Median: 20 * des.Microsecond, P99: 90 * des.Microsecond}
		}
		cfg.Forwarding = append(cfg.Forwarding, f)
	}
	for i, e := range [][2]nodes.SiteID{{0, 3}, {0, 4}, {1, 3}, {2, 5}, {2, 4}, {3, 6}, {4, 6}, {5, 1}, {5, 2}, {6, 1}, {0, 2}, {1, 5}} {
		p.Aggregates = append(p.Aggregates, nodes.Aggregate{Name: fmt.Sprint("a", i), Class: nodes.ClassID(i % 3), Ends: e})
	}
	return cfg, func() *packet.Network {
		c := cfg
		c.Sources = nil
		for i := range p.Aggregates {
			for d := range nodes.Direction(2) {
				w := nodes.WayOf(nodes.AggID(i), d)
				c.Sources = append(c.Sources, packet.Source{Way: w, Source: newPoisson(w, 9, threeSizes, meanSize*8e12/meshLoad(i))})
			}
		}
		n := built(c, func(s nodes.SiteID) *warden {
			return &warden{plant: p, react: des.Millisecond, poll: 7*des.Millisecond + des.Time(s), until: 300 * des.Millisecond, express: 11, other: []nodes.FibreID{0, 9}}
		})
		for _, a := range []packet.Act{
			{At: 20 * des.Millisecond, Kind: packet.ActOrder, Name: "move", Site: 0, Ref: &order{way: nodes.WayOf(1, nodes.Out), onto: 11, hold: 4 * des.Millisecond}},
			{At: 40 * des.Millisecond, Kind: packet.ActOrder, Name: "move", Site: 3, Ref: &order{way: nodes.WayOf(5, nodes.Out), onto: 12, hold: des.Millisecond, rate: 6 * nodes.Mbps}},
			{At: 80 * des.Millisecond, Kind: packet.ActCut, Name: "cut", Fibre: 2, Where: 700 * des.Microsecond},
			{At: 80 * des.Millisecond, Kind: packet.ActScale, Name: "more", Ways: []uint16{0, 5, 9}, Factor: 1.5},
			{At: 95 * des.Millisecond, Kind: packet.ActCut, Name: "cut", Fibre: 7, Where: 100 * des.Microsecond},
			{At: 97 * des.Millisecond, Kind: packet.ActCut, Name: "cut", Fibre: 7, Where: 900 * des.Microsecond},
			{At: 150 * des.Millisecond, Kind: packet.ActRepair, Name: "mend", Fibre: 7},
			{At: 190 * des.Millisecond, Kind: packet.ActCut, Name: "short", Fibre: 5, Where: des.Millisecond},
			{At: 192 * des.Millisecond, Kind: packet.ActRepair, Name: "short", Fibre: 5},
			{At: 220 * des.Millisecond, Kind: packet.ActRepair, Name: "mend", Fibre: 2},
		} {
			n.Schedule(a)
		}
		return n
	}
}

// meshLoad is the load of an aggregate of the mesh in bit/s.
func meshLoad(i int) float64 { return float64(6_500_000 + 500_000*(i%5)) }

// built makes a network, gives each site its warden and begins.
func built(cfg packet.Config, agent func(s nodes.SiteID) *warden) *packet.Network {
	n, err := packet.New(cfg)
	if err != nil {
		panic(err)
	}
	agents := make([]nodes.ControlAgent, len(cfg.Plant.Sites))
	for s := range agents {
		w := agent(nodes.SiteID(s))
		if w.down == nil {
			w.down = make([]bool, len(cfg.Plant.Circuits))
		}
		agents[s] = w
	}
	n.SetAgents(agents)
	for s := range agents {
		agents[s].(*warden).begin(n.Local(nodes.SiteID(s)))
	}
	n.Begin()
	return n
}

// dump writes down everything that a network can tell, every bit of it.
func dump(n *packet.Network) string {
	var b strings.Builder
	hist := func(h *measure.Hist) {
		h.Each(func(low, high, count uint64) { fmt.Fprintf(&b, " %d-%d:%d", low, high, count) })
		fmt.Fprintln(&b)
	}
	t, bad := n.Audit()
	fmt.Fprintf(&b, "now %v\ntotals %+v\naudit %q\n", n.Now(), t, bad)
	for i, s := range n.Stretches() {
		fmt.Fprintf(&b, "stretch %d %+v\n", i, s)
	}
	for w := range n.Meters() {
		m := &n.Meters()[w]
		fmt.Fprintf(&b, "meter %d floor %v outages %v last %v\n", w, m.Floor, m.Outages, m.Last())
		for i, c := range m.Cells {
			if c == nil {
				continue
			}
			fmt.Fprintf(&b, "cell %d %+v queueing %d bytes %d reordered %d jitter %x of %d\n", i, c.Exact, c.Queueing, c.Bytes, c.Reordered, c.Jitter, c.Jitters)
			hist(&c.Delay)
			hist(&c.Variation)
		}
	}
	n.Losses(func(site nodes.SiteID, l *packet.Loss) { fmt.Fprintf(&b, "loss at %d: %+v\n", site, *l) })
	for _, e := range n.Events() {
		fmt.Fprintf(&b, "event %+v\n", e)
	}
	for _, r := range n.PortReports() {
		fmt.Fprintf(&b, "port %+v %x %x\n", r, r.MeanQueue, r.ServiceCoV2)
	}
	fmt.Fprintf(&b, "offered %v\ntransit %v\n", n.Offered(), n.Transit())
	inside := 0
	n.Inside(func(p *nodes.Packet) {
		inside++
		fmt.Fprintf(&b, "inside %+v\n", *p)
	})
	fmt.Fprintf(&b, "marks %v\nseries %+v\n", n.Marks(), n.Series())
	st := n.Stretches()
	for i := range st[1:] {
		fmt.Fprintf(&b, "loads %d %+v\n", i, n.Loads(st[i].From, st[i+1].From))
	}
	for s := range n.Transit() {
		for c := range n.Config().Plant.Circuits {
			fmt.Fprintf(&b, "turns %v\n", n.Turns(nodes.SiteID(s), nodes.CircuitID(c)))
		}
	}
	for s := range n.Transit() {
		hist(n.Latencies(nodes.SiteID(s)))
	}
	return b.String()
}

// differ shows the first line in which two dumps differ.
func differ(a, b string) string {
	x, y := strings.Split(a, "\n"), strings.Split(b, "\n")
	for i := range min(len(x), len(y)) {
		if x[i] != y[i] {
			return fmt.Sprintf("line %d:\n %.400s\n %.400s", i, x[i], y[i])
		}
	}
	return fmt.Sprintf("%d lines against %d", len(x), len(y))
}
