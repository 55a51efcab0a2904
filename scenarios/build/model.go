package build

import (
	"fmt"

	"ferrule/controller"
	"ferrule/controller/central"
	"ferrule/controller/distributed"
	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/conditioner"
	"ferrule/nodes/packet"
	"ferrule/scenarios"
	"ferrule/workloads"
	"ferrule/workloads/replay"
)

// Model is one replication, ready to run.
type Model struct {
	Scenario *scenarios.Scenario
	Plan     *scenarios.Plan
	Plant    *nodes.Plant
	Network  *packet.Network
	Control  *central.Net
	Routing  *distributed.Net // nil: the controller routes
	Steps    []Step
	Asked    []float64 // by way: the load its source means to send, bit/s of IP bytes
	Seed     uint64

	replays []*replay.Source
}

// Err reports why traffic that is replayed has ended before its time: its file
// was changed or could not be read any more. It is nil if nothing went wrong.
func (m *Model) Err() error {
	for _, s := range m.replays {
		if err := s.Err(); err != nil {
			return err
		}
	}
	return nil
}

// Options change how a run is carried out and never what comes of it. The zero
// value is right for every run; tests hold the others to the same results.
type Options struct {
	// JoinBelow is the light delay below which two sites share a region. 0
	// stands for packet.DefaultJoinBelow; a negative one joins no sites.
	JoinBelow des.Time
}

// New builds a replication of sc under plan. Which fits and which does not is
// found here: an error says what, by name, as a user can mend it.
func New(sc *scenarios.Scenario, plan *scenarios.Plan, seed uint64) (*Model, error) {
	return NewWith(sc, plan, seed, Options{})
}

// NewWith is New with options.
func NewWith(sc *scenarios.Scenario, plan *scenarios.Plan, seed uint64, o Options) (*Model, error) {
	m := &Model{Scenario: sc, Plan: plan, Seed: seed}
	var err error
	if m.Plant, err = Plant(sc, plan); err != nil {
		return nil, err
	}
	cfg := packet.Config{
		Plant: m.Plant, Seed: seed, WarmUp: sc.Run.WarmUp, Length: sc.Run.Length,
		Detect: sc.Timing.Detect, Converge: sc.Timing.Converge, MessageLoss: sc.Timing.LossOfMessage,
		JoinBelow: o.JoinBelow, Switch: sc.Timing.Switch, Revert: true, Wait: sc.Timing.WaitToRestore,
	}
	for i := range sc.Sites {
		f, err := forwarding(&sc.Sites[i])
		if err != nil {
			return nil, err
		}
		cfg.Forwarding = append(cfg.Forwarding, f)
	}
	m.Asked = make([]float64, 2*len(sc.Aggregates))
	sources := newMaker(sc, seed)
	for i := range sc.Aggregates {
		for d := range nodes.Direction(2) {
			if sources.closed(nodes.AggID(i)) {
				continue
			}
			if d == nodes.Back && !sc.Aggregates[i].BothWays {
				continue
			}
			s, err := sources.source(nodes.AggID(i), d)
			if err != nil {
				return nil, err
			}
			way := nodes.WayOf(nodes.AggID(i), d)
			m.Asked[way] = s.MeanRate()
			if again, ok := s.(*replay.Source); ok {
				m.replays = append(m.replays, again)
			}
			cfg.Sources = append(cfg.Sources, conditioned(&sc.Aggregates[i], packet.Source{Way: way, Source: s}))
		}
	}
	for i := range sc.Aggregates {
		if !sources.closed(nodes.AggID(i)) {
			continue
		}
		ends, err := sources.endpoints(nodes.AggID(i), m.Asked)
		if err != nil {
			return nil, err
		}
		cfg.Endpoints = append(cfg.Endpoints, ends...)
	}
	if m.Network, err = packet.New(cfg); err != nil {
		return nil, err
	}
	return m, m.control()
}

// conditioned adds to a source what conditions its aggregate.
func conditioned(a *scenarios.Aggregate, s packet.Source) packet.Source {
	if p := a.Police; p != nil && p.Peak > 0 {
		s.Meter = conditioner.NewTwoRate(p.Rate, p.Peak, p.Burst, p.PeakBurst, false)
	} else if p != nil {
		s.Meter = conditioner.NewSingleRate(p.Rate, p.Burst, p.Excess, false)
	}
	if c := a.Shape; c != nil {
		s.Shaper = conditioner.NewShaper(c.Rate, c.Burst, c.Longest)
	}
	return s
}

// control starts the controller and books the acts.
func (m *Model) control() error {
	sc := m.Scenario
	steps, outside, orders, err := acts(sc, m.Plan, m.Plant)
	if err != nil {
		return err
	}
	m.Steps = steps
	for _, s := range steps {
		if s.Act.Verb == scenarios.VerbDrain && sc.Controller.Routing == scenarios.RoutingDistributed {
			return fmt.Errorf("%s:%d: drain %s: the routers route among themselves, and a controller cannot drain one; write routing: central",
				s.Act.Pos.File, s.Act.Pos.Line, s.Act.Subject)
		}
	}
	command, err := sc.Timing.Command.Law()
	if err != nil {
		return fmt.Errorf("command: %w", err)
	}
	cfg := central.Config{
		Site: sc.Controller.At, Seed: m.Seed, Compute: sc.Controller.Compute, Retry: sc.Controller.Retry, Attempts: sc.Controller.Attempts,
		Command: command, CommandsAtOnce: sc.Timing.CommandsAtOnce, Sequence: sc.Timing.Commands == scenarios.CommandsSequence,
		TrafficReady: sc.Timing.TrafficReady, Revert: true, WaitToRestore: sc.Timing.WaitToRestore,
		Relock: sc.Timing.Relock, Level: sc.Timing.Level, PerCircuit: sc.Timing.Report == scenarios.ReportCircuit, Correlate: sc.Timing.Correlation,
	}
	cfg.Ramp, cfg.Poll = sc.Timing.Ramp == scenarios.RampStandard, sc.Controller.Poll
	cfg.Policies = policies(m.Plan)
	for i := range sc.Requests {
		s, err := m.stream(&sc.Requests[i])
		if err != nil {
			return err
		}
		cfg.Streams = append(cfg.Streams, s)
	}
	m.Control = central.New(m.Plant, cfg, orders)
	m.Network.SetAgents(m.Control.Agents)
	if sc.Controller.Routing == scenarios.RoutingDistributed {
		m.Routing = distributed.New(m.Plant, distributed.Config{
			Hello: sc.Controller.Hello, AdjacencyUp: sc.Controller.AdjacencyUp, Flood: sc.Controller.Flood, Install: sc.Controller.Install,
		}, m.Control.Agents)
		m.Network.SetAgents(m.Routing.Agents)
	}
	locals := make([]nodes.Local, len(m.Plant.Sites))
	for i := range locals {
		locals[i] = m.Network.Local(nodes.SiteID(i))
	}
	var moves []controller.Order
	for _, c := range m.Plan.Moves {
		agg, d := nodes.AggOf(c.Way)
		moves = append(moves, controller.Order{Kind: controller.Move, Name: WayName(&sc.Aggregates[agg], d), Ways: []uint16{c.Way}, Circuits: c.Chain})
	}
	through := locals
	if m.Routing != nil {
		through = m.Routing.Locals(locals)
	}
	if err := m.Control.Start(through, moves); err != nil {
		return fmt.Errorf("%s: plan %s: %w", sc.File, m.Plan.Name, err)
	}
	if m.Routing != nil {
		m.Routing.Start(locals)
	}
	m.Network.Begin()
	for _, a := range outside {
		m.Network.Schedule(a)
	}
	for i := range orders { // the controller has booked them; here they open a stretch
		if orders[i].After.Kind != controller.Always {
			continue
		}
		name := ""
		for _, s := range steps {
			if s.Order == i {
				name = fmt.Sprintf("%s %s", s.Act.Verb, s.Act.Subject)
			}
		}
		m.Network.Schedule(packet.Act{At: orders[i].At, Kind: packet.ActOrder, Name: name, Site: cfg.Site})
	}
	return nil
}

// policies are those of the circuits that have one.
func policies(plan *scenarios.Plan) (list []central.Policy) {
	for i := range plan.Circuits {
		if p := plan.Circuits[i].Policy; p != nil {
			list = append(list, central.Policy{
				Circuit: nodes.CircuitID(i), Floor: p.Floor, Ceiling: p.Ceiling, Step: p.Step, Up: p.Up, Down: p.Down,
				Drops: p.Drops, HoldUp: p.HoldUp, HoldDown: p.HoldDown, Weight: p.Smooth,
			})
		}
	}
	return list
}

func (m *Model) stream(r *scenarios.Request) (central.Stream, error) {
	req, err := workloads.NewRequests(workloads.RequestsConfig{
		Name: r.Name, Seed: m.Seed, Stop: m.Scenario.Run.Length, Rate: r.PerSecond, Hold: inSeconds(r.Hold),
	})
	if err != nil {
		return central.Stream{}, fmt.Errorf("%s:%d: requests %s: %w", r.Pos.File, r.Pos.Line, r.Name, err)
	}
	return central.Stream{Name: r.Name, Ends: [2]nodes.SiteID{r.A, r.B}, Slots: r.Slots, Choose: r.Choose, Demand: demand{req}}, nil
}

// Clone implements central.Demand.
func (d demand) Clone() central.Demand { return demand{d.Requests.Clone()} }

// Clone returns a replication in the same state that shares nothing that
// either will change. It must be called between windows: before a run, or after
// the kernel's Advance has returned.
func (m *Model) Clone() *Model {
	c := *m
	c.Network, c.Control = m.Network.Clone(), m.Control.Clone()
	c.replays = nil
	for way := 0; m.replays != nil && way < len(m.Asked); way++ {
		if s, ok := c.Network.SourceOf(uint16(way)).(*replay.Source); ok {
			c.replays = append(c.replays, s)
		}
	}
	c.Network.SetAgents(c.Control.Agents)
	if m.Routing != nil {
		c.Routing = m.Routing.Clone(c.Control.Agents)
		c.Network.SetAgents(c.Routing.Agents)
	}
	return &c
}

// Kernel prepares to run the model on exec.
func (m *Model) Kernel(exec des.Executor) *des.Kernel { return des.NewKernel(m.Network, exec) }
