package study

import (
	"math"
	"strings"
	"testing"

	"ferrule/des/measure"
)

// The study of coverage in small, with fixed seeds: each count must lie in the
// central 99.9 % of its binomial law. DEVELOPERS.md holds the whole study.
func TestCoverage(t *testing.T) {
	const experiments = 20
	lines, err := Coverage(t.Context(), Options{}, experiments, 2)
	if err != nil {
		t.Fatal(err)
	}
	judged := 0
	for _, c := range lines {
		t.Logf("%-55s %-50s %3d of %3d = %.3f %s", c.Cell, c.What, c.Hits, c.Experiments, c.Share(), c.Note)
		if c.Experiments < experiments {
			continue // too few were given an interval to be judged
		}
		judged++
		var low, high int
		switch {
		case strings.Contains(c.What, "within the run"): // a skewed law and few batches: short runs are known to cover less
			low, high = measure.CoverageRange(c.Experiments, 0.91, 0.999)
		case c.Low == 0.92:
			low, high = measure.CoverageRange(c.Experiments, 0.95, 0.999)
		case c.Low == 0:
			_, high = measure.CoverageRange(c.Experiments, 0.05, 0.999)
		default: // a power, between what is accepted
			low, _ = measure.CoverageRange(c.Experiments, max(0.01, c.Low), 0.999)
			_, high = measure.CoverageRange(c.Experiments, min(0.99, c.High), 0.999)
		}
		if c.Hits < low || c.Hits > high {
			t.Errorf("%s, %s: %d of %d, want %d to %d", c.Cell, c.What, c.Hits, c.Experiments, low, high)
		}
	}
	if judged < 12 {
		t.Errorf("%d lines judged", judged)
	}
}

// J. Cohen (1988), table 2.3: values from memory for one sample of 10 at
// two-sided 5 %: an effect of 1.0 has power 0.80, and one of 0 half of 5 %.
func TestPairedPower(t *testing.T) {
	for _, c := range []struct{ effect, want float64 }{{0, 0.025}, {1, 0.803}} {
		if got := pairedPower(c.effect, 10); math.Abs(got-c.want) > 0.003 {
			t.Errorf("effect %v: %v, want %v", c.effect, got, c.want)
		}
	}
}
