// Package des is the discrete-event kernel: integer time, calendars, agendas
// and regions that advance together in windows.
//
// Time is an integer count of picoseconds since the start of the run, so
// equal instants compare equal and sums do not drift. Whatever happens at one
// instant happens in one total order, written down at [Kind]. Nothing here
// starts a goroutine: a kernel is handed an [Executor] and its results do not
// depend on which one.
package des

import (
	"math/bits"
	"strconv"
)

// Time is an instant, or a span, in picoseconds. It spans 106 days.
type Time int64

// Units of time. Never lies after every instant a run can reach.
const (
	Picosecond  Time = 1
	Nanosecond       = 1000 * Picosecond
	Microsecond      = 1000 * Nanosecond
	Millisecond      = 1000 * Microsecond
	Second           = 1000 * Millisecond
	Minute           = 60 * Second
	Hour             = 60 * Minute

	Never Time = 1<<63 - 1
)

// Seconds converts t to seconds; the result is rounded to a float64.
func (t Time) Seconds() float64 { return float64(t) / float64(Second) }

// Plus adds d to t and stays at Never when t is Never or the sum overflows.
// d must not be negative.
func (t Time) Plus(d Time) Time {
	if s := t + d; s >= t {
		return s
	}
	return Never
}

// String prints t with the largest unit that keeps it at or above one, exactly.
func (t Time) String() string {
	if t == Never {
		return "never"
	}
	neg := t < 0
	u := uint64(t)
	if neg {
		u = -u
	}
	unit, name := uint64(Picosecond), "ps"
	for _, c := range []struct {
		unit Time
		name string
	}{{Second, "s"}, {Millisecond, "ms"}, {Microsecond, "us"}, {Nanosecond, "ns"}} {
		if u >= uint64(c.unit) {
			unit, name = uint64(c.unit), c.name
			break
		}
	}
	b := make([]byte, 0, 24)
	if neg {
		b = append(b, '-')
	}
	b = strconv.AppendUint(b, u/unit, 10)
	if frac := u % unit; frac != 0 {
		b = append(b, '.')
		for frac != 0 {
			unit /= 10
			b = append(b, byte('0'+frac/unit))
			frac %= unit
		}
	}
	return string(append(b, name...))
}

// Sum is a 128-bit unsigned sum of products of times, for figures that pass
// 63 bits: total waits, and areas under a queue length.
type Sum struct{ Hi, Lo uint64 }

// Add adds v.
func (s *Sum) Add(v uint64) {
	var c uint64
	s.Lo, c = bits.Add64(s.Lo, v, 0)
	s.Hi += c
}

// AddSum adds o.
func (s *Sum) AddSum(o Sum) {
	var c uint64
	s.Lo, c = bits.Add64(s.Lo, o.Lo, 0)
	s.Hi += o.Hi + c
}

// AddProduct adds a*b.
func (s *Sum) AddProduct(a, b uint64) {
	hi, lo := bits.Mul64(a, b)
	s.AddSum(Sum{hi, lo})
}

// Sub subtracts o, which must not exceed s.
func (s *Sum) Sub(o Sum) {
	var b uint64
	s.Lo, b = bits.Sub64(s.Lo, o.Lo, 0)
	s.Hi -= o.Hi + b
}

// Float returns the sum as a float64, rounded.
func (s Sum) Float() float64 { return float64(float64(s.Hi)*(1<<64)) + float64(s.Lo) }
