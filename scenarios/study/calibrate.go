package study

import (
	"ferrule/des"
	"ferrule/nodes"
	"ferrule/scenarios"
	"ferrule/scenarios/result"
)

// Calibrate answers for each measurement what a check says of the same figure
// under the plan of o, and the model minus what was measured. Loads are those
// that Check lists. Delays are means without any wait for other packets: light,
// the time of a packet of mean size on each line, and the mean latency of every
// router; where routes or aggregates share the traffic, the mean over it. A
// measured delay that is longer has queues in it, or a longer way.
func Calibrate(sc *scenarios.Scenario, o Options, ms []scenarios.Measured) ([]result.Calibration, error) {
	plan, err := sc.Plan(o.plan())
	if err != nil {
		return nil, err
	}
	g, err := newGround(sc, plan)
	if err != nil {
		return nil, err
	}
	streams := streamsOf(sc, plan)
	routes := newRouting(g)
	load := routes.load(streams)
	latency := make([]float64, len(sc.Sites)) // s
	for i := range latency {
		law, err := sc.Sites[i].Forwarding.Law()
		if err != nil {
			return nil, err
		}
		latency[i] = law.Mean() / float64(des.Second)
	}
	out := make([]result.Calibration, len(ms))
	for i := range ms {
		m := &ms[i]
		c := result.Calibration{What: "link", From: sc.Sites[m.From].Name, To: sc.Sites[m.To].Name, Unit: result.UnitBps, Measured: float64(m.Load)}
		if m.Circuit >= 0 {
			d := nodes.Out
			if m.From != sc.Circuits[m.Circuit].A {
				d = nodes.Back
			}
			c.Of = sc.Circuits[m.Circuit].Name
			c.Model = new(load.bps[m.Circuit][d])
		} else {
			c.What, c.Of, c.Unit, c.Measured = "delay", sc.Classes[m.Class].Name, result.UnitSeconds, m.Delay.Seconds()
			c.Model = routes.bareDelay(streams, m, latency)
		}
		if c.Model != nil {
			c.Difference = new(*c.Model - c.Measured)
			if c.Measured > 0 {
				c.Share = new(*c.Difference / c.Measured)
			}
		}
		out[i] = c
	}
	return out, nil
}

// bareDelay is the mean delay in s, without waits, of the packets of a class
// from one site to another; nil if there are none.
func (r *routing) bareDelay(streams []stream, m *scenarios.Measured, latency []float64) *float64 {
	sum, packets := 0.0, 0.0
	for i := range streams {
		s := &streams[i]
		if s.class != m.Class || s.from != m.From || s.to != m.To || s.pps == 0 || !r.walk(s) {
			continue
		}
		size := s.bps / 8 / s.pps
		d := latency[s.from] + latency[s.to]
		for _, p := range r.pass {
			d += float64(latency[p.site] * p.share)
		}
		for _, l := range r.legs {
			c := &r.g.plant.Circuits[l.circuit]
			line := (size + float64(c.Overhead)) * 8 / float64(c.Rate)
			d += float64(l.share * (r.g.light(r.g.lines[l.circuit].route).Seconds() + line))
		}
		sum += float64(d * s.pps)
		packets += s.pps
	}
	if packets == 0 {
		return nil
	}
	return new(sum / packets)
}
