package scenarios

import (
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"slices"
	"strings"

	"ferrule/des"
	"ferrule/nodes"
)

// Measured is a figure of the network as it stands, to hold a scenario to: the
// load of one direction of a circuit, or the mean delay of a class from one
// site to another.
type Measured struct {
	Pos      Pos
	Circuit  nodes.CircuitID // whose load; nodes.None for a delay
	Class    nodes.ClassID   // whose delay; nodes.None for a load
	From, To nodes.SiteID
	Load     nodes.Rate // IP bits
	Delay    des.Time
}

// measuredHeader is the first row of a table of measurements.
var measuredHeader = []string{"what", "of", "from", "to", "value"}

// maxMeasured is how many measurements a table can have.
const maxMeasured = 100_000

// ParseMeasured reads a table of measurements: a first row
// what,of,from,to,value, then rows such as link,ab,a,b,400Mbps (a circuit) and
// delay,gold,a,b,3.2ms (a class). An error is of type Problems and lists every
// fault.
func ParseMeasured(name string, data []byte, s *Scenario) ([]Measured, error) {
	f := &faults{files: []string{name}}
	if len(data) > maxFile {
		f.add(Pos{File: name}, "", "the table has more than 8 MB", "leave rows out")
		return nil, f.err()
	}
	c := csv.NewReader(bytes.NewReader(bytes.TrimPrefix(data, []byte("\ufeff"))))
	c.FieldsPerRecord = -1
	c.TrimLeadingSpace = true
	c.Comment = '#'
	m := &measurer{s: s, f: f, c: c, name: name}
	var out []Measured
	for first := true; ; first = false {
		row, err := c.Read()
		if errors.Is(err, io.EOF) {
			if first || len(out) == 0 && len(f.list) == 0 {
				f.add(Pos{File: name}, "", "the table holds no measurements", "begin with the row "+strings.Join(measuredHeader, ","))
			}
			return out, f.err()
		}
		var parse *csv.ParseError
		if errors.As(err, &parse) {
			f.add(Pos{name, parse.Line, parse.Column}, "", "not CSV: "+parse.Err.Error(), "mind the quotes")
			return nil, f.err()
		}
		switch {
		case first && !slices.Equal(row, measuredHeader):
			m.bad(row, 0, fmt.Sprintf("the first row is %q", strings.Join(row, ",")), "begin with the row "+strings.Join(measuredHeader, ","))
			return nil, f.err()
		case first:
		case len(row) != len(measuredHeader):
			m.bad(row, 0, fmt.Sprintf("the row has %d fields", len(row)), "write "+strings.Join(measuredHeader, ","))
		case len(out) == maxMeasured:
			m.bad(row, 0, "the table has too many rows", fmt.Sprintf("write %d at most", maxMeasured))
			return nil, f.err()
		default:
			out = append(out, m.row(row))
		}
	}
}

// measurer reads rows of measurements.
type measurer struct {
	s    *Scenario
	f    *faults
	c    *csv.Reader
	name string
}

// bad notes a fault of field i of the row read last.
func (m *measurer) bad(row []string, i int, msg, hint string) {
	line, col := m.c.FieldPos(min(i, len(row)-1))
	m.f.add(Pos{m.name, line, col}, measuredHeader[i], msg, hint)
}

// row reads one row.
func (m *measurer) row(row []string) Measured {
	line, col := m.c.FieldPos(0)
	x := Measured{Pos: Pos{m.name, line, col}, Circuit: nodes.None, Class: nodes.None}
	look := func(i int, what string, names []string) int {
		at := slices.Index(names, row[i])
		if at < 0 {
			m.bad(row, i, fmt.Sprintf("no %s is called %q", what, row[i]), didYouMean(row[i], names))
		}
		return at
	}
	sites := make([]string, len(m.s.Sites))
	for i := range sites {
		sites[i] = m.s.Sites[i].Name
	}
	x.From, x.To = nodes.SiteID(look(2, "site", sites)), nodes.SiteID(look(3, "site", sites))
	var v int64
	var f *fault
	switch row[0] {
	case "link":
		var names []string
		for i := range m.s.Circuits {
			names = append(names, m.s.Circuits[i].Name)
		}
		x.Circuit = nodes.CircuitID(look(1, "circuit", names))
		v, f = rateMeasure.positive(row[4])
		x.Load = nodes.Rate(v)
		if x.Circuit >= 0 && x.From >= 0 && x.To >= 0 {
			if c := &m.s.Circuits[x.Circuit]; [2]nodes.SiteID{x.From, x.To} != [2]nodes.SiteID{c.A, c.B} && [2]nodes.SiteID{x.To, x.From} != [2]nodes.SiteID{c.A, c.B} {
				m.bad(row, 2, fmt.Sprintf("the circuit %s does not go from %s to %s", c.Name, row[2], row[3]), fmt.Sprintf("it goes between %s and %s", sites[c.A], sites[c.B]))
			}
		}
	case "delay":
		var names []string
		for i := range m.s.Classes {
			names = append(names, m.s.Classes[i].Name)
		}
		x.Class = nodes.ClassID(look(1, "class", names))
		v, f = timeMeasure.positive(row[4])
		x.Delay = des.Time(v)
	default:
		m.bad(row, 0, fmt.Sprintf("%q is not known here", row[0]), "write link or delay")
		return x
	}
	if f != nil {
		m.bad(row, 4, f.msg, f.hint)
	}
	return x
}
