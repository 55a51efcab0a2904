package study

import (
	"cmp"
	"slices"
	"strings"

	"ferrule/scenarios/result"
)

// A sample is what a study keeps of one run.
type sample struct {
	head     result.Head
	seed     uint64
	classes  []string // highest first
	periods  []result.Period
	figures  []reading // of classes
	network  []reading
	price    result.Price
	transit  []result.SiteRate
	audit    result.Audit
	defaults []result.Default
	cautions []string
	short    bool // too short for its warm-up
	within   []result.Within
}

// A key says which figure a reading is of.
type key struct {
	class   string // empty for a figure of the network
	subject string // of the network: the circuit, port or fibre
	period  string
	figure  string
}

// A reading is one figure of one run.
type reading struct {
	key
	unit  string
	limit *float64
	value *float64 // nil: it cannot be said

	// The aggregate of the class whose figure is worst, and that figure; nil
	// where the class has no aggregate of which it can be said. sure says that
	// it can be said of all that sent anything.
	pair  string
	worst *float64
	sure  bool

	// Of a percentile of the delay: the distribution it is taken from, and of
	// how many packets.
	tail    *result.Tail
	packets float64
}

// sampleOf reduces a run.
func sampleOf(r *result.Run) *sample {
	s := &sample{head: r.Head, seed: r.Seed, periods: r.Periods, price: r.Price, transit: r.Transit, audit: r.Audit,
		defaults: r.Defaults, cautions: r.Cautions, short: r.WarmUpShort, within: r.Within}
	for i := range r.Classes {
		c := &r.Classes[i]
		s.classes = append(s.classes, c.Name)
		var members []*result.Aggregate
		for j := range r.Aggregates {
			if r.Aggregates[j].Class == c.Name {
				members = append(members, &r.Aggregates[j])
			}
		}
		for j := range c.Periods {
			of := readingsOf(c, &c.Periods[j], members)
			addTail(of, r.Tails, &c.Periods[j])
			s.figures = append(s.figures, of...)
		}
	}
	s.network = networkOf(r)
	return s
}

// readingsOf reads the figures of one class in one period.
func readingsOf(c *result.Class, o *result.Outcome, members []*result.Aggregate) []reading {
	var out []reading
	for _, v := range o.Figures() {
		out = append(out, reading{key: key{class: c.Name, period: o.Period, figure: v.Figure}, unit: v.Unit, value: new(v.Value), sure: true})
	}
	for _, l := range c.Limits {
		i := slices.IndexFunc(out, func(r reading) bool { return r.figure == l.Figure })
		if i < 0 && l.Figure == result.FigOut {
			continue // there was no outage, or none is looked for in this period
		}
		if i < 0 {
			i = len(out)
			out = append(out, reading{key: key{class: c.Name, period: o.Period, figure: l.Figure}, unit: l.Unit, sure: true})
		}
		out[i].limit = new(l.Limit)
	}
	for _, a := range members {
		for j := range a.Periods {
			if a.Periods[j].Period == o.Period {
				takeMember(out, a.Name, &a.Periods[j])
			}
		}
	}
	if len(members) == 0 {
		for i := range out {
			out[i].worst = out[i].value
		}
	}
	return out
}

// addTail gives the percentiles of the delay of a class in a period the
// distribution that they are taken from.
func addTail(of []reading, tails []result.Tail, o *result.Outcome) {
	for i := range of {
		r := &of[i]
		if _, is := shareOfPercentile[r.figure]; !is {
			continue
		}
		r.packets = float64(o.DeliveredPackets)
		for j := range tails {
			if t := &tails[j]; t.Class == r.class && t.Period == r.period && len(t.DelayS) > 0 {
				r.tail = t
			}
		}
	}
}

// takeMember lets an aggregate of the class be the worst pair of each figure.
func takeMember(out []reading, name string, o *result.Outcome) {
	if o.OfferedPackets == 0 {
		return
	}
	values := o.Figures()
	for i := range out {
		r := &out[i]
		if senseOf(r.figure) != lowerIsBetter {
			continue
		}
		j := slices.IndexFunc(values, func(v result.Value) bool { return v.Figure == r.figure })
		switch {
		case j >= 0 && (r.worst == nil || values[j].Value > *r.worst):
			r.pair, r.worst = name, new(values[j].Value)
		case j < 0 && !(r.figure == result.FigOut && o.LostPackets.Total() == 0):
			r.sure = false
		}
	}
}

// networkOf reads the figures of circuits, ports and fibres that a study
// compares: of the ports the utilisation, the mean wait and the packets lost,
// of circuits how long setting up took, how often they were resized and how
// long they were down.
func networkOf(r *result.Run) []reading {
	var out []reading
	add := func(subject, figure, unit string, v *float64) {
		if v != nil {
			out = append(out, reading{key: key{subject: subject, figure: figure}, unit: unit, value: v})
		}
	}
	count := func(n int64) *float64 { return new(float64(n)) }
	for i := range r.Ports {
		p := &r.Ports[i]
		name := p.Circuit + " from " + p.From
		add(name, "utilisation", result.UnitRatio, p.Utilisation)
		add(name, "wait-mean", result.UnitSeconds, p.MeanWaitS)
		add(name, "lost", result.UnitPackets, count(p.LostPackets.Total()))
	}
	for i := range r.Circuits {
		c := &r.Circuits[i]
		add(c.Name, "set-up", result.UnitSeconds, c.SetUpS)
		add(c.Name, "resizes", result.UnitCount, count(c.Resizes))
		add(c.Name, "down", result.UnitSeconds, &c.DownS)
	}
	for i := range r.Fibres {
		add(r.Fibres[i].Name, "slots-used", result.UnitSlots, count(r.Fibres[i].SlotsUsed))
	}
	return out
}

// A sense says which way a figure gets better.
type sense uint8

const (
	neither        sense = iota // a count that says nothing by itself
	lowerIsBetter               // delays, losses, outages
	higherIsBetter              // throughput
)

// senseOf tells which way a figure of a class gets better.
func senseOf(figure string) sense {
	switch figure {
	case result.FigThroughput, result.FigGoodput:
		return higherIsBetter
	case result.FigTransfers, result.FigOffered, result.FigDelivered, result.FigDuplicates, result.FigInside:
		return neither
	}
	if strings.HasPrefix(figure, result.FigLostPrefix) {
		return neither // packets only change the cause they are lost for
	}
	return lowerIsBetter
}

// figureOrder is the order of figures in a study.
var figureOrder = []string{
	result.FigOffered, result.FigDelivered, result.FigDuplicates, result.FigInside, result.FigLostPrefix,
	result.FigLoss, result.FigThroughput,
	result.FigDelayMin, result.FigDelayMean, result.FigDelayP50, result.FigDelayP95, result.FigDelayP99,
	result.FigDelayP999, result.FigDelayMax,
	"pdv-min", "pdv-mean", result.FigPDVP50, result.FigPDVP95, result.FigPDVP99, result.FigPDVP999, "pdv-max",
	"ipdv-min", "ipdv-mean", "ipdv-p50", "ipdv-p95", result.FigIPDVP99, result.FigIPDVP999, "ipdv-max",
	result.FigJitter, result.FigReordered, result.FigOut, result.FigRecovery,
	result.FigTransfers, "transfer-min", result.FigTransferMean, result.FigTransferP50, result.FigTransferP95, result.FigTransferP99,
	"transfer-p99.9", "transfer-max", result.FigGoodput, result.FigResent, result.FigTimeouts,
}

// rankOf is the place of a figure in that order; figures that are not listed
// come last.
func rankOf(figure string) int {
	if strings.HasPrefix(figure, result.FigLostPrefix) {
		figure = result.FigLostPrefix
	}
	if i := slices.Index(figureOrder, figure); i >= 0 {
		return i
	}
	return len(figureOrder)
}

// A series is one figure over the samples of a study: readings[i] is that of
// sample i, nil where it has none.
type series struct {
	key
	unit     string
	limit    *float64
	readings []*reading
}

// collect gathers the figures of samples, those of classes or those of the
// network as pick says. Classes come highest first, then periods and figures
// in order; the network in the order in which it was read.
func collect(samples []*sample, pick func(*sample) []reading) []series {
	var out []series
	at := map[key]int{}
	var classes, periods []string
	known := func(list *[]string, s string) {
		if !slices.Contains(*list, s) {
			*list = append(*list, s)
		}
	}
	for i, s := range samples {
		for _, c := range s.classes {
			known(&classes, c)
		}
		for _, p := range s.periods {
			known(&periods, p.Name)
		}
		list := pick(s)
		for j := range list {
			r := &list[j]
			k, ok := at[r.key]
			if !ok {
				k = len(out)
				at[r.key] = k
				out = append(out, series{key: r.key, unit: r.unit, readings: make([]*reading, len(samples))})
			}
			if r.limit != nil {
				out[k].limit = r.limit
			}
			out[k].readings[i] = r
		}
	}
	slices.SortStableFunc(out, func(a, b series) int {
		if a.class == "" && b.class == "" {
			return 0
		}
		return cmp.Or(
			cmp.Compare(slices.Index(classes, a.class), slices.Index(classes, b.class)),
			cmp.Compare(slices.Index(periods, a.period), slices.Index(periods, b.period)),
			cmp.Compare(rankOf(a.figure), rankOf(b.figure)))
	})
	return out
}

// values lists what can be said, in the order of the samples.
func (s *series) values() []float64 {
	var out []float64
	for _, r := range s.readings {
		if r != nil && r.value != nil {
			out = append(out, *r.value)
		}
	}
	return out
}

// worstPair names the aggregate that is worst in most samples; of several, the
// one that is so first.
func (s *series) worstPair() string {
	var names []string
	var times []int
	for _, r := range s.readings {
		if r == nil || r.pair == "" {
			continue
		}
		i := slices.Index(names, r.pair)
		if i < 0 {
			i = len(names)
			names, times = append(names, r.pair), append(times, 0)
		}
		times[i]++
	}
	best := -1
	for i := range names {
		if best < 0 || times[i] > times[best] {
			best = i
		}
	}
	if best < 0 {
		return ""
	}
	return names[best]
}

// A judgement says how a figure stands to its limit over the samples.
type judgement struct {
	met   *bool    // see judge; nil without a limit, or when it cannot be said
	mean  *float64 // of the worst pair's figure
	times int      // in how many samples the limit was met
	of    int      // of how many in which the class sent anything
}

// judge sets the worst pair against the limit. An objective is met when the
// mean, over the samples, of the figure of the worst pair of each is within
// the limit. It is missed when that mean is beyond the limit. When an
// aggregate sent too few packets for its figure to be said, a mean within the
// limit decides nothing.
func (s *series) judge() judgement {
	var j judgement
	if s.limit == nil {
		return j
	}
	sum, n, sure := 0.0, 0, true
	for _, r := range s.readings {
		if r == nil {
			continue
		}
		j.of++
		if r.worst == nil || !r.sure {
			sure = false
		}
		if r.worst == nil {
			continue
		}
		sum += *r.worst
		n++
		if r.sure && *r.worst <= *s.limit {
			j.times++
		}
	}
	if n == 0 {
		return j
	}
	mean := sum / float64(n)
	j.mean = &mean
	if within := mean <= *s.limit; sure || !within {
		j.met = &within
	}
	return j
}
