package scenarios

import (
	"math"
	"math/rand/v2"
	"testing"
)

// Powers of ten and SI prefixes, worked by hand.
func TestQuantities(t *testing.T) {
	for _, c := range []struct {
		m    *measure
		text string
		want int64
	}{
		{&timeMeasure, "1ps", 1},
		{&timeMeasure, "0.4ns", 400},
		{&timeMeasure, "5us", 5_000_000},
		{&timeMeasure, "2.5 ms", 2_500_000_000},
		{&timeMeasure, "1e-3s", 1_000_000_000},
		{&timeMeasure, "1.5min", 90_000_000_000_000},
		{&timeMeasure, "2h", 7_200_000_000_000_000},
		{&timeMeasure, "-3ns", -3000},
		{&timeMeasure, "9223372036854775807ps", math.MaxInt64},
		{&rateMeasure, "64kbps", 64_000},
		{&rateMeasure, "2.4879Gbps", 2_487_900_000},
		{&rateMeasure, "1.6Tbps", 1_600_000_000_000},
		{&lengthMeasure, "310km", 310_000_000},
		{&lengthMeasure, "1e3km", 1_000_000_000},
		{&lengthMeasure, "100m", 100_000},
		{&bytesMeasure, "80kB", 80_000},
		{&bytesMeasure, "1.5GB", 1_500_000_000},
	} {
		if got, f := c.m.parse(c.text); f != nil || got != c.want {
			t.Errorf("%s: got %d, %v, want %d", c.text, got, f, c.want)
		}
	}
	for text, want := range map[string]string{
		"":             `"" is not a time; write a number and one of ps ns us ms s min h`,
		"s":            `"s" is not a time; write a number and one of ps ns us ms s min h`,
		"1 0s":         `"1 0s" has no unit that is known; write 1ps`,
		"5µs":          `"5µs" has no unit that is known; write 5us`,
		"5seconds":     `"5seconds" has no unit that is known; write 5s`,
		"5MS":          `"5MS" has no unit that is known; write 5ms`,
		"5e":           `"5e" has no unit that is known; write a number and one of ps ns us ms s min h`,
		"1e31s":        `"1e31s" is out of range; write a number of at most 40 characters, with an exponent within 30`,
		"1e999999999s": `"1e999999999s" is out of range; write a number of at most 40 characters, with an exponent within 30`,
		"1.5ps":        `"1.5ps" is finer than a picosecond; write fewer decimals`,
		"2563h":        `"2563h" is out of range; write at most 2562h`,
	} {
		if v, f := timeMeasure.parse(text); f == nil || f.Error() != want {
			t.Errorf("%q: got %d, %v\nwant %s", text, v, f, want)
		}
	}
}

// What format writes, parse reads as the same number, for every measure.
func TestQuantitiesRoundTrip(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	for _, m := range measures {
		values := []int64{0, 1, -1, 999, 1000, 1001, math.MaxInt64, math.MinInt64}
		for _, u := range m.units {
			values = append(values, u.of, u.of-1, u.of+1, 60*u.of)
		}
		for range 5000 {
			v := r.Int64() >> r.IntN(63)
			values = append(values, v, -v, v-v%1000)
		}
		for _, v := range values {
			if got, f := m.parse(m.format(v)); f != nil || got != v {
				t.Fatalf("%s: %d is written %q and read %d, %v", m.what, v, m.format(v), got, f)
			}
		}
	}
}

// Lengths of edits, worked by hand.
func TestDistance(t *testing.T) {
	for _, c := range []struct {
		a, b string
		want int
	}{{"", "", 0}, {"abc", "", 3}, {"kitten", "sitting", 3}, {"unifrom", "uniform", 1}, {"nes", "ness", 1}, {"ab", "ba", 1}} {
		if got := distance(c.a, c.b); got != c.want {
			t.Errorf("%q to %q: %d edits, want %d", c.a, c.b, got, c.want)
		}
	}
}
