package main

import (
	"fmt"
	"strconv"
	"strings"
	"time"

	"github.com/spf13/cobra"
)

// newCoverage studies the program itself: how often its intervals hold the
// truth. It writes one table in markdown, which DEVELOPERS.md quotes.
func newCoverage(env Env) *cobra.Command {
	experiments, seconds, cores := 400, 10.0, 0
	cmd := &cobra.Command{
		Use:   "coverage",
		Short: "Measure how often the intervals hold the truth, on queues with known answers",
		Args:  exactly(0),
		RunE: func(cmd *cobra.Command, _ []string) error {
			if experiments < 10 || experiments > 100_000 {
				return fmt.Errorf("--experiments: %d is out of range; write 10 to 100000", experiments)
			}
			if !(seconds >= 1 && seconds <= 10_000) {
				return fmt.Errorf("--seconds: %v is out of range; write 1 to 10000", seconds)
			}
			started := time.Now()
			lines, err := env.Studio.Coverage(cmd.Context(), options{cores: cores, progress: newProgress(env).show}, experiments, seconds)
			newProgress(env).clear()
			if _, werr := fmt.Fprint(env.Out, coverageTable(lines)); werr != nil {
				return failed(fmt.Errorf("standard output: %w", werr))
			}
			fmt.Fprintf(env.ErrOut, "ferrule: took %.3g s\n", time.Since(started).Seconds())
			if cmd.Context().Err() != nil {
				return &failure{statusInterrupted, fmt.Errorf("interrupted: the table is partial")}
			}
			return failed(err)
		},
	}
	f := cmd.Flags()
	f.IntVar(&experiments, "experiments", experiments, "experiments of each kind, of ten seeds each")
	f.Float64Var(&seconds, "seconds", seconds, "measured length of a run; a second is 625 or 1000 packets")
	f.IntVar(&cores, "cores", 0, "cores to use; the results do not depend on it (default all)")
	return cmd
}

// A covered is a line of a study of coverage: study.Covered.
type covered struct {
	cell, what, truth string
	hits, experiments int
	low, high         float64
	note              string
}

// leastJudged is how many experiments a line takes to be judged: fewer tell 95
// from 90 of 100 by luck alone.
const leastJudged = 100

// coverageTable lays lines out in markdown.
func coverageTable(lines []covered) string {
	var b strings.Builder
	b.WriteString("| run | what | truth | hits | of | share | asked for | |\n| --- | --- | ---: | ---: | ---: | ---: | ---: | --- |\n")
	for _, l := range lines {
		share, verdict := "-", "too few to judge"
		s := float64(l.hits) / float64(l.experiments)
		if l.experiments > 0 {
			share = strconv.FormatFloat(100*s, 'f', 1, 64) + " %"
		}
		switch {
		case l.experiments < leastJudged:
		case s < l.low || s > l.high:
			verdict = "OUTSIDE"
		default:
			verdict = "ok"
		}
		fmt.Fprintf(&b, "| %s | %s | %s | %d | %d | %s | %.1f to %.1f %% | %s |\n", l.cell, l.what, l.truth, l.hits, l.experiments, share,
			100*l.low, 100*l.high, strings.TrimSuffix(verdict+"; "+l.note, "; "))
	}
	return b.String()
}
