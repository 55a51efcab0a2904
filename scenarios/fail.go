package scenarios

import (
	"strings"

	"ferrule/des"
	"ferrule/nodes"
)

// fail reads what a failure or its end is about: "router holm", "site holm",
// "port vx at tarn", or "fibre holm-ness", with from and to for one way of it.
func (l *actList) fail(p, q *place, text string, raw *rawAct, a *Act) {
	a.Subject = text
	words := strings.Fields(text)
	form := func() {
		q.fault("write for instance router holm, site holm, port vx at tarn or fibre holm-ness", "%q does not say what fails", text)
	}
	if text == "" {
		if q.node.Value == "" {
			form()
		}
		return
	}
	if words[0] != "fibre" {
		for _, d := range []*place{p.field("where"), p.field("from"), p.field("to")} {
			if d.given() {
				d.fault("leave it out", "belongs to a fibre")
			}
		}
	}
	switch {
	case words[0] == "router" && len(words) == 2, words[0] == "site" && len(words) == 2:
		a.Part = PartRouter
		if words[0] == "site" {
			a.Part = PartSite
		}
		a.Site = nodes.SiteID(l.r.sites.find(q, words[1]))
	case words[0] == "fibre" && len(words) == 2:
		a.Part, a.Subject = PartFibre, words[1]
		l.r.cut(p, q, raw, a)
		a.Subject = text
	case words[0] == "port" && len(words) == 4 && words[2] == "at":
		a.Part = PartPort
		a.Circuit = nodes.CircuitID(l.names.find(q, words[1]))
		a.Site = nodes.SiteID(l.r.sites.find(q, words[3]))
		if a.Circuit < 0 || a.Site < 0 {
			return
		}
		if c := &l.circuits[a.Circuit]; c.A >= 0 && c.A != a.Site && c.B != a.Site {
			q.fault("write "+l.r.s.Sites[c.A].Name+" or "+l.r.s.Sites[c.B].Name, "%s has no port at %s", words[1], words[3])
		}
	default:
		form()
	}
}

// span says what an act that begins or ends something is about.
type span struct {
	begins, ends Verb
	same         func(a, b *Act) bool
}

// spans are the pairs of verbs that contradict each other at one instant. The
// second ends what the first begins.
var spans = []span{
	{VerbCut, VerbRepair, func(a, b *Act) bool { return meet(a, b) }},
	{VerbFail, VerbMend, func(a, b *Act) bool {
		if a.Part == PartFibre && b.Part == PartFibre {
			return meet(a, b)
		}
		return a.Part == b.Part && a.Site == b.Site && a.Circuit == b.Circuit
	}},
	{VerbSetUp, VerbTearDown, func(a, b *Act) bool { return a.Circuit == b.Circuit }},
	{VerbDrain, VerbUndrain, func(a, b *Act) bool { return a.Site == b.Site }},
	{VerbMove, VerbReturn, func(a, b *Act) bool { return moves(a, b) }},
}

// meet says whether two acts are about a fibre in common.
func meet(a, b *Act) bool {
	for _, f := range a.Fibres {
		for _, g := range b.Fibres {
			if f == g {
				return true
			}
		}
	}
	return false
}

// moves says whether two acts are about a way in common. Ways are ascending.
func moves(a, b *Act) bool {
	for i, j := 0, 0; i < len(a.Moved) && j < len(b.Moved); {
		switch x, y := a.Moved[i].Way, b.Moved[j].Way; {
		case x == y:
			return true
		case x < y:
			i++
		default:
			j++
		}
	}
	return false
}

// agreeWork bounds how many ways and pairs of acts are compared, for the sake of
// time: of acts beyond it contradictions are not noted.
const agreeWork = 4 << 20

// thing is what can be broken and mended.
type thing struct {
	fibre   nodes.FibreID // or None
	part    Part
	site    nodes.SiteID
	circuit nodes.CircuitID
}

// things lists what an act breaks or mends.
func (a *Act) things() (list []thing) {
	switch {
	case a.Verb == VerbCut || a.Verb == VerbRepair || a.Part == PartFibre:
		for _, f := range a.Fibres {
			list = append(list, thing{fibre: f})
		}
	case a.Verb == VerbFail || a.Verb == VerbMend:
		if a.Part != PartNone && a.Site >= 0 {
			list = append(list, thing{nodes.None, a.Part, a.Site, a.Circuit})
		}
	}
	return list
}

// agree notes acts of one list that contradict each other at one instant, and
// repairs before there is anything to repair.
func (l *actList) agree(acts []Act, first int, raw []int) {
	if l.kind == inPlace {
		return
	}
	at := map[des.Time][]int{}     // looked up only: acts by instant
	broken := map[thing]des.Time{} // looked up only: since when, at first
	for i := range acts {
		a := &acts[i]
		if a.After == nodes.None {
			at[a.At] = append(at[a.At], i)
		}
		if a.Verb == VerbCut || a.Verb == VerbFail {
			for _, x := range a.things() {
				if since, ok := broken[x]; !ok || a.At < since {
					broken[x] = a.At
				}
			}
		}
	}
	work := 0
	for i := first; i < len(acts); i++ {
		b := &acts[i]
		where := l.list.item(raw[i-first])
		if b.Verb == VerbRepair || b.Verb == VerbMend {
			begun(b, broken, where)
		}
		if b.After != nodes.None {
			continue
		}
		for _, j := range at[b.At] {
			if work += 1 + len(acts[j].Moved) + len(b.Moved); j >= i || work > agreeWork {
				break
			}
			if contradict(&acts[j], b) {
				where.fault("give one of them another instant", "%s %s and %s %s contradict each other at %s",
					acts[j].Verb, acts[j].Subject, b.Verb, b.Subject, FormatTime(b.At))
				break
			}
		}
	}
}

// contradict says whether two acts at one instant cannot both be meant.
func contradict(a, b *Act) bool {
	for _, s := range spans {
		if (a.Verb == s.begins && b.Verb == s.ends || a.Verb == s.ends && b.Verb == s.begins) && s.same(a, b) {
			return true
		}
	}
	switch {
	case a.Verb != b.Verb:
		return false
	case a.Verb == VerbResize:
		return a.Circuit == b.Circuit && a.Slots != b.Slots
	case a.Verb == VerbScale:
		return moves(a, b) && a.Factor != b.Factor
	default:
		return false
	}
}

// begun notes a repair or a mending that nothing before it calls for.
func begun(b *Act, broken map[thing]des.Time, where *place) {
	later := des.Never
	for _, x := range b.things() {
		since, ok := broken[x]
		if ok && since <= b.At { // at one instant: noted by agree
			return
		}
		if ok {
			later = min(later, since)
		}
	}
	switch {
	case len(b.things()) == 0: // noted already
	case later != des.Never:
		where.fault("write a later instant", "%s %s at %s comes before what it is for, at %s", b.Verb, b.Subject, FormatTime(b.At), FormatTime(later))
	default:
		where.fault("cut or fail it first, or leave this out", "nothing before calls for %s %s", b.Verb, b.Subject)
	}
}
