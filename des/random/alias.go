package random

import "math/bits"

// An Alias draws from a finite law in constant time without a branch, which is
// what packet sizes need. It is read-only once made, so copies may share it.
//
// Source: A. J. Walker, "An efficient method for generating discrete random
// variables with general distributions", ACM Trans. Math. Software 3 (1977),
// with the table built as in M. Vose, IEEE Trans. Software Eng. 17 (1991).
type Alias struct{ cells []aliasCell }

// An aliasCell is one of n cells of equal probability, shared by two values:
// below is drawn in the part of the cell before limit, else above.
type aliasCell struct {
	limit        uint64
	below, above uint16
}

// NewAlias returns an Alias that draws values[i] with probability
// weights[i] / sum(weights). It panics unless there are as many weights as
// values, at least one, none of them negative, infinite or NaN, and their sum
// positive and finite.
func NewAlias(values []uint16, weights []float64) Alias {
	n := len(values)
	if n == 0 || len(weights) != n {
		panic("random: an Alias needs as many weights as values, and at least one")
	}
	total, ok := sumWeights(weights)
	if !ok {
		panic("random: weights of an Alias must be finite, not negative and not all zero")
	}
	cells := make([]aliasCell, n)
	share := make([]float64, n) // of a cell; the average is 1
	var small, large []int
	for i, w := range weights {
		share[i] = w / total * float64(n)
		cells[i] = aliasCell{1<<64 - 1, values[i], values[i]}
		if share[i] < 1 {
			small = append(small, i)
		} else {
			large = append(large, i)
		}
	}
	for len(small) > 0 && len(large) > 0 {
		i, j := small[len(small)-1], large[len(large)-1]
		small = small[:len(small)-1]
		cells[i].limit = uint64(share[i] * 0x1p64) // below 2^64, as share < 1
		cells[i].above = values[j]
		share[j] -= 1 - share[i]
		if share[j] < 1 {
			large = large[:len(large)-1]
			small = append(small, j)
		}
	}
	return Alias{cells} // what is left over by rounding fills its own cell
}

// Pick returns the value that belongs to the 64 random bits u. It panics on
// the zero Alias. It costs one multiplication and one load.
func (a *Alias) Pick(u uint64) uint16 {
	i, at := bits.Mul64(u, uint64(len(a.cells)))
	c := &a.cells[i]
	_, before := bits.Sub64(at, c.limit, 0) // 1 if at < limit
	return c.above ^ (c.above^c.below)&-uint16(before)
}

// sumWeights adds weights in order of index; ok is false if one is negative or
// not finite, or if the sum is not positive and finite.
func sumWeights(weights []float64) (total float64, ok bool) {
	for _, w := range weights {
		if !(w >= 0) {
			return 0, false
		}
		total += w
	}
	return total, finite(total) && total > 0
}
