package measure

import (
	"math/bits"
	"slices"
	"testing"
)

// Ten packets of which five are lost. Source: RFC 3357, sections 5.4.3 and 6.
func TestLossStreamsWorked(t *testing.T) {
	distance, period := lossStreams([]uint32{2, 5, 7, 9, 10}, 1, 10)
	if want := []lossPair{{0, 0}, {0, 1}, {0, 0}, {0, 0}, {3, 1}, {0, 0}, {2, 1}, {0, 0}, {2, 1}, {1, 1}}; !slices.Equal(distance, want) {
		t.Errorf("distances %v, want %v", distance, want)
	}
	if want := []lossPair{{0, 0}, {1, 1}, {0, 0}, {0, 0}, {2, 1}, {0, 0}, {3, 1}, {0, 0}, {4, 1}, {4, 1}}; !slices.Equal(period, want) {
		t.Errorf("periods %v, want %v", period, want)
	}
	if distance, _ := lossStreams([]uint32{20, 50}, 20, 50); distance[30] != (lossPair{30, 1}) {
		t.Errorf("packet 50 lost after 20: %v, want distance 30", distance[30])
	}
}

// Sources: RFC 3357, sections 4, 5.4.3 and 6.
func TestLossWorked(t *testing.T) {
	at := func(pairs ...uint64) (a [33]uint64) {
		for i := 0; i < len(pairs); i += 2 {
			a[bits.Len64(pairs[i])] += pairs[i+1]
		}
		return a
	}
	for _, c := range []struct {
		lost  []uint32
		delta uint32
		want  LossReport
	}{
		// Lengths 1, 1, 1, 2; distances 3, 2, 2, 1.
		{[]uint32{2, 5, 7, 9, 10}, 2, LossReport{Lost: 5, Periods: 4, Noticeable: 3, Longest: 2,
			Lengths: at(1, 3, 2, 1), Apart: at(3, 1, 2, 2)}},
		{[]uint32{20, 50}, 0, LossReport{Lost: 2, Periods: 2, Longest: 1, Lengths: at(1, 2), Apart: at(30, 1)}},
		{[]uint32{50, 125, 126, 127}, 99, LossReport{Lost: 4, Periods: 2, Noticeable: 3, Longest: 3,
			Lengths: at(1, 1, 3, 1), Apart: at(75, 1)}},
	} {
		if slow := slowLoss(c.lost, c.delta); slow != c.want {
			t.Errorf("%v: the definition gives %+v, want %+v", c.lost, slow, c.want)
		}
		l, back := LossRuns{Delta: c.delta}, LossRuns{Delta: c.delta}
		for i, s := range c.lost {
			l.Lost(s)
			back.Lost(c.lost[len(c.lost)-1-i])
		}
		if l.Report() != c.want || back.Report() != c.want {
			t.Errorf("%v: got %+v, backwards %+v; want %+v", c.lost, l.Report(), back.Report(), c.want)
		}
	}
	r := slowLoss([]uint32{2, 5, 7, 9, 10}, 2)
	if rate, ok := r.NoticeableRate(); !ok || rate != 3.0/5 {
		t.Errorf("noticeable rate %v, %v; want 3/5", rate, ok)
	}
	if m, ok := r.MeanLength(); !ok || m != 5.0/4 {
		t.Errorf("mean length %v, %v; want 5/4", m, ok)
	}
	var none LossReport
	if _, ok := none.NoticeableRate(); ok {
		t.Error("a rate of no losses is defined")
	}
	r.Merge(&none)
	twice := r
	twice.Merge(&r)
	if twice.Lost != 10 || twice.Periods != 8 || twice.Longest != 2 || twice.Lengths[1] != 6 || twice.Apart[2] != 6 {
		t.Errorf("merged with itself: %+v", twice)
	}
}

func TestLossOutsideTheWindow(t *testing.T) {
	var l LossRuns
	var all []uint32
	for i := range uint32(10 * lossWindow) {
		all = append(all, 10*i+100)
		l.Lost(10*i + 100)
	}
	if l.Report() != slowLoss(all, 0) {
		t.Errorf("more runs than the window, in order: %+v", l.Report())
	}
	settled := all[9*lossWindow-1]
	l.Lost(105) // below what is settled
	l.Lost(settled)
	l.Lost(all[len(all)-1]) // twice
	if r := l.Report(); r.Unplaced != 3 || r.Lost != uint64(len(all))+3 || r.Periods != uint64(len(all)) {
		t.Errorf("unplaced %d of %d in %d periods", r.Unplaced, r.Lost, r.Periods)
	}
	l.Lost(settled + 1) // goes on where the last settled run ended
	if r := l.Report(); r.Lengths[2] != 1 || r.Periods != uint64(len(all)) || r.Longest != 2 {
		t.Errorf("a run that goes on past the settled: %+v", r)
	}
}

func TestLongRunsTakeOnePlace(t *testing.T) {
	up, down := LossRuns{}, LossRuns{}
	for i := range uint32(5 * lossWindow) {
		up.Lost(1000 + i)
		down.Lost(5000 - i)
	}
	up.Lost(500)
	down.Lost(500)
	if r := up.Report(); r.Unplaced != 0 || r.Periods != 2 || r.Longest != 5*lossWindow {
		t.Errorf("a run that grows upwards: %+v", r)
	}
	if r := down.Report(); r.Unplaced != 0 || r.Periods != 2 || r.Longest != 5*lossWindow {
		t.Errorf("a run that grows downwards: %+v", r)
	}
}
