package replay

import (
	"net/netip"

	"ferrule/nodes"
)

// Ways says which ways of an aggregate send a packet.
type Ways uint8

// The ways. The zero value stands for both.
const (
	Both Ways = iota
	OutOnly
	BackOnly
)

// Rule gives packets to a class. All that is set must hold. Of the rules of a
// Spec the first that fits a packet decides; packets that none fits are left
// out.
type Rule struct {
	DSCP  int          // 0 to 63 (RFC 2474); nodes.None for any
	From  netip.Prefix // that holds the address of the sender; the zero value for any
	To    netip.Prefix // that holds the address of the receiver; the zero value for any
	Class nodes.ClassID
	Ways  Ways
}

// rule is a Rule that costs little to apply.
type rule struct {
	from, to, fromMask, toMask addr
	dscp                       int16 // or nodes.None
	class                      int16
	ways                       uint8 // bit 1<<direction
}

// mask returns the mask of the first n of 128 bits.
func mask(n int) addr {
	hi := ^uint64(0) << (64 - min(n, 64))
	lo := ^uint64(0) << (64 - max(0, n-64))
	return addr{hi, lo}
}

// compile prepares a prefix.
func compile(p netip.Prefix) (a, m addr) {
	if !p.IsValid() {
		return addr{}, addr{}
	}
	n := p.Bits()
	if p.Addr().Is4() {
		n += 96
	}
	a, m = addrOf(p.Addr()), mask(n)
	return addr{a.hi & m.hi, a.lo & m.lo}, m
}

// waysBits are the directions of Ways.
func waysBits(w Ways) uint8 {
	switch w {
	case Both:
		return 1<<nodes.Out | 1<<nodes.Back
	case OutOnly:
		return 1 << nodes.Out
	case BackOnly:
		return 1 << nodes.Back
	default:
		panic("replay: no such ways")
	}
}

// compileRules prepares the rules of a Spec, or those by code point if it has
// none.
func compileRules(s *Spec) []rule {
	var out []rule
	for _, r := range s.Rules {
		c := rule{dscp: int16(r.DSCP), class: int16(r.Class), ways: waysBits(r.Ways)}
		c.from, c.fromMask = compile(r.From)
		c.to, c.toMask = compile(r.To)
		out = append(out, c)
	}
	if s.Rules == nil {
		for i, d := range s.DSCP {
			out = append(out, rule{dscp: int16(d), class: int16(i), ways: waysBits(Both)})
		}
	}
	return out
}

// in reports whether a lies in the prefix p of mask m.
func in(a, p, m addr) bool { return a.hi&m.hi == p.hi && a.lo&m.lo == p.lo }

// assign returns the class and the ways of a packet; ways is 0 if there are
// none.
func assign(rules []rule, dscp uint8, from, to addr) (class int16, ways uint8) {
	for i := range rules {
		r := &rules[i]
		if (r.dscp < 0 || r.dscp == int16(dscp)) && in(from, r.from, r.fromMask) && in(to, r.to, r.toMask) {
			return r.class, r.ways
		}
	}
	return nodes.None, 0
}
