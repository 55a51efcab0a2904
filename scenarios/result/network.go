package result

// A Circuit is how one circuit stood at the end of a run.
type Circuit struct {
	Name   string   `json:"name"`
	Ends   []string `json:"ends,omitempty"`   // sites; the first is that of Turns
	Route  []string `json:"route"`            // sites in order, from its first end; empty when never set up
	Fibres []string `json:"fibres,omitempty"` // in the order of Route

	// SecondFibres is the route of the copies of a 1+1 circuit, from its first
	// end.
	SecondFibres []string `json:"second_fibres,omitempty"`

	Carries     string   `json:"carries,omitempty"` // "routed" or "moved"
	Recovery    string   `json:"recovery,omitempty"`
	Slots       *int64   `json:"slots,omitempty"` // on each fibre; absent for a whole channel
	PayloadBps  float64  `json:"payload_bps"`
	State       string   `json:"state"`
	Reason      string   `json:"reason,omitempty"`      // why it is in that state, such as "no free slot on holm-ness"
	Utilisation *float64 `json:"utilisation,omitempty"` // share of PayloadBps, the busier direction
	SetUpS      *float64 `json:"set_up_s,omitempty"`    // from the order to up; absent when in place from the start
	DelayS      *float64 `json:"delay_s,omitempty"`     // light from end to end
	Resizes     int64    `json:"resizes"`
	Preempted   int64    `json:"preempted,omitempty"` // how often others have pushed it out
	Policy      *Policy  `json:"policy,omitempty"`    // absent: its slots do not follow its load
	DownS       float64  `json:"down_s"`              // dark, in all, after the warm-up
	Turns       []Turn   `json:"turns,omitempty"`     // in order of time
}

// A Policy is what the policy of a circuit has decided.
type Policy struct {
	Grown     int64 `json:"grown"`
	Shrunk    int64 `json:"shrunk"`
	Blocked   int64 `json:"blocked"`   // decisions that could not be carried out
	Reversals int64 `json:"reversals"` // decisions the other way than the one before
}

// A Port is one output queue: one circuit, one direction.
type Port struct {
	Circuit        string   `json:"circuit"`
	From           string   `json:"from"` // the site that sends
	Utilisation    *float64 `json:"utilisation,omitempty"`
	SentPackets    int64    `json:"sent_packets"`
	LostPackets    Losses   `json:"lost_packets"`
	MeanWaitS      *float64 `json:"mean_wait_s,omitempty"`
	MeanQueueBytes *float64 `json:"mean_queue_bytes,omitempty"`
	MaxQueueBytes  *int64   `json:"max_queue_bytes,omitempty"`

	Theory *Theory `json:"theory,omitempty"` // absent when nothing arrived or the port was never free
}

// Theory is a second opinion on the mean wait of a port, by queueing theory
// from the moments measured at the port itself.
type Theory struct {
	MeanGapS     float64 `json:"mean_gap_s"`     // between arrivals
	GapCoV2      float64 `json:"gap_cov2"`       // squared coefficient of variation; 1 for Poisson arrivals
	MeanServiceS float64 `json:"mean_service_s"` // on the line
	ServiceCoV2  float64 `json:"service_cov2"`
	WaitS        float64 `json:"wait_s"`            // M/G/1: as if arrivals were a Poisson process
	CeilingS     float64 `json:"ceiling_s"`         // Kingman: no queue with independent gaps waits longer on average
	Parts        bool    `json:"parts,omitempty"`   // measured and predicted differ
	Because      string  `json:"because,omitempty"` // why that is expected
}

// A Fibre is how one fibre pair was used at the end of a run.
type Fibre struct {
	Name       string   `json:"name"`
	Ends       []string `json:"ends,omitempty"` // sites
	LengthKm   float64  `json:"length_km"`
	Channels   int64    `json:"channels,omitempty"` // wavelengths, lit or not
	Slots      int64    `json:"slots"`              // lit, each direction
	SlotsUsed  int64    `json:"slots_used"`         // the busier direction
	RiskGroups []string `json:"risk_groups,omitempty"`
}

// A Step is one act of the timeline or of the plan and what became of it.
type Step struct {
	Act      string   `json:"act"` // "cut", "set-up", "move", ...
	Subject  string   `json:"subject"`
	OrderedS *float64 `json:"ordered_s,omitempty"` // absent when it was never reached
	DoneS    *float64 `json:"done_s,omitempty"`    // absent when it was not completed
	State    string   `json:"state"`               // "done", "blocked", "waiting", ...
	Detail   string   `json:"detail,omitempty"`
}

// An Event is one line of the log of a run.
type Event struct {
	AtS     float64 `json:"at_s"`
	What    string  `json:"what"`
	Subject string  `json:"subject"`
	Detail  string  `json:"detail,omitempty"`
}

// Asked sets a value that the scenario asked for beside the one measured, as
// for a forwarding latency's percentiles or an aggregate's load.
type Asked struct {
	Subject  string   `json:"subject"`
	Figure   string   `json:"figure"`
	Unit     string   `json:"unit"`
	Asked    float64  `json:"asked"`
	Measured *float64 `json:"measured,omitempty"`
}

// A Demand is what became of a stream of requests for circuits.
type Demand struct {
	Name         string  `json:"name"`
	Offered      int64   `json:"offered"`
	Blocked      int64   `json:"blocked"`
	Active       int64   `json:"active"` // at the end
	BlockedRatio float64 `json:"blocked_ratio"`
}

// A SiteRate is a bit rate at a site.
type SiteRate struct {
	Site string  `json:"site"`
	Bps  float64 `json:"bps"`
}

// A Price is what a plan holds of the network, at the end of the run.
type Price struct {
	Slots        int64      `json:"slots"`   // summed over circuits and fibres
	SlotKm       float64    `json:"slot_km"` // slots times the length of their fibre
	Ports        int64      `json:"ports"`   // router ports, both ends counted
	TransitFreed []SiteRate `json:"transit_freed,omitempty"`
	Tightest     *Tightest  `json:"tightest,omitempty"`
}

// Tightest names the fibre with the fewest free slots.
type Tightest struct {
	Fibre     string `json:"fibre"`
	FreeSlots int64  `json:"free_slots"`
}

// An Audit is the account of every packet and every slot of a run:
// offered + copies = delivered + discarded copies + duplicates + lost +
// inside. OK is false when any identity fails; Failures then says which.
type Audit struct {
	OfferedPackets         int64    `json:"offered_packets"`
	CopyPackets            int64    `json:"copy_packets"`      // made by 1+1 circuits
	DeliveredPackets       int64    `json:"delivered_packets"` // first arrivals, duplicates not counted
	DuplicatePackets       int64    `json:"duplicate_packets"`
	DiscardedCopiesPackets int64    `json:"discarded_copies_packets"`
	LostPackets            Losses   `json:"lost_packets"`
	InsidePackets          int64    `json:"inside_packets"`
	SlotsOwned             int64    `json:"slots_owned"` // by circuits, each direction of each fibre
	SlotsUsed              int64    `json:"slots_used"`  // marked so by the fibres
	LittlePorts            int64    `json:"little_ports"`
	PacketHops             int64    `json:"packet_hops"` // packets put on a line
	OK                     bool     `json:"ok"`
	Failures               []string `json:"failures"`
}

// Lost sums the losses of all causes.
func (a Audit) Lost() int64 { return a.LostPackets.Total() }
