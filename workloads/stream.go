package workloads

import (
	"errors"
	"fmt"
	"math/bits"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
)

// MaxFlows is the greatest number of flows of a stream: Packet.Flow can tell no
// more apart.
const MaxFlows = 1 << 16

// StreamConfig describes a packet stream, whose gaps and sizes are independent.
// A zero field takes the default written beside it.
//
// The packets are spread over Flows flows: of Poisson gaps each packet belongs
// to any flow with the same chance, so that each flow is a Poisson stream; of
// constant gaps the flows take turns, so that each has constant gaps.
type StreamConfig struct {
	Common
	Gaps  Gaps        // default Poisson
	Size  random.Spec // IP bytes of a packet; default constant 1000
	Flows int         // default 1; at most MaxFlows
}

// Check fills the defaults and reports every fault at once. A size is rounded
// to the nearest whole byte and kept within 1 and 65535; the mean gap is the
// mean of the size so rounded over the load.
func (c StreamConfig) Check() (StreamConfig, error) {
	faults := c.Common.check(nil)
	if c.Gaps > Constant {
		faults = append(faults, fmt.Errorf("gaps: no kind %d", c.Gaps))
	}
	if c.Size.Kind == random.Constant && c.Size.Mean == 0 {
		c.Size.Mean = 1000
	}
	if _, err := newSizes(c.Size); err != nil {
		faults = append(faults, fmt.Errorf("size: %w", err))
	}
	if c.Flows == 0 {
		c.Flows = 1
	}
	if c.Flows < 0 || c.Flows > MaxFlows {
		faults = append(faults, fmt.Errorf("flows: %d is not between 1 and %d", c.Flows, MaxFlows))
	}
	return c, errors.Join(faults...)
}

// A Stream sends packets with independent gaps and sizes.
type Stream struct {
	gaps  clock
	sizes sizes
	draws random.Stream // of sizes and nothing else
	split scatter
	turn  uint32 // flow of the next packet if flows take turns
	ahead changes
	stop  des.Time
	mean  float64 // bit/s
	seq   uint32
	way   uint16
}

// NewStream returns a packet stream, or the faults of c.
func NewStream(c StreamConfig) (*Stream, error) {
	c, err := c.Check()
	if err != nil {
		return nil, err
	}
	sizes, err := newSizes(c.Size)
	if err != nil {
		return nil, err
	}
	s := &Stream{
		gaps: clock{
			kind:  c.Gaps,
			mean:  sizes.mean * 8 / float64(c.Load) * float64(des.Second),
			draws: random.NewStream(c.Seed, c.Name+"/gap"),
		},
		sizes: sizes,
		draws: random.NewStream(c.Seed, c.Name+"/size"),
		split: newScatter(c.Seed, c.Name, c.Flows),
		stop:  c.Stop,
		mean:  float64(c.Load),
		way:   c.Way,
	}
	if sizes.kind == fixedSize {
		s.gaps.unit, s.gaps.rate = uint64(sizes.fixed)*8, c.Load
	}
	s.gaps.start(c.Start, 1)
	return s, nil
}

// MeanRate implements [Source]. It is the load asked for.
func (s *Stream) MeanRate() float64 { return s.mean }

// Next implements nodes.Source.
func (s *Stream) Next() des.Time {
	if s.gaps.next >= s.stop {
		return des.Never
	}
	return s.gaps.next
}

// Emit implements nodes.Source.
func (s *Stream) Emit(end des.Time, buf []nodes.Packet) []nodes.Packet {
	end = min(end, s.stop)
	for s.gaps.next < end {
		first := len(buf)
		limit := min(end, s.ahead.until())
		if s.gaps.kind == Poisson {
			buf = s.poisson(limit, buf)
		} else {
			buf = s.equal(limit, buf)
		}
		s.sizes.fill(buf[first:], &s.draws)
		if s.split.flows > 1 {
			s.spread(buf[first:])
		}
		s.settle()
	}
	return buf
}

// poisson appends the packets born before limit, their sizes still to come.
// What changes from packet to packet is kept in local variables.
func (s *Stream) poisson(limit des.Time, buf []nodes.Packet) []nodes.Packet {
	next, seq, gap, way := s.gaps.next, s.seq, s.gaps.gap, s.way
	draws := s.gaps.draws
	for next < limit {
		buf = longer(buf)
		birth(&buf[len(buf)-1], next, seq, 0, way, 0)
		seq++
		e := draws.Exp()
		x := float64(e*gap) + 0.5
		if x >= longest {
			s.gaps.since, s.gaps.rest = next, e*s.gaps.mean
			next = des.Never
			break
		}
		next = next.Plus(des.Time(x))
	}
	s.gaps.next, s.gaps.draws, s.seq = next, draws, seq
	return buf
}

// equal does for equal gaps what poisson does for exponential ones.
func (s *Stream) equal(limit des.Time, buf []nodes.Packet) []nodes.Packet {
	c, seq, way := s.gaps, s.seq, s.way
	for c.next < limit {
		buf = longer(buf)
		birth(&buf[len(buf)-1], c.next, seq, 0, way, 0)
		seq++
		c.step()
	}
	s.gaps, s.seq = c, seq
	return buf
}

// spread gives packets their flows.
func (s *Stream) spread(ps []nodes.Packet) {
	if s.gaps.kind == Poisson {
		s.split.fill(ps)
		return
	}
	turn := s.turn
	for i := range ps {
		ps[i].Flow = uint16(turn)
		if turn++; turn == s.split.flows {
			turn = 0
		}
	}
	s.turn = turn
}

// A scatter gives packets flows at random, each with the same chance.
type scatter struct {
	picks random.Stream // of flows and nothing else
	flows uint32
}

// newScatter returns the flows of the source of the given name.
func newScatter(seed uint64, name string, flows int) scatter {
	return scatter{random.NewStream(seed, name+"/flow"), uint32(flows)}
}

// fill draws the flows of ps in order.
func (s *scatter) fill(ps []nodes.Packet) {
	if s.flows == 1 {
		return
	}
	picks, flows := s.picks, uint64(s.flows)
	for i := range ps {
		hi, _ := bits.Mul64(picks.Uint64(), flows)
		ps[i].Flow = uint16(hi)
	}
	s.picks = picks
}

// settle makes the changes of load that lie before the next packet.
func (s *Stream) settle() {
	for len(s.ahead.ahead) > 0 && s.ahead.until() <= s.gaps.next {
		x := s.ahead.take()
		s.gaps.retime(x.at, x.factor)
	}
}

// Scale implements nodes.Source. It changes the rate of packets.
func (s *Stream) Scale(at des.Time, factor float64) {
	s.ahead.add(at, factor)
	s.settle()
}

// Clone implements nodes.Source.
func (s *Stream) Clone() nodes.Source {
	c := *s
	c.ahead = s.ahead.clone()
	return &c
}
