package study

import (
	"bytes"
	"context"
	"errors"
	"math"
	"slices"
	"strings"
	"testing"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/scenarios"
	"ferrule/scenarios/build"
	"ferrule/scenarios/result"
)

// allSorts is a network with every kind of source, queue, recovery and latency
// law, so that a copy of it has everything to copy.
const allSorts = `
scenario: all-sorts
run: { length: 1s, warm-up: 100ms }
defaults:
  router: { forwarding: { median: 15us, p99: 80us } }
  timing: { command: { lognormal: { median: 10ms, p95: 50ms } }, detect: 3ms, converge: 50ms, loss-of-message: 1% }
classes:
  - { name: voice, queue: strict, buffer: 5ms, traffic: calls }
  - { name: video, queue: weight 60%, buffer: 20ms, traffic: stream }
  - { name: web,   queue: weight 40%, buffer: 50ms, traffic: pages, drop: codel }
traffic:
  - { name: beats,  model: constant, packet: 200B }
  - { name: chance, model: poisson, packet: 500B }
  - { name: calls,  model: voice, codec: G.711, flows-arrive: poisson, hold: { exponential: { mean: 300ms } } }
  - { name: stream, model: video, rate: 8Mbps, frames: 25/s }
  - { name: pages,  model: files, size: { pareto: { mean: 80kB, shape: 1.5, at-most: 5MB } }, pace: 20Mbps }
  - { name: reader, model: pages, pace: 5Mbps, parse: 50ms }
  - { name: bursts, model: onoff, hurst: 0.8, peak: 10Mbps, on-for: 20ms, off-for: 40ms }
  - { name: states, model: mmpp, packet: 500B, high-for: 10ms, low-for: 10ms }
  - { name: loops,  model: web, size: { pareto: { mean: 80kB, shape: 1.5, at-most: 1MB } }, transport: cubic }
  - { name: copies, model: bulk, transport: reno }
sites: [ { name: a }, { name: b }, { name: c }, { name: d } ]
fibres:
  - { between: [a, b], length: 100km }
  - { between: [b, c], length: 150km }
  - { between: [a, d], length: 120km }
  - { between: [d, c], length: 160km }
circuits:
  - { name: ab, along: [a-b], slots: 1, recovery: restore }
  - { name: bc, along: [b-c], slots: 1, recovery: restore }
  - { name: ad, along: [a-d], slots: 1 }
  - { name: dc, along: [d-c], slots: 1, recovery: restore }
aggregates:
  - { name: voice, between: [a, c], class: voice, flows: 60 }
  - { name: beats, between: [b, c], class: voice, traffic: beats, load: 2Mbps }
  - { name: video, between: [a, c], class: video, load: 300Mbps }
  - { name: rest,  from: a, to: b, class: web, traffic: chance, load: 300Mbps }
  - { name: web,   from: a, to: c, class: web, load: 600Mbps }
  - { name: read,  from: a, to: c, class: web, traffic: reader, load: 20Mbps }
  - { name: burst, from: a, to: c, class: web, traffic: bursts, load: 20Mbps }
  - { name: state, from: a, to: c, class: web, traffic: states, load: 20Mbps }
  - { name: loop,  between: [a, c], class: web, traffic: loops, load: 20Mbps }
  - { name: copy,  from: a, to: c, class: web, traffic: copies, flows: 3 }
requests: [ { name: loans, between: [a, c], slots: 2, arrive: 40/s, hold: { exponential: { mean: 50ms } } } ]
controller: { at: d, compute: 1ms }
plans:
  - name: express
    in-place:
      - { circuit: { name: x, between: [a, c], slots: 1, carries: moved, recovery: 1+1 } }
      - { circuit: { name: y, between: [a, c], slots: 1, carries: moved, recovery: restore } }
      - { move: video, onto: [x] }
      - { move: web, onto: [y] }
`

// bytesOf is a run as a file, without its steps: in one of the runs compared
// the cut is a step of the timeline.
func bytesOf(t testing.TB, r *result.Run) []byte {
	t.Helper()
	r.Steps = nil
	b, err := result.Encode(r)
	if err != nil {
		t.Fatal(err)
	}
	return b
}

// A run that goes on from a copy of another, made at the instant of the cut,
// gives the bytes of a run of its own that has the cut in its timeline; and
// neither the copying nor what a copy does changes the original.
func TestTrialIsARunOfItsOwn(t *testing.T) {
	t.Run("central", func(t *testing.T) { trialIsARun(t, allSorts) })
	t.Run("distributed", func(t *testing.T) {
		trialIsARun(t, strings.Replace(allSorts, "compute: 1ms", "compute: 1ms, routing: distributed, hello: 50ms", 1))
	})
}

func trialIsARun(t *testing.T, text string) {
	sc := load(t, text)
	w, err := Sweep{Plans: []string{"express"}, Kinds: []string{FailFibre, FailRouter}, Before: 100 * des.Millisecond, After: 600 * des.Millisecond}.withDefaults(sc, Options{})
	if err != nil {
		t.Fatal(err)
	}
	list, err := w.failures(sc)
	if err != nil {
		t.Fatal(err)
	}
	own, at, _ := w.quiet(sc)
	f := newFleet(own, &w, list, at, Options{})
	shared, err := f.begin(context.Background(), &f.groups[0])
	if err != nil {
		t.Fatal(err)
	}
	try := func(m *build.Model, name string) *result.Run {
		i := slices.IndexFunc(list, func(b breakage) bool { return b.name == name })
		if _, err := trialOf(context.Background(), m, &list[i], at); err != nil {
			t.Fatal(err)
		}
		return gather(m, false)
	}
	for _, name := range []string{"a-b", "b-c", "a-b"} {
		got := try(shared.Clone(), name)
		cut := *own
		acts, err := cut.ParseCut(name + "@200ms")
		if err != nil {
			t.Fatal(err)
		}
		cut.Timeline = acts
		fresh, err := Run(context.Background(), &cut, Options{Plan: "express", Cores: 1})
		if err != nil {
			t.Fatal(err)
		}
		if fresh.Audit.LostPackets.Total() == 0 {
			t.Errorf("the cut of %s loses nothing: the test is blunt", name)
		}
		if a, b := bytesOf(t, got), bytesOf(t, fresh); !bytes.Equal(a, b) {
			t.Errorf("cut of %s: a copy that goes on and a run of its own differ:\n%s", name, firstDifference(a, b))
		}
	}
	copied := bytesOf(t, try(shared.Clone(), "b router"))
	if own := bytesOf(t, try(shared, "b router")); !bytes.Equal(copied, own) {
		t.Errorf("failed router: a copy and the original differ:\n%s", firstDifference(copied, own))
	}
}

// firstDifference shows two texts where they part.
func firstDifference(a, b []byte) string {
	x, y := bytes.Split(a, []byte("\n")), bytes.Split(b, []byte("\n"))
	for i := range min(len(x), len(y)) {
		if !bytes.Equal(x[i], y[i]) {
			from := max(0, i-3)
			return string(bytes.Join(x[from:min(i+3, len(x))], []byte("\n"))) + "\n--\n" + string(bytes.Join(y[from:min(i+3, len(y))], []byte("\n")))
		}
	}
	return "one is longer"
}

// threeTowns is three towns, of which c is joined to a and b; the stream between
// a and b is constant: 1250 packets a second.
const threeTowns = `
scenario: three-towns
run: { length: 1s, warm-up: 100ms }
defaults: { timing: { command: 10ms, detect: 3ms, converge: 10ms } }
classes: [ { name: gold, queue: strict, traffic: beats, objective: { delay-mean: 1ms } }, { name: iron, queue: strict, traffic: beats } ]
traffic: [ { name: beats, model: constant, packet: 1000B } ]
sites: [ { name: a }, { name: b }, { name: c } ]
fibres:
  - { between: [a, b], length: 100km, risk-groups: [duct] }
  - { between: [a, c], length: 200km }
  - { between: [b, c], length: 200km, risk-groups: [duct] }
circuits: [ { name: ab, along: [a-b], slots: 1 }, { name: ac, along: [a-c], slots: 1 }, { name: bc, along: [b-c], slots: 1 } ]
aggregates:
  - { name: w, from: a, to: b, class: gold, load: 10Mbps }
  - { name: v, between: [a, c], class: iron, load: 10Mbps }
controller: { at: c, compute: 1ms }
timeline: [ { at: 500ms, cut: a-c } ]
plans:
  - { name: own, in-place: [ { circuit: { name: x, along: [a-b], between: [a, b], slots: 1, carries: moved, when-down: drop } }, { move: w, onto: [x] } ] }
`

func load(t testing.TB, text string) *scenarios.Scenario {
	t.Helper()
	sc, err := scenarios.Load("inline", []byte(text), nil, nil)
	if err != nil {
		t.Fatal(err)
	}
	return sc
}

func sweep(t testing.TB, sc *scenarios.Scenario, o Options, w Sweep) *result.Failures {
	t.Helper()
	r, err := Failures(context.Background(), sc, o, w)
	if err != nil {
		t.Fatal(err)
	}
	if !r.Audit.OK {
		t.Fatal(r.Audit.Failures)
	}
	return r
}

func named(t testing.TB, p *result.FailuresPlan, name string) *result.Failure {
	t.Helper()
	for i := range p.Failures {
		if p.Failures[i].Name == name {
			return &p.Failures[i]
		}
	}
	t.Fatalf("%s was not tried under %s", name, p.Plan)
	return nil
}

// What is moved onto a circuit without a way back is lost from what passes the
// middle of the fibre at the cut to the end of the run: 1250/s for 700 ms and
// for 50 km of light, 0.245 ms, 875 packets and a third of one. It is out until
// the repair: 196.3 minutes a year for 100 km (computed from the two-state
// formula, 4.39 cuts per 1000 miles and 12 h), A = 0.9996265. Routed, it goes
// by way of c: it loses what passes the break and what is sent until a knows,
// 2 times 0.245 ms and 3 ms, 4.4 packets, and tables until c has told both ends.
func TestFailuresByHand(t *testing.T) {
	r := sweep(t, load(t, threeTowns), Options{}, Sweep{Seeds: []uint64{1, 2}})
	if len(r.Plans) != 2 || len(r.Plans[0].Failures) != 4 || r.Runs != 2*2*5 {
		t.Fatalf("%d plans, %d runs", len(r.Plans), r.Runs)
	}
	asIs, own := &r.Plans[0], &r.Plans[1]
	cut := named(t, own, "a-b")
	if n := cut.Classes[0].LostPackets; n < 875 || n > 876 {
		t.Errorf("moved: %g packets lost, want 875 or 876", n)
	}
	if len(cut.CutOff) != 1 || cut.CutOff[0] != "w" || cut.Classes[0].CutOff != 1 || cut.Rank != 1 {
		t.Errorf("moved: cut off %v, rank %d", cut.CutOff, cut.Rank)
	}
	if len(cut.Unrestored) != 2 {
		t.Errorf("moved: not back %v", cut.Unrestored)
	}
	y := own.Classes[0]
	if y.Lost == nil || math.Abs(*y.Lost/60-196.3) > 0.05 || math.Abs(*y.Availability-(1-3.73534e-4)) > 1e-8 || y.HurtMostBy != "a-b" {
		t.Errorf("moved: a year %+v", y)
	}
	cut = named(t, asIs, "a-b")
	if n := cut.Classes[0].LostPackets; n < 5 || n > 60 || len(cut.CutOff) != 0 || cut.Classes[0].Missed != 1 {
		t.Errorf("routed: %g packets lost, cut off %v; by way of c it takes 2 ms and misses 1 ms: %d", n, cut.CutOff, cut.Classes[0].Missed)
	}
	// By way of c it misses its objective until the repair: 12 h at the rate of
	// the cuts of 100 km, as above, and at that of the other fibres not at all.
	if y := asIs.Classes[0]; y.Below == nil || math.Abs(*y.Below/60-196.3) > 0.05 || *y.Lost > 1 {
		t.Errorf("routed: a year %+v", y)
	}
	if asIs.Classes[1].Below != nil {
		t.Error("a class without objectives falls short of them")
	}
	if b := named(t, asIs, "a-c"); b.Classes[0].LostPackets != 0 || b.Classes[1].Hit != 2 || *b.LengthKm != 200 {
		t.Errorf("the cut of a-c: %+v", b)
	}
	duct := named(t, asIs, "duct") // b stands alone
	if len(duct.CutOff) != 1 || duct.CutOff[0] != "w" || duct.PerYear != nil || duct.Kind != FailGroup || duct.Rank != 1 {
		t.Errorf("the duct cuts off %v, rank %d", duct.CutOff, duct.Rank)
	}
	if n := asIs.Nothing; n == nil || n.Classes[0].LostPackets != 0 || n.Classes[0].Missed != 0 {
		t.Errorf("nothing fails, and yet %+v", n)
	}
	if !slices.ContainsFunc(r.Cautions, func(s string) bool { return strings.Contains(s, "cut a-c") }) {
		t.Errorf("the cut of the timeline goes unmentioned: %v", r.Cautions)
	}
}

// Cores change nothing. Loads are scaled, pairs fail together, and a plan alone
// is tried alone.
func TestFailuresOptions(t *testing.T) {
	sc := load(t, threeTowns)
	w := Sweep{Plans: []string{"own"}, Pairs: [][2]string{{"a-c", "b-c"}}, Kinds: []string{FailFibre}, Scale: 0.5, After: 300 * des.Millisecond}
	one, err := result.Encode(sweep(t, sc, Options{Cores: 1}, w))
	if err != nil {
		t.Fatal(err)
	}
	r := sweep(t, sc, Options{Cores: 3}, w)
	three, err := result.Encode(r)
	if err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal(one, three) {
		t.Errorf("one core and three differ:\n%s", firstDifference(one, three))
	}
	pair := named(t, &r.Plans[0], "a-c + b-c")
	if len(pair.CutOff) != 2 || pair.CutOff[0] != "v.out" || pair.CutOff[1] != "v.back" {
		t.Errorf("the pair cuts off %v", pair.CutOff)
	}
	if n := named(t, &r.Plans[0], "a-b").Classes[0].LostPackets; n < 187 || n > 188 { // 625/s for 300.245 ms
		t.Errorf("at half the load %g packets lost, want 187 or 188", n)
	}
	for text, w := range map[string]Sweep{
		"nothing of the kind": {Kinds: []string{FailGroup}},
		"no kind of failure":  {Kinds: []string{"volcano"}},
		`is called "x-y"`:     {Pairs: [][2]string{{"a-b", "x-y"}}},
		"is given twice":      {Plans: []string{"own", "own"}},
		"no plan is called":   {Plans: []string{"none"}},
	} {
		own := *sc
		own.RiskGroups = nil
		if _, err := Failures(context.Background(), &own, Options{}, w); err == nil || !strings.Contains(err.Error(), text) {
			t.Errorf("%s: %v", text, err)
		}
	}
}

// An interrupted sweep hands out what was tried, marked partial.
func TestFailuresInterrupted(t *testing.T) {
	ctx, stop := context.WithCancel(context.Background())
	defer stop()
	o := Options{Cores: 1, Progress: func(done, total float64) {
		if done >= 0.55 {
			stop()
		}
	}}
	r, err := Failures(ctx, load(t, threeTowns), o, Sweep{Plans: []string{"own"}, Seeds: []uint64{1}})
	if !errors.Is(err, context.Canceled) || r == nil || !r.Partial {
		t.Fatalf("interrupted: %v, %v", r, err)
	}
	if n := len(r.Plans[0].Failures); n != 2 { // nothing and two failures are three fifths
		t.Errorf("%d failures before the interruption, want 2", n)
	}
	stop()
	if r, err := Failures(ctx, load(t, threeTowns), Options{}, Sweep{}); r != nil || !errors.Is(err, context.Canceled) {
		t.Errorf("interrupted before it began: %v, %v", r, err)
	}
}

// A sweep that was interrupted goes on from its store, repeats nothing and
// gives the bytes of one that was not; another load is another sweep.
func TestFailuresResumed(t *testing.T) {
	sc := load(t, threeTowns)
	w := Sweep{Seeds: []uint64{1, 2}, After: 300 * des.Millisecond}
	want, err := result.Encode(sweep(t, sc, Options{}, w))
	if err != nil {
		t.Fatal(err)
	}
	store := &shelf{kept: map[string][]byte{}}
	ctx, stop := context.WithCancel(context.Background())
	defer stop()
	o := Options{Cores: 1, Store: store, Progress: func(done, total float64) {
		if done/total > 0.4 {
			stop()
		}
	}}
	if _, err := Failures(ctx, sc, o, w); !errors.Is(err, context.Canceled) {
		t.Fatal(err)
	}
	before := store.saves
	got, err := result.Encode(sweep(t, sc, Options{Store: store}, w))
	if err != nil {
		t.Fatal(err)
	}
	if before == 0 || before == 20 || store.saves != 20 { // two plans, two seeds, four failures and nothing
		t.Errorf("%d trials saved before the interruption, %d in all, want 20", before, store.saves)
	}
	if !bytes.Equal(got, want) {
		t.Errorf("resumed and in one go differ:\n%s", firstDifference(got, want))
	}
	w.Scale = 0.5
	sweep(t, sc, Options{Store: store}, w)
	if store.saves != 40 {
		t.Errorf("%d trials saved after a sweep at another load, want 40", store.saves)
	}
}

// What waits for what is left out is left out too.
func TestWithoutFaults(t *testing.T) {
	none := nodes.None
	kept, left := withoutFaults([]scenarios.Act{
		{Verb: scenarios.VerbCut, Subject: "f", After: none},
		{Verb: scenarios.VerbSetUp, Subject: "x", After: none},
		{Verb: scenarios.VerbMove, Subject: "m", After: 1},
		{Verb: scenarios.VerbReturn, Subject: "m", After: 4},
		{Verb: scenarios.VerbResize, Subject: "x", After: 0},
	})
	if len(kept) != 2 || kept[0].Subject != "x" || kept[1].After != 0 {
		t.Errorf("kept %+v", kept)
	}
	if got := strings.Join(left, ", "); got != "cut f, return m, resize x" {
		t.Errorf("left out %s", got)
	}
}
