package study_test

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"ferrule/des"
	"ferrule/des/theory"
	"ferrule/nodes"
	"ferrule/scenarios/result"
	"ferrule/scenarios/study"
)

// far is the light delay of so many kilometres of fibre.
func far(km int) des.Time { return (nodes.Length(km) * nodes.Kilometre).Light() }

// row is a scenario of sites s0 to s4 in a row, fibres of 100, 250, 40 and 300
// km, the controller at s1. Commands take 30 ms each unless text says
// otherwise.
func row(timing, controller, rest string) string {
	return fmt.Sprintf(`scenario: row
run: { length: 20s, warm-up: 100ms }
defaults:
  router: { forwarding: 0us }
  timing: { command: 30ms%s }
sites: [ { name: s0 }, { name: s1 }, { name: s2 }, { name: s3 }, { name: s4 } ]
fibres:
  - { name: f0, between: [s0, s1], length: 100km }
  - { name: f1, between: [s1, s2], length: 250km }
  - { name: f2, between: [s2, s3], length: 40km }
  - { name: f3, between: [s3, s4], length: 300km }
circuits: [ { name: base, along: [f0], slots: 1 } ]
traffic: [ { name: t, model: constant, packet: 1000B } ]
classes: [ { name: c, traffic: t } ]
aggregates: [ { name: a, between: [s0, s1], class: c, load: 8kbps } ]
controller: { at: s1%s }
%s`, timing, controller, rest)
}

// circuitOf finds a circuit in a result.
func circuitOf(t testing.TB, r *result.Run, name string) *result.Circuit {
	t.Helper()
	for i := range r.Circuits {
		if r.Circuits[i].Name == name {
			return &r.Circuits[i]
		}
	}
	t.Fatalf("no circuit %s", name)
	return nil
}

// A set-up over all five sites. All sites at once: compute + max(2d + x); one
// after another: compute + sum(2d + x) (computed from the exchange of
// messages). Slots are set up either way, a whole channel in sequence always.
func TestOracleSetUp(t *testing.T) {
	t.Parallel()
	oneWay := []float64{far(100).Seconds(), 0, far(250).Seconds(), (far(250) + far(40)).Seconds(), (far(250) + far(40) + far(300)).Seconds()}
	node := []float64{0.03, 0.03, 0.03, 0.03, 0.03}
	for _, c := range []struct {
		name, timing, size string
		want               float64
	}{
		{"slots at once", "", "slots: 3", theory.SetupParallel(0.012, oneWay, node)},
		{"slots in sequence", ", commands: sequence", "slots: 3", theory.SetupSequential(0.012, oneWay, node)},
		{"channel", "", "channel: 100Gbps", theory.SetupSequential(0.012, oneWay, node)},
		{"traffic ready later", ", traffic-ready: 70ms", "slots: 1", theory.SetupParallel(0.012, oneWay, node)},
	} {
		t.Run(c.name, func(t *testing.T) {
			t.Parallel()
			r := run(t, parse(t, row(c.timing, ", compute: 12ms", "timeline: [ { at: 1s, set-up: { name: x, between: [s0, s4], "+c.size+", carries: moved } } ]\n")), study.Options{Cores: 1})
			x := circuitOf(t, r, "x")
			exact(t, "set-up", x.SetUpS, des.Time(math.Round(c.want*1e12)))
			exact(t, "light", x.DelayS, far(100)+far(250)+far(40)+far(300))
			if x.State != "up" || strings.Join(x.Route, " ") != "s0 s1 s2 s3 s4" {
				t.Errorf("state %s, route %v", x.State, x.Route)
			}
		})
	}
}

// Ten circuits asked for at once are served one after another, by the nodes if
// commands take longer than decisions and by the controller if not: the k-th
// is done at T0 + k s, on average T0 + s (K+1)/2 (queue of one server and
// constant service, all there at the start).
func TestOracleBatchSetUp(t *testing.T) {
	t.Parallel()
	const k = 10
	most := 2 * (far(250) + far(40) + far(300)).Seconds()
	for _, c := range []struct {
		name, controller string
		start, each      float64
	}{
		{"commands dominate", ", compute: 4ms", 0.004 + most, 0.03},
		{"decisions dominate", ", compute: 50ms", 0.03 + most, 0.05},
	} {
		t.Run(c.name, func(t *testing.T) {
			t.Parallel()
			var acts strings.Builder
			acts.WriteString("timeline:\n")
			for i := range k {
				fmt.Fprintf(&acts, "  - { at: 1s, set-up: { name: x%d, between: [s0, s4], slots: 1, carries: moved } }\n", i)
			}
			r := run(t, parse(t, row("", c.controller, acts.String())), study.Options{Cores: 1})
			sum := 0.0
			for i := range k {
				x := circuitOf(t, r, fmt.Sprintf("x%d", i))
				exact(t, x.Name, x.SetUpS, des.Time(math.Round(theory.BatchDone(c.start, c.each, i+1)*1e12)))
				sum += value(x.SetUpS)
			}
			if want := theory.BatchMean(c.start, c.each, k); math.Abs(sum/k-want) > 1e-11 {
				t.Errorf("mean %.12f s, want %.12f", sum/k, want)
			}
		})
	}
}

// cutScene is a circuit from a to b over two fibres of 400 and 200 km, and a
// stream of 5000 packets a second each way that was moved onto it.
func cutScene(circuit, timeline string) string {
	return fmt.Sprintf(`scenario: cut
run: { length: 3s, warm-up: 500ms }
defaults:
  circuit: { framing: none }
  router: { forwarding: 0us }
  timing: { command: 20ms, detect: 3ms, converge: 0ms }
sites: [ { name: a }, { name: m }, { name: b }, { name: n } ]
fibres:
  - { name: am, between: [a, m], length: 400km }
  - { name: mb, between: [m, b], length: 200km }
  - { name: an, between: [a, n], length: 350km }
  - { name: nb, between: [n, b], length: 450km }
circuits: [ { name: x, along: [am, mb], slots: 1, carries: moved, when-down: drop%s } ]
traffic: [ { name: t, model: constant, packet: 1000B } ]
classes: [ { name: c, traffic: t } ]
aggregates: [ { name: s, between: [a, b], class: c, load: 40Mbps } ]
controller: { at: a, compute: 10ms }
timeline: [ %s ]
plans: [ { name: moved, in-place: [ { move: s, onto: [x] } ] } ]
`, circuit, timeline)
}

// lostOf adds up what an aggregate lost in all periods, to one cause or to any.
func lostOf(a *result.Aggregate, cause string) (n int64) {
	for i := range a.Periods {
		if cause == "" {
			n += a.Periods[i].LostPackets.Total()
		} else {
			n += a.Periods[i].LostPackets.Of(cause)
		}
	}
	return n
}

// gapOf is the outage of an aggregate in the hit period.
func gapOf(t testing.TB, r *result.Run, a *result.Aggregate) float64 {
	t.Helper()
	for i, p := range r.Periods {
		if p.Kind == result.Hit {
			return value(a.Periods[i].OutageS)
		}
	}
	t.Fatal("no hit period")
	return 0
}

// A cut costs a constant stream rate x (2 d1 + detection + reaction) of its
// packets on the fibre, one more or less by phase, d1 being the light from the
// sender to the break: what was within d1 of the break is lost, and the news
// needs d1 back to the sender (computed from the propagation of light). The
// reaction is the hold-off here. What is sent after that is lost too, for
// another reason, as the circuit has no recovery and nothing else is there.
func TestOracleCutLoss(t *testing.T) {
	t.Parallel()
	const rate = 5000.0
	for _, c := range []struct {
		fibre, where string
		km           int // from a
		holdOff      float64
	}{
		{"am", "10km from a", 10, 0.05}, {"am", "137km from m", 263, 0.05}, {"mb", "199km from m", 599, 0.02}, {"mb", "100km from m", 500, 0},
	} {
		t.Run(c.fibre+" "+c.where, func(t *testing.T) {
			t.Parallel()
			text := cutScene(fmt.Sprintf(", hold-off: %.0fms", c.holdOff*1e3), fmt.Sprintf("{ at: 1.5s, cut: %s, where: %s }", c.fibre, c.where))
			for seed := range uint64(4) {
				r := run(t, parse(t, text), study.Options{Plan: "moved", Cores: 1, Seed: seed + 1})
				for i, km := range []int{c.km, 600 - c.km} {
					want := theory.CutLoss(rate, far(km).Seconds(), 0.003, c.holdOff)
					if got := float64(lostOf(&r.Aggregates[i], "cut")); math.Abs(got-want) > 1 {
						t.Errorf("seed %d, %s: %v packets lost to the cut, want %.2f", r.Seed, r.Aggregates[i].Name, got, want)
					}
					// To the end nothing is delivered that reaches the break after the cut.
					want = rate * (1.5 + far(km).Seconds())
					if got := float64(lostOf(&r.Aggregates[i], "")); math.Abs(got-want) > 1 {
						t.Errorf("seed %d, %s: %v packets lost in all, want %.2f", r.Seed, r.Aggregates[i].Name, got, want)
					}
					if out := gapOf(t, r, &r.Aggregates[i]); math.Abs(out*rate-want) > 1.01 {
						t.Errorf("seed %d, %s: outage %v s, want %v", r.Seed, r.Aggregates[i].Name, out, want/rate)
					}
				}
			}
		})
	}
}

// A cut of one way only: the sender has light and learns from the controller,
// which the receiver has told. The stream loses what is sent from d1 before
// the cut until the order to stop is there: light from the break to b,
// detection, and back to the controller at a. Its messages go by the old way,
// whose other direction is lit, until ways are found anew, and by the other
// fibres afterwards (computed from the propagation of light).
func TestOracleOneWayCut(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		converge string
		km       int
	}{{"1s", 600}, {"0ms", 800}} {
		text := cutScene("", "{ at: 1.5s, cut: am, where: 100km from a, from: a, to: m }")
		text = strings.Replace(text, "converge: 0ms", "converge: "+c.converge, 1)
		r := run(t, parse(t, text), study.Options{Plan: "moved", Cores: 1})
		out, back := &r.Aggregates[0], &r.Aggregates[1]
		want := 5000 * (far(100) + far(500) + 3*des.Millisecond + far(c.km)).Seconds()
		if got := float64(lostOf(out, "cut")); math.Abs(got-want) > 1 {
			t.Errorf("converge %s: %v packets lost to the cut, want %.2f", c.converge, got, want)
		}
		if got := lostOf(back, "cut"); got != 0 {
			t.Errorf("converge %s: %d packets lost to the cut on the way that has light", c.converge, got)
		}
	}
}

// Restoration worked by hand. The controller stands at a. Fibre am is cut d1
// from a; a sees it d1 + detection later and tells the controller at once. It
// decides (10 ms), commands a, n and b (20 ms each, in parallel), and tells
// both ends when all have answered; a sends again at once, b when the order has
// travelled the new way. What reaches the break after the cut is lost, and
// what would be sent before the circuit is back.
func TestOracleRestore(t *testing.T) {
	t.Parallel()
	const rate = 5000.0
	for _, km := range []int{40, 390} {
		t.Run(fmt.Sprint(km), func(t *testing.T) {
			t.Parallel()
			text := cutScene(", recovery: restore", fmt.Sprintf("{ at: 1.5s, cut: am, where: %dkm from a }", km))
			r := run(t, parse(t, text), study.Options{Plan: "moved", Cores: 1})
			x := circuitOf(t, r, "x")
			if strings.Join(x.Route, " ") != "a n b" || x.State != "up" {
				t.Fatalf("route %v, state %s", x.Route, x.State)
			}
			d1, n, b := far(km).Seconds(), far(350).Seconds(), far(800).Seconds()
			told := d1 + 0.003 // after the cut
			connected := told + theory.SetupParallel(0.01, []float64{0, n, b}, []float64{0.02, 0.02, 0.02})
			for i, w := range []struct{ lost float64 }{
				{rate * (d1 + connected)},                        // from a: d1 before the cut until a is told
				{rate * (far(600-km).Seconds() + connected + b)}, // from b
			} {
				a := &r.Aggregates[i]
				if got := float64(lostOf(a, "")); math.Abs(got-w.lost) > 1 {
					t.Errorf("%s: lost %v packets, want %.2f", a.Name, got, w.lost)
				}
				if out := gapOf(t, r, a); math.Abs(out*rate-w.lost) > 1.01 {
					t.Errorf("%s: outage %v s, want %v", a.Name, out, w.lost/rate)
				}
			}
		})
	}
}

// Circuits over a cut fibre are restored by set-up priority, then bandwidth,
// then name (RFC 3209, sec. 4.7, for the priority; the rest is this program's
// rule), one decision of 10 ms after another. With room for three slots on the
// way round, the last one stays down.
func TestOracleRestoreOrder(t *testing.T) {
	t.Parallel()
	r := run(t, parse(t, `scenario: order
run: { length: 4s, warm-up: 500ms }
defaults:
  router: { forwarding: 0us }
  fibre: { channel-rate: 10Gbps }
  timing: { command: 1ms, detect: 3ms, converge: 0ms }
sites: [ { name: a }, { name: b }, { name: n } ]
fibres:
  - { name: ab, between: [a, b], length: 100km }
  - { name: an, between: [a, n], length: 100km }
  - { name: nb, between: [n, b], length: 100km }
circuits:
  - { name: e, along: [ab], slots: 1, carries: moved, recovery: restore, set-up-priority: 5 }
  - { name: d, along: [ab], slots: 1, carries: moved, recovery: restore, set-up-priority: 3 }
  - { name: c, along: [ab], slots: 1, carries: moved, recovery: restore, set-up-priority: 3 }
  - { name: b, along: [ab], slots: 2, carries: moved, recovery: restore, set-up-priority: 3 }
  - { name: a, along: [ab], slots: 1, carries: moved, recovery: restore, set-up-priority: 1 }
  - { name: z, along: [an, nb], slots: 3 }
traffic: [ { name: t, model: constant, packet: 1000B } ]
classes: [ { name: c, traffic: t } ]
aggregates: [ { name: s, between: [a, b], class: c, load: 8Mbps } ]
controller: { at: a, compute: 10ms }
timeline: [ { at: 1s, cut: ab, where: 50km from a } ]
`), study.Options{Cores: 1})
	var order []string
	var at []float64
	for _, e := range r.Events {
		if e.AtS > 1 && (e.What == "up" || e.What == "not restorable") {
			order = append(order, e.What+" "+e.Subject)
			at = append(at, e.AtS)
		}
	}
	if got, want := strings.Join(order, ", "), "up a, up b, up c, up d, not restorable e"; got != want {
		// The refusal is known 10 ms after the decision about d, before d is up.
		if want := "up a, up b, up c, not restorable e, up d"; got != want {
			t.Errorf("order %s, want %s", got, want)
		}
	}
	ups := map[string]float64{}
	for i, o := range order {
		ups[o] = at[i]
	}
	for i, name := range []string{"up b", "up c", "up d"} {
		if d := ups[name] - ups["up a"]; math.Abs(d-0.01*float64(i+1)) > 1e-9 {
			t.Errorf("%s %.6f s after a, want %.6f", name, d, 0.01*float64(i+1))
		}
	}
	if e := circuitOf(t, r, "e"); e.State != "down" || e.DownS < 1.9 {
		t.Errorf("e is %s and was down for %v s", e.State, e.DownS)
	}
	if r.Audit.SlotsOwned != r.Audit.SlotsUsed {
		t.Errorf("%d slots owned, %d used", r.Audit.SlotsOwned, r.Audit.SlotsUsed)
	}
}
