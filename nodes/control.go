package nodes

import "ferrule/des"

// Op says what a Message is about. Ops below OpFirstAgent are the network's
// own; the rest belong to whoever wrote the agents of both ends.
type Op uint16

// Ops that the network itself books at a site.
const (
	OpNone          Op = iota
	OpLightLost        // a circuit's receive side went dark: Circuit, N = incarnation
	OpLightBack        // light came back on it: Circuit, N = incarnation
	OpFibreDark        // the receive side of an adjacent fibre went dark: Fibre
	OpFibreLit         // light came back on it: Fibre
	OpOrder            // an order from outside: Ref
	OpRelease          // a hold at the ingress ends; no agent sees it
	OpEquipmentLost    // the router here stopped working, or the port of Circuit
	OpEquipmentBack    // it works again
	OpSwitch           // the tail of a 1+1 circuit changes over: Circuit, N = incarnation it passes then; no agent sees it
	OpReturn           // it goes back to its first trail: Circuit, A = number; no agent sees it
	OpFirstAgent
)

// Message is what agents tell each other, and what an agent tells itself
// later. It is a value; what Ref points to must never change.
//
// Messages due at one site at one instant are handled in the order (network's
// own, from other sites, booked by the site itself), then by sender, then in
// the order they were sent.
type Message struct {
	At      des.Time // when it is handled
	Sent    des.Time
	From    SiteID
	To      SiteID
	Serial  uint64 // set by the sender's site
	Op      Op
	Settles bool // the network is not settled while such a message is pending; see also Local.Pending
	Circuit CircuitID
	Fibre   FibreID
	Way     uint16
	N       int32
	A, B    int64
	Ref     any   // immutable, or nil
	Epoch   int32 // set by the sender's site: state of the management ways
	Remote  bool  // set by the sender's site: came over the management ways
	Over    bool  // set by the sender's site: came over Circuit instead, of incarnation Epoch
}

// Trail is one incarnation of a circuit's route in one direction, as a sender
// needs to know it. Fibres are in travel order; Slot is the first channel or
// slot number on each, for the record.
type Trail struct {
	Circuit     CircuitID
	Incarnation int32
	Dir         Direction
	Fibres      []FibreID
	Copies      int32 // 1+1: the incarnation, opened just before, of which it takes a copy of every packet; 0: none
}

// Table is one site's routing of what is not moved: for each destination site
// the circuits that lie on shortest ways, in ascending order. Empty: no route.
// It never changes once installed.
type Table struct {
	Version int32
	Next    [][]CircuitID
}

// PortState is what a circuit's sending end does.
type PortState uint8

// States of a port. A port that is down drops what waits as flushed, or holds
// it (DownWait); a draining one sends what waits and takes no more.
const (
	PortDown PortState = iota
	PortUp
	PortDraining
)

// PortCounters are what a port can tell when polled, from the start of the run.
type PortCounters struct {
	SentBytes   uint64 // line bytes
	SentPackets uint64
	LostPackets uint64 // dropped at the queue
	QueueBytes  Bytes  // waiting now
	Rate        Rate
}

// Event is one line of the event log.
type Event struct {
	At      des.Time
	Site    SiteID
	What    string
	Subject string
	Detail  string
}

// Local is what an agent may do at its own site, at the instant it is called
// for. Everything is effective at once and for this site only. The network
// implements it; tests of agents may too.
type Local interface {
	// Site is the site the agent stands at.
	Site() SiteID

	// Later books m at this site; m.At must not be before now.
	Later(m Message)

	// Send posts m to the agent of site to. It arrives after the delay of the
	// management way now in force plus fixed processing, or never, when a fibre
	// of that way is dark as it passes. Sending to the own site books m now.
	Send(to SiteID, m Message)

	// OpenTrail makes t the way packets of the circuit take from here on, or,
	// when t copies another, the way that a copy of each takes beside it. What
	// is under way on an earlier trail goes on. The port's state is unchanged.
	OpenTrail(t Trail)

	// SetPort changes the state of the sending end of c at this site.
	SetPort(c CircuitID, s PortState)

	// SetRate changes what the sending end of c sends at, from its next service.
	SetRate(c CircuitID, r Rate)

	// Install makes t the table of this site.
	Install(t *Table)

	// Steer sends way out by circuit c here from now on; None ends it.
	Steer(way uint16, c CircuitID)

	// Hold keeps packets of way at the ingress until the given instant.
	Hold(way uint16, until des.Time)

	// Counters reads the sending end of c.
	Counters(c CircuitID) PortCounters

	// Pending adds delta to the number of consequences that are under way here:
	// answers awaited, alarms unheard, timers that will do something, decisions
	// being taken. The network is not settled while there are any, nor until
	// some time after the last change of their number.
	Pending(delta int)

	// Note adds to the event log.
	Note(what, subject, detail string)
}

// A ControlAgent decides and acts at one site. Handle is called for each
// message when it is due, in the order stated at Message. An agent may touch
// only its own state and x.
type ControlAgent interface {
	// Handle takes m, which is due now, and does what follows from it through x.
	Handle(x Local, now des.Time, m Message)

	// Clone copies the agent: what happens to one does not happen to the other.
	Clone() ControlAgent
}
