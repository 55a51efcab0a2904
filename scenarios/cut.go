package scenarios

import (
	"fmt"
	"slices"
	"strings"

	"ferrule/des"
	"ferrule/nodes"
)

// ParseCut reads the text of a --cut option, NAME[:120km]@6s[..9s]: a fibre or
// a risk group, a place counted from the fibre's first end (the middle if not
// given), when it is cut and when it is repaired. It returns the acts, a cut
// and perhaps a repair, that a caller may add to the timeline. The error is of
// type Problems.
func (s *Scenario) ParseCut(text string) ([]Act, error) {
	pos := Pos{File: clip("--cut " + text)}
	bad := func(msg, hint string) ([]Act, error) {
		return nil, Problems{{File: pos.File, Msg: clip(msg), Hint: clip(hint)}}
	}
	what, when, ok := strings.Cut(text, "@")
	name, where, placed := strings.Cut(what, ":")
	if !ok || name == "" {
		return bad("is not of the form NAME[:120km]@6s[..9s]", "write for instance --cut tarn-holm@6s")
	}
	a := Act{Pos: pos, Verb: VerbCut, After: nodes.None, Circuit: nodes.None, Subject: name}
	var known []string
	for i := range s.Fibres {
		known = append(known, s.Fibres[i].Name)
		if s.Fibres[i].Name == name {
			a.Fibres = []nodes.FibreID{nodes.FibreID(i)}
		}
	}
	for i := range s.RiskGroups {
		known = append(known, s.RiskGroups[i].Name)
		if s.RiskGroups[i].Name == name && a.Fibres == nil {
			a.Fibres = slices.Clone(s.RiskGroups[i].Fibres)
		}
	}
	if a.Fibres == nil {
		return bad(fmt.Sprintf("no fibre or risk group is called %q", name), didYouMean(name, known))
	}
	if len(a.Fibres) == 1 {
		f := &s.Fibres[a.Fibres[0]]
		a.Where = f.Length / 2
		if placed {
			l, wrong := spot(where, f, s.Sites)
			if wrong != nil {
				return bad(wrong.msg, wrong.hint)
			}
			a.Where = l
		}
	} else if placed {
		return bad(name+" is a risk group of several fibres", "leave out the place")
	}
	start, end, repaired := strings.Cut(when, "..")
	at, wrong := s.instant(start)
	if wrong != nil {
		return bad(wrong.msg, wrong.hint)
	}
	a.At = at
	acts := []Act{a}
	if repaired {
		if a.At, wrong = s.instant(end); wrong != nil {
			return bad(wrong.msg, wrong.hint)
		}
		if a.At <= at {
			return bad(fmt.Sprintf("the repair at %s is not after the cut at %s", FormatTime(a.At), FormatTime(at)), "write a later instant")
		}
		a.Verb = VerbRepair
		acts = append(acts, a)
	}
	return acts, nil
}

// instant reads an instant within the run.
func (s *Scenario) instant(text string) (des.Time, *fault) {
	v, f := timeMeasure.positive(text)
	if f == nil && des.Time(v) > s.Run.Length {
		f = &fault{
			msg:  fmt.Sprintf("%s is after the end of the run at %s", text, FormatTime(s.Run.Length)),
			hint: "write an earlier instant",
		}
	}
	return des.Time(v), f
}
