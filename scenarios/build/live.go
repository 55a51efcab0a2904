package build

import (
	"fmt"

	"ferrule/controller"
	"ferrule/nodes"
	"ferrule/nodes/packet"
	"ferrule/scenarios"
)

// Do books an act that was not known when the model was built, at its instant,
// which must not lie before what has been run. An order is given to the
// controller at that instant. Acts of one instant happen in the order of
// packet.ActKind, then in that of the calls.
func (m *Model) Do(a *scenarios.Act) {
	name := fmt.Sprintf("%s %s", a.Verb, a.Subject)
	switch a.Verb {
	case scenarios.VerbCut, scenarios.VerbRepair:
		m.Steps = append(m.Steps, Step{Act: a, Order: -1})
		for _, x := range fibreActs(m.Scenario, a, name) {
			m.Network.Schedule(x)
		}
	case scenarios.VerbFail, scenarios.VerbMend:
		m.Steps = append(m.Steps, Step{Act: a, Order: -1})
		for _, x := range failActs(m.Scenario, a, name) {
			m.Network.Schedule(x)
		}
	case scenarios.VerbScale:
		m.Steps = append(m.Steps, Step{Act: a, Order: -1})
		x := packet.Act{At: a.At, Kind: packet.ActScale, Name: name, Factor: a.Factor}
		for _, w := range a.Moved {
			x.Ways = append(x.Ways, w.Way)
		}
		m.Network.Schedule(x)
	case scenarios.VerbSetUp, scenarios.VerbTearDown, scenarios.VerbResize, scenarios.VerbMove, scenarios.VerbReturn,
		scenarios.VerbDrain, scenarios.VerbUndrain:
		o := order(m.Plan, a, fmt.Sprintf("session step %d", len(m.Steps)+1))
		o.At, o.After = a.At, controller.Condition{Kind: controller.Always}
		m.Steps = append(m.Steps, Step{Act: a, Order: -1, Live: o.Name})
		m.Network.Schedule(packet.Act{At: a.At, Kind: packet.ActOrder, Name: name, Site: nodes.SiteID(m.Scenario.Controller.At), Ref: &o})
	default:
		panic("build: unknown verb " + a.Verb.String())
	}
}
