package build

import (
	"testing"
	"testing/fstest"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/scenarios"
)

// demands is a scenario whose aggregates differ in how they send.
const demands = `
scenario: demands
run: { length: 10s, warm-up: 1s }
classes: [ { name: gold, queue: fifo, traffic: probes } ]
traffic:
  - { name: probes, model: poisson,  packet: 500B }
  - { name: beats,  model: constant, packet: 500B, rate: 2Mbps }
  - { name: films,  model: video, rate: 1Mbps, frames: 25/s, flows-arrive: poisson, hold: { exponential: { mean: 2s } } }
  - { name: shows,  model: video, rate: 1Mbps, frames: 25/s, flows-arrive: regular, hold: 2s }
  - { name: walls,  model: video, rate: 1Mbps, frames: 25/s }
  - { name: talks,  model: voice, codec: G.711, flows-arrive: poisson, hold: { exponential: { mean: 2s } } }
sites: [ { name: a, position: [0km, 0km] }, { name: b, position: [30km, 40km] } ]
fibres: [ { between: [a, b] } ]
circuits: [ { name: ab, along: [a-b], slots: 1 } ]
aggregates:
  - { name: small,  between: [a, b], class: gold, load: 4Mbps }
  - { name: medium, between: [a, b], class: gold, load: 300Mbps }
  - { name: large,  between: [a, b], class: gold, load: 60Gbps }
  - { name: rated,  between: [a, b], class: gold, traffic: beats, load: 21Mbps }
  - { name: stated, between: [a, b], class: gold, traffic: beats, flows: 17 }
  - { name: films,  between: [a, b], class: gold, traffic: films, load: 40Mbps }
  - { name: shows,  between: [a, b], class: gold, traffic: shows, flows: 40 }
  - { name: walls,  between: [a, b], class: gold, traffic: walls, flows: 40 }
  - { name: talks,  between: [a, b], class: gold, traffic: talks, flows: 40 }
`

// packetsOf returns what way Out of the named aggregate sends up to end.
func packetsOf(t *testing.T, name string, end des.Time) []nodes.Packet {
	t.Helper()
	sc, err := scenarios.Load("demands.yaml", []byte(demands), fstest.MapFS{}, nil)
	if err != nil {
		t.Fatal(err)
	}
	for i := range sc.Aggregates {
		if sc.Aggregates[i].Name == name {
			s, err := newMaker(sc, 1).source(nodes.AggID(i), nodes.Out)
			if err != nil {
				t.Fatal(err)
			}
			return s.Emit(end, nil)
		}
	}
	t.Fatalf("no aggregate %s", name)
	return nil
}

// flowsOf counts the flows that packets belong to.
func flowsOf(ps []nodes.Packet) int {
	seen := map[uint16]bool{}
	for _, p := range ps {
		seen[p.Flow] = true
	}
	return len(seen)
}

// Streams hold as many flows as the file says, or as its load is worth.
func TestStreamFlows(t *testing.T) {
	for _, x := range []struct {
		name string
		end  des.Time
		want int
	}{
		{"small", 100 * des.Millisecond, 1},   // 4/10 Mbit/s, at least one
		{"medium", 100 * des.Millisecond, 30}, // 300/10
		{"large", 20 * des.Millisecond, 4096}, // at most
		{"rated", 100 * des.Millisecond, 11},  // 21/2, rounded
		{"stated", 100 * des.Millisecond, 17}, // as written
		{"walls", 100 * des.Millisecond, 40},  // as written
	} {
		if got := flowsOf(packetsOf(t, x.name, x.end)); got != x.want {
			t.Errorf("%s: %d flows, want %d", x.name, got, x.want)
		}
	}
}

// Flows of video come and go: of a load of 40 flows that last 2 s, 20 a second
// arrive, so about 240 are seen in 10 s, and at most 40 where they do not.
func TestVideoFlowsArrive(t *testing.T) {
	for _, x := range []struct {
		name     string
		low, top int
	}{
		{"films", 200, 280}, // Poisson: 240 with a standard deviation of 15.5
		{"shows", 239, 241},
		{"walls", 40, 40},
	} {
		if got := flowsOf(packetsOf(t, x.name, 10*des.Second)); got < x.low || got > x.top {
			t.Errorf("%s: %d flows, want %d to %d", x.name, got, x.low, x.top)
		}
	}
}

// Forty calls on average, 50 packets a second each: 20 s hold 40,000 packets.
// The number of calls has variance 40 and a correlation time of 2 s, so the
// mean over 20 s has a standard deviation of about 40*50*20*sqrt(2*2/20/40),
// 2,800 packets; four of them are allowed.
func TestCallsThatArriveByNumber(t *testing.T) {
	n := len(packetsOf(t, "talks", 20*des.Second))
	if n < 40_000-11_200 || n > 40_000+11_200 {
		t.Errorf("%d packets in 20 s, want about 40,000", n)
	}
}
