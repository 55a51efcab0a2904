package nodes

// Wire is what a Local may offer beside: sending to the neighbour at the other
// end of a circuit, by the circuit itself.
type Wire interface {
	// SendOver posts m to the agent at the other end of c. It arrives after the
	// delay of the circuit's route, or never: when the port here is down or
	// broken, or the route is dark as it passes. It waits for no packet, as what
	// routers tell each other goes before all traffic, and takes no capacity.
	SendOver(c CircuitID, m Message)
}
