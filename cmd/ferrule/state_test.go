package main

import (
	"bytes"
	"context"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// What is damaged or foreign is refused, and nothing in the folder changes.
func TestStateRefuses(t *testing.T) {
	begin := func(t *testing.T) (string, *state) {
		dir := filepath.Join(t.TempDir(), "state")
		s, err := openState(dir, "abc", "v1")
		if err != nil {
			t.Fatal(err)
		}
		if err := s.Save("abc-as-is-1", []byte("a run")); err != nil {
			t.Fatal(err)
		}
		return dir, s
	}
	put := func(dir, name, text string) {
		if err := os.WriteFile(filepath.Join(dir, name), []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	flip := func(dir, name string, at int) {
		data, err := os.ReadFile(filepath.Join(dir, name))
		if err != nil {
			t.Fatal(err)
		}
		data[(len(data)+at)%len(data)] ^= 1
		put(dir, name, string(data))
	}
	for _, c := range []struct {
		name, says string
		harm       func(dir string)
		hash       string
	}{
		{"whole", "", func(string) {}, "abc"},
		{"another scenario", "another scenario or another build", func(string) {}, "abd"},
		{"a bit of a run", "is damaged", func(dir string) { flip(dir, "abc-as-is-1.run", -3) }, "abc"},
		{"a bit of its checksum", "is damaged", func(dir string) { flip(dir, "abc-as-is-1.run", 20) }, "abc"},
		{"a run cut short", "is damaged", func(dir string) { put(dir, "abc-as-is-1.run", "ferrule state 1 00") }, "abc"},
		{"an empty run", "is damaged", func(dir string) { put(dir, "abc-as-is-1.run", "") }, "abc"},
		{"the note", "is damaged", func(dir string) { flip(dir, stateNote, -1) }, "abc"},
		{"a file of somebody else", "no part of the state", func(dir string) { put(dir, "letter.txt", "dear") }, "abc"},
		{"a part of somebody else", "no part of the state", func(dir string) { put(dir, "film.part", "dear") }, "abc"},
		{"a folder", "no part of the state", func(dir string) {
			if err := os.Mkdir(filepath.Join(dir, "x.run"), 0o755); err != nil {
				t.Fatal(err)
			}
		}, "abc"},
		{"no note", "and no ferrule-state", func(dir string) {
			if err := os.Remove(filepath.Join(dir, stateNote)); err != nil {
				t.Fatal(err)
			}
		}, "abc"},
		{"what a killed study was writing", "", func(dir string) { put(dir, "abc-as-is-2.run.part", "half") }, "abc"},
	} {
		dir, _ := begin(t)
		c.harm(dir)
		before := listing(t, dir)
		s, err := openState(dir, c.hash, "v1")
		if c.says != "" {
			if err == nil || !strings.Contains(err.Error(), c.says) {
				t.Errorf("%s: %v", c.name, err)
			}
			if after := listing(t, dir); after != before {
				t.Errorf("%s: changed\n%s\nto\n%s", c.name, before, after)
			}
			continue
		}
		if err != nil {
			t.Fatalf("%s: %v", c.name, err)
		}
		if data, err := s.Load("abc-as-is-1"); err != nil || string(data) != "a run" {
			t.Errorf("%s: got %q, %v", c.name, data, err)
		}
		if data, err := s.Load("abc-as-is-2"); err != nil || data != nil {
			t.Errorf("%s: got %q, %v of what was never saved", c.name, data, err)
		}
	}
	dir, _ := begin(t)
	if _, err := openState(dir, "abc", "v2"); err == nil {
		t.Error("the state of another build is taken")
	}
}

// listing is the names and bytes of a folder's files.
func listing(t *testing.T, dir string) string {
	t.Helper()
	files, err := os.ReadDir(dir)
	if err != nil {
		t.Fatal(err)
	}
	var b strings.Builder
	for _, f := range files {
		data, _ := os.ReadFile(filepath.Join(dir, f.Name())) // a folder has no bytes
		b.WriteString(f.Name() + ":" + string(data) + "\n")
	}
	return b.String()
}

// realArgs is the variable that makes this test binary the program itself,
// over the packages below, so that it can be killed.
const realArgs = "FERRULE_TEST_ARGS"

func TestRealProgram(t *testing.T) {
	if args := os.Getenv(realArgs); args != "" {
		os.Exit(Main(context.Background(), osEnv(wired{}), strings.Split(args, " ")))
	}
}

// A batch that is killed outright, twice, and started again repeats nothing it
// had finished and ends with the bytes of one that was left in peace.
func TestKilledAndResumed(t *testing.T) {
	dir := t.TempDir()
	command := func(ctx context.Context, out, more string) *exec.Cmd {
		c := exec.CommandContext(ctx, os.Args[0], "-test.run=^TestRealProgram$")
		c.Env = append(os.Environ(), realArgs+"=batch one-queue-poisson --set run.length=60s --seeds 24 --cores 1 --format json"+more+" --out "+out)
		return c
	}
	whole := filepath.Join(dir, "whole.json")
	if text, err := command(t.Context(), whole, "").CombinedOutput(); err != nil {
		t.Fatalf("%v\n%s", err, text)
	}
	kept, out := filepath.Join(dir, "state"), filepath.Join(dir, "resumed.json")
	finished := func() (times map[string]time.Time) {
		times = map[string]time.Time{}
		files, _ := filepath.Glob(filepath.Join(kept, "*"+stateRun))
		for _, f := range files {
			if info, err := os.Stat(f); err == nil {
				times[f] = info.ModTime()
			}
		}
		return times
	}
	for kill := range 2 {
		ctx, stop := context.WithCancel(t.Context()) // its end kills the process with SIGKILL
		c := command(ctx, out, " --resume "+kept)
		if err := c.Start(); err != nil {
			t.Fatal(err)
		}
		for deadline := time.Now().Add(20 * time.Second); len(finished()) < 5*(kill+1) && time.Now().Before(deadline); {
			time.Sleep(time.Millisecond)
		}
		stop()
		if err := c.Wait(); err == nil {
			t.Fatal("it ended before it was killed")
		}
	}
	before := finished()
	if len(before) < 10 || len(before) >= 24 {
		t.Fatalf("killed with %d of 24 replications finished", len(before))
	}
	if text, err := command(t.Context(), out, " --resume "+kept).CombinedOutput(); err != nil {
		t.Fatalf("%v\n%s", err, text)
	}
	want, err := os.ReadFile(whole)
	if err != nil {
		t.Fatal(err)
	}
	if got, err := os.ReadFile(out); err != nil || !bytes.Equal(got, want) {
		t.Errorf("the resumed batch differs from the whole one (%v)", err)
	}
	after := finished()
	if len(after) != 24 {
		t.Errorf("%d replications kept, want 24", len(after))
	}
	for f, at := range before {
		if !after[f].Equal(at) {
			t.Errorf("%s was made again", f)
		}
	}
}

func TestPrecisionReachesTheStudy(t *testing.T) {
	_, out, errOut := try(t.Context(), false, nil, "batch", "--precision", "5%", "--figure", "loss", "--period", "normal", "--at-most", "40", "--seeds", "12")
	if !strings.Contains(out, "relative precision of 5 % asked for loss, 40 seeds at most") || !strings.Contains(out, "widest normal") ||
		!strings.Contains(out, "seeds: 7 8 9 10 11 12 13 14 15 16 17 18;") {
		t.Errorf("%s%s", out, errOut)
	}
	for _, args := range []string{"--precision 60%", "--precision 5% --seeds 9", "--precision 5% --at-most 3", "--figure loss", "--period normal", "--at-most 5"} {
		if status, _, errOut := try(t.Context(), false, nil, append([]string{"batch"}, strings.Fields(args)...)...); status != 2 {
			t.Errorf("%s: status %d, %s", args, status, errOut)
		}
	}
}
