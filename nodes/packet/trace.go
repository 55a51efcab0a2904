package packet

import (
	"cmp"
	"slices"

	"ferrule/des"
	"ferrule/nodes"
)

// Time series count what became of the packets of a class by the instant at
// which they were sent. Every site keeps its own, and they are summed when
// they are read, so that regions share nothing while a window runs.
//
// A count goes first into a ring of close bins. Bins that leave the ring are
// added to the wide bins, and kept beside them when they lie near an outside
// act. The ring is longer than what is kept before an act, so that whether an
// act lies near is known by the time a bin leaves.
const (
	leastWidth = 10 * des.Millisecond // doubled until there are at most mostWide bins
	mostWide   = 1024
	mostMarks  = 8    // acts that have close bins around them: the first
	ringBins   = 2048 // more than CloseBefore; a power of two
)

// Close bins are so wide, and are kept from so long before an act to so long
// after it.
const (
	CloseWidth  = des.Millisecond
	CloseBefore = des.Second
	CloseAfter  = 2 * des.Second
)

// Tally is what became of the packets of a class that were sent in one bin.
type Tally struct {
	Delivered uint64
	Lost      uint64
	Bytes     uint64 // IP bytes delivered
	Delay     uint64 // ns: the sum over those delivered, each rounded down
	MaxDelay  uint64 // ns, rounded down
}

func (t *Tally) merge(o *Tally) {
	t.Delivered += o.Delivered
	t.Lost += o.Lost
	t.Bytes += o.Bytes
	t.Delay += o.Delay
	t.MaxDelay = max(t.MaxDelay, o.MaxDelay)
}

// CloseBin is a bin of 1 ms; No counts the milliseconds since the start of the
// run.
type CloseBin struct {
	No uint64
	Tally
}

// trace is the time series of one class at one site.
type trace struct {
	low   uint64 // number of the first bin in the ring
	ring  *[ringBins]Tally
	wide  []Tally
	close []CloseBin // sorted
	net   *Network
}

// noRing is the low of a trace that has no ring: no bin lies in it.
const noRing = 1 << 62

// deliver counts a packet that was delivered, its delay in ns.
func (t *trace) deliver(born des.Time, delay uint64, size uint16) {
	no := uint64(born) / uint64(CloseWidth)
	if no-t.low >= ringBins && !t.slide(no) {
		t.late(CloseBin{no, Tally{Delivered: 1, Bytes: uint64(size), Delay: delay, MaxDelay: delay}})
		return
	}
	b := &t.ring[no%ringBins]
	b.Delivered++
	b.Bytes += uint64(size)
	b.Delay += delay
	if delay > b.MaxDelay {
		b.MaxDelay = delay
	}
}

// lose counts a packet that was lost.
func (t *trace) lose(born des.Time) {
	no := uint64(born) / uint64(CloseWidth)
	if no-t.low >= ringBins && !t.slide(no) {
		t.late(CloseBin{no, Tally{Lost: 1}})
		return
	}
	t.ring[no%ringBins].Lost++
}

// slide moves the ring on until it holds bin no; it reports false when that
// bin has left the ring.
//
//go:noinline
func (t *trace) slide(no uint64) bool {
	if t.ring == nil {
		t.ring = new([ringBins]Tally)
		t.wide = make([]Tally, t.net.wideBins)
		t.low = no - min(no, ringBins-1)
		return true
	}
	if no < t.low {
		return false
	}
	for range min(no-ringBins+1-t.low, ringBins) {
		b := &t.ring[t.low%ringBins]
		t.leave(&t.wide, &t.close, t.low, b)
		*b = Tally{}
		t.low++
	}
	t.low = no - ringBins + 1
	return true
}

// leave adds a bin of the ring to others.
func (t *trace) leave(wide *[]Tally, close *[]CloseBin, no uint64, b *Tally) {
	if *b == (Tally{}) {
		return
	}
	(*wide)[t.net.wideOf(no)].merge(b)
	if t.net.isNear(no) {
		*close = append(*close, CloseBin{no, *b})
	}
}

// late adds a packet whose bin has left the ring.
//
//go:noinline
func (t *trace) late(b CloseBin) {
	t.wide[t.net.wideOf(b.No)].merge(&b.Tally)
	if !t.net.isNear(b.No) {
		return
	}
	i, found := slices.BinarySearchFunc(t.close, b.No, byNumber)
	if found {
		t.close[i].merge(&b.Tally)
	} else {
		t.close = slices.Insert(t.close, i, b)
	}
}

func byNumber(b CloseBin, no uint64) int { return cmp.Compare(b.No, no) }

func (t *trace) clone(n *Network) trace {
	c := *t
	c.net = n
	if t.ring != nil {
		r := *t.ring
		c.ring = &r
	}
	c.wide, c.close = slices.Clone(t.wide), slices.Clone(t.close)
	return c
}

// traceSites gives every site its traces and every meter that of its class
// where its packets arrive.
func (n *Network) traceSites() {
	n.wideWidth = leastWidth
	for (n.cfg.Length-1)/n.wideWidth >= mostWide {
		n.wideWidth *= 2
	}
	n.wideBins = int((n.cfg.Length-1)/n.wideWidth) + 1
	for _, s := range n.sites {
		s.traces = make([]trace, len(n.plant.Classes))
		for c := range s.traces {
			s.traces[c] = trace{low: noRing, net: n}
		}
	}
	n.traceMeters()
}

func (n *Network) traceMeters() {
	for w := range n.meters {
		a, d := nodes.AggOf(uint16(w))
		to := n.plant.Aggregates[a].Target(d)
		n.meters[w].trace = &n.sites[to].traces[n.classOf[w]]
	}
}

// wideOf is the wide bin of a close one.
func (n *Network) wideOf(no uint64) int {
	return min(int(no/uint64(n.wideWidth/CloseWidth)), n.wideBins-1)
}

// markAct makes what is sent near an act at now be kept in close bins.
func (n *Network) markAct(now des.Time) {
	if k := len(n.marks); k < mostMarks && (k == 0 || n.marks[k-1] != now) {
		n.marks = append(n.marks, now)
	}
}

// isNear reports whether a close bin lies near an act.
func (n *Network) isNear(no uint64) bool {
	from := des.Time(no) * CloseWidth
	for _, m := range n.marks {
		if from+CloseWidth > m-CloseBefore && from < m+CloseAfter {
			return true
		}
	}
	return false
}

// Series is the time series of one class. Packets still inside the network are
// counted with their bins, so offered = delivered + lost + inside in each.
type Series struct {
	Width       des.Time   // of the wide bins; number i begins at i times Width
	Wide        []Tally    // the whole run, warm-up included
	WideInside  []uint64   // beside Wide
	Close       []CloseBin // sorted; those around the first acts in which anything was sent
	CloseInside []uint64   // beside Close
}

// Series reads the time series of every class.
func (n *Network) Series() []Series {
	out := make([]Series, len(n.plant.Classes))
	for c := range out {
		x := &out[c]
		x.Width, x.Wide, x.WideInside = n.wideWidth, make([]Tally, n.wideBins), make([]uint64, n.wideBins)
		for _, s := range n.sites {
			t := &s.traces[c]
			if t.ring == nil {
				continue
			}
			for i := range t.wide {
				x.Wide[i].merge(&t.wide[i])
			}
			x.Close = append(x.Close, t.close...)
			for no := t.low; no < t.low+ringBins; no++ {
				t.leave(&x.Wide, &x.Close, no, &t.ring[no%ringBins])
			}
		}
	}
	inside := make([][]CloseBin, len(out))
	n.Inside(func(p *nodes.Packet) {
		c, no := n.classOf[p.Way], uint64(p.Born)/uint64(CloseWidth)
		out[c].WideInside[n.wideOf(no)]++
		if n.isNear(no) {
			out[c].Close = append(out[c].Close, CloseBin{No: no})
			inside[c] = append(inside[c], CloseBin{No: no})
		}
	})
	for c := range out {
		out[c].fold(inside[c])
	}
	return out
}

// fold sorts the close bins, joins those of one number and counts what is
// inside beside them.
func (x *Series) fold(inside []CloseBin) {
	slices.SortStableFunc(x.Close, func(a, b CloseBin) int { return cmp.Compare(a.No, b.No) })
	kept := x.Close[:0]
	for i := range x.Close {
		if k := len(kept); k > 0 && kept[k-1].No == x.Close[i].No {
			kept[k-1].merge(&x.Close[i].Tally)
		} else {
			kept = append(kept, x.Close[i])
		}
	}
	x.Close, x.CloseInside = kept, make([]uint64, len(kept))
	for _, b := range inside {
		i, _ := slices.BinarySearchFunc(x.Close, b.No, byNumber)
		x.CloseInside[i]++
	}
}

// Marks lists the acts around which there are close bins, from 1 s before to
// 2 s after each, in order.
func (n *Network) Marks() []des.Time { return n.marks }
