package workloads

import (
	"math"
	"math/bits"
	"strings"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
)

// What keyed draws of video are about. The index of a frame's size is
// key<<32 | frame.
const (
	ofTiming uint64 = iota // where in the frame interval a flow sends
	ofGroup                // with which frame of the group it begins
	ofFrame                // size of a frame
	ofFrames               // number of frames of a flow met at the start
)

// early is how many frames before the start a flow is taken to have begun, so
// that what is still being sent of them is there.
const early = 8

// underWay sets the keys of flows met at the start apart from those of flows
// that arrive.
const underWay = 1 << 31

// A camera is one flow of video.
type camera struct {
	frame  int64    // being sent
	left   int64    // bytes of it not sent, headers not included
	frames int64    // in all; forever if it stands
	origin des.Time // when frame 0 is ready
	key    uint64   // of its draws
	group  int      // where frame 0 stands in the group
	flow   uint32   // its number
}

// A Video sends the packets of flows of video.
type Video struct {
	cameras []camera
	idle    []uint32 // of the cameras, those whose flow has ended
	turns   tournament
	count   int // of flows that stand, at factor 1; 0 if flows arrive
	laws    [3]random.Law
	kinds   []uint8 // of the frames of a group
	hertz   uint64  // frames in 1000 s
	pace    nodes.Rate
	full    des.Time // a full packet at the pace

	arrivals       clock // never if flows stand
	flows          *lengths
	draws          random.Stream // of the frames of flows and nothing else
	serial, nextID uint32        // of the flow that arrives next

	ahead       changes
	start, stop des.Time
	mean        float64
	seed, name  uint64
	key         string
	seq         uint32
	way         uint16
}

// NewVideo returns a source of video, or the faults of c.
//
// Standing flows are as many as come nearest to the load at the rate asked for,
// at least one, and their rate is then the load over their number, so that the
// load is met exactly. Flows that arrive have the rate asked for, and arrive at
// the rate that gives the load; a flow of length h sends ceil(h·frames) frames,
// the first when it arrives, beginning anywhere in the group. At the start
// some are under way, as if the source had been running for ever.
//
// A frame is cut into packets of at most 1500 B, of which 40 B are headers. The
// first is born when the frame is ready or when the one before it has been
// sent, each further one after the time the one before takes at the pace.
func NewVideo(c VideoConfig) (*Video, error) {
	c, err := c.Check()
	if err != nil {
		return nil, err
	}
	v := &Video{
		hertz: uint64(math.Round(c.Frames * 1000)),
		pace:  c.Pace, full: c.Pace.TxTime(mtu), arrivals: clock{next: des.Never},
		start: c.Start, stop: c.Stop, mean: float64(c.Load),
		seed: c.Seed, name: random.Hash(c.Name), key: c.Name, way: c.Way,
	}
	perFrame := c.flowRate() / 8 * 1000 / float64(v.hertz)
	if v.laws, err = c.frameLaws(perFrame); err != nil {
		return nil, err
	}
	for i := range c.Group {
		v.kinds = append(v.kinds, uint8(strings.IndexByte(frameKinds, c.Group[i])))
	}
	if c.Pattern == Standing {
		v.count = c.flows()
		v.setCount(c.Start, v.count)
		return v, nil
	}
	if v.flows, err = c.lengths(); err != nil {
		return nil, err
	}
	gap := v.flows.mean * perFrame * 8 / float64(c.Load) * float64(des.Second)
	v.arrivals = clock{kind: c.Pattern.gaps(), mean: gap}
	v.populate(1)
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
	return c.origin.Plus(v.after(frame))
}

// begin moves camera id to the given frame.
func (v *Video) begin(id uint32, frame int64) {
	c := &v.cameras[id]
	u := v.unit(c.key<<32|uint64(frame), ofFrame)
	kind := v.kinds[(int64(c.group)+frame)%int64(len(v.kinds))]
	c.frame, c.left = frame, int64(max(1, math.Floor(v.laws[kind].At(u)+0.5)))
}

// unit returns the uniform draw of index i about a quantity.
func (v *Video) unit(i, quantity uint64) float64 {
	return random.Unit(random.Draw(v.seed, v.name, i, quantity))
}

// groupOf returns where in the group the flow of the given key begins.
func (v *Video) groupOf(key uint64) int {
	return int(v.unit(key, ofGroup) * float64(len(v.kinds)))
}

// setCount sets the number of standing flows from the instant at on.
func (v *Video) setCount(at des.Time, n int) {
	due := make([]des.Time, n)
	for i := range min(n, len(v.cameras)) {
		due[i] = v.turns.of(uint32(i))
	}
	before := min(n, len(v.cameras))
	v.cameras = v.cameras[:before]
	for i := before; i < n; i++ {
		phase := des.Time(v.unit(uint64(i), ofTiming) * float64(v.after(1)))
		v.cameras = append(v.cameras, camera{
			frames: forever, origin: v.start + phase - v.after(early),
			key: uint64(i), group: v.groupOf(uint64(i)), flow: uint32(i),
		})
		due[i] = v.join(uint32(i), at)
	}
	v.turns = newTournament(due)
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

// populate sets the flows that arrive to what stands at the start at the given
// factor: those met a little earlier, driven on to the start.
func (v *Video) populate(factor float64) {
	at := v.start - v.after(early)
	v.cameras, v.idle, v.turns = v.cameras[:0], v.idle[:0], newTournament(nil)
	v.arrivals.draws = random.NewStream(v.seed, v.key+"/gap")
	v.draws = random.NewStream(v.seed, v.key+"/frames")
	v.arrivals.start(at, factor)
	c := crowd{v.flows, float64(v.after(1)), v.seed, v.name, ofTiming, ofFrames}
	met := c.meet(&v.arrivals, at, v.key)
	for i, m := range met {
		v.place(camera{frames: m.left, origin: at + m.wait, key: underWay + m.index, flow: uint32(i)})
	}
	v.serial, v.nextID = 0, uint32(len(met))
	for v.due() < v.start {
		if v.arrivals.next <= v.turns.next() {
			v.admit()
			continue
		}
		id, due := v.turns.first()
		_, next := v.send(id, due)
		v.turns.set(id, next)
	}
}

// place gives a new flow a camera of its own. Its first packet is born when its
// frame 0 is ready.
func (v *Video) place(c camera) {
	c.group = v.groupOf(c.key)
	id := uint32(len(v.cameras))
	if n := len(v.idle); n > 0 {
		id, v.idle = v.idle[n-1], v.idle[:n-1]
		v.cameras[id] = c
	} else {
		v.cameras = append(v.cameras, c)
		if len(v.cameras) > v.turns.flows() {
			v.turns.grow()
		}
	}
	v.begin(id, 0)
	v.turns.set(id, c.origin)
}

// admit places the flow that arrives next.
func (v *Video) admit() {
	frames := v.flows.count(v.flows.law.Draw(&v.draws))
	v.place(camera{frames: frames, origin: v.arrivals.next, key: uint64(v.serial), flow: v.nextID})
	v.serial++
	v.nextID++
	v.arrivals.advance()
}

// send takes the packet born at due out of camera id and returns its size and
// when the next one is born: never, after the last of a flow, which leaves.
func (v *Video) send(id uint32, due des.Time) (size uint16, next des.Time) {
	c := &v.cameras[id]
	if c.left > payload {
		c.left -= payload
		return mtu, due.Plus(v.full)
	}
	size = uint16(header + c.left)
	if c.frame+1 == c.frames {
		v.idle = append(v.idle, id)
		return size, des.Never
	}
	next = due.Plus(v.pace.TxTime(nodes.Bytes(size)))
	v.begin(id, c.frame+1)
	return size, max(next, v.ready(c, c.frame))
}

// due reports when the next packet is born, whether or not before stop.
func (v *Video) due() des.Time { return min(v.turns.next(), v.arrivals.next) }

// MeanRate implements [Source]. It is the load asked for.
func (v *Video) MeanRate() float64 { return v.mean }

// Next implements nodes.Source.
func (v *Video) Next() des.Time {
	if at := v.due(); at < v.stop {
		return at
	}
	return des.Never
}

// Emit implements nodes.Source.
func (v *Video) Emit(end des.Time, buf []nodes.Packet) []nodes.Packet {
	end = min(end, v.stop)
	for v.due() < end {
		limit := min(end, v.ahead.until())
		for v.due() < limit {
			buf = v.run(min(limit, v.arrivals.next), buf)
			if v.arrivals.next < limit {
				v.admit()
			}
		}
		v.settle()
	}
	return buf
}

// run appends the packets born before limit of flows that have begun.
func (v *Video) run(limit des.Time, buf []nodes.Packet) []nodes.Packet {
	for v.turns.next() < limit {
		id, due := v.turns.first()
		flow := v.cameras[id].flow
		size, next := v.send(id, due)
		buf = longer(buf)
		birth(&buf[len(buf)-1], due, v.seq, flow, v.way, size)
		v.seq++
		v.turns.set(id, next)
	}
	return buf
}

// settle makes the changes of load that lie before the next packet.
func (v *Video) settle() {
	for len(v.ahead.ahead) > 0 && v.ahead.until() <= v.due() {
		x := v.ahead.take()
		switch {
		case v.count > 0:
			v.setCount(max(x.at, v.start), int(math.Round(float64(v.count)*x.factor)))
		case x.at <= v.start:
			v.populate(x.factor)
		default:
			v.arrivals.retime(x.at, x.factor)
		}
	}
}

// Scale implements nodes.Source. Where flows stand for the whole run their
// number changes at once, the latest numbers going first. Where they arrive and
// leave the rate of arrivals changes, and the load follows as flows end. A
// change at or before the start is in full force at the start.
func (v *Video) Scale(at des.Time, factor float64) {
	v.ahead.add(at, factor)
	v.settle()
}

// Clone implements nodes.Source.
func (v *Video) Clone() nodes.Source {
	c := *v
	c.cameras = append([]camera(nil), v.cameras...)
	c.idle = append([]uint32(nil), v.idle...)
	c.turns = v.turns.clone()
	c.ahead = v.ahead.clone()
	return &c
}
