package study_test

import (
	"fmt"
	"math"
	"testing"

	"ferrule/des/theory"
	"ferrule/scenarios/result"
)

const (
	gigabit = 1e9
	perByte = 8 / gigabit // seconds for one byte on a line of 1 Gbit/s
)

// waitAndSojourn holds the mean wait of the port and the percentiles of the
// delay of class s against a queue; spread is that of the mean and of p50,
// p95, p99 and p99.9 per million packets.
func waitAndSojourn(t *testing.T, runs []*result.Run, wait float64, quantile func(p float64) float64, spread [5]float64) {
	t.Helper()
	n := count(runs, func(r *result.Run) int64 { return class(t, r, "s").DeliveredPackets })
	within(t, "mean wait", mean(t, runs, func(r *result.Run) *float64 { return port(t, r, "ab", "a").MeanWaitS }), wait, perMillion(spread[0], n))
	for i, q := range []struct {
		name string
		p    float64
		of   func(d *result.Distribution) *float64
	}{
		{"p50", 0.5, func(d *result.Distribution) *float64 { return d.P50 }},
		{"p95", 0.95, func(d *result.Distribution) *float64 { return d.P95 }},
		{"p99", 0.99, func(d *result.Distribution) *float64 { return d.P99 }},
		{"p99.9", 0.999, func(d *result.Distribution) *float64 { return d.P999 }},
	} {
		if quantile(q.p) == quantile(0) { // at the edge of those that do not wait it may fall on either side
			continue
		}
		got := mean(t, runs, func(r *result.Run) *float64 { return q.of(&class(t, r, "s").DelayS) }) - light100
		within(t, q.name, got, quantile(q.p), perMillion(spread[i+1], n)+bucket)
	}
}

// M/M/1: L. Kleinrock, Queueing Systems vol. 1 (1975), ch. 3 and 5. Sizes are
// whole bytes, so the mean wait is that of M/G/1 with the moments of the
// rounded law (ibid., sec. 5.6); the percentiles of rounded sizes differ from
// those of exponential ones by less than one part in a million. The printed
// mean of a 10 Mbit/s link at load 0.8 is 3.2 ms (computed from the formula),
// here a hundred times faster.
func TestOracleMM1(t *testing.T) {
	t.Parallel()
	m1, m2, m3 := theory.RoundedExponential(1000)
	for _, c := range []struct {
		rho    float64
		wait   float64 // printed, in mean services
		spread [5]float64
	}{
		{0.5, 1, [5]float64{0.018, 0.012, 0.018, 0.03, 0.055}},
		{0.8, 4, [5]float64{0.035, 0.030, 0.037, 0.065, 0.12}},
	} {
		t.Run(fmt.Sprint(c.rho), func(t *testing.T) {
			t.Parallel()
			sc := parse(t, link{length: fmt.Sprintf("%.1fs", 0.5+8/c.rho), warmUp: "500ms", rate: "1Gbps",
				streams: []stream{{"s", "poisson", "{ exponential: { mean: 1000B } }", fmt.Sprintf("%.0fMbps", 1000*c.rho)}}}.text())
			runs := runSeeds(t, sc, "", 4)
			lambda := c.rho / (m1 * perByte)
			s1, s2, s3 := theory.Scaled(perByte, m1, m2, m3)
			queue := theory.MG1{Lambda: lambda, S1: s1, S2: s2, S3: s3}
			exponential := theory.MM1{Lambda: lambda, Mu: 1 / s1}
			if math.Abs(queue.MeanWait()/exponential.MeanWait()-1) > 1e-5 || math.Abs(exponential.MeanWait()/s1/c.wait-1) > 1e-9 {
				t.Fatal("the theories do not agree")
			}
			waitAndSojourn(t, runs, queue.MeanWait(), exponential.SojournQuantile, c.spread)
		})
	}
}

// M/D/1: A. K. Erlang, "The theory of probabilities and telephone
// conversations" (1909); percentiles from the positive series of COST 242,
// Broadband Network Teletraffic (1996). The printed values of the wait in
// services are computed from it.
func TestOracleMD1(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		rho     float64
		mean    float64
		printed [3]float64 // p95, p99, p99.9
		spread  [5]float64
	}{
		{0.5, 0.5, [3]float64{2.0506384, 3.3362560, 5.1683850}, [5]float64{0.012, 0.012, 0.013, 0.018, 0.033}},
		{0.9, 4.5, [3]float64{14.1286738, 21.8982373, 33.0139697}, [5]float64{0.054, 0.055, 0.065, 0.10, 0.25}},
	} {
		t.Run(fmt.Sprint(c.rho), func(t *testing.T) {
			t.Parallel()
			sc := parse(t, link{length: fmt.Sprintf("%.1fs", 0.5+8/c.rho), warmUp: "500ms", rate: "1Gbps",
				streams: []stream{{"s", "poisson", "1000B", fmt.Sprintf("%.0fMbps", 1000*c.rho)}}}.text())
			runs := runSeeds(t, sc, "", 4)
			d := 1000 * perByte
			q := theory.MD1{Lambda: c.rho / d, D: d}
			within(t, "theory, mean", q.MeanWait()/d, c.mean, 1e-9)
			for i, p := range []float64{0.95, 0.99, 0.999} {
				within(t, "theory", q.WaitQuantile(p)/d, c.printed[i], 1e-6)
			}
			waitAndSojourn(t, runs, q.MeanWait(), func(p float64) float64 { return q.WaitQuantile(p) + d }, c.spread)
		})
	}
}

// M/G/1 with packets of 40, 576 and 1500 B in the proportion 7 : 4 : 1 at load
// 0.8. Mean: the formula of Pollaczek and Khinchine, Kleinrock (1975), sec.
// 5.6, printed 1405.7998 us at 10 Mbit/s. Percentiles of the wait, at 10
// Mbit/s 871 +-1, 4788 +-5, 7532 +-8 and 11458 +-12 us, lie between a lower
// and an upper bound by lattice convolution of the same formula's series. The
// link is a hundred times faster here. One stream per size makes the wait
// visible: the small packets see what all see, and their own service is known.
func TestOracleMG1(t *testing.T) {
	t.Parallel()
	bps := func(share float64) string { return fmt.Sprintf("%.0fbps", 0.8*gigabit*share/4084) }
	sc := parse(t, link{length: "4s", warmUp: "300ms", rate: "1Gbps", streams: []stream{
		{"s", "poisson", "40B", bps(7 * 40)}, {"m", "poisson", "576B", bps(4 * 576)}, {"l", "poisson", "1500B", bps(1500)},
	}}.text())
	one := parse(t, link{length: "4s", warmUp: "300ms", rate: "1Gbps", streams: []stream{
		{"s", "poisson", "{ mix: { sizes: [40B, 576B, 1500B], weights: [7, 4, 1] } }", "800Mbps"},
	}}.text())
	s1, s2, s3 := theory.Scaled(perByte, 340.0+1.0/3, (7*40*40+4*576*576+1500*1500)/12.0, (7*40*40*40+4*576*576*576+1500*1500*1500)/12.0)
	q := theory.MG1{Lambda: 0.8 / s1, S1: s1, S2: s2, S3: s3}
	within(t, "theory, mean", q.MeanWait(), 1405.7998e-8, 1e-7)
	for name, s := range map[string][]*result.Run{"three streams": runSeeds(t, sc, "", 10), "one stream": runSeeds(t, one, "", 4)} {
		n := count(s, func(r *result.Run) int64 { return r.Audit.DeliveredPackets })
		within(t, name+", mean wait", mean(t, s, func(r *result.Run) *float64 { return port(t, r, "ab", "a").MeanWaitS }), q.MeanWait(), perMillion(0.044, n))
		if name == "one stream" {
			continue
		}
		for _, x := range []struct {
			name         string
			of           func(d *result.Distribution) *float64
			want, spread float64
			bracket      float64 // of want
		}{
			{"p50", func(d *result.Distribution) *float64 { return d.P50 }, 8.71e-6, 0.04, 0.01e-6},
			{"p95", func(d *result.Distribution) *float64 { return d.P95 }, 47.88e-6, 0.055, 0.05e-6},
			{"p99", func(d *result.Distribution) *float64 { return d.P99 }, 75.32e-6, 0.07, 0.08e-6},
			{"p99.9", func(d *result.Distribution) *float64 { return d.P999 }, 114.58e-6, 0.12, 0.12e-6},
		} {
			got := mean(t, s, func(r *result.Run) *float64 { return x.of(&class(t, r, "s").DelayS) }) - light100 - 40*perByte
			within(t, "wait "+x.name, got, x.want, perMillion(x.spread, n)+bucket+x.bracket/x.want)
		}
	}
}

// Finite buffers. M/M/1/K: Kleinrock (1975), ch. 3. M/D/1/K: the embedded
// chain; O. Brun, J.-M. Garcia, "Analytical solution of finite capacity M/D/1
// queues", J. Appl. Prob. 37 (2000). K counts the packet in service, a buffer
// those that wait. Delays are those of accepted packets in mean services.
func TestOracleFiniteBuffer(t *testing.T) {
	t.Parallel()
	m1, _, _ := theory.RoundedExponential(1000)
	for _, c := range []struct {
		rho                float64
		k                  int
		lossM, delayM      float64 // printed
		lossD, delayD      float64
		spreadLM, spreadDM float64
		spreadLD, spreadDD float64
	}{
		{0.8, 5, 0.088819499, 2.563065, 0.035290396, 2.209667, 0.02, 0.008, 0.023, 0.004},
		{0.9, 10, 0.050813731, 4.646601, 0.016631748, 3.922436, 0.042, 0.013, 0.07, 0.011},
		{1.2, 10, 0.192586495, 6.926138, 0.170910769, 7.630497, 0.016, 0.008, 0.014, 0.006},
	} {
		check := func(t *testing.T, packet string, s1, loss, delay, printedLoss, printedDelay, spreadLoss, spreadDelay float64) {
			t.Parallel()
			sc := parse(t, link{length: "8.5s", warmUp: "200ms", rate: "1Gbps", buffer: fmt.Sprintf("%d packets", c.k-1),
				streams: []stream{{"s", "poisson", packet, fmt.Sprintf("%.0fMbps", 1000*c.rho)}}}.text())
			runs := runSeeds(t, sc, "", 2)
			n := count(runs, func(r *result.Run) int64 { return class(t, r, "s").OfferedPackets })
			within(t, "theory, loss", loss, printedLoss, 1e-6)
			within(t, "theory, delay", delay, printedDelay, 1e-6)
			lost := count(runs, func(r *result.Run) int64 { return class(t, r, "s").LostPackets.Of("queue") })
			within(t, "loss", lost/n, loss, perMillion(spreadLoss, n))
			within(t, "loss as told", mean(t, runs, func(r *result.Run) *float64 { return class(t, r, "s").LossRatio }), lost/n, 1e-3)
			within(t, "mean delay", mean(t, runs, func(r *result.Run) *float64 { return class(t, r, "s").DelayS.Mean })-light100,
				delay*s1, perMillion(spreadDelay, n))
		}
		t.Run(fmt.Sprintf("M/M/1/%d at %v", c.k, c.rho), func(t *testing.T) {
			q := theory.MM1K{Lambda: c.rho, Mu: 1, K: c.k}
			check(t, "{ exponential: { mean: 1000B } }", m1*perByte, q.Loss(), q.MeanSojourn(), c.lossM, c.delayM, c.spreadLM, c.spreadDM)
		})
		t.Run(fmt.Sprintf("M/D/1/%d at %v", c.k, c.rho), func(t *testing.T) {
			q := theory.MD1K{Lambda: c.rho, D: 1, K: c.k}
			check(t, "1000B", 1000*perByte, q.Loss(), q.MeanSojourn(), c.lossD, c.delayD, c.spreadLD, c.spreadDD)
		})
	}
}

// Three classes, the line never broken off: A. Cobham, "Priority assignment in
// waiting line problems", J. Oper. Res. Soc. America 2 (1954). The sum of load
// times wait is that of first come first served: Kleinrock vol. 2 (1976), sec.
// 3.4. A line that breaks off for a higher class would show the sojourns of D.
// Bertsekas, R. Gallager, Data Networks 2e (1992), sec. 3.5.3, and must not.
func TestOraclePriority(t *testing.T) {
	t.Parallel()
	const exponential = "{ exponential: { mean: 1000B } }"
	for _, c := range []struct {
		name    string
		scale   float64 // how much faster the line is than the printed one
		streams [3]stream
		size    [3]float64 // mean bytes; exponential if exp
		exp     [3]bool
		load    [3]float64
		waits   [3]float64 // printed, in seconds
		work    float64    // printed sum of load times wait
		spread  [3]float64
	}{
		{"equal exponential", 1 / (1000 * perByte),
			[3]stream{{"c1", "poisson", exponential, "250Mbps"}, {"c2", "poisson", exponential, "250Mbps"}, {"c3", "poisson", exponential, "250Mbps"}},
			[3]float64{1000, 1000, 1000}, [3]bool{true, true, true}, [3]float64{0.25, 0.25, 0.25}, [3]float64{1, 2, 6}, 2.25, [3]float64{0.012, 0.021, 0.036}},
		{"voice, video, data", 100,
			[3]stream{{"c1", "poisson", "200B", "200Mbps"}, {"c2", "poisson", exponential, "300Mbps"}, {"c3", "poisson", "1500B", "300Mbps"}},
			[3]float64{200, 1000, 1500}, [3]bool{false, true, false}, [3]float64{0.2, 0.3, 0.3}, [3]float64{0.545e-3, 1.09e-3, 4.36e-3}, 1.744e-3, [3]float64{0.012, 0.025, 0.052}},
		{"constant sizes", 10,
			[3]stream{{"c1", "poisson", "200B", "80Mbps"}, {"c2", "poisson", "1000B", "320Mbps"}, {"c3", "poisson", "1500B", "300Mbps"}},
			[3]float64{200, 1000, 1500}, [3]bool{}, [3]float64{0.08, 0.32, 0.30}, [3]float64{34.173913e-6, 56.956522e-6, 174.666667e-6}, 7.336e-5, [3]float64{0.01, 0.013, 0.028}},
	} {
		t.Run(c.name, func(t *testing.T) {
			t.Parallel()
			sc := parse(t, link{length: "10s", warmUp: "500ms", rate: "1Gbps", queue: "strict", streams: c.streams[:]}.text())
			runs := runSeeds(t, sc, "", 2)
			n := count(runs, func(r *result.Run) int64 { return r.Audit.DeliveredPackets })
			var classes []theory.PriorityClass
			for i := range c.streams {
				m1, m2 := c.size[i], c.size[i]*c.size[i]
				if c.exp[i] {
					m1, m2, _ = theory.RoundedExponential(c.size[i])
				}
				classes = append(classes, theory.PriorityClass{Lambda: c.load[i] / (m1 * perByte), S1: m1 * perByte, S2: m2 * perByte * perByte})
			}
			want, broken := theory.PriorityWaits(classes), theory.PreemptiveSojourns(classes)
			work := 0.0
			for i := range c.streams {
				wait := meanWait(t, runs, c.streams[i].name)
				within(t, "theory, "+c.streams[i].name, want[i]*c.scale, c.waits[i], 1e-6)
				within(t, "mean wait of "+c.streams[i].name, wait, want[i], perMillion(c.spread[i], n))
				work += c.load[i] * wait
				if sojourn := wait + classes[i].S1; math.Abs(sojourn/broken[i]-1) < 0.05 {
					t.Errorf("%s: sojourn %.4g s, that of a line which breaks off is %.4g s", c.streams[i].name, sojourn, broken[i])
				}
			}
			within(t, "theory, work", theory.ConservedWork(classes)*c.scale, c.work, 1e-6)
			within(t, "conserved work", work, theory.ConservedWork(classes), perMillion(0.03, n))
		})
	}
}

// meanWait is the mean delay of a class less light and service, which is known
// from the bytes that were delivered.
func meanWait(t *testing.T, runs []*result.Run, name string) float64 {
	t.Helper()
	return mean(t, runs, func(r *result.Run) *float64 {
		c := class(t, r, name)
		if len(r.Periods) != 1 || c.ThroughputBps == nil || c.DelayS.Mean == nil {
			return nil
		}
		service := *c.ThroughputBps * (r.Periods[0].ToS - r.Periods[0].FromS) / float64(c.DeliveredPackets) / gigabit
		wait := *c.DelayS.Mean - light100 - service
		return &wait
	})
}
