package main

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"path/filepath"
	"runtime"
	"slices"
	"strings"
	"time"

	"github.com/spf13/cobra"
	"go.uber.org/zap"
	"go.uber.org/zap/zapcore"

	"ferrule/scenarios/result"
)

// asIs is the plan that is the scenario as it stands.
const asIs = "as-is"

// A call holds the flags that all studies share, and what came of them.
type call struct {
	env    Env
	seed   uint64
	cores  int
	cuts   []string
	sets   []string
	format string
	outs   []string
	level  string
	gate   gateFlag
	resume string
	writes suffixes // beside the forms that every study has
	in     input    // what was loaded
	again  string   // the command that makes the same again
}

// suffixes are forms of file that not every study can be written in.
type suffixes struct{ html, xml bool }

// suitable refuses a file that the study cannot fill, before anything runs.
func (s suffixes) suitable(study, path string) error {
	switch ext := filepath.Ext(path); {
	case ext == ".html" && !s.html:
		return fmt.Errorf("%s: %s has no report; end the file in .json, .csv, .md or .txt", path, study)
	case ext == ".xml" && !s.xml:
		return fmt.Errorf("%s: only batch and compare say how objectives stand; end the file in .json, .csv, .md or .txt", path)
	}
	return nil
}

// flags adds the flags that all studies share to cmd.
func (c *call) flags(cmd *cobra.Command) {
	f := cmd.Flags()
	f.IntVar(&c.cores, "cores", 0, "cores to use; the results do not depend on it (default all)")
	f.StringArrayVar(&c.cuts, "cut", nil, "cut a fibre, as NAME[:120km]@6s[..9s]; may be repeated")
	f.StringArrayVar(&c.sets, "set", nil, "lay PATH=VALUE over the scenario, as circuits.vx.slots=4; may be repeated; variables FERRULE_SET_... of the environment, PATH=VALUE each, go before")
	f.StringVar(&c.format, "format", "text", "of standard output: text, json, csv or md")
	f.StringArrayVar(&c.outs, "out", nil, "write a file too, by suffix .html (a report), .json, .csv, .md, .txt or .xml (JUnit); may be repeated")
	f.StringVar(&c.level, "log", "warn", "least level logged on standard error: debug, info, warn or error")
}

// resumeFlag adds --resume.
func (c *call) resumeFlag(cmd *cobra.Command) {
	cmd.Flags().StringVar(&c.resume, "resume", "", "keep each finished replication in this folder and repeat none that is there")
}

// seedFlag adds --seed.
func (c *call) seedFlag(cmd *cobra.Command, usage string) {
	cmd.Flags().Uint64Var(&c.seed, "seed", 0, usage+" (default the scenario's)")
}

// begin checks the flags and loads the scenario, before anything takes time.
func (c *call) begin(cmd *cobra.Command, args []string) (scenario, options, error) {
	if _, err := formatNamed(c.format); err != nil {
		return nil, options{}, fmt.Errorf("--format: %w", err)
	}
	for _, path := range c.outs {
		if _, err := c.formatOf(path); err != nil {
			return nil, options{}, fmt.Errorf("--out: %w", err)
		}
		if err := c.writes.suitable(cmd.Name(), path); err != nil {
			return nil, options{}, fmt.Errorf("--out: %w", err)
		}
	}
	if cmd.Flags().Changed("cores") && c.cores < 1 {
		return nil, options{}, fmt.Errorf("--cores: %d is out of range; write 1 or more", c.cores)
	}
	log, err := newLog(c.env, c.level)
	if err != nil {
		return nil, options{}, err
	}
	if err := c.around(cmd); err != nil {
		return nil, options{}, err
	}
	in, err := c.input(args)
	if err != nil {
		return nil, options{}, err
	}
	in.sets, in.cuts = c.sets, c.cuts
	c.in = in
	sc, err := c.env.Studio.Load(in)
	if err != nil {
		return nil, options{}, fmt.Errorf("the scenario is not sound:\n%w", err)
	}
	c.again = commandLine(cmd, args)
	opt := options{seed: c.seed, cores: c.cores, log: log, runs: c.asksPage(), progress: newProgress(c.env).show}
	if !cmd.Flags().Changed("seed") {
		opt.seed = sc.Seed()
	}
	if c.resume != "" {
		s, err := openState(c.resume, sc.Hash(), buildVersion())
		if err != nil {
			return nil, options{}, fmt.Errorf("--resume: %w", err)
		}
		opt.store = s
	}
	if opt.cores == 0 {
		opt.cores = runtime.GOMAXPROCS(0)
	}
	return sc, opt, nil
}

// input reads the FILE, takes the embedded scenario of that name where there is
// no such file, or the embedded demo.
func (c *call) input(args []string) (input, error) {
	if len(args) == 0 {
		in, err := c.env.Studio.Open("")
		return in, failed(err)
	}
	data, err := c.env.Files.Read(args[0])
	if errors.Is(err, fs.ErrNotExist) {
		for _, e := range c.env.Studio.Library() {
			if e.name == args[0] {
				in, err := c.env.Studio.Open(e.name)
				return in, failed(err)
			}
		}
		return input{}, fmt.Errorf("%s: there is no such file, and no embedded scenario of that name", args[0])
	}
	if err != nil {
		return input{}, err
	}
	return input{name: args[0], data: data, files: c.env.Files.Beside(args[0])}, nil
}

// planOf checks that the scenario has a plan of that name.
func planOf(sc scenario, flag, plan string) error {
	if plans := sc.Plans(); !slices.Contains(plans, plan) {
		return fmt.Errorf("--%s: no plan is called %q; write one of %s", flag, plan, strings.Join(plans, ", "))
	}
	return nil
}

// seedsFrom lists n seeds: first, first+1, ...
func seedsFrom(first uint64, n int) []uint64 {
	seeds := make([]uint64, n)
	for i := range seeds {
		seeds[i] = first + uint64(i)
	}
	return seeds
}

// newLog logs to standard error without sampling and without the time of day,
// so that a log is repeatable.
func newLog(env Env, level string) (*zap.Logger, error) {
	levels := []string{"debug", "info", "warn", "error"}
	if !slices.Contains(levels, level) {
		return nil, fmt.Errorf("--log: %q is no level; write one of %s", level, strings.Join(levels, ", "))
	}
	least, err := zapcore.ParseLevel(level)
	if err != nil {
		return nil, fmt.Errorf("--log: %w", err)
	}
	cfg := zap.NewProductionEncoderConfig()
	cfg.TimeKey = ""
	cfg.EncodeLevel = zapcore.LowercaseLevelEncoder
	out := zapcore.Lock(zapcore.AddSync(env.ErrOut))
	return zap.New(zapcore.NewCore(zapcore.NewConsoleEncoder(cfg), out, least)), nil
}

// finish shows what a study gave and turns its error, and a failed audit, into
// a status. A partial result is shown, as such, before the interruption is
// reported.
func finish[T any, R interface {
	*T
	result.Result
}](ctx context.Context, c *call, started time.Time, r R, audit *result.Audit, err error) error {
	newProgress(c.env).clear()
	interrupted := ctx.Err() != nil && errors.Is(err, ctx.Err())
	if r != nil && (err == nil || interrupted) {
		result.Stamp(r, result.Tool{Name: "ferrule", Version: buildVersion()})
		if werr := c.write(r); werr != nil {
			return failed(werr)
		}
	}
	fmt.Fprintf(c.env.ErrOut, "ferrule: took %.3g s\n", time.Since(started).Seconds())
	switch {
	case interrupted && r != nil:
		return &failure{statusInterrupted, errors.New("interrupted: the result is partial")}
	case interrupted:
		return &failure{statusInterrupted, errors.New("interrupted before there was a result")}
	case err != nil:
		return failed(err)
	case r == nil:
		return failed(errors.New("the study gave no result"))
	case audit != nil && !audit.OK:
		return failed(fmt.Errorf("the audit failed:\n%s", strings.Join(audit.Failures, "\n")))
	default:
		return c.gate.pass(r)
	}
}
