package measure

import (
	"math"
	"math/bits"
	"slices"
	"unsafe"
)

// Layout of a histogram: bucket i of octave e holds the values whose leading
// eight bits are i, so an octave has 128 buckets and values below 256 are exact.
const (
	octaveBits = 7
	octave     = 1 << octaveBits
	pageBits   = 6
	page       = 1 << pageBits
	valueBits  = 43
	buckets    = (valueBits - octaveBits + 1) * octave
	directory  = buckets / page
)

// HistLimit is the largest value that a [Hist] tells apart from larger ones:
// 2^43-1, which in nanoseconds is 2.4 hours.
const HistLimit = 1<<valueBits - 1

// Hist is a histogram of non-negative integers, such as delays in nanoseconds.
// Values below 256 have a bucket each; above that an octave has 128 buckets,
// so the midpoint of a bucket is within 1/256 (0.39 %) of every value in it.
// Values above [HistLimit] land in the last bucket and are counted as clipped.
// Count, minimum and maximum are exact. The zero value is empty and ready.
//
// Counters come in pages of 64, made when first needed. A Hist must not be
// copied by assignment once it has been used: see [Hist.Clone].
type Hist struct {
	n       uint64
	min     uint64 // 0 when there is no value
	span    uint64 // maximum less minimum: one comparison finds a new extreme
	clipped uint64
	counts  []uint32          // pages, in the order of their making
	carries []carry           // what counters have passed on, by bucket
	dir     [directory]uint16 // page number plus one; 0 where there is no page
}

// carry is how often the counter of a bucket has passed 2^32-1.
type carry struct{ bucket, times uint32 }

// bucketOf returns the bucket of v, which is past the last for v > HistLimit.
func bucketOf(v uint64) uint32 {
	e := uint(bits.Len64(v|octave)) - (octaveBits + 1)
	return uint32(e<<octaveBits) + uint32(v>>(e&63))
}

// boundsOf returns the least and the greatest value of bucket i.
func boundsOf(i uint32) (low, high uint64) {
	if i < 2*octave {
		return uint64(i), uint64(i)
	}
	e := i>>octaveBits - 1
	low = uint64(i-e<<octaveBits) << e
	return low, low + 1<<e - 1
}

// Add counts v. It allocates only when v falls on a page not yet made.
func (h *Hist) Add(v uint64) {
	if v-h.min > h.span {
		h.widen(v)
	}
	h.n++
	i := bucketOf(v)
	if d := i >> pageBits; d < directory {
		// Without a page the subtraction wraps, and the index is out of range.
		if j := uint32(h.dir[d])<<pageBits - page + i%page; uint64(j) < uint64(len(h.counts)) {
			if c := h.counts[j] + 1; c != 0 {
				h.counts[j] = c
				return
			}
		}
	}
	h.addSlow(i)
}

// widen makes v an extreme. h.n does not count v yet.
//
//go:noinline
func (h *Hist) widen(v uint64) {
	if h.n == 0 {
		h.min = v
		return
	}
	greatest := max(h.min+h.span, v)
	h.min = min(h.min, v)
	h.span = greatest - h.min
}

// addSlow counts one in bucket i, which may be past the last, on no page, or
// about to pass 2^32-1.
//
//go:noinline
func (h *Hist) addSlow(i uint32) {
	if i >= buckets {
		i = buckets - 1
		h.clipped++
	}
	h.addMany(i, 1)
}

// addMany adds c to the counter of bucket i.
func (h *Hist) addMany(i uint32, c uint64) {
	d := i >> pageBits
	if h.dir[d] == 0 {
		h.grow()
		h.dir[d] = uint16(len(h.counts) >> pageBits)
	}
	j := uint32(h.dir[d]-1)<<pageBits + i%page
	low, over := bits.Add32(h.counts[j], uint32(c), 0)
	h.counts[j] = low
	if times := uint32(c>>32) + over; times > 0 {
		h.carry(i, times)
	}
}

// grow adds a page of zeros, and a quarter in reserve.
func (h *Hist) grow() {
	need := len(h.counts) + page
	if need > cap(h.counts) {
		reserve := len(h.counts) / page / 4 * page
		next := make([]uint32, len(h.counts), need+reserve)
		copy(next, h.counts)
		h.counts = next
	}
	h.counts = h.counts[:need]
	clear(h.counts[need-page:])
}

// carry notes that the counter of bucket i has passed 2^32-1.
func (h *Hist) carry(i, times uint32) {
	for k := range h.carries {
		if h.carries[k].bucket == i {
			h.carries[k].times += times
			return
		}
	}
	h.carries = append(h.carries, carry{i, times})
}

// at returns the count of bucket i.
func (h *Hist) at(i uint32) uint64 {
	p := h.dir[i>>pageBits]
	if p == 0 {
		return 0
	}
	c := uint64(h.counts[uint32(p-1)<<pageBits+i%page])
	for _, w := range h.carries {
		if w.bucket == i {
			c += uint64(w.times) << 32
		}
	}
	return c
}

// Merge adds all that o has counted. The result is exact, and the same in
// whatever order histograms are merged. o is left alone and may be h.
func (h *Hist) Merge(o *Hist) {
	if o.n == 0 {
		return
	}
	for d := range uint32(directory) {
		if o.dir[d] == 0 {
			continue
		}
		for i := d << pageBits; i < (d+1)<<pageBits; i++ {
			if c := o.at(i); c != 0 {
				h.addMany(i, c)
			}
		}
	}
	greatest := o.min + o.span
	h.widen(o.min)
	h.n += o.n
	h.widen(greatest)
	h.clipped += o.clipped
}

// Clone returns a histogram that shares nothing with h.
func (h *Hist) Clone() Hist {
	c := *h
	c.counts = slices.Clone(h.counts)
	c.carries = slices.Clone(h.carries)
	return c
}

// Count returns how many values have been added.
func (h *Hist) Count() uint64 { return h.n }

// Clipped returns how many values were above [HistLimit].
func (h *Hist) Clipped() uint64 { return h.clipped }

// Min returns the least value added, exactly; ok is false when there is none.
func (h *Hist) Min() (v uint64, ok bool) { return h.min, h.n > 0 }

// Max returns the greatest value added, exactly; ok is false when there is none.
func (h *Hist) Max() (v uint64, ok bool) { return h.min + h.span, h.n > 0 }

// Bytes returns the memory that h holds, in bytes, itself included.
func (h *Hist) Bytes() int {
	return int(unsafe.Sizeof(*h)) + 4*cap(h.counts) + int(unsafe.Sizeof(carry{}))*cap(h.carries)
}

// Each calls f for every bucket that is not empty, in increasing order, with
// the least and the greatest value of the bucket and its count. It is for
// results, not for a packet's path. The last bucket also holds clipped values.
func (h *Hist) Each(f func(low, high, count uint64)) {
	for d := range uint32(directory) {
		if h.dir[d] == 0 {
			continue
		}
		for i := d << pageBits; i < (d+1)<<pageBits; i++ {
			if c := h.at(i); c != 0 {
				low, high := boundsOf(i)
				f(low, high, c)
			}
		}
	}
}

// Quantile returns the quantile num/den by nearest rank: order statistic
// number ceil(num·N/den), computed in integers. The first and the last are
// exact; any other is the midpoint of its bucket, moved into [Min, Max] where
// it lies outside. It is therefore within 1/256 of the exact order statistic,
// unless that was clipped. ok is false when h is empty or num is 0, for then
// no value has that rank. Quantile panics if den is 0 or num > den.
//
// Source: RFC 2330, section 11.3 (1998).
func (h *Hist) Quantile(num, den uint64) (v float64, ok bool) {
	return h.QuantileWithLost(num, den, 0)
}

// QuantileWithLost is [Hist.Quantile] of a sample to which lost packets belong
// as values greater than any other; ok is false also when the quantile is one
// of them and so has no finite value.
//
// Source: RFC 7679, section 5 (2016).
func (h *Hist) QuantileWithLost(num, den, lost uint64) (v float64, ok bool) {
	return h.Ranked(Rank(num, den, h.n+lost))
}

// Rank returns ceil(num·n/den), the number of the order statistic that is the
// quantile num/den of n values. It panics if den is 0 or num > den.
func Rank(num, den, n uint64) uint64 {
	if den == 0 || num > den {
		panic("measure: quantile outside [0, 1]")
	}
	hi, lo := bits.Mul64(num, n)
	q, rem := bits.Div64(hi, lo, den)
	if rem > 0 {
		q++
	}
	return q
}

// Ranked returns order statistic number rank, counted from 1, as
// [Hist.Quantile] does; ok is false when there is none of that number.
func (h *Hist) Ranked(rank uint64) (v float64, ok bool) {
	switch {
	case rank == 0 || rank > h.n:
		return 0, false
	case rank == 1:
		return float64(h.min), true
	case rank == h.n:
		return float64(h.min + h.span), true
	}
	var below uint64
	for d := range uint32(directory) {
		if h.dir[d] == 0 {
			continue
		}
		for i := d << pageBits; i < (d+1)<<pageBits; i++ {
			if below += h.at(i); below >= rank {
				low, high := boundsOf(i)
				mid := float64(low) + float64(0.5*float64(high-low))
				return min(max(mid, float64(h.min)), float64(h.min+h.span)), true
			}
		}
	}
	panic("measure: histogram counts less than it was given")
}

// MedianWithLost returns the median of a sample to which lost packets belong
// as values greater than any other: the middle value, or the mean of the two
// central ones when their number is even. ok is false when there is no value
// or one of those it needs is lost.
//
// Source: RFC 7679, section 5.2 (2016).
func (h *Hist) MedianWithLost(lost uint64) (v float64, ok bool) {
	n := h.n + lost
	a, okA := h.Ranked((n + 1) / 2)
	b, okB := h.Ranked(n/2 + 1)
	if !okA || !okB {
		return 0, false
	}
	return a + float64(0.5*(b-a)), true
}

// AtMost returns how many values lie in buckets wholly at or below v. It is
// exact for v below 256, for v at the end of a bucket, and for v outside
// [Min, Max); elsewhere it leaves out the bucket that v cuts.
func (h *Hist) AtMost(v uint64) uint64 {
	if v >= h.min+h.span {
		return h.n
	}
	var below uint64
	h.Each(func(_, high, count uint64) {
		if high <= v {
			below += count
		}
	})
	return below
}

// Mean returns the mean of the midpoints of the buckets, for a histogram that
// has no [Moments] beside it; NaN when it is empty.
func (h *Hist) Mean() float64 {
	var sum float64
	h.Each(func(low, high, count uint64) {
		mid := float64(low) + float64(0.5*float64(high-low))
		sum += float64(mid * float64(count))
	})
	if h.n == 0 {
		return math.NaN()
	}
	return sum / float64(h.n)
}
