package transport

import "ferrule/nodes"

// Sizes of packets, in bytes: segments as large as a packetiser of 1500 B makes
// them, headers of IPv4 and TCP without options.
const (
	header  = 40
	segment = 1460
)

// Window is the most segments that a receiver takes beyond those it has in
// order, and so the most that are under way.
const Window = 1 << 14

// A packet's Word carries what the headers of a transport would. Numbers of
// segments are told modulo 2^15, twice the window, so that the other end knows
// which is meant. gen tells connections apart that use one flow number in turn.
//
//	data  gen 2 | reduced 1 | last 1 | 13 unused | number 15
//	ack   gen 2 | echo 1 | in order 15 | beyond 14
//	open  gen 2 | bytes 30
//
// "beyond" is 0, or how far the segment that caused the acknowledgement lies
// beyond those in order. "open" asks for a transfer of that many bytes; from the
// server, with 0, it says that it was understood.
const (
	genShift   = 30
	serialMask = 1<<15 - 1
	bytesMask  = 1<<30 - 1

	dataReduced = 1 << 29 // the sender has reduced its window (CWR of RFC 3168)
	dataLast    = 1 << 28

	ackEcho    = 1 << 29 // congestion was experienced (ECE of RFC 3168)
	beyondMask = 1<<14 - 1
)

// Endless is the number of bytes of a transfer that never ends.
const Endless = bytesMask

// kindOpen is the kind of packets that open a connection: beside those of
// package nodes.
const kindOpen nodes.PacketBits = 0b11

func ackWord(gen uint8, echo bool, next, beyond uint32) uint32 {
	w := uint32(gen)<<genShift | next&serialMask<<14 | beyond&beyondMask
	if echo {
		w |= ackEcho
	}
	return w
}

func dataWord(gen uint8, reduced, last bool, no uint32) uint32 {
	w := uint32(gen)<<genShift | no&serialMask
	if reduced {
		w |= dataReduced
	}
	if last {
		w |= dataLast
	}
	return w
}

// near is the number whose remainder is low and that lies nearest to base.
func near(base, low uint32) uint32 {
	d := int32((low-base)<<17) >> 17
	return uint32(int32(base) + d)
}

// segmentsOf reports into how many segments a transfer is cut, and the payload
// of the last one.
func segmentsOf(bytes uint32) (n uint32, last uint16) {
	if bytes == Endless {
		return 1<<32 - 1, segment
	}
	n = (bytes + segment - 1) / segment
	return n, uint16(bytes - (n-1)*segment)
}
