package scenarios

import (
	"fmt"
	"slices"
	"strings"

	"ferrule/des"
	"ferrule/nodes"
)

// Limits on acts, so that patterns cannot cost much time or memory.
const (
	maxActs    = 10000   // in one list
	maxMoved   = 4 << 20 // ways named by all acts together
	maxPattern = 200     // characters of a pattern
)

// kindOfList says in which list of the file acts stand.
type kindOfList uint8

const (
	inTimeline kindOfList = iota
	inPlace
	inSteps
)

// verbKey is a key of an act that says what is done.
type verbKey struct {
	key     string
	verb    Verb
	details []string
	in      []kindOfList
}

// verbKeys are the keys of verbs with their details and the lists they may
// stand in.
var verbKeys = []verbKey{
	{"cut", VerbCut, []string{"where", "from", "to"}, []kindOfList{inTimeline}},
	{"repair", VerbRepair, []string{"where", "from", "to"}, []kindOfList{inTimeline}},
	{"set-up", VerbSetUp, nil, []kindOfList{inTimeline, inSteps}},
	{"circuit", VerbSetUp, nil, []kindOfList{inPlace}},
	{"tear-down", VerbTearDown, nil, []kindOfList{inTimeline, inPlace, inSteps}},
	{"resize", VerbResize, []string{"slots", "container", "channel"}, []kindOfList{inTimeline, inPlace, inSteps}},
	{"move", VerbMove, []string{"onto", "order"}, []kindOfList{inTimeline, inPlace, inSteps}},
	{"return", VerbReturn, []string{"order"}, []kindOfList{inTimeline, inPlace, inSteps}},
	{"scale", VerbScale, []string{"by"}, []kindOfList{inTimeline}},
	{"fail", VerbFail, []string{"where", "from", "to"}, []kindOfList{inTimeline}},
	{"mend", VerbMend, []string{"where", "from", "to"}, []kindOfList{inTimeline}},
	{"drain", VerbDrain, nil, []kindOfList{inTimeline, inSteps}},
	{"undrain", VerbUndrain, nil, []kindOfList{inTimeline, inSteps}},
}

// events are what an act can wait for, and the verb that brings it about.
var events = []struct {
	word string
	verb Verb
}{{"up", VerbSetUp}, {"gone", VerbTearDown}, {"resized", VerbResize}, {"moved", VerbMove}, {"returned", VerbReturn}, {"drained", VerbDrain}, {"undrained", VerbUndrain}}

// actList is one list of acts at work, and the circuits it knows.
type actList struct {
	r        *resolver
	list     *place
	raw      []rawAct
	kind     kindOfList
	circuits []Circuit
	names    *index
	own      []nodes.CircuitID // the circuit that raw act i sets up, or nodes.None
}

// resolveTimeline reads the acts that happen under every plan.
func (r *resolver) resolveTimeline() {
	l := &actList{
		r: r, list: r.t.top().field("timeline"), raw: r.raw.Timeline, kind: inTimeline,
		circuits: r.s.Circuits, names: r.circuits,
	}
	l.register()
	r.s.Circuits = l.circuits
	r.s.Timeline = l.resolve(nil)
}

// register makes the circuits that the acts set up known by name.
func (l *actList) register() {
	if len(l.raw) > maxActs {
		l.list.fault(fmt.Sprintf("write %d at most", maxActs), "%d acts are too many", len(l.raw))
		l.raw = l.raw[:maxActs]
	}
	first := len(l.circuits)
	l.own = make([]nodes.CircuitID, len(l.raw))
	circuits := make([]*place, 0, 8)
	for i := range l.raw {
		p := l.list.item(i)
		l.own[i] = nodes.None
		q, raw := p.field("set-up"), &l.raw[i].SetUp
		if !q.given() {
			q, raw = p.field("circuit"), &l.raw[i].Circuit
		}
		if !q.given() {
			continue
		}
		l.own[i] = nodes.CircuitID(l.names.add(l.r, q, raw.Name))
		c := l.r.circuit(q, raw)
		c.InPlace = l.kind == inPlace
		l.circuits = append(l.circuits, c)
		circuits = append(circuits, q)
	}
	for i, q := range circuits {
		c := &l.circuits[first+i]
		text := ""
		if q.field("choose").given() {
			text = q.field("choose").node.Value
		}
		l.r.apart(q, text, c, l.names)
	}
}

// resolve reads the acts and appends them to earlier, the acts of the plans
// beneath.
func (l *actList) resolve(earlier []Act) []Act {
	acts := slices.Clone(earlier)
	waits := make([]int, 0, len(l.raw)) // index in raw of each act
	for i := range l.raw {
		if a, ok := l.act(i); ok {
			acts = append(acts, a)
			waits = append(waits, i)
		}
	}
	for j, i := range waits {
		v := acts[len(earlier)+j].Verb
		outside := v.Outside() // noted by when
		if q := l.list.item(i).field("after"); q.given() && l.kind != inPlace && !outside {
			acts[len(earlier)+j].After = l.after(q, l.raw[i].After, acts, len(earlier)+j)
		}
	}
	l.rings(acts, len(earlier), waits)
	l.agree(acts, len(earlier), waits)
	return acts
}

// act reads one act; ok is false if it has no verb that can be carried out.
func (l *actList) act(i int) (a Act, ok bool) {
	raw, p := &l.raw[i], l.list.item(i)
	a = Act{Pos: p.pos(), After: nodes.None, Circuit: nodes.None}
	verb := l.verb(p)
	l.when(p, raw, &a)
	if verb < 0 {
		return a, false
	}
	v := &verbKeys[verb]
	for _, key := range []string{"where", "from", "to", "slots", "container", "channel", "onto", "order", "by"} {
		if q := p.field(key); q.given() && !slices.Contains(v.details, key) {
			hint := v.key + " takes no details"
			if len(v.details) > 0 {
				hint = v.key + " takes " + strings.Join(v.details, ", ")
			}
			q.fault(hint, "does not belong to %s", v.key)
		}
	}
	a.Verb = v.verb
	q := p.field(v.key)
	switch a.Verb {
	case VerbCut:
		a.Subject = raw.Cut
		l.r.cut(p, q, raw, &a)
	case VerbRepair:
		a.Subject = raw.Repair
		l.r.cut(p, q, raw, &a)
	case VerbSetUp:
		a.Circuit = l.own[i]
		c := &l.circuits[a.Circuit]
		a.Subject, a.Slots, a.Payload = c.Name, c.Slots, c.Payload
	case VerbTearDown:
		a.Subject = raw.TearDown
		a.Circuit = nodes.CircuitID(l.names.find(q, raw.TearDown))
	case VerbResize:
		a.Subject = raw.Resize
		l.resize(p, q, raw, &a)
	case VerbMove:
		a.Subject = raw.Move
		l.move(p, q, raw, &a)
	case VerbReturn:
		a.Subject = raw.Return
		a.Order = Order(l.r.choice(p.field("order"), raw.Order, orderWords, int(OrderFree)))
		a.Moved = l.r.ways(q, raw.Return, false)
	case VerbScale:
		a.Subject = raw.Scale
		a.Moved = l.r.ways(q, raw.Scale, true)
		if !p.field("by").given() {
			l.r.missing(p, "by", "write for instance by: 130%")
		}
		a.Factor = float64(within(p.field("by"), raw.By, 0, 1000, 1, func(x percent) string {
			return fmt.Sprintf("%g%%", float64(x)*100)
		}))
	case VerbFail:
		l.fail(p, q, raw.Fail, raw, &a)
	case VerbMend:
		l.fail(p, q, raw.Mend, raw, &a)
	case VerbDrain:
		a.Subject = raw.Drain
		a.Site = nodes.SiteID(l.r.sites.find(q, raw.Drain))
	case VerbUndrain:
		a.Subject = raw.Undrain
		a.Site = nodes.SiteID(l.r.sites.find(q, raw.Undrain))
	default:
		panic("scenarios: unknown verb " + a.Verb.String())
	}
	return a, true
}

// verb finds the one verb of an act: its index in verbKeys, or -1 after a
// fault.
func (l *actList) verb(p *place) int {
	found := -1
	var words []string
	for i := range verbKeys {
		v := &verbKeys[i]
		if slices.Contains(v.in, l.kind) {
			words = append(words, v.key)
		}
		q := p.field(v.key)
		switch {
		case !q.given():
		case found >= 0:
			q.fault("write one act for each", "the act has two verbs, %s and %s", verbKeys[found].key, v.key)
		default:
			found = i
		}
	}
	if found < 0 {
		if !l.r.spoilt[p.node] {
			p.fault(oneOf(words), "the act has no verb")
		}
		return -1
	}
	v := &verbKeys[found]
	q := p.field(v.key)
	switch {
	case slices.Contains(v.in, l.kind):
		return found
	case v.key == "set-up":
		q.fault("write circuit:", "what is in place is not set up")
	case v.key == "circuit":
		q.fault("write set-up:", "circuit is for what a plan has in place")
	default:
		q.fault("put it into the timeline", "a plan changes the network, and %s does not", v.key)
	}
	return -1
}

// when reads at and after.
func (l *actList) when(p *place, raw *rawAct, a *Act) {
	at, after := p.field("at"), p.field("after")
	if l.kind == inPlace {
		for _, q := range []*place{at, after} {
			if q.given() {
				q.fault("leave it out, or move the act to steps", "what is in place has no instant")
			}
		}
		return
	}
	a.At = des.Never
	switch {
	case at.given() && after.given():
		after.fault("write at or after", "stands beside at")
	case after.given() && slices.ContainsFunc(verbKeys, func(v verbKey) bool { return v.verb.Outside() && p.field(v.key).given() }):
		after.fault("write at: and an instant", "what happens from outside waits for nothing")
	case at.given():
		a.At = value(raw.At, 0)
		if raw.At != nil && a.At > l.r.s.Run.Length && l.r.raw.Run.Length != nil {
			at.fault("write an earlier instant, or a longer run", "%s is after the end of the run at %s",
				FormatTime(a.At), FormatTime(l.r.s.Run.Length))
		}
	case !after.given():
		l.r.missing(p, "at", "write for instance at: 6s")
	}
}

// after finds the act that must be completed first: "vx up". Of several that
// bring it about, the last one before act self counts, else the first.
func (l *actList) after(q *place, text string, acts []Act, self int) int {
	if text == "" {
		return nodes.None
	}
	name, word, _ := strings.Cut(text, " ")
	words := make([]string, len(events))
	verb := -1
	for i, e := range events {
		words[i] = e.word
		if e.word == strings.TrimSpace(word) {
			verb = int(e.verb)
		}
	}
	if verb < 0 {
		q.fault("write a name and one of "+strings.Join(words, ", ")+", such as vx up", "%q is not an event", text)
		return nodes.None
	}
	found := nodes.None
	for i := range acts {
		if int(acts[i].Verb) == verb && acts[i].Subject == name && (found < 0 || i < self) {
			found = i
		}
	}
	if found < 0 {
		q.fault("wait for what a step does", "no step brings about %q", text)
	}
	return found
}

// rings finds acts that wait for each other; each ring is noted once, at its
// first act.
func (l *actList) rings(acts []Act, first int, raw []int) {
	const fresh, open, done = 0, 1, 2
	state := make([]uint8, len(acts))
	for i := range acts {
		var way []int
		j := i
		for ; j >= 0 && state[j] == fresh; j = acts[j].After {
			state[j] = open
			way = append(way, j)
		}
		if j >= 0 && state[j] == open {
			ring := way[slices.Index(way, j):]
			var names []string
			for _, k := range ring {
				names = append(names, acts[k].Verb.String()+" "+acts[k].Subject)
			}
			low := slices.Min(ring)
			if low >= first {
				l.list.item(raw[low-first]).field("after").fault("give one of them an instant: at:",
					"waits for itself: %s", strings.Join(append(names, names[0]), " after "))
			}
		}
		for _, k := range way {
			state[k] = done
		}
	}
}
