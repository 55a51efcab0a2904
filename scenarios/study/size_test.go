package study

import (
	"context"
	"fmt"
	"math"
	"strings"
	"testing"

	"ferrule/scenarios"
	"ferrule/scenarios/result"
)

// sized is a circuit of so many slots onto which 2.7 Gbit/s of Poisson traffic
// are moved.
func sized(slots int) (*scenarios.Scenario, error) {
	return scenarios.Load("sized", []byte(`
scenario: sized
run: { length: 60ms, warm-up: 10ms }
classes:
  - { name: bulk, queue: strict, buffer: 40 packets, traffic: random, objective: { loss: 1e-2, pdv-p99: 1ms } }
  - { name: other, queue: strict, buffer: 5ms, traffic: random }
traffic: [ { name: random, model: poisson, packet: 1500B } ]
sites: [ { name: a }, { name: b } ]
fibres: [ { between: [a, b], length: 10km } ]
circuits:
  - { name: road, along: [a-b], slots: 1 }
  - { name: vx, along: [a-b], slots: 2, carries: moved }
aggregates: [ { name: big, from: a, to: b, class: bulk, load: 2700Mbps } ]
plans:
  - { name: moved, on: as-is, in-place: [ { move: big, onto: [vx] } ] }
  - { name: wider, on: moved, in-place: [ { resize: road, slots: 2 } ] }
`), nil, []string{fmt.Sprintf("circuits.vx.slots=%d", slots)})
}

// A slot carries 1.24 Gbit/s: two lose a tenth of it, three carry it well.
func TestSize(t *testing.T) {
	r, err := Size(t.Context(), Options{Plan: "moved", Cores: 2}, SizeQuestion{Circuit: "vx", With: sized})
	if err != nil {
		t.Fatal(err)
	}
	if r.Least == nil || *r.Least != 3 || r.Missed == nil || *r.Missed != 2 || !r.Audit.OK {
		t.Errorf("least %v, missed %v: %+v", r.Least, r.Missed, r.Trail)
	}
	if p := r.Prediction; *p.Full != 3 || p.LoadBps != 2.7e9 || p.PacketB != 1500 || p.ByTheory == nil || *p.ByTheory != 3 {
		t.Errorf("prediction %+v", p)
	}
	// Four sizes of 1 to 12 and two more, three looks each: 0.05 over 18.
	if want := 1 - 0.05/18; math.Abs(r.StepLevel-want) > 1e-12 || r.Low != 1 || r.High != 12 {
		t.Errorf("level %v of %d to %d, want %v", r.StepLevel, r.Low, r.High, want)
	}
	if _, err := result.Encode(r); err != nil {
		t.Error(err)
	}
	// Other seeds say the same of both sides.
	for slots, want := range map[int]result.Standing{3: result.Met, 2: result.Missed} {
		sc, err := sized(slots)
		if err != nil {
			t.Fatal(err)
		}
		b, err := Batch(t.Context(), sc, Options{Plan: "moved", Cores: 2}, Seeds(1000, 10))
		if err != nil || b.Gates[0].Standing != want {
			t.Errorf("%d slots, other seeds: %v, %v; want %s", slots, b.Gates, err, want)
		}
	}
}

func TestSizeRefuses(t *testing.T) {
	for _, c := range []struct {
		plan string
		q    SizeQuestion
		says string
	}{
		{"moved", SizeQuestion{Circuit: "vy", With: sized}, `no circuit "vy"`},
		{"as-is", SizeQuestion{Circuit: "vx", With: sized}, "no class with an objective"},
		{"moved", SizeQuestion{Circuit: "vx", With: sized, AtMost: 4}, "too few"},
		{"moved", SizeQuestion{Circuit: "vx", With: sized, Low: 5, High: 4}, "no range"},
		{"none", SizeQuestion{Circuit: "vx", With: sized}, "none"},
	} {
		if _, err := Size(t.Context(), Options{Plan: c.plan}, c.q); err == nil || !strings.Contains(err.Error(), c.says) {
			t.Errorf("%+v: %v", c.q, err)
		}
	}
	ctx, stop := context.WithCancel(t.Context())
	stop()
	if r, err := Size(ctx, Options{Plan: "moved"}, SizeQuestion{Circuit: "vx", With: sized}); err == nil || r != nil {
		t.Errorf("interrupted: %v, %v", r, err)
	}
}

// At half of 2.7 Gbit/s two slots bear it; as it is they do not.
func TestGrow(t *testing.T) {
	sc, err := sized(2)
	if err != nil {
		t.Fatal(err)
	}
	c, err := Grow(t.Context(), sc, Options{Cores: 2}, "moved", []string{"wider"}, Seeds(1, 10), []float64{0.5, 0.7, 1})
	if err != nil {
		t.Fatal(err)
	}
	if len(c.Growth) != 2 || c.Base != "moved" || !c.Audit.OK {
		t.Fatalf("%+v", c.Growth)
	}
	for _, g := range c.Growth {
		if g.HoldsTo == nil || *g.HoldsTo != 0.7 || g.Breaks == nil || *g.Breaks != 1 || len(g.Steps) != 3 || !strings.HasPrefix(g.Steps[2].First, "bulk normal ") {
			t.Errorf("%+v", g)
		}
	}
	if _, err := Grow(t.Context(), sc, Options{}, "moved", nil, nil, []float64{1, 0.5}); err == nil {
		t.Error("factors that fall are taken")
	}
}

func TestGrown(t *testing.T) {
	sc := &scenarios.Scenario{Hash: "h", Aggregates: []scenarios.Aggregate{{Load: 1000}, {Flows: 3}, {Flows: 1}}}
	g := grown(sc, 1.3)
	if a := g.Aggregates; a[0].Load != 1300 || a[1].Flows != 4 || a[2].Flows != 1 || g.Hash == sc.Hash || sc.Aggregates[0].Load != 1000 {
		t.Errorf("%+v", g)
	}
	if grown(sc, 1) != sc {
		t.Error("a factor of 1 changes the scenario")
	}
}
