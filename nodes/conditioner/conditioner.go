// Package conditioner holds what stands at the ingress of an aggregate: meters
// that colour its packets or have them discarded, and shapers that delay them.
//
// All are pure: they schedule nothing and hold no clock; now is handed in and
// never decreases. A bucket is kept as the time in which it would fill to its
// level at its rate, so that levels are exact integers however large; what a
// packet takes is rounded up to a whole picosecond.
package conditioner

import (
	"fmt"
	"math/bits"

	"ferrule/des"
	"ferrule/nodes"
)

// bucket is a token bucket.
type bucket struct {
	rate        nodes.Rate
	level, full des.Time
}

func newBucket(rate nodes.Rate, size nodes.Bytes) bucket {
	if rate <= 0 || size < 0 {
		panic(fmt.Sprintf("conditioner: bucket of %d B at %d bit/s", size, rate))
	}
	b := bucket{rate: rate, full: rate.TxTime(size)}
	b.level = b.full
	return b
}

// fill adds what has come in d and returns what had no room.
func (b *bucket) fill(d des.Time) (over des.Time) {
	b.level = b.level.Plus(d)
	over = max(0, b.level-b.full)
	b.level -= over
	return over
}

// bytes is the level, rounded down.
func (b *bucket) bytes() nodes.Bytes {
	hi, lo := bits.Mul64(uint64(b.level), uint64(b.rate))
	q, _ := bits.Div64(hi, lo, 8*uint64(des.Second))
	return nodes.Bytes(q)
}

// Meter is a three-colour marker: single-rate (RFC 2697) or two-rate (RFC
// 2698). A size is that of an IP packet. Buckets start full.
type Meter struct {
	committed bucket
	other     bucket // the excess of a single-rate meter, the peak of a two-rate one
	twoRate   bool
	aware     bool
	last      des.Time
}

// NewSingleRate makes a meter of a committed rate and burst and an excess burst
// (RFC 2697). It panics if the rate is not positive or a burst is negative.
// With aware it goes by the colours that packets bring.
func NewSingleRate(rate nodes.Rate, burst, excess nodes.Bytes, aware bool) *Meter {
	return &Meter{committed: newBucket(rate, burst), other: newBucket(rate, excess), aware: aware}
}

// NewTwoRate makes a meter of a committed and a peak rate, each with a burst
// (RFC 2698). It panics if peak is below rate, a rate is not positive or a
// burst is negative.
func NewTwoRate(rate, peak nodes.Rate, burst, peakBurst nodes.Bytes, aware bool) *Meter {
	if peak < rate {
		panic(fmt.Sprintf("conditioner: a peak of %d bit/s below a rate of %d bit/s", peak, rate))
	}
	return &Meter{committed: newBucket(rate, burst), other: newBucket(peak, peakBurst), twoRate: true, aware: aware}
}

// Colour reports the colour of a packet of the given size that passes at now:
// nodes.Green, nodes.Yellow or nodes.Red. brought is the colour it has already.
func (m *Meter) Colour(now des.Time, size nodes.Bytes, brought nodes.PacketBits) nodes.PacketBits {
	gone := now - m.last
	m.last = now
	if !m.aware {
		brought = nodes.Green
	}
	brought &= nodes.ColourMask
	c, o := &m.committed, &m.other
	needC, needO := c.rate.TxTime(size), o.rate.TxTime(size)
	if m.twoRate {
		c.fill(gone)
		o.fill(gone)
		switch {
		case brought == nodes.Red || o.level < needO:
			return nodes.Red
		case brought == nodes.Yellow || c.level < needC:
			o.level -= needO
			return nodes.Yellow
		}
		c.level -= needC
		o.level -= needO
		return nodes.Green
	}
	o.fill(c.fill(gone))
	switch {
	case brought == nodes.Green && c.level >= needC:
		c.level -= needC
		return nodes.Green
	case brought != nodes.Red && o.level >= needO:
		o.level -= needO
		return nodes.Yellow
	}
	return nodes.Red
}

// Levels reports the tokens in the committed bucket and in the other one, in
// bytes, as of the last packet.
func (m *Meter) Levels() (committed, other nodes.Bytes) { return m.committed.bytes(), m.other.bytes() }

// Clone returns a copy that shares nothing.
func (m *Meter) Clone() *Meter {
	c := *m
	return &c
}

// Shaper delays packets, in order, until a token bucket has what they take; one
// that would wait too long is refused.
type Shaper struct {
	bucket bucket
	most   des.Time
	last   des.Time // departure of the last packet
}

// NewShaper makes a shaper of a rate and a burst that holds packets for most at
// the longest. It panics if the rate is not positive or the burst is negative.
func NewShaper(rate nodes.Rate, burst nodes.Bytes, most des.Time) *Shaper {
	return &Shaper{bucket: newBucket(rate, burst), most: most}
}

// Release reports when a packet of the given size that comes at now may leave;
// ok is false if it is refused. A packet larger than the burst leaves when the
// bucket would have filled to its size.
func (s *Shaper) Release(now des.Time, size nodes.Bytes) (at des.Time, ok bool) {
	from := max(now, s.last)
	b := s.bucket
	b.fill(from - s.last)
	need := b.rate.TxTime(size)
	at = from + max(0, need-b.level)
	if at-now > s.most {
		return 0, false
	}
	b.level = max(0, b.level-need)
	s.bucket, s.last = b, at
	return at, true
}

// Clone returns a copy that shares nothing.
func (s *Shaper) Clone() *Shaper {
	c := *s
	return &c
}
