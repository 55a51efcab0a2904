package page

import (
	"bytes"
	"context"
	_ "embed"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"net/http"
	"slices"
	"strconv"
	"sync"
	"time"

	"ferrule/des"
	"ferrule/scenarios"
	"ferrule/scenarios/result"
	"ferrule/scenarios/study"
)

// Limits of the console's server.
const (
	MostSessions = 8       // at one time
	mostBody     = 8 << 10 // bytes of a request
	readerGrace  = 5 * time.Second
)

//go:embed openapi.json
var openAPI []byte

//go:embed console.html
var consolePage []byte

//go:embed console.css
var consoleStyle string

//go:embed dist/console.js
var consoleProgram string

// A Starter begins a session of the one scenario that the server was started
// with. plan is empty for the scenario as it stands; seed is 0 for its own.
type Starter func(ctx context.Context, plan string, seed uint64) (*study.Session, error)

// Console serves live sessions of one scenario: a page, and the interface that
// openapi.json describes. It reads no file and no other scenario.
type Console struct {
	start Starter
	plans []string
	tool  result.Tool
	ctx   context.Context // of all sessions

	mu       sync.Mutex
	sessions map[int]*hosted
	next     int
	starting int
	wait     sync.WaitGroup
}

// hosted is a session with what it takes to end it.
type hosted struct {
	*live
	ground []byte
	cancel context.CancelFunc
}

// NewConsole returns a server whose sessions end with ctx. plans are those of
// the scenario; tool stands in results.
func NewConsole(ctx context.Context, start Starter, plans []string, tool result.Tool) *Console {
	return &Console{ctx: ctx, start: start, plans: plans, tool: tool, sessions: map[int]*hosted{}, next: 1}
}

// Wait returns once all sessions have ended, after ctx is done.
func (c *Console) Wait() { c.wait.Wait() }

// Begin starts a session and returns its number, from 1 on.
func (c *Console) Begin(ctx context.Context, plan string, seed uint64) (int, error) {
	c.mu.Lock()
	if len(c.sessions)+c.starting >= MostSessions {
		c.mu.Unlock()
		return 0, errFull
	}
	c.starting++
	c.mu.Unlock()
	s, err := c.start(ctx, plan, seed)
	c.mu.Lock()
	defer c.mu.Unlock()
	c.starting--
	if err != nil {
		return 0, err
	}
	ground, err := json.Marshal(s.Ground())
	if err != nil {
		return 0, errors.Join(err, ctx.Err())
	}
	id := c.next
	c.next++
	own, cancel := context.WithCancel(c.ctx)
	h := &hosted{newLive(s), ground, cancel}
	c.sessions[id] = h
	c.wait.Go(func() { h.run(own) })
	return id, nil
}

var errFull = fmt.Errorf("there are %d sessions already; end one first", MostSessions)

// A route is one operation of the interface. Those of {id} find their session.
type route struct {
	method, path string
	plain        http.HandlerFunc
	of           func(*hosted, http.ResponseWriter, *http.Request)
}

func (c *Console) routes() []route {
	file := func(kind string, data []byte) http.HandlerFunc {
		return func(w http.ResponseWriter, _ *http.Request) { send(w, http.StatusOK, kind, data) }
	}
	return []route{
		{"GET", "/", file("text/html; charset=utf-8", consolePage), nil},
		{"GET", "/console.js", file("text/javascript; charset=utf-8", []byte(consoleProgram)), nil},
		{"GET", "/console.css", file("text/css; charset=utf-8", []byte(variables()+style+consoleStyle)), nil},
		{"GET", "/openapi.json", file("application/json", openAPI), nil},
		{"GET", "/api/sessions", c.list, nil},
		{"POST", "/api/sessions", c.begin, nil},
		{"DELETE", "/api/sessions/{id}", c.finish, nil},
		{"GET", "/api/sessions/{id}", nil, (*hosted).describe},
		{"GET", "/api/sessions/{id}/state", nil, (*hosted).state},
		{"GET", "/api/sessions/{id}/stream", nil, (*hosted).stream},
		{"POST", "/api/sessions/{id}/acts", nil, (*hosted).act},
		{"GET", "/api/sessions/{id}/acts", nil, (*hosted).saved},
		{"POST", "/api/sessions/{id}/pace", nil, (*hosted).setPace},
		{"GET", "/api/sessions/{id}/results", nil, func(h *hosted, w http.ResponseWriter, r *http.Request) { h.results(w, r, c.tool) }},
	}
}

// mux joins the routes.
func (c *Console) mux() *http.ServeMux {
	m := http.NewServeMux()
	for _, r := range c.routes() {
		path := r.path
		if path == "/" {
			path = "/{$}"
		}
		h := r.plain
		if h == nil {
			h = func(w http.ResponseWriter, req *http.Request) {
				id, err := strconv.Atoi(req.PathValue("id"))
				c.mu.Lock()
				s := c.sessions[id]
				c.mu.Unlock()
				if err != nil || s == nil {
					refuse(w, http.StatusNotFound, "there is no such session")
					return
				}
				r.of(s, w, req)
			}
		}
		m.HandleFunc(r.method+" "+path, h)
	}
	return m
}

// send answers with data.
func send(w http.ResponseWriter, status int, kind string, data []byte) {
	w.Header().Set("Content-Type", kind)
	w.WriteHeader(status)
	_, _ = w.Write(data) // whoever asked has gone: there is nobody to tell
}

func sendJSON(w http.ResponseWriter, status int, v any) {
	data, err := json.Marshal(v)
	if err != nil {
		panic("page: " + err.Error()) // what is sent is plain
	}
	send(w, status, "application/json", data)
}

// refuse answers with a reason.
func refuse(w http.ResponseWriter, status int, why string) {
	sendJSON(w, status, map[string]string{"error": why})
}

// take reads the JSON of a request into v; false after a refusal. Unknown keys
// and anything behind the document are refused.
func take(w http.ResponseWriter, r *http.Request, v any) bool {
	d := json.NewDecoder(r.Body)
	d.DisallowUnknownFields()
	err := d.Decode(v)
	if err == nil {
		if _, more := d.Token(); !errors.Is(more, io.EOF) {
			err = errors.New("more follows the document")
		}
	}
	var large *http.MaxBytesError
	switch {
	case errors.As(err, &large):
		refuse(w, http.StatusRequestEntityTooLarge, fmt.Sprintf("a request has at most %d bytes", mostBody))
	case err != nil:
		refuse(w, http.StatusBadRequest, "not the JSON that is asked for: "+err.Error())
	}
	return err == nil
}

func (c *Console) list(w http.ResponseWriter, _ *http.Request) {
	c.mu.Lock()
	ids := []int{}
	for id := range c.sessions {
		ids = append(ids, id)
	}
	c.mu.Unlock()
	slices.Sort(ids)
	sendJSON(w, http.StatusOK, map[string]any{"sessions": ids, "plans": c.plans, "most": MostSessions})
}

func (c *Console) begin(w http.ResponseWriter, r *http.Request) {
	var b struct {
		Plan string `json:"plan"`
		Seed uint64 `json:"seed"`
	}
	if !take(w, r, &b) {
		return
	}
	id, err := c.Begin(r.Context(), b.Plan, b.Seed)
	switch {
	case errors.Is(err, errFull):
		refuse(w, http.StatusTooManyRequests, err.Error())
	case err != nil:
		refuse(w, http.StatusUnprocessableEntity, err.Error())
	default:
		sendJSON(w, http.StatusCreated, map[string]int{"session": id})
	}
}

func (c *Console) finish(w http.ResponseWriter, r *http.Request) {
	id, _ := strconv.Atoi(r.PathValue("id")) // no session has what is no number
	c.mu.Lock()
	h := c.sessions[id]
	delete(c.sessions, id)
	c.mu.Unlock()
	if h == nil {
		refuse(w, http.StatusNotFound, "there is no such session")
		return
	}
	h.cancel()
	<-h.gone
	w.WriteHeader(http.StatusNoContent)
}

func (h *hosted) describe(w http.ResponseWriter, _ *http.Request) {
	send(w, http.StatusOK, "application/json", h.ground)
}

func (h *hosted) state(w http.ResponseWriter, _ *http.Request) {
	u := h.latest()
	w.Header().Set("Last-Event-ID", strconv.FormatUint(u.id, 10))
	send(w, http.StatusOK, "application/json", u.data)
}

func (h *hosted) act(w http.ResponseWriter, r *http.Request) {
	var words scenarios.Words
	if !take(w, r, &words) {
		return
	}
	var at des.Time
	var bad error
	err := h.do(r.Context(), func() {
		at, bad = h.session.Now(), h.session.Act(&words)
		if bad == nil {
			h.publish()
		}
	})
	switch {
	case err != nil:
		refuse(w, http.StatusGone, err.Error())
	case bad != nil:
		refuse(w, http.StatusUnprocessableEntity, bad.Error())
	default:
		sendJSON(w, http.StatusAccepted, map[string]float64{"at_s": at.Seconds()})
	}
}

func (h *hosted) saved(w http.ResponseWriter, r *http.Request) {
	var data []byte
	if err := h.do(r.Context(), func() { data = h.session.Saved() }); err != nil {
		refuse(w, http.StatusGone, err.Error())
		return
	}
	w.Header().Set("Content-Disposition", `attachment; filename="session.yaml"`)
	send(w, http.StatusOK, "application/yaml", data)
}

// setPace changes the speed, pauses, or makes one step of a pausing session.
func (h *hosted) setPace(w http.ResponseWriter, r *http.Request) {
	var b struct {
		Speed  *float64 `json:"speed"`
		Paused *bool    `json:"paused"`
		StepS  float64  `json:"step_s"`
	}
	if !take(w, r, &b) {
		return
	}
	if s := b.Speed; s != nil && *s != 0 && !(*s >= leastSpeed && *s <= mostSpeed) {
		refuse(w, http.StatusUnprocessableEntity, fmt.Sprintf("speed: write %g to %g, or 0 for as fast as possible", leastSpeed, mostSpeed))
		return
	}
	if !(b.StepS >= 0 && b.StepS <= 10) {
		refuse(w, http.StatusUnprocessableEntity, "step_s: write 0 to 10")
		return
	}
	err := h.do(r.Context(), func() {
		h.mu.Lock()
		if b.Speed != nil {
			h.speed = *b.Speed
		}
		if b.Paused != nil {
			h.paused = *b.Paused
		}
		if b.StepS > 0 {
			h.paused = true
		}
		h.mu.Unlock()
		if b.StepS > 0 {
			h.session.Advance(h.session.Now()+des.Time(math.Round(b.StepS*float64(des.Second))), func() bool { return r.Context().Err() != nil })
		}
		h.publish()
	})
	if err != nil {
		refuse(w, http.StatusGone, err.Error())
		return
	}
	sendJSON(w, http.StatusOK, h.paceNow())
}

func (h *hosted) results(w http.ResponseWriter, r *http.Request, tool result.Tool) {
	var run *result.Run
	if err := h.do(r.Context(), func() { run = h.session.Result() }); err != nil {
		refuse(w, http.StatusGone, err.Error())
		return
	}
	result.Stamp(run, tool)
	data, err := result.Encode(run)
	if err != nil {
		refuse(w, http.StatusInternalServerError, err.Error())
		return
	}
	send(w, http.StatusOK, "application/json", data)
}

// stream sends updates as server-sent events until the reader has gone, or has
// not read for too long. A reader that comes back with Last-Event-ID is given
// what it missed, as far as that is kept; an event "gap" says that it is not.
// Without it a reader is given the last update, or with ?after=0 all kept.
func (h *hosted) stream(w http.ResponseWriter, r *http.Request) {
	after := h.latest().id - 1
	for _, text := range []string{r.URL.Query().Get("after"), r.Header.Get("Last-Event-ID")} {
		if text == "" {
			continue
		}
		n, err := strconv.ParseUint(text, 10, 62)
		if err != nil {
			refuse(w, http.StatusBadRequest, "the number of an update is wanted")
			return
		}
		after = n
	}
	in, first, gap, ok := h.join(after)
	if !ok {
		refuse(w, http.StatusServiceUnavailable, fmt.Sprintf("there are %d readers already, or the session is over", mostReaders))
		return
	}
	defer h.leave(in)
	w.Header().Set("Content-Type", "text/event-stream")
	out := http.NewResponseController(w)
	if out.SetReadDeadline(time.Time{}) != nil { // that of the server is for short requests
		return
	}
	var b bytes.Buffer
	flush := func() bool {
		err := errors.Join(out.SetWriteDeadline(time.Now().Add(readerGrace)), second(w.Write(b.Bytes())), out.Flush())
		b.Reset()
		return err == nil
	}
	if gap {
		b.WriteString("event: gap\ndata: {}\n\n")
	}
	for _, u := range first {
		fmt.Fprintf(&b, "id: %d\nevent: state\ndata: %s\n\n", u.id, u.data)
	}
	b.WriteString(": ready\n\n")
	alive := time.NewTicker(readerGrace)
	defer alive.Stop()
	for flush() {
		select {
		case <-r.Context().Done():
			return
		case <-alive.C:
			b.WriteString(": alive\n\n")
		case u, open := <-in:
			if !open {
				return
			}
			fmt.Fprintf(&b, "id: %d\nevent: state\ndata: %s\n\n", u.id, u.data)
		}
	}
}

// second is the error of a call that returns something else too.
func second[A any](_ A, err error) error { return err }
