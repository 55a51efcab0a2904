package scenarios

import (
	"errors"
	"fmt"
	"os"
	"strings"
	"testing"
	"testing/fstest"

	"github.com/google/go-cmp/cmp"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
)

// The values below are read off testdata/coast.yaml by eye.
func TestCoast(t *testing.T) {
	s := mustLoad(t, "coast.yaml")
	check := func(what string, got, want any) {
		t.Helper()
		if diff := cmp.Diff(want, got); diff != "" {
			t.Errorf("%s (-want +got):\n%s", what, diff)
		}
	}
	check("run", s.Run, Run{Length: 10 * des.Second, WarmUp: des.Second, Seed: 1})
	check("command", s.Timing.Command, random.Spec{Kind: random.Lognormal, Median: 1e10, P95: 5e10})
	check("voice", s.Classes[1], Class{
		Name: "voice", Pos: Pos{"coast.yaml", 14, 5}, DSCP: 46, Queue: nodes.QueueStrict, BufferTime: 5 * des.Millisecond, Traffic: 1,
		Objective: []Limit{
			{Figure: FigureDelayP99, Time: 40 * des.Millisecond}, {Figure: FigurePDVP999, Time: 2 * des.Millisecond},
			{Figure: FigureLoss, Ratio: 1e-4}, {Figure: FigureOut, Time: 200 * des.Millisecond},
		},
	})
	check("weights", []int{s.Classes[2].Weight, s.Classes[3].Weight}, []int{60, 40})
	check("pages", s.Traffic[3].Size, random.Spec{Kind: random.Pareto, Mean: 80e3, Shape: 1.3, AtMost: 100e6})
	check("wick", s.Sites[5].Forwarding, random.Spec{Kind: random.Lognormal, Median: 15e6, P99: 80e6})
	check("tarn-holm", s.Fibres[0], Fibre{
		Name: "tarn-holm", Pos: Pos{"coast.yaml", 33, 5}, A: 0, B: 1, Length: 310 * nodes.Kilometre,
		Channels: 40, ChannelRate: 100 * nodes.Gbps, Lit: 1, Slots: 80, RiskGroups: []int{0},
	})
	// 1.2 x sqrt(280^2 + 50^2) km, worked by hand: 341.315103 km.
	check("holm-ness", s.Fibres[1].Length, nodes.Length(341_315_103))
	check("slots of two channels", s.Fibres[6].Slots, 160)
	check("group", s.RiskGroups[0].Fibres, []nodes.FibreID{0, 2})
	// Two slots carry 2487.9 Mbit/s: 2 x 1 249 177.230 kbit/s x 238/239 (ITU-T
	// G.709 table 7-8; the 238/239 is its overhead).
	if got := s.Circuits[2].Payload; got/nodes.Kbps != 2_487_901 {
		t.Errorf("payload of two slots %v", got)
	}
	check("container", []any{s.Circuits[4].Size, s.Circuits[4].Slots, s.Circuits[4].Container}, []any{SizeContainer, 8, "ODU2"})
	check("shaped", s.Circuits[6].Rate, nodes.Gbps)
	check("both ways", s.Aggregates[0], Aggregate{
		Name: "video-tn", Pos: Pos{"coast.yaml", 54, 5}, From: 0, To: 2, BothWays: true, Class: 2, Traffic: 2,
		Load: 300 * nodes.Mbps, Stop: des.Never,
	})
	check("matrix", s.Aggregates[6], Aggregate{
		Name: "voice.wick.firth", Pos: Pos{"demand.csv", 8, 1}, From: 5, To: 3, Class: 1, Traffic: 1,
		Load: 6400 * nodes.Kbps, Stop: des.Never,
	})
	check("aggregates", len(s.Aggregates), 7) // two of the file, five rows above 0
	check("cut", s.Timeline[0], Act{
		Pos: Pos{"coast.yaml", 63, 5}, Verb: VerbCut, At: 6 * des.Second, After: nodes.None, Subject: "tarn-holm",
		Fibres: []nodes.FibreID{0}, Where: 120 * nodes.Kilometre, Circuit: nodes.None,
	})
	check("scaled", s.Timeline[2].Moved, []MovedWay{{Way: 4}, {Way: 6}}) // aggregates 2 and 3, one way each
	check("defaults", strings.Join(s.Defaults, "\n"), strings.Join([]string{
		"defaults.timing.switch = 50ms", "defaults.timing.re-lock = 1s", "defaults.timing.level = 1s",
		"defaults.timing.ramp = standard, 512Mbps each second", "defaults.timing.report = fibre", "defaults.timing.correlation = 0s",
		"defaults.timing.traffic-ready = 0s", "defaults.timing.converge = 200ms",
		"defaults.timing.commands = parallel for slots, sequence for channels", "defaults.timing.loss-of-message = 0",
		"traffic.calls.flows-arrive = none", "traffic.stream.flows-arrive = none", "traffic.stream.group-of-pictures = 12",
		"fibres.holm-ness.length = 341.315103km (6/5 of the straight line)",
		"fibres.tarn-firth.length = 332.77019km (6/5 of the straight line)",
		"fibres.firth-strand.length = 327.536257km (6/5 of the straight line)",
		"fibres.strand-wick.length = 317.716854km (6/5 of the straight line)",
		"fibres.ness-wick.length = 284.478469km (6/5 of the straight line)",
		"fibres.holm-strand.length = 296.378136km (6/5 of the straight line)",
		"controller.attempts = 3",
	}, "\n"))
}

func TestPlans(t *testing.T) {
	s := mustLoad(t, "coast.yaml")
	asIs, err := s.Plan(AsIs)
	if err != nil || len(asIs.InPlace)+len(asIs.Steps)+len(asIs.Moves) != 0 || len(asIs.Circuits) != 7 {
		t.Fatalf("as-is: %+v, %v", asIs, err)
	}
	live, err := s.Plan("video-express-live")
	if err != nil {
		t.Fatal(err)
	}
	if c := live.Circuits[7]; c.Name != "vx" || c.InPlace || len(live.Moves) != 0 {
		t.Errorf("circuits of the live plan: %+v, moves %v", c, live.Moves)
	}
	if a := live.Steps[1]; a.After != 0 || a.At != des.Never || a.Order != OrderKept || a.Onto[0] != 7 {
		t.Errorf("second step %+v", a)
	}
	all, err := s.Plan("all-video") // on video-express: vx is circuit 7, vy 8
	if err != nil {
		t.Fatal(err)
	}
	if vy := all.Circuits[8]; len(all.Circuits) != 9 || vy.Name != "vy" || !vy.InPlace ||
		vy.Choose != nodes.ChooseApart || vy.ApartFrom[0] != 7 {
		t.Errorf("circuits of the plan on a plan: %+v", all.Circuits[7:])
	}
	// video-tn both ways on vx, then video.ness.tarn (aggregate 5) on vy.
	want := []Carriage{{0, []nodes.CircuitID{7}}, {1, []nodes.CircuitID{7}}, {10, []nodes.CircuitID{8}}}
	if diff := cmp.Diff(want, all.Moves); diff != "" {
		t.Errorf("moves (-want +got):\n%s", diff)
	}
	if _, err := s.Plan("video-expres"); err == nil || !strings.Contains(err.Error(), `did you mean "video-express"?`) {
		t.Errorf("unknown plan: %v", err)
	}
}

// A chain is taken in the order in which each way passes it, resizes and
// tear-downs in place show in the circuits, and a later plan undoes moves.
func TestPlanInPlace(t *testing.T) {
	s := mustLoad(t, "chain.yaml")
	p, err := s.Plan("chain")
	if err != nil {
		t.Fatal(err)
	}
	want := []Carriage{{0, []nodes.CircuitID{2, 3}}, {1, []nodes.CircuitID{3, 2}}}
	if diff := cmp.Diff(want, p.Moves); diff != "" {
		t.Errorf("moves (-want +got):\n%s", diff)
	}
	if p.Circuits[0].Slots != 4 || p.Circuits[0].Rate != p.Circuits[0].Payload || p.Circuits[1].InPlace {
		t.Errorf("resized %+v, torn down %+v", p.Circuits[0], p.Circuits[1])
	}
	if s.Circuits[0].Slots != 1 || !s.Circuits[1].InPlace {
		t.Error("a plan changed the scenario")
	}
	back, err := s.Plan("back")
	if err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff([]Carriage{{1, []nodes.CircuitID{3, 2}}}, back.Moves); diff != "" {
		t.Errorf("moves after one way returned (-want +got):\n%s", diff)
	}
}

func TestSets(t *testing.T) {
	s := mustLoad(t, "coast.yaml",
		"circuits.vx.slots=4", "circuits.th.slots=3", "run.seed=7", "classes.voice.objective.delay-p99.9=50ms",
		"traffic.pages.size.pareto.shape=1.5", "fibres.holm-ness.length=400km", "plans.video-express.in-place.vx.carries=moved",
		"defaults.timing.converge=1s", "sites.tarn.router.forwarding=1us", "controller={ at: ness }")
	live, _ := s.Plan("video-express-live")
	express, _ := s.Plan("video-express")
	got := fmt.Sprintln(live.Circuits[7].Slots, express.Circuits[7].Slots, s.Circuits[0].Slots, s.Run.Seed,
		s.Classes[1].Objective[1], s.Traffic[3].Size.Shape, FormatLength(s.Fibres[1].Length),
		s.Timing.Converge, s.Sites[0].Forwarding.Mean, s.Controller.At)
	if want := "4 4 3 7 {delay-p99.9 50ms 0} 1.5 400km 1s 1e+06 2\n"; got != want {
		t.Errorf("after options\n got %s\nwant %s", got, want)
	}
	for set, want := range map[string]string{
		"run.seed":             `is not of the form path=value; write for instance --set run.seed=7`,
		"circuits.zz.slots=4":  `circuits.zz.slots: nothing is called "zz" there; write one of th, hn, tf, fs, sw, nw, hs`,
		"run.seed=x":           `run.seed: "x" is not a whole number; write digits without a unit`,
		"run.seed=[":           `run.seed: "[" is not a value; write for instance run.seed=4`,
		"run.seed.x=4":         `run.seed.x: nothing stands at "x"; end the path before it`,
		"circuits.th.slot=4":   `circuits.th.slot: unknown key "slot"; did you mean "slots"?`,
		"run={ length: 3min }": "",
		"run=3":                "run: one value stands where a mapping is wanted; write { length: ..., ... }",
		"circuits.th.rate=5 s": `circuits.th.rate: "5 s" is a time, not a rate; write a number and one of bps kbps Mbps Gbps Tbps (not s)`,
	} {
		_, err := load(t, "coast.yaml", set)
		if got := fmt.Sprint(err); want == "" && err != nil || want != "" && got != "--set "+set+": "+want {
			t.Errorf("--set %s\n got %v\nwant %s", set, err, want)
		}
	}
}

func TestParseCut(t *testing.T) {
	s := mustLoad(t, "coast.yaml")
	acts, err := s.ParseCut("tarn-holm:120km@6s..9s")
	if err != nil || len(acts) != 2 {
		t.Fatal(acts, err)
	}
	if a := acts[0]; a.Verb != VerbCut || a.At != 6*des.Second || a.Fibres[0] != 0 || a.Where != 120*nodes.Kilometre {
		t.Errorf("cut %+v", a)
	}
	if a := acts[1]; a.Verb != VerbRepair || a.At != 9*des.Second || a.Where != 120*nodes.Kilometre {
		t.Errorf("repair %+v", a)
	}
	acts, err = s.ParseCut("harbour-duct@500ms")
	if err != nil || len(acts) != 1 || len(acts[0].Fibres) != 2 || acts[0].WhereOn(&s.Fibres[0]) != 155*nodes.Kilometre {
		t.Errorf("cut of a risk group: %+v, %v", acts, err)
	}
	for text, want := range map[string]string{
		"tarn-holm":           "is not of the form NAME[:120km]@6s[..9s]; write for instance --cut tarn-holm@6s",
		"tarn-hom@6s":         `no fibre or risk group is called "tarn-hom"; did you mean "tarn-holm"?`,
		"tarn-holm:311km@6s":  "311km is not on the fibre, which has 310km; write 0km to 310km",
		"tarn-holm@11s":       "11s is after the end of the run at 10s; write an earlier instant",
		"tarn-holm@6s..6s":    "the repair at 6s is not after the cut at 6s; write a later instant",
		"tarn-holm@6":         `"6" has no unit; write a time with one of ps ns us ms s min h, such as 6s`,
		"harbour-duct:1km@6s": "harbour-duct is a risk group of several fibres; leave out the place",
	} {
		_, err := s.ParseCut(text)
		if got := fmt.Sprint(err); got != "--cut "+text+": "+want {
			t.Errorf("--cut %s\n got %s\nwant %s", text, got, want)
		}
	}
}

// What a scenario is made of names it: the file, the options, the matrices.
func TestHash(t *testing.T) {
	data, err := os.ReadFile("testdata/coast.yaml")
	if err != nil {
		t.Fatal(err)
	}
	hash := func(data []byte, matrix string, sets ...string) string {
		files := fstest.MapFS{"demand.csv": {Data: []byte(matrix)}}
		s, err := Load("coast.yaml", data, files, sets)
		if err != nil {
			t.Fatal(err)
		}
		return s.Hash
	}
	const matrix = "from,to,class,rate\nness,tarn,video,1Mbps\ntarn,ness,web,1Mbps\n"
	all := []string{
		hash(data, matrix), hash(append(data, '\n'), matrix), hash(data, matrix+"tarn,holm,web,1Mbps\n"), hash(data, matrix, "run.seed=1"),
	}
	for i := range all {
		for j := range all[:i] {
			if all[i] == all[j] {
				t.Errorf("scenarios %d and %d have one hash", i, j)
			}
		}
	}
	if again := hash(data, matrix); again != all[0] || len(again) != 64 {
		t.Errorf("hash %s, then %s", all[0], again)
	}
}

// Matrices are read by relative names only, up to a size.
func TestMatrixFiles(t *testing.T) {
	const text = "scenario: s\nrun: { length: 1s }\nclasses: [ { name: g } ]\nsites: [ { name: a } ]\ndemand: [ { matrix: %s } ]\n"
	files := fstest.MapFS{
		"big.csv":   {Data: make([]byte, maxFile+1)},
		"empty.csv": {},
		"head.csv":  {Data: []byte("from,to,rate\n")},
		"quote.csv": {Data: []byte("from,to,class,rate\n\"a,b\n")},
	}
	for name, want := range map[string]string{
		"big.csv":        `s.yaml:5:21: demand[0].matrix: "big.csv" cannot be read: it has more than 8 MB`,
		"/etc/x.csv":     `"/etc/x.csv" cannot be read: a name is relative and without ".."`,
		"a/../x.csv":     `"a/../x.csv" cannot be read: a name is relative and without ".."`,
		`"a\\..\\x.csv"`: `cannot be read: a name is relative and without ".."`,
		"empty.csv":      "empty.csv: the matrix is empty; begin with the row from,to,class,rate",
		"head.csv":       `head.csv:1:1: the first row is "from,to,rate"; begin with the row from,to,class,rate`,
		"quote.csv":      `quote.csv:2:6: not CSV: extraneous or missing " in quoted-field; mind the quotes`,
	} {
		_, err := Load("s.yaml", fmt.Appendf(nil, text, name), files, nil)
		var problems Problems
		if !errors.As(err, &problems) || len(problems) != 1 || !strings.Contains(err.Error(), want) {
			t.Errorf("matrix %s\n got %v\nwant %s", name, err, want)
		}
	}
}
