package main

import (
	"fmt"
	"time"

	"github.com/spf13/cobra"

	"ferrule/scenarios/result"
)

// leastBatch is the fewest seeds that give an interval, maxSeeds more than any
// study can use. A batch that looks for its precision begins with leastFirst
// seeds and ends with defaultCap.
const (
	leastBatch = 2
	maxSeeds   = 100_000
	leastFirst = 10
	defaultCap = 200
)

func newBatch(env Env) *cobra.Command {
	c := &call{env: env, writes: suffixes{html: true, xml: true}}
	plan, n, within := asIs, 8, ""
	p := precision{figure: result.FigDelayP99, atMost: defaultCap}
	cmd := &cobra.Command{
		Use:   "batch [FILE]",
		Short: "Run replications with seeds of their own and give means with intervals",
		Example: "  ferrule batch coast.yaml --seeds 20 --plan video-express --out coast.json\n" +
			"  ferrule batch coast.yaml --precision 5% --figure delay-p99 --resume state",
		Args: atMostOne,
		RunE: func(cmd *cobra.Command, args []string) error {
			if n < leastBatch || n > maxSeeds {
				return fmt.Errorf("--seeds: %d is out of range; write %d to %d", n, leastBatch, maxSeeds)
			}
			if err := p.read(cmd, within, n); err != nil {
				return err
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
			var r *result.Batch
			if within == "" {
				r, err = sc.Batch(cmd.Context(), opt, seedsFrom(opt.seed, n))
			} else {
				r, err = sc.BatchUntil(cmd.Context(), opt, p)
			}
			var audit *result.Audit
			if r != nil {
				audit = &r.Audit
			}
			return finish(cmd.Context(), c, started, r, audit, err)
		},
	}
	c.flags(cmd)
	c.gate.flag(cmd, false)
	c.resumeFlag(cmd)
	c.seedFlag(cmd, "first seed; the others follow it")
	f := cmd.Flags()
	f.StringVar(&plan, "plan", plan, "plan to run under")
	f.IntVar(&n, "seeds", n, "number of replications; with --precision those before the first look, 10 at least")
	f.StringVar(&within, "precision", "", "add seeds until the relative error of --figure is so small, as 5%")
	f.StringVar(&p.figure, "figure", p.figure, "with --precision: the figure, of every class that has it")
	f.StringArrayVar(&p.periods, "period", nil, "with --precision: in this period only; may be repeated (default all)")
	f.IntVar(&p.atMost, "at-most", p.atMost, "with --precision: seeds at most")
	return cmd
}

// read takes --precision and the flags that belong to it.
func (p *precision) read(cmd *cobra.Command, within string, seeds int) error {
	if within == "" {
		for _, f := range []string{"figure", "period", "at-most"} {
			if cmd.Flags().Changed(f) {
				return fmt.Errorf("--%s: belongs to --precision; write for instance --precision 5%%", f)
			}
		}
		return nil
	}
	var err error
	if p.relative, err = shareOf("precision", within, 0.5); err != nil {
		return err
	}
	p.first = leastFirst
	if cmd.Flags().Changed("seeds") {
		if p.first = seeds; seeds < leastFirst {
			return fmt.Errorf("--seeds: with --precision %d at least come before the first look", leastFirst)
		}
	}
	if p.atMost < p.first || p.atMost > maxSeeds {
		return fmt.Errorf("--at-most: %d is out of range; write %d to %d", p.atMost, p.first, maxSeeds)
	}
	return nil
}
