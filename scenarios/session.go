package scenarios

import (
	"bytes"
	"fmt"
	"reflect"
	"slices"
	"strconv"
	"strings"

	"go.yaml.in/yaml/v3"

	"ferrule/des"
	"ferrule/nodes"
)

// Words is one act as a person gives it while a scenario runs, in the words of
// a scenario file. Exactly one verb is given; the details are those of a
// timeline. A set-up names a circuit that some plan knows.
type Words struct {
	Cut      string   `json:"cut,omitempty"`
	Repair   string   `json:"repair,omitempty"`
	SetUp    string   `json:"set-up,omitempty"`
	TearDown string   `json:"tear-down,omitempty"`
	Resize   string   `json:"resize,omitempty"`
	Move     string   `json:"move,omitempty"`
	Return   string   `json:"return,omitempty"`
	Scale    string   `json:"scale,omitempty"`
	Drain    string   `json:"drain,omitempty"`
	Undrain  string   `json:"undrain,omitempty"`
	Where    string   `json:"where,omitempty"`
	Slots    int      `json:"slots,omitempty"`
	Onto     []string `json:"onto,omitempty"`
	Order    string   `json:"order,omitempty"`
	By       string   `json:"by,omitempty"`
}

// Line writes the act at an instant as one element of a list of a scenario
// file, on one line. Every text is quoted, so that no name can be anything else.
func (w *Words) Line(at des.Time) string {
	n := &yaml.Node{Kind: yaml.MappingNode, Style: yaml.FlowStyle}
	text := func(s string) *yaml.Node {
		return &yaml.Node{Kind: yaml.ScalarNode, Tag: "!!str", Style: yaml.DoubleQuotedStyle, Value: s}
	}
	put := func(key string, v *yaml.Node) {
		n.Content = append(n.Content, &yaml.Node{Kind: yaml.ScalarNode, Value: key}, v)
	}
	put("at", text(FormatTime(at)))
	for _, x := range []struct{ key, value string }{
		{"cut", w.Cut}, {"repair", w.Repair}, {"tear-down", w.TearDown}, {"resize", w.Resize}, {"move", w.Move}, {"return", w.Return},
		{"scale", w.Scale}, {"drain", w.Drain}, {"undrain", w.Undrain}, {"where", w.Where}, {"order", w.Order}, {"by", w.By},
	} {
		if x.value != "" {
			put(x.key, text(x.value))
		}
	}
	if w.SetUp != "" {
		c := &yaml.Node{Kind: yaml.MappingNode, Style: yaml.FlowStyle}
		c.Content = []*yaml.Node{{Kind: yaml.ScalarNode, Value: "name"}, text(w.SetUp)}
		put("set-up", c)
	}
	if w.Slots != 0 {
		put("slots", &yaml.Node{Kind: yaml.ScalarNode, Tag: "!!int", Value: strconv.Itoa(w.Slots)})
	}
	if len(w.Onto) > 0 {
		l := &yaml.Node{Kind: yaml.SequenceNode, Style: yaml.FlowStyle}
		for _, c := range w.Onto {
			l.Content = append(l.Content, text(c))
		}
		put("onto", l)
	}
	out, err := yaml.Marshal(n)
	if err != nil {
		panic("scenarios: " + err.Error()) // a tree of scalars can always be written
	}
	return string(bytes.TrimSpace(out))
}

// A Session is what somebody did to a running scenario, as saved: under which
// plan and seed, and the acts in their order. Outcomes of a session carry a
// hash of their own: see Hash.
type Session struct {
	Hash string // of the scenario that it was recorded on
	Plan *Plan  // see Stage
	Seed uint64
	Acts []Act // in order of time
}

type rawSession struct {
	Session string   `mapstructure:"session"`
	Hash    string   `mapstructure:"scenario-hash"`
	Plan    string   `mapstructure:"plan"`
	Seed    *uint64  `mapstructure:"seed"`
	Acts    []rawAct `mapstructure:"acts"`
}

// FormatSession writes a session that ReadSession reads back; lines are those
// of Words.Line, in order.
func FormatSession(s *Scenario, plan string, seed uint64, lines []string) []byte {
	var b bytes.Buffer
	fmt.Fprintf(&b, "# What was done to a running scenario; ferrule run FILE --acts THIS repeats it.\n")
	fmt.Fprintf(&b, "session: %q\nscenario-hash: %q\nplan: %q\nseed: %d\nacts:\n", s.Name, s.Hash, plan, seed)
	for _, l := range lines {
		fmt.Fprintf(&b, "  - %s\n", l)
	}
	if len(lines) == 0 {
		b.Truncate(b.Len() - len("acts:\n"))
		b.WriteString("acts: []\n")
	}
	return b.Bytes()
}

// ReadSession reads a saved session of s; name stands for it in messages. An
// error is of type Problems and lists every fault, also that the session was
// recorded on another scenario.
func (s *Scenario) ReadSession(name string, data []byte) (*Session, error) {
	f := &faults{files: []string{name}}
	t := parseTree(name, data, f)
	if t == nil {
		return nil, f.err()
	}
	sh := &shaper{t: t, spoilt: map[*yaml.Node]bool{}}
	sh.mapping(t.top(), reflect.TypeFor[rawSession]())
	if f.err() != nil {
		return nil, f.err()
	}
	var raw rawSession
	t.read(data, nil, &raw)
	if f.err() != nil {
		return nil, f.err()
	}
	if raw.Hash != s.Hash {
		t.top().field("scenario-hash").fault("name the file it was recorded on, with the same options", "%s is not the scenario of this session", s.Name)
		return nil, f.err()
	}
	plan, err := s.Stage(raw.Plan)
	if err != nil {
		t.top().field("plan").fault("", "no plan is called %q", raw.Plan)
		return nil, f.err()
	}
	ses := &Session{Hash: raw.Hash, Plan: plan, Seed: value(raw.Seed, s.Run.Seed)}
	ses.Acts = s.sessionActs(t, sh.spoilt, raw.Acts, plan)
	if err := f.err(); err != nil {
		return nil, err
	}
	return ses, nil
}

// ReadActs reads lines of Words.Line, in order of time, under a plan of Stage.
// An error is of type Problems.
func (s *Scenario) ReadActs(lines []string, plan *Plan) ([]Act, error) {
	const name = "act"
	data := []byte("acts:\n  - " + strings.Join(lines, "\n  - ") + "\n")
	f := &faults{files: []string{name}}
	t := parseTree(name, data, f)
	if t == nil {
		return nil, f.err()
	}
	sh := &shaper{t: t, spoilt: map[*yaml.Node]bool{}}
	sh.mapping(t.top(), reflect.TypeFor[rawSession]())
	var raw rawSession
	t.read(data, nil, &raw)
	if err := f.err(); err != nil {
		return nil, err
	}
	acts := s.sessionActs(t, sh.spoilt, raw.Acts, plan)
	return acts, f.err()
}

// sessionActs resolves acts whose circuits are all known.
func (s *Scenario) sessionActs(t *tree, spoilt map[*yaml.Node]bool, raw []rawAct, plan *Plan) []Act {
	own := *s
	r := &resolver{t: t, spoilt: spoilt, s: &own, over: map[int]bool{}}
	r.raw.Run.Length = &own.Run.Length
	r.sites = named("site", t, s.Sites, func(x *Site) string { return x.Name })
	r.fibres = named("fibre", t, s.Fibres, func(x *Fibre) string { return x.Name })
	r.groups = named("risk group", t, s.RiskGroups, func(x *RiskGroup) string { return x.Name })
	r.classes = named("class", t, s.Classes, func(x *Class) string { return x.Name })
	r.traffic = named("traffic", t, s.Traffic, func(x *Traffic) string { return x.Name })
	r.aggregates = named("aggregate", t, s.Aggregates, func(x *Aggregate) string { return x.Name })
	r.circuits = named("circuit", t, plan.Circuits, func(x *Circuit) string { return x.Name })
	l := &actList{r: r, list: t.top().field("acts"), raw: raw, kind: inTimeline, circuits: plan.Circuits, names: r.circuits}
	if len(raw) > maxActs {
		l.list.fault(fmt.Sprintf("write %d at most", maxActs), "%d acts are too many", len(raw))
		return nil
	}
	l.own = make([]nodes.CircuitID, len(raw))
	var acts []Act
	last := des.Time(0)
	for i := range raw {
		p := l.list.item(i)
		l.own[i] = nodes.None
		if q := p.field("set-up"); q.given() {
			l.own[i] = nodes.CircuitID(r.circuits.find(q, raw[i].SetUp.Name))
			if l.own[i] < 0 {
				continue
			}
			if q.node.Kind == yaml.MappingNode && len(q.node.Content) > 2 {
				q.fault("write its name only", "a plan says what the circuit is")
			}
		}
		if q := p.field("after"); q.given() {
			q.fault("write at: and an instant", "what was done in a session waits for nothing")
			continue
		}
		a, ok := l.act(i)
		if !ok {
			continue
		}
		if a.At < last {
			p.field("at").fault("list acts in order of time", "%s is before the act above it", FormatTime(a.At))
		}
		last = a.At
		for j := len(acts) - 1; j >= 0 && acts[j].At == a.At; j-- {
			if b := &acts[j]; contradict(b, &a) {
				p.fault("let the clock run between them", "%s %s and %s %s contradict each other at %s", b.Verb, b.Subject, a.Verb, a.Subject, FormatTime(a.At))
				break
			}
		}
		acts = append(acts, a)
	}
	return acts
}

// named finds elements that have been checked by their names.
func named[T any](what string, t *tree, list []T, name func(*T) string) *index {
	x := newIndex(what, t.faults)
	for i := range list {
		n := name(&list[i])
		if _, taken := x.ids[n]; !taken {
			x.ids[n] = i
		}
		x.names, x.where = append(x.names, n), append(x.where, Pos{})
	}
	return x
}

// Stage returns the plan called name, in which the circuits of all other plans
// are known too, so that they can be set up while it runs: of several of one
// name the first. They come after those of the plan.
func (s *Scenario) Stage(name string) (*Plan, error) {
	on, err := s.Plan(name)
	if err != nil {
		return nil, err
	}
	p := *on
	p.Circuits = slices.Clone(on.Circuits)
	ids := map[string]nodes.CircuitID{} // looked up only
	for i := range p.Circuits {
		ids[p.Circuits[i].Name] = nodes.CircuitID(i)
	}
	for k := range s.Plans {
		first := len(p.Circuits)
		all := s.Plans[k].Circuits
		for i := range all {
			if _, known := ids[all[i].Name]; known {
				continue
			}
			ids[all[i].Name] = nodes.CircuitID(len(p.Circuits))
			c := all[i]
			c.InPlace = false
			p.Circuits = append(p.Circuits, c)
		}
		for i := first; i < len(p.Circuits); i++ {
			c := &p.Circuits[i]
			apart := c.ApartFrom
			c.ApartFrom = nil
			for _, id := range apart {
				c.ApartFrom = append(c.ApartFrom, ids[all[id].Name])
			}
		}
	}
	return &p, nil
}

// HashOfSession names what a session makes of s: see Hash.
func (s *Scenario) HashOfSession(saved []byte) string {
	return Hash([]byte(s.Hash), nil, [][]byte{saved})
}
