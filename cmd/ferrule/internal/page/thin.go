package page

import (
	"strconv"

	"ferrule/scenarios/result"
)

// Bins that a page keeps of a series, and how long after a close-up's act has
// settled it goes on.
const (
	mostBins  = 400
	afterCare = 0.25 // s
	fewest    = 50   // packets to a bin of a close-up, on average, if 10 ms have so many
)

// thinned is r without what the page does not draw. Series of the whole run
// are folded until few enough bins are left: packets and bits add up and the
// greatest delay stays, so no extreme is hidden. Close-ups of classes that send
// little are folded too, or a single packet would look like a rate; close-ups
// end soon after their period has settled in all runs, as until says by the
// instant at which the period begins. Delays are rounded to four digits.
func thinned(r *result.Run, until map[float64]float64) *result.Run {
	x := &result.Run{Head: r.Head, Plan: r.Plan, Seed: r.Seed, Periods: r.Periods, Circuits: r.Circuits, Fibres: r.Fibres,
		Sites: r.Sites, Cuts: r.Cuts, Loads: r.Loads, Tails: r.Tails}
	for _, c := range r.Classes {
		x.Classes = append(x.Classes, result.Class{Name: c.Name})
	}
	for i := range r.Series {
		s := &r.Series[i]
		if !s.Close {
			n := len(s.OfferedPackets)
			x.Series = append(x.Series, folded(s, (n+mostBins-1)/mostBins))
			continue
		}
		for _, p := range r.Periods {
			if p.Kind == result.Hit && inside(s, p.FromS) {
				c := clipped(s, p.FromS-1, until[p.FromS]+afterCare)
				by := sparse(&c)
				c = clipped(&c, c.FromS, c.FromS+c.WidthS*float64(len(c.OfferedPackets)/by*by)) // whole bins only
				x.Series = append(x.Series, folded(&c, by))
			}
		}
	}
	return x
}

func inside(s *result.Series, t float64) bool {
	return s.FromS <= t && t < s.FromS+float64(len(s.OfferedPackets))*s.WidthS
}

// clipped is the part of s between two instants.
func clipped(s *result.Series, from, to float64) result.Series {
	n := len(s.OfferedPackets)
	a := min(max(int((from-s.FromS)/s.WidthS+0.5), 0), n)
	b := min(max(int((to-s.FromS)/s.WidthS+0.5), a), n)
	return result.Series{Class: s.Class, Close: s.Close, FromS: s.FromS + float64(a)*s.WidthS, WidthS: s.WidthS,
		OfferedPackets: s.OfferedPackets[a:b], DeliveredPackets: s.DeliveredPackets[a:b], LostPackets: s.LostPackets[a:b],
		DeliveredBits: s.DeliveredBits[a:b], MeanDelayS: s.MeanDelayS[a:b], MaxDelayS: s.MaxDelayS[a:b]}
}

// sparse is how many bins of a close-up must be joined.
func sparse(s *result.Series) int {
	var sent int64
	for _, n := range s.OfferedPackets {
		sent += n
	}
	for _, by := range []int{1, 2, 5} {
		if sent*int64(by) >= fewest*int64(len(s.OfferedPackets)) {
			return by
		}
	}
	return 10
}

// folded joins so many bins to one.
func folded(s *result.Series, by int) result.Series {
	n := len(s.OfferedPackets)
	x := result.Series{Class: s.Class, Close: s.Close, FromS: s.FromS, WidthS: s.WidthS * float64(by)}
	for at := 0; at < n; at += by {
		var offered, delivered, lost, bits int64
		var sum float64
		var most *float64
		for i := at; i < min(at+by, n); i++ {
			offered += s.OfferedPackets[i]
			delivered += s.DeliveredPackets[i]
			lost += s.LostPackets[i]
			bits += s.DeliveredBits[i]
			if s.MeanDelayS[i] != nil {
				sum += float64(*s.MeanDelayS[i] * float64(s.DeliveredPackets[i]))
			}
			if m := s.MaxDelayS[i]; m != nil && (most == nil || *m > *most) {
				most = m
			}
		}
		var mean *float64
		if delivered > 0 {
			mean = new(sum / float64(delivered))
		}
		x.OfferedPackets, x.DeliveredPackets = append(x.OfferedPackets, offered), append(x.DeliveredPackets, delivered)
		x.LostPackets, x.DeliveredBits = append(x.LostPackets, lost), append(x.DeliveredBits, bits)
		x.MeanDelayS, x.MaxDelayS = append(x.MeanDelayS, rounded(mean)), append(x.MaxDelayS, rounded(most))
	}
	return x
}

// rounded is v to four significant digits, more than a drawing shows.
func rounded(v *float64) *float64 {
	if v == nil {
		return nil
	}
	x, err := strconv.ParseFloat(strconv.FormatFloat(*v, 'e', 3, 64), 64)
	if err != nil {
		panic("page: " + err.Error())
	}
	return &x
}
