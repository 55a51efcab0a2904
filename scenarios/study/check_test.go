package study

import (
	"context"
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"

	"ferrule/scenarios"
	"ferrule/scenarios/result"
)

// triangle is three sites 100 km apart with a circuit of 1 Gb/s on each side.
// Packets of 1000 B take 1026 B on a line, so that 300 Mb/s load it to
// 30.78 %.
const triangle = `
scenario: triangle
run: { length: 10s, warm-up: 1s, seed: 1 }
classes:
  - { name: gold, dscp: EF, queue: strict, buffer: 5ms, traffic: even }
  - { name: rest, dscp: BE, queue: strict, buffer: 5ms, traffic: even }
traffic:
  - { name: even, model: constant, packet: 1000B }
sites: [ { name: a }, { name: b }, { name: c } ]
fibres:
  - { between: [a, b], length: 100km, risk-groups: [AB] }
  - { between: [b, c], length: 100km }
  - { between: [a, c], length: 100km, risk-groups: [AC] }
circuits:
  - { name: ab, along: [a-b], slots: 1, rate: 1Gbps, recovery: none, hold-off: 0ms }
  - { name: bc, along: [b-c], slots: 1, rate: 1Gbps }
  - { name: ac, along: [a-c], slots: 1, rate: 1Gbps }
aggregates:
  - { name: x, from: a, to: c, class: gold, load: 300Mbps }
  - { name: y, between: [a, b], class: rest, load: 400Mbps }
controller: { at: a }
plans:
  - name: other
    in-place: []
`

// checked loads a scenario, changes words of it, and checks it.
func checked(t *testing.T, text, plan string, changes ...string) *result.Check {
	t.Helper()
	sc := loaded(t, text, changes...)
	c, err := Check(context.Background(), sc, Options{Plan: plan})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := result.Encode(c); err != nil {
		t.Fatal(err)
	}
	return c
}

func loaded(t *testing.T, text string, changes ...string) *scenarios.Scenario {
	t.Helper()
	for i := 0; i < len(changes); i += 2 {
		if !strings.Contains(text, changes[i]) {
			t.Fatalf("nothing to change: %q", changes[i])
		}
		text = strings.Replace(text, changes[i], changes[i+1], 1)
	}
	sc, err := scenarios.Load("test.yaml", []byte(text), nil, nil)
	if err != nil {
		t.Fatal(err)
	}
	return sc
}

// A link as it is expected.
type want struct {
	circuit, from string
	use, worst    float64
	by            string
	growth        float64 // 0: none
}

func expectLinks(t *testing.T, c *result.Check, wants []want) {
	t.Helper()
	for _, w := range wants {
		i := slices.IndexFunc(c.Links, func(l result.Link) bool { return l.Circuit == w.circuit && l.From == w.from })
		if i < 0 {
			t.Errorf("no link %s from %s", w.circuit, w.from)
			continue
		}
		l, name := c.Links[i], w.circuit+" from "+w.from
		near(t, name+": use", *l.Utilisation, w.use)
		near(t, name+": worst use", *l.WorstUtilisation, w.worst)
		if l.WorstFibre != w.by {
			t.Errorf("%s: worst failure %q, want %q", name, l.WorstFibre, w.by)
		}
		if (l.GrowthLeft != nil) != (w.growth > 0) {
			t.Errorf("%s: growth %v, want %v", name, l.GrowthLeft, w.growth)
		} else if w.growth > 0 {
			near(t, name+": growth", *l.GrowthLeft, w.growth)
		}
	}
}

// Worked by hand: x takes a-c, and a-b-c when that is cut; y takes a-b both
// ways, and a-c-b when that is cut.
func TestCheckTriangle(t *testing.T) {
	c := checked(t, triangle, "")
	if len(c.Links) != 6 {
		t.Errorf("%d links, want 6", len(c.Links))
	}
	expectLinks(t, c, []want{
		{"ab", "a", 0.4104, 0.7182, "a-c", 1 / 0.4104},
		{"ab", "b", 0.4104, 0.4104, "b-c", 1 / 0.4104},
		{"bc", "b", 0, 0.4104, "a-b", 0}, // y from b to a, by c
		{"bc", "c", 0, 0.4104, "a-b", 0}, // y from a to b, by c
		{"ac", "a", 0.3078, 0.7182, "a-b", 1 / 0.3078},
		{"ac", "c", 0, 0.4104, "a-b", 0},
	})
	if l := c.Links[0]; l.LoadBps != 400e6 || l.PayloadBps != 1e9 || l.To != "b" {
		t.Errorf("%+v", l)
	}
	expectFinding(t, c, result.Note, "all loads", "times 2.44 they fill the first link, ab from a; after a failure of a-c, times 1.39 fill ab from a")
	// 300 and twice 400 Mb/s of 1000 B for 10 s, one hop each.
	near(t, "packet-hops", c.Estimate.PacketHops, 1.1e9/8000*10)
}

func expectFinding(t *testing.T, c *result.Check, s result.Severity, subject, text string) {
	t.Helper()
	if !slices.Contains(c.Findings, result.Finding{Severity: s, Subject: subject, Text: text}) {
		t.Errorf("no %s of %s: %q in\n%s", s, subject, text, listed(c))
	}
}

func listed(c *result.Check) string {
	var b strings.Builder
	for _, f := range c.Findings {
		fmt.Fprintf(&b, "%s of %s: %s\n", f.Severity, f.Subject, f.Text)
	}
	return b.String()
}

// A circuit that restores takes its load along: after a cut of a-b, ab goes by
// c on the fibres and routing changes only in that its metric is longer:
// a-c-b by two circuits is as long, so that y is split between both.
func TestCheckRestore(t *testing.T) {
	c := checked(t, triangle, "", "recovery: none", "recovery: restore")
	expectLinks(t, c, []want{
		{"ab", "a", 0.4104, 0.7182, "a-c", 1 / 0.4104},
		{"ac", "a", 0.3078, 0.5130, "a-b", 1 / 0.3078}, // 300 and half of 400
		{"bc", "c", 0, 0.2052, "a-b", 0},
	})
}

// No slot is free for the new route: the circuit stays down.
func TestCheckRestoreBlocked(t *testing.T) {
	full := `
  - { name: ac, along: [a-c], slots: 1, rate: 1Gbps }
  - { name: big, along: [a-c], slots: 79, carries: moved }`
	c := checked(t, triangle, "", "recovery: none", "recovery: restore", `
  - { name: ac, along: [a-c], slots: 1, rate: 1Gbps }`, full)
	expectLinks(t, c, []want{{"ac", "a", 0.3078, 0.7182, "a-b", 1 / 0.3078}})
}

// Two ways of equal metric from a to d carry half each, transit included.
func TestCheckEqualCost(t *testing.T) {
	c := checked(t, triangle, "",
		"{ name: c } ]", "{ name: c }, { name: d } ]",
		"  - { between: [b, c], length: 100km }", "  - { between: [b, d], length: 100km }\n  - { between: [c, d], length: 100km }",
		"  - { name: bc, along: [b-c], slots: 1, rate: 1Gbps }",
		"  - { name: bd, along: [b-d], slots: 1, rate: 1Gbps }\n  - { name: cd, along: [c-d], slots: 1, rate: 1Gbps }",
		"{ name: x, from: a, to: c,", "{ name: x, from: a, to: d,")
	expectLinks(t, c, []want{
		{"ab", "a", 0.4104 + 0.1539, 0.7182, "c-d", 1 / 0.5643},
		{"cd", "c", 0.1539, 0.7182, "a-b", 1 / 0.1539}, // all of x, and y from a to b
	})
	x := c.Candidates[0]
	if x.Aggregate != "x" || x.RoutersPassed != 1 || x.PortsFreed != 2 || len(x.Transit) != 2 {
		t.Fatalf("candidate %+v", x)
	}
	near(t, "transit freed", x.TransitFreedBps, 300e6)
	near(t, "share of b", x.Transit[0].Share, 1)
}

// Without the circuit ac, x passes b in transit beside nothing else. 300 Mb/s
// take 309 Mb/s with labels, 386.25 Mb/s at 80 % fill: one slot. The fibre a-c
// has all its 80 slots free.
func TestCheckCandidates(t *testing.T) {
	c := checked(t, triangle, "", "  - { name: ac, along: [a-c], slots: 1, rate: 1Gbps }\n", "")
	if len(c.Candidates) != 1 {
		t.Fatalf("candidates %+v, want x alone", c.Candidates)
	}
	x := c.Candidates[0]
	if x.Aggregate != "x" || x.From != "a" || x.To != "c" || x.Class != "gold" || x.Bps != 300e6 || x.RoutersPassed != 1 ||
		x.SlotsNeeded != 1 || *x.FreeSlots != 80 || !slices.Equal(x.BestWay, []string{"a-c"}) || x.PortsFreed != 2 || x.TransitFreedBps != 300e6 ||
		!slices.Equal(x.Transit, []result.SiteShare{{Site: "b", Share: 1}}) {
		t.Errorf("candidate %+v", x)
	}
}

// What 80 % of a payload holds: one slot has 1 243 950 547 bit/s and two have
// 2 487 901 094 (computed from the rates of ITU-T G.709 table 7-8), so 1030 B
// for 1000 B of IP fit 966 175 and 1 932 350 kbit/s. 80 slots have 103.7 Gbit/s,
// and 200 Gbit/s need 257.5.
func TestSlotsFor(t *testing.T) {
	for _, c := range []struct {
		bps  float64
		want int64
	}{{1e6, 1}, {966.1e6, 1}, {966.3e6, 2}, {1932.3e6, 2}, {1932.5e6, 3}, {200e9, 199}} {
		if got := slotsFor(&stream{bps: c.bps, pps: c.bps / 8000}); got != c.want {
			t.Errorf("%g bit/s: %d slots, want %d", c.bps, got, c.want)
		}
	}
}

// What is moved goes by its chain alone and takes a label more, 1030 B.
func TestCheckMoved(t *testing.T) {
	plan := `    in-place:
      - { circuit: { name: v, between: [a, c], slots: 1, rate: 1Gbps, carries: moved, when-down: WHEN } }
      - { move: x, onto: [v] }`
	for _, when := range []struct {
		word  string
		worst float64 // of ab from a, when v is cut with a-c
		text  string
	}{
		{"return", 0.7182, ""},
		{"drop", 0.4104, "when it is down 1 aggregate moved onto it, such as x, loses all packets until the repair: it has no recovery"},
		{"wait", 0.4104, "when it is down 1 aggregate moved onto it, such as x, waits until the repair: it has no recovery"},
	} {
		c := checked(t, triangle, "other", "    in-place: []", strings.Replace(plan, "WHEN", when.word, 1))
		by := "a-c"
		if when.worst < 0.5 {
			by = "b-c"
		}
		expectLinks(t, c, []want{
			{"v", "a", 0.3090, 0.3090, "a-b", 1 / 0.3090},
			{"ac", "a", 0, 0.4104, "a-b", 0},
			{"ab", "a", 0.4104, when.worst, by, 1 / 0.4104},
		})
		if when.text != "" {
			expectFinding(t, c, result.Warning, "v", when.text)
		}
	}
}

func TestCheckFindings(t *testing.T) {
	for _, f := range []struct {
		name     string
		changes  []string
		severity result.Severity
		subject  string
		text     string
	}{
		{"full link", []string{"400Mbps", "990Mbps"}, result.Fault, "ab", "it is loaded to 102 % from a with nothing broken: its queue fills and packets are lost"},
		{"nearly full link", []string{"400Mbps", "900Mbps"}, result.Warning, "ab", "it is loaded to 92 % from a with nothing broken: bursts will wait long"},
		{"full after a cut", []string{"400Mbps", "700Mbps"}, result.Warning, "ab", "a failure of a-c loads it to 103 %: its queue fills and packets are lost until the repair"},
		{"nearly full after a cut", []string{"400Mbps", "600Mbps"}, result.Note, "ab", "a failure of a-c loads it to 92 %"},
		{"no way at all", []string{"{ name: ab, along: [a-b], slots: 1, rate: 1Gbps, recovery: none, hold-off: 0ms }", "{ name: ab, along: [a-b], slots: 1, carries: moved }",
			"{ name: bc, along: [b-c], slots: 1, rate: 1Gbps }", "{ name: bc, along: [b-c], slots: 1, carries: moved }"},
			result.Fault, "y.out", "2 aggregates have no way to where they go: none of the packets will arrive"},
		{"no way after a cut", []string{"{ name: bc, along: [b-c], slots: 1, rate: 1Gbps }", "{ name: bc, along: [b-c], slots: 1, carries: moved }"},
			result.Warning, "a-b", "a cut leaves 2 aggregates (800 Mb/s) without a way until the repair, such as y.out"},
		{"shared duct", []string{"risk-groups: [AB]", "risk-groups: [duct]", "risk-groups: [AC]", "risk-groups: [duct]"},
			result.Warning, "duct", "the way and its only alternative share this risk group for 3 aggregates, such as x: a failure of a-b and a-c leaves no way, though a cut of one fibre does not"},
		{"silent class", []string{"class: gold, load", "class: rest, load"}, result.Note, "gold", "no aggregate sends in this class"},
		{"unmeasured aggregate", []string{"load: 300Mbps", "load: 300Mbps, stop: 500ms"}, result.Warning, "x", "1 aggregate sends during the warm-up only: nothing is measured"},
		{"light", []string{"traffic: even }", "traffic: even, objective: { delay-p99: 400us } }"},
			result.Fault, "gold", "delay-p99 within 400 us is impossible for 1 aggregate: light alone takes 490 us at least for x"},
		{"too few packets", []string{"traffic: even }", "traffic: even, objective: { pdv-p99.9: 1ms } }", "300Mbps", "8Mbps"},
			result.Warning, "gold", "pdv-p99.9 cannot be said of 1 of 1 aggregates: it takes 10000 packets, and x sends about 9000 in the run"},
		{"hold-off", []string{"hold-off: 0ms", "hold-off: 20s"}, result.Warning, "ab", "hold-off (20s) is longer than the run (10s): the packet layer never learns of a failure"},
		{"wait-to-restore", []string{"recovery: none", "recovery: restore"}, result.Note, "timing",
			"wait-to-restore (5min) is longer than the run (10s): no circuit returns to its first route"},
		{"poll", []string{"controller: { at: a }", "controller: { at: a, poll: 30s }"}, result.Note, "controller", "poll (30s) is longer than the run (10s): no port is ever read"},
		{"priority inversion", []string{"recovery: none", "recovery: restore, set-up-priority: 1",
			"{ name: ac, along: [a-c], slots: 1, rate: 1Gbps }", "{ name: ac, along: [a-c], slots: 1, rate: 1Gbps, recovery: restore, set-up-priority: 3 }"},
			result.Warning, "ac", "it carries gold and is restored after ab, which carries rest at most: its set-up priority is 3, not 1 (0 is the highest)"},
	} {
		t.Run(f.name, func(t *testing.T) {
			before := checked(t, triangle, "")
			if slices.ContainsFunc(before.Findings, func(x result.Finding) bool { return x.Subject == f.subject && x.Text == f.text }) {
				t.Error("found in the scenario as it was")
			}
			expectFinding(t, checked(t, triangle, "", f.changes...), f.severity, f.subject, f.text)
		})
	}
}

// The gravest finding comes first.
func TestFindingOrder(t *testing.T) {
	c := checked(t, triangle, "", "400Mbps", "990Mbps", "class: gold, load", "class: rest, load")
	rank := map[result.Severity]int{result.Fault: 0, result.Warning: 1, result.Note: 2}
	if !slices.IsSortedFunc(c.Findings, func(a, b result.Finding) int { return rank[a.Severity] - rank[b.Severity] }) || c.Findings[0].Severity != result.Fault {
		t.Error(listed(c))
	}
}

// Sizes of packets: G.711 with 20 ms sends 200 B (RFC 3551: 160 B of speech);
// files of 14 600 B are ten packets of 1500 B; a frame of 40 000 B is 26.67
// packets' worth and half a packet more on average.
func TestPacketSize(t *testing.T) {
	sc := loaded(t, triangle, "model: constant, packet: 1000B", "model: files, size: 14600B, pace: 100Mbps")
	if got := packetSize(&sc.Traffic[0]); got < 1499.9 || got > 1500.1 {
		t.Errorf("files: %v, want 1500", got)
	}
	sc = loaded(t, triangle, "model: constant, packet: 1000B", "model: voice, codec: G.711")
	if got := packetSize(&sc.Traffic[0]); got != 200 {
		t.Errorf("voice: %v, want 200", got)
	}
	sc = loaded(t, triangle, "model: constant, packet: 1000B", "model: video, rate: 8Mbps, frames: 25/s")
	near(t, "video", packetSize(&sc.Traffic[0]), 40000/(40000/1500.0+0.5))
}

// A run measures what the check says: in 0.3 s a constant stream differs from
// its mean by a packet or two of 11 000.
func TestCheckAgainstRun(t *testing.T) {
	sc := loaded(t, triangle, "length: 10s, warm-up: 1s", "length: 300ms, warm-up: 80ms")
	r, err := Run(context.Background(), sc, Options{Cores: 1})
	if err != nil {
		t.Fatal(err)
	}
	c, err := Check(context.Background(), sc, Options{})
	if err != nil {
		t.Fatal(err)
	}
	for _, l := range c.Links {
		got := 0.0 // a port that sent nothing need not be listed
		for _, p := range r.Ports {
			if p.Circuit == l.Circuit && p.From == l.From {
				got = *p.Utilisation
			}
		}
		if want := *l.Utilisation; math.Abs(got-want) > 0.001 {
			t.Errorf("%s from %s: run %.5f, check %.5f", l.Circuit, l.From, got, want)
		}
	}
	if got, want := float64(r.Audit.PacketHops), c.Estimate.PacketHops; math.Abs(got-want) > 10 {
		t.Errorf("packet-hops: run %v, check %v", got, want)
	}
}

// A ring of 19 sites with chords, 30 fibres, five classes between all pairs:
// the check takes far less than the two seconds a user would wait.
func TestCheckLarge(t *testing.T) {
	var b strings.Builder
	b.WriteString("scenario: ring\nrun: { length: 1s, warm-up: 100ms, seed: 1 }\nclasses:\n")
	for k := range 5 {
		fmt.Fprintf(&b, "  - { name: k%d, dscp: %d, queue: strict, buffer: 5ms, traffic: even, objective: { delay-p99: 40ms } }\n", k, 8*k)
	}
	b.WriteString("traffic: [ { name: even, model: constant, packet: 500B } ]\nsites:\n")
	for i := range 19 {
		fmt.Fprintf(&b, "  - { name: s%d }\n", i)
	}
	b.WriteString("fibres:\n")
	var circuits strings.Builder
	link := func(i, j int) {
		fmt.Fprintf(&b, "  - { between: [s%d, s%d], length: %dkm }\n", i, j, 100+7*i)
		fmt.Fprintf(&circuits, "  - { name: l%d-%d, along: [s%d-s%d], slots: 20, recovery: restore }\n", i, j, i, j)
	}
	for i := range 19 {
		link(i, (i+1)%19)
	}
	for i := range 11 {
		link(i, i+7)
	}
	fmt.Fprintf(&b, "circuits:\n%saggregates:\n", circuits.String())
	for i := range 19 {
		for j := range 19 {
			for k := range 5 {
				if i != j {
					fmt.Fprintf(&b, "  - { name: g%d.%d.%d, from: s%d, to: s%d, class: k%d, load: 20Mbps }\n", k, i, j, i, j, k)
				}
			}
		}
	}
	b.WriteString("controller: { at: s0 }\n")
	sc := loaded(t, b.String())
	if len(sc.Aggregates) != 1710 || len(sc.Fibres) != 30 {
		t.Fatalf("%d aggregates, %d fibres", len(sc.Aggregates), len(sc.Fibres))
	}
	c, err := Check(context.Background(), sc, Options{})
	if err != nil {
		t.Fatal(err)
	}
	if len(c.Links) != 60 || len(c.Candidates) != mostCandidates {
		t.Errorf("%d links, %d candidates", len(c.Links), len(c.Candidates))
	}
	// What all links carry is what is offered times the circuits it takes.
	var hops, load float64
	streams := streamsOf(sc, &sc.Plans[0])
	g, err := newGround(sc, &sc.Plans[0])
	if err != nil {
		t.Fatal(err)
	}
	r := newRouting(g)
	for i := range streams {
		r.walk(&streams[i])
		for _, l := range r.legs {
			hops += l.share
		}
	}
	for _, l := range c.Links {
		load += l.LoadBps
	}
	near(t, "load of all links", load, hops*20e6)
}
