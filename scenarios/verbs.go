package scenarios

import (
	"fmt"
	"slices"
	"strings"

	"ferrule/nodes"
)

// cut reads what a cut or a repair is about: a fibre or a risk group, a place
// on it, and the way.
func (r *resolver) cut(p, q *place, raw *rawAct, a *Act) {
	if a.Subject == "" {
		if q.node.Value == "" {
			q.fault("write the name of a fibre", "is empty")
		}
		return
	}
	where, from, to := p.field("where"), p.field("from"), p.field("to")
	id, ok := r.fibres.ids[a.Subject]
	if !ok {
		g, group := r.groups.ids[a.Subject]
		if !group {
			known := append(slices.Clone(r.fibres.names), r.groups.names...)
			q.fault(didYouMean(a.Subject, known[:min(len(known), 500)]), "no fibre or risk group is called %q", a.Subject)
			return
		}
		a.Fibres = r.s.RiskGroups[g].Fibres
		for _, d := range []*place{where, from, to} {
			if d.given() {
				d.fault("name one fibre", "%s is a risk group", a.Subject)
			}
		}
		if len(a.Fibres) == 1 {
			a.Where = r.s.Fibres[a.Fibres[0]].Length / 2
		}
		return
	}
	a.Fibres = []nodes.FibreID{nodes.FibreID(id)}
	f := &r.s.Fibres[id]
	a.Where = f.Length / 2
	if f.A < 0 { // noted already
		return
	}
	if where.given() && raw.Where != "" {
		l, bad := spot(raw.Where, f, r.s.Sites)
		if bad != nil {
			where.fault(bad.hint, "%s", bad.msg)
		} else {
			a.Where = l
		}
	}
	if !from.given() && !to.given() {
		return
	}
	x, y := nodes.SiteID(r.sites.find(from, raw.From)), nodes.SiteID(r.sites.find(to, raw.To))
	switch {
	case !from.given():
		r.missing(p, "from", "write from: and to: for one way, neither for both")
	case !to.given():
		r.missing(p, "to", "write from: and to: for one way, neither for both")
	case x < 0 || y < 0:
	case x == f.A && y == f.B:
		a.Ways = WaysOut
	case x == f.B && y == f.A:
		a.Ways = WaysBack
	default:
		from.fault("write the two ends of the fibre", "%s joins %s and %s", f.Name, r.s.Sites[f.A].Name, r.s.Sites[f.B].Name)
	}
}

// spot reads a place on a fibre, such as "120km from tarn", as the distance
// from its end A. Without a site it counts from there.
func spot(text string, f *Fibre, sites []Site) (nodes.Length, *fault) {
	length, site, named := strings.Cut(text, " from ")
	v, bad := lengthMeasure.parse(strings.TrimSpace(length))
	if bad != nil {
		return 0, bad
	}
	l := nodes.Length(v)
	if l < 0 || l > f.Length {
		return 0, &fault{
			msg:  fmt.Sprintf("%s is not on the fibre, which has %s", FormatLength(l), FormatLength(f.Length)),
			hint: "write 0km to " + FormatLength(f.Length),
		}
	}
	a, b := sites[f.A].Name, sites[f.B].Name
	switch site = strings.TrimSpace(site); {
	case !named || site == a:
		return l, nil
	case site == b:
		return f.Length - l, nil
	}
	return 0, &fault{msg: fmt.Sprintf("%q is not an end of %s", site, f.Name), hint: "write " + a + " or " + b}
}

// resize reads the new size of a circuit.
func (l *actList) resize(p, q *place, raw *rawAct, a *Act) {
	a.Circuit = nodes.CircuitID(l.names.find(q, raw.Resize))
	kind, n, payload := l.r.size(p, raw.Slots, raw.Container, raw.Channel)
	a.Slots, a.Payload = n, payload
	if a.Circuit < 0 {
		return
	}
	if was := l.circuits[a.Circuit].Size; (was == SizeChannel) != (kind == SizeChannel) || kind == SizeChannel {
		q.fault("tear it down and set up another", "a circuit of %s cannot be resized to %s", sizeText(was), sizeText(kind))
	}
}

// sizeText names a kind of size, for messages.
func sizeText(s CircuitSize) string {
	if s == SizeChannel {
		return "a channel"
	}
	return "slots"
}

// move reads which ways are moved onto which chain of circuits.
func (l *actList) move(p, q *place, raw *rawAct, a *Act) {
	r := l.r
	a.Order = Order(r.choice(p.field("order"), raw.Order, orderWords, int(OrderFree)))
	a.Moved = r.ways(q, raw.Move, false)
	onto := p.field("onto")
	if !onto.given() {
		r.missing(p, "onto", "write onto: [ circuit ]")
		return
	}
	if len(onto.node.Content) == 0 {
		onto.fault("write onto: [ circuit ], or return the aggregate", "names no circuit")
		return
	}
	sound := true
	for i, name := range raw.Onto {
		at := onto.item(i)
		id := nodes.CircuitID(l.names.find(at, name))
		switch {
		case id < 0:
			sound = false
			continue
		case slices.Contains(a.Onto, id):
			at.fault("name it once", "the circuit %s is named twice", name)
			sound = false
		case l.circuits[id].Carries != nodes.CarriesMoved:
			at.fault("write carries: moved at the circuit, or choose another", "the circuit %s carries routed traffic only", name)
		}
		a.Onto = append(a.Onto, id)
	}
	if !sound || len(a.Onto) == 0 || len(a.Onto) != len(onto.node.Content) {
		return
	}
	misfits, first, last := 0, "", nodes.AggID(nodes.None)
	for i := range a.Moved {
		m := &a.Moved[i]
		agg, dir := nodes.AggOf(m.Way)
		g := &r.s.Aggregates[agg]
		from, to := g.From, g.To
		if dir == nodes.Back {
			from, to = to, from
		}
		if from < 0 || to < 0 || l.leads(a.Onto, from, to) {
			continue
		}
		if m.Reverse = l.leads(a.Onto, to, from); m.Reverse {
			continue
		}
		if agg == last {
			continue
		}
		last = agg
		if misfits++; first == "" {
			first = fmt.Sprintf("%s goes from %s to %s", g.Name, r.s.Sites[from].Name, r.s.Sites[to].Name)
		}
	}
	if misfits == 1 {
		onto.fault("name circuits that join these sites", "%s, and the circuits do not", first)
	} else if misfits > 1 {
		onto.fault("name circuits that join these sites", "%s, and the circuits do not; nor do they suit %d more aggregates", first, misfits-1)
	}
}

// leads reports whether a chain of circuits leads from one site to another.
// Circuits whose ends were not read lead anywhere.
func (l *actList) leads(chain []nodes.CircuitID, from, to nodes.SiteID) bool {
	at := from
	for _, id := range chain {
		switch c := &l.circuits[id]; {
		case c.A < 0:
			return true
		case c.A == at:
			at = c.B
		case c.B == at:
			at = c.A
		default:
			return false
		}
	}
	return at == to
}

// ways finds the ways that a name or a pattern is about: an aggregate, one way
// of it (name.out, name.back), a pattern with *, and with wide also a class or
// a traffic.
func (r *resolver) ways(p *place, name string, wide bool) []MovedWay {
	if name == "" {
		if p.node.Value == "" {
			p.fault("write the name of an aggregate", "is empty")
		}
		return nil
	}
	var out []MovedWay
	add := func(i int) {
		out = append(out, MovedWay{Way: nodes.WayOf(nodes.AggID(i), nodes.Out)})
		if r.s.Aggregates[i].BothWays {
			out = append(out, MovedWay{Way: nodes.WayOf(nodes.AggID(i), nodes.Back)})
		}
	}
	if i, ok := r.aggregates.ids[name]; ok {
		add(i)
		return out
	}
	for dir, suffix := range []string{".out", ".back"} {
		base, cut := strings.CutSuffix(name, suffix)
		if i, ok := r.aggregates.ids[base]; cut && ok && (dir == 0 || r.s.Aggregates[i].BothWays) {
			return []MovedWay{{Way: nodes.WayOf(nodes.AggID(i), nodes.Direction(dir))}}
		}
	}
	class, isClass := r.classes.ids[name]
	traffic, isTraffic := r.traffic.ids[name]
	pattern := strings.Contains(name, "*") && len(name) <= maxPattern
	if !pattern && !(wide && (isClass || isTraffic)) {
		what := "aggregate"
		if wide {
			what = "aggregate, class or traffic"
		}
		p.fault(r.aggregates.hint(name), "no %s is called %q", what, name)
		return nil
	}
	if r.moved += len(r.s.Aggregates); r.moved > maxMoved {
		p.fault("use fewer patterns", "acts name more than %d aggregates together", maxMoved)
		return nil
	}
	for i := range r.s.Aggregates {
		g := &r.s.Aggregates[i]
		switch {
		case pattern && match(name, g.Name),
			!pattern && isClass && g.Class == nodes.ClassID(class),
			!pattern && !isClass && isTraffic && g.Traffic == traffic:
			add(i)
		}
	}
	if len(out) == 0 {
		p.fault("mind that aggregates of a matrix are called class.from.to", "%q is about no aggregate", name)
	}
	return out
}

// match reports whether name fits pattern, in which * stands for any
// characters, also none.
func match(pattern, name string) bool {
	parts := strings.Split(pattern, "*")
	if !strings.HasPrefix(name, parts[0]) {
		return false
	}
	name = name[len(parts[0]):]
	for _, part := range parts[1 : len(parts)-1] {
		i := strings.Index(name, part)
		if i < 0 {
			return false
		}
		name = name[i+len(part):]
	}
	return strings.HasSuffix(name, parts[len(parts)-1])
}
