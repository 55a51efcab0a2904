package table

import "ferrule/scenarios/result"

// A Block is a heading, a line or a grid of a result that is laid out, for
// forms that other packages write. Values are the figures a text shows, in SI
// units, as they stand in the result.
type Block struct {
	Heading bool
	Text    Cell // of a heading or a line
	Grid    *Grid
}

// A Grid is a table; a row has as many cells as there are heads.
type Grid struct {
	Heads []Head
	Rows  [][]Cell
}

// A Head is the head of a column.
type Head struct {
	Text  string
	Right bool // figures are set to the right
}

// A Cell is a text with the figures it shows.
type Cell struct {
	Text   string
	Values []float64
	Tone   string // "", "good", "bad" or "strong"
}

// Blocks lays r out as Text and Markdown do.
func Blocks(r result.Result, opt Options) []Block {
	var out []Block
	for _, b := range layOut(r, opt).blocks {
		x := Block{Heading: b.heading}
		if b.grid == nil {
			x.Text = joined(b.line)
			out = append(out, x)
			continue
		}
		x.Grid = &Grid{}
		for _, c := range b.grid.cols {
			x.Grid.Heads = append(x.Grid.Heads, Head{c.head, c.right})
		}
		for _, row := range b.grid.rows {
			var cells []Cell
			for _, c := range row {
				cells = append(cells, plainCell(c))
			}
			x.Grid.Rows = append(x.Grid.Rows, cells)
		}
		out = append(out, x)
	}
	return out
}

func joined(line []cell) Cell { return plainCell(join("", line...)) }

func plainCell(c cell) Cell {
	tones := [...]string{plain: "", good: "good", bad: "bad", strong: "strong"}
	return Cell{c.text, c.values, tones[c.tone]}
}

// Number shows v with three significant digits in a human unit.
func Number(v float64, unit string) Cell { return plainCell(number(v, unit)) }

// Bound shows an objective.
func Bound(v float64, unit string) Cell { return plainCell(limit(v, unit)) }

// Pair shows two figures in one unit, that of the larger.
func Pair(a, b float64, unit string) (Cell, Cell) {
	s := scaleOf(unit, max(a, b))
	return plainCell(scaled(a, unit, s)), plainCell(scaled(b, unit, s))
}

// Change shows a difference with its interval, which may be nil.
func Change(v float64, i *result.Interval, unit string) Cell { return plainCell(change(&v, i, unit)) }

// Interval shows a half-width or two ends, "-" for nil.
func Interval(i *result.Interval, unit string) Cell { return plainCell(interval(i, unit)) }

// Count shows a whole number with its unit.
func Count(n int64, unit string) Cell { return plainCell(count(n, unit)) }

// Instant shows a time of the run.
func Instant(s float64) Cell { return plainCell(instant(s)) }

// Span shows a stretch of time.
func Span(s float64) Cell { return plainCell(span(s)) }

// FigureName is the name of a figure for readers.
func FigureName(id string) string { return figureName(id) }
