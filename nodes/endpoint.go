package nodes

import "ferrule/des"

// An Endpoint is one end of an aggregate whose traffic is a closed loop: all
// its hosts together, which send on one way and are sent to on the other. Like
// a Source it keeps one appointment, starts no event and holds no clock, and
// draws only from random numbers keyed by its own name.
//
// Whatever happens to it at one instant happens in this order: what it is sent,
// in the order in which it is delivered, then what it does by itself. What it
// sends is born at the instant at which it reacts. So how calls divide time
// never shows in what is sent.
type Endpoint interface {
	// Next reports when it may next do something by itself, or des.Never. It may
	// be early, never late.
	Next() des.Time

	// Receive takes the packet that leaves the network at now, does first what
	// was to be done by itself before now, appends what it sends to out and
	// returns the longer out. now never decreases. Each packet sent has Born, Due
	// (= Born), Seq (0, 1, 2, ... within the way it sends on), Flow, Way, Size,
	// TTL, Bits and Word, which belongs to the transport, set.
	Receive(now des.Time, p *Packet, out []Packet) []Packet

	// Advance does everything that is to be done by itself before end, and
	// appends what it sends to out. end never decreases and does not lie before
	// the last Receive.
	Advance(end des.Time, out []Packet) []Packet

	// Scale sets the load of what it asks for to factor times that of the
	// scenario file from the instant at on, as for a Source.
	Scale(at des.Time, factor float64)

	// Tally is where it notes what it wants to be known; whoever drives it reads
	// that after each call and clears it. It is the same for all its life.
	Tally() *Tally

	// Clone returns a copy that shares no state that either will change.
	Clone() Endpoint
}

// Tally is what an endpoint has noted since it was last cleared.
type Tally struct {
	Good    uint64     // bytes of payload that arrived here for the first time
	Resent  uint64     // segments sent again from here
	Timeout uint64     // times that a sender here has waited in vain
	Began   uint64     // transfers asked for from here
	Done    []Transfer // completed here
}

// Clear makes t ready for what is noted next.
func (t *Tally) Clear() { *t = Tally{Done: t.Done[:0]} }

// Transfer is one that is complete: asked for at Began, all there at Ended.
type Transfer struct {
	Began, Ended des.Time
	Bytes        Bytes // payload
}
