package quality

import (
	"errors"
	"fmt"
	"math/bits"

	"ferrule/des"
	"ferrule/nodes"
)

// MediaIndexConfig describes a constant-rate media stream. A zero field takes
// the default written beside it.
type MediaIndexConfig struct {
	Rate        nodes.Rate // of the media, bit/s of payload; required
	PerDatagram uint64     // media packets in one IP datagram; default 7, transport-stream packets of 188 B
	Interval    des.Time   // least length of an interval; default 1 s
}

// Check fills the defaults and reports every fault at once.
func (c MediaIndexConfig) Check() (MediaIndexConfig, error) {
	if c.PerDatagram == 0 {
		c.PerDatagram = 7
	}
	if c.Interval == 0 {
		c.Interval = des.Second
	}
	var faults []error
	if c.Rate < nodes.Kbps {
		faults = append(faults, fmt.Errorf("rate: %d bit/s is not at least 1 kbit/s", c.Rate))
	}
	if c.Interval < 0 || c.Interval > des.Hour {
		faults = append(faults, fmt.Errorf("interval: %v is not between 0 and 1 h", c.Interval))
	}
	return c, errors.Join(faults...)
}

// MediaIndex measures the media delivery index of one stream, DF:MLR, interval
// by interval. A virtual buffer fills with what arrives and drains at the media
// rate; the delay factor is the span of its level over the rate, so how long a
// buffer must hold the stream to play it smoothly. The media loss rate counts
// media packets that are lost or out of order: a datagram that comes after a
// later one was counted when that came.
//
// An interval begins just after the last datagram of the one before. Its own
// last datagram is the first that comes the configured length or more after.
//
// Source: J. Welch, J. Clark, RFC 4445 (2006), sections 3.1 and 3.2.
type MediaIndex struct {
	cfg         MediaIndexConfig
	start       des.Time
	received    uint64   // bits in the interval
	least, most des.Time // of the level over the rate
	lost        uint64   // media packets in the interval
	next        uint32   // lowest number not counted yet
	worst       MediaInterval
	intervals   uint64
	sum         float64 // of delay factors, ps
	allLost     uint64
}

// A MediaInterval is the index of one interval.
type MediaInterval struct {
	Length      des.Time
	DelayFactor des.Time
	Lost        uint64 // media packets lost or out of order
}

// LossRate returns the media loss rate, in media packets a second.
func (m MediaInterval) LossRate() float64 { return float64(m.Lost) / m.Length.Seconds() }

// MediaReport sums up the closed intervals.
type MediaReport struct {
	Intervals       uint64
	MeanDelayFactor des.Time // 0 if there is no interval
	WorstDelay      des.Time // greatest delay factor
	WorstLost       uint64   // greatest number lost in an interval
	Lost            uint64
}

// NewMediaIndex returns the index of a stream whose first interval begins at
// start and whose first datagram is number 0, or the faults of c.
func NewMediaIndex(c MediaIndexConfig, start des.Time) (MediaIndex, error) {
	c, err := c.Check()
	return MediaIndex{cfg: c, start: start}, err
}

// Arrive takes datagram seq, of the given payload, at the instant at, which
// never decreases and is not before the start. If it ends an interval, closed
// is true and done is its index.
func (m *MediaIndex) Arrive(seq uint32, payload nodes.Bytes, at des.Time) (done MediaInterval, closed bool) {
	if seq >= m.next {
		m.lost += uint64(seq-m.next) * m.cfg.PerDatagram
		m.next = seq + 1
	}
	age := at - m.start
	m.level(m.drains() - age)
	m.received += uint64(payload) * 8
	m.level(m.drains() - age)
	if age < m.cfg.Interval {
		return MediaInterval{}, false
	}
	done = MediaInterval{Length: age, DelayFactor: m.most - m.least, Lost: m.lost}
	m.intervals++
	m.sum += float64(done.DelayFactor)
	m.allLost += done.Lost
	m.worst.DelayFactor = max(m.worst.DelayFactor, done.DelayFactor)
	m.worst.Lost = max(m.worst.Lost, done.Lost)
	m.start, m.received, m.least, m.most, m.lost = at, 0, 0, 0, 0
	return done, true
}

// drains returns how long the media last that were received, rounded to ps.
func (m *MediaIndex) drains() des.Time {
	hi, lo := bits.Mul64(m.received, uint64(des.Second))
	lo, carry := bits.Add64(lo, uint64(m.cfg.Rate)/2, 0)
	if hi += carry; hi >= uint64(m.cfg.Rate)/4 {
		return des.Never / 2 // 53 days, and no overflow in what follows
	}
	q, _ := bits.Div64(hi, lo, uint64(m.cfg.Rate))
	return des.Time(q)
}

// level notes a level of the virtual buffer.
func (m *MediaIndex) level(x des.Time) {
	m.least, m.most = min(m.least, x), max(m.most, x)
}

// Report returns what was found in closed intervals.
func (m *MediaIndex) Report() MediaReport {
	r := MediaReport{Intervals: m.intervals, WorstDelay: m.worst.DelayFactor, WorstLost: m.worst.Lost, Lost: m.allLost}
	if m.intervals > 0 {
		r.MeanDelayFactor = des.Time(m.sum/float64(m.intervals) + 0.5)
	}
	return r
}
