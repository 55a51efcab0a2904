package study

import (
	"testing"

	"ferrule/des/measure"
	"ferrule/scenarios/result"
)

// A difference that is sure and below a hundredth of the limit, or surely
// within it, does not matter; one that could be larger does.
func TestSlight(t *testing.T) {
	limit := 20e-3
	for _, c := range []struct {
		mean, half float64
		limit      *float64
		want       bool
		why        string
	}{
		{-4e-6, 1e-6, &limit, true, "sure, 0.02 % of the limit"},
		{-300e-6, 1e-6, &limit, false, "sure, 1.5 % of the limit"},
		{50e-6, 100e-6, &limit, true, "unsure, surely below 0.2 ms"},
		{50e-6, 300e-6, &limit, false, "unsure, may pass 0.2 ms"},
		{0.5e-3, 0.1e-3, nil, false, "5 % of a figure of 10 ms"},
		{0.05e-3, 0.01e-3, nil, true, "0.5 % of a figure of 10 ms"},
	} {
		base, plan := 10e-3, 10e-3+c.mean
		x := result.Difference{Base: &base, Plan: &plan, Limit: c.limit}
		if got := slight(measure.Interval{Mean: c.mean, Half: c.half, N: 8}, &x); got != c.want {
			t.Errorf("%s: slight = %v", c.why, got)
		}
	}
}
