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

	Gates    []Gate    `json:"gates,omitempty"`    // of the plan, when a class has an objective
	Stopping *Stopping `json:"stopping,omitempty"` // how the number of seeds was found; absent when it was given
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

	// Of a percentile of the delay, Mean being the mean of the seeds'
	// percentiles: the percentile of the packets of all seeds together, and how
	// many independent exceedances a seed has. With too few of them Interval or Pooled is
	// absent.
	Pooled         *float64  `json:"pooled,omitempty"`
	PooledInterval *Interval `json:"pooled_interval,omitempty"`
	Effective      *float64  `json:"effective,omitempty"`
}

// A Verdict says what a paired difference amounts to.
type Verdict string

// The verdicts on a figure or a class.
const (
	Better    Verdict = "better"
	Worse     Verdict = "worse"
	Same      Verdict = "same"      // identical, or surely no difference that matters
	Mixed     Verdict = "mixed"     // of a class: better in some figures, worse in others
	Undecided Verdict = "undecided" // no evidence either way
)

// A Comparison sets plans beside a base, on the same seeds.
type Comparison struct {
	Head
	Base       string     `json:"base"`
	Seeds      []uint64   `json:"seeds"`                  // those that finished under every plan, in order
	Confidence float64    `json:"confidence"`             // of every interval, such as 0.95
	Margin     float64    `json:"margin_ratio,omitempty"` // share of a limit or a figure that does not matter
	Plans      []Compared `json:"plans"`
	Audit      Audit      `json:"audit"`            // summed over plans and seeds
	Gates      []Gate     `json:"gates,omitempty"`  // of the base, then of the plans, when a class has an objective
	Growth     []Growth   `json:"growth,omitempty"` // of the base, then of the plans, when it was asked for

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
	Family   Family         `json:"family"`
	Figures  []Difference   `json:"figures"` // classes highest first, then periods, then figures
	Network  []Difference   `json:"network"`
}

// A Family is the set of figures whose verdicts are guarded together: those
// with an objective, in every period. The chance that any of them is called
// better or worse though none is stays at one minus the confidence. Everything
// outside it is exploratory.
type Family struct {
	Figures int64   `json:"figures"`          // guarded together
	Still   int64   `json:"identical"`        // further figures with an objective, identical in every seed: no test
	LeastP  float64 `json:"least_p"`          // that so many seeds can show
	Seeds   int64   `json:"seeds"`            // the least that can call one of the family better or worse
	Loose   int64   `json:"loose"`            // the same of an exploratory figure
	Method  string  `json:"method,omitempty"` // of the correction
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

	Seeds       int64    `json:"seeds,omitempty"`        // pairs the difference is taken over
	Exploratory bool     `json:"exploratory,omitempty"`  // it has no objective and is guarded against chance alone
	P           *float64 `json:"p,omitempty"`            // of no difference, never below Family.LeastP of those seeds
	PFamily     *float64 `json:"p_family,omitempty"`     // the same, corrected over the family; the verdict is by it
	SameWithin  *float64 `json:"same_within,omitempty"`  // in Unit: a smaller difference does not matter
	PSame       *float64 `json:"p_same,omitempty"`       // of a difference beyond SameWithin
	Correlation *float64 `json:"correlation,omitempty"`  // over the seeds, of base and plan
	PairingGain *float64 `json:"pairing_gain,omitempty"` // so many times the seeds it would take without pairing
	MoreSeeds   *int64   `json:"more_seeds,omitempty"`   // that would decide it with a chance of 80 %, if it is as it looks
}

// A Standing says whether an objective is kept, with confidence.
type Standing string

// How an objective stands.
const (
	Met    Standing = "met"       // the interval lies within the limit
	Missed Standing = "missed"    // it lies beyond, and not by the chance of many looks
	Open   Standing = "undecided" // neither
)

// A Gate is the objectives of one plan, judged for a pipeline: met when all
// are met with confidence, missed when one is missed with confidence.
type Gate struct {
	Plan       string   `json:"plan"`
	Standing   Standing `json:"standing"`
	Confidence float64  `json:"confidence"` // of the standing as a whole
	Holds      []Hold   `json:"objectives"` // classes highest first, then periods, then figures
}

// A Hold is one objective over the seeds: the figure of the worst aggregate of
// each seed against the limit.
type Hold struct {
	Class     string    `json:"class"`
	Period    string    `json:"period"`
	Figure    string    `json:"figure"`
	Unit      string    `json:"unit"`
	Limit     float64   `json:"limit"`
	Mean      *float64  `json:"mean,omitempty"`
	Interval  *Interval `json:"interval,omitempty"`
	WorstPair string    `json:"worst_pair,omitempty"`
	Seeds     int64     `json:"seeds"`              // in how many it could be said
	SeedsMet  int64     `json:"seeds_met"`          // in how many of them it was met
	PMissed   *float64  `json:"p_missed,omitempty"` // that it is not missed, corrected over the objectives of the plan
	MoreSeeds *int64    `json:"more_seeds,omitempty"`
	Standing  Standing  `json:"standing"`
	Text      string    `json:"text"` // in one sentence
}

// Growth says how much more load a plan bears: its objectives in the settled
// periods, normal and after, with all loads times a factor. The figures of the
// comparison itself are those of the first factor.
type Growth struct {
	Plan    string       `json:"plan"`
	HoldsTo *float64     `json:"holds_to_ratio,omitempty"`  // the greatest factor up to which all tried are met with confidence
	Breaks  *float64     `json:"breaks_at_ratio,omitempty"` // the least that is missed with confidence
	Steps   []GrowthStep `json:"steps"`                     // factors upwards
}

// A GrowthStep is a plan under one factor.
type GrowthStep struct {
	Factor   float64  `json:"factor_ratio"`
	Standing Standing `json:"standing"`
	First    string   `json:"first,omitempty"` // of the objectives that are not met, the first missed one or else the first
}

// A Sizing is the search for the least circuit that keeps the objectives of
// the classes it carries, in the settled periods.
type Sizing struct {
	Head
	Plan       string     `json:"plan"`
	Circuit    string     `json:"circuit"`
	Classes    []string   `json:"classes"`    // it carries
	Confidence float64    `json:"confidence"` // of the answer as a whole
	StepLevel  float64    `json:"step_level"` // confidence of each look, so that all together have that
	Low        int64      `json:"low_slots"`  // the range searched
	High       int64      `json:"high_slots"`
	Least      *int64     `json:"least_slots,omitempty"`  // the fewest that are met with confidence
	Missed     *int64     `json:"missed_slots,omitempty"` // the most that are missed with confidence
	Prediction Prediction `json:"prediction"`
	Trail      []SizeStep `json:"trail"` // in the order of trying
	Audit      Audit      `json:"audit"`
	Defaults   []Default  `json:"defaults"`
	Cautions   []string   `json:"cautions"`
}

// A Prediction is what can be said of a circuit without running anything.
type Prediction struct {
	LoadBps    float64  `json:"load_bps"`               // on the busier direction
	PacketB    float64  `json:"packet_bytes"`           // mean
	Full       *int64   `json:"full_slots,omitempty"`   // the fewest that carry the load at all
	ByTheory   *int64   `json:"theory_slots,omitempty"` // the fewest at which M/M/1 keeps TightestS
	TightestS  *float64 `json:"tightest_s,omitempty"`   // limit on the variation of delay
	Percentile float64  `json:"percentile,omitempty"`   // it is a limit on
}

// A SizeStep is one size that was tried.
type SizeStep struct {
	Slots    int64    `json:"slots"`
	Seeds    int64    `json:"seeds"`
	Standing Standing `json:"standing"`
	Text     string   `json:"text"` // the objective that decided
}

// A Stopping says how a batch found its number of seeds.
type Stopping struct {
	Figure    string  `json:"figure"`
	Precision float64 `json:"precision_ratio"` // asked for: relative, as a share of the mean
	AtMost    int64   `json:"at_most"`         // seeds
	Reached   bool    `json:"reached"`         // within AtMost
	Worst     string  `json:"worst,omitempty"` // class and period that took longest
	WorstHalf float64 `json:"worst_ratio"`     // its half-width over its mean
	Looks     []int64 `json:"looks"`           // seeds at which precision was looked at
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

	Measured []Calibration `json:"measured,omitempty"` // if there are measurements to compare with
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
