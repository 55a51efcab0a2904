package build

import (
	"testing"
	"testing/fstest"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/packet"
	"ferrule/scenarios"
)

// A policer of 5 Mb/s lets half of a constant stream of 10 Mb/s pass, and a
// shaper of 5 Mb/s as much; a queue with CoDel is built as asked.
func TestConditionersAreBuilt(t *testing.T) {
	const file = `
scenario: s
run: { length: 4s, warm-up: 1s }
classes: [ { name: gold, traffic: t, drop: codel } ]
traffic: [ { name: t, model: constant, packet: 1000B } ]
sites: [ { name: a, position: [0km, 0km] }, { name: b, position: [30km, 40km] } ]
fibres: [ { between: [a, b] } ]
circuits: [ { name: ab, along: [a-b], slots: 1 } ]
controller: { at: a }
aggregates:
  - { name: one, from: a, to: b, class: gold, load: 10Mbps, police: { rate: 5Mbps, burst: 2kB } }
  - { name: two, from: a, to: b, class: gold, load: 10Mbps, shape: { rate: 5Mbps, burst: 2kB, longest: 50ms } }
  - { name: three, from: a, to: b, class: gold, load: 10Mbps, police: { rate: 4Mbps, burst: 2kB, peak: 5Mbps, peak-burst: 2kB } }
`
	sc, err := scenarios.Load("s.yaml", []byte(file), fstest.MapFS{}, nil)
	if err != nil {
		t.Fatal(err)
	}
	m, err := New(sc, &sc.Plans[0], 1)
	if err != nil {
		t.Fatal(err)
	}
	if m.Plant.Classes[0].Drop != nodes.DropCoDel {
		t.Error("the class is not managed by CoDel")
	}
	m.Network.Run(m.Kernel(nil), nil)
	totals, bad := m.Network.Audit()
	if len(bad) > 0 {
		t.Errorf("audit: %q", bad)
	}
	if totals.Lost[packet.LostPoliced] == 0 {
		t.Error("nothing was policed")
	}
	for a := range 3 {
		var bytes uint64
		for _, c := range m.Network.Meters()[nodes.WayOf(nodes.AggID(a), nodes.Out)].Cells {
			if c != nil {
				bytes += c.Bytes
			}
		}
		if want := 5e6 / 8 * (4 * des.Second).Seconds(); float64(bytes) < 0.98*want || float64(bytes) > 1.02*want {
			t.Errorf("%s: %d B arrived, want %.0f", sc.Aggregates[a].Name, bytes, want)
		}
	}
}
