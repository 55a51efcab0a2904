package quality

import (
	"fmt"

	"ferrule/des"
	"ferrule/des/measure"
)

// Classes is the number of network classes of ITU-T Y.1541, 0 to 7.
const Classes = 8

// An Objective is what a network class of ITU-T Y.1541 promises. A zero field
// is unspecified.
type Objective struct {
	Delay     des.Time // upper bound of the mean delay
	Variation des.Time // upper bound of the Tail quantile of the delay less its minimum
	Tail      [2]uint64
	Loss      float64 // upper bound of the fraction lost
}

// ObjectiveOf returns the objective of a class, 0 to 7; else it panics.
//
// Source: ITU-T Y.1541, Tables 1 and 3 (classes 6 and 7, provisional), as summed
// up in RFC 5976, section 2.1 (2010); the quantile of classes 6 and 7 from
// memory.
func ObjectiveOf(class int) Objective {
	const ms = des.Millisecond
	tail := [2]uint64{999, 1000}
	switch class {
	case 0:
		return Objective{100 * ms, 50 * ms, tail, 1e-3}
	case 1:
		return Objective{400 * ms, 50 * ms, tail, 1e-3}
	case 2:
		return Objective{Delay: 100 * ms, Loss: 1e-3}
	case 3:
		return Objective{Delay: 400 * ms, Loss: 1e-3}
	case 4:
		return Objective{Delay: des.Second, Loss: 1e-3}
	case 5:
		return Objective{}
	case 6:
		return Objective{100 * ms, 50 * ms, [2]uint64{99999, 100000}, 1e-5}
	case 7:
		return Objective{400 * ms, 50 * ms, [2]uint64{99999, 100000}, 1e-5}
	default:
		panic(fmt.Sprintf("quality: class %d of Y.1541", class))
	}
}

// A Population is what one evaluation interval saw of the packets of a flow or
// aggregate. Y.1541 suggests one minute and judges each interval by itself.
type Population struct {
	Delays *measure.Hist    // of the delivered packets, ns
	Exact  *measure.Moments // of the same, for the mean
	Lost   uint64
}

// MeanDelay returns the mean delay of the delivered packets in ns; ok is false
// when nothing was delivered.
func (p Population) MeanDelay() (ns float64, ok bool) {
	if p.Delays.Count() == 0 {
		return 0, false
	}
	return p.Exact.Mean(), true
}

// Variation returns the quantile num/den of the delay of the delivered packets
// less the least, in ns; ok is false when nothing was delivered. Lost packets
// do not count here, unlike in RFC 7679: Y.1540 judges them by the loss ratio
// alone.
//
// Source: ITU-T Y.1540, 6.2.4, and the notes of ITU-T Y.1541, Table 1.
func (p Population) Variation(num, den uint64) (ns float64, ok bool) {
	q, ok := p.Delays.Quantile(num, den)
	least, _ := p.Delays.Min()
	return q - float64(least), ok
}

// LossRatio returns lost over sent packets; ok is false when none was sent.
func (p Population) LossRatio() (ratio float64, ok bool) {
	sent := p.Delays.Count() + p.Lost
	if sent == 0 {
		return 0, false
	}
	return float64(p.Lost) / float64(sent), true
}

// Enough reports whether the sample can show the tail of the objective: below
// 1/(1-quantile) delivered packets the quantile is just the maximum.
func (p Population) Enough(o Objective) bool {
	return o.Tail[1] == 0 || p.Delays.Count()*(o.Tail[1]-o.Tail[0]) >= o.Tail[1]
}

// Meets reports whether the interval kept the objective. Nothing sent keeps
// any; of what was sent nothing delivered keeps only one without bounds.
func (p Population) Meets(o Objective) bool {
	ratio, ok := p.LossRatio()
	if !ok || o == (Objective{}) {
		return true
	}
	mean, ok := p.MeanDelay()
	if !ok || o.Loss > 0 && ratio > o.Loss {
		return false
	}
	if o.Delay > 0 && mean > float64(o.Delay)/float64(des.Nanosecond) {
		return false
	}
	if o.Variation > 0 {
		v, _ := p.Variation(o.Tail[0], o.Tail[1])
		return v <= float64(o.Variation)/float64(des.Nanosecond)
	}
	return true
}

// Met reports which classes of Y.1541 the interval kept.
func (p Population) Met() (met [Classes]bool) {
	for class := range met {
		met[class] = p.Meets(ObjectiveOf(class))
	}
	return met
}
