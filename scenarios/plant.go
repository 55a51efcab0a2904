package scenarios

import (
	"fmt"
	"math"
	"slices"

	"ferrule/nodes"
)

// resolveSites reads the sites.
func (r *resolver) resolveSites() {
	list := r.t.top().field("sites")
	if !list.given() || len(r.raw.Sites) == 0 && !r.spoilt[list.node] {
		r.missing(r.t.top(), "sites", "write at least two sites")
	}
	for i := range r.raw.Sites {
		raw, p := &r.raw.Sites[i], list.item(i)
		s := Site{Name: raw.Name, Pos: p.pos(), Convert: value(raw.Convert, false)}
		r.sites.add(r, p, raw.Name)
		if q := p.field("position"); q.given() {
			s.X, s.Y, s.Placed = position(q, raw.Position)
		}
		s.Forwarding = r.forwarding(p.field("router"), raw.Router, r.base.forward)
		r.s.Sites = append(r.s.Sites, s)
	}
}

// position reads a point on a plane.
func position(p *place, at []nodes.Length) (x, y nodes.Length, ok bool) {
	if len(p.node.Content) != 2 {
		p.fault("write [ 120km, 80km ]", "a position has two lengths, not %d", len(p.node.Content))
		return 0, 0, false
	}
	if len(at) != 2 {
		return 0, 0, false
	}
	for i := range at {
		if at[i] < -maxPlane || at[i] > maxPlane {
			p.item(i).fault("write at most "+FormatLength(maxPlane), "%s is out of range", FormatLength(at[i]))
			return 0, 0, false
		}
	}
	return at[0], at[1], true
}

// airline is the straight distance of two sites, rounded down. The products are
// rounded before they are added, so that every machine gives the same.
func airline(a, b *Site) nodes.Length {
	dx, dy := float64(a.X-b.X), float64(a.Y-b.Y)
	return nodes.Length(math.Sqrt(float64(dx*dx) + float64(dy*dy)))
}

// ends finds the two sites of "between: [a, b]"; after a fault ok is false and
// both are none.
func (r *resolver) ends(p *place, between []string) (a, b nodes.SiteID, ok bool) {
	if n := len(p.node.Content); n != 2 {
		if !r.spoilt[p.node] {
			p.fault("write [ a, b ]", "joins two sites, not %d", n)
		}
		return nodes.None, nodes.None, false
	}
	if len(between) != 2 {
		return nodes.None, nodes.None, false
	}
	x, y := r.sites.find(p.item(0), between[0]), r.sites.find(p.item(1), between[1])
	if x < 0 || y < 0 {
		return nodes.None, nodes.None, false
	}
	if x == y {
		p.fault("write two different sites", "joins %s to itself", between[0])
		return nodes.None, nodes.None, false
	}
	return nodes.SiteID(x), nodes.SiteID(y), true
}

// fibreBase reads what a fibre can take from the defaults.
func (r *resolver) fibreBase(p *place, raw rawFibreDefaults, or Fibre) Fibre {
	or.Channels = within(p.field("channels"), raw.Channels, 1, 1000, or.Channels, plain)
	or.ChannelRate = value(raw.ChannelRate, or.ChannelRate)
	if _, ok := channelSlots(or.ChannelRate); !ok {
		p.field("channel-rate").fault(channelHint, "%s is not the rate of a channel", FormatRate(or.ChannelRate))
		or.ChannelRate = defaultChannelRate
	}
	or.Lit = within(p.field("lit"), raw.Lit, 0, 1000, or.Lit, plain)
	if or.Lit > or.Channels {
		q := p.field("lit")
		if !q.given() {
			q = p.field("channels")
		}
		q.fault("light fewer channels, or have more", "%d channels are lit, and there are %d", or.Lit, or.Channels)
		or.Lit = or.Channels
	}
	return or
}

// resolveFibres reads the fibres and their risk groups.
func (r *resolver) resolveFibres() {
	list := r.t.top().field("fibres")
	for i := range r.raw.Fibres {
		raw, p := &r.raw.Fibres[i], list.item(i)
		f := r.fibreBase(p, rawFibreDefaults{raw.Channels, raw.ChannelRate, raw.Lit}, r.base.fibre)
		f.Name, f.Pos, f.A, f.B = raw.Name, p.pos(), nodes.None, nodes.None
		perChannel, _ := channelSlots(f.ChannelRate)
		f.Slots = f.Lit * perChannel
		joined := false
		if q := p.field("between"); q.given() {
			f.A, f.B, joined = r.ends(q, raw.Between)
		} else {
			r.missing(p, "between", "write between: [ a, b ]")
		}
		if !p.field("name").given() && len(raw.Between) == 2 {
			f.Name = raw.Between[0] + "-" + raw.Between[1]
		}
		r.addFibre(p, f.Name)
		f.Length = r.fibreLength(p, raw.Length, &f, joined)
		f.RiskGroups = r.riskGroups(p.field("risk-groups"), raw.RiskGroups, nodes.FibreID(i))
		r.s.Fibres = append(r.s.Fibres, f)
	}
}

// addFibre registers a fibre; one without a name is called after its ends.
func (r *resolver) addFibre(p *place, name string) {
	if p.field("name").given() || name == "" {
		if name == "" && !p.field("name").given() {
			r.fibres.names = append(r.fibres.names, "")
			r.fibres.where = append(r.fibres.where, p.pos())
			return
		}
		r.fibres.add(r, p, name)
		return
	}
	id := len(r.fibres.names)
	if _, taken := r.fibres.ids[name]; taken {
		p.fault("give it a name: of its own", "the name %q is taken", name)
	} else {
		r.fibres.ids[name] = id
	}
	r.fibres.names = append(r.fibres.names, name)
	r.fibres.where = append(r.fibres.where, p.pos())
}

// fibreLength reads the length of a fibre, or makes it longer than the airline
// by the usual detour.
func (r *resolver) fibreLength(p *place, raw *nodes.Length, f *Fibre, joined bool) nodes.Length {
	q := p.field("length")
	var line nodes.Length
	placed := false
	if joined {
		a, b := &r.s.Sites[f.A], &r.s.Sites[f.B]
		line, placed = airline(a, b), a.Placed && b.Placed
	}
	switch {
	case raw != nil:
		l := within(q, raw, nodes.Metre, maxFibre, nodes.Kilometre, FormatLength)
		if l == *raw && placed && l < line {
			q.fault("write at least "+upTo(line)+", or move the sites",
				"%s is shorter than the straight line of %s", FormatLength(l), upTo(line))
		}
		return l
	case q.given() || !joined: // noted already
		return nodes.Kilometre
	case !placed:
		r.missing(p, "length", "write the length, or the position of both sites")
		return nodes.Kilometre
	}
	l := max(line*detourNum/detourDen, nodes.Metre)
	r.defaulted("fibres."+f.Name+".length", fmt.Sprintf("%s (%d/%d of the straight line)", FormatLength(l), detourNum, detourDen))
	return l
}

// upTo writes a length rounded up to a metre.
func upTo(l nodes.Length) string {
	return FormatLength((l + nodes.Metre - 1) / nodes.Metre * nodes.Metre)
}

// riskGroups registers a fibre with the groups it names.
func (r *resolver) riskGroups(p *place, names []string, f nodes.FibreID) []int {
	var out []int
	for i, name := range names {
		q := p.item(i)
		if !goodName(name) {
			q.fault("use letters, digits, - _ and . only, 64 at most", "%q is not a name", name)
			continue
		}
		id, ok := r.groups.ids[name]
		if !ok {
			id = len(r.groups.names)
			r.groups.ids[name] = id
			r.groups.names = append(r.groups.names, name)
			r.s.RiskGroups = append(r.s.RiskGroups, RiskGroup{Name: name, Pos: q.pos()})
		}
		if slices.Contains(out, id) {
			q.fault("name it once", "the risk group %q is named twice", name)
			continue
		}
		out = append(out, id)
		r.s.RiskGroups[id].Fibres = append(r.s.RiskGroups[id].Fibres, f)
	}
	slices.Sort(out)
	return out
}
