package study_test

import (
	"fmt"
	"runtime"
	"strings"
	"testing"
	"time"

	"ferrule/des/theory"
	"ferrule/scenarios/result"
)

// requests is a scenario of one fibre whose slots are asked for, held and given
// back. Holding times are exponential with a mean of 100 ms.
func requests(length, channel string, streams ...string) string {
	return fmt.Sprintf(`scenario: requests
run: { length: %s, warm-up: 0s }
defaults:
  fibre: { channel-rate: %s }
  timing: { command: 0us }
sites: [ { name: a }, { name: b } ]
fibres: [ { name: ab, between: [a, b], length: 1km } ]
classes: [ { name: c } ]
requests:
%scontroller: { at: a, compute: 0us }
`, length, channel, strings.Join(streams, ""))
}

// request is one stream of that many erlang for so many slots.
func request(slots int, erlang float64) string {
	return fmt.Sprintf("  - { name: r%d, between: [a, b], slots: %d, arrive: %g/s, hold: { exponential: { mean: 100ms } } }\n", slots, slots, 10*erlang)
}

// blocked runs a scenario of requests and adds up, for each stream, what was
// offered and refused.
func blocked(t *testing.T, text string, seeds int) (offered, refused []float64) {
	t.Helper()
	sc := parse(t, text)
	began := time.Now()
	runs := runSeeds(t, sc, "", seeds)
	took := time.Since(began)
	total := 0.0
	for i := range sc.Requests {
		offered = append(offered, count(runs, func(r *result.Run) int64 { return r.Demands[i].Offered }))
		refused = append(refused, count(runs, func(r *result.Run) int64 { return r.Demands[i].Blocked }))
		total += offered[i]
		for _, r := range runs {
			if d := r.Demands[i]; d.Name != sc.Requests[i].Name || d.BlockedRatio != float64(d.Blocked)/float64(d.Offered) {
				t.Errorf("seed %d: %+v", r.Seed, d)
			}
		}
	}
	t.Logf("%.0f requests in %v, %.0f/s on %d cores", total, took.Round(time.Millisecond), total/took.Seconds(), runtime.GOMAXPROCS(0))
	return offered, refused
}

// Slots asked for by Poisson requests are refused as A. K. Erlang, P.O.E.E.J.
// 10 (1918), says: 3.042006 % of 4 erlang by 8 slots, 0.9176414 % of 65 erlang
// by 80 (computed by the recursion). Spreads are for a million requests: from
// many runs of a plain simulation at like blocking, 7 and 19 %, less what the
// larger blocking leaves.
func TestOracleErlang(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		slots   int
		channel string
		erlang  float64
		length  string
		want    float64
		spread  float64
	}{{8, "10Gbps", 4, "5000s", 0.03042006, 0.03}, {80, "100Gbps", 65, "310s", 0.009176414, 0.11}} {
		t.Run(fmt.Sprint(c.slots), func(t *testing.T) {
			t.Parallel()
			within(t, "theory", theory.ErlangB(c.slots, c.erlang), c.want, 1e-6)
			offered, refused := blocked(t, requests(c.length, c.channel, request(1, c.erlang)), 2)
			within(t, "refused", refused[0]/offered[0], c.want, perMillion(c.spread, offered[0]))
		})
	}
}

// Requests of two sizes on 8 slots, 2 erlang of one and 1 erlang of two, are
// refused as J. Kaufman, IEEE Trans. Commun. 29 (1981), and J. Roberts (1981)
// say: 4.20325 and 10.96166 % (computed by the recursion). A slot refused to
// one is refused to the other, so no order of arrival may show.
func TestOracleKaufmanRoberts(t *testing.T) {
	t.Parallel()
	want, _ := theory.KaufmanRoberts(8, []theory.RateClass{{Erlangs: 2, Units: 1}, {Erlangs: 1, Units: 2}})
	within(t, "theory, 1 slot", want[0], 0.0420325, 1e-5)
	within(t, "theory, 2 slots", want[1], 0.1096166, 1e-5)
	offered, refused := blocked(t, requests("5000s", "10Gbps", request(1, 2), request(2, 1)), 2)
	n := offered[0] + offered[1]
	within(t, "refused, 1 slot", refused[0]/offered[0], want[0], perMillion(0.042, n))
	within(t, "refused, 2 slots", refused[1]/offered[1], want[1], perMillion(0.025, n))
}
