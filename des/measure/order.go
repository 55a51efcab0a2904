package measure

import (
	"math"

	"ferrule/des"
)

// Order counts packets that arrive after one sent later. A packet is reordered
// if its number is below the next expected; otherwise the next expected becomes
// its number plus one. A packet is 3-reordered if the three packets that
// arrived just before it all have greater numbers, which is what makes a
// receiver send three duplicate acknowledgements. Duplicates must have been
// taken out. It holds no pointer. The zero value expects number 0.
//
// A free run is a series of arrivals that are not reordered, ended by one that
// is. Empty runs and the one that the end of the run cuts are not counted.
//
// Source: RFC 4737, sections 3.3, 4.1, 4.5 and 5.2 to 5.4 (2006).
type Order struct {
	Received  uint64
	Reordered uint64
	Three     uint64 // how many of Reordered are 3-reordered
	Runs      uint64 // free runs
	InRuns    uint64 // packets in free runs
	Squares   uint64 // sum of the squares of the lengths of free runs

	run    uint64 // packets in the free run that has not ended
	next   uint64
	before [3]uint32 // the last three arrivals, the newest first
}

// Add takes the packet that arrived and reports whether it is reordered.
func (o *Order) Add(seq uint32) (reordered bool) {
	o.Received++
	if reordered = uint64(seq) < o.next; reordered {
		o.late(seq)
	} else {
		o.next = uint64(seq) + 1
		o.run++
	}
	o.before = [3]uint32{seq, o.before[0], o.before[1]}
	return reordered
}

// late counts a reordered packet.
func (o *Order) late(seq uint32) {
	o.Reordered++
	if o.Received > 3 && min(o.before[0], o.before[1], o.before[2]) > seq {
		o.Three++
	}
	if o.run > 0 {
		o.Runs++
		o.InRuns += o.run
		o.Squares += o.run * o.run
		o.run = 0
	}
}

// Ratio returns reordered over received packets; ok is false when none was
// received.
func (o *Order) Ratio() (ratio float64, ok bool) {
	if o.Received == 0 {
		return 0, false
	}
	return float64(o.Reordered) / float64(o.Received), true
}

// MeanRun returns the mean length of a free run in packets, and the mean that
// a packet in one sees, which long runs weigh more in; NaN when there is none.
func (o *Order) MeanRun() (byRun, byPacket float64) {
	if o.Runs == 0 {
		return math.NaN(), math.NaN()
	}
	return float64(o.InRuns) / float64(o.Runs), float64(o.Squares) / float64(o.InRuns)
}

// Merge adds the counts of another flow of packets. What o expects next stays.
func (o *Order) Merge(p Order) {
	o.Received += p.Received
	o.Reordered += p.Reordered
	o.Three += p.Three
	o.Runs += p.Runs
	o.InRuns += p.InRuns
	o.Squares += p.Squares
}

// extentGaps is how many gaps of sequence numbers an Extents remembers.
const extentGaps = 8

// Extents measures how far reordered packets come behind: the extent is the
// number of arrivals since the first that had a greater number, the late time
// the time since then. It remembers the eight newest gaps in the numbers and
// is exact for every packet that belongs to one of them. It holds no pointer.
// The zero value expects number 0 and counts numbers below the first arrival
// as a gap.
//
// Source: RFC 4737, sections 4.2 and 4.3 (2006).
type Extents struct {
	next  uint64
	place uint64 // arrivals so far
	made  uint64 // gaps so far; gap k is kept at k modulo extentGaps
	gaps  [extentGaps]opening
}

// opening is the arrival that left out the numbers from from to to.
type opening struct {
	from, to uint32
	place    uint64
	at       des.Time
}

// Add takes the packet that arrived at now. If it is reordered, Add returns
// its extent in arrivals and its late time; ok is false if it is not reordered,
// or belongs to a gap that has been forgotten.
func (e *Extents) Add(seq uint32, now des.Time) (extent uint64, late des.Time, ok bool) {
	e.place++
	if n := uint64(seq); n >= e.next {
		if n > e.next {
			e.gaps[e.made%extentGaps] = opening{uint32(e.next), seq - 1, e.place, now}
			e.made++
		}
		e.next = n + 1
		return 0, 0, false
	}
	for k := e.made; k > 0 && k+extentGaps > e.made; k-- {
		g := &e.gaps[(k-1)%extentGaps]
		if g.from > seq {
			continue
		}
		if seq > g.to {
			break // a duplicate of one that was never missing
		}
		return e.place - g.place, now - g.at, true
	}
	return 0, 0, false
}
