package study_test

import (
	"context"
	"fmt"
	"math"
	"runtime"
	"strings"
	"sync"
	"testing"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/scenarios"
	"ferrule/scenarios/result"
	"ferrule/scenarios/study"
)

// The tests in the files oracle_*_test.go hold whole scenarios, from the text
// of a file to the figures of a result, against theory and printed values. The
// source of each value stands beside it. Seeds are fixed.
//
// A tolerance of a random figure is 3.3 standard deviations of the mean over
// all replications: a spread per million packets, stated with each check, that
// was estimated from many independent runs of a plain simulation of the queue
// alone or from the formula of the variance, scaled to the packets at hand.

// gate lets as many heavy replications run at a time as there are cores.
var gate = make(chan struct{}, runtime.GOMAXPROCS(0))

// parse reads a scenario from text.
func parse(t testing.TB, text string) *scenarios.Scenario {
	t.Helper()
	sc, err := scenarios.Load("inline", []byte(text), nil, nil)
	if err != nil {
		t.Fatalf("%v\n%s", err, clip(text))
	}
	return sc
}

// clip shortens a generated scenario for a message.
func clip(text string) string {
	if len(text) > 4000 {
		return text[:4000] + "..."
	}
	return text
}

// run makes one replication, whose audit must hold.
func run(t testing.TB, sc *scenarios.Scenario, o study.Options) *result.Run {
	t.Helper()
	r, err := study.Run(context.Background(), sc, o)
	if err != nil {
		t.Fatal(err)
	}
	if !r.Audit.OK {
		t.Fatalf("audit failed: %s", strings.Join(r.Audit.Failures, "\n"))
	}
	return r
}

// runSeeds makes n replications with seeds 1 to n, each on one core.
func runSeeds(t testing.TB, sc *scenarios.Scenario, plan string, n int) []*result.Run {
	t.Helper()
	runs, errs := make([]*result.Run, n), make([]error, n)
	var wg sync.WaitGroup
	for i := range n {
		wg.Go(func() {
			gate <- struct{}{}
			defer func() { <-gate }()
			runs[i], errs[i] = study.Run(context.Background(), sc, study.Options{Plan: plan, Seed: uint64(i + 1), Cores: 1})
		})
	}
	wg.Wait()
	for i, r := range runs {
		if errs[i] != nil {
			t.Fatal(errs[i])
		}
		if !r.Audit.OK {
			t.Fatalf("seed %d: audit failed: %s", i+1, strings.Join(r.Audit.Failures, "\n"))
		}
	}
	return runs
}

// link is a scenario of one circuit from a to b, so wide that only what is
// asked of it shows: no forwarding latency, no framing, no losses but those of
// a buffer that is given.
type link struct {
	length, warmUp string
	rate           string // of the circuit
	buffer         string // of each class; default 1GB
	queue          string // of each class; default fifo
	streams        []stream
}

// stream is a class of its own with one aggregate from a to b.
type stream struct {
	name, model, packet, load string
}

// text writes the scenario.
func (l link) text() string {
	if l.buffer == "" {
		l.buffer = "1GB"
	}
	if l.queue == "" {
		l.queue = "fifo"
	}
	var b strings.Builder
	fmt.Fprintf(&b, `scenario: link
run: { length: %s, warm-up: %s }
defaults:
  circuit: { framing: none, mtu: 65535B }
  router: { forwarding: 0us }
sites: [ { name: a }, { name: b } ]
fibres: [ { name: ab, between: [a, b], length: 100km } ]
circuits: [ { name: ab, along: [ab], slots: 1, rate: %s } ]
`, l.length, l.warmUp, l.rate)
	b.WriteString("traffic:\n")
	for _, s := range l.streams {
		fmt.Fprintf(&b, "  - { name: %s, model: %s, packet: %s }\n", s.name, s.model, s.packet)
	}
	b.WriteString("classes:\n")
	for _, s := range l.streams {
		fmt.Fprintf(&b, "  - { name: %s, queue: %s, buffer: %s, traffic: %s }\n", s.name, l.queue, l.buffer, s.name)
	}
	b.WriteString("aggregates:\n")
	for _, s := range l.streams {
		fmt.Fprintf(&b, "  - { name: %s, from: a, to: b, class: %s, load: %s }\n", s.name, s.name, s.load)
	}
	return b.String()
}

// light100 is the delay of 100 km of fibre in seconds.
var light100 = (100 * nodes.Kilometre).Light().Seconds()

// class finds the one measured period of a class.
func class(t testing.TB, r *result.Run, name string) *result.Outcome {
	t.Helper()
	for i := range r.Classes {
		if r.Classes[i].Name == name {
			if len(r.Classes[i].Periods) != 1 {
				t.Fatalf("class %s has %d periods, want 1", name, len(r.Classes[i].Periods))
			}
			return &r.Classes[i].Periods[0]
		}
	}
	t.Fatalf("no class %s", name)
	return nil
}

// port finds a port that sent something.
func port(t testing.TB, r *result.Run, circuit, from string) *result.Port {
	t.Helper()
	for i := range r.Ports {
		if r.Ports[i].Circuit == circuit && r.Ports[i].From == from {
			return &r.Ports[i]
		}
	}
	t.Fatalf("no port of %s at %s", circuit, from)
	return nil
}

// mean averages a figure over replications.
func mean(t testing.TB, runs []*result.Run, of func(*result.Run) *float64) float64 {
	t.Helper()
	sum := 0.0
	for _, r := range runs {
		v := of(r)
		if v == nil {
			t.Fatalf("seed %d: the figure cannot be said", r.Seed)
		}
		sum += *v
	}
	return sum / float64(len(runs))
}

// count adds up a number over replications.
func count(runs []*result.Run, of func(*result.Run) int64) float64 {
	n := int64(0)
	for _, r := range runs {
		n += of(r)
	}
	return float64(n)
}

// within holds got against want with a relative tolerance.
func within(t testing.TB, what string, got, want, rel float64) {
	t.Helper()
	if off := got/want - 1; math.Abs(off) > rel || math.IsNaN(off) {
		t.Errorf("%s: got %.6g, want %.6g: off by %+.2f %%, allowed %.2f %%", what, got, want, 100*off, 100*rel)
	} else {
		t.Logf("%s: got %.6g, want %.6g: off by %+.2f %%, allowed %.2f %%", what, got, want, 100*off, 100*rel)
	}
}

// perMillion scales a tolerance for a million packets to n of them.
func perMillion(rel, n float64) float64 { return rel * math.Sqrt(1e6/n) }

// bucket is the greatest relative error of a percentile that the histogram of
// delays causes: buckets of 128 to the octave, told by their middle.
const bucket = 0.004

// exact holds got against want to half a picosecond, both in seconds.
func exact(t testing.TB, what string, got *float64, want des.Time) {
	t.Helper()
	if got == nil {
		t.Errorf("%s: cannot be said, want %v", what, want)
	} else if math.Abs(*got-want.Seconds()) > 0.5e-12 {
		t.Errorf("%s: got %.15g s, want %.15g s", what, *got, want.Seconds())
	}
}

// value is what p points to, or NaN.
func value(p *float64) float64 {
	if p == nil {
		return math.NaN()
	}
	return *p
}
