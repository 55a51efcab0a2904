package central

import (
	"fmt"
	"slices"

	"ferrule/controller"
	"ferrule/nodes"
	"ferrule/nodes/optical"
)

// claim is what a holder should own on the sending side of one fibre at one
// site.
type claim struct {
	optical.Ownership
	site nodes.SiteID
}

// before orders claims by site, fibre and holder.
func (a *claim) compare(b *claim) int {
	for _, d := range [4]int{
		int(a.site) - int(b.site), int(a.Fibre) - int(b.Fibre),
		int(a.Holder.Circuit) - int(b.Holder.Circuit), int(a.Holder.Incarnation) - int(b.Holder.Incarnation),
	} {
		if d != 0 {
			return d
		}
	}
	return 0
}

// Audit checks that every cross-connect owns for each circuit and request
// exactly what it should, that slots free and owned add up at each, and that
// the controller believes free what is free. What a command is under way for
// is left out. It returns one line for each failure, in a fixed order.
func (n *Net) Audit() (failures []string) {
	var have []claim
	for s, e := range n.elements {
		failures = append(failures, e.xc.Audit(n.k.plant)...)
		for _, o := range e.xc.Ownerships() {
			have = append(have, claim{o, nodes.SiteID(s)})
		}
	}
	want, flux := n.ctl.claims()
	compare := func(a, b claim) int { return a.compare(&b) }
	slices.SortFunc(have, compare)
	slices.SortFunc(want, compare)
	for len(have) > 0 || len(want) > 0 {
		d := -1
		switch {
		case len(have) == 0:
			d = 1
		case len(want) > 0:
			d = have[0].compare(&want[0])
		}
		var h, w claim
		if d <= 0 {
			h, have = have[0], have[1:]
		}
		if d >= 0 {
			w, want = want[0], want[1:]
		}
		failures = append(failures, n.differ(d, &h, &w, flux)...)
	}
	return append(failures, n.ctl.auditFree()...)
}

// differ words the difference of what is owned and what should be; d < 0: only
// h is given, d > 0: only w.
func (n *Net) differ(d int, h, w *claim, flux []optical.Holder) []string {
	at := h
	if d > 0 {
		at = w
	}
	if d == 0 && h.Slots == w.Slots && slices.Equal(h.Channels, w.Channels) || slices.Contains(flux, at.Holder) {
		return nil
	}
	return []string{fmt.Sprintf("site %s, fibre %s: %s owns %d slots and channels %v, should own %d and %v",
		n.k.siteName(at.site), n.k.fibreName(at.Fibre), n.k.holderName(at.Holder), h.Slots, h.Channels, w.Slots, w.Channels)}
}

// holderName words a holder.
func (k *known) holderName(h optical.Holder) string {
	s, ok := streamOf(h.Circuit)
	switch {
	case !ok:
		return fmt.Sprintf("circuit %s (incarnation %d)", k.circuitName(h.Circuit), h.Incarnation)
	case s < len(k.cfg.Streams):
		return fmt.Sprintf("request %d of %s", h.Incarnation, k.cfg.Streams[s].Name)
	default:
		return fmt.Sprintf("request %d", h.Incarnation)
	}
}

// claims lists what should be owned, and the holders about which something is
// under way.
func (c *Controller) claims() (want []claim, flux []optical.Holder) {
	for i := range c.circuits {
		k := &c.circuits[i]
		want = k.held.claim(want, nodes.CircuitID(i))
		if k.state == controller.Resizing || k.state == controller.TearingDown {
			flux = k.held.holders(flux, nodes.CircuitID(i))
		}
	}
	for _, t := range c.tasks {
		if t != nil && t.phase == phaseConnect {
			flux = t.h.holders(flux, t.circuit)
		}
		if t != nil {
			want = t.h.claim(want, t.circuit)
		}
	}
	for i := range c.requests {
		if r := &c.requests[i]; r.serial != 0 {
			want = r.h.claim(want, streamHolder(int(r.stream)))
		}
	}
	for i := range c.commands.list {
		if cmd := &c.commands.list[i]; cmd.serial != 0 && cmd.m.Op == opAssign {
			flux = append(flux, optical.Holder{Circuit: cmd.m.Circuit, Incarnation: cmd.m.N})
		}
	}
	for i := range c.owed {
		flux = append(flux, optical.Holder{Circuit: c.owed[i].m.Circuit, Incarnation: c.owed[i].m.N})
	}
	return want, flux
}

// claim adds what h should own at every site of its route.
func (h *holding) claim(list []claim, id nodes.CircuitID) []claim {
	for i, s := range h.sites {
		a := h.assignmentAt(i)
		for j, f := range a.fibres {
			if f == nodes.None {
				continue
			}
			o := optical.Ownership{Fibre: f, Holder: h.holder(id), Slots: a.amounts[j]}
			if a.flags&byChannel != 0 {
				o.Slots, o.Channels = 0, []int{a.amounts[j]}
			}
			list = append(list, claim{o, s})
		}
	}
	if h.copy != nil {
		return h.copy.claim(list, id)
	}
	return list
}

// auditFree checks that slots believed free and slots that circuits and
// requests hold add up to all slots of every fibre.
func (c *Controller) auditFree() (failures []string) {
	held := make([]int64, len(c.fibres))
	add := func(h *holding) {
		for _, f := range h.routes() {
			if h.channels == nil {
				held[f] += int64(h.slots)
			}
		}
	}
	for i := range c.circuits {
		add(&c.circuits[i].held)
		if t := c.circuits[i].task; t != nodes.None && c.circuits[i].state == controller.Resizing {
			more := c.circuits[i].held
			more = more.withSlots(max(0, c.tasks[t].slots-more.slots))
			add(&more)
		}
	}
	for _, t := range c.tasks {
		if t != nil {
			add(&t.h)
		}
	}
	for i := range c.requests {
		if c.requests[i].serial != 0 {
			add(&c.requests[i].h)
		}
	}
	for f := range held {
		if all := int64(c.k.plant.Fibres[f].Slots); c.free[f]+held[f] != all {
			failures = append(failures, fmt.Sprintf("controller, fibre %s: %d slots believed free and %d held, of %d",
				c.k.fibreName(nodes.FibreID(f)), c.free[f], held[f], all))
		}
	}
	return failures
}
