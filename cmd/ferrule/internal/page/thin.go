package page

import "ferrule/scenarios/result"

// Bins that a page keeps of a series, and how long after a close-up's act has
// settled it goes on.
const (
	mostBins  = 512
	afterCare = 0.25 // s
)

// thinned is r without what the page does not draw. Series of the whole run
// are folded until few enough bins are left: packets and bits add up and the
// greatest delay stays, so no extreme is hidden. Close-ups keep their bins
// and end soon after their period has settled.
func thinned(r *result.Run) *result.Run {
	x := &result.Run{Head: r.Head, Plan: r.Plan, Seed: r.Seed, Periods: r.Periods, Circuits: r.Circuits, Fibres: r.Fibres,
		Sites: r.Sites, Cuts: r.Cuts, Loads: r.Loads, Tails: r.Tails}
	for _, c := range r.Classes {
		x.Classes = append(x.Classes, result.Class{Name: c.Name})
	}
	for i := range r.Series {
		s := &r.Series[i]
		if !s.Close {
			x.Series = append(x.Series, folded(s))
			continue
		}
		for _, p := range r.Periods {
			if p.Kind == result.Hit && inside(s, p.FromS) {
				x.Series = append(x.Series, clipped(s, p.FromS-1, p.ToS+afterCare))
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

// folded joins as many bins as are needed to leave at most mostBins.
func folded(s *result.Series) result.Series {
	n := len(s.OfferedPackets)
	by := (n + mostBins - 1) / mostBins
	if by < 2 {
		return *s
	}
	x := result.Series{Class: s.Class, FromS: s.FromS, WidthS: s.WidthS * float64(by)}
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
			mean = new(float64(int64(sum/float64(delivered)*1e9+0.5)) / 1e9)
		}
		x.OfferedPackets, x.DeliveredPackets = append(x.OfferedPackets, offered), append(x.DeliveredPackets, delivered)
		x.LostPackets, x.DeliveredBits = append(x.LostPackets, lost), append(x.DeliveredBits, bits)
		x.MeanDelayS, x.MaxDelayS = append(x.MeanDelayS, mean), append(x.MaxDelayS, most)
	}
	return x
}
