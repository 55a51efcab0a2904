package measure

import (
	"math/big"
	"math/bits"
	"slices"

	"ferrule/des"
)

// The definitions of the RFCs, slow and over whole samples, that the streaming
// meters are compared with.

// arrival is one delivered packet of a sequence, in the order of arrival.
type arrival struct {
	seq   uint32
	delay int64
}

// slowConsecutive is the definition of RFC 5481, section 4.1: by number of the
// later packet, for pairs of which both arrived.
func slowConsecutive(in []arrival) map[uint32]int64 {
	delay := map[uint32]int64{}
	for _, a := range in {
		delay[a.seq] = a.delay
	}
	diffs := map[uint32]int64{}
	for seq, d := range delay {
		if before, ok := delay[seq-1]; ok && seq > 0 {
			diffs[seq] = d - before
		}
	}
	return diffs
}

// slowVariation is PDV of RFC 5481, section 4.2, in the order of arrival.
func slowVariation(in []arrival) (v []int64) {
	for _, a := range in {
		least := in[0].delay
		for _, b := range in {
			least = min(least, b.delay)
		}
		v = append(v, a.delay-least)
	}
	return v
}

// slowJitter is the recursion of RFC 3550, section A.8, in fractions.
func slowJitter(in []arrival) float64 {
	j, gain := new(big.Rat), big.NewRat(1, 16)
	for i := 1; i < len(in); i++ {
		d := in[i].delay - in[i-1].delay
		step := new(big.Rat).SetInt64(max(d, -d))
		j.Add(j, step.Mul(step.Sub(step, j), gain))
	}
	f, _ := j.Float64()
	return f
}

// behind is what RFC 4737 says of one reordered packet.
type behind struct {
	seq    uint32
	extent int      // section 4.2
	late   des.Time // section 4.3
	bytes  int      // section 4.4
	n      int      // section 5.2: the greatest n for which it is n-reordered
}

// slowOrder finds the reordered packets among arrivals (RFC 4737, section
// 3.3), all of them size bytes long.
func slowOrder(seqs []uint32, times []des.Time, size int) (out []behind) {
	next := uint64(0)
	for i, s := range seqs {
		if uint64(s) >= next {
			next = uint64(s) + 1
			continue
		}
		j := slices.IndexFunc(seqs, func(o uint32) bool { return o > s })
		b := behind{seq: s, extent: i - j, late: times[i] - times[j]}
		for _, o := range seqs[j:i] {
			if o > s {
				b.bytes += size
			}
		}
		for b.n < i && seqs[i-b.n-1] > s {
			b.n++
		}
		out = append(out, b)
	}
	return out
}

// lossPair is loss distance or loss period, and 1 for a lost packet.
type lossPair [2]uint32

// lossStreams are the two streams of RFC 3357, section 5.4, over packets from
// first to last.
func lossStreams(lost []uint32, first, last uint32) (distance, period []lossPair) {
	var before, number uint32
	seen, running := false, false
	for s := first; s <= last; s++ {
		if !slices.Contains(lost, s) {
			distance, period = append(distance, lossPair{0, 0}), append(period, lossPair{0, 0})
			running = false
			continue
		}
		d := lossPair{0, 1}
		if seen {
			d[0] = s - before
		}
		if !running {
			number++
		}
		before, seen, running = s, true, true
		distance, period = append(distance, d), append(period, lossPair{number, 1})
	}
	return distance, period
}

// slowLoss is the report by the statistics of RFC 3357, section 6.
func slowLoss(lost []uint32, delta uint32) (r LossReport) {
	if len(lost) == 0 {
		return r
	}
	distance, period := lossStreams(lost, slices.Min(lost), slices.Max(lost))
	var lengths []uint64 // by period
	for i, p := range period {
		if p[1] == 0 {
			continue
		}
		r.Lost++
		if d := distance[i][0]; i > 0 && d <= delta {
			r.Noticeable++
		}
		if int(p[0]) > len(lengths) {
			lengths = append(lengths, 0)
			if i > 0 {
				r.Apart[bits.Len32(distance[i][0])]++
			}
		}
		lengths[p[0]-1]++
	}
	for _, n := range lengths {
		r.Lengths[bits.Len64(n)]++
	}
	r.Periods, r.Longest = uint64(len(lengths)), slices.Max(lengths)
	return r
}

// slowMoments are mean and variance in fractions, two passes.
func slowMoments(in []int64) (mean, variance float64) {
	n := new(big.Rat).SetInt64(int64(len(in)))
	m, v := new(big.Rat), new(big.Rat)
	for _, x := range in {
		m.Add(m, new(big.Rat).SetInt64(x))
	}
	m.Quo(m, n)
	for _, x := range in {
		d := new(big.Rat).SetInt64(x)
		d.Sub(d, m)
		v.Add(v, d.Mul(d, d))
	}
	mean, _ = m.Float64()
	if len(in) > 1 {
		variance, _ = v.Quo(v, n.Sub(n, big.NewRat(1, 1))).Float64()
	}
	return mean, variance
}
