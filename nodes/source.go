package nodes

import "ferrule/des"

// A Source is what one way of one aggregate sends, all its flows together. It
// keeps one appointment however many flows it has. It draws only from random
// numbers keyed by its own name, so that a plan that changes the network
// changes nothing here. It starts no event and holds no clock.
type Source interface {
	// Next reports when the next packet will be born, or des.Never. Between
	// calls of Emit and Scale it does not change.
	Next() des.Time

	// Emit appends to buf every packet born before end that was not emitted
	// yet, in order of birth, and returns the longer buf. Each packet has Born,
	// Due (= Born), Seq (0, 1, 2, ... within the way), Flow, Way, Size, TTL =
	// InitialTTL and Bits set and Word zero. end never decreases from call to
	// call. How calls divide time never shows in what is sent: two calls with
	// ends a and b give together what one call with b gives.
	Emit(end des.Time, buf []Packet) []Packet

	// Scale sets the load to factor times the load of the scenario file from
	// the instant at on; at is not before the end of any Emit so far, and never
	// decreases from call to call. What was drawn before at is kept.
	Scale(at des.Time, factor float64)

	// Clone returns a copy that shares no state that either will change.
	Clone() Source
}
