package transport

import (
	"math"
	"testing"

	"ferrule/des"
)

// Rules of RFC 6298, section 2, worked by hand for samples of 0.1, 0.2, 0.1,
// 0.1 and 0.3 s, before the floor of 1 s.
func TestTimeoutByHand(t *testing.T) {
	var r rtt
	for i, c := range []struct{ sample, smooth, vary, base float64 }{
		{0.1, 0.1, 0.05, 0.3},
		{0.2, 0.1125, 0.0625, 0.3625},
		{0.1, 0.1109375, 0.05, 0.3109375},
		{0.1, 0.1095703125, 0.040234375, 0.2705078125},
		{0.3, 0.1333740234375, 0.077783203125, 0.4445068359375},
	} {
		r.sample(des.Time(c.sample * 1e12))
		for _, x := range [][2]float64{{seconds(r.smooth), c.smooth}, {seconds(r.vary), c.vary}, {seconds(r.base()), c.base}} {
			if math.Abs(x[0]-x[1]) > 1e-11 { // a few picoseconds of rounding
				t.Errorf("sample %d: %.13f, want %.13f", i+1, x[0], x[1])
			}
		}
	}
	if r.timeout() != des.Second {
		t.Errorf("time-out %v, want the floor of 1 s", r.timeout())
	}
	for i, want := range []des.Time{2, 4, 8, 16, 32, 60, 60, 60} {
		r.tries = uint8(i + 1)
		if r.timeout() != want*des.Second {
			t.Errorf("after %d time-outs %v, want %d s", i+1, r.timeout(), want)
		}
	}
	if r := (&rtt{}); r.timeout() != des.Second {
		t.Errorf("first time-out %v, want 1 s", r.timeout())
	}
}

// K = cbrt(Wmax (1 - 0.7)/0.4) s (RFC 9438, section 4.2), and the window is 0.7
// Wmax at 0 and Wmax at K; computed from the formulas.
func TestCubicByHand(t *testing.T) {
	for _, c := range []struct{ wmax, k float64 }{{10, 1.9574338}, {100, 4.2171633}, {500, 7.2112479}, {1000, 9.0856030}, {10000, 19.5743382}} {
		w := newWindow(10)
		w.cwnd = c.wmax
		w.reduce(Cubic, c.wmax)
		if math.Abs(w.cwnd-0.7*c.wmax) > 1e-9 || w.ssthresh != w.cwnd {
			t.Errorf("a window of %g is reduced to %g, threshold %g", c.wmax, w.cwnd, w.ssthresh)
		}
		w.grow(Cubic, des.Second, des.Millisecond, 0, 2)
		if math.Abs(w.k-c.k) > 1e-7 {
			t.Errorf("K of %g is %.7f, want %.7f", c.wmax, w.k, c.k)
		}
		if a, b := cubicWindow(0, w.k, w.wmax), cubicWindow(w.k, w.k, w.wmax); math.Abs(a-0.7*c.wmax) > 1e-9*c.wmax || math.Abs(b-c.wmax) > 1e-9 {
			t.Errorf("Wmax %g: window %g at 0 and %g at K", c.wmax, a, b)
		}
	}
	// Fast convergence: a reduction below the last one leaves room (section 4.7).
	w := newWindow(10)
	w.cwnd = 100
	w.reduce(Cubic, 100)
	w.reduce(Cubic, 70)
	if math.Abs(w.wmax-70*1.7/2) > 1e-9 {
		t.Errorf("Wmax %g after a second reduction, want 59.5", w.wmax)
	}
}

func TestCubeRoot(t *testing.T) {
	for _, x := range []float64{0, 1e-9, 0.3, 1, 7.5, 8, 27, 1000, 123456.789, 1e12} {
		if got := cubeRoot(x); math.Abs(got-math.Cbrt(x)) > 1e-14*math.Cbrt(x) {
			t.Errorf("cube root of %g: %.17g, want %.17g", x, got, math.Cbrt(x))
		}
	}
}

// With losses at equal distances of 1/p segments the mean window follows RFC
// 9438, section 4.8 and table 1: RTT 0.1 s, 187 at 1e-4 and 5926 at 1e-6, whose
// closed form drops terms; stepping W once each round gives 178.6 and 6329
// (computed from the formulas). Here each acknowledgement grows the window.
func TestCubicMeanWindow(t *testing.T) {
	for _, c := range []struct{ p, table float64 }{{1e-4, 187}, {1e-6, 5926}} {
		const round = 100 * des.Millisecond
		w := newWindow(10)
		w.ssthresh = 10
		now, sent, rounds, sum := des.Time(0), 0.0, 0.0, 0.0
		for losses := 0; losses < 40; {
			n := int(w.cwnd)
			for range n {
				now += round / des.Time(n)
				w.grow(Cubic, now, round, 1, 2)
			}
			if losses >= 20 {
				sum += float64(n)
				rounds++
			}
			if sent += float64(n); sent >= 1/c.p {
				sent = 0
				losses++
				w.reduce(Cubic, w.cwnd)
			}
		}
		if mean := sum / rounds; math.Abs(mean/c.table-1) > 0.1 {
			t.Errorf("p = %g: mean window %.1f, table %g", c.p, mean, c.table)
		}
	}
}

func TestNumbers(t *testing.T) {
	for _, base := range []uint32{0, 5, 1<<15 - 3, 1 << 15, 1<<31 - 7, 1<<32 - 9} {
		for _, d := range []int32{-16384, -100, -1, 0, 1, 77, 16383} {
			no := uint32(int32(base) + d)
			if got := near(base, no&serialMask); got != no {
				t.Errorf("from %d the number with remainder %d is %d, want %d", base, no&serialMask, got, no)
			}
		}
	}
	for _, c := range []struct {
		bytes, n uint32
		last     uint16
	}{{1, 1, 1}, {1460, 1, 1460}, {1461, 2, 1}, {14600, 10, 1460}} {
		if n, last := segmentsOf(c.bytes); n != c.n || last != c.last {
			t.Errorf("%d B are %d segments, the last of %d B; want %d and %d", c.bytes, n, last, c.n, c.last)
		}
	}
}
