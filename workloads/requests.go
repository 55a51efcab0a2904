package workloads

import (
	"errors"
	"fmt"
	"math"

	"ferrule/des"
	"ferrule/des/random"
)

// RequestsConfig describes demand for circuits that come and go. A zero field
// takes the default written beside it.
type RequestsConfig struct {
	Name  string      // keys every draw; required
	Seed  uint64      // of the run
	Start des.Time    // no request arrives before it; default 0
	Stop  des.Time    // no request arrives at or after it; default never
	Rate  float64     // mean arrivals per second; required
	Gaps  Gaps        // default Poisson
	Hold  random.Spec // how long a circuit is wanted, in s; default exponential 180
}

// Check fills the defaults and reports every fault at once.
func (c RequestsConfig) Check() (RequestsConfig, error) {
	common := Common{Name: c.Name, Start: c.Start, Stop: c.Stop, Load: 1}
	faults := common.check(nil)
	c.Stop = common.Stop
	if !(c.Rate > 0 && c.Rate <= 1e9) {
		faults = append(faults, fmt.Errorf("rate: %v/s is not between 0 and 1e9/s", c.Rate))
	}
	if c.Gaps > Constant {
		faults = append(faults, fmt.Errorf("gaps: no kind %d", c.Gaps))
	}
	if c.Hold.Kind == random.Constant && c.Hold.Mean == 0 {
		c.Hold = random.Spec{Kind: random.Exponential, Mean: 180}
	}
	if _, err := c.Hold.Law(); err != nil {
		faults = append(faults, fmt.Errorf("hold: %w", err))
	}
	return c, errors.Join(faults...)
}

// Requests gives the requests for circuits of one client, in order of time.
// Request i has the same holding time whatever the rate, and whatever becomes
// of the requests before it.
type Requests struct {
	arrivals   clock
	hold       random.Law
	stop       des.Time
	seed, name uint64
	index      uint64
}

// NewRequests returns the requests of c, or its faults.
func NewRequests(c RequestsConfig) (*Requests, error) {
	c, err := c.Check()
	if err != nil {
		return nil, err
	}
	law, err := c.Hold.Law()
	if err != nil {
		return nil, err
	}
	r := &Requests{
		arrivals: clock{kind: c.Gaps, mean: float64(des.Second) / c.Rate, draws: random.NewStream(c.Seed, c.Name+"/gap")},
		hold:     law, stop: c.Stop, seed: c.Seed, name: random.Hash(c.Name),
	}
	r.arrivals.start(c.Start, 1)
	return r, nil
}

// Next reports when the next request arrives, or des.Never. Between calls of
// Take it does not change.
func (r *Requests) Next() des.Time {
	if r.arrivals.next >= r.stop {
		return des.Never
	}
	return r.arrivals.next
}

// ofHold is what the keyed draws of requests are about.
const ofHold uint64 = 0

// Take removes the next request and returns when it arrives, for how long it
// wants a circuit, at least 1 ps, and its index: 0, 1, 2, ... It panics if Next
// is des.Never.
func (r *Requests) Take() (at, hold des.Time, index uint64) {
	at, index = r.Next(), r.index
	if at == des.Never {
		panic("workloads: Take when no request is to come")
	}
	s := r.hold.At(random.Unit(random.Draw(r.seed, r.name, index, ofHold)))
	hold = des.Never
	if x := math.Round(s * float64(des.Second)); x < longest {
		hold = des.Time(max(1, x))
	}
	r.index++
	r.arrivals.advance()
	return at, hold, index
}

// Clone returns a copy that shares no state that either will change.
func (r *Requests) Clone() *Requests {
	c := *r
	return &c
}
