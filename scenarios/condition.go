package scenarios

import (
	"ferrule/des"
	"ferrule/nodes"
)

// defaultLongest is how long a shaper holds a packet at most when the file does
// not say so: common practice, no source.
const defaultLongest = 100 * des.Millisecond

// maxBurst is the largest bucket that can be asked for.
const maxBurst = nodes.Bytes(1e12)

// condition reads the policer and the shaper of an aggregate.
func (r *resolver) condition(p *place, raw *rawAggregate, a *Aggregate) {
	if q := p.field("police"); q.given() {
		a.Police = r.police(q, &raw.Police)
	}
	if q := p.field("shape"); q.given() {
		rate, burst := r.tokens(q, raw.Shape.Rate, raw.Shape.Burst)
		longest := within(q.field("longest"), raw.Shape.Longest, 0, maxSpan, defaultLongest, FormatTime)
		r.unless(q, "longest", FormatTime(defaultLongest))
		a.Shape = &Shape{Rate: rate, Burst: burst, Longest: longest}
	}
}

func (r *resolver) police(p *place, raw *rawPolice) *Police {
	c := &Police{}
	c.Rate, c.Burst = r.tokens(p, raw.Rate, raw.Burst)
	peak, peakBurst, excess := p.field("peak"), p.field("peak-burst"), p.field("excess")
	switch {
	case !peak.given() && peakBurst.given():
		peakBurst.fault("write peak: as well", "stands without peak")
	case !peak.given():
		c.Excess = within(excess, raw.Excess, 0, maxBurst, 0, FormatBytes)
	case excess.given():
		excess.fault("write excess for one rate, peak for two", "stands beside peak")
	case !peakBurst.given():
		r.missing(p, "peak-burst", "write for instance peak-burst: 30kB")
	default:
		c.Peak = within(peak, raw.Peak, c.Rate, maxRate, c.Rate, FormatRate)
		c.PeakBurst = within(peakBurst, raw.PeakBurst, 1, maxBurst, 1, FormatBytes)
	}
	return c
}

// tokens reads the rate and the size of a token bucket.
func (r *resolver) tokens(p *place, rate *nodes.Rate, burst *nodes.Bytes) (nodes.Rate, nodes.Bytes) {
	if !p.field("rate").given() {
		r.missing(p, "rate", "write for instance rate: 50Mbps")
	}
	if !p.field("burst").given() {
		r.missing(p, "burst", "write for instance burst: 15kB")
	}
	return within(p.field("rate"), rate, 1, maxRate, 1, FormatRate), within(p.field("burst"), burst, 1, maxBurst, 1, FormatBytes)
}
