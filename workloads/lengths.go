package workloads

import (
	"errors"
	"math"
	"sort"

	"ferrule/des/random"
)

// lengths is the law of the number of packets of a flow that carries x units
// of what law draws, at most unit of them in a packet:
//
//	n = max(1, ceil((x - half) / unit)),
//
// where half is 1/2 if x is rounded to the nearest whole number first and else
// 0. It is read-only once made, so copies share it.
type lengths struct {
	law        random.Law
	unit, half float64
	mean       float64 // of n
	knots      []knot  // ascending; the first is {0, 0}
}

// A knot says that the chances of j packets or more, for j from 1 to upTo, sum
// to sum.
type knot struct {
	upTo int64
	sum  float64
}

// errTail is what newLengths makes of a law that cannot be summed.
var errTail = errors.New("the tail is so heavy that there is no mean to speak of; write at-most, or a larger shape")

// newLengths sums the chances of j packets or more until nothing is left to
// add, one by one up to j = 1024 and then in blocks of j/1024. The relative error
// of the mean stays below 1e-5.
func newLengths(law random.Law, unit, half float64) (*lengths, error) {
	if m := law.Mean(); !(m <= math.MaxFloat64) {
		return nil, errTail
	}
	l := &lengths{law: law, unit: unit, half: half, knots: make([]knot, 1, 1024)}
	j, sum := int64(0), 0.0
	for {
		step := max(1, j/1024)
		last := l.atLeast(j + step)
		sum += l.block(j+1, j+step, l.atLeast(j+1), last)
		j += step
		l.knots = append(l.knots, knot{j, sum})
		if float64(j)*last < 1e-9*sum {
			l.mean = sum
			return l, nil
		}
		if j > 1<<40 {
			return nil, errTail
		}
	}
}

// block returns the sum of the chances of j packets or more for j from a to b,
// given those at its ends: by the trapezium rule, but a block across which the
// chance falls by more than 1 % is cut in half.
func (l *lengths) block(a, b int64, first, last float64) float64 {
	n := float64(b - a + 1)
	if b-a < 2 || first-last <= 0.01*first {
		if a == b {
			return first
		}
		return float64(n * (first + last) / 2)
	}
	mid := (a + b) / 2
	return l.block(a, mid, first, l.atLeast(mid)) + l.block(mid+1, b, l.atLeast(mid+1), last)
}

// atLeast returns the chance of j packets or more.
func (l *lengths) atLeast(j int64) float64 {
	if j <= 1 {
		return 1
	}
	return 1 - l.law.CDF(float64(float64(j-1)*l.unit)+l.half)
}

// count returns the number of packets that carry x.
func (l *lengths) count(x float64) int64 {
	return int64(min(max(1, math.Ceil((x-l.half)/l.unit)), longest))
}

// left returns how many packets a flow still has to send when it is met at a
// random instant, for u uniform in (0, 1): j with a chance proportional to that
// of j packets or more.
//
// Source: the equilibrium law of renewal theory, D. Cox, Renewal Theory (1962),
// for flows of equally spaced packets.
func (l *lengths) left(u float64) int64 {
	v := u * l.mean
	i := sort.Search(len(l.knots)-1, func(i int) bool { return l.knots[i+1].sum >= v })
	i = min(i, len(l.knots)-2)
	a, b := l.knots[i], l.knots[i+1]
	j := a.upTo + 1 + int64(float64(b.upTo-a.upTo)*(v-a.sum)/(b.sum-a.sum))
	return min(max(1, j), b.upTo)
}

// most returns a number of packets that a flow hardly ever exceeds.
func (l *lengths) most() int64 { return l.knots[len(l.knots)-1].upTo }
