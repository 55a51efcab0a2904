package workloads

import (
	"errors"
	"fmt"
	"math"

	"ferrule/des"
)

// TalkConfig describes packet voice with silence suppression: each call sends
// one packet per interval while its speaker talks, IPv4, UDP and RTP headers
// (40 B) included, and nothing while the speaker listens. A zero field takes
// the default written beside it.
//
// Talk-spurts have a geometric number of packets and silences are exponential,
// as in K. Sriram, W. Whitt, "Characterizing superposition arrival processes in
// packet multiplexers for voice and data", IEEE JSAC 4 (1986). The default
// means are those of conversational speech in ITU-T P.59 (1993), with hangover;
// values from memory.
type TalkConfig struct {
	Common
	Codec    Codec    // default G711
	Interval des.Time // between packets; default 20 ms; 10 ms to 60 ms in steps of 10 ms
	Calls    int      // instead of a load
	Spurt    des.Time // mean, not less than an interval; default 1.004 s
	Silence  des.Time // mean; default 1.587 s
}

// Check fills the defaults and reports every fault at once.
func (c TalkConfig) Check() (TalkConfig, error) {
	if c.Spurt == 0 {
		c.Spurt = 1004 * des.Millisecond
	}
	if c.Silence == 0 {
		c.Silence = 1587 * des.Millisecond
	}
	v, err := VoiceConfig{Common: c.Common, Codec: c.Codec, Interval: c.Interval, Calls: c.Calls}.Check()
	faults := []error{err}
	c.Common, c.Interval = v.Common, v.Interval
	if c.Spurt < c.Interval || c.Spurt > 1000*des.Second {
		faults = append(faults, fmt.Errorf("spurt: %v is not between an interval, %v, and 1000 s", c.Spurt, c.Interval))
	}
	if c.Silence < des.Millisecond || c.Silence > 1000*des.Second {
		faults = append(faults, fmt.Errorf("silence: %v is not between 1 ms and 1000 s", c.Silence))
	}
	return c, errors.Join(faults...)
}

// Activity returns the share of time in which a speaker talks.
func (c TalkConfig) Activity() float64 {
	return float64(c.Spurt) / float64(c.Spurt+c.Silence)
}

// NewTalk returns a source of voice with silence suppression, or the faults of
// c.
//
// The calls stand for the whole run. They are as many as come nearest to the
// load, at least one, and MeanRate is what they send in the mean. The first
// packet of a spurt is born as it begins, and a silence lasts from one interval
// after the last packet of a spurt. At the start all are met as if they had
// been running for ever.
func NewTalk(c TalkConfig) (*Spurts, error) {
	calls := c.Calls
	c, err := c.Check()
	if err != nil {
		return nil, err
	}
	v := VoiceConfig{Codec: c.Codec, Interval: c.Interval}
	if calls == 0 {
		calls = int(max(1, math.Round(float64(c.Load)/(v.CallRate()*c.Activity()))))
	}
	on := spell{kind: geometricSpell, mean: float64(c.Spurt), unit: float64(c.Interval)}
	off := spell{kind: exponentialSpell, mean: float64(c.Silence)}
	return newSpurts(c.Common, calls, uint16(v.PacketSize()), c.Interval, on, off), nil
}
