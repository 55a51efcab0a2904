package queue

import (
	"math/bits"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
)

// Managed is Tiers with active queue management by class, explicit congestion
// notification, and weighted fair queueing beside deficit round robin. It sees
// every packet, also one that finds the port idle.
type Managed struct {
	Tiers
	policy []nodes.DropPolicy // by class
	ecn    []bool             // by class
	red    []RED              // by class
	codel  []CoDel            // by queue
	flows  []*flows           // by queue; nil: not one for each flow
	stay   []nodes.Bytes      // bytes waiting, by queue
	fair   *fair              // nil: the weighted tier, if any, is served by DRR
	mtu    nodes.Bytes
	shed   []Shed
	seed   uint64
	name   uint64
	draws  uint64
}

// Shed is a packet that a discipline dropped after it had kept it.
type Shed struct {
	Packet  nodes.Packet
	Verdict Verdict // Dropped: to make room; Refused: by active queue management
}

// A Shedder is a Discipline that may drop what it has kept, and that must see
// every packet: a port hands it also those that find the line free.
type Shedder interface {
	Discipline

	// Shed lists what the last call of Enqueue or Dequeue dropped of what was
	// kept, in the order in which it was. It is valid until the next call.
	Shed() []Shed
}

// Config describes the discipline of a port.
type Config struct {
	Classes  []nodes.Class // highest first
	ClassOf  []uint8       // way -> class, never written
	Rate     nodes.Rate    // of the port
	MTU      nodes.Bytes   // 0: 1500
	Overhead nodes.Bytes   // line bytes beside the IP bytes of a packet
	Seed     uint64
	Name     string // of the port; keys the draws of RED
}

// New makes the discipline that the classes ask for: plain Tiers if all drop
// from the tail and none is served by WFQ. It panics as NewTiers does.
func New(c Config) Discipline {
	t := NewTiers(c.Classes, c.ClassOf, c.Rate)
	managed := false
	for i := range c.Classes {
		managed = managed || c.Classes[i].Drop != nodes.DropTail || c.Classes[i].Queue == nodes.QueueFair
	}
	if !managed {
		return t
	}
	m := &Managed{Tiers: *t, mtu: c.MTU, seed: c.Seed, name: random.Hash("red " + c.Name)}
	if m.mtu == 0 {
		m.mtu = 1500
	}
	n := len(c.Classes)
	m.policy, m.ecn, m.red = make([]nodes.DropPolicy, n), make([]bool, n), make([]RED, n)
	m.codel, m.flows, m.stay = make([]CoDel, len(m.q)), make([]*flows, len(m.q)), make([]nodes.Bytes, len(m.q))
	for i := range c.Classes {
		x := &c.Classes[i]
		m.policy[i], m.ecn[i] = x.Drop, x.ECN
		if x.Drop == nodes.DropFQCoDel && m.flows[m.queueOf[i]] == nil {
			m.flows[m.queueOf[i]] = newFlows()
		}
		if x.Queue == nodes.QueueFair && m.fair == nil {
			m.fair = newFair(c.Classes, m.queueOf, len(m.q), c.Overhead)
		}
	}
	m.SetRate(c.Rate)
	return m
}

// SetRate implements Discipline. RED's thresholds follow the buffer: Max is
// half of it and Min a third of that.
func (m *Managed) SetRate(r nodes.Rate) {
	m.Tiers.SetRate(r)
	if m.fair != nil {
		m.fair.setRate(r)
	}
	for i := range m.red {
		b, x := &m.class[i], &m.red[i]
		room := float64(b.limit)
		if b.most != unlimited {
			room = float64(b.most)
		}
		x.Weight, x.MaxP = redWeight, redMaxP
		x.Max = room / 2
		x.Min = x.Max / redRatio
		x.Slot = max(r.TxTime(m.mtu), 1)
	}
}

// marks reports whether a packet of a class can be marked instead of dropped.
func (m *Managed) marks(class uint8, p *nodes.Packet) bool {
	return m.ecn[class] && p.Bits&nodes.ECNMask != 0
}

// Enqueue implements Discipline.
func (m *Managed) Enqueue(now des.Time, p *nodes.Packet) Verdict {
	m.shed = m.shed[:0]
	class := m.classOf[p.Way]
	b, q := &m.class[class], m.queueOf[class]
	size := nodes.Bytes(p.Size)
	full := b.waiting+size > b.limit || b.count >= b.most
	var mark nodes.PacketBits
	if m.policy[class] == nodes.DropRED {
		refused, hard := m.early(now, class)
		switch {
		case refused && (hard || !m.marks(class, p)):
			return Refused
		case refused:
			mark = nodes.CE
		}
	}
	f := m.flows[q]
	if full && (f == nil || size > b.limit) {
		return Dropped
	}
	b.waiting += size
	b.count++
	m.stay[q] += size
	m.bytes += size
	m.n++
	m.nonEmpty |= 1 << q
	if m.fair != nil && m.wrr&(1<<q) != 0 {
		m.fair.arrive(now, q, size)
	}
	if f == nil {
		r := &m.q[q].ring
		r.push(p)
		r.buf[(r.tail-1)&uint32(len(r.buf)-1)].Bits |= mark
		return Kept
	}
	f.push(p, m.mtu)
	for full && (b.waiting > b.limit || b.count > b.most) {
		m.relieve(f, b, now)
	}
	return Kept
}

// early lets RED see an arrival of a class and decide about it.
func (m *Managed) early(now des.Time, class uint8) (refused, hard bool) {
	b, r := &m.class[class], &m.red[class]
	waiting := float64(b.waiting)
	if b.most != unlimited {
		waiting = float64(b.count)
	}
	r.Observe(now, waiting)
	u := 0.0
	if r.Average() >= r.Min && r.Average() < r.Max {
		u = random.Unit(random.Draw(m.seed, m.name, m.draws, 0))
		m.draws++
	}
	return r.Refuse(u)
}

// relieve drops from the head of the longest queue of f: half of it, at most
// mostBatch packets, until the class has room (RFC 8290, section 4.1).
func (m *Managed) relieve(f *flows, b *budget, now des.Time) {
	i := f.longest()
	half := f.q[i].bytes / 2
	for k := 0; k < mostBatch && f.q[i].head >= 0 && (b.waiting > b.limit || b.count > b.most || f.q[i].bytes > half); k++ {
		m.forget(f.takeFrom(i), now, Dropped)
	}
}

// forget takes a packet off the books and tells of its loss.
func (m *Managed) forget(p *nodes.Packet, now des.Time, v Verdict) {
	m.leaves(m.queueOf[m.classOf[p.Way]], p, now)
	m.shed = append(m.shed, Shed{*p, v})
}

// leaves takes a packet off the books.
func (m *Managed) leaves(q uint8, p *nodes.Packet, now des.Time) {
	class := m.classOf[p.Way]
	b := &m.class[class]
	size := nodes.Bytes(p.Size)
	b.waiting -= size
	b.count--
	m.stay[q] -= size
	m.bytes -= size
	m.n--
	if b.count == 0 && m.policy[class] == nodes.DropRED {
		m.red[class].Emptied(now)
	}
	if m.fair != nil && m.wrr&(1<<q) != 0 {
		m.fair.left(q)
	}
	if f := m.flows[q]; f != nil && f.n > 0 || f == nil && m.q[q].ring.len() > 0 {
		return
	}
	l := &m.q[q]
	if f := &l.ring; m.flows[q] == nil {
		f.head, f.tail = 0, 0
	}
	m.nonEmpty &^= 1 << q
	if l.deficit = 0; q == m.turn {
		m.granted = false
	}
}

// pop removes the front of a queue without asking anybody.
func (m *Managed) pop(q uint8, now des.Time) *nodes.Packet {
	r := &m.q[q].ring
	p := r.front()
	r.head++
	m.leaves(q, p, now)
	return p
}

// Dequeue implements Discipline.
func (m *Managed) Dequeue(now des.Time) *nodes.Packet {
	m.shed = m.shed[:0]
	if m.nonEmpty == 0 {
		return nil
	}
	q := uint8(bits.TrailingZeros64(m.nonEmpty))
	weighted := m.wrr&(1<<q) != 0
	var paid nodes.Bytes
	switch {
	case weighted && m.fair != nil:
		q = m.fair.first(m.nonEmpty & m.wrr)
	case weighted:
		q, paid = m.round()
	}
	p := m.serve(q, now)
	switch size := nodes.Bytes(p.Size); {
	case weighted && m.fair == nil && m.nonEmpty&(1<<q) != 0:
		m.q[q].deficit += paid - size
	case !weighted && m.fair != nil:
		m.fair.steal(now, size)
	}
	return p
}

// serve takes the packet that leaves queue q, which is not empty.
func (m *Managed) serve(q uint8, now des.Time) *nodes.Packet {
	if f := m.flows[q]; f != nil {
		p := m.serveFlow(f, now)
		m.leaves(q, p, now)
		return p
	}
	c := &m.codel[q]
	for {
		p := m.pop(q, now)
		class := m.classOf[p.Way]
		if m.policy[class] != nodes.DropCoDel {
			return p
		}
		switch c.Judge(now, now-p.Due, m.stay[q], m.mtu, m.marks(class, p)) {
		case FateMark:
			p.Bits |= nodes.CE
			return p
		case FateServe:
			return p
		default:
			m.shed = append(m.shed, Shed{*p, Refused})
		}
	}
}

// round is robin where the packet at the front may not be the one that leaves:
// it reports the queue and what its deficit has paid for. With a queue for each
// flow a deficit need only be positive, and what it lacks is owed.
func (m *Managed) round() (q uint8, paid nodes.Bytes) {
	for {
		l := &m.q[m.turn]
		if m.nonEmpty&(1<<m.turn) != 0 {
			if !m.granted {
				l.deficit += l.quantum
				m.granted = true
			}
			size := nodes.Bytes(1)
			if m.flows[m.turn] == nil {
				size = nodes.Bytes(l.ring.front().Size)
			}
			if size <= l.deficit {
				l.deficit -= size
				return m.turn, size
			}
		}
		m.pass()
	}
}

// Shed implements Shedder.
func (m *Managed) Shed() []Shed { return m.shed }

// Drain implements Discipline.
func (m *Managed) Drain(lost func(p *nodes.Packet)) {
	m.shed = m.shed[:0]
	for q := range m.q {
		f := m.flows[q]
		for f == nil && m.q[q].ring.len() > 0 {
			lost(m.pop(uint8(q), 0))
		}
		for f != nil && f.n > 0 {
			p := f.takeFrom(f.turn(m.mtu))
			m.leaves(uint8(q), p, 0)
			lost(p)
		}
	}
	for i := range m.red {
		m.red[i].idle = false // when is not known; the next arrivals bring the average down
	}
}

// Clone implements Discipline.
func (m *Managed) Clone() Discipline {
	c := *m
	c.Tiers = *m.Tiers.Clone().(*Tiers)
	c.red = append([]RED(nil), m.red...)
	c.codel = append([]CoDel(nil), m.codel...)
	c.stay = append([]nodes.Bytes(nil), m.stay...)
	c.flows = append([]*flows(nil), m.flows...)
	for i := range c.flows {
		c.flows[i] = c.flows[i].clone()
	}
	c.fair = m.fair.clone()
	c.shed = append([]Shed(nil), m.shed...)
	return &c
}
