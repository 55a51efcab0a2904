package main

import (
	"bytes"
	"io"
	"os"
	"strings"
	"testing"

	"ferrule/scenarios"
	"ferrule/scenarios/result"
)

// Variables go before --set, in order of their names, and into the command that
// makes the same again, which a report shows.
func TestSetsOfTheEnvironment(t *testing.T) {
	for _, x := range []struct {
		more        []string
		sets, again string
	}{
		{[]string{"--set", "c=3"}, "x.yaml a=x=1 b=2 c=3", "--set a=x=1 --set b=2 --set c=3"},
		{nil, "x.yaml a=x=1 b=2", "--set a=x=1 --set b=2"},
	} {
		var out, errOut bytes.Buffer
		env := Env{
			Files: disk{}, Out: &out, ErrOut: &errOut, Studio: fakeStudio{},
			IsTTY: func(io.Writer) bool { return false }, Getenv: func(string) string { return "" },
			Environ: func() []string {
				return []string{"FERRULE_SET_2=b=2", "SHELL=sh", "FERRULE_SET_1=a=x=1", "NO_FERRULE_SET_3=d=4"}
			},
		}
		path := file(t, "sound")
		args := append([]string{"run", path, "--format", "json", "--out", path + ".html"}, x.more...)
		if status := Main(t.Context(), env, args); status != 0 {
			t.Fatal(errOut.String())
		}
		r, err := result.DecodeRun(out.Bytes())
		if err != nil || !strings.HasSuffix(r.Scenario, x.sets) {
			t.Errorf("scenario %q, %v, want %s", r.Scenario, err, x.sets)
		}
		page, err := os.ReadFile(path + ".html")
		if err != nil || !strings.Contains(string(page), x.again) {
			t.Errorf("the report does not show %s, %v", x.again, err)
		}
	}
}

// The schema is printed as it is.
func TestPrintSchema(t *testing.T) {
	if status, out, errOut := try(t.Context(), false, nil, "scenarios", "schema"); status != 0 || out != string(scenarios.Schema()) {
		t.Errorf("status %d, %d bytes; %s", status, len(out), errOut)
	}
}
