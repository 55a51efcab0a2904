package table

import (
	"fmt"
	"io"
	"strings"
	"unicode/utf8"

	"github.com/olekukonko/tablewriter"
	"github.com/olekukonko/tablewriter/renderer"
	"github.com/olekukonko/tablewriter/tw"
)

const gap = 2 // columns of space between two columns of a grid

func writeText(w io.Writer, d *doc, colour bool) error {
	for i, b := range d.blocks {
		if i > 0 && (b.heading || d.blocks[i-1].grid != nil) {
			if _, err := io.WriteString(w, "\n"); err != nil {
				return err
			}
		}
		var err error
		switch {
		case b.grid != nil:
			err = writeGrid(w, b.grid, colour)
		case b.heading:
			err = writeLine(w, join("", b.line...).text, strong, colour)
		default:
			err = writeLine(w, join("", b.line...).text, plain, colour)
		}
		if err != nil {
			return err
		}
	}
	return nil
}

// writeLine writes text, broken at spaces; what follows is indented.
func writeLine(w io.Writer, text string, t tone, colour bool) error {
	for i, l := range fold(text, Width-2) {
		if i > 0 {
			l = "  " + l
		}
		if _, err := fmt.Fprintln(w, paint(l, t, colour)); err != nil {
			return err
		}
	}
	return nil
}

func writeGrid(w io.Writer, g *grid, colour bool) error {
	widths := g.widths()
	align := make(tw.Alignment, len(g.cols))
	heads := make([]string, len(g.cols))
	for i, c := range g.cols {
		align[i], heads[i] = tw.AlignLeft, c.head
		if c.right {
			align[i] = tw.AlignRight
		}
	}
	pad := tw.CellPadding{Global: tw.Padding{Left: "", Right: strings.Repeat(" ", gap), Overwrite: true}}
	var b strings.Builder
	t := tablewriter.NewTable(&b,
		tablewriter.WithRenderer(renderer.NewBlueprint(tw.Rendition{
			Borders: tw.BorderNone,
			Symbols: tw.NewSymbols(tw.StyleASCII),
			Settings: tw.Settings{
				Separators: tw.Separators{ShowHeader: tw.Off, ShowFooter: tw.Off, BetweenRows: tw.Off, BetweenColumns: tw.Off},
				Lines:      tw.Lines{ShowTop: tw.Off, ShowBottom: tw.Off, ShowHeaderLine: tw.Off, ShowFooterLine: tw.Off},
			},
		})),
		tablewriter.WithConfig(tablewriter.Config{
			Header: tw.CellConfig{Formatting: tw.CellFormatting{AutoFormat: tw.Off, AutoWrap: tw.WrapNone}, Padding: pad,
				Alignment: tw.CellAlignment{PerColumn: align}},
			Row: tw.CellConfig{Formatting: tw.CellFormatting{AutoFormat: tw.Off, AutoWrap: tw.WrapNone}, Padding: pad,
				Alignment: tw.CellAlignment{PerColumn: align}},
			Behavior: tw.Behavior{TrimSpace: tw.Off},
		}),
	)
	if !g.headless() {
		t.Header(heads)
	}
	for _, row := range g.rows {
		for _, cells := range physical(g, row, widths, colour) {
			if err := t.Append(cells); err != nil {
				return fmt.Errorf("table: %w", err)
			}
		}
	}
	if err := t.Render(); err != nil {
		return fmt.Errorf("table: %w", err)
	}
	for l := range strings.Lines(b.String()) {
		if _, err := fmt.Fprintln(w, trimmed(strings.TrimSuffix(l, "\n"))); err != nil {
			return err
		}
	}
	return nil
}

const reset = "\x1b[0m"

// trimmed takes the spaces off the end of a line, before a final reset too:
// tablewriter puts the padding of a coloured cell inside its colour.
func trimmed(l string) string {
	if rest, ok := strings.CutSuffix(strings.TrimRight(l, " "), reset); ok {
		return strings.TrimRight(rest, " ") + reset
	}
	return strings.TrimRight(l, " ")
}

func (g *grid) headless() bool {
	for _, c := range g.cols {
		if c.head != "" {
			return false
		}
	}
	return true
}

// widths shares Width among the columns: each gets what it needs, and the
// widest of those that may give way are narrowed until all fit.
func (g *grid) widths() []int {
	widths := make([]int, len(g.cols))
	total := gap * (len(g.cols) - 1)
	for i, c := range g.cols {
		widths[i] = utf8.RuneCountInString(c.head)
		for _, row := range g.rows {
			widths[i] = max(widths[i], utf8.RuneCountInString(row[i].text))
		}
		total += widths[i]
	}
	for total > Width {
		widest := -1
		for i, c := range g.cols {
			if c.give != fixed && widths[i] > max(c.least, utf8.RuneCountInString(c.head)) && (widest < 0 || widths[i] > widths[widest]) {
				widest = i
			}
		}
		if widest < 0 {
			break
		}
		widths[widest]--
		total--
	}
	return widths
}

// physical breaks one row of a grid into the lines that show it.
func physical(g *grid, row []cell, widths []int, colour bool) [][]string {
	lines := make([][]string, len(row))
	height := 1
	for i, c := range row {
		lines[i] = []string{c.text}
		switch g.cols[i].give {
		case fixed:
		case wrap:
			lines[i] = fold(c.text, widths[i])
		case cut:
			lines[i] = []string{abbreviate(c.text, widths[i])}
		default:
			panic("table: unknown way to give")
		}
		height = max(height, len(lines[i]))
	}
	out := make([][]string, height)
	for y := range out {
		out[y] = make([]string, len(row))
		for i, c := range row {
			if y < len(lines[i]) {
				out[y][i] = paint(lines[i][y], c.tone, colour)
			}
		}
	}
	return out
}

// fold breaks text at spaces into lines of at most width runes, and inside a
// word that is longer than a line.
func fold(text string, width int) []string {
	var lines []string
	line := ""
	for _, word := range strings.Fields(text) {
		if line != "" && utf8.RuneCountInString(line)+1+utf8.RuneCountInString(word) <= width {
			line += " " + word
			continue
		}
		if line != "" {
			lines = append(lines, line)
		}
		r := []rune(word)
		for len(r) > width {
			lines = append(lines, string(r[:width]))
			r = r[width:]
		}
		line = string(r)
	}
	return append(lines, line)
}

func abbreviate(text string, width int) string {
	if utf8.RuneCountInString(text) <= width {
		return text
	}
	return string([]rune(text)[:width-1]) + "…"
}

// paint colours text by the standard sequences of ECMA-48.
func paint(text string, t tone, colour bool) string {
	if !colour || text == "" {
		return text
	}
	code := ""
	switch t {
	case plain:
		return text
	case good:
		code = "32"
	case bad:
		code = "1;31"
	case strong:
		code = "1"
	default:
		panic("table: unknown tone")
	}
	return "\x1b[" + code + "m" + text + reset
}
