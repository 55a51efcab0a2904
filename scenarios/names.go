package scenarios

import "fmt"

// The words that a scenario file uses, as types. Each has a String method that
// gives the word of the file, and panics for a value that is none of them.

// Model is what a traffic entry sends like.
type Model uint8

// Traffic models.
const (
	ModelConstant Model = iota // packets at equal distances
	ModelPoisson               // packets at exponential distances
	ModelVoice                 // talk spurts of a codec
	ModelVideo                 // frames, each sent as a train of packets
	ModelFiles                 // files that arrive at random and are sent at a pace
	ModelWeb                   // files that are asked for at random and sent by a transport
	ModelBulk                  // transfers without end, sent by a transport
	ModelOnOff                 // flows that send and fall silent for times with heavy tails
	ModelMMPP                  // packets of a Markov-modulated Poisson process
	ModelPages                 // web pages that arrive at random and are sent at a pace
	ModelReplay                // packets as a file has them
)

// FlowArrival is how flows start.
type FlowArrival uint8

// How flows start.
const (
	FlowsNone    FlowArrival = iota // all are there from the start
	FlowsPoisson                    // at exponential distances
	FlowsRegular                    // at equal distances
)

// Figure is a figure on which an objective can be set.
type Figure uint8

// Figures, in the order in which they are listed.
const (
	FigureDelayMean Figure = iota // one-way delay
	FigureDelayP50
	FigureDelayP95
	FigureDelayP99
	FigureDelayP999
	FigurePDVP50 // packet delay variation (RFC 5481)
	FigurePDVP95
	FigurePDVP99
	FigurePDVP999
	FigureIPDVP999    // inter-packet delay variation (RFC 3393)
	FigureJitter      // interarrival jitter (RFC 3550)
	FigureLoss        // ratio of packets lost
	FigureOut         // longest outage
	FigureTransferP50 // time from a request to the last byte, of a closed loop
	FigureTransferP95
	FigureTransferP99
)

// CommandOrder is how the commands of one set-up are given.
type CommandOrder uint8

// Orders of commands.
const (
	CommandsByKind   CommandOrder = iota // slots in parallel, wavelengths in sequence
	CommandsParallel                     // to all nodes at once
	CommandsSequence                     // node after node
)

// CircuitSize is how the size of a circuit was given.
type CircuitSize uint8

// Kinds of size.
const (
	SizeSlots     CircuitSize = iota // a number of tributary slots
	SizeContainer                    // a standard container
	SizeChannel                      // a whole wavelength
)

// Framing is how packets are mapped into a circuit.
type Framing uint8

// Kinds of framing.
const (
	FramingGFP  Framing = iota // frames with mapping: 26 B more for each packet
	FramingNone                // the bare packet
)

// Order is what a move does with the order of packets.
type Order uint8

// Orders.
const (
	OrderFree Order = iota // at once; packets may overtake
	OrderKept              // packets are held until none can overtake
)

// FibreWays is which ways of a fibre pair an act is about.
type FibreWays uint8

// Ways of a fibre.
const (
	WaysBoth FibreWays = iota
	WaysOut            // from A to B only
	WaysBack           // from B to A only
)

// Verb is what an act does.
type Verb uint8

// Verbs.
const (
	VerbCut Verb = iota
	VerbRepair
	VerbSetUp
	VerbTearDown
	VerbResize
	VerbMove
	VerbReturn
	VerbScale
	VerbFail
	VerbMend
	VerbDrain
	VerbUndrain
)

// Part is what fails or is mended.
type Part uint8

// Parts of the network. A router fails without the cross-connect beside it, a
// site as a whole; a port is one end of a circuit.
const (
	PartNone Part = iota
	PartRouter
	PartSite
	PartPort
	PartFibre
)

var (
	modelWords     = []string{"constant", "poisson", "voice", "video", "files", "web", "bulk", "onoff", "mmpp", "pages", "replay"}
	formatWords    = []string{"auto", "pcap", "pcapng", "packets", "flows"} // as replay.Format
	wayWords       = []string{"both", "out", "back"}                        // as replay.Ways
	transportWords = []string{"reno", "newreno", "cubic"}                   // in the order of transport.Algorithm
	arrivalWords   = []string{"none", "poisson", "regular"}
	figureWords    = []string{
		"delay-mean", "delay-p50", "delay-p95", "delay-p99", "delay-p99.9",
		"pdv-p50", "pdv-p95", "pdv-p99", "pdv-p99.9", "ipdv-p99.9", "jitter", "loss", "out",
		"transfer-p50", "transfer-p95", "transfer-p99",
	}
	dropWords      = []string{"tail", "red", "codel", "fq-codel"} // in the order of nodes.DropPolicy
	commandWords   = []string{"by-kind", "parallel", "sequence"}
	rampWords      = []string{"standard", "none"}
	reportWords    = []string{"fibre", "circuit"}
	routingWords   = []string{"central", "distributed"}
	sizeWords      = []string{"slots", "container", "channel"}
	framingWords   = []string{"gfp", "none"}
	orderWords     = []string{"free", "kept"}
	fibreWaysWords = []string{"both", "out", "back"}
	verbWords      = []string{"cut", "repair", "set-up", "tear-down", "resize", "move", "return", "scale", "fail", "mend", "drain", "undrain"}
)

// word returns the word of value i, which must be one of words.
func word(words []string, i uint8) string {
	if int(i) >= len(words) {
		panic(fmt.Sprintf("scenarios: value %d is none of %q", i, words))
	}
	return words[i]
}

// String returns the word of the file.
func (m Model) String() string { return word(modelWords, uint8(m)) }

// String returns the word of the file.
func (a FlowArrival) String() string { return word(arrivalWords, uint8(a)) }

// String returns the word of the file.
func (f Figure) String() string { return word(figureWords, uint8(f)) }

// String returns the word of the file.
func (c CommandOrder) String() string { return word(commandWords, uint8(c)) }

// String returns the word of the file.
func (r Ramp) String() string { return word(rampWords, uint8(r)) }

// String returns the word of the file.
func (r Routing) String() string { return word(routingWords, uint8(r)) }

// String returns the word of the file.
func (r Report) String() string { return word(reportWords, uint8(r)) }

// String returns the word of the file.
func (s CircuitSize) String() string { return word(sizeWords, uint8(s)) }

// String returns the word of the file.
func (f Framing) String() string { return word(framingWords, uint8(f)) }

// String returns the word of the file.
func (o Order) String() string { return word(orderWords, uint8(o)) }

// String returns the word of the file.
func (w FibreWays) String() string { return word(fibreWaysWords, uint8(w)) }

// String returns the word of the file.
func (v Verb) String() string { return word(verbWords, uint8(v)) }

// Outside reports whether an act of this verb happens from outside, at an
// instant and without the controller.
func (v Verb) Outside() bool {
	switch v {
	case VerbCut, VerbRepair, VerbScale, VerbFail, VerbMend:
		return true
	case VerbSetUp, VerbTearDown, VerbResize, VerbMove, VerbReturn, VerbDrain, VerbUndrain:
		return false
	default:
		panic("scenarios: unknown verb " + v.String())
	}
}
