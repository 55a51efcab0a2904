package library_test

import (
	"context"
	"math"
	"testing"

	"ferrule/scenarios/result"
	"ferrule/scenarios/study"
)

// figureOf is a figure of a class in the first period, which must be there.
func figureOf(t *testing.T, r *result.Run, class, id string) float64 {
	t.Helper()
	for _, c := range r.Classes {
		if c.Name != class {
			continue
		}
		v, ok := c.Periods[0].Figure(id)
		if !ok {
			t.Fatalf("%s of %s cannot be said", id, class)
		}
		return v.Value
	}
	t.Fatalf("there is no class %s", class)
	panic("unreachable")
}

// near fails unless got lies within a share off of want.
func near(t *testing.T, what string, got, want, off float64) {
	t.Helper()
	if !(math.Abs(got-want) <= off*want) {
		t.Errorf("%s: %.6g, want %.6g within %.2g %%", what, got, want, 100*off)
	}
}

// light is what a kilometre of fibre adds, in seconds.
const light = 4.897e-6

// The one-queue scenarios give what their comments and the books say. Delays
// are those of the book and the light. A tolerance is about 3.3 standard
// deviations of a run of that length, as measured over runs of the same queue.
//
// M/M/1, M/M/1/K and the wait of M/G/1: L. Kleinrock, Queueing Systems vol. 1
// (1975); M/D/1: A. K. Erlang (1909); M/D/1/K: computed from the chain embedded
// at departures; priorities: A. Cobham, J.O.R.S.A. 2 (1954).
func TestTextbookQueues(t *testing.T) {
	const ms = 1e-3
	type expected struct {
		class, figure string
		want, off     float64
	}
	for _, c := range []struct {
		scenario, length string
		want             []expected
	}{
		{"one-queue-poisson", "1010s", []expected{
			{"all", "delay-mean", 4.0*ms + light, 0.028}, {"all", "delay-p50", 2.772589*ms + light, 0.03}, {"all", "delay-p99", 18.420681*ms + light, 0.065}}},
		{"one-queue-equal", "1010s", []expected{
			{"all", "delay-mean", 2.4*ms + light, 0.02}, {"all", "delay-p99", 9.084709*ms + light, 0.05}}},
		{"one-queue-mixed", "360s", []expected{
			{"all", "delay-mean", 1.6780665*ms + light, 0.038}}},
		{"short-buffer-poisson", "1010s", []expected{
			{"all", "loss", 0.023492858, 0.05}, {"all", "delay-mean", 3.797098*0.8*ms + light, 0.012}}},
		{"short-buffer-equal", "1010s", []expected{
			{"all", "loss", 0.003639231, 0.12}, {"all", "delay-mean", 2.829773*0.8*ms + light, 0.011}}},
		{"three-priorities", "540s", []expected{ // waits of 0.545, 1.09 and 4.36 ms, and the own transmission
			{"voice", "delay-mean", 0.705*ms + light, 0.012}, {"video", "delay-mean", 1.89*ms + light, 0.025}, {"data", "delay-mean", 5.56*ms + light, 0.052}}},
	} {
		t.Run(c.scenario, func(t *testing.T) {
			t.Parallel()
			r := run(t, load(t, c.scenario, "run.length="+c.length), "as-is", 1)
			for _, e := range c.want {
				near(t, e.class+" "+e.figure, figureOf(t, r, e.class, e.figure), e.want, e.off)
			}
		})
	}
}

// A packet of one of 80 calls waits 255.9049 us on average over all phases of
// the calls, and lasts 190.4 us (computed from the formula of J. Roberts, J.
// Virtamo, IEEE Trans. Commun. 39, 1991). 400 throws of the phases have a
// standard deviation of 2.1 %.
func TestEightyCalls(t *testing.T) {
	t.Parallel()
	sc := load(t, "eighty-calls", "run.length=60ms", "run.warm-up=20ms")
	b, err := study.Batch(context.Background(), sc, study.Options{Cores: 1}, study.Seeds(1, 400))
	if err != nil || !b.Audit.OK {
		t.Fatal(err, b.Audit.Failures)
	}
	for _, m := range b.Figures {
		if m.Figure == result.FigDelayMean {
			near(t, "mean wait", *m.Mean-190.4e-6-light, 255.9049e-6, 0.07)
			return
		}
	}
	t.Error("the mean delay cannot be said")
}

// The waits of five M/M/1 queues that know nothing of each other add up: the
// wait of one is nothing with probability 0.2 and else exponential of rate
// 250/s, so the sum is a binomial mixture of Erlang laws (mean 16 ms, 99th
// percentile 42.132 ms; computed from it). A probe lasts 32 us on each link.
// 20,000 probes, which meet queues that change within some 40 ms, have a
// standard deviation of 1.3 % in the mean; twice that in the percentile.
func TestFiveHops(t *testing.T) {
	t.Parallel()
	r := run(t, load(t, "five-hops"), "as-is", 1)
	const own = 5 * (32e-6 + light)
	near(t, "mean", figureOf(t, r, "probes", "delay-mean"), 16e-3+own, 0.045)
	near(t, "p99", figureOf(t, r, "probes", "delay-p99"), 42.132456e-3+own, 0.09)
}

// 4 erlang of requests for one of 8 slots are refused with probability
// 0.0304202 (A. K. Erlang, P.O.E.E.J. 10, 1918, computed by the recursion);
// 100,000 requests give that within 8 %.
func TestCircuitRequests(t *testing.T) {
	t.Parallel()
	r := run(t, load(t, "circuit-requests"), "as-is", 1)
	if len(r.Demands) != 1 {
		t.Fatalf("%d streams of requests, want 1", len(r.Demands))
	}
	near(t, "refused", r.Demands[0].BlockedRatio, 0.0304202, 0.08)
}

// Calls that come and go overload the thin line at times; the wider line holds
// them all.
func TestThinVoiceLine(t *testing.T) {
	t.Parallel()
	sc := load(t, "thin-voice-line", "run.length=310s")
	lost := map[string]int64{}
	for _, plan := range study.Plans(sc) {
		r := run(t, sc, plan, 1)
		lost[plan] = r.Audit.LostPackets.Of("queue")
		for _, a := range r.Asked {
			if a.Figure == "load" {
				near(t, "load", *a.Measured, a.Asked, 0.35) // five minutes are few calls
			}
		}
	}
	if lost["as-is"] == 0 || lost["wider-line"] > lost["as-is"]/100 {
		t.Errorf("lost: %v; want many as-is, and hardly any on the wider line", lost)
	}
}
