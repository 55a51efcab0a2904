// Package table shows results as tables for a terminal and as markdown.
//
// A result is first laid out as a document of headings, lines and grids whose
// cells carry the figures they show, then written in one of two forms: [Text]
// for a terminal, at most [Width] columns wide, and [Markdown]. Nothing is
// computed on the way: each figure shown stands in the result and only its
// unit and its number of digits are chosen here. No figure stands without its
// unit. A figure that cannot be said is shown as "-".
//
// Nothing here starts a goroutine or keeps a result.
package table

import (
	"fmt"
	"io"
	"strings"
	"unicode"

	"ferrule/scenarios/result"
)

// Width is the greatest number of columns that Text uses.
const Width = 110

// Options tune the two forms. The zero value is plain text that shows the
// first 20 ports and events.
type Options struct {
	Colour bool // escape sequences for colour; never set for a file or a pipe
	Rows   int  // ports and events shown before "and n more"; default 40
}

// Text writes r for a terminal.
func Text(w io.Writer, r result.Result, opt Options) error {
	return writeText(w, layOut(r, opt), opt.Colour)
}

// Markdown writes r as markdown. It ignores opt.Colour.
func Markdown(w io.Writer, r result.Result, opt Options) error {
	return writeMarkdown(w, layOut(r, opt))
}

func layOut(r result.Result, opt Options) *doc {
	if opt.Rows == 0 {
		opt.Rows = 40
	}
	d := &doc{rows: opt.Rows}
	switch r := r.(type) {
	case *result.Run:
		d.run(r)
	case *result.Batch:
		d.batch(r)
	case *result.Comparison:
		d.comparison(r)
	case *result.Check:
		d.check(r)
	case *result.Sizing:
		d.sizing(r)
	case *result.Failures:
		d.failures(r)
	default:
		panic(fmt.Sprintf("table: unknown kind of result %T", r))
	}
	return d
}

// A doc is a result laid out.
type doc struct {
	blocks []block
	rows   int // of long lists
}

// A block is a heading, a line or a grid.
type block struct {
	heading bool
	line    []cell // joined without a gap
	grid    *grid
}

// A cell is a piece of text with the figures it shows, in SI units.
type cell struct {
	text   string
	values []float64
	tone   tone
	name   bool // text that stands in the result as it is
}

// A tone is how a terminal colours a cell.
type tone uint8

const (
	plain tone = iota
	good
	bad
	strong
)

// A column of a grid. Columns marked wrap or cut give way when a grid is too
// wide, down to least columns or the width of their heads: the first breaks
// at spaces, the second ends in an ellipsis.
type column struct {
	head  string
	right bool
	give  give
	least int
}

type give uint8

const (
	fixed give = iota
	wrap
	cut
)

type grid struct {
	cols []column
	rows [][]cell
}

func (g *grid) add(cells ...cell) {
	if len(cells) != len(g.cols) {
		panic(fmt.Sprintf("table: row of %d cells in a grid of %d columns", len(cells), len(g.cols)))
	}
	g.rows = append(g.rows, cells)
}

func (d *doc) heading(cells ...cell) {
	d.blocks = append(d.blocks, block{heading: true, line: cells})
}

func (d *doc) line(cells ...cell) { d.blocks = append(d.blocks, block{line: cells}) }

func (d *doc) grid(g *grid) {
	if len(g.rows) > 0 {
		d.blocks = append(d.blocks, block{grid: g})
	}
}

// word is fixed text without a figure.
func word(s string) cell { return cell{text: s} }

// name is text that comes from the result. Control characters, which could
// steer a terminal, are shown as "?".
func name(s string) cell {
	if s == "" {
		return cell{text: "-"}
	}
	s = strings.Map(func(r rune) rune {
		if unicode.IsControl(r) {
			return '?'
		}
		return r
	}, s)
	return cell{text: s, name: true}
}

// join makes one cell of several, with sep between them.
func join(sep string, cells ...cell) cell {
	var out cell
	for i, c := range cells {
		if i > 0 {
			out.text += sep
		}
		out.text += c.text
		out.values = append(out.values, c.values...)
	}
	return out
}

// figures is the column of figure names; the names of classes stand in it too
// and give way, the names of figures do not.
func figures() column { return column{head: "figure", give: cut, least: 14} }

func left(head string) column        { return column{head: head} }
func right(head string) column       { return column{head: head, right: true} }
func wrapped(head string) column     { return column{head: head, give: wrap, least: 8} }
func abbreviated(head string) column { return column{head: head, give: cut, least: 8} }
func columns(cols ...column) *grid   { return &grid{cols: cols} }
func toned(c cell, t tone) cell      { c.tone = t; return c }
