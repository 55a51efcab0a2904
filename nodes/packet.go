package nodes

import "ferrule/des"

// Packet is 32 bytes, passed by value, and holds no pointer.
type Packet struct {
	Due  des.Time // instant its last bit stands at the place that holds it
	Born des.Time // instant it stood whole at its ingress router
	Word uint32   // delay split: queueing so far in ns; transports use it as they like
	Seq  uint32   // number within its way, from 0
	Flow uint16   // number of its flow within its way, modulo 65536
	Way  uint16   // 2 x aggregate + direction
	Size uint16   // IP bytes
	TTL  uint8
	Bits PacketBits
}

// PacketBits packs the small fields of a packet.
type PacketBits uint8

// Fields of PacketBits: kind in the two lowest bits, ECN (RFC 3168) in the
// next two, colour (RFC 2698) in the next two, then the flags.
const (
	KindMask   PacketBits = 0b11
	KindData   PacketBits = 0 // open-loop data
	KindAck    PacketBits = 1 // acknowledgement of a transport
	KindSegm   PacketBits = 2 // data segment of a transport
	ECNMask    PacketBits = 0b11 << 2
	ColourMask PacketBits = 0b11 << 4
	BitCopy    PacketBits = 1 << 6 // another copy has passed the tail of a 1+1 circuit before it
	BitSampled PacketBits = 1 << 7
)

// Code points of the ECN field (RFC 3168, section 5), in place.
const (
	ECT0 PacketBits = 0b10 << 2 // sent by an ECN-capable transport
	CE   PacketBits = 0b11 << 2 // congestion experienced
)

// Colours of a packet (RFC 2697 and 2698), in place; what no conditioner has
// seen is green.
const (
	Green  PacketBits = 0 << 4
	Yellow PacketBits = 1 << 4
	Red    PacketBits = 2 << 4
)

// InitialTTL is what a packet is sent with (RFC 1700's recommended default).
const InitialTTL = 64

// MaxAggregates is the number of aggregates that Packet.Way can name.
const MaxAggregates = 1 << 15

// Ids. Each indexes a slice of the network that owns it.
type (
	SiteID    int32
	FibreID   int32
	CircuitID int32
	ClassID   int32
	AggID     int32
)

// None stands for "no such thing" in every id type.
const None = -1

// Direction of an aggregate, a circuit or a fibre: Out from its first end to
// its second, Back the other way.
type Direction uint8

// The two directions.
const (
	Out  Direction = 0
	Back Direction = 1
)

// Reverse is the other direction.
func (d Direction) Reverse() Direction { return d ^ 1 }

// WayOf joins an aggregate and a direction into what Packet.Way holds.
func WayOf(a AggID, d Direction) uint16 { return uint16(a)<<1 | uint16(d) }

// AggOf splits a way into its aggregate and direction.
func AggOf(way uint16) (AggID, Direction) { return AggID(way >> 1), Direction(way & 1) }
