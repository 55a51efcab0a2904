package scenarios

import (
	"ferrule/nodes"
	"ferrule/nodes/optical"
)

// channelHint says which rates a channel can have.
const channelHint = "write 10Gbps, 40Gbps, 100Gbps or a multiple of 100Gbps up to 6400Gbps"

// channelSlots is how many tributary slots of 1.25 Gbit/s a lit channel of rate
// r is cut into.
func channelSlots(r nodes.Rate) (n int, ok bool) {
	c, err := optical.ChannelOfClass(r)
	return c.Slots, err == nil
}

// size reads how large a circuit is: slots, a container or a channel, one of
// them. What a client gets of it is rounded down to a whole bit/s.
func (r *resolver) size(p *place, slots *int, container string, channel *nodes.Rate) (kind CircuitSize, n int, payload nodes.Rate) {
	given := 0
	for _, key := range sizeWords {
		if p.field(key).given() {
			given++
		}
	}
	switch {
	case given == 0:
		r.missing(p, "slots", "write slots: 1, or container: ODU2, or channel: 100Gbps")
	case given > 1:
		p.fault("write one of slots, container, channel", "the size is given %d times", given)
	case slots != nil:
		n = within(p.field("slots"), slots, 1, optical.SlotsPerChannel, 1, plain)
		payload, err := optical.PayloadOfSlots(n)
		if err != nil {
			p.field("slots").fault("", "%v", err)
		}
		return SizeSlots, n, payload
	case container != "":
		c, ok := optical.ContainerByName(container)
		if !ok {
			p.field("container").fault(didYouMean(container, optical.ContainerNames()), "%q is not a container", container)
			return SizeContainer, 1, maxRate
		}
		return SizeContainer, c.Slots, c.Payload.Floor()
	case channel != nil:
		c, err := optical.ChannelOfClass(*channel)
		if err != nil {
			p.field("channel").fault(channelHint, "%s is not the rate of a channel", FormatRate(*channel))
			return SizeChannel, 0, maxRate
		}
		return SizeChannel, 0, c.Payload.Floor()
	}
	return SizeSlots, 1, maxRate // noted already
}
