package library_test

import (
	"bytes"
	"context"
	"flag"
	"fmt"
	"io/fs"
	"os"
	"testing"

	"ferrule/nodes"
	"ferrule/scenarios"
	"ferrule/scenarios/library"
	"ferrule/scenarios/study"
)

var write = flag.Bool("write", false, "write the matrix of nineteen-towns anew")

// A town of nineteen-towns, as its matrix sees it.
type town struct {
	name    string
	people  int64 // thousands, invented
	sources int64 // how much is published there, in the same unit
}

// towns are in the order of the scenario. Kelpin and Rendel are the two large
// ones; most video and web comes from there.
var towns = []town{
	{"amarro", 240, 180}, {"bextin", 310, 240}, {"corvane", 520, 420}, {"dellisk", 280, 210},
	{"eskray", 190, 130}, {"fornel", 430, 360}, {"gantrel", 610, 520}, {"hollim", 480, 400},
	{"istrel", 350, 260}, {"jorvane", 260, 190}, {"kelpin", 1480, 2900}, {"lorrim", 740, 900},
	{"maskel", 390, 300}, {"nolvar", 220, 150}, {"ostrin", 410, 330}, {"pellan", 560, 470},
	{"quorrin", 330, 250}, {"rendel", 1120, 2200}, {"sorvik", 270, 200},
}

// shares are what all of the country sends in each class together.
var shares = []struct {
	class     string
	kbps      int64
	published bool // it comes from where things are published; else people talk to people
	least     int64
}{
	{"signalling", 33_000, false, 16},
	{"voice", 460_000, false, 80},
	{"video", 2_640_000, true, 1000},
	{"business", 1_870_000, false, 200},
	{"web", 4_070_000, true, 500},
}

// matrix makes demand.csv of nineteen-towns: between two towns goes a share of
// the whole that is proportional to both (a gravity model without distance),
// rounded down to 1 kbit/s, and never less than one flow of the class needs.
func matrix() []byte {
	var b bytes.Buffer
	fmt.Fprintln(&b, "from,to,class,rate")
	for _, s := range shares {
		weight := func(from, to *town) int64 {
			if s.published {
				return from.sources * to.people
			}
			return from.people * to.people
		}
		var sum int64
		pairs(func(from, to *town) { sum += weight(from, to) })
		pairs(func(from, to *town) {
			fmt.Fprintf(&b, "%s,%s,%s,%dkbps\n", from.name, to.name, s.class, max(s.least, s.kbps*weight(from, to)/sum))
		})
	}
	return b.Bytes()
}

// pairs calls f for each ordered pair of towns.
func pairs(f func(from, to *town)) {
	for i := range towns {
		for j := range towns {
			if i != j {
				f(&towns[i], &towns[j])
			}
		}
	}
}

// The matrix that is embedded is the one made here. To change it, change the
// tables above and run the test with -write.
func TestNationalMatrix(t *testing.T) {
	want := matrix()
	if *write {
		if err := os.WriteFile("files/nineteen-towns/demand.csv", want, 0o644); err != nil {
			t.Fatal(err)
		}
		return // what is embedded is still the old one
	}
	_, beside, err := library.Open("nineteen-towns")
	if err != nil {
		t.Fatal(err)
	}
	got, err := fs.ReadFile(beside, "demand.csv")
	if err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal(got, want) {
		t.Error("files/nineteen-towns/demand.csv is not what matrix makes; run this test with -write")
	}
}

// The country is of the size promised, no cut of one fibre and no loss of one
// site takes it apart, and every pair of towns is in the matrix in every class.
func TestNationalNetwork(t *testing.T) {
	sc := load(t, "nineteen-towns")
	if len(sc.Sites) != 19 || len(sc.Fibres) != 30 || len(sc.Aggregates) != 19*18*5 {
		t.Errorf("%d sites, %d fibres, %d aggregates; want 19, 30, 1710", len(sc.Sites), len(sc.Fibres), len(sc.Aggregates))
	}
	for i := range sc.Sites {
		if sc.Sites[i].Name != towns[i].name {
			t.Errorf("site %d is %s, the table of the matrix has %s", i, sc.Sites[i].Name, towns[i].name)
		}
	}
	for i := range sc.Fibres {
		f := &sc.Fibres[i]
		if f.Length < 50*nodes.Kilometre || f.Length > 600*nodes.Kilometre {
			t.Errorf("%s has %s, want 50 to 600 km", f.Name, scenarios.FormatLength(f.Length))
		}
		if n := reached(sc, nodes.None, nodes.FibreID(i)); n != 19 {
			t.Errorf("without %s %d towns reach each other, want 19", f.Name, n)
		}
	}
	for i := range sc.Sites {
		if n := reached(sc, nodes.SiteID(i), nodes.None); n != 18 {
			t.Errorf("without %s %d towns reach each other, want 18", sc.Sites[i].Name, n)
		}
	}
}

// reached counts the sites that a first one reaches, itself included, without
// one site and one fibre.
func reached(sc *scenarios.Scenario, site nodes.SiteID, fibre nodes.FibreID) int {
	first := nodes.SiteID(0)
	if site == first {
		first = 1
	}
	seen := map[nodes.SiteID]bool{first: true}
	for grew := true; grew; {
		grew = false
		for i := range sc.Fibres {
			f := &sc.Fibres[i]
			if nodes.FibreID(i) != fibre && f.A != site && f.B != site && seen[f.A] != seen[f.B] {
				seen[f.A], seen[f.B], grew = true, true, true
			}
		}
	}
	return len(seen)
}

// The busiest circuit of the country carries more than half of its payload and
// less than two thirds; the express carries all between its ends; no two ways
// are equally long, so nothing overtakes.
func TestNationalLoads(t *testing.T) {
	sc := load(t, "nineteen-towns")
	c, err := study.Check(context.Background(), sc, study.Options{})
	if err != nil {
		t.Fatal(err)
	}
	busiest := 0.0
	for _, l := range c.Links {
		busiest = max(busiest, *l.Utilisation)
	}
	if busiest < 0.55 || busiest > 0.66 {
		t.Errorf("the busiest circuit is used to %.3f, want 0.55 to 0.66", busiest)
	}
	sc = load(t, "nineteen-towns", short["nineteen-towns"]...)
	plan, err := sc.Plan("express-east")
	if err != nil || len(plan.Moves) != 10 {
		t.Fatalf("the express carries %d ways (%v), want 5 classes both ways", len(plan.Moves), err)
	}
	r := run(t, sc, "express-east", 1)
	for _, x := range r.Circuits {
		if x.Name == "express" && !(x.Utilisation != nil && *x.Utilisation > 0.1) {
			t.Errorf("the express carries next to nothing: %v", x.Utilisation)
		}
	}
	for _, c := range r.Classes {
		for _, p := range c.Periods {
			if p.ReorderedRatio == nil || *p.ReorderedRatio > 0 {
				t.Errorf("%s out of order: %v", c.Name, p.ReorderedRatio)
			}
		}
	}
}
