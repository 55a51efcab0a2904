package replay

import (
	"errors"
	"fmt"
	"math"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/workloads"
)

// Config says what a source sends of a trace. A zero field takes the default
// written beside it.
type Config struct {
	Trace *Trace
	Class nodes.ClassID
	Dir   nodes.Direction
	Way   uint16   // goes into every packet
	Start des.Time // when the earliest packet of the file is sent; default 0
	Stop  des.Time // no packet is born at or after it; default never
	Speed float64  // times as fast as recorded; default 1; 1e-6 to 1e6
	Loop  bool     // begin again after Trace.Period
}

// errNoPackets is what Check makes of a class that has none.
var errNoPackets = errors.New("the file holds no packets of the class")

// Check fills the defaults and reports every fault at once.
func (c Config) Check() (Config, error) {
	if c.Trace == nil {
		panic("replay: no trace")
	}
	var faults []error
	if c.Stop == 0 {
		c.Stop = des.Never
	}
	if c.Speed == 0 {
		c.Speed = 1
	}
	if c.Start < 0 || c.Stop <= c.Start {
		faults = append(faults, fmt.Errorf("stop: %v is not after the start, %v, which is not before 0", c.Stop, c.Start))
	}
	if !(c.Speed >= 1e-6 && c.Speed <= 1e6) {
		faults = append(faults, fmt.Errorf("speed: %v is not between 1e-6 and 1e6", c.Speed))
	}
	if c.Class < 0 || int(c.Class) >= len(c.Trace.classes) || c.Trace.Share(c.Class, c.Dir).Packets == 0 {
		return c, errors.Join(append(faults, errNoPackets)...)
	}
	if load := c.Trace.Load(c.Class, c.Dir) * c.Speed; load > float64(workloads.MaxLoad) {
		faults = append(faults, fmt.Errorf("speed: %v makes %.3g bit/s, which is above 4 Tbit/s", c.Speed, load))
	}
	return c, errors.Join(faults...)
}

// Source sends the packets of one class and direction of a trace. Their
// distances are those of the file over the speed; where the load is scaled they
// are divided by the factor too, from the instant of the change on.
type Source struct {
	feed  *feed
	rec   record
	due   des.Time // of rec; des.Never when all are sent
	start des.Time
	stop  des.Time
	loop  bool
	over  bool // all is sent that will be
	err   error

	wall  des.Time // instant at which the file stands at from
	from  int64    // ps since its earliest packet
	speed float64  // at factor 1
	rate  float64  // ps of the file in a ps; 0 while nothing is sent

	ahead   []change
	latest  des.Time // instant of the latest change
	passing Share    // of this pass so far
	whole   Share    // of a pass
	mean    float64  // bit/s
	seq     uint32
	way     uint16
}

// A change is a new factor of the load from the instant at on.
type change struct {
	at     des.Time
	factor float64
}

// NewSource returns a source, or the faults of c.
func NewSource(c Config) (*Source, error) {
	c, err := c.Check()
	if err != nil {
		return nil, err
	}
	s := &Source{
		feed: newFeed(c.Trace, int16(c.Class), 1<<c.Dir), start: c.Start, stop: c.Stop, loop: c.Loop, wall: c.Start,
		speed: c.Speed, rate: c.Speed, whole: c.Trace.Share(c.Class, c.Dir), way: c.Way,
		mean: c.Trace.Load(c.Class, c.Dir) * c.Speed,
	}
	if bad := s.feed.rewind(); bad != nil {
		s.fail(bad)
		return nil, s.err
	}
	s.advance()
	return s, s.err
}

// MeanRate reports the mean rate of one pass in bit/s of IP bytes, whatever
// Scale has asked for. A source that does not loop sends nothing after it.
func (s *Source) MeanRate() float64 { return s.mean }

// Err reports why the source has ended early: the file was changed while it was
// in use, or could not be read any more. It is nil if nothing went wrong.
func (s *Source) Err() error { return s.err }

// fail ends the source.
func (s *Source) fail(bad *Fault) {
	bad.File = s.feed.t.name
	s.err, s.due, s.over = bad, des.Never, true
}

// Next implements nodes.Source.
func (s *Source) Next() des.Time {
	if s.due < s.stop {
		return s.due
	}
	return des.Never
}

// Emit implements nodes.Source.
func (s *Source) Emit(end des.Time, buf []nodes.Packet) []nodes.Packet {
	end = min(end, s.stop)
	for s.due < end {
		if n := len(buf); n < cap(buf) {
			buf = buf[:n+1]
		} else {
			buf = append(buf, nodes.Packet{})
		}
		p := &buf[len(buf)-1]
		p.Due, p.Born, p.Word = s.due, s.due, 0
		p.Seq, p.Flow, p.Way, p.Size = s.seq, s.rec.flow, s.way, s.rec.size
		p.TTL, p.Bits = nodes.InitialTTL, 0
		s.seq++
		s.advance()
	}
	return buf
}

// advance goes to the next packet.
func (s *Source) advance() {
	for {
		before := s.rec.at
		ok, bad := s.feed.next(&s.rec)
		if bad == nil && ok && s.rec.at >= before {
			s.passing.Packets++
			s.passing.Bytes += int64(s.rec.size)
			break
		}
		if bad == nil && ok {
			bad = changed()
		}
		if bad == nil && s.passing != s.whole {
			bad = changed()
		}
		if bad == nil && s.loop {
			s.wall = s.born(int64(s.feed.t.Period()))
			s.from = 0
			s.passing, s.rec.at = Share{}, 0
			bad = s.feed.rewind()
		} else if bad == nil {
			s.due, s.over = des.Never, true
			return
		}
		if bad != nil {
			s.fail(bad)
			return
		}
	}
	s.due = s.born(s.rec.at)
	s.settle()
}

// born returns when the file stands at the time at, from the last change on.
func (s *Source) born(at int64) des.Time {
	d := at - s.from
	switch {
	case s.rate == 0:
		return des.Never
	case s.rate == 1:
		return max(s.wall, s.wall.Plus(des.Time(max(0, d))))
	}
	x := float64(d) / s.rate
	if x >= float64(des.Never-s.wall)/2 {
		return des.Never
	}
	return s.wall + des.Time(max(0, math.Round(x)))
}

// settle makes the changes of load that lie before the next packet.
func (s *Source) settle() {
	for len(s.ahead) > 0 && s.ahead[0].at <= s.due {
		x := s.ahead[0]
		s.ahead = s.ahead[1:]
		if x.at > s.start {
			s.from += int64(float64(float64(x.at-s.wall) * s.rate))
			s.wall = x.at
		}
		s.rate = float64(s.speed * x.factor)
		s.due = s.born(s.rec.at)
	}
}

// Scale implements nodes.Source. The file goes faster or slower from the
// instant at on; at a factor of 0 it stands still.
func (s *Source) Scale(at des.Time, factor float64) {
	if !(factor >= 0 && factor <= math.MaxFloat64) || at < s.latest {
		panic(fmt.Sprintf("replay: Scale by %v at %v after %v", factor, at, s.latest))
	}
	s.latest = at
	if s.over {
		return
	}
	s.ahead = append(s.ahead, change{at, factor})
	s.settle()
}

// Clone implements nodes.Source.
func (s *Source) Clone() nodes.Source {
	c := *s
	c.feed = s.feed.clone()
	c.ahead = append([]change(nil), s.ahead...)
	return &c
}
