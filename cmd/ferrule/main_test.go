package main

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"runtime/debug"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/rogpeppe/go-internal/testscript"

	"ferrule/scenarios/result"
)

// In scripts, ferrule is this program over the fake studio; it prints its exit
// status last on standard error, so that scripts can tell 1 from 2.
func TestMain(m *testing.M) {
	testscript.Main(m, map[string]func(){
		"ferrule": func() {
			status := Main(context.Background(), osEnv(fakeStudio{}), os.Args[1:])
			fmt.Fprintf(os.Stderr, "exit status %d\n", status)
			os.Exit(status)
		},
	})
}

func TestScripts(t *testing.T) {
	testscript.Run(t, testscript.Params{Dir: "testdata/script"})
}

// try runs one command in a world of buffers, with dir for its files.
func try(ctx context.Context, tty bool, vars map[string]string, args ...string) (status int, out, errOut string) {
	var o, e bytes.Buffer
	env := Env{Files: disk{}, Out: &o, ErrOut: &e, Studio: fakeStudio{},
		IsTTY:  func(io.Writer) bool { return tty },
		Getenv: func(key string) string { return vars[key] }}
	status = Main(ctx, env, args)
	return status, o.String(), e.String()
}

func file(t *testing.T, text string) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "x.yaml")
	if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

func TestFlagsReachTheStudy(t *testing.T) {
	status, out, errOut := try(t.Context(), false, nil, "run", file(t, "sound"), "--plan", "express", "--seed", "42",
		"--set", "a=1", "--set", "b=2", "--cut", "tarn-holm@6s", "--format", "json")
	if status != 0 {
		t.Fatal(errOut)
	}
	r, err := result.DecodeRun([]byte(out))
	if err != nil {
		t.Fatal(err)
	}
	if r.Plan != "express" || r.Seed != 42 || !strings.HasSuffix(r.Scenario, "x.yaml a=1 b=2 tarn-holm@6s") {
		t.Errorf("plan %q, seed %d, scenario %q", r.Plan, r.Seed, r.Scenario)
	}
	if r.Tool.Name != "ferrule" || r.Tool.Version == "" {
		t.Errorf("tool %+v", r.Tool)
	}
}

func TestSeedsFollowTheFirst(t *testing.T) {
	for _, c := range []struct {
		args []string
		want string
	}{
		{[]string{"batch", "--seeds", "3"}, "seeds: 7 8 9;"}, // 7 is the scenario's
		{[]string{"batch", "--seeds", "2", "--seed", "40"}, "seeds: 40 41;"},
		{[]string{"compare"}, "seeds: 7 8 9 10 11 12 13 14 15 16;"},
	} {
		if status, out, errOut := try(t.Context(), false, nil, c.args...); status != 0 || !strings.Contains(out, c.want) {
			t.Errorf("%v: status %d, no %q in\n%s%s", c.args, status, c.want, out, errOut)
		}
	}
}

func TestPlansCompared(t *testing.T) {
	for _, c := range []struct {
		args []string
		want []string
	}{
		{nil, []string{"PLAN express against as-is", "PLAN express-live against as-is"}},
		{[]string{"--base", "express"}, []string{"PLAN as-is against express", "PLAN express-live against express"}},
		{[]string{"--plan", "express-live"}, []string{"PLAN express-live against as-is"}},
	} {
		_, out, errOut := try(t.Context(), false, nil, append([]string{"compare"}, c.args...)...)
		var got []string
		for _, l := range strings.Split(out, "\n") {
			if strings.HasPrefix(l, "PLAN ") {
				got = append(got, l)
			}
		}
		if d := cmp.Diff(c.want, got); d != "" {
			t.Errorf("%v: %s\n%s", c.args, d, errOut)
		}
	}
}

func TestInterrupted(t *testing.T) {
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	for _, command := range []string{"run", "batch", "compare", "check", "failures"} {
		out := filepath.Join(t.TempDir(), "r.json")
		status, text, errOut := try(ctx, false, nil, command, file(t, "waits"), "--out", out)
		if status != 130 || !strings.Contains(text, "PARTIAL: interrupted") || !strings.Contains(errOut, "the result is partial") {
			t.Errorf("%s: status %d\n%s%s", command, status, text, errOut)
		}
		data, err := os.ReadFile(out)
		if err != nil {
			t.Fatal(err)
		}
		if r, err := result.Decode(data); err != nil || !result.HeadOf(r).Partial {
			t.Errorf("%s: the file does not say it is partial: %v", command, err)
		}
	}
	status, text, errOut := try(ctx, false, nil, "run", file(t, "nothing"))
	if status != 130 || text != "" || !strings.Contains(errOut, "interrupted before there was a result") {
		t.Errorf("no result yet: status %d\n%s%s", status, text, errOut)
	}
}

func TestColourAndProgressAreForTerminals(t *testing.T) {
	for _, c := range []struct {
		name     string
		tty      bool
		vars     map[string]string
		colour   bool
		progress bool
	}{
		{"a pipe", false, nil, false, false},
		{"a terminal", true, nil, true, true},
		{"NO_COLOR", true, map[string]string{"NO_COLOR": "1"}, false, true},
		{"a dumb terminal", true, map[string]string{"TERM": "dumb"}, false, true},
	} {
		out := filepath.Join(t.TempDir(), "r.txt")
		status, text, errOut := try(t.Context(), c.tty, c.vars, "run", "--out", out)
		if status != 0 || strings.Contains(text, "\x1b") != c.colour || strings.Contains(errOut, "50 %") != c.progress {
			t.Errorf("%s: status %d\n%q\n%q", c.name, status, text, errOut)
		}
		if data, err := os.ReadFile(out); err != nil || bytes.Contains(data, []byte("\x1b")) {
			t.Errorf("%s: colour in a file (%v)", c.name, err)
		}
	}
}

// Nothing but the result goes to standard output, and the same result goes
// there however the program is watched.
func TestLogGoesToStandardError(t *testing.T) {
	_, quiet, _ := try(t.Context(), false, nil, "run", "--format", "csv")
	_, loud, errOut := try(t.Context(), false, nil, "run", "--format", "csv", "--log", "debug")
	if quiet != loud || !strings.Contains(errOut, "info\trunning") {
		t.Errorf("log %q; output differs: %s", errOut, cmp.Diff(quiet, loud))
	}
}

type brokenPipe struct{}

func (brokenPipe) Write([]byte) (int, error) { return 0, errors.New("broken pipe") }

func TestOutputThatCannotBeWrittenFails(t *testing.T) {
	for _, args := range [][]string{{"run"}, {"scenarios"}, {"scenarios", "show", "demo"}, {"version"}} {
		var e bytes.Buffer
		env := Env{Files: disk{}, Out: brokenPipe{}, ErrOut: &e, Studio: fakeStudio{},
			IsTTY: func(io.Writer) bool { return false }, Getenv: func(string) string { return "" }}
		if status := Main(t.Context(), env, args); status != 1 || !strings.Contains(e.String(), "broken pipe") {
			t.Errorf("%v: status %d, %s", args, status, e.String())
		}
	}
}

func TestWriteIsWholeOrNothing(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "r.json")
	for _, text := range []string{"first, and longer", "second"} {
		if err := (disk{}).Write(path, []byte(text)); err != nil {
			t.Fatal(err)
		}
		if got, err := os.ReadFile(path); err != nil || string(got) != text {
			t.Errorf("got %q, %v", got, err)
		}
	}
	taken := filepath.Join(dir, "taken.json") // a directory cannot be replaced
	if err := os.MkdirAll(filepath.Join(taken, "x"), 0o755); err != nil {
		t.Fatal(err)
	}
	if err := (disk{}).Write(taken, []byte("lost")); err == nil {
		t.Error("a directory was replaced")
	}
	left, err := os.ReadDir(dir)
	if err != nil || len(left) != 2 {
		t.Errorf("files left behind: %v, %v", left, err)
	}
}

func TestVersion(t *testing.T) {
	info := func(version string, settings ...debug.BuildSetting) *debug.BuildInfo {
		return &debug.BuildInfo{Main: debug.Module{Version: version}, Settings: settings}
	}
	revision := debug.BuildSetting{Key: "vcs.revision", Value: "0123456789abcdef0123"}
	for _, c := range []struct {
		info *debug.BuildInfo
		ok   bool
		want string
	}{
		{nil, false, "unknown"},
		{info("(devel)"), true, "unknown"},
		{info(""), true, "unknown"},
		{info("v1.4.2"), true, "v1.4.2"},
		{info("(devel)", revision), true, "0123456789ab"},
		{info("(devel)", revision, debug.BuildSetting{Key: "vcs.modified", Value: "true"}), true, "0123456789ab+dirty"},
	} {
		if got := versionOf(c.info, c.ok); got != c.want {
			t.Errorf("%+v: %q, want %q", c.info, got, c.want)
		}
	}
}
