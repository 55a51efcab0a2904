package study

import (
	"ferrule/scenarios"
	"ferrule/scenarios/result"
)

// judge holds an outcome to limits. Met is nil when some limit's figure cannot
// be said and none is missed. A figure that has no place in the period, such
// as an outage where nothing broke, counts as kept.
func judge(o *result.Outcome, ls []scenarios.Limit, name string) *result.Objective {
	if len(ls) == 0 {
		return nil
	}
	j := &result.Objective{}
	said := o.OfferedPackets > 0
	for _, l := range ls {
		id, unit := figureOf(l.Figure)
		v, ok := o.Figure(id)
		switch {
		case !ok && l.Figure == scenarios.FigureOut:
		case !ok:
			said = false
		case v.Value > limitValue(l):
			j.Misses = append(j.Misses, result.Miss{Figure: id, Unit: unit, Limit: limitValue(l), Value: v.Value, Aggregate: name})
		}
	}
	if met := len(j.Misses) == 0; !met || said {
		j.Met = &met
	}
	return j
}

// judgeClass folds the objectives of a class's aggregates in period k: met if
// all met theirs, missed if one missed it, unsaid otherwise. Each limit's miss
// is that of the worst aggregate. The worst pair is the aggregate whose figure
// stands highest against its limit.
func judgeClass(o *result.Outcome, members []*result.Aggregate, k int, ls []scenarios.Limit) {
	var longest *float64
	for _, a := range members {
		if out := a.Periods[k].OutageS; out != nil && (longest == nil || *out > *longest) {
			longest = out
		}
	}
	o.OutageS = longest
	worst := -1.0
	for _, a := range members {
		if s := strain(&a.Periods[k], ls); s > worst {
			worst, o.WorstPair = s, a.Name
		}
	}
	if len(ls) == 0 {
		return
	}
	j := &result.Objective{}
	said := len(members) > 0
	for _, l := range ls {
		id, _ := figureOf(l.Figure)
		var top *result.Miss
		for _, a := range members {
			obj := a.Periods[k].Objective
			for i := range obj.Misses {
				if m := obj.Misses[i]; m.Figure == id && (top == nil || m.Value > top.Value) {
					m.Aggregate = a.Name
					top = &m
				}
			}
		}
		if top != nil {
			j.Misses = append(j.Misses, *top)
		}
	}
	for _, a := range members {
		if a.Periods[k].Objective.Met == nil {
			said = false
		}
	}
	if met := len(j.Misses) == 0; !met || said {
		j.Met = &met
	}
	o.Objective = j
}

// strain is how high the worst figure of an outcome stands against its limit;
// without limits it is the mean delay, so that the slowest pair is the worst.
func strain(o *result.Outcome, ls []scenarios.Limit) float64 {
	if len(ls) == 0 {
		if o.DelayS.Mean != nil {
			return *o.DelayS.Mean
		}
		return 0
	}
	var s float64
	for _, l := range ls {
		id, _ := figureOf(l.Figure)
		v, ok := o.Figure(id)
		if !ok {
			continue
		}
		limit := limitValue(l)
		if limit == 0 {
			limit = 1e-12
		}
		s = max(s, v.Value/limit)
	}
	return s
}

// worstOver is the worst pair of the period in which a class was worst.
func worstOver(periods []result.Outcome, all []result.Aggregate, ls []result.Limit) string {
	worst, name := -1.0, ""
	for k := range periods {
		p := &periods[k]
		for i := range all {
			if all[i].Name != p.WorstPair {
				continue
			}
			var s float64
			for _, l := range ls {
				if v, ok := all[i].Periods[k].Figure(l.Figure); ok && l.Limit > 0 {
					s = max(s, v.Value/l.Limit)
				}
			}
			if s > worst {
				worst, name = s, p.WorstPair
			}
		}
	}
	return name
}
