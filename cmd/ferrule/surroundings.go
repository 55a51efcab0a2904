package main

import (
	"slices"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"
)

// setPrefix begins the names of variables that each hold one PATH=VALUE, as
// --set takes it.
const setPrefix = "FERRULE_SET_"

// setsAround returns what the environment lays over a scenario, in the order of
// the names of its variables.
func setsAround(env Env) []string {
	if env.Environ == nil {
		return nil
	}
	var found []string
	for _, v := range env.Environ() {
		if strings.HasPrefix(v, setPrefix) {
			found = append(found, v)
		}
	}
	slices.Sort(found)
	for i, v := range found {
		_, found[i], _ = strings.Cut(v, "=")
	}
	return found
}

// around puts what the environment says before what --set says, which so wins,
// and into the command that makes the same again.
func (c *call) around(cmd *cobra.Command) error {
	sets := setsAround(c.env)
	if len(sets) == 0 {
		return nil
	}
	all := append(sets, c.sets...)
	if err := cmd.Flags().Set("set", all[0]); err != nil { // marks the flag as given
		return err
	}
	return cmd.Flags().Lookup("set").Value.(pflag.SliceValue).Replace(all)
}
