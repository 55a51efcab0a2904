package workloads

import (
	"math/rand/v2"
	"slices"
	"testing"

	"ferrule/des"
	"ferrule/nodes"
)

// A scaling is one call of Scale.
type scaling struct {
	at     des.Time
	factor float64
}

// emit drives s to end in one call of Emit between scalings, each made as late
// as the contract allows.
func emit(s nodes.Source, end des.Time, scalings ...scaling) []nodes.Packet {
	var out []nodes.Packet
	for _, x := range scalings {
		out = s.Emit(x.at, out)
		s.Scale(x.at, x.factor)
	}
	return s.Emit(end, out)
}

// testContract holds a source made by fresh to nodes.Source: order, fields,
// Next exact, division of time unseen, clones equal, stop respected.
func testContract(t *testing.T, fresh func() Source, start, stop, end des.Time) {
	t.Helper()
	scalings := []scaling{{end / 4, 1.3}, {end / 3, 0}, {end / 2, 0.4}, {end / 2, 1}, {end/2 + 7, 2}, {end * 3 / 4, 1}}
	for _, scalings := range [][]scaling{nil, scalings, {{0, 1.5}}} {
		want := emit(fresh(), end, scalings...)
		if len(want) < 100 {
			t.Fatalf("only %d packets: too few to test with", len(want))
		}
		checkPackets(t, want, start, min(stop, end))
		r := rand.New(rand.NewPCG(1, 2))
		for range 6 {
			got := cutUp(t, fresh(), end, scalings, r)
			if !slices.Equal(got, want) {
				i := 0
				for i < min(len(got), len(want)) && got[i] == want[i] {
					i++
				}
				t.Fatalf("cut up: %d packets, in one piece %d; first difference at %d", len(got), len(want), i)
			}
		}
	}
}

// checkPackets holds packets to what nodes.Source says of each.
func checkPackets(t *testing.T, ps []nodes.Packet, start, stop des.Time) {
	t.Helper()
	last := start
	for i, p := range ps {
		want := nodes.Packet{Due: p.Born, Born: p.Born, Seq: uint32(i), Flow: p.Flow, Way: 6, Size: p.Size, TTL: nodes.InitialTTL}
		if p != want || p.Size == 0 || p.Born < last || p.Born >= stop {
			t.Fatalf("packet %d is %+v after %v, want %+v within [%v, %v)", i, p, last, want, start, stop)
		}
		last = p.Born
	}
}

// cutUp drives s to end in pieces: random ends, ends at, just before and just
// after the next packet, scalings announced early or late, clones changed over
// to, Next checked against what comes.
func cutUp(t *testing.T, s nodes.Source, end des.Time, scalings []scaling, r *rand.Rand) []nodes.Packet {
	t.Helper()
	var out []nodes.Packet
	for at := des.Time(0); at < end; {
		to := at + 1 + des.Time(r.Int64N(int64(end/20)))
		next := s.Next()
		if next < end && r.IntN(2) == 0 {
			to = max(at, next+des.Time(r.IntN(3)-1))
		}
		to = min(to, end)
		for len(scalings) > 0 && (scalings[0].at <= to || r.IntN(8) == 0) {
			to = min(to, scalings[0].at)
			if scalings[0].at != to && r.IntN(4) != 0 {
				break
			}
			s.Scale(scalings[0].at, scalings[0].factor)
			scalings = scalings[1:]
		}
		next = s.Next()
		if r.IntN(3) == 0 {
			c := s.Clone()
			s.Emit(min(end, to*2), nil) // the old one goes astray
			s.Scale(end, 3)
			s = c
		}
		before := len(out)
		out = s.Emit(to, out)
		if born := len(out) > before; born != (next < to) || born && out[before].Born != next {
			t.Fatalf("next packet said to be at %v; %d packets came before %v", next, len(out)-before, to)
		}
		at = to
	}
	return out
}

// rateOf returns the IP bits of ps per second over span.
func rateOf(ps []nodes.Packet, span des.Time) float64 {
	sum := 0
	for _, p := range ps {
		sum += int(p.Size)
	}
	return float64(sum) * 8 / span.Seconds()
}
