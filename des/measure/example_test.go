package measure_test

import (
	"fmt"

	"ferrule/des"
	"ferrule/des/measure"
)

// Quantiles are by nearest rank; lost packets count as later than any other.
func ExampleHist() {
	var h measure.Hist
	for ns := uint64(1); ns <= 100; ns++ {
		h.Add(ns)
	}
	p99, _ := h.Quantile(99, 100)
	withLoss, ok := h.QuantileWithLost(99, 100, 1)
	fmt.Println(h.Count(), p99, withLoss, ok)
	_, ok = h.QuantileWithLost(99, 100, 2)
	fmt.Println(ok)
	// Output:
	// 100 99 100 true
	// false
}

// Replications that share their random numbers are compared pair by pair.
func ExamplePairedT() {
	before := []float64{20.1, 24.8, 22.3, 27.0, 21.9} // ms, one per replication
	after := []float64{18.0, 22.9, 20.1, 25.2, 19.7}
	p := measure.PairedT(after, before, 0.95)
	fmt.Printf("%.2f ± %.2f ms: %s\n", p.Diff.Mean, p.Diff.Half, measure.Verdict(p.Diff, true))
	u := measure.Welch(after, before, 0.95)
	fmt.Printf("as if independent ± %.2f ms: %s\n", u.Diff.Half, measure.Verdict(u.Diff, true))
	// Output:
	// -2.04 ± 0.23 ms: better
	// as if independent ± 4.05 ms: no evidence
}

// Losses may be reported out of order; a period is a run of them in the order
// of sending.
func ExampleLossRuns() {
	l := measure.LossRuns{Delta: 2}
	for _, seq := range []uint32{9, 2, 10, 5, 7} {
		l.Lost(seq)
	}
	r := l.Report()
	rate, _ := r.NoticeableRate()
	fmt.Println(r.Lost, "lost in", r.Periods, "periods, longest", r.Longest, "noticeable", rate)
	// Output: 5 lost in 4 periods, longest 2 noticeable 0.6
}

// A level holds from one Set to the next.
func ExampleTimeAverage() {
	var a measure.TimeAverage
	a.Set(0, 1500)
	a.Set(3*des.Second, 0)
	fmt.Println(a.Mean(4*des.Second), a.Peak())
	// Output: 1125 1500
}
