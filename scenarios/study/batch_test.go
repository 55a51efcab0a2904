package study

import (
	"context"
	"errors"
	"slices"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"

	"ferrule/scenarios/result"
)

// A. M. Law, Simulation Modeling and Analysis, ch. 4 and ch. 9: two worked
// examples of ten values with 90 % intervals. Values from memory, the results
// computed anew from the formula.
func TestBatchIntervals(t *testing.T) {
	for _, c := range []struct {
		name       string
		values     []float64
		mean, half float64
	}{
		{"ch. 4", []float64{1.20, 1.50, 1.68, 1.89, 0.95, 1.49, 1.58, 1.55, 0.50, 1.09}, 1.343, 0.2372534},
		{"bank, ch. 9", []float64{1.53, 1.66, 1.24, 2.34, 2.00, 1.69, 2.69, 2.86, 1.70, 2.60}, 2.031, 0.3222834},
	} {
		m := meanFigure(t, foldBatch("as-is", hands(c.values...), 0.90), result.FigDelayP99)
		near(t, c.name+" mean", *m.Mean, c.mean)
		near(t, c.name+" half-width", *m.Interval.Half, c.half)
		near(t, c.name+" low", *m.Interval.Low, c.mean-c.half)
		near(t, c.name+" high", *m.Interval.High, c.mean+c.half)
		if m.Seeds != 10 {
			t.Errorf("%s: %d seeds, want 10", c.name, m.Seeds)
		}
	}
}

func TestBatchOneSeed(t *testing.T) {
	b := foldBatch("as-is", hands(2), 0.95)
	m := meanFigure(t, b, result.FigDelayP99)
	if m.Interval != nil || *m.Mean != 2 || m.Seeds != 1 {
		t.Errorf("one seed: %+v", m)
	}
	if _, err := result.Encode(b); err != nil {
		t.Error(err)
	}
}

// What cannot be said in a seed is averaged over the others.
func TestBatchAbsent(t *testing.T) {
	samples := hands(2, 4, 9)
	samples[2] = sampleOf(hand{seed: 3}.run())
	m := meanFigure(t, foldBatch("as-is", samples, 0.95), result.FigDelayP99)
	if *m.Mean != 3 || m.Seeds != 2 {
		t.Errorf("mean %v over %d seeds, want 3 over 2", *m.Mean, m.Seeds)
	}
	slices.Reverse(samples) // the first sample lacks it: its place must not change
	b := foldBatch("as-is", samples, 0.95)
	var order []string
	for _, m := range b.Figures {
		order = append(order, m.Figure)
	}
	want := []string{"offered", "delivered", "duplicates", "inside", "lost-queue", "loss", "delay-p99"}
	if !slices.Equal(order, want) {
		t.Errorf("order %v, want %v", order, want)
	}
}

// The objective is judged by the mean of the worst pair: 38 and 44 ms have a
// mean of 41 ms, beyond 40 ms, though one seed met it.
func TestBatchObjective(t *testing.T) {
	for _, c := range []struct {
		name   string
		pairs  [][]float64
		met    *bool
		pair   string
		phrase string
	}{
		{"missed on average", [][]float64{{0.01, 0.038}, {0.02, 0.044}}, new(false), "b.out", "voice NORMAL delay-p99 in 1 of 2"},
		{"met on average", [][]float64{{0.01, 0.038}, {0.041, 0.02}, {0.039, 0.02}}, new(true), "a.out", "voice NORMAL delay-p99 in 2 of 3"},
		{"met throughout", [][]float64{{0.01}, {0.04}}, new(true), "a.out", ""},
		{"one pair cannot be said", [][]float64{{0.01, -1}, {0.02, 0.03}}, nil, "b.out", "in 1 of 2"},
		{"one cannot be said, another is beyond", [][]float64{{0.05, -1}, {0.06, 0.03}}, new(false), "a.out", ""},
	} {
		var samples []*sample
		for i, p := range c.pairs {
			samples = append(samples, sampleOf(hand{seed: uint64(i), p99: new(0.01), limit: 0.04, pairs: p}.run()))
		}
		b := foldBatch("as-is", samples, 0.95)
		m := meanFigure(t, b, result.FigDelayP99)
		if d := cmp.Diff(c.met, m.Met); d != "" {
			t.Errorf("%s: met (-want +got)\n%s", c.name, d)
		}
		if c.name != "one pair cannot be said" && m.WorstPair != c.pair {
			t.Errorf("%s: worst pair %q, want %q", c.name, m.WorstPair, c.pair)
		}
		said := strings.Contains(strings.Join(b.Cautions, "\n"), "some seeds only")
		if said != (c.phrase != "") || !strings.Contains(strings.Join(b.Cautions, "\n"), c.phrase) {
			t.Errorf("%s: cautions %q, want %q", c.name, b.Cautions, c.phrase)
		}
	}
}

// Packets of all seeds are added up, and a failure is kept with its seed.
func TestBatchAudit(t *testing.T) {
	runs := map[job]*result.Run{}
	for _, seed := range Seeds(7, 3) {
		runs[job{"as-is", seed}] = hand{seed: seed, p99: new(1.0)}.run()
	}
	bad := runs[job{"as-is", 8}]
	bad.Audit.OK, bad.Audit.Failures = false, []string{"one packet too many"}
	b, err := batch(context.Background(), Options{Cores: 2}, Seeds(7, 3), serve(runs))
	if err != nil {
		t.Fatal(err)
	}
	want := result.Audit{OfferedPackets: 300, DeliveredPackets: 297, LostPackets: result.Losses{{Cause: "queue", Packets: 3}},
		Failures: []string{"seed 8: one packet too many"}}
	if d := cmp.Diff(want, b.Audit); d != "" {
		t.Errorf("(-want +got)\n%s", d)
	}
}

// The bytes of a result do not depend on the number of cores.
func TestBatchCores(t *testing.T) {
	runs := map[job]*result.Run{}
	seeds := Seeds(1, 40)
	for _, seed := range seeds {
		runs[job{"as-is", seed}] = hand{seed: seed, p99: new(1 / float64(seed)), limit: 0.1, pairs: []float64{0.2, 1 / float64(seed)}}.run()
	}
	var first []byte
	for _, cores := range []int{1, 2, 7} {
		b, err := batch(context.Background(), Options{Cores: cores}, seeds, serve(runs))
		if err != nil {
			t.Fatal(err)
		}
		got, err := result.Encode(b)
		if err != nil {
			t.Fatal(err)
		}
		if first == nil {
			first = got
		}
		if string(got) != string(first) {
			t.Errorf("%d cores give other bytes than 1", cores)
		}
	}
}

// An interrupted batch keeps the seeds that finished, in order.
func TestBatchInterrupted(t *testing.T) {
	ctx, stop := context.WithCancel(context.Background())
	defer stop()
	run := func(ctx context.Context, j job, _ func(done, total float64)) (*result.Run, error) {
		if j.seed == 3 {
			stop()
		}
		r := hand{seed: j.seed, p99: new(1.0)}.run()
		r.Partial = ctx.Err() != nil
		return r, ctx.Err()
	}
	b, err := batch(ctx, Options{Cores: 1}, Seeds(1, 9), run)
	if !errors.Is(err, context.Canceled) {
		t.Fatalf("error %v, want context.Canceled", err)
	}
	if b == nil || !b.Partial || !slices.Equal(b.Seeds, []uint64{1, 2}) {
		t.Errorf("got %+v, want seeds 1 and 2, partial", b)
	}
	gone, stopNow := context.WithCancel(context.Background())
	stopNow()
	if b, err := batch(gone, Options{Cores: 2}, Seeds(1, 2), run); b != nil || !errors.Is(err, context.Canceled) {
		t.Errorf("got %v, %v; want nothing and context.Canceled", b, err)
	}
}

// A run that fails ends the study and names its seed.
func TestBatchFailure(t *testing.T) {
	broken := errors.New("the engine broke")
	run := func(_ context.Context, j job, _ func(done, total float64)) (*result.Run, error) {
		if j.seed == 2 {
			return nil, broken
		}
		return hand{seed: j.seed, p99: new(1.0)}.run(), nil
	}
	b, err := batch(context.Background(), Options{Cores: 2}, Seeds(1, 5), run)
	if b != nil || !errors.Is(err, broken) || !strings.Contains(err.Error(), "plan as-is, seed 2") {
		t.Errorf("got %v, %v", b, err)
	}
	if _, err := batch(context.Background(), Options{}, []uint64{4, 4}, run); err == nil || err.Error() != "seed 4 is given twice" {
		t.Errorf("got %v", err)
	}
}

// Progress is reported by one run at a time, never falls, and ends at the
// number of runs.
func TestProgress(t *testing.T) {
	runs := map[job]*result.Run{}
	for _, seed := range Seeds(1, 20) {
		runs[job{"as-is", seed}] = hand{seed: seed, p99: new(1.0)}.run()
	}
	last, calls := 0.0, 0 // no mutex: the race detector would see two callers
	show := func(done, total float64) {
		if done < last || total != 20 {
			t.Errorf("%v of %v after %v", done, total, last)
		}
		last = done
		calls++
	}
	if _, err := batch(context.Background(), Options{Cores: 4, Progress: show}, Seeds(1, 20), serve(runs)); err != nil {
		t.Fatal(err)
	}
	if last != 20 || calls != 40 {
		t.Errorf("ended at %v after %d calls, want 20 after 40", last, calls)
	}
}

// A loss that was never seen is no loss of zero: 1 - 0.05^(1/10) = 0.259 of all
// runs may still have one (Hanley and Lippman-Hand, 1983).
func TestBatchLossless(t *testing.T) {
	samples := hands(1, 2, 3, 4, 5, 6, 7, 8, 9, 10)
	for _, s := range samples {
		for i := range s.figures {
			if s.figures[i].figure == result.FigLoss {
				s.figures[i].value = new(0.0)
			}
		}
	}
	text := strings.Join(foldBatch("as-is", samples, 0.95).Cautions, "\n")
	if !strings.Contains(text, "Nothing was lost of voice NORMAL: no loss in 10 seeds: at 95 % at most 26 of 100 such runs have an episode of loss") {
		t.Errorf("cautions %q", text)
	}
	if text = strings.Join(foldBatch("as-is", hands(1, 2), 0.95).Cautions, "\n"); strings.Contains(text, "Nothing was lost") {
		t.Errorf("of a loss of 1 %%: %q", text)
	}
}
