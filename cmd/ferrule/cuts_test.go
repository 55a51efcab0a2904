package main

import (
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"

	"ferrule/des"
	"ferrule/scenarios"
)

const twoTowns = `
scenario: two-towns
run: { length: 10s, warm-up: 1s, seed: 1 }
classes: [ { name: web, dscp: BE, queue: weight 100%, buffer: 50ms, traffic: pages } ]
traffic: [ { name: pages, model: constant, packet: 1000B } ]
sites: [ { name: a }, { name: b } ]
fibres: [ { between: [a, b], length: 100km } ]
circuits: [ { name: ab, along: [a-b], slots: 1 } ]
aggregates: [ { name: w, between: [a, b], class: web, load: 10Mbps } ]
controller: { at: a }
timeline: [ { at: 2s, cut: a-b } ]
`

func TestCutsJoinTheTimeline(t *testing.T) {
	sc, err := scenarios.Load("two.yaml", []byte(twoTowns), nil, nil)
	if err != nil {
		t.Fatal(err)
	}
	with, err := withCuts(sc, []string{"a-b:20km@6s..9s", "a-b@9500ms"})
	if err != nil {
		t.Fatal(err)
	}
	type act struct {
		verb scenarios.Verb
		at   des.Time
	}
	var got []act
	for _, a := range with.Timeline {
		got = append(got, act{a.Verb, a.At})
	}
	want := []act{{scenarios.VerbCut, 2 * des.Second}, {scenarios.VerbCut, 6 * des.Second}, {scenarios.VerbRepair, 9 * des.Second},
		{scenarios.VerbCut, 9500 * des.Millisecond}}
	if d := cmp.Diff(want, got, cmp.AllowUnexported(act{})); d != "" {
		t.Error(d)
	}
	if len(sc.Timeline) != 1 {
		t.Errorf("the scenario itself changed: %d acts", len(sc.Timeline))
	}
	other, err := withCuts(sc, []string{"a-b@9500ms"})
	if err != nil {
		t.Fatal(err)
	}
	if with.Hash == sc.Hash || other.Hash == with.Hash || other.Hash == sc.Hash {
		t.Error("scenarios with other cuts have the same hash")
	}
	if same, _ := withCuts(sc, nil); same.Hash != sc.Hash {
		t.Error("no cut changes the hash")
	}
}

func TestEveryFaultyCutIsReported(t *testing.T) {
	sc, err := scenarios.Load("two.yaml", []byte(twoTowns), nil, nil)
	if err != nil {
		t.Fatal(err)
	}
	_, err = withCuts(sc, []string{"a-c@6s", "a-b@6s", "a-b"})
	if err == nil || strings.Count(err.Error(), "\n") != 1 || !strings.Contains(err.Error(), "--cut a-c@6s") ||
		!strings.Contains(err.Error(), "--cut a-b: ") {
		t.Errorf("%v", err)
	}
}
