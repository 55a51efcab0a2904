package transport

import (
	"errors"
	"fmt"
	"math"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
)

// Config describes what hosts fetch in one direction of an aggregate. A zero
// field takes the default written beside it.
type Config struct {
	Name      string // keys every draw; unique per way and run
	Seed      uint64
	Algorithm Algorithm
	ECN       bool       // segments can be marked instead of dropped
	Start     des.Time   // no transfer is asked for before it
	Stop      des.Time   // nor at or after it, and endless ones send nothing new; default never
	PerSecond float64    // transfers asked for, a Poisson process; 0: none
	Size      random.Law // bytes of a transfer, rounded; at most Endless - 1
	Most      uint64     // transfers of the process in all; default without end
	Standing  int        // endless transfers, asked for within the first 100 ms
	Initial   float64    // window in segments; default 10 (RFC 6928)
	AckEvery  int        // segments; default 2 (RFC 5681)
}

// spreadStart is the time over which endless transfers begin.
const spreadStart = 100 * des.Millisecond

// Check fills the defaults and reports every fault at once.
func (c Config) Check() (Config, error) {
	var faults []error
	bad := func(format string, a ...any) { faults = append(faults, fmt.Errorf(format, a...)) }
	if c.Name == "" {
		bad("name: missing")
	}
	if c.Stop == 0 {
		c.Stop = des.Never
	}
	if c.Initial == 0 {
		c.Initial = 10
	}
	if c.AckEvery == 0 {
		c.AckEvery = 2
	}
	if c.Start < 0 || c.Stop <= c.Start {
		bad("from %v to %v", c.Start, c.Stop)
	}
	if c.PerSecond < 0 || c.PerSecond > 1e9 || math.IsNaN(c.PerSecond) {
		bad("%v transfers a second", c.PerSecond)
	}
	if c.PerSecond > 0 && c.Size == nil {
		bad("size: missing")
	}
	if c.Standing < 0 || c.Standing > mostFlows {
		bad("%d endless transfers; 0 to %d", c.Standing, mostFlows)
	}
	if c.Initial < 1 || c.Initial > Window || c.AckEvery < 1 || c.AckEvery > 100 {
		bad("initial window %v, an acknowledgement every %d segments", c.Initial, c.AckEvery)
	}
	if c.Algorithm > Cubic {
		bad("algorithm %d", c.Algorithm)
	}
	return c, errors.Join(faults...)
}

// Host is all hosts at one end of an aggregate: clients that fetch over the way
// that leads to it, and servers for those at the other end.
type Host struct {
	fetch, serve *Config // the servers' is that of the other end; nil: none
	out          uint16  // the way it sends on
	seq          uint32
	packets      []nodes.Packet // of the present call
	tally        *nodes.Tally
	heap         heap
	clients      []client
	servers      []sender
	free         []idle // a ring
	freeHead     int
	freeLen      int
	rings        *rings
	blocked      uint64

	asked  uint64   // transfers of the process so far
	stood  int      // endless ones
	due    des.Time // next of the process, or Never
	stand  des.Time // next endless one, or Never
	factor float64
	name   uint64
}

// NewHost returns the hosts at one end of an aggregate. out is the way that
// they send on; fetch describes what they fetch over the other one, and serve
// what is fetched from them; either may be nil.
func NewHost(out uint16, fetch, serve *Config) (*Host, error) {
	h := &Host{out: out, tally: &nodes.Tally{}, rings: &rings{}, due: des.Never, stand: des.Never, factor: 1}
	for i, c := range []*Config{fetch, serve} {
		if c == nil {
			continue
		}
		full, err := c.Check()
		if err != nil {
			return nil, err
		}
		if i == 0 {
			h.fetch = &full
		} else {
			h.serve = &full
		}
	}
	if f := h.fetch; f != nil {
		h.name = random.Hash("transport " + f.Name)
		h.due = f.Start
		h.following()
		h.standing()
	}
	return h, nil
}

// Quantities of draws.
const (
	drawGap uint64 = iota
	drawSize
	drawStart
)

func (h *Host) unit(index, quantity uint64) float64 {
	return random.Unit(random.Draw(h.fetch.Seed, h.name, index, quantity))
}

// following finds when the next transfer of the process is asked for, from the
// last one's instant.
func (h *Host) following() {
	f := h.fetch
	rate := float64(f.PerSecond * h.factor)
	if h.due == des.Never || rate <= 0 || f.Most > 0 && h.asked >= f.Most {
		h.due = des.Never
		return
	}
	gap := -math.Log1p(-h.unit(h.asked, drawGap)) / rate * float64(des.Second)
	if gap > float64(des.Never-h.due)/2 {
		h.due = des.Never
		return
	}
	if h.due += des.Time(gap); h.due >= f.Stop {
		h.due = des.Never
	}
}

// standing finds when the next endless transfer is asked for: they are spread
// evenly, each at a place of its own drawn in its share.
func (h *Host) standing() {
	f := h.fetch
	if h.stood == f.Standing {
		h.stand = des.Never
		return
	}
	share := float64(spreadStart) / float64(f.Standing)
	h.stand = f.Start + des.Time(float64(float64(h.stood)+h.unit(uint64(h.stood), drawStart))*share)
}

// Next implements nodes.Endpoint.
func (h *Host) Next() des.Time { return min(h.heap.next(), h.due, h.stand) }

// Advance implements nodes.Endpoint.
func (h *Host) Advance(end des.Time, out []nodes.Packet) []nodes.Packet {
	h.packets = out
	h.until(end)
	out, h.packets = h.packets, nil
	return out
}

// until does everything that is due before end: at one instant timers first.
func (h *Host) until(end des.Time) {
	for {
		t := h.Next()
		switch {
		case t >= end:
			return
		case h.heap.next() == t:
			h.expire()
		case h.stand == t:
			h.stood++
			h.standing()
			h.ask(t, Endless)
		default:
			size := math.Floor(h.fetch.Size.At(h.unit(h.asked, drawSize)) + 0.5)
			h.asked++
			h.following()
			h.ask(t, uint32(min(max(1, size), Endless-1)))
		}
	}
}

// expire takes the first entry of the heap.
func (h *Host) expire() {
	e := h.heap.pop()
	var t *timer
	if e.id&1 == 0 {
		t = &h.clients[e.id>>1].timer
	} else {
		t = &h.servers[e.id>>1].timer
	}
	if t.entry != e.at {
		return
	}
	t.entry = des.Never
	switch {
	case t.at > e.at:
		if t.at != des.Never {
			h.arm(t, e.id, t.at)
		}
	case e.id&1 == 0:
		t.at = des.Never
		h.lapsed(&h.clients[e.id>>1], e.at)
	default:
		t.at = des.Never
		h.expired(&h.servers[e.id>>1], e.at)
	}
}

// Receive implements nodes.Endpoint.
func (h *Host) Receive(now des.Time, p *nodes.Packet, out []nodes.Packet) []nodes.Packet {
	h.packets = out
	if h.Next() < now {
		h.until(now)
	}
	w, flow := p.Word, uint32(p.Flow)
	gen := uint8(w >> genShift)
	switch p.Bits & nodes.KindMask {
	case nodes.KindSegm:
		if c := h.client(flow, gen); c != nil && c.state != stateOpening {
			h.takes(c, now, p)
		}
	case nodes.KindAck:
		if h.serve == nil || flow >= uint32(len(h.servers)) || h.servers[flow].gen != gen {
			break
		}
		s := &h.servers[flow]
		if s.state == stateOpening {
			h.begin(s, now)
		} else if s.state == stateMoving {
			h.acked(s, now, near(s.una, w>>14&serialMask), w&beyondMask, w&ackEcho != 0)
		}
	case kindOpen:
		if bytes := w & bytesMask; bytes != 0 {
			if h.serve != nil {
				h.opened(h.server(flow), now, gen, bytes)
			}
		} else if c := h.client(flow, gen); c != nil && c.state == stateOpening {
			h.confirm(c, now)
		}
	}
	out, h.packets = h.packets, nil
	return out
}

// client is that of a flow number and generation, or nil.
func (h *Host) client(flow uint32, gen uint8) *client {
	if flow >= uint32(len(h.clients)) || h.clients[flow].gen != gen {
		return nil
	}
	return &h.clients[flow]
}

// server is that of a flow number; it is made if there is none.
func (h *Host) server(flow uint32) *sender {
	for uint32(len(h.servers)) <= flow {
		h.servers = append(h.servers, sender{timer: timer{entry: des.Never, at: des.Never, id: uint32(len(h.servers))<<1 | 1}})
	}
	return &h.servers[flow]
}

// send sends a packet.
func (h *Host) send(now des.Time, flow, size uint16, bits nodes.PacketBits, word uint32) {
	h.packets = append(h.packets, nodes.Packet{
		Due: now, Born: now, Word: word, Seq: h.seq, Flow: flow, Way: h.out, Size: size, TTL: nodes.InitialTTL, Bits: bits,
	})
	h.seq++
}

// Scale implements nodes.Endpoint. It changes the process of transfers from the
// next one on that is not drawn yet; endless ones stay as they are.
func (h *Host) Scale(at des.Time, factor float64) {
	if !(factor >= 0 && factor <= math.MaxFloat64) {
		panic(fmt.Sprintf("transport: Scale by %v", factor))
	}
	h.factor = factor
	if h.fetch != nil && h.due == des.Never && factor > 0 && h.fetch.PerSecond > 0 && at < h.fetch.Stop {
		h.due = max(at, h.fetch.Start)
		h.following()
	}
}

// Tally implements nodes.Endpoint.
func (h *Host) Tally() *nodes.Tally { return h.tally }

// Blocked reports the transfers that found no connection free.
func (h *Host) Blocked() uint64 { return h.blocked }

// Clone implements nodes.Endpoint.
func (h *Host) Clone() nodes.Endpoint {
	c := *h
	tally := *h.tally
	tally.Done = append([]nodes.Transfer(nil), h.tally.Done...)
	c.tally, c.rings, c.packets = &tally, &rings{}, nil
	c.heap = append(heap(nil), h.heap...)
	c.clients = append([]client(nil), h.clients...)
	for i := range c.clients {
		c.clients[i].there = append([]uint64(nil), h.clients[i].there...)
	}
	c.servers = append([]sender(nil), h.servers...)
	for i := range c.servers {
		c.servers[i].marks = append([]uint64(nil), h.servers[i].marks...)
	}
	c.free = append([]idle(nil), h.free...)
	return &c
}
