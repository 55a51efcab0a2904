package scenarios

import (
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"fmt"
	"io/fs"
	"reflect"
	"unicode"

	"go.yaml.in/yaml/v3"

	"ferrule/controller/path"

	"ferrule/nodes"
)

// Load reads a scenario from data; name stands for it in messages. Options in
// sets, each of the form path=value, are laid over the file before it is
// checked. Demand matrices and captures are read through files, which may be
// nil if the scenario names none; a large capture stays open as long as the
// scenario is in use. When anything is wrong the error is of type Problems
// and lists every fault; the Scenario is then nil.
//
// Load is safe on any input: a file above 8 MB, deeper than 24 levels, or made
// large by aliases is refused.
func Load(name string, data []byte, files fs.FS, sets []string) (*Scenario, error) {
	f := &faults{files: []string{name}}
	t := parseTree(name, data, f)
	if t == nil {
		return nil, f.err()
	}
	changed := t.overlay(sets)
	sh := &shaper{t: t, spoilt: map[*yaml.Node]bool{}}
	sh.mapping(t.top(), reflect.TypeFor[rawScenario]())
	text := data
	if sh.removed {
		var err error
		if text, err = t.marshal(); err != nil {
			return nil, f.err()
		}
	}
	r := &resolver{t: t, spoilt: sh.spoilt, files: files, s: &Scenario{File: name}, over: map[int]bool{}}
	t.read(text, changed, &r.raw)
	r.resolve()
	for _, set := range sets {
		f.files = append(f.files, clip("--set "+set))
	}
	if err := f.err(); err != nil {
		return nil, err
	}
	r.s.Hash = Hash(data, sets, r.matrices)
	return r.s, nil
}

// Hash names a scenario by what it was made of: the SHA-256 sum, in
// hexadecimal, over the file, the options laid over it and the matrices it
// reads, each with its length before it. A file that is replayed stands among
// the matrices with the SHA-256 sum of what is in it.
func Hash(data []byte, sets []string, matrices [][]byte) string {
	h := sha256.New()
	part := func(b []byte) {
		var size [8]byte
		binary.BigEndian.PutUint64(size[:], uint64(len(b)))
		h.Write(size[:])
		h.Write(b)
	}
	part(data)
	for _, set := range sets {
		part([]byte(set))
	}
	for _, m := range matrices {
		part(m)
	}
	return hex.EncodeToString(h.Sum(nil))
}

// A resolver makes a Scenario of what was read.
type resolver struct {
	t        *tree
	spoilt   map[*yaml.Node]bool
	files    fs.FS
	raw      rawScenario
	s        *Scenario
	matrices [][]byte
	base     base
	moved    int          // ways named by patterns so far
	over     map[int]bool // fibres over their capacity as it is
	finder   *path.Finder // of routes over fibres; nil: not made yet

	sites, fibres, groups, circuits, classes, traffic, aggregates, requests, plans *index
}

// resolve goes through the sections in the order in which they need each other.
func (r *resolver) resolve() {
	r.sites = newIndex("site", r.t.faults)
	r.fibres = newIndex("fibre", r.t.faults)
	r.groups = newIndex("risk group", r.t.faults)
	r.circuits = newIndex("circuit", r.t.faults)
	r.classes = newIndex("class", r.t.faults)
	r.traffic = newIndex("traffic", r.t.faults)
	r.aggregates = newIndex("aggregate", r.t.faults)
	r.requests = newIndex("stream of requests", r.t.faults)
	r.plans = newIndex("plan", r.t.faults)

	r.header()
	r.builtIn()
	r.resolveTraffic()
	r.resolveClasses()
	r.resolveReplays()
	r.resolveSites()
	r.resolveFibres()
	r.resolveCircuits()
	r.resolveAggregates()
	r.resolveDemand()
	r.resolveRequests()
	r.resolveController()
	r.resolveTimeline()
	r.resolvePlans()
}

// An index finds the elements of one kind by their names.
type index struct {
	what  string
	f     *faults
	ids   map[string]int
	names []string
	where []Pos
}

func newIndex(what string, f *faults) *index {
	return &index{what: what, f: f, ids: map[string]int{}}
}

// add registers the element at p under name and returns its id. A name that is
// missing, odd or taken is a fault; the element still gets its id.
func (x *index) add(r *resolver, p *place, name string) int {
	id := len(x.names)
	q := p.field("name")
	pos := q.pos()
	switch {
	case name == "" && !q.given():
		r.missing(p, "name", "write name: and a word")
	case name == "" && q.node.Value != "": // it was no word; that is noted already
	case !goodName(name):
		q.fault("use letters, digits, - _ and . only, 64 at most", "%q is not a name", name)
	default:
		if other, taken := x.ids[name]; taken {
			hint := "choose another"
			if o := x.where[other]; o.Line > 0 {
				hint = fmt.Sprintf("the other %s of that name stands at line %d", x.what, o.Line)
			}
			q.fault(hint, "the name %q is taken", name)
		} else {
			x.ids[name] = id
		}
	}
	x.names = append(x.names, name)
	x.where = append(x.where, pos)
	return id
}

// find is the id of the element called name, at p in the file, or nodes.None
// after a fault. The empty name stands for a value that was not read.
func (x *index) find(p *place, name string) int {
	if id, ok := x.ids[name]; ok {
		return id
	}
	if name != "" || p.given() && p.node.Value == "" {
		p.fault(x.hint(name), "no %s is called %q", x.what, name)
	}
	return nodes.None
}

// hint suggests a name.
func (x *index) hint(name string) string {
	const few = 500 // for the sake of time
	if x.f.full() {
		return ""
	}
	var names []string
	for i, n := range x.names[:min(len(x.names), few)] {
		if x.ids[n] == i && n != "" { // the first of that name
			names = append(names, n)
		}
	}
	return didYouMean(name, names)
}

// goodName reports whether a name is made of letters, digits and - _ . only.
func goodName(name string) bool {
	if name == "" || len(name) > 64 {
		return false
	}
	for _, c := range name {
		if !unicode.IsLetter(c) && !unicode.IsDigit(c) && c != '-' && c != '_' && c != '.' {
			return false
		}
	}
	return true
}

// missing notes that a key of the mapping at p is not given, unless something
// was wrong in that mapping anyway.
func (r *resolver) missing(p *place, key, hint string) {
	near := p
	for near.node == nil && near.up != nil {
		near = near.up
	}
	if r.spoilt[near.node] {
		return
	}
	r.t.faults.add(p.pos(), join(p.key(), key), "is missing", hint)
}

// choice is the index of the word at p among words, or or if it is not given.
func (r *resolver) choice(p *place, w string, words []string, or int) int {
	if w == "" {
		if p.given() && p.node.Value == "" {
			p.fault(oneOf(words), "is empty")
		}
		return or
	}
	for i := range words {
		if words[i] == w {
			return i
		}
	}
	p.fault(didYouMean(w, words), "%q is not known here", w)
	return or
}

// value is *v, or or if v is nil.
func value[T any](v *T, or T) T {
	if v == nil {
		return or
	}
	return *v
}

// within is *v if it lies from least to most, else or; show writes the limits.
func within[T ~int | ~int64 | ~uint64 | ~float64](p *place, v *T, least, most, or T, show func(T) string) T {
	if v == nil {
		return or
	}
	if *v < least || *v > most {
		p.fault(fmt.Sprintf("write %s to %s", show(least), show(most)), "%s is out of range", show(*v))
		return or
	}
	return *v
}

// plain writes a number.
func plain(n int) string { return fmt.Sprint(n) }

// defaulted notes a default that was applied.
func (r *resolver) defaulted(key, value string) {
	r.s.Defaults = append(r.s.Defaults, key+" = "+value)
}
