package scenarios

import (
	"fmt"
	"math"
	"reflect"
	"strconv"
	"strings"

	"ferrule/des"
	"ferrule/nodes"
)

// codecs are the voice codecs that can be named; workloads knows them.
var codecs = []string{"G.711", "G.729"}

// codePoints are the names of code points (RFC 2474, 2597, 3246, 5865, 8622).
// AFxy is 8x + 2y and CSx is 8x.
var codePoints = map[string]uint8{"BE": 0, "DF": 0, "LE": 1, "EF": 46, "VA": 44}

// decodeCodePoint reads a code point by name or number.
func decodeCodePoint(data any) (codePoint, *fault) {
	odd := &fault{msg: fmt.Sprintf("\"%v\" is not a code point", data), hint: "write EF, BE, LE, VA, CS0 to CS7, AF11 to AF43, or a number from 0 to 63"}
	s, ok := data.(string)
	if !ok {
		n, f := decodeWhole(data)
		if f != nil || n < 0 || n > 63 {
			return 0, odd
		}
		return codePoint(n), nil
	}
	if c, ok := codePoints[s]; ok {
		return codePoint(c), nil
	}
	digits := strings.TrimLeft(s, "ACFS")
	n, err := strconv.Atoi(digits)
	switch {
	case err != nil:
		return 0, odd
	case s == "CS"+digits && len(digits) == 1 && n <= 7:
		return codePoint(8 * n), nil
	case s == "AF"+digits && len(digits) == 2 && n/10 >= 1 && n/10 <= 4 && n%10 >= 1 && n%10 <= 3:
		return codePoint(8*(n/10) + 2*(n%10)), nil
	}
	return 0, odd
}

// resolveClasses reads the classes, which are those of the traffic's names.
func (r *resolver) resolveClasses() {
	list := r.t.top().field("classes")
	if !list.given() || len(r.raw.Classes) == 0 {
		r.missing(r.t.top(), "classes", "write at least one class of service")
	}
	if len(r.raw.Classes) > 64 {
		list.fault("write 64 at most", "%d classes are too many", len(r.raw.Classes))
	}
	total := 0
	for i := range r.raw.Classes {
		raw, p := &r.raw.Classes[i], list.item(i)
		c := Class{Name: raw.Name, Pos: p.pos(), DSCP: uint8(value(raw.DSCP, 0)), Traffic: nodes.None}
		r.classes.add(r, p, raw.Name)
		c.Queue, c.Weight = r.queue(p.field("queue"), raw.Queue)
		total += c.Weight
		c.BufferTime, c.BufferBytes = defaultBuffer, 0
		if raw.Buffer != nil {
			c.BufferTime, c.BufferBytes, c.BufferPackets = raw.Buffer.Time, raw.Buffer.Bytes, raw.Buffer.Packets
			if c.BufferTime == 0 && c.BufferBytes == 0 && c.BufferPackets == 0 || c.BufferTime > des.Hour {
				p.field("buffer").fault("write for instance 50ms or 64kB", "a buffer holds something, and an hour at most")
			}
		} else {
			r.unless(p, "buffer", FormatTime(defaultBuffer))
		}
		c.Drop = nodes.DropPolicy(r.choice(p.field("drop"), raw.Drop, dropWords, int(nodes.DropTail)))
		if c.ECN = value(raw.ECN, false); c.ECN && c.Drop == nodes.DropTail {
			p.field("ecn").fault("write drop: red, codel or fq-codel as well", "a queue that drops from the tail marks nothing")
			c.ECN = false
		}
		r.unless(p, "queue", "fifo")
		r.unless(p, "dscp", "BE")
		if q := p.field("traffic"); q.given() {
			c.Traffic = r.traffic.find(q, raw.Traffic)
		}
		c.Objective = objective(p.field("objective"), &raw.Objective)
		r.transfersEnd(p.field("objective"), &c)
		r.s.Classes = append(r.s.Classes, c)
		r.queueOrder(p, i)
	}
	if total > 100 {
		list.fault("lower the weights to 100% together", "the weights of all classes make %d%%", total)
	}
}

// queue reads "strict", "fifo", "weight 60%" or "wfq 60%".
func (r *resolver) queue(p *place, text string) (nodes.Queueing, int) {
	const hint = "write strict, fifo, or weight or wfq and a percentage, such as weight 60%"
	if text == "" {
		if p.given() && p.node.Value == "" {
			p.fault(hint, "is empty")
		}
		return nodes.QueueFIFO, 0
	}
	switch word, rest, _ := strings.Cut(text, " "); {
	case text == "strict":
		return nodes.QueueStrict, 0
	case text == "fifo":
		return nodes.QueueFIFO, 0
	case word == "weight" || word == "wfq":
		kind := nodes.QueueWeight
		if word == "wfq" {
			kind = nodes.QueueFair
		}
		w, f := suffixed(strings.TrimSpace(rest), "%", "a percentage")
		if f != nil || w != math.Trunc(w) || w < 1 || w > 100 {
			p.fault("write a whole percentage from 1% to 100%", "%q is not a weight", rest)
			return kind, 1
		}
		return kind, int(w)
	}
	p.fault(hint, "%q is not a kind of queue", text)
	return nodes.QueueFIFO, 0
}

// queueOrder checks class i against those above it.
func (r *resolver) queueOrder(p *place, i int) {
	if i == 0 {
		return
	}
	q, above, here := p.field("queue"), &r.s.Classes[i-1], &r.s.Classes[i]
	switch {
	case (here.Queue == nodes.QueueFIFO) != (above.Queue == nodes.QueueFIFO):
		q.fault("make all classes fifo, or none", "fifo does not go together with strict or weight")
	case here.Queue == nodes.QueueStrict && above.Queue != nodes.QueueStrict:
		q.fault("move it above them", "a strict class stands below classes with a weight")
	case here.Queue != above.Queue && above.Queue != nodes.QueueStrict:
		q.fault("write weight for all of them, or wfq", "weight does not go together with wfq")
	case here.Queue == nodes.QueueFIFO && here.Drop != above.Drop:
		p.field("drop").fault("write the same for all fifo classes: they share a queue", "differs from the class %s", above.Name)
	}
}

// transfersEnd checks that a class with an objective on transfers has some that
// end.
func (r *resolver) transfersEnd(p *place, c *Class) {
	for _, l := range c.Objective {
		if l.Figure < FigureTransferP50 || c.Traffic >= 0 && r.s.Traffic[c.Traffic].Model == ModelWeb || !p.given() {
			continue
		}
		p.field(l.Figure.String()).fault("give the class traffic of the model web, or leave the objective out", "the class has no transfers that end")
	}
}

// objective lists the limits that are given, in the order of the figures.
func objective(p *place, raw *rawObjective) []Limit {
	var out []Limit
	v := reflect.ValueOf(raw).Elem()
	for i, key := range figureWords {
		switch x := v.Field(i).Interface().(type) {
		case *des.Time:
			if x != nil {
				out = append(out, Limit{Figure: Figure(i), Time: within(p.field(key), x, 0, maxSpan, 0, FormatTime)})
			}
		case *ratio:
			if x != nil {
				out = append(out, Limit{Figure: Figure(i), Ratio: float64(*x)})
			}
		}
	}
	return out
}
