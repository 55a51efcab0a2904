package result

import "strconv"

// Failures is what single failures do to each class under each plan, on the
// same seeds.
type Failures struct {
	Head
	Seeds    []uint64       `json:"seeds"`
	Kinds    []string       `json:"kinds"`      // of failure tried: "fibre", "group", ...
	Scale    float64        `json:"load_ratio"` // all loads were those of the scenario times this
	BeforeS  float64        `json:"before_s"`   // measured before the failure
	AtS      float64        `json:"at_s"`       // the instant of the failure
	AfterS   float64        `json:"after_s"`    // from the failure to the end of the run
	CutsPerY float64        `json:"cuts_per_km_year"`
	RepairS  float64        `json:"repair_s"`
	Classes  []string       `json:"classes"` // highest first
	Plans    []FailuresPlan `json:"plans"`
	Audit    Audit          `json:"audit"` // summed over all runs
	Runs     int64          `json:"runs"`  // one for each plan, seed and failure
	Defaults []Default      `json:"defaults"`
	Cautions []string       `json:"cautions"`
}

// FailuresPlan is what failures do under one plan.
type FailuresPlan struct {
	Plan     string          `json:"plan"`
	Nothing  *Failure        `json:"nothing,omitempty"` // the same run with no failure
	Failures []Failure       `json:"failures"`          // what hurts the highest class most comes first
	Classes  []YearOfClass   `json:"classes"`           // highest first
	Each     []YearOfTraffic `json:"aggregates"`
}

// A Failure is one failure under one plan. Counts of aggregates are of those
// of which it is true with at least one seed.
type Failure struct {
	Rank     int64    `json:"rank"` // 1 hurts most; 0 where nothing fails
	Name     string   `json:"name"`
	Kind     string   `json:"kind"`
	LengthKm *float64 `json:"length_km,omitempty"`
	PerYear  *float64 `json:"per_year,omitempty"` // how often; absent where no rate is known
	Seeds    int64    `json:"seeds"`              // that finished

	Classes    []Hurt   `json:"classes"`              // highest first
	Unrestored []string `json:"unrestored"`           // circuits that were not back by the end, with any seed
	CutOff     []string `json:"cut_off"`              // aggregates of which nothing arrived any more, with any seed
	WorstUse   *float64 `json:"worst_use,omitempty"`  // IP bits over payload, the busiest port in after, mean over the seeds
	WorstPort  string   `json:"worst_port,omitempty"` // which one, with the first seed
	Unsettled  int64    `json:"unsettled"`            // seeds with which nothing had settled by the end
}

// A Hurt is what one failure does to one class.
type Hurt struct {
	Class         string   `json:"class"`
	LostPackets   float64  `json:"lost_packets"` // from the failure on, for any cause, mean over the seeds
	Hit           int64    `json:"aggregates_hit"`
	OutageMedianS *float64 `json:"outage_median_s,omitempty"` // over the aggregates hit and the seeds
	OutageWorstS  *float64 `json:"outage_worst_s,omitempty"`
	WorstPair     string   `json:"worst_pair,omitempty"` // the aggregate with the worst outage
	CutOff        int64    `json:"aggregates_cut_off"`
	Missed        int64    `json:"aggregates_missed"` // objective missed once all had settled, and not missed with nothing failed
}

// YearOfClass is what a class may expect of single failures in a year.
type YearOfClass struct {
	Class       string  `json:"class"`
	HurtMostBy  string  `json:"hurt_most_by,omitempty"` // the failure that loses most packets of it
	LostPackets float64 `json:"lost_packets"`           // to that failure

	Lost         *float64 `json:"lost_per_year_s,omitempty"`            // mean over its aggregates, by load
	Below        *float64 `json:"below_objective_per_year_s,omitempty"` // short of an objective that is met when nothing fails
	Availability *float64 `json:"availability_ratio,omitempty"`
	WorstLost    *float64 `json:"worst_lost_per_year_s,omitempty"`
	WorstPair    string   `json:"worst_pair,omitempty"`
}

// YearOfTraffic is what an aggregate may expect of single failures in a year.
type YearOfTraffic struct {
	Aggregate    string  `json:"aggregate"`
	Class        string  `json:"class"`
	Lost         float64 `json:"lost_per_year_s"`
	Below        float64 `json:"below_objective_per_year_s"`
	Availability float64 `json:"availability_ratio"`
}

func (t *longTable) failures(r *Failures) {
	t.count("failures", r.Scenario, "seeds", UnitCount, int64(len(r.Seeds)))
	t.value("failures", r.Scenario, "", "load", UnitRatio, r.Scale)
	t.value("failures", r.Scenario, "", "before", UnitSeconds, r.BeforeS)
	t.value("failures", r.Scenario, "", "after", UnitSeconds, r.AfterS)
	t.value("failures", r.Scenario, "", "cuts-per-km-year", "", r.CutsPerY)
	t.value("failures", r.Scenario, "", "repair", UnitSeconds, r.RepairS)
	for i := range r.Plans {
		p := &r.Plans[i]
		if p.Nothing != nil {
			t.failure(p.Plan+"/"+p.Nothing.Kind, p.Nothing)
		}
		for j := range p.Failures {
			t.failure(p.Plan+"/"+p.Failures[j].Kind, &p.Failures[j])
		}
		for _, y := range p.Classes {
			t.optional(p.Plan+"/class", y.Class, "", "lost-per-year", UnitSeconds, y.Lost)
			t.optional(p.Plan+"/class", y.Class, "", "below-objective-per-year", UnitSeconds, y.Below)
			t.optional(p.Plan+"/class", y.Class, "", "availability", UnitRatio, y.Availability)
			t.optional(p.Plan+"/class", y.Class, "", "worst-lost-per-year", UnitSeconds, y.WorstLost)
		}
		for _, y := range p.Each {
			t.value(p.Plan+"/aggregate", y.Aggregate, "", "lost-per-year", UnitSeconds, y.Lost)
			t.value(p.Plan+"/aggregate", y.Aggregate, "", "below-objective-per-year", UnitSeconds, y.Below)
			t.value(p.Plan+"/aggregate", y.Aggregate, "", "availability", UnitRatio, y.Availability)
		}
	}
	t.audit(r.Audit)
}

func (t *longTable) failure(scope string, f *Failure) {
	t.count(scope, f.Name, "rank", UnitCount, f.Rank)
	t.optional(scope, f.Name, "", "length", UnitKm, f.LengthKm)
	t.optional(scope, f.Name, "", "per-year", "", f.PerYear)
	t.count(scope, f.Name, "seeds", UnitCount, f.Seeds)
	t.count(scope, f.Name, "unrestored", UnitCount, int64(len(f.Unrestored)))
	t.count(scope, f.Name, "cut-off", UnitCount, int64(len(f.CutOff)))
	t.optional(scope, f.Name, "after", "utilisation-worst", UnitRatio, f.WorstUse)
	for _, h := range f.Classes {
		name := f.Name + " " + h.Class
		t.value(scope, name, "", "lost", UnitPackets, h.LostPackets)
		t.count(scope, name, "hit", UnitCount, h.Hit)
		t.optional(scope, name, "hit", "outage-median", UnitSeconds, h.OutageMedianS)
		t.optional(scope, name, "hit", "outage-worst", UnitSeconds, h.OutageWorstS)
		t.count(scope, name, "cut-off", UnitCount, h.CutOff)
		t.row(scope, name, "after", "missed", UnitCount, strconv.FormatInt(h.Missed, 10))
	}
}
