package nodes

import (
	"fmt"
	"math/big"
	"math/bits"

	"ferrule/des"
)

// Line computes serialisation times at one rate without dividing. TxTime is
// exactly Rate.TxTime for sizes up to MaxLineSize.
type Line struct {
	rate  Rate
	mul   uint64 // ceil(8e12 * 2^shift / rate)
	add   uint64 // (rate-1)/rate in the same fixed point, rounded down
	shift uint
}

// MaxLineSize is the largest packet, overhead included, that Line times.
const MaxLineSize Bytes = 1<<16 + 1<<12

// NewLine prepares for rate r, which must be between 1 bit/s and 2^46 bit/s.
//
// The time of n bytes is ceil(n*8e12/r). In fixed point with 2^shift > 2*n*r
// the error of the multiplier stays below half of 1/r, the least distance of
// n*8e12/r from the next whole number, so the floor below is exact.
func NewLine(r Rate) Line {
	if r < 1 || r > 1<<46 {
		panic(fmt.Sprintf("nodes: line of %d bit/s", r))
	}
	shift := uint(bits.Len64(uint64(MaxLineSize)) + bits.Len64(uint64(r)) + 1)
	num := new(big.Int).Lsh(big.NewInt(8*int64(des.Second)), shift)
	num.Add(num, big.NewInt(int64(r)-1))
	mul := num.Div(num, big.NewInt(int64(r)))
	frac := new(big.Int).Lsh(big.NewInt(int64(r)-1), shift)
	frac.Div(frac, big.NewInt(int64(r)))
	l := Line{rate: r, mul: mul.Uint64(), shift: shift}
	// The sum n*mul + frac may need 128 bits, and so may frac alone when the
	// shift passes 63: keep it scaled down together with a smaller shift.
	if shift >= 64 {
		l.add = new(big.Int).Rsh(frac, shift-63).Uint64()
	} else {
		l.add = frac.Uint64()
	}
	return l
}

// Rate is the rate of the line.
func (l *Line) Rate() Rate { return l.rate }

// TxTime reports how long size bytes occupy the line, rounded up to a whole
// picosecond. size must be between 0 and MaxLineSize.
func (l *Line) TxTime(size Bytes) des.Time {
	hi, lo := bits.Mul64(uint64(size), l.mul)
	if l.shift >= 64 {
		var c uint64
		_, c = bits.Add64(lo, l.add<<(l.shift-63), 0)
		hi += c + l.add>>(127-l.shift)
		return des.Time(hi >> (l.shift - 64))
	}
	lo, c := bits.Add64(lo, l.add, 0)
	hi += c
	return des.Time(hi<<(64-l.shift) | lo>>l.shift)
}
