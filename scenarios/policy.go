package scenarios

import (
	"fmt"

	"ferrule/des"
	"ferrule/nodes/optical"
)

// Policy has the slots of a circuit follow its load, between Floor and Ceiling.
type Policy struct {
	Pos      Pos
	Floor    int      // slots, at least 1
	Ceiling  int      // slots, at least Floor
	Step     int      // slots
	Up       float64  // share of its rate from which it grows, in (0, 1]
	Down     float64  // share up to which it shrinks, below Up
	Drops    float64  // share of packets dropped beyond which it grows too
	HoldUp   des.Time // how long that must last
	HoldDown des.Time
	Smooth   float64 // weight of the latest reading, in (0, 1]
}

// What a policy takes when the file does not say; it shrinks at half of what it
// grows at. Common practice, no source.
const (
	defaultUp       = 0.8
	defaultDrops    = 0.001
	defaultHoldUp   = 2 * des.Second
	defaultHoldDown = 10 * des.Second
	defaultSmooth   = 0.5
)

// policy reads the policy of a circuit, whose size is known; nil: it has none.
func (r *resolver) policy(p *place, raw *rawPolicy, c *Circuit) *Policy {
	if !p.given() {
		return nil
	}
	if c.Size == SizeChannel {
		p.fault("write slots:, or leave out policy", "a whole channel has one size, and cannot follow its load")
		return nil
	}
	part := func(key string, v *percent, least, or float64) float64 {
		return float64(within(p.field(key), v, percent(least), 1, percent(or), func(x percent) string { return fmt.Sprintf("%g%%", float64(x)*100) }))
	}
	slots := func(key string, v *int, or int) int {
		return within(p.field(key), v, 1, optical.SlotsPerChannel, or, plain)
	}
	span := func(key string, v *des.Time, or des.Time) des.Time {
		return within(p.field(key), v, 0, maxSpan, or, FormatTime)
	}
	q := &Policy{
		Pos: p.pos(), Floor: slots("floor", raw.Floor, max(1, c.Slots)), Ceiling: slots("ceiling", raw.Ceiling, max(1, c.Slots)), Step: slots("step", raw.Step, 1),
		Up: part("up", raw.Up, 1e-6, defaultUp), Drops: defaultDrops,
		HoldUp: span("hold-up", raw.HoldUp, defaultHoldUp), HoldDown: span("hold-down", raw.HoldDown, defaultHoldDown),
		Smooth: part("smooth", raw.Smooth, 1e-6, defaultSmooth),
	}
	q.Down = part("down", raw.Down, 0, q.Up/2)
	if raw.Drops != nil {
		q.Drops = float64(*raw.Drops)
	}
	switch {
	case q.Floor > q.Ceiling:
		p.field("floor").orSelf().fault(fmt.Sprintf("write 1 to %d", q.Ceiling), "a floor of %d slots is above the ceiling of %d", q.Floor, q.Ceiling)
	case c.Slots < q.Floor || c.Slots > q.Ceiling:
		p.fault(fmt.Sprintf("give the circuit %d to %d slots", q.Floor, q.Ceiling), "the circuit begins with %d slots, outside its policy", c.Slots)
	case q.Down >= q.Up:
		p.field("down").orSelf().fault(fmt.Sprintf("write less than %g%%", q.Up*100), "it would shrink at %g%% and grow at %g%%", q.Down*100, q.Up*100)
	default:
		return q
	}
	return nil
}

// orSelf is p, or what it stands in when it is not in the file.
func (p *place) orSelf() *place {
	for p.node == nil && p.up != nil {
		p = p.up
	}
	return p
}

// rawPolicy is a policy as written.
type rawPolicy struct {
	Floor    *int      `mapstructure:"floor"`
	Ceiling  *int      `mapstructure:"ceiling"`
	Step     *int      `mapstructure:"step"`
	Up       *percent  `mapstructure:"up"`
	Down     *percent  `mapstructure:"down"`
	Drops    *ratio    `mapstructure:"drops"`
	HoldUp   *des.Time `mapstructure:"hold-up"`
	HoldDown *des.Time `mapstructure:"hold-down"`
	Smooth   *percent  `mapstructure:"smooth"`
}
