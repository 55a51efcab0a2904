package distributed

import "ferrule/des"

// Delays are the timers of the back-off of RFC 8405, section 5.
type Delays struct {
	Initial  des.Time // from the first event in quiet to the computation
	Short    des.Time // from an event to the computation while there is something to learn
	Long     des.Time // likewise once the network has turned out to be unstable
	Learn    des.Time // how long, from the first event, further ones are taken for its consequences
	Holddown des.Time // without an event until all is quiet again
}

// DefaultDelays are 50 ms, 200 ms, 5 s, 500 ms and 10 s.
//
// Source: RFC 8405, section 6; value from memory.
func DefaultDelays() Delays {
	return Delays{
		Initial: 50 * des.Millisecond, Short: 200 * des.Millisecond, Long: 5 * des.Second,
		Learn: 500 * des.Millisecond, Holddown: 10 * des.Second,
	}
}

// State is that of a back-off.
type State uint8

// States of RFC 8405, section 5.1.
const (
	Quiet State = iota
	ShortWait
	LongWait
)

// String names the state as the RFC does.
func (s State) String() string { return [...]string{"QUIET", "SHORT_WAIT", "LONG_WAIT"}[s] }

// A Backoff says when to compute shortest paths: soon after the first sign of
// trouble, less often while it goes on. The zero Backoff with Delays is quiet.
type Backoff struct {
	Delays  Delays
	state   State
	learn   des.Time // in ShortWait: when it ends in LongWait
	hold    des.Time // when it is quiet again
	running bool     // a computation is due
}

// StateAt reports the state at now, timers due at now having expired. Instants
// must not go back.
func (b *Backoff) StateAt(now des.Time) State {
	if b.state != Quiet && now >= b.hold {
		b.state = Quiet
	}
	if b.state == ShortWait && now >= b.learn {
		b.state = LongWait
	}
	return b.state
}

// Event takes in a change of the topology. When no computation is due yet it
// reports the instant of the next one, which the caller must report to Ran.
func (b *Backoff) Event(now des.Time) (at des.Time, start bool) {
	var wait des.Time
	switch b.StateAt(now) {
	case Quiet:
		wait = b.Delays.Initial
		b.state, b.learn = ShortWait, now+b.Delays.Learn
	case ShortWait:
		wait = b.Delays.Short
	case LongWait:
		wait = b.Delays.Long
	default:
		panic("distributed: unknown state of a back-off")
	}
	b.hold = now + b.Delays.Holddown
	if b.running {
		return 0, false
	}
	b.running = true
	return now + wait, true
}

// Ran says that the computation that was due begins.
func (b *Backoff) Ran() { b.running = false }
