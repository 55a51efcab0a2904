package scenarios

import (
	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
	"ferrule/workloads/replay"
	"ferrule/workloads/transport"
)

// Pos is a place in a file. Line and Col count from 1; a Line of 0 means that
// the place is the file as a whole, or that a default was applied.
type Pos struct {
	File      string
	Line, Col int
}

// Scenario is one scenario file, resolved: defaults are applied, names are
// turned into indices, quantities carry their types. It is plain data and is
// never changed once loaded; many runs may read it at the same time.
type Scenario struct {
	Name  string
	About string
	File  string // as given to Load
	Hash  string // of what it was made of: see Hash

	Run        Run
	Timing     Timing
	Classes    []Class // index is nodes.ClassID; highest first
	Traffic    []Traffic
	Sites      []Site      // index is nodes.SiteID
	Fibres     []Fibre     // index is nodes.FibreID
	RiskGroups []RiskGroup // in order of first mention
	Circuits   []Circuit   // index is nodes.CircuitID; what stands, then what the timeline sets up
	Aggregates []Aggregate // index is nodes.AggID; those of the file, then those of its matrices
	Requests   []Request
	Controller Controller
	Timeline   []Act  // under every plan, in order of the file
	Plans      []Plan // Plans[0] is as-is; each with all that it is built on

	// Defaults lists every default that was applied, as "key = value", in a
	// fixed order, for the report.
	Defaults []string

	// Matrices lists the files of demand that were read, in order.
	Matrices []string

	// Captures lists the files that are replayed, in order.
	Captures []string
}

// Run says how long a run is and with which seed.
type Run struct {
	Length     des.Time // after which nothing is sent
	WarmUp     des.Time // not measured; less than Length; 0 if Auto
	AutoWarmUp bool     // the end of the warm-up is found from the run itself
	Seed       uint64
}

// Timing is how fast faults are seen and commands carried out.
type Timing struct {
	Detect         des.Time    // from dark to a defect declared
	Command        random.Spec // picoseconds a node needs for one command
	CommandsAtOnce int         // commands a node carries out at a time, at least 1
	Commands       CommandOrder
	WaitToRestore  des.Time // from repair to reversion
	Switch         des.Time // from loss of light to the other copy, at the tail of a 1+1 circuit
	Relock         des.Time // a receiver's on a wavelength that is new to it
	Level          des.Time // of optical power after a wavelength is added, for each fibre of its route
	Ramp           Ramp     // how a resize changes a rate
	Report         Report   // what the controller is told of when a fibre is cut
	Correlation    des.Time // how long it gathers reports before it restores anything
	TrafficReady   des.Time // from the last command done to the circuit fit for traffic
	Converge       des.Time // until the management way is known again after a cut
	LossOfMessage  float64  // probability in [0, 1) that a control message is lost
}

// Ramp says how a resize changes the rate of a circuit.
type Ramp uint8

// Ramps.
const (
	RampStandard Ramp = iota // at the slope of an ODUflex, 512 Mb/s per second (ITU-T G.7044)
	RampNone                 // at once
)

// Report says what the controller takes for the report of a fault.
type Report uint8

// Kinds of report.
const (
	ReportFibre   Report = iota // a fibre went dark: all circuits over it are down
	ReportCircuit               // each circuit's loss of light for itself
)

// Class is a class of service.
type Class struct {
	Name          string
	Pos           Pos
	DSCP          uint8 // 0..63 (RFC 2474)
	Queue         nodes.Queueing
	Weight        int         // per cent of what strict classes leave; 0 unless nodes.QueueWeight or nodes.QueueFair
	BufferTime    des.Time    // buffer as time at the port's rate; 0 if BufferBytes is given
	BufferBytes   nodes.Bytes // buffer as data; 0 if BufferTime is given
	BufferPackets int         // buffer as a number of waiting packets; 0 if another is given
	Drop          nodes.DropPolicy
	ECN           bool    // marked instead of dropped where the transport can take it; never with nodes.DropTail
	Traffic       int     // index in Scenario.Traffic, or nodes.None
	Objective     []Limit // in the order of the Figure constants
}

// Limit is one objective of a class: a figure and what it must not exceed.
type Limit struct {
	Figure Figure
	Time   des.Time // for every figure but FigureLoss
	Ratio  float64  // for FigureLoss, in [0, 1]
}

// Traffic is a way of sending. What a model does not use is zero.
type Traffic struct {
	Name   string
	Pos    Pos
	Model  Model
	Packet random.Spec // constant, poisson, onoff, mmpp: bytes of a packet at the IP layer
	Rate   nodes.Rate  // of one flow, IP bits; 0 if the model or the codec says it
	Codec  string      // voice

	Frames          float64             // video: frames per second
	GroupOfPictures int                 // video: frames from one whole picture to the next
	Size            random.Spec         // files, web: bytes of a file
	Pace            nodes.Rate          // files, pages: the rate at which one of them is sent
	Transport       transport.Algorithm // web, bulk
	Parse           des.Time            // pages: mean time between a page and the objects in it

	Talkspurts bool     // voice: nothing is sent while a speaker listens
	Spurt      des.Time // voice with talkspurts: mean
	Silence    des.Time // voice with talkspurts: mean

	Hurst   float64    // onoff
	Peak    nodes.Rate // onoff: of one flow while it sends
	OnFor   des.Time   // onoff: mean time a flow sends
	OffFor  des.Time   // onoff: least mean silence
	Low     float64    // mmpp: rate of the low state over that of the high one
	HighFor des.Time   // mmpp: mean time in the high state
	LowFor  des.Time   // mmpp: mean time in the low state

	Trace     *replay.Trace // replay; nil for every other model
	TimeScale float64       // replay: distances in time over those of the file
	Loop      bool          // replay: the file begins again at its end

	FlowsArrive FlowArrival // voice, video
	Hold        random.Spec // voice, video: picoseconds a flow lasts; the zero Spec (constant 0) if it never ends
	Start       des.Time
	Stop        des.Time // des.Never if it goes on to the end
}

// Site is a router and a cross-connect at one place.
type Site struct {
	Name       string
	Pos        Pos
	Placed     bool         // whether X and Y were given
	X, Y       nodes.Length // on a plane
	Forwarding random.Spec  // picoseconds: constant, or lognormal with median and p99
	Convert    bool         // whether wavelengths can be changed here
}

// Fibre is a pair of fibres between two sites.
type Fibre struct {
	Name        string
	Pos         Pos
	A, B        nodes.SiteID
	Length      nodes.Length
	Channels    int
	ChannelRate nodes.Rate
	Lit         int   // channels cut into slots, the lowest numbered ones
	Slots       int   // slots of all lit channels together, per direction
	RiskGroups  []int // indices in Scenario.RiskGroups, ascending
}

// RiskGroup names fibres that share a duct.
type RiskGroup struct {
	Name   string
	Pos    Pos
	Fibres []nodes.FibreID // ascending
}

// Circuit is a circuit that stands from the start or that an act sets up.
type Circuit struct {
	Name    string
	Pos     Pos
	InPlace bool // stands when the run starts; else an act sets it up
	A, B    nodes.SiteID
	Along   []nodes.FibreID // the route from A to B; nil if Choose finds it

	Size      CircuitSize
	Slots     int        // slots it takes on every fibre; 0 for a channel
	Container string     // such as ODU2, if SizeContainer
	Payload   nodes.Rate // what it carries at most
	Rate      nodes.Rate // to which its ports are shaped; Payload if not given

	Carries         nodes.Carriage
	Recovery        nodes.Recovery
	Metric          int64   // at least 1; 0 means the delay of its route in ps
	SetUpPriority   int     // 0 (highest) to 7; nodes.None: from the highest class it carries
	HoldingPriority int     // likewise
	Shrink          bool    // may be restored with fewer slots
	Policy          *Policy // nil: its slots do not follow its load
	HoldOff         des.Time
	WhenDown        nodes.WhenDown
	MTU             nodes.Bytes
	Framing         Framing
	Choose          nodes.Choice
	ApartFrom       []nodes.CircuitID // if nodes.ChooseApart
}

// Aggregate is the traffic of one class between two sites: both ways, or only
// from From to To.
type Aggregate struct {
	Name     string
	Pos      Pos
	From, To nodes.SiteID
	BothWays bool // way Out runs From to To, way Back To to From
	Class    nodes.ClassID
	Traffic  int        // index in Scenario.Traffic
	Load     nodes.Rate // each way, IP bits; 0 if Flows is given
	Speed    [2]float64 // by direction: times as fast as the file; 0 unless the traffic is a replay
	Flows    int        // each way; 0 if Load is given
	Start    des.Time
	Stop     des.Time // des.Never if it goes on to the end
	Police   *Police  // each way for itself; nil: not policed
	Shape    *Shape   // each way for itself, after the policer; nil: not shaped
}

// Police is a three-colour policer at an ingress, blind to colours: what is
// red is discarded. With Peak it has two rates (RFC 2698), else one (RFC 2697).
type Police struct {
	Rate      nodes.Rate
	Burst     nodes.Bytes
	Excess    nodes.Bytes // of a single rate; may be 0
	Peak      nodes.Rate  // 0: a single rate
	PeakBurst nodes.Bytes
}

// Shape is a shaper at an ingress: a token bucket that holds packets until it
// has what they take.
type Shape struct {
	Rate    nodes.Rate
	Burst   nodes.Bytes
	Longest des.Time // what would be held longer is discarded
}

// Request is a stream of circuits that are asked for, held and given back.
type Request struct {
	Name            string
	Pos             Pos
	A, B            nodes.SiteID
	Slots           int
	PerSecond       float64     // Poisson arrivals
	Hold            random.Spec // picoseconds
	SetUpPriority   int         // 0..7
	HoldingPriority int         // 0..7
	Choose          nodes.Choice
}

// Controller is where the controller stands and how it works.
type Controller struct {
	Pos      Pos
	At       nodes.SiteID
	Compute  des.Time // for one decision, one at a time
	Retry    des.Time // until a command without an answer is sent again
	Poll     des.Time // between two readings of the ports
	Attempts int      // at most, for one command or one set-up; at least 1

	Routing     Routing  // of what is not moved
	Hello       des.Time // RoutingDistributed: between two hellos on a circuit
	AdjacencyUp des.Time // likewise: from hearing each other to using the circuit
	Flood       des.Time // likewise: to take in one advertisement and pass it on
	Install     des.Time // likewise: of a table in the forwarding hardware
}

// Routing says who finds the ways of what is not moved.
type Routing uint8

// Kinds of routing.
const (
	RoutingCentral     Routing = iota // the controller
	RoutingDistributed                // the routers among themselves
)

// Act is something done to the network or to the traffic. Which fields hold
// depends on Verb; the others are zero.
type Act struct {
	Pos   Pos
	Verb  Verb
	At    des.Time // des.Never if After is used; 0 for what a plan has in place
	After int      // index, in the same list, of the act that must be completed first, or nodes.None

	Subject string // the name as written: a fibre, a risk group, a circuit, an aggregate or a pattern

	// VerbCut, VerbRepair.
	Fibres []nodes.FibreID
	Where  nodes.Length // from end A of the fibre; the middle if not given; 0 if several fibres: use WhereOn
	Ways   FibreWays

	// VerbFail, VerbMend: the part; for PartFibre Fibres, Where and Ways too,
	// for PartPort also Circuit. VerbDrain, VerbUndrain: the site.
	Part Part
	Site nodes.SiteID

	// VerbSetUp, VerbTearDown, VerbResize: the circuit, and for a resize its
	// new size.
	Circuit nodes.CircuitID
	Slots   int
	Payload nodes.Rate

	// VerbMove, VerbReturn, VerbScale: the ways it is about, ascending, and
	// for a move the chain of circuits.
	Moved []MovedWay
	Onto  []nodes.CircuitID
	Order Order

	Factor float64 // VerbScale: times the load of the file
}

// MovedWay is one way of one aggregate in a move, a return or a scaling.
type MovedWay struct {
	Way     uint16 // nodes.WayOf(aggregate, direction)
	Reverse bool   // a move: it travels Onto from the last circuit to the first
}

// WhereOn is the place of a cut or repair on fibre f: Where, or the middle of
// the fibre when the act is about several of them.
func (a *Act) WhereOn(f *Fibre) nodes.Length {
	if len(a.Fibres) > 1 {
		return f.Length / 2
	}
	return a.Where
}

// Plan is a set of changes to the network, together with those of the plans
// that it is built on, which come first in every list.
type Plan struct {
	Name  string
	Pos   Pos
	About string
	On    string // the plan it is built on; empty for as-is

	// Circuits are all circuits that exist at some time under the plan:
	// Scenario.Circuits first, so that their ids stay, then those of the plans
	// beneath, then its own. Ids in its acts index this slice. InPlace and the
	// sizes are those at the start of the run, after what is in place.
	Circuits []Circuit

	InPlace []Act // done before the run starts: set-up, tear-down, resize, move, return
	Steps   []Act // done by the controller during the run
	Undo    bool  // when a step fails, what the others have done is taken back

	// Moves is the outcome of InPlace: which ways are carried by which chain
	// when the run starts, ascending by way.
	Moves []Carriage
}

// Carriage says that a way is carried by a chain of circuits, in the order in
// which its packets pass them.
type Carriage struct {
	Way   uint16
	Chain []nodes.CircuitID
}
