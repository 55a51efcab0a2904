package optical

import "fmt"

// Frequency is an optical frequency in hertz.
type Frequency int64

// Units of frequency. Anchor is where every grid begins to count.
//
// Source: ITU-T G.694.1, quoted in RFC 6205, section 3.1.
const (
	Hertz     Frequency = 1
	Gigahertz           = 1_000_000_000 * Hertz
	Terahertz           = 1000 * Gigahertz

	Anchor = 193_100 * Gigahertz

	// FlexStep is the unit of the centre of a flexible slot, FlexGrain that of
	// its width. Source: RFC 7699, sections 3 and 4.1.
	FlexStep  = 6_250_000_000 * Hertz
	FlexGrain = 2 * FlexStep
)

// light is the speed of light in vacuum in m/s, exact by definition of the metre.
const light = 299_792_458

// Wavelength is the vacuum wavelength in nanometres. f must be positive.
func (f Frequency) Wavelength() float64 { return light * 1e9 / float64(f) }

// A FixedGrid is a plan of equally spaced channels, numbered First to Last:
// channel n is centred on Anchor + n x Spacing.
type FixedGrid struct {
	Spacing     Frequency // 12.5, 25, 50 or 100 GHz
	First, Last int
}

// FixedGridOf returns the usual C-band plan of that many channels: 40 at
// 100 GHz, or 80, 88 or 96 at 50 GHz; ok is false for other numbers. The
// plans are common practice within ITU-T G.694.1 (from memory).
func FixedGridOf(channels int) (g FixedGrid, ok bool) {
	switch channels {
	case 40:
		return FixedGrid{100 * Gigahertz, -10, 29}, true
	case 80:
		return FixedGrid{50 * Gigahertz, -20, 59}, true
	case 88:
		return FixedGrid{50 * Gigahertz, -27, 60}, true
	case 96:
		return FixedGrid{50 * Gigahertz, -35, 60}, true
	default:
		return FixedGrid{}, false
	}
}

// Channels reports the number of channels.
func (g FixedGrid) Channels() int { return g.Last - g.First + 1 }

// Centre returns the centre of the channel of index i, 0 being the lowest
// frequency. It panics if i is out of range.
func (g FixedGrid) Centre(i int) Frequency {
	if i < 0 || i >= g.Channels() {
		panic(fmt.Sprintf("optical: channel %d of %d", i, g.Channels()))
	}
	return Anchor + Frequency(g.First+i)*g.Spacing
}

// A Spectrum is a slot of the flexible grid: centred on Anchor + N x 6.25 GHz,
// M x 12.5 GHz wide, M at least 1.
type Spectrum struct{ N, M int }

// Centre returns the middle of the slot.
func (s Spectrum) Centre() Frequency { return Anchor + Frequency(s.N)*FlexStep }

// Width returns the width of the slot.
func (s Spectrum) Width() Frequency { return Frequency(s.M) * FlexGrain }

// Edges returns the lowest and the highest frequency of the slot.
func (s Spectrum) Edges() (low, high Frequency) {
	return s.Centre() - Frequency(s.M)*FlexStep, s.Centre() + Frequency(s.M)*FlexStep
}

// Overlaps reports whether two slots share spectrum; slots that touch do not.
// Half a slot is M x 6.25 GHz wide, so they are apart iff |N - N'| >= M + M'.
func (s Spectrum) Overlaps(o Spectrum) bool {
	return max(s.N-o.N, o.N-s.N) < s.M+o.M
}

// Grid codes of a wavelength label. Source: RFC 6205, RFC 7699.
const (
	GridDWDM uint32 = 1
	GridCWDM uint32 = 2
	GridFlex uint32 = 3
)

// SpacingCode returns the code of a channel spacing in a wavelength label:
// 100, 50, 25 and 12.5 GHz on the fixed grid, 6.25 GHz on the flexible one. It
// is an error for any other. Source: RFC 6205, RFC 7699.
func SpacingCode(spacing Frequency) (uint32, error) {
	for i, f := range [...]Frequency{100 * Gigahertz, 50 * Gigahertz, 25 * Gigahertz, FlexGrain, FlexStep} {
		if f == spacing {
			return uint32(i + 1), nil
		}
	}
	return 0, fmt.Errorf("no channel spacing of %d Hz: 100, 50, 25, 12.5 or 6.25 GHz", spacing)
}

// Label packs a wavelength label: grid in 3 bits, spacing code in 4,
// identifier in 9, channel number n in 16 as two's complement. It is an error
// if a field does not fit.
//
// Source: RFC 6205, section 3.2.
func Label(grid, spacing, identifier uint32, n int) (uint32, error) {
	if grid > 7 || spacing > 15 || identifier > 511 || n < -1<<15 || n >= 1<<15 {
		return 0, fmt.Errorf("label of grid %d, spacing %d, identifier %d, n %d does not fit", grid, spacing, identifier, n)
	}
	return grid<<29 | spacing<<25 | identifier<<16 | uint32(uint16(n)), nil
}
