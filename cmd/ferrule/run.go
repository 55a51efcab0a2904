package main

import (
	"errors"
	"fmt"
	"time"

	"github.com/spf13/cobra"

	"ferrule/scenarios/result"
)

func newRun(env Env) *cobra.Command {
	c := &call{env: env, writes: suffixes{html: true}}
	plan, acts := asIs, ""
	cmd := &cobra.Command{
		Use:     "run [FILE]",
		Short:   "Run one replication of a scenario under one plan",
		Example: "  ferrule run coast.yaml --plan video-express --cut tarn-holm:120km@6s..9s",
		Args:    atMostOne,
		RunE: func(cmd *cobra.Command, args []string) error {
			sc, opt, err := c.begin(cmd, args)
			if err != nil {
				return err
			}
			if err := planOf(sc, "plan", plan); err != nil {
				return err
			}
			opt.plan = plan
			started := time.Now()
			r, err := runOrReplay(cmd, c, sc, opt, acts)
			if f := (*failure)(nil); errors.As(err, &f) {
				return err
			}
			var audit *result.Audit
			if r != nil {
				audit = &r.Audit
			}
			return finish(cmd.Context(), c, started, r, audit, err)
		},
	}
	c.flags(cmd)
	c.seedFlag(cmd, "of every random draw")
	cmd.Flags().StringVar(&plan, "plan", plan, "plan to run under")
	cmd.Flags().StringVar(&acts, "acts", "", "repeat what was done in a session of the console, saved in this file, under its plan and seed")
	return cmd
}

// runOrReplay runs a scenario, or repeats a session from the file acts.
func runOrReplay(cmd *cobra.Command, c *call, sc scenario, opt options, acts string) (*result.Run, error) {
	if acts == "" {
		return sc.Run(cmd.Context(), opt)
	}
	for _, flag := range []string{"plan", "seed"} {
		if cmd.Flags().Changed(flag) {
			return nil, &failure{statusMisuse, fmt.Errorf("--%s: the session of --acts has its own", flag)}
		}
	}
	saved, err := c.env.Files.Read(acts)
	if err != nil {
		return nil, &failure{statusMisuse, fmt.Errorf("--acts: %w", err)}
	}
	l, ok := sc.(led)
	if !ok {
		return nil, errors.New("this scenario cannot be led by hand")
	}
	return l.Replay(cmd.Context(), opt, saved, acts)
}
