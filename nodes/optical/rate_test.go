package optical

import (
	"slices"
	"testing"

	"ferrule/des"
	"ferrule/nodes"
)

// Rates to the last printed digit, kbit/s with three decimals, so whole bit/s.
// Sources: RFC 7138 section 4, RFC 7062 table 1, ITU-T G.709 tables 7-3, 7-4.
func TestContainerRates(t *testing.T) {
	want := []struct {
		name          string
		rate, payload nodes.Rate
	}{
		{"ODU0", 1_244_160_000, 1_238_954_310},
		{"ODU1", 2_498_775_126, 2_488_320_000},
		{"ODU2", 10_037_273_924, 9_995_276_962},
		{"ODU2e", 10_399_525_316, 10_356_012_658},
		{"ODU3", 40_319_218_983, 40_150_519_322},
		{"ODU4", 104_794_445_815, 104_355_975_330},
	}
	var names []string
	for _, w := range want {
		names = append(names, w.name)
		c, ok := ContainerByName(w.name)
		if !ok || c.Rate.Nearest() != w.rate || c.Payload.Nearest() != w.payload {
			t.Errorf("%s: %d and %d, want %d and %d", w.name, c.Rate.Nearest(), c.Payload.Nearest(), w.rate, w.payload)
		}
		if d := c.Payload.Nearest() - c.Payload.Floor(); d < 0 || d > 1 {
			t.Errorf("%s: nearest is %d above floor", w.name, d)
		}
	}
	if got := ContainerNames(); !slices.Equal(got, names) {
		t.Errorf("names %v, want %v", got, names)
	}
	if c, ok := ContainerByName("ODU9"); ok {
		t.Errorf("ODU9 is %v", c)
	}
}

// Line rates: ITU-T G.709 table 7-1; slots: RFC 7062 section 3.1.2.
func TestLines(t *testing.T) {
	for _, c := range []struct {
		name          string
		rate          nodes.Rate
		slots, coarse int
	}{
		{"OTU1", 2_666_057_143, 2, 1},
		{"OTU2", 10_709_225_316, 8, 4},
		{"OTU3", 43_018_413_559, 32, 16},
		{"OTU4", 111_809_973_568, 80, 0},
	} {
		l, ok := LineByName(c.name)
		if !ok || l.Rate.Nearest() != c.rate || l.Slots != c.slots || l.Coarse != c.coarse {
			t.Errorf("%s: %d, %d, %d; want %d, %d, %d", c.name, l.Rate.Nearest(), l.Slots, l.Coarse, c.rate, c.slots, c.coarse)
		}
	}
	if _, ok := LineByName("ODU4"); ok {
		t.Error("ODU4 is a line")
	}
}

// Slots of fixed containers: RFC 7062 section 3.1.2; 0 stands for "no". A
// container fills the line of its own number.
func TestSlotsOfContainers(t *testing.T) {
	for name, want := range map[string][4]int{
		"ODU0":  {1, 1, 1, 1},
		"ODU1":  {2, 2, 2, 2},
		"ODU2":  {0, 8, 8, 8},
		"ODU2e": {0, 0, 9, 8},
		"ODU3":  {0, 0, 32, 31},
		"ODU4":  {0, 0, 0, 80},
	} {
		c, _ := ContainerByName(name)
		for i, line := range []string{"OTU1", "OTU2", "OTU3", "OTU4"} {
			l, _ := LineByName(line)
			if got, ok := l.SlotsOf(c); got != want[i] || ok != (want[i] > 0) {
				t.Errorf("%s in %s: %d slots, %v; want %d", name, line, got, ok, want[i])
			}
		}
	}
}

// Slot rates at -20 ppm, nominal and +20 ppm in bit/s: ITU-T G.709 table 7-7,
// RFC 7139 table 1.
func TestSlotRates(t *testing.T) {
	for _, c := range []struct {
		line          string
		low, mid, top int64
	}{
		{"OTU2", 1_249_384_632, 1_249_409_620, 1_249_434_608},
		{"OTU3", 1_254_678_635, 1_254_703_729, 1_254_728_823},
		{"OTU4", 1_301_683_217, 1_301_709_251, 1_301_735_285},
	} {
		l, _ := LineByName(c.line)
		if got := int64(l.Slot.Nearest()); got != c.mid {
			t.Errorf("%s: slot %d, want %d", c.line, got, c.mid)
		}
		// One slot's largest ODUflex is the slowest slot, rounded down.
		if got := int64(l.LargestFlex(1)); got != c.low && got != c.low-1 {
			t.Errorf("%s: slowest slot %d, want %d", c.line, got, c.low)
		}
		x, _ := l.Slot.rat().Float64()
		if got := int64(float64(x*1.00002) + 0.5); got != c.top {
			t.Errorf("%s: fastest slot %d, want %d", c.line, got, c.top)
		}
	}
	otu1, _ := LineByName("OTU1")
	if got := otu1.LargestFlex(2); got != 0 {
		t.Errorf("OTU1 carries an ODUflex of %d", got)
	}
	otu4, _ := LineByName("OTU4")
	func() {
		defer func() {
			if recover() == nil {
				t.Error("81 free slots of 80: no panic")
			}
		}()
		otu4.LargestFlex(81)
	}()
	// 80 x 1 301 709.251 kbit/s x (1 - 20 ppm), by hand: 104 134 657.3 kbit/s.
	if got := otu4.LargestFlex(80); got < 104_134_657_000 || got > 104_134_658_000 {
		t.Errorf("largest ODUflex of an empty OTU4: %d", got)
	}
}

// Slots of a client of constant rate, computed by the formula of RFC 7139
// section 5.1 with table 1's slot rates; 0 stands for "does not fit".
func TestSlotsForClient(t *testing.T) {
	for _, c := range []struct {
		client nodes.Rate
		want   [3]int // on OTU2, OTU3, OTU4
	}{
		{5 * nodes.Gbps, [3]int{5, 5, 4}},
		{6 * nodes.Gbps, [3]int{5, 5, 5}},
		{12_500 * nodes.Mbps, [3]int{0, 11, 10}},
		{25 * nodes.Gbps, [3]int{0, 21, 20}},
		{40 * nodes.Gbps, [3]int{0, 0, 31}},
		{41_250 * nodes.Mbps, [3]int{0, 0, 32}},
	} {
		for i, line := range []string{"OTU2", "OTU3", "OTU4"} {
			l, _ := LineByName(line)
			got, err := l.SlotsForClient(c.client)
			if got != c.want[i] || (err == nil) != (c.want[i] > 0) {
				t.Errorf("%d bit/s on %s: %d slots, %v; want %d", c.client, line, got, err, c.want[i])
			}
		}
	}
	otu4, _ := LineByName("OTU4")
	otu1, _ := LineByName("OTU1")
	if _, err := otu4.SlotsForClient(0); err == nil {
		t.Error("a client of rate 0 has slots")
	}
	if _, err := otu1.SlotsForClient(nodes.Gbps); err == nil {
		t.Error("OTU1 carries an ODUflex")
	}
}

// ITU-T G.709 table 7-8: n x slot rate, Mb/s to three decimals.
func TestFlexRate(t *testing.T) {
	for n, want := range map[int]float64{
		1: 1249.177, 2: 2498.354, 4: 4996.709, 8: 9993.418, 9: 11290.233, 16: 20071.526,
		32: 40143.051, 33: 42948.415, 40: 52058.685, 80: 104117.371,
	} {
		r, err := FlexRate(n)
		if d := float64(r)/1e6 - want; err != nil || d < -0.0006 || d > 0.0006 {
			t.Errorf("%d slots: %v Mb/s, %v; want %v", n, float64(r)/1e6, err, want)
		}
	}
	for _, n := range []int{-1, 0, 81} {
		if r, err := FlexRate(n); err == nil {
			t.Errorf("%d slots carry %d", n, r)
		}
		if r, err := PayloadOfSlots(n); err == nil || r != 0 {
			t.Errorf("%d slots carry a payload of %d", n, r)
		}
	}
}

// 2 slots: 2 x 1 249 177 230 x 238 / 239 = 2 487 901 094.06 bit/s, by hand.
// Payload never falls as slots are added, and fits the slots of an OTU4.
func TestPayloadOfSlots(t *testing.T) {
	if r, err := PayloadOfSlots(2); r != 2_487_901_094 || err != nil {
		t.Errorf("2 slots carry %d, %v; want 2 487 901 094 bit/s", r, err)
	}
	otu4, _ := LineByName("OTU4")
	last := nodes.Rate(0)
	for n := 1; n <= SlotsPerChannel; n++ {
		r, err := PayloadOfSlots(n)
		flex, _ := FlexRate(n)
		if err != nil || r <= last || r >= flex || flex > otu4.LargestFlex(n) {
			t.Errorf("%d slots: payload %d after %d, ODUflex %d of %d, %v", n, r, last, flex, otu4.LargestFlex(n), err)
		}
		last = r
	}
}

// Payloads: ITU-T G.709 table 7-3; OPUCn 104 817 727.434 kbit/s x n.
func TestChannelClasses(t *testing.T) {
	for _, c := range []struct {
		class, payload nodes.Rate
		slots          int
	}{
		{10 * nodes.Gbps, 9_995_276_962, 8},
		{40 * nodes.Gbps, 40_150_519_322, 32},
		{100 * nodes.Gbps, 104_355_975_330, 80},
		{200 * nodes.Gbps, 2 * 104_817_727_434, 160},
		{400 * nodes.Gbps, 419_270_909_735, 320},
	} {
		ch, err := ChannelOfClass(c.class)
		if d := ch.Payload.Nearest() - c.payload; err != nil || d < -1 || d > 1 || ch.Slots != c.slots || ch.Class != c.class {
			t.Errorf("%d: payload %d, %d slots, %v; want %d, %d", c.class, ch.Payload.Nearest(), ch.Slots, err, c.payload, c.slots)
		}
	}
	for _, class := range []nodes.Rate{0, -100 * nodes.Gbps, 25 * nodes.Gbps, 150 * nodes.Gbps, 6500 * nodes.Gbps} {
		if ch, err := ChannelOfClass(class); err == nil {
			t.Errorf("channel of %d: %v", class, ch)
		}
	}
}

// Ramp times computed from 512 Mb/s per second and ITU-T G.709 table 7-8,
// in seconds to three decimals.
func TestRampTime(t *testing.T) {
	for _, c := range []struct {
		from, to int
		want     des.Time
	}{
		{1, 2, 2440 * des.Millisecond},
		{2, 1, 2440 * des.Millisecond},
		{1, 8, 17079 * des.Millisecond},
		{33, 80, 119471 * des.Millisecond},
		{5, 5, 0},
	} {
		got, err := RampTime(c.from, c.to)
		if d := got - c.want; err != nil || d < -des.Millisecond/2 || d > des.Millisecond/2 {
			t.Errorf("ramp %d to %d: %v, %v; want %v", c.from, c.to, got, err, c.want)
		}
	}
	// 1 249 177 230 x 1e12 / 512e6 = 2 439 799 277 343.75 ps, by hand.
	if got, _ := RampTime(1, 2); got != 2_439_799_277_344 {
		t.Errorf("ramp 1 to 2: %d ps, want it rounded up", got)
	}
	for _, bad := range [][2]int{{0, 1}, {1, 81}} {
		if _, err := RampTime(bad[0], bad[1]); err == nil {
			t.Errorf("ramp %v has a length", bad)
		}
		if _, err := RampPayload(bad[0], bad[1], 0); err == nil {
			t.Errorf("ramp %v has a payload", bad)
		}
	}
}

func TestRampPayload(t *testing.T) {
	one, _ := PayloadOfSlots(1)
	two, _ := PayloadOfSlots(2)
	length, _ := RampTime(1, 2)
	for _, c := range []struct {
		from, to int
		t        des.Time
		want     nodes.Rate
	}{
		{1, 2, -des.Second, one},
		{1, 2, 0, one},
		{1, 2, des.Second, 1_753_808_287}, // (1 249 177 230 + 512 000 000) x 238/239 = 1 753 808 287.6
		{2, 1, des.Second, 1_978_043_353}, // (2 498 354 460 - 512 000 000) x 238/239 = 1 978 043 353.5
		{1, 2, length, two},
		{2, 1, length, one},
	} {
		if got, err := RampPayload(c.from, c.to, c.t); got != c.want || err != nil {
			t.Errorf("ramp %d to %d at %v: %d, %v; want %d", c.from, c.to, c.t, got, err, c.want)
		}
	}
}
