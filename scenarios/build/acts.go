package build

import (
	"fmt"
	"strings"

	"ferrule/controller"
	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/packet"
	"ferrule/scenarios"
)

// Step is an act of the timeline or of the plan, for the report.
type Step struct {
	Act   *scenarios.Act
	Order int    // index among the orders that the controller knew in advance, or -1
	Live  string // the name of an order given while the model ran; empty for all others
}

// acts turns the timeline and the steps of the plan into acts from outside and
// orders for the controller.
func acts(sc *scenarios.Scenario, plan *scenarios.Plan, plant *nodes.Plant) (steps []Step, out []packet.Act, orders []controller.Order, err error) {
	for l, list := range [][]scenarios.Act{sc.Timeline, plan.Steps} {
		for i := range list {
			a := &list[i]
			name := fmt.Sprintf("%s %s", a.Verb, a.Subject)
			at, ok := rootInstant(list, i)
			if !ok {
				return nil, nil, nil, fmt.Errorf("%s:%d: %s: nothing says when it begins", a.Pos.File, a.Pos.Line, name)
			}
			switch a.Verb {
			case scenarios.VerbFail, scenarios.VerbMend:
				steps = append(steps, Step{Act: a, Order: -1})
				out = append(out, failActs(sc, a, name)...)
			case scenarios.VerbCut, scenarios.VerbRepair:
				if a.After != nodes.None {
					return nil, nil, nil, fmt.Errorf("%s:%d: %s: write at:, a fibre waits for nothing", a.Pos.File, a.Pos.Line, name)
				}
				steps = append(steps, Step{Act: a, Order: -1})
				out = append(out, fibreActs(sc, a, name)...)
			case scenarios.VerbScale:
				if a.After != nodes.None {
					return nil, nil, nil, fmt.Errorf("%s:%d: %s: write at:, traffic waits for nothing", a.Pos.File, a.Pos.Line, name)
				}
				steps = append(steps, Step{Act: a, Order: -1})
				act := packet.Act{At: at, Kind: packet.ActScale, Name: name, Factor: a.Factor}
				for _, m := range a.Moved {
					act.Ways = append(act.Ways, m.Way)
				}
				out = append(out, act)
			default:
				o := order(plan, a, stepName(l, i))
				if a.After != nodes.None {
					o.After = controller.Condition{Kind: controller.StepDone, Step: stepName(l, a.After)}
				}
				o.At = at
				o.Undo = l == 1 && plan.Undo
				steps = append(steps, Step{Act: a, Order: len(orders)})
				orders = append(orders, o)
			}
		}
	}
	return steps, out, orders, nil
}

func stepName(list, i int) string {
	return fmt.Sprintf("%s step %d", [...]string{"timeline", "plan"}[list], i+1)
}

// rootInstant follows after: to the act that has an instant.
func rootInstant(list []scenarios.Act, i int) (des.Time, bool) {
	for range len(list) + 1 {
		if list[i].After == nodes.None {
			return list[i].At, list[i].At != des.Never
		}
		i = list[i].After
	}
	return 0, false
}

func fibreActs(sc *scenarios.Scenario, a *scenarios.Act, name string) []packet.Act {
	var out []packet.Act
	for _, f := range a.Fibres {
		act := packet.Act{At: a.At, Kind: packet.ActRepair, Name: name, Fibre: f}
		if a.Verb == scenarios.VerbCut || a.Verb == scenarios.VerbFail {
			act.Kind = packet.ActCut
			act.Where = a.WhereOn(&sc.Fibres[f]).Light()
			switch a.Ways {
			case scenarios.WaysOut:
				act.OneWay, act.Dir = true, nodes.Out
			case scenarios.WaysBack:
				act.OneWay, act.Dir = true, nodes.Back
			case scenarios.WaysBoth:
			default:
				panic(fmt.Sprintf("build: unknown ways %d", a.Ways))
			}
		}
		out = append(out, act)
	}
	return out
}

// failActs are the acts from outside of a failure or its end.
func failActs(sc *scenarios.Scenario, a *scenarios.Act, name string) []packet.Act {
	if a.Part == scenarios.PartFibre {
		return fibreActs(sc, a, name)
	}
	act := packet.Act{At: a.At, Kind: packet.ActFail, Name: name, Site: a.Site, Circuit: a.Circuit}
	if a.Verb == scenarios.VerbMend {
		act.Kind = packet.ActMend
	}
	switch a.Part {
	case scenarios.PartRouter:
		act.Part = packet.PartRouter
	case scenarios.PartSite:
		act.Part = packet.PartSite
	case scenarios.PartPort:
		act.Part = packet.PartPort
	default:
		panic(fmt.Sprintf("build: unknown part %d", a.Part))
	}
	return []packet.Act{act}
}

func order(plan *scenarios.Plan, a *scenarios.Act, name string) controller.Order {
	o := controller.Order{Name: name, Circuit: a.Circuit, KeepOrder: a.Order == scenarios.OrderKept}
	for _, m := range a.Moved {
		o.Ways = append(o.Ways, m.Way)
	}
	switch a.Verb {
	case scenarios.VerbSetUp:
		o.Kind = controller.SetUp
	case scenarios.VerbTearDown:
		o.Kind = controller.TearDown
	case scenarios.VerbResize:
		o.Kind, o.Slots = controller.Resize, a.Slots
		if c := &plan.Circuits[a.Circuit]; c.Rate == c.Payload {
			o.Rate = a.Payload
		}
	case scenarios.VerbMove:
		o.Kind, o.Circuits = controller.Move, a.Onto
	case scenarios.VerbReturn:
		o.Kind = controller.Return
	case scenarios.VerbDrain:
		o.Kind, o.Site = controller.Drain, a.Site
	case scenarios.VerbUndrain:
		o.Kind, o.Site = controller.Undrain, a.Site
	default:
		panic("build: unknown verb " + a.Verb.String())
	}
	return o
}

// Describe says what an act is about, for a report.
func Describe(a *scenarios.Act) string {
	s := a.Subject
	if a.Verb == scenarios.VerbScale {
		return fmt.Sprintf("%s to %g %%", s, a.Factor*100)
	}
	return strings.TrimSpace(s)
}
