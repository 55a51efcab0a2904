package study

import (
	"fmt"
	"math"
	"testing"

	"ferrule/scenarios"
)

// Two sites 100 km apart, 1000 B at 10 Mbit/s each way and half as much back in
// another class, routers of 15 us, a port of 1 Gbit/s with frames of 26 B more:
// 489.739 us of light (4.89739 us/km), 8.208 us on the line and 30 us in the
// routers make 527.947 us. By hand.
func TestCalibrate(t *testing.T) {
	const text = `scenario: s
run: { length: 10s }
classes: [ { name: gold, queue: fifo, traffic: t }, { name: rest, queue: fifo, traffic: t } ]
traffic: [ { name: t, model: poisson, packet: 1000B } ]
sites: [ { name: a }, { name: b } ]
fibres: [ { between: [a, b], length: 100km } ]
circuits: [ { name: ab, along: [a-b], slots: 1, rate: 1Gbps } ]
aggregates:
  - { name: x, between: [a, b], class: gold, load: 10Mbps }
  - { name: y, from: b, to: a, class: rest, load: 5Mbps }
`
	sc, err := scenarios.Load("s.yaml", []byte(text), nil, nil)
	if err != nil {
		t.Fatal(err)
	}
	ms, err := scenarios.ParseMeasured("m.csv", []byte("what,of,from,to,value\nlink,ab,a,b,8Mbps\nlink,ab,b,a,20Mbps\ndelay,gold,a,b,1ms\ndelay,rest,a,b,1ms\n"), sc)
	if err != nil {
		t.Fatal(err)
	}
	got, err := Calibrate(sc, Options{}, ms)
	if err != nil || len(got) != 4 {
		t.Fatal(got, err)
	}
	for i, want := range [][2]float64{{10e6, 2e6}, {15e6, -5e6}, {527.947e-6, -472.053e-6}} {
		if g := got[i]; g.Model == nil || math.Abs(*g.Model/want[0]-1) > 1e-5 || math.Abs(*g.Difference/want[1]-1) > 1e-5 || math.Abs(*g.Share*g.Measured / *g.Difference - 1) > 1e-9 {
			t.Errorf("row %d: %+v, want model %v, difference %v", i, g, want[0], want[1])
		}
	}
	if got[3].Model != nil || got[3].Difference != nil {
		t.Errorf("a delay of no traffic: %+v", got[3])
	}
}

// Each fault of a table of measurements is told at its place.
func TestMeasuredFaults(t *testing.T) {
	const text = "scenario: s\nrun: { length: 10s }\nclasses: [ { name: gold } ]\nsites: [ { name: a }, { name: b }, { name: c } ]\nfibres: [ { between: [a, b], length: 100km } ]\ncircuits: [ { name: ab, along: [a-b], slots: 1 } ]\n"
	sc, err := scenarios.Load("s.yaml", []byte(text), nil, nil)
	if err != nil {
		t.Fatal(err)
	}
	const head = "what,of,from,to,value\n"
	for in, want := range map[string]string{
		"":                              "m.csv: the table holds no measurements; begin with the row what,of,from,to,value",
		"a,b\n":                         `m.csv:1:1: what: the first row is "a,b"; begin with the row what,of,from,to,value`,
		head + "link,ab\n":              "m.csv:2:1: what: the row has 2 fields; write what,of,from,to,value",
		head + "load,ab,a,b,1Mbps\n":    `m.csv:2:1: what: "load" is not known here; write link or delay`,
		head + "link,abc,a,b,1Mbps\n":   `m.csv:2:6: of: no circuit is called "abc"; did you mean "ab"?`,
		head + "link,ab,a,c,1Mbps\n":    `m.csv:2:9: from: the circuit ab does not go from a to c; it goes between a and b`,
		head + "delay,gold,a,x,1ms\n":   `m.csv:2:14: to: no site is called "x"; did you mean "a"?`,
		head + "delay,gold,a,b,-1ms\n":  `m.csv:2:16: value: "-1ms" is negative; write a value at or above 0`,
		head + "delay,gold,a,b,1Mbps\n": `m.csv:2:16: value: "1Mbps" is a rate, not a time; write a number and one of ps ns us ms s min h (not Mbps)`,
		head + "link,ab,a,b,\"1\n":      `m.csv:2:16: not CSV: extraneous or missing " in quoted-field; mind the quotes`,
	} {
		if _, err := scenarios.ParseMeasured("m.csv", []byte(in), sc); fmt.Sprint(err) != want {
			t.Errorf("%q\n got %v\nwant %s", in, err, want)
		}
	}
}
