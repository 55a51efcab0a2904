package page

import (
	"fmt"
	"strings"
)

// A Colour is one entry of the palette, as #rrggbb, on a light and on a dark
// ground.
type Colour struct{ Name, Light, Dark string }

// Palette is the colours of the page. They were chosen by lightness first:
// the colours of classes form a ladder from dark to light (on a dark ground
// from light to dark), highest class first, so that they stay apart in grey
// print and for every kind of colour vision; hues were then set so that
// neighbours on the ladder also differ in hue. What carries a meaning differs
// in stroke too. A test computes contrast by the formula of WCAG 2.2 and
// distances in CIELAB, for normal vision and for the three kinds of dichromacy.
func Palette() []Colour {
	return []Colour{
		{"ground", "#fdfcf9", "#15181c"},
		{"raised", "#f1efe8", "#20242a"},
		{"ink", "#1c2126", "#e9e6df"},
		{"quiet", "#595e63", "#a3a8ad"},
		{"line", "#b9b5aa", "#4a5058"},
		{"grid", "#e4e1d8", "#2a2f36"},
		{"deck", "#f5f3ec", "#1a1e23"},
		{"wall", "#7b7f83", "#80868c"},
		{"bore", "#ffffff", "#0d0f12"},

		// Beside each other in charts: dashed and solid.
		{"base", "#75695a", "#a99c8a"},
		{"plan", "#0b4f9e", "#8cc2ff"},

		// Verdicts and the states of circuits.
		{"good", "#1d5e3a", "#85d3a4"},
		{"bad", "#b3261e", "#ff8f84"},
		{"restore", "#8f5a00", "#f2b84b"},
		{"detour", "#6b3fa0", "#c3a2f2"},

		// Classes, highest first.
		{"class-0", "#1b1f5e", "#e3e6ff"},
		{"class-1", "#7c1450", "#f3b0d4"},
		{"class-2", "#0d6a63", "#63c7b4"},
		{"class-3", "#b54e0e", "#e08a4a"},
		{"class-4", "#4083c2", "#6a8fd8"},
		{"class-5", "#a9922f", "#8d7a2c"},

		// Periods behind charts, and acts.
		{"band-hit", "#f6d9d2", "#4a2522"},
		{"band-after", "#f3ecd6", "#332d1b"},
		{"band-change", "#dde8f4", "#1d2f42"},
		{"band-mend", "#dcecdf", "#1d3526"},
		{"act", "#b3261e", "#ff8f84"},
	}
}

// variables writes the palette as custom properties of a style sheet.
func variables() string {
	var light, dark strings.Builder
	for _, c := range Palette() {
		fmt.Fprintf(&light, "--%s:%s;", c.Name, c.Light)
		fmt.Fprintf(&dark, "--%s:%s;", c.Name, c.Dark)
	}
	css := fmt.Sprintf(":root{%s}\n@media (prefers-color-scheme: dark){:root{%s}}\n@media print{:root{%s}}\n", light.String(), dark.String(), light.String())
	for _, c := range Palette() {
		if n, ok := strings.CutPrefix(c.Name, "class-"); ok {
			css += fmt.Sprintf("#map .class-%s,.swatch-%s{stroke:var(--%s)}\n", n, n, c.Name)
		}
	}
	return css
}
