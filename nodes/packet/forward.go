package packet

import (
	"fmt"
	"math"

	"ferrule/des"
	"ferrule/des/random"
)

// Forwarding is the forwarding latency asked of a router: a constant, or a
// lognormal law given by its median and 99th percentile.
type Forwarding struct {
	Constant des.Time
	Median   des.Time // 0: constant
	P99      des.Time
}

// Check reports what is wrong with f.
func (f Forwarding) Check() error {
	switch {
	case f.Median == 0 && f.Constant < 0:
		return fmt.Errorf("forwarding latency %v is negative", f.Constant)
	case f.Median < 0 || f.Median > 0 && f.P99 < f.Median:
		return fmt.Errorf("forwarding latency with median %v and 99th percentile %v; want 0 < median <= p99", f.Median, f.P99)
	case max(f.Constant, f.P99) > des.Second:
		return fmt.Errorf("forwarding latency above 1 s")
	}
	return nil
}

// knots is the number of straight pieces between two draws of a latency path.
const knots = 16

// latency is the forwarding latency of one input as a path in time, not a draw
// per packet: drawing per packet and then keeping order would make each packet
// wait for the slowest ahead of it. Between keyed draws of a standard normal
// variable, one every cell, the path is z(t) = cos(a) z0 + sin(a) z1 with a
// from 0 to pi/2, which is standard normal at every t; the latency is
// median * exp(sigma z), so its law at every instant is the one asked. The
// curve is drawn in straight pieces; t + latency(t) never decreases, because
// the latency is capped at seven eighths of a piece.
type latency struct {
	constant des.Time
	varies   bool
	median   float64
	sigma    float64
	seed     uint64
	name     uint64
	step     des.Time
	most     des.Time
	piece    int64 // the piece in the fields below
	from     des.Time
	start    des.Time
	slope    int64 // per ps, in units of 2^-20, rounded down
	memo     [32]struct {
		piece int64 // plus one; 0: none
		value des.Time
	}
}

// newLatency prepares the path of the input of the given name.
func newLatency(f Forwarding, seed uint64, name string) latency {
	if f.Median == 0 || f.P99 == f.Median {
		return latency{constant: max(f.Constant, f.Median)}
	}
	l := latency{
		varies: true, median: float64(f.Median), seed: seed, name: random.Hash("forwarding " + name),
		sigma: math.Log(float64(f.P99)/float64(f.Median)) / 2.3263478740408408, // standard normal 0.99 quantile
		step:  max(des.Millisecond/knots, f.P99*32/7), piece: -1,
	}
	l.most = l.step / 8 * 7
	return l
}

func (l *latency) normal(cell int64) float64 {
	u := random.Unit(random.Draw(l.seed, l.name, uint64(cell), 0))
	return math.Sqrt2 * math.Erfinv(float64(2*u)-1)
}

// knot is the latency at the start of a piece: not so little that rounding the
// slope could make it negative.
func (l *latency) knot(piece int64) des.Time {
	cell, k := piece/knots, piece%knots
	sin, cos := math.Sincos(float64(k) * (math.Pi / 2 / knots))
	z := float64(cos * l.normal(cell))
	if k != 0 {
		z += float64(sin * l.normal(cell+1))
	}
	return min(max(des.Time(l.median*math.Exp(float64(l.sigma*z))), l.step>>20+1), l.most)
}

// recall is knot with a memory: sources that share a path go over the same
// pieces in turn.
func (l *latency) recall(piece int64) des.Time {
	m := &l.memo[piece%int64(len(l.memo))]
	if m.piece != piece+1 {
		m.piece, m.value = piece+1, l.knot(piece)
	}
	return m.value
}

// enter makes the fields describe the piece that holds t.
func (l *latency) enter(t des.Time) {
	piece := int64(t / l.step)
	first := l.recall(piece)
	last := l.recall(piece + 1)
	l.piece, l.from, l.start = piece, des.Time(piece)*l.step, first
	d := int64(last-first) << 20
	l.slope = d / int64(l.step)
	if d%int64(l.step) < 0 {
		l.slope-- // round down: a piece ends at or below the next one's start
	}
}

// at is the latency of what arrives at t.
func (l *latency) at(t des.Time) des.Time {
	if !l.varies {
		return l.constant
	}
	if d := t - l.from; l.piece < 0 || d < 0 || d >= l.step {
		l.enter(t)
	}
	return l.start + des.Time(int64(t-l.from)*l.slope>>20)
}

// out is when what arrives at t leaves the forwarding engine.
func (l *latency) out(t des.Time) des.Time {
	if t == des.Never {
		return t
	}
	return t + l.at(t)
}

// before is the instant such that exactly what arrives before it leaves before
// end.
func (l *latency) before(end des.Time) des.Time {
	if !l.varies {
		return end - l.constant
	}
	lo, hi := max(end-l.most, 0), end          // out(hi) >= end always
	if start := end - end%l.step; start > lo { // keep to one piece
		if l.out(start) >= end {
			hi = start
		} else {
			lo = start + 1
		}
	}
	for lo < hi {
		mid := lo + (hi-lo)/2
		if l.out(mid) >= end {
			hi = mid
		} else {
			lo = mid + 1
		}
	}
	return lo
}
