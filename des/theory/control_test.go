package theory

import (
	"math"
	"testing"
)

func TestSetup(t *testing.T) {
	oneWay, node := []float64{1, 2, 4}, []float64{10, 50, 20}
	exact(t, "parallel", SetupParallel(5, oneWay, node), 5+4+50)
	exact(t, "sequential", SetupSequential(5, oneWay, node), 5+12+54+28)
	// 1000 km at group index 1.4682, five nodes, 10 ms a message and 10 ms a
	// cross-connect; RFC 3209 and RFC 3473, computed.
	path := 1000 * 1.4682 / 299792.458 * 1e3
	digits(t, "distributed", SetupDistributed(path, 5, 10, 10), "159.795")
	// Deterministic single server, computed: 30 circuits of 0.1 s, 166 of 0.05 s.
	exact(t, "last of 30", BatchDone(0, 0.1, 30), 3)
	exact(t, "mean of 30", BatchMean(0, 0.1, 30), 1.55)
	exact(t, "last of 166", BatchDone(2, 0.05, 166), 2+8.3)
	exact(t, "mean of 166", BatchMean(2, 0.05, 166), 2+4.175)
	mean := 0.0
	for k := 1; k <= 30; k++ {
		mean += BatchDone(7, 0.1, k) / 30
	}
	exact(t, "mean as summed", BatchMean(7, 0.1, 30), mean)
}

// A stream of one packet per tick crosses a cut: what is on the way to the
// break, and what is sent until the news is back, is lost; packet by packet.
func TestCutLoss(t *testing.T) {
	const toBreak, detection, reaction, cut = 600, 3000, 1000, 5000
	lost := 0
	for sent := range 20_000 {
		known := cut + toBreak + detection + reaction // when the sender acts
		if sent+toBreak >= cut && sent < known {
			lost++
		}
	}
	exact(t, "cut", CutLoss(1, toBreak, detection, reaction), float64(lost))
	// A pair: the receiver selects the working way until it has known of the
	// break for so long. A packet counts if its selected copy arrives.
	const working, spare, afterBreak, switching = 2000, 2700, 1400, 500
	lost = 0
	for sent := range 20_000 {
		at := cut + afterBreak + detection + switching // when the receiver selects the spare
		first := sent+working-afterBreak < cut && sent+working < at
		second := sent+spare >= at
		if !first && !second {
			lost++
		}
	}
	exact(t, "pair", ProtectedGap(working, spare, detection, switching), float64(lost))
	// 1.2 Gb/s of 1000 B packets for 50 ms; common practice, no source.
	exact(t, "outage", OutageLoss(1.2e9/8000, 0.050), 7500)
}

func TestAvailability(t *testing.T) {
	// Optical-transport course chapter on availability: hours a year.
	for a, want := range map[float64]float64{0.99: 87.6, 0.999: 8.76, 0.9995: 4.38, 0.9999: 52.56 / 60, 0.99999: 5.256 / 60} {
		if got := Downtime(a, HoursPerYear); math.Abs(got/want-1) > 1e-9 {
			t.Errorf("downtime at %v: %v h, want %v", a, got, want)
		}
	}
	// All below computed from the formulas, unless said otherwise.
	digits(t, "50000/4", Availability(50000, 4), "0.99992000640")
	digits(t, "100000/6", Availability(100000, 6), "0.99994000360")
	digits(t, "8760/12", Availability(8760, 12), "0.99863201094")
	digits(t, "4000/4", Availability(4000, 4), "0.99900099900")
	digits(t, "series", Series(0.9999, 0.9995, 0.999), "0.99840064995")
	digits(t, "series, min a year", 60*Downtime(Series(0.9999, 0.9995, 0.999), HoursPerYear), "840.6184")
	exact(t, "parallel", Parallel(0.99, 0.99), 0.9999)
	exact(t, "parallel", Parallel(0.999, 0.999), 0.999999)
	exact(t, "three parallel", Parallel(0.99, 0.99, 0.99), 0.999999)
	path := Series(0.9999, 0.999, 0.9999)
	digits(t, "path", path, "0.99880020999")
	digits(t, "pair", Parallel(path, path), "0.99999856050")
	digits(t, "pair with ends", Series(0.99999, Parallel(path, path), 0.99999), "0.99997856063")
	exact(t, "2 of 3", KOutOfN(2, 3, 0.99), 0.999702)
	exact(t, "3 of 4", KOutOfN(3, 4, 0.999), 0.999994007997)
	// The bridge, by its middle element: a standard example, from memory.
	for p, want := range map[float64]float64{0.9: 0.97848, 0.99: 0.9997980498} {
		up := p * Series(Parallel(p, p), Parallel(p, p))
		down := (1 - p) * Parallel(Series(p, p), Series(p, p))
		exact(t, "bridge", up+down, want)
	}
	// To and Neusy (1994), from memory: 4.39 cuts a year and 1000 sheath miles,
	// 12 h to repair.
	perKm := 4.39 / 1000 / 1.609344
	for km, want := range map[float64][4]string{
		100: {"0.27278", "32113.56", "3.735343e-4", "196.33"}, 500: {"1.36391", "6422.71", "1.864885e-3", "980.18"},
		1000: {"2.72782", "3211.36", "3.722828e-3", "1956.72"},
	} {
		mttf := FibreMTTF(km, perKm)
		digits(t, "cuts a year", HoursPerYear/mttf, want[0])
		digits(t, "mttf", mttf, want[1])
		a := Availability(mttf, 12)
		digits(t, "unavailability", 1-a, want[2])
		digits(t, "min a year", 60*Downtime(a, HoursPerYear), want[3])
		exact(t, "failures and their time", Failures(mttf, 12)*12, Downtime(a, HoursPerYear))
	}
	pair := Parallel(Availability(FibreMTTF(500, perKm), 12), Availability(FibreMTTF(700, perKm), 12))
	digits(t, "500 and 700 km, s a year", 3600*Downtime(pair, HoursPerYear), "153.432")
	unit := Availability(1000, 10)
	digits(t, "two units", Parallel(unit, unit), "0.99990197040")
	digits(t, "sd of unavailability", UnavailabilityStdDev(1000, 10, 1e6), "0.000440588")
	digits(t, "2000 FIT", Availability(FITMTTF(2000), 4), "0.999992000064")
}

func TestDomains(t *testing.T) {
	panics(t, map[string]func(){
		"M/M/1 rate":      func() { MM1{0, 1}.MeanWait() },
		"M/M/1 NaN":       func() { MM1{math.NaN(), 1}.MeanWait() },
		"M/M/1 quantile":  func() { MM1{1, 2}.WaitQuantile(1) },
		"M/M/1 number":    func() { MM1{1, 2}.NumberCCDF(-1) },
		"M/M/1 change":    func() { MM1{2, 1}.MeanChange() },
		"M/M/1/K":         func() { MM1K{1, 1, 0}.Loss() },
		"M/D/1":           func() { MD1{1, -1}.WaitCCDF(1) },
		"M/D/1 tail":      func() { MD1{1, 1}.Tail() },
		"M/D/1/K":         func() { MD1K{1, 1, 0}.Loss() },
		"M/D/1/K load":    func() { MD1K{501, 1, 3}.Loss() },
		"M/G/1":           func() { MG1{1, 0, 1, 1}.MeanWait() },
		"mix":             func() { MixMoments([]float64{1}, nil) },
		"rounded":         func() { RoundedExponential(0) },
		"priority":        func() { PriorityWaits([]PriorityClass{{-1, 1, 1}}) },
		"periodic":        func() { Periodic{0, 1, 1}.MeanWait() },
		"periodic load":   func() { Periodic{3, 2, 1}.WorkCCDF(0) },
		"tandem":          func() { ErlangQuantile(0, 1, 0.5) },
		"two nodes":       func() { TwoNodeCCDF(0, 1, 1) },
		"bound":           func() { KingmanBound(1, -1, 0.5, 1) },
		"departures":      func() { DepartureSCV(1.1, 1, 1) },
		"stages":          func() { ErlangM1(0, 1, 2) },
		"Erlang B":        func() { ErlangB(-1, 1) },
		"Erlang B load":   func() { ErlangBLoad(1, 1) },
		"Erlang C":        func() { MMN{0, 1, 1}.MeanWait() },
		"Engset":          func() { Engset{0, 1, 1}.Carried() },
		"Kaufman-Roberts": func() { KaufmanRoberts(3, []RateClass{{1, 0, 0}}) },
		"set-up":          func() { SetupParallel(1, []float64{1}, nil) },
		"batch":           func() { BatchDone(0, 1, 0) },
		"availability":    func() { Series(1.1) },
		"k out of n":      func() { KOutOfN(3, 2, 0.5) },
	})
}
