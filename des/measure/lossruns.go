package measure

import "math/bits"

// lossWindow is how many runs of lost packets a LossRuns keeps open.
const lossWindow = 64

// LossRuns measures the pattern of loss in the order of sending. A loss period
// is a run of consecutive lost packets; the loss distance of a lost packet is
// the difference between its number and that of the lost one before.
//
// It is fed with losses alone, each once, where and when they happen: places
// lose packets at different delays from the source, so losses may come in any
// order, and deliveries need not be told. The 64 highest runs stay open; when
// there is one more, the lowest is settled. The result is exact as long as no
// loss is reported below a run that is settled; those that are count as lost
// and as unplaced, and belong to no period. It holds no pointer. The zero
// value has seen no loss and finds no loss noticeable.
//
// Source: RFC 3357, sections 4 to 6 (2002).
type LossRuns struct {
	Delta uint32 // losses at most so far from the one before are noticeable

	done LossReport
	tail lossRun // the last settled, when done.Periods > 0
	open [lossWindow]lossRun
	n    uint8 // how many of open are used, in increasing order
}

// lossRun is a run of lost packets, both ends included.
type lossRun struct{ first, last uint32 }

// LossReport is the pattern of loss. Arrays are indexed by the bit length of
// what they count: entry k holds lengths from 2^(k-1) to 2^k-1.
type LossReport struct {
	Lost       uint64     // all that were reported
	Unplaced   uint64     // those reported too late or twice: in Lost, in nothing below
	Periods    uint64     // loss periods
	Noticeable uint64     // losses whose distance is at most Delta; the first has none
	Longest    uint64     // packets in the longest period
	Lengths    [33]uint64 // periods by their length in packets
	Apart      [33]uint64 // periods but the first by the distance of their first loss
}

// NoticeableRate returns the share of losses that are noticeable; ok is false
// when nothing was lost.
//
// Source: RFC 3357, section 6.5 (2002).
func (r *LossReport) NoticeableRate() (rate float64, ok bool) {
	if r.Lost == 0 {
		return 0, false
	}
	return float64(r.Noticeable) / float64(r.Lost), true
}

// MeanLength returns the mean length of a loss period in packets; ok is false
// when there is none.
func (r *LossReport) MeanLength() (packets float64, ok bool) {
	if r.Periods == 0 {
		return 0, false
	}
	return float64(r.Lost-r.Unplaced) / float64(r.Periods), true
}

// Merge adds the report of another flow of packets.
func (r *LossReport) Merge(o *LossReport) {
	r.Lost += o.Lost
	r.Unplaced += o.Unplaced
	r.Periods += o.Periods
	r.Noticeable += o.Noticeable
	r.Longest = max(r.Longest, o.Longest)
	for k := range r.Lengths {
		r.Lengths[k] += o.Lengths[k]
		r.Apart[k] += o.Apart[k]
	}
}

// Lost takes the number of a packet that was lost.
func (l *LossRuns) Lost(seq uint32) {
	l.done.Lost++
	if l.done.Periods > 0 && seq <= l.tail.last {
		l.done.Unplaced++
		return
	}
	// k is the number of runs that begin at or below seq.
	k := int(l.n)
	for k > 0 && l.open[k-1].first > seq {
		k--
	}
	if k > 0 && seq <= l.open[k-1].last {
		l.done.Unplaced++
		return
	}
	joinsBelow := k > 0 && l.open[k-1].last+1 == seq
	joinsAbove := k < int(l.n) && seq+1 == l.open[k].first
	switch {
	case joinsBelow && joinsAbove:
		l.open[k-1].last = l.open[k].last
		copy(l.open[k:], l.open[k+1:l.n])
		l.n--
	case joinsBelow:
		l.open[k-1].last = seq
	case joinsAbove:
		l.open[k].first = seq
	default:
		l.insert(k, lossRun{seq, seq})
	}
}

// insert opens r as run k; if there is no room the lowest run is settled.
func (l *LossRuns) insert(k int, r lossRun) {
	if l.n < lossWindow {
		copy(l.open[k+1:l.n+1], l.open[k:l.n])
		l.open[k] = r
		l.n++
		return
	}
	if k == 0 {
		l.settle(r)
		return
	}
	l.settle(l.open[0])
	copy(l.open[:], l.open[1:k])
	l.open[k-1] = r
}

// settle counts r, which lies above all that were settled before.
func (l *LossRuns) settle(r lossRun) {
	d := &l.done
	length := uint64(r.last-r.first) + 1
	if l.Delta > 0 {
		d.Noticeable += length - 1
	}
	first := d.Periods == 0
	apart := r.first - l.tail.last
	if !first && apart <= l.Delta {
		d.Noticeable++
	}
	if !first && apart == 1 {
		// The run goes on where the settled one ended: they are one period.
		d.Lengths[bits.Len64(l.tail.length())]--
		l.tail.last = r.last
	} else {
		if !first {
			d.Apart[bits.Len32(apart)]++
		}
		d.Periods++
		l.tail = r
	}
	d.Lengths[bits.Len64(l.tail.length())]++
	d.Longest = max(d.Longest, l.tail.length())
}

func (r lossRun) length() uint64 { return uint64(r.last-r.first) + 1 }

// Report returns the pattern of all losses so far. Feeding may go on.
func (l *LossRuns) Report() LossReport {
	c := *l
	for _, r := range c.open[:c.n] {
		c.settle(r)
	}
	return c.done
}
