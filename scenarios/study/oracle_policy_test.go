package study_test

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"ferrule/nodes/optical"
	"ferrule/scenarios/study"
)

// followed is a circuit of 1 slot between a and b with a constant stream, which
// an act multiplies at 2 s, under a policy.
func followed(policy, by string) string {
	return fmt.Sprintf(`scenario: followed
run: { length: 12s, warm-up: 500ms }
defaults:
  router: { forwarding: 0us }
  timing: { command: 5ms }
sites: [ { name: a }, { name: b } ]
fibres: [ { between: [a, b], length: 100km } ]
circuits: [ { name: v, along: [a-b], slots: 1, policy: { %s } } ]
traffic: [ { name: t, model: constant, packet: 1000B } ]
classes: [ { name: c, buffer: 5ms, traffic: t } ]
aggregates: [ { name: x, from: a, to: b, class: c, load: 800Mbps } ]
controller: { at: a, poll: 100ms, compute: 5ms }
timeline: [ { at: 2s, scale: x, by: %s } ]
`, policy, by)
}

// A step of load that a circuit cannot carry makes its policy grow it. Until
// the ramp of the ODUflex has passed what is offered the excess is dropped, and
// nothing after that: the loss is the time to the decision at the full excess,
// and then half of what the ramp takes to pass it, the rate rising linearly
// (computed from ITU-T G.7044, 512 Mb/s per second).
func TestOraclePolicyGrows(t *testing.T) {
	t.Parallel()
	r := run(t, parse(t, followed("floor: 1, ceiling: 4, up: 90%, down: 20%, hold-up: 300ms", "200%")), study.Options{Cores: 1, Seed: 1})
	var decided, resized float64
	for _, e := range r.Events {
		switch {
		case e.What == "policy grows" && decided == 0:
			decided = e.AtS
			if !strings.Contains(e.Detail, "1 to 2 slots; utilisation") || !strings.Contains(e.Detail, "drops") {
				t.Errorf("the decision is logged as %q", e.Detail)
			}
		case e.What == "resized":
			resized = e.AtS
		}
	}
	if decided < 2.3 || decided > 3 {
		t.Fatalf("decided at %v s", decided)
	}
	ramp, err := optical.RampTime(1, 2)
	if err != nil {
		t.Fatal(err)
	}
	if got := resized - decided - ramp.Seconds(); got < 0 || got > 0.05 {
		t.Errorf("resized %v s after the decision and the ramp", got)
	}
	one, _ := optical.PayloadOfSlots(1)
	const wire = 1026.0 / 1000 // a frame with its mapping for each packet
	excess := 1.6e9*wire - float64(one)
	slope := float64(one) / ramp.Seconds()
	begins := resized - ramp.Seconds()
	want := ((begins-2)*excess + excess*excess/slope/2 - 0.005*float64(one)) / 8 / 1026
	x := aggregateOf(t, r, "x")
	if got := float64(lostOf(x, "queue")); math.Abs(got-want) > 0.02*want {
		t.Errorf("%v packets lost, want %.0f", got, want)
	}
	v := circuitOf(t, r, "v")
	if *v.Slots != 2 || v.Policy == nil || v.Policy.Grown != 1 || v.Policy.Shrunk != 0 || len(r.Cautions) != 0 {
		t.Errorf("%+v, %+v, cautions %q", v, v.Policy, r.Cautions)
	}
}

// With thresholds too close together it swings, and the report says so.
func TestOraclePolicyOscillates(t *testing.T) {
	t.Parallel()
	text := strings.Replace(followed("floor: 1, ceiling: 2, up: 60%, down: 55%, hold-up: 100ms, hold-down: 100ms", "100%"), "timing: {", "timing: { ramp: none,", 1)
	r := run(t, parse(t, text), study.Options{Cores: 1, Seed: 1})
	v := circuitOf(t, r, "v")
	if v.Policy.Reversals < 5 {
		t.Errorf("%+v", v.Policy)
	}
	if got := strings.Join(r.Cautions, "\n"); !strings.Contains(got, "The policy of v oscillates") {
		t.Errorf("cautions: %q", got)
	}
}
