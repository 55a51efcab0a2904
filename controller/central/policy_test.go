package central

import (
	"slices"
	"strings"
	"testing"

	"ferrule/controller"
	"ferrule/des"
	"ferrule/nodes"
)

// loaded is one circuit between a and b under a policy, both of whose ends
// count a load of so many bit/s, as far as their rate allows, and drop the
// rest. Load changes with time.
func loaded(t *testing.T, pol Policy, cfg Config, until des.Time, load func(at des.Time) float64) *fakeNet {
	t.Helper()
	p := plant(2, "ab")
	v := circuitOn(p, "v", "ab")
	v.InPlace = true
	cfg.Policies = []Policy{pol}
	f := newFake(p, cfg, hops(ms(1))).start(t)
	const step = 10 * des.Millisecond
	for at := step; at <= until; at += step {
		for s := range f.sites {
			x := &f.sites[s]
			bytes := load(at) / 8 * step.Seconds()
			room := float64(x.rates[0]) / 8 * step.Seconds()
			x.count[0].SentBytes += uint64(min(bytes, room))
			x.count[0].SentPackets += uint64(min(bytes, room) / 1000)
			if bytes > room {
				x.count[0].LostPackets += uint64((bytes - room) / 1000)
			}
		}
		f.run(at)
	}
	f.sound(t)
	return f
}

// steady is a policy with room between its thresholds.
func steady() Policy {
	return Policy{Floor: 1, Ceiling: 4, Step: 1, Up: 0.8, Down: 0.3, Drops: 0.001, HoldUp: ms(200), HoldDown: ms(500), Weight: 0.5}
}

// A step of load makes the circuit grow until it fits, within its ceiling, and
// a fall makes it shrink down to its floor; each decision is logged with its
// figures. Slots come first when it grows, the rate first when it shrinks.
func TestPolicyFollowsLoad(t *testing.T) {
	cfg := Config{Poll: ms(100), Command: constant(ms(5))}
	f := loaded(t, steady(), cfg, 12*des.Second, func(at des.Time) float64 {
		if at > 2*des.Second && at < 7*des.Second {
			return 2.1e9
		}
		return 0.2e9
	})
	defer f.log(t)
	// 2.1 of 3 Gb/s is 70 %: it stays there. 0.2 of 2 Gb/s is 10 %.
	if grown, shrunk := f.happened("policy grows"), f.happened("policy shrinks"); len(grown) != 2 || len(shrunk) != 2 {
		t.Errorf("grown %d and shrunk %d times", len(grown), len(shrunk))
	}
	r := f.net.Policies()[0]
	if r.Grown != 2 || r.Shrunk != 2 || r.Reversals != 1 || r.Blocked != 0 {
		t.Errorf("%+v", r)
	}
	if s := f.report(0); s.Slots != 1 || s.Rate != nodes.Gbps || s.State != controller.Up {
		t.Errorf("%+v", s)
	}
	for _, e := range f.events {
		if strings.HasPrefix(e.What, "policy") && (!strings.Contains(e.Detail, "utilisation") || !strings.Contains(e.Detail, "drops")) {
			t.Errorf("%s without figures: %s", e.What, e.Detail)
		}
	}
	if f.under != 0 {
		t.Errorf("%d things under way", f.under)
	}
}

// The first decision comes when the smoothed utilisation, worked out here by
// hand, has been over the threshold for the holding time.
func TestPolicyDecidesWhenItShould(t *testing.T) {
	f := loaded(t, steady(), Config{Poll: ms(100)}, des.Second, func(at des.Time) float64 { return 0.9e9 })
	defer f.log(t)
	// Readings of 0.9 from the poll at 200 ms on, each of weight one half:
	// 0.45, 0.675, 0.7875, 0.84375 at 500 ms; held 200 ms: at 700 ms. The answer
	// of b, 1 ms away, comes 2 ms after the poll.
	for _, e := range f.events {
		if e.What == "policy grows" {
			if e.At != ms(702) {
				t.Errorf("grows at %v, want 702 ms", e.At)
			}
			return
		}
	}
	t.Error("does not grow")
}

// It does not pass its ceiling, and says so once.
func TestPolicyCeiling(t *testing.T) {
	pol := steady()
	pol.Ceiling = 2
	f := loaded(t, pol, Config{Poll: ms(100)}, 5*des.Second, func(at des.Time) float64 { return 9e9 })
	defer f.log(t)
	if got := f.happened("policy at its limit"); f.report(0).Slots != 2 || len(got) != 1 {
		t.Errorf("%d slots, %d times at its limit", f.report(0).Slots, len(got))
	}
	pol.Ceiling = 20 // the fibre has 8 slots
	f = loaded(t, pol, Config{Poll: ms(100)}, 10*des.Second, func(at des.Time) float64 { return 30e9 })
	if r := f.net.Policies()[0]; f.report(0).Slots != 8 || r.Blocked == 0 {
		t.Errorf("%d slots, %+v", f.report(0).Slots, r)
	}
}

// With thresholds too close together for its step it swings.
func TestPolicySwings(t *testing.T) {
	pol := steady()
	pol.Up, pol.Down, pol.HoldDown = 0.6, 0.55, ms(200)
	f := loaded(t, pol, Config{Poll: ms(100)}, 20*des.Second, func(at des.Time) float64 { return 0.7e9 })
	defer f.log(t)
	// 70 % of one slot is too much, 35 % of two too little, for ever.
	if r := f.net.Policies()[0]; r.Reversals < 5 || r.Grown-r.Shrunk > 1 || r.Shrunk > r.Grown {
		t.Errorf("%+v", r)
	}
}

// A resize takes what an ODUflex needs for it, 2.440 s from 1 to 2 slots (ITU-T
// G.7044: 512 Mb/s per second, slots of 1.249 Gb/s), and the rate moves
// linearly. Slots are owned before the rate rises, and until it has fallen.
func TestRamp(t *testing.T) {
	p := plant(2, "ab")
	circuitOn(p, "v", "ab").InPlace = true
	f := newFake(p, Config{Ramp: true}, hops(ms(1)),
		controller.Order{Kind: controller.Resize, Name: "wide", Slots: 2, At: des.Second},
		controller.Order{Kind: controller.Resize, Name: "slim", Slots: 1, At: 10 * des.Second}).start(t)
	defer f.log(t)
	begun, lasts := ms(1002), ms(2440) // the slots of b are confirmed after 2 ms
	f.run(begun + lasts/2)
	if _, owned := f.net.SlotsOwned(); owned != 4 {
		t.Errorf("%d slots owned while it grows", owned)
	}
	half := float64(f.sites[0].rates[0]) / 1e9
	if half < 1.49 || half > 1.51 {
		t.Errorf("%v Gb/s half way", half)
	}
	f.run(5 * des.Second)
	if s := f.step(t, "wide"); s.State != controller.Done || s.Done < begun+lasts || s.Done > begun+lasts+ms(5) {
		t.Errorf("done at %v, want 2.440 s after %v", s.Done, begun)
	}
	if !slices.Equal([]nodes.Rate{f.sites[0].rates[0], f.sites[1].rates[0]}, []nodes.Rate{2 * nodes.Gbps, 2 * nodes.Gbps}) {
		t.Errorf("rates %v and %v", f.sites[0].rates[0], f.sites[1].rates[0])
	}
	f.run(11 * des.Second)
	if _, owned := f.net.SlotsOwned(); owned != 4 || f.sites[0].rates[0] >= 2*nodes.Gbps {
		t.Errorf("%d slots owned while it shrinks, at %d bit/s", owned, f.sites[0].rates[0])
	}
	f.run(20 * des.Second)
	if _, owned := f.net.SlotsOwned(); owned != 2 || f.sites[1].rates[0] != nodes.Gbps || f.under != 0 {
		t.Errorf("%d slots owned, %d bit/s, %d things under way", owned, f.sites[1].rates[0], f.under)
	}
	f.sound(t)
}
