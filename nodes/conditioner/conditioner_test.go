package conditioner_test

import (
	"math/rand/v2"
	"testing"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/conditioner"
)

const mega = 8 * nodes.Mbps // a megabyte per second

type step struct {
	ms      int
	size    nodes.Bytes
	brought nodes.PacketBits
	want    nodes.PacketBits
	c, o    nodes.Bytes
}

const g, y, r = nodes.Green, nodes.Yellow, nodes.Red

// Worked by the rules of RFC 2697, section 3, and RFC 2698, section 3: colour
// and levels of the buckets after each packet.
func TestMetersByHand(t *testing.T) {
	for _, c := range []struct {
		name  string
		m     *conditioner.Meter
		steps []step
	}{
		{"single-rate, blind", conditioner.NewSingleRate(mega, 3000, 3000, false), []step{
			{0, 1500, g, g, 1500, 3000}, {0, 1500, g, g, 0, 3000}, {0, 1500, g, y, 0, 1500}, {0, 1500, g, y, 0, 0}, {1, 1500, g, r, 1000, 0},
			{2, 500, g, g, 1500, 0}, {4, 1500, g, g, 1500, 500}, {10, 1500, g, g, 1500, 3000}, {10, 1500, g, g, 0, 3000}, {30, 1500, g, g, 1500, 3000},
		}},
		{"two-rate, blind", conditioner.NewTwoRate(mega, 2*mega, 3000, 4500, false), []step{
			{0, 1500, g, g, 1500, 3000}, {0, 1500, g, g, 0, 1500}, {0, 1500, g, y, 0, 0}, {0, 1500, g, r, 0, 0}, {1, 1500, g, y, 1000, 500},
			{2, 500, g, g, 1500, 2000}, {4, 1500, g, g, 1500, 3000}, {10, 1500, g, g, 1500, 3000}, {10, 1500, g, g, 0, 1500}, {30, 1500, g, g, 1500, 3000},
		}},
		{"single-rate, aware", conditioner.NewSingleRate(mega, 2000, 3000, true), []step{
			{0, 1000, g, g, 1000, 3000}, {0, 1000, y, y, 1000, 2000}, {0, 1000, r, r, 1000, 2000}, {0, 1000, g, g, 0, 2000},
			{0, 1000, g, y, 0, 1000}, {0, 1000, y, y, 0, 0}, {1, 1000, y, r, 1000, 0}, {1, 1000, g, g, 0, 0},
		}},
		{"two-rate, aware", conditioner.NewTwoRate(mega, 2*mega, 2000, 4000, true), []step{
			{0, 1000, g, g, 1000, 3000}, {0, 1000, y, y, 1000, 2000}, {0, 1000, r, r, 1000, 2000}, {0, 1000, g, g, 0, 1000},
			{0, 1000, g, y, 0, 0}, {0, 1000, y, r, 0, 0}, {1, 1000, y, y, 1000, 1000}, {1, 1000, g, g, 0, 0},
		}},
	} {
		for i, s := range c.steps {
			got := c.m.Colour(des.Time(s.ms)*des.Millisecond, s.size, s.brought)
			if a, b := c.m.Levels(); got != s.want || a != s.c || b != s.o {
				t.Errorf("%s, packet %d: colour %d, levels %d and %d; want %d, %d and %d", c.name, i+1, got>>4, a, b, s.want>>4, s.c, s.o)
			}
		}
	}
}

// What a meter lets pass in any interval is at most rate times interval plus
// burst: of green its committed ones, of green and yellow those of the peak.
func TestMeterNeverExceedsItsBucket(t *testing.T) {
	m := conditioner.NewTwoRate(10*nodes.Mbps, 20*nodes.Mbps, 15_000, 30_000, false)
	rng := rand.New(rand.NewPCG(1, 2))
	now := des.Time(0)
	var green, coloured float64 // bytes above what the rate allows, since the worst instant
	dropped := 0
	for range 50_000 {
		d := des.Time(rng.ExpFloat64() * 3e8)
		now += d
		green = max(0, green-d.Seconds()*10e6/8)
		coloured = max(0, coloured-d.Seconds()*20e6/8)
		size := nodes.Bytes(40 + rng.IntN(1461))
		switch m.Colour(now, size, nodes.Green) {
		case nodes.Green:
			green += float64(size)
			coloured += float64(size)
		case nodes.Yellow:
			coloured += float64(size)
		case nodes.Red:
			dropped++
		}
		if green > 15_001 || coloured > 30_001 {
			t.Fatalf("at %v: %.0f B green and %.0f B in all above the rates", now, green, coloured)
		}
	}
	if dropped == 0 {
		t.Error("nothing was red")
	}
}

// A shaper of 8 Mb/s and 3000 B: two packets of 1500 B pass at once, the next
// leave 1.5 ms apart; by hand. One that would wait above 4 ms is refused.
func TestShaperByHand(t *testing.T) {
	s := conditioner.NewShaper(mega, 3000, 4*des.Millisecond)
	for i, want := range []des.Time{0, 0, 1500, 3000, -1, -1} {
		at, ok := s.Release(0, 1500)
		if ok != (want >= 0) || ok && at != want*des.Microsecond {
			t.Errorf("packet %d: leaves at %v, %v; want %d us", i+1, at, ok, want)
		}
	}
	if at, ok := s.Release(5*des.Millisecond, 1500); !ok || at != 5*des.Millisecond { // 2 ms of tokens
		t.Errorf("later: leaves at %v, %v", at, ok)
	}
	c := s.Clone()
	s.Release(5*des.Millisecond, 1500)
	if at, _ := c.Release(5*des.Millisecond, 1500); at != 6*des.Millisecond {
		t.Errorf("a clone of a shaper with 500 B left releases 1500 B at %v, want 6 ms", at)
	}
}
