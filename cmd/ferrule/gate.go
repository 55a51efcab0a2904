package main

import (
	"encoding/xml"
	"errors"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"github.com/spf13/cobra"

	"ferrule/scenarios/result"
)

// A gateFlag is --gate: whether, and on which plan, the objectives decide the
// exit status.
type gateFlag struct {
	asked string // the flag as given; "" when it is not
	plans []string
}

// allPlans is what --gate without a plan asks for.
const allPlans = "all"

// flag adds --gate; named says that it may name a plan.
func (g *gateFlag) flag(cmd *cobra.Command, named bool) {
	f := cmd.Flags()
	if !named {
		f.BoolFunc("gate", "exit with 3 when an objective is missed with confidence, 4 when that is undecided", func(text string) error {
			on, err := strconv.ParseBool(text)
			if g.asked = ""; on {
				g.asked = allPlans
			}
			return err
		})
		return
	}
	f.StringVar(&g.asked, "gate", "", "as --gate=PLAN, or of every plan but the base: exit with 3 when an objective is missed with confidence, 4 when that is undecided")
	f.Lookup("gate").NoOptDefVal = allPlans
}

// check notes which plans the gate is about; plans[0] is the base.
func (g *gateFlag) check(sc scenario, plans []string) error {
	switch {
	case g.asked == "":
	case slices.Contains(plans, g.asked):
		g.plans = []string{g.asked}
	case g.asked == allPlans:
		g.plans = plans[1:]
	default:
		return fmt.Errorf("--gate: %q is not compared; write one of %s", g.asked, strings.Join(plans, ", "))
	}
	return nil
}

// pass is nil when every gate asked for is met with confidence, else the
// failure to exit with: missed before undecided.
func (g *gateFlag) pass(r result.Result) error {
	if g.asked == "" {
		return nil
	}
	var missed, open []string
	gates := gatesOf(r)
	for _, x := range gates {
		if g.plans != nil && !slices.Contains(g.plans, x.Plan) {
			continue
		}
		switch x.Standing {
		case result.Missed:
			missed = append(missed, x.Plan)
		case result.Open:
			open = append(open, x.Plan)
		case result.Met:
		default:
			panic("main: unknown standing " + strconv.Quote(string(x.Standing)))
		}
	}
	switch {
	case len(gates) == 0:
		return &failure{statusUndecided, errors.New("the gate is undecided: no class has an objective")}
	case len(missed) > 0:
		return &failure{statusMissed, errors.New("the gate is missed under " + strings.Join(missed, ", "))}
	case len(open) > 0:
		return &failure{statusUndecided, errors.New("the gate is undecided under " + strings.Join(open, ", "))}
	default:
		return nil
	}
}

// gatesOf lists the gates that a result holds.
func gatesOf(r result.Result) []result.Gate {
	switch r := r.(type) {
	case *result.Batch:
		return r.Gates
	case *result.Comparison:
		return r.Gates
	default:
		return nil
	}
}

// A suites is a report in the form that JUnit gave pipelines: a suite for each
// plan, a case for each objective. What is missed is a failure, what is
// undecided an error.
type suites struct {
	XMLName  xml.Name `xml:"testsuites"`
	Name     string   `xml:"name,attr"`
	Tests    int      `xml:"tests,attr"`
	Failures int      `xml:"failures,attr"`
	Errors   int      `xml:"errors,attr"`
	Suites   []suite  `xml:"testsuite"`
}

type suite struct {
	Name     string     `xml:"name,attr"`
	Tests    int        `xml:"tests,attr"`
	Failures int        `xml:"failures,attr"`
	Errors   int        `xml:"errors,attr"`
	Cases    []testCase `xml:"testcase"`
}

type testCase struct {
	Class   string   `xml:"classname,attr"`
	Name    string   `xml:"name,attr"`
	Failure *finding `xml:"failure,omitempty"`
	Error   *finding `xml:"error,omitempty"`
	Out     string   `xml:"system-out,omitempty"`
}

type finding struct {
	Type    string `xml:"type,attr"`
	Message string `xml:"message,attr"`
}

// asJUnit writes how the objectives stand. A result without any, such as a
// single run, cannot be written so.
func asJUnit(r result.Result, _ bool) ([]byte, error) {
	gates := gatesOf(r)
	if gates == nil {
		return nil, errors.New("a file in .xml holds how objectives stand; only a batch or a comparison of classes with objectives has that")
	}
	out := suites{Name: "ferrule " + result.HeadOf(r).Scenario}
	for _, g := range gates {
		s := suite{Name: g.Plan, Tests: len(g.Holds)}
		for _, h := range g.Holds {
			c := testCase{Class: g.Plan + "." + h.Class, Name: fmt.Sprintf("%s %s at most %s %s", h.Period, h.Figure, short(h.Limit), h.Unit)}
			switch h.Standing {
			case result.Missed:
				c.Failure = &finding{string(h.Standing), h.Text}
				s.Failures++
			case result.Open:
				c.Error = &finding{string(h.Standing), h.Text}
				s.Errors++
			default:
				c.Out = h.Text
			}
			s.Cases = append(s.Cases, c)
		}
		out.Tests += s.Tests
		out.Failures += s.Failures
		out.Errors += s.Errors
		out.Suites = append(out.Suites, s)
	}
	b, err := xml.MarshalIndent(out, "", "  ")
	if err != nil {
		return nil, err
	}
	return append([]byte(xml.Header), append(b, '\n')...), nil
}

func short(v float64) string { return strconv.FormatFloat(v, 'g', -1, 64) }

// shareOf reads a share such as 5% or 0.05, above 0 and up to most.
func shareOf(flag, text string, most float64) (float64, error) {
	number, percent := strings.CutSuffix(strings.TrimSpace(text), "%")
	v, err := strconv.ParseFloat(strings.TrimSpace(number), 64)
	if percent {
		v /= 100
	}
	if err != nil || math.IsNaN(v) || !(v > 0) || v > most {
		return 0, fmt.Errorf("--%s: %q is no share; write for instance 5%%, above 0 and up to %g%%", flag, text, 100*most)
	}
	return v, nil
}
