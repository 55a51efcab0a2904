package random

import (
	"math"
	"math/bits"
)

// The ziggurat method covers a decreasing density by horizontal layers of
// equal area. A draw picks a layer and a point across it; about 99 % of the
// points lie under the density whatever their height and are returned at
// once.
//
// Source: G. Marsaglia, W. Tsang, "The ziggurat method for generating random
// variables", J. Stat. Software 5 (2000), with the layer, the sign and the
// point taken from separate bits as in J. Doornik, "An improved ziggurat
// method to generate normal random samples" (2005).
const layers = 256

// A layer holds what the quick path needs: the scale from a 53-bit integer to
// a point across the layer, and the integers below which the point is surely
// under the density.
type layer struct {
	width float64
	sure  uint64
}

var expLayers, normLayers = layersOf(&expX), layersOf(&normX)

// layersOf derives the layers from the edges x. Scaling by a power of two and
// one division are exact or correctly rounded, so all platforms agree.
func layersOf(x *[layers + 1]float64) (l [layers]layer) {
	for i := range l {
		l[i] = layer{x[i] * 0x1p-53, uint64(x[i+1] / x[i] * 0x1p53)}
	}
	return l
}

// Exp returns an exponential variate with mean 1. It is positive and finite.
func (s *Stream) Exp() float64 {
	u := s.Uint64()
	l := &expLayers[u%layers]
	m := u>>11 | 1 // odd: a variate is never zero
	if x := float64(int64(m)) * l.width; m < l.sure {
		return x
	}
	return s.expSlow(u)
}

// FillExp sets each element of dst to what successive calls of Exp would
// return. It is about twice as fast, as the state stays in registers.
func (s *Stream) FillExp(dst []float64) {
	a, b, c, d := s.s0, s.s1, s.s2, s.s3
	for k := range dst {
		u := bits.RotateLeft64(a+d, 23) + a
		c, d = c^a, d^b // as in Uint64
		a, b, c, d = a^d, b^c, c^b<<17, bits.RotateLeft64(d, 45)
		l := &expLayers[u%layers]
		m := u>>11 | 1
		dst[k] = float64(int64(m)) * l.width
		if m >= l.sure {
			s.s0, s.s1, s.s2, s.s3 = a, b, c, d
			dst[k] = s.expSlow(u)
			a, b, c, d = s.s0, s.s1, s.s2, s.s3
		}
	}
	s.s0, s.s1, s.s2, s.s3 = a, b, c, d
}

// expSlow finishes an exponential draw whose first word u did not settle it.
func (s *Stream) expSlow(u uint64) float64 {
	for {
		i, m := u%layers, u>>11|1
		x := float64(int64(m)) * expLayers[i].width
		switch {
		case m < expLayers[i].sure:
			return x
		case i == 0: // the tail beyond the last edge is exponential again
			return expX[1] - math.Log(s.Float64())
		case expY[i]+float64(s.Float64()*(expY[i+1]-expY[i])) < math.Exp(-x):
			return x
		}
		u = s.Uint64()
	}
}

// Norm returns a normal variate with mean 0 and variance 1.
func (s *Stream) Norm() float64 {
	u := s.Uint64()
	l := &normLayers[u%layers]
	m := u>>11 | 1
	if x := float64(int64(m)) * l.width; m < l.sure {
		return signed(x, u)
	}
	return s.normSlow(u)
}

// signed gives x > 0 the sign in bit 8 of u, which neither layer nor point use.
func signed(x float64, u uint64) float64 {
	return math.Float64frombits(math.Float64bits(x) | u&layers<<55)
}

// normSlow finishes a normal draw whose first word u did not settle it.
func (s *Stream) normSlow(u uint64) float64 {
	for {
		i, m := u%layers, u>>11|1
		x := float64(int64(m)) * normLayers[i].width
		switch {
		case m < normLayers[i].sure:
			return signed(x, u)
		case i == 0:
			return signed(s.normTail(), u)
		case normY[i]+float64(s.Float64()*(normY[i+1]-normY[i])) < math.Exp(-0.5*x*x):
			return signed(x, u)
		}
		u = s.Uint64()
	}
}

// normTail returns a normal variate given that it exceeds the last edge.
//
// Source: G. Marsaglia, "Generating a variable from the tail of the normal
// distribution", Technometrics 6 (1964).
func (s *Stream) normTail() float64 {
	r := normX[1]
	for {
		x, y := -math.Log(s.Float64())/r, -math.Log(s.Float64())
		if 2*y > x*x {
			return r + x
		}
	}
}
