package library_test

import (
	"context"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"ferrule/scenarios"
	"ferrule/scenarios/library"
	"ferrule/scenarios/result"
	"ferrule/scenarios/study"
)

// load reads an embedded scenario with options laid over it.
func load(t *testing.T, name string, sets ...string) *scenarios.Scenario {
	t.Helper()
	data, files, err := library.Open(name)
	if err != nil {
		t.Fatal(err)
	}
	sc, err := scenarios.Load(name, data, files, sets)
	if err != nil {
		t.Fatalf("%s:\n%v", name, err)
	}
	return sc
}

// run makes one replication, whose audit must hold.
func run(t *testing.T, sc *scenarios.Scenario, plan string, seed uint64) *result.Run {
	t.Helper()
	r, err := study.Run(context.Background(), sc, study.Options{Plan: plan, Seed: seed, Cores: 1})
	if err != nil {
		t.Fatalf("%s, plan %s: %v", sc.Name, plan, err)
	}
	if !r.Audit.OK {
		t.Errorf("%s, plan %s: the audit fails: %s", sc.Name, plan, strings.Join(r.Audit.Failures, "; "))
	}
	return r
}

// withCut is sc with a cut in its timeline, as the option --cut writes it.
func withCut(t *testing.T, sc *scenarios.Scenario, text string) *scenarios.Scenario {
	t.Helper()
	acts, err := sc.ParseCut(text)
	if err != nil {
		t.Fatal(err)
	}
	with := *sc
	with.Timeline = append(slices.Clone(sc.Timeline), acts...)
	return &with
}

// short makes runs that test that a scenario runs, not what it shows. A
// scenario that is not listed runs as it stands.
var short = map[string][]string{
	"skerry-coast":     {"run.length=6400ms"}, // the cut comes at 6 s
	"nineteen-towns":   {"run.length=120ms", "run.warm-up=20ms"},
	"circuit-requests": {"run.length=500s", "run.warm-up=50s"},
	"cut-drill":        {"run.length=3s"},
	"thin-voice-line":  {"run.length=20s", "run.warm-up=2s"},
}

// Every scenario loads without a fault, is called what its folder is called,
// says in one line what it is about, and runs under each of its plans.
func TestEveryScenario(t *testing.T) {
	names := library.Names()
	folders, err := filepath.Glob("files/*")
	if err != nil || len(folders) != len(names) {
		t.Errorf("%d scenarios are listed, there are %d folders (%v)", len(names), len(folders), err)
	}
	if names[0].Name != library.Demo {
		t.Errorf("the list begins with %s, want the demo", names[0].Name)
	}
	for _, e := range names {
		t.Run(e.Name, func(t *testing.T) {
			sc := load(t, e.Name)
			if sc.Name != e.Name || sc.About != e.About || e.About == "" || len(e.About) > 100 {
				t.Errorf("scenario %q about %q; listed as %q about %q", sc.Name, sc.About, e.Name, e.About)
			}
			for _, p := range sc.Plans[1:] {
				if p.About == "" {
					t.Errorf("plan %s does not say what it is about", p.Name)
				}
			}
			sets, ok := short[e.Name]
			if !ok {
				sets = []string{"run.length=10s", "run.warm-up=1s"}
			}
			sc = load(t, e.Name, sets...)
			for _, p := range sc.Plans {
				if r := run(t, sc, p.Name, 1); len(sc.Aggregates) > 0 && r.Audit.DeliveredPackets == 0 {
					t.Errorf("plan %s: nothing is delivered", p.Name)
				}
			}
		})
	}
}

// The files are meant to be read: no tabs, no trailing blanks, lines that fit.
func TestFilesAreTidy(t *testing.T) {
	files, err := filepath.Glob("files/*/scenario.yaml")
	if err != nil || len(files) == 0 {
		t.Fatal("no files", err)
	}
	for _, file := range files {
		data, err := os.ReadFile(file)
		if err != nil {
			t.Fatal(err)
		}
		for i, line := range strings.Split(string(data), "\n") {
			comment := strings.HasPrefix(strings.TrimSpace(line), "#")
			if strings.ContainsAny(line, "\t\r") || strings.HasSuffix(line, " ") || comment && len(line) > 100 {
				t.Errorf("%s:%d: untidy: %q", file, i+1, line)
			}
		}
	}
}

func TestOpenRefuses(t *testing.T) {
	for _, name := range []string{"", ".", "..", "no-such", "skerry-coast/scenario.yaml", "../library", "/etc"} {
		if _, _, err := library.Open(name); err == nil {
			t.Errorf("Open(%q) gives a scenario", name)
		}
	}
}
