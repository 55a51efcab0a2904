package workloads

import (
	"errors"
	"fmt"
	"math"
	"math/bits"
	"strings"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
)

// Kinds of frames: coded alone, predicted from before, from both sides.
const frameKinds = "IPB"

// VideoConfig describes compressed video. Each flow sends frames at equal
// intervals, in a repeated group of kinds; sizes of one kind are lognormal and
// independent (M. Krunz, H. Hughes, "A traffic model for MPEG-coded VBR
// streams", SIGMETRICS 1995). A zero field takes the default written beside it.
//
// The default ratio 4:2:1 and CoV 0.28 within a kind give frames of CoV 0.66 as
// a whole, as in the film traces at high quality of F. Fitzek and M. Reisslein,
// "MPEG-4 and H.263 video traces for network performance evaluation" (2001).
type VideoConfig struct {
	Common
	Rate    nodes.Rate // of one flow, bit/s of IP bytes; default 8 Mbit/s
	Frames  float64    // per second, to a thousandth; default 25
	Pattern string     // group of frames; default IBBPBBPBBPBB
	Ratio   [3]float64 // mean sizes of I, P and B; default 4:2:1
	CoV     float64    // of the sizes of one kind; default 0.28; 0.001 to 3
	Pace    nodes.Rate // bit/s of IP bytes at which a flow sends its packets; default 4 times the mean rate of a flow
}

// Check fills the defaults and reports every fault at once. The rate becomes
// what one of the flows sends, to the nearest bit/s.
func (c VideoConfig) Check() (VideoConfig, error) {
	faults := c.Common.check(nil)
	c.fill()
	if c.Rate <= 0 || c.Rate > MaxLoad/8 {
		faults = append(faults, fmt.Errorf("rate: %d bit/s is not between 1 bit/s and %d Gbit/s", c.Rate, MaxLoad/8/nodes.Gbps))
	}
	if !(c.Frames >= 0.1 && c.Frames <= 1000) {
		faults = append(faults, fmt.Errorf("frames: %v/s is not between 0.1 and 1000", c.Frames))
	}
	if strings.Trim(c.Pattern, frameKinds) != "" || len(c.Pattern) > 1000 {
		faults = append(faults, fmt.Errorf("pattern: %q is not a group of I, P and B", c.Pattern))
	}
	for i, r := range c.Ratio {
		if !(r > 0 && r < 1e6) {
			faults = append(faults, fmt.Errorf("ratio: %v for %c is not above 0", r, frameKinds[i]))
		}
	}
	if !(c.CoV >= 0.001 && c.CoV <= 3) {
		faults = append(faults, fmt.Errorf("cov: %v is not between 0.001 and 3", c.CoV))
	}
	if len(faults) > 0 {
		return c, errors.Join(faults...)
	}
	rate := float64(c.Load) / float64(c.flows())
	c.Rate = nodes.Rate(math.Round(rate))
	if c.Pace == 0 {
		c.Pace = nodes.Rate(math.Round(4 * rate))
	}
	if float64(c.Pace) <= rate || c.Pace > MaxLoad {
		faults = append(faults, fmt.Errorf("pace: %d bit/s is not above the rate of a flow, %d bit/s, and at most %d Tbit/s", c.Pace, c.Rate, MaxLoad/(1000*nodes.Gbps)))
	}
	if least := (header + 2) * 8 * c.Frames; rate < least {
		faults = append(faults, fmt.Errorf("rate: a flow of %d bit/s holds hardly more than the headers of %v frames a second; write at least %v bit/s", c.Rate, c.Frames, least))
	}
	return c, errors.Join(faults...)
}

// fill puts in the defaults that depend on nothing.
func (c *VideoConfig) fill() {
	if c.Rate == 0 {
		c.Rate = 8 * nodes.Mbps
	}
	if c.Frames == 0 {
		c.Frames = 25
	}
	if c.Pattern == "" {
		c.Pattern = "IBBPBBPBBPBB"
	}
	if c.Ratio == [3]float64{} {
		c.Ratio = [3]float64{4, 2, 1}
	}
	if c.CoV == 0 {
		c.CoV = 0.28
	}
}

// flows returns the number of flows that comes nearest to the load, at least
// one.
func (c VideoConfig) flows() int {
	return int(max(1, math.Round(float64(c.Load)/float64(c.Rate))))
}

// frameLaws returns the laws of the bytes of I, P and B frames, headers not
// included, for which a flow sends bytes IP bytes per frame in the mean.
func (c VideoConfig) frameLaws(bytes float64) ([3]random.Law, error) {
	var share [3]float64 // of the frames
	for i := range c.Pattern {
		share[strings.IndexByte(frameKinds, c.Pattern[i])] += 1 / float64(len(c.Pattern))
	}
	unit := 0.0 // mean size of a frame for a B frame of Ratio[2]
	for k, s := range share {
		unit += float64(s * c.Ratio[k])
	}
	// The mean on the wire grows with the frames, nearly in a straight line
	// because of the headers: the Illinois form of false position finds the
	// frames that fit in a few steps.
	lo, hi, below := 0.0, bytes/unit, header-bytes
	laws, sent, err := c.lawsAt(hi, share)
	above, side := sent-bytes, 0
	for range 40 {
		if err != nil || math.Abs(sent-bytes) < 1e-8*bytes {
			break
		}
		x := (float64(lo*above) - float64(hi*below)) / (above - below)
		if laws, sent, err = c.lawsAt(x, share); sent > bytes {
			if hi, above = x, sent-bytes; side > 0 {
				below /= 2
			}
			side = 1
		} else {
			if lo, below = x, sent-bytes; side < 0 {
				above /= 2
			}
			side = -1
		}
	}
	return laws, err
}

// lawsAt returns the laws of frames whose mean is scale times the ratio, and
// the mean of the IP bytes of a frame.
func (c VideoConfig) lawsAt(scale float64, share [3]float64) (laws [3]random.Law, sent float64, err error) {
	for k, s := range share {
		laws[k], err = random.Spec{Kind: random.Lognormal, Mean: scale * c.Ratio[k], CoV: c.CoV}.Law()
		if err != nil {
			return laws, 0, err
		}
		n, err := newLengths(laws[k], payload, 0.5)
		if err != nil {
			return laws, 0, err
		}
		sent += float64(s * (laws[k].Mean() + float64(header*n.mean)))
	}
	return laws, sent, nil
}

// What keyed draws of video are about. The index of a frame's size is
// flow<<32 | frame.
const (
	ofTiming uint64 = iota // where in the frame interval a flow sends
	ofGroup                // with which frame of the group it begins
	ofFrame                // size of a frame
)

// early is how many frames before its first instant a flow is taken to have
// begun, so that what is still being sent of them is there.
const early = 8

// A camera is one flow of video.
type camera struct {
	frame int64 // being sent; 0 starts early intervals before the phase
	left  int64 // bytes of it not sent, headers not included
	phase des.Time
	group int // of frame 0 in the pattern
}

// A Video sends the packets of flows of video.
type Video struct {
	cameras []camera
	turns   tournament
	count   int // of cameras at factor 1
	laws    [3]random.Law
	kinds   []uint8 // of the frames of a group
	hertz   uint64  // frames in 1000 s
	pace    nodes.Rate
	full    des.Time // a full packet at the pace

	ahead       changes
	start, stop des.Time
	mean        float64
	seed, name  uint64
	seq         uint32
	way         uint16
}

// NewVideo returns a source of video, or the faults of c.
//
// The flows stand for the whole run. They are as many as come nearest to the
// load at the rate asked for, at least one, and their rate is then the load
// over their number, so that the load is met exactly. A frame is cut into
// packets of at most 1500 B, of which 40 B are headers. The first is born when
// the frame is ready or when the one before it has been sent, each further one
// after the time the one before takes at the pace.
func NewVideo(c VideoConfig) (*Video, error) {
	c, err := c.Check()
	if err != nil {
		return nil, err
	}
	n := c.flows()
	v := &Video{
		count: n, hertz: uint64(math.Round(c.Frames * 1000)),
		pace: c.Pace, full: c.Pace.TxTime(mtu),
		start: c.Start, stop: c.Stop, mean: float64(c.Load),
		seed: c.Seed, name: random.Hash(c.Name), way: c.Way,
	}
	perFrame := float64(c.Load) / float64(n) / 8 * 1000 / float64(v.hertz)
	if v.laws, err = c.frameLaws(perFrame); err != nil {
		return nil, err
	}
	for i := range c.Pattern {
		v.kinds = append(v.kinds, uint8(strings.IndexByte(frameKinds, c.Pattern[i])))
	}
	v.setCount(c.Start, n)
	return v, nil
}

// after returns how long n frame intervals last, rounded down.
func (v *Video) after(n int64) des.Time {
	hi, lo := bits.Mul64(uint64(n), 1000*uint64(des.Second))
	if hi >= v.hertz {
		return des.Never
	}
	q, _ := bits.Div64(hi, lo, v.hertz)
	return des.Time(min(q, uint64(des.Never)))
}

// ready reports when the given frame of a camera is there to be sent.
func (v *Video) ready(c *camera, frame int64) des.Time {
	return (v.start + c.phase - v.after(early)).Plus(v.after(frame))
}

// begin moves camera id to the given frame.
func (v *Video) begin(id uint32, frame int64) {
	c := &v.cameras[id]
	u := random.Unit(random.Draw(v.seed, v.name, uint64(id)<<32|uint64(frame), ofFrame))
	kind := v.kinds[(int64(c.group)+frame)%int64(len(v.kinds))]
	c.frame, c.left = frame, int64(max(1, math.Floor(v.laws[kind].At(u)+0.5)))
}

// setCount sets the number of cameras from the instant at on.
func (v *Video) setCount(at des.Time, n int) {
	due := make([]des.Time, n)
	for i := range min(n, len(v.cameras)) {
		due[i] = v.turns.of(uint32(i))
	}
	before := min(n, len(v.cameras))
	v.cameras = v.cameras[:before]
	for i := before; i < n; i++ {
		v.cameras = append(v.cameras, camera{
			phase: des.Time(v.unit(uint64(i), ofTiming) * float64(v.after(1))),
			group: int(v.unit(uint64(i), ofGroup) * float64(len(v.kinds))),
		})
		due[i] = v.join(uint32(i), at)
	}
	v.turns = newTournament(due)
}

// unit returns the uniform draw of flow i about a quantity.
func (v *Video) unit(i, quantity uint64) float64 {
	return random.Unit(random.Draw(v.seed, v.name, i, quantity))
}

// join returns when camera id sends its first packet at or after the instant
// at, as if it had been sending before.
func (v *Video) join(id uint32, at des.Time) des.Time {
	c := &v.cameras[id]
	gone := max(0, int64((at-v.start)/(v.after(1)+1)))
	v.begin(id, max(0, gone-1))
	due := v.ready(c, c.frame)
	for due < at {
		_, due = v.send(id, due)
	}
	return due
}

// send takes the packet born at due out of camera id and returns its size and
// when the next one is born.
func (v *Video) send(id uint32, due des.Time) (size uint16, next des.Time) {
	c := &v.cameras[id]
	if c.left > payload {
		c.left -= payload
		return mtu, due.Plus(v.full)
	}
	size = uint16(header + c.left)
	next = due.Plus(v.pace.TxTime(nodes.Bytes(size)))
	v.begin(id, c.frame+1)
	return size, max(next, v.ready(c, c.frame))
}

// MeanRate implements [Source]. It is the load asked for.
func (v *Video) MeanRate() float64 { return v.mean }

// Next implements nodes.Source.
func (v *Video) Next() des.Time {
	if at := v.turns.next(); at < v.stop {
		return at
	}
	return des.Never
}

// Emit implements nodes.Source.
func (v *Video) Emit(end des.Time, buf []nodes.Packet) []nodes.Packet {
	end = min(end, v.stop)
	for v.turns.next() < end {
		limit := min(end, v.ahead.until())
		for v.turns.next() < limit {
			id, due := v.turns.first()
			size, next := v.send(id, due)
			buf = longer(buf)
			birth(&buf[len(buf)-1], due, v.seq, id, v.way, size)
			v.seq++
			v.turns.set(id, next)
		}
		v.settle()
	}
	return buf
}

// settle makes the changes of load that lie before the next packet.
func (v *Video) settle() {
	for len(v.ahead.ahead) > 0 && v.ahead.until() <= v.turns.next() {
		x := v.ahead.take()
		v.setCount(max(x.at, v.start), int(math.Round(float64(v.count)*x.factor)))
	}
}

// Scale implements nodes.Source. The number of flows changes at once, the
// latest numbers going first.
func (v *Video) Scale(at des.Time, factor float64) {
	v.ahead.add(at, factor)
	v.settle()
}

// Clone implements nodes.Source.
func (v *Video) Clone() nodes.Source {
	c := *v
	c.cameras = append([]camera(nil), v.cameras...)
	c.turns = v.turns.clone()
	c.ahead = v.ahead.clone()
	return &c
}
