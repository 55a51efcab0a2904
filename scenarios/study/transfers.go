package study

import (
	"ferrule/des/measure"
	"ferrule/nodes/packet"
	"ferrule/scenarios/result"
)

// transfers adds up what closed-loop transports did: of one way, or of all ways
// of a class.
type transfers struct {
	any      bool
	times    measure.Hist
	exact    measure.Moments
	began    uint64
	good     uint64
	resent   uint64
	timeouts uint64
}

// add adds the cell of a stretch, if there is one; cells is nil of ways without
// transports.
func (t *transfers) add(cells []*packet.FlowCell, stretch int) {
	t.any = t.any || cells != nil
	if stretch >= len(cells) || cells[stretch] == nil {
		return
	}
	c := cells[stretch]
	t.times.Merge(&c.Times)
	t.exact.Merge(c.Exact)
	t.began += c.Began
	t.good += c.Good
	t.resent += c.Resent
	t.timeouts += c.Timeouts
}

// outcome is what is told of them for a period of so many seconds; nil if there
// are no transports.
func (t *transfers) outcome(seconds float64) *result.Transfers {
	if !t.any {
		return nil
	}
	o := &result.Transfers{Asked: int64(t.began), Complete: int64(t.exact.N), ResentCount: int64(t.resent), Timeouts: int64(t.timeouts)}
	if seconds > 0 {
		bps := float64(t.good) * 8 / seconds
		o.GoodputBps = &bps
	}
	if t.exact.N > 0 {
		o.TimeS = distribution(&t.times)
		lo, mean, hi := ps(float64(t.exact.Min)), ps(t.exact.Mean()), ps(float64(t.exact.Max))
		o.TimeS.Min, o.TimeS.Mean, o.TimeS.Max = &lo, &mean, &hi
	}
	return o
}
