package build

import (
	"bytes"
	"errors"
	"fmt"
	"testing"
	"testing/fstest"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/scenarios"
	"ferrule/workloads/replay"
)

// measured is a scenario of traffic as it was measured, and of bursty models.
const measured = `
scenario: measured
run: { length: 20s, warm-up: 1s }
classes: [ { name: gold, dscp: EF, queue: fifo }, { name: rest, queue: fifo } ]
traffic:
  - { name: table, model: replay, file: table.csv, loop: true }
  - { name: flows, model: replay, file: flows.csv, loop: true, time-scale: 25% }
  - { name: burst, model: onoff, hurst: 0.7, packet: 500B, peak: 1Mbps, on-for: 20ms, off-for: 50ms }
  - { name: modul, model: mmpp, packet: 500B, low: 20%, high-for: 10ms, low-for: 20ms }
  - { name: pages, model: pages }
  - { name: talks, model: voice, talkspurts: true }
sites: [ { name: a, position: [0km, 0km] }, { name: b, position: [30km, 40km] } ]
fibres: [ { between: [a, b] } ]
circuits: [ { name: ab, along: [a-b], slots: 1 } ]
aggregates:
  - { name: table, between: [a, b], class: gold, traffic: table }
  - { name: fast,  between: [a, b], class: rest, traffic: table, load: 8Mbps }
  - { name: flows, between: [a, b], class: gold, traffic: flows }
  - { name: burst, between: [a, b], class: rest, traffic: burst, load: 5Mbps }
  - { name: modul, between: [a, b], class: rest, traffic: modul, load: 5Mbps }
  - { name: pages, between: [a, b], class: rest, traffic: pages, load: 50Mbps }
  - { name: talks, between: [a, b], class: gold, traffic: talks, flows: 100 }
  - { name: calls, between: [a, b], class: gold, traffic: talks, load: 3Mbps }
`

// files are a table of 10,000 packets, 1 ms apart, every fourth gold, and a
// table of 50 flows of gold. bytes are those of gold and of the rest.
func files() (fs fstest.MapFS, gold, rest, flows int64) {
	var table, records bytes.Buffer
	table.WriteString("time,bytes,class\n")
	for i := range 10_000 {
		size := int64(100 + i%900)
		class := "rest"
		if i%4 == 0 {
			class = "gold"
			gold += size
		} else {
			rest += size
		}
		fmt.Fprintf(&table, "%d.%03d,%d,%s\n", i/1000, i%1000, size, class)
	}
	records.WriteString("start,end,bytes,packets,from,to,dscp\n")
	for i := range int64(50) {
		fmt.Fprintf(&records, "%d.25,%d.5,%d,%d,192.0.2.1,198.51.100.%d,46\n", i, i+i%7, 10_000+i, 10+i, i)
		flows += 10_000 + i
	}
	return fstest.MapFS{"table.csv": {Data: table.Bytes()}, "flows.csv": {Data: records.Bytes()}}, gold, rest, flows
}

// What a file holds is what is sent: over whole periods to the byte, in time as
// its scale or the load says. The bursty models send what is asked for within
// what chance allows.
func TestMeasuredTraffic(t *testing.T) {
	fs, gold, rest, flows := files()
	sc, err := scenarios.Load("measured.yaml", []byte(measured), fs, nil)
	if err != nil {
		t.Fatal(err)
	}
	m, err := New(sc, &sc.Plans[0], 1)
	if err != nil {
		t.Fatal(err)
	}
	sent := func(i int, end des.Time) (bytes int64) {
		s, err := newMaker(sc, 1).source(nodes.AggID(i), nodes.Back)
		if err != nil {
			t.Fatal(err)
		}
		for _, p := range s.Emit(end, nil) {
			bytes += int64(p.Size)
		}
		return bytes
	}
	// The periods are 10 s, that at the speed that gives 8 Mbit/s, and 13.8125 s
	// and the mean of 1724 gaps, less at a quarter of the time.
	trace := sc.Traffic[1].Trace
	for i, x := range []struct {
		period des.Time
		bytes  int64
	}{
		{10 * des.Second, gold},
		{des.Time(float64(10*des.Second) * (float64(rest) * 8 / 10 / 8e6)), rest},
		{trace.Period() / 4, flows},
	} {
		if got := sent(i, 2*x.period-des.Microsecond); got != 2*x.bytes {
			t.Errorf("%s: %d B in two periods, want %d", sc.Aggregates[i].Name, got, 2*x.bytes)
		}
		want := float64(x.bytes) * 8 / x.period.Seconds()
		if got := m.Asked[nodes.WayOf(nodes.AggID(i), nodes.Back)]; got < want*(1-1e-6) || got > want*(1+1e-6) {
			t.Errorf("%s: asked for %v bit/s, want %v", sc.Aggregates[i].Name, got, want)
		}
	}
	// A call of 200 B every 20 ms, 1004 ms of every 2591 ms, is 31,000 bit/s.
	for i, x := range []struct{ want, off float64 }{{5e6, 0.15}, {5e6, 0.05}, {50e6, 0.1}, {3.1e6, 0.1}, {3e6, 0.1}} {
		got := float64(sent(3+i, 100*des.Second)) * 8 / 100
		if got < x.want*(1-x.off) || got > x.want*(1+x.off) {
			t.Errorf("%s: %v bit/s, want %v within %v", sc.Aggregates[3+i].Name, got, x.want, x.off)
		}
	}
}

// cutOff is a file that cannot be read any more after a while.
type cutOff struct {
	*bytes.Reader
	left int
}

func (c *cutOff) ReadAt(p []byte, at int64) (int, error) {
	if c.left -= len(p); c.left < 0 {
		return 0, errors.New("the disk is gone")
	}
	return c.Reader.ReadAt(p, at)
}

// A file that fails during a run is told of.
func TestFileFails(t *testing.T) {
	var b bytes.Buffer
	b.WriteString("time,bytes,class\n")
	for i := range 600_000 {
		fmt.Fprintf(&b, "%d.%06d,100,gold\n", i/1000, i%1000*1000)
	}
	fs, _, _, _ := files()
	sc, err := scenarios.Load("measured.yaml", []byte(measured), fs, nil)
	if err != nil {
		t.Fatal(err)
	}
	size := int64(b.Len()) // of which 8 MB would be held
	tr, err := replay.Open(&cutOff{bytes.NewReader(b.Bytes()), 2*int(size) + 200_000}, size, replay.Spec{Name: "table.csv", Classes: []string{"gold", "rest"}})
	if err != nil {
		t.Fatal(err)
	}
	sc.Traffic[0].Trace = tr
	sc.Aggregates = sc.Aggregates[:1]
	m, err := New(sc, &sc.Plans[0], 1)
	if err != nil {
		t.Fatal(err)
	}
	copied := m.Clone()
	copied.Network.Run(copied.Kernel(des.Serial{}), nil)
	if err := copied.Err(); err == nil || err.Error() != "table.csv: cannot be read: the disk is gone" {
		t.Errorf("a copy: %v", err)
	}
	if err := m.Err(); err != nil {
		t.Errorf("the original, of which only a copy has run: %v", err)
	}
	m.Network.Run(m.Kernel(des.Serial{}), func() bool { return false })
	if err := m.Err(); err == nil || err.Error() != "table.csv: cannot be read: the disk is gone" {
		t.Errorf("%v", err)
	}
}
