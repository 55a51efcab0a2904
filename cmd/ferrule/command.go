// Command ferrule emulates a wide-area network packet by packet and shows
// which traffic deserves an optical circuit of its own.
//
// Each command stands in a file of its own and gets its world as an [Env].
// Results go to standard output; messages, progress, timings and logs go to
// standard error. Goroutines are left to the packages below, apart from the
// one that waits for an interrupt.
package main

import (
	"context"
	"errors"
	"fmt"

	"github.com/spf13/cobra"
)

// Exit statuses.
const (
	statusDone        = 0
	statusFailed      = 1   // the study, its audit, or writing what it gave
	statusMisuse      = 2   // of the command line or in the scenario
	statusMissed      = 3   // --gate: an objective is missed with confidence
	statusUndecided   = 4   // --gate: no objective is, but one is not met with confidence either
	statusInterrupted = 130 // the result, if any, is partial and says so
)

// A failure is an error with the status it exits with. Every other error that
// a command returns is misuse.
type failure struct {
	status int
	err    error
}

func (f *failure) Error() string { return f.err.Error() }
func (f *failure) Unwrap() error { return f.err }

// failed wraps err, which may be nil, as what exits with statusFailed.
func failed(err error) error {
	if err == nil {
		return nil
	}
	return &failure{statusFailed, err}
}

// Main runs one command and returns the exit status of the process: 0 when it
// is done, 1 when it failed, 2 when it was misused, 3 when it did not pass a gate, 4 when that is
// undecided, 130 when ctx ended it.
func Main(ctx context.Context, env Env, args []string) int {
	root := newRoot(env)
	root.SetArgs(args)
	root.SetOut(env.Out)
	root.SetErr(env.ErrOut)
	err := root.ExecuteContext(ctx)
	if err == nil {
		return statusDone
	}
	fmt.Fprintf(env.ErrOut, "ferrule: %v\n", err)
	var f *failure
	if errors.As(err, &f) {
		return f.status
	}
	return statusMisuse
}

func newRoot(env Env) *cobra.Command {
	root := &cobra.Command{
		Use:   "ferrule",
		Short: "Which traffic deserves a circuit of its own?",
		Long: "Ferrule emulates a wide-area network packet by packet: routers above, optical\n" +
			"circuits below, one controller over both. It shows what each class of traffic\n" +
			"gets today, after a move onto circuits, and through a fibre cut.",
		SilenceUsage:  true,
		SilenceErrors: true,
	}
	root.AddCommand(newRun(env), newBatch(env), newCompare(env), newFailures(env), newCheck(env), newConsole(env), newSize(env), newCoverage(env), newScenarios(env), newVersion(env))
	return root
}

// exactly refuses any other number of arguments than n and says how the
// command is used.
func exactly(n int) cobra.PositionalArgs {
	return func(cmd *cobra.Command, args []string) error {
		if len(args) != n {
			return fmt.Errorf("%d arguments given; write %s", len(args), cmd.UseLine())
		}
		return nil
	}
}

// atMostOne takes no argument or the FILE.
func atMostOne(cmd *cobra.Command, args []string) error {
	if len(args) > 1 {
		return fmt.Errorf("%d files given; write %s", len(args), cmd.UseLine())
	}
	return nil
}
