package transport

import (
	"ferrule/des"
	"ferrule/nodes"
)

// phase is how a sender stands to losses.
type phase uint8

const (
	phaseOpen     phase = iota // no loss is known
	phaseRecovery              // a loss was inferred; until all sent before it is acknowledged
	phaseTimeout               // the timer ran out; likewise
)

// state is that of a sender or a client.
type state uint8

const (
	stateIdle     state = iota
	stateOpening        // server: it has answered; client: it has asked
	stateAsked          // client: it has confirmed and waits for data
	stateMoving         // data flow
	stateComplete       // all is there; kept to answer what comes late
)

// Flags of a segment under way, in the low bits of its mark; the rest is when
// it was last sent, in ns.
const (
	flagSacked = 1 << iota
	flagLost
	flagResent
	flagBits = 3
)

// sender is the sending end of one transfer.
type sender struct {
	window
	rtt
	timer
	state state
	phase phase
	gen   uint8

	total    uint32 // segments
	lastSize uint16 // payload of the last one
	una      uint32 // the first not acknowledged
	nxt      uint32 // the next never sent
	recover  uint32 // phases end when it is acknowledged
	lostTo   uint32 // those before it have been looked at for losses
	resend   uint32 // no lost segment that waits to be sent again lies before it
	reacted  uint32 // marks of congestion are not answered again before it
	waiting  int32  // lost, not sent again
	pipe     int32  // segments thought to be in the network
	sacked   int32  // segments between una and nxt known to have arrived
	dups     int32  // acknowledgements in a row that brought nothing new in order
	top      [3]uint32
	tell     bool // the next new segment tells that the window was reduced

	greeted des.Time // when the handshake was answered; Never: more than once
	marks   []uint64 // ring by number
}

func (s *sender) mark(no uint32) *uint64 { return &s.marks[no&uint32(len(s.marks)-1)] }

// leaves takes a segment that is known to have arrived out of the pipe.
func (s *sender) leaves(m uint64) {
	switch {
	case m&flagLost == 0:
		s.pipe--
	case m&flagResent != 0:
		s.pipe--
	default:
		s.waiting--
	}
}

// acked takes an acknowledgement: of all before next, and of the one that lies
// beyond it if beyond is not 0.
func (h *Host) acked(s *sender, now des.Time, next, beyond uint32, echo bool) {
	if next-s.una > s.nxt-s.una { // of what was not sent or is long acknowledged
		return
	}
	advanced := int(next - s.una)
	var measured des.Time = -1
	for ; s.una != next; s.una++ {
		m := s.mark(s.una)
		if *m&flagSacked == 0 {
			s.leaves(*m)
			if *m&flagResent == 0 {
				measured = now - des.Time(*m>>flagBits)*des.Nanosecond
			}
		} else {
			s.sacked--
		}
		*m = 0
	}
	news := false
	if no := next + beyond; beyond != 0 && no-s.una < s.nxt-s.una {
		if m := s.mark(no); *m&flagSacked == 0 {
			news = true
			s.leaves(*m)
			if *m&flagResent == 0 {
				measured = now - des.Time(*m>>flagBits)*des.Nanosecond
			}
			*m |= flagSacked
			s.sacked++
			s.higher(no)
		}
	}
	if measured >= 0 {
		s.rtt.sample(measured)
	}
	if advanced > 0 {
		s.dups = 0
		s.lostTo, s.resend = later(s.lostTo, s.una), later(s.resend, s.una)
		h.advanced(s, now, advanced)
	} else if news || beyond == 0 && s.nxt != s.una {
		s.dups++
	}
	if echo && s.phase == phaseOpen && int32(s.una-s.reacted) >= 0 {
		s.reduce(h.serve.Algorithm, min(float64(s.nxt-s.una), s.cwnd))
		s.reacted, s.tell = s.nxt, true
	}
	forced := h.infer(s)
	if s.una == s.total {
		h.finish(s)
		return
	}
	if advanced > 0 {
		s.timer.at = des.Never
	}
	h.push(s, now, forced)
}

// advanced answers n segments acknowledged in order.
func (h *Host) advanced(s *sender, now des.Time, n int) {
	over := int32(s.una-s.recover) >= 0
	if over && s.phase != phaseOpen && len(s.marks) > leastRing && int(s.nxt-s.una) < len(s.marks)/8 {
		h.resize(s, len(s.marks)/4) // a segment lost twice has made it long
	}
	switch s.phase {
	case phaseRecovery:
		if h.serve.Algorithm == Reno {
			s.forget()
			s.phase = phaseOpen
		} else if over {
			s.phase = phaseOpen
		}
		return
	case phaseTimeout:
		if over {
			s.phase = phaseOpen
		}
		s.grow(h.serve.Algorithm, now, s.smooth, n, 1)
	case phaseOpen:
		s.grow(h.serve.Algorithm, now, s.smooth, n, 2)
	default:
		panic("transport: unknown phase")
	}
	s.cwnd = min(s.cwnd, Window)
}

// forget drops what selective acknowledgements have told, as a sender without
// them does: all that is not acknowledged is under way.
func (s *sender) forget() {
	for no := s.una; no != s.nxt; no++ {
		*s.mark(no) &^= flagSacked | flagLost
	}
	s.pipe, s.sacked, s.waiting = int32(s.nxt-s.una), 0, 0
	s.top = [3]uint32{}
}

// higher keeps the three highest segments known to have arrived.
func (s *sender) higher(no uint32) {
	t := &s.top
	switch above := func(x uint32) bool { return x == 0 || int32(no-x) > 0 }; {
	case above(t[0]):
		t[0], t[1], t[2] = no, t[0], t[1]
	case above(t[1]):
		t[1], t[2] = no, t[1]
	case above(t[2]):
		t[2] = no
	}
}

// infer looks for losses and begins recovery; it reports whether a segment is
// to be sent again at once.
func (h *Host) infer(s *sender) (forced bool) {
	if h.serve.Algorithm == Reno {
		if s.dups != 3 || s.phase != phaseOpen || int32(s.una-s.recover) < 0 {
			return false
		}
		h.lose(s, s.una)
	} else {
		edge := s.top[2] // three have arrived at or above it
		if s.sacked < 3 || edge == 0 || int32(edge-s.una) <= 0 {
			return false
		}
		lost := false
		for ; int32(edge-s.lostTo) > 0; s.lostTo++ {
			if *s.mark(s.lostTo)&(flagSacked|flagLost) == 0 {
				h.lose(s, s.lostTo)
				lost = true
			}
		}
		if !lost || s.phase != phaseOpen {
			return false
		}
	}
	s.phase, s.recover = phaseRecovery, s.nxt
	if int32(s.una-s.reacted) >= 0 { // not for a window that a mark has reduced
		s.reduce(h.serve.Algorithm, min(float64(s.nxt-s.una), s.cwnd))
		s.tell = h.serve.ECN
	}
	return true
}

// lose takes a segment for lost.
func (h *Host) lose(s *sender, no uint32) {
	m := s.mark(no)
	if *m&flagLost == 0 {
		s.pipe--
	} else if *m&flagResent != 0 {
		s.pipe--
	} else {
		return
	}
	*m = *m&^flagResent | flagLost
	s.waiting++
	if int32(no-s.resend) < 0 {
		s.resend = no
	}
}

// expired answers the retransmission timer.
func (h *Host) expired(s *sender, now des.Time) {
	h.tally.Timeout++
	again := s.rtt.tries > 0
	s.collapse(h.serve.Algorithm, min(float64(s.nxt-s.una), s.cwnd), again)
	s.rtt.tries = min(s.rtt.tries+1, 7)
	if h.serve.Algorithm == Reno {
		s.forget()
	}
	s.pipe, s.waiting = 0, 0
	for no := s.una; no != s.nxt; no++ {
		m := s.mark(no)
		if *m&flagSacked == 0 {
			*m = *m&^flagResent | flagLost
			s.waiting++
		}
	}
	s.phase, s.recover, s.lostTo, s.resend, s.dups = phaseTimeout, s.nxt, s.nxt, s.una, 0
	h.push(s, now, true)
}

// push sends what the window allows, what is lost first; forced sends one
// segment whatever it allows.
func (h *Host) push(s *sender, now des.Time, forced bool) {
	for forced || float64(s.pipe+1) <= s.cwnd {
		forced = false
		switch {
		case s.waiting > 0:
			for *s.mark(s.resend)&(flagLost|flagResent|flagSacked) != flagLost {
				s.resend++
			}
			h.segment(s, now, s.resend, true)
			s.resend++
			s.waiting--
		case s.nxt-s.una < Window && s.nxt != s.total && (s.total != 1<<32-1 || now < h.serve.Stop):
			h.segment(s, now, s.nxt, false)
			s.nxt++
		default:
			h.rearm(s, now)
			return
		}
		s.pipe++
	}
	h.rearm(s, now)
}

// rearm starts the retransmission timer if something is under way and it does
// not run.
func (h *Host) rearm(s *sender, now des.Time) {
	if s.una == s.nxt {
		s.timer.at = des.Never
	} else if s.timer.at == des.Never {
		h.arm(&s.timer, s.id, now+s.rtt.timeout())
	}
}

// segment sends one.
func (h *Host) segment(s *sender, now des.Time, no uint32, again bool) {
	if !again && s.nxt-s.una == uint32(len(s.marks)) {
		h.resize(s, 2*len(s.marks))
	}
	size := uint16(header + segment)
	last := no == s.total-1
	if last {
		size = header + s.lastSize
	}
	m := s.mark(no)
	*m = uint64(now/des.Nanosecond) << flagBits
	var bits nodes.PacketBits = nodes.KindSegm
	tell := false
	if again {
		*m |= flagLost | flagResent
		h.tally.Resent++
	} else {
		tell, s.tell = s.tell, false
		if h.serve.ECN {
			bits |= nodes.ECT0
		}
	}
	h.send(now, uint16(s.id>>1), size, bits, dataWord(s.gen, tell, last, no))
}

// resize gives the marks another ring.
func (h *Host) resize(s *sender, n int) {
	marks := h.rings.get(n)
	for no := s.una; no != s.nxt; no++ {
		marks[no&uint32(n-1)] = *s.mark(no)
	}
	h.rings.put(s.marks)
	s.marks = marks
}

// later is the later of two numbers of segments.
func later(a, b uint32) uint32 {
	if int32(b-a) > 0 {
		return b
	}
	return a
}

// finish ends a transfer.
func (h *Host) finish(s *sender) {
	h.rings.put(s.marks)
	s.marks = nil
	s.state = stateComplete
	s.timer.at = des.Never
}

// opened answers a request for bytes on a connection.
func (h *Host) opened(s *sender, now des.Time, gen uint8, bytes uint32) {
	if s.state == stateIdle || s.gen != gen {
		if s.marks != nil {
			h.rings.put(s.marks)
		}
		t := s.timer
		t.at = des.Never
		*s = sender{timer: t, gen: gen, state: stateOpening, greeted: now, window: newWindow(h.serve.Initial)}
		s.id = t.id
		s.total, s.lastSize = segmentsOf(bytes)
	} else if s.state == stateOpening {
		s.greeted = des.Never
		s.cwnd = 1 // RFC 6928, section 2: the handshake met a loss
	} else {
		return
	}
	h.send(now, uint16(s.id>>1), header, kindOpen, uint32(gen)<<genShift)
}

// begin sends the first data once the handshake is over.
func (h *Host) begin(s *sender, now des.Time) {
	s.state = stateMoving
	s.marks = h.rings.get(leastRing)
	if s.greeted != des.Never {
		s.rtt.sample(now - s.greeted)
	}
	h.push(s, now, true)
}
