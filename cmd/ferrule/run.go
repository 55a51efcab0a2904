package main

import (
	"time"

	"github.com/spf13/cobra"

	"ferrule/scenarios/result"
)

func newRun(env Env) *cobra.Command {
	c := &call{env: env}
	plan := asIs
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
			r, err := sc.Run(cmd.Context(), opt)
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
	return cmd
}
