package packet

import "ferrule/des"

// Kind is what a stretch of the run is, for the figures.
type Kind uint8

// Kinds of stretch.
const (
	WarmUp Kind = iota // not measured
	Normal             // settled, nothing broken
	Change             // from an ordered step until settled
	Hit                // from a fault until settled
	After              // settled, something broken
	Mend               // from a repair until settled
	Kinds
)

// String is the kind's name in results.
func (k Kind) String() string {
	return [Kinds]string{"warm-up", "normal", "change", "hit", "after", "mend"}[k]
}

// SettleTime is how long no consequence of an act may be pending before the
// stretch that the act opened ends.
const SettleTime = 100 * des.Millisecond

// Stretch is a part of the run, from From to the next one's From.
type Stretch struct {
	Kind  Kind
	From  des.Time
	Act   string // what opened it; empty when it was settling
	Fault int32  // number of the latest fault so far, -1 before the first
	acted bool   // opened by an act
}

// history is the run's stretches. It grows at outside acts only.
type history struct {
	s []Stretch
}

func newHistory(warmUp des.Time) history {
	h := history{s: []Stretch{{Kind: WarmUp, Fault: -1}}}
	h.s = append(h.s, Stretch{Kind: Normal, From: warmUp, Fault: -1})
	return h
}

// open starts a stretch now. A stretch due to start later has not begun and is
// replaced; the warm-up lasts as long as it was meant to.
func (h *history) open(s Stretch) {
	last := &h.s[len(h.s)-1]
	if last.From > s.From { // the warm-up lasts; what follows it is as s says
		from := last.From
		*last = s
		last.From = from
		return
	}
	if last.From == s.From {
		if !s.acted && last.acted { // settled at the instant of an act: the act counts
			return
		}
		*last = s
		return
	}
	h.s = append(h.s, s)
}

// find reports the stretch of what was sent at born and met its fate at fate:
// the one it was sent in, save that what was under way at an act belongs to
// the stretch that the act opened.
func (h *history) find(born, fate des.Time) (stretch int32, fault int32) {
	i := len(h.s) - 1
	for i > 0 && h.s[i].From > born {
		i--
	}
	if h.s[i].Kind == WarmUp {
		return int32(i), h.s[i].Fault
	}
	for j := i + 1; j < len(h.s) && h.s[j].From <= fate; j++ {
		if h.s[j].acted {
			i = j
		}
	}
	return int32(i), h.s[i].Fault
}

// view is a region's quick look at the stretch in force.
type view struct {
	from, to des.Time
	stretch  int32
	fault    int32
}

// look makes v describe the last stretch begun by now.
func (v *view) look(h *history, now des.Time) {
	i := len(h.s) - 1
	for i > 0 && h.s[i].From > now {
		i--
	}
	v.from, v.to, v.stretch, v.fault = h.s[i].From, des.Never, int32(i), h.s[i].Fault
	if i+1 < len(h.s) {
		v.to = h.s[i+1].From
	}
}
