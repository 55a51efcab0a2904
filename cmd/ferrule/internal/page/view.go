package page

import (
	"fmt"
	"html/template"
	"slices"
	"strings"

	"ferrule/cmd/ferrule/internal/table"
	"ferrule/scenarios/result"
)

// view is what the template is filled with.
type view struct {
	Head     result.Head
	Title    string
	Sub      string
	Seeds    string
	Command  string
	Parts    []part // one, or one for each plan of a comparison
	Matrix   *matrix
	Defaults []result.Default
	Cautions []string
	Document Document
	Classes  []string // in the order of their colours
	Drawn    bool     // there are runs to draw
	OneSeed  string   // which seed the drawings are of

	Program template.JS
	Style   template.CSS
	Policy  string
}

// A part is what is said of one plan.
type part struct {
	No        int // of its run in the document
	Plan      string
	Sentences []string
	Heads     []string
	Rows      []row
	Cost      []cost
	Changes   []string
	Blocks    []table.Block // all figures
	Circuits  *table.Grid
	Events    *table.Grid
	Steps     *table.Grid
}

// A row is what is said of one class.
type row struct {
	Class  string
	Chip   string // the word, and the style
	Style  string
	Cells  []gain
	Limits []said
}

// A gain is one figure in one period.
type gain struct {
	Head   string
	Sign   string // which way it goes, and its tone
	Tone   string
	Figure string
	Move   []table.Cell // before and after, or one
	Sure   table.Cell
	Note   string // in place of a figure
}

// said is a short statement about a limit.
type said struct {
	Tone string // "met" or "missed"
	Text string
}

type cost struct {
	What   string
	Figure table.Cell
	Note   string
}

// A matrix sets all plans side by side.
type matrix struct {
	Plans []string
	Rows  []matrixRow
	Cost  []matrixCost
}

type matrixRow struct {
	Class string
	Chips []row // Chip, Style and Limits only
}

type matrixCost struct {
	What  string
	Cells []table.Cell
}

func newView(r result.Result, opt Options) *view {
	v := &view{Head: result.HeadOf(r), Command: opt.Command}
	v.Document.Contract = 1
	v.Document.Runs = []*result.Run{}
	var runs []*result.Run
	switch r := r.(type) {
	case *result.Run:
		runs = []*result.Run{r}
		v.Title, v.Sub = r.Plan, "one run"
		v.Seeds = fmt.Sprint(r.Seed)
		v.Defaults, v.Cautions = r.Defaults, r.Cautions
		v.Parts = []part{runPart(r)}
	case *result.Batch:
		runs = r.Runs
		v.Title, v.Sub = r.Plan, fmt.Sprintf("%d seeds", len(r.Seeds))
		v.Seeds = joinSeeds(r.Seeds)
		v.Defaults, v.Cautions = r.Defaults, r.Cautions
		v.Parts = []part{batchPart(r)}
	case *result.Comparison:
		runs = r.Runs
		v.Title, v.Sub = "plans against "+r.Base, fmt.Sprintf("%d seeds, paired", len(r.Seeds))
		if len(r.Plans) == 1 {
			v.Title = r.Plans[0].Plan + " against " + r.Base
		}
		v.Seeds = joinSeeds(r.Seeds)
		v.Defaults, v.Cautions = r.Defaults, r.Cautions
		for i := range r.Plans {
			v.Parts = append(v.Parts, comparedPart(r, i))
		}
		if len(r.Plans) > 1 {
			v.Matrix = matrixOf(r)
		}
	default:
		panic(fmt.Sprintf("page: %T has no report", r))
	}
	until := map[float64]float64{} // looked up only
	for _, run := range runs {
		for _, p := range run.Periods {
			until[p.FromS] = max(until[p.FromS], p.ToS)
		}
	}
	for _, run := range runs {
		v.Document.Runs = append(v.Document.Runs, thinned(run, until))
	}
	if v.Drawn = len(runs) > 0; v.Drawn {
		for _, c := range runs[0].Classes {
			v.Classes = append(v.Classes, c.Name)
		}
		v.OneSeed = fmt.Sprint(runs[0].Seed)
	}
	v.Cautions = append(result.StandingCautions(), v.Cautions...)
	slices.Sort(v.Cautions[len(result.StandingCautions()):])
	v.Cautions = slices.Compact(v.Cautions)
	return v
}

func joinSeeds(seeds []uint64) string {
	var out []string
	for _, s := range seeds {
		out = append(out, fmt.Sprint(s))
	}
	return strings.Join(out, " ")
}

// list joins names as a sentence does.
func list(names []string) string {
	switch n := len(names); n {
	case 0:
		return "none"
	case 1:
		return names[0]
	default:
		return strings.Join(names[:n-1], ", ") + " and " + names[n-1]
	}
}

// verb is one form or the other, for one or several.
func verb(names []string, one, several string) string {
	if len(names) == 1 {
		return one
	}
	return several
}

// upper is how periods are named in tables.
func upper(p result.Period) string {
	s := strings.ToUpper(p.Name)
	if p.Act != "" {
		s += " – " + p.Act
	}
	return s
}

// circuitGrid lists the circuits and what they hold.
func circuitGrid(r *result.Run) *table.Grid {
	g := &table.Grid{Heads: []table.Head{{Text: "circuit"}, {Text: "way at the end"}, {Text: "carries"}, {Text: "recovery"}, {Text: "slots", Right: true},
		{Text: "payload", Right: true}, {Text: "state"}, {Text: "busiest way", Right: true}, {Text: "light", Right: true}, {Text: "set up in", Right: true}, {Text: "down for", Right: true}}}
	dash := table.Cell{Text: "–"}
	optional := func(v *float64, unit string) table.Cell {
		if v == nil {
			return dash
		}
		return table.Number(*v, unit)
	}
	for _, c := range r.Circuits {
		slots := table.Cell{Text: "a channel"}
		if c.Slots != nil {
			slots = table.Count(*c.Slots, "")
		}
		state := c.State
		if c.Reason != "" {
			state += ": " + c.Reason
		}
		g.Rows = append(g.Rows, []table.Cell{{Text: c.Name, Tone: "strong"}, {Text: strings.Join(c.Route, " – ")}, {Text: c.Carries}, {Text: c.Recovery}, slots,
			table.Number(c.PayloadBps, result.UnitBps), {Text: state}, optional(c.Utilisation, result.UnitRatio), optional(c.DelayS, result.UnitSeconds),
			optional(c.SetUpS, result.UnitSeconds), table.Number(c.DownS, result.UnitSeconds)})
	}
	return g
}

func eventGrid(r *result.Run) *table.Grid {
	g := &table.Grid{Heads: []table.Head{{Text: "at", Right: true}, {Text: "what"}, {Text: "of"}, {Text: "detail"}}}
	for _, e := range r.Events {
		g.Rows = append(g.Rows, []table.Cell{table.Instant(e.AtS), {Text: e.What}, {Text: e.Subject}, {Text: e.Detail}})
	}
	return g
}

func stepGrid(r *result.Run) *table.Grid {
	if len(r.Steps) == 0 {
		return nil
	}
	g := &table.Grid{Heads: []table.Head{{Text: "act"}, {Text: "of"}, {Text: "ordered", Right: true}, {Text: "done", Right: true}, {Text: "state"}, {Text: "detail"}}}
	at := func(s *float64) table.Cell {
		if s == nil {
			return table.Cell{Text: "–"}
		}
		return table.Instant(*s)
	}
	for _, s := range r.Steps {
		g.Rows = append(g.Rows, []table.Cell{{Text: s.Act}, {Text: s.Subject}, at(s.OrderedS), at(s.DoneS), {Text: s.State}, {Text: s.Detail}})
	}
	return g
}

// everything is all rows of a result's tables.
var everything = table.Options{Rows: 1 << 30}

// log adds what one run tells: its circuits, steps and events.
func (p *part) log(r *result.Run) {
	p.Circuits, p.Steps, p.Events = circuitGrid(r), stepGrid(r), eventGrid(r)
}
