// Package distributed routes what is not moved without a controller: the
// router of every site finds its neighbours by hellos over the circuits, floods
// what it sees of its own circuits, and computes its own table from what it has
// been told. It is a link-state protocol with the timers that make it fast or
// slow, and what follows from them: sites that do not know yet send packets
// into circuits that are gone, or to each other in a loop.
//
// A [Router] is the agent of one site. It stands before the agent that the site
// has anyway, which goes on to own the circuits: what that one does to the ports
// is seen, and the tables that it is told to install are left aside.
//
// Nothing here ranges over a map, starts a goroutine or reads a clock.
package distributed

import "ferrule/des"

// Config holds the timers. A zero field takes the default beside it; all of
// them are common practice, no source, save those of the back-off.
type Config struct {
	Hello       des.Time // between two hellos on a circuit; 1 s
	Lost        int      // hellos lost in a row that end an adjacency; 3
	AdjacencyUp des.Time // from hearing each other to using the circuit; 200 ms
	Flood       des.Time // to take in one advertisement and pass it on; 1 ms
	Again       des.Time // to the repetition of one without an answer; 500 ms
	Compute     des.Time // for one computation of shortest paths; 5 ms
	Install     des.Time // of a table in the forwarding hardware; 50 ms
	Delays      Delays   // of the back-off; those of RFC 8405's example
}

func (c Config) withDefaults() Config {
	span := func(v *des.Time, or des.Time) {
		if *v == 0 {
			*v = or
		}
		if *v < 0 {
			panic("distributed: a negative time in the configuration")
		}
	}
	span(&c.Hello, des.Second)
	span(&c.AdjacencyUp, 200*des.Millisecond)
	span(&c.Flood, des.Millisecond)
	span(&c.Again, 500*des.Millisecond)
	span(&c.Compute, 5*des.Millisecond)
	span(&c.Install, 50*des.Millisecond)
	if c.Lost == 0 {
		c.Lost = 3
	}
	if c.Delays == (Delays{}) {
		c.Delays = DefaultDelays()
	}
	return c
}
