package controller

import (
	"ferrule/des"
	"ferrule/nodes"
)

// CircuitState is where a circuit stands in the controller's picture.
type CircuitState uint8

// States of a circuit.
const (
	Planned       CircuitState = iota // known, but nothing was done for it yet
	SettingUp                         // a route is sought or being connected
	Up                                // it carries packets
	UpUnprotected                     // it carries packets, its second copy does not
	Resizing                          // it carries packets while its slots change
	Down                              // its light is lost
	Restoring                         // its light is lost and a new route is under way
	TearingDown                       // it takes no more packets
	TornDown                          // it holds nothing any more
	Blocked                           // its set-up found no route: a result
)

// String names the state.
func (s CircuitState) String() string {
	switch s {
	case Planned:
		return "planned"
	case SettingUp:
		return "setting up"
	case Up:
		return "up"
	case UpUnprotected:
		return "up unprotected"
	case Resizing:
		return "resizing"
	case Down:
		return "down"
	case Restoring:
		return "restoring"
	case TearingDown:
		return "tearing down"
	case TornDown:
		return "torn down"
	case Blocked:
		return "blocked"
	default:
		panic("controller: unknown state of a circuit")
	}
}

// Report is what a controller knows of one circuit.
type Report struct {
	Circuit     nodes.CircuitID
	State       CircuitState
	Route       []nodes.FibreID // from Ends[0]; nil when it holds none
	Second      []nodes.FibreID // 1+1: the route of the copies, from Ends[0]; nil: none
	Channels    []int32         // number of its channel on each fibre of Route, for a whole channel
	Slots       int             // tributary slots held on every fibre of Route
	Rate        nodes.Rate      // what its ports send at
	Delay       des.Time        // of light over Route
	SetUp       des.Time        // from order or failure to the last cross-connect's answer, last time; -1: never
	UpSince     des.Time        // Never: not up
	DownSince   des.Time        // Never: not down
	DownTime    des.Time        // total of outages that have ended
	Outages     int
	Resizes     int
	Preempted   int    // how often others have pushed it out
	Incarnation int32  // of the route in use, or of the last one; 0: none yet
	Reason      string // why it is blocked or could not be restored
}

// PolicyReport counts what the policy of a circuit has decided.
type PolicyReport struct {
	Circuit   nodes.CircuitID
	Grown     int
	Shrunk    int
	Blocked   int // decisions that could not be carried out
	Reversals int // decisions the other way than the one before
}

// StepState is where an order stands.
type StepState uint8

// States of a step.
const (
	Waiting StepState = iota // for its condition
	Working
	Done
	Failed // Detail says why
	Never  // its condition can no longer come; Detail says why
)

// String names the state.
func (s StepState) String() string {
	switch s {
	case Waiting:
		return "waiting"
	case Working:
		return "working"
	case Done:
		return "done"
	case Failed:
		return "failed"
	case Never:
		return "never"
	default:
		panic("controller: unknown state of a step")
	}
}

// StepReport is what became of one order.
type StepReport struct {
	Name   string
	Kind   OrderKind
	Asked  des.Time // when it was given; des.Never: not yet
	Begun  des.Time // when its condition held; des.Never: not yet
	Done   des.Time // when it was done, or failed; des.Never: not yet
	State  StepState
	Detail string
	Undoes int // an order of the controller's own: the place of the one it takes back; -1: none
}

// DemandReport counts the requests of one stream of circuit demand without
// packets.
type DemandReport struct {
	Name     string
	Offered  uint64
	Blocked  uint64  // no route with enough free slots
	Refused  uint64  // among Blocked: refused by or unanswered from a cross-connect
	Active   int     // held now
	SlotTime des.Sum // slots times the picoseconds they were asked to be held, of those not blocked
}
