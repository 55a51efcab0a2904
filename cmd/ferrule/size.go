package main

import (
	"errors"
	"fmt"
	"time"

	"github.com/spf13/cobra"

	"ferrule/scenarios/result"
)

// A sizeQuestion asks for the least size of a circuit: study.SizeQuestion.
type sizeQuestion struct {
	circuit           string
	low, high, atMost int
	in                input
}

// maxSlots is above what any fibre has.
const maxSlots = 100_000

func newSize(env Env) *cobra.Command {
	c := &call{env: env}
	plan := asIs
	var q sizeQuestion
	cmd := &cobra.Command{
		Use:   "size [FILE] --circuit NAME",
		Short: "Find the least slots of a circuit that keep the objectives of what it carries",
		Example: "  ferrule size coast.yaml --circuit vx --plan video-express\n" +
			"  ferrule size --circuit vx --plan video-express --set aggregates.video-tn.load=3Gbps",
		Args: atMostOne,
		RunE: func(cmd *cobra.Command, args []string) error {
			if q.circuit == "" {
				return errors.New("--circuit: no circuit is given; write its name")
			}
			for _, f := range []struct {
				name string
				n    int
			}{{"from", q.low}, {"to", q.high}} {
				if cmd.Flags().Changed(f.name) && (f.n < 1 || f.n > maxSlots) {
					return fmt.Errorf("--%s: %d is out of range; write 1 to %d", f.name, f.n, maxSlots)
				}
			}
			if q.high != 0 && q.high < q.low {
				return fmt.Errorf("--to: %d lies below --from %d", q.high, q.low)
			}
			if q.atMost < leastFirst || q.atMost > maxSeeds {
				return fmt.Errorf("--at-most: %d is out of range; write %d to %d", q.atMost, leastFirst, maxSeeds)
			}
			sc, opt, err := c.begin(cmd, args)
			if err != nil {
				return err
			}
			if err := planOf(sc, "plan", plan); err != nil {
				return err
			}
			opt.plan, q.in = plan, c.in
			started := time.Now()
			r, err := sc.Size(cmd.Context(), opt, q)
			var audit *result.Audit
			if r != nil {
				audit = &r.Audit
			}
			return finish(cmd.Context(), c, started, r, audit, err)
		},
	}
	c.flags(cmd)
	c.resumeFlag(cmd)
	c.seedFlag(cmd, "first seed; the others follow it")
	f := cmd.Flags()
	f.StringVar(&q.circuit, "circuit", "", "the circuit whose size is looked for")
	f.StringVar(&plan, "plan", plan, "plan to run under")
	f.IntVar(&q.low, "from", 1, "least slots to try")
	f.IntVar(&q.high, "to", 0, "most slots to try (default four times what carries the load)")
	f.IntVar(&q.atMost, "at-most", 40, "seeds for one size at most")
	return cmd
}
