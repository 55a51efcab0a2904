package replay

import (
	"cmp"
	"fmt"
	"math/bits"
	"net/netip"
	"slices"
)

// mostFlows is how many flows a table can have; they are held in memory.
const mostFlows = 1 << 20

// mostAtOnce is how many packets a flow that lasts no time can have.
const mostAtOnce = 1000

// flow is a row of a table of flows: packets at equal distances from the start
// to the end, whose sizes differ by a byte at most.
type flow struct {
	sec, ps int64 // start, since the epoch of the file
	start   int64 // ps since the earliest of the file
	lasts   int64 // ps from the first packet to the last
	bytes   int64
	packets int64
	class   int16 // or nodes.None
	ways    uint8
	id      uint16
}

// when returns the time of packet i.
func (f *flow) when(i int64) int64 {
	if f.packets == 1 {
		return f.start
	}
	hi, lo := bits.Mul64(uint64(f.lasts), uint64(i))
	q, _ := bits.Div64(hi, lo, uint64(f.packets-1))
	return f.start + int64(q)
}

// size returns the bytes of packet i.
func (f *flow) size(i int64) uint16 {
	upTo := func(i int64) int64 { // packets are below 2^32, bytes below 2^48
		hi, lo := bits.Mul64(uint64(f.bytes), uint64(i))
		q, _ := bits.Div64(hi, lo, uint64(f.packets))
		return int64(q)
	}
	return uint16(upTo(i+1) - upTo(i))
}

// readFlows reads a table of flows.
func (t *Trace) readFlows() *Fault {
	tab := table{window: newWindow(t.file, t.size, t.held)}
	if bad := tab.begin(flowHead, false); bad != nil {
		return bad
	}
	var x [8][]byte
	var cols [8]int
	for {
		ok, bad := tab.next()
		if bad == nil && ok {
			bad = tab.fields(&x, &cols)
		}
		if bad != nil {
			return bad
		}
		if !ok {
			break
		}
		if len(t.flows) == mostFlows {
			return tab.at(0, fault("", "sum flows up, or cut the table into several", "the table has more than %d flows", mostFlows))
		}
		if bad = t.readFlow(&tab, &x, &cols); bad != nil {
			return bad
		}
	}
	for i := range t.flows {
		f := &t.flows[i]
		f.start = t.since(f.sec, f.ps)
		t.last = max(t.last, f.start+f.lasts)
	}
	slices.SortStableFunc(t.flows, func(a, b flow) int { return cmp.Compare(a.start, b.start) })
	return nil
}

// readFlow reads one row.
func (t *Trace) readFlow(tab *table, x *[8][]byte, cols *[8]int) *Fault {
	bad := func(i int, msg, hint string) *Fault { return tab.bad(i, x[i], cols[i], msg, hint) }
	const ofTime = "write seconds, such as 12.5, to the picosecond at most"
	f := flow{id: uint16(len(t.flows))}
	var ok bool
	if f.sec, f.ps, ok = seconds(x[0]); !ok {
		return bad(0, "is not a time", ofTime)
	}
	sec, ps, ok := seconds(x[1])
	if !ok {
		return bad(1, "is not a time", ofTime)
	}
	if sec < f.sec || sec == f.sec && ps < f.ps {
		return bad(1, "is before the start", "write a later one")
	}
	if sec-f.sec > mostSpan {
		return bad(1, "is too long after the start", "let the table span 31 days at most")
	}
	f.lasts = (sec-f.sec)*1e12 + ps - f.ps
	if f.bytes, ok = number(x[2], 1<<47); !ok {
		return bad(2, "is not a number of bytes", "write the bytes of all its IP packets together")
	}
	if f.packets, ok = number(x[3], 1<<31); !ok || f.packets == 0 {
		return bad(3, "is not a number of packets", "write 1 to 2147483648")
	}
	if f.bytes < f.packets || f.bytes > 65535*f.packets {
		return bad(2, "bytes do not make that many packets", "a packet has 1 to 65535 bytes")
	}
	if f.packets > mostAtOnce+f.lasts/1000 {
		return bad(3, "packets are too many for that time", fmt.Sprintf("write up to %d, and one more a nanosecond", mostAtOnce))
	}
	from, err := netip.ParseAddr(string(x[4]))
	if err != nil {
		return bad(4, "is not an address", "write one such as 192.0.2.1 or 2001:db8::1")
	}
	to, err := netip.ParseAddr(string(x[5]))
	if err != nil {
		return bad(5, "is not an address", "write one such as 192.0.2.1 or 2001:db8::1")
	}
	dscp, ok := number(x[6], 63)
	if !ok {
		return bad(6, "is not a code point", "write 0 to 63")
	}
	f.class, f.ways = assign(t.rules, uint8(dscp), addrOf(from), addrOf(to))
	if why := t.meet(int64(len(t.flows))+1, f.sec, f.ps, &t.counts); why != nil {
		why.Field = tab.head[0]
		return tab.at(cols[0], why)
	}
	t.counts.Packets += f.packets - 1 // meet has counted one
	t.counts.addMany(f.class, f.ways, f.packets, f.bytes)
	t.flows = append(t.flows, f)
	return nil
}

// sending is a flow that has packets left to send.
type sending struct {
	due   int64
	index int32 // in Trace.flows
	sent  int64 // packets before the one that is due
}

// before is the only order of flows that send; no two are alike in it.
func (s *sending) before(o *sending) bool {
	if s.due != o.due {
		return s.due < o.due
	}
	return s.index < o.index
}

// flowHeap merges flows: a binary heap of those that have begun.
type flowHeap struct {
	heap  []sending
	ahead int // index of the first flow that has not begun
}

func (h *flowHeap) rewind() { h.heap, h.ahead = h.heap[:0], 0 }

// next returns the next packet of a class and direction.
func (h *flowHeap) next(flows []flow, class int16, way uint8, r *record) bool {
	for h.ahead < len(flows) {
		f := &flows[h.ahead]
		if f.class == class && f.ways&way != 0 {
			if len(h.heap) > 0 && h.heap[0].due <= f.start {
				break
			}
			h.heap = append(h.heap, sending{due: f.start, index: int32(h.ahead)})
			h.up(len(h.heap) - 1)
		}
		h.ahead++
	}
	if len(h.heap) == 0 {
		return false
	}
	s := &h.heap[0]
	f := &flows[s.index]
	r.at, r.size, r.flow = s.due, f.size(s.sent), f.id
	if s.sent++; s.sent < f.packets {
		s.due = f.when(s.sent)
	} else {
		last := len(h.heap) - 1
		h.heap[0] = h.heap[last]
		h.heap = h.heap[:last]
	}
	h.down()
	return true
}

// up moves the last element to its place.
func (h *flowHeap) up(i int) {
	for i > 0 {
		p := (i - 1) / 2
		if !h.heap[i].before(&h.heap[p]) {
			return
		}
		h.heap[i], h.heap[p] = h.heap[p], h.heap[i]
		i = p
	}
}

// down moves the first element to its place.
func (h *flowHeap) down() {
	for i := 0; ; {
		c := 2*i + 1
		if c >= len(h.heap) {
			return
		}
		if c+1 < len(h.heap) && h.heap[c+1].before(&h.heap[c]) {
			c++
		}
		if !h.heap[c].before(&h.heap[i]) {
			return
		}
		h.heap[i], h.heap[c] = h.heap[c], h.heap[i]
		i = c
	}
}
