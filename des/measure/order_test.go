package measure

import (
	"math"
	"slices"
	"testing"

	"ferrule/des"
)

// Arrivals of RFC 4737, tables 1 to 3 and section 5.4; packets of 100 bytes.
func TestOrderWorked(t *testing.T) {
	for _, c := range []struct {
		source string
		seqs   []uint32
		times  []des.Time
		want   []behind
		three  uint64
	}{
		{"table 1", []uint32{1, 2, 3, 5, 6, 7, 8, 4, 9, 10},
			[]des.Time{68, 88, 108, 148, 168, 188, 208, 210, 228, 248},
			[]behind{{4, 4, 62, 400, 4}}, 1},
		{"table 2", []uint32{1, 2, 3, 4, 7, 5, 6, 8, 9, 10},
			[]des.Time{68, 88, 108, 128, 188, 189, 190, 208, 228, 248},
			[]behind{{5, 1, 1, 100, 1}, {6, 2, 2, 100, 0}}, 0},
		{"table 3", []uint32{1, 2, 3, 7, 8, 9, 10, 4, 5, 6, 11},
			[]des.Time{68, 88, 108, 188, 208, 228, 248, 250, 252, 256, 268},
			[]behind{{4, 4, 62, 400, 4}, {5, 5, 64, 400, 0}, {6, 6, 68, 400, 0}}, 1},
		{"section 5.4", []uint32{1, 2, 3, 7, 8, 9, 4, 5, 6}, []des.Time{1, 2, 3, 4, 5, 6, 7, 8, 9},
			[]behind{{4, 3, 3, 300, 3}, {5, 4, 4, 300, 0}, {6, 5, 5, 300, 0}}, 1},
		{"by hand: as early as can be", []uint32{2, 3, 4, 1}, []des.Time{1, 2, 3, 4}, []behind{{1, 3, 3, 300, 3}}, 1},
		{"by hand: one too early", []uint32{2, 3, 1}, []des.Time{1, 2, 3}, []behind{{1, 2, 2, 200, 2}}, 0},
	} {
		if slow := slowOrder(c.seqs, c.times, 100); !slices.Equal(slow, c.want) {
			t.Errorf("%s: the definition gives %+v, want %+v", c.source, slow, c.want)
		}
		var o Order
		var e Extents
		var got []behind
		for i, s := range c.seqs {
			reordered := o.Add(s)
			extent, late, ok := e.Add(s, c.times[i])
			if reordered != ok {
				t.Errorf("%s: packet %d: reordered %v, has an extent %v", c.source, s, reordered, ok)
			}
			if ok {
				got = append(got, behind{seq: s, extent: int(extent), late: late})
			}
		}
		for i := range got { // what the stream does not measure
			got[i].bytes, got[i].n = c.want[i].bytes, c.want[i].n
		}
		if !slices.Equal(got, c.want) {
			t.Errorf("%s: got %+v, want %+v", c.source, got, c.want)
		}
		n, k := uint64(len(c.seqs)), uint64(len(c.want))
		ratio, ok := o.Ratio()
		if o.Received != n || o.Reordered != k || o.Three != c.three || !ok || ratio != float64(k)/float64(n) {
			t.Errorf("%s: %+v, ratio %v; want %d of %d, %d 3-reordered", c.source, o, ratio, k, n, c.three)
		}
	}
}

// RFC 4737, section 4.5: 36 packets, 3 of them reordered after 11 in order.
func TestFreeRunsWorked(t *testing.T) {
	var o Order
	for i := range uint32(3) {
		for k := range uint32(11) {
			o.Add(12*i + 2 + k)
		}
		o.Add(12*i + 1)
	}
	byRun, byPacket := o.MeanRun()
	if o.Received != 36 || o.Reordered != 3 || o.Runs != 3 || o.InRuns != 33 || o.Squares != 363 || byRun != 11 || byPacket != 11 {
		t.Errorf("%+v, mean runs %v and %v; want 3 runs, 33, 363, 11, 11", o, byRun, byPacket)
	}
	q := o
	if q.Add(1); q.Runs != 3 {
		t.Errorf("an empty run counts: %d, want 3", q.Runs)
	}
	p := o
	p.Merge(o)
	if p.Received != 72 || p.Reordered != 6 || p.Three != 6 || p.Runs != 6 || p.InRuns != 66 || p.Squares != 726 || p.next != o.next {
		t.Errorf("merged with itself: %+v", p)
	}
	var none Order
	if byRun, _ := none.MeanRun(); !math.IsNaN(byRun) {
		t.Errorf("mean of no run %v", byRun)
	}
	if _, ok := none.Ratio(); ok {
		t.Error("a ratio of no packets is defined")
	}
}

func TestExtentsForgetTheOldestGap(t *testing.T) {
	var e Extents
	e.Add(0, 0)
	for i := range uint32(extentGaps + 1) { // gaps at 1, 3, 5 ...
		e.Add(2*i+2, des.Time(10*i+10))
	}
	if extent, _, ok := e.Add(1, 500); ok {
		t.Errorf("a forgotten gap gives extent %d", extent)
	}
	// Number 3 was left out by arrival 3 at 20; this is arrival 12.
	if extent, late, ok := e.Add(3, 500); !ok || extent != 9 || late != 480 {
		t.Errorf("extent %d, late %d, %v; want 9, 480", extent, late, ok)
	}
	if _, _, ok := e.Add(4, 501); ok {
		t.Error("a duplicate has an extent")
	}
}
