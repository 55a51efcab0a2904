package study

import (
	"fmt"
	"runtime"

	"go.uber.org/zap"

	"ferrule/scenarios"
	"ferrule/scenarios/result"
)

// Options say how a scenario is studied. The zero value studies it as it
// stands, with the seed of the file, on all cores, in silence.
type Options struct {
	Plan     string      // empty: the scenario as it stands, scenarios.AsIs
	Seed     uint64      // 0: the seed of the file
	Cores    int         // cores to use; 0 or less: as many as the program may use
	Log      *zap.Logger // nil: nothing is logged
	Progress func(done, total float64)
	Margin   float64 // in a comparison, the share of a limit or a figure that does not matter; 0: DefaultMargin
	Store    Store   // keeps finished replications of studies of several; nil: none are kept
	Runs     bool    // a batch or a comparison also hands out the runs of its first seed

	settled func([]*result.Gate) // told how a comparison stands in settled periods
}

// DefaultMargin is the share of a limit, or of the figure where there is no
// limit, below which a difference does not matter to a change board. Common
// practice, no source.
const DefaultMargin = 0.01

// margin is the margin asked for.
func (o Options) margin() float64 {
	if o.Margin == 0 {
		return DefaultMargin
	}
	return o.Margin
}

// plan is the name of the plan asked for.
func (o Options) plan() string {
	if o.Plan == "" {
		return scenarios.AsIs
	}
	return o.Plan
}

// seed is the seed asked for.
func (o Options) seed(sc *scenarios.Scenario) uint64 {
	if o.Seed == 0 {
		return sc.Run.Seed
	}
	return o.Seed
}

// cores is the number of cores to use, at least 1.
func (o Options) cores() int {
	if o.Cores < 1 {
		return runtime.GOMAXPROCS(0)
	}
	return o.Cores
}

// Plans lists the names of the plans of sc, scenarios.AsIs first, in the order
// of the file.
func Plans(sc *scenarios.Scenario) []string {
	names := make([]string, len(sc.Plans))
	for i := range sc.Plans {
		names[i] = sc.Plans[i].Name
	}
	return names
}

// Seeds lists n seeds: first, first+1, and so on, modulo 2^64.
func Seeds(first uint64, n int) []uint64 {
	seeds := make([]uint64, n)
	for i := range seeds {
		seeds[i] = first + uint64(i)
	}
	return seeds
}

// checkSeeds refuses a seed that is given twice: its replications would be
// one, counted twice.
func checkSeeds(seeds []uint64) error {
	seen := make(map[uint64]bool, len(seeds))
	for _, s := range seeds {
		if seen[s] {
			return fmt.Errorf("seed %d is given twice", s)
		}
		seen[s] = true
	}
	return nil
}
