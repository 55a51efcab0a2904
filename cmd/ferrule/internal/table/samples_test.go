package table

import "ferrule/scenarios/result"

// The samples are made by hand, not measured: small enough to check by eye,
// with every optional figure given somewhere and absent somewhere.

func sampleHead() result.Head {
	return result.Head{Tool: result.Tool{Name: "ferrule", Version: "v0"}, Scenario: "skerry-coast",
		ScenarioHash: "c0ffee", LengthS: 10, WarmUpS: 1}
}

func samplePeriods() []result.Period {
	return []result.Period{
		{Name: "normal", Kind: result.Normal, FromS: 1, ToS: 6},
		{Name: "hit", Kind: result.Hit, FromS: 6, ToS: 6.231, Act: "cut tarn-holm"},
		{Name: "after", Kind: result.After, FromS: 6.231, ToS: 10, Act: "settled", Unsettled: true},
	}
}

func spread(p50, p95, p99, p999, most float64) result.Distribution {
	return result.Distribution{Min: new(p50 / 2), Mean: new(p50), P50: &p50, P95: &p95, P99: &p99, P999: &p999, Max: &most}
}

func sampleSizing() *result.Sizing {
	return &result.Sizing{Head: sampleHead(), Plan: "video-express", Circuit: "vx", Classes: []string{"video"}, Confidence: 0.95, StepLevel: 0.997,
		Low: 1, High: 12, Least: new(int64(4)), Missed: new(int64(3)),
		Prediction: result.Prediction{LoadBps: 3.1e9, PacketB: 1420, Full: new(int64(3)), ByTheory: new(int64(3)), TightestS: new(0.01), Percentile: 0.99},
		Trail: []result.SizeStep{{Slots: 3, Seeds: 10, Standing: result.Missed, Text: "video normal pdv-p99: 14 ms ± 1 ms, limit 10 ms"},
			{Slots: 6, Seeds: 10, Standing: result.Met, Text: "every objective is met"}, {Slots: 4, Seeds: 40, Standing: result.Met, Text: "every objective is met"}},
		Audit: result.Audit{OfferedPackets: 900, DeliveredPackets: 900, OK: true}}
}

func sampleWithin() []result.Within {
	half := 0.0004
	return []result.Within{
		{Class: "voice", Period: "normal", MeanS: new(0.0061), Interval: &result.Interval{Half: &half}, Batches: 20, Lag1: new(0.12)},
		{Class: "voice", Period: "hit", Refused: "the period is shorter than 20 batches of 5 bins"},
	}
}

func sampleRun() *result.Run {
	full := result.Outcome{OfferedPackets: 1234567, DeliveredPackets: 1234550, InsidePackets: 1,
		LostPackets:   result.Losses{{Cause: "queue", Packets: 12}, {Cause: "cut", Packets: 4}, {Cause: "ttl"}},
		LossRatio:     new(16.0 / 1234567),
		ThroughputBps: new(98.7e6), DelayS: spread(0.00412, 0.00502, 0.0412, 0.0433, 0.0501),
		PDVS: spread(0.0001, 0.0002, 0.00051, 0.00173, 0.0021), IPDVS: spread(1e-5, 3e-5, 7.77e-5, 1e-4, 2e-4),
		JitterS: new(2.34e-5), OutageS: new(0.0311), RecoveryS: new(0.231), ReorderedRatio: new(0.0),
		WorstPair: "voice-tn.out"}
	missed := full
	missed.Objective = &result.Objective{Met: new(false), Misses: []result.Miss{
		{Figure: "delay-p99", Unit: "s", Limit: 0.04, Value: 0.0412, Aggregate: "voice-tn.out"},
		{Figure: "lost-queue", Unit: "packets", Limit: 10, Value: 12}}}
	met := full
	met.Objective = &result.Objective{Met: new(true)}
	few := result.Outcome{OfferedPackets: 3, DeliveredPackets: 3, LostPackets: result.Losses{{Cause: "queue"}},
		LossRatio: new(0.0), DelayS: result.Distribution{Max: new(0.0049)}, Objective: &result.Objective{}}
	in := func(os ...result.Outcome) []result.Outcome {
		os = append([]result.Outcome(nil), os...)
		for i := range os {
			os[i].Period = samplePeriods()[i].Name
		}
		return os
	}
	r := &result.Run{Head: sampleHead(), Within: sampleWithin(), WarmUpFound: true, Plan: "as-is", Seed: 18446744073709551615, Periods: samplePeriods(),
		Classes: []result.Class{
			{Name: "voice", Limits: []result.Limit{{Figure: "delay-p99", Unit: "s", Limit: 0.04}}, WorstPair: "voice-tn.out",
				Periods: in(met, missed, few)},
			{Name: "web", Periods: in(full, full, few)[:2]},
		},
		Circuits: []result.Circuit{
			{Name: "th", Route: []string{"tarn", "holm"}, PayloadBps: 1243950000, State: "up", Utilisation: new(0.4321),
				SetUpS: new(0.0873), DownS: 0.0032},
			{Name: "vx", PayloadBps: 2487900000, State: "blocked", Reason: "no free slot on holm-ness after three tries of every way there is"},
		},
		Ports: []result.Port{
			{Circuit: "th", From: "holm", LostPackets: result.Losses{}},
			{Circuit: "th", From: "tarn", Utilisation: new(0.4321), SentPackets: 99, MeanWaitS: new(1.23e-6),
				Theory: &result.Theory{MeanGapS: 2e-5, GapCoV2: 1.83, MeanServiceS: 9e-6, ServiceCoV2: 0.42, WaitS: 5.1e-6, CeilingS: 7.7e-6, Parts: true,
					Because: "arrivals come in bursts, more than those of a Poisson process"},
				MeanQueueBytes: new(345.6), MaxQueueBytes: new(int64(61500)), LostPackets: result.Losses{{Cause: "queue", Packets: 12}}},
			{Circuit: "hn", From: "holm", Utilisation: new(0.91), LostPackets: result.Losses{}},
		},
		Asked: []result.Asked{{Subject: "site holm", Figure: "forwarding-p99", Unit: "s", Asked: 8e-5, Measured: new(8.11e-5)}},
		Steps: []result.Step{{Act: "cut", Subject: "tarn-holm", OrderedS: new(6.0), DoneS: new(6.0), State: "done"},
			{Act: "move", Subject: "video-tn", State: "waiting", Detail: "for vx up"}},
		Price: result.Price{Slots: 12, SlotKm: 4321.5, Ports: 14,
			TransitFreed: []result.SiteRate{{Site: "holm", Bps: 612345678}, {Site: "kirk", Bps: 0}},
			Tightest:     &result.Tightest{Fibre: "holm-ness", FreeSlots: 0}},
		Audit: result.Audit{OfferedPackets: 12345678, DeliveredPackets: 12345600,
			LostPackets:   result.Losses{{Cause: "queue", Packets: 50}, {Cause: "cut", Packets: 25}},
			InsidePackets: 3, SlotsOwned: 24, SlotsUsed: 24, LittlePorts: 14, OK: true},
		Cautions: []string{result.StandingCautions()[0], "Voice has 3 packets in period after: its percentiles cannot be said."},
	}
	for i := range 5 {
		r.Events = append(r.Events, result.Event{AtS: 6 + float64(i)/1e6, What: "down", Subject: "th", Detail: "light lost"})
	}
	return r
}

func sampleComparison() *result.Comparison {
	half := func(v float64) *result.Interval { return &result.Interval{Half: &v} }
	c := &result.Comparison{Head: sampleHead(), Base: "as-is", Seeds: []uint64{1, 2, 3, 4, 5, 6, 7, 8}, Confidence: 0.95, Margin: 0.01,
		Growth: []result.Growth{{Plan: "as-is", Breaks: new(1.0), Steps: []result.GrowthStep{{Factor: 1, Standing: result.Missed, First: "video after loss: 2 %, limit 0.1 %"}}},
			{Plan: "video-express-live", HoldsTo: new(1.3), Steps: []result.GrowthStep{{Factor: 1.3, Standing: result.Met}, {Factor: 1.6, Standing: result.Open, First: "video normal loss: 0.1 %"}}}},
		Gates: []result.Gate{{Plan: "as-is", Standing: result.Missed, Confidence: 0.95, Holds: []result.Hold{
			{Class: "voice", Period: "normal", Figure: "delay-p99", Unit: "s", Limit: 0.04, Standing: result.Missed, Text: "41.2 ms ± 0.3 ms for voice-tn.out, limit 40 ms"},
			{Class: "voice", Period: "hit", Figure: "out", Unit: "s", Limit: 0.5, Standing: result.Met, Text: "87 ms ± 1 ms, limit 500 ms"}}},
			{Plan: "video-express-live", Standing: result.Open, Confidence: 0.95, Holds: []result.Hold{
				{Class: "video", Period: "hit", Figure: "out", Unit: "s", Limit: 0.5, Standing: result.Open, Text: "512 ms ± 30 ms, limit 500 ms; about 12 more seeds would decide it"}}}},
		Audit: result.Audit{OfferedPackets: 100, CopyPackets: 10, DeliveredPackets: 90, DuplicatePackets: 2,
			DiscardedCopiesPackets: 7, InsidePackets: 1, LostPackets: result.Losses{{Cause: "cut", Packets: 9}},
			Failures: []string{"offered + copies = 110, accounted for 109"}}}
	c.Plans = []result.Compared{{
		Plan:    "video-express-live",
		Periods: append(samplePeriods(), result.Period{Name: "change", Kind: result.Change, FromS: 2, ToS: 2.4, Act: "set-up vx"}),
		Verdicts: []result.ClassVerdict{
			{Class: "voice", Verdict: result.Better, BaseMet: new(false), PlanMet: new(true),
				Text: "delay p99 falls below its limit in normal operation and stays there through the cut, and nothing else moves by more than chance would allow"},
			{Class: "video", Verdict: result.Worse, BaseMet: new(true), PlanMet: new(false), Text: "the outage of the hit is longer"},
			{Class: "web", Verdict: result.Undecided, Text: "too few seeds"},
		},
		Price: result.PriceChange{
			Base:  result.Price{Slots: 12, SlotKm: 4320, Ports: 12, Tightest: &result.Tightest{Fibre: "tarn-holm", FreeSlots: 76}},
			Plan:  result.Price{Slots: 16, SlotKm: 6800, Ports: 14, Tightest: &result.Tightest{Fibre: "holm-ness", FreeSlots: 74}},
			Slots: 4, SlotKm: 2480, Ports: 2, TransitFreed: []result.SiteRate{{Site: "holm", Bps: 612e6}}},
		Family: result.Family{Figures: 4, Still: 1, LeastP: 0.0078125, Seeds: 8, Loose: 6, Method: "Holm"},
		Figures: []result.Difference{
			{Seeds: 8, P: new(0.0078125), PFamily: new(0.03125), PSame: new(1.0), Correlation: new(0.93), PairingGain: new(12.5),
				Class: "voice", Period: "normal", Kind: result.Normal, Figure: "delay-p99", Unit: "s", Limit: new(0.04), Base: new(0.0412),
				Plan: new(0.00894), Difference: new(-0.03226), Interval: half(0.00081), WorstPair: "voice-tn.out",
				Verdict: result.Better, BaseMet: new(false), PlanMet: new(true)},
			{Class: "voice", Period: "normal", Kind: result.Normal, Figure: "pdv-p99.9", Unit: "s", Limit: new(0.002), Base: new(0.00012),
				Plan: new(0.0), Difference: new(-0.00012), Verdict: result.Same, BaseMet: new(true), PlanMet: new(true)},
			{Exploratory: true, Class: "voice", Period: "normal", Kind: result.Normal, Figure: "loss", Unit: "ratio", Limit: new(1e-4), Base: new(3.1e-5),
				Plan: new(2.9e-7), Difference: new(-3.071e-5), Interval: &result.Interval{Low: new(-3.3e-5), High: new(-2.8e-5)},
				Verdict: result.Better},
			{Class: "voice", Period: "change", Kind: result.Change, Figure: "delay-p99", Unit: "s", Plan: new(0.009)},
			{Seeds: 8, P: new(0.0078125), PFamily: new(0.03125),
				Class: "video", Period: "hit", Kind: result.Hit, Figure: "out", Unit: "s", Limit: new(0.5), Base: new(0.0871),
				Plan: new(0.612), Difference: new(0.5249), Interval: half(0.0102), WorstPair: "video-of-a-long-name-tarn-ness.out",
				Verdict: result.Worse, BaseMet: new(true), PlanMet: new(false)},
			{Class: "video", Period: "after", Kind: result.After, Figure: "loss", Unit: "ratio", Limit: new(1e-3), Base: new(2e-4), Plan: new(1e-4),
				Difference: new(-1e-4), Interval: half(1.2e-4), Verdict: result.Undecided, BaseMet: new(true), PlanMet: new(true),
				Seeds: 8, P: new(0.09), PFamily: new(0.18), PSame: new(0.7), MoreSeeds: new(int64(12))},
			{Class: "voice", Period: "after", Kind: result.After, Figure: "delay-p99", Unit: "s", Limit: new(0.04), Base: new(0.0121),
				Plan: new(0.0121), Difference: new(0.0), Interval: half(0), Verdict: result.Same, BaseMet: new(true), PlanMet: new(true)},
		},
		Network: []result.Difference{
			{Subject: "th from tarn", Figure: "utilisation", Unit: "ratio", Base: new(0.91), Plan: new(0.62), Difference: new(-0.29),
				Interval: half(0.004)},
			{Subject: "holm", Figure: "transit", Unit: "bit/s", Base: new(9.1e8), Plan: new(2.98e8), Difference: new(-6.12e8)},
		},
	}}
	return c
}

func sampleBatch() *result.Batch {
	return &result.Batch{Stopping: &result.Stopping{Figure: "delay-p99", Precision: 0.05, AtMost: 200, Reached: true,
		Worst: "voice NORMAL", WorstHalf: 0.041, Looks: []int64{10, 17, 24}}, Head: sampleHead(), Plan: "as-is", Seeds: []uint64{1, 2, 3}, Confidence: 0.95, Periods: samplePeriods(),
		Figures: []result.Mean{
			{Class: "voice", Period: "normal", Figure: "delay-p99", Unit: "s", Limit: new(0.04), Mean: new(0.0123),
				Pooled: new(0.0127), PooledInterval: &result.Interval{Low: new(0.0119), High: new(0.0133)},
				Interval: &result.Interval{Half: new(0.00021)}, Seeds: 3, WorstPair: "voice-tn.out", Met: new(true)},
			{Class: "voice", Period: "normal", Figure: "delay-p99.9", Unit: "s", Seeds: 0},
			{Class: "web", Period: "normal", Figure: "throughput", Unit: "bit/s", Mean: new(4.5e9),
				Interval: &result.Interval{Low: new(4.4e9), High: new(4.7e9)}, Seeds: 3},
			{Class: "voice", Period: "hit", Figure: "out", Unit: "s", Limit: new(0.2), Mean: new(0.31), Seeds: 1, Met: new(false)},
		},
		Network: []result.Mean{{Subject: "th from tarn", Figure: "utilisation", Unit: "ratio", Mean: new(0.43),
			Interval: &result.Interval{Half: new(0.01)}, Seeds: 3}},
		Price: result.Price{Slots: 12, SlotKm: 4320, Ports: 12},
		Audit: result.Audit{OfferedPackets: 100, DeliveredPackets: 100, OK: true, SlotsOwned: 4, SlotsUsed: 4, LittlePorts: 2}}
}

func sampleCheck() *result.Check {
	return &result.Check{Head: sampleHead(), Plan: "as-is",
		Links: []result.Link{
			{Circuit: "th", From: "tarn", To: "holm", LoadBps: 9e8, PayloadBps: 1.24395e9, Utilisation: new(0.7235),
				WorstUtilisation: new(1.31), WorstFibre: "holm-ness", GrowthLeft: new(1.382)},
			{Circuit: "th", From: "holm", To: "tarn", PayloadBps: 1.24395e9, Utilisation: new(0.0)},
		},
		Findings: []result.Finding{
			{Severity: result.Fault, Subject: "circuits th", Text: "a cut of holm-ness sends 1.63 Gb/s through 1.24 Gb/s: queues fill and every class below voice loses packets until it is repaired"},
			{Severity: result.Note, Subject: "timing", Text: "wait-to-restore is longer than the run"},
		},
		Candidates: []result.Candidate{
			{Aggregate: "video-tn.out", From: "tarn", To: "ness", Class: "video", Bps: 3e8, RoutersPassed: 1,
				Transit: []result.SiteShare{{Site: "holm", Share: 0.335}}, SlotsNeeded: 1, BestWay: []string{"tarn-holm", "holm-ness"},
				FreeSlots: new(int64(74)), PortsFreed: 2, TransitFreedBps: 3e8},
			{Aggregate: "web-tn.out", From: "tarn", To: "ness", Class: "web", Bps: 3e7, SlotsNeeded: 1},
		},
		Estimate: result.Estimate{PacketHops: 43.21e6, MemoryBytes: 87e6, WallS: new(7.89)},
		Defaults: []result.Default{{Key: "defaults.router.forwarding", Value: "15us"}},
		Cautions: []string{"No demand is given for class signalling."}}
}
