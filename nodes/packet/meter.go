package packet

import (
	"slices"

	"ferrule/des"
	"ferrule/des/measure"
	"ferrule/nodes"
)

// Cause says why a packet was lost. Every loss has exactly one.
type Cause uint8

// Causes of loss.
const (
	LostQueue    Cause = iota // no room in a buffer
	LostCut                   // met a dark place of a fibre
	LostFlushed               // waited in a port that went down
	LostNoRoute               // no way to its target was known
	LostTTL                   // crossed too many routers
	LostTornDown              // its circuit was taken down under it
	LostSwitched              // the tail of a 1+1 circuit changed over between its two copies
	LostFailed                // its router or port had failed
	LostAQM                   // refused or dropped by active queue management
	LostPoliced               // refused by the conditioner of its aggregate
	Causes
)

// String is the cause's name in results.
func (c Cause) String() string {
	return [Causes]string{"queue", "cut", "flushed", "no-route", "ttl", "torn-down", "switched", "failed", "aqm", "policed"}[c]
}

// byFault reports whether the cause counts towards the outage of a fault.
func (c Cause) byFault() bool {
	return c != LostQueue && c != LostTTL && c != LostAQM && c != LostPoliced
}

// Cell holds the figures of one way in one stretch.
type Cell struct {
	Delay     measure.Hist    // ns above Floor
	Exact     measure.Moments // ps, whole delay
	Variation measure.Hist    // ns, absolute difference of consecutive delays (RFC 3393)
	Queueing  uint64          // ns waited in queues, over all packets
	Bytes     uint64
	Reordered uint64  // RFC 4737
	Surplus   uint64  // duplicates: arrived after another copy had passed
	Jitter    float64 // ps: RFC 3550 estimate, averaged over packets
	Jitters   uint64
}

// Outage is the longest run of packets lost after a fault, in sending time.
type Outage struct {
	Fault    int32
	From, To des.Time // sent: last delivered before the run, first delivered after it
}

// Meter judges what arrives of one way.
type Meter struct {
	Floor   des.Time // light delay between the ends; delays are counted above it
	Cells   []*Cell  // by stretch; nil where nothing arrived
	Outages []Outage
	jitter  measure.Jitter
	pairs   measure.Consecutive
	next    uint32   // sequence number expected next
	last    des.Time // when that one was sent
	trace   *trace   // of its class where it arrives
}

// add counts a packet that left its egress router at the given instant.
func (m *Meter) add(p *nodes.Packet, at des.Time, stretch, fault int32) {
	var c *Cell
	if int(stretch) < len(m.Cells) {
		c = m.Cells[stretch]
	}
	if c == nil {
		c = m.cell(stretch)
	}
	delay := int64(at - p.Born)
	above := delay - int64(m.Floor)
	if above < 0 {
		above = 0
	}
	c.Delay.Add(uint64(above) / 1000)
	c.Exact.Add(delay)
	c.Queueing += uint64(p.Word & waitMask(p.Bits))
	c.Bytes += uint64(p.Size)
	m.trace.deliver(p.Born, uint64(delay)/1000, p.Size)
	m.jitter.Add(delay)
	if j, ok := m.jitter.Value(); ok {
		c.Jitter += j
		c.Jitters++
	}
	if p.Seq < m.next { // below the next expected: reordered (RFC 4737, section 3.3)
		c.Reordered++
		m.overtaken(c, p.Seq, delay)
		return
	}
	if d, ok := m.pairs.Next(p.Seq, delay); ok {
		c.Variation.Add(uint64(max(d, -d)) / 1000)
	}
	if p.Seq != m.next && fault >= 0 {
		m.gap(p.Born, fault)
	}
	m.next, m.last = p.Seq+1, p.Born
}

// waitMask is all ones for packets whose Word counts the time they waited, and
// 0 for those of transports.
func waitMask(b nodes.PacketBits) uint32 { return uint32((int32(b&nodes.KindMask) - 1) >> 31) }

//go:noinline
func (m *Meter) cell(stretch int32) *Cell {
	for int(stretch) >= len(m.Cells) {
		m.Cells = append(m.Cells, nil)
	}
	m.Cells[stretch] = &Cell{}
	return m.Cells[stretch]
}

//go:noinline
func (m *Meter) overtaken(c *Cell, seq uint32, delay int64) {
	d, later, ok, laterOK := m.pairs.Overtaken(seq, delay)
	if ok {
		c.Variation.Add(uint64(max(d, -d)) / 1000)
	}
	if laterOK {
		c.Variation.Add(uint64(max(later, -later)) / 1000)
	}
}

// Last reports when the packet was sent that was delivered last in order.
func (m *Meter) Last() des.Time { return m.last }

// gap notes that packets sent after m.last and before born are missing.
//
//go:noinline
func (m *Meter) gap(born des.Time, fault int32) {
	for i := range m.Outages {
		if o := &m.Outages[i]; o.Fault == fault {
			if born-m.last > o.To-o.From {
				o.From, o.To = m.last, born
			}
			return
		}
	}
	m.Outages = append(m.Outages, Outage{Fault: fault, From: m.last, To: born})
}

func (m *Meter) clone() Meter {
	c := *m
	c.Cells = make([]*Cell, len(m.Cells))
	for k, x := range m.Cells {
		if x != nil {
			y := *x
			y.Delay, y.Variation = x.Delay.Clone(), x.Variation.Clone()
			c.Cells[k] = &y
		}
	}
	c.Outages = append([]Outage(nil), m.Outages...)
	return c
}

// Loss counts what one site lost of one way.
type Loss struct {
	Way    uint16
	Count  [][Causes]uint64 // by stretch
	Bytes  uint64
	Faults []FaultLoss // by fault
}

// FaultLoss is what one site lost of one way to one fault.
type FaultLoss struct {
	Fault       int32
	Packets     uint64
	First, Last des.Time // sent
}

func (l *Loss) add(p *nodes.Packet, st *view, cause Cause) {
	for int(st.stretch) >= len(l.Count) {
		l.Count = append(l.Count, [Causes]uint64{})
	}
	l.Count[st.stretch][cause]++
	l.Bytes += uint64(p.Size)
	if st.fault < 0 || !cause.byFault() {
		return
	}
	n := len(l.Faults)
	for n > 0 && l.Faults[n-1].Fault > st.fault {
		n--
	}
	if n == 0 || l.Faults[n-1].Fault != st.fault {
		l.Faults = slices.Insert(l.Faults, n, FaultLoss{Fault: st.fault, First: p.Born, Last: p.Born})
		n++
	}
	f := &l.Faults[n-1]
	f.Packets++
	f.First, f.Last = min(f.First, p.Born), max(f.Last, p.Born)
}
