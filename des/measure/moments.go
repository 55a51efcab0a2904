package measure

import (
	"math"
	"math/big"

	"ferrule/des"
)

// Moments sums integers exactly: spans in picoseconds, which may be negative.
// It holds no pointer, so assignment clones it. The zero value is empty.
//
// The square of a span and the sum of squares stay below 2^128 for spans up
// to 10^6 s and 10^2 values, or 1 s and 10^14 values.
type Moments struct {
	N        uint64  // how many values
	Min, Max int64   // of the values; 0 when there is none
	Sum      des.Sum // of the values, in two's complement if they may be negative
	Squares  des.Sum // of the squares of the values
}

// Add counts v.
func (m *Moments) Add(v int64) {
	if m.N == 0 {
		m.Min, m.Max = v, v
	}
	m.N++
	m.Min = min(m.Min, v)
	m.Max = max(m.Max, v)
	m.Sum.AddSum(des.Sum{Hi: uint64(v >> 63), Lo: uint64(v)})
	a := uint64(max(v, -v)) // the least int64 is its own complement, and right
	m.Squares.AddProduct(a, a)
}

// Merge adds all that o has counted, exactly.
func (m *Moments) Merge(o Moments) {
	switch {
	case o.N == 0:
		return
	case m.N == 0:
		*m = o
		return
	}
	m.N += o.N
	m.Min = min(m.Min, o.Min)
	m.Max = max(m.Max, o.Max)
	m.Sum.AddSum(o.Sum)
	m.Squares.AddSum(o.Squares)
}

// Mean returns the arithmetic mean, rounded once; NaN when there is no value.
func (m *Moments) Mean() float64 {
	if m.N == 0 {
		return math.NaN()
	}
	n := new(big.Int).SetUint64(m.N)
	f, _ := new(big.Rat).SetFrac(signed(m.Sum), n).Float64()
	return f
}

// Variance returns the sample variance, the sum of squared deviations from the
// mean over N-1, rounded once; NaN when there are fewer than two values.
func (m *Moments) Variance() float64 {
	if m.N < 2 {
		return math.NaN()
	}
	// (N·Q - S²) / (N·(N-1)) in integers: nothing cancels.
	n := new(big.Int).SetUint64(m.N)
	s := signed(m.Sum)
	over := new(big.Int).Mul(n, unsigned(m.Squares))
	over.Sub(over, s.Mul(s, s))
	under := new(big.Int).Sub(n, big.NewInt(1))
	f, _ := new(big.Rat).SetFrac(over, under.Mul(under, n)).Float64()
	return f
}

// StdDev returns the square root of the variance.
func (m *Moments) StdDev() float64 { return math.Sqrt(m.Variance()) }

func unsigned(s des.Sum) *big.Int {
	b := new(big.Int).SetUint64(s.Hi)
	return b.Lsh(b, 64).Or(b, new(big.Int).SetUint64(s.Lo))
}

func signed(s des.Sum) *big.Int {
	b := big.NewInt(int64(s.Hi))
	return b.Lsh(b, 64).Add(b, new(big.Int).SetUint64(s.Lo))
}
