package scenarios

import (
	"fmt"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
	"ferrule/workloads"
)

// Values that hold when a file does not say otherwise. They are common
// practice, without a source, except where noted.
const (
	defaultSeed        = 1
	defaultChannels    = 40
	defaultChannelRate = 100 * nodes.Gbps
	defaultLit         = 1
	defaultMTU         = nodes.Bytes(1500) // RFC 894
	defaultForwarding  = 15 * des.Microsecond
	defaultDetect      = 3 * des.Millisecond
	defaultAtOnce      = 1
	defaultRestoreWait = 5 * des.Minute
	defaultConverge    = 200 * des.Millisecond

	// What ITU-T G.808.1 and G.841 allow a protection switch to take after
	// detection; value from memory.
	defaultSwitch = 50 * des.Millisecond

	// A coherent receiver tunes its laser, searches the dispersion and locks in
	// 1 to 60 s, and the power of an added wavelength is levelled in seconds per
	// station (D. C. Kilper et al., 2009 to 2012). Values from memory; the lower
	// ends.
	defaultRelock = des.Second
	defaultLevel  = des.Second

	defaultCompute  = 10 * des.Millisecond
	defaultRetry    = 200 * des.Millisecond
	defaultPoll     = des.Second
	defaultAttempts = 3

	// Timers of routers that route among themselves; common practice, no source.
	defaultHello       = des.Second
	defaultAdjacencyUp = 200 * des.Millisecond
	defaultFlood       = des.Millisecond
	defaultInstall     = 50 * des.Millisecond

	defaultBuffer   = 50 * des.Millisecond
	defaultFrames   = 25
	defaultPictures = 12
	defaultCodec    = "G.711"

	// A fibre is longer than the straight line: by 1.2, as routes of the
	// 17-node German reference network are by 1.183 on average (computed from
	// its published coordinates and lengths).
	detourNum, detourDen = 6, 5
)

// defaultCommand is the time a node needs for one command.
var defaultCommand = random.Spec{
	Kind: random.Lognormal, Median: float64(10 * des.Millisecond), P95: float64(50 * des.Millisecond),
}

// Limits of what can be asked for.
const (
	maxRun    = 744 * des.Hour
	maxSpan   = 24 * des.Hour // of any timer
	maxFibre  = 40000 * nodes.Kilometre
	maxPlane  = 40000 * nodes.Kilometre
	maxRate   = workloads.MaxLoad
	maxPacket = nodes.Bytes(65535) // RFC 791
)

// header reads what is said once.
func (r *resolver) header() {
	top, raw := r.t.top(), &r.raw
	r.s.Name, r.s.About = raw.Scenario, raw.About
	if name := top.field("scenario"); !name.given() {
		r.missing(top, "scenario", "write scenario: and a name")
	} else if name.node.Value == "" || raw.Scenario != "" && !goodName(raw.Scenario) {
		name.fault("use letters, digits, - _ and . only, 64 at most", "%q is not a name", raw.Scenario)
	}
	run := top.field("run")
	if !run.field("length").given() {
		r.missing(run, "length", "write run: { length: 10s }")
	}
	r.s.Run = Run{
		Length: within(run.field("length"), raw.Run.Length, des.Millisecond, maxRun, des.Second, FormatTime),
		Seed:   value(raw.Run.Seed, defaultSeed),
	}
	if raw.Run.Seed == nil {
		r.defaulted("run.seed", fmt.Sprint(defaultSeed))
	}
	switch w := raw.Run.WarmUp; {
	case w == nil:
		r.s.Run.WarmUp = r.s.Run.Length / 10
		r.defaulted("run.warm-up", FormatTime(r.s.Run.WarmUp)+" (a tenth of the run)")
	case w.Auto:
		r.s.Run.AutoWarmUp = true
	case w.Length >= r.s.Run.Length && raw.Run.Length != nil:
		run.field("warm-up").fault("write less than run.length, or auto",
			"a warm-up of %s leaves nothing of a run of %s", FormatTime(w.Length), FormatTime(r.s.Run.Length))
	default:
		r.s.Run.WarmUp = w.Length
	}
}

// base holds the defaults of the file, or else of the program.
type base struct {
	fibre   Fibre
	circuit Circuit
	forward random.Spec
}

// builtIn reads the section of defaults and notes every default of the program
// that remains in force.
func (r *resolver) builtIn() {
	p := r.t.top().field("defaults")
	raw := &r.raw.Defaults
	fibre, circuit := p.field("fibre"), p.field("circuit")
	r.base.fibre = r.fibreBase(fibre, raw.Fibre, Fibre{Channels: defaultChannels, ChannelRate: defaultChannelRate, Lit: defaultLit})
	r.unless(fibre, "channels", plain(defaultChannels))
	r.unless(fibre, "channel-rate", FormatRate(defaultChannelRate))
	r.unless(fibre, "lit", plain(defaultLit))

	r.base.circuit = r.circuitBase(circuit, rawCircuit{
		Carries: raw.Circuit.Carries, Recovery: raw.Circuit.Recovery, HoldOff: raw.Circuit.HoldOff,
		WhenDown: raw.Circuit.WhenDown, MTU: raw.Circuit.MTU, Framing: raw.Circuit.Framing,
	}, Circuit{MTU: defaultMTU})
	r.unless(circuit, "carries", "routed")
	r.unless(circuit, "recovery", "none")
	r.unless(circuit, "hold-off", "0ms")
	r.unless(circuit, "when-down", "return")
	r.unless(circuit, "mtu", FormatBytes(defaultMTU))
	r.unless(circuit, "framing", "gfp")

	r.base.forward = r.forwarding(p.field("router"), raw.Router, random.Spec{Mean: float64(defaultForwarding)})
	r.unless(p.field("router"), "forwarding", FormatTime(defaultForwarding))
	r.timing(p.field("timing"), raw.Timing)
}

// unless notes the default value of a key that is not in the file.
func (r *resolver) unless(p *place, key, value string) {
	if q := p.field(key); !q.given() {
		r.defaulted(q.key(), value)
	}
}

// timing reads how fast faults are seen and commands carried out.
func (r *resolver) timing(p *place, raw rawTiming) {
	span := func(key string, v *des.Time, or des.Time) des.Time {
		r.unless(p, key, FormatTime(or))
		return within(p.field(key), v, 0, maxSpan, or, FormatTime)
	}
	t := &r.s.Timing
	t.Detect = span("detect", raw.Detect, defaultDetect)
	t.WaitToRestore = span("wait-to-restore", raw.WaitToRestore, defaultRestoreWait)
	t.Switch = span("switch", raw.Switch, defaultSwitch)
	t.Relock = span("re-lock", raw.Relock, defaultRelock)
	t.Level = span("level", raw.Level, defaultLevel)
	t.Ramp = Ramp(r.choice(p.field("ramp"), raw.Ramp, rampWords, int(RampStandard)))
	r.unless(p, "ramp", RampStandard.String()+", 512Mbps each second")
	t.Report = Report(r.choice(p.field("report"), raw.Report, reportWords, int(ReportFibre)))
	r.unless(p, "report", ReportFibre.String())
	t.Correlation = span("correlation", raw.Correlation, 0)
	t.TrafficReady = span("traffic-ready", raw.TrafficReady, 0)
	t.Converge = span("converge", raw.Converge, defaultConverge)
	t.Command = random.Spec(value(raw.Command, timeLaw(defaultCommand)))
	r.unless(p, "command", "lognormal, median 10ms, p95 50ms")
	t.CommandsAtOnce = within(p.field("commands-at-once"), raw.CommandsAtOnce, 1, 1000, defaultAtOnce, plain)
	r.unless(p, "commands-at-once", plain(defaultAtOnce))
	t.Commands = CommandOrder(r.choice(p.field("commands"), raw.Commands, commandWords, int(CommandsByKind)))
	r.unless(p, "commands", "parallel for slots, sequence for channels")
	t.LossOfMessage = float64(value(raw.LossOfMessage, 0))
	if t.LossOfMessage >= 1 {
		p.field("loss-of-message").fault("write less than 1", "a controller whose messages are all lost can do nothing")
	}
	r.unless(p, "loss-of-message", "0")
}

// forwarding reads the latency of a router.
func (r *resolver) forwarding(p *place, raw rawRouter, or random.Spec) random.Spec {
	if raw.Forwarding == nil {
		return or
	}
	s := random.Spec(*raw.Forwarding)
	if s.Kind != random.Constant && (s.Kind != random.Lognormal || s.P99 == 0) {
		p.field("forwarding").fault("write for instance 15us, or { median: 15us, p99: 80us }",
			"a forwarding latency is constant, or has a median and a p99")
	}
	return s
}

// resolveController reads where the controller stands.
func (r *resolver) resolveController() {
	p := r.t.top().field("controller")
	raw := &r.raw.Controller
	c := &r.s.Controller
	c.Pos = p.pos()
	if p.field("at").given() {
		c.At = nodes.SiteID(r.sites.find(p.field("at"), raw.At))
	} else if len(r.s.Sites) > 0 {
		r.defaulted("controller.at", r.s.Sites[0].Name+" (the first site)")
	}
	span := func(key string, v *des.Time, least, or des.Time) des.Time {
		r.unless(p, key, FormatTime(or))
		return within(p.field(key), v, least, maxSpan, or, FormatTime)
	}
	c.Compute = span("compute", raw.Compute, 0, defaultCompute)
	c.Retry = span("retry", raw.Retry, des.Millisecond, defaultRetry)
	c.Poll = span("poll", raw.Poll, des.Millisecond, defaultPoll)
	c.Attempts = within(p.field("attempts"), raw.Attempts, 1, 100, defaultAttempts, plain)
	r.unless(p, "attempts", plain(defaultAttempts))
	c.Routing = Routing(r.choice(p.field("routing"), raw.Routing, routingWords, int(RoutingCentral)))
	for _, t := range []struct {
		key string
		raw *des.Time
		to  *des.Time
		or  des.Time
	}{
		{"hello", raw.Hello, &c.Hello, defaultHello}, {"adjacency-up", raw.AdjacencyUp, &c.AdjacencyUp, defaultAdjacencyUp},
		{"flood", raw.Flood, &c.Flood, defaultFlood}, {"install", raw.Install, &c.Install, defaultInstall},
	} {
		switch {
		case c.Routing == RoutingDistributed:
			*t.to = span(t.key, t.raw, des.Microsecond, t.or)
		case p.field(t.key).given():
			p.field(t.key).fault("write routing: distributed beside it", "the controller alone routes, and has no use for it")
		}
	}
}
