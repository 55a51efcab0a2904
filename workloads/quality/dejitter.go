package quality

import (
	"errors"
	"fmt"
	"math"

	"ferrule/des"
	"ferrule/des/measure"
)

// DejitterConfig describes the buffer that makes equal gaps of speech again. A
// zero field takes the default written beside it.
type DejitterConfig struct {
	// Adaptive lets the buffer choose its delay anew at the start of each
	// talk-spurt: the smoothed delay and 4 times its smoothed deviation, but at
	// most Depth, with the weight 0.998002 of the past (R. Ramjee, J. Kurose,
	// D. Towsley, H. Schulzrinne, "Adaptive playout mechanisms for packetized
	// audio applications in wide-area networks", INFOCOM 1994, algorithm 1).
	// Before anything is known the deviation is taken to be Depth/4. Else the
	// delay is that of the first packet and Depth, for good.
	Adaptive bool

	Depth des.Time // how long the first packet waits; default 40 ms, adaptive 80 ms
	Most  des.Time // a packet that would wait longer finds no room; default 10 times Depth
	Gap   des.Time // adaptive: packets born further apart begin a talk-spurt; default 60 ms
	Every des.Time // adaptive: so long after the last choice a packet is taken to begin one, for sources without silence; default 5 s
}

// Check fills the defaults and reports every fault at once.
func (c DejitterConfig) Check() (DejitterConfig, error) {
	if c.Depth == 0 {
		c.Depth = 40 * des.Millisecond
		if c.Adaptive {
			c.Depth = 80 * des.Millisecond
		}
	}
	if c.Most == 0 {
		c.Most = 10 * c.Depth
	}
	if c.Gap == 0 {
		c.Gap = 60 * des.Millisecond
	}
	if c.Every == 0 {
		c.Every = 5 * des.Second
	}
	var faults []error
	for _, x := range []struct {
		name string
		t    des.Time
	}{{"depth", c.Depth}, {"most", c.Most}, {"gap", c.Gap}, {"every", c.Every}} {
		if x.t < 0 || x.t > des.Hour {
			faults = append(faults, fmt.Errorf("%s: %v is not between 0 and 1 h", x.name, x.t))
		}
	}
	if c.Most < c.Depth {
		faults = append(faults, fmt.Errorf("most: %v is less than the depth, %v", c.Most, c.Depth))
	}
	return c, errors.Join(faults...)
}

// weight is that of the past in the smoothed delay (Ramjee et al., 1994).
const weight = 0.998002

// A Dejitter judges one flow of speech at its receiver: which packets are
// played, and how late. Packets that come after their turn, or before there is
// room, are lost to the listener.
type Dejitter struct {
	cfg       DejitterConfig
	runs      measure.LossRuns
	delay     des.Time // from birth to playing
	chosen    des.Time // birth of the packet at which delay was chosen
	latest    des.Time // greatest birth so far
	mean, dev float64  // smoothed delay and deviation, ps
	begun     bool
	report    DejitterReport
	sum       float64 // of the delays of the played, ps
}

// DejitterReport is what a [Dejitter] found.
type DejitterReport struct {
	Played    uint64             // packets
	Late      uint64             // came after their turn
	Early     uint64             // found no room
	Lost      uint64             // in the network
	MeanDelay des.Time           // from birth to playing, of the played; 0 if none
	Losses    measure.LossReport // pattern of all that was not played
}

// NewDejitter returns a buffer that has seen nothing, or the faults of c.
func NewDejitter(c DejitterConfig) (Dejitter, error) {
	c, err := c.Check()
	return Dejitter{cfg: c}, err
}

// Arrive takes packet seq, born and arrived at the given instants, and reports
// whether it will be played. Arrivals come in order of at, which is not before
// born; each packet comes once.
func (d *Dejitter) Arrive(seq uint32, born, at des.Time) (played bool) {
	d.choose(born, at-born)
	switch wait := born + d.delay - at; {
	case wait < 0:
		d.report.Late++
	case wait > d.cfg.Most:
		d.report.Early++
	default:
		d.report.Played++
		d.sum += float64(d.delay)
		return true
	}
	d.runs.Lost(seq)
	return false
}

// choose smooths the delay and, where a talk-spurt begins, sets the buffer's.
func (d *Dejitter) choose(born, delay des.Time) {
	x := float64(delay)
	spurt := born-d.latest > d.cfg.Gap || born-d.chosen >= d.cfg.Every
	d.latest = max(d.latest, born)
	switch {
	case !d.begun:
		d.begun, d.mean, d.dev = true, x, float64(d.cfg.Depth)/4
		d.delay, d.chosen = delay+d.cfg.Depth, born
	case d.cfg.Adaptive:
		d.mean = float64(weight*d.mean) + float64((1-weight)*x)
		d.dev = float64(weight*d.dev) + float64((1-weight)*math.Abs(d.mean-x))
		if spurt {
			more := min(float64(4*d.dev), float64(d.cfg.Depth))
			d.delay, d.chosen = des.Time(d.mean+more+0.5), born
		}
	}
}

// Lost notes that the network lost packet seq; once for each, in any order.
func (d *Dejitter) Lost(seq uint32) {
	d.report.Lost++
	d.runs.Lost(seq)
}

// Report returns what was found so far.
func (d *Dejitter) Report() DejitterReport {
	r := d.report
	if r.Played > 0 {
		r.MeanDelay = des.Time(d.sum/float64(r.Played) + 0.5)
	}
	r.Losses = d.runs.Report()
	return r
}

// Sent returns the packets that were told of.
func (r *DejitterReport) Sent() uint64 { return r.Played + r.Late + r.Early + r.Lost }

// Call returns what the E-model wants to know of the flow: the delay from birth
// to playing and extra, which stands for coding and packetising; the fraction
// of packets not played; and their burst ratio, 1 if it cannot be told.
func (r *DejitterReport) Call(c Codec, extra des.Time) Call {
	call := Call{Codec: c, Delay: r.MeanDelay + extra, BurstRatio: 1}
	if sent := r.Sent(); sent > 0 {
		call.Loss = float64(sent-r.Played) / float64(sent)
		if x, ok := BurstRatio(sent, &r.Losses); ok {
			call.BurstRatio = x
		}
	}
	return call
}
