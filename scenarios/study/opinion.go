package study

import (
	"fmt"
	"math"
	"slices"

	"ferrule/des"
	"ferrule/des/theory"
	"ferrule/nodes"
	"ferrule/nodes/packet"
	"ferrule/scenarios/result"
)

// apart is by how much of the greater a measured and a predicted mean wait may
// differ before they count as parting, and slightWait the share of a mean
// service below which nobody asks why. Common practice, no source.
const (
	apart      = 0.2
	slightWait = 0.05
)

// theory is what queueing theory says of the mean wait at a port, from the
// moments of gaps and line times measured there; nil when there is too little
// or the port had no time to spare.
//
// Sources: the formula of Pollaczek and Khinchine, L. Kleinrock, Queueing
// Systems vol. 1 (1975), sec. 5.6, which holds for the mean over classes too
// when their line times have one law; J. Kingman, Biometrika 49 (1962).
func (g *gatherer) theory(p *packet.PortReport) *result.Theory {
	const least = 100 // arrivals
	if p.Arrived < least || p.Service <= 0 || p.Gap <= p.Service {
		return nil
	}
	second := float64(des.Second)
	x := &result.Theory{MeanGapS: p.Gap / second, GapCoV2: p.GapCoV2, MeanServiceS: p.Service / second, ServiceCoV2: p.ServiceCoV2}
	lambda, varGap, varService := 1/x.MeanGapS, x.GapCoV2*x.MeanGapS*x.MeanGapS, x.ServiceCoV2*x.MeanServiceS*x.MeanServiceS
	s2 := varService + float64(x.MeanServiceS*x.MeanServiceS)
	x.WaitS = theory.MG1{Lambda: lambda, S1: x.MeanServiceS, S2: s2}.MeanWait()
	x.CeilingS = theory.KingmanBound(lambda, varGap, x.MeanServiceS, varService)
	wait := p.MeanWait / second
	away := math.Abs(wait - x.WaitS)
	x.Parts = away > apart*max(wait, x.WaitS) && away > slightWait*x.MeanServiceS
	if x.Parts {
		x.Because = g.because(p, wait, x)
	}
	return x
}

// because says why theory and measurement part at a port: the gravest reason.
func (g *gatherer) because(p *packet.PortReport, wait float64, x *result.Theory) string {
	c := &g.m.Plant.Circuits[p.Circuit]
	ups := 0
	for _, t := range g.n.Turns(p.From, p.Circuit) {
		if t.State != nodes.PortDraining {
			ups++
		}
	}
	switch {
	case ups > 1:
		return "the circuit went down or changed during the run; theory knows one load and one rate"
	case p.Lost > 0:
		return "packets were lost, and the formulas have room for all"
	case slices.ContainsFunc(g.n.Stretches(), func(s packet.Stretch) bool { return s.Act != "" }):
		return "acts changed the load during the run, and the formulas know one mean"
	case wait > x.CeilingS:
		return fmt.Sprintf("more than any queue with independent gaps could wait: arrivals come in trains, gaps of squared variation %s are no measure of that", digits(x.GapCoV2))
	case x.GapCoV2 > 1.25 && wait > x.WaitS:
		return "arrivals come in bursts, more than those of a Poisson process"
	case wait > x.WaitS:
		return "gaps look like those of a Poisson process one by one, and follow each other in busy and quiet stretches"
	case x.GapCoV2 < 0.8:
		return "arrivals are evener than those of a Poisson process: sent at a pace, or spaced by the line before"
	case len(g.m.Plant.Classes) > 1:
		return "arrivals of one line before cannot meet each other, and classes with longer packets may wait for shorter ones"
	default:
		return "arrivals of one line before cannot meet each other on line " + c.Name
	}
}
