package workloads

import (
	"errors"
	"fmt"
	"math"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
)

// MMPPConfig describes a Markov-modulated Poisson process of two states: the
// packets are a Poisson process whose rate changes between a high and a low one
// after independent exponential times (W. Fischer, K. Meier-Hellstern, "The
// Markov-modulated Poisson process (MMPP) cookbook", Performance Evaluation 18,
// 1993). With no packets in the low state, the default, it is the interrupted
// Poisson process of A. Kuczura, "The interrupted Poisson process as an
// overflow process", BSTJ 52 (1973). A zero field takes the default written
// beside it; the times are common practice, no source.
type MMPPConfig struct {
	Common
	Size    random.Spec // IP bytes of a packet; default constant 1000
	Flows   int         // each packet belongs to any with the same chance; default 1; at most MaxFlows
	Low     float64     // rate of the low state over that of the high one; default 0; below 1
	HighFor des.Time    // mean time in the high state; default 100 ms
	LowFor  des.Time    // mean time in the low state; default 100 ms
}

// Check fills the defaults and reports every fault at once.
func (c MMPPConfig) Check() (MMPPConfig, error) {
	s, err := StreamConfig{Common: c.Common, Size: c.Size, Flows: c.Flows}.Check()
	faults := []error{err}
	c.Common, c.Size, c.Flows = s.Common, s.Size, s.Flows
	if c.HighFor == 0 {
		c.HighFor = 100 * des.Millisecond
	}
	if c.LowFor == 0 {
		c.LowFor = 100 * des.Millisecond
	}
	if !(c.Low >= 0 && c.Low < 1) {
		faults = append(faults, fmt.Errorf("low: %v is not at least 0 and below 1", c.Low))
	}
	for _, x := range []struct {
		name string
		mean des.Time
	}{{"high-for", c.HighFor}, {"low-for", c.LowFor}} {
		if x.mean < des.Nanosecond || x.mean > 1000*des.Second {
			faults = append(faults, fmt.Errorf("%s: %v is not between 1 ns and 1000 s", x.name, x.mean))
		}
	}
	return c, errors.Join(faults...)
}

// A phase is a modulated process at one instant: that of its latest packet, or
// a later one if nothing can happen in between.
type phase struct {
	gaps   clock
	ahead  changes
	load   float64       // factor asked for by Scale
	state  uint8         // 0 high, 1 low
	turn   des.Time      // when the state changes
	spells random.Stream // of times in the states and nothing else
}

// MMPP sends packets of a Markov-modulated Poisson process.
type MMPP struct {
	now  phase // at the latest packet
	next phase // now, brought forward to where the next packet is certain

	ratio [2]float64 // of the rate in each state over the mean one
	means [2]float64 // ps in each state
	sizes sizes
	draws random.Stream // of sizes and nothing else
	split scatter
	stop  des.Time
	mean  float64 // bit/s
	seq   uint32
	way   uint16
}

// NewMMPP returns a source of the two-state Markov-modulated Poisson process,
// or the faults of c. The state at the start is drawn from the shares of time
// that the states have; the load is met exactly in the mean.
func NewMMPP(c MMPPConfig) (*MMPP, error) {
	c, err := c.Check()
	if err != nil {
		return nil, err
	}
	sizes, err := newSizes(c.Size)
	if err != nil {
		return nil, err
	}
	high := float64(c.HighFor) / float64(c.HighFor+c.LowFor) // share of time
	peak := 1 / (high + float64(c.Low*(1-high)))
	m := &MMPP{
		ratio: [2]float64{peak, peak * c.Low},
		means: [2]float64{float64(c.HighFor), float64(c.LowFor)},
		sizes: sizes, draws: random.NewStream(c.Seed, c.Name+"/size"),
		split: newScatter(c.Seed, c.Name, c.Flows),
		stop:  c.Stop, mean: float64(c.Load), way: c.Way,
	}
	m.now = phase{
		gaps: clock{
			kind: Poisson, mean: sizes.mean * 8 / float64(c.Load) * float64(des.Second),
			draws: random.NewStream(c.Seed, c.Name+"/gap"),
		},
		load: 1, spells: random.NewStream(c.Seed, c.Name+"/state"),
	}
	if m.now.spells.Float64() >= high {
		m.now.state = 1
	}
	m.now.turn = c.Start.Plus(m.spell(&m.now))
	m.now.gaps.start(c.Start, m.ratio[m.now.state])
	m.look()
	return m, nil
}

// spell draws how long the state of p lasts.
func (m *MMPP) spell(p *phase) des.Time {
	return des.Time(max(1, min(longest, math.Round(p.spells.Exp()*m.means[p.state]))))
}

// look finds the next packet. What it passes on the way is not settled: a
// change of load may still be made before it.
func (m *MMPP) look() {
	p := m.now
	for {
		change := p.ahead.until()
		at := min(p.turn, change)
		if at > p.gaps.next || at >= m.stop || p.load == 0 && change == des.Never {
			break
		}
		if change <= p.turn {
			p.load = p.ahead.take().factor
		} else {
			p.state ^= 1
			p.turn = p.turn.Plus(m.spell(&p))
		}
		p.gaps.retime(at, p.load*m.ratio[p.state])
	}
	m.next = p
}

// MeanRate implements [Source]. It is the load asked for.
func (m *MMPP) MeanRate() float64 { return m.mean }

// Next implements nodes.Source.
func (m *MMPP) Next() des.Time {
	if at := m.next.gaps.next; at < m.stop {
		return at
	}
	return des.Never
}

// Emit implements nodes.Source.
func (m *MMPP) Emit(end des.Time, buf []nodes.Packet) []nodes.Packet {
	end = min(end, m.stop)
	first := len(buf)
	for m.next.gaps.next < end {
		p := &m.next
		limit := min(end, p.turn, p.ahead.until())
		for p.gaps.next < limit {
			buf = longer(buf)
			birth(&buf[len(buf)-1], p.gaps.next, m.seq, 0, m.way, 0)
			m.seq++
			p.gaps.advance()
		}
		m.now = *p
		m.look()
	}
	m.sizes.fill(buf[first:], &m.draws)
	m.split.fill(buf[first:])
	return buf
}

// Scale implements nodes.Source. It changes the rate of packets in both states,
// not the times of the states.
func (m *MMPP) Scale(at des.Time, factor float64) {
	m.now.ahead.add(at, factor)
	m.look()
}

// Clone implements nodes.Source.
func (m *MMPP) Clone() nodes.Source {
	c := *m
	c.now.ahead = m.now.ahead.clone()
	c.look()
	return &c
}
