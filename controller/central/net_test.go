package central

import (
	"cmp"
	"fmt"
	"slices"
	"testing"

	"ferrule/controller"
	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
)

// fakeNet is a network for tests: a calendar, delays between sites, a switch
// that loses messages, and a record of what the agents have done.
type fakeNet struct {
	plant   *nodes.Plant
	net     *Net
	now     des.Time
	pending []nodes.Message
	serial  uint64
	delay   func(from, to nodes.SiteID) des.Time
	lose    func(now des.Time, to nodes.SiteID, m *nodes.Message) bool // nil: nothing
	sites   []fakeSite
	events  []nodes.Event
	under   int    // what agents count as under way
	dark    []bool // by fibre
}

// fakeSite is a site as its agent sees it.
type fakeSite struct {
	f      *fakeNet
	id     nodes.SiteID
	ports  []nodes.PortState // by circuit
	rates  []nodes.Rate
	queue  []nodes.Bytes
	count  []nodes.PortCounters // SentBytes, SentPackets, LostPackets: what Counters tells
	trails []nodes.Trail
	copies []nodes.Trail // 1+1
	upAt   []des.Time
	table  *nodes.Table
	ways   []nodes.CircuitID
	until  []des.Time
	heldAt []des.Time
	steers []steering
}

// steering is one call of Steer.
type steering struct {
	at  des.Time
	way uint16
	by  nodes.CircuitID
}

func (s *fakeSite) Site() nodes.SiteID { return s.id }

func (s *fakeSite) Later(m nodes.Message) {
	if m.At < s.f.now {
		panic(fmt.Sprintf("message for %v booked at %v", m.At, s.f.now))
	}
	m.From, m.To = s.id, s.id
	s.f.push(m)
}

func (s *fakeSite) Send(to nodes.SiteID, m nodes.Message) {
	m.From, m.To, m.Sent = s.id, to, s.f.now
	m.At = s.f.now
	if to != s.id {
		if s.f.lose != nil && s.f.lose(s.f.now, to, &m) {
			return
		}
		m.At += s.f.delay(s.id, to)
		m.Remote = true
	}
	s.f.push(m)
}

func (s *fakeSite) OpenTrail(t nodes.Trail) {
	if t.Copies != 0 {
		s.copies[t.Circuit] = t
	} else {
		s.trails[t.Circuit], s.copies[t.Circuit] = t, nodes.Trail{}
	}
	if s.f.isDark(t.Fibres) {
		s.f.tell(s.f.now, s.id, nodes.Message{Op: nodes.OpLightLost, Circuit: t.Circuit, N: t.Incarnation})
	}
}
func (s *fakeSite) SetPort(c nodes.CircuitID, p nodes.PortState) {
	s.ports[c] = p
	if p == nodes.PortUp {
		s.upAt[c] = s.f.now
	}
}
func (s *fakeSite) SetRate(c nodes.CircuitID, r nodes.Rate) { s.rates[c] = r }
func (s *fakeSite) Install(t *nodes.Table)                  { s.table = t }
func (s *fakeSite) Steer(w uint16, c nodes.CircuitID) {
	s.ways[w] = c
	s.steers = append(s.steers, steering{s.f.now, w, c})
}
func (s *fakeSite) Hold(w uint16, until des.Time) { s.until[w], s.heldAt[w] = until, s.f.now }
func (s *fakeSite) Counters(c nodes.CircuitID) nodes.PortCounters {
	q := s.queue[c]
	s.queue[c] = 0 // sent by the time of the next look
	n := s.count[c]
	n.QueueBytes, n.Rate = q, s.rates[c]
	return n
}
func (s *fakeSite) Pending(delta int) { s.f.under += delta }
func (s *fakeSite) Note(what, subject, detail string) {
	s.f.events = append(s.f.events, nodes.Event{At: s.f.now, Site: s.id, What: what, Subject: subject, Detail: detail})
}

// newFake starts agents over a plant; messages between sites take delay.
func newFake(p *nodes.Plant, cfg Config, delay func(from, to nodes.SiteID) des.Time, orders ...controller.Order) *fakeNet {
	f := &fakeNet{plant: p, delay: delay, net: New(p, cfg, orders), dark: make([]bool, len(p.Fibres))}
	for s := range p.Sites {
		f.sites = append(f.sites, newFakeSite(f, nodes.SiteID(s)))
	}
	return f
}

func newFakeSite(f *fakeNet, id nodes.SiteID) fakeSite {
	n, w := len(f.plant.Circuits), 2*len(f.plant.Aggregates)
	s := fakeSite{
		f: f, id: id, ports: make([]nodes.PortState, n), rates: make([]nodes.Rate, n), queue: make([]nodes.Bytes, n),
		count:  make([]nodes.PortCounters, n),
		trails: make([]nodes.Trail, n), copies: make([]nodes.Trail, n), upAt: slices.Repeat([]des.Time{-1}, n),
		ways: slices.Repeat([]nodes.CircuitID{nodes.None}, w), until: make([]des.Time, w), heldAt: make([]des.Time, w),
	}
	for c := range f.plant.Circuits {
		s.rates[c] = f.plant.Circuits[c].Rate
	}
	return s
}

// locals is the sites as Start wants them.
func (f *fakeNet) locals() []nodes.Local {
	list := make([]nodes.Local, len(f.sites))
	for i := range f.sites {
		list[i] = &f.sites[i]
	}
	return list
}

// start begins the run and stops the test when something does not fit.
func (f *fakeNet) start(t *testing.T, moves ...controller.Order) *fakeNet {
	t.Helper()
	if err := f.net.Start(f.locals(), moves); err != nil {
		t.Fatal(err)
	}
	return f
}

func (f *fakeNet) push(m nodes.Message) {
	f.serial++
	m.Serial = f.serial
	i, n := len(f.pending), m
	f.pending = append(f.pending, nodes.Message{})
	for i > 0 { // a heap in order of instant, then of class, then of serial
		up := (i - 1) / 2
		if order(&f.pending[up], &n) <= 0 {
			break
		}
		f.pending[i] = f.pending[up]
		i = up
	}
	f.pending[i] = n
}

func (f *fakeNet) pop() nodes.Message {
	top := f.pending[0]
	last := f.pending[len(f.pending)-1]
	f.pending = f.pending[:len(f.pending)-1]
	n := len(f.pending)
	for i := 0; n > 0; {
		down := 2*i + 1
		if down+1 < n && order(&f.pending[down+1], &f.pending[down]) < 0 {
			down++
		}
		if down >= n || order(&last, &f.pending[down]) <= 0 {
			f.pending[i] = last
			break
		}
		f.pending[i] = f.pending[down]
		i = down
	}
	return top
}

// order is the order stated at nodes.Message.
func order(a, b *nodes.Message) int {
	class := func(m *nodes.Message) int {
		switch {
		case m.Op < nodes.OpFirstAgent:
			return 0
		case m.Remote:
			return 1
		default:
			return 2
		}
	}
	return cmp.Or(cmp.Compare(a.At, b.At), cmp.Compare(class(a), class(b)), cmp.Compare(a.From, b.From), cmp.Compare(a.Serial, b.Serial))
}

// run handles every message due before or at end.
func (f *fakeNet) run(end des.Time) {
	for len(f.pending) > 0 && f.pending[0].At <= end {
		m := f.pop()
		f.now = m.At
		f.net.Agents[m.To].Handle(&f.sites[m.To], f.now, m)
	}
	f.now = end
}

// tell books one of the network's own messages at a site.
func (f *fakeNet) tell(at des.Time, s nodes.SiteID, m nodes.Message) {
	m.At, m.From, m.To, m.Settles = at, s, s, true
	f.push(m)
}

// order gives the controller an order from outside.
func (f *fakeNet) order(at des.Time, o controller.Order) {
	f.tell(at, f.net.k.cfg.Site, nodes.Message{Op: nodes.OpOrder, Ref: &o})
}

// isDark says whether a fibre of a route is dark.
func (f *fakeNet) isDark(route []nodes.FibreID) bool {
	return slices.ContainsFunc(route, func(g nodes.FibreID) bool { return f.dark[g] })
}

// light darkens a fibre or lights it again: its ends, and the ends of every
// circuit over it for which that makes a difference, see it at once. What is
// over it is read when the instant comes.
func (f *fakeNet) light(at des.Time, fibre nodes.FibreID, lost bool) {
	f.run(at)
	if f.dark[fibre] == lost {
		return
	}
	f.dark[fibre] = false // what else is dark?
	ops := [2]nodes.Op{nodes.OpLightBack, nodes.OpFibreLit}
	if lost {
		ops = [2]nodes.Op{nodes.OpLightLost, nodes.OpFibreDark}
	}
	for c := range f.plant.Circuits {
		for _, s := range f.plant.Circuits[c].Ends {
			for _, tr := range [2]*nodes.Trail{&f.sites[s].trails[c], &f.sites[s].copies[c]} {
				if slices.Contains(tr.Fibres, fibre) && !f.isDark(tr.Fibres) {
					f.tell(at, s, nodes.Message{Op: ops[0], Circuit: nodes.CircuitID(c), N: tr.Incarnation})
				}
			}
		}
	}
	f.dark[fibre] = lost
	for _, s := range f.plant.Fibres[fibre].Ends {
		f.tell(at, s, nodes.Message{Op: ops[1], Fibre: fibre})
	}
}

// clone copies everything.
func (f *fakeNet) clone() *fakeNet {
	g := *f
	g.net = f.net.Clone()
	g.pending = slices.Clone(f.pending)
	g.events = slices.Clone(f.events)
	g.dark = slices.Clone(f.dark)
	g.sites = slices.Clone(f.sites)
	for i := range g.sites {
		s := &g.sites[i]
		s.f = &g
		s.ports, s.rates, s.queue = slices.Clone(s.ports), slices.Clone(s.rates), slices.Clone(s.queue)
		s.count = slices.Clone(s.count)
		s.trails, s.copies, s.upAt, s.ways = slices.Clone(s.trails), slices.Clone(s.copies), slices.Clone(s.upAt), slices.Clone(s.ways)
		s.until, s.heldAt, s.steers = slices.Clone(s.until), slices.Clone(s.heldAt), slices.Clone(s.steers)
	}
	return &g
}

// report is what the controller says of one circuit.
func (f *fakeNet) report(c nodes.CircuitID) controller.Report {
	r, _ := f.net.Reports()
	return r[c]
}

// step is what became of the step of that name.
func (f *fakeNet) step(t *testing.T, name string) controller.StepReport {
	t.Helper()
	_, steps := f.net.Reports()
	for _, s := range steps {
		if s.Name == name {
			return s
		}
	}
	t.Fatalf("no step %q", name)
	return controller.StepReport{}
}

// sound stops the test when the audit fails.
func (f *fakeNet) sound(t *testing.T) {
	t.Helper()
	for _, line := range f.net.Audit() {
		t.Error("audit: " + line)
	}
	if f.under < 0 || f.net.Settled() && f.under > 0 {
		t.Errorf("the agents count %d things under way; settled: %v", f.under, f.net.Settled())
	}
}

// log prints the events when a test has failed.
func (f *fakeNet) log(t *testing.T) {
	if t.Failed() {
		for _, e := range f.events {
			t.Logf("%12v %-4s %-14s %-8s %s", e.At, f.plant.Sites[e.Site].Name, e.What, e.Subject, e.Detail)
		}
	}
}

// happened lists the subjects of the events of one kind in order.
func (f *fakeNet) happened(what string) (subjects []string) {
	for _, e := range f.events {
		if e.What == what {
			subjects = append(subjects, e.Subject)
		}
	}
	return subjects
}

// ms is so many milliseconds.
func ms(n des.Time) des.Time { return n * des.Millisecond }

// plant builds sites a, b, c, ... and fibres between pairs of their letters,
// 1 ms long, with 4 channels of which one is lit and cut into 8 slots.
func plant(sites int, fibres ...string) *nodes.Plant {
	p := &nodes.Plant{Classes: []nodes.Class{{Name: "gold"}, {Name: "grey"}}}
	for i := range sites {
		p.Sites = append(p.Sites, nodes.Site{Name: string(rune('a' + i))})
	}
	for _, f := range fibres {
		p.Fibres = append(p.Fibres, nodes.Fibre{
			Name: f, Ends: [2]nodes.SiteID{nodes.SiteID(f[0] - 'a'), nodes.SiteID(f[1] - 'a')},
			Delay: ms(1), Channels: 4, Lit: 1, Slots: 8,
		})
	}
	return p
}

// circuitOn adds a circuit of 1 slot between two sites and returns it.
func circuitOn(p *nodes.Plant, name, ends string) *nodes.Circuit {
	p.Circuits = append(p.Circuits, nodes.Circuit{
		Name: name, Ends: [2]nodes.SiteID{nodes.SiteID(ends[0] - 'a'), nodes.SiteID(ends[1] - 'a')},
		Slots: 1, Payload: nodes.Gbps, Rate: nodes.Gbps, Carries: nodes.CarriesMoved,
	})
	return &p.Circuits[len(p.Circuits)-1]
}

// hops is a delay of d for each step between the numbers of two sites.
func hops(d des.Time) func(from, to nodes.SiteID) des.Time {
	return func(from, to nodes.SiteID) des.Time { return d * des.Time(max(from-to, to-from)) }
}

// constant is a law that always gives the same number of picoseconds.
type constant des.Time

func (c constant) Mean() float64              { return float64(c) }
func (c constant) Variance() float64          { return 0 }
func (c constant) Quantile(p float64) float64 { return float64(c) }
func (c constant) At(u float64) float64       { return float64(c) }
func (c constant) CDF(x float64) float64      { return float64(b2i(x >= float64(c))) }

// Draw gives the number.
func (c constant) Draw(*random.Stream) float64 { return float64(c) }
