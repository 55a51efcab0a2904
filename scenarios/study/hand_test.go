package study

import (
	"context"
	"math"
	"testing"

	"ferrule/scenarios/result"
)

// hand is a run made by hand: one class, voice, with a limit on the 99th
// percentile of its delay, in one period. The class's figure is that of its
// worst aggregate.
type hand struct {
	seed  uint64
	p99   *float64
	limit float64
	pairs []float64 // p99 of aggregates a.out, b.out, ...; negative: cannot be said
}

func (h hand) run() *result.Run {
	out := func(p99 *float64) []result.Outcome {
		return []result.Outcome{{Period: "normal", OfferedPackets: 100, DeliveredPackets: 99,
			LostPackets: result.Losses{{Cause: "queue", Packets: 1}}, LossRatio: new(0.01),
			DelayS: result.Distribution{P99: p99}}}
	}
	r := &result.Run{Head: result.Head{Scenario: "hand", LengthS: 2, WarmUpS: 1}, Seed: h.seed,
		Periods: []result.Period{{Name: "normal", Kind: result.Normal, FromS: 1, ToS: 2}},
		Classes: []result.Class{{Name: "voice", Periods: out(h.p99)}},
		Price:   result.Price{Slots: 2, SlotKm: 20, Ports: 4},
		Audit:   result.Audit{OfferedPackets: 100, DeliveredPackets: 99, LostPackets: result.Losses{{Cause: "queue", Packets: 1}}, OK: true}}
	if h.limit > 0 {
		r.Classes[0].Limits = []result.Limit{{Figure: result.FigDelayP99, Unit: result.UnitSeconds, Limit: h.limit}}
	}
	for i, v := range h.pairs {
		p99 := new(v)
		if v < 0 {
			p99 = nil
		}
		r.Aggregates = append(r.Aggregates, result.Aggregate{Name: string(rune('a'+i)) + ".out", Class: "voice", Periods: out(p99)})
	}
	return r
}

// hands makes a sample of each value, with seeds 1, 2, and so on.
func hands(values ...float64) []*sample {
	var out []*sample
	for i, v := range values {
		out = append(out, sampleOf(hand{seed: uint64(i + 1), p99: new(v)}.run()))
	}
	return out
}

// serve is the replicate that hands out runs of a table by plan and seed.
func serve(table map[job]*result.Run) replicate {
	return func(ctx context.Context, j job, progress func(done, total float64)) (*result.Run, error) {
		progress(1, 2)
		return table[j], ctx.Err()
	}
}

// near fails unless got is want within a relative 10^-6, which is what the
// worked examples are rounded to.
func near(t *testing.T, what string, got, want float64) {
	t.Helper()
	if !(math.Abs(got-want) <= 1e-6*math.Abs(want)) {
		t.Errorf("%s: got %.9g, want %.9g", what, got, want)
	}
}

// meanFigure is the mean of a figure of voice in a batch.
func meanFigure(t *testing.T, b *result.Batch, figure string) result.Mean {
	t.Helper()
	for _, m := range b.Figures {
		if m.Class == "voice" && m.Period == "normal" && m.Figure == figure {
			return m
		}
	}
	t.Fatalf("no figure %s in %+v", figure, b.Figures)
	return result.Mean{}
}

// differenceOf is a compared figure of voice under the first plan.
func differenceOf(t *testing.T, c *result.Comparison, figure string) result.Difference {
	t.Helper()
	for _, d := range c.Plans[0].Figures {
		if d.Class == "voice" && d.Period == "normal" && d.Figure == figure {
			return d
		}
	}
	t.Fatalf("no figure %s in %+v", figure, c.Plans[0].Figures)
	return result.Difference{}
}
