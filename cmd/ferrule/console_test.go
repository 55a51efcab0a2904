package main

import (
	"bytes"
	"context"
	"io"
	"net/http"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"sync"
	"testing"
	"time"
)

// loud is a buffer that two goroutines may use.
type loud struct {
	mu sync.Mutex
	b  bytes.Buffer
}

func (l *loud) Write(p []byte) (int, error) {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.b.Write(p)
}

func (l *loud) String() string {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.b.String()
}

var shorter = []string{"--set", "run.length=1500ms", "--set", "run.warm-up=100ms", "--set", "timeline=[]", "--set", "plans.video-express-live.steps=[]"}

// The console serves the demo; what was done there is repeated by run, byte for
// byte. An interrupt ends it.
func TestConsoleAndReplay(t *testing.T) {
	ctx, stop := context.WithCancel(t.Context())
	said, ended := &loud{}, make(chan int, 1)
	env := Env{Files: disk{}, Out: io.Discard, ErrOut: said, Studio: wired{}, IsTTY: func(io.Writer) bool { return false }, Getenv: func(string) string { return "" }}
	go func() {
		ended <- Main(ctx, env, append([]string{"console", "--listen", "127.0.0.1:0", "--plan", "video-express", "--seed", "5"}, shorter...))
	}()
	var at []string
	for end := time.Now().Add(20 * time.Second); at == nil; time.Sleep(5 * time.Millisecond) {
		if at = regexp.MustCompile(`http://127\.0\.0\.1:[0-9]+/`).FindStringSubmatch(said.String()); time.Now().After(end) {
			t.Fatalf("it does not say where it is: %s", said)
		}
	}
	ask := func(method, path, body string) string {
		r, err := http.NewRequest(method, at[0]+"api/sessions/1/"+path, strings.NewReader(body))
		if err != nil {
			t.Fatal(err)
		}
		answer, err := http.DefaultClient.Do(r)
		if err != nil {
			t.Fatal(err)
		}
		defer answer.Body.Close()
		data, err := io.ReadAll(answer.Body)
		if err != nil || answer.StatusCode > 299 {
			t.Fatalf("%s %s: %d %s", method, path, answer.StatusCode, data)
		}
		return string(data)
	}
	ask("POST", "pace", `{"step_s":0.4}`)
	ask("POST", "acts", `{"cut":"holm-ness","where":"120km from holm"}`)
	ask("POST", "pace", `{"step_s":0.5}`)
	ask("POST", "acts", `{"return":"video-tn"}`)
	ask("POST", "pace", `{"step_s":2}`)
	want := ask("GET", "results", "")
	saved := filepath.Join(t.TempDir(), "session.yaml")
	if err := os.WriteFile(saved, []byte(ask("GET", "acts", "")), 0o644); err != nil {
		t.Fatal(err)
	}
	stop()
	select {
	case status := <-ended:
		if status != 0 {
			t.Errorf("interrupted, it exits with %d: %s", status, said)
		}
	case <-time.After(10 * time.Second):
		t.Fatal("an interrupt does not end it")
	}

	var out bytes.Buffer
	env.Out = &out
	if status := Main(t.Context(), env, append([]string{"run", "--acts", saved, "--format", "json"}, shorter...)); status != 0 {
		t.Fatal(said)
	}
	if out.String() != want {
		t.Error("the replay gives other bytes than the session")
	}
	page := filepath.Join(t.TempDir(), "r.html")
	if status := Main(t.Context(), env, append([]string{"run", "--acts", saved, "--out", page}, shorter...)); status != 0 {
		t.Fatal(said)
	}
	if text, err := os.ReadFile(page); err != nil || !strings.Contains(string(text), "<code>ferrule run --acts session.yaml --set") {
		t.Errorf("the report does not say how to make the same again: %v", err)
	}
	for _, c := range []struct {
		args []string
		says string
	}{
		{append([]string{"run", "--acts", saved, "--seed", "1"}, shorter...), "--seed: the session of --acts has its own"},
		{append([]string{"run", "--acts", saved, "--plan", "as-is"}, shorter...), "--plan: the session of --acts has its own"},
		{append([]string{"run", "--acts", saved + "x"}, shorter...), "--acts: "},
		{append(append([]string{"run", "--acts", saved}, shorter...), "--set", "run.seed=2"), "is not the scenario of this session"},
		{[]string{"console", "--listen", "nowhere"}, "--listen: "},
		{[]string{"console", "--plan", "nix"}, "no plan is called"},
	} {
		if status := Main(t.Context(), env, c.args); status != statusMisuse || !strings.Contains(said.String(), c.says) {
			t.Errorf("%v: status %d; want 2 and %q in %s", c.args, status, c.says, said)
		}
	}
}

// Loopback asks for nothing; any other address for a token.
func TestGuards(t *testing.T) {
	vars := map[string]string{}
	env := Env{Getenv: func(key string) string { return vars[key] }}
	for _, addr := range []string{"127.0.0.1:1", "[::1]:1", "localhost:1"} {
		if g, err := guardOf(env, addr, nil); err != nil || g.Token != "" {
			t.Errorf("%s: %v, %v", addr, g, err)
		}
	}
	g, err := guardOf(env, "192.0.2.1:80", []string{"lab"})
	if err != nil || len(g.Token) < 20 || strings.Join(g.Hosts, " ") != "lab 192.0.2.1" {
		t.Errorf("%+v, %v", g, err)
	}
	if again, _ := guardOf(env, ":80", nil); again.Token == g.Token || again.Token == "" || len(again.Hosts) != 0 {
		t.Errorf("a token is not new: %+v", again)
	}
	vars["FERRULE_TOKEN"] = "short"
	if _, err := guardOf(env, ":80", nil); err == nil {
		t.Error("a short token is taken")
	}
	vars["FERRULE_TOKEN"] = "long enough to be one"
	if g, err := guardOf(env, ":80", nil); err != nil || g.Token != vars["FERRULE_TOKEN"] {
		t.Errorf("%+v, %v", g, err)
	}
}
