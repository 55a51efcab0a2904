package random

import "math/bits"

// A Stream is a sequential generator of 64-bit words, xoshiro256++, with a
// period of 2^256-1. It holds no pointer: assigning a Stream clones it. The
// zero Stream is not usable, it would return zeros for ever; make one with
// [NewStream]. A *Stream is a source in the sense of math/rand/v2.
//
// Source: D. Blackman, S. Vigna, "Scrambled linear pseudorandom number
// generators", ACM Trans. Math. Software 47 (2021).
type Stream struct{ s0, s1, s2, s3 uint64 }

// streamQuantity keys the states of streams apart from every keyed draw,
// whose quantities are small numbers.
const streamQuantity = 0x73747265616d2073

// NewStream returns the stream that belongs to (seed, name). Streams of
// different names or seeds start at points of the period that look unrelated.
// The start depends on the name through its 64-bit [Hash]: among 2^20 names the
// chance that any two share a stream is below 2^-24.
func NewStream(seed uint64, name string) Stream {
	h := Hash(name)
	return Stream{
		Draw(seed, h, 0, streamQuantity), Draw(seed, h, 1, streamQuantity),
		Draw(seed, h, 2, streamQuantity), Draw(seed, h, 3, streamQuantity),
	}
}

// Uint64 returns the next 64 random bits.
func (s *Stream) Uint64() uint64 {
	// Locals keep the state in registers between one load and one store.
	a, b, c, d := s.s0, s.s1, s.s2^s.s0, s.s3^s.s1
	s.s0, s.s1 = a^d, b^c
	s.s2, s.s3 = c^b<<17, bits.RotateLeft64(d, 45)
	return bits.RotateLeft64(a+(d^b), 23) + a
}

// Float64 returns a uniform variate in the open interval (0, 1); see [Unit].
func (s *Stream) Float64() float64 { return Unit(s.Uint64()) }
