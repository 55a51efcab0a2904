package main

import (
	"fmt"
	"time"

	"github.com/spf13/cobra"
)

func newCheck(env Env) *cobra.Command {
	c := &call{env: env}
	plan, measured := asIs, ""
	cmd := &cobra.Command{
		Use:   "check [FILE]",
		Short: "Validate a scenario and say what can be said before it runs",
		Long:  "Check validates a scenario and shows the load of every link, normal and under the\nworst single fibre cut, what it noticed, which aggregates are candidates for a\ncircuit of their own, and what a run will take.\nWith --measured it prints the model minus what was measured: rows what,of,from,to,value,\nsuch as link,ab,a,b,400Mbps (a circuit's load) or delay,gold,a,b,3.2ms (a class's mean).",

		Example: "  ferrule check coast.yaml --set aggregates.video-tn.load=600Mbps",
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
			if measured != "" {
				opt.measured.name = measured
				if opt.measured.data, err = c.env.Files.Read(measured); err != nil {
					return fmt.Errorf("--measured: %w", err)
				}
			}
			started := time.Now()
			r, err := sc.Check(cmd.Context(), opt)
			return finish(cmd.Context(), c, started, r, nil, err)
		},
	}
	c.flags(cmd)
	cmd.Flags().StringVar(&plan, "plan", plan, "plan to check under")
	cmd.Flags().StringVar(&measured, "measured", "", "CSV file of link loads and delays to hold the scenario to")
	return cmd
}
