package packet

import (
	"slices"

	"ferrule/des"
	"ferrule/des/measure"
	"ferrule/des/random"
	"ferrule/nodes"
	"ferrule/nodes/queue"
)

// Site is a router and the control agent beside it. A window is run in
// segments cut at the site's control instants; within a segment tables and
// rates are constant and data flows one way: inputs and sources, then ports.
type Site struct {
	id      nodes.SiteID
	net     *Network
	inputs  []input // in stable order
	access  latency // of what sources send
	ports   []port
	portOf  []int16 // circuit -> port, or -1
	sources []source
	next    []des.Time // of each source
	srcMin  des.Time
	gateMin des.Time // when the next packet leaves a shaper, or Never
	hostOf  []int32  // way -> source that is the endpoint it leads to, plus one; nil: there is none
	hostMin des.Time // when an endpoint next does something or something it has sent is due, or Never

	table *nodes.Table
	steer []nodes.CircuitID // way -> circuit it is moved onto; nil: none is
	hop   []int32           // way -> what to do: see the hop constants
	sets  [][]int16         // equal-cost sets of ports
	stale bool              // hop must be built again
	held  []held

	deadRouter int // failures that keep the router from working

	agent   nodes.ControlAgent
	agenda  des.Agenda[letter, *letter]
	serial  uint64
	out     []nodes.Message
	fresh   []*pipe  // opened, not yet known to the other end
	dirty   []*pipe  // filled since the last edge
	pending int      // settling messages in the agenda, and what the agent counts
	lastAct des.Time // when a settling message was last handled, or the agent's count changed
	now     des.Time

	st        view
	losses    []Loss
	traces    []trace  // by class
	lossOf    []int32  // way -> index in losses plus one
	sink      arrivals // delivered in this segment, when from several inputs
	via       []uint64 // way -> run that last delivered it, numbered from 1
	viaRun    uint64   // runs of deliveries so far
	scratch   []nodes.Packet
	transit   uint64       // IP bytes received from a fibre and sent on
	markT     uint64       // at the end of the warm-up
	latencies measure.Hist // ns: one in 64 of what came through a varying input
	delivered uint64
	lost      uint64
	discarded []uint64 // copies not passed on, by way; nil: none
	messages  MessageCount
	events    []nodes.Event
}

// MessageCount counts control messages between sites.
type MessageCount struct{ Sent, Arrived, Lost uint64 }

// input is the receiving end of a circuit: its pipes in order of incarnation.
type input struct {
	pipe *pipe
	lat  *latency // shared by all pipes of the circuit's end
	tail *tail    // shared by the two pipes of a 1+1 circuit; or nil
	role int8     // of the pipe at that tail
}

// ready reports whether something leaves the forwarding engine before end.
func (in *input) ready(end des.Time) bool {
	p := in.pipe
	return p.head != p.vis && in.lat.out(p.next()) < end
}

// source is one way of an aggregate that starts here.
type source struct {
	s       nodes.Source
	way     uint16
	packets uint64
	bytes   uint64
	markP   uint64 // at the end of the warm-up
	markB   uint64
	gate    *gate // what conditions it; or nil
	host    *host // an endpoint, and then s is nil; or nil
}

// held is a way whose packets wait at the ingress.
type held struct {
	way   uint16
	until des.Time
	buf   []nodes.Packet
}

// letter is a message in an agenda.
type letter struct{ nodes.Message }

// When implements des.Dated.
func (l *letter) When() des.Time { return l.At }

// Before implements des.Dated: the network's own first, then messages from
// other sites, then what the site booked itself; by sender and serial number.
func (l *letter) Before(o *letter) bool {
	a, b := l.rank(), o.rank()
	switch {
	case a != b:
		return a < b
	case l.From != o.From:
		return l.From < o.From
	case l.Serial != o.Serial:
		return l.Serial < o.Serial
	case l.Op != o.Op:
		return l.Op < o.Op
	case l.Circuit != o.Circuit:
		return l.Circuit < o.Circuit
	case l.Fibre != o.Fibre:
		return l.Fibre < o.Fibre
	}
	return l.N < o.N
}

func (l *letter) rank() int {
	switch {
	case l.Op < nodes.OpFirstAgent:
		return 0
	case l.Remote:
		return 1
	}
	return 2
}

// What to do with a packet of a way: a port, an equal-cost set, or one of these.
const (
	hopNone int32 = -1 // no route
	hopHere int32 = -2 // it has arrived
	hopDead int32 = -3 // the router has failed
	hopSets int32 = 1 << 20
	hopHeld int32 = 1 << 21 // bit: it waits at the ingress
)

// portOfCircuit returns the sending end of c at this site.
func (s *Site) portOfCircuit(c nodes.CircuitID) *port {
	if i := s.portOf[c]; i >= 0 {
		return &s.ports[i]
	}
	return nil
}

// nextWork reports when the site next has something to do.
func (s *Site) nextWork() des.Time {
	t := min(s.agenda.Next(), s.gateMin, s.hostMin)
	if s.srcMin < des.Never {
		t = min(t, s.access.out(s.srcMin))
	}
	for i := range s.inputs {
		in := &s.inputs[i]
		if due := in.pipe.next(); due < t {
			t = min(t, in.lat.out(due))
		}
	}
	for i := range s.ports {
		t = min(t, s.ports[i].next())
	}
	return t
}

// run does everything due before end.
func (s *Site) run(end des.Time) {
	for {
		stop := min(end, s.agenda.Next())
		s.segment(stop)
		if stop >= end {
			return
		}
		s.control(stop)
	}
}

// control handles every message due now.
func (s *Site) control(now des.Time) {
	s.now = now
	for s.agenda.Next() == now {
		m := s.agenda.Take()
		if m.Settles {
			s.pending--
			s.lastAct = now
		}
		s.handle(now, m.Message)
	}
	if s.stale {
		s.rebuild()
	}
}

// handle gives a message to the agent, unless it is lost or no longer true.
func (s *Site) handle(now des.Time, m nodes.Message) {
	n := s.net
	switch {
	case m.Over:
		if !s.passed(&m) || s.deadRouter > 0 || n.dropped(m) {
			s.messages.Lost++
			return
		}
		s.messages.Arrived++
	case m.Remote:
		if !n.ways.Passes(n.light, m.Epoch, m.From, s.id, m.Sent) || n.dropped(m) {
			s.messages.Lost++
			return
		}
		s.messages.Arrived++
	case m.Op == nodes.OpRelease:
		s.release(now)
		return
	case m.Op == nodes.OpSwitch || m.Op == nodes.OpReturn:
		s.changeOver(now, &m)
		return
	case m.Op == nodes.OpLightLost || m.Op == nodes.OpLightBack:
		if !s.lightNews(now, &m) {
			return
		}
	case m.Op == nodes.OpFibreDark:
		if sp := n.light.Spans(int(m.Fibre))[m.N]; sp.To <= sp.From+n.cfg.Detect {
			return
		}
	case m.Op == nodes.OpFibreLit:
		if n.light.DarkTowards(int(m.Fibre), now-des.Time(m.A), n.plant.Fibres[m.Fibre].From(n.plant.Fibres[m.Fibre].Other(s.id))) {
			return
		}
	}
	if s.agent != nil {
		s.agent.Handle((*local)(s), now, m)
	}
}

// lightNews reports whether news of a circuit's light is true and new: darkness
// must have lasted the detection time, and each end is told once of each change.
func (s *Site) lightNews(now des.Time, m *nodes.Message) bool {
	for i := range s.inputs {
		p := s.inputs[i].pipe
		if p.circuit != m.Circuit || p.incarnation != m.N {
			continue
		}
		if m.Op == nodes.OpLightLost {
			if p.told || !p.darkSince(now-s.net.cfg.Detect, now) {
				return false
			}
		} else if !p.told || p.darkAtEnd(now) {
			return false
		}
		p.told = m.Op == nodes.OpLightLost
		what := "light back"
		if p.told {
			what = "light lost"
		}
		s.note(now, what, s.net.plant.Circuits[m.Circuit].Name)
		if t := s.inputs[i].tail; t != nil {
			s.tailSees(now, t, s.inputs[i].role)
		}
		return true
	}
	return false
}

// segment moves data up to end.
func (s *Site) segment(end des.Time) {
	ready, last := 0, 0
	for i := range s.inputs {
		if in := &s.inputs[i]; in.ready(end) {
			ready++
			last = i
		}
	}
	switch {
	case ready == 1:
		s.receive(last, end, false)
	case ready > 1:
		for i := range s.inputs {
			if s.inputs[i].ready(end) {
				s.receive(i, end, true)
			}
		}
		s.deliverSorted()
	}
	if before := s.access.before(end); s.srcMin < before {
		s.emit(before)
	}
	if s.hostMin < end {
		s.runHosts(end)
	}
	if s.gateMin < end {
		s.openGates(end)
	}
	for i := range s.ports {
		q := &s.ports[i]
		if len(q.in.arena) > 0 || q.waiting > 0 {
			sent := q.count.sent
			q.segment(s, end)
			if q.count.sent != sent {
				s.dirty = append(s.dirty, q.pipe)
				if q.copy != nil {
					s.dirty = append(s.dirty, q.copy)
				}
			}
		}
	}
}

// receive takes from an input what leaves the forwarding engine before end. It
// only reads the pipe, which its other end may be filling. With sorted, what
// is delivered waits in the sink.
func (s *Site) receive(i int, end des.Time, sorted bool) {
	if s.inputs[i].tail != nil {
		s.receiveCopies(i, end, sorted)
		return
	}
	p, lat, key := s.inputs[i].pipe, s.inputs[i].lat, int32(i)
	mask := uint64(len(p.rbuf) - 1)
	dark := len(p.dark) > 0
	transit := uint64(0)
	for p.head != p.vis {
		k := &p.rbuf[p.head&mask]
		due := k.Due + lat.at(k.Due)
		if due >= end {
			break
		}
		p.head++
		if dark && p.lost(k) {
			s.lose(k, k.Due, LostCut)
			continue
		}
		if lat.varies && k.Seq%64 == 0 {
			s.latencies.Add(uint64(due-k.Due) / 1000)
		}
		h := s.hop[k.Way]
		if h >= hopHeld { // it came back to where its way begins, and is held
			h = s.resolve(k.Way)
		}
		switch {
		case h >= 0 && k.TTL <= 1:
			s.lose(k, due, LostTTL)
		case h >= 0:
			if h >= hopSets {
				h = s.choose(k, h)
			}
			a := s.ports[h].in.put(k, key)
			a.Due = due
			a.TTL--
			transit += uint64(k.Size)
		case h == hopHere && sorted:
			s.sink.put(k, key).Due = due
		case h == hopHere:
			s.deliver(k, due)
		default:
			s.lose(k, due, noHop(h))
		}
	}
	s.transit += transit
}

// noHop is why a packet is lost for which there is nothing to do but that.
func noHop(h int32) Cause {
	if h == hopDead {
		return LostFailed
	}
	return LostNoRoute
}

// choose picks a port of an equal-cost set for a packet.
func (s *Site) choose(k *nodes.Packet, h int32) int32 {
	set := s.sets[h-hopSets]
	return int32(set[spread(k.Way, k.Flow, len(set))])
}

// spread picks one of n equal-cost circuits for a flow: packets of one flow go
// one way.
func spread(way, flow uint16, n int) int {
	x := (uint64(way)<<16 | uint64(flow)) * 0x9e3779b97f4a7c15
	x ^= x >> 29
	x *= 0xbf58476d1ce4e5b9
	return int((x >> 32) * uint64(n) >> 32)
}

// deliverSorted counts what several inputs delivered in this segment. Meters
// look at the packets of a way in order of time.
func (s *Site) deliverSorted() {
	in := &s.sink
	in.close()
	if !s.apart() {
		in.merge()
		for range in.arena {
			k, _ := in.take()
			s.deliver(k, k.Due)
		}
	} else {
		for i := range in.arena {
			s.deliver(&in.arena[i], in.arena[i].Due)
		}
	}
	in.reset()
}

// apart reports whether no way was delivered by two of the sink's runs.
func (s *Site) apart() bool {
	first := s.viaRun + 1
	for _, r := range s.sink.runs {
		s.viaRun++
		for i := r.from; i < r.to; i++ {
			v := &s.via[s.sink.arena[i].Way]
			if *v >= first && *v != s.viaRun {
				return false
			}
			*v = s.viaRun
		}
	}
	return true
}

// deliver counts a packet that leaves the network here.
func (s *Site) deliver(k *nodes.Packet, due des.Time) {
	if k.Bits&nodes.BitCopy != 0 {
		s.surplus(k, due)
		return
	}
	s.delivered++
	m := &s.net.meters[k.Way]
	if k.Born >= s.st.from && due < s.st.to {
		m.add(k, due, s.st.stretch, s.st.fault)
	} else {
		stretch, fault := s.net.history.find(k.Born, due)
		m.add(k, due, stretch, fault)
	}
	if s.hostOf != nil {
		s.hear(k, due)
	}
}

// lose counts a packet lost here at the given instant.
//
//go:noinline
func (s *Site) lose(k *nodes.Packet, at des.Time, cause Cause) {
	if k.Bits&nodes.BitCopy != 0 { // nobody misses it
		s.discard(k.Way)
		return
	}
	s.lost++
	i := s.lossOf[k.Way]
	if i == 0 {
		s.losses = append(s.losses, Loss{Way: k.Way})
		i = int32(len(s.losses))
		s.lossOf[k.Way] = i
	}
	s.traces[s.net.classOf[k.Way]].lose(k.Born)
	v := s.st
	if k.Born < v.from || at >= v.to {
		v.stretch, v.fault = s.net.history.find(k.Born, at)
	}
	s.losses[i-1].add(k, &v, cause)
}

// emit lets sources send what is born before the given instant.
func (s *Site) emit(before des.Time) {
	limit := min(before, s.net.cfg.Length)
	least := des.Never
	for i, t := range s.next {
		if t < limit {
			s.emitOne(i, limit)
			t = s.next[i]
		}
		least = min(least, t)
	}
	if least >= s.net.cfg.Length {
		least = des.Never
	}
	s.srcMin = least
}

func (s *Site) emitOne(i int, limit des.Time) {
	src := &s.sources[i]
	key := sourceKey + int32(i) // after every fibre input
	bytes := uint64(0)
	h := s.hop[src.way]
	if h >= 0 && h < hopSets && src.gate == nil { // straight to the port
		in := &s.ports[h].in
		in.begin(key)
		from := len(in.arena)
		in.arena = src.s.Emit(limit, in.arena)
		sent := in.arena[from:]
		for j := range sent {
			k := &sent[j]
			bytes += uint64(k.Size)
			k.Due += s.access.at(k.Due)
		}
		src.packets += uint64(len(sent))
	} else {
		s.scratch = src.s.Emit(limit, s.scratch[:0])
		for j := range s.scratch {
			k := &s.scratch[j]
			bytes += uint64(k.Size)
			due := k.Due + s.access.at(k.Due)
			if src.gate == nil || s.passGate(src.gate, k, due) {
				s.enter(k, due, h, key)
			}
		}
		src.packets += uint64(len(s.scratch))
	}
	s.next[i] = src.s.Next()
	src.bytes += bytes
}

// enter takes a packet into the network.
func (s *Site) enter(k *nodes.Packet, due des.Time, h, key int32) {
	switch {
	case h >= hopHeld:
		s.keep(k)
	case h >= hopSets:
		s.ports[s.choose(k, h)].in.put(k, key).Due = due
	case h >= 0:
		s.ports[h].in.put(k, key).Due = due
	case h == hopHere:
		s.deliver(k, due)
	default:
		s.lose(k, due, noHop(h))
	}
}

// keep holds a packet at the ingress.
func (s *Site) keep(k *nodes.Packet) {
	for i := range s.held {
		if s.held[i].way == k.Way {
			s.held[i].buf = append(s.held[i].buf, *k)
			return
		}
	}
}

// release sends what was held until now, in order, and ends the hold.
func (s *Site) release(now des.Time) {
	kept := s.held[:0]
	for _, h := range s.held {
		if h.until > now {
			kept = append(kept, h)
			continue
		}
		s.stale = true
		to := s.resolve(h.way)
		key := sourceKey + int32(s.sourceOf(h.way))
		for j := range h.buf {
			k := &h.buf[j]
			s.enter(k, now, to, key)
		}
	}
	s.held = kept
	if s.stale {
		s.rebuild()
	}
}

func (s *Site) sourceOf(way uint16) int {
	return slices.IndexFunc(s.sources, func(x source) bool { return x.way == way })
}

// rebuild computes what to do with each way from the table, the steering and
// the states of the ports.
func (s *Site) rebuild() {
	s.stale = false
	s.sets = s.sets[:0]
	for w := range s.hop {
		s.hop[w] = s.resolve(uint16(w))
	}
	for i := range s.held {
		s.hop[s.held[i].way] = hopHeld
	}
}

func (s *Site) resolve(way uint16) int32 {
	if s.deadRouter > 0 {
		return hopDead
	}
	n := s.net
	agg, dir := nodes.AggOf(way)
	target := n.plant.Aggregates[agg].Target(dir)
	if target == s.id {
		return hopHere
	}
	if s.steer != nil && s.steer[way] != nodes.None {
		c := s.steer[way]
		if q := s.portOfCircuit(c); q != nil {
			switch {
			case q.state == nodes.PortUp:
				return int32(s.portOf[c])
			case n.plant.Circuits[c].WhenDown == nodes.DownWait && q.pipe != nil:
				return int32(s.portOf[c])
			case n.plant.Circuits[c].WhenDown == nodes.DownDrop:
				return hopNone
			}
		}
	}
	if s.table == nil || int(target) >= len(s.table.Next) {
		return hopNone
	}
	var set []int16
	for _, c := range s.table.Next[target] {
		if q := s.portOfCircuit(c); q != nil && q.state == nodes.PortUp {
			set = append(set, s.portOf[c])
		}
	}
	switch len(set) {
	case 0:
		return hopNone
	case 1:
		return int32(set[0])
	}
	for i, o := range s.sets {
		if slices.Equal(o, set) {
			return hopSets + int32(i)
		}
	}
	s.sets = append(s.sets, set)
	return hopSets + int32(len(s.sets)-1)
}

// addPort gives the site the sending end of a circuit.
func (s *Site) addPort(c nodes.CircuitID, d nodes.Direction) {
	p := s.net.plant
	circuit := &p.Circuits[c]
	s.portOf[c] = int16(len(s.ports))
	disc := queue.New(queue.Config{
		Classes: p.Classes, ClassOf: s.net.classOf, Rate: circuit.Rate, MTU: circuit.MTU, Overhead: circuit.Overhead,
		Seed: s.net.cfg.Seed, Name: p.Sites[s.id].Name + " " + circuit.Name,
	})
	shedder, _ := disc.(queue.Shedder)
	s.ports = append(s.ports, port{
		disc: disc, shedder: shedder, line: nodes.NewLine(circuit.Rate),
		overhead: circuit.Overhead, circuit: c, dir: d, in: arrivals{key: -1},
		classOf: s.net.classOf, load: make([]uint64, len(p.Classes)),
		hold: circuit.Carries == nodes.CarriesMoved && circuit.WhenDown == nodes.DownWait,
	})
}

// addInput makes the site receive from p, in the order of circuit, direction
// and incarnation; of the two pipes of a 1+1 circuit the shorter goes first.
func (s *Site) addInput(p *pipe) {
	at, _ := slices.BinarySearchFunc(s.inputs, p, func(in input, p *pipe) int {
		a, b := in.pipe, p
		if a.circuit != b.circuit {
			return int(a.circuit - b.circuit)
		}
		return int(s.rank(a) - s.rank(b))
	})
	s.inputs = slices.Insert(s.inputs, at, input{pipe: p, lat: s.latencyOf(p.circuit)})
}

// latencyOf returns the forwarding path of a circuit's end.
func (s *Site) latencyOf(c nodes.CircuitID) *latency {
	for i := range s.inputs {
		if s.inputs[i].pipe.circuit == c {
			return s.inputs[i].lat
		}
	}
	p := s.net.plant
	l := newLatency(s.net.cfg.Forwarding[s.id], s.net.cfg.Seed, p.Sites[s.id].Name+" "+p.Circuits[c].Name)
	return &l
}

// dropped reports whether a message is lost for no reason of the plant's.
func (n *Network) dropped(m nodes.Message) bool {
	if n.cfg.MessageLoss <= 0 {
		return false
	}
	u := random.Unit(random.Draw(n.cfg.Seed, messageName, m.Serial, uint64(m.From)))
	return u < n.cfg.MessageLoss
}

var messageName = random.Hash("message loss")
