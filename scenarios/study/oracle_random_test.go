package study_test

import (
	"bytes"
	"fmt"
	"math/rand/v2"
	"regexp"
	"slices"
	"strings"
	"testing"

	"ferrule/des"
	"ferrule/scenarios"
	"ferrule/scenarios/build"
	"ferrule/scenarios/result"
	"ferrule/scenarios/study"
)

// dice makes scenarios at random.
type dice struct{ *rand.Rand }

// one picks one of the words.
func (d dice) one(words ...string) string { return words[d.IntN(len(words))] }

// scenario writes a network of 3 to 7 sites with rings and chords of any
// length, circuits of all kinds, traffic of all models, and acts at random.
func (d dice) scenario() string {
	var b strings.Builder
	n := 3 + d.IntN(5)
	fmt.Fprintf(&b, `scenario: dice
run: { length: %dms, warm-up: %dms }
defaults:
  router: { forwarding: %s }
  fibre: { channel-rate: %s }
  timing: { command: %s, detect: %s, converge: %dms, loss-of-message: %s, commands-at-once: %d, traffic-ready: %dms, wait-to-restore: %dms, commands: %s }
`, 300+d.IntN(700), d.IntN(100), d.one("0us", "15us", "{ median: 15us, p99: 80us }"), d.one("10Gbps", "100Gbps"),
		d.one("0us", "1ms", "{ lognormal: { median: 10ms, p95: 50ms } }"), d.one("0us", "3ms", "40ms"), d.IntN(2)*d.IntN(100), d.one("0%", "0%", "5%", "40%"),
		1+d.IntN(3), d.IntN(2)*d.IntN(30), d.IntN(80), d.one("parallel", "sequence"))
	queues := [][3]string{{"fifo", "fifo", "fifo"}, {"strict", "weight 60%", "weight 40%"}, {"strict", "strict", "strict"}, {"weight 20%", "weight 30%", "weight 50%"}}[d.IntN(4)]
	b.WriteString("classes:\n")
	for i, q := range queues {
		fmt.Fprintf(&b, "  - { name: c%d, queue: %s, buffer: %s, objective: { delay-p99: 40ms, loss: 1e-3, out: 100ms } }\n", i, q, d.one("1ms", "20ms", "7 packets", "64kB"))
	}
	b.WriteString(`traffic:
  - { name: t0, model: constant, packet: 1000B }
  - { name: t1, model: poisson, packet: { exponential: { mean: 500B } } }
  - { name: t2, model: voice, flows-arrive: poisson, hold: { exponential: { mean: 200ms } } }
  - { name: t3, model: video, rate: 8Mbps }
  - { name: t4, model: files, size: { pareto: { mean: 80kB, shape: 1.3, at-most: 10MB } }, pace: 50Mbps }
`)
	b.WriteString("sites:\n")
	for i := range n {
		fmt.Fprintf(&b, "  - { name: s%d, convert: %s }\n", i, d.one("true", "false"))
	}
	type pair struct{ a, b int }
	var fibres []pair
	for i := range n {
		fibres = append(fibres, pair{i, (i + 1) % n})
	}
	for range d.IntN(4) {
		if a, c := d.IntN(n), d.IntN(n); a != c {
			fibres = append(fibres, pair{a, c})
		}
	}
	b.WriteString("fibres:\n")
	for i, f := range fibres {
		fmt.Fprintf(&b, "  - { name: f%d, between: [s%d, s%d], length: %dm, risk-groups: [ g%d ] }\n", i, f.a, f.b, 1+d.IntN([]int{2000, 50_000, 900_000}[d.IntN(3)]), i%3)
	}
	b.WriteString("circuits:\n")
	for i := range fibres {
		fmt.Fprintf(&b, "  - { name: l%d, along: [f%d], slots: %d, rate: %dMbps, recovery: %s, hold-off: %dms }\n", i, i, 1+d.IntN(2), 30+d.IntN(100), d.one("none", "restore"), d.IntN(2)*d.IntN(20))
	}
	b.WriteString("aggregates:\n")
	aggregates := 2 + d.IntN(5)
	var ends []pair
	for i := range aggregates {
		a := d.IntN(n)
		c := (a + 1 + d.IntN(n-1)) % n
		ends = append(ends, pair{a, c})
		fmt.Fprintf(&b, "  - { name: a%d, between: [s%d, s%d], class: c%d, traffic: t%d, load: %dMbps }\n", i, a, c, d.IntN(3), d.IntN(5), 1+d.IntN(40))
	}
	fmt.Fprintf(&b, "requests: [ { name: r, between: [s0, s%d], slots: %d, arrive: %d/s, hold: { exponential: { mean: 100ms } } } ]\n", 1+d.IntN(n-1), 1+d.IntN(3), 1+d.IntN(60))
	fmt.Fprintf(&b, "controller: { at: s%d, compute: %dus, retry: %dms, attempts: %d }\n", d.IntN(n), d.IntN(2)*d.IntN(20_000), 5+d.IntN(200), 1+d.IntN(4))
	b.WriteString("timeline:\n")
	for i := range ends {
		fmt.Fprintf(&b, "  - { at: %dms, set-up: { name: x%d, between: [s%d, s%d], %s, carries: moved, recovery: %s, when-down: %s } }\n",
			d.IntN(200), i, ends[i].a, ends[i].b, d.one("slots: 1", "slots: 2", "slots: 1", "container: ODU0"), d.one("none", "restore"), d.one("return", "wait", "drop"))
		fmt.Fprintf(&b, "  - { after: x%d up, move: a%d, onto: [x%d], order: %s }\n", i, i, i, d.one("free", "kept"))
		switch d.IntN(5) {
		case 0:
			fmt.Fprintf(&b, "  - { after: x%d up, resize: x%d, slots: %d }\n", i, i, 1+d.IntN(4))
		case 1:
			fmt.Fprintf(&b, "  - { at: %dms, return: a%d }\n", 200+d.IntN(100), i)
		case 2:
			fmt.Fprintf(&b, "  - { at: %dms, tear-down: x%d }\n", 200+d.IntN(100), i)
		}
	}
	var cuts []pair // when, in us, and what
	for range d.IntN(5) {
		cuts = append(cuts, pair{d.IntN(300_000), d.IntN(len(fibres))})
		fmt.Fprintf(&b, "  - { at: %dus, cut: f%d }\n", cuts[len(cuts)-1].a, cuts[len(cuts)-1].b)
	}
	for range d.IntN(5) {
		at, f := d.IntN(300), d.IntN(len(fibres))
		if slices.ContainsFunc(cuts, func(c pair) bool { return c.b == f && c.a < at*1000 }) {
			fmt.Fprintf(&b, "  - { at: %dms, repair: f%d }\n", at, f)
		}
	}
	if d.IntN(3) == 0 {
		fmt.Fprintf(&b, "  - { at: %dms, cut: g0 }\n  - { at: %dms, repair: g0 }\n", d.IntN(150), 150+d.IntN(150))
	}
	if d.IntN(2) == 0 {
		f := d.IntN(len(fibres))
		fmt.Fprintf(&b, "  - { at: %dms, cut: f%d, from: s%d, to: s%d }\n", d.IntN(300), f, fibres[f].a, fibres[f].b)
	}
	fmt.Fprintf(&b, "  - { at: %dms, scale: a0, by: %d%% }\n", d.IntN(300), d.IntN(200))
	return b.String()
}

// Whatever happens, the books of a run are in order, and windows, regions and
// cores do not show in its result. In 1004 a circuit was opened over a fibre
// that was dark, and the news once outran light; in 1148 packets came back by a
// loop to where their way was held, which once was no place to go.
func TestOracleRandomScenarios(t *testing.T) {
	t.Parallel()
	for _, seed := range []uint64{0, 1, 2, 3, 4, 5, 6, 7, 1004, 1148} {
		t.Run(fmt.Sprint(seed), func(t *testing.T) {
			t.Parallel()
			text := dice{rand.New(rand.NewPCG(seed, 14))}.scenario()
			sameInAllWindows(t, parse(t, text), text, seed)
		})
	}
}

// rougher changes a scenario so that everything happens in it that can: 1+1,
// priorities, circuits that shrink or follow their load, reports by circuit,
// sites, routers and ports that fail, and sites that are drained.
func (d dice) rougher(text string) string {
	text = strings.Replace(text, "timing: {", fmt.Sprintf("timing: { switch: %dms, ramp: %s, report: %s, correlation: %dms,",
		d.IntN(20), d.one("standard", "none"), d.one("fibre", "circuit"), d.IntN(2)*d.IntN(20)), 1)
	text = regexp.MustCompile(`name: f(\d+)(.*)risk-groups: \[ g\d \]`).ReplaceAllString(text, "name: f${1}${2}risk-groups: [ g$1 ]")
	text = regexp.MustCompile(`recovery: none(, (when-down|hold-off))`).ReplaceAllStringFunc(text, func(s string) string {
		return strings.Replace(s, "none", d.one("none", "1+1"), 1)
	})
	text = regexp.MustCompile(`slots: \d, (rate|carries)`).ReplaceAllStringFunc(text, func(s string) string {
		hold := d.IntN(8)
		s = fmt.Sprintf("set-up-priority: %d, holding-priority: %d, shrink: %s, %s", hold+d.IntN(8-hold), hold, d.one("true", "false"), s)
		if d.IntN(3) == 0 {
			s = fmt.Sprintf("policy: { floor: 1, ceiling: 4, up: %d%%, down: %d%%, hold-up: %dms, hold-down: %dms }, %s", 20+d.IntN(60), d.IntN(20), d.IntN(50), d.IntN(50), s)
		}
		return s
	})
	text = strings.Replace(text, "controller: {", "controller: { poll: 10ms,", 1)
	var b strings.Builder
	b.WriteString(text)
	for range 1 + d.IntN(3) {
		what := d.one("router s0", "router s1", "site s2", "site s1", "port l0 at s0", "port l1 at s1")
		from := d.IntN(250_000)
		fmt.Fprintf(&b, "  - { at: %dus, fail: %s }\n", from, what)
		if d.IntN(3) > 0 {
			fmt.Fprintf(&b, "  - { at: %dus, mend: %s }\n", from+1+d.IntN(299_999-from), what)
		}
	}
	for s := range d.IntN(3) {
		fmt.Fprintf(&b, "  - { at: %dus, drain: s%d }\n  - { at: %dus, undrain: s%d }\n", d.IntN(150_000), s, 150_000+d.IntN(149_000), s)
	}
	return b.String()
}

// The same holds for whatever else can happen.
func TestOracleRoughScenarios(t *testing.T) {
	t.Parallel()
	for seed := range uint64(roughSeeds) {
		t.Run(fmt.Sprint(seed), func(t *testing.T) {
			t.Parallel()
			d := dice{rand.New(rand.NewPCG(seed, 15))}
			text := d.rougher(d.scenario())
			sameInAllWindows(t, parse(t, text), text, seed)
		})
	}
}

// roughSeeds is how many rough scenarios are tried.
const roughSeeds = 10

// sameInAllWindows runs a scenario in several ways.
func sameInAllWindows(t *testing.T, sc *scenarios.Scenario, text string, seed uint64) {
	t.Helper()
	gate <- struct{}{}
	defer func() { <-gate }()
	rng := rand.New(rand.NewPCG(seed, 1))
	random := func() des.Time { return 1 + des.Time(rng.Int64N(int64(2*des.Millisecond))) }
	want, _ := carry(t, sc, scenarios.AsIs, build.Options{}, des.Serial{}, func() des.Time { return des.Never })
	r, err := result.Decode(want)
	if err != nil {
		t.Fatal(err)
	}
	if a := r.(*result.Run).Audit; !a.OK {
		t.Fatalf("audit failed: %s\n%s", strings.Join(a.Failures, "\n"), text)
	}
	e := study.NewExecutor(2)
	defer e.Close()
	for i, o := range []build.Options{{}, {JoinBelow: -1}, {JoinBelow: des.Time(rng.Int64N(int64(2 * des.Millisecond)))}} {
		got, _ := carry(t, sc, scenarios.AsIs, o, []des.Executor{des.Serial{}, des.Serial{}, e}[i], random)
		if !bytes.Equal(got, want) {
			t.Fatalf("way %d: %s\n%s", i, firstDifference(want, got), text)
		}
	}
}
