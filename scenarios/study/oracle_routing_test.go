package study_test

import (
	"bytes"
	"math/rand/v2"
	"strings"
	"testing"

	"ferrule/des"
	"ferrule/scenarios/build"
	"ferrule/scenarios/result"
	"ferrule/scenarios/study"
)

// Routers that route among themselves hide windows, regions and cores as well
// as the controller does.
func TestOracleWindowsOfRouters(t *testing.T) {
	t.Parallel()
	text := strings.Replace(drill, "controller: { at: voe,", "controller: { at: voe, routing: distributed, hello: 20ms, adjacency-up: 30ms,", 1)
	sc := parse(t, strings.Replace(text, "length: 2s", "length: 1750ms", 1))
	long := func() des.Time { return des.Never }
	want, windows := carry(t, sc, "moved", build.Options{}, des.Serial{}, long)
	r, err := result.Decode(want)
	if err != nil {
		t.Fatal(err)
	}
	for _, what := range []string{"table", "adjacency up"} {
		if eventsOf(r.(*result.Run), what) == 0 {
			t.Errorf("no event %q: the test shows nothing", what)
		}
	}
	rng := rand.New(rand.NewPCG(3, 4))
	for _, c := range []struct {
		name string
		o    build.Options
		most func() des.Time
	}{
		{"random", build.Options{}, func() des.Time { return 1 + des.Time(rng.Int64N(int64(400*des.Microsecond))) }},
		{"apart", build.Options{JoinBelow: -1}, long},
		{"all joined", build.Options{JoinBelow: des.Second}, long},
	} {
		got, n := carry(t, sc, "moved", c.o, des.Serial{}, c.most)
		if n == windows {
			t.Errorf("%s: %d windows, as without a change", c.name, n)
		}
		if !bytes.Equal(got, want) {
			t.Errorf("%s: %d windows instead of %d: %s", c.name, n, windows, firstDifference(want, got))
		}
	}
	if got := encoded(t, run(t, sc, study.Options{Plan: "moved", Cores: 3})); !bytes.Equal(got, want) {
		t.Errorf("3 cores: %s", firstDifference(want, got))
	}
}

// eventsOf counts the events of a kind.
func eventsOf(r *result.Run, what string) int {
	n := 0
	for i := range r.Events {
		if r.Events[i].What == what {
			n++
		}
	}
	return n
}

// sideBySide is a ladder of six towns whose middle is cut between b and c. The
// controller stands at c.
const sideBySide = `
scenario: side-by-side
run: { length: 2s, warm-up: 100ms }
defaults: { router: { forwarding: 15us }, timing: { detect: 3ms, command: 1ms, converge: 10ms } }
classes: [ { name: gold, queue: strict, traffic: beats } ]
traffic: [ { name: beats, model: constant, packet: 1000B } ]
sites: [ { name: a }, { name: b }, { name: c }, { name: d }, { name: e }, { name: f } ]
fibres:
  - { between: [a, b], length: 100km }
  - { between: [b, c], length: 100km }
  - { between: [c, d], length: 100km }
  - { between: [d, e], length: 100km }
  - { between: [e, f], length: 100km }
  - { between: [f, a], length: 110km }
circuits:
  - { name: ab, along: [a-b], slots: 1 }
  - { name: bc, along: [b-c], slots: 1 }
  - { name: cd, along: [c-d], slots: 1 }
  - { name: de, along: [d-e], slots: 1 }
  - { name: ef, along: [e-f], slots: 1 }
  - { name: fa, along: [f-a], slots: 1 }
aggregates: [ { name: w, from: a, to: c, class: gold, load: 10Mbps } ]
controller: { at: c, compute: 10ms, routing: central }
timeline: [ { at: 500ms, cut: b-c } ]
`

// The same cut, with one controller and with routers among themselves. The
// controller, at the end of the cut fibre, sees it 3.245 ms after the cut and
// decides 10 ms later; its table has light to cross to reach a, by way of d, e
// and f. Routers wait for 50 ms of back-off, 5 ms of computing and 50 ms of
// installing after a has heard of it from b: 3.245 + 1.49 + 105 ms. In both
// cases, what is on its way from a to b when a changes over is lost too, or
// turns back at b and loops with a.
func TestCentralAgainstDistributed(t *testing.T) {
	t.Parallel()
	central := run(t, parse(t, sideBySide), study.Options{})
	routers := run(t, parse(t, strings.Replace(sideBySide, "routing: central", "routing: distributed", 1)), study.Options{})
	out := func(r *result.Run) float64 {
		for _, o := range r.Aggregates[0].Periods {
			if o.OutageS != nil {
				return *o.OutageS
			}
		}
		t.Fatal("no outage")
		return 0
	}
	if s := out(central); s < 0.010 || s > 0.025 {
		t.Errorf("with a controller out for %g s, want 10 to 25 ms", s)
	}
	// b has a table of its own after 3.245 + 105 ms and sends back what comes
	// from a, whose table changes 1.49 ms later: what a sent 0.98 ms before and
	// since was not lost but turned.
	if s := out(routers); s < 0.105 || s > 0.112 {
		t.Errorf("with routers out for %g s, want 105 to 112 ms", s)
	}
	if n := eventsOf(routers, "loop"); n == 0 {
		t.Error("routers make no loop")
	}
	if eventsOf(central, "loop") != 0 || eventsOf(central, "table") != 0 {
		t.Error("a network with a controller reports what routers do")
	}
	turned := routers.Classes[0].Periods[1].DelayS.Max
	if turned == nil || *turned < 3.4e-3 {
		t.Errorf("no packet took the way to b and back: longest delay %v", turned)
	}
}
