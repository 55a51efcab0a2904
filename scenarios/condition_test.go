package scenarios

import (
	"testing"

	"github.com/google/go-cmp/cmp"

	"ferrule/des"
	"ferrule/nodes"
)

// Queues that are managed and aggregates that are conditioned, as read.
func TestManagedAndConditioned(t *testing.T) {
	s, err := Load("s.yaml", []byte(`
scenario: s
run: { length: 10s, warm-up: 1s }
classes:
  - { name: gold, queue: strict, traffic: t, drop: codel, ecn: true }
  - { name: silver, queue: wfq 60%, traffic: t, drop: fq-codel }
  - { name: lead, queue: wfq 40%, traffic: t, drop: red }
traffic: [ { name: t, model: constant, packet: 1000B } ]
sites: [ { name: a, position: [0km, 0km] }, { name: b, position: [30km, 40km] } ]
fibres: [ { between: [a, b] } ]
circuits: [ { name: ab, along: [a-b], slots: 1 } ]
aggregates:
  - { name: one, between: [a, b], class: gold, load: 10Mbps, police: { rate: 5Mbps, burst: 15kB, excess: 5kB } }
  - { name: two, between: [a, b], class: silver, load: 10Mbps, police: { rate: 5Mbps, burst: 15kB, peak: 8Mbps, peak-burst: 30kB } }
  - { name: three, between: [a, b], class: lead, load: 10Mbps, shape: { rate: 5Mbps, burst: 15kB } }
`), nil, nil)
	if err != nil {
		t.Fatal(err)
	}
	type class struct {
		Queue  nodes.Queueing
		Weight int
		Drop   nodes.DropPolicy
		ECN    bool
	}
	want := []class{{nodes.QueueStrict, 0, nodes.DropCoDel, true}, {nodes.QueueFair, 60, nodes.DropFQCoDel, false}, {nodes.QueueFair, 40, nodes.DropRED, false}}
	var got []class
	for _, c := range s.Classes {
		got = append(got, class{c.Queue, c.Weight, c.Drop, c.ECN})
	}
	if diff := cmp.Diff(want, got); diff != "" {
		t.Errorf("classes (-want +got):\n%s", diff)
	}
	for i, want := range []struct {
		p *Police
		s *Shape
	}{
		{p: &Police{Rate: 5 * nodes.Mbps, Burst: 15_000, Excess: 5000}},
		{p: &Police{Rate: 5 * nodes.Mbps, Burst: 15_000, Peak: 8 * nodes.Mbps, PeakBurst: 30_000}},
		{s: &Shape{Rate: 5 * nodes.Mbps, Burst: 15_000, Longest: 100 * des.Millisecond}},
	} {
		a := &s.Aggregates[i]
		if diff := cmp.Diff(want.p, a.Police) + cmp.Diff(want.s, a.Shape); diff != "" {
			t.Errorf("%s (-want +got):\n%s", a.Name, diff)
		}
	}
}
