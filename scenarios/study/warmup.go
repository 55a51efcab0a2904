package study

import (
	"context"
	"fmt"
	"strings"
	"sync"

	"ferrule/des"
	"ferrule/des/measure"
	"ferrule/nodes/packet"
	"ferrule/scenarios"
	"ferrule/scenarios/build"
)

// A cut is where the warm-up of one seed ends.
type cut struct {
	at      des.Time
	stretch des.Time // from the start to the first act, the part that was looked at
	short   string   // the classes that had not settled within half of it; empty: all had
}

// warmUp finds where the warm-up of a seed ends when the scenario leaves that
// to the run itself.
//
// Nothing is measured before the warm-up has ended, so where it ends must be
// known first: a pilot runs every plan of the scenario, whichever the study is
// about, from the start to the first act of the timeline or of any plan, on
// the very packets of the run. Of each class it takes the mean delay of
// packets by the instant of their sending, in bins of 10 ms or wider, and cuts
// by MSER-5. The latest cut over classes and plans holds for every plan of the
// seed, so that plans are compared over the same packets. A class of whose
// packets fewer than twenty bins can be made without leaving one empty says
// nothing. When a class has not settled by half of the stretch, the cut is
// there and the run is too short to be given an interval.
func warmUp(ctx context.Context, sc *scenarios.Scenario, seed uint64) (cut, error) {
	own := *sc
	own.Run.Length, own.Run.WarmUp = firstAct(sc), 0
	c := cut{stretch: own.Run.Length}
	var open []string
	for i := range own.Plans {
		m, err := build.New(&own, &own.Plans[i], seed)
		if err != nil {
			return c, err
		}
		advance(ctx, m, m.Kernel(des.Serial{}), nil)
		if ctx.Err() != nil {
			return c, ctx.Err()
		}
		for k, s := range m.Network.Series() {
			at, settled, ok := settling(&s, c.stretch)
			if !ok {
				continue
			}
			c.at = max(c.at, at)
			if name := sc.Classes[k].Name + " under " + own.Plans[i].Name; !settled {
				open = append(open, name)
			}
		}
	}
	if open != nil {
		c.at, c.short = c.stretch/2, shortList(open)
	}
	return c, nil
}

// firstAct is the instant of the first act under any plan, or the end of the
// run when there is none.
func firstAct(sc *scenarios.Scenario) des.Time {
	first := sc.Run.Length
	look := func(acts []scenarios.Act) {
		for i := range acts {
			if at := acts[i].At; at > 0 && at < first {
				first = at
			}
		}
	}
	look(sc.Timeline)
	for i := range sc.Plans {
		look(sc.Plans[i].Steps)
	}
	return first
}

// leastBins is how few bins MSER-5 is asked about: four blocks of five.
const leastBins = 4 * measure.MSERBlock

// settling cuts the series of one class; ok is false when it says nothing.
func settling(s *packet.Series, stretch des.Time) (at des.Time, settled, ok bool) {
	for join := 1; ; join *= 2 {
		width := s.Width * des.Time(join)
		n := min(int(stretch/width), len(s.Wide)/join)
		if n < leastBins {
			return 0, false, false
		}
		if x, whole := meanDelays(s.Wide[:n*join], join); whole {
			drop, settled := measure.MSER5(x)
			return des.Time(drop) * width, settled, true
		}
	}
}

// meanDelays is the mean delay of so many bins at a time; whole is false when
// nothing was delivered in some.
func meanDelays(bins []packet.Tally, join int) (x []float64, whole bool) {
	for i := 0; i < len(bins); i += join {
		var sum, n uint64
		for _, b := range bins[i : i+join] {
			sum += b.Delay
			n += b.Delivered
		}
		if n == 0 {
			return nil, false
		}
		x = append(x, float64(sum)/float64(n))
	}
	return x, true
}

// warmUps finds the cut of each seed once for all plans of a study.
type warmUps struct {
	mu sync.Mutex
	of map[uint64]*sync.Mutex // held while a seed's pilot runs
	at map[uint64]cut
}

// find returns the cut of a seed; whoever asks first makes the pilot.
func (w *warmUps) find(ctx context.Context, sc *scenarios.Scenario, seed uint64) (cut, error) {
	w.mu.Lock()
	if w.of == nil {
		w.of, w.at = map[uint64]*sync.Mutex{}, map[uint64]cut{}
	}
	own := w.of[seed]
	if own == nil {
		own = &sync.Mutex{}
		w.of[seed] = own
	}
	w.mu.Unlock()
	own.Lock()
	defer own.Unlock()
	w.mu.Lock()
	c, done := w.at[seed]
	w.mu.Unlock()
	if done {
		return c, nil
	}
	c, err := warmUp(ctx, sc, seed)
	if err == nil {
		w.mu.Lock()
		w.at[seed] = c
		w.mu.Unlock()
	}
	return c, err
}

// caution says that the run is too short; empty when it is not.
func (c *cut) caution() string {
	if c.short == "" {
		return ""
	}
	return fmt.Sprintf("Too short: by MSER-5 not all had settled within half of the %s before the first act (%s). No interval is given; a longer run may settle.",
		scenarios.FormatTime(c.stretch), c.short)
}

// tooShort lists the seeds whose warm-up took half of what there was.
func tooShort(samples []*sample) string {
	var seeds []string
	for _, s := range samples {
		if s.short {
			seeds = append(seeds, fmt.Sprint(s.seed))
		}
	}
	return strings.Join(seeds, " ")
}
