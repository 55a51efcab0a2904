package study_test

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"ferrule/des"
	"ferrule/des/theory"
	"ferrule/nodes"
	"ferrule/scenarios/result"
	"ferrule/scenarios/study"
)

// Voice calls on one link: 80 or 90 calls, each a packet every 20 ms at a
// random phase, before a line that takes 190.4 us for each. Waits over many
// draws of the phases: A. Eckberg, IEEE Trans. Commun. 27 (1979); J. Roberts,
// J. Virtamo, IEEE Trans. Commun. 39 (1991); the printed mean and 99th
// percentile in us are computed from their formula. A run is one period of all
// calls on each of several hundred links, after a period to fill.
func TestOracleVoice(t *testing.T) {
	t.Parallel()
	const links, seeds = 400, 10
	for _, c := range []struct {
		calls     int
		mean, p99 float64
		spread    [2]float64 // for 10,000 draws
	}{{80, 255.9049e-6, 1223.1982e-6, [2]float64{0.014, 0.025}}, {90, 412.1950e-6, 1683.0993e-6, [2]float64{0.013, 0.02}}} {
		t.Run(fmt.Sprint(c.calls), func(t *testing.T) {
			t.Parallel()
			sc := parse(t, voiceLinks(links, c.calls))
			q := theory.Periodic{N: c.calls, Period: 20e-3, D: 200 * 8 / 8403361.0}
			within(t, "theory, mean", q.MeanWait(), c.mean, 1e-6)
			within(t, "theory, p99", q.WaitQuantile(0.99), c.p99, 1e-6)
			runs := runSeeds(t, sc, "spread", seeds)
			if n := count(runs, func(r *result.Run) int64 { return class(t, r, "voice").DeliveredPackets }); n != float64(links*seeds*c.calls) {
				t.Fatalf("%v packets, want one of each call on each link in each run", n)
			}
			draws := math.Sqrt(1e4 / (links * seeds))
			within(t, "mean wait", mean(t, runs, func(r *result.Run) *float64 { return class(t, r, "voice").DelayS.Mean })-light100-q.D, q.MeanWait(), c.spread[0]*draws)
			within(t, "p99", mean(t, runs, func(r *result.Run) *float64 { return class(t, r, "voice").DelayS.P99 })-light100, q.WaitQuantile(0.99)+q.D, c.spread[1]*draws+bucket)
		})
	}
}

// voiceLinks is a scenario of many circuits side by side with calls on each.
func voiceLinks(links, calls int) string {
	var b, moves strings.Builder
	b.WriteString(`scenario: voice-links
run: { length: 40ms, warm-up: 20ms }
defaults:
  fibre: { lit: 40 }
  circuit: { framing: none, carries: moved }
  router: { forwarding: 0us }
sites: [ { name: a }, { name: b } ]
fibres: [ { name: ab, between: [a, b], length: 100km } ]
traffic: [ { name: calls, model: voice } ]
classes: [ { name: voice, buffer: 1GB, traffic: calls } ]
circuits:
`)
	for i := range links {
		fmt.Fprintf(&b, "  - { name: c%d, along: [ab], slots: 1, rate: 8403361bps }\n", i)
		fmt.Fprintf(&moves, "      - { move: v%d, onto: [c%d] }\n", i, i)
	}
	b.WriteString("aggregates:\n")
	for i := range links {
		fmt.Fprintf(&b, "  - { name: v%d, from: a, to: b, class: voice, flows: %d }\n", i, calls)
	}
	return b.String() + "plans:\n  - name: spread\n    in-place:\n" + moves.String()
}

// chain is a scenario of equal links in a row with one stream along all.
func chain(length, packet, load string, links int) string {
	var sites, fibres, circuits strings.Builder
	sites.WriteString("{ name: s0 }")
	for i := range links {
		fmt.Fprintf(&sites, ", { name: s%d }", i+1)
		fmt.Fprintf(&fibres, "  - { name: f%d, between: [s%d, s%d], length: 100km }\n", i, i, i+1)
		fmt.Fprintf(&circuits, "  - { name: c%d, along: [f%d], slots: 1, rate: 1Gbps }\n", i, i)
	}
	return fmt.Sprintf(`scenario: chain
run: { length: %s, warm-up: 500ms }
defaults:
  circuit: { framing: none, mtu: 65535B }
  router: { forwarding: 0us }
sites: [ %s ]
fibres:
%scircuits:
%straffic: [ { name: s, model: poisson, packet: %s } ]
classes: [ { name: s, buffer: 1GB, traffic: s } ]
aggregates: [ { name: s, from: s0, to: s%d, class: s, load: %s } ]
`, length, sites.String(), fibres.String(), circuits.String(), packet, links, load)
}

// Packets of one size on equal links wait at the first only (common practice,
// no source: the line before spaces them by at least a service).
func TestOracleTandemConstant(t *testing.T) {
	t.Parallel()
	r := run(t, parse(t, chain("3s", "1000B", "800Mbps", 4)), study.Options{Cores: 1})
	if w := port(t, r, "c0", "s0").MeanWaitS; w == nil || *w < 10e-6 {
		t.Errorf("mean wait at the first link %v s, want about 16 us", value(w))
	}
	for i := 1; i < 4; i++ {
		p := port(t, r, fmt.Sprintf("c%d", i), fmt.Sprintf("s%d", i))
		if p.MeanWaitS == nil || *p.MeanWaitS != 0 || *p.MaxQueueBytes != 0 {
			t.Errorf("link %d: mean wait %v s, at most %d B waiting; want none", i, value(p.MeanWaitS), *p.MaxQueueBytes)
		}
	}
	s := class(t, r, "s")
	within(t, "mean delay", value(s.DelayS.Mean), 4*light100+4*8e-6+value(port(t, r, "c0", "s0").MeanWaitS), 1e-6)
}

// Packets keep their length along a path. On three equal links at load 0.8
// with exponential lengths the mean delay is 12.49 services (15.0 if lengths
// were drawn anew at each) and the 99th percentile 36.6 (42.0). The values are
// those of a separate simulation of 6e7 packets; the effect is that of O.
// Boxma, "On a tandem queueing model with identical service times at both
// counters", Adv. Appl. Prob. 11 (1979).
func TestOracleTandemSameLength(t *testing.T) {
	t.Parallel()
	runs := runSeeds(t, parse(t, chain("10s", "{ exponential: { mean: 1000B } }", "800Mbps", 3)), "", 4)
	within(t, "mean", (mean(t, runs, func(r *result.Run) *float64 { return class(t, r, "s").DelayS.Mean })-3*light100)/8e-6, 12.49, 0.02)
	within(t, "p99", (mean(t, runs, func(r *result.Run) *float64 { return class(t, r, "s").DelayS.P99 })-3*light100)/8e-6, 36.6, 0.05)
}

// lengthOf is the least fibre that light needs at least d for.
func lengthOf(d des.Time) nodes.Length {
	l := nodes.Length(float64(d) / float64(nodes.LightPerKilometre) * float64(nodes.Kilometre))
	for l.Light() < d {
		l++
	}
	for l.Light() >= d {
		l--
	}
	return l + 1
}

// An empty path, to the picosecond: three links of 2 Mbit/s, 1500 B, light 20,
// 16 and 4 ms, two nodes between them that take 3 ms: 64 ms. J. Kurose, K.
// Ross, Computer Networking, ch. 1, a problem of it (sum from its posted
// solution). The second case has own inputs, worked by hand: unequal rates,
// latencies at all four routers, frames of 26 B more than the packet.
func TestOracleEmptyPath(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		name       string
		light      [3]des.Time
		rate       [3]string
		bits       [3]int64 // bit/s
		forwarding [4]string
		routers    des.Time
		packet     int64
		framing    string
		overhead   int64
		want       des.Time // to 3 x 5 ps: fibres are whole millimetres
	}{
		{"textbook", [3]des.Time{20 * des.Millisecond, 16 * des.Millisecond, 4 * des.Millisecond}, [3]string{"2Mbps", "2Mbps", "2Mbps"}, [3]int64{2e6, 2e6, 2e6},
			[4]string{"0us", "3ms", "3ms", "0us"}, 6 * des.Millisecond, 1500, "none", 0, 64 * des.Millisecond},
		{"unequal", [3]des.Time{1234567890, 2 * des.Millisecond, 777 * des.Microsecond}, [3]string{"1Gbps", "333Mbps", "1Mbps"}, [3]int64{1e9, 333e6, 1e6},
			[4]string{"15us", "20us", "1ns", "7us"}, 42*des.Microsecond + des.Nanosecond, 974, "gfp", 26,
			// 1000 B: 8 us, 24.024024.. us rounded up to 24.024025, 8 ms
			1234567890 + 2*des.Millisecond + 777*des.Microsecond + 42*des.Microsecond + des.Nanosecond + 8*des.Microsecond + 24_024_025 + 8*des.Millisecond},
	} {
		t.Run(c.name, func(t *testing.T) {
			t.Parallel()
			var text strings.Builder
			fmt.Fprintf(&text, "scenario: path\nrun: { length: 5s, warm-up: 100ms }\ndefaults: { circuit: { framing: %s } }\n", c.framing)
			text.WriteString("traffic: [ { name: s, model: constant, packet: " + fmt.Sprint(c.packet) + "B } ]\nclasses: [ { name: s, traffic: s } ]\n")
			text.WriteString("aggregates: [ { name: s, between: [s0, s3], class: s, load: 200kbps } ]\nsites:\n")
			for i, f := range c.forwarding {
				fmt.Fprintf(&text, "  - { name: s%d, router: { forwarding: %s } }\n", i, f)
			}
			text.WriteString("fibres:\n")
			want := c.routers
			for i := range c.light {
				l := lengthOf(c.light[i])
				fmt.Fprintf(&text, "  - { name: f%d, between: [s%d, s%d], length: %dmm }\n", i, i, i+1, l)
				bits := (c.packet + c.overhead) * 8
				want += l.Light() + des.Time((bits*int64(des.Second)+c.bits[i]-1)/c.bits[i])
			}
			text.WriteString("circuits:\n")
			for i := range c.light {
				fmt.Fprintf(&text, "  - { name: c%d, along: [f%d], slots: 1, rate: %s }\n", i, i, c.rate[i])
			}
			if off := want - c.want; off < 0 || off > 15 {
				t.Fatalf("the path takes %v, %v by hand", want, c.want)
			}
			r := run(t, parse(t, text.String()), study.Options{Cores: 1})
			for _, a := range r.Aggregates {
				d := a.Periods[0].DelayS
				exact(t, a.Name+" least", d.Min, want)
				exact(t, a.Name+" most", d.Max, want)
				within(t, a.Name+" p50", value(d.P50), want.Seconds(), 1e-3)
				if v := a.Periods[0].JitterS; v == nil || *v != 0 {
					t.Errorf("%s: jitter %v s, want 0", a.Name, value(v))
				}
			}
		})
	}
}

// Light in fibre: 4.89739 us/km at the group index 1.4682 (computed), 4.8974
// ms for 1000 km, 13.7127 ms for 2800 km.
func TestOracleLight(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		km   int
		want float64
		tol  float64
	}{{1, 4.89739e-6, 1e-10}, {80, 0.39179e-3, 1e-8}, {1000, 4.8974e-3, 1e-7}, {2800, 13.7127e-3, 1e-7}} {
		text := strings.Replace(link{length: "20ms", warmUp: "1ms", rate: "1Gbps", streams: []stream{{"s", "constant", "1000B", "100Mbps"}}}.text(),
			"length: 100km", fmt.Sprintf("length: %dkm", c.km), 1)
		r := run(t, parse(t, text), study.Options{Cores: 1})
		if d := value(r.Circuits[0].DelayS); math.Abs(d-c.want) > c.tol {
			t.Errorf("%d km: circuit delay %v s, want %v", c.km, d, c.want)
		}
		exact(t, fmt.Sprintf("%d km, delay of a packet", c.km), class(t, r, "s").DelayS.Min,
			(nodes.Length(c.km)*nodes.Kilometre).Light()+8*des.Microsecond)
	}
}

// A router's latency is what was asked, whatever the rate of packets: median
// 20 us, 99th percentile 80 us, and so a mean of median exp(sigma^2/2) = 23.88
// us with sigma = ln(4)/2.32635 (lognormal law). A path has two routers here,
// the ingress and the egress. Latencies are those of a path in time with a new
// draw every 6 ms, so 30 s hold about 5000 independent ones: 3.3 standard
// deviations of the mean are 3.3 x 0.66/sqrt(2 x 5000) = 2.2 %. Percentiles are
// measured on one packet in 64; the standard deviation of a normal law's
// estimated median is 1.253 sigma/sqrt(n), of its 99th percentile 3.73
// sigma/sqrt(n), n being those draws or packets that are fewer.
func TestOracleForwarding(t *testing.T) {
	t.Parallel()
	sigma := math.Log(4) / 2.3263478740408408
	want := 20e-6 * math.Exp(sigma*sigma/2)
	for _, rate := range []float64{1000, 10_000, 50_000} { // packets a second
		load := fmt.Sprintf("%.0fkbps", rate*8)
		t.Run(load, func(t *testing.T) {
			t.Parallel()
			spread := 3.3 * sigma * math.Sqrt(1/5000.0+1/(30*rate/64))
			text := strings.Replace(link{length: "30s", warmUp: "100ms", rate: "1Gbps", streams: []stream{{"s", "constant", "1000B", load}}}.text(),
				"forwarding: 0us", "forwarding: { median: 20us, p99: 80us }", 1)
			runs := runSeeds(t, parse(t, text), "", 1)
			within(t, "mean extra delay", value(class(t, runs[0], "s").DelayS.Mean)-light100-8e-6, 2*want, 0.022)
			seen := 0
			for _, a := range runs[0].Asked {
				if a.Subject != "b" {
					continue
				}
				switch a.Figure {
				case "forwarding-p50":
					within(t, a.Figure+" asked", a.Asked, 20e-6, 1e-9)
					within(t, a.Figure, value(a.Measured), 20e-6, 1.253*spread)
				case "forwarding-p99":
					within(t, a.Figure+" asked", a.Asked, 80e-6, 1e-9)
					if a.Measured != nil {
						within(t, a.Figure, *a.Measured, 80e-6, 3.73*spread)
					}
				default:
					continue
				}
				seen++
			}
			if seen != 2 {
				t.Errorf("%d figures of forwarding at b, want 2", seen)
			}
		})
	}
}

// What circuits carry, in kbit/s, as the result prints it. Containers: payload
// rates of ITU-T G.709, table 7-3. Slots: 239/238 of the client's rate is the
// circuit's (ITU-T G.709 table 7-4), and n slots make a circuit of n x
// 1,249,177.230 kbit/s up to 8, n x 1,254,470.354 up to 32, n x 1,301,467.133
// up to 80 (table 7-8); so 2 slots carry 2 x 1,249,177.230 x 238/239 =
// 2,487,901.095 (computed from these).
func TestOraclePayload(t *testing.T) {
	t.Parallel()
	sizes := []struct {
		size string
		kbps float64
	}{
		{"container: ODU0", 1238954.310}, {"container: ODU1", 2488320.000}, {"container: ODU2", 9995276.962},
		{"container: ODU2e", 10356012.658}, {"container: ODU3", 40150519.322}, {"container: ODU4", 104355975.330},
		{"slots: 1", 1249177.230 * 238 / 239}, {"slots: 2", 2487901.095}, {"slots: 8", 8 * 1249177.230 * 238 / 239},
		{"slots: 9", 9 * 1254470.354 * 238 / 239}, {"slots: 33", 33 * 1301467.133 * 238 / 239}, {"slots: 80", 80 * 1301467.133 * 238 / 239},
	}
	var text strings.Builder
	text.WriteString(`scenario: sizes
run: { length: 20ms, warm-up: 1ms }
defaults: { fibre: { lit: 12 } }
sites: [ { name: a }, { name: b } ]
fibres: [ { name: ab, between: [a, b], length: 10km } ]
traffic: [ { name: s, model: constant, packet: 1000B } ]
classes: [ { name: s, traffic: s } ]
aggregates: [ { name: s, from: a, to: b, class: s, load: 1Mbps } ]
circuits:
`)
	for i, s := range sizes {
		fmt.Fprintf(&text, "  - { name: c%d, along: [ab], %s }\n", i, s.size)
	}
	r := run(t, parse(t, text.String()), study.Options{Cores: 1})
	for i, s := range sizes {
		if got := r.Circuits[i].PayloadBps; math.Abs(got/1000-s.kbps) > 0.04 {
			t.Errorf("%s: %.3f kbit/s, want %.3f", s.size, got/1000, s.kbps)
		}
	}
}

// A line offered too much: a packet every 80 us, each taking 100 us, waits 20
// us more than the one before, so the delays are an arithmetic series whose
// order statistics are known (common practice, no source; with 8 and 10 ms the
// 100th packet of an empty start waits 198 ms). The wait is that of D/D/1.
func TestOraclePercentiles(t *testing.T) {
	t.Parallel()
	sc := parse(t, link{length: "1s", warmUp: "0s", rate: "80Mbps", streams: []stream{{"s", "constant", "1000B", "100Mbps"}}}.text())
	for seed := range uint64(3) {
		r := run(t, sc, study.Options{Seed: seed + 1, Cores: 1})
		o := class(t, r, "s")
		n := o.DeliveredPackets
		if n < 12499 || n > 12501 || o.LostPackets.Total() != 0 || o.InsidePackets != 0 {
			t.Fatalf("%d packets delivered, %d lost, %d inside", n, o.LostPackets.Total(), o.InsidePackets)
		}
		first := (100 * nodes.Kilometre).Light() + 100*des.Microsecond
		exact(t, "min", o.DelayS.Min, first)
		exact(t, "max", o.DelayS.Max, first+des.Time(n-1)*20*des.Microsecond)
		if want := first.Seconds() + float64(n-1)/2*20e-6; math.Abs(value(o.DelayS.Mean)-want) > 1e-12 {
			t.Errorf("mean %.15g, want %.15g", value(o.DelayS.Mean), want)
		}
		for _, q := range []struct {
			got  *float64
			p    float64
			base float64
			what string
		}{
			{o.DelayS.P50, 0.5, first.Seconds(), "p50"}, {o.DelayS.P95, 0.95, first.Seconds(), "p95"},
			{o.DelayS.P99, 0.99, first.Seconds(), "p99"}, {o.DelayS.P999, 0.999, first.Seconds(), "p99.9"},
			{o.PDVS.P50, 0.5, 0, "pdv p50"}, {o.PDVS.P99, 0.99, 0, "pdv p99"},
		} {
			rank := math.Ceil(q.p * float64(n))
			within(t, q.what, value(q.got), q.base+(rank-1)*20e-6, 1.0/128)
		}
		if v := o.IPDVS.P50; v == nil || math.Abs(*v-20e-6) > 0.1e-6 {
			t.Errorf("ipdv p50 %v s, want 20 us", value(v))
		}
		// RFC 3550, sec. 6.4.1: J += (|D| - J)/16 from 0 tends to |D|.
		if v := o.JitterS; v == nil || math.Abs(*v/20e-6-1) > 0.005 {
			t.Errorf("jitter %v s, want 20 us", value(v))
		}
	}
}
