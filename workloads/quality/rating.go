package quality

import (
	"fmt"
	"math"

	"ferrule/des"
)

// Line holds what the E-model knows of a connection and its ends, by the symbols
// of ITU-T G.107. Levels are in dB, dBm0p, dBmp or dB(A) as there.
type Line struct {
	SLR, RLR float64 // send and receive loudness ratings
	STMR     float64 // sidetone masking rating
	LSTR     float64 // listener sidetone rating
	Ds       float64 // D-value of the telephone at the sending side
	TELR     float64 // talker echo loudness rating
	WEPL     float64 // weighted echo path loss
	Qdu      float64 // quantising distortion units
	Nc       float64 // circuit noise
	Nfor     float64 // noise floor at the receiving side
	Ps, Pr   float64 // room noise at the sending and the receiving side
	A        float64 // advantage of access: 0 wired, at most 5, 10 or 20 (G.107, Table 1)

	Sensitivity float64  // sT of the delay term: 1, or less for users who mind less
	LeastDelay  des.Time // mT of the delay term: delay up to here does not matter
}

// DefaultLine returns the default values of ITU-T G.107 (06/2015), Table 2;
// values from memory.
func DefaultLine() Line {
	return Line{
		SLR: 8, RLR: 2, STMR: 15, LSTR: 18, Ds: 3, TELR: 65, WEPL: 110, Qdu: 1,
		Nc: -70, Nfor: -64, Ps: 35, Pr: 35,
		Sensitivity: 1, LeastDelay: 100 * des.Millisecond,
	}
}

// A Call is what one direction of a call met.
type Call struct {
	Codec      Codec
	Delay      des.Time // one way, mouth to ear
	Loss       float64  // fraction of the packets, late ones included
	BurstRatio float64  // see BurstRatio; 0 means 1, loss at random

	// Echo says whether the talker and the listener hear echo delayed by the
	// network: then all delay terms of the model are driven, T = Ta = Delay and
	// Tr = 2·Delay. Else echo is taken to be cancelled, T = Tr = 0, and the
	// absolute delay alone matters. Both readings are in use: say which.
	Echo bool
}

// A Rating is the result of the E-model with its parts:
//
//	R = Ro - Is - (Idte + Idle + Idd) - IeEff + A.
type Rating struct {
	R     float64 // transmission rating factor
	Ro    float64 // basic signal-to-noise ratio
	Is    float64 // what accompanies the speech: loudness, sidetone, quantising
	Idte  float64 // talker echo
	Idle  float64 // listener echo
	Idd   float64 // too long absolute delay
	IeEff float64 // equipment and loss
}

// Rate returns the rating of a call on the line. The result may lie outside
// [0, 100]; [MOS] takes any. Rate panics if the delay is negative, the loss
// outside [0, 1], the burst ratio negative, or the codec has no published
// robustness and the loss is above 0. The model was validated for delays up to
// 500 ms, loss up to 20 %, and burst ratios up to 2, or more at less than 2 %.
//
// Source: ITU-T G.107 (06/2015), equations 7-1 to 7-29; formulas from memory,
// held against a published worked example.
func (l Line) Rate(c Call) Rating {
	if c.Delay < 0 || !(c.Loss >= 0 && c.Loss <= 1) || !(c.BurstRatio >= 0) {
		panic(fmt.Sprintf("quality: rating of delay %v, loss %v, burst ratio %v", c.Delay, c.Loss, c.BurstRatio))
	}
	ta := float64(c.Delay) / float64(des.Millisecond)
	var t, tr float64
	if c.Echo {
		t, tr = ta, 2*ta
	}
	no := l.noise()
	ist := l.sidetone(t)
	r := Rating{Ro: 15 - float64(1.5*(l.SLR+no))}
	r.Is = l.loudness(no) + ist + l.quantising(r.Ro)
	r.Idte = l.talkerEcho(no, ist, t)
	r.Idle = l.listenerEcho(r.Ro, tr)
	r.Idd = l.absoluteDelay(ta)
	r.IeEff = c.equipment()
	r.R = r.Ro - r.Is - (r.Idte + r.Idle + r.Idd) - r.IeEff + l.A
	return r
}

// db returns the level whose power is x.
func db(x float64) float64 { return float64(10 * math.Log10(x)) }

// power returns the power of level x.
func power(x float64) float64 { return math.Pow(10, x/10) }

// olr returns the overall loudness rating.
func (l Line) olr() float64 { return l.SLR + l.RLR }

// sendNoise returns Nos (7-4).
func (l Line) sendNoise() float64 {
	x := l.Ps - l.olr() - l.Ds - 14
	return l.Ps - l.SLR - l.Ds - 100 + float64(0.004*x*x)
}

// effectiveRoom returns Pre (7-6).
func (l Line) effectiveRoom() float64 { return l.Pr + db(1+power(10-l.LSTR)) }

// receiveNoise returns Nor (7-5).
func (l Line) receiveNoise() float64 {
	x := l.effectiveRoom() - 35
	return l.RLR - 121 + l.effectiveRoom() + float64(0.008*x*x)
}

// noise returns No (7-3, 7-7).
func (l Line) noise() float64 {
	return db(power(l.Nc) + power(l.sendNoise()) + power(l.receiveNoise()) + power(l.Nfor+l.RLR))
}

// loudness returns Iolr (7-9, 7-10).
func (l Line) loudness(no float64) float64 {
	x := (l.olr() + float64(0.2*(64+no-l.RLR))) / 8
	return float64(20 * (math.Pow(1+math.Pow(x, 8), 1.0/8) - x))
}

// sidetoneRating returns STMRo (7-12) for an echo path of t ms.
func (l Line) sidetoneRating(t float64) float64 {
	return -db(power(-l.STMR) + float64(math.Exp(-t/4)*power(-l.TELR)))
}

// sidetone returns Ist (7-11).
func (l Line) sidetone(t float64) float64 {
	s := l.sidetoneRating(t)
	term := func(weight, offset, scale, n float64) float64 {
		return float64(weight * math.Pow(1+math.Pow((s+offset)/scale, n), 1/n))
	}
	return term(12, -13, 6, 8) - term(28, 1, 19.4, 35) - term(13, -3, 33, 13) + 29
}

// quantising returns Iq (7-13 to 7-17).
func (l Line) quantising(ro float64) float64 {
	q := 37 - float64(15*math.Log10(l.Qdu))
	g := 1.07 + float64(0.258*q) + float64(0.0602*q*q)
	y := (ro-100)/15 + 46/8.4 - g/9
	z := 46.0/30 - g/40
	return float64(15 * math.Log10(1+math.Pow(10, y)+math.Pow(10, z)))
}

// echoRating returns TERV (7-22) for an echo path of t ms, corrected for strong
// sidetone (7-23).
func (l Line) echoRating(ist, t float64) float64 {
	x := l.TELR - float64(40*math.Log10((1+t/10)/(1+t/150))) + float64(6*math.Exp(-0.3*t*t))
	if l.STMR < 9 {
		x += ist / 2
	}
	return x
}

// talkerEcho returns Idte (7-19 to 7-24), 0 below 1 ms.
func (l Line) talkerEcho(no, ist, t float64) float64 {
	x := 0.0
	if t >= 1 {
		roe := -1.5 * (no - l.RLR)
		re := 80 + float64(2.5*(l.echoRating(ist, t)-14))
		half := (roe - re) / 2
		x = (half + math.Sqrt(float64(half*half)+100) - 1) * -math.Expm1(-t)
	}
	if l.STMR > 20 {
		return math.Hypot(x, ist)
	}
	return x
}

// listenerEcho returns Idle (7-25, 7-26) for a round trip of tr ms.
func (l Line) listenerEcho(ro, tr float64) float64 {
	rle := 10.5 * (l.WEPL + 7) * math.Pow(tr+1, -0.25)
	half := (ro - rle) / 2
	return half + math.Sqrt(float64(half*half)+169)
}

// absoluteDelay returns Idd (7-27, 7-28) for ta ms.
func (l Line) absoluteDelay(ta float64) float64 {
	least := float64(l.LeastDelay) / float64(des.Millisecond)
	if ta <= least {
		return 0
	}
	x, n := math.Log2(ta/least), 6*l.Sensitivity
	return float64(25 * (math.Pow(1+math.Pow(x, n), 1/n) - float64(3*math.Pow(1+math.Pow(x/3, n), 1/n)) + 2))
}

// equipment returns Ie,eff (7-29).
func (c Call) equipment() float64 {
	ie, bpl, ok := c.Codec.Impairment()
	if c.Loss == 0 {
		return ie
	}
	if !ok {
		panic(fmt.Sprintf("quality: loss of %v with %v, whose robustness is not published", c.Loss, c.Codec))
	}
	ratio := c.BurstRatio
	if ratio == 0 {
		ratio = 1
	}
	ppl := 100 * c.Loss
	return ie + float64((95-ie)*ppl)/(ppl/ratio+bpl)
}
