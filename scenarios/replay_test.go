package scenarios

import (
	"fmt"
	"math"
	"strings"
	"testing"
	"testing/fstest"

	"github.com/google/go-cmp/cmp"

	"ferrule/des"
	"ferrule/nodes"
)

// replays has the traffic and the aggregates of a test in the middle.
const replays = `scenario: s
run: { length: 10s, warm-up: 1s }
classes: [ { name: gold, dscp: EF, queue: fifo }, { name: rest, queue: fifo } ]
sites: [ { name: a, position: [0km, 0km] }, { name: b, position: [30km, 40km] } ]
fibres: [ { between: [a, b] } ]
circuits: [ { name: ab, along: [a-b], slots: 1 } ]
traffic: [ { name: tap, model: replay, %s } ]
aggregates: [ { name: x, %s, class: gold, traffic: tap%s } ]
`

// measured are files of traffic. Of gold the table has 1000 B and 500 B, of 4
// packets in 3 s: its period is 4 s and the load 3 kbit/s.
func measured() fstest.MapFS {
	return fstest.MapFS{
		"table.csv": {Data: []byte("time,bytes,class\n5,1000,gold\n6,1,rest\n7,500,gold\n8,1,rest\n")},
		"flows.csv": {Data: []byte("start,end,bytes,packets,from,to,dscp\n0,3,2000,4,192.0.2.1,198.51.100.1,46\n0,3,200,4,192.0.2.2,198.51.100.1,0\n")},
		"bad.csv":   {Data: []byte("time,bytes,class\n5,1000,gold\n6,1,silver\n")},
		"empty":     {},
		"no.pcap":   {Data: []byte("\xd4\xc3\xb2\xa1\x02\x00\x04\x00\x00\x00\x00\x00\x00\x00\x00\x00\x40\x00\x00\x00\x01\x00\x00\x00\x01")},
		"m.csv":     {Data: []byte("from,to,class,rate\nb,a,rest,1Mbps\n")},
	}
}

func TestReplay(t *testing.T) {
	for _, x := range []struct {
		traffic, ends, more string
		load                nodes.Rate
		speed               [2]float64
	}{
		{"file: table.csv", "between: [a, b]", "", 3000, [2]float64{1, 1}},
		{"file: table.csv, loop: true, time-scale: 50%, format: packets", "from: a, to: b", "", 6000, [2]float64{2, 0}},
		{"file: table.csv", "from: b, to: a", ", load: 4500bps", 4500, [2]float64{1.5, 0}},
		// 7 gaps of 8 packets make 24/7 s: 2000 B are 4666.7 bit/s.
		{"file: flows.csv", "from: a, to: b", "", 4667, [2]float64{1, 0}},
		{"file: flows.csv, assign: [ { from: 192.0.2.2, class: gold, way: out }, { dscp: EF, to: 198.51.100.0/24, class: rest } ]",
			"from: a, to: b", "", 467, [2]float64{1, 0}},
	} {
		s, err := Load("s.yaml", fmt.Appendf(nil, replays, x.traffic, x.ends, x.more), measured(), nil)
		if err != nil {
			t.Fatal(err)
		}
		a := &s.Aggregates[0]
		if a.Load != x.load || math.Abs(a.Speed[0]-x.speed[0])+math.Abs(a.Speed[1]-x.speed[1]) > 1e-9 {
			t.Errorf("%s: load %d, speed %v, want %d, %v", x.traffic, a.Load, a.Speed, x.load, x.speed)
		}
		if len(s.Captures) != 1 || !strings.Contains(x.traffic, s.Captures[0]) || s.Traffic[0].Trace == nil {
			t.Errorf("%s: captures %q", x.traffic, s.Captures)
		}
	}
}

// What a file holds is part of what a scenario is made of.
func TestReplayHash(t *testing.T) {
	files := measured()
	text := fmt.Appendf(nil, replays, "file: table.csv", "from: a, to: b", "")
	one, err := Load("s.yaml", text, files, nil)
	if err != nil {
		t.Fatal(err)
	}
	files["table.csv"] = &fstest.MapFile{Data: append(files["table.csv"].Data, "9,1,rest\n"...)}
	two, err := Load("s.yaml", text, files, nil)
	if err != nil || one.Hash == two.Hash {
		t.Errorf("hashes %s and %v, %v", one.Hash, two.Hash, err)
	}
}

// One fault, at its place in the scenario or in the file.
func TestReplayFaults(t *testing.T) {
	const one = "from: a, to: b"
	for _, x := range []struct{ traffic, ends, more, want string }{
		{"file: bad.csv", one, "", `bad.csv:3:5: class: "silver" is not a class; write the name of a class of the scenario`},
		{"file: empty", one, "", `empty: the file is empty; name a file with something in it`},
		{"file: no.pcap", one, "", `no.pcap: packet 1: the file ends within the header of the packet; leave out what is not whole`},
		{"file: gone.pcap", one, "", `s.yaml:7:46: traffic.tap.file: "gone.pcap" cannot be read: file does not exist; name a file beside the scenario, such as traffic.pcap`},
		{"file: ../up.pcap", one, "", `s.yaml:7:46: traffic.tap.file: "../up.pcap" cannot be read: a name is relative and without ".."; name a file beside the scenario, such as traffic.pcap`},
		{"loop: true", one, "", `s.yaml:7:12: traffic.tap.file: is missing; write the name of a capture or a table beside the scenario`},
		{"file: table.csv, format: pcap", one, "", `table.csv: the file is of another format; leave the format out`},
		{"file: table.csv, format: pacp", one, "", `s.yaml:7:65: traffic.tap.format: "pacp" is not known here; did you mean "pcap"?`},
		{"file: table.csv, rate: 1Mbps", one, "", `s.yaml:7:63: traffic.tap.rate: the model replay does not use it; the model uses file, format, loop, time-scale, assign`},
		{"file: table.csv, time-scale: 0%", one, "", `s.yaml:7:69: traffic.tap.time-scale: 0% is out of range; write 0.0001% to 1e+08%`},
		{"file: table.csv, assign: [ { class: gold } ]", one, "", `s.yaml:7:65: traffic.tap.assign: leave it out`},
		{"file: flows.csv, assign: [ { from: 192.0.2.7/24, class: gold } ]", one, "", `s.yaml:7:75: traffic.tap.assign[0].from: "192.0.2.7/24" has bits behind its length; write 192.0.2.0/24`},
		{"file: flows.csv, assign: [ { from: x, class: gold } ]", one, "", `s.yaml:7:75: traffic.tap.assign[0].from: "x" is not a range of addresses; write one such as 192.0.2.0/24 or 2001:db8::/32`},
		{"file: flows.csv, assign: [ { class: god } ]", one, "", `s.yaml:7:76: traffic.tap.assign[0].class: no class is called "god"; did you mean "gold"?`},
		{"file: flows.csv, assign: [ { dscp: EF } ]", one, "", `s.yaml:7:67: traffic.tap.assign[0].class: is missing; write class: and the name of a class`},
		{"file: flows.csv, assign: [ { class: gold, way: out } ]", "between: [a, b]", "", `s.yaml:8:50: aggregates.x.class: flows.csv holds no packets of gold for the way back; mind assign, or the code points of the classes`},
		{"file: table.csv, time-scale: 200%", one, ", load: 1Mbps", `s.yaml:8:75: aggregates.x.load: the traffic tap says how fast it goes; leave out load, or the time-scale`},
		{"file: table.csv", one, ", flows: 3", `s.yaml:8:76: aggregates.x.flows: the traffic tap does not say the rate of a flow; write load: and a rate`},
		{"file: table.csv", one, ", load: 40Gbps", `s.yaml:8:75: aggregates.x.load: table.csv has 3e+03 bit/s of gold; write a load that is nearer`},
	} {
		_, err := Load("s.yaml", fmt.Appendf(nil, replays, x.traffic, x.ends, x.more), measured(), nil)
		want := strings.Replace(x.want, "assign: leave it out", "assign: a table of packets names the classes itself; leave it out", 1)
		if got := fmt.Sprint(err); got != want {
			t.Errorf("%s %s\n got %s\nwant %s", x.traffic, x.more, got, want)
		}
	}
}

// A rate of a matrix says how fast the traffic of the class is replayed.
func TestReplayOfMatrix(t *testing.T) {
	text := strings.Replace(fmt.Sprintf(replays, "file: table.csv", "from: a, to: b", ""), "name: rest,", "name: rest, traffic: tap,", 1)
	s, err := Load("s.yaml", []byte(text+"demand: [ { matrix: m.csv } ]\n"), measured(), nil)
	if err != nil {
		t.Fatal(err)
	}
	// 2 B in 4 s are 4 bit/s.
	if a := s.Aggregates[1]; a.Load != nodes.Mbps || a.Speed[0] != 250_000 {
		t.Errorf("load %d, speed %v", a.Load, a.Speed)
	}
	files := measured()
	files["m.csv"] = &fstest.MapFile{Data: []byte("from,to,class,rate\nb,a,rest,10Mbps\n")}
	_, err = Load("s.yaml", []byte(text+"demand: [ { matrix: m.csv } ]\n"), files, nil)
	if got, want := fmt.Sprint(err), "m.csv:2:10: rate: table.csv has 4 bit/s of rest; write a load that is nearer"; got != want {
		t.Errorf("%s\nwant %s", got, want)
	}
}

// The bursty models, as written and by default.
func TestBurstyModels(t *testing.T) {
	load := func(traffic string) (Traffic, error) {
		text := strings.Replace(fmt.Sprintf(replays, "x", "from: a, to: b", ", load: 1Mbps"), "model: replay, x", traffic, 1)
		s, err := Load("s.yaml", []byte(text), nil, nil)
		if err != nil {
			return Traffic{}, err
		}
		return s.Traffic[0], nil
	}
	for text, want := range map[string]Traffic{
		"model: onoff": {Model: ModelOnOff, Hurst: 0.8, Peak: 10 * nodes.Mbps, OnFor: 100 * des.Millisecond, OffFor: 200 * des.Millisecond},
		"model: onoff, hurst: 0.7, peak: 2Mbps, packet: 500B, on-for: 1s, off-for: 2s": {
			Model: ModelOnOff, Hurst: 0.7, Peak: 2 * nodes.Mbps, OnFor: des.Second, OffFor: 2 * des.Second,
		},
		"model: mmpp, packet: 500B":            {Model: ModelMMPP, HighFor: 100 * des.Millisecond, LowFor: 100 * des.Millisecond},
		"model: mmpp, packet: 500B, low: 20%":  {Model: ModelMMPP, Low: 0.2, HighFor: 100 * des.Millisecond, LowFor: 100 * des.Millisecond},
		"model: pages":                         {Model: ModelPages, Pace: 100 * nodes.Mbps, Parse: 130 * des.Millisecond},
		"model: pages, pace: 5Mbps, parse: 1s": {Model: ModelPages, Pace: 5 * nodes.Mbps, Parse: des.Second},
		"model: voice, talkspurts: true": {
			Model: ModelVoice, Codec: "G.711", Talkspurts: true, Spurt: 1004 * des.Millisecond, Silence: 1587 * des.Millisecond,
		},
		"model: voice, talkspurts: true, spurt: 1s, silence: 2s": {
			Model: ModelVoice, Codec: "G.711", Talkspurts: true, Spurt: des.Second, Silence: 2 * des.Second,
		},
	} {
		got, err := load(text)
		got.Name, got.Pos, got.Stop, got.Packet = "", Pos{}, 0, want.Packet
		if diff := cmp.Diff(want, got); err != nil || diff != "" {
			t.Errorf("%s: %v\n%s", text, err, diff)
		}
	}
	for text, want := range map[string]string{
		"model: onoff, hurst: 0.3":                            "traffic.tap.hurst: 0.3 is not between 0.51 and 0.99",
		"model: onoff, on-for: 1us":                           "traffic.tap.on-for: 1us is shorter than a packet at the peak, 800us",
		"model: onoff, packet: { exponential: { mean: 9B } }": "traffic.tap.packet: the packets of the model have one size; write one size, such as 1000B",
		"model: mmpp":                                                     "traffic.tap.packet: is missing; write for instance packet: 1000B",
		"model: mmpp, packet: 9B, low: 1":                                 "traffic.tap.low: the low state sends as much as the high one; write a number below 1",
		"model: mmpp, packet: 9B, low-for: 0s":                            "traffic.tap.low-for: 0s is out of range; write 1ns to 1000s",
		"model: pages, pace: 1kbps":                                       "traffic.tap.pace: 1kbps is out of range; write 100kbps to 4Tbps",
		"model: voice, spurt: 1s":                                         "traffic.tap.spurt: calls without talkspurts have none; write talkspurts: true as well",
		"model: voice, talkspurts: true, spurt: 1ms":                      "traffic.tap.spurt: 1ms is not between an interval, 20ms, and 1000 s",
		"model: voice, talkspurts: true, flows-arrive: poisson, hold: 9s": "traffic.tap.flows-arrive: calls with talkspurts stand for the whole run; leave out one of the two",
	} {
		_, err := load(text)
		if got := fmt.Sprint(err); !strings.HasPrefix(got, "s.yaml:7:") || !strings.HasSuffix(got, ": "+want) {
			t.Errorf("%s\n got %s\nwant %s", text, got, want)
		}
	}
}
