package page

import (
	"context"
	"encoding/json"
	"errors"
	"math"
	"sync"
	"time"

	"ferrule/des"
	"ferrule/scenarios/study"
)

// Limits of a live session.
const (
	updateEvery = 100 * time.Millisecond // between two updates of its readers
	mostReaders = 64                     // at one time
	mostWaiting = 32                     // updates that wait for one reader before it is dropped
	mostKept    = 300                    // updates that a reader who comes back can be given
	leastSpeed  = 0.01
	mostSpeed   = 1e6
)

// pace is how fast a session runs.
type pace struct {
	Speed   float64 `json:"speed"` // simulated seconds a second; 0: as fast as possible
	Paused  bool    `json:"paused"`
	Behind  bool    `json:"behind"`          // the machine does not keep up with the speed
	Readers int     `json:"readers"`         // of the stream
	Dropped int     `json:"dropped_readers"` // because they did not read
}

// A notice is one message of the stream.
type notice struct {
	id   uint64
	data []byte
}

// A reader gets the updates of a session. Its channel is closed when the
// session ends or when it has not read for too long.
type reader chan notice

// live is a session with its clock and its readers. The session belongs to the
// goroutine in run; everybody else asks it through do.
type live struct {
	session *study.Session
	ask     chan func()
	gone    chan struct{} // closed when run has returned

	mu      sync.Mutex
	speed   float64 // these three are written by run only, and read there without mu
	paused  bool
	behind  bool
	kept    []notice
	next    uint64
	readers map[reader]bool
	dropped int
	ended   bool
}

// newLive begins a session, paused, and its first update.
func newLive(s *study.Session) *live {
	l := &live{session: s, ask: make(chan func()), gone: make(chan struct{}), speed: 1, paused: true, readers: map[reader]bool{}, next: 1}
	l.publish()
	return l
}

// run leads the session until ctx is done.
func (l *live) run(ctx context.Context) {
	defer close(l.gone)
	defer l.session.Close()
	defer l.end()
	ticker := time.NewTicker(updateEvery)
	defer ticker.Stop()
	now := make(chan time.Time)
	close(now)
	last := time.Now()
	for {
		tick := ticker.C
		if l.speed == 0 && !l.paused && !l.session.Over() {
			tick = now // there is nothing to wait for
		}
		select {
		case <-ctx.Done():
			return
		case do := <-l.ask:
			do()
			continue
		default:
		}
		select {
		case <-ctx.Done():
			return
		case do := <-l.ask:
			do()
		case <-tick:
			elapsed := time.Since(last)
			last = time.Now()
			if !l.paused && !l.session.Over() {
				l.advance(elapsed)
				l.publish()
			}
		}
	}
}

// advance runs the session for one update's time.
func (l *live) advance(elapsed time.Duration) {
	began := time.Now()
	enough := func() bool { return time.Since(began) >= updateEvery }
	to := l.session.Length()
	if l.speed > 0 {
		ahead := math.Round(float64(min(elapsed, time.Second)) * 1000 * l.speed)
		if left := float64(to - l.session.Now()); ahead < left {
			to = l.session.Now() + des.Time(ahead)
		}
	}
	l.session.Advance(to, enough)
	l.mu.Lock()
	defer l.mu.Unlock()
	l.behind = l.speed > 0 && l.session.Now() < to
}

// do has the session's goroutine call f, and waits for it.
func (l *live) do(ctx context.Context, f func()) error {
	done := make(chan struct{})
	select {
	case l.ask <- func() { f(); close(done) }:
	case <-l.gone:
		return errGone
	case <-ctx.Done():
		return ctx.Err()
	}
	select {
	case <-done:
		return nil
	case <-l.gone:
		return errGone
	}
}

var errGone = errors.New("the session is over")

// message is what an update says.
type message struct {
	Pace     pace            `json:"pace"`
	Snapshot *study.Snapshot `json:"snapshot"`
}

// paceNow is how fast it runs now.
func (l *live) paceNow() pace {
	l.mu.Lock()
	defer l.mu.Unlock()
	return pace{l.speed, l.paused, l.behind, len(l.readers), l.dropped}
}

// publish tells all readers how the session stands. A reader that has not
// taken its updates is dropped: nobody waits for it.
func (l *live) publish() {
	data, err := json.Marshal(message{l.paceNow(), l.session.Snapshot()})
	if err != nil {
		panic("page: " + err.Error()) // a snapshot holds finite numbers and texts only
	}
	l.mu.Lock()
	defer l.mu.Unlock()
	u := notice{l.next, data}
	l.next++
	if l.kept = append(l.kept, u); len(l.kept) > mostKept {
		l.kept = append(l.kept[:0:0], l.kept[len(l.kept)-mostKept:]...)
	}
	for r := range l.readers {
		select {
		case r <- u:
		default:
			delete(l.readers, r)
			close(r)
			l.dropped++
		}
	}
}

// latest is the last update.
func (l *live) latest() notice {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.kept[len(l.kept)-1]
}

// join adds a reader. It first gets the updates after number after that are
// still kept; gap says that some are not. ok is false when there are too many
// readers, or the session has ended.
func (l *live) join(after uint64) (r reader, first []notice, gap, ok bool) {
	l.mu.Lock()
	defer l.mu.Unlock()
	if l.ended || len(l.readers) >= mostReaders {
		return nil, nil, false, false
	}
	if after >= l.next { // of another session
		after, gap = 0, true
	}
	gap = gap || after+1 < l.kept[0].id
	for _, u := range l.kept {
		if u.id > after {
			first = append(first, u)
		}
	}
	r = make(reader, mostWaiting)
	l.readers[r] = true
	return r, first, gap, true
}

// leave removes a reader.
func (l *live) leave(r reader) {
	l.mu.Lock()
	defer l.mu.Unlock()
	delete(l.readers, r)
}

// end lets all readers go.
func (l *live) end() {
	l.mu.Lock()
	defer l.mu.Unlock()
	l.ended = true
	for r := range l.readers {
		delete(l.readers, r)
		close(r)
	}
}
