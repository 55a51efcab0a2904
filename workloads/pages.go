package workloads

import (
	"errors"
	"fmt"
	"math"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
)

// PagesConfig describes the reading of web pages in open loop: pages arrive as
// a Poisson process; each is a main object, a time to read it through, and then
// the objects embedded in it, one after the other at the pace of an access
// line whatever the network does, which no real transport would. A zero field
// takes the default written beside it.
//
// The laws are those of the HTTP model of 3GPP R1-070674 (2007) and 3GPP2
// C.R1002, values from memory: main objects lognormal(8.37, 1.37), drawn again
// outside 100 B to 2 MB; embedded ones lognormal(6.17, 2.36), drawn again
// outside 50 B to 2 MB; their number Pareto of shape 1.1 from 2 to at most 55,
// less 2, rounded up or down by chance so that the mean is kept: 5.64.
type PagesConfig struct {
	Common
	Pace  nodes.Rate // of one page, bit/s of IP bytes; default 100 Mbit/s; at least 100 kbit/s
	Parse des.Time   // mean of the exponential time between main and embedded objects; default 130 ms, as in that model
}

// Check fills the defaults and reports every fault at once.
func (c PagesConfig) Check() (PagesConfig, error) {
	faults := c.Common.check(nil)
	if c.Pace == 0 {
		c.Pace = 100 * nodes.Mbps
	}
	if c.Pace < 100*nodes.Kbps || c.Pace > MaxLoad {
		faults = append(faults, fmt.Errorf("pace: %d bit/s is not between 100 kbit/s and %d Tbit/s", c.Pace, MaxLoad/(1000*nodes.Gbps)))
	}
	if c.Parse == 0 {
		c.Parse = 130 * des.Millisecond
	}
	if c.Parse < 0 || c.Parse > 60*des.Second {
		faults = append(faults, fmt.Errorf("parse: %v is not between 0 and 60 s", c.Parse))
	}
	return c, errors.Join(faults...)
}

// What keyed draws of pages are about. The index of an object's size is
// page<<8 | object.
const (
	ofObjects uint64 = iota // number of embedded objects
	ofRounding
	ofParse
	ofObject
)

// A page is one that is being sent.
type page struct {
	key     uint64 // of its draws
	left    int64  // bytes of the object not sent, headers not included
	flow    uint32
	object  uint32 // being sent; 0 is the main one
	objects uint32 // embedded ones
}

// Pages sends the packets of web pages.
type Pages struct {
	pages          []page
	idle           []uint32 // of the pages, those that are over
	turns          tournament
	arrivals       clock
	serial, nextID uint32 // of the page that arrives next
	main, embedded within
	number         random.Law // of embedded objects and 2 more
	parse          float64    // ps
	full           des.Time   // a full packet at the pace

	ahead       changes
	start, stop des.Time
	mean        float64 // bit/s
	seed, name  uint64
	key         string
	seq         uint32
	way         uint16
}

// NewPages returns a source of web pages, or the faults of c.
//
// An object is cut into packets of 1500 B, of which 40 B are headers; the last
// packet holds what is left. Packets are born one packet time at the pace after
// each other. Pages arrive at the rate that gives the load, headers included.
// At the start some are under way, as if the source had been running for ever;
// only pages of more than 20 MB, whose share of the load is below 0.1 %, may be
// missing among them.
func NewPages(c PagesConfig) (*Pages, error) {
	c, err := c.Check()
	if err != nil {
		return nil, err
	}
	p := &Pages{
		main:     lognormalWithin(8.37, 1.37, 100, 2e6),
		embedded: lognormalWithin(6.17, 2.36, 50, 2e6),
		parse:    float64(c.Parse), full: c.Pace.TxTime(mtu),
		start: c.Start, stop: c.Stop, mean: float64(c.Load),
		seed: c.Seed, name: random.Hash(c.Name), key: c.Name, way: c.Way,
	}
	if p.number, err = (random.Spec{Kind: random.Pareto, Shape: 1.1, Min: 2, AtMost: 55}).Law(); err != nil {
		return nil, err
	}
	bytes, err := p.pageBytes()
	if err != nil {
		return nil, err
	}
	p.arrivals = clock{kind: Poisson, mean: bytes * 8 / float64(c.Load) * float64(des.Second)}
	p.populate(1)
	return p, nil
}

// pageBytes returns the mean of the IP bytes of a page.
func (p *Pages) pageBytes() (float64, error) {
	main, err := newLengths(p.main, payload, 0.5)
	if err != nil {
		return 0, err
	}
	embedded, err := newLengths(p.embedded, payload, 0.5)
	if err != nil {
		return 0, err
	}
	one := p.embedded.Mean() + float64(header*embedded.mean)
	return p.main.Mean() + float64(header*main.mean) + float64((p.number.Mean()-2)*one), nil
}

// populate sets the pages to what stands at the start at the given factor.
func (p *Pages) populate(factor float64) {
	p.pages, p.idle, p.turns = p.pages[:0], p.idle[:0], newTournament(nil)
	p.serial, p.nextID = 0, 0
	p.arrivals.draws = random.NewStream(p.seed, p.key+"/gap")
	p.arrivals.start(p.start, factor)
	if factor == 0 {
		return
	}
	const most = 20e6 / payload // packets of a page
	farthest := float64(most*float64(p.full)) + float64(10*p.parse)
	draws := random.NewStream(p.seed, p.key+"/standing")
	age := draws.Exp() * p.arrivals.gap
	for i := uint64(0); age < farthest; i++ {
		if p.lasts(underWay+i) >= age {
			id := p.place(underWay+i, p.start-des.Time(age))
			for p.turns.of(id) < p.start {
				_, next := p.send(id, p.turns.of(id))
				p.turns.set(id, next)
			}
		}
		age += float64(draws.Exp() * p.arrivals.gap)
	}
}

// lasts returns how long after its arrival the last packet of a page is born,
// in ps.
func (p *Pages) lasts(key uint64) float64 {
	packets, objects := int64(0), p.objectsOf(key)
	for i := range objects + 1 {
		packets += (p.bytesOf(key, i) + payload - 1) / payload
	}
	x := float64(packets-1) * float64(p.full)
	if objects > 0 {
		x += float64(p.parseOf(key))
	}
	return x
}

// unit returns the uniform draw of index i about a quantity.
func (p *Pages) unit(i, quantity uint64) float64 {
	return random.Unit(random.Draw(p.seed, p.name, i, quantity))
}

// objectsOf returns the number of objects embedded in a page.
func (p *Pages) objectsOf(key uint64) uint32 {
	return uint32(p.number.At(p.unit(key, ofObjects)) - 2 + p.unit(key, ofRounding))
}

// bytesOf returns the bytes of an object of a page.
func (p *Pages) bytesOf(key uint64, object uint32) int64 {
	law := &p.embedded
	if object == 0 {
		law = &p.main
	}
	return int64(law.At(p.unit(key<<8|uint64(object), ofObject)) + 0.5)
}

// parseOf returns the time between the main object and the embedded ones.
func (p *Pages) parseOf(key uint64) des.Time {
	return des.Time(-p.parse * math.Log(p.unit(key, ofParse)))
}

// place begins a page at the instant at.
func (p *Pages) place(key uint64, at des.Time) (id uint32) {
	id = uint32(len(p.pages))
	if n := len(p.idle); n > 0 {
		id, p.idle = p.idle[n-1], p.idle[:n-1]
	} else {
		p.pages = append(p.pages, page{})
		if len(p.pages) > p.turns.flows() {
			p.turns.grow()
		}
	}
	p.pages[id] = page{key: key, left: p.bytesOf(key, 0), flow: p.nextID, objects: p.objectsOf(key)}
	p.nextID++
	p.turns.set(id, at)
	return id
}

// send takes the packet born at due out of page id and returns its size and
// when the next one is born: never, after the last of a page, which is over.
func (p *Pages) send(id uint32, due des.Time) (size uint16, next des.Time) {
	g := &p.pages[id]
	next = due.Plus(p.full)
	if g.left > payload {
		g.left -= payload
		return mtu, next
	}
	size = uint16(header + g.left)
	if g.object == g.objects {
		p.idle = append(p.idle, id)
		return size, des.Never
	}
	if g.object == 0 {
		next = next.Plus(p.parseOf(g.key))
	}
	g.object++
	g.left = p.bytesOf(g.key, g.object)
	return size, next
}

// due reports when the next packet is born, whether or not before stop.
func (p *Pages) due() des.Time { return min(p.turns.next(), p.arrivals.next) }

// MeanRate implements [Source]. It is the load asked for.
func (p *Pages) MeanRate() float64 { return p.mean }

// Next implements nodes.Source.
func (p *Pages) Next() des.Time {
	if at := p.due(); at < p.stop {
		return at
	}
	return des.Never
}

// Emit implements nodes.Source.
func (p *Pages) Emit(end des.Time, buf []nodes.Packet) []nodes.Packet {
	end = min(end, p.stop)
	for p.due() < end {
		limit := min(end, p.ahead.until())
		for p.due() < limit {
			buf = p.run(min(limit, p.arrivals.next), buf)
			if p.arrivals.next < limit {
				p.place(uint64(p.serial), p.arrivals.next)
				p.serial++
				p.arrivals.advance()
			}
		}
		p.settle()
	}
	return buf
}

// run appends the packets born before limit of pages that have begun.
func (p *Pages) run(limit des.Time, buf []nodes.Packet) []nodes.Packet {
	for p.turns.next() < limit {
		id, due := p.turns.first()
		flow := p.pages[id].flow
		size, next := p.send(id, due)
		buf = longer(buf)
		birth(&buf[len(buf)-1], due, p.seq, flow, p.way, size)
		p.seq++
		p.turns.set(id, next)
	}
	return buf
}

// settle makes the changes of load that lie before the next packet.
func (p *Pages) settle() {
	for len(p.ahead.ahead) > 0 && p.ahead.until() <= p.due() {
		x := p.ahead.take()
		if x.at <= p.start {
			p.populate(x.factor)
		} else {
			p.arrivals.retime(x.at, x.factor)
		}
	}
}

// Scale implements nodes.Source. The rate of arrivals changes, and the load
// follows as pages end. A change at or before the start is in full force at the
// start.
func (p *Pages) Scale(at des.Time, factor float64) {
	p.ahead.add(at, factor)
	p.settle()
}

// Clone implements nodes.Source.
func (p *Pages) Clone() nodes.Source {
	c := *p
	c.pages = append([]page(nil), p.pages...)
	c.idle = append([]uint32(nil), p.idle...)
	c.turns = p.turns.clone()
	c.ahead = p.ahead.clone()
	return &c
}
