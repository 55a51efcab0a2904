package workloads

import (
	"math"
	"math/bits"
	"math/rand/v2"
	"testing"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
)

func videoOf(t testing.TB, c VideoConfig) *Video {
	t.Helper()
	if c.Name == "" {
		c.Name = "w"
	}
	c.Way = 6
	v, err := NewVideo(c)
	if err != nil {
		t.Fatal(err)
	}
	return v
}

func TestVideoContract(t *testing.T) {
	for _, c := range []VideoConfig{
		{Common: Common{Load: 30 * nodes.Mbps, Start: 30 * des.Millisecond, Stop: 900 * des.Millisecond}},
		{Common: Common{Load: 20 * nodes.Mbps, Start: 30 * des.Millisecond, Stop: 900 * des.Millisecond}, Rate: nodes.Mbps, CoV: 1.5, Pace: 1100 * nodes.Kbps},
		{Common: Common{Load: 20 * nodes.Mbps, Start: 30 * des.Millisecond, Stop: 900 * des.Millisecond}, Rate: nodes.Mbps, Pattern: Random, Hold: random.Spec{Kind: random.Exponential, Mean: 0.3}},
		{Common: Common{Load: 20 * nodes.Mbps, Start: 30 * des.Millisecond, Stop: 900 * des.Millisecond}, Rate: nodes.Mbps, Pattern: Regular, Hold: random.Spec{Kind: random.Lognormal, Mean: 0.4, CoV: 1}, Frames: 29.97},
	} {
		testContract(t, func() Source { return videoOf(t, c) }, c.Start, c.Stop, des.Second)
	}
}

// A frameSent is one frame as it was seen.
type frameSent struct {
	at      des.Time
	bytes   int // without headers
	packets int
}

// framesOf takes the frames of each flow out of packets that were sent so fast
// that a frame ends before the next begins.
func framesOf(t *testing.T, ps []nodes.Packet, pace nodes.Rate) [][]frameSent {
	t.Helper()
	var flows [][]frameSent
	last := map[uint16]nodes.Packet{}
	for _, p := range ps {
		for int(p.Flow) >= len(flows) {
			flows = append(flows, nil)
		}
		fs := flows[p.Flow]
		if q, ok := last[p.Flow]; ok && p.Born == q.Born+pace.TxTime(nodes.Bytes(q.Size)) {
			if q.Size != 1500 {
				t.Fatalf("a packet of %d B inside a frame", q.Size)
			}
		} else {
			fs = append(fs, frameSent{at: p.Born})
		}
		f := &fs[len(fs)-1]
		f.packets++
		f.bytes += int(p.Size) - 40
		flows[p.Flow] = fs
		last[p.Flow] = p
	}
	return flows
}

// Frames start on an exact grid, are cut into the least number of packets, and
// have means in the ratio of their kinds: a group of 1 I, 3 P and 8 B of 40, 20
// and 10 kB has a mean of 15 kB, 3 Mbit/s at 25 frames a second (arithmetic).
func TestVideoFrames(t *testing.T) {
	for _, rate := range []float64{25, 29.97, 24} {
		// 15 kB and 40 B for each packet: (28 + 3·14 + 8·7)/12 packets a frame.
		bytes := 15000 + 40*(28+3*14+8*7)/12.0
		c := VideoConfig{
			Common: Common{Load: nodes.Rate(math.Round(7 * bytes * 8 * rate))},
			Rate:   nodes.Rate(math.Round(bytes * 8 * rate)), Frames: rate, CoV: 0.001, Pace: nodes.Gbps,
		}
		flows := framesOf(t, videoOf(t, c).Emit(10*des.Second, nil), c.Pace)
		if len(flows) != 7 {
			t.Fatalf("%d flows", len(flows))
		}
		for id, fs := range flows {
			count := [3]int{}
			for k, f := range fs {
				kind := 0 // by size: I, P, B
				for f.bytes < []int{30_000, 15_000, 0}[kind] {
					kind++
				}
				count[kind]++
				if mean := []float64{40e3, 20e3, 10e3}[kind]; math.Abs(float64(f.bytes)-mean) > 0.006*mean {
					t.Fatalf("%v/s: a frame of %d B", rate, f.bytes)
				}
				if f.packets != (f.bytes+1459)/1460 {
					t.Fatalf("%v/s: frame of %d B in %d packets", rate, f.bytes, f.packets)
				}
				if k < 2 {
					continue // the first may have begun before the start
				}
				hi, lo := bits.Mul64(uint64(k), 1000*uint64(des.Second))
				q, _ := bits.Div64(hi, lo, uint64(math.Round(rate*1000)))
				// Two rounded numbers of intervals differ by at most one.
				if d := f.at - fs[0].at - des.Time(q); d < -1 || d > 1 {
					t.Fatalf("%v/s: frame %d of flow %d is %v off", rate, k, id, d)
				}
			}
			groups := len(fs) / 12
			if count[0] < groups || count[1] < 3*groups || count[2] < 8*groups {
				t.Errorf("%v/s: I, P, B %v in %d frames", rate, count, len(fs))
			}
		}
	}
}

// Sizes of one kind follow the lognormal law, and frames as a whole have the
// variation of the trace that the defaults are made for.
func TestVideoSizesFollowTheirLaw(t *testing.T) {
	c := VideoConfig{Common: Common{Load: 400 * nodes.Mbps}, Group: "P", CoV: 0.5, Pace: 2 * nodes.Gbps}
	v := videoOf(t, c)
	var xs []float64
	for _, fs := range framesOf(t, v.Emit(20*des.Second, nil), c.Pace) {
		for _, f := range fs[1 : len(fs)-1] {
			xs = append(xs, float64(f.bytes))
		}
	}
	if d, limit := ks(xs, v.laws[1].CDF); d > limit || len(xs) < 20_000 {
		t.Errorf("distance %.2f of %d frames from their law, limit %.2f", d, len(xs), limit)
	}
	c = VideoConfig{Common: Common{Load: 400 * nodes.Mbps}, Pace: 2 * nodes.Gbps}
	var n, sum, sq float64
	for _, fs := range framesOf(t, videoOf(t, c).Emit(20*des.Second, nil), c.Pace) {
		for _, f := range fs[1 : len(fs)-1] {
			n++
			sum += float64(f.bytes)
			sq += float64(f.bytes) * float64(f.bytes)
		}
	}
	// The trace gives two digits: 0.66. The sampling error of 25 000 frames
	// is below 0.01.
	if cov := math.Sqrt(sq/n-sum*sum/n/n) / (sum / n); math.Abs(cov-0.66) > 0.015 {
		t.Errorf("CoV of frames %.3f, want 0.66", cov)
	}
}

func TestVideoOffersWhatIsAsked(t *testing.T) {
	for _, c := range []VideoConfig{
		{Common: Common{Load: 300 * nodes.Mbps}},
		{Common: Common{Load: 50 * nodes.Mbps}, Rate: 500 * nodes.Kbps, CoV: 1.5},
	} {
		for _, from := range []des.Time{0, des.Second} {
			mean, half := replicate(30, func(seed uint64) float64 {
				c.Seed = seed
				v := videoOf(t, c)
				v.Emit(from, nil)
				return rateOf(v.Emit(from+des.Second/4, nil), des.Second/4)
			})
			want := float64(c.Load)
			if math.Abs(mean-want) > half || half > 0.06*want {
				t.Errorf("from %v: %.4g ± %.2g bit/s, want %.4g", from, mean, half, want)
			}
		}
	}
}

// Flows that come and go are stationary from the start: their load has the mean
// asked for in the first quarter of a second and later, whatever the holding
// times, and for Poisson arrivals the number sending has a variance equal to its
// mean (A. Erlang, 1917: M/G/infinity is Poisson).
func TestVideoFlowsAreStationary(t *testing.T) {
	for _, hold := range []random.Spec{{Kind: random.Exponential, Mean: 1}, {Kind: random.Constant, Mean: 1}} {
		for _, pattern := range []Pattern{Random, Regular} {
			c := VideoConfig{Common: Common{Load: 160 * nodes.Mbps}, Rate: nodes.Mbps, Pattern: pattern, Hold: hold}
			for _, from := range []des.Time{0, 2 * des.Second} {
				mean, half := replicate(30, func(seed uint64) float64 {
					c.Seed = seed
					v := videoOf(t, c)
					v.Emit(from, nil)
					return rateOf(v.Emit(from+des.Second/4, nil), des.Second/4)
				})
				if math.Abs(mean-160e6) > half || half > 0.06*160e6 {
					t.Errorf("%v flows, %v holding, from %v: %.4g ± %.2g bit/s, want 160e6", pattern, hold.Kind, from, mean, half)
				}
			}
		}
	}
	var sum, sq float64
	const runs = 200
	for seed := range uint64(runs) {
		v := videoOf(t, VideoConfig{Common: Common{Load: 50 * nodes.Mbps, Seed: seed}, Rate: nodes.Mbps, Pattern: Random})
		v.Emit(des.Second/2, nil)
		n := float64(len(v.cameras) - len(v.idle))
		sum += n
		sq += n * n
	}
	mean := sum / runs
	if iod := (sq - sum*mean) / (runs - 1) / mean; math.Abs(iod-1) > 3.29*math.Sqrt(2.0/runs) || math.Abs(mean-50) > 3.29*math.Sqrt(50.0/runs) {
		t.Errorf("%.2f flows with variance over mean %.3f, want 50 and 1", mean, iod)
	}
}

// A flow of 2.0 s at 25 frames a second sends 50 frames, exactly 40 ms apart,
// the first when it arrives: here one every 100 ms (1 Mbit/s · 2 s / 20 Mbit/s).
func TestVideoFlowEnds(t *testing.T) {
	c := VideoConfig{
		Common: Common{Load: 20 * nodes.Mbps}, Rate: nodes.Mbps, Pace: nodes.Gbps,
		Pattern: Regular, Hold: random.Spec{Kind: random.Constant, Mean: 2},
	}
	v := videoOf(t, c)
	met := int(v.nextID)
	flows := framesOf(t, v.Emit(10*des.Second, nil), c.Pace)
	if len(flows)-met < 98 || len(flows)-met > 101 {
		t.Fatalf("%d flows arrive in 10 s", len(flows)-met)
	}
	for id, fs := range flows[met:] {
		if id > 75 {
			break // not over at 10 s
		}
		if len(fs) != 50 {
			t.Errorf("flow %d: %d frames", id, len(fs))
		}
		for k, f := range fs {
			if f.at != fs[0].at+des.Time(k)*40*des.Millisecond {
				t.Fatalf("flow %d: frame %d comes %v after the first", id, k, f.at-fs[0].at)
			}
		}
		if id > 0 && fs[0].at-flows[met+id-1][0].at != 100*des.Millisecond {
			t.Errorf("flow %d arrives %v after the one before", id, fs[0].at-flows[met+id-1][0].at)
		}
	}
}

func TestVideoFaults(t *testing.T) {
	_, err := NewVideo(VideoConfig{Common: Common{Name: "w", Load: nodes.Mbps}, Group: "IQ", Frames: -1, CoV: 9, Ratio: [3]float64{1, 1, -1}})
	const want = "frames: -1/s is not between 0.1 and 1000\ngroup: \"IQ\" is not made of I, P and B\n" +
		"ratio: -1 for B is not above 0\ncov: 9 is not between 0.001 and 3"
	if err == nil || err.Error() != want {
		t.Errorf("faults:\n%v\nwant:\n%s", err, want)
	}
	_, err = NewVideo(VideoConfig{Common: Common{Name: "w", Load: nodes.Kbps}, Pace: 1000})
	const tight = "pace: 1000 bit/s is not above the rate of a flow, 1000 bit/s, and at most 4 Tbit/s\n" +
		"rate: a flow of 1000 bit/s holds hardly more than the headers of 25 frames a second; write at least 8400 bit/s"
	if err == nil || err.Error() != tight {
		t.Errorf("faults:\n%v\nwant:\n%s", err, tight)
	}
}

func TestVideoFlowFaults(t *testing.T) {
	for _, x := range []struct {
		c    VideoConfig
		want string
	}{
		{VideoConfig{Hold: random.Spec{Mean: 3}}, "hold: flows that last have no length"},
		{VideoConfig{Pattern: 7}, "pattern: no pattern 7"},
		{VideoConfig{Pattern: Random, Hold: random.Spec{Kind: random.Pareto, Min: 1, Shape: 0.9}},
			"hold: the tail is so heavy that there is no mean to speak of; write at-most, or a larger shape"},
	} {
		x.c.Common = Common{Name: "w", Load: nodes.Mbps}
		if _, err := NewVideo(x.c); err == nil || err.Error() != x.want {
			t.Errorf("faults:\n%v\nwant:\n%s", err, x.want)
		}
	}
}

func BenchmarkVideo(b *testing.B) {
	for name, pattern := range map[string]Pattern{"standing": Standing, "random": Random} {
		b.Run(name, func(b *testing.B) {
			v := videoOf(b, VideoConfig{Common: Common{Load: 3 * nodes.Gbps}, Pattern: pattern})
			var buf []nodes.Packet
			end, n := des.Time(0), 0
			for b.Loop() {
				end += des.Millisecond
				buf = v.Emit(end, buf[:0])
				n += len(buf)
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(n), "ns/packet")
		})
	}
}

// The tournament against a search through all flows, with many ties.
func TestTournament(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 4))
	for _, n := range []int{0, 1, 2, 3, 8, 21} {
		due := make([]des.Time, n)
		for i := range due {
			due[i] = des.Time(r.IntN(5))
		}
		x := newTournament(due)
		for range 500 {
			want := des.Never
			id := 0
			for i, at := range due {
				if at < want {
					want, id = at, i
				}
			}
			got, at := x.first()
			if at != want || x.next() != want || want != des.Never && int(got) != id {
				t.Fatalf("first of %v is %d at %v, want %d at %v", due, got, at, id, want)
			}
			if n == 0 {
				break
			}
			i := r.IntN(n)
			due[i] = []des.Time{des.Never, want, due[i], des.Time(r.IntN(5)), des.Time(r.IntN(50))}[r.IntN(5)]
			x.set(uint32(i), due[i])
			if x.of(uint32(i)) != due[i] {
				t.Fatalf("flow %d is due at %v, want %v", i, x.of(uint32(i)), due[i])
			}
		}
	}
}
