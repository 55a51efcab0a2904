package study

import (
	"cmp"
	"math"
	"slices"

	"ferrule/controller/path"
	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
	"ferrule/scenarios"
	"ferrule/scenarios/build"
	"ferrule/workloads"
)

// A stream is what one way of one aggregate is asked to send.
type stream struct {
	name     string
	way      uint16
	class    nodes.ClassID
	from, to nodes.SiteID
	bps, pps float64 // IP bits and packets per second, while it sends
	seconds  float64 // it sends during the run
	measured float64 // of them, after the warm-up
	chain    []nodes.CircuitID
}

// streamsOf lists the ways of all aggregates under a plan, in their order.
func streamsOf(sc *scenarios.Scenario, plan *scenarios.Plan) []stream {
	sizes := make([]float64, len(sc.Traffic))
	for i := range sizes {
		sizes[i] = packetSize(&sc.Traffic[i])
	}
	chains := map[uint16][]nodes.CircuitID{}
	for _, m := range plan.Moves {
		chains[m.Way] = m.Chain
	}
	var out []stream
	for i := range sc.Aggregates {
		a := &sc.Aggregates[i]
		t := &sc.Traffic[a.Traffic]
		bps := float64(a.Load)
		if a.Flows > 0 {
			bps = float64(a.Flows) * flowRate(t)
		}
		from, to := max(a.Start, t.Start), min(a.Stop, t.Stop, sc.Run.Length)
		s := stream{class: a.Class, from: a.From, to: a.To, bps: bps, pps: bps / 8 / sizes[a.Traffic],
			seconds: max(to-from, 0).Seconds(), measured: max(to-max(from, sc.Run.WarmUp), 0).Seconds()}
		for d := range nodes.Direction(2) {
			if d == nodes.Back {
				if !a.BothWays {
					break
				}
				s.from, s.to = a.To, a.From
			}
			s.name = build.WayName(a, d)
			s.way = nodes.WayOf(nodes.AggID(i), d)
			s.chain = chains[s.way]
			out = append(out, s)
		}
	}
	return out
}

// call is the packet voice of a traffic.
func call(t *scenarios.Traffic) workloads.VoiceConfig {
	c := workloads.VoiceConfig{Codec: workloads.G711, Interval: 20 * des.Millisecond}
	if t.Codec == "G.729" {
		c.Codec = workloads.G729
	}
	return c
}

// flowRate is what one flow sends, in bit/s of IP bytes.
func flowRate(t *scenarios.Traffic) float64 {
	if t.Model == scenarios.ModelVoice {
		rate := call(t).CallRate()
		if t.Talkspurts {
			rate *= workloads.TalkConfig{Spurt: t.Spurt, Silence: t.Silence}.Activity()
		}
		return rate
	}
	return float64(t.Rate)
}

// longestPacket and headers are those of packetisers: 1500 B, of which 40 B
// are headers (RFC 894, RFC 791).
const (
	longestPacket = 1500.0
	headers       = 40.0
)

// pagePacket is the mean size of the packets of pages, in IP bytes: 59.05 kB in
// 43.36 packets, computed from the laws that such a source has.
const pagePacket = 1361.9

// packetSize estimates the mean size of a packet in IP bytes.
func packetSize(t *scenarios.Traffic) float64 {
	const most = 65535
	switch t.Model {
	case scenarios.ModelConstant, scenarios.ModelPoisson, scenarios.ModelOnOff, scenarios.ModelMMPP:
		if law, err := t.Packet.Law(); err == nil {
			return min(max(law.Mean(), 1), most)
		}
		return longestPacket
	case scenarios.ModelVoice:
		return float64(call(t).PacketSize())
	case scenarios.ModelVideo: // a frame ends in a packet that is half full on average
		rate, frames := float64(t.Rate), t.Frames
		if rate == 0 {
			rate = float64(8 * nodes.Mbps)
		}
		if frames == 0 {
			frames = 25
		}
		frame := rate / 8 / frames
		return frame / (frame/longestPacket + 0.5)
	case scenarios.ModelReplay:
		if t.Trace == nil || t.Trace.MeanSize() == 0 {
			return longestPacket
		}
		return t.Trace.MeanSize()
	case scenarios.ModelPages:
		return pagePacket
	case scenarios.ModelFiles, scenarios.ModelWeb:
		return filePacket(t.Size)
	case scenarios.ModelBulk:
		return longestPacket
	default:
		panic("study: unknown model " + t.Model.String())
	}
}

// filePacket is the mean size of the packets of files: the mean file over the
// mean number of packets, and the headers. That number is the sum over k of
// the chance that a file needs more than k packets; beyond a thousand packets
// the last one counts as half full.
func filePacket(size random.Spec) float64 {
	if size.Kind == random.Constant && size.Mean == 0 {
		size = random.Spec{Kind: random.Pareto, Mean: 80e3, Shape: 1.3, AtMost: 100e6} // what such a source defaults to
	}
	law, err := size.Law()
	if err != nil || math.IsInf(law.Mean(), 0) {
		return longestPacket
	}
	const part, exact = longestPacket - headers, 1000
	packets, counted, last := 0.0, 0.0, 1.0
	for k := range exact {
		tail := 1 - law.CDF(float64(float64(k)*part))
		packets += tail
		if k > 0 {
			counted += float64(part * (last + tail) / 2) // the mean of min(size, k parts), by the trapezoid rule
		}
		last = tail
	}
	if last > 0 {
		packets += max(0, law.Mean()-counted)/part + float64(last/2)
	}
	return headers + law.Mean()/max(packets, 1)
}

// A leg is the share of a stream that goes over one direction of a circuit.
type leg struct {
	circuit nodes.CircuitID
	dir     nodes.Direction
	share   float64
}

// A stop is the share of a stream that passes through a router on its way.
type stop struct {
	site  nodes.SiteID
	share float64
}

// A routing is how a ground sends streams: by metric over its routed circuits,
// equal cost split evenly, and what is moved by its chain.
type routing struct {
	g    *ground
	ids  []nodes.CircuitID // of edges
	dest []destination     // by site
	legs []leg             // of the stream walked last
	pass []stop
	part []float64
}

// A destination is the way of every site to one.
type destination struct {
	order []int32 // sites that reach it, furthest first
	next  [][]int32
}

// newRouting finds the next hops of a ground.
func newRouting(g *ground) *routing {
	r := &routing{g: g, part: make([]float64, len(g.plant.Sites))}
	var edges []path.Edge
	for i := range g.lines {
		c := &g.plant.Circuits[i]
		if !g.lines[i].up || c.Carries != nodes.CarriesRouted {
			continue
		}
		metric := c.Metric
		if metric == 0 {
			metric = max(1, int64(g.light(g.lines[i].route)))
		}
		edges = append(edges, path.Edge{A: int32(c.Ends[0]), B: int32(c.Ends[1]), Cost: metric})
		r.ids = append(r.ids, nodes.CircuitID(i))
	}
	n := len(g.plant.Sites)
	finder := path.NewFinder(path.NewGraph(n, edges))
	var hops path.NextHops
	for to := range n {
		finder.NextHops(int32(to), path.Mask{}, &hops)
		d := destination{next: make([][]int32, n)}
		far := make([]int64, n)
		for v := range n {
			if far[v] = hops.Distance(int32(v)); far[v] != path.Unreachable {
				d.order = append(d.order, int32(v))
				d.next[v] = slices.Clone(hops.At(int32(v)))
			}
		}
		slices.SortFunc(d.order, func(a, b int32) int { return cmp.Or(cmp.Compare(far[b], far[a]), cmp.Compare(a, b)) })
		r.dest = append(r.dest, d)
	}
	return r
}

// light is the delay of light over a route.
func (g *ground) light(route []nodes.FibreID) (d des.Time) {
	for _, f := range route {
		d += g.plant.Fibres[f].Delay
	}
	return d
}

// walk finds the legs and stops of a stream; false if none of it arrives.
func (r *routing) walk(s *stream) bool {
	r.legs, r.pass = r.legs[:0], r.pass[:0]
	for _, id := range s.chain {
		if r.g.lines[id].up {
			continue
		}
		if r.g.plant.Circuits[id].WhenDown != nodes.DownReturn {
			return false
		}
		return r.walkRouted(s)
	}
	if len(s.chain) == 0 {
		return r.walkRouted(s)
	}
	at := s.from
	for _, id := range s.chain {
		if at != s.from {
			r.pass = append(r.pass, stop{at, 1})
		}
		at = r.take(id, at, 1)
	}
	return true
}

// take adds the leg over a circuit from one of its ends and returns the other.
func (r *routing) take(id nodes.CircuitID, at nodes.SiteID, share float64) nodes.SiteID {
	ends := r.g.plant.Circuits[id].Ends
	if ends[0] == at {
		r.legs = append(r.legs, leg{id, nodes.Out, share})
		return ends[1]
	}
	r.legs = append(r.legs, leg{id, nodes.Back, share})
	return ends[0]
}

// walkRouted walks a stream by the tables.
func (r *routing) walkRouted(s *stream) bool {
	d := &r.dest[s.to]
	if d.next[s.from] == nil {
		return false
	}
	for i := range r.part {
		r.part[i] = 0
	}
	r.part[s.from] = 1
	for _, v := range d.order {
		at, share := nodes.SiteID(v), r.part[v]
		if share == 0 || at == s.to {
			continue
		}
		if at != s.from {
			r.pass = append(r.pass, stop{at, share})
		}
		each := share / float64(len(d.next[v]))
		for _, e := range d.next[v] {
			r.part[r.take(r.ids[e], at, each)] += each
		}
	}
	return true
}

// A burden is what all streams together load.
type burden struct {
	bps      [][2]float64    // IP bits, by circuit and direction
	line     [][2]float64    // with what each packet takes beside them
	transit  []float64       // IP bits through each router, by site
	classes  []nodes.ClassID // highest that each circuit carries
	hops     float64         // packets put on a line during the run
	stranded []int           // streams of which nothing arrives
}

// load walks all streams.
func (r *routing) load(streams []stream) *burden {
	n := len(r.g.lines)
	b := &burden{bps: make([][2]float64, n), line: make([][2]float64, n),
		transit: make([]float64, len(r.g.plant.Sites)), classes: make([]nodes.ClassID, n)}
	for i := range b.classes {
		b.classes[i] = nodes.ClassID(len(r.g.plant.Classes))
	}
	for i := range streams {
		s := &streams[i]
		if s.seconds == 0 {
			continue
		}
		if !r.walk(s) {
			b.stranded = append(b.stranded, i)
			continue
		}
		for _, l := range r.legs {
			bps := float64(s.bps * l.share)
			extra := float64(8 * float64(r.g.plant.Circuits[l.circuit].Overhead) * s.pps)
			b.bps[l.circuit][l.dir] += bps
			b.line[l.circuit][l.dir] += bps + float64(extra*l.share)
			b.classes[l.circuit] = min(b.classes[l.circuit], s.class)
			b.hops += float64(s.pps * s.seconds * l.share)
		}
		for _, p := range r.pass {
			b.transit[p.site] += float64(s.bps * p.share)
		}
	}
	return b
}

// use is the share of its line that a direction of a circuit is loaded to.
func (r *routing) use(b *burden, id nodes.CircuitID, d nodes.Direction) float64 {
	return b.line[id][d] / float64(r.g.plant.Circuits[id].Rate)
}
