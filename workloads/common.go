package workloads

import (
	"errors"
	"fmt"
	"math"

	"ferrule/des"
	"ferrule/nodes"
)

// MaxLoad is the greatest load of one source. Beyond it a packet of 40 B would
// last less than 80 ps and times of birth would lose their meaning.
const MaxLoad = 4000 * nodes.Gbps

// Sizes of packets, in bytes.
const (
	mtu     = 1500           // longest IP packet of a packetiser (RFC 894)
	header  = 40             // IPv4 20 (RFC 791) + UDP 8 and RTP 12, or TCP 20
	payload = mtu - header   // 1460
	maxSize = math.MaxUint16 // longest IP packet (RFC 791)
)

// Common is what the configurations of all sources share.
type Common struct {
	Name  string     // keys every draw; required, unique per way and run
	Way   uint16     // goes into every packet
	Seed  uint64     // of the run
	Start des.Time   // no packet is born before it; default 0
	Stop  des.Time   // no packet is born at or after it; default never
	Load  nodes.Rate // bit/s of IP bytes; required
}

// check fills the defaults and appends what is wrong to faults.
func (c *Common) check(faults []error) []error {
	if c.Name == "" {
		faults = append(faults, errors.New("name: missing"))
	}
	if c.Stop == 0 {
		c.Stop = des.Never
	}
	if c.Start < 0 {
		faults = append(faults, fmt.Errorf("start: %v is before 0", c.Start))
	}
	if c.Stop <= c.Start {
		faults = append(faults, fmt.Errorf("stop: %v is not after the start, %v", c.Stop, c.Start))
	}
	if c.Load <= 0 || c.Load > MaxLoad {
		faults = append(faults, fmt.Errorf("load: %d bit/s is not between 1 bit/s and %d Tbit/s", c.Load, MaxLoad/(1000*nodes.Gbps)))
	}
	return faults
}

// A Source is a nodes.Source that can say what it means to send.
type Source interface {
	nodes.Source

	// MeanRate reports, in bit/s of IP bytes, the long-run mean of what the
	// source sends between its start and its stop at the load of the scenario
	// file, whatever Scale has asked since. It is the load asked for, except
	// where the model cannot meet it exactly; the model says where.
	MeanRate() float64
}

// A change is a new factor of the load from the instant at on.
type change struct {
	at     des.Time
	factor float64
}

// changes are those not reached yet, in order of time.
type changes struct {
	ahead []change
	last  des.Time // of the latest call of add
}

// add notes a change. It panics if factor is negative or not finite, or if at
// lies before that of an earlier call.
func (c *changes) add(at des.Time, factor float64) {
	if !(factor >= 0 && factor <= math.MaxFloat64) {
		panic(fmt.Sprintf("workloads: Scale by %v", factor))
	}
	if at < c.last {
		panic(fmt.Sprintf("workloads: Scale at %v after Scale at %v", at, c.last))
	}
	c.last = at
	c.ahead = append(c.ahead, change{at, factor})
}

// until reports the instant of the next change, or des.Never.
func (c *changes) until() des.Time {
	if len(c.ahead) == 0 {
		return des.Never
	}
	return c.ahead[0].at
}

// take removes the next change and returns it.
func (c *changes) take() change {
	x := c.ahead[0]
	c.ahead = c.ahead[1:]
	return x
}

// clone returns a copy that shares nothing.
func (c *changes) clone() changes {
	return changes{append([]change(nil), c.ahead...), c.last}
}

// birth writes a packet as it is born. It stores field by field: a composite
// literal is put together on the stack and copied, which stalls on the copy.
func birth(p *nodes.Packet, at des.Time, seq, flow uint32, way, size uint16) {
	p.Due = at
	p.Born = at
	p.Word = 0
	p.Seq = seq
	p.Flow = uint16(flow)
	p.Way = way
	p.Size = size
	p.TTL = nodes.InitialTTL
	p.Bits = 0
}

// longer returns buf with one more packet, whose fields are undefined.
func longer(buf []nodes.Packet) []nodes.Packet {
	if n := len(buf); n < cap(buf) {
		return buf[:n+1]
	}
	return append(buf, nodes.Packet{})
}
