package scenarios

import (
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"math"
	"slices"
	"strings"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/optical"
)

// maxAggregates is how many aggregates a scenario can have: one fewer than a
// packet can name.
const maxAggregates = nodes.MaxAggregates - 1

// resolveAggregates reads the aggregates that are written one by one.
func (r *resolver) resolveAggregates() {
	list := r.t.top().field("aggregates")
	for i := range r.raw.Aggregates {
		raw, p := &r.raw.Aggregates[i], list.item(i)
		a := Aggregate{Name: raw.Name, Pos: p.pos(), Start: value(raw.Start, 0), Stop: value(raw.Stop, des.Never)}
		r.aggregates.add(r, p, raw.Name)
		r.aggregateEnds(p, raw, &a)
		if q := p.field("class"); q.given() {
			a.Class = nodes.ClassID(r.classes.find(q, raw.Class))
		} else {
			a.Class = nodes.None
			r.missing(p, "class", "write class: and the name of a class")
		}
		a.Traffic = r.trafficOf(p, raw.Traffic, a.Class)
		r.load(p, raw, &a)
		r.replayed(p, &a)
		r.interval(p, a.Start, a.Stop)
		r.overlap(p, &a)
		r.condition(p, raw, &a)
		r.s.Aggregates = append(r.s.Aggregates, a)
	}
	if len(r.s.Aggregates) > maxAggregates {
		list.fault(fmt.Sprintf("write %d at most", maxAggregates), "%d aggregates are too many", len(r.s.Aggregates))
	}
}

// aggregateEnds reads between, or from and to.
func (r *resolver) aggregateEnds(p *place, raw *rawAggregate, a *Aggregate) {
	between, from, to := p.field("between"), p.field("from"), p.field("to")
	a.From, a.To = nodes.None, nodes.None
	switch {
	case between.given() && (from.given() || to.given()):
		between.fault("write between for both ways, from and to for one", "stands beside from or to")
	case between.given():
		if x, y, ok := r.ends(between, raw.Between); ok {
			a.From, a.To, a.BothWays = x, y, true
		}
	case from.given() && to.given():
		x, y := r.sites.find(from, raw.From), r.sites.find(to, raw.To)
		if x >= 0 && x == y {
			to.fault("write two different sites", "goes from %s to itself", raw.From)
			return
		}
		a.From, a.To = nodes.SiteID(x), nodes.SiteID(y)
	case from.given():
		r.missing(p, "to", "write to: and the name of a site")
	case to.given():
		r.missing(p, "from", "write from: and the name of a site")
	default:
		r.missing(p, "between", "write between: [ a, b ], or from: and to:")
	}
}

// trafficOf is the traffic of an aggregate: its own, or that of its class.
func (r *resolver) trafficOf(p *place, name string, class nodes.ClassID) int {
	if q := p.field("traffic"); q.given() {
		return r.traffic.find(q, name)
	}
	if class < 0 {
		return nodes.None
	}
	c := &r.s.Classes[class]
	if c.Traffic < 0 && r.classKey(class, "traffic").node == nil {
		r.missing(p, "traffic", fmt.Sprintf("write it here or at the class %s", c.Name))
	}
	return c.Traffic
}

// classKey is the place of a key of a class.
func (r *resolver) classKey(c nodes.ClassID, key string) *place {
	return r.t.top().field("classes").item(int(c)).field(key)
}

// overlap checks that an aggregate sends at some time at which its traffic does.
func (r *resolver) overlap(p *place, a *Aggregate) {
	if a.Traffic < 0 {
		return
	}
	t := &r.s.Traffic[a.Traffic]
	if a.Start < a.Stop && t.Start < t.Stop && max(a.Start, t.Start) >= min(a.Stop, t.Stop) {
		p.fault("let their times overlap", "it sends from %s to %s, and its traffic %s from %s to %s",
			until(a.Start), until(a.Stop), t.Name, until(t.Start), until(t.Stop))
	}
}

// until writes an instant, which may be never.
func until(t des.Time) string {
	if t == des.Never {
		return "the end"
	}
	return FormatTime(t)
}

// load reads load or flows.
func (r *resolver) load(p *place, raw *rawAggregate, a *Aggregate) {
	load, flows := p.field("load"), p.field("flows")
	switch {
	case load.given() && flows.given():
		flows.fault("write load or flows", "stands beside load")
	case load.given():
		a.Load = within(load, raw.Load, 1, maxRate, 1, FormatRate)
		if a.Traffic >= 0 && r.s.Traffic[a.Traffic].Model == ModelBulk {
			load.fault("write flows: and a number", "transfers without end take what they get")
		}
	case flows.given():
		a.Flows = within(flows, raw.Flows, 1, 1000000, 1, plain)
		if a.Traffic < 0 {
			return
		}
		t := &r.s.Traffic[a.Traffic]
		if t.Model == ModelBulk {
			a.Flows = within(flows, raw.Flows, 1, 10000, 1, plain)
		} else if t.Rate == 0 && t.Model != ModelVoice {
			flows.fault("write load: and a rate", "the traffic %s does not say the rate of a flow", t.Name)
		} else if t.Rate > 0 && int64(t.Rate) > int64(maxRate)/int64(a.Flows) {
			flows.fault("write fewer", "%d flows of %s pass %s", a.Flows, FormatRate(t.Rate), FormatRate(maxRate))
		}
	case a.Traffic >= 0 && r.s.Traffic[a.Traffic].Model == ModelReplay: // as the file has it
	default:
		r.missing(p, "load", "write load: and a rate, or flows: and a number")
	}
}

// matrixHeader is the first row of a matrix.
var matrixHeader = []string{"from", "to", "class", "rate"}

// resolveDemand reads the matrices of demand.
func (r *resolver) resolveDemand() {
	list := r.t.top().field("demand")
	for i := range r.raw.Demand {
		raw, p := &r.raw.Demand[i], list.item(i)
		scale := float64(within(p.field("scale"), raw.Scale, 0, 1000, 1, func(x percent) string {
			return fmt.Sprintf("%g%%", float64(x)*100)
		}))
		q := p.field("matrix")
		if !q.given() {
			r.missing(p, "matrix", "write the name of a CSV file")
			continue
		}
		if raw.Matrix == "" && q.node.Value != "" || slices.Contains(r.s.Matrices, raw.Matrix) {
			if raw.Matrix != "" {
				q.fault("read it once", "the matrix is read twice")
			}
			continue
		}
		data, err := readMatrix(r.files, raw.Matrix)
		if err != nil {
			q.fault("name a file beside the scenario, such as demand.csv", "%q cannot be read: %v", raw.Matrix, err)
			continue
		}
		r.s.Matrices = append(r.s.Matrices, raw.Matrix)
		r.matrices = append(r.matrices, data)
		r.t.faults.files = append(r.t.faults.files, raw.Matrix)
		r.matrix(q, raw.Matrix, data, scale)
	}
}

// readMatrix reads a file by a relative name, up to a limit.
func readMatrix(files fs.FS, name string) ([]byte, error) {
	switch {
	case !fs.ValidPath(name) || strings.ContainsAny(name, "\\:"):
		return nil, errors.New("a name is relative and without \"..\"")
	case files == nil:
		return nil, errors.New("no files can be read here")
	}
	f, err := files.Open(name)
	if err != nil {
		var path *fs.PathError
		if errors.As(err, &path) {
			err = path.Err
		}
		return nil, err
	}
	defer f.Close()
	data, err := io.ReadAll(io.LimitReader(f, maxFile+1))
	if err == nil && len(data) > maxFile {
		err = errors.New("it has more than 8 MB")
	}
	return data, err
}

// matrix adds an aggregate for every row with a rate above 0.
func (r *resolver) matrix(p *place, name string, data []byte, scale float64) {
	c := csv.NewReader(bytes.NewReader(bytes.TrimPrefix(data, []byte("\ufeff"))))
	c.FieldsPerRecord = -1
	c.TrimLeadingSpace = true
	c.Comment = '#'
	c.ReuseRecord = true
	for first := true; ; first = false {
		row, err := c.Read()
		if errors.Is(err, io.EOF) {
			if first {
				r.t.faults.add(Pos{File: name}, "", "the matrix is empty", "begin with the row from,to,class,rate")
			}
			return
		}
		var parse *csv.ParseError
		if errors.As(err, &parse) {
			r.t.faults.add(Pos{name, parse.Line, parse.Column}, "", "not CSV: "+parse.Err.Error(), "mind the quotes")
			return
		}
		if first {
			if !slices.Equal(row, matrixHeader) {
				line, col := c.FieldPos(0)
				r.t.faults.add(Pos{name, line, col}, "", fmt.Sprintf("the first row is %q", strings.Join(row, ",")), "begin with the row from,to,class,rate")
				return
			}
			continue
		}
		if len(r.s.Aggregates) >= maxAggregates {
			p.fault(fmt.Sprintf("have %d aggregates at most", maxAggregates), "the matrix has too many rows")
			return
		}
		r.matrixRow(c, name, row, scale)
	}
}

// matrixRow reads one row.
func (r *resolver) matrixRow(c *csv.Reader, name string, row []string, scale float64) {
	at := func(i int) Pos {
		line, col := c.FieldPos(min(i, len(row)-1))
		return Pos{name, line, col}
	}
	bad := func(i int, msg, hint string) { r.t.faults.add(at(i), matrixHeader[min(i, 3)], msg, hint) }
	if len(row) != len(matrixHeader) {
		r.t.faults.add(at(0), "", fmt.Sprintf("the row has %d fields", len(row)), "write from,to,class,rate")
		return
	}
	look := func(x *index, i int) int {
		if id, ok := x.ids[row[i]]; ok {
			return id
		}
		bad(i, fmt.Sprintf("no %s is called %q", x.what, row[i]), x.hint(row[i]))
		return nodes.None
	}
	from, to, class := look(r.sites, 0), look(r.sites, 1), look(r.classes, 2)
	rate, f := rateMeasure.parse(row[3])
	switch {
	case f != nil:
		bad(3, f.msg, f.hint)
		return
	case rate < 0 || nodes.Rate(rate) > maxRate:
		bad(3, row[3]+" is out of range", "write 0bps to "+FormatRate(maxRate))
		return
	case from < 0 || to < 0 || class < 0:
		return
	case from == to:
		bad(1, "goes from "+row[0]+" to itself", "write two different sites")
		return
	}
	load := math.Round(float64(rate) * scale)
	if load > float64(maxRate) {
		bad(3, row[3]+" times the scale is out of range", "write a smaller scale")
		return
	}
	if load < 1 {
		return
	}
	a := Aggregate{
		Name: row[2] + "." + row[0] + "." + row[1], Pos: at(0),
		From: nodes.SiteID(from), To: nodes.SiteID(to), Class: nodes.ClassID(class),
		Traffic: r.s.Classes[class].Traffic, Load: nodes.Rate(load), Stop: des.Never,
	}
	if other, taken := r.aggregates.ids[a.Name]; taken {
		o := r.aggregates.where[other]
		bad(0, fmt.Sprintf("the name %q is taken", a.Name), fmt.Sprintf("the other one stands at %s, line %d", o.File, o.Line))
		return
	}
	if a.Traffic < 0 && !r.classKey(a.Class, "traffic").given() {
		bad(2, "the class has no traffic", "write traffic: at the class "+row[2])
		return
	}
	if a.Traffic >= 0 && r.s.Traffic[a.Traffic].Model == ModelBulk {
		bad(2, "the traffic of the class has no rate: it sends without end", "write the aggregate in the scenario, with flows: and a number")
		return
	}
	if field, msg, hint := r.speeds(&a); msg != "" {
		bad(map[string]int{"class": 2, "load": 3}[field], msg, hint)
		return
	}
	r.aggregates.ids[a.Name] = len(r.aggregates.names)
	r.aggregates.names = append(r.aggregates.names, a.Name)
	r.aggregates.where = append(r.aggregates.where, a.Pos)
	r.s.Aggregates = append(r.s.Aggregates, a)
}

// resolveRequests reads the streams of circuits that come and go.
func (r *resolver) resolveRequests() {
	list := r.t.top().field("requests")
	for i := range r.raw.Requests {
		raw, p := &r.raw.Requests[i], list.item(i)
		q := Request{Name: raw.Name, Pos: p.pos()}
		r.requests.add(r, p, raw.Name)
		if b := p.field("between"); b.given() {
			q.A, q.B, _ = r.ends(b, raw.Between)
		} else {
			r.missing(p, "between", "write between: [ a, b ]")
		}
		q.Slots = within(p.field("slots"), raw.Slots, 1, optical.SlotsPerChannel, 1, plain)
		q.PerSecond = within(p.field("arrive"), (*float64)(raw.Arrive), 1e-9, 1e6, 1, perSecond)
		q.Hold = held(p.field("hold"), raw.Hold)
		for _, need := range [][2]string{{"slots", "write slots: 1"}, {"arrive", "write for instance arrive: 5/s"}, {"hold", "write for instance hold: 60s"}} {
			if !p.field(need[0]).given() {
				r.missing(p, need[0], need[1])
			}
		}
		q.SetUpPriority, q.HoldingPriority = r.priorities(p, raw.SetUpPriority, raw.HoldingPriority, 7)
		q.Choose = nodes.Choice(r.choice(p.field("choose"), raw.Choose, chooseWords[:3], int(nodes.ChooseLeastDelay)))
		r.s.Requests = append(r.s.Requests, q)
	}
}
