package scenarios

import (
	"reflect"

	"ferrule/des"
	"ferrule/nodes"
)

// The raw types are the file as it stands: a field that is nil or "" was not
// given. Structs stand by value, so that one bad field costs only itself.

type rawScenario struct {
	Scenario   string         `mapstructure:"scenario"`
	About      string         `mapstructure:"about"`
	Run        rawRun         `mapstructure:"run"`
	Defaults   rawDefaults    `mapstructure:"defaults"`
	Classes    []rawClass     `mapstructure:"classes"`
	Traffic    []rawTraffic   `mapstructure:"traffic"`
	Sites      []rawSite      `mapstructure:"sites"`
	Fibres     []rawFibre     `mapstructure:"fibres"`
	Circuits   []rawCircuit   `mapstructure:"circuits"`
	Demand     []rawDemand    `mapstructure:"demand"`
	Aggregates []rawAggregate `mapstructure:"aggregates"`
	Requests   []rawRequest   `mapstructure:"requests"`
	Controller rawController  `mapstructure:"controller"`
	Timeline   []rawAct       `mapstructure:"timeline"`
	Plans      []rawPlan      `mapstructure:"plans"`
}

type rawRun struct {
	Length *des.Time `mapstructure:"length"`
	WarmUp *warmUp   `mapstructure:"warm-up"`
	Seed   *uint64   `mapstructure:"seed"`
}

type rawDefaults struct {
	Fibre   rawFibreDefaults   `mapstructure:"fibre"`
	Circuit rawCircuitDefaults `mapstructure:"circuit"`
	Router  rawRouter          `mapstructure:"router"`
	Timing  rawTiming          `mapstructure:"timing"`
}

type rawFibreDefaults struct {
	Channels    *int        `mapstructure:"channels"`
	ChannelRate *nodes.Rate `mapstructure:"channel-rate"`
	Lit         *int        `mapstructure:"lit"`
}

type rawCircuitDefaults struct {
	Carries  string       `mapstructure:"carries"`
	Recovery string       `mapstructure:"recovery"`
	HoldOff  *des.Time    `mapstructure:"hold-off"`
	WhenDown string       `mapstructure:"when-down"`
	MTU      *nodes.Bytes `mapstructure:"mtu"`
	Framing  string       `mapstructure:"framing"`
}

type rawRouter struct {
	Forwarding *timeLaw `mapstructure:"forwarding"`
}

type rawTiming struct {
	Detect         *des.Time `mapstructure:"detect"`
	Command        *timeLaw  `mapstructure:"command"`
	CommandsAtOnce *int      `mapstructure:"commands-at-once"`
	Commands       string    `mapstructure:"commands"`
	WaitToRestore  *des.Time `mapstructure:"wait-to-restore"`
	Switch         *des.Time `mapstructure:"switch"`
	Relock         *des.Time `mapstructure:"re-lock"`
	Level          *des.Time `mapstructure:"level"`
	Ramp           string    `mapstructure:"ramp"`
	Report         string    `mapstructure:"report"`
	Correlation    *des.Time `mapstructure:"correlation"`
	TrafficReady   *des.Time `mapstructure:"traffic-ready"`
	Converge       *des.Time `mapstructure:"converge"`
	LossOfMessage  *ratio    `mapstructure:"loss-of-message"`
}

type rawClass struct {
	Name      string       `mapstructure:"name"`
	DSCP      *codePoint   `mapstructure:"dscp"`
	Queue     string       `mapstructure:"queue"`
	Buffer    *buffer      `mapstructure:"buffer"`
	Drop      string       `mapstructure:"drop"`
	ECN       *bool        `mapstructure:"ecn"`
	Traffic   string       `mapstructure:"traffic"`
	Objective rawObjective `mapstructure:"objective"`
}

// rawObjective has one field for each Figure, in the same order.
type rawObjective struct {
	DelayMean *des.Time `mapstructure:"delay-mean"`
	DelayP50  *des.Time `mapstructure:"delay-p50"`
	DelayP95  *des.Time `mapstructure:"delay-p95"`
	DelayP99  *des.Time `mapstructure:"delay-p99"`
	DelayP999 *des.Time `mapstructure:"delay-p99.9"`
	PDVP50    *des.Time `mapstructure:"pdv-p50"`
	PDVP95    *des.Time `mapstructure:"pdv-p95"`
	PDVP99    *des.Time `mapstructure:"pdv-p99"`
	PDVP999   *des.Time `mapstructure:"pdv-p99.9"`
	IPDVP999  *des.Time `mapstructure:"ipdv-p99.9"`
	Jitter    *des.Time `mapstructure:"jitter"`
	Loss      *ratio    `mapstructure:"loss"`
	Out       *des.Time `mapstructure:"out"`

	TransferP50 *des.Time `mapstructure:"transfer-p50"`
	TransferP95 *des.Time `mapstructure:"transfer-p95"`
	TransferP99 *des.Time `mapstructure:"transfer-p99"`
}

type rawTraffic struct {
	Name            string      `mapstructure:"name"`
	Model           string      `mapstructure:"model"`
	Packet          *byteLaw    `mapstructure:"packet"`
	Rate            *nodes.Rate `mapstructure:"rate"`
	Codec           string      `mapstructure:"codec"`
	Frames          *frequency  `mapstructure:"frames"`
	GroupOfPictures *int        `mapstructure:"group-of-pictures"`
	Size            *byteLaw    `mapstructure:"size"`
	Pace            *nodes.Rate `mapstructure:"pace"`
	Transport       string      `mapstructure:"transport"`
	FlowsArrive     string      `mapstructure:"flows-arrive"`
	Hold            *timeLaw    `mapstructure:"hold"`
	Talkspurts      *bool       `mapstructure:"talkspurts"`
	Spurt           *des.Time   `mapstructure:"spurt"`
	Silence         *des.Time   `mapstructure:"silence"`
	Hurst           *ratio      `mapstructure:"hurst"`
	Peak            *nodes.Rate `mapstructure:"peak"`
	OnFor           *des.Time   `mapstructure:"on-for"`
	OffFor          *des.Time   `mapstructure:"off-for"`
	Low             *ratio      `mapstructure:"low"`
	HighFor         *des.Time   `mapstructure:"high-for"`
	LowFor          *des.Time   `mapstructure:"low-for"`
	Parse           *des.Time   `mapstructure:"parse"`
	File            string      `mapstructure:"file"`
	Format          string      `mapstructure:"format"`
	Loop            *bool       `mapstructure:"loop"`
	TimeScale       *percent    `mapstructure:"time-scale"`
	Assign          []rawAssign `mapstructure:"assign"`
	Start           *des.Time   `mapstructure:"start"`
	Stop            *des.Time   `mapstructure:"stop"`
}

// rawAssign is a rule that gives packets of a file to a class.
type rawAssign struct {
	DSCP  *codePoint `mapstructure:"dscp"`
	From  string     `mapstructure:"from"`
	To    string     `mapstructure:"to"`
	Class string     `mapstructure:"class"`
	Way   string     `mapstructure:"way"`
}

type rawSite struct {
	Name     string         `mapstructure:"name"`
	Position []nodes.Length `mapstructure:"position"`
	Router   rawRouter      `mapstructure:"router"`
	Convert  *bool          `mapstructure:"convert"`
}

type rawFibre struct {
	Name        string        `mapstructure:"name"`
	Between     []string      `mapstructure:"between"`
	Length      *nodes.Length `mapstructure:"length"`
	Channels    *int          `mapstructure:"channels"`
	ChannelRate *nodes.Rate   `mapstructure:"channel-rate"`
	Lit         *int          `mapstructure:"lit"`
	RiskGroups  []string      `mapstructure:"risk-groups"`
}

type rawCircuit struct {
	Name            string       `mapstructure:"name"`
	Between         []string     `mapstructure:"between"`
	Along           []string     `mapstructure:"along"`
	Slots           *int         `mapstructure:"slots"`
	Container       string       `mapstructure:"container"`
	Channel         *nodes.Rate  `mapstructure:"channel"`
	Rate            *nodes.Rate  `mapstructure:"rate"`
	Recovery        string       `mapstructure:"recovery"`
	Carries         string       `mapstructure:"carries"`
	Metric          *int         `mapstructure:"metric"`
	SetUpPriority   *int         `mapstructure:"set-up-priority"`
	HoldingPriority *int         `mapstructure:"holding-priority"`
	HoldOff         *des.Time    `mapstructure:"hold-off"`
	Shrink          *bool        `mapstructure:"shrink"`
	Policy          rawPolicy    `mapstructure:"policy"`
	WhenDown        string       `mapstructure:"when-down"`
	MTU             *nodes.Bytes `mapstructure:"mtu"`
	Framing         string       `mapstructure:"framing"`
	Choose          string       `mapstructure:"choose"`
}

type rawDemand struct {
	Matrix string   `mapstructure:"matrix"`
	Scale  *percent `mapstructure:"scale"`
}

type rawAggregate struct {
	Name    string      `mapstructure:"name"`
	Between []string    `mapstructure:"between"`
	From    string      `mapstructure:"from"`
	To      string      `mapstructure:"to"`
	Class   string      `mapstructure:"class"`
	Load    *nodes.Rate `mapstructure:"load"`
	Flows   *int        `mapstructure:"flows"`
	Traffic string      `mapstructure:"traffic"`
	Start   *des.Time   `mapstructure:"start"`
	Stop    *des.Time   `mapstructure:"stop"`
	Police  rawPolice   `mapstructure:"police"`
	Shape   rawShape    `mapstructure:"shape"`
}

type rawPolice struct {
	Rate      *nodes.Rate  `mapstructure:"rate"`
	Burst     *nodes.Bytes `mapstructure:"burst"`
	Excess    *nodes.Bytes `mapstructure:"excess"`
	Peak      *nodes.Rate  `mapstructure:"peak"`
	PeakBurst *nodes.Bytes `mapstructure:"peak-burst"`
}

type rawShape struct {
	Rate    *nodes.Rate  `mapstructure:"rate"`
	Burst   *nodes.Bytes `mapstructure:"burst"`
	Longest *des.Time    `mapstructure:"longest"`
}

type rawRequest struct {
	Name            string     `mapstructure:"name"`
	Between         []string   `mapstructure:"between"`
	Slots           *int       `mapstructure:"slots"`
	Arrive          *frequency `mapstructure:"arrive"`
	Hold            *timeLaw   `mapstructure:"hold"`
	SetUpPriority   *int       `mapstructure:"set-up-priority"`
	HoldingPriority *int       `mapstructure:"holding-priority"`
	Choose          string     `mapstructure:"choose"`
}

type rawController struct {
	At       string    `mapstructure:"at"`
	Compute  *des.Time `mapstructure:"compute"`
	Retry    *des.Time `mapstructure:"retry"`
	Poll     *des.Time `mapstructure:"poll"`
	Attempts *int      `mapstructure:"attempts"`

	Routing     string    `mapstructure:"routing"`
	Hello       *des.Time `mapstructure:"hello"`
	AdjacencyUp *des.Time `mapstructure:"adjacency-up"`
	Flood       *des.Time `mapstructure:"flood"`
	Install     *des.Time `mapstructure:"install"`
}

type rawPlan struct {
	Name    string   `mapstructure:"name"`
	About   string   `mapstructure:"about"`
	On      string   `mapstructure:"on"`
	InPlace []rawAct `mapstructure:"in-place"`
	Steps   []rawAct `mapstructure:"steps"`

	WhenBlocked string `mapstructure:"when-blocked"`
}

// rawAct has one field for each verb and all their details.
type rawAct struct {
	At    *des.Time `mapstructure:"at"`
	After string    `mapstructure:"after"`

	Cut      string     `mapstructure:"cut"`
	Repair   string     `mapstructure:"repair"`
	SetUp    rawCircuit `mapstructure:"set-up"`
	Circuit  rawCircuit `mapstructure:"circuit"` // set-up, of what is in place
	TearDown string     `mapstructure:"tear-down"`
	Resize   string     `mapstructure:"resize"`
	Move     string     `mapstructure:"move"`
	Return   string     `mapstructure:"return"`
	Scale    string     `mapstructure:"scale"`
	Fail     string     `mapstructure:"fail"`
	Mend     string     `mapstructure:"mend"`
	Drain    string     `mapstructure:"drain"`
	Undrain  string     `mapstructure:"undrain"`

	Where     string      `mapstructure:"where"`
	From      string      `mapstructure:"from"`
	To        string      `mapstructure:"to"`
	Slots     *int        `mapstructure:"slots"`
	Container string      `mapstructure:"container"`
	Channel   *nodes.Rate `mapstructure:"channel"`
	Onto      []string    `mapstructure:"onto"`
	Order     string      `mapstructure:"order"`
	By        *percent    `mapstructure:"by"`
}

// Leaves with a form of their own.
type (
	ratio     float64 // 1e-4 or 0.01%
	percent   float64 // 130%, held as 1.3
	frequency float64 // 25/s
	codePoint uint8   // EF, AF41 or 46
	warmUp    struct {
		Length des.Time
		Auto   bool
	}
	buffer struct {
		Time    des.Time
		Bytes   nodes.Bytes
		Packets int
	}
)

// Types of leaves that may be mappings in the file though they are decoded in
// one go.
var opaque = map[reflect.Type]bool{
	reflect.TypeFor[timeLaw](): true, reflect.TypeFor[byteLaw](): true,
}

// Types of leaves that are one word or number in the file though they are
// structs here.
var scalars = map[reflect.Type]bool{reflect.TypeFor[warmUp](): true, reflect.TypeFor[buffer](): true}
