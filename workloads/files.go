package workloads

import (
	"errors"
	"fmt"
	"math"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
)

// FilesConfig describes transfers of files in open loop: they arrive as a
// Poisson process and send at the pace of an access line whatever the network
// does, which no real transport would. A zero field takes the default written
// beside it.
type FilesConfig struct {
	Common
	Size random.Spec // bytes of a file; default Pareto of mean 80 kB and shape 1.3, at most 100 MB
	Pace nodes.Rate  // of one transfer, bit/s of IP bytes; default 100 Mbit/s
	Like *Files      // a source made with the same Size, whose table of that law is shared; default none
}

// Check fills the defaults and reports every fault at once.
func (c FilesConfig) Check() (FilesConfig, error) {
	faults := c.Common.check(nil)
	if c.Size.Kind == random.Constant && c.Size.Mean == 0 {
		c.Size = random.Spec{Kind: random.Pareto, Mean: 80e3, Shape: 1.3, AtMost: 100e6}
	}
	if c.Pace == 0 {
		c.Pace = 100 * nodes.Mbps
	}
	if c.Pace < 0 || c.Pace > MaxLoad {
		faults = append(faults, fmt.Errorf("pace: %d bit/s is not between 1 bit/s and %d Tbit/s", c.Pace, MaxLoad/(1000*nodes.Gbps)))
	}
	if c.Like == nil {
		if l, err := c.lengths(); err != nil {
			faults = append(faults, fmt.Errorf("size: %w", err))
		} else {
			c.Like = &Files{flows: l}
		}
	}
	return c, errors.Join(faults...)
}

// lengths returns the law of the packets of a file.
func (c FilesConfig) lengths() (*lengths, error) {
	if c.Like != nil {
		return c.Like.flows, nil
	}
	law, err := c.Size.Law()
	if err != nil {
		return nil, err
	}
	if m := law.Mean(); m < 1 {
		return nil, fmt.Errorf("mean %v B is below one byte", m)
	}
	return newLengths(law, payload, 0.5)
}

// Files sends the packets of files.
type Files struct {
	train
	flows *lengths
}

// NewFiles returns a source of files, or the faults of c.
//
// A file is rounded to the nearest whole byte, at least one, and cut into
// packets of 1500 B, of which 40 B are headers; the last packet holds what is
// left. The first is born when the transfer arrives, each further one after
// the time 1500 B take at the pace, the last one too. Transfers arrive at the
// rate that gives the load, headers included. At the start some are under way,
// as if the source had been running for ever.
func NewFiles(c FilesConfig) (*Files, error) {
	c, err := c.Check()
	if err != nil {
		return nil, err
	}
	flows, err := c.lengths()
	if err != nil {
		return nil, err
	}
	f := &Files{newTrain(c.Common, c.Pace.TxTime(mtu), mtu), flows}
	bytes := flows.law.Mean() + float64(header*flows.mean)
	f.arrive(Poisson, bytes*8/float64(c.Load)*float64(des.Second), flows)
	return f, nil
}

// lastOfFile returns the IP bytes of the last packet of a file of x bytes.
func lastOfFile(x float64) uint16 {
	n := int64(min(max(1, math.Floor(x+0.5)), longest))
	return uint16(header + 1 + (n-1)%payload)
}

// Clone implements nodes.Source.
func (f *Files) Clone() nodes.Source { return &Files{f.clone(), f.flows} }
