package quality

import (
	"math"
	"math/rand/v2"
	"testing"

	"ferrule/des"
	"ferrule/des/measure"
	"ferrule/nodes"
)

const ms = des.Millisecond

func dejitterOf(t testing.TB, c DejitterConfig) Dejitter {
	t.Helper()
	d, err := NewDejitter(c)
	if err != nil {
		t.Fatal(err)
	}
	return d
}

// A fixed buffer of 10 ms behind a first packet of 20 ms plays what has at most
// 30 ms of delay, to the picosecond, and has no room for what would wait more
// than 25 ms.
func TestFixedDejitter(t *testing.T) {
	d := dejitterOf(t, DejitterConfig{Depth: 10 * ms, Most: 25 * ms})
	for i, x := range []struct {
		delay  des.Time
		played bool
	}{
		{20 * ms, true}, {30 * ms, true}, {30*ms + 1, false}, {31 * ms, false}, {5 * ms, true}, {5*ms - 1, false}, {29 * ms, true}, {300 * ms, false},
	} {
		if got := d.Arrive(uint32(i), des.Time(i)*20*ms, des.Time(i)*20*ms+x.delay); got != x.played {
			t.Errorf("packet %d with delay %v: played %v", i, x.delay, got)
		}
	}
	d.Lost(8)
	d.Lost(9)
	r := d.Report()
	if r.Played != 4 || r.Late != 3 || r.Early != 1 || r.Lost != 2 || r.MeanDelay != 30*ms || r.Sent() != 10 {
		t.Errorf("report %+v", r)
	}
	// Not played: 2-3, 5, 7-9: periods of 2, 1 and 3 packets.
	if r.Losses.Periods != 3 || r.Losses.Longest != 3 || r.Losses.Lost != 6 {
		t.Errorf("losses %+v", r.Losses)
	}
	c := r.Call(CodecG711, 20*ms)
	if c.Delay != 50*ms || !near(c.Loss, 0.6, 1e-15) || !near(c.BurstRatio, 2*(1-0.6), 1e-12) {
		t.Errorf("call %+v", c)
	}
	empty := dejitterOf(t, DejitterConfig{}).cfg
	if empty.Depth != 40*ms || empty.Most != 400*ms {
		t.Errorf("defaults %+v", empty)
	}
}

// An adaptive buffer chooses only between talk-spurts, ends near the smoothed
// delay and 4 deviations, and follows a shift of the delay that a fixed one
// loses everything to.
func TestAdaptiveDejitter(t *testing.T) {
	adaptive := dejitterOf(t, DejitterConfig{Adaptive: true})
	fixed := dejitterOf(t, DejitterConfig{Depth: 40 * ms})
	r := rand.New(rand.NewPCG(5, 6))
	born, seq := des.Time(0), uint32(0)
	var played, after [2]int
	last := des.Time(-1)
	for spurt := range 200 {
		for k := range 50 {
			delay := 20*ms + des.Time(r.Int64N(int64(10*ms))) // mean 25, mean deviation 2.5 ms
			if spurt >= 100 {
				delay += 60 * ms
			}
			a, f := adaptive.Arrive(seq, born, born+delay), fixed.Arrive(seq, born, born+delay)
			if k > 0 && adaptive.delay != last {
				t.Fatalf("spurt %d, packet %d: the delay changes from %v to %v", spurt, k, last, adaptive.delay)
			}
			last = adaptive.delay
			for i, x := range []bool{a, f} {
				if x {
					played[i]++
				}
				if x && spurt >= 150 {
					after[i]++
				}
			}
			born, seq = born+20*ms, seq+1
		}
		if spurt == 99 && (adaptive.delay < 34*ms || adaptive.delay > 36*ms) { // 25 + 4·2.5
			t.Errorf("delay %v after 5000 packets, want about 35 ms", adaptive.delay)
		}
		born += 500 * ms
	}
	if after[0] != 2500 || after[1] != 0 {
		t.Errorf("after the shift %v of 2500 played", after)
	}
	if rep := adaptive.Report(); rep.Played != uint64(played[0]) || rep.Late != uint64(10000-played[0]) {
		t.Errorf("report %+v, %d played", rep, played[0])
	}
	// Without silence a choice comes every 5 s of births.
	d := dejitterOf(t, DejitterConfig{Adaptive: true})
	changes := 0
	for i := range uint32(1501) { // 30 s
		before := d.delay
		d.Arrive(i, des.Time(i)*20*ms, des.Time(i)*20*ms+des.Time(i%7)*ms)
		if i > 0 && d.delay != before {
			changes++
		}
	}
	if changes != 6 {
		t.Errorf("%d choices in 30 s, want 6", changes)
	}
}

// RFC 4445, section 3: at 3.75 Mbit/s a datagram of 1316 B drains in 2.8 ms,
// the least delay factor; bunched arrivals by hand: the level runs from 288.25
// down to -2055.5 B, which is 5 ms.
func TestDelayFactor(t *testing.T) {
	index := func(interval des.Time) MediaIndex {
		m, err := NewMediaIndex(MediaIndexConfig{Rate: 3750 * nodes.Kbps, Interval: interval}, 0)
		if err != nil {
			t.Fatal(err)
		}
		return m
	}
	m := index(14 * ms)
	for i, at := range []des.Time{3, 5, 10, 11, 14} {
		done, closed := m.Arrive(uint32(i), 1316, at*ms)
		if closed != (at == 14) {
			t.Fatalf("closed %v at %v ms", closed, at)
		}
		if closed && (done.DelayFactor < 5*ms-1 || done.DelayFactor > 5*ms+1 || done.Length != 14*ms || done.Lost != 0) {
			t.Errorf("bunched: %+v, want 5 ms", done)
		}
	}
	m = index(des.Second)
	var last MediaInterval
	for i := range uint32(1500) {
		// Exactly one drain time apart: (i+1)·1316·8/3.75e6 s.
		at := des.Time(math.Round(float64(i+1) * 1316 * 8 / 3.75e6 * 1e12))
		if done, closed := m.Arrive(i, 1316, at); closed {
			last = done
			if d := float64(done.DelayFactor) / float64(ms); !near(d, 2.807466667, 1e-7) {
				t.Errorf("steady: delay factor %v ms", d)
			}
		}
	}
	r := m.Report()
	if r.Intervals != 4 || r.Lost != 0 || r.WorstDelay != last.DelayFactor || r.MeanDelayFactor < last.DelayFactor-1 {
		t.Errorf("report %+v", r)
	}
}

// A lost datagram counts as the 7 transport-stream packets in it (RFC 4445,
// section 3.2): 3 datagrams of a second are 21. One out of order counts once.
func TestMediaLossRate(t *testing.T) {
	m, err := NewMediaIndex(MediaIndexConfig{Rate: nodes.Mbps}, des.Second)
	if err != nil {
		t.Fatal(err)
	}
	at := des.Second
	var all []MediaInterval
	for _, seq := range []uint32{0, 1, 3, 4, 5, 8, 9, 10, 11, 13, 12, 14, 15, 16, 17, 18, 19, 20} {
		at += 100 * ms
		if done, closed := m.Arrive(seq, 1316, at); closed {
			all = append(all, done)
		}
	}
	// First second: 2, 6 and 7 are missing, and 12 when 13 comes.
	if len(all) != 1 || all[0].Lost != 4*7 || all[0].LossRate() != 28 {
		t.Errorf("intervals %+v, want 28 lost a second", all)
	}
	m, _ = NewMediaIndex(MediaIndexConfig{Rate: nodes.Mbps}, 0)
	for _, seq := range []uint32{0, 2, 3, 5, 7, 8} { // 1, 4 and 6 are missing
		m.Arrive(seq, 1316, des.Time(seq)*125*ms)
	}
	if r := m.Report(); r.Intervals != 1 || r.Lost != 21 || r.WorstLost != 21 {
		t.Errorf("report %+v, want 21", r)
	}
}

// By hand: frames every 40 ms with 20 ms of delay; 200 ms are buffered when the
// sixth comes at 220 ms, so the first is shown then and frame k at 220 + 40k.
// Frame 10 comes 150 ms after its turn, with all that follow; of frames 10 to
// 15, 200 ms of media, the last comes at 15·40 + 370.
func TestPlayout(t *testing.T) {
	p, err := NewPlayout(PlayoutConfig{StartUp: 200 * ms})
	if err != nil {
		t.Fatal(err)
	}
	for k := range des.Time(40) {
		delay := 20 * ms
		if k >= 10 {
			delay = 370 * ms
		}
		p.Arrive(k*40*ms, k*40*ms+delay)
		if k == 4 && p.Finish(180*ms).Started || k == 5 && !p.Finish(220*ms).Started {
			t.Errorf("started after frame %d: %v", k, p.Finish(220*ms).Started)
		}
		if k == 12 { // watching ends while the picture stands
			if r := p.Finish(850 * ms); r.Stalls != 1 || r.Stalled != 230*ms {
				t.Errorf("at 850 ms: %+v", r)
			}
		}
	}
	p.Arrive(20*40*ms, 3*des.Second) // far behind, newer ones are there
	r := p.Finish(3 * des.Second)
	// Turn of frame 10: 620 ms. It comes at 770, play goes on at 970.
	want := PlayoutReport{Packets: 41, Skipped: 1, Started: true, StartUp: 220 * ms, Stalls: 1, Stalled: 350 * ms, Longest: 350 * ms, Delay: 570 * ms}
	if r != want {
		t.Errorf("%+v, want %+v", r, want)
	}
}

// Delivered delays of 1990 times 10 and ten larger, with 2 lost of 2002: by
// hand a mean of 10.0695, rank 1998 of 2000 is 40, so the variation is 30, and
// class 0 of ITU-T Y.1541 is met. One more lost fails all but class 5. Under the
// counting of RFC 7679 the same quantile is 60, with one lost 41, with 3 lost
// infinite.
func TestNetworkClasses(t *testing.T) {
	sample := func(unit uint64) (*measure.Hist, *measure.Moments) {
		var h measure.Hist
		var m measure.Moments
		add := func(v uint64) { h.Add(v * unit); m.Add(int64(v * unit)) }
		for range 1990 {
			add(10)
		}
		for _, v := range []uint64{11, 12, 13, 14, 15, 16, 17, 40, 41, 60} {
			add(v)
		}
		return &h, &m
	}
	h, m := sample(1) // small numbers are exact in a histogram
	p := Population{h, m, 2}
	if mean, ok := p.MeanDelay(); !ok || !near(mean, 10.0695, 1e-9) {
		t.Errorf("mean %v", mean)
	}
	if v, ok := p.Variation(999, 1000); !ok || v != 30 {
		t.Errorf("variation %v", v)
	}
	if r, ok := p.LossRatio(); !ok || !near(r, 9.99000999e-4, 1e-12) {
		t.Errorf("loss %v", r)
	}
	for lost, want := range map[uint64]float64{2: 60, 1: 41} {
		if v, ok := h.QuantileWithLost(999, 1000, lost); !ok || v != want {
			t.Errorf("RFC 7679 quantile with %d lost: %v", lost, v)
		}
	}
	if _, ok := h.QuantileWithLost(999, 1000, 3); ok {
		t.Error("RFC 7679 quantile with 3 lost is finite")
	}
	if !p.Enough(ObjectiveOf(0)) || p.Enough(ObjectiveOf(6)) || !p.Enough(ObjectiveOf(5)) {
		t.Error("2000 packets show a tail of 1e-3, and none of 1e-5")
	}
	h, m = sample(1e6)
	for lost, want := range map[uint64][Classes]bool{
		2: {true, true, true, true, true, true, false, false},
		3: {5: true},
		0: {true, true, true, true, true, true, true, true}, // 60 - 10 = 50 ms is not above 50
	} {
		if got := (Population{h, m, lost}).Met(); got != want {
			t.Errorf("%d lost: classes met %v, want %v", lost, got, want)
		}
	}
}

// What bounds what, one at a time.
func TestObjectives(t *testing.T) {
	one := func(delays ...int64) Population {
		var h measure.Hist
		var m measure.Moments
		for _, d := range delays {
			h.Add(uint64(d) * 1e6)
			m.Add(d * 1e6)
		}
		return Population{&h, &m, 0}
	}
	for _, x := range []struct {
		name string
		p    Population
		want [Classes]bool
	}{
		{"100 ms", one(100, 100), [Classes]bool{true, true, true, true, true, true, true, true}},
		{"101 ms", one(101, 101), [Classes]bool{1: true, 3: true, 4: true, 5: true, 7: true}},
		{"401 ms", one(401, 401), [Classes]bool{4: true, 5: true}},
		{"1001 ms", one(1001), [Classes]bool{5: true}},
		{"wide", one(10, 61), [Classes]bool{2: true, 3: true, 4: true, 5: true}},
		{"nothing sent", one(), [Classes]bool{true, true, true, true, true, true, true, true}},
	} {
		if got := x.p.Met(); got != x.want {
			t.Errorf("%s: %v, want %v", x.name, got, x.want)
		}
	}
	dead := one()
	dead.Lost = 7
	if got := dead.Met(); got != [Classes]bool{5: true} {
		t.Errorf("all lost: %v", got)
	}
}

// ITU-T Y.1563, 9: worked by hand from its rule.
func TestAvailability(t *testing.T) {
	type span struct {
		n      int
		severe bool
	}
	for _, x := range []struct {
		name  string
		spans []span
		want  AvailabilityReport
	}{
		{"ten", []span{{5, false}, {10, true}, {25, false}}, AvailabilityReport{Seconds: 40, Unavailable: 10, Periods: 1, Since: 15}},
		{"nine", []span{{5, false}, {9, true}, {6, false}}, AvailabilityReport{Seconds: 20, Errored: 9}},
		{"six good ones", []span{{12, true}, {6, false}, {2, true}, {20, false}}, AvailabilityReport{Seconds: 40, Unavailable: 20, Periods: 1, Since: 20}},
		{"not back yet", []span{{5, false}, {10, true}, {9, false}}, AvailabilityReport{Seconds: 24, Unavailable: 19, Periods: 1, Down: true, Since: 5}},
		{"not down yet", []span{{5, false}, {9, true}}, AvailabilityReport{Seconds: 14, Errored: 9}},
		{"twice", []span{{10, true}, {10, false}, {11, true}}, AvailabilityReport{Seconds: 31, Unavailable: 21, Periods: 2, Down: true, Since: 20}},
	} {
		var a Availability
		for _, s := range x.spans {
			for range s.n {
				a.Second(s.severe)
			}
		}
		if got := a.Report(); got != x.want || got != a.Report() {
			t.Errorf("%s: %+v, want %+v", x.name, got, x.want)
		}
	}
	r := AvailabilityReport{Seconds: 40, Unavailable: 10}
	if ratio, ok := r.Ratio(); !ok || ratio != 0.75 {
		t.Errorf("ratio %v", ratio)
	}
	if SeverelyErrored(10, 5) || !SeverelyErrored(10, 6) || SeverelyErrored(0, 0) {
		t.Error("half is not severe, more is, nothing sent is not")
	}
}

// The state machine against the rule as it is written: a second is unavailable
// if the latest ten of one kind that began at or before it were severe.
func TestAvailabilityAgainstTheRule(t *testing.T) {
	r := rand.New(rand.NewPCG(7, 8))
	for range 300 {
		severe := make([]bool, 1+r.IntN(120))
		stay := r.Float64()
		for i := 1; i < len(severe); i++ {
			severe[i] = severe[i-1] != (r.Float64()*stay < 0.05)
		}
		var a Availability
		for _, s := range severe {
			a.Second(s)
		}
		var want AvailabilityReport
		down := false
		for i, s := range severe {
			ahead := 0
			for i+ahead < len(severe) && severe[i+ahead] == s {
				ahead++
			}
			if s != down && ahead >= 10 {
				down = s
				want.Since = uint64(i)
				if down {
					want.Periods++
				}
			}
			if down {
				want.Unavailable++
			} else if s {
				want.Errored++
			}
		}
		want.Seconds, want.Down = uint64(len(severe)), down
		if got := a.Report(); got != want {
			t.Fatalf("%v: %+v, want %+v", severe, got, want)
		}
	}
}

func TestConfigFaults(t *testing.T) {
	_, err1 := NewDejitter(DejitterConfig{Depth: -1, Gap: 2 * des.Hour})
	_, err2 := NewMediaIndex(MediaIndexConfig{Interval: -1}, 0)
	_, err3 := NewPlayout(PlayoutConfig{StartUp: -1, Resume: -2})
	for _, x := range []struct {
		err  error
		want string
	}{
		{err1, "depth: -1ps is not between 0 and 1 h\nmost: -10ps is not between 0 and 1 h\ngap: 7200s is not between 0 and 1 h\nmost: -10ps is less than the depth, -1ps"},
		{err2, "rate: 0 bit/s is not at least 1 kbit/s\ninterval: -1ps is not between 0 and 1 h"},
		{err3, "start-up: -1ps is not between 0 and 1 h\nresume: -2ps is not between 0 and 1 h"},
	} {
		if x.err == nil || x.err.Error() != x.want {
			t.Errorf("faults:\n%v\nwant:\n%s", x.err, x.want)
		}
	}
}

// Judging costs no memory.
func TestJudgesAllocateNothing(t *testing.T) {
	d := dejitterOf(t, DejitterConfig{Adaptive: true})
	m, _ := NewMediaIndex(MediaIndexConfig{Rate: nodes.Mbps}, 0)
	p, _ := NewPlayout(PlayoutConfig{})
	var a Availability
	var i uint32
	n := testing.AllocsPerRun(2000, func() {
		born := des.Time(i) * 20 * ms
		at := born + des.Time(i%97)*ms
		d.Arrive(2*i, born, at)
		d.Lost(2*i + 1)
		m.Arrive(2*i, 1316, born)
		p.Arrive(born, at)
		a.Second(i%30 < 12)
		i++
	})
	if n != 0 || a.Report().Periods == 0 || m.Report().Lost == 0 || d.Report().Late == 0 {
		t.Errorf("%v allocations a packet", n)
	}
}

func BenchmarkJudges(b *testing.B) {
	d := dejitterOf(b, DejitterConfig{Adaptive: true})
	m, _ := NewMediaIndex(MediaIndexConfig{Rate: nodes.Mbps}, 0)
	p, _ := NewPlayout(PlayoutConfig{})
	for name, f := range map[string]func(i uint32){
		"dejitter": func(i uint32) { d.Arrive(i, des.Time(i)*20*ms, des.Time(i)*20*ms+des.Time(i%32)*ms) },
		"media":    func(i uint32) { m.Arrive(i, 1316, des.Time(i)*10*ms) },
		"playout":  func(i uint32) { p.Arrive(des.Time(i)*20*ms, des.Time(i)*20*ms+des.Time(i%32)*ms) },
	} {
		b.Run(name, func(b *testing.B) {
			var i uint32
			for b.Loop() {
				f(i)
				i++
			}
		})
	}
}
