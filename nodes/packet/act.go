package packet

import (
	"fmt"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/optical"
)

// ActKind is what an outside act does.
type ActKind uint8

// Kinds of outside act, in the order in which they happen at one instant.
const (
	actSettled ActKind = iota // ends a stretch; its own
	actMeasure                // ends the warm-up; its own
	actEnd                    // the sources have ended; its own
	ActRepair
	ActMend
	ActCut
	ActFail
	ActScale
	ActOrder
)

// Act is something that happens from outside at one instant, between events.
type Act struct {
	At      des.Time
	Kind    ActKind
	Name    string        // for the log and the periods; may be empty
	Fibre   nodes.FibreID // cut, repair
	Where   des.Time      // cut: light from the fibre's first end to the place
	OneWay  bool          // cut: only direction Dir goes dark
	Dir     nodes.Direction
	Ways    []uint16        // scale
	Factor  float64         // scale
	Site    nodes.SiteID    // order: where the controller stands; fail, mend
	Part    Part            // fail, mend
	Circuit nodes.CircuitID // fail, mend: of PartPort
	Ref     any             // order: what it is told; nil if it knows already
	where   des.Time        // settled: the quiet since
}

// dated is an act in the agenda of acts.
type dated struct {
	Act
	no int
}

// When implements des.Dated.
func (d *dated) When() des.Time { return d.At }

// Before implements des.Dated.
func (d *dated) Before(o *dated) bool {
	if d.Kind != o.Kind {
		return d.Kind < o.Kind
	}
	return d.no < o.no
}

// Schedule adds an act; its instant must not lie before what has been run.
func (n *Network) Schedule(a Act) {
	if a.At < n.now {
		panic(fmt.Sprintf("packet: act at %v, now %v", a.At, n.now))
	}
	if a.Kind > actEnd { // how often the network looks whether it is settled must not show
		n.actNo++
	}
	n.acts.Put(dated{a, n.actNo})
}

// NextAct implements des.Model.
func (n *Network) NextAct() des.Time { return n.acts.Next() }

// Act implements des.Model.
func (n *Network) Act(now des.Time) {
	n.now = now
	for n.acts.Next() == now {
		a := n.acts.Take()
		n.act(now, &a)
	}
	n.markLoads(now)
	for _, s := range n.sites {
		s.now = now
		s.st.look(&n.history, now)
		if s.stale {
			s.rebuild()
		}
	}
	n.Edge(now, func(int) {})
}

func (n *Network) act(now des.Time, a *dated) {
	switch a.Kind {
	case actSettled:
		n.settled(now, a.where)
	case actMeasure:
		n.measure(now)
	case actEnd:
		n.end(now)
	case ActCut:
		n.faults++
		n.open(now, Hit, a.Name)
		n.cut(now, &a.Act)
	case ActRepair:
		n.open(now, Mend, a.Name)
		n.repair(now, &a.Act)
	case ActFail:
		n.faults++
		n.open(now, Hit, a.Name)
		n.fail(now, &a.Act)
	case ActMend:
		n.open(now, Mend, a.Name)
		n.mend(now, &a.Act)
	case ActScale:
		n.open(now, Change, a.Name)
		for _, w := range a.Ways {
			n.scale(now, w, a.Factor)
		}
		n.log = append(n.log, nodes.Event{At: now, Site: nodes.None, What: "scale", Subject: a.Name, Detail: fmt.Sprintf("to %g %%", a.Factor*100)})
	case ActOrder:
		n.open(now, Change, a.Name)
		if a.Ref != nil {
			n.sites[a.Site].book(nodes.Message{At: now, From: a.Site, To: a.Site, Op: nodes.OpOrder, Ref: a.Ref, Settles: true, N: int32(a.no)})
		}
	default:
		panic(fmt.Sprintf("packet: unknown act %d", a.Kind))
	}
}

// open starts the stretch of an act. A change ordered while something is
// broken, or while a fault has not settled, goes on counting as that.
func (n *Network) open(now des.Time, kind Kind, name string) {
	n.markAct(now)
	if kind == Change && (n.broken > 0 || n.unsettled && n.current() == Hit) {
		kind = Hit
	}
	n.history.open(Stretch{Kind: kind, From: now, Act: name, Fault: n.faults - 1, acted: true})
	n.unsettled = true
}

func (n *Network) current() Kind { return n.history.s[len(n.history.s)-1].Kind }

// settled ends a stretch if nothing has stirred since quiet began.
func (n *Network) settled(now, quiet des.Time) {
	if n.history.s[len(n.history.s)-1].From > quiet {
		return // another act came between
	}
	for _, s := range n.sites {
		if s.pending > 0 || s.lastAct > quiet {
			n.unsettled = true
			return
		}
	}
	kind := Normal
	if n.broken > 0 {
		kind = After
	}
	n.history.open(Stretch{Kind: kind, From: now, Fault: n.faults - 1})
}

// measure ends the warm-up.
func (n *Network) measure(now des.Time) {
	n.mark = true
	for _, s := range n.sites {
		s.markT = s.transit
		for i := range s.ports {
			s.ports[i].mark = s.ports[i].counters(now)
		}
		for i := range s.sources {
			s.sources[i].markP, s.sources[i].markB = s.sources[i].packets, s.sources[i].bytes
		}
	}
}

// end notes what ports did until the sources ended.
func (n *Network) end(now des.Time) {
	n.ended = true
	for _, s := range n.sites {
		for i := range s.ports {
			s.ports[i].final = s.ports[i].counters(now)
		}
	}
}

func (n *Network) scale(now des.Time, way uint16, factor float64) {
	a, d := nodes.AggOf(way)
	s := n.sites[n.plant.Aggregates[a].Origin(d)]
	if t := n.sites[n.plant.Aggregates[a].Target(d)]; t.hostOf != nil && t.hostOf[way] > 0 {
		t.scaleHost(now, way, factor)
	}
	if i := s.sourceOf(way); i >= 0 && s.sources[i].host == nil {
		s.sources[i].s.Scale(now, factor)
		s.next[i] = s.sources[i].s.Next()
		s.srcMin = des.Never
		for _, t := range s.next {
			if t < n.cfg.Length {
				s.srcMin = min(s.srcMin, t)
			}
		}
	}
}

// cut darkens a fibre at a place and books what its ends, and the ends of the
// circuits over it, will see.
func (n *Network) cut(now des.Time, a *Act) {
	f := a.Fibre
	fibre := &n.plant.Fibres[f]
	if !n.light.Dark(int(f), now) {
		n.broken++
	}
	dirs := optical.DirBoth
	if a.OneWay {
		dirs = 1 << a.Dir
	}
	span := n.light.Cut(int(f), a.Where, now, dirs)
	n.ways.Changed(now, func(g nodes.FibreID) bool { return n.light.Dark(int(g), now) })
	if a.Kind != ActFail {
		n.log = append(n.log, nodes.Event{At: now, Site: nodes.None, What: "cut", Subject: fibre.Name, Detail: n.place(f, a.Where)})
	}
	for i, end := range fibre.Ends {
		if !dirs.Has(fibre.From(fibre.Other(end))) {
			continue
		}
		gone := a.Where
		if i == 1 {
			gone = fibre.Delay - a.Where
		}
		n.sites[end].book(nodes.Message{At: now + gone + n.cfg.Detect, From: end, To: end, Op: nodes.OpFibreDark, Fibre: f, N: int32(span), Settles: true})
	}
	n.eachPipe(f, func(to *Site, p *pipe, before des.Time, dir nodes.Direction) {
		if !dirs.Has(dir) {
			return
		}
		place := a.Where
		if dir == nodes.Back {
			place = fibre.Delay - place
		}
		d := darkSpan{fibre: f, span: span, offset: before + place, from: now, to: des.Never}
		p.prune(now)
		p.darken(d)
		if p.open {
			to.book(nodes.Message{At: now + p.delay - d.offset + n.cfg.Detect, From: to.id, To: to.id, Op: nodes.OpLightLost, Circuit: p.circuit, N: p.incarnation, Settles: true})
		}
	})
}

// place words a place of a fibre by its distance from the fibre's first end.
func (n *Network) place(f nodes.FibreID, light des.Time) string {
	fibre := &n.plant.Fibres[f]
	km := float64(fibre.Length) / float64(nodes.Kilometre) * float64(light) / float64(fibre.Delay)
	return fmt.Sprintf("%.4g km from %s", km, n.plant.Sites[fibre.Ends[0]].Name)
}

// repair ends all darkness of a fibre but that of a failed site.
func (n *Network) repair(now des.Time, a *Act) {
	if n.repairOnly(now, a.Fibre, func(des.Time) bool { return true }) {
		n.log = append(n.log, nodes.Event{At: now, Site: nodes.None, What: "repair", Subject: n.plant.Fibres[a.Fibre].Name})
	}
}

// relit tells of spans of darkness of fibre f that have ended.
func (n *Network) relit(now des.Time, f nodes.FibreID, spans []int) {
	fibre := &n.plant.Fibres[f]
	if len(spans) == 0 {
		return
	}
	if !n.light.Dark(int(f), now) {
		n.broken--
	}
	n.ways.Changed(now, func(g nodes.FibreID) bool { return n.light.Dark(int(g), now) })
	for i, end := range fibre.Ends {
		gone, noticed := des.Time(0), false // light from the farthest dark place
		for _, j := range spans {
			sp := &n.light.Spans(int(f))[j]
			if !sp.Dirs.Has(fibre.From(fibre.Other(end))) {
				continue
			}
			far := sp.Place
			if i == 1 {
				far = fibre.Delay - far
			}
			gone = max(gone, far)
			noticed = noticed || now > sp.From+n.cfg.Detect
		}
		if noticed {
			n.sites[end].book(nodes.Message{At: now + gone + n.cfg.Detect, From: end, To: end, Op: nodes.OpFibreLit, Fibre: f, A: int64(gone), Settles: true})
		}
	}
	n.eachPipe(f, func(to *Site, p *pipe, before des.Time, dir nodes.Direction) {
		gone, lit := p.lighten(f, now, spans)
		if p.open && lit {
			to.book(nodes.Message{At: now + gone + n.cfg.Detect, From: to.id, To: to.id, Op: nodes.OpLightBack, Circuit: p.circuit, N: p.incarnation, Settles: true})
		}
	})
}

// eachPipe calls do for every pipe over fibre f, in the order of their
// receiving sites and keys.
func (n *Network) eachPipe(f nodes.FibreID, do func(to *Site, p *pipe, before des.Time, dir nodes.Direction)) {
	for _, s := range n.sites {
		for i := range s.inputs {
			p := s.inputs[i].pipe
			if ok, before, dir := p.over(n.plant, f); ok {
				do(s, p, before, dir)
			}
		}
	}
}
