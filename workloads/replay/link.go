package replay

import "encoding/binary"

// head is what the headers of a packet say.
type head struct {
	dscp     uint8
	size     uint16 // IP bytes
	flow     uint16 // hash of addresses, protocol and ports
	from, to addr
}

// addr is an IPv6 address, or an IPv4 one as ::ffff:a.b.c.d (RFC 4291).
type addr struct{ hi, lo uint64 }

// verdict is what became of a packet.
type verdict uint8

const (
	isIP      verdict = iota
	notIP             // another protocol
	short             // the capture ends before the headers do
	malformed         // the headers contradict each other or the line
)

// mostHead is how many bytes of a packet are looked at.
const mostHead = 256

// Link types, from the registry of the IETF drafts on pcap.
const (
	linkNull     = 0
	linkEthernet = 1
	linkPPP      = 9
	linkRaw12    = 12
	linkRaw14    = 14
	linkPPPHDLC  = 50
	linkRaw      = 101
	linkCHDLC    = 104
	linkLoop     = 108
	linkCooked   = 113
	linkMPLS     = 219
	linkIPv4     = 228
	linkIPv6     = 229
	linkCooked2  = 276
)

// knownLink reports whether packets of a link type can be read.
func knownLink(link uint32) bool {
	switch link {
	case linkNull, linkEthernet, linkPPP, linkRaw12, linkRaw14, linkPPPHDLC, linkRaw, linkCHDLC,
		linkLoop, linkCooked, linkMPLS, linkIPv4, linkIPv6, linkCooked2:
		return true
	}
	return false
}

// Ethertypes, and the numbers that PPP has for the same.
const (
	etherIPv4  = 0x0800
	etherIPv6  = 0x86dd
	etherVLAN  = 0x8100 // IEEE 802.1Q
	etherSVLAN = 0x88a8 // IEEE 802.1ad
	etherMPLS  = 0x8847 // RFC 5332
	etherMPLSM = 0x8848
	pppIPv4    = 0x0021
	pppIPv6    = 0x0057
	pppMPLS    = 0x0281 // RFC 3032
)

// parse reads the headers of a packet of the given link type, of which b was
// captured and line bytes were on the line.
func (h *head) parse(link uint32, b []byte, line uint32) verdict {
	at := 0 // of the IP header
	kind := 0
	switch link {
	case linkRaw, linkRaw12, linkRaw14, linkIPv4, linkIPv6:
		return h.ip(b, 0, line)
	case linkMPLS:
		return h.labels(b, 0, line)
	case linkNull, linkLoop:
		return h.ip(b, 4, line) // the version nibble decides
	case linkEthernet:
		at = 14
	case linkCooked:
		at = 16
	case linkCHDLC:
		at = 4
	case linkCooked2:
		if len(b) < 20 {
			return short
		}
		return h.ether(int(binary.BigEndian.Uint16(b)), b, 20, line)
	case linkPPP, linkPPPHDLC:
		return h.ppp(b, line)
	default:
		return notIP
	}
	if len(b) < at {
		return short
	}
	kind = int(binary.BigEndian.Uint16(b[at-2:]))
	return h.ether(kind, b, at, line)
}

// ppp reads a packet behind PPP (RFC 1661), with or without the address and
// control bytes of RFC 1662.
func (h *head) ppp(b []byte, line uint32) verdict {
	at := 2
	if len(b) >= 2 && b[0] == 0xff && b[1] == 0x03 {
		at = 4
	}
	if len(b) < at {
		return short
	}
	switch binary.BigEndian.Uint16(b[at-2:]) {
	case pppIPv4, pppIPv6:
		return h.ip(b, at, line)
	case pppMPLS:
		return h.labels(b, at, line)
	}
	return notIP
}

// ether reads on at a place that an ethertype announces.
func (h *head) ether(kind int, b []byte, at int, line uint32) verdict {
	for kind == etherVLAN || kind == etherSVLAN {
		if len(b) < at+4 {
			return short
		}
		kind = int(binary.BigEndian.Uint16(b[at+2:]))
		at += 4
	}
	switch kind {
	case etherIPv4, etherIPv6:
		return h.ip(b, at, line)
	case etherMPLS, etherMPLSM:
		return h.labels(b, at, line)
	}
	return notIP
}

// labels passes a stack of MPLS labels (RFC 3032).
func (h *head) labels(b []byte, at int, line uint32) verdict {
	for {
		if len(b) < at+4 {
			return short
		}
		bottom := b[at+2]&1 == 1
		at += 4
		if bottom {
			return h.ip(b, at, line)
		}
	}
}

// ip reads the IP header at a place.
func (h *head) ip(b []byte, at int, line uint32) verdict {
	if len(b) <= at {
		return short
	}
	switch b[at] >> 4 {
	case 4:
		return h.ipv4(b[at:], int64(line)-int64(at))
	case 6:
		return h.ipv6(b[at:], int64(line)-int64(at))
	}
	return notIP
}

// ipv4 reads an IPv4 header (RFC 791, RFC 2474); room is what the line left for
// it. A length of 0 stands for all of that: a card was to cut the packet up.
func (h *head) ipv4(b []byte, room int64) verdict {
	if len(b) < 20 {
		return short
	}
	size := int64(binary.BigEndian.Uint16(b[2:]))
	if size == 0 {
		size = room
	}
	own := int(b[0]&15) * 4
	if own < 20 || size < int64(own) || size > room || size > 65535 {
		return malformed
	}
	h.size = uint16(size)
	h.dscp = b[1] >> 2
	h.from = addr{0, 0xffff<<32 | uint64(binary.BigEndian.Uint32(b[12:]))}
	h.to = addr{0, 0xffff<<32 | uint64(binary.BigEndian.Uint32(b[16:]))}
	ports := uint32(0)
	if whole := binary.BigEndian.Uint16(b[6:])&0x3fff == 0; whole && hasPorts(b[9]) && len(b) >= own+4 {
		ports = binary.BigEndian.Uint32(b[own:])
	}
	h.flow = flowOf(h.from, h.to, b[9], ports)
	return isIP
}

// ipv6 reads an IPv6 header (RFC 8200, RFC 2474). A length of 0 is that of a
// jumbogram, or of a packet that a card was to cut up.
func (h *head) ipv6(b []byte, room int64) verdict {
	if len(b) < 40 {
		return short
	}
	size := 40 + int64(binary.BigEndian.Uint16(b[4:]))
	if size == 40 {
		size = room
	}
	if size < 40 || size > room || size > 65535 {
		return malformed
	}
	h.size = uint16(size)
	h.dscp = uint8(binary.BigEndian.Uint16(b)>>4) >> 2
	h.from = addr{binary.BigEndian.Uint64(b[8:]), binary.BigEndian.Uint64(b[16:])}
	h.to = addr{binary.BigEndian.Uint64(b[24:]), binary.BigEndian.Uint64(b[32:])}
	ports := uint32(0)
	if hasPorts(b[6]) && len(b) >= 44 {
		ports = binary.BigEndian.Uint32(b[40:])
	}
	h.flow = flowOf(h.from, h.to, b[6], ports)
	return isIP
}

// hasPorts reports whether a protocol's header begins with two ports: TCP, UDP,
// DCCP and SCTP.
func hasPorts(protocol uint8) bool {
	return protocol == 6 || protocol == 17 || protocol == 33 || protocol == 132
}

// flowOf numbers a flow by a hash, so that packets of one flow get one number
// and those of different flows mostly different ones.
func flowOf(from, to addr, protocol uint8, ports uint32) uint16 {
	const k = 0x9e3779b97f4a7c15
	x := from.hi
	for _, v := range [...]uint64{from.lo, to.hi, to.lo, uint64(protocol)<<32 | uint64(ports)} {
		x = (x ^ x>>29) * k
		x ^= v
	}
	x = (x ^ x>>29) * k
	return uint16(x >> 48)
}
