package main

import (
	"errors"
	"time"

	"github.com/spf13/cobra"
)

func newCheck(env Env) *cobra.Command {
	c := &call{env: env}
	plan := asIs
	cmd := &cobra.Command{
		Use:     "check [FILE]",
		Short:   "Validate a scenario and say what can be said before it runs",
		Long:    "Check validates a scenario and shows the load of every link, normal and under the\nworst single fibre cut, what it noticed, which aggregates are candidates for a\ncircuit of their own, and what a run will take.",
		Example: "  ferrule check coast.yaml --set aggregates.video-tn.load=600Mbps",
		Args:    atMostOne,
		RunE: func(cmd *cobra.Command, args []string) error {
			if c.asksPage() {
				return errors.New("--out: a check has no report; end the file in .json, .csv, .md or .txt")
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
			r, err := sc.Check(cmd.Context(), opt)
			return finish(cmd.Context(), c, started, r, nil, err)
		},
	}
	c.flags(cmd)
	cmd.Flags().StringVar(&plan, "plan", plan, "plan to check under")
	return cmd
}
