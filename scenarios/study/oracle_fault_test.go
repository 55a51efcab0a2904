package study_test

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"

	"ferrule/scenarios/result"
	"ferrule/scenarios/study"
)

// transit is a row a, m, b with a way round by w: routed circuits over each
// fibre, and vx from a to b over the cross-connect of m, with a stream moved
// onto it beside one that is routed, and one that begins at m.
func transit(acts string) string {
	return fmt.Sprintf(`scenario: transit
run: { length: 4s, warm-up: 500ms }
defaults:
  router: { forwarding: 0us }
  timing: { detect: 3ms, command: 5ms, wait-to-restore: 300ms }
sites: [ { name: a }, { name: m }, { name: b }, { name: w } ]
fibres:
  - { name: am, between: [a, m], length: 200km }
  - { name: mb, between: [m, b], length: 300km }
  - { name: aw, between: [a, w], length: 600km }
  - { name: wb, between: [w, b], length: 500km }
circuits:
  - { name: c-am, along: [am], slots: 1 }
  - { name: c-mb, along: [mb], slots: 1 }
  - { name: c-aw, along: [aw], slots: 1 }
  - { name: c-wb, along: [wb], slots: 1 }
  - { name: vx, along: [am, mb], slots: 1, carries: moved, recovery: restore }
traffic: [ { name: t, model: constant, packet: 1000B } ]
classes: [ { name: c, traffic: t } ]
aggregates:
  - { name: moved,  from: a, to: b, class: c, load: 40Mbps }
  - { name: routed, from: a, to: b, class: c, load: 40Mbps }
  - { name: local,  from: m, to: b, class: c, load: 40Mbps }
controller: { at: w, compute: 5ms }
timeline: [ %s ]
plans:
  - { name: p, in-place: [ { move: moved, onto: [vx] } ] }
`, acts)
}

// aggregateOf finds an aggregate in a result.
func aggregateOf(t testing.TB, r *result.Run, name string) *result.Aggregate {
	t.Helper()
	for i := range r.Aggregates {
		if strings.TrimSuffix(r.Aggregates[i].Name, ".out") == name {
			return &r.Aggregates[i]
		}
	}
	t.Fatalf("no aggregate %s", name)
	return nil
}

// The router at a transit site dies and its cross-connect lives: what is moved
// past it does not notice; what is routed over it loses its light for as long
// as light needs from m to a and back, and detection; what begins there is
// silent until the router is mended (computed from the propagation of light).
func TestOracleRouterFails(t *testing.T) {
	t.Parallel()
	const rate = 5000.0
	r := run(t, parse(t, transit("{ at: 1s, fail: router m }, { at: 2s, mend: router m }")), study.Options{Plan: "p", Cores: 1, Seed: 1})
	if got := lostOf(aggregateOf(t, r, "moved"), ""); got != 0 {
		t.Errorf("%d packets lost past the cross-connect", got)
	}
	routed := aggregateOf(t, r, "routed")
	// Lost at m: sent from 1 s - d on, until a stops at 1 s + d + detection, when
	// its table has no way either, until it has the new one.
	want := rate * (2*far(200).Seconds() + 0.003)
	if got := float64(lostOf(routed, "failed")); math.Abs(got-want) > 2 {
		t.Errorf("%v packets lost in the router, want %.1f", got, want)
	}
	if out := gapOf(t, r, routed); out < 0.005 || out > 0.1 {
		t.Errorf("routed is out for %v s", out)
	}
	if got := float64(lostOf(aggregateOf(t, r, "local"), "failed")); math.Abs(got-rate) > 2 {
		t.Errorf("%v packets lost of what begins there, want %.0f", got, rate)
	}
	for _, c := range []string{"c-am", "c-mb", "vx"} {
		if s := circuitOf(t, r, c).State; s != "up" {
			t.Errorf("%s is %s in the end", c, s)
		}
	}
}

// A site that fails takes its cross-connect and the fibres' ends with it: what
// is moved is restored round it.
func TestOracleSiteFails(t *testing.T) {
	t.Parallel()
	r := run(t, parse(t, transit("{ at: 1s, fail: site m }, { at: 2500ms, mend: site m }")), study.Options{Plan: "p", Cores: 1, Seed: 1})
	moved := aggregateOf(t, r, "moved")
	if got := lostOf(moved, "cut"); got == 0 {
		t.Error("nothing lost past a dead cross-connect")
	}
	restored := false
	for _, e := range r.Events {
		restored = restored || e.What == "route" && e.Subject == "vx" && strings.Contains(e.Detail, "aw, wb")
	}
	if out := gapOf(t, r, moved); !restored || out > 0.2 {
		t.Errorf("restored round the site: %v; out for %v s", restored, out)
	}
	for _, c := range []string{"c-am", "c-mb", "vx"} {
		if x := circuitOf(t, r, c); x.State != "up" || c == "vx" && len(x.Fibres) != 2 {
			t.Errorf("%s is %s over %v in the end", c, x.State, x.Fibres)
		}
	}
}

// A port that fails silences its circuit alone: the aggregate returns to the
// routed circuits meanwhile.
func TestOraclePortFails(t *testing.T) {
	t.Parallel()
	r := run(t, parse(t, transit("{ at: 1s, fail: port vx at b }, { at: 2s, mend: port vx at b }")), study.Options{Plan: "p", Cores: 1, Seed: 1})
	// b has told a nothing: a's own light is dark too, a light's way later.
	want := 5000 * (2*far(500).Seconds() + 0.003)
	if got := float64(lostOf(aggregateOf(t, r, "moved"), "")); math.Abs(got-want) > 2 {
		t.Errorf("%v packets lost, want %.1f", got, want)
	}
	if got := lostOf(aggregateOf(t, r, "routed"), ""); got != 0 {
		t.Errorf("%d packets of another circuit lost", got)
	}
	if x := circuitOf(t, r, "vx"); x.State != "up" || len(x.Fibres) != 2 || x.DownS < 0.9 || x.DownS > 1.2 {
		t.Errorf("vx: %+v", x)
	}
}

// One way of a fibre fails: the other way goes on.
func TestOracleFibreWayFails(t *testing.T) {
	t.Parallel()
	r := run(t, parse(t, transit("{ at: 1s, fail: fibre am, from: a, to: m }, { at: 2s, mend: fibre am }")), study.Options{Plan: "p", Cores: 1, Seed: 1})
	if lostOf(aggregateOf(t, r, "routed"), "cut") == 0 || lostOf(aggregateOf(t, r, "local"), "") != 0 {
		t.Error("the wrong way is dark")
	}
}

// A site is drained for maintenance without losing a packet, and may then fail
// without anybody's notice but its own.
func TestOracleDrain(t *testing.T) {
	t.Parallel()
	r := run(t, parse(t, transit("{ at: 1s, drain: m }, { at: 2s, fail: site m }, { at: 2500ms, mend: site m }, { at: 3s, undrain: m }")), study.Options{Plan: "p", Cores: 1, Seed: 1})
	for _, name := range []string{"moved", "routed"} {
		if got := lostOf(aggregateOf(t, r, name), ""); got != 0 {
			t.Errorf("%d packets of %s lost: %+v", got, name, aggregateOf(t, r, name).Periods)
		}
	}
	for _, s := range r.Steps {
		if s.State != "done" {
			t.Errorf("%+v", s)
		}
	}
}

// A step of a plan that is blocked has the others taken back, and the report
// lists when each was undone; the change and its undoing are one period.
func TestOracleUndo(t *testing.T) {
	t.Parallel()
	text := transit("") + `  - name: q
    when-blocked: undo
    steps:
      - { at: 1s, set-up: { name: vy, between: [a, b], slots: 1, carries: moved } }
      - { after: vy up, move: moved, onto: [vy] }
      - { after: moved moved, set-up: { name: wide, between: [a, b], slots: 80, carries: moved } }
      - { after: wide up, tear-down: vx }
`
	r := run(t, parse(t, text), study.Options{Plan: "q", Cores: 1, Seed: 1})
	var got []string
	for _, s := range r.Steps {
		got = append(got, s.Act+" "+s.State)
	}
	want := []string{"set-up done", "move done", "set-up failed", "tear-down never", "undo of move done", "undo of set-up done"}
	if !slices.Equal(got, want) {
		t.Fatalf("steps %q, want %q", got, want)
	}
	if move, circuit := r.Steps[4], r.Steps[5]; *move.DoneS > *circuit.OrderedS || *circuit.DoneS <= *r.Steps[2].DoneS {
		t.Errorf("undone in the wrong order: %+v, %+v", move, circuit)
	}
	if s := circuitOf(t, r, "vy").State; s != "torn down" {
		t.Errorf("vy is %s in the end", s)
	}
	if p := r.Periods[1]; p.Kind != result.Change || p.ToS < *r.Steps[5].DoneS {
		t.Errorf("%+v ends before the last is undone at %v", p, *r.Steps[5].DoneS)
	}
}
