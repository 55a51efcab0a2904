package page

import (
	"bufio"
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"net"
	"net/http"
	"net/http/httptest"
	"os"
	"slices"
	"strings"
	"testing"
	"time"

	"ferrule/des"
	"ferrule/scenarios"
	"ferrule/scenarios/library"
	"ferrule/scenarios/result"
	"ferrule/scenarios/study"
)

const triangle = `
scenario: triangle
about: "Three towns <img src=x onerror=hacked()>"
run: { length: LENGTH, warm-up: 100ms, seed: 1 }
classes:
  - { name: gold, queue: strict, buffer: 20ms, traffic: even }
  - { name: base, queue: weight 100%, buffer: 50ms, traffic: even }
traffic: [ { name: even, model: constant, packet: 500B } ]
sites: [ { name: ayre, position: [0km, 0km] }, { name: brough, position: [300km, 0km] }, { name: coe, position: [150km, 200km] } ]
fibres: [ { between: [ayre, brough] }, { between: [brough, coe] }, { between: [ayre, coe] } ]
circuits:
  - { name: ab, along: [ayre-brough], slots: 1, recovery: restore }
  - { name: bc, along: [brough-coe], slots: 1, recovery: restore }
  - { name: ac, along: [ayre-coe], slots: 1, recovery: restore }
aggregates:
  - { name: calls, between: [ayre, brough], class: gold, load: 400kbps }
  - { name: rest, between: [ayre, brough], class: base, load: 2Mbps }
controller: { at: coe, compute: 1ms }
plans: [ { name: own, in-place: [ { circuit: { name: x, between: [ayre, brough], slots: 1, carries: moved, recovery: restore } }, { move: calls, onto: [x] } ] } ]
`

// towns is a small scenario that lasts a given time.
func towns(t *testing.T, length string) *scenarios.Scenario {
	t.Helper()
	sc, err := scenarios.Load("triangle", []byte(strings.Replace(triangle, "LENGTH", length, 1)), nil, nil)
	if err != nil {
		t.Fatal(err)
	}
	return sc
}

// served is a console with one session behind a real server.
func served(t *testing.T, sc *scenarios.Scenario, g Guard) (*Console, *httptest.Server) {
	t.Helper()
	ctx, stop := context.WithCancel(context.Background())
	begin := func(ctx context.Context, plan string, seed uint64) (*study.Session, error) {
		return study.NewSession(ctx, sc, study.Options{Plan: plan, Seed: seed, Cores: 1})
	}
	c := NewConsole(ctx, begin, study.Plans(sc), result.Tool{Name: "ferrule", Version: "test"})
	if _, err := c.Begin(ctx, "", 0); err != nil {
		t.Fatal(err)
	}
	s := httptest.NewUnstartedServer(nil)
	s.Config = Server(c.Handler(g))
	s.Start()
	t.Cleanup(func() {
		stop()
		c.Wait() // streams end with their sessions
		s.Close()
	})
	return c, s
}

// call makes a request; header holds names and values by turns.
func call(t *testing.T, method, url, body string, header ...string) (int, string, http.Header) {
	t.Helper()
	r, err := http.NewRequest(method, url, strings.NewReader(body))
	if err != nil {
		t.Fatal(err)
	}
	for i := 0; i < len(header); i += 2 {
		r.Header.Set(header[i], header[i+1])
		if header[i] == "Host" {
			r.Host = header[i+1]
		}
	}
	client := http.Client{CheckRedirect: func(*http.Request, []*http.Request) error { return http.ErrUseLastResponse }, Timeout: 20 * time.Second}
	answer, err := client.Do(r)
	if err != nil {
		t.Fatal(err)
	}
	defer answer.Body.Close()
	data, err := io.ReadAll(answer.Body)
	if err != nil {
		t.Fatal(err)
	}
	return answer.StatusCode, string(data), answer.Header
}

// Each refusal has its status, and a reason.
func TestRefusals(t *testing.T) {
	_, s := served(t, towns(t, "2s"), Guard{})
	one := s.URL + "/api/sessions/1"
	cut := `{"cut":"ayre-brough"}`
	for _, c := range []struct {
		method, url, body string
		header            []string
		want              int
		says              string
	}{
		{"GET", s.URL, "", []string{"Host", "evil.example"}, 421, "not called that"},
		{"GET", one + "/state", "", []string{"Host", "127.0.0.1.evil.example:80"}, 421, "not called that"},
		{"GET", one + "/state", "", []string{"Host", "LOCALHOST:7750"}, 200, "snapshot"},
		{"GET", one + "/state", "", []string{"Host", "[::1]:7750"}, 200, "snapshot"},
		{"POST", one + "/acts", cut, []string{"Origin", "http://evil.example"}, 403, "another site"},
		{"POST", one + "/acts", cut, []string{"Origin", "null"}, 403, "another site"},
		{"POST", one + "/acts", cut, []string{"Sec-Fetch-Site", "cross-site"}, 403, "another site"},
		{"GET", one + "/stream", "", []string{"Sec-Fetch-Site", "cross-site"}, 403, "another site"},
		{"GET", one + "/state", "", []string{"Sec-Fetch-Site", "same-site"}, 403, "another site"},
		{"POST", one + "/acts", `{"cut":"` + strings.Repeat("a", mostBody) + `"}`, nil, 413, "8192 bytes"},
		{"POST", one + "/acts", `{"cut":"ayre-brough"} {}`, nil, 400, "more follows"},
		{"POST", one + "/acts", `{"file":"/etc/passwd"}`, nil, 400, "unknown field"},
		{"POST", one + "/acts", `cut`, nil, 400, "JSON"},
		{"POST", one + "/acts", `{"cut":"../ayre"}`, nil, 422, "no fibre or risk group"},
		{"POST", one + "/acts", "{\"cut\":\"ayre-brough\\n  - {at: 1s, cut: brough-coe}\"}", nil, 422, "no fibre or risk group"},
		{"POST", one + "/pace", `{"speed":0.001}`, nil, 422, "0.01"},
		{"POST", one + "/pace", `{"speed":-1}`, nil, 422, "0.01"},
		{"POST", one + "/pace", `{"step_s":11}`, nil, 422, "step_s"},
		{"GET", one + "/stream", "", []string{"Last-Event-ID", "x"}, 400, "number"},
		{"GET", s.URL + "/api/sessions/2/state", "", nil, 404, "no such session"},
		{"GET", s.URL + "/api/sessions/x", "", nil, 404, "no such session"},
		{"DELETE", s.URL + "/api/sessions/x", "", nil, 404, "no such session"},
		{"POST", s.URL + "/api/sessions", `{"plan":"../../etc"}`, nil, 422, "no plan is called"},
		{"GET", s.URL + "/style.css", "", nil, 404, ""},
		{"GET", s.URL + "/..%2f..%2fetc/passwd", "", nil, 404, ""},
		{"PUT", one + "/acts", cut, nil, 405, ""},
	} {
		got, body, _ := call(t, c.method, c.url, c.body, c.header...)
		if got != c.want || !strings.Contains(body, c.says) {
			t.Errorf("%s %s %.60s %v: %d %s; want %d and %q", c.method, c.url, c.body, c.header, got, body, c.want, c.says)
		}
	}
	if _, body, _ := call(t, "GET", one+"/acts", ""); !strings.Contains(body, "acts: []") {
		t.Errorf("something refused was done: %s", body)
	}
}

// At most so many sessions run; ending one makes room.
func TestSessionsAreBounded(t *testing.T) {
	_, s := served(t, towns(t, "2s"), Guard{})
	for range MostSessions - 1 {
		if got, body, _ := call(t, "POST", s.URL+"/api/sessions", `{"plan":"own"}`); got != 201 {
			t.Fatalf("%d %s", got, body)
		}
	}
	if got, _, _ := call(t, "POST", s.URL+"/api/sessions", `{}`); got != 429 {
		t.Errorf("one too many: %d", got)
	}
	if got, _, _ := call(t, "DELETE", s.URL+"/api/sessions/3", ""); got != 204 {
		t.Errorf("ended: %d", got)
	}
	if got, body, _ := call(t, "POST", s.URL+"/api/sessions", `{}`); got != 201 || body != fmt.Sprintf(`{"session":%d}`, MostSessions+1) {
		t.Errorf("after one has ended: %d %s", got, body)
	}
}

// A server that others can reach wants its token, and a name it knows.
func TestToken(t *testing.T) {
	g := Guard{Hosts: []string{"lab.example"}, Token: "s3cret"}
	_, s := served(t, towns(t, "2s"), g)
	state := s.URL + "/api/sessions/1/state"
	for _, c := range []struct {
		header []string
		want   int
	}{
		{nil, 401},
		{[]string{"Authorization", "Bearer s3cre"}, 401},
		{[]string{"Authorization", "Bearer s3cret"}, 200},
		{[]string{"Authorization", "Bearer s3cret", "Host", "lab.example:7750"}, 200},
		{[]string{"Authorization", "Bearer s3cret", "Host", "evil.example"}, 421},
		{[]string{"Cookie", cookie + "=wrong"}, 401},
		{[]string{"Cookie", cookie + "=s3cret"}, 200},
	} {
		if got, _, _ := call(t, "GET", state, "", c.header...); got != c.want {
			t.Errorf("%v: %d, want %d", c.header, got, c.want)
		}
	}
	if got, _, h := call(t, "GET", s.URL+"/?token=s3cret", ""); got != 303 || !strings.Contains(h.Get("Set-Cookie"), "HttpOnly; SameSite=Strict") || h.Get("Location") != "/" {
		t.Errorf("with the token in the address: %d %v", got, h)
	}
	if got, _, _ := call(t, "GET", s.URL+"/?token=wrong", ""); got != 401 {
		t.Errorf("with a wrong token in the address: %d", got)
	}
	for _, addr := range []string{"0.0.0.0:0", ":0", "[::]:0", "lab.example:0"} {
		if l, err := Listen(addr, Guard{}); err == nil || !strings.Contains(err.Error(), "token") {
			t.Errorf("%s without a token: %v %v", addr, l, err)
		}
	}
	l, err := Listen("127.0.0.1:0", Guard{})
	if err != nil {
		t.Fatal(err)
	}
	defer l.Close()
	if ip := l.Addr().(*net.TCPAddr).IP; !ip.IsLoopback() {
		t.Errorf("bound to %v", ip)
	}
}

// Every answer forbids scripts of others and frames, and the page holds no
// script, style or text of a scenario itself.
func TestHeaders(t *testing.T) {
	_, s := served(t, towns(t, "2s"), Guard{})
	for _, url := range []string{"/", "/console.js", "/console.css", "/openapi.json", "/api/sessions/1", "/none"} {
		_, body, h := call(t, "GET", s.URL+url, "")
		csp := h.Get("Content-Security-Policy")
		for _, want := range []string{"default-src 'none'", "script-src 'self';", "style-src 'self';", "frame-ancestors 'none'", "base-uri 'none'"} {
			if !strings.Contains(csp, want) {
				t.Errorf("%s: policy %q lacks %q", url, csp, want)
			}
		}
		if strings.Contains(csp, "unsafe") || h.Get("X-Content-Type-Options") != "nosniff" || h.Get("X-Frame-Options") != "DENY" || h.Get("Access-Control-Allow-Origin") != "" {
			t.Errorf("%s: headers %v", url, h)
		}
		if url == "/" && (strings.Contains(body, "triangle") || strings.Contains(body, "<script>") || strings.Contains(body, "style=")) {
			t.Errorf("the page holds %s", body)
		}
	}
}

// The description names the operations that there are, and README shows each
// with curl.
func TestDescription(t *testing.T) {
	var doc struct {
		OpenAPI string                    `json:"openapi"`
		Paths   map[string]map[string]any `json:"paths"`
	}
	if err := json.Unmarshal(openAPI, &doc); err != nil || doc.OpenAPI != "3.1.0" {
		t.Fatalf("%v, version %q", err, doc.OpenAPI)
	}
	readme, err := os.ReadFile("../../../../README.md")
	if err != nil {
		t.Fatal(err)
	}
	var real, described []string
	for _, r := range new(Console).routes() {
		real = append(real, r.method+" "+r.path)
		curl := "http://127.0.0.1:7750" + strings.Replace(r.path, "{id}", "1", 1)
		if !slices.ContainsFunc(strings.Split(string(readme), "\n"), func(line string) bool {
			post := strings.Contains(line, " -d ") || strings.Contains(line, "POST")
			end := strings.HasSuffix(line, curl) || strings.Contains(line, curl+" ")
			return strings.Contains(line, "curl ") && end && (r.method == "POST") == post && (r.method == "DELETE") == strings.Contains(line, "DELETE")
		}) {
			t.Errorf("README has no curl of %s %s", r.method, r.path)
		}
	}
	for path, ops := range doc.Paths { // order: does not matter because the list is sorted
		for method := range ops { // order: likewise
			described = append(described, strings.ToUpper(method)+" "+path)
		}
	}
	slices.Sort(real)
	slices.Sort(described)
	if !slices.Equal(real, described) {
		t.Errorf("served:\n%v\ndescribed:\n%v", real, described)
	}
}

// events reads n events of a stream: their ids and data.
func events(t *testing.T, url string, n int, header ...string) (ids, kinds []string, data []message) {
	t.Helper()
	ctx, stop := context.WithTimeout(t.Context(), 10*time.Second)
	defer stop()
	r, err := http.NewRequestWithContext(ctx, "GET", url, nil)
	if err != nil {
		t.Fatal(err)
	}
	for i := 0; i < len(header); i += 2 {
		r.Header.Set(header[i], header[i+1])
	}
	answer, err := http.DefaultClient.Do(r)
	if err != nil {
		t.Fatal(err)
	}
	defer answer.Body.Close()
	lines := bufio.NewScanner(answer.Body)
	lines.Buffer(nil, 1<<20)
	for len(data) < n && lines.Scan() {
		key, value, _ := strings.Cut(lines.Text(), ": ")
		switch key {
		case "id":
			ids = append(ids, value)
		case "event":
			kinds = append(kinds, value)
		case "data":
			var m message
			if err := json.Unmarshal([]byte(value), &m); err != nil {
				t.Fatal(err)
			}
			if kinds[len(kinds)-1] == "state" {
				data = append(data, m)
			}
		}
	}
	if len(data) < n {
		t.Fatalf("the stream ended after %d of %d updates: %v", len(data), n, lines.Err())
	}
	return ids, kinds, data
}

// A reader that comes back is given what it missed, without a hole and without
// repeats.
func TestStreamResumes(t *testing.T) {
	_, s := served(t, towns(t, "20s"), Guard{})
	one := s.URL + "/api/sessions/1"
	for range 3 {
		call(t, "POST", one+"/pace", `{"step_s":0.1}`)
	}
	ids, _, first := events(t, one+"/stream?after=0", 4)
	if got := strings.Join(ids, " "); got != "1 2 3 4" || first[3].Snapshot.AtS != 0.3 {
		t.Fatalf("at first %s, at %v", got, first[3].Snapshot.AtS)
	}
	for range 2 {
		call(t, "POST", one+"/pace", `{"step_s":0.1}`)
	}
	ids, kinds, more := events(t, one+"/stream", 2, "Last-Event-ID", "4")
	if strings.Join(ids, " ") != "5 6" || slices.Contains(kinds, "gap") || more[0].Snapshot.FromS != 0.3 || more[1].Snapshot.AtS != 0.5 {
		t.Errorf("resumed with %v %v from %v", ids, kinds, more[0].Snapshot.FromS)
	}
	if ids, _, _ = events(t, one+"/stream", 1); ids[0] != "6" {
		t.Errorf("a new reader begins with %s", ids[0])
	}
	for range mostKept {
		call(t, "POST", one+"/pace", `{}`)
	}
	if ids, kinds, _ = events(t, one+"/stream", 1, "Last-Event-ID", "3"); kinds[0] != "gap" || ids[0] != "7" {
		t.Errorf("after too long an absence: %v %v", kinds, ids)
	}
	if _, kinds, _ = events(t, one+"/stream", 1, "Last-Event-ID", "999999"); kinds[0] != "gap" {
		t.Errorf("with the number of another session: %v", kinds)
	}
}

// A stream outlives the time limit of short requests.
func TestStreamOutlivesTimeouts(t *testing.T) {
	c, _ := served(t, towns(t, "600s"), Guard{})
	s := httptest.NewUnstartedServer(c.Handler(Guard{}))
	s.Config.ReadTimeout, s.Config.WriteTimeout = 200*time.Millisecond, 200*time.Millisecond
	s.Start()
	defer func() { s.CloseClientConnections(); s.Close() }()
	call(t, "POST", s.URL+"/api/sessions/1/pace", `{"paused":false}`)
	began := time.Now()
	events(t, s.URL+"/api/sessions/1/stream", 8)
	if d := time.Since(began); d < 600*time.Millisecond {
		t.Errorf("8 updates within %v: too many a second", d)
	}
}

// Fifty readers, of which some never read, do not keep the run from its pace;
// those that do not read are dropped.
func TestStalledReadersAreDropped(t *testing.T) {
	c, s := served(t, towns(t, "3600s"), Guard{})
	one := s.URL + "/api/sessions/1"
	const all, stalled = 50, 10
	ctx, stop := context.WithCancel(t.Context())
	defer stop()
	read := make(chan int, all)
	for i := range all {
		if i < stalled { // a connection that asks and then never reads
			conn, err := net.Dial("tcp", s.Listener.Addr().String())
			if err != nil {
				t.Fatal(err)
			}
			defer conn.Close()
			if err := conn.(*net.TCPConn).SetReadBuffer(4096); err != nil {
				t.Fatal(err)
			}
			fmt.Fprintf(conn, "GET /api/sessions/1/stream HTTP/1.1\r\nHost: localhost\r\n\r\n")
			continue
		}
		go func() {
			r, _ := http.NewRequestWithContext(ctx, "GET", one+"/stream", nil)
			answer, err := http.DefaultTransport.RoundTrip(r)
			if err != nil {
				read <- 0
				return
			}
			defer answer.Body.Close()
			n := 0
			lines := bufio.NewScanner(answer.Body)
			lines.Buffer(nil, 1<<20)
			for lines.Scan() {
				if strings.HasPrefix(lines.Text(), "id:") {
					n++
				}
			}
			read <- n
		}()
	}
	h := c.sessions[1]
	waitFor(t, "all readers", func() bool { return h.paceNow().Readers == all })
	before := h.latest().id
	// Many updates, until the buffers of all stalled connections are full.
	updates := uint64(0)
	waitFor(t, "dropped readers", func() bool {
		for range 20 {
			if err := h.do(ctx, h.publish); err != nil {
				t.Fatal(err)
			}
			updates++
		}
		time.Sleep(2 * time.Millisecond) // those that read get a turn
		return h.paceNow().Dropped >= stalled
	})
	if d := h.paceNow().Dropped; d > all {
		t.Errorf("%d dropped", d)
	}
	if got := h.latest().id - before; got != updates {
		t.Errorf("%d of %d updates came: the run was kept from its pace", got, updates)
	}
	began := time.Now()
	call(t, "POST", one+"/pace", `{"speed":1,"paused":false}`)
	time.Sleep(time.Second)
	_, body, _ := call(t, "GET", one+"/state", "")
	var m message
	if err := json.Unmarshal([]byte(body), &m); err != nil {
		t.Fatal(err)
	}
	if ran, wall := m.Snapshot.AtS, time.Since(began).Seconds(); ran < 0.5*wall || ran > wall {
		t.Errorf("%.2f s were run in %.2f s", ran, wall)
	}
	stop()
	readers := 0
	for range all - stalled {
		if <-read > 0 {
			readers++
		}
	}
	if readers != all-stalled {
		t.Errorf("%d of %d readers were given something", readers, all-stalled)
	}
}

// Looking at the demo ten times a second and telling it costs less than a tenth
// of the time.
func TestUpdatesAreCheap(t *testing.T) {
	data, files, err := library.Open(library.Demo)
	if err != nil {
		t.Fatal(err)
	}
	sc, err := scenarios.Load("demo", data, files, nil)
	if err != nil {
		t.Fatal(err)
	}
	s, err := study.NewSession(t.Context(), sc, study.Options{Cores: 1})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	l := newLive(s)
	s.Advance(des.Second/2, nil)
	best := time.Hour // others may be at work on this machine
	for range 20 {
		s.Advance(s.Now()+des.Millisecond, nil)
		began := time.Now()
		l.publish()
		best = min(best, time.Since(began))
	}
	t.Logf("an update takes %v and has %d bytes", best, len(l.latest().data))
	if best > updateEvery/10 {
		t.Errorf("an update takes %v of every %v", best, updateEvery)
	}
}

func waitFor(t *testing.T, what string, holds func() bool) {
	t.Helper()
	for end := time.Now().Add(10 * time.Second); !holds(); time.Sleep(time.Millisecond) {
		if time.Now().After(end) {
			t.Fatalf("waited for %s in vain", what)
		}
	}
}

// What is done through the interface is done; the result and the saved acts
// are those of a replay, byte for byte.
func TestInterfaceReplays(t *testing.T) {
	sc := towns(t, "2s")
	_, s := served(t, sc, Guard{})
	one := s.URL + "/api/sessions/1"
	for _, step := range []string{"0.5", `{"cut":"ayre-brough","where":"100km from ayre"}`, "0.3", `{"set-up":"x"}`, "0.4", `{"repair":"ayre-brough"}`, "0.2", `{"move":"calls","onto":["x"]}`} {
		if strings.HasPrefix(step, "{") {
			if got, body, _ := call(t, "POST", one+"/acts", step); got != 202 {
				t.Fatalf("%s: %d %s", step, got, body)
			}
		} else if got, body, _ := call(t, "POST", one+"/pace", `{"step_s":`+step+`}`); got != 200 {
			t.Fatalf("%s: %d %s", step, got, body)
		}
	}
	if _, body, _ := call(t, "GET", one+"/results", ""); !strings.Contains(body, `"partial": true`) && !strings.Contains(body, `"partial":true`) {
		t.Errorf("half a session is not marked partial: %.300s", body)
	}
	call(t, "POST", one+"/pace", `{"speed":0,"paused":false}`)
	waitFor(t, "the end", func() bool {
		_, body, _ := call(t, "GET", one+"/state", "")
		return strings.Contains(body, `"over":true`)
	})
	_, got, _ := call(t, "GET", one+"/results", "")
	_, saved, h := call(t, "GET", one+"/acts", "")
	if !strings.Contains(h.Get("Content-Disposition"), "session.yaml") {
		t.Errorf("saved as %v", h)
	}
	r, err := study.Replay(t.Context(), sc, []byte(saved), "saved", study.Options{Cores: 2})
	if err != nil {
		t.Fatal(err)
	}
	result.Stamp(r, result.Tool{Name: "ferrule", Version: "test"})
	want, err := result.Encode(r)
	if err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal([]byte(got), want) {
		t.Error("the replay gives other bytes than the session")
	}
	if len(r.Steps) != 4 || r.Classes[0].Periods[1].LostPackets == nil {
		t.Errorf("steps %v", r.Steps)
	}
}
