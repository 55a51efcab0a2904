package nodes

import "ferrule/des"

// Plant is what stands in the ground and what is ordered over it: sites,
// fibres, circuits, classes and aggregates. It never changes during a run, so
// every region may read it. Circuits that a plan or a person may set up later
// are in it from the start, in state planned.
type Plant struct {
	Sites      []Site
	Fibres     []Fibre
	Circuits   []Circuit
	Classes    []Class
	Aggregates []Aggregate
}

// Site is a router and a cross-connect at one place.
type Site struct {
	Name     string
	Converts bool // its cross-connect can change the wavelength of a channel
}

// Fibre is a pair of fibres between two sites, one for each way.
type Fibre struct {
	Name        string
	Ends        [2]SiteID
	Length      Length
	Delay       des.Time // light over Length, one way
	Channels    int      // wavelengths
	ChannelRate Rate
	Lit         int // wavelengths with trunk equipment, cut into slots
	Slots       int // tributary slots each way: Lit x slots of a channel
	RiskGroups  []int32
}

// Other reports the end of f that is not s.
func (f *Fibre) Other(s SiteID) SiteID {
	if f.Ends[0] == s {
		return f.Ends[1]
	}
	return f.Ends[0]
}

// From reports the direction in which f leaves s.
func (f *Fibre) From(s SiteID) Direction {
	if f.Ends[0] == s {
		return Out
	}
	return Back
}

// Recovery says what happens to a circuit whose light is lost.
type Recovery uint8

// Kinds of recovery.
const (
	RecoveryNone    Recovery = iota
	RecoveryOnePlus          // 1+1: a second copy over a disjoint route
	RecoveryRestore          // a new route, found and set up by the controller
)

// Carriage says which packets a circuit takes.
type Carriage uint8

// Kinds of carriage.
const (
	CarriesRouted Carriage = iota // a packet link with a metric
	CarriesMoved                  // only aggregates moved onto it
)

// WhenDown says what becomes of an aggregate moved onto a circuit that is down.
type WhenDown uint8

// Choices of WhenDown.
const (
	DownReturn WhenDown = iota // it goes by routed circuits meanwhile
	DownWait                   // its packets wait in the port
	DownDrop                   // its packets are dropped
)

// Choice is what a route is chosen by.
type Choice uint8

// Choices of route.
const (
	ChooseLeastDelay Choice = iota
	ChooseFewestRouters
	ChooseMostSpare
	ChooseApart // no fibre or risk group in common with ApartFrom
)

// Circuit is a two-way connection over fibres, the same way and slots both ways.
type Circuit struct {
	Name      string
	Ends      [2]SiteID // Out goes from Ends[0] to Ends[1]
	Slots     int       // tributary slots on every fibre; 0 for a whole channel
	Channel   bool      // a whole wavelength
	Payload   Rate      // bit/s of client frames the slots or channel can carry
	Rate      Rate      // bit/s its ports send at: Payload, or less when shaped
	Along     []FibreID // the route asked for, from Ends[0]; nil: chosen
	Choose    Choice
	ApartFrom []CircuitID
	Recovery  Recovery
	Setup     uint8 // priority 0..7, 0 highest (RFC 3209 section 4.7)
	Hold      uint8
	Shrink    bool // may be restored with fewer slots
	Carries   Carriage
	Metric    int64 // 0: the delay of its route in ps
	HoldOff   des.Time
	WhenDown  WhenDown
	MTU       Bytes
	Overhead  Bytes // per packet on the line: frame and mapping; labels when moved
	InPlace   bool  // up when the run begins
}

// Queueing says how a class is served.
type Queueing uint8

// Kinds of service.
const (
	QueueStrict Queueing = iota // before every later class
	QueueWeight                 // a share of what strict classes leave (DRR)
	QueueFIFO                   // in order of arrival with all other FIFO classes
	QueueFair                   // a share of what strict classes leave (WFQ)
)

// DropPolicy says how a class's queue refuses packets before it is full, or at
// its head.
type DropPolicy uint8

// Drop policies.
const (
	DropTail    DropPolicy = iota // when there is no room, and not before
	DropRED                       // random early detection (Floyd and Jacobson 1993)
	DropCoDel                     // by the time packets have waited (RFC 8289)
	DropFQCoDel                   // the same in a queue for each flow (RFC 8290)
)

// Class is a class of traffic. Classes stand highest first.
type Class struct {
	Name          string
	Queue         Queueing
	Weight        int      // per cent, for QueueWeight and QueueFair
	BufferTime    des.Time // buffer given as time at the port's rate, or 0
	BufferBytes   Bytes    // buffer given in bytes, or 0
	BufferPackets int      // buffer given as a number of waiting packets, or 0
	Drop          DropPolicy
	ECN           bool // the policy marks packets of ECN-capable transports instead of dropping them (RFC 3168)
}

// Aggregate is traffic of one class between two sites.
type Aggregate struct {
	Name   string
	Class  ClassID
	Ends   [2]SiteID // Out goes from Ends[0] to Ends[1]
	OneWay bool      // only Out is used
}

// Origin reports where a way of a starts.
func (a *Aggregate) Origin(d Direction) SiteID { return a.Ends[d] }

// Target reports where a way of a ends.
func (a *Aggregate) Target(d Direction) SiteID { return a.Ends[d.Reverse()] }
