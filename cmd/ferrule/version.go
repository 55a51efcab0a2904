package main

import (
	"fmt"
	"runtime/debug"

	"github.com/spf13/cobra"
)

func newVersion(env Env) *cobra.Command {
	return &cobra.Command{
		Use:   "version",
		Short: "Print the version",
		Args:  exactly(0),
		RunE: func(*cobra.Command, []string) error {
			_, err := fmt.Fprintf(env.Out, "ferrule %s\n", buildVersion())
			return failed(err)
		},
	}
}

// buildVersion is the version of this build, or "unknown".
func buildVersion() string { return versionOf(debug.ReadBuildInfo()) }

// versionOf is the module's version, else the revision it was built from, with
// "+dirty" when files were changed, else "unknown".
func versionOf(info *debug.BuildInfo, ok bool) string {
	if !ok {
		return "unknown"
	}
	if v := info.Main.Version; v != "" && v != "(devel)" {
		return v
	}
	revision, dirty := "", ""
	for _, s := range info.Settings {
		switch {
		case s.Key == "vcs.revision":
			revision = s.Value
		case s.Key == "vcs.modified" && s.Value == "true":
			dirty = "+dirty"
		}
	}
	if revision == "" {
		return "unknown"
	}
	return revision[:min(len(revision), 12)] + dirty
}
