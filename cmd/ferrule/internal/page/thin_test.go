package page

import (
	"math"
	"testing"

	"ferrule/scenarios/result"
)

// Folding keeps every packet and bit, the mean over all and the greatest delay.
func TestFoldedHidesNothing(t *testing.T) {
	s := result.Series{Class: "gold", FromS: 2, WidthS: 0.01}
	var sum float64
	for i := range 1003 {
		n := int64(i % 7)
		s.OfferedPackets, s.LostPackets = append(s.OfferedPackets, n+1), append(s.LostPackets, 1)
		s.DeliveredPackets, s.DeliveredBits = append(s.DeliveredPackets, n), append(s.DeliveredBits, 800*n)
		var mean, most *float64
		if n > 0 {
			mean, most = new(1e-3*float64(1+i%3)), new(4e-3)
			sum += float64(n) * *mean
		}
		if i == 501 {
			most = new(0.9)
		}
		s.MeanDelayS, s.MaxDelayS = append(s.MeanDelayS, mean), append(s.MaxDelayS, most)
	}
	x := folded(&s, 3)
	if len(x.OfferedPackets) != 335 || x.WidthS != 0.03 || x.FromS != 2 {
		t.Fatalf("%d bins of %g s from %g s, want 335 of 0.03 s from 2 s", len(x.OfferedPackets), x.WidthS, x.FromS)
	}
	var want, got [4]int64
	for i := range s.OfferedPackets {
		for k, c := range [][]int64{s.OfferedPackets, s.DeliveredPackets, s.LostPackets, s.DeliveredBits} {
			want[k] += c[i]
		}
	}
	most, mean := 0.0, 0.0
	for i := range x.OfferedPackets {
		for k, c := range [][]int64{x.OfferedPackets, x.DeliveredPackets, x.LostPackets, x.DeliveredBits} {
			got[k] += c[i]
		}
		if m := x.MaxDelayS[i]; m != nil {
			most = max(most, *m)
			mean += *x.MeanDelayS[i] * float64(x.DeliveredPackets[i])
		}
	}
	if got != want || most != 0.9 || math.Abs(mean/sum-1) > 5e-4 {
		t.Errorf("folded to %v, greatest delay %g s, sum of delays %g s; want %v, 0.9 s, %g s", got, most, mean, want, sum)
	}
}

// A close-up of a class that sends little has wider bins, and ends when the
// slowest of the runs has settled.
func TestCloseUps(t *testing.T) {
	c := samples(t)["comparison"].(*result.Comparison)
	v := newView(c, Options{})
	for i, run := range v.Document.Runs {
		closed := 0
		for _, s := range run.Series {
			if !s.Close {
				if len(s.OfferedPackets) > mostBins {
					t.Errorf("%s: %d bins of the whole run", s.Class, len(s.OfferedPackets))
				}
				continue
			}
			closed++
			if math.Abs(s.WidthS-0.01) > 1e-9 {
				t.Errorf("%s: bins of %g s, want 10 ms for one or two packets in a millisecond", s.Class, s.WidthS)
			}
			var settled float64
			for _, r := range c.Runs {
				for _, p := range r.Periods {
					if p.Kind == result.Hit {
						settled = max(settled, p.ToS)
					}
				}
			}
			end := s.FromS + s.WidthS*float64(len(s.OfferedPackets))
			if math.Abs(s.FromS-0.5) > 1e-9 || end < min(settled+afterCare, 3)-s.WidthS {
				t.Errorf("run %d, %s: from %g to %g s, want from 0.5 s to beyond %g s", i, s.Class, s.FromS, end, settled)
			}
		}
		if closed != 2 {
			t.Errorf("run %d has %d close-ups, want one for each class", i, closed)
		}
	}
}
