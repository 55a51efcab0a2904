package page

import (
	"context"
	"fmt"
	"strings"
	"sync"
	"testing"

	"ferrule/scenarios"
	"ferrule/scenarios/result"
	"ferrule/scenarios/study"
)

// small is a network with all that a report shows: a circuit that is broken
// for good, one that is restored on a detour, one that carries what is moved
// onto it, fibres that share a duct, a cut and its repair.
const small = `scenario: small
run: { length: 3s, warm-up: 500ms, seed: 3 }
defaults: { timing: { wait-to-restore: 100ms } }
classes:
  - { name: gold, queue: strict, buffer: 5ms, traffic: even, objective: { delay-p99: 20ms, loss: 1e-3 } }
  - { name: dust, queue: strict, buffer: 20ms, traffic: wild }
traffic:
  - { name: even, model: constant, packet: 500B }
  - { name: wild, model: poisson, packet: 1200B }
sites: [ { name: a, position: [0km, 0km] }, { name: b, position: [200km, 10km] }, { name: c, position: [120km, 150km] } ]
fibres:
  - { between: [a, b], length: 210km, risk-groups: [duct] }
  - { between: [a, c], length: 300km, risk-groups: [duct, quay] }
  - { between: [c, b], length: 300km }
circuits:
  - { name: ab, along: [a-b], slots: 20, rate: 12Mbps, recovery: restore }
  - { name: ab2, along: [a-b], slots: 1, rate: 12Mbps }
  - { name: ac, along: [a-c], slots: 40, rate: 30Mbps }
  - { name: cb, along: [c-b], slots: 3, rate: 30Mbps }
aggregates:
  - { name: g, between: [a, b], class: gold, load: 2Mbps }
  - { name: d, from: a, to: b, class: dust, load: 20Mbps }
timeline: [ { at: 1500ms, cut: a-b, where: 150km from a }, { at: 2200ms, repair: a-b } ]
plans:
  - name: own-way
    in-place: [ { circuit: { name: x, along: [a-c, c-b], slots: 4, carries: moved, recovery: restore } }, { move: g, onto: [x] } ]
  - { name: wide, in-place: [ { resize: ac, slots: 50 } ] }
`

func load(t testing.TB) *scenarios.Scenario {
	t.Helper()
	sc, err := scenarios.Load("small.yaml", []byte(small), nil, nil)
	if err != nil {
		t.Fatal(err)
	}
	return sc
}

// samples are results of each kind, for the same scenario. They are made once
// and must not be changed.
func samples(t testing.TB) map[string]result.Result {
	t.Helper()
	made.Do(func() { all = study3(t) })
	if all == nil {
		t.Fatal("there are no samples: see the first failure")
	}
	return all
}

var (
	made sync.Once
	all  map[string]result.Result
)

func study3(t testing.TB) map[string]result.Result {
	t.Helper()
	sc, ctx := load(t), context.Background()
	r, err := study.Run(ctx, sc, study.Options{})
	if err != nil {
		t.Fatal(err)
	}
	b, err := study.Batch(ctx, sc, study.Options{Runs: true}, study.Seeds(3, 3))
	if err != nil {
		t.Fatal(err)
	}
	c, err := study.Compare(ctx, sc, study.Options{Runs: true}, "", nil, study.Seeds(3, 3))
	if err != nil {
		t.Fatal(err)
	}
	all := map[string]result.Result{"run": r, "batch": b, "comparison": c}
	for _, r := range all {
		result.Stamp(r, result.Tool{Name: "ferrule", Version: "test"})
	}
	return all
}

// hostile is r with a name in it that would break out of any page that let it.
func hostile(t testing.TB, r result.Result) result.Result {
	t.Helper()
	data, err := result.Encode(r)
	if err != nil {
		t.Fatal(err)
	}
	s := string(data)
	for _, name := range []string{"small", "gold", "own-way", "ab2", "duct", "a-c"} {
		s = strings.ReplaceAll(s, `"`+name+`"`, `"`+name+`\u003c/script>\u003c/title>\u003c/style>\u003cscript>hacked=1\u003c/script>\u003cimg src=//x.test/ onerror=hacked=1>\u003c!--{{\"'&"`)
	}
	back, err := result.Decode([]byte(s))
	if err != nil {
		t.Fatal(err)
	}
	return back
}

// many is a run with so many classes, each with series of points bins in all.
func many(t testing.TB, classes, points int) *result.Run {
	t.Helper()
	small := samples(t)["run"].(*result.Run)
	r := *small
	r.Classes, r.Tails, r.Series, r.Aggregates = nil, nil, nil, nil
	for i := range classes {
		name := fmt.Sprintf("class-%02d", i)
		c := small.Classes[i%2]
		c.Name = name
		r.Classes = append(r.Classes, c)
		for _, x := range small.Tails {
			if x.Class == small.Classes[i%2].Name {
				x.Class = name
				r.Tails = append(r.Tails, x)
			}
		}
		a := small.Aggregates[0]
		a.Name, a.Class = "of "+name, name
		r.Aggregates = append(r.Aggregates, a)
		for _, s := range small.Series {
			if s.Class == small.Classes[i%2].Name {
				s.Class = name
				r.Series = append(r.Series, s)
				points -= len(s.OfferedPackets)
			}
		}
	}
	if points > 0 {
		t.Fatalf("%d points are missing", points)
	}
	return &r
}
