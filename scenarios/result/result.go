// Package result is what a study hands out: versioned plain data.
//
// A [Run] is one replication, a [Batch] several seeds of one plan, a
// [Comparison] one plan beside others on the same seeds, a [Check] what can be
// said before anything runs, [Failures] what single failures do. Tables, files, pages and the console are views of
// these values and compute nothing.
//
// # The file format
//
// [Encode] writes JSON, format 1; [Decode] reads it back. Each key that holds
// a quantity ends in its SI unit: _s seconds, _bps bit/s, _bytes octets, _km
// kilometres, _packets packets, _ratio a share of one. What cannot be said,
// such as a 99.9th percentile of too few packets, is absent: never 0, never
// NaN. A file names no host, number of cores, path or time of day, so equal
// inputs give equal bytes. Later versions of format 1 may add keys; a reader
// skips what it does not know.
//
// [WriteCSV] writes the same figures as one long table with the columns
// scope, name, period, figure, unit and value.
//
// Optional figures are pointers: nil means "cannot be said". Values belong to
// whoever made them; nothing here keeps a reference or starts a goroutine.
package result

// Format is the version of the file format this package writes and reads.
const Format = 1

// A Kind says what a file holds.
type Kind string

// The kinds of result.
const (
	KindRun        Kind = "run"
	KindBatch      Kind = "batch"
	KindComparison Kind = "comparison"
	KindCheck      Kind = "check"
	KindSizing     Kind = "sizing"
	KindFailures   Kind = "failures"
)

// Tool names the program that made a result.
type Tool struct {
	Name    string `json:"name"`
	Version string `json:"version"`
}

// A Head opens every kind of result. Encode sets Format and Kind.
type Head struct {
	Format       int     `json:"format"`
	Kind         Kind    `json:"kind"`
	Tool         Tool    `json:"tool"`
	Scenario     string  `json:"scenario"`      // its name, never a path
	ScenarioHash string  `json:"scenario_hash"` // of the scenario as loaded, overrides included
	LengthS      float64 `json:"length_s"`      // simulated, warm-up included
	WarmUpS      float64 `json:"warm_up_s"`
	Partial      bool    `json:"partial,omitempty"` // interrupted: what was known by then
}

// A Default is one value the scenario did not give and the program supplied.
type Default struct {
	Key   string `json:"key"`
	Value string `json:"value"` // with its unit
}

// A Run is one replication: one scenario under one plan with one seed.
type Run struct {
	Head
	Plan       string      `json:"plan"`
	Seed       uint64      `json:"seed"`
	Periods    []Period    `json:"periods"`    // in order of time
	Classes    []Class     `json:"classes"`    // highest first
	Aggregates []Aggregate `json:"aggregates"` // in the scenario's order
	Circuits   []Circuit   `json:"circuits"`
	Ports      []Port      `json:"ports"`
	Fibres     []Fibre     `json:"fibres"`
	Steps      []Step      `json:"steps"`
	Events     []Event     `json:"events"` // in order of time
	Asked      []Asked     `json:"asked,omitempty"`
	Transit    []SiteRate  `json:"transit"` // received from a fibre and sent on by each router
	Demands    []Demand    `json:"demands,omitempty"`
	Within     []Within    `json:"within,omitempty"` // classes highest first, then periods

	WarmUpFound bool `json:"warm_up_found,omitempty"` // its end was found from the run itself
	WarmUpShort bool `json:"warm_up_short,omitempty"` // and took half of what there was: no interval is given

	Price    Price     `json:"price"`
	Audit    Audit     `json:"audit"`
	Defaults []Default `json:"defaults"`
	Cautions []string  `json:"cautions"`

	// For drawings.
	Sites  []Site   `json:"sites,omitempty"`
	Cuts   []Cut    `json:"cuts,omitempty"`   // in order of time
	Loads  []Load   `json:"loads,omitempty"`  // periods in order, then ports in the order of Ports
	Tails  []Tail   `json:"tails,omitempty"`  // classes highest first, then periods
	Series []Series `json:"series,omitempty"` // classes highest first, the whole run before close-ups
}

// A Within is the mean delay of a class in one period of one run with an
// interval from the run itself, by means of batches of bins of time. It speaks
// of this seed's traffic only as far as the period is long against what the
// traffic remembers; several seeds are worth more.
type Within struct {
	Class    string    `json:"class"`
	Period   string    `json:"period"`
	MeanS    *float64  `json:"mean_s,omitempty"`   // of the batches
	Interval *Interval `json:"interval,omitempty"` // in seconds, at 95 %
	Batches  int64     `json:"batches"`
	Lag1     *float64  `json:"lag_1,omitempty"`   // autocorrelation of the parts that batches are made of
	Refused  string    `json:"refused,omitempty"` // why there is no interval
}

// A PeriodKind says what a stretch of a run has in common.
type PeriodKind string

// The kinds of period. A packet belongs to the period it was sent in.
const (
	Normal PeriodKind = "normal" // settled, nothing broken
	Change PeriodKind = "change" // from an ordered step until settled
	Hit    PeriodKind = "hit"    // from a fault until settled
	After  PeriodKind = "after"  // settled, something broken
	Mend   PeriodKind = "mend"   // from a repair until settled
)

// PeriodKinds lists the kinds in the order in which reports show them.
func PeriodKinds() []PeriodKind { return []PeriodKind{Normal, Hit, After, Change, Mend} }

// A Period is a stretch of a run between outside acts.
type Period struct {
	Name      string     `json:"name"` // unique within the run, such as "hit" or "hit 2"
	Kind      PeriodKind `json:"kind"`
	FromS     float64    `json:"from_s"`
	ToS       float64    `json:"to_s"`
	Act       string     `json:"act,omitempty"`       // what opened it, such as "cut tarn-holm"
	Unsettled bool       `json:"unsettled,omitempty"` // ended by the next act or the horizon first
}

// A Limit is one objective: a figure and the value it must not exceed.
type Limit struct {
	Figure string  `json:"figure"` // a figure id, such as FigDelayP99
	Unit   string  `json:"unit"`
	Limit  float64 `json:"limit"`
}

// A Class is what the aggregates of one class got together.
type Class struct {
	Name      string    `json:"name"`
	Limits    []Limit   `json:"limits,omitempty"`
	WorstPair string    `json:"worst_pair,omitempty"` // aggregate furthest beyond, or nearest to, its objective
	Periods   []Outcome `json:"periods"`              // in the order of Run.Periods
}

// An Aggregate is what one direction of one aggregate got.
type Aggregate struct {
	Name      string    `json:"name"`
	From      string    `json:"from"`
	To        string    `json:"to"`
	Class     string    `json:"class"`
	CarriedBy []string  `json:"carried_by"` // circuits in order, as at the end of the run
	Periods   []Outcome `json:"periods"`    // in the order of Run.Periods
}

// An Outcome is what a class or an aggregate got in one period. DeliveredPackets
// counts first arrivals, DuplicatePackets further arrivals of the same packet.
type Outcome struct {
	Period           string       `json:"period"` // Period.Name
	OfferedPackets   int64        `json:"offered_packets"`
	DeliveredPackets int64        `json:"delivered_packets"`
	DuplicatePackets int64        `json:"duplicate_packets"`
	InsidePackets    int64        `json:"inside_packets"` // still in the network at the end
	LostPackets      Losses       `json:"lost_packets"`
	LossRatio        *float64     `json:"loss_ratio,omitempty"`
	ThroughputBps    *float64     `json:"throughput_bps,omitempty"` // IP bits delivered per second of the period
	DelayS           Distribution `json:"delay_s,omitzero"`
	PDVS             Distribution `json:"pdv_s,omitzero"`                  // RFC 5481, over the least delay of the aggregate and period
	IPDVS            Distribution `json:"ipdv_s,omitzero"`                 // RFC 3393, absolute value, successive packets
	JitterS          *float64     `json:"interarrival_jitter_s,omitempty"` // RFC 3550
	ReorderedRatio   *float64     `json:"reordered_ratio,omitempty"`       // RFC 4737
	OutageS          *float64     `json:"outage_s,omitempty"`              // sending time from first lost to next delivered
	RecoveryS        *float64     `json:"recovery_s,omitempty"`            // from the fault until the objective is met again
	Transfers        *Transfers   `json:"transfers,omitempty"`             // of closed-loop transports; nil when there are none
	WorstPair        string       `json:"worst_pair,omitempty"`            // of a class: the worst aggregate in this period
	Objective        *Objective   `json:"objective,omitempty"`             // nil when the class has none
}

// Transfers is what closed-loop transports did. A transfer belongs to the
// period it was asked for in; the rest to that in which it happened.
type Transfers struct {
	Asked       int64        `json:"asked"`                 // transfers begun
	Complete    int64        `json:"complete"`              // by the end of the run
	TimeS       Distribution `json:"time_s,omitzero"`       // of those complete: from the request to the last byte
	GoodputBps  *float64     `json:"goodput_bps,omitempty"` // payload bits that arrived for the first time, per second of the period
	ResentCount int64        `json:"resent_packets"`        // segments sent again
	Timeouts    int64        `json:"time_outs"`             // retransmission timers that ran out
}

// An Objective says whether every limit held. Met is nil when that cannot be
// said, as when too few packets were sent.
type Objective struct {
	Met    *bool  `json:"met,omitempty"`
	Misses []Miss `json:"misses"`
}

// A Miss is one limit that was not kept.
type Miss struct {
	Figure    string  `json:"figure"`
	Unit      string  `json:"unit"`
	Limit     float64 `json:"limit"`
	Value     float64 `json:"value"`
	Aggregate string  `json:"aggregate,omitempty"` // whose figure it is
}

// A Distribution is the summary of many values, in seconds.
type Distribution struct {
	Min  *float64 `json:"min,omitempty"`
	Mean *float64 `json:"mean,omitempty"`
	P50  *float64 `json:"p50,omitempty"`
	P95  *float64 `json:"p95,omitempty"`
	P99  *float64 `json:"p99,omitempty"`
	P999 *float64 `json:"p999,omitempty"`
	Max  *float64 `json:"max,omitempty"`
}

// StandingCautions are true of every result, whatever was run. Reports print
// them at their end; a study adds its own in Cautions.
func StandingCautions() []string {
	return []string{
		"A model's figure is no acceptance test: measure the real service before relying on it.",
		"Aggregates that carry emergency calls follow local rules and licensed practice, whatever the figures say.",
		"Work on fibre follows laser-safety practice.",
	}
}
