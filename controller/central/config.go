// Package central is one controller at one site and an agent at every site.
//
// The controller knows only what it has been told, computes one thing at a
// time, and commands the agents by messages that take time and can be lost;
// it repeats those that stay unanswered. An agent owns the cross-connect of
// its site and the sending ends of the circuits that end there. A command may
// arrive twice: it is then carried out once and answered twice.
//
// A circuit whose light is lost is restored in order of importance, if need be
// at the cost of circuits of lower holding priority, or with fewer slots; one
// with 1+1 recovery changes over without the controller, which only keeps its
// state; one whose router or port has failed waits. A site can be drained, the
// steps of a plan be taken back, and a circuit under a policy follows its load.
//
// Every duration is an integer of picoseconds. Floating-point numbers are the
// draw of a cross-connect's latency, rounded to a whole picosecond, and the
// smoothed readings of policies, pinned against fused operations.
// Nothing here ranges over a map, starts a goroutine or reads a clock.
package central

import (
	"ferrule/controller"
	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
)

// Config tunes the controller and the agents. Durations are at least 0. A zero
// field of which a default is written takes it.
type Config struct {
	Site           nodes.SiteID // where the controller stands
	Seed           uint64
	Compute        des.Time   // to decide one thing
	Retry          des.Time   // from a message to its repetition without an answer; default 200 ms
	Attempts       int        // how often a message is sent, or a set-up tried, at most; default 3
	Command        random.Law // latency of one command at a cross-connect, in ps; nil: none
	CommandsAtOnce int        // commands a cross-connect carries out at a time; default 1
	Sequence       bool       // slots too are connected one site after another, as whole channels always are
	TrafficReady   des.Time   // from the route's opening at an end to its port's first packet
	Revert         bool       // restored circuits return to their first route once it is whole again
	WaitToRestore  des.Time   // how long it must have been whole before
	Relock         des.Time   // a receiver's on a wavelength that is new to it, before traffic is ready
	Level          des.Time   // of power after a wavelength is added, for each fibre of its route, likewise
	PerCircuit     bool       // a fault is what the ends of each circuit report, not what those of a fibre do
	Correlate      des.Time   // how long reports are gathered before anything is restored
	OrderBound     des.Time   // what is added to the difference of delays to keep order; default 5 ms
	Ramp           bool       // slots change their rate at the slope of an ODUflex, not at once
	Poll           des.Time   // between two readings of the circuits under a policy; default 1 s
	Policies       []Policy   // of circuits whose slots follow their load
	Streams        []Stream   // circuit demand without packets
}

// Stream is a source of requests for slots between two sites.
type Stream struct {
	Name   string
	Ends   [2]nodes.SiteID
	Slots  int
	Choose nodes.Choice // ChooseApart is not allowed
	Demand Demand
}

// Demand says when requests come and how long each holds its slots. It draws
// only from random numbers of its own.
type Demand interface {
	// Next reports when the next request comes, or des.Never.
	Next() des.Time

	// Take takes that request: its instant, how long its slots are held, and
	// its number in the stream.
	Take() (at, hold des.Time, index uint64)

	// Clone returns a copy that goes on identically and shares nothing.
	Clone() Demand
}

// withDefaults fills in what is zero. It panics on what no plan can ask for.
func (c Config) withDefaults(p *nodes.Plant) Config {
	if c.Retry == 0 {
		c.Retry = 200 * des.Millisecond
	}
	if c.Attempts == 0 {
		c.Attempts = 3
	}
	if c.Poll == 0 {
		c.Poll = des.Second
	}
	for i := range c.Policies {
		c.Policies[i].check(p)
	}
	if c.CommandsAtOnce == 0 {
		c.CommandsAtOnce = 1
	}
	if c.OrderBound == 0 {
		c.OrderBound = 5 * des.Millisecond
	}
	if c.Site < 0 || int(c.Site) >= len(p.Sites) {
		panic("central: the controller stands at no site")
	}
	if c.Compute < 0 || c.Retry < 0 || c.Attempts < 0 || c.CommandsAtOnce < 0 || c.TrafficReady < 0 || c.WaitToRestore < 0 || c.OrderBound < 0 ||
		c.Poll < 0 || c.Relock < 0 || c.Level < 0 || c.Correlate < 0 {
		panic("central: a negative duration or number in the configuration")
	}
	for i := range p.Fibres {
		if p.Fibres[i].Slots > maxAmount || p.Fibres[i].Channels > maxAmount {
			panic("central: more than 65535 slots or channels on a fibre")
		}
	}
	return c
}

// known is what never changes during a run; all agents read it.
type known struct {
	plant    *nodes.Plant
	cfg      Config
	siteHash []uint64
	names    []uint64            // hash of each circuit's name
	streams  []uint64            // hash of each stream's name
	endsAt   [][]nodes.CircuitID // circuits that end at each site, ascending
	endIndex [][2]int32          // where each circuit stands in endsAt of its ends
	orders   []controller.Order
}

// newKnown gathers it.
func newKnown(p *nodes.Plant, cfg Config, orders []controller.Order) *known {
	k := &known{plant: p, cfg: cfg, orders: orders}
	k.endsAt = make([][]nodes.CircuitID, len(p.Sites))
	for i := range p.Sites {
		k.siteHash = append(k.siteHash, random.Hash(p.Sites[i].Name))
	}
	for i := range p.Circuits {
		k.names = append(k.names, random.Hash(p.Circuits[i].Name))
		var at [2]int32
		for e, s := range p.Circuits[i].Ends {
			at[e] = int32(len(k.endsAt[s]))
			k.endsAt[s] = append(k.endsAt[s], nodes.CircuitID(i))
		}
		k.endIndex = append(k.endIndex, at)
	}
	for i := range cfg.Streams {
		k.streams = append(k.streams, random.Hash(cfg.Streams[i].Name))
	}
	k.streams = append(k.streams, random.Hash(singleRequests))
	return k
}

// circuitName names c in notes.
func (k *known) circuitName(c nodes.CircuitID) string { return k.plant.Circuits[c].Name }

// siteName names s in notes.
func (k *known) siteName(s nodes.SiteID) string { return k.plant.Sites[s].Name }

// fibreName names f in notes.
func (k *known) fibreName(f nodes.FibreID) string { return k.plant.Fibres[f].Name }
