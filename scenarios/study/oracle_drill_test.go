package study_test

import (
	"math"
	"slices"
	"testing"

	"ferrule/scenarios/study"
)

// threeSchemes is three circuits of different schemes over one fibre, and a way round
// with room for only some of them: 8 slots, of which the copies of the first
// take 2 and a circuit that nobody may push out takes 1.
const threeSchemes = `scenario: drill
run: { length: 3s, warm-up: 500ms }
defaults:
  router: { forwarding: 0us }
  fibre: { channel-rate: 10Gbps }
  circuit: { carries: moved, when-down: drop }
  timing: { detect: 3ms, switch: 20ms, command: 10ms }
sites: [ { name: a }, { name: b }, { name: c } ]
fibres:
  - { name: ab, between: [a, b], length: 200km }
  - { name: ac, between: [a, c], length: 300km }
  - { name: cb, between: [c, b], length: 400km }
circuits:
  - { name: filler, along: [ac], slots: 1, set-up-priority: 0, holding-priority: 0 }
  - { name: third,  along: [ab], slots: 3, recovery: restore, set-up-priority: 4 }
  - { name: second, along: [ab], slots: 3, recovery: restore, set-up-priority: 1 }
  - { name: first,  along: [ab], slots: 2, recovery: 1+1 }
traffic: [ { name: t, model: constant, packet: 1000B } ]
classes: [ { name: k, traffic: t } ]
aggregates:
  - { name: x1, from: a, to: b, class: k, load: 40Mbps }
  - { name: x2, from: a, to: b, class: k, load: 40Mbps }
  - { name: x3, from: a, to: b, class: k, load: 40Mbps }
controller: { at: c, compute: 5ms }
timeline: [ { at: 1s, cut: ab, where: 50km from a } ]
plans:
  - { name: p, in-place: [ { move: x1, onto: [first] }, { move: x2, onto: [second] }, { move: x3, onto: [third] } ] }
`

// The order, the times and the losses are worked out here by hand from the
// propagation of light and the rules: a sees the cut first and tells c; c
// decides the circuit of better priority first, which fits; for the other one
// slot is missing, and nobody may be pushed out for it.
func TestOracleDrill(t *testing.T) {
	t.Parallel()
	const rate = 5000.0
	r := run(t, parse(t, threeSchemes), study.Options{Plan: "p", Cores: 1, Seed: 1})
	dark := far(50).Seconds() + 0.003 // at a, after the cut
	told := dark + far(300).Seconds()
	decided := told + 0.005
	connected := decided + 0.010 + 2*far(400).Seconds()
	up := connected + far(300).Seconds() // the port of a
	times := map[string]float64{}
	var order []string
	for _, e := range r.Events {
		key := e.What + " " + e.Subject
		if _, seen := times[key]; !seen {
			times[key] = e.AtS - 1
		}
		if e.What == "route" || e.What == "not restorable" || e.What == "pre-empted" {
			order = append(order, key)
		}
	}
	if want := []string{"route second", "not restorable third"}; !slices.Equal(order, want) {
		t.Errorf("%q, want %q", order, want)
	}
	for key, want := range map[string]float64{
		"fibre down ab": told, "route second": decided, "not restorable third": decided + 0.005,
		"connected second": connected, "up second": connected + 2*far(400).Seconds(),
		"tail switched first": far(50).Seconds() + 0.003 + 0.020, // at a, which sees it before b
	} {
		if got, ok := times[key]; !ok || math.Abs(got-want) > 1e-6 {
			t.Errorf("%s %v s after the cut, want %v", key, got, want)
		}
	}
	for name, want := range map[string]float64{
		"x1": 0.003 + 0.020 - (far(700) - far(200)).Seconds(),
		"x2": far(50).Seconds() + up,
		"x3": far(50).Seconds() + 2, // to the end of the run
	} {
		if got := float64(lostOf(aggregateOf(t, r, name), "")); math.Abs(got-want*rate) > 2 {
			t.Errorf("%s lost %v packets, want %.1f", name, got, want*rate)
		}
	}
	for name, want := range map[string]string{"first": "up unprotected", "second": "up", "third": "down", "filler": "up"} {
		if got := circuitOf(t, r, name).State; got != want {
			t.Errorf("%s is %s, want %s", name, got, want)
		}
	}
}
