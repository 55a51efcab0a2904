package main

import (
	"encoding/xml"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"ferrule/scenarios/result"
)

// 0 when all is met with confidence, 3 when one objective is missed, 4 else.
func TestGate(t *testing.T) {
	for _, c := range []struct {
		standing, args string
		status         int
	}{
		{"met", "batch --gate", 0}, {"missed", "batch --gate", 3}, {"undecided", "batch --gate", 4},
		{"missed", "batch", 0}, {"missed", "batch --gate=false", 0}, {"none", "batch --gate", 4},
		{"met", "compare --gate", 0}, {"missed", "compare --gate", 3}, {"undecided", "compare --gate=express", 4},
		{"missed", "compare --gate=as-is", 0}, // the base of the fake meets all
		{"missed", "compare", 0}, {"met", "compare --gate=nowhere", 2},
	} {
		status, _, errOut := try(t.Context(), false, nil, append(strings.Fields(c.args), file(t, "gate "+c.standing))...)
		if status != c.status {
			t.Errorf("%s, %s: status %d, want %d: %s", c.standing, c.args, status, c.status, errOut)
		}
	}
}

func TestJUnit(t *testing.T) {
	path := filepath.Join(t.TempDir(), "gate.xml")
	if status, _, errOut := try(t.Context(), false, nil, "compare", file(t, "gate missed"), "--out", path); status != 0 {
		t.Fatal(errOut)
	}
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	var s suites
	if err := xml.Unmarshal(data, &s); err != nil {
		t.Fatal(err)
	}
	if s.Tests != 3 || s.Failures != 2 || s.Errors != 0 || len(s.Suites) != 3 {
		t.Errorf("%d tests, %d failures, %d errors in %d suites, want 3, 2, 0, 3", s.Tests, s.Failures, s.Errors, len(s.Suites))
	}
	if c := s.Suites[1].Cases[0]; c.Class != "express.voice" || c.Name != "normal delay-p99 at most 0.04 s" || c.Failure == nil ||
		c.Failure.Message != "45 ms < limit & more" {
		t.Errorf("%+v", c)
	}
	if status, _, errOut := try(t.Context(), false, nil, "run", "--out", path); status != 2 || !strings.Contains(errOut, "only batch and compare") {
		t.Errorf("a run: status %d, %s", status, errOut)
	}
}

func TestShares(t *testing.T) {
	for text, want := range map[string]float64{"5%": 0.05, "0.05": 0.05, "50 %": 0.5, "0.5": 0.5} {
		if got, err := shareOf("margin", text, 0.5); err != nil || got != want {
			t.Errorf("%q: %v, %v", text, got, err)
		}
	}
	for _, text := range []string{"", "0", "-1%", "51%", "NaN", "x", "1e400", "%"} {
		if _, err := shareOf("margin", text, 0.5); err == nil {
			t.Errorf("%q is taken", text)
		}
	}
}

// fakeGates is what the fake studio says of plans; the first meets all.
func fakeGates(text string, plans ...string) []result.Gate {
	kind, standing, _ := strings.Cut(strings.TrimSpace(text), " ")
	if kind != "gate" || standing == "none" {
		return nil
	}
	var out []result.Gate
	for i, p := range plans {
		s := result.Standing(standing)
		if i == 0 && len(plans) > 1 {
			s = result.Met
		}
		out = append(out, result.Gate{Plan: p, Standing: s, Confidence: 0.95, Holds: []result.Hold{
			{Class: "voice", Period: "normal", Figure: "delay-p99", Unit: "s", Limit: 0.04, Standing: s, Text: "45 ms < limit & more"}}})
	}
	return out
}

func TestCoverageTable(t *testing.T) {
	status, out, errOut := try(t.Context(), false, nil, "coverage")
	if status != 0 || !strings.Contains(out, "| 380 | 400 | 95.0 % | 92.0 to 98.0 % | ok |") ||
		!strings.Contains(out, "| 75.0 % | 92.0 to 98.0 % | OUTSIDE; a note |") || !strings.Contains(out, "too few to judge") {
		t.Errorf("status %d\n%s%s", status, out, errOut)
	}
	for _, args := range []string{"--experiments 9", "--seconds 0", "--seconds NaN", "x"} {
		if status, _, _ := try(t.Context(), false, nil, append([]string{"coverage"}, strings.Fields(args)...)...); status != 2 {
			t.Errorf("%s: status %d", args, status)
		}
	}
}

func TestGrowthAndSize(t *testing.T) {
	status, out, errOut := try(t.Context(), false, nil, "compare", "--growth", "100%,130%,1.6")
	if status != 0 || !strings.Contains(out, "130 %  undecided") || !strings.Contains(out, "160 %  undecided") {
		t.Errorf("growth: status %d\n%s%s", status, out, errOut)
	}
	status, out, errOut = try(t.Context(), false, nil, "size", "--circuit", "vx", "--plan", "express", "--from", "2", "--to", "9", "--at-most", "33", "--set", "a=1")
	if status != 0 || !strings.Contains(out, "circuit vx, plan express") || !strings.Contains(out, "2 to 9 slots searched") ||
		!strings.Contains(out, "least that is met: 33 slots") || !strings.Contains(out, "a=1") {
		t.Errorf("size: status %d\n%s%s", status, out, errOut)
	}
	for _, args := range []string{"compare --growth 130%,100%", "compare --growth x", "size", "size --circuit vx --from 0", "size --circuit vx --from 5 --to 3",
		"size --circuit vx --at-most 9", "size --circuit vx --plan none"} {
		if status, _, errOut := try(t.Context(), false, nil, strings.Fields(args)...); status != 2 {
			t.Errorf("%s: status %d, %s", args, status, errOut)
		}
	}
}
