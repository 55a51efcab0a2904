package random

import "math/bits"

// golden is 2^64 divided by the golden ratio, made odd: the increment of
// SplitMix64, which spreads consecutive integers over the whole range.
const golden = 0x9e3779b97f4a7c15

// mix is a bijection of the 64-bit integers in which every input bit flips
// every output bit with probability close to one half.
//
// Source: D. Stafford, "Better bit mixing" (2011), variant 13, as used in
// SplitMix64: G. Steele, D. Lea, C. Flood, "Fast splittable pseudorandom
// number generators", OOPSLA 2014.
func mix(z uint64) uint64 {
	z = (z ^ z>>30) * 0xbf58476d1ce4e5b9
	z = (z ^ z>>27) * 0x94d049bb133111eb
	return z ^ z>>31
}

// Hash returns a 64-bit hash of a name. It is the same on every platform and
// in every release: results depend on it. It is no defence against names
// chosen to collide.
//
// It is the 64-bit FNV-1a hash (RFC 9923) followed by a mixing step, because
// the high bits of FNV-1a alone are poor for short names.
func Hash(name string) uint64 {
	h := uint64(0xcbf29ce484222325)
	for i := 0; i < len(name); i++ {
		h = (h ^ uint64(name[i])) * 0x100000001b3
	}
	return mix(h)
}

// Draw returns 64 random bits that belong to the key (seed, name, index,
// quantity), where name is a [Hash]. Equal keys give equal bits; keys that
// differ anywhere give bits that look independent. If only one part of two
// keys differs the results are never equal, because each step is a bijection
// of the part it takes in.
func Draw(seed, name, index, quantity uint64) uint64 {
	h := mix(seed + golden)
	h = mix(bits.RotateLeft64(h, 32) ^ name)
	h = mix(h + golden*index)
	return mix(h ^ golden*(quantity+1))
}

// Unit maps 64 random bits to the open interval (0, 1): the midpoints of 2^52
// equal cells, so neither 0 nor 1 is ever returned and u and 1-u are equally
// likely.
func Unit(b uint64) float64 {
	return (float64(int64(b>>12)) + 0.5) * 0x1p-52
}
