package result

// An Interval is a confidence interval: either a half-width around the value
// it stands beside, or its two ends. The level stands with the study.
type Interval struct {
	Half *float64 `json:"half,omitempty"`
	Low  *float64 `json:"low,omitempty"`
	High *float64 `json:"high,omitempty"`
}

// A Batch is several replications of one plan.
type Batch struct {
	Head
	Plan       string   `json:"plan"`
	Seeds      []uint64 `json:"seeds"`      // those that finished, in order
	Confidence float64  `json:"confidence"` // of every interval, such as 0.95
	Periods    []Period `json:"periods"`    // of the first seed
	Figures    []Mean   `json:"figures"`    // classes highest first, then periods in order
	Network    []Mean   `json:"network,omitempty"`
	Price      Price    `json:"price"`
	Audit      Audit    `json:"audit"` // summed over the seeds

	Defaults []Default `json:"defaults"`
	Cautions []string  `json:"cautions"`
	Runs     []*Run    `json:"runs,omitempty"` // that of the first seed, when it was asked for
}

// A Mean is one figure over the seeds of a batch.
type Mean struct {
	Class     string    `json:"class,omitempty"`   // empty for a figure of the network
	Subject   string    `json:"subject,omitempty"` // of the network: the circuit, port or fibre
	Period    string    `json:"period,omitempty"`
	Figure    string    `json:"figure"`
	Unit      string    `json:"unit"`
	Limit     *float64  `json:"limit,omitempty"`
	Mean      *float64  `json:"mean,omitempty"`
	Interval  *Interval `json:"interval,omitempty"` // absent with fewer than two seeds
	Seeds     int64     `json:"seeds"`              // in how many seeds the figure could be said
	WorstPair string    `json:"worst_pair,omitempty"`
	Met       *bool     `json:"met,omitempty"` // absent without a limit, or when undecided
}

// A Verdict says what a paired difference amounts to.
type Verdict string

// The verdicts on a figure or a class.
const (
	Better    Verdict = "better"
	Worse     Verdict = "worse"
	Same      Verdict = "same"      // no difference that matters
	Undecided Verdict = "undecided" // the interval holds both
)

// A Comparison sets plans beside a base, on the same seeds.
type Comparison struct {
	Head
	Base       string     `json:"base"`
	Seeds      []uint64   `json:"seeds"`      // those that finished under every plan, in order
	Confidence float64    `json:"confidence"` // of every interval, such as 0.95
	Plans      []Compared `json:"plans"`
	Audit      Audit      `json:"audit"` // summed over plans and seeds

	Defaults []Default `json:"defaults"`
	Cautions []string  `json:"cautions"`
	Runs     []*Run    `json:"runs,omitempty"` // of the first seed, when asked for: the base, then the plans
}

// Compared is one plan beside the base.
type Compared struct {
	Plan     string         `json:"plan"`
	Verdicts []ClassVerdict `json:"verdicts"` // classes highest first
	Price    PriceChange    `json:"price"`
	Periods  []Period       `json:"periods"` // of the plan, first seed
	Figures  []Difference   `json:"figures"` // classes highest first, then periods, then figures
	Network  []Difference   `json:"network"`
}

// A ClassVerdict is the line a change board reads first.
type ClassVerdict struct {
	Class   string  `json:"class"`
	Verdict Verdict `json:"verdict"`
	BaseMet *bool   `json:"base_met,omitempty"` // every limit, in every period
	PlanMet *bool   `json:"plan_met,omitempty"`
	Text    string  `json:"text"` // one plain sentence, without the class's name
}

// A Difference is one figure under the base and under the plan.
type Difference struct {
	Class      string     `json:"class,omitempty"`   // empty for a figure of the network
	Subject    string     `json:"subject,omitempty"` // of the network: the circuit, port or fibre
	Period     string     `json:"period,omitempty"`  // Period.Name
	Kind       PeriodKind `json:"kind,omitempty"`    // of that period
	Figure     string     `json:"figure"`
	Unit       string     `json:"unit"`
	Limit      *float64   `json:"limit,omitempty"`
	Base       *float64   `json:"base,omitempty"`
	Plan       *float64   `json:"plan,omitempty"`
	Difference *float64   `json:"difference,omitempty"` // plan minus base, paired by seed
	Interval   *Interval  `json:"interval,omitempty"`   // of Difference
	WorstPair  string     `json:"worst_pair,omitempty"` // under the plan
	Verdict    Verdict    `json:"verdict,omitempty"`
	BaseMet    *bool      `json:"base_met,omitempty"`
	PlanMet    *bool      `json:"plan_met,omitempty"`
}

// A PriceChange is what a plan holds beside what the base holds.
type PriceChange struct {
	Base   Price   `json:"base"`
	Plan   Price   `json:"plan"`
	Slots  int64   `json:"slots"` // plan minus base
	SlotKm float64 `json:"slot_km"`
	Ports  int64   `json:"ports"`

	TransitFreed []SiteRate `json:"transit_freed"` // base minus plan, by site
}

// A Check is what can be said of a scenario before it runs.
type Check struct {
	Head
	Plan       string      `json:"plan"`
	Links      []Link      `json:"links"`
	Findings   []Finding   `json:"findings"` // gravest first
	Candidates []Candidate `json:"candidates"`
	Estimate   Estimate    `json:"estimate"`
	Defaults   []Default   `json:"defaults"`
	Cautions   []string    `json:"cautions"`
}

// A Link is the load of one direction of a circuit, as routed.
type Link struct {
	Circuit          string   `json:"circuit"`
	From             string   `json:"from"`
	To               string   `json:"to"`
	LoadBps          float64  `json:"load_bps"`
	PayloadBps       float64  `json:"payload_bps"`
	Utilisation      *float64 `json:"utilisation,omitempty"`       // nothing broken
	WorstUtilisation *float64 `json:"worst_utilisation,omitempty"` // under the worst single fibre failure
	WorstFibre       string   `json:"worst_fibre,omitempty"`       // which one causes it
	GrowthLeft       *float64 `json:"growth_left,omitempty"`       // factor on all loads until it is full, nothing broken
}

// A Severity grades a finding.
type Severity string

// The severities, gravest first.
const (
	Fault   Severity = "fault"   // the scenario cannot do what it says
	Warning Severity = "warning" // it will run, and may surprise
	Note    Severity = "note"
)

// A Finding is one thing a check noticed.
type Finding struct {
	Severity Severity `json:"severity"`
	Subject  string   `json:"subject"`
	Text     string   `json:"text"`
}

// A Candidate is an aggregate that a circuit of its own could carry.
type Candidate struct {
	Aggregate       string      `json:"aggregate"`
	From            string      `json:"from"`
	To              string      `json:"to"`
	Class           string      `json:"class"`
	Bps             float64     `json:"bps"`
	RoutersPassed   int64       `json:"routers_passed"` // in transit, both ends not counted
	Transit         []SiteShare `json:"transit"`
	SlotsNeeded     int64       `json:"slots_needed"` // filled to 80 % at most
	BestWay         []string    `json:"best_way"`     // fibres
	FreeSlots       *int64      `json:"free_slots,omitempty"`
	PortsFreed      int64       `json:"ports_freed"`
	TransitFreedBps float64     `json:"transit_freed_bps"` // summed over the transit routers
}

// A SiteShare is the share an aggregate has of a router's transit traffic.
type SiteShare struct {
	Site  string  `json:"site"`
	Share float64 `json:"share_ratio"`
}

// An Estimate is what one run will take.
type Estimate struct {
	PacketHops  float64  `json:"packet_hops"`
	MemoryBytes float64  `json:"memory_bytes"`
	WallS       *float64 `json:"wall_s,omitempty"` // on this machine, by a rule of thumb
}
