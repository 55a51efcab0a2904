package optical

import (
	"math"
	"testing"
)

func TestFixedGrid(t *testing.T) {
	for _, c := range []struct {
		channels  int
		low, high Frequency // common plans within ITU-T G.694.1, from memory
	}{
		{40, 192_100 * Gigahertz, 196_000 * Gigahertz},
		{80, 192_100 * Gigahertz, 196_050 * Gigahertz},
		{88, 191_750 * Gigahertz, 196_100 * Gigahertz},
		{96, 191_350 * Gigahertz, 196_100 * Gigahertz},
	} {
		g, ok := FixedGridOf(c.channels)
		if !ok || g.Channels() != c.channels || g.Centre(0) != c.low || g.Centre(c.channels-1) != c.high {
			t.Errorf("%d channels: %+v", c.channels, g)
		}
	}
	if g, ok := FixedGridOf(41); ok {
		t.Errorf("41 channels: %+v", g)
	}
	// RFC 6205, appendix A: 50 GHz spacing, n = 5 is 193.35 THz.
	g, _ := FixedGridOf(80)
	if f := g.Centre(5 - g.First); f != 193_350*Gigahertz {
		t.Errorf("n = 5: %d Hz, want 193.35 THz", f)
	}
}

func TestGridOutOfRangePanics(t *testing.T) {
	for _, i := range []int{-1, 40} {
		func() {
			defer func() {
				if recover() == nil {
					t.Errorf("channel %d of 40: no panic", i)
				}
			}()
			g, _ := FixedGridOf(40)
			g.Centre(i)
		}()
	}
}

// Computed from c = 299 792.458 km/s: nm to three or four decimals.
func TestWavelength(t *testing.T) {
	for _, c := range []struct {
		f               Frequency
		want, tolerance float64
	}{
		{Anchor, 1552.5244, 5e-5},
		{193_350 * Gigahertz, 1550.517, 1e-3}, // RFC 6205, appendix A
		{192_100 * Gigahertz, 1560.606, 1e-3},
		{196_000 * Gigahertz, 1529.553, 1e-3},
		{196_050 * Gigahertz, 1529.163, 1e-3},
		{191_350 * Gigahertz, 1566.723, 1e-3},
		{196_100 * Gigahertz, 1528.773, 1e-3},
	} {
		if got := c.f.Wavelength(); math.Abs(got-c.want) > c.tolerance {
			t.Errorf("%d Hz: %.5f nm, want %v", c.f, got, c.want)
		}
	}
	for _, c := range []struct {
		spacing Frequency
		want    float64
	}{{50 * Gigahertz, 0.402}, {100 * Gigahertz, 0.804}} {
		if got := Anchor.Wavelength() - (Anchor + c.spacing).Wavelength(); math.Abs(got-c.want) > 1e-3 {
			t.Errorf("%d Hz near the anchor: %.4f nm, want %v", c.spacing, got, c.want)
		}
	}
}

// Centres and widths as in a published example of spectrum slots; edges and
// overlap computed from ITU-T G.694.1 (2012) in RFC 7699, sections 3 and 4.1.
func TestSpectrum(t *testing.T) {
	const mega = Gigahertz / 1000
	for _, c := range []struct {
		s                        Spectrum
		centre, width, low, high Frequency
	}{
		{Spectrum{-5, 3}, 193_068_750 * mega, 37_500 * mega, 193_050_000 * mega, 193_087_500 * mega},
		{Spectrum{4, 4}, 193_125_000 * mega, 50 * Gigahertz, 193_100_000 * mega, 193_150_000 * mega},
	} {
		low, high := c.s.Edges()
		if c.s.Centre() != c.centre || c.s.Width() != c.width || low != c.low || high != c.high {
			t.Errorf("%+v: centre %d, width %d, edges %d %d", c.s, c.s.Centre(), c.s.Width(), low, high)
		}
	}
	for _, c := range []struct {
		a, b Spectrum
		want bool
	}{
		{Spectrum{-5, 3}, Spectrum{4, 4}, false}, // 12.5 GHz between them
		{Spectrum{0, 4}, Spectrum{8, 4}, false},  // they touch at 193.125 THz
		{Spectrum{0, 4}, Spectrum{7, 4}, true},
		{Spectrum{3, 1}, Spectrum{3, 1}, true},
	} {
		if c.a.Overlaps(c.b) != c.want || c.b.Overlaps(c.a) != c.want {
			t.Errorf("%+v and %+v overlap: %v, want %v", c.a, c.b, !c.want, c.want)
		}
	}
}

// Layout and codes: RFC 6205 section 3.2, RFC 7699; words packed by hand.
func TestLabel(t *testing.T) {
	for spacing, want := range map[Frequency]uint32{100 * Gigahertz: 1, 50 * Gigahertz: 2, 25 * Gigahertz: 3, FlexGrain: 4, FlexStep: 5} {
		if got, err := SpacingCode(spacing); got != want || err != nil {
			t.Errorf("code of %d Hz: %d, %v; want %d", spacing, got, err, want)
		}
	}
	if c, err := SpacingCode(75 * Gigahertz); err == nil {
		t.Errorf("75 GHz has code %d", c)
	}
	for _, c := range []struct {
		grid, spacing, id uint32
		n                 int
		want              uint32
	}{
		{GridDWDM, 2, 0, 5, 0x24000005},
		{GridDWDM, 2, 0, -20, 0x2400FFEC},
		{GridFlex, 5, 511, -1 << 15, 0x6BFF8000},
	} {
		if got, err := Label(c.grid, c.spacing, c.id, c.n); got != c.want || err != nil {
			t.Errorf("label %+v: %#08x, %v", c, got, err)
		}
	}
	for _, c := range [][4]int{{8, 2, 0, 0}, {1, 16, 0, 0}, {1, 2, 512, 0}, {1, 2, 0, 1 << 15}, {1, 2, 0, -1<<15 - 1}} {
		if got, err := Label(uint32(c[0]), uint32(c[1]), uint32(c[2]), c[3]); err == nil {
			t.Errorf("label %v fits: %#x", c, got)
		}
	}
}
