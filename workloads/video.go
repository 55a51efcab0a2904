package workloads

import (
	"errors"
	"fmt"
	"math"
	"strings"

	"ferrule/des/random"
	"ferrule/nodes"
)

// Kinds of frames: coded alone, predicted from before, from both sides.
const frameKinds = "IPB"

// VideoConfig describes compressed video. Each flow sends frames at equal
// intervals, in a repeated group of kinds; sizes of one kind are lognormal and
// independent (M. Krunz, H. Hughes, "A traffic model for MPEG-coded VBR
// streams", SIGMETRICS 1995). A zero field takes the default written beside it.
//
// The default ratio 4:2:1 and CoV 0.28 within a kind give frames of CoV 0.66 as
// a whole, as in the film traces at high quality of F. Fitzek and M. Reisslein,
// "MPEG-4 and H.263 video traces for network performance evaluation" (2001).
type VideoConfig struct {
	Common
	Rate   nodes.Rate // of one flow, bit/s of IP bytes; default 8 Mbit/s
	Frames float64    // per second, to a thousandth; default 25
	Group  string     // kinds of frames, repeated; default IBBPBBPBBPBB
	Ratio  [3]float64 // mean sizes of I, P and B; default 4:2:1
	CoV    float64    // of the sizes of one kind; default 0.28; 0.001 to 3
	Pace   nodes.Rate // bit/s of IP bytes at which a flow sends its packets; default 4 times the mean rate of a flow

	Pattern Pattern     // of flows; default Standing
	Hold    random.Spec // of Random and Regular: length of a flow in s; default exponential 180
}

// Check fills the defaults and reports every fault at once. The rate of flows
// that stand becomes what one of them sends, to the nearest bit/s.
func (c VideoConfig) Check() (VideoConfig, error) {
	faults := c.Common.check(nil)
	c.fill()
	if c.Rate <= 0 || c.Rate > MaxLoad/8 {
		faults = append(faults, fmt.Errorf("rate: %d bit/s is not between 1 bit/s and %d Gbit/s", c.Rate, MaxLoad/8/nodes.Gbps))
	}
	if !(c.Frames >= 0.1 && c.Frames <= 1000) {
		faults = append(faults, fmt.Errorf("frames: %v/s is not between 0.1 and 1000", c.Frames))
	}
	if strings.Trim(c.Group, frameKinds) != "" || len(c.Group) > 1000 {
		faults = append(faults, fmt.Errorf("group: %q is not made of I, P and B", c.Group))
	}
	for i, r := range c.Ratio {
		if !(r > 0 && r < 1e6) {
			faults = append(faults, fmt.Errorf("ratio: %v for %c is not above 0", r, frameKinds[i]))
		}
	}
	if !(c.CoV >= 0.001 && c.CoV <= 3) {
		faults = append(faults, fmt.Errorf("cov: %v is not between 0.001 and 3", c.CoV))
	}
	if len(faults) > 0 {
		return c, errors.Join(faults...)
	}
	faults = c.checkPattern(nil)
	rate := c.flowRate()
	c.Rate = nodes.Rate(math.Round(rate))
	if c.Pace == 0 {
		c.Pace = nodes.Rate(math.Round(4 * rate))
	}
	if float64(c.Pace) <= rate || c.Pace > MaxLoad {
		faults = append(faults, fmt.Errorf("pace: %d bit/s is not above the rate of a flow, %d bit/s, and at most %d Tbit/s", c.Pace, c.Rate, MaxLoad/(1000*nodes.Gbps)))
	}
	if least := (header + 2) * 8 * c.Frames; rate < least {
		faults = append(faults, fmt.Errorf("rate: a flow of %d bit/s holds hardly more than the headers of %v frames a second; write at least %v bit/s", c.Rate, c.Frames, least))
	}
	return c, errors.Join(faults...)
}

// checkPattern fills the default of Hold and appends what is wrong with it and
// the pattern.
func (c *VideoConfig) checkPattern(faults []error) []error {
	switch c.Pattern {
	case Standing:
		if c.Hold.Kind != 0 || c.Hold.Mean != 0 {
			faults = append(faults, errors.New("hold: flows that last have no length"))
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
	return faults
}

// lengths returns the law of the frames of a flow that ends.
func (c VideoConfig) lengths() (*lengths, error) {
	law, err := c.Hold.Law()
	if err != nil {
		return nil, err
	}
	return newLengths(law, 1000/math.Round(c.Frames*1000), 0)
}

// flowRate returns what one flow sends, in bit/s.
func (c VideoConfig) flowRate() float64 {
	if c.Pattern == Standing {
		return float64(c.Load) / float64(c.flows())
	}
	return float64(c.Rate)
}

// fill puts in the defaults that depend on nothing.
func (c *VideoConfig) fill() {
	if c.Rate == 0 {
		c.Rate = 8 * nodes.Mbps
	}
	if c.Frames == 0 {
		c.Frames = 25
	}
	if c.Group == "" {
		c.Group = "IBBPBBPBBPBB"
	}
	if c.Ratio == [3]float64{} {
		c.Ratio = [3]float64{4, 2, 1}
	}
	if c.CoV == 0 {
		c.CoV = 0.28
	}
}

// flows returns the number of flows that comes nearest to the load, at least
// one.
func (c VideoConfig) flows() int {
	return int(max(1, math.Round(float64(c.Load)/float64(c.Rate))))
}

// frameLaws returns the laws of the bytes of I, P and B frames, headers not
// included, for which a flow sends bytes IP bytes per frame in the mean.
func (c VideoConfig) frameLaws(bytes float64) ([3]random.Law, error) {
	var share [3]float64 // of the frames
	for i := range c.Group {
		share[strings.IndexByte(frameKinds, c.Group[i])] += 1 / float64(len(c.Group))
	}
	unit := 0.0 // mean size of a frame for a B frame of Ratio[2]
	for k, s := range share {
		unit += float64(s * c.Ratio[k])
	}
	// The mean on the wire grows with the frames, nearly in a straight line
	// because of the headers: the Illinois form of false position finds the
	// frames that fit in a few steps.
	lo, hi, below := 0.0, bytes/unit, header-bytes
	laws, sent, err := c.lawsAt(hi, share)
	above, side := sent-bytes, 0
	for range 40 {
		if err != nil || math.Abs(sent-bytes) < 1e-8*bytes {
			break
		}
		x := (float64(lo*above) - float64(hi*below)) / (above - below)
		if laws, sent, err = c.lawsAt(x, share); sent > bytes {
			if hi, above = x, sent-bytes; side > 0 {
				below /= 2
			}
			side = 1
		} else {
			if lo, below = x, sent-bytes; side < 0 {
				above /= 2
			}
			side = -1
		}
	}
	return laws, err
}

// lawsAt returns the laws of frames whose mean is scale times the ratio, and
// the mean of the IP bytes of a frame.
func (c VideoConfig) lawsAt(scale float64, share [3]float64) (laws [3]random.Law, sent float64, err error) {
	for k, s := range share {
		laws[k], err = random.Spec{Kind: random.Lognormal, Mean: scale * c.Ratio[k], CoV: c.CoV}.Law()
		if err != nil {
			return laws, 0, err
		}
		n, err := newLengths(laws[k], payload, 0.5)
		if err != nil {
			return laws, 0, err
		}
		sent += float64(s * (laws[k].Mean() + float64(header*n.mean)))
	}
	return laws, sent, nil
}
