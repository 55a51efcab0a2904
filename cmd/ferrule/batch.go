package main

import (
	"fmt"
	"time"

	"github.com/spf13/cobra"

	"ferrule/scenarios/result"
)

// leastBatch is the fewest seeds that give an interval, maxSeeds more than any
// study can use.
const (
	leastBatch = 2
	maxSeeds   = 100_000
)

func newBatch(env Env) *cobra.Command {
	c := &call{env: env}
	plan, n := asIs, 8
	cmd := &cobra.Command{
		Use:     "batch [FILE]",
		Short:   "Run replications with seeds of their own and give means with intervals",
		Example: "  ferrule batch coast.yaml --seeds 20 --plan video-express --out coast.json",
		Args:    atMostOne,
		RunE: func(cmd *cobra.Command, args []string) error {
			if n < leastBatch || n > maxSeeds {
				return fmt.Errorf("--seeds: %d is out of range; write %d to %d", n, leastBatch, maxSeeds)
			}
			sc, opt, err := c.begin(cmd, args)
			if err != nil {
				return err
			}
			if err := planOf(sc, "plan", plan); err != nil {
				return err
			}
			opt.plan = plan
			started := time.Now()
			r, err := sc.Batch(cmd.Context(), opt, seedsFrom(opt.seed, n))
			var audit *result.Audit
			if r != nil {
				audit = &r.Audit
			}
			return finish(cmd.Context(), c, started, r, audit, err)
		},
	}
	c.flags(cmd)
	c.gate.flag(cmd, false)
	c.seedFlag(cmd, "first seed; the others follow it")
	cmd.Flags().StringVar(&plan, "plan", plan, "plan to run under")
	cmd.Flags().IntVar(&n, "seeds", n, "number of replications")
	return cmd
}
