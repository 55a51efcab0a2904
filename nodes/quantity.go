// Package nodes is the vocabulary that the packet layer and the circuit layer
// share: quantities with units, ids, the packet, the sites and what joins
// them, and the contracts through which routing and control reach a site.
//
// Ids are dense and index slices. Nothing here reads a file or prints.
package nodes

import (
	"fmt"
	"math/bits"

	"ferrule/des"
)

// Rate is a bit rate in bit/s.
type Rate int64

// Units of rate.
const (
	BitPerSecond Rate = 1
	Kbps              = 1000 * BitPerSecond
	Mbps              = 1000 * Kbps
	Gbps              = 1000 * Mbps
)

// Bytes is an amount of data in octets.
type Bytes int64

// Length is a distance in millimetres.
type Length int64

// Units of length.
const (
	Millimetre Length = 1
	Metre             = 1000 * Millimetre
	Kilometre         = 1000 * Metre
)

// LightPerKilometre is the delay of one kilometre of standard single-mode
// fibre: group index 1.4682 over c = 299 792.458 km/s, 4.897 388 us, in
// picoseconds and rounded to the nearest.
//
// Source: group index of G.652 fibre at 1550 nm from data sheets, value from
// memory; the quotient computed, 4.89739 us/km.
const LightPerKilometre des.Time = 4_897_388

// Light reports how long light takes over l of fibre, rounded down to a whole
// picosecond, at least one for a positive length.
func (l Length) Light() des.Time {
	hi, lo := bits.Mul64(uint64(l), uint64(LightPerKilometre))
	q, _ := bits.Div64(hi, lo, uint64(Kilometre))
	if q == 0 && l > 0 {
		q = 1
	}
	return des.Time(q)
}

// TxTime reports how long size bytes occupy a line of rate r, rounded up to a
// whole picosecond so that a transmitter is never early. It panics if size is
// negative, r is not positive, or the answer exceeds the range of des.Time.
func (r Rate) TxTime(size Bytes) des.Time {
	if size < 0 || r <= 0 {
		panic(fmt.Sprintf("nodes: TxTime of %d B at %d bit/s", size, r))
	}
	hi, lo := bits.Mul64(uint64(size)*8, uint64(des.Second))
	if hi >= uint64(r) {
		panic(fmt.Sprintf("nodes: TxTime of %d B at %d bit/s overflows", size, r))
	}
	q, rem := bits.Div64(hi, lo, uint64(r))
	if rem > 0 {
		q++
	}
	return des.Time(q)
}
