package study

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"
	"sync"
	"testing"

	"ferrule/des/random"
	"ferrule/scenarios/result"
)

// drawn is a replicate whose mean delay is drawn from an exponential law
// of mean 1 plus a constant, by seed.
func drawn(least float64) replicate {
	return func(ctx context.Context, j job, _ func(done, total float64)) (*result.Run, error) {
		s := random.NewStream(j.seed, "drawn")
		r := hand{seed: j.seed}.run()
		r.Classes[0].Periods[0].DelayS.Mean = new(least + s.Exp())
		return r, ctx.Err()
	}
}

// A. M. Law, Simulation Modeling and Analysis, ch. 9, values from memory: the
// rule stops when the half-width is at most 0.0909 of the mean for a relative
// error of 0.1.
func TestBatchUntil(t *testing.T) {
	p, err := Precision{Figure: result.FigDelayMean, Relative: 0.1}.with()
	if err != nil {
		t.Fatal(err)
	}
	b, err := batchUntil(t.Context(), Options{Cores: 2}, p, 1, drawn(2))
	if err != nil {
		t.Fatal(err)
	}
	m := meanFigure(t, b, result.FigDelayMean)
	s := b.Stopping
	if !s.Reached || s.WorstHalf > 0.1/1.1 || math.Abs(s.WorstHalf - *m.Interval.Half / *m.Mean) > 1e-12 || s.Worst != "voice NORMAL" {
		t.Errorf("%+v; %v ± %v", s, *m.Mean, *m.Interval.Half)
	}
	if s.Looks[0] != 10 || int(s.Looks[len(s.Looks)-1]) != len(b.Seeds) || !slices.Equal(b.Seeds, Seeds(1, len(b.Seeds))) {
		t.Errorf("looks %v, %d seeds", s.Looks, len(b.Seeds))
	}
	// (1.96 s / (m γ/(1+γ)))² = (1.96/(3*0.0909))² = 52 on average.
	if n := len(b.Seeds); n < 20 || n > 120 {
		t.Errorf("%d seeds; Chow and Robbins expect about 52", n)
	}
	one, err := batchUntil(t.Context(), Options{Cores: 1}, p, 1, drawn(2))
	if err != nil || !bytes.Equal(encoded(t, b), encoded(t, one)) {
		t.Errorf("the result depends on the number of cores (%v)", err)
	}
	p.AtMost = 12
	if b, err = batchUntil(t.Context(), Options{}, p, 1, drawn(2)); err != nil || b.Stopping.Reached || len(b.Seeds) != 12 ||
		!strings.Contains(strings.Join(b.Cautions, "\n"), "not reached with 12 seeds") {
		t.Errorf("capped: %+v, %v", b.Stopping, err)
	}
	p.Figure = "delay-p12"
	if _, err = batchUntil(t.Context(), Options{}, p, 1, drawn(2)); err == nil {
		t.Error("a figure that nobody has is taken")
	}
	for _, bad := range []Precision{{Relative: 0}, {Relative: 0.6}, {Relative: math.NaN()}, {Relative: 0.1, First: 9}, {Relative: 0.1, AtMost: 5}} {
		if _, err := bad.with(); err == nil {
			t.Errorf("%+v is taken", bad)
		}
	}
}

func encoded(t *testing.T, r result.Result) []byte {
	t.Helper()
	b, err := result.Encode(r)
	if err != nil {
		t.Fatal(err)
	}
	return b
}

// shelf is a Store in memory that counts.
type shelf struct {
	mu    sync.Mutex
	kept  map[string][]byte
	saves int
}

func (s *shelf) Load(name string) ([]byte, error) {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.kept[name], nil
}

func (s *shelf) Save(name string, data []byte) error {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.saves++
	s.kept[name] = data
	return nil
}

// What is stored is not run again, and the result is the same bytes.
func TestResume(t *testing.T) {
	p, _ := Precision{Figure: result.FigDelayMean, Relative: 0.1}.with()
	run := func(ctx context.Context, j job, _ func(done, total float64)) (*result.Run, error) {
		r, err := drawn(2)(ctx, j, nil)
		r.ScenarioHash, r.Plan = "abc", j.plan
		return r, err
	}
	o := Options{Cores: 2}
	whole, err := batchUntil(t.Context(), o, p, 1, run)
	if err != nil {
		t.Fatal(err)
	}
	store := &shelf{kept: map[string][]byte{}}
	ctx, stop := context.WithCancel(t.Context())
	runs := 0
	broken := func(ctx context.Context, j job, _ func(done, total float64)) (*result.Run, error) {
		if runs++; runs > 14 {
			stop()
		}
		return run(ctx, j, nil)
	}
	o.Cores = 1
	if _, err := batchUntil(ctx, o, p, 1, resuming(broken, store, "abc")); !errors.Is(err, context.Canceled) {
		t.Fatal(err)
	}
	had := store.saves
	if had != 14 {
		t.Fatalf("%d runs kept before the interruption, want 14", had)
	}
	ran := 0
	counted := func(ctx context.Context, j job, _ func(done, total float64)) (*result.Run, error) {
		ran++
		return run(ctx, j, nil)
	}
	b, err := batchUntil(t.Context(), o, p, 1, resuming(counted, store, "abc"))
	if err != nil || ran != len(whole.Seeds)-had || !bytes.Equal(encoded(t, whole), encoded(t, b)) {
		t.Errorf("resumed: %v; %d runs after %d of %d", err, ran, had, len(whole.Seeds))
	}
	for name, data := range store.kept {
		if strings.HasSuffix(name, "-3") {
			store.kept[name] = bytes.Replace(data, []byte(`"seed": 3`), []byte(`"seed": 4`), 1)
		}
	}
	if _, err = batchUntil(t.Context(), o, p, 1, resuming(counted, store, "abc")); err == nil || !strings.Contains(err.Error(), "of another scenario or run") {
		t.Errorf("a run of another seed is taken: %v", err)
	}
	store.kept[fmt.Sprintf("abc-%s-3", "as-is")] = []byte("{")
	if _, err = batchUntil(t.Context(), o, p, 1, resuming(counted, store, "abc")); err == nil {
		t.Error("a damaged run is taken")
	}
}
