package workloads

import (
	"errors"
	"fmt"
	"math"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
)

// Codec is a coder of speech.
type Codec uint8

// The codecs, with their bit rate of speech.
const (
	G711 Codec = iota // ITU-T G.711, 64 kbit/s
	G729              // ITU-T G.729, 8 kbit/s
	codecs
)

// String returns the name used in scenario files.
func (c Codec) String() string {
	switch c {
	case G711:
		return "G.711"
	case G729:
		return "G.729"
	default:
		panic(fmt.Sprintf("workloads: codec %d", c))
	}
}

// ParseCodec returns the codec of the given name.
func ParseCodec(name string) (Codec, error) {
	for c := range codecs {
		if c.String() == name {
			return c, nil
		}
	}
	return 0, fmt.Errorf("%q is not a codec; write G.711 or G.729", name)
}

// rate returns the bit rate of speech.
func (c Codec) rate() nodes.Rate {
	if c == G729 {
		return 8 * nodes.Kbps
	}
	return 64 * nodes.Kbps
}

// frame is the step in which intervals of packets can be chosen: the frame of
// G.729, and common practice for G.711.
const frame = 10 * des.Millisecond

// VoiceConfig describes packet voice without silence suppression: each call
// sends one packet per interval, IPv4, UDP and RTP headers (40 B) included.
// A zero field takes the default written beside it.
type VoiceConfig struct {
	Common
	Codec    Codec       // default G711
	Interval des.Time    // default 20 ms; 10 ms to 60 ms in steps of 10 ms
	Pattern  Pattern     // default Standing
	Calls    int         // of Standing, instead of a load
	Hold     random.Spec // of Random and Regular: length of a call in s; default exponential 180
}

// Check fills the defaults and reports every fault at once.
func (c VoiceConfig) Check() (VoiceConfig, error) {
	var faults []error
	if c.Codec >= codecs {
		return c, fmt.Errorf("codec: no codec %d", c.Codec) // nothing else can be said
	}
	if c.Interval == 0 {
		c.Interval = 2 * frame
	}
	if c.Interval < frame || c.Interval > 6*frame || c.Interval%frame != 0 {
		faults = append(faults, fmt.Errorf("interval: %v is not 10 ms, 20 ms ... 60 ms", c.Interval))
	}
	load := nodes.Rate(math.Round(min(float64(c.Calls)*c.CallRate(), 2*float64(MaxLoad))))
	if c.Calls < 0 || c.Calls > 0 && (c.Load != 0 && c.Load != load || c.Pattern != Standing) {
		faults = append(faults, fmt.Errorf("calls: %d; a number of calls stands alone, without a load, for calls that last", c.Calls))
	} else if c.Calls > 0 {
		c.Load = load
	}
	faults = c.Common.check(faults)
	switch c.Pattern {
	case Standing:
		if c.Hold.Kind != 0 || c.Hold.Mean != 0 {
			faults = append(faults, errors.New("hold: calls that last have no length"))
		}
	case Random, Regular:
		if c.Hold.Kind == random.Constant && c.Hold.Mean == 0 {
			c.Hold = random.Spec{Kind: random.Exponential, Mean: 180}
		}
		if _, err := c.lengths(); err != nil {
			faults = append(faults, fmt.Errorf("hold: %w", err))
		}
	default:
		faults = append(faults, fmt.Errorf("pattern: no pattern %d", c.Pattern))
	}
	return c, errors.Join(faults...)
}

// PacketSize returns the IP bytes of one packet.
func (c VoiceConfig) PacketSize() nodes.Bytes {
	bits := int64(c.Codec.rate()) * int64(c.Interval/des.Millisecond) / 1000
	return nodes.Bytes(header + bits/8)
}

// CallRate returns what one call sends in one direction, in bit/s of IP bytes.
func (c VoiceConfig) CallRate() float64 {
	return float64(c.PacketSize()) * 8 / c.Interval.Seconds()
}

// lengths returns the law of the packets of a call.
func (c VoiceConfig) lengths() (*lengths, error) {
	law, err := c.Hold.Law()
	if err != nil {
		return nil, err
	}
	return newLengths(law, c.Interval.Seconds(), 0)
}

// A Voice sends the packets of telephone calls.
type Voice struct{ train }

// NewVoice returns a source of voice, or the faults of c.
//
// Standing calls are as many as come nearest to the load, at least one, and
// MeanRate is what they send. Calls that arrive do so at the rate that gives
// the load exactly; a call of length h sends ceil(h/interval) packets, the
// first when it arrives, so the traffic offered is the load over the rate of a
// call, less half an interval per call.
func NewVoice(c VoiceConfig) (*Voice, error) {
	c, err := c.Check()
	if err != nil {
		return nil, err
	}
	size := uint16(c.PacketSize())
	v := &Voice{newTrain(c.Common, c.Interval, size)}
	if c.Pattern == Standing {
		if c.Calls == 0 {
			c.Calls = int(max(1, math.Round(float64(c.Load)/c.CallRate())))
		}
		v.mean = float64(c.Calls) * c.CallRate()
		v.stand(c.Calls)
		return v, nil
	}
	flows, err := c.lengths()
	if err != nil {
		return nil, err
	}
	gap := flows.mean * float64(size) * 8 / float64(c.Load) * float64(des.Second)
	v.arrive(c.Pattern.gaps(), gap, flows)
	return v, nil
}

// Clone implements nodes.Source.
func (v *Voice) Clone() nodes.Source { return &Voice{v.clone()} }
