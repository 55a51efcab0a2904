// Package page writes a result as one self-contained page: the report.
//
// The page opens from a disk without a network. Its text, verdicts and tables
// are written here, by html/template, so that nothing in a scenario can become
// markup. Its map and charts are drawn in the reader's browser by the program
// under web, from one document that stands in the page as JSON ([Document];
// web/contract.ts is the reader's side of it). A security policy in the page
// lets only that one program and style sheet in, by their hashes, and nothing
// from any host.
//
// Figures are written with the attribute data-v, which holds the values shown
// as they stand in the result. Nothing is computed here but which of the
// figures stand at the top and how series are thinned.
//
// The program is bundled by esbuild into dist/page.js: go generate.
package page

import (
	"bytes"
	"crypto/sha256"
	_ "embed"
	"encoding/base64"
	"fmt"
	"html/template"
	"strconv"
	"strings"

	"ferrule/cmd/ferrule/internal/table"
	"ferrule/scenarios/result"
)

//go:generate go test -run TestBundleIsFresh -update .

//go:embed dist/page.js
var program string

//go:embed style.css
var style string

//go:embed web/vendor/uplot/uPlot.min.css
var chartStyle string

//go:embed report.html.tmpl
var text string

// classColours is the number of colours for classes: a seventh class has the
// first colour again.
const classColours = 6

// Document is what the page draws from: web/contract.ts. Runs are those of one
// seed, the base first.
type Document struct {
	Contract int           `json:"contract"` // 1
	Runs     []*result.Run `json:"runs"`
}

// Options tell what a result does not hold.
type Options struct {
	Command string // that makes the same again; may be empty
}

var page = template.Must(template.New("report").Funcs(template.FuncMap{
	"values": values,
	"swatch": func(class int) int { return class % classColours },
	"span":   table.Span,
	"group":  group,
}).Parse(text))

// Report writes r, a run, a batch or a comparison, as a page. It panics on a
// check, which has no report.
func Report(r result.Result, opt Options) ([]byte, error) {
	sheet := variables() + chartStyle + style
	v := newView(r, opt)
	v.Program, v.Style = template.JS(program), template.CSS(sheet)
	v.Policy = fmt.Sprintf("default-src 'none'; script-src '%s'; style-src '%s'; base-uri 'none'; form-action 'none'", hash(program), hash(sheet))
	var b bytes.Buffer
	if err := page.Execute(&b, v); err != nil {
		return nil, fmt.Errorf("page: %w", err)
	}
	return b.Bytes(), nil
}

// hash is how a security policy names an inline script or style.
func hash(s string) string {
	sum := sha256.Sum256([]byte(s))
	return "sha256-" + base64.StdEncoding.EncodeToString(sum[:])
}

// values writes the figures of a cell for the attribute data-v.
func values(vs []float64) string {
	var out []string
	for _, v := range vs {
		out = append(out, strconv.FormatFloat(v, 'g', -1, 64))
	}
	return strings.Join(out, " ")
}

// figures is a cell of several.
func figures(sep string, cells ...table.Cell) table.Cell {
	var c table.Cell
	for i, x := range cells {
		if i > 0 {
			c.Text += sep
		}
		c.Text += x.Text
		c.Values = append(c.Values, x.Values...)
	}
	return c
}

// group reports whether a row only names what the rows below it are of.
func group(cells []table.Cell) bool {
	return len(cells) > 1 && cells[0].Tone == "strong" && cells[1].Text == ""
}
