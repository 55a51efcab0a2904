package scenarios

import (
	"cmp"
	"fmt"
	"slices"

	"ferrule/nodes"
)

// AsIs is the name of the plan that changes nothing.
const AsIs = "as-is"

// Limits on plans. A plan knows all circuits and the acts of the plans beneath,
// so plans times circuits and acts is bounded too.
const (
	maxPlans   = 500
	maxPlanned = 400000
)

// Plan returns the plan called name; AsIs always exists. The caller must not
// change it.
func (s *Scenario) Plan(name string) (*Plan, error) {
	names := make([]string, len(s.Plans))
	for i := range s.Plans {
		if s.Plans[i].Name == name {
			return &s.Plans[i], nil
		}
		names[i] = s.Plans[i].Name
	}
	return nil, fmt.Errorf("%s: no plan is called %q; %s", s.File, name, didYouMean(name, names))
}

// resolvePlans reads the plans, each after the one it is built on.
func (r *resolver) resolvePlans() {
	list := r.t.top().field("plans")
	r.s.Plans = append(r.s.Plans, Plan{Name: AsIs, Circuits: slices.Clone(r.s.Circuits)})
	r.plans.ids[AsIs] = 0
	r.plans.names = append(r.plans.names, AsIs)
	r.plans.where = append(r.plans.where, Pos{})
	r.capacity(r.s.Plans[0].Circuits, nil)
	circuits := len(r.s.Circuits)
	for i := range r.raw.Plans {
		circuits += len(r.raw.Plans[i].InPlace) + len(r.raw.Plans[i].Steps)
	}
	if n := len(r.raw.Plans); n > maxPlans || n*circuits > maxPlanned {
		list.fault("write fewer plans", "%d plans with %d circuits are too many", n, circuits)
		return
	}
	on := make([]int, len(r.raw.Plans)) // plan i is built on on[i]
	for i := range r.raw.Plans {
		r.plans.add(r, list.item(i), r.raw.Plans[i].Name)
		r.s.Plans = append(r.s.Plans, Plan{})
	}
	for i := range r.raw.Plans {
		if q := list.item(i).field("on"); q.given() {
			on[i] = max(0, r.plans.find(q, r.raw.Plans[i].On))
		}
	}
	done := make([]bool, len(r.s.Plans))
	done[0] = true
	for i := range r.raw.Plans {
		r.planAfter(list, i+1, on, done)
	}
}

// planAfter resolves plan i once the plan beneath it is.
func (r *resolver) planAfter(list *place, i int, on []int, done []bool) {
	var way []int
	for ; !done[i]; i = on[i-1] {
		if slices.Contains(way, i) {
			list.item(i-1).field("on").fault("build it on as-is", "the plan %s is built on itself", r.raw.Plans[i-1].Name)
			on[i-1] = 0
			way = way[slices.Index(way, i):]
			break
		}
		way = append(way, i)
	}
	for _, i := range slices.Backward(way) {
		if !done[i] {
			r.plan(list.item(i-1), &r.raw.Plans[i-1], &r.s.Plans[on[i-1]], &r.s.Plans[i])
			done[i] = true
		}
	}
}

// plan reads one plan on top of another.
func (r *resolver) plan(p *place, raw *rawPlan, on, out *Plan) {
	*out = Plan{Name: raw.Name, Pos: p.pos(), About: raw.About, On: on.Name}
	names := newIndex("circuit", r.t.faults)
	for i := range on.Circuits {
		c := &on.Circuits[i]
		if _, taken := names.ids[c.Name]; !taken {
			names.ids[c.Name] = i
		}
		names.names = append(names.names, c.Name)
		names.where = append(names.where, c.Pos)
	}
	place := &actList{r: r, list: p.field("in-place"), raw: raw.InPlace, kind: inPlace, circuits: slices.Clone(on.Circuits), names: names}
	place.register()
	steps := &actList{r: r, list: p.field("steps"), raw: raw.Steps, kind: inSteps, circuits: place.circuits, names: names}
	steps.register()
	place.circuits = steps.circuits
	out.InPlace = place.resolve(on.InPlace)
	out.Steps = steps.resolve(on.Steps)
	out.Circuits = steps.circuits
	out.Moves = slices.Clone(on.Moves)
	out.Undo = on.Undo
	if q := p.field("when-blocked"); q.given() {
		out.Undo = r.choice(q, raw.WhenBlocked, whenBlockedWords, 0) == 1
	}
	r.putInPlace(out, len(on.InPlace), p.field("in-place"))
	r.capacity(out.Circuits, out)
}

// putInPlace carries out what a plan has in place, from act first on.
func (r *resolver) putInPlace(plan *Plan, first int, p *place) {
	chains := map[uint16][]nodes.CircuitID{}
	for _, m := range plan.Moves {
		chains[m.Way] = m.Chain
	}
	for i := range plan.InPlace[first:] {
		a := &plan.InPlace[first+i]
		bad := func(hint, format string, args ...any) {
			r.t.faults.add(a.Pos, p.key(), fmt.Sprintf(format, args...), hint)
		}
		if a.Verb == VerbTearDown || a.Verb == VerbResize {
			if a.Circuit < 0 {
				continue
			}
			if !plan.Circuits[a.Circuit].InPlace {
				bad("name a circuit that is in place", "the circuit %s does not stand at the start", a.Subject)
				continue
			}
		}
		switch a.Verb {
		case VerbSetUp:
		case VerbTearDown:
			plan.Circuits[a.Circuit].InPlace = false
		case VerbResize:
			resizeInPlace(&plan.Circuits[a.Circuit], a)
		case VerbMove, VerbReturn:
			for _, m := range a.Moved {
				chains[m.Way] = oriented(a.Onto, m.Reverse)
			}
		default:
			panic("scenarios: in place: " + a.Verb.String())
		}
	}
	plan.Moves = plan.Moves[:0:0]
	// order: does not matter because the moves are sorted by way below.
	for way, chain := range chains {
		if len(chain) > 0 {
			plan.Moves = append(plan.Moves, Carriage{way, chain})
		}
	}
	slices.SortFunc(plan.Moves, func(a, b Carriage) int { return cmp.Compare(a.Way, b.Way) })
	for _, m := range plan.Moves {
		for _, id := range m.Chain {
			if c := &plan.Circuits[id]; !c.InPlace {
				agg, _ := nodes.AggOf(m.Way)
				p.fault("move it in steps, once the circuit is up", "%s is moved onto %s, which does not stand at the start",
					r.s.Aggregates[agg].Name, c.Name)
				return
			}
		}
	}
}

// resizeInPlace gives c its new size; a port that was shaped stays so.
func resizeInPlace(c *Circuit, a *Act) {
	if c.Rate == c.Payload || c.Rate > a.Payload {
		c.Rate = a.Payload
	}
	c.Slots, c.Payload = a.Slots, a.Payload
}

// oriented is a chain in the order in which a way passes it.
func oriented(chain []nodes.CircuitID, reverse bool) []nodes.CircuitID {
	if !reverse {
		return chain
	}
	out := slices.Clone(chain)
	slices.Reverse(out)
	return out
}

// capacity checks the circuits that stand at the start and whose route is
// given against the slots and channels of each fibre. Under a plan, only what
// the plan has made worse is a fault of the plan.
func (r *resolver) capacity(circuits []Circuit, plan *Plan) {
	type use struct {
		slots, channels int
	}
	used := make([]use, len(r.s.Fibres))
	for i := range circuits {
		c := &circuits[i]
		if !c.InPlace {
			continue
		}
		for _, id := range c.Along {
			u := &used[id]
			if c.Size == SizeChannel {
				u.channels++
			} else {
				u.slots += c.Slots
			}
		}
	}
	for i := range used {
		f, u := &r.s.Fibres[i], &used[i]
		pos, key := f.Pos, "fibres."+f.Name
		if plan != nil {
			if r.over[i] {
				continue
			}
			pos, key = plan.Pos, "plans."+plan.Name
		}
		if u.slots > f.Slots {
			r.overfull(plan == nil, i)
			r.t.faults.add(pos, key, fmt.Sprintf("circuits in place take %d slots of %s, whose lit channels have %d", u.slots, f.Name, f.Slots),
				"light more channels, or ask for fewer slots")
		}
		if free := f.Channels - f.Lit; u.channels > free {
			r.overfull(plan == nil, i)
			r.t.faults.add(pos, key, fmt.Sprintf("circuits in place take %d whole channels of %s, which has %d that are not lit", u.channels, f.Name, free),
				"have more channels, or light fewer")
		}
	}
}

// overfull remembers the fibres that are over their capacity as it is.
func (r *resolver) overfull(asIs bool, fibre int) {
	if asIs {
		r.over[fibre] = true
	}
}
