package main

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"ferrule/des"
	"ferrule/scenarios/result"
	"ferrule/scenarios/study"
)

// sweepFlags are the flags of failures alone.
type sweepFlags struct {
	plans         []string
	seeds         int
	kinds         []string
	pairs         []string
	scale         string
	before, after time.Duration
	cuts          float64 // per 1000 km and year
	repair        time.Duration
}

func newFailures(env Env) *cobra.Command {
	c := &call{env: env}
	s := &sweepFlags{}
	cmd := &cobra.Command{
		Use:   "failures [FILE]",
		Short: "Break one thing after another under each plan and rank what it costs",
		Long: "Failures breaks one thing after another under each plan, on the same seeds, and\n" +
			"shows what each class loses, which circuits do not come back, and what a year of\n" +
			"cuts is expected to cost. All failures of a plan and a seed share the run before\n" +
			"them; --before and --after say how long to look.",
		Example: "  ferrule failures coast.yaml --plan as-is --plan video-express\n" +
			"  ferrule failures coast.yaml --what fibre --pair tarn-holm,voe-skaw --out failures.csv",
		Args: atMostOne,
		RunE: func(cmd *cobra.Command, args []string) error {
			w, err := s.sweep()
			if err != nil {
				return err
			}
			sc, opt, err := c.begin(cmd, args)
			if err != nil {
				return err
			}
			for _, p := range s.plans {
				if err := planOf(sc, "plan", p); err != nil {
					return err
				}
			}
			w.Seeds = seedsFrom(opt.seed, s.seeds)
			started := time.Now()
			r, err := sc.Failures(cmd.Context(), opt, w)
			var audit *result.Audit
			if r != nil {
				audit = &r.Audit
			}
			return finish(cmd.Context(), c, started, r, audit, err)
		},
	}
	c.flags(cmd)
	c.seedFlag(cmd, "first seed; the others follow it")
	c.resumeFlag(cmd)
	f := cmd.Flags()
	f.StringArrayVar(&s.plans, "plan", nil, "try failures under this plan only; may be repeated (default all)")
	f.IntVar(&s.seeds, "seeds", 3, "number of seeds, the same under every plan")
	f.StringSliceVar(&s.kinds, "what", nil, "kinds of failure to try, of "+strings.Join(study.FailureKinds(), ",")+" (default fibre,group)")
	f.StringArrayVar(&s.pairs, "pair", nil, "fail two at once, as NAME,NAME; may be repeated; without --what, only pairs")
	f.StringVar(&s.scale, "scale", "100%", "of all loads")
	f.DurationVar(&s.before, "before", 200*time.Millisecond, "measured before each failure")
	f.DurationVar(&s.after, "after", 700*time.Millisecond, "from each failure to the end of its run")
	f.Float64Var(&s.cuts, "cuts", 1000*study.CutsPerKmYear, "cuts a year for each 1000 km of fibre; 0: no rate is known")
	f.DurationVar(&s.repair, "repair", 12*time.Hour, "until a cut is repaired")
	return cmd
}

// sweep checks the flags and turns them into what is to be studied.
func (s *sweepFlags) sweep() (study.Sweep, error) {
	w := study.Sweep{Plans: s.plans, Kinds: s.kinds, Cuts: s.cuts / 1000}
	for i, p := range s.plans {
		if slices.Contains(s.plans[:i], p) {
			return w, fmt.Errorf("--plan: %q is given twice", p)
		}
	}
	for i, k := range s.kinds {
		if !slices.Contains(study.FailureKinds(), k) || slices.Contains(s.kinds[:i], k) {
			return w, fmt.Errorf("--what: %q is no kind of failure, or given twice; write some of %s", k, strings.Join(study.FailureKinds(), ","))
		}
	}
	for _, p := range s.pairs {
		names := strings.Split(p, ",")
		if len(names) != 2 || names[0] == "" || names[1] == "" || names[0] == names[1] {
			return w, fmt.Errorf("--pair: %q is not of the form NAME,NAME; write for instance tarn-holm,voe-skaw", p)
		}
		w.Pairs = append(w.Pairs, [2]string{names[0], names[1]})
	}
	if s.seeds < 1 || s.seeds > maxSeeds {
		return w, fmt.Errorf("--seeds: %d is out of range; write 1 to %d", s.seeds, maxSeeds)
	}
	var err error
	if w.Scale, err = percent(s.scale); err != nil {
		return w, fmt.Errorf("--scale: %w", err)
	}
	if !(s.cuts >= 0) || s.cuts > 1e6 {
		return w, fmt.Errorf("--cuts: %g is out of range; write 0 to 1000000", s.cuts)
	}
	if s.cuts == 0 {
		w.Cuts = -1
	}
	const longest = 90 * 24 * time.Hour
	for _, d := range []struct {
		flag string
		is   time.Duration
	}{{"before", s.before}, {"after", s.after}, {"repair", s.repair}} {
		if d.is <= 0 || d.is > longest {
			return w, fmt.Errorf("--%s: %v is out of range; write more than 0s and at most %v", d.flag, d.is, longest)
		}
	}
	w.Before, w.After, w.Repair = des.Time(s.before)*des.Nanosecond, des.Time(s.after)*des.Nanosecond, des.Time(s.repair)*des.Nanosecond
	return w, nil
}

// percent reads a positive percentage, up to a hundredfold.
func percent(text string) (float64, error) {
	n, ok := strings.CutSuffix(text, "%")
	v, err := strconv.ParseFloat(strings.TrimSpace(n), 64)
	if !ok || err != nil || math.IsNaN(v) || !(v > 0) || v > 1e4 {
		return 0, fmt.Errorf("%q is no percentage above 0%% and up to 10000%%; write for instance 80%%", text)
	}
	return v / 100, nil
}
