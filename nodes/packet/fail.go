package packet

import (
	"fmt"
	"slices"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/optical"
)

// Part is what of a site an act breaks or mends.
type Part uint8

// Parts of a site.
const (
	PartRouter Part = iota // the router; the cross-connect beside it lives
	PartSite               // router and cross-connect, and with it every fibre's end there
	PartPort               // the port of a circuit: it neither sends nor receives
)

// equipment is what else than a fibre can be dark: the sending or receiving
// side of a port, as a place of a pipe.
const equipment nodes.FibreID = nodes.None

// siteSpan is a span of darkness that a failed site has put on a fibre.
type siteSpan struct {
	site  nodes.SiteID
	fibre nodes.FibreID
	span  int
}

// fail breaks a part of a site.
func (n *Network) fail(now des.Time, a *Act) {
	s := n.sites[a.Site]
	switch a.Part {
	case PartRouter:
		n.logPart(now, "router failed", a)
		s.stopRouter(now, 1)
	case PartSite:
		n.logPart(now, "site failed", a)
		s.stopRouter(now, 1)
		for f := range n.plant.Fibres {
			fibre := &n.plant.Fibres[f]
			for e, end := range fibre.Ends {
				if end == a.Site {
					cut := Act{Kind: ActFail, Fibre: nodes.FibreID(f), Where: fibre.Delay * des.Time(e)}
					n.cut(now, &cut)
					n.siteSpans = append(n.siteSpans, siteSpan{a.Site, nodes.FibreID(f), len(n.light.Spans(f)) - 1})
				}
			}
		}
	case PartPort:
		n.logPart(now, "port failed", a)
		s.stopPort(now, a.Circuit, 1)
	default:
		panic(fmt.Sprintf("packet: unknown part %d of a site", a.Part))
	}
	n.broken++
}

// mend ends what fail has done.
func (n *Network) mend(now des.Time, a *Act) {
	s := n.sites[a.Site]
	switch a.Part {
	case PartRouter, PartSite:
		if s.deadRouter == 0 {
			return
		}
		what := "router mended"
		if a.Part == PartSite {
			what = "site mended"
		}
		n.logPart(now, what, a)
		s.stopRouter(now, -1)
		if a.Part == PartSite {
			n.relight(now, a.Site)
		}
	case PartPort:
		if q := s.portOfCircuit(a.Circuit); q == nil || q.dead == 0 {
			return
		}
		n.logPart(now, "port mended", a)
		s.stopPort(now, a.Circuit, -1)
	default:
		panic(fmt.Sprintf("packet: unknown part %d of a site", a.Part))
	}
	n.broken--
}

// relight ends the darkness that the failure of a site has put on its fibres.
func (n *Network) relight(now des.Time, site nodes.SiteID) {
	var fibres []nodes.FibreID
	keep := n.siteSpans[:0]
	for _, x := range n.siteSpans {
		if x.site != site {
			keep = append(keep, x)
			continue
		}
		fibres = append(fibres, x.fibre)
	}
	n.siteSpans = keep
	for _, f := range fibres {
		n.repairOnly(now, f, func(at des.Time) bool {
			e := slices.Index(n.plant.Fibres[f].Ends[:], site)
			return at == n.plant.Fibres[f].Delay*des.Time(e)
		})
	}
}

// ofSite reports whether a failed site accounts for a span of darkness.
func (n *Network) ofSite(f nodes.FibreID, span int) bool {
	return slices.ContainsFunc(n.siteSpans, func(x siteSpan) bool { return x.fibre == f && x.span == span })
}

func (n *Network) logPart(now des.Time, what string, a *Act) {
	subject := n.plant.Sites[a.Site].Name
	detail := ""
	if a.Part == PartPort {
		subject, detail = n.plant.Circuits[a.Circuit].Name, "at "+n.plant.Sites[a.Site].Name
	}
	n.log = append(n.log, nodes.Event{At: now, Site: nodes.None, What: what, Subject: subject, Detail: detail})
}

// stopRouter counts what keeps the router of s from working: a failure adds
// one, its mending takes it away. A router that does not work loses what comes
// to it, what waits in it and what is sent from it, and sends no light into the
// circuits that end there. Its cross-connect tells the agent.
func (s *Site) stopRouter(now des.Time, by int) {
	was := s.deadRouter > 0
	s.deadRouter += by
	is := s.deadRouter > 0
	if was == is {
		return
	}
	s.stale = true
	for i := range s.ports {
		s.darkPort(now, &s.ports[i], by, false)
	}
	s.bookEquipment(now, nodes.None, is)
}

// stopPort does the same for one port, in both directions.
func (s *Site) stopPort(now des.Time, c nodes.CircuitID, by int) {
	q := s.portOfCircuit(c)
	if q == nil {
		panic("packet: a port of a circuit that does not end here")
	}
	was := q.dead > 0
	q.dead += by
	if is := q.dead > 0; was != is {
		s.darkPort(now, q, by, true)
		s.bookEquipment(now, c, is)
	}
}

// bookEquipment has the agent told of its own equipment.
func (s *Site) bookEquipment(now des.Time, c nodes.CircuitID, lost bool) {
	m := nodes.Message{At: now + s.net.cfg.Detect, From: s.id, To: s.id, Op: nodes.OpEquipmentBack, Circuit: c, Settles: true}
	if lost {
		m.Op = nodes.OpEquipmentLost
	}
	s.book(m)
}

// darkPort ends or begins the light that a port sends, and with both also that
// which it receives.
func (s *Site) darkPort(now des.Time, q *port, by int, both bool) {
	n := s.net
	if by > 0 {
		q.flush(s, now, LostFailed)
	}
	for _, to := range n.sites {
		for i := range to.inputs {
			p := to.inputs[i].pipe
			if p.circuit != q.circuit {
				continue
			}
			switch {
			case p.from == s.id:
				n.darkPlace(to, p, now, 0, by)
			case both && p.to == s.id:
				n.darkPlace(to, p, now, p.delay, by)
			}
		}
	}
}

// darkPlace darkens or lights a place of a pipe at equipment.
func (n *Network) darkPlace(to *Site, p *pipe, now, offset des.Time, by int) {
	m := nodes.Message{From: to.id, To: to.id, Circuit: p.circuit, N: p.incarnation, Settles: true}
	if by > 0 {
		p.prune(now)
		p.darken(darkSpan{fibre: equipment, offset: offset, from: now, to: des.Never})
		m.At, m.Op = now+p.delay-offset+n.cfg.Detect, nodes.OpLightLost
		if p.open {
			to.book(m)
		}
		return
	}
	for i := range p.dark {
		if d := &p.dark[i]; d.fibre == equipment && d.offset == offset && d.to == des.Never {
			d.to = now
			m.At, m.Op = now+p.delay-offset+n.cfg.Detect, nodes.OpLightBack
			if p.open {
				to.book(m)
			}
			return
		}
	}
}

// darkEquipment darkens a new pipe where the equipment at its ends is broken. It
// has been so since the pipe was opened; its end sees that when light would
// have come.
func (n *Network) darkEquipment(to *Site, p *pipe) {
	opened := p.lines[0].from
	dark := func(offset des.Time) {
		p.darken(darkSpan{fibre: equipment, offset: offset, from: opened, to: des.Never})
		to.book(nodes.Message{
			At: opened + p.delay + n.cfg.Detect, From: to.id, To: to.id, Op: nodes.OpLightLost, Circuit: p.circuit, N: p.incarnation, Settles: true,
		})
	}
	from := n.sites[p.from]
	if q := from.portOfCircuit(p.circuit); q != nil {
		for range min(q.dead, 1) + min(from.deadRouter, 1) {
			dark(0)
		}
	}
	if q := to.portOfCircuit(p.circuit); q != nil && q.dead > 0 {
		dark(p.delay)
	}
}

// repairOnly ends the darkness of a fibre that lasts at the places for which
// at holds, and reports whether there was any.
func (n *Network) repairOnly(now des.Time, f nodes.FibreID, at func(place des.Time) bool) bool {
	spans := n.light.End(int(f), now, func(i int, sp optical.Span) bool { return at(sp.Place) && !n.ofSite(f, i) })
	n.relit(now, f, spans)
	return len(spans) > 0
}
