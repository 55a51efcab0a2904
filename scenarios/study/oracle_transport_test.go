package study_test

import (
	"fmt"
	"math"
	"testing"

	"ferrule/scenarios/study"
)

// loopFile is a line of 50 Mb/s and 1 ms with a class of web transfers and one
// of endless ones, under a transport and a drop policy.
func loopFile(transport, drop string) string {
	return fmt.Sprintf(`
scenario: loop
run: { length: 20s, warm-up: 2s }
classes:
  - { name: web, queue: weight 50%%, buffer: 40ms, traffic: pages, drop: %[2]s, objective: { transfer-p50: 1s, transfer-p95: 3ms } }
  - { name: bulk, queue: weight 50%%, buffer: 40ms, traffic: copies, drop: %[2]s }
traffic:
  - { name: pages, model: web, size: { pareto: { mean: 80kB, shape: 1.5, at-most: 10MB } }, transport: %[1]s }
  - { name: copies, model: bulk, transport: %[1]s }
sites: [ { name: a, router: { forwarding: 0us } }, { name: b, router: { forwarding: 0us } } ]
fibres: [ { between: [a, b], length: 204km } ]
circuits: [ { name: ab, along: [a-b], slots: 1, rate: 50Mbps, framing: none } ]
controller: { at: a }
aggregates:
  - { name: w, between: [a, b], class: web, load: 10Mbps }
  - { name: c, from: a, to: b, class: bulk, flows: 4 }
`, transport, drop)
}

// The endless transfers take what the web leaves of the line, acknowledgements
// go back, and web transfers take at least the two round trips of their opening
// and first data. Their load is the one asked for: 18 s x 10 Mb/s in transfers of
// about 82 kB are 273 each way, +- 4 sigma.
func TestClosedLoopInScenario(t *testing.T) {
	for _, transport := range []string{"reno", "newreno", "cubic"} {
		r := run(t, parse(t, loopFile(transport, "codel")), study.Options{})
		w, c := class(t, r, "web").Transfers, class(t, r, "bulk").Transfers
		if w == nil || c == nil {
			t.Fatal("no transfers are told of")
		}
		if n := float64(w.Asked); math.Abs(n-546) > 4*math.Sqrt(546) {
			t.Errorf("%s: %g transfers asked for, want 546 or so", transport, n)
		}
		if w.Complete < w.Asked-10 || w.TimeS.P95 == nil || *w.TimeS.Min < 0.004 || *w.TimeS.P95 > 2 {
			t.Errorf("%s: %d of %d complete, times %+v", transport, w.Complete, w.Asked, w.TimeS)
		}
		if o := class(t, r, "web").Objective; o == nil || o.Met == nil || *o.Met || len(o.Misses) != 1 || o.Misses[0].Figure != "transfer-p95" {
			t.Errorf("%s: objective %+v, want the one on the 95th percentile missed: it is less than two round trips", transport, o)
		}
		if got := *c.GoodputBps; got < 30e6 || got > 41e6 || c.Asked != 0 || c.Complete != 0 {
			t.Errorf("%s: bulk gets %.3g bit/s; %d asked for and %d complete after the warm-up", transport, got, c.Asked, c.Complete)
		}
		if c.ResentCount == 0 || class(t, r, "bulk").LostPackets.Of("aqm") == 0 {
			t.Errorf("%s: nothing was lost to queue management and sent again", transport)
		}
		if u := port(t, r, "ab", "a").Utilisation; *u < 0.9 {
			t.Errorf("%s: the line was used for %.3f of the time", transport, *u)
		}
	}
}
