package packet

import (
	"slices"

	"ferrule/des"
	"ferrule/nodes"
)

// tail is the receiving end of a 1+1 circuit. Its sender puts every packet on
// two trails; the tail passes what arrives whole on the one it has selected and
// discards what arrives on the other. It changes over by itself, without a word
// to the sender or the controller: when the selected trail has lost its light
// and the other has not, a switching time later.
//
// Both trails carry the same packets in the same order, and of each packet the
// copy on the shorter trail arrives first. So the tail knows, when the later
// one is due, what became of the earlier one: a packet is lost if neither has
// passed, and a duplicate if both have. What became of the earlier ones changes
// only at a change-over or at the edges of darkness; it is kept as runs.
type tail struct {
	pipes  [2]*pipe // the first trail's and that of the copies
	first  int8     // whose packets arrive first
	base   uint64   // packets the first trail took before there were copies
	picks  []pick   // what was selected, oldest first
	runs   []fates  // of what arrives first
	number int64    // of the wait-to-restore that runs
	hand   nodes.Packet
}

// pick is what a tail passes from an instant on.
type pick struct {
	from des.Time
	role int8
}

// fates is what became of packets from a number on.
type fates struct {
	from   uint64
	passed bool
	dark   bool // they met darkness
}

// picksKept is how long a change-over is remembered: longer than any packet
// spends in a forwarding engine.
const picksKept = 2 * des.Second

// selected reports what t passes at an instant, and since when.
func (t *tail) selected(at des.Time) pick {
	i := len(t.picks) - 1
	for i > 0 && t.picks[i].from > at {
		i--
	}
	return t.picks[i]
}

// now is what t passes at present.
func (t *tail) now() int8 { return t.picks[len(t.picks)-1].role }

// pick makes t pass the trail of a role from now on.
func (t *tail) pick(now des.Time, role int8) {
	for len(t.picks) > 1 && t.picks[1].from < now-picksKept {
		t.picks = slices.Delete(t.picks, 0, 1)
	}
	t.picks = append(t.picks, pick{now, role})
}

// passes reports whether t passes k, which has come whole on the trail of that
// role: it must have been selected from k's first bit to its last.
func (t *tail) passes(role int8, k *nodes.Packet) bool {
	p := t.selected(k.Due)
	if p.role != role {
		return false
	}
	if p.from == 0 {
		return true
	}
	q := t.pipes[role]
	return k.Due-q.serialisation(k.Due-q.delay, nodes.Bytes(k.Size)) >= p.from
}

// note keeps what became of packet number i of those that arrive first.
func (t *tail) note(i uint64, passed, dark bool) {
	if n := len(t.runs); n > 0 && t.runs[n-1].passed == passed && t.runs[n-1].dark == dark {
		return
	}
	t.runs = append(t.runs, fates{i, passed, dark})
}

// fateOf reports what became of packet number i on the trail that arrives
// first, and forgets what became of those before.
func (t *tail) fateOf(i uint64) fates {
	for len(t.runs) > 1 && t.runs[1].from <= i {
		t.runs = t.runs[:copy(t.runs, t.runs[1:])]
	}
	if len(t.runs) == 0 || t.runs[0].from > i {
		panic("packet: the later copy of a packet is due before the earlier")
	}
	return t.runs[0]
}

func (t *tail) clone(pipes map[*pipe]*pipe) *tail {
	c := *t
	c.pipes = [2]*pipe{pipes[t.pipes[0]], pipes[t.pipes[1]]}
	c.picks, c.runs = slices.Clone(t.picks), slices.Clone(t.runs)
	return &c
}

// openCopy makes p take a copy of all that the pipe of that incarnation takes.
func (q *port) openCopy(p *pipe, of int32, ways int) {
	if q.pipe == nil || q.pipe.incarnation != of {
		panic("packet: a copy of a trail that is not open")
	}
	if q.copy != nil {
		q.copy.open = false
	}
	if q.copied == nil {
		q.copied = make([]uint64, ways)
	}
	p.copies, p.base = of, q.pipe.tail
	q.copy = p
}

// double puts a copy of k, which has just been put on the first trail, on the
// second one.
func (q *port) double(k *nodes.Packet) {
	q.copy.push(k).Due += q.copy.delay - q.pipe.delay
	q.copied[k.Way]++
}

// closePipes ends the port's present trails; what is on them goes on.
func (q *port) closePipes() {
	if q.pipe != nil {
		q.pipe.open = false
	}
	if q.copy != nil {
		q.copy.open = false
		q.copy = nil
	}
}

// rank orders the pipes of a circuit at a site. A copy stands beside what it
// copies: before it if it is shorter, so that what arrives first is looked at
// first.
func (s *Site) rank(p *pipe) int32 {
	if p.copies == 0 {
		return 4 * p.incarnation
	}
	for i := range s.inputs {
		if o := s.inputs[i].pipe; o.circuit == p.circuit && o.incarnation == p.copies && p.delay < o.delay {
			return 4*p.copies - 1
		}
	}
	return 4*p.copies + 1
}

// addTail joins the pipe of copies p, an input already, to the one it copies.
func (s *Site) addTail(p *pipe) {
	t := &tail{base: p.base, picks: []pick{{}}}
	for i := range s.inputs {
		in := &s.inputs[i]
		switch {
		case in.pipe == p:
			in.tail, in.role, t.pipes[1] = t, 1, p
		case in.pipe.circuit == p.circuit && in.pipe.incarnation == p.copies:
			in.tail, in.role, t.pipes[0] = t, 0, in.pipe
		}
	}
	if t.pipes[0] == nil {
		panic("packet: a copy of a trail that is not known")
	}
	if p.delay < t.pipes[0].delay {
		t.first = 1
	}
	if s.discarded == nil {
		s.discarded = make([]uint64, len(s.hop))
	}
}

// discard counts a copy that goes no further.
func (s *Site) discard(way uint16) {
	if s.discarded == nil {
		s.discarded = make([]uint64, len(s.hop))
	}
	s.discarded[way]++
}

// receiveCopies is receive for a pipe of a 1+1 circuit.
func (s *Site) receiveCopies(i int, end des.Time, sorted bool) {
	in := &s.inputs[i]
	p, t, role := in.pipe, in.tail, in.role
	mask := uint64(len(p.rbuf) - 1)
	from := uint64(0)
	if role == 0 {
		from = t.base
	}
	for p.head != p.vis {
		k := &p.rbuf[p.head&mask]
		due := k.Due + in.lat.at(k.Due)
		if due >= end {
			return
		}
		no, alone := p.head-from, p.head < from
		p.head++
		dark := len(p.dark) > 0 && p.lost(k)
		passed := !dark && t.passes(role, k)
		surplus := false
		switch {
		case alone && !passed:
			s.lose(k, k.Due, causeOf(dark))
		case alone:
		case role == t.first:
			t.note(no, passed, dark)
			if !passed {
				s.discard(k.Way)
			}
		default:
			f := t.fateOf(no)
			surplus = f.passed
			if !passed && f.passed {
				s.discard(k.Way)
			} else if !passed {
				s.lose(k, k.Due, causeOf(dark || f.dark))
			}
		}
		if passed {
			if in.lat.varies && k.Seq%64 == 0 {
				s.latencies.Add(uint64(due-k.Due) / 1000)
			}
			t.hand = *k // what is in the pipe is only read
			if surplus {
				t.hand.Bits |= nodes.BitCopy
			}
			s.goOn(&t.hand, due, int32(i), sorted)
		}
	}
}

// causeOf is why a packet of which no copy has passed is lost.
func causeOf(dark bool) Cause {
	if dark {
		return LostCut
	}
	return LostSwitched
}

// goOn takes a packet that the tail has passed further, as receive does.
func (s *Site) goOn(k *nodes.Packet, due des.Time, key int32, sorted bool) {
	h := s.hop[k.Way]
	if h >= hopHeld {
		h = s.resolve(k.Way)
	}
	switch {
	case h >= 0 && k.TTL <= 1:
		s.lose(k, due, LostTTL)
	case h >= 0:
		if h >= hopSets {
			h = s.choose(k, h)
		}
		k.TTL--
		s.ports[h].in.put(k, key).Due = due
		s.transit += uint64(k.Size)
	case h == hopHere && sorted:
		s.sink.put(k, key).Due = due
	case h == hopHere:
		s.deliver(k, due)
	default:
		s.lose(k, due, noHop(h))
	}
}

// surplus counts a duplicate that leaves the network here.
//
//go:noinline
func (s *Site) surplus(k *nodes.Packet, due des.Time) {
	m := &s.net.meters[k.Way]
	stretch, _ := s.net.history.find(k.Born, due)
	if int(stretch) >= len(m.Cells) || m.Cells[stretch] == nil {
		m.cell(stretch)
	}
	m.Cells[stretch].Surplus++
}

// tailSees lets a tail act on news of the light of one of its trails, which
// the pipe already knows.
func (s *Site) tailSees(now des.Time, t *tail, role int8) {
	selected := t.now()
	if role == 0 {
		t.number++ // its wait-to-restore, if one runs, is over
	}
	lost, other := t.pipes[selected].told, t.pipes[1-selected].told
	switch c := t.pipes[0].circuit; {
	case lost && !other:
		to := t.pipes[1-selected].incarnation
		s.book(nodes.Message{At: now + s.net.cfg.Switch, From: s.id, To: s.id, Op: nodes.OpSwitch, Circuit: c, N: to, Settles: true})
	case role == 0 && selected == 1 && !other && s.net.cfg.Revert:
		s.book(nodes.Message{At: now.Plus(s.net.cfg.Wait), From: s.id, To: s.id, Op: nodes.OpReturn, Circuit: c, N: t.pipes[0].incarnation, A: t.number})
	}
}

// changeOver carries out what tailSees has booked, if there is still reason to.
func (s *Site) changeOver(now des.Time, m *nodes.Message) {
	for i := range s.inputs {
		in := &s.inputs[i]
		if in.tail == nil || in.pipe.circuit != m.Circuit || in.pipe.incarnation != m.N {
			continue
		}
		t := in.tail
		selected := t.now()
		if selected == in.role || in.pipe.told {
			return
		}
		what := "tail switched"
		if m.Op == nodes.OpReturn {
			if m.A != t.number {
				return
			}
			what = "tail returned"
		} else if !t.pipes[selected].told {
			return
		}
		t.pick(now, in.role)
		s.note(now, what, s.net.plant.Circuits[m.Circuit].Name)
		return
	}
}
