package scenarios

import (
	"fmt"
	"slices"
	"strings"

	"ferrule/nodes"
)

// Words for the types that nodes has, in the order of their values.
var (
	carriesWords     = []string{"routed", "moved"}
	recoveryWords    = []string{"none", "1+1", "restore"}
	whenDownWords    = []string{"return", "wait", "drop"}
	whenBlockedWords = []string{"stop", "undo"}
	chooseWords      = []string{"least-delay", "fewest-routers", "most-spare", "apart-from"}
)

// resolveCircuits reads the circuits that stand from the start.
func (r *resolver) resolveCircuits() {
	list := r.t.top().field("circuits")
	for i := range r.raw.Circuits {
		p := list.item(i)
		r.circuits.add(r, p, r.raw.Circuits[i].Name)
		c := r.circuit(p, &r.raw.Circuits[i])
		c.InPlace = true
		r.s.Circuits = append(r.s.Circuits, c)
	}
	for i := range r.raw.Circuits {
		r.apart(list.item(i), r.raw.Circuits[i].Choose, &r.s.Circuits[i], r.circuits)
	}
}

// circuitBase reads what a circuit can take from the defaults.
func (r *resolver) circuitBase(p *place, raw rawCircuit, or Circuit) Circuit {
	or.Carries = nodes.Carriage(r.choice(p.field("carries"), raw.Carries, carriesWords, int(or.Carries)))
	or.Recovery = nodes.Recovery(r.choice(p.field("recovery"), raw.Recovery, recoveryWords, int(or.Recovery)))
	or.WhenDown = nodes.WhenDown(r.choice(p.field("when-down"), raw.WhenDown, whenDownWords, int(or.WhenDown)))
	or.Framing = Framing(r.choice(p.field("framing"), raw.Framing, framingWords, int(or.Framing)))
	or.HoldOff = within(p.field("hold-off"), raw.HoldOff, 0, maxSpan, or.HoldOff, FormatTime)
	or.Shrink = value(raw.Shrink, or.Shrink)
	or.MTU = within(p.field("mtu"), raw.MTU, 64, maxPacket, or.MTU, FormatBytes)
	return or
}

// circuit reads one circuit. Circuits that it is to be apart from are found
// later, by apart, when all are known.
func (r *resolver) circuit(p *place, raw *rawCircuit) Circuit {
	c := r.circuitBase(p, *raw, r.base.circuit)
	c.Name, c.Pos = raw.Name, p.pos()
	r.route(p, raw, &c)
	c.Size, c.Slots, c.Payload = r.size(p, raw.Slots, raw.Container, raw.Channel)
	if c.Size == SizeContainer {
		c.Container = raw.Container
	}
	c.Rate = within(p.field("rate"), raw.Rate, 1, max(c.Payload, 1), c.Payload, FormatRate)
	if raw.Metric != nil {
		c.Metric = int64(within(p.field("metric"), raw.Metric, 1, 1<<40, 1, plain))
	}
	c.SetUpPriority, c.HoldingPriority = r.priorities(p, raw.SetUpPriority, raw.HoldingPriority, nodes.None)
	r.fits(p, &c, value(raw.Channel, 0))
	r.twoRoutes(p, &c)
	c.Policy = r.policy(p.field("policy"), &raw.Policy, &c)
	return c
}

// priorities reads the two priorities of RFC 3209; holding is never lower than
// set-up, or circuits would push each other out for ever.
func (r *resolver) priorities(p *place, setUp, holding *int, or int) (int, int) {
	s := within(p.field("set-up-priority"), setUp, 0, 7, or, plain)
	h := within(p.field("holding-priority"), holding, 0, 7, or, plain)
	if setUp != nil && holding == nil {
		h = s
	}
	if setUp != nil && holding != nil && s < h {
		p.field("holding-priority").fault(fmt.Sprintf("write 0 to %d (0 is the highest)", s),
			"a holding priority of %d is below the set-up priority of %d (RFC 3209)", h, s)
	}
	return s, h
}

// route reads between and along, which must agree.
func (r *resolver) route(p *place, raw *rawCircuit, c *Circuit) {
	between, along := p.field("between"), p.field("along")
	joined := false
	c.A, c.B = nodes.None, nodes.None
	switch {
	case between.given():
		c.A, c.B, joined = r.ends(between, raw.Between)
	case !along.given():
		r.missing(p, "between", "write between: [ a, b ] or along: [ fibre, ... ]")
	}
	if !along.given() {
		return
	}
	if p.field("choose").given() {
		p.field("choose").fault("leave out choose, or along", "the route is given, so there is nothing to choose")
	}
	var ids []nodes.FibreID
	for i, name := range raw.Along {
		id := r.fibres.find(along.item(i), name)
		if id < 0 || r.s.Fibres[id].A < 0 { // noted already
			return
		}
		ids = append(ids, nodes.FibreID(id))
	}
	switch {
	case len(ids) < len(along.node.Content): // noted already
	case len(ids) == 0 && r.spoilt[along.node]:
	case len(ids) == 0:
		along.fault("name the fibres in order", "names no fibre")
	case between.given() && !joined:
	case joined:
		c.Along = r.walk(along, ids, c.A, c.B)
	default:
		start := r.start(ids)
		if c.Along = r.walk(along, ids, start, nodes.None); c.Along != nil {
			c.A, c.B = start, r.end(ids, start)
		}
	}
}

// start is the end of the first fibre that the second does not touch.
func (r *resolver) start(ids []nodes.FibreID) nodes.SiteID {
	first := &r.s.Fibres[ids[0]]
	if len(ids) > 1 {
		if next := &r.s.Fibres[ids[1]]; first.A == next.A || first.A == next.B {
			if first.B != next.A && first.B != next.B {
				return first.B
			}
		}
	}
	return first.A
}

// end follows the fibres, which connect, from start.
func (r *resolver) end(ids []nodes.FibreID, at nodes.SiteID) nodes.SiteID {
	for _, id := range ids {
		at = r.across(id, at)
	}
	return at
}

// across is the far end of fibre id, seen from site at, or nodes.None.
func (r *resolver) across(id nodes.FibreID, at nodes.SiteID) nodes.SiteID {
	switch f := &r.s.Fibres[id]; at {
	case f.A:
		return f.B
	case f.B:
		return f.A
	default:
		return nodes.None
	}
}

// walk checks that the fibres lead from a to b (anywhere, if b is none)
// without passing a site twice.
func (r *resolver) walk(p *place, ids []nodes.FibreID, a, b nodes.SiteID) []nodes.FibreID {
	at, seen := a, []nodes.SiteID{a}
	for i, id := range ids {
		next := r.across(id, at)
		if next < 0 {
			f := &r.s.Fibres[id]
			p.item(i).fault("name the fibres in the order of the route", "%s joins %s and %s, and the route stands at %s",
				f.Name, r.s.Sites[f.A].Name, r.s.Sites[f.B].Name, r.s.Sites[at].Name)
			return nil
		}
		if slices.Contains(seen, next) {
			p.item(i).fault("leave out the loop", "the route comes to %s twice", r.s.Sites[next].Name)
			return nil
		}
		at = next
		seen = append(seen, at)
	}
	if b >= 0 && at != b {
		p.fault("name the fibres to "+r.s.Sites[b].Name, "the route ends at %s", r.s.Sites[at].Name)
		return nil
	}
	return ids
}

// fits checks the size of a circuit against the channels of its route; channel
// is the rate of a whole wavelength.
func (r *resolver) fits(p *place, c *Circuit, channel nodes.Rate) {
	for i, id := range c.Along {
		f, q := &r.s.Fibres[id], p.field("along").item(i)
		switch n, _ := channelSlots(f.ChannelRate); {
		case c.Size == SizeChannel && f.ChannelRate != channel:
			q.fault("write channel: "+FormatRate(f.ChannelRate),
				"the channels of %s have %s, not %s", f.Name, FormatRate(f.ChannelRate), FormatRate(channel))
		case c.Slots > n:
			q.fault("ask for fewer slots", "a channel of %s has %d slots, and the circuit needs %d of one channel", f.Name, n, c.Slots)
		}
	}
}

// apart reads choose, which can name other circuits: "apart-from th hn".
func (r *resolver) apart(p *place, text string, c *Circuit, all *index) {
	q := p.field("choose")
	word, rest, _ := strings.Cut(text, " ")
	c.Choose = nodes.Choice(r.choice(q, word, chooseWords, int(nodes.ChooseLeastDelay)))
	others := strings.Fields(strings.ReplaceAll(rest, ",", " "))
	switch {
	case text == "":
	case c.Choose != nodes.ChooseApart && len(others) > 0:
		q.fault("write "+word, "%s takes no names", word)
	case c.Choose == nodes.ChooseApart && len(others) == 0:
		q.fault("write for instance apart-from th", "apart-from needs the name of a circuit")
	}
	for _, name := range others {
		if c.Choose != nodes.ChooseApart {
			break
		}
		if name == c.Name {
			q.fault("name another", "a circuit cannot be apart from itself")
		} else if id, ok := all.ids[name]; ok {
			c.ApartFrom = append(c.ApartFrom, nodes.CircuitID(id))
		} else {
			const few = 500 // for the sake of time
			known := slices.DeleteFunc(slices.Clone(all.names[:min(len(all.names), few)]), func(n string) bool { return n == c.Name })
			q.fault(didYouMean(name, known), "no circuit is called %q", name)
			return
		}
	}
}
