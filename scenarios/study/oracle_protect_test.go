package study_test

import (
	"fmt"
	"math"
	"testing"

	"ferrule/scenarios/study"
)

// doubledScene is a 1+1 circuit over 400 km, its copies over 1000 km, with a
// constant stream both ways; detection takes 3 ms, the change-over change ms.
func doubledScene(change float64, where string) string {
	return fmt.Sprintf(`scenario: doubled
run: { length: 1s, warm-up: 100ms }
defaults:
  router: { forwarding: 0us }
  timing: { detect: 3ms, switch: %gms, wait-to-restore: 200ms }
sites: [ { name: a }, { name: b }, { name: m } ]
fibres:
  - { name: ab, between: [a, b], length: 400km }
  - { name: am, between: [a, m], length: 700km }
  - { name: mb, between: [m, b], length: 300km }
circuits: [ { name: v, between: [a, b], slots: 1, recovery: 1+1 } ]
traffic: [ { name: t, model: constant, packet: 1000B } ]
classes: [ { name: c, traffic: t } ]
aggregates: [ { name: x, between: [a, b], class: c, load: 40Mbps } ]
controller: { at: m }
timeline:
  - { at: 300ms, cut: ab, where: %s }
  - { at: 600ms, repair: ab }
`, change, where)
}

// A 1+1 circuit loses detection + switching - (D2 - D1) of sending time to a
// cut, wherever the break is, and comes back to its first route after
// wait-to-restore at the price of D2 - D1 (computed from the propagation of
// light); a negative loss is duplicates. Nobody is told, and no table changes.
func TestOracleOnePlusOne(t *testing.T) {
	t.Parallel()
	const rate = 5000.0
	differ := (far(1000) - far(400)).Seconds()
	for _, change := range []float64{20, 0} {
		for _, where := range []string{"20km from a", "200km from a", "390km from a"} {
			r := run(t, parse(t, doubledScene(change, where)), study.Options{Cores: 1, Seed: 1})
			want := 0.003 + change/1e3 - differ
			for i := range r.Aggregates {
				a := &r.Aggregates[i]
				var twice int64
				for _, p := range a.Periods {
					twice += p.DuplicatePackets
				}
				if got := float64(lostOf(a, "cut") - twice); math.Abs(got-want*rate) > 2 {
					t.Errorf("change-over %v ms, %s, %s: %v more lost than doubled, want %.1f", change, where, a.Name, got, want*rate)
				}
				if got := float64(lostOf(a, "switched")); math.Abs(got-differ*rate) > 2 {
					t.Errorf("%s, %s: %v lost on the return, want %.1f", where, a.Name, got, differ*rate)
				}
			}
			v := circuitOf(t, r, "v")
			if len(v.Fibres) != 1 || len(v.SecondFibres) != 2 || v.DownS != 0 || v.State != "up" {
				t.Errorf("%s: %+v", where, v)
			}
			if r.Audit.CopyPackets != r.Audit.OfferedPackets || r.Audit.SlotsOwned != 6 {
				t.Errorf("%s: %+v", where, r.Audit)
			}
			for _, e := range r.Events {
				if e.What == "tables" || e.What == "port down" {
					t.Errorf("%s: %+v", where, e)
				}
			}
		}
	}
}
