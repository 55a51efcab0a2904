package study_test

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"ferrule/des"
	"ferrule/scenarios/result"
	"ferrule/scenarios/study"
)

// A break that is over before anything is told costs what was on its way
// through the place while it was dark, and nothing else: rate x its length, one
// packet more or less by phase, and an outage of as long, wherever it was. A
// break shorter than the detection is not even noticed, a longer one is ended
// by the hold-off (computed from the propagation of light).
func TestOracleShortBreak(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		ms      float64
		holdOff string
		where   string
	}{{2, "0ms", "10km from a"}, {2.9, "0ms", "390km from a"}, {30, "50ms", "200km from a"}} {
		t.Run(fmt.Sprint(c.ms), func(t *testing.T) {
			t.Parallel()
			sc := parse(t, cutScene(", hold-off: "+c.holdOff, fmt.Sprintf("{ at: 1.5s, cut: am, where: %s }, { at: %gms, repair: am }", c.where, 1500+c.ms)))
			for seed := range uint64(3) {
				r := run(t, sc, study.Options{Plan: "moved", Cores: 1, Seed: seed + 1})
				for i := range r.Aggregates {
					a := &r.Aggregates[i]
					// A packet of 1000 B on 1.24 Gbit/s is lost if it touches the break: 6.4 us more.
					want := 5000 * (c.ms/1e3 + 6.4e-6)
					if got := float64(lostOf(a, "cut")); math.Abs(got-want) > 1 {
						t.Errorf("%s: %v packets lost to the cut, want %.2f", a.Name, got, want)
					}
					if got := lostOf(a, ""); got != lostOf(a, "cut") {
						t.Errorf("%s: %d packets lost, %d of them to the cut", a.Name, got, lostOf(a, "cut"))
					}
					if out := gapOf(t, r, a); math.Abs(out*5000-want) > 1.01 {
						t.Errorf("%s: outage %v s, want %v", a.Name, out, want/5000)
					}
				}
				// A break that was seen counts as down until the controller has taken
				// it back: 10 ms to decide, and light both ways.
				down := 0.0
				if c.ms > 3 {
					down = c.ms/1e3 + 0.01
				}
				if x := circuitOf(t, r, "x"); x.State != "up" || x.DownS < down || x.DownS > down*1.25 {
					t.Errorf("the circuit is %s and was down for %v s", x.State, x.DownS)
				}
			}
		})
	}
}

// A repair, worked by hand. Light is back at each end when it has come from
// the break and been seen for the time of detection; the end at b tells the
// controller at a by the shortest way, which is the old one. The controller
// decides (10 ms) once it has heard both, and a sends again at once, b when
// the order is there.
func TestOracleRepair(t *testing.T) {
	t.Parallel()
	for _, km := range []int{40, 390} {
		text := cutScene("", fmt.Sprintf("{ at: 1s, cut: am, where: %dkm from a }, { at: 2s, repair: am }", km))
		r := run(t, parse(t, text), study.Options{Plan: "moved", Cores: 1})
		d1, d2, whole := far(km).Seconds(), far(600-km).Seconds(), far(600).Seconds()
		decided := 1 + max(d1, d2+whole) + 0.003 + 0.01 // after the cut
		for i, want := range []float64{5000 * (d1 + decided), 5000 * (d2 + decided + whole)} {
			a := &r.Aggregates[i]
			if got := float64(lostOf(a, "")); math.Abs(got-want) > 1 {
				t.Errorf("%d km, %s: lost %v packets, want %.2f", km, a.Name, got, want)
			}
			if out := gapOf(t, r, a); math.Abs(out*5000-want) > 1.01 {
				t.Errorf("%d km, %s: outage %v s, want %v", km, a.Name, out, want/5000)
			}
		}
		if x := circuitOf(t, r, "x"); x.State != "up" {
			t.Errorf("%d km: the circuit is %s", km, x.State)
		}
	}
}

// A stream that is moved from a way of D1 to one of D2 < D1 overtakes itself:
// what was sent within D1 - D2 before the move arrives late, rate x (D1 - D2)
// packets, one more or less (computed from the propagation of light; late
// packets are counted as RFC 4737, sec. 3, does). With order kept none is late
// and none is lost, and the first waits for the difference and more.
func TestOracleMoveOvertakes(t *testing.T) {
	t.Parallel()
	for _, order := range []string{"free", "kept"} {
		text := cutScene("", fmt.Sprintf("{ at: 1.5s, move: s, onto: [x], order: %s }", order))
		text = strings.Replace(text, "when-down: drop }", "when-down: drop }, { name: y, along: [an, nb], slots: 1 }", 1)
		r := run(t, parse(t, text), study.Options{Cores: 1})
		for i := range r.Aggregates {
			a := &r.Aggregates[i]
			late, delivered, most := 0.0, int64(0), 0.0
			for j := range a.Periods {
				p := &a.Periods[j]
				late += value(p.ReorderedRatio) * float64(p.DeliveredPackets)
				delivered += p.DeliveredPackets
				most = max(most, value(p.DelayS.Max))
			}
			if got := lostOf(a, ""); got != 0 || math.Abs(float64(delivered)-12500) > 1 {
				t.Errorf("%s, %s: %d lost, %d delivered", order, a.Name, got, delivered)
			}
			if order == "kept" {
				if late != 0 || most < far(800).Seconds() {
					t.Errorf("kept, %s: %v packets late, greatest delay %v s", a.Name, late, most)
				}
				continue
			}
			if want := 5000 * far(200).Seconds(); math.Abs(late-want) > 1 {
				t.Errorf("free, %s: %v packets late, want %.2f", a.Name, late, want)
			}
			if strings.Join(a.CarriedBy, " ") != "x" {
				t.Errorf("%s is carried by %v", a.Name, a.CarriedBy)
			}
		}
	}
}

// A load that is changed to 150 % at half of the time measured makes 1.25
// times the packets, and throughput and utilisation are those of the stream:
// 40 Mbit/s, then 60, on 1244.0 Mbit/s (payload of one slot). What is under way
// at the change, 600 km of light, counts to the period that it opens.
func TestOracleScale(t *testing.T) {
	t.Parallel()
	r := run(t, parse(t, strings.Replace(cutScene("", "{ at: 1750ms, scale: s, by: 150% }"), "command: 20ms", "command: 0ms", 1)), study.Options{Plan: "moved", Cores: 1})
	for i := range r.Aggregates {
		a := &r.Aggregates[i]
		offered := int64(0)
		for j, p := range r.Periods {
			o := &a.Periods[j]
			offered += o.OfferedPackets
			span, under := p.ToS-p.FromS, far(600).Seconds()*5000
			packets := 5000*span - under
			switch {
			case p.Kind == result.Change:
				packets = 7500*span + under
			case p.FromS > 1.75:
				packets = 7500 * span
			}
			if got := value(o.ThroughputBps) * span / 8000; math.Abs(got-packets) > 2 {
				t.Errorf("%s in %s: throughput of %.2f packets, want %.2f", a.Name, p.Name, got, packets)
			}
		}
		if math.Abs(float64(offered)-5000*2.5*1.25) > 2 {
			t.Errorf("%s: %d packets offered, want %v", a.Name, offered, 5000*2.5*1.25)
		}
	}
	for _, p := range r.Ports {
		within(t, "utilisation from "+p.From, value(p.Utilisation), 50e6/1243950756, 1e-3)
	}
}

// The delays of a class are those of all its pairs: 90 of 100 packets over 100
// km and 10 over 600 km, each delay known to the picosecond.
func TestOracleClassOfTwoPairs(t *testing.T) {
	t.Parallel()
	for _, order := range []string{"{ name: far, between: [a, b], length: 600km }, { name: near, between: [b, c], length: 100km }", "{ name: near, between: [b, c], length: 100km }, { name: far, between: [a, b], length: 600km }"} {
		r := run(t, parse(t, `scenario: two
run: { length: 2s, warm-up: 1s }
defaults: { circuit: { framing: none }, router: { forwarding: 0us } }
sites: [ { name: a }, { name: b }, { name: c } ]
fibres: [ `+order+` ]
circuits: [ { name: f, along: [far], slots: 1, rate: 1Gbps }, { name: n, along: [near], slots: 1, rate: 1Gbps } ]
traffic: [ { name: t, model: constant, packet: 1000B } ]
classes: [ { name: c, traffic: t, objective: { delay-p50: 1ms } } ]
aggregates: [ { name: few, from: a, to: b, class: c, load: 8Mbps }, { name: many, from: b, to: c, class: c, load: 72Mbps } ]
`), study.Options{Cores: 1})
		o := class(t, r, "c")
		near, wide := far(100)+8*des.Microsecond, far(600)+8*des.Microsecond
		exact(t, "min", o.DelayS.Min, near)
		exact(t, "max", o.DelayS.Max, wide)
		within(t, "p50", value(o.DelayS.P50), near.Seconds(), 0.004*8/498) // sharp above the light
		within(t, "p95", value(o.DelayS.P95), wide.Seconds(), bucket)
		within(t, "mean", value(o.DelayS.Mean), 0.9*near.Seconds()+0.1*wide.Seconds(), 1e-3)
		// Variation is that over the least delay of each pair: there is none.
		if v := o.PDVS.P99; v == nil || *v > 0.1e-6 {
			t.Errorf("pdv p99 %v s, want none", value(v))
		}
		if o.Objective == nil || o.Objective.Met == nil || *o.Objective.Met || o.WorstPair != "few" {
			t.Errorf("objective %+v, worst pair %s", o.Objective, o.WorstPair)
		}
		if o.LostPackets.Total() != 0 || o.DeliveredPackets != 10000 {
			t.Errorf("%d delivered, %d lost", o.DeliveredPackets, o.LostPackets.Total())
		}
	}
}

// Variation of M/M/1: the difference of consecutive delays has Laplace's law
// with scale 1/mu at every load (derived from the sojourn law of L. Kleinrock,
// Queueing Systems vol. 1, 1975), so its absolute value has the quantiles
// 0.693147, 2.995732, 4.605170 and 6.907755, and the mean of J of RFC 3550,
// sec. 6.4.1, is 1/mu. For M/D/1 that mean is 2(1 - (1 - exp(-rho))/rho): at
// 0.8, 0.6233224 of a service.
func TestOracleVariation(t *testing.T) {
	t.Parallel()
	text := func(packet string) string {
		return link{length: "10s", warmUp: "500ms", rate: "1Gbps", streams: []stream{{"s", "poisson", packet, "800Mbps"}}}.text()
	}
	runs := runSeeds(t, parse(t, text("{ exponential: { mean: 1000B } }")), "", 2)
	n := count(runs, func(r *result.Run) int64 { return class(t, r, "s").DeliveredPackets })
	for _, q := range []struct {
		name   string
		of     func(*result.Distribution) *float64
		want   float64
		spread float64
	}{
		{"p50", func(d *result.Distribution) *float64 { return d.P50 }, 0.693147, 0.01}, {"p95", func(d *result.Distribution) *float64 { return d.P95 }, 2.995732, 0.01},
		{"p99", func(d *result.Distribution) *float64 { return d.P99 }, 4.605170, 0.015}, {"p99.9", func(d *result.Distribution) *float64 { return d.P999 }, 6.907755, 0.03},
	} {
		got := mean(t, runs, func(r *result.Run) *float64 { return q.of(&class(t, r, "s").IPDVS) })
		within(t, "ipdv "+q.name, got/8e-6, q.want, perMillion(q.spread, n)+bucket)
	}
	within(t, "jitter", mean(t, runs, func(r *result.Run) *float64 { return class(t, r, "s").JitterS })/8e-6, 1, perMillion(0.01, n))
	within(t, "utilisation", mean(t, runs, func(r *result.Run) *float64 { return port(t, r, "ab", "a").Utilisation }), 0.8, perMillion(0.005, n))
	runs = runSeeds(t, parse(t, text("1000B")), "", 2)
	within(t, "jitter, constant size", mean(t, runs, func(r *result.Run) *float64 { return class(t, r, "s").JitterS })/8e-6, 0.6233224, perMillion(0.01, n))
}
