package central

import (
	"ferrule/des"
	"ferrule/nodes"
)

// What the controller and the agents tell each other. Every command carries
// its serial in A, and its answer brings it back.
const (
	// Commands of the controller.
	opAssign   = nodes.OpFirstAgent + iota // own slots or a channel: see assignment
	opActivate                             // open a route at an end, port up: Ref = *nodes.Trail, N
	opPortUp                               // port up on the route that is open: Circuit, N
	opPortDown                             // port down, the far end is dark: Circuit, N
	opDrain                                // take no more packets, send what waits: Circuit, N
	opRate                                 // send at B bit/s: Circuit
	opInstall                              // Ref = *nodes.Table
	opSteer                                // Way by Circuit, held for B ps first
	opHeard                                // an agent's alarm A has been heard
	opPoll                                 // tell what the end of Circuit has counted
	opAsk                                  // say again what has gone unheard

	// Messages of the agents.
	opAnswer     // to command A: N is an answer, Fibre what was refused
	opAlarm      // light of Circuit, incarnation N: B is alarmLost or alarmBack
	opEquipment  // the router there, or its port of Circuit: B likewise
	opFibreAlarm // light of Fibre: B likewise

	// What an agent tells itself later.
	opSwitched   // the cross-connect has carried out command A
	opReady      // traffic may go: Circuit, N
	opHoldOff    // hold-off of Circuit is over: A
	opRamp       // the next step of a rate on its way: Circuit, A
	opDrained    // look whether Circuit still has packets waiting: A
	opAlarmAgain // alarm A is still unheard

	// What the controller tells itself later.
	opComputed // the job in hand is decided
	opPollAll  // ask the circuits under a policy
	opOverdue  // look for unanswered commands
	opUnplaced // the fault of Circuit, incarnation N, is still not located
	opGathered // the correlation window is over
	opAfter    // task N, of number A, goes on
	opSweep    // the chain that Way left is empty: A
	opWhole    // wait-to-restore of Circuit is over: N
	opArrival  // the next request of stream N
	opExpire   // request N, of number A, ends
)

// Values of N in an answer.
const (
	answerDone int32 = iota
	answerRefused
	answerInHand // the command came again while it is being carried out
)

// Values of B in an alarm.
const (
	alarmLost int64 = iota
	alarmBack
)

// maxAmount is the largest number of slots, or of a channel, in an assignment.
const maxAmount = 1<<16 - 1

// Flags of an assignment, in Message.Way.
const (
	byChannel uint16 = 1 << iota // amounts are numbers of channels
	release                      // own nothing
	atOnce                       // a matter of books alone: takes no time at the cross-connect
)

// assignment is what a holder shall own at one site: on one fibre at the end
// of a route, on two within it.
type assignment struct {
	fibres  [2]nodes.FibreID // the second may be None
	amounts [2]int           // slots, or the number of the channel
	flags   uint16
}

// message packs the assignment. Nothing is allocated.
func (a assignment) message(c nodes.CircuitID, inc int32, settles bool) nodes.Message {
	return nodes.Message{
		Op: opAssign, Settles: settles, Circuit: c, N: inc, Fibre: a.fibres[0], Way: a.flags,
		B: int64(a.fibres[1])<<32 | int64(a.amounts[0])<<16 | int64(a.amounts[1]),
	}
}

// assignmentOf unpacks it.
func assignmentOf(m *nodes.Message) assignment {
	return assignment{
		fibres:  [2]nodes.FibreID{m.Fibre, nodes.FibreID(m.B >> 32)},
		amounts: [2]int{int(m.B >> 16 & maxAmount), int(m.B & maxAmount)},
		flags:   m.Way,
	}
}

// A request without packets holds slots under a circuit number below None that
// names its stream.
func streamHolder(stream int) nodes.CircuitID { return nodes.CircuitID(-2 - stream) }

// streamOf is the stream that holds under c; ok is false for a circuit.
func streamOf(c nodes.CircuitID) (stream int, ok bool) { return int(-2 - c), c < nodes.None }

// later books m for the agent itself.
func later(x nodes.Local, at des.Time, m nodes.Message) {
	m.At = at
	x.Later(m)
}
