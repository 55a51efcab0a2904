package build

import (
	"fmt"
	"math"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
	"ferrule/scenarios"
	"ferrule/workloads"
	"ferrule/workloads/replay"
)

func psTime(ps float64) des.Time { return des.Time(math.Round(ps)) }

// inSeconds converts a law of times from picoseconds to seconds.
func inSeconds(s random.Spec) random.Spec {
	const ps = float64(des.Second)
	s.Mean /= ps
	s.Median /= ps
	s.P95 /= ps
	s.P99 /= ps
	s.Scale /= ps
	s.From /= ps
	s.To /= ps
	s.Min /= ps
	s.AtMost /= ps
	values := make([]float64, len(s.Values))
	for i, v := range s.Values {
		values[i] = v / ps
	}
	if s.Values != nil {
		s.Values = values
	}
	return s
}

// maker makes the sources of a replication. The table of a law of file sizes is
// large and is shared by all that have the same traffic.
type maker struct {
	sc    *scenarios.Scenario
	seed  uint64
	files []*workloads.Files // by traffic
	wire  []float64          // by traffic: mean IP bytes of a transfer, headers included; 0: not yet known
}

func newMaker(sc *scenarios.Scenario, seed uint64) *maker {
	return &maker{sc: sc, seed: seed, files: make([]*workloads.Files, len(sc.Traffic)), wire: make([]float64, len(sc.Traffic))}
}

// A constructor makes the source of one way from what the file says of it.
type constructor func(m *maker, c workloads.Common, a *scenarios.Aggregate, t *scenarios.Traffic) (workloads.Source, error)

// constructors is the one table from the models of files to sources.
var constructors = [...]constructor{
	scenarios.ModelConstant: func(m *maker, c workloads.Common, a *scenarios.Aggregate, t *scenarios.Traffic) (workloads.Source, error) {
		return workloads.NewStream(workloads.StreamConfig{Common: c, Gaps: workloads.Constant, Size: t.Packet, Flows: streamFlows(a, t)})
	},
	scenarios.ModelPoisson: func(m *maker, c workloads.Common, a *scenarios.Aggregate, t *scenarios.Traffic) (workloads.Source, error) {
		return workloads.NewStream(workloads.StreamConfig{Common: c, Gaps: workloads.Poisson, Size: t.Packet, Flows: streamFlows(a, t)})
	},
	scenarios.ModelVoice: voice,
	scenarios.ModelVideo: video,
	scenarios.ModelFiles: func(m *maker, c workloads.Common, a *scenarios.Aggregate, t *scenarios.Traffic) (workloads.Source, error) {
		f, err := workloads.NewFiles(workloads.FilesConfig{Common: c, Size: t.Size, Pace: t.Pace, Like: m.files[a.Traffic]})
		if err == nil {
			m.files[a.Traffic] = f
		}
		return f, err
	},
	scenarios.ModelOnOff: func(m *maker, c workloads.Common, a *scenarios.Aggregate, t *scenarios.Traffic) (workloads.Source, error) {
		return workloads.NewOnOff(workloads.OnOffConfig{
			Common: c, Hurst: t.Hurst, Peak: t.Peak, Packet: nodes.Bytes(t.Packet.Mean), On: t.OnFor, Off: t.OffFor,
		})
	},
	scenarios.ModelMMPP: func(m *maker, c workloads.Common, a *scenarios.Aggregate, t *scenarios.Traffic) (workloads.Source, error) {
		return workloads.NewMMPP(workloads.MMPPConfig{
			Common: c, Size: t.Packet, Flows: streamFlows(a, t), Low: t.Low, HighFor: t.HighFor, LowFor: t.LowFor,
		})
	},
	scenarios.ModelPages: func(m *maker, c workloads.Common, a *scenarios.Aggregate, t *scenarios.Traffic) (workloads.Source, error) {
		return workloads.NewPages(workloads.PagesConfig{Common: c, Pace: t.Pace, Parse: t.Parse})
	},
	scenarios.ModelReplay: again,
}

// Flows of a stream whose number the file does not say.
const (
	usualFlow     = 10 * nodes.Mbps // rate of one, common practice, no source
	mostLoadFlows = 4096            // enough for equal-cost paths to share evenly
)

// streamFlows returns how many flows the packets of a stream are spread over:
// those of the file, or as many flows of the rate of the traffic, else of
// usualFlow, as come nearest to the load, from 1 to mostLoadFlows.
func streamFlows(a *scenarios.Aggregate, t *scenarios.Traffic) int {
	if a.Flows > 0 {
		return min(a.Flows, workloads.MaxFlows)
	}
	rate := t.Rate
	if rate == 0 {
		rate = usualFlow
	}
	return int(max(1, min(mostLoadFlows, math.Round(float64(a.Load)/float64(rate)))))
}

// flowPattern is how flows come and go.
func flowPattern(f scenarios.FlowArrival) workloads.Pattern {
	switch f {
	case scenarios.FlowsNone:
		return workloads.Standing
	case scenarios.FlowsPoisson:
		return workloads.Random
	case scenarios.FlowsRegular:
		return workloads.Regular
	default:
		panic(fmt.Sprintf("build: unknown arrival of flows %d", f))
	}
}

// callInterval is from packet to packet of a call (RFC 3551, section 4.5).
const callInterval = 20 * des.Millisecond

// again replays what a file has of the class of an aggregate.
func again(_ *maker, c workloads.Common, a *scenarios.Aggregate, t *scenarios.Traffic) (workloads.Source, error) {
	_, d := nodes.AggOf(c.Way)
	return replay.NewSource(replay.Config{
		Trace: t.Trace, Class: a.Class, Dir: d, Way: c.Way, Start: c.Start, Stop: c.Stop, Speed: a.Speed[d], Loop: t.Loop,
	})
}

func voice(_ *maker, c workloads.Common, a *scenarios.Aggregate, t *scenarios.Traffic) (workloads.Source, error) {
	if t.Talkspurts {
		return talk(c, a, t)
	}
	v := workloads.VoiceConfig{Common: c, Codec: workloads.G711}
	if t.Codec == "G.729" {
		v.Codec = workloads.G729
	}
	v.Pattern = flowPattern(t.FlowsArrive)
	if v.Pattern != workloads.Standing {
		v.Hold = inSeconds(t.Hold)
	}
	if a.Flows > 0 {
		if v.Pattern == workloads.Standing {
			v.Load, v.Calls = 0, a.Flows
		} else {
			v.Interval = callInterval
			v.Load = nodes.Rate(math.Round(float64(a.Flows) * v.CallRate()))
		}
	}
	return workloads.NewVoice(v)
}

// talk makes calls with talkspurts.
func talk(c workloads.Common, a *scenarios.Aggregate, t *scenarios.Traffic) (workloads.Source, error) {
	v := workloads.TalkConfig{Common: c, Codec: workloads.G711, Interval: callInterval, Calls: a.Flows, Spurt: t.Spurt, Silence: t.Silence}
	if t.Codec == "G.729" {
		v.Codec = workloads.G729
	}
	if a.Flows > 0 {
		v.Load = 0
	}
	return workloads.NewTalk(v)
}

func video(_ *maker, c workloads.Common, a *scenarios.Aggregate, t *scenarios.Traffic) (workloads.Source, error) {
	v := workloads.VideoConfig{Common: c, Rate: t.Rate, Frames: t.Frames}
	if v.Pattern = flowPattern(t.FlowsArrive); v.Pattern != workloads.Standing {
		v.Hold = inSeconds(t.Hold)
	}
	if t.GroupOfPictures > 0 {
		v.Group = pictures(t.GroupOfPictures)
	}
	return workloads.NewVideo(v)
}

// pictures is a group of n frames: an I frame, then every third a P frame and
// the others B frames.
func pictures(n int) string {
	b := make([]byte, n)
	for i := range b {
		switch {
		case i == 0:
			b[i] = 'I'
		case i%3 == 0:
			b[i] = 'P'
		default:
			b[i] = 'B'
		}
	}
	return string(b)
}

// WayName names one way of an aggregate, as results do.
func WayName(a *scenarios.Aggregate, d nodes.Direction) string {
	switch {
	case !a.BothWays:
		return a.Name
	case d == nodes.Out:
		return a.Name + ".out"
	}
	return a.Name + ".back"
}

// source makes the source of one way of an aggregate.
func (m *maker) source(id nodes.AggID, d nodes.Direction) (workloads.Source, error) {
	a := &m.sc.Aggregates[id]
	t := &m.sc.Traffic[a.Traffic]
	c := workloads.Common{
		Name: WayName(a, d), Way: nodes.WayOf(id, d), Seed: m.seed,
		Start: max(a.Start, t.Start), Stop: min(a.Stop, t.Stop), Load: a.Load,
	}
	if a.Flows > 0 {
		c.Load = nodes.Rate(a.Flows) * t.Rate
	}
	s, err := constructors[t.Model](m, c, a, t)
	if err != nil {
		return nil, fmt.Errorf("%s:%d: aggregate %s: %w", a.Pos.File, a.Pos.Line, a.Name, err)
	}
	return s, nil
}

// demand makes a workload of requests what the controller takes.
type demand struct{ *workloads.Requests }
