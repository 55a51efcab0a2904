package workloads

import (
	"math"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
)

// What keyed draws of spurts are about. The index of a spell is
// flow<<32 | spell.
const (
	ofPlace uint64 = iota // where between two packets a flow is at the start
	ofState               // in which state
	ofLeft                // what is left of that spell
	ofOn
	ofOff
)

// A talker is one flow that alternates between sending and silence. While it
// sends, a packet is born per interval of sending time.
type talker struct {
	rest  des.Time // of sending time left in the spell, from its latest packet on
	due   des.Time // of its next packet
	spell uint32   // of the next draws
}

// Spurts sends the packets of flows that alternate between sending at one rate
// and silence, independently of each other: [NewOnOff] and [NewTalk] make it.
type Spurts struct {
	talkers  []talker // those that ever sent
	active   int      // of them, from the first on, those that send now
	turns    tournament
	count    int // of flows at factor 1
	on, off  spell
	interval des.Time
	size     uint16

	ahead       changes
	start, stop des.Time
	mean        float64 // bit/s
	seed, name  uint64
	seq         uint32
	way         uint16
}

// newSpurts returns count flows.
func newSpurts(c Common, count int, size uint16, interval des.Time, on, off spell) *Spurts {
	s := &Spurts{
		count: count, on: on, off: off, interval: interval, size: size,
		start: c.Start, stop: c.Stop,
		seed: c.Seed, name: random.Hash(c.Name), way: c.Way,
	}
	activity := on.mean / (on.mean + off.mean)
	s.mean = float64(count) * activity * float64(size) * 8 / interval.Seconds()
	s.setCount(c.Start, count)
	return s
}

// unit returns the uniform draw of index i about a quantity.
func (s *Spurts) unit(i, quantity uint64) float64 {
	return random.Unit(random.Draw(s.seed, s.name, i, quantity))
}

// met returns flow i as it is met at the start if it has run for ever.
func (s *Spurts) met(i uint64) talker {
	var t talker
	place := des.Time(s.unit(i, ofPlace) * float64(s.interval))
	if s.unit(i, ofState)*(s.on.mean+s.off.mean) < s.on.mean {
		t.rest = s.on.left(s.unit(i, ofLeft))
		if s.on.kind == geometricSpell {
			t.rest += place // units begin with packets
		}
		t.due = s.next(i, &t, s.start, place)
		return t
	}
	if s.on.kind == geometricSpell {
		place = 0
	}
	s.wake(i, &t)
	t.due = s.next(i, &t, s.start.Plus(s.off.left(s.unit(i, ofLeft))), place)
	return t
}

// wake gives flow i a new spell of sending.
func (s *Spurts) wake(i uint64, t *talker) {
	t.rest = s.on.draw(s.unit(i<<32|uint64(t.spell), ofOn))
	t.spell++
}

// next returns when flow i will have sent for need more, if at the instant at
// it is sending.
func (s *Spurts) next(i uint64, t *talker, at, need des.Time) des.Time {
	for need >= t.rest {
		need -= t.rest
		silence := s.off.draw(s.unit(i<<32|uint64(t.spell), ofOff))
		if at = at.Plus(t.rest).Plus(silence); at == des.Never {
			return at
		}
		s.wake(i, t)
	}
	t.rest -= need
	return at.Plus(need)
}

// setCount sets the number of flows from the instant at on. A flow that comes
// back is where it would be had it never been away.
func (s *Spurts) setCount(at des.Time, n int) {
	for i := range s.active {
		s.talkers[i].due = s.turns.of(uint32(i))
	}
	for i := len(s.talkers); i < n; i++ {
		s.talkers = append(s.talkers, s.met(uint64(i)))
	}
	due := make([]des.Time, n)
	for i := range due {
		t := &s.talkers[i]
		for t.due < at {
			t.due = s.next(uint64(i), t, t.due, s.interval)
		}
		due[i] = t.due
	}
	s.active, s.turns = n, newTournament(due)
}

// MeanRate implements [Source].
func (s *Spurts) MeanRate() float64 { return s.mean }

// Next implements nodes.Source.
func (s *Spurts) Next() des.Time {
	if at := s.turns.next(); at < s.stop {
		return at
	}
	return des.Never
}

// Emit implements nodes.Source.
func (s *Spurts) Emit(end des.Time, buf []nodes.Packet) []nodes.Packet {
	end = min(end, s.stop)
	for s.turns.next() < end {
		limit := min(end, s.ahead.until())
		for s.turns.next() < limit {
			id, due := s.turns.first()
			buf = longer(buf)
			birth(&buf[len(buf)-1], due, s.seq, id, s.way, s.size)
			s.seq++
			s.turns.set(id, s.next(uint64(id), &s.talkers[id], due, s.interval))
		}
		s.settle()
	}
	return buf
}

// settle makes the changes of load that lie before the next packet.
func (s *Spurts) settle() {
	for len(s.ahead.ahead) > 0 && s.ahead.until() <= s.turns.next() {
		x := s.ahead.take()
		s.setCount(max(x.at, s.start), int(math.Round(float64(s.count)*x.factor)))
	}
}

// Scale implements nodes.Source. The number of flows changes at once, the
// latest numbers going first.
func (s *Spurts) Scale(at des.Time, factor float64) {
	s.ahead.add(at, factor)
	s.settle()
}

// Clone implements nodes.Source.
func (s *Spurts) Clone() nodes.Source {
	c := *s
	c.talkers = append([]talker(nil), s.talkers...)
	c.turns = s.turns.clone()
	c.ahead = s.ahead.clone()
	return &c
}
