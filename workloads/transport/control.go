package transport

import (
	"fmt"
	"math"

	"ferrule/des"
)

// Algorithm is a congestion control with its recovery from losses.
type Algorithm uint8

// Algorithms.
const (
	Reno    Algorithm = iota // RFC 5681: recovery ends with the first new acknowledgement
	NewReno                  // the same window, recovery by selective acknowledgement (RFC 6675)
	Cubic                    // RFC 9438, recovery by selective acknowledgement
)

// Constants of CUBIC (RFC 9438, section 4).
const (
	cubicC    = 0.4
	cubicBeta = 0.7
)

// window is the congestion window of a sender, in segments.
type window struct {
	cwnd     float64
	ssthresh float64

	// CUBIC only.
	wmax  float64  // window before the last reduction
	k     float64  // s from the reduction until the window is wmax again
	west  float64  // what Reno would have
	prior float64  // window just before the last reduction
	epoch des.Time // when congestion avoidance began, or Never
}

func newWindow(initial float64) window {
	return window{cwnd: initial, ssthresh: math.Inf(1), epoch: des.Never}
}

// beta is the share of the window that a reduction leaves.
func (a Algorithm) beta() float64 {
	switch a {
	case Reno, NewReno:
		return 0.5
	case Cubic:
		return cubicBeta
	}
	panic(fmt.Sprintf("transport: unknown algorithm %d", a))
}

// grow answers the acknowledgement at now of n segments; most is how many of
// them slow start counts (RFC 3465). In congestion avoidance Reno's window
// grows by one segment for each window that is acknowledged.
func (w *window) grow(a Algorithm, now, rtt des.Time, n, most int) {
	if w.cwnd < w.ssthresh {
		w.cwnd = min(w.cwnd+float64(min(n, most)), max(w.ssthresh, w.cwnd))
		return
	}
	if a != Cubic {
		w.cwnd += float64(n) / w.cwnd
		return
	}
	w.cubic(now, rtt, float64(n))
}

// cubic is congestion avoidance by RFC 9438, sections 4.2 to 4.5.
func (w *window) cubic(now, rtt des.Time, n float64) {
	if w.epoch == des.Never {
		w.epoch = now
		w.west = w.cwnd
		if w.cwnd < w.wmax {
			w.k = cubicK(w.wmax, w.cwnd)
		} else { // no reduction yet, or the window has passed it
			w.k, w.wmax = 0, w.cwnd
		}
	}
	t := seconds(now - w.epoch)
	alpha := 1.0
	if w.west < w.prior {
		alpha = 3 * (1 - cubicBeta) / (1 + cubicBeta)
	}
	w.west += float64(alpha*n) / w.cwnd
	if cubicWindow(t, w.k, w.wmax) < w.west {
		w.cwnd = max(w.cwnd, w.west)
		return
	}
	target := min(max(cubicWindow(t+seconds(rtt), w.k, w.wmax), w.cwnd), float64(1.5*w.cwnd))
	w.cwnd += float64((target-w.cwnd)*n) / w.cwnd
}

// cubicK is the time in s in which the window grows from cwnd to wmax: the
// cube root of (wmax - cwnd)/C.
func cubicK(wmax, cwnd float64) float64 { return cubeRoot((wmax - cwnd) / cubicC) }

// cubicWindow is the window t seconds after congestion avoidance began.
func cubicWindow(t, k, wmax float64) float64 {
	d := t - k
	return float64(cubicC*d*d*d) + wmax
}

// reduce answers congestion: the window becomes a share of what it was, of
// flight segments not acknowledged, two at least.
func (w *window) reduce(a Algorithm, flight float64) {
	base := flight
	if a == Cubic {
		base = w.cwnd
		w.prior = w.cwnd
		if w.cwnd < w.wmax { // fast convergence: another flow wants room
			w.wmax = float64(w.cwnd * (1 + cubicBeta) / 2)
		} else {
			w.wmax = w.cwnd
		}
		w.epoch = des.Never
	}
	w.ssthresh = max(float64(base*a.beta()), 2)
	w.cwnd = w.ssthresh
}

// collapse answers a retransmission timer that ran out; again says that it did
// so for the same segment before.
func (w *window) collapse(a Algorithm, flight float64, again bool) {
	if !again {
		w.reduce(a, flight)
	}
	w.cwnd = 1
}

func seconds(t des.Time) float64 { return float64(t) / float64(des.Second) }

// cubeRoot is the cube root of x >= 0 by Newton's method, each product rounded,
// so that every platform gives the same bits.
func cubeRoot(x float64) float64 {
	if x <= 0 {
		return 0
	}
	_, e := math.Frexp(x)
	y := math.Ldexp(1, (e+2)/3)
	for range 12 {
		y = (float64(2*y) + x/float64(y*y)) / 3
	}
	return y
}

// Limits of the retransmission time-out (RFC 6298, section 2; the ceiling is
// the least it allows).
const (
	rtoInitial = des.Second
	rtoFloor   = des.Second
	rtoCeiling = 60 * des.Second
)

// rtt estimates the round-trip time and the time-out (RFC 6298).
type rtt struct {
	smooth, vary des.Time
	known        bool
	tries        uint8 // time-outs since the last sample
}

// sample takes a measurement, of a segment that was sent once.
func (r *rtt) sample(m des.Time) {
	r.tries = 0
	if !r.known {
		r.known, r.smooth, r.vary = true, m, m/2
		return
	}
	d := r.smooth - m
	if d < 0 {
		d = -d
	}
	r.vary += (d - r.vary) / 4
	r.smooth += (m - r.smooth) / 8
}

// base is the time-out before its limits.
func (r *rtt) base() des.Time { return r.smooth + 4*r.vary }

// timeout is the time-out, doubled for each one since the last sample.
func (r *rtt) timeout() des.Time {
	t := rtoInitial
	if r.known {
		t = max(r.base(), rtoFloor)
	}
	return min(t<<min(r.tries, 7), rtoCeiling)
}
