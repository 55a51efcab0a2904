package controller

import (
	"ferrule/des"
	"ferrule/nodes"
)

// OrderKind says what an Order asks for.
type OrderKind uint8

// Kinds of order.
const (
	SetUp    OrderKind = iota // set up Circuit
	TearDown                  // end its use, drain it, release what it holds
	Resize                    // make Circuit hold Slots and send at Rate
	Move                      // send Ways over the chain Circuits
	Return                    // let Ways go by the tables again
	Request                   // hold Slots between Ends for Hold; no packets
	Drain                     // lead everything round Site that does not begin or end there
	Undrain                   // let Site be passed again
)

// String names the kind as a step of a plan does.
func (k OrderKind) String() string {
	switch k {
	case SetUp:
		return "set-up"
	case TearDown:
		return "tear-down"
	case Resize:
		return "resize"
	case Move:
		return "move"
	case Return:
		return "return"
	case Request:
		return "request"
	case Drain:
		return "drain"
	case Undrain:
		return "undrain"
	default:
		panic("controller: unknown kind of order")
	}
}

// ConditionKind says what a Condition waits for.
type ConditionKind uint8

// Kinds of condition.
const (
	Always      ConditionKind = iota // nothing: the order is taken at once
	CircuitUp                        // Circuit is up
	CircuitDown                      // Circuit is down
	MoveDone                         // Way goes over circuits of its own
	StepDone                         // the step named Step is done
	StepOver                         // the step named Step is done, or has failed
)

// Condition is what must hold before an order is taken up. It is looked at
// when the order is given and whenever the controller's picture changes.
type Condition struct {
	Kind    ConditionKind
	Circuit nodes.CircuitID
	Way     uint16
	Step    string
}

// Order is one thing that someone outside asks the controller to do. It never
// changes once given.
type Order struct {
	Kind      OrderKind
	Name      string            // of the step, for its report and for StepDone
	At        des.Time          // when it is given, for orders known in advance
	After     Condition         // what it waits for from then on
	Circuit   nodes.CircuitID   // SetUp, TearDown, Resize
	Circuits  []nodes.CircuitID // Move: the chain, from either end
	Ways      []uint16          // Move, Return
	Slots     int               // Resize, Request: tributary slots
	Rate      nodes.Rate        // Resize: what its ports send at; 0: in proportion to Slots
	KeepOrder bool              // Move, Return: hold packets so that none overtakes another
	Ends      [2]nodes.SiteID   // Request
	Site      nodes.SiteID      // Drain, Undrain
	Undo      bool              // when a step with Undo fails, those with Undo that are done are taken back
	Hold      des.Time          // Request: how long the slots are held
}
