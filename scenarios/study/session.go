package study

import (
	"context"
	"errors"
	"fmt"
	"slices"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/packet"
	"ferrule/scenarios"
	"ferrule/scenarios/build"
	"ferrule/scenarios/result"
)

// Session is one replication that somebody leads by hand: it is advanced to an
// instant, acts are done there, and it is looked at. What it gives depends on
// the acts and their instants, never on the steps in which it was advanced or
// how often it was looked at: its Saved acts repeat it byte for byte. One
// goroutine at a time may use it.
type Session struct {
	sc    *scenarios.Scenario // with the warm-up that was found
	file  *scenarios.Scenario
	m     *build.Model
	k     *des.Kernel
	found *foundWarmUp
	close func()
	lines []string
	acted des.Time // instant of the last act that was asked for
	over  bool

	before int // lines of earlier instants
	last   seen
}

// foundWarmUp is what pilots said of a warm-up.
type foundWarmUp struct {
	short   bool
	caution string
}

// MostActs is how many acts a session takes.
const MostActs = 2000

// NewSession begins a session of sc under o.Plan and o.Seed. Circuits of all
// plans are known in it: see scenarios.Scenario.Stage. Close ends it.
func NewSession(ctx context.Context, sc *scenarios.Scenario, o Options) (*Session, error) {
	plan, err := sc.Stage(o.plan())
	if err != nil {
		return nil, err
	}
	return newSession(ctx, sc, plan, o)
}

func newSession(ctx context.Context, sc *scenarios.Scenario, plan *scenarios.Plan, o Options) (*Session, error) {
	s := &Session{sc: sc, file: sc, close: func() {}}
	if sc.Run.AutoWarmUp {
		c, err := new(warmUps).find(ctx, sc, o.seed(sc))
		if err != nil {
			return nil, err
		}
		own := *sc
		own.Run.WarmUp = c.at
		s.sc, s.found = &own, &foundWarmUp{c.short != "", c.caution()}
	}
	var err error
	if s.m, err = build.New(s.sc, plan, o.seed(sc)); err != nil {
		return nil, err
	}
	var exec des.Executor = des.Serial{}
	if n := o.cores(); n > 1 && len(s.m.Plant.Sites) > 1 {
		e := NewExecutor(n)
		exec, s.close = e, e.Close
	}
	s.k = s.m.Kernel(exec)
	s.last = s.look()
	return s, nil
}

// Close gives back what the session holds.
func (s *Session) Close() { s.close() }

// Now is the instant up to which everything has been done.
func (s *Session) Now() des.Time { return s.k.Now() }

// Length is the instant at which the sources end.
func (s *Session) Length() des.Time { return s.sc.Run.Length }

// Over reports whether the session has come to its end and takes no more acts.
func (s *Session) Over() bool { return s.over }

// Advance does everything due before to, or before the end. stop, if not nil,
// is asked after every window and ends it early.
func (s *Session) Advance(to des.Time, stop func() bool) {
	if s.over {
		return
	}
	if s.k.Now() < s.Length() {
		s.k.Advance(min(to, s.Length()), stop)
	}
	if s.k.Now() >= s.Length() {
		s.m.Network.Run(s.k, nil) // what is under way arrives
		s.over = true
	}
}

// Act does w now: it happens before anything else of this instant. The error
// says what is wrong with w, also that it contradicts what was done at this
// instant. A refusal by the controller is no error: it comes
// in the steps of a Snapshot.
func (s *Session) Act(w *scenarios.Words) error {
	switch {
	case s.over || s.Now() >= s.Length():
		return errors.New("the run is over")
	case len(s.lines) >= MostActs:
		return fmt.Errorf("a session takes %d acts at most", MostActs)
	}
	if s.acted != s.Now() {
		s.acted, s.before = s.Now(), len(s.lines)
	}
	line := w.Line(s.Now())
	acts, err := s.file.ReadActs(append(slices.Clone(s.lines[s.before:]), line), s.m.Plan)
	if err != nil {
		return err
	}
	s.m.Do(&acts[len(acts)-1])
	s.lines = append(s.lines, line)
	return nil
}

// Saved is what was done so far, as Replay takes it.
func (s *Session) Saved() []byte {
	return scenarios.FormatSession(s.file, s.m.Plan.Name, s.m.Seed, s.lines)
}

// Result is what the session has given: as Replay gives it if it is Over, else
// marked partial. It carries the hash of the scenario with what was done.
func (s *Session) Result() *result.Run {
	r := gather(s.m, !s.over)
	s.found.into(r)
	r.ScenarioHash = s.file.HashOfSession(s.Saved())
	return r
}

// into adds to r what was found out about its warm-up.
func (f *foundWarmUp) into(r *result.Run) {
	if f == nil {
		return
	}
	r.WarmUpFound, r.WarmUpShort = true, f.short
	if f.caution == "" {
		return
	}
	r.Cautions = append(r.Cautions, f.caution)
	for i := range r.Within {
		r.Within[i].Interval, r.Within[i].Refused = nil, "too short for its warm-up"
	}
}

// Replay repeats a saved session of sc to its end. o.Plan and o.Seed do not
// matter. When ctx is done it stops like Run.
func Replay(ctx context.Context, sc *scenarios.Scenario, saved []byte, name string, o Options) (*result.Run, error) {
	ses, err := sc.ReadSession(name, saved)
	if err != nil {
		return nil, err
	}
	o.Seed = ses.Seed
	s, err := newSession(ctx, sc, ses.Plan, o)
	if err != nil {
		return nil, err
	}
	defer s.Close()
	for i := range ses.Acts {
		s.m.Do(&ses.Acts[i])
	}
	advance(ctx, s.m, s.k, o.Progress)
	partial := ctx.Err() != nil
	r := gather(s.m, partial)
	s.found.into(r)
	r.ScenarioHash = sc.HashOfSession(saved)
	if partial {
		return r, fmt.Errorf("replay of %s: %w", sc.Name, ctx.Err())
	}
	return r, nil
}

// seen is what had been counted when somebody looked.
type seen struct {
	at      des.Time
	classes []classSeen
	sent    []packet.PortLoad
	events  int
}

// classSeen is what had been counted of a class.
type classSeen struct {
	delivered, lost, bytes uint64
	delay                  float64 // ps, sum
}

// look counts.
func (s *Session) look() seen {
	n := s.m.Network
	x := seen{at: s.k.Now(), classes: make([]classSeen, len(s.sc.Classes)), sent: n.Sent()}
	for way := range n.Meters() {
		a, _ := nodes.AggOf(uint16(way))
		c := &x.classes[s.sc.Aggregates[a].Class]
		for _, cell := range n.Meters()[way].Cells {
			if cell != nil && cell.Exact.N > 0 {
				c.delivered += cell.Exact.N
				c.bytes += cell.Bytes
				c.delay += float64(cell.Exact.Mean() * float64(cell.Exact.N))
			}
		}
	}
	n.Losses(func(_ nodes.SiteID, l *packet.Loss) {
		a, _ := nodes.AggOf(l.Way)
		for _, causes := range l.Count {
			for _, k := range causes {
				x.classes[s.sc.Aggregates[a].Class].lost += k
			}
		}
	})
	return x
}

// Snapshot is how a session stands, and what came to pass since the one
// before: packets by the instant of their fate, not of their sending.
type Snapshot struct {
	AtS      float64          `json:"at_s"`
	FromS    float64          `json:"from_s"` // the instant of the snapshot before
	LengthS  float64          `json:"length_s"`
	Over     bool             `json:"over"`
	Acts     int              `json:"acts"`
	Classes  []ClassNow       `json:"classes"` // highest first
	Circuits []result.Circuit `json:"circuits"`
	Fibres   []result.Fibre   `json:"fibres"`
	Cuts     []result.Cut     `json:"cuts"`
	Loads    []result.Load    `json:"loads"` // since the snapshot before, of the period "now"
	Steps    []result.Step    `json:"steps"`
	Events   []result.Event   `json:"events"` // those since the snapshot before
	Moved    []MovedNow       `json:"moved"`
}

// ClassNow is what became of the packets of a class since the last snapshot.
type ClassNow struct {
	Name             string   `json:"name"`
	DeliveredPackets int64    `json:"delivered_packets"`
	LostPackets      int64    `json:"lost_packets"`
	DeliveredBits    int64    `json:"delivered_bits"`
	MeanDelayS       *float64 `json:"mean_delay_s,omitempty"` // absent if none was delivered
}

// MovedNow says that a way goes over circuits of its own.
type MovedNow struct {
	Aggregate string   `json:"aggregate"`
	CarriedBy []string `json:"carried_by"`
}

// Period is the name of the only period in the Loads of a Snapshot.
const Period = "now"

// Snapshot looks at the session. It changes nothing of it.
func (s *Session) Snapshot() *Snapshot {
	was := s.last
	s.last = s.look()
	now := &s.last
	g := newGatherer(s.m, true)
	g.end = now.at + des.Picosecond // what has come to pass by now is shown
	g.circuits()
	g.fibres()
	g.steps()
	g.events()
	g.cuts()
	x := &Snapshot{
		AtS: now.at.Seconds(), FromS: was.at.Seconds(), LengthS: s.Length().Seconds(), Over: s.over, Acts: len(s.lines),
		Circuits: g.r.Circuits, Fibres: g.r.Fibres, Cuts: g.r.Cuts, Steps: g.r.Steps, Loads: s.loads(&was, now),
	}
	now.events = len(g.r.Events)
	x.Events = g.r.Events[was.events:]
	for c := range now.classes {
		a, b := &was.classes[c], &now.classes[c]
		y := ClassNow{
			Name: s.sc.Classes[c].Name, DeliveredPackets: int64(b.delivered - a.delivered), LostPackets: int64(b.lost - a.lost),
			DeliveredBits: int64(b.bytes-a.bytes) * 8,
		}
		if y.DeliveredPackets > 0 {
			mean := max(0, ps((b.delay-a.delay)/float64(y.DeliveredPackets)))
			y.MeanDelayS = &mean
		}
		x.Classes = append(x.Classes, y)
	}
	for _, way := range g.ways {
		if by := s.m.Control.Carried(way); slices.ContainsFunc(by, s.isForMoved) {
			x.Moved = append(x.Moved, MovedNow{g.wayName(way), by})
		}
	}
	return x
}

// isForMoved reports whether a circuit carries only what is moved onto it.
func (s *Session) isForMoved(circuit string) bool {
	return slices.ContainsFunc(s.m.Plan.Circuits, func(c scenarios.Circuit) bool { return c.Name == circuit && c.Carries == nodes.CarriesMoved })
}

// loads are what ports sent between two looks, per second.
func (s *Session) loads(was, now *seen) []result.Load {
	span := (now.at - was.at).Seconds()
	var out []result.Load
	if span <= 0 {
		return out
	}
	for i, p := range now.sent {
		x := result.Load{Circuit: s.m.Plant.Circuits[p.Circuit].Name, From: s.m.Plant.Sites[p.From].Name, Period: Period}
		for c, bytes := range p.IPBytes {
			if d := bytes - was.sent[i].IPBytes[c]; d > 0 {
				x.Classes = append(x.Classes, result.ClassRate{Class: s.sc.Classes[c].Name, Bps: float64(d) * 8 / span})
			}
		}
		if len(x.Classes) > 0 {
			out = append(out, x)
		}
	}
	return out
}

// Ground describes what does not change while a session runs.
type Ground struct {
	Scenario   string          `json:"scenario"`
	About      string          `json:"about,omitempty"`
	Plan       string          `json:"plan"`
	Seed       uint64          `json:"seed"`
	LengthS    float64         `json:"length_s"`
	WarmUpS    float64         `json:"warm_up_s"`
	Classes    []string        `json:"classes"` // highest first
	Sites      []result.Site   `json:"sites"`
	Fibres     []result.Fibre  `json:"fibres"`
	Aggregates []string        `json:"aggregates"`
	Circuits   []GroundCircuit `json:"circuits"`
}

// GroundCircuit is a circuit that stands or can be set up.
type GroundCircuit struct {
	Name    string `json:"name"`
	Carries string `json:"carries"`
	Slots   int    `json:"slots"`
}

// Ground describes the session.
func (s *Session) Ground() *Ground {
	g := newGatherer(s.m, true)
	g.fibres()
	g.drawings()
	x := &Ground{
		Scenario: s.sc.Name, About: s.sc.About, Plan: s.m.Plan.Name, Seed: s.m.Seed, LengthS: s.Length().Seconds(), WarmUpS: s.sc.Run.WarmUp.Seconds(),
		Sites: g.r.Sites, Fibres: g.r.Fibres,
	}
	for i := range s.sc.Classes {
		x.Classes = append(x.Classes, s.sc.Classes[i].Name)
	}
	for i := range s.sc.Aggregates {
		x.Aggregates = append(x.Aggregates, s.sc.Aggregates[i].Name)
	}
	for i := range s.m.Plan.Circuits {
		c := &s.m.Plan.Circuits[i]
		x.Circuits = append(x.Circuits, GroundCircuit{c.Name, carries(c.Carries), c.Slots})
	}
	return x
}
