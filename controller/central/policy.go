package central

import (
	"fmt"
	"math"

	"ferrule/controller"
	"ferrule/des"
	"ferrule/nodes"
)

// Policy has the slots of a circuit follow its load. The controller polls both
// ends, smooths what it reads, and acts when a threshold has been passed for
// its holding time. Circuits on whole channels have no policy: they have one
// size.
type Policy struct {
	Circuit  nodes.CircuitID
	Floor    int      // least slots, at least 1
	Ceiling  int      // most slots
	Step     int      // slots by which it grows or shrinks, at least 1
	Up       float64  // it grows when at least so much of its rate is used
	Down     float64  // it shrinks when no more is used; below Up
	Drops    float64  // it grows, too, when more than this share of its packets is dropped
	HoldUp   des.Time // how long that must have lasted
	HoldDown des.Time // likewise before it shrinks
	Weight   float64  // of the latest reading in the smoothed ones, in (0, 1]
}

// check panics on what no plan can ask for.
func (p *Policy) check(plant *nodes.Plant) {
	ok := int(p.Circuit) < len(plant.Circuits) && !plant.Circuits[p.Circuit].Channel
	ok = ok && 1 <= p.Floor && p.Floor <= p.Ceiling && p.Step >= 1 && p.Down < p.Up && p.HoldUp >= 0 && p.HoldDown >= 0
	if !ok || p.Weight <= 0 || p.Weight > 1 {
		panic("central: a policy that cannot be followed")
	}
}

// reading is what an end of a circuit has counted. It never changes.
type reading struct {
	nodes.PortCounters
	at des.Time
}

// watched is a circuit under a policy.
type watched struct {
	last    [2]*reading // of each end; nil: none since the last change of size
	fresh   [2]*reading // of the poll in hand
	asked   int         // ends that have not answered it
	use     float64     // smoothed share of the rate used, of the busier end
	drops   float64     // smoothed share of packets dropped, of the worse end
	since   [2]des.Time // when growing and shrinking first seemed right; Never: it does not
	way     int         // of the last decision: 1 grown, -1 shrunk, 0 none
	stuck   bool        // that it cannot grow or shrink further has been said
	outcome controller.PolicyReport
}

// bookPoll books the next poll.
func (c *Controller) bookPoll(x nodes.Local, now des.Time) {
	if len(c.k.cfg.Policies) > 0 {
		later(x, now+c.k.cfg.Poll, nodes.Message{Op: opPollAll})
	}
}

// poll asks both ends of every circuit under a policy what they have counted.
func (c *Controller) poll() {
	c.bookPoll(c.x, c.now)
	for i := range c.watched {
		w := &c.watched[i]
		id := c.k.cfg.Policies[i].Circuit
		k := &c.circuits[id]
		c.withdraw(ownerPoll, int32(i))
		if !carries(k.state) || k.task != nodes.None {
			w.forget()
			continue
		}
		w.fresh, w.asked = [2]*reading{}, 2
		for _, s := range c.k.plant.Circuits[id].Ends {
			c.command(s, nodes.Message{Op: opPoll, Circuit: id}, ownerPoll, int32(i))
		}
	}
}

// forget starts readings anew.
func (w *watched) forget() {
	w.last, w.asked = [2]*reading{}, 0
	w.since = [2]des.Time{des.Never, des.Never}
}

// polled takes in what an end has counted.
func (c *Controller) polled(i int32, from nodes.SiteID, r *reading) {
	w, p := &c.watched[i], &c.k.cfg.Policies[i]
	w.fresh[endOf(c.k.plant.Circuits[p.Circuit].Ends, from)] = r
	if w.asked--; w.asked > 0 {
		return
	}
	was := w.last
	w.last = w.fresh
	if was[0] == nil || was[1] == nil || c.circuits[p.Circuit].task != nodes.None {
		return
	}
	use, drops := 0.0, 0.0
	for e := range 2 {
		u, d := w.last[e].since(was[e])
		use, drops = max(use, u), max(drops, d)
	}
	w.use = float64(p.Weight*use) + float64((1-p.Weight)*w.use)
	w.drops = float64(p.Weight*drops) + float64((1-p.Weight)*w.drops)
	c.judge(i)
}

// since is the share of its rate that an end used since an earlier reading,
// and the share of packets it dropped.
func (r *reading) since(o *reading) (use, drops float64) {
	if span := (r.at - o.at).Seconds(); span > 0 && r.Rate > 0 {
		use = float64(r.SentBytes-o.SentBytes) * 8 / float64(span*float64(r.Rate))
	}
	if lost := r.LostPackets - o.LostPackets; lost > 0 {
		drops = float64(lost) / float64(lost+r.SentPackets-o.SentPackets)
	}
	return use, drops
}

// judge decides whether a circuit grows or shrinks.
func (c *Controller) judge(i int32) {
	w, p := &c.watched[i], &c.k.cfg.Policies[i]
	slots := c.circuits[p.Circuit].held.slots
	over := w.use >= p.Up || w.drops > p.Drops
	under := w.use <= p.Down && w.drops <= p.Drops
	for d, is := range [2]bool{over, under} {
		switch {
		case !is:
			w.since[d] = des.Never
		case w.since[d] == des.Never:
			w.since[d] = c.now
		}
	}
	switch {
	case over && c.now-w.since[0] >= p.HoldUp:
		c.follow(i, min(slots+p.Step, max(p.Ceiling, slots)), 1, c.now-w.since[0])
	case under && c.now-w.since[1] >= p.HoldDown:
		c.follow(i, max(slots-p.Step, min(p.Floor, slots)), -1, c.now-w.since[1])
	case !over && !under:
		w.stuck = false
	}
}

// follow has a circuit resized, and says on which figures.
func (c *Controller) follow(i int32, slots, way int, lasted des.Time) {
	w, p := &c.watched[i], &c.k.cfg.Policies[i]
	k := &c.circuits[p.Circuit]
	name := c.k.circuitName(p.Circuit)
	what, limit := "policy grows", p.Up
	if way < 0 {
		what, limit = "policy shrinks", p.Down
	}
	figures := fmt.Sprintf("utilisation %s against %s, drops %s against %s, for %s", share(w.use), share(limit), share(w.drops), share(p.Drops), people(lasted))
	if slots == k.held.slots {
		if !w.stuck {
			w.stuck = true
			c.x.Note("policy at its limit", name, fmt.Sprintf("%d slots; %s", slots, figures))
		}
		return
	}
	if w.way == -way {
		w.outcome.Reversals++
	}
	w.way, w.stuck = way, false
	if way > 0 {
		w.outcome.Grown++
	} else {
		w.outcome.Shrunk++
	}
	c.x.Note(what, name, fmt.Sprintf("%d to %d slots; %s", k.held.slots, slots, figures))
	w.use = float64(w.use * float64(k.held.slots) / float64(slots))
	w.drops = 0
	w.forget()
	c.begin(task{kind: taskResize, circuit: p.Circuit, step: nodes.None, slots: slots, rate: c.rateFor(p.Circuit, slots)}, rankOrder)
}

// policyBlocked counts a decision of a policy that came to nothing.
func (c *Controller) policyBlocked(t *task) {
	for i := range c.watched {
		if w := &c.watched[i]; t.step == nodes.None && c.k.cfg.Policies[i].Circuit == t.circuit {
			w.outcome.Blocked++
			w.use = float64(w.use * float64(t.slots) / float64(max(1, c.circuits[t.circuit].held.slots)))
		}
	}
}

// share words a ratio for people.
func share(v float64) string {
	switch {
	case v == 0:
		return "0 %"
	case v < 0.001:
		return fmt.Sprintf("%.2g %%", v*100)
	default:
		return fmt.Sprintf("%.3g %%", math.Round(v*1e5)/1e3)
	}
}

// Policies tells how the policy of each circuit that has one has acted.
func (n *Net) Policies() []controller.PolicyReport {
	list := make([]controller.PolicyReport, len(n.ctl.watched))
	for i := range list {
		list[i] = n.ctl.watched[i].outcome
		list[i].Circuit = n.k.cfg.Policies[i].Circuit
	}
	return list
}
