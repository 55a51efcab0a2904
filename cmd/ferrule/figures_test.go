package main

import (
	"testing"

	"ferrule/scenarios"
	"ferrule/scenarios/result"
)

// A scenario sets objectives on figures that a result has, by the same words.
func TestObjectivesNameFiguresOfAResult(t *testing.T) {
	v := new(1.0)
	all := result.Distribution{Min: v, Mean: v, P50: v, P95: v, P99: v, P999: v, Max: v}
	o := result.Outcome{LossRatio: v, ThroughputBps: v, DelayS: all, PDVS: all, IPDVS: all, JitterS: v, ReorderedRatio: v,
		OutageS: v, RecoveryS: v, Transfers: &result.Transfers{TimeS: all}}
	for f := scenarios.FigureDelayMean; f <= scenarios.FigureTransferP99; f++ {
		if _, ok := o.Figure(f.String()); !ok {
			t.Errorf("no result has a figure %q", f)
		}
	}
}
