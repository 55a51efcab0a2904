package workloads

import (
	"errors"
	"fmt"
	"math"

	"ferrule/des"
	"ferrule/nodes"
)

// OnOffConfig describes self-similar traffic: independent flows that send
// packets of one size at a peak rate and fall silent in turns, both for times
// of Pareto law and so at times for very long. A zero field takes the default
// written beside it.
//
// Many such flows together approach fractional Gaussian noise of Hurst
// parameter H = (3 - alpha)/2, with alpha the shape of both laws (W. Willinger,
// M. Taqqu, R. Sherman, D. Wilson, "Self-similarity through high-variability",
// IEEE/ACM Trans. Networking 5, 1997), at times above the mean spells and rates
// above a few flows. The times and rates of the defaults are common practice,
// no source.
type OnOffConfig struct {
	Common
	Hurst  float64     // default 0.8; 0.51 to 0.99
	Peak   nodes.Rate  // of one flow while it sends, bit/s of IP bytes; default 10 Mbit/s
	Packet nodes.Bytes // IP bytes; default 1000; at most 65535
	On     des.Time    // mean time a flow sends, not less than a packet lasts; default 100 ms
	Off    des.Time    // least mean silence; default 200 ms
}

// Check fills the defaults and reports every fault at once.
func (c OnOffConfig) Check() (OnOffConfig, error) {
	faults := c.Common.check(nil)
	c.fill()
	if !(c.Hurst >= 0.51 && c.Hurst <= 0.99) {
		faults = append(faults, fmt.Errorf("hurst: %v is not between 0.51 and 0.99", c.Hurst))
	}
	if c.Peak < nodes.Kbps || c.Peak > MaxLoad {
		faults = append(faults, fmt.Errorf("peak: %d bit/s is not between 1 kbit/s and %d Tbit/s", c.Peak, MaxLoad/(1000*nodes.Gbps)))
	}
	if c.Packet < 1 || c.Packet > maxSize {
		faults = append(faults, fmt.Errorf("packet: %d B is not between 1 B and %d B", c.Packet, maxSize))
	}
	for _, x := range []struct {
		name string
		mean des.Time
	}{{"on", c.On}, {"off", c.Off}} {
		if x.mean < des.Nanosecond || x.mean > 1000*des.Second {
			faults = append(faults, fmt.Errorf("%s: %v is not between 1 ns and 1000 s", x.name, x.mean))
		}
	}
	if len(faults) > 0 {
		return c, errors.Join(faults...)
	}
	if lasts := c.Peak.TxTime(c.Packet); c.On < lasts {
		faults = append(faults, fmt.Errorf("on: %v is shorter than a packet at the peak, %v", c.On, lasts))
	}
	return c, errors.Join(faults...)
}

// fill puts in the defaults.
func (c *OnOffConfig) fill() {
	if c.Hurst == 0 {
		c.Hurst = 0.8
	}
	if c.Peak == 0 {
		c.Peak = 10 * nodes.Mbps
	}
	if c.Packet == 0 {
		c.Packet = 1000
	}
	if c.On == 0 {
		c.On = 100 * des.Millisecond
	}
	if c.Off == 0 {
		c.Off = 200 * des.Millisecond
	}
}

// NewOnOff returns a source of self-similar traffic, or the faults of c.
//
// The flows stand for the whole run. They are as few as carry the load with
// silences of the mean asked for; their silences are then stretched until the
// load is met exactly. A flow sends a packet per packet time of sending,
// counted on across its silences. At the start all are met as if they had been
// running for ever.
func NewOnOff(c OnOffConfig) (*Spurts, error) {
	c, err := c.Check()
	if err != nil {
		return nil, err
	}
	interval := c.Peak.TxTime(c.Packet)
	peak := float64(c.Packet) * 8 / interval.Seconds()
	most := peak * float64(c.On) / float64(c.On+c.Off) // of one flow
	count := max(1, math.Ceil(float64(c.Load)/most))
	alpha := 3 - 2*c.Hurst
	on := spell{kind: paretoSpell, alpha: alpha, mean: float64(c.On)}
	off := spell{kind: paretoSpell, alpha: alpha, mean: float64(c.On) * (peak*count/float64(c.Load) - 1)}
	s := newSpurts(c.Common, int(count), uint16(c.Packet), interval, on, off)
	s.mean = float64(c.Load)
	return s, nil
}
