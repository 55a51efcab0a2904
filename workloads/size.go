package workloads

import (
	"errors"
	"fmt"
	"math"

	"ferrule/des/random"
	"ferrule/nodes"
)

// sizeKind says how the size of a packet is drawn.
type sizeKind uint8

const (
	fixedSize sizeKind = iota
	exponentialSize
	mixedSize
	lawSize
)

// sizes draws the IP bytes of packets: a law, rounded to the nearest whole
// byte and kept within 1 and maxSize. Copies share tables that never change.
type sizes struct {
	kind  sizeKind
	fixed uint16
	scale float64 // mean of the exponential law before rounding
	mean  float64 // of what is drawn
	mix   random.Alias
	law   random.Law
}

// newSizes returns the sizes of s.
func newSizes(s random.Spec) (sizes, error) {
	law, err := s.Law()
	if err != nil {
		return sizes{}, err
	}
	if m := law.Mean(); m > maxSize {
		return sizes{}, fmt.Errorf("mean %v B is above %d B, the longest IP packet", m, maxSize)
	}
	switch s.Kind {
	case random.Constant:
		if s.Mean < 0.5 {
			return sizes{}, errors.New("below one byte")
		}
		return sizes{kind: fixedSize, fixed: toSize(s.Mean), mean: float64(toSize(s.Mean))}, nil
	case random.Exponential:
		return sizes{kind: exponentialSize, scale: s.Mean, mean: roundedExponential(s.Mean)}, nil
	case random.Mix:
		return mixedSizes(s), nil
	default:
		return sizes{kind: lawSize, law: law, mean: roundedMean(law)}, nil
	}
}

// mixedSizes returns the sizes of a finite law.
func mixedSizes(s random.Spec) sizes {
	values := make([]uint16, len(s.Values))
	sum, total := 0.0, 0.0
	for i, v := range s.Values {
		values[i] = toSize(v)
		sum += float64(float64(values[i]) * s.Weights[i])
		total += s.Weights[i]
	}
	return sizes{kind: mixedSize, mix: random.NewAlias(values, s.Weights), mean: sum / total}
}

// toSize rounds x to the nearest size a packet can have.
func toSize(x float64) uint16 {
	return uint16(int64(max(1, min(maxSize, x)) + 0.5))
}

// roundedExponential returns the mean of an exponential variate of mean m that
// is rounded by toSize: the sum over k of the chance of k bytes or more,
//
//	1 + sum(k = 2..K) exp(-(k-1/2)/m)
//	  = 1 + exp(-3/(2m)) (1 - exp(-(K-1)/m)) / (1 - exp(-1/m)),  K = 65535.
func roundedExponential(m float64) float64 {
	return 1 + float64(math.Exp(-1.5/m)*math.Expm1(-(maxSize-1)/m)/math.Expm1(-1/m))
}

// roundedMean returns the mean of law rounded by toSize: the sum over k of the
// chance of k bytes or more.
func roundedMean(law random.Law) float64 {
	sum := 1.0
	for k := 2; k <= maxSize; k++ {
		p := 1 - law.CDF(float64(k)-0.5)
		if p < 1e-15 {
			break
		}
		sum += p
	}
	return sum
}

// fill draws the sizes of ps in order.
func (s *sizes) fill(ps []nodes.Packet, r *random.Stream) {
	draws := *r
	switch s.kind {
	case fixedSize:
		for i := range ps {
			ps[i].Size = s.fixed
		}
	case exponentialSize:
		for i := range ps {
			ps[i].Size = toSize(draws.Exp() * s.scale)
		}
	case mixedSize:
		mix := s.mix
		for i := range ps {
			ps[i].Size = mix.Pick(draws.Uint64())
		}
	case lawSize:
		for i := range ps {
			ps[i].Size = toSize(s.law.Draw(r))
		}
		return
	default:
		panic(fmt.Sprintf("workloads: sizes %d", s.kind))
	}
	*r = draws
}
