package main

import (
	"fmt"
	"slices"
	"time"

	"github.com/spf13/cobra"

	"ferrule/scenarios/result"
)

// leastCompare is the fewest seeds that give a difference an interval, and
// defaultCompare as many as give verdicts on up to 25 figures with objectives.
const (
	leastCompare   = 2
	defaultCompare = 10
)

func newCompare(env Env) *cobra.Command {
	c := &call{env: env, writes: suffixes{html: true, xml: true}}
	base, n, margin := asIs, defaultCompare, "1%"
	var only, growth []string
	cmd := &cobra.Command{
		Use:     "compare [FILE]",
		Short:   "Set each plan beside the network as it is, on the same seeds",
		Example: "  ferrule compare coast.yaml --seeds 16 --cut tarn-holm@6s",
		Args:    atMostOne,
		RunE: func(cmd *cobra.Command, args []string) error {
			if n < leastCompare || n > maxSeeds {
				return fmt.Errorf("--seeds: %d is out of range; write %d to %d", n, leastCompare, maxSeeds)
			}
			sc, opt, err := c.begin(cmd, args)
			if err != nil {
				return err
			}
			plans, err := plansAgainst(sc, base, only)
			if err != nil {
				return err
			}
			if opt.margin, err = shareOf("margin", margin, 0.5); err != nil {
				return err
			}
			if err := c.gate.check(sc, append([]string{base}, plans...)); err != nil {
				return err
			}
			factors, err := factorsOf(growth)
			if err != nil {
				return err
			}
			started := time.Now()
			var r *result.Comparison
			if factors == nil {
				r, err = sc.Compare(cmd.Context(), opt, base, plans, seedsFrom(opt.seed, n))
			} else {
				r, err = sc.Grow(cmd.Context(), opt, base, plans, seedsFrom(opt.seed, n), factors)
			}
			var audit *result.Audit
			if r != nil {
				audit = &r.Audit
			}
			return finish(cmd.Context(), c, started, r, audit, err)
		},
	}
	c.flags(cmd)
	c.gate.flag(cmd, true)
	c.resumeFlag(cmd)
	c.seedFlag(cmd, "first seed; the others follow it")
	cmd.Flags().StringVar(&base, "base", base, "plan the others are compared with")
	cmd.Flags().StringArrayVar(&only, "plan", nil, "compare this plan only; may be repeated (default all)")
	cmd.Flags().StringSliceVar(&growth, "growth", nil, "all loads times these factors, as 100%,130%,160%: where each plan breaks")
	cmd.Flags().StringVar(&margin, "margin", margin, "share of a limit, or of a figure without one, that does not matter")
	cmd.Flags().IntVar(&n, "seeds", n, "number of seeds, the same under every plan")
	return cmd
}

// factorsOf reads the factors of --growth.
func factorsOf(texts []string) ([]float64, error) {
	var out []float64
	for _, t := range texts {
		f, err := shareOf("growth", t, 100)
		if err != nil {
			return nil, err
		}
		if n := len(out); n > 0 && f <= out[n-1] {
			return nil, fmt.Errorf("--growth: %s does not follow what is before it; write factors that rise", t)
		}
		out = append(out, f)
	}
	return out, nil
}

// plansAgainst lists the plans to set beside base: those of only, or all.
func plansAgainst(sc scenario, base string, only []string) ([]string, error) {
	if err := planOf(sc, "base", base); err != nil {
		return nil, err
	}
	for i, p := range only {
		if err := planOf(sc, "plan", p); err != nil {
			return nil, err
		}
		if p == base {
			return nil, fmt.Errorf("--plan: %q is the base itself", p)
		}
		if slices.Contains(only[:i], p) {
			return nil, fmt.Errorf("--plan: %q is given twice", p)
		}
	}
	if only != nil {
		return only, nil
	}
	plans := slices.DeleteFunc(slices.Clone(sc.Plans()), func(p string) bool { return p == base })
	if len(plans) == 0 {
		return nil, fmt.Errorf("the scenario has no plan to set beside %q; write one under the key plans", base)
	}
	return plans, nil
}
