package build

import (
	"fmt"
	"slices"
	"strings"
	"testing"

	"ferrule/controller/distributed"
	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/packet"
	"ferrule/scenarios"
)

// ring is five towns in a ring, 20 km apart: 97.9 us of light. Packets from a
// to c go by way of b.
const ring = `
scenario: ring
run: { length: 8s, warm-up: 100ms }
defaults: { timing: { command: 1ms, detect: 3ms, converge: 10ms } }
classes: [ { name: gold, queue: strict, traffic: beats } ]
traffic: [ { name: beats, model: constant, packet: 1000B } ]
sites: [ { name: a }, { name: b }, { name: c }, { name: d }, { name: e } ]
fibres:
  - { between: [a, b], length: 20km }
  - { between: [b, c], length: 20km }
  - { between: [c, d], length: 20km }
  - { between: [d, e], length: 20km }
  - { between: [e, a], length: 20km }
circuits:
  - { name: ab, along: [a-b], slots: 1 }
  - { name: bc, along: [b-c], slots: 1 }
  - { name: cd, along: [c-d], slots: 1 }
  - { name: de, along: [d-e], slots: 1 }
  - { name: ea, along: [e-a], slots: 1 }
aggregates: [ { name: w, from: a, to: c, class: gold, load: 10Mbps } ]
controller: { at: d, routing: distributed%s }
timeline: [ %s ]
`

// routed runs the ring with more of its controller and its timeline.
func routed(t testing.TB, controller, timeline string, sets ...string) *Model {
	t.Helper()
	sc, err := scenarios.Load("ring.yaml", fmt.Appendf(nil, ring, controller, timeline), nil, sets)
	if err != nil {
		t.Fatal(err)
	}
	m, err := New(sc, &sc.Plans[0], 1)
	if err != nil {
		t.Fatal(err)
	}
	m.Network.Run(m.Kernel(des.Serial{}), nil)
	if _, failures := m.Network.Audit(); failures != nil {
		t.Fatal(failures)
	}
	return m
}

// alike reports whether the routers have found what the controller has.
func alike(t testing.TB, m *Model) {
	t.Helper()
	own, want := m.Routing.Tables(), m.Control.Tables()
	for s := range own {
		if want[s] == nil {
			continue // the controller cannot reach it
		}
		for to := range own[s].Next {
			if !slices.Equal(own[s].Next[to], want[s].Next[to]) {
				t.Errorf("%s to %s: the router has %v, the controller %v", m.Plant.Sites[s].Name, m.Plant.Sites[to].Name, own[s].Next[to], want[s].Next[to])
			}
		}
	}
}

// Whatever is cut and repaired, when all has settled the routers have the
// tables that the controller would have given them.
func TestRoutersAgreeWithTheController(t *testing.T) {
	for _, timeline := range []string{
		"",
		"{ at: 500ms, cut: b-c }",
		"{ at: 500ms, cut: b-c }, { at: 1s, repair: b-c }",
		"{ at: 500ms, cut: b-c }, { at: 500ms, cut: d-e }",                                                   // two halves
		"{ at: 500ms, cut: b-c }, { at: 600ms, cut: d-e }, { at: 1s, repair: d-e }, { at: 1s, repair: b-c }", // and one again
		"{ at: 500ms, fail: router b }",
		"{ at: 500ms, tear-down: cd }",
	} {
		m := routed(t, ", hello: 100ms, adjacency-up: 50ms", timeline)
		if n := m.Routing.Computations(); timeline == "" && n != 0 || timeline != "" && n == 0 {
			t.Errorf("%q: %d computations", timeline, n)
		}
		if !strings.Contains(timeline, "router") { // the dead one has no say
			alike(t, m)
		}
		for _, l := range m.Routing.Loops() {
			if l.To == des.Never {
				t.Errorf("%q: a loop of %v never ended", timeline, l.Sites)
			}
		}
	}
}

// When b-c is cut in the middle, b misses the light after half the fibre and 3
// ms. 50 ms of back-off, 5 ms of computing and 50 ms of installing later it
// sends to c by way of a, which learns of it over a-b and 60 ms of flooding
// later, and until then sends to b: a loop of a and b towards c, for 97.942 us
// and 60 ms. 64 turns of 97.942 us are over long before: packets die of it.
func TestLoopByHand(t *testing.T) {
	m := routed(t, ", flood: 60ms", "{ at: 500ms, cut: b-c }")
	light := m.Plant.Fibres[0].Delay
	from := 500*des.Millisecond + m.Plant.Fibres[1].Delay/2 + 108*des.Millisecond
	i := slices.IndexFunc(m.Routing.Loops(), func(l distributed.Loop) bool { return l.Target == 2 })
	if i < 0 {
		t.Fatalf("no loop towards c: %v", m.Routing.Loops())
	}
	l := m.Routing.Loops()[i]
	if !slices.Equal(l.Sites, []nodes.SiteID{0, 1}) || abs(l.From-from) > 1 || l.To-l.From != light+60*des.Millisecond {
		t.Errorf("loop of %v from %v for %v, want a and b from %v for %v", l.Sites, l.From, l.To-l.From, from, light+60*des.Millisecond)
	}
	totals, _ := m.Network.Audit()
	// 1250 packets a second: those of 60 ms, less those that are still turning
	// when it ends, for 64 times light, 15 us of forwarding and 6.5 us of
	// sending: 7.6 ms. That leaves 65 and a half.
	if ttl := totals.Lost[packet.LostTTL]; ttl < 62 || ttl > 69 {
		t.Errorf("%d packets died of turning, want 65 or 66", ttl)
	}
	alike(t, m)
	if quick := routed(t, ", flood: 1us", "{ at: 500ms, cut: b-c }"); len(quick.Routing.Loops()) == 0 {
		t.Error("no loop at all when flooding is quick; light alone makes one")
	} else if totals, _ := quick.Network.Audit(); totals.Lost[packet.LostTTL] != 0 {
		t.Errorf("%d packets died in a loop of 0.1 ms", totals.Lost[4])
	}
}

// A controller that does not route cannot drain a site.
func TestNoDrainAmongRouters(t *testing.T) {
	sc, err := scenarios.Load("ring.yaml", fmt.Appendf(nil, ring, "", "{ at: 500ms, drain: b }"), nil, nil)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := New(sc, &sc.Plans[0], 1); err == nil || !strings.Contains(err.Error(), "ring.yaml:22: drain b: the routers route among themselves") {
		t.Errorf("draining: %v", err)
	}
}

func abs(t des.Time) des.Time { return max(t, -t) }

// While a hold-off keeps loss of light from the packet layer, routers notice by
// three hellos that do not come.
func TestThreeHellosLost(t *testing.T) {
	m := routed(t, ", hello: 100ms", "{ at: 500ms, cut: a-b }", "defaults.circuit.hold-off=2s", "defaults.timing.report=circuit")
	var lost []string
	for _, e := range m.Network.Events() {
		if e.What == "hellos lost" {
			lost = append(lost, m.Plant.Sites[e.Site].Name+" "+e.Subject)
			// The last hello came at most 100 ms before the cut, and three
			// times 100 ms after it the third is overdue.
			if e.At < 700*des.Millisecond || e.At > 801*des.Millisecond {
				t.Errorf("hellos lost at %v, want 200 to 300 ms after the cut", e.At)
			}
		}
	}
	slices.Sort(lost)
	if !slices.Equal(lost, []string{"a ab", "b ab"}) {
		t.Errorf("hellos lost: %v, want ab at both ends", lost)
	}
	alike(t, m)
}

// After a repair the circuit is used once both have heard each other for the
// time asked for, and not before.
func TestAdjacencyUpDelay(t *testing.T) {
	m := routed(t, ", adjacency-up: 700ms", "{ at: 500ms, cut: b-c }, { at: 1s, repair: b-c }")
	var port, up des.Time
	for _, e := range m.Network.Events() {
		if e.At > des.Second && e.Subject == "bc" {
			switch e.What {
			case "port up":
				port = max(port, e.At)
			case "adjacency up":
				if up == 0 {
					up = e.At
				}
			}
		}
	}
	// From the later port's hello: the other answers, and has heard it then.
	if wait := up - port; port == 0 || wait < 700*des.Millisecond || wait > 701*des.Millisecond {
		t.Errorf("port up at %v, adjacency at %v", port, up)
	}
	alike(t, m)
}
