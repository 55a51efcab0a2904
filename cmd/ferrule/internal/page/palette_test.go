package page

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"testing"
)

// linear is a colour in linear light.
type linear [3]float64

func parse(t *testing.T, hex string) linear {
	t.Helper()
	v, err := strconv.ParseUint(strings.TrimPrefix(hex, "#"), 16, 32)
	if err != nil || len(hex) != 7 {
		t.Fatalf("%q is no colour", hex)
	}
	var c linear
	for i := range c {
		x := float64(v>>(16-8*i)&255) / 255
		if x <= 0.04045 { // IEC 61966-2-1
			c[i] = x / 12.92
		} else {
			c[i] = math.Pow((x+0.055)/1.055, 2.4)
		}
	}
	return c
}

func (c linear) luminance() float64 { return 0.2126*c[0] + 0.7152*c[1] + 0.0722*c[2] }

// contrast is the ratio of WCAG 2.2.
func contrast(a, b linear) float64 {
	x, y := a.luminance(), b.luminance()
	return (max(x, y) + 0.05) / (min(x, y) + 0.05)
}

// lab is CIELAB under D65.
func (c linear) lab() [3]float64 {
	f := func(v float64) float64 {
		if v > 216.0/24389 {
			return math.Cbrt(v)
		}
		return (24389.0/27*v + 16) / 116
	}
	x := f((0.4124*c[0] + 0.3576*c[1] + 0.1805*c[2]) / 0.95047)
	y := f(c.luminance())
	z := f((0.0193*c[0] + 0.1192*c[1] + 0.9505*c[2]) / 1.08883)
	return [3]float64{116*y - 16, 500 * (x - y), 200 * (y - z)}
}

func apart(a, b linear) float64 {
	x, y := a.lab(), b.lab()
	return math.Hypot(math.Hypot(x[0]-y[0], x[1]-y[1]), x[2]-y[2])
}

// visions simulate dichromats: the matrices for full severity of G. M. Machado,
// M. M. Oliveira and L. A. F. Fernandes, IEEE TVCG 15(6), 2009; values from
// memory. The rows of each sum to 1, so greys stay grey, which is tested.
var visions = map[string][3]linear{
	"normal":       {{1, 0, 0}, {0, 1, 0}, {0, 0, 1}},
	"protanopia":   {{0.152286, 1.052583, -0.204868}, {0.114503, 0.786281, 0.099216}, {-0.003882, -0.048116, 1.051998}},
	"deuteranopia": {{0.367322, 0.860646, -0.227968}, {0.280085, 0.672501, 0.047413}, {-0.011820, 0.042940, 0.968881}},
	"tritanopia":   {{1.255528, -0.076749, -0.178779}, {-0.078411, 0.930809, 0.147602}, {0.004733, 0.691367, 0.303900}},
	"grey":         {{0.2126, 0.7152, 0.0722}, {0.2126, 0.7152, 0.0722}, {0.2126, 0.7152, 0.0722}},
}

func (c linear) seen(m [3]linear) linear {
	var out linear
	for i, row := range m {
		out[i] = min(max(row[0]*c[0]+row[1]*c[1]+row[2]*c[2], 0), 1)
	}
	return out
}

// Text has a contrast of 4.5 on its ground, lines and marks 3 (WCAG 2.2,
// criteria 1.4.3 and 1.4.11); colours that stand beside each other and mean
// different things stay apart for every kind of vision and in grey.
func TestPalette(t *testing.T) {
	for name, m := range visions {
		for _, row := range m {
			if math.Abs(row[0]+row[1]+row[2]-1) > 2e-6 {
				t.Errorf("%s: the row %v does not keep greys", name, row)
			}
		}
	}
	for _, theme := range []string{"light", "dark"} {
		c := map[string]linear{}
		for _, x := range Palette() {
			c[x.Name] = parse(t, map[string]string{"light": x.Light, "dark": x.Dark}[theme])
		}
		least := func(a, b string, want float64) {
			if got := contrast(c[a], c[b]); got < want {
				t.Errorf("%s: %s on %s has a contrast of %.2f, want %g", theme, a, b, got, want)
			}
		}
		for _, ground := range []string{"ground", "raised", "deck", "band-hit", "band-after", "band-change", "band-mend"} {
			least("ink", ground, 7)
			least("quiet", ground, 4.5)
			for _, mark := range []string{"base", "plan", "act", "wall"} {
				least(mark, ground, 3)
			}
		}
		for _, text := range []string{"good", "bad", "restore", "detour"} {
			least(text, "ground", 4.5)
		}
		var ladder []string
		for i := range classColours {
			ladder = append(ladder, fmt.Sprintf("class-%d", i))
			least(ladder[i], "bore", 3)
		}
		separate(t, theme, c, ladder, 8)
		separate(t, theme, c, []string{"base", "plan"}, 10)
	}
}

// separate holds every pair of a list apart by so much in CIELAB.
func separate(t *testing.T, theme string, c map[string]linear, list []string, want float64) {
	t.Helper()
	for name, m := range visions {
		for i, a := range list {
			for j := range list[:i] {
				least := want
				if name == "grey" {
					least = want * 0.6 // a step of lightness; place and name tell too
				}
				if got := apart(c[a].seen(m), c[list[j]].seen(m)); got < least {
					t.Errorf("%s, %s: %s and %s are %.1f apart, want %g", theme, name, a, list[j], got, least)
				}
			}
		}
	}
}
