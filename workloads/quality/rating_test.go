package quality

import (
	"math"
	"testing"

	"ferrule/des"
	"ferrule/des/measure"
)

// near reports whether got is want within tolerance.
func near(got, want, tolerance float64) bool { return math.Abs(got-want) <= tolerance }

// The default rating is published: 93.2 (ITU-T G.107), Ro 94.77, Is 1.41, Id
// 0.15 (a lecture's worked example). The digits are computed from the formulas
// of G.107; No and Is agree with a published implementation.
func TestDefaultRating(t *testing.T) {
	l := DefaultLine()
	no := l.noise()
	ro := 15 - 1.5*(l.SLR+no)
	r := l.Rate(Call{})
	for _, x := range []struct {
		name      string
		got, want float64
		tolerance float64
	}{
		{"Nos", l.sendNoise(), -75.744, 1e-9},
		{"Pre", l.effectiveRoom(), 35.638920341, 1e-8},
		{"Nor", l.receiveNoise(), -83.357813905, 1e-8},
		{"No", no, -61.179214386, 1e-8},
		{"Ro", r.Ro, 94.768821579, 1e-8},
		{"Ro, lecture", r.Ro, 94.77, 0.005},
		{"Iolr", l.loudness(no), 0.440178126, 1e-8},
		{"STMRo", l.sidetoneRating(0), 14.999956571, 1e-8},
		{"Ist", l.sidetone(0), -0.000715133, 1e-8},
		{"Iq", l.quantising(ro), 0.974105138, 1e-8},
		{"Is", r.Is, 1.413568131, 1e-8},
		{"Is, lecture", r.Is, 1.41, 0.005},
		{"TERV", l.echoRating(0, 0), 71, 1e-9},
		{"Idle", r.Idle, 0.149045725, 1e-8},
		{"Id, lecture", r.Idte + r.Idle + r.Idd, 0.15, 0.005},
		{"R", r.R, 93.206207723, 1e-8},
		{"R, published", r.R, 93.2, 0.05},
		{"MOS", MOS(r.R), 4.409405954, 1e-8},
	} {
		if !near(x.got, x.want, x.tolerance) {
			t.Errorf("%s: %.9f, want %v", x.name, x.got, x.want)
		}
	}
}

// Pairs of delay and loss, computed twice from the formulas of ITU-T G.107 by
// independent programs. Those of 150 ms and 2 % are also a lecture's worked
// example: about R 82.5, MOS 4.12 (G.711 with concealment) and R 70.5, MOS 3.62
// (G.729A), and Ie,eff 35.8 at 2 % and burst ratio 2.
func TestRatings(t *testing.T) {
	for _, x := range []struct {
		codec            Codec
		ms               int
		percent, burst   float64
		idd, ieEff       float64
		plainR, plainMOS float64
		idte, idle       float64
		echoR, echoMOS   float64
	}{
		{CodecG711, 0, 0, 1, 0.0000, 0.0000, 93.2062, 4.4094, 0.0000, 0.1490, 93.2062, 4.4094},
		{CodecG711, 50, 0, 1, 0.0000, 0.0000, 93.2062, 4.4094, 1.0229, 0.5761, 91.7562, 4.3796},
		{CodecG711, 100, 0, 1, 0.0000, 0.0000, 93.2062, 4.4094, 1.9638, 0.7277, 90.6637, 4.3549},
		{CodecG711, 150, 0, 1, 0.1635, 0.0000, 93.0427, 4.4062, 2.8118, 0.8407, 89.5391, 4.3275},
		{CodecG711, 200, 0, 1, 3.0444, 0.0000, 90.1618, 4.3429, 3.5708, 0.9353, 85.8047, 4.2232},
		{CodecG711, 250, 0, 1, 8.9167, 0.0000, 84.2895, 4.1753, 4.2429, 1.0186, 79.1771, 3.9925},
		{CodecG711, 300, 0, 1, 14.7607, 0.0000, 78.4455, 3.9639, 4.8339, 1.0943, 72.6664, 3.7194},
		{CodecG711, 400, 0, 1, 24.0701, 0.0000, 69.1361, 3.5562, 5.8082, 1.2301, 62.2468, 3.2156},
		{CodecG711, 500, 0, 1, 30.6359, 0.0000, 62.5703, 3.2321, 6.5641, 1.3521, 54.8032, 2.8280},
		{CodecG711, 50, 1, 1, 0.0000, 17.9245, 75.2817, 3.8339, 1.0229, 0.5761, 73.8316, 3.7712},
		{CodecG711, 50, 3, 1, 0.0000, 39.0411, 54.1651, 2.7944, 1.0229, 0.5761, 52.7151, 2.7179},
		{CodecG711, 150, 0.5, 1, 0.1635, 9.8958, 83.1468, 4.1372, 2.8118, 0.8407, 79.6433, 4.0104},
		{CodecG711, 100, 2, 2, 0.0000, 35.8491, 57.3572, 2.9623, 1.9638, 0.7277, 54.8147, 2.8286},
		{CodecG711Concealed, 50, 1, 1, 0.0000, 3.6398, 89.5664, 4.3282, 1.0229, 0.5761, 88.1163, 4.2902},
		{CodecG711Concealed, 50, 3, 1, 0.0000, 10.1423, 83.0639, 4.1344, 1.0229, 0.5761, 81.6138, 4.0835},
		{CodecG711Concealed, 150, 1, 1, 0.1635, 3.6398, 89.4028, 4.3241, 2.8118, 0.8407, 85.8993, 4.2261},
		{CodecG711Concealed, 150, 2, 1, 0.1635, 7.0111, 86.0316, 4.2301, 2.8118, 0.8407, 82.5281, 4.1159},
		{CodecG711Concealed, 200, 2, 1, 3.0444, 7.0111, 83.1507, 4.1373, 3.5708, 0.9353, 78.7936, 3.9776},
		{CodecG711Concealed, 300, 5, 1, 14.7607, 15.7807, 62.6648, 3.2369, 4.8339, 1.0943, 56.8856, 2.9375},
		{CodecG711Concealed, 400, 1, 1, 24.0701, 3.6398, 65.4963, 3.3793, 5.8082, 1.2301, 58.6070, 3.0276},
		{CodecG711Concealed, 100, 2, 2, 0.0000, 7.2797, 85.9265, 4.2269, 1.9638, 0.7277, 83.3840, 4.1452},
		{CodecG729AVAD, 20, 0, 1, 0.0000, 11.0000, 82.2062, 4.1046, 0.3919, 0.4321, 81.5313, 4.0805},
		{CodecG729AVAD, 50, 1, 1, 0.0000, 15.2000, 78.0062, 3.9465, 1.0229, 0.5761, 76.5562, 3.8875},
		{CodecG729AVAD, 150, 0.5, 1, 0.1635, 13.1538, 79.8888, 4.0198, 2.8118, 0.8407, 76.3853, 3.8804},
		{CodecG729AVAD, 150, 2, 1, 0.1635, 19.0000, 74.0427, 3.7804, 2.8118, 0.8407, 70.5391, 3.6222},
		{CodecG729AVAD, 250, 3, 1, 8.9167, 22.4545, 61.8350, 3.1945, 4.2429, 1.0186, 56.7226, 2.9290},
		{CodecG729AVAD, 400, 1, 1, 24.0701, 15.2000, 53.9361, 2.7823, 5.8082, 1.2301, 47.0468, 2.4207},
		{CodecG729AVAD, 100, 2, 4, 0.0000, 19.6154, 73.5908, 3.7606, 1.9638, 0.7277, 71.0483, 3.6458},
	} {
		c := Call{Codec: x.codec, Delay: des.Time(x.ms) * des.Millisecond, Loss: x.percent / 100, BurstRatio: x.burst}
		plain := DefaultLine().Rate(c)
		c.Echo = true
		echo := DefaultLine().Rate(c)
		for _, y := range []struct {
			name      string
			got, want float64
		}{
			{"Idd", plain.Idd, x.idd}, {"Idd with echo", echo.Idd, x.idd},
			{"Ie,eff", plain.IeEff, x.ieEff}, {"Ie,eff with echo", echo.IeEff, x.ieEff},
			{"R", plain.R, x.plainR}, {"MOS", MOS(plain.R), x.plainMOS}, {"Idle", plain.Idle, 0.1490},
			{"Idte with echo", echo.Idte, x.idte}, {"Idle with echo", echo.Idle, x.idle},
			{"R with echo", echo.R, x.echoR}, {"MOS with echo", MOS(echo.R), x.echoMOS},
		} {
			if !near(y.got, y.want, 5e-4) {
				t.Errorf("%v, %d ms, %v %%, burst ratio %v: %s %.4f, want %.4f", x.codec, x.ms, x.percent, x.burst, y.name, y.got, y.want)
			}
		}
	}
}

// Strong sidetone weakens echo, weak sidetone adds to it (G.107, 7-23 and
// 7-24): Idte by hand from the parts.
func TestSidetoneCorrections(t *testing.T) {
	call := Call{Delay: 100 * des.Millisecond, Echo: true}
	strong, weak := DefaultLine(), DefaultLine()
	strong.STMR, weak.STMR = 8, 22
	no, ist := strong.noise(), strong.sidetone(100)
	terv := 65 - 40*math.Log10(11/(1+100.0/150)) + ist/2
	half := (-1.5*(no-2) - (80 + 2.5*(terv-14))) / 2
	if want := half + math.Sqrt(half*half+100) - 1; !near(strong.Rate(call).Idte, want, 1e-9) {
		t.Errorf("STMR 8: Idte %v, want %v", strong.Rate(call).Idte, want)
	}
	plain := DefaultLine().Rate(call).Idte
	if want := math.Hypot(plain, weak.sidetone(100)); !near(weak.Rate(call).Idte, want, 1e-9) {
		t.Errorf("STMR 22: Idte %v, want %v", weak.Rate(call).Idte, want)
	}
}

// ITU-T G.107, Table B.1 (MOS, GoB and PoW rounded), and more digits computed
// from equations B-1 to B-4.
func TestOpinions(t *testing.T) {
	for _, x := range []struct{ r, mos, good, poor float64 }{
		{95, 4.441375, 98.5647, 0.0889}, {93.2, 4.409286, 98.1007, 0.1296}, {90, 4.339000, 96.9604, 0.2458},
		{85, 4.198125, 94.0915, 0.6210}, {80, 4.024000, 89.4350, 1.4353}, {75, 3.821875, 82.5749, 3.0396},
		{70, 3.597000, 73.4014, 5.9085}, {65, 3.354625, 62.2670, 10.5650}, {60, 3.100000, 50.0000, 17.4251},
		{55, 2.838375, 37.7330, 26.5986}, {50, 2.575000, 26.5986, 37.7330}, {30, 1.609000, 3.0396, 82.5749},
		{10, 1.035000, 0.0889, 98.5647},
	} {
		if !near(MOS(x.r), x.mos, 1e-6) || !near(100*GoodOrBetter(x.r), x.good, 1e-4) || !near(100*PoorOrWorse(x.r), x.poor, 1e-4) {
			t.Errorf("R %v: MOS %.6f, good %.4f %%, poor %.4f %%; want %v", x.r, MOS(x.r), 100*GoodOrBetter(x.r), 100*PoorOrWorse(x.r), x)
		}
	}
	for _, x := range []struct{ r, mos, good, poor float64 }{{90, 4.34, 97, 0}, {80, 4.03, 89, 1}, {70, 3.60, 73, 6}, {60, 3.10, 50, 17}, {50, 2.58, 27, 38}} {
		if !near(MOS(x.r), x.mos, 0.01) || !near(100*GoodOrBetter(x.r), x.good, 0.5) || !near(100*PoorOrWorse(x.r), x.poor, 0.5) {
			t.Errorf("R %v differs from the published table", x.r)
		}
	}
	if MOS(-5) != 1 || MOS(0) != 1 || MOS(100) != 4.5 || MOS(120) != 4.5 || !near(MOS(3.222), 0.988839, 1e-6) {
		t.Error("MOS at its ends")
	}
	// By bisection of MOS.
	for _, x := range [][2]float64{{1.5, 27.268821}, {2, 38.683650}, {2.5, 48.568304}, {3, 58.078518}, {3.5, 67.961516}, {4, 79.370897}, {4.4, 92.729809}} {
		if !near(RatingOf(x[0]), x[1], 1e-5) {
			t.Errorf("rating of %v: %v, want %v", x[0], RatingOf(x[0]), x[1])
		}
	}
}

// Two-state loss with p from good to loss and q back has burst ratio 1/(p+q)
// (ITU-T G.107, 7-30): runs of exactly mean length 4 at 2 % loss, by arithmetic
// 4·0.98.
func TestBurstRatio(t *testing.T) {
	var l measure.LossRuns
	for k := range uint32(100) {
		for i := range 3 + 2*(k%2) { // 3 and 5 in turns
			l.Lost(200*k + i)
		}
	}
	r := l.Report()
	if x, ok := BurstRatio(20_000, &r); !ok || !near(x, 4*0.98, 1e-12) {
		t.Errorf("burst ratio %v, want 3.92", x)
	}
	const p, q = 0.005, 0.245 // the same chain: loss p/(p+q) = 2 %, runs of 1/q
	if !near(1/q*(1-p/(p+q)), 1/(p+q), 1e-12) {
		t.Error("the two forms of the burst ratio differ")
	}
	if _, ok := BurstRatio(5, &measure.LossReport{}); ok {
		t.Error("a burst ratio without loss")
	}
}

// R. Cole, J. Rosenbluth (2001): computed from the formulas; and how near the
// form is to the E-model with echo, as it should be below 350 ms.
func TestSimplifiedRating(t *testing.T) {
	for _, x := range []struct{ ms, id, full float64 }{
		{50, 1.200, 1.599}, {100, 2.400, 2.692}, {150, 3.600, 3.816}, {177.3, 4.255, 5.303}, {200, 7.297, 7.551}, {250, 13.997, 14.178},
		{300, 20.697, 20.689}, {350, 27.397, 26.328}, {400, 34.097, 31.108}, {500, 47.497, 38.552}, {600, 60.897, 43.871},
		{800, 87.697, 50.533}, {1000, 114.497, 54.279},
	} {
		d := des.Time(x.ms * float64(des.Millisecond))
		r := DefaultLine().Rate(Call{Delay: d, Echo: true})
		if got := BaseOriginal - SimplifiedRating(BaseOriginal, CurveG711, d, 0); !near(got, x.id, 1e-3) {
			t.Errorf("%v ms: Id %.4f, want %v", x.ms, got, x.id)
		}
		if full := r.Idte + r.Idle + r.Idd; !near(full, x.full, 1e-3) || x.ms < 350 && !near(full, x.id, 1.06) {
			t.Errorf("%v ms: full Id %.4f, want %v, near %v", x.ms, full, x.full, x.id)
		}
	}
	for _, x := range []struct{ loss, g711, g729 float64 }{{0.01, 4.193, 14.812}, {0.02, 7.871, 18.293}, {0.05, 16.788, 27.219}} {
		g711 := BaseToday - SimplifiedRating(BaseToday, CurveG711, 0, x.loss)
		g729 := BaseToday - SimplifiedRating(BaseToday, CurveG729A, 0, x.loss)
		if !near(g711, x.g711, 1e-3) || !near(g729, x.g729, 1e-3) {
			t.Errorf("%v: Ie %.4f and %.4f, want %v and %v", x.loss, g711, g729, x.g711, x.g729)
		}
	}
}

// ITU-T G.113 Appendix I.
func TestCodecs(t *testing.T) {
	for c, want := range map[Codec][2]float64{
		CodecG711: {0, 4.3}, CodecG711Concealed: {0, 25.1}, CodecG729AVAD: {11, 19}, CodecG7231VAD: {15, 16.1}, CodecGSMEFR: {5, 10},
		CodecG729A: {10, 0}, CodecG726at40: {2, 0}, CodecG726at32: {7, 0}, CodecG726at24: {25, 0}, CodecG726at16: {50, 0},
		CodecG728at16: {7, 0}, CodecG728at12k8: {20, 0}, CodecG7231at6k3: {15, 0}, CodecG7231at5k3: {19, 0},
	} {
		ie, bpl, robust := c.Impairment()
		if ie != want[0] || bpl != want[1] || robust != (c <= CodecGSMEFR) || c.String() == "" {
			t.Errorf("%v: Ie %v, Bpl %v, %v", c, ie, bpl, robust)
		}
	}
}

// Mistakes of the caller panic.
func TestPanics(t *testing.T) {
	for name, f := range map[string]func(){
		"delay":   func() { DefaultLine().Rate(Call{Delay: -1}) },
		"loss":    func() { DefaultLine().Rate(Call{Loss: 3}) },
		"burst":   func() { DefaultLine().Rate(Call{BurstRatio: -1}) },
		"robust":  func() { DefaultLine().Rate(Call{Codec: CodecG729A, Loss: 0.01}) },
		"codec":   func() { Codec(99).Impairment() },
		"mos":     func() { RatingOf(5) },
		"lost":    func() { BurstRatio(1, &measure.LossReport{Lost: 2}) },
		"step":    func() { SimplifiedRating(BaseToday, CurveG711, -1, 0) },
		"curve":   func() { SimplifiedRating(BaseToday, 9, 0, 0) },
		"percent": func() { SimplifiedRating(BaseToday, CurveG711, 0, 2) },
		"class":   func() { ObjectiveOf(8) },
	} {
		func() {
			defer func() {
				if recover() == nil {
					t.Errorf("%s: no panic", name)
				}
			}()
			f()
		}()
	}
}
