package study

import (
	"math"
	"strings"
	"testing"

	"ferrule/scenarios"
	"ferrule/scenarios/result"
)

// opinionOf is what a link of 10 Mbit/s says of its wait.
func opinionOf(t *testing.T, classes, traffic, aggregates string) *result.Port {
	t.Helper()
	text := strings.Replace(coverHead, "%v", "62", 1) + "classes: [ " + classes + " ]\ntraffic: [ " + traffic + " ]\naggregates: [ " + aggregates + " ]\n"
	sc, err := scenarios.Load("opinion", []byte(text), nil, nil)
	if err != nil {
		t.Fatal(err)
	}
	r, err := Run(t.Context(), sc, Options{Cores: 1})
	if err != nil {
		t.Fatal(err)
	}
	for i := range r.Ports {
		if r.Ports[i].From == "here" {
			return &r.Ports[i]
		}
	}
	t.Fatal("no port")
	return nil
}

// Kleinrock (1975): M/M/1 at load 0.8 waits four mean services of 0.8 ms, its
// gaps and services have a squared variation of 1, and Kingman's ceiling is
// λ(var gap + var service)/(2(1-ρ)) = (1/ρ + ρ)/(2(1-ρ)) = 5.125 services.
func TestTheoryOfPoisson(t *testing.T) {
	p := opinionOf(t, "{ name: all, queue: fifo, buffer: 60s, traffic: random }",
		"{ name: random, model: poisson, packet: { exponential: { mean: 1000B } } }", "{ name: a, from: here, to: there, class: all, load: 8Mbps }")
	x := p.Theory
	for _, c := range []struct {
		what      string
		got, want float64
	}{{"gap", x.MeanGapS, 1e-3}, {"gap variation", x.GapCoV2, 1}, {"service", x.MeanServiceS, 0.8e-3}, {"service variation", x.ServiceCoV2, 1},
		{"wait", x.WaitS, 3.2e-3}, {"ceiling", x.CeilingS, 4.1e-3}} {
		if math.Abs(c.got/c.want-1) > 0.06 {
			t.Errorf("%s: %v, want about %v", c.what, c.got, c.want)
		}
	}
	if x.Parts || *p.MeanWaitS > x.CeilingS {
		t.Errorf("measured %v, %+v: theory and measurement part", *p.MeanWaitS, x)
	}
}

// A source that sends at a pace never waits for itself, and files sent in
// trains wait longer than theory says; both are told and explained.
func TestTheoryParts(t *testing.T) {
	even := opinionOf(t, "{ name: all, queue: fifo, buffer: 60s, traffic: pace }",
		"{ name: pace, model: constant, packet: 1000B }", "{ name: a, from: here, to: there, class: all, load: 8Mbps }")
	if x := even.Theory; !x.Parts || x.GapCoV2 > 0.01 || !strings.Contains(x.Because, "evener") || *even.MeanWaitS > 1e-6 {
		t.Errorf("at a pace: %v, %+v", *even.MeanWaitS, x)
	}
	trains := opinionOf(t, "{ name: all, queue: fifo, buffer: 60s, traffic: pages }",
		"{ name: pages, model: files, size: { exponential: { mean: 80kB } }, pace: 20Mbps }", "{ name: a, from: here, to: there, class: all, load: 5Mbps }")
	if x := trains.Theory; !x.Parts || *trains.MeanWaitS < 2*x.WaitS || x.Because == "" {
		t.Errorf("in trains: %v, %+v", *trains.MeanWaitS, x)
	}
}
