package study_test

import (
	"bytes"
	"context"
	"fmt"
	"math/rand/v2"
	"runtime"
	"strings"
	"testing"

	"ferrule/des"
	"ferrule/nodes/packet"
	"ferrule/scenarios"
	"ferrule/scenarios/build"
	"ferrule/scenarios/result"
	"ferrule/scenarios/study"
)

// drill is a scenario with everything that happens to a network: all kinds of
// traffic, two routers 10 km apart that may share a region, circuits asked for,
// set up, moved onto, resized and torn down, a cut, a second cut of one way, a
// repair, a change of load, lost messages.
const drill = `scenario: drill
run: { length: 2s, warm-up: 200ms, seed: 7 }
defaults:
  router: { forwarding: { median: 15us, p99: 80us } }
  timing: { command: { lognormal: { median: 10ms, p95: 50ms } }, loss-of-message: 2%, wait-to-restore: 100ms, converge: 30ms }
classes:
  - { name: signalling, queue: strict, buffer: 5ms, traffic: beats, objective: { loss: 1e-4, out: 500ms } }
  - { name: voice, queue: strict, buffer: 5ms, traffic: calls, objective: { delay-p99: 40ms } }
  - { name: video, queue: weight 60%, buffer: 20ms, traffic: frames }
  - { name: web, queue: weight 40%, buffer: 10ms, traffic: pages }
traffic:
  - { name: beats, model: constant, packet: 200B }
  - { name: calls, model: voice, flows-arrive: poisson, hold: { exponential: { mean: 300ms } } }
  - { name: frames, model: video, rate: 8Mbps }
  - { name: pages, model: files, size: { pareto: { mean: 80kB, shape: 1.3, at-most: 100MB } }, pace: 100Mbps }
  - { name: noise, model: poisson, packet: { mix: { sizes: [40B, 576B, 1500B], weights: [7, 4, 1] } } }
sites:
  - { name: tarn, position: [0km, 0km] }
  - { name: holm, position: [260km, 80km] }
  - { name: quay, position: [268km, 82km] }
  - { name: ness, position: [540km, 30km] }
  - { name: voe, position: [330km, 300km], router: { forwarding: 5us } }
fibres:
  - { between: [tarn, holm] }
  - { between: [holm, quay], length: 10km }
  - { between: [quay, ness] }
  - { between: [tarn, voe] }
  - { between: [voe, ness] }
  - { between: [holm, voe] }
circuits:
  - { name: th, along: [tarn-holm], slots: 1, rate: 200Mbps, recovery: restore }
  - { name: hq, along: [holm-quay], slots: 1, rate: 200Mbps, recovery: restore }
  - { name: qn, along: [quay-ness], slots: 1, rate: 200Mbps, recovery: restore }
  - { name: tv, along: [tarn-voe], slots: 1, rate: 200Mbps }
  - { name: vn, along: [voe-ness], slots: 1, rate: 200Mbps }
  - { name: vm, between: [tarn, ness], slots: 1, rate: 100Mbps, carries: moved, recovery: restore, hold-off: 2ms }
aggregates:
  - { name: s-tn, between: [tarn, ness], class: signalling, load: 160kbps }
  - { name: v-tn, between: [tarn, ness], class: voice, load: 4Mbps }
  - { name: f-tn, between: [tarn, ness], class: video, load: 40Mbps }
  - { name: w-hv, between: [holm, voe], class: web, load: 60Mbps }
  - { name: n-tq, from: tarn, to: quay, class: web, traffic: noise, load: 100Mbps }
requests: [ { name: asked, between: [tarn, ness], slots: 2, arrive: 30/s, hold: { exponential: { mean: 400ms } } } ]
controller: { at: voe, compute: 3ms, retry: 60ms }
timeline:
  - { at: 300ms, set-up: { name: x, between: [tarn, quay], slots: 1, carries: moved } }
  - { after: x up, move: n-tq, onto: [x], order: kept }
  - { at: 600ms, cut: quay-ness, where: 33km from quay }
  - { at: 700ms, resize: x, slots: 3 }
  - { at: 800ms, cut: tarn-holm, where: 50km from tarn, from: tarn, to: holm }
  - { at: 1200ms, repair: quay-ness }
  - { at: 1300ms, repair: tarn-holm }
  - { at: 1400ms, scale: web, by: 150% }
  - { at: 1600ms, return: n-tq }
  - { at: 1700ms, tear-down: x }
plans: [ { name: moved, in-place: [ { move: f-tn, onto: [vm] } ] } ]
`

// encoded is the bytes of a result.
func encoded(t testing.TB, r result.Result) []byte {
	t.Helper()
	data, err := result.Encode(r)
	if err != nil {
		t.Fatal(err)
	}
	return data
}

// cutWindows is a network whose windows are no longer than given.
type cutWindows struct {
	*packet.Network
	most func() des.Time
}

// MaxWindow implements des.Model.
func (c cutWindows) MaxWindow() des.Time { return min(c.Network.MaxWindow(), c.most()) }

// carry runs a model in windows of its own, and gives the bytes of its result
// and the number of windows.
func carry(t testing.TB, sc *scenarios.Scenario, name string, o build.Options, exec des.Executor, most func() des.Time) ([]byte, uint64) {
	t.Helper()
	plan, err := sc.Plan(name)
	if err != nil {
		t.Fatal(err)
	}
	m, err := build.NewWith(sc, plan, sc.Run.Seed, o)
	if err != nil {
		t.Fatal(err)
	}
	k := des.NewKernel(cutWindows{m.Network, most}, exec)
	m.Network.Run(k, nil)
	return encoded(t, study.Gather(m, false)), k.Windows()
}

// firstDifference shows where two results part.
func firstDifference(a, b []byte) string {
	i := 0
	for i < len(a) && i < len(b) && a[i] == b[i] {
		i++
	}
	from := max(0, i-200)
	return fmt.Sprintf("...%s\n--- and ---\n...%s", a[from:min(len(a), i+100)], b[from:min(len(b), i+100)])
}

// The length of windows, how sites are joined into regions, and what executes
// them never show in a result.
func TestOracleWindows(t *testing.T) {
	t.Parallel()
	sc := parse(t, drill)
	long := func() des.Time { return des.Never }
	want, windows := carry(t, sc, "moved", build.Options{}, des.Serial{}, long)
	r, err := result.Decode(want)
	if err != nil {
		t.Fatal(err)
	}
	checkDrill(t, r.(*result.Run))
	t.Run("study", func(t *testing.T) {
		for _, cores := range []int{1, 2, 5} {
			if got := encoded(t, run(t, sc, study.Options{Plan: "moved", Cores: cores})); !bytes.Equal(got, want) {
				t.Fatalf("%d cores: %s", cores, firstDifference(want, got))
			}
		}
	})
	rng := rand.New(rand.NewPCG(1, 2))
	m, err := build.New(sc, &sc.Plans[0], 1)
	if err != nil {
		t.Fatal(err)
	}
	natural := m.Network.Lookahead()
	for _, c := range []struct {
		name string
		o    build.Options
		most func() des.Time
	}{
		{"seventh", build.Options{}, func() des.Time { return natural / 7 }},
		{"random", build.Options{}, func() des.Time { return 1 + des.Time(rng.Int64N(int64(natural))) }},
		{"apart", build.Options{JoinBelow: -1}, long},
		{"apart, random", build.Options{JoinBelow: -1}, func() des.Time { return 1 + des.Time(rng.Int64N(int64(60*des.Microsecond))) }},
		{"all joined", build.Options{JoinBelow: des.Second}, long},
		{"some joined", build.Options{JoinBelow: 1400 * des.Microsecond}, long},
	} {
		t.Run(c.name, func(t *testing.T) {
			got, n := carry(t, sc, "moved", c.o, des.Serial{}, c.most)
			if n == windows {
				t.Errorf("%d windows, as without a change: the test shows nothing", n)
			}
			if !bytes.Equal(got, want) {
				t.Errorf("%d windows instead of %d: %s", n, windows, firstDifference(want, got))
			}
		})
	}
	t.Run("two cores, short windows", func(t *testing.T) {
		e := study.NewExecutor(2)
		defer e.Close()
		if got, _ := carry(t, sc, "moved", build.Options{JoinBelow: -1}, e, func() des.Time { return natural / 3 }); !bytes.Equal(got, want) {
			t.Error(firstDifference(want, got))
		}
	})
}

// checkDrill makes sure that in the drill things happen.
func checkDrill(t *testing.T, r *result.Run) {
	t.Helper()
	if !r.Audit.OK {
		t.Fatalf("audit failed: %s", strings.Join(r.Audit.Failures, "\n"))
	}
	for _, cause := range []string{"queue", "cut"} {
		if r.Audit.LostPackets.Of(cause) == 0 {
			t.Errorf("nothing lost to %s", cause)
		}
	}
	kinds := map[result.PeriodKind]bool{}
	for _, p := range r.Periods {
		kinds[p.Kind] = true
	}
	if !kinds[result.Hit] || !kinds[result.Mend] || !kinds[result.Change] {
		t.Errorf("periods %+v", r.Periods)
	}
	done := 0
	for _, s := range r.Steps {
		if s.State == "done" {
			done++
		}
	}
	if done < 8 {
		t.Errorf("%d steps done: %+v", done, r.Steps)
	}
	if len(r.Demands) != 1 || r.Demands[0].Offered < 20 {
		t.Errorf("demands %+v", r.Demands)
	}
}

// The same batch twice, on one core and on two, gives the same bytes.
func TestOracleBatchBytes(t *testing.T) {
	t.Parallel()
	sc := parse(t, strings.Replace(drill, "length: 2s", "length: 1700ms", 1))
	var want []byte
	for _, cores := range []int{1, 2, 2} {
		b, err := study.Batch(context.Background(), sc, study.Options{Plan: "moved", Cores: cores}, study.Seeds(3, 3))
		if err != nil {
			t.Fatal(err)
		}
		if !b.Audit.OK {
			t.Fatalf("audit failed: %s", strings.Join(b.Audit.Failures, "\n"))
		}
		got := encoded(t, b)
		if want == nil {
			want = got
		}
		if !bytes.Equal(got, want) {
			t.Fatalf("%d cores: %s", cores, firstDifference(want, got))
		}
	}
}

// A million seconds without a packet, and a request for a circuit every ten
// seconds or so, cost little time, and no memory that grows.
func TestOracleQuiet(t *testing.T) {
	sc := parse(t, `scenario: quiet
run: { length: 1000000s, warm-up: 0s }
defaults: { timing: { command: 1ms } }
sites: [ { name: a }, { name: b }, { name: c } ]
fibres: [ { name: ab, between: [a, b], length: 100km }, { name: bc, between: [b, c], length: 100km } ]
circuits: [ { name: x, along: [ab, bc], slots: 1 } ]
classes: [ { name: c } ]
requests: [ { name: r, between: [a, c], slots: 1, arrive: 0.1/s, hold: { exponential: { mean: 30s } } } ]
controller: { at: b, compute: 1ms, poll: 1s }
`)
	var heap []uint64
	look := func(done, total float64) {
		if at := done / total; at > 0.2 && len(heap) == 0 || at > 0.95 && len(heap) == 1 {
			var m runtime.MemStats
			runtime.GC()
			runtime.ReadMemStats(&m)
			heap = append(heap, m.HeapAlloc)
		}
	}
	r := run(t, sc, study.Options{Cores: 1, Progress: look})
	if len(r.Demands) != 1 || r.Demands[0].Offered < 99_000 || r.Demands[0].Blocked != 0 {
		t.Errorf("demands %+v", r.Demands)
	}
	if len(heap) != 2 {
		t.Fatalf("looked %d times at memory, want 2", len(heap))
	}
	if grown := int64(heap[1]) - int64(heap[0]); grown > 1<<20 {
		t.Errorf("memory grew from %d to %d B between a fifth and the end", heap[0], heap[1])
	}
	t.Logf("heap %d and %d B", heap[0], heap[1])
}
