package study

import (
	"cmp"
	"context"
	"fmt"
	"math"
	"slices"
	"strings"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/optical"
	"ferrule/scenarios"
	"ferrule/scenarios/result"
)

// Check says what can be said of a scenario under the plan of o before it
// runs. It simulates nothing. Loads are those the file asks for, as the
// network stands at the start of the run: what is not moved goes by metric
// over the routed circuits, equal cost split evenly, and what is moved by its
// chain. A link's utilisation counts what each packet takes on the line beside
// its IP bytes, against the rate of its ports.
//
// The worst failure is that of one fibre or of one risk group. Circuits over
// it are down, but those that restore are given new routes by the rules of the
// controller, as far as slots are free.
//
// Candidates are the ways that pass a router in transit, the largest 20 of
// them. Slots needed are filled to 80 % at most, labels included; ports freed
// are those of transit routers that the way would pass no more, two for each.
//
// A scenario that no run could start is a finding, not an error.
func Check(ctx context.Context, sc *scenarios.Scenario, o Options) (*result.Check, error) {
	plan, err := sc.Plan(o.plan())
	if err != nil {
		return nil, err
	}
	g, err := newGround(sc, plan)
	if err != nil {
		return nil, err
	}
	c := &checker{g: g, streams: streamsOf(sc, plan), routes: newRouting(g)}
	c.load = c.routes.load(c.streams)
	c.order = g.importance(c.load.classes)
	if err := c.breakAll(ctx); err != nil {
		return nil, err
	}
	r := &result.Check{Plan: plan.Name}
	r.Scenario, r.ScenarioHash = sc.Name, sc.Hash
	r.LengthS, r.WarmUpS = sc.Run.Length.Seconds(), sc.Run.WarmUp.Seconds()
	r.Links = c.links()
	r.Findings = c.findings()
	var left int
	r.Candidates, left = c.candidates()
	if left > 0 {
		r.Cautions = append(r.Cautions, fmt.Sprintf("The candidates are the %d largest; %d smaller ones are not listed.", len(r.Candidates), left))
	}
	r.Estimate = c.estimate()
	r.Cautions = append(r.Cautions, "Loads are means: queues also come from bursts, which only a run shows.",
		fmt.Sprintf("The estimate is for nothing broken, on one core, at %d ns for each packet on each line.", nsPerHop))
	for _, d := range sc.Defaults {
		key, value, _ := strings.Cut(d, " = ")
		r.Defaults = append(r.Defaults, result.Default{Key: key, Value: value})
	}
	return r, nil
}

// A checker holds what a check finds out on its way.
type checker struct {
	g       *ground
	streams []stream
	routes  *routing
	load    *burden // nothing broken
	order   []nodes.CircuitID
	broken  []failure
}

// A failure is one fibre or one risk group gone.
type failure struct {
	name     string
	fibres   []nodes.FibreID
	use      [][2]float64 // by circuit and direction
	stranded []int        // streams of which nothing arrives, that did before
	lost     []nodes.CircuitID
}

// breakAll lets every fibre fail in turn, then every risk group of several.
func (c *checker) breakAll(ctx context.Context) error {
	for i := range c.g.plant.Fibres {
		c.broken = append(c.broken, failure{name: c.g.plant.Fibres[i].Name, fibres: []nodes.FibreID{nodes.FibreID(i)}})
	}
	for i := range c.g.sc.RiskGroups {
		if g := &c.g.sc.RiskGroups[i]; len(g.Fibres) > 1 {
			c.broken = append(c.broken, failure{name: g.Name, fibres: g.Fibres})
		}
	}
	for i := range c.broken {
		if err := ctx.Err(); err != nil {
			return err
		}
		c.breakOne(&c.broken[i])
	}
	return nil
}

// breakOne finds the loads after one failure.
func (c *checker) breakOne(f *failure) {
	g := c.g.without(f.fibres, c.order)
	r := newRouting(g)
	b := r.load(c.streams)
	f.use = make([][2]float64, len(g.lines))
	for i := range g.lines {
		for d := range nodes.Direction(2) {
			f.use[i][d] = r.use(b, nodes.CircuitID(i), d)
		}
		if c.g.lines[i].up && !g.lines[i].up {
			f.lost = append(f.lost, nodes.CircuitID(i))
		}
	}
	for _, s := range b.stranded {
		if _, was := slices.BinarySearch(c.load.stranded, s); !was {
			f.stranded = append(f.stranded, s)
		}
	}
}

// worst is the highest use of a link under any failure, and which; nil when no
// failure leaves it any load.
func (c *checker) worst(id nodes.CircuitID, d nodes.Direction) (use float64, f *failure) {
	for i := range c.broken {
		if u := c.broken[i].use[id][d]; u > use {
			use, f = u, &c.broken[i]
		}
	}
	return use, f
}

// links lists both directions of every circuit that stands.
func (c *checker) links() []result.Link {
	var out []result.Link
	for i := range c.g.lines {
		if !c.g.lines[i].up {
			continue
		}
		p := &c.g.plant.Circuits[i]
		for d := range nodes.Direction(2) {
			id := nodes.CircuitID(i)
			use := c.routes.use(c.load, id, d)
			l := result.Link{Circuit: p.Name, From: c.g.plant.Sites[p.Ends[d]].Name, To: c.g.plant.Sites[p.Ends[d.Reverse()]].Name,
				LoadBps: c.load.bps[i][d], PayloadBps: float64(p.Rate), Utilisation: &use}
			if use > 0 {
				l.GrowthLeft = new(1 / use)
			}
			if u, f := c.worst(id, d); f != nil {
				l.WorstUtilisation, l.WorstFibre = &u, f.name
			} else if len(c.broken) > 0 {
				l.WorstUtilisation = new(0.0)
			}
			out = append(out, l)
		}
	}
	return out
}

// Candidates: how many are listed, and how full their circuits may be.
const (
	mostCandidates = 20
	fill           = 0.8
)

// candidates lists the ways that a circuit of their own would take past
// routers, the largest first, and says how many are left out.
func (c *checker) candidates() (list []result.Candidate, left int) {
	var which []int
	for i := range c.streams {
		s := &c.streams[i]
		if s.seconds > 0 && len(s.chain) == 0 && c.routes.walk(s) && len(c.routes.pass) > 0 {
			which = append(which, i)
		}
	}
	slices.SortStableFunc(which, func(a, b int) int { return cmp.Compare(c.streams[b].bps, c.streams[a].bps) })
	left = max(0, len(which)-mostCandidates)
	for _, i := range which[:len(which)-left] {
		list = append(list, c.candidate(&c.streams[i]))
	}
	return list, left
}

// candidate describes one.
func (c *checker) candidate(s *stream) result.Candidate {
	g := c.g
	x := result.Candidate{Aggregate: s.name, From: g.plant.Sites[s.from].Name, To: g.plant.Sites[s.to].Name,
		Class: g.plant.Classes[s.class].Name, Bps: s.bps, SlotsNeeded: slotsFor(s)}
	c.routes.walk(s)
	var passed float64
	for _, p := range c.routes.pass {
		passed += p.share
		x.Transit = append(x.Transit, result.SiteShare{Site: g.plant.Sites[p.site].Name, Share: float64(s.bps*p.share) / c.load.transit[p.site]})
		x.TransitFreedBps += float64(s.bps * p.share)
	}
	x.RoutersPassed = int64(math.Round(passed))
	x.PortsFreed = 2 * x.RoutersPassed
	l := g.bestWay(s.from, s.to)
	for k, f := range l {
		x.BestWay = append(x.BestWay, g.plant.Fibres[f].Name)
		if free := g.free[f]; k == 0 || free < *x.FreeSlots {
			x.FreeSlots = &free
		}
	}
	return x
}

// labelled is what a moved packet takes on the line beside its IP bytes: 18 B
// of frame, 8 B of mapping and 4 B of label.
const labelled = 30

// slotsFor is the least number of slots whose payload a stream fills to 80 %
// at most. Beyond one channel it counts whole channels' worth of slots.
func slotsFor(s *stream) int64 {
	need := (s.bps + float64(8*labelled*s.pps)) / fill
	var most float64
	for n := 1; n <= optical.SlotsPerChannel; n++ {
		payload, err := optical.PayloadOfSlots(n)
		if err != nil {
			panic(fmt.Sprintf("study: payload of %d slots: %v", n, err))
		}
		if most = float64(payload); most >= need {
			return int64(n)
		}
	}
	return int64(math.Ceil(need / most * optical.SlotsPerChannel))
}

// What a run takes, by a rule of thumb: so much for each packet put on a line,
// and so much for each time a way has packets in a window, however few. Three
// runs of 24, 1710 and 16 ways took 0.72, 2.5 and 1.7 s of one core at 3.6 GHz,
// by this rule 0.67, 2.1 and 1.6 s. Memory was 26 and 35 MB in two of them.
const (
	nsPerHop      = 130
	nsPerBatch    = 1400
	bytesBase     = 20e6   // the program
	bytesPerCell  = 10e3   // meters of one way in one period
	bytesInFlight = 2 * 32 // of each packet under way: rings grow by doubling
)

// estimate says what a run will take.
func (c *checker) estimate() result.Estimate {
	periods := 1 + len(c.g.sc.Timeline) + len(c.g.plan.Steps)
	e := result.Estimate{PacketHops: c.load.hops, MemoryBytes: bytesBase + float64(bytesPerCell*float64(len(c.streams)*periods))}
	for i := range c.streams {
		s := &c.streams[i]
		if !c.routes.walk(s) {
			continue
		}
		for _, l := range c.routes.legs {
			light := c.g.light(c.g.lines[l.circuit].route).Seconds()
			e.MemoryBytes += float64(float64(s.pps*l.share) * light * bytesInFlight)
		}
	}
	length := c.g.sc.Run.Length.Seconds()
	least := des.Never
	for i := range c.g.plant.Fibres {
		least = min(least, c.g.plant.Fibres[i].Delay)
	}
	windows := length / least.Seconds()
	batches := 0.0
	for i := range c.streams {
		batches += min(float64(c.streams[i].pps*length), windows)
	}
	e.WallS = new(float64(e.PacketHops*nsPerHop/1e9) + float64(batches*nsPerBatch/1e9))
	return e
}
