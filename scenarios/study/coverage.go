package study

import (
	"context"
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"

	"ferrule/des/measure"
	"ferrule/des/theory"
	"ferrule/nodes"
	"ferrule/scenarios"
	"ferrule/scenarios/result"
)

// Covered is one line of a study of coverage: of so many independent
// experiments, how many had an interval that held the truth, or how many found
// a difference.
type Covered struct {
	Cell        string  // what was run: load, run length, seeds of an experiment
	What        string  // the interval or the verdict
	Truth       float64 // in Unit; 0 where there is none
	Unit        string
	Experiments int
	Hits        int
	Low, High   float64 // share of hits that the study accepts
	Note        string
}

// Share is hits over experiments.
func (c Covered) Share() float64 { return float64(c.Hits) / float64(c.Experiments) }

// OK reports whether the share lies where it should.
func (c Covered) OK() bool { return c.Low <= c.Share() && c.Share() <= c.High }

// seedsOfExperiment is how many seeds an experiment of a study of coverage has.
const seedsOfExperiment = 10

// noMargin calls nothing the same that is not.
const noMargin = 1e-9

// A coverCell is a scenario with known answers.
type coverCell struct {
	name    string
	text    string // the scenario
	truths  []truth
	placebo bool // judge each experiment against the next, which differs by chance alone
	within  bool // judge the interval that a single run gives itself
	until   float64
}

// A truth is what a figure of a class comes to in the long run.
type truth struct {
	class, figure, unit string
	value               float64
	ofSeeds             bool // the mean of the seeds' percentiles, not that of all packets
}

// suffix tells the two kinds of percentile apart.
func (t *truth) suffix() string {
	switch _, is := shareOfPercentile[t.figure]; {
	case !is:
		return ""
	case t.ofSeeds:
		return ", mean of the seeds"
	default:
		return ", pooled over seeds"
	}
}

// lightOfKm is how long light takes through the 1 km of the scenarios here.
const lightOfKm = 4.9e-6

// Coverage makes so many independent experiments of each kind, of ten seeds
// each, with known answers: M/M/1 at two loads, three priorities, a short
// buffer. It counts how often intervals at 95 % hold the truth, how often a
// placebo, a plan that differs by its draws alone, is called different, and how
// often a known small difference is found. seconds is the length measured of
// each run; M/M/1 at load 0.8 has four times and the priorities twice as much,
// for there queues remember longer. The cells run one after the other on the
// cores of o. The time it takes grows with experiments times seconds; 400 and
// 10 take some minutes.
func Coverage(ctx context.Context, o Options, experiments int, seconds float64) ([]Covered, error) {
	var out []Covered
	for _, c := range coverCells(seconds) {
		samples, err := c.run(ctx, o, experiments)
		if err != nil {
			return out, err
		}
		out = append(out, c.judge(samples, experiments)...)
	}
	more, err := foundDifference(ctx, o, experiments, seconds)
	return append(out, more...), err
}

// coverCells lists what is run.
func coverCells(seconds float64) []coverCell {
	m1, m2, m3 := theory.RoundedExponential(1000)
	perByte := 8 / 10e6
	s1, s2, s3 := theory.Scaled(perByte, m1, m2, m3)
	var cells []coverCell
	for _, rho := range []float64{0.5, 0.8} {
		mm1 := theory.MM1{Lambda: rho / s1, Mu: 1 / s1}
		mg1 := theory.MG1{Lambda: rho / s1, S1: s1, S2: s2, S3: s3}
		length := seconds
		if rho > 0.6 {
			length *= 4 // queues remember longer
		}
		c := coverCell{name: fmt.Sprintf("M/M/1, load %v, %v s", rho, length), placebo: true, within: true,
			text: coverText(length, "fifo, buffer: 60s", rho*10),
			truths: []truth{
				{"all", result.FigDelayMean, result.UnitSeconds, mg1.MeanSojourn() + lightOfKm, false},
				{"all", result.FigDelayP99, result.UnitSeconds, mm1.SojournQuantile(0.99) + lightOfKm, false},
				{"all", result.FigDelayP99, result.UnitSeconds, mm1.SojournQuantile(0.99) + lightOfKm, true},
				{"all", result.FigDelayP999, result.UnitSeconds, mm1.SojournQuantile(0.999) + lightOfKm, false},
			}}
		if rho < 0.6 {
			c.until = 0.02
		}
		cells = append(cells, c)
	}
	short := theory.MM1K{Lambda: 0.8 / s1, Mu: 1 / s1, K: 10}
	cells = append(cells, coverCell{name: fmt.Sprintf("M/M/1/10, load 0.8, %v s", seconds), placebo: true,
		text: coverText(seconds, "fifo, buffer: 9 packets", 8),
		truths: []truth{
			{"all", result.FigLoss, result.UnitRatio, short.Loss(), false},
			{"all", result.FigDelayMean, result.UnitSeconds, short.MeanSojourn() + lightOfKm, false},
		}})
	return append(cells, priorityCell(2*seconds, perByte, m1, m2))
}

// priorityCell is a link of load 0.8 with three strict priorities.
func priorityCell(seconds, perByte, m1, m2 float64) coverCell {
	of := func(load, m1, m2 float64) theory.PriorityClass {
		return theory.PriorityClass{Lambda: load / (m1 * perByte), S1: m1 * perByte, S2: m2 * perByte * perByte}
	}
	classes := []theory.PriorityClass{of(0.2, 200, 200*200), of(0.3, m1, m2), of(0.3, 1500, 1500*1500)}
	waits := theory.PriorityWaits(classes)
	c := coverCell{name: fmt.Sprintf("three priorities, load 0.8, %v s", seconds), text: fmt.Sprintf(coverHead, seconds+2) + `
classes:
  - { name: high, queue: strict, buffer: 60s, traffic: short }
  - { name: middle, queue: strict, buffer: 60s, traffic: random }
  - { name: low, queue: strict, buffer: 60s, traffic: full }
traffic:
  - { name: short, model: poisson, packet: 200B }
  - { name: random, model: poisson, packet: { exponential: { mean: 1000B } } }
  - { name: full, model: poisson, packet: 1500B }
aggregates:
  - { name: high, from: here, to: there, class: high, load: 2Mbps }
  - { name: middle, from: here, to: there, class: middle, load: 3Mbps }
  - { name: low, from: here, to: there, class: low, load: 3Mbps }
`}
	for i, name := range []string{"high", "middle", "low"} {
		c.truths = append(c.truths, truth{name, result.FigDelayMean, result.UnitSeconds, waits[i] + classes[i].S1 + lightOfKm, false})
	}
	return c
}

// coverHead is the ground of every cell: one link of 10 Mbit/s.
const coverHead = `
scenario: coverage
run: { length: %vs, warm-up: 2s }
defaults: { circuit: { carries: routed, mtu: 65535B, framing: none }, router: { forwarding: 0us } }
sites: [ { name: here }, { name: there } ]
fibres: [ { between: [here, there], length: 1km } ]
circuits: [ { name: link, along: [here-there], slots: 1, rate: 10Mbps } ]
plans:
  - { name: wider, on: as-is, in-place: [ { resize: link, slots: 1 } ] }
`

// coverText is a scenario of one class of Poisson traffic with exponential
// sizes of 1000 B on average.
func coverText(seconds float64, queue string, mbps float64) string {
	return fmt.Sprintf(coverHead, seconds+2) + fmt.Sprintf(`
classes: [ { name: all, queue: %s, traffic: random, objective: { delay-p95: 1s, delay-p99: 1s, loss: 10%% } } ]
traffic: [ { name: random, model: poisson, packet: { exponential: { mean: 1000B } } } ]
aggregates: [ { name: packets, from: here, to: there, class: all, load: %vMbps } ]
`, queue, mbps)
}

// run makes the replications of all experiments.
func (c *coverCell) run(ctx context.Context, o Options, experiments int) ([]*sample, error) {
	sc, err := scenarios.Load(c.name, []byte(c.text), nil, nil)
	if err != nil {
		return nil, err
	}
	var jobs []job
	for _, seed := range Seeds(1, experiments*seedsOfExperiment) {
		jobs = append(jobs, job{scenarios.AsIs, seed})
	}
	return sampleAll(ctx, jobs, o, replicator(sc, o))
}

// judge counts.
func (c *coverCell) judge(samples []*sample, experiments int) []Covered {
	cell := fmt.Sprintf("%s, %d seeds", c.name, seedsOfExperiment)
	var out []Covered
	for _, t := range c.truths {
		line := Covered{Cell: cell, What: t.class + " " + t.figure + t.suffix(), Truth: t.value, Unit: t.unit, Experiments: experiments, Low: 0.92, High: 0.98}
		line.Experiments = 0
		for e := range experiments {
			line.count(c.find(foldBatch(scenarios.AsIs, ofExperiment(samples, e), confidence), t), t)
		}
		if n := experiments - line.Experiments; n > 0 {
			line.Note = fmt.Sprintf("%d of %d were refused an interval", n, experiments)
		}
		out = append(out, line)
	}
	if c.placebo {
		out = append(out, c.placebos(cell, samples, experiments))
	}
	if c.within {
		out = append(out, c.ownIntervals(samples))
	}
	if c.until > 0 {
		out = append(out, c.sequential(samples)...)
	}
	return out
}

func ofExperiment(samples []*sample, e int) []*sample {
	return samples[e*seedsOfExperiment : (e+1)*seedsOfExperiment]
}

// count counts an interval, if there is one.
func (c *Covered) count(i *result.Interval, t truth) {
	if i == nil {
		return
	}
	c.Experiments++
	if *i.Low <= t.value && t.value <= *i.High {
		c.Hits++
	}
}

// find is the interval of a figure of a batch: of a percentile, that of all
// seeds together.
func (c *coverCell) find(b *result.Batch, t truth) *result.Interval {
	for i := range b.Figures {
		if m := &b.Figures[i]; m.Class == t.class && m.Figure == t.figure {
			if _, pooled := shareOfPercentile[t.figure]; pooled && !t.ofSeeds {
				return m.PooledInterval
			}
			return m.Interval
		}
	}
	return nil
}

// placebos counts how often the next experiment is called different from one
// in any figure of the family. They share nothing, so only chance differs. The
// margin is next to nothing, or most would be called the same.
func (c *coverCell) placebos(cell string, samples []*sample, experiments int) Covered {
	line := Covered{Cell: cell, What: "a placebo called different, any of the family", Experiments: experiments,
		Note: "plans that differ by their draws alone, no margin; a true 5 % explains as much in 99 of 100 studies"}
	_, most := measure.CoverageRange(experiments, 1-confidence, 0.99)
	line.High = float64(most) / float64(experiments)
	for e := range experiments {
		c := foldComparison([]string{scenarios.AsIs, "placebo"},
			[][]*sample{ofExperiment(samples, e), ofExperiment(samples, (e+1)%experiments)}, terms{level: confidence, margin: noMargin})
		for _, d := range c.Plans[0].Figures {
			if !d.Exploratory && (d.Verdict == result.Better || d.Verdict == result.Worse) {
				line.Hits++
				break
			}
		}
	}
	return line
}

// ownIntervals judges what each run says of its own mean delay.
func (c *coverCell) ownIntervals(samples []*sample) Covered {
	t := c.truths[0]
	line := Covered{Cell: c.name + ", 1 seed", What: "mean delay by batches within the run", Truth: t.value, Unit: t.unit, Low: 0.92, High: 0.98}
	for _, s := range samples {
		for _, w := range s.within {
			line.count(w.Interval, t)
		}
	}
	line.Note = fmt.Sprintf("%d of %d runs were refused an interval", len(samples)-line.Experiments, len(samples))
	return line
}

// sequential lets the rule of BatchUntil stop on the samples one after the
// other, as many times as they last.
func (c *coverCell) sequential(samples []*sample) []Covered {
	t := c.truths[0]
	line := Covered{Cell: c.name + ", seeds until the precision", What: fmt.Sprintf("%s after stopping at %v %%", t.figure, 100*c.until),
		Truth: t.value, Unit: t.unit, Low: 0.92, High: 0.98}
	p := Precision{Figure: t.figure, Relative: c.until, First: leastFirst, AtMost: 1000}
	used := 0
	for {
		n, stop := p.First, &result.Stopping{}
		for n <= len(samples) {
			next, err := p.look(samples[:n], stop)
			if err != nil || stop.Reached {
				break
			}
			n = p.next(n, next)
		}
		if n > len(samples) {
			break
		}
		b := foldBatch(scenarios.AsIs, samples[:n], confidence)
		line.count(c.find(b, t), t)
		used += n
		samples = samples[n:]
	}
	if line.Experiments == 0 {
		return nil
	}
	line.Note = fmt.Sprintf("%.1f seeds on average", float64(used)/float64(line.Experiments))
	return []Covered{line}
}

// foundDifference counts how often a link that is 1.5 % faster is found to have
// a shorter mean delay, with draws of its own, since with the same ones it
// always is, and sets beside it the power of the paired t test for
// the variance measured over all experiments.
func foundDifference(ctx context.Context, o Options, experiments int, seconds float64) ([]Covered, error) {
	const faster = 0.015
	c := coverCells(seconds)[0]
	base, err := c.run(ctx, o, experiments)
	if err != nil {
		return nil, err
	}
	sc, err := scenarios.Load(c.name, []byte(c.text), nil, nil)
	if err != nil {
		return nil, err
	}
	own := *sc
	own.Plans = append([]scenarios.Plan(nil), sc.Plans...)
	own.Plans[0].Circuits = append([]scenarios.Circuit(nil), sc.Plans[0].Circuits...)
	own.Plans[0].Circuits[0].Rate += nodes.Rate(faster * float64(own.Plans[0].Circuits[0].Rate))
	var jobs []job
	for _, s := range base {
		jobs = append(jobs, job{scenarios.AsIs, s.seed + uint64(len(base))})
	}
	plan, err := sampleAll(ctx, jobs, o, replicator(&own, o))
	if err != nil {
		return nil, err
	}
	line := Covered{Cell: fmt.Sprintf("%s, %d seeds", c.name, seedsOfExperiment), What: "a link 1.5 % faster, other draws, found to have a shorter mean delay",
		Experiments: experiments}
	var diffs []float64
	for e := range experiments {
		d := foldComparison([]string{scenarios.AsIs, "faster"}, [][]*sample{ofExperiment(base, e), ofExperiment(plan, e)},
			terms{level: confidence, margin: noMargin})
		for _, x := range d.Plans[0].Figures {
			if x.Figure == result.FigDelayMean && x.Verdict == result.Better {
				line.Hits++
			}
		}
	}
	mean := func(s *sample) float64 {
		for i := range s.figures {
			if s.figures[i].figure == result.FigDelayMean {
				return *s.figures[i].value
			}
		}
		return math.NaN()
	}
	for i := range base {
		diffs = append(diffs, mean(plan[i])-mean(base[i]))
	}
	i := measure.MeanInterval(diffs, confidence)
	sd := i.Half / measure.TQuantile(0.975, float64(i.N-1)) * math.Sqrt(float64(i.N))
	predicted := pairedPower(math.Abs(i.Mean)/sd, seedsOfExperiment)
	line.Low, line.High = max(0, predicted-0.06), min(1, predicted+0.06)
	line.Note = fmt.Sprintf("power predicted %.3f", predicted)
	return []Covered{line}, nil
}

// pairedPower is the chance that a t test at 95 % of n pairs shows a mean of so
// many standard deviations on the right side: the tail of the noncentral t
// law, summed over the law of the sample's standard deviation.
//
// Source: J. Cohen, Statistical Power Analysis for the Behavioral Sciences
// (1988), ch. 2; computed from the definition of the noncentral t law.
func pairedPower(effect float64, n int) float64 {
	df := float64(n - 1)
	chi := distuv.ChiSquared{K: df}
	critical, shift := measure.TQuantile(0.975, df), effect*math.Sqrt(float64(n))
	const steps = 4000
	sum := 0.0
	for i := range steps {
		s := math.Sqrt(chi.Quantile((float64(i)+0.5)/steps) / df)
		sum += distuv.UnitNormal.CDF(shift - float64(critical*s))
	}
	return sum / steps
}
