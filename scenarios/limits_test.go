package scenarios

import (
	"bytes"
	"fmt"
	"os"
	"runtime"
	"strings"
	"testing"
	"testing/fstest"
	"time"
)

// No input costs much: size, depth and aliases are capped.
func TestLimits(t *testing.T) {
	bomb := "a0: &a0 [x, x, x, x, x, x, x, x, x, x]\n"
	for i := 1; i < 10; i++ {
		bomb += fmt.Sprintf("a%d: &a%d [%s]\n", i, i, strings.TrimSuffix(strings.Repeat(fmt.Sprintf("*a%d, ", i-1), 10), ", "))
	}
	deep := ""
	for i := range 300 {
		deep += strings.Repeat(" ", i) + "a:\n"
	}
	for _, c := range []struct{ what, text, want string }{
		{"size", strings.Repeat("#", maxFile+1), "s.yaml: the file has 8388609 bytes; a scenario has at most 8 MB; put demand into a matrix"},
		{"values", "sites: [" + strings.Repeat("a,", maxMarks) + "]", "s.yaml: the file has too many or too deeply nested values; write fewer; put demand into a matrix"},
		{"brackets", strings.Repeat("[", 200000), "s.yaml: the file has too many or too deeply nested values; write fewer; put demand into a matrix"},
		{"lists in lists", strings.Repeat("- ", 5000), "s.yaml: the file has too many or too deeply nested values; write fewer; put demand into a matrix"},
		{"depth", "sites: " + strings.Repeat("[", 30) + strings.Repeat("]", 30), "s.yaml:1:32: more than 24 levels of nesting; a scenario needs fewer"},
		{"indented depth", deep, "s.yaml:25:25: more than 24 levels of nesting; a scenario needs fewer"},
		{"much indentation", "a:\n" + strings.Repeat(" ", 1001) + "b: 1", "s.yaml: the file has too many or too deeply nested values; write fewer; put demand into a matrix"},
		{"alias bomb", bomb, "aliases make more than 524288 values; write fewer aliases"},
		{"keys", strings.Repeat("k", 10) + ": 1\n" + many("key%d: 1\n", 200000), "199001 more faults are not listed; mend these first"},
		{"keys of a law", "defaults: { router: { forwarding: { " + many("k%d: 1,", 200000) + " } } }", "s.yaml:1:35: defaults.router.forwarding: 200000 keys are too many; write a law, such as { exponential: { mean: 1s } }"},
		{"things", "sites: [" + strings.Repeat("{},", 200000) + "]", "s.yaml:1:8: sites: 200000 values are too many; write 40000 at most"},
		{"words", "fibres: [ { risk-groups: [" + many("g%d,", 200000) + "] } ]", "s.yaml:1:26: fibres[0].risk-groups: 200000 values are too many; write 1000 at most"},
		{"plans", "plans: [" + many("{ name: p%[1]d, on: p%[1]d },", 20000) + "]", "plans: 20000 plans with 0 circuits are too many; write fewer plans"},
		{"names", "sites: [" + many("{ name: p%d },", 20000) + "]\naggregates: [" + many("{ name: a%d, between: [x, y] },", 20000) + "]", "more faults are not listed; mend these first"},
		{"alias of itself", "a: &a [*a]", "more than 24 levels of nesting; a scenario needs fewer"},
		{"empty", "", "s.yaml: the file is empty; write a scenario"},
		{"only a word", "hello", `s.yaml:1:1: the file is not a scenario; write keys such as "run:" and "sites:" at the left margin`},
		{"control character", "a: \x01", "s.yaml: not YAML: control characters are not allowed; mind indentation, quotes and brackets"},
		{"tab", "run:\n\tlength: 1s", "s.yaml:2:1: not YAML: found character that cannot start any token; mind indentation, quotes and brackets"},
	} {
		var before, after runtime.MemStats
		runtime.ReadMemStats(&before)
		start := time.Now()
		_, err := Load("s.yaml", []byte(c.text), nil, nil)
		runtime.ReadMemStats(&after)
		t.Logf("%s: %v", c.what, time.Since(start))
		if err == nil || !strings.HasSuffix(err.Error(), c.want) {
			t.Errorf("%s\n got %.300v\nwant %s", c.what, err, c.want)
		}
		if used := after.TotalAlloc - before.TotalAlloc; used > 400<<20 {
			t.Errorf("%s: %d MB allocated", c.what, used>>20)
		}
	}
}

// many writes a format n times with its number.
func many(format string, n int) string {
	var b strings.Builder
	for i := range n {
		fmt.Fprintf(&b, format, i)
	}
	return b.String()
}

// A file that is wrong throughout is reported in part.
func TestTooManyFaults(t *testing.T) {
	_, err := Load("s.yaml", []byte(strings.Repeat("- ", 1)+"x\n"), nil, nil)
	if err == nil {
		t.Fatal("a list was taken for a scenario")
	}
	var text bytes.Buffer
	for i := range 5000 {
		fmt.Fprintf(&text, "key%d: 1\n", i)
	}
	_, err = Load("s.yaml", text.Bytes(), nil, nil)
	lines := strings.Split(err.Error(), "\n")
	if len(lines) != maxProblems+1 || lines[maxProblems] != "s.yaml: 4000 more faults are not listed; mend these first" {
		t.Errorf("%d lines, the last %q", len(lines), lines[len(lines)-1])
	}
}

// An alias stands for a copy: an option that changes one use leaves the other.
func TestAlias(t *testing.T) {
	const text = `
scenario: s
run: { length: 1s }
classes: [ { name: gold } ]
sites: [ { name: a }, { name: b } ]
fibres: [ { name: f, between: &ends [a, b], length: 10km } ]
circuits: [ { &size slots: 2, name: x, between: *ends }, { name: y, between: *ends, slots: 1 } ]
`
	s, err := Load("s.yaml", []byte(text), nil, []string{"circuits.y.between=[b, a]"})
	if err != nil {
		t.Fatal(err)
	}
	if x, y := s.Circuits[0], s.Circuits[1]; x.A != 0 || x.B != 1 || y.A != 1 || y.B != 0 || s.Fibres[0].B != 1 {
		t.Errorf("x %v-%v, y %v-%v", x.A, x.B, y.A, y.B)
	}
}

// large makes a scenario of twenty sites with a full matrix of five classes and
// n aggregates beside it.
func large(n int) (text, matrix []byte) {
	var b, m bytes.Buffer
	b.WriteString("scenario: large\nrun: { length: 10s }\ntraffic: [ { name: t, model: poisson, packet: 500B } ]\nclasses:\n")
	for c := range 5 {
		fmt.Fprintf(&b, "  - { name: c%d, queue: strict, traffic: t }\n", c)
	}
	b.WriteString("sites:\n")
	for s := range 20 {
		fmt.Fprintf(&b, "  - { name: s%d, position: [%dkm, %dkm] }\n", s, s*50, s*s)
	}
	b.WriteString("fibres:\n")
	for s := range 19 {
		fmt.Fprintf(&b, "  - { between: [s%d, s%d] }\n", s, s+1)
	}
	b.WriteString("demand: [ { matrix: m.csv, scale: 150% } ]\naggregates:\n")
	for i := range n {
		fmt.Fprintf(&b, "  - { name: a%d, between: [s%d, s%d], class: c%d, load: %dkbps }\n", i, i%20, (i+1+i/20%19)%20, i%5, i+1)
	}
	m.WriteString("from,to,class,rate\n")
	for i := range 20 * 20 * 5 {
		if from, to := i/100, i/5%20; from != to {
			fmt.Fprintf(&m, "s%d,s%d,c%d,%dMbps\n", from, to, i%5, i+1)
		}
	}
	return b.Bytes(), m.Bytes()
}

// How long a large file takes is BenchmarkLoad's to say.
func TestLarge(t *testing.T) {
	text, matrix := large(10000)
	s, err := Load("large.yaml", text, fstest.MapFS{"m.csv": {Data: matrix}}, nil)
	if err != nil {
		t.Fatal(err)
	}
	if want := 10000 + 20*19*5; len(s.Aggregates) != want {
		t.Errorf("%d aggregates, want %d", len(s.Aggregates), want)
	}
	if a := s.Aggregates[10000]; a.Name != "c0.s0.s1" || a.Load != 9_000_000 {
		t.Errorf("first of the matrix: %+v, want 6 Mbit/s x 150 %%", a)
	}
}

// A packet can name 32768 aggregates.
func TestTooManyAggregates(t *testing.T) {
	const text = "scenario: s\nrun: { length: 1s }\nclasses: [ { name: g, traffic: t } ]\n" +
		"traffic: [ { name: t, model: poisson, packet: 1kB } ]\ndemand: [ { matrix: m.csv } ]\nsites:\n"
	var sites, m bytes.Buffer
	m.WriteString("from,to,class,rate\n")
	const n = 182 // 182 x 181 = 32942
	for i := range n {
		fmt.Fprintf(&sites, "  - { name: s%d }\n", i)
		for j := range n {
			if i != j {
				fmt.Fprintf(&m, "s%d,s%d,g,1Mbps\n", i, j)
			}
		}
	}
	_, err := Load("s.yaml", append([]byte(text), sites.Bytes()...), fstest.MapFS{"m.csv": {Data: m.Bytes()}}, nil)
	if want := "s.yaml:5:21: demand[0].matrix: the matrix has too many rows; have 32767 aggregates at most"; fmt.Sprint(err) != want {
		t.Errorf("got %.300v\nwant %s", err, want)
	}
}

func BenchmarkLoad(b *testing.B) {
	text, matrix := large(10000)
	files := fstest.MapFS{"m.csv": {Data: matrix}}
	for b.Loop() {
		if _, err := Load("large.yaml", text, files, nil); err != nil {
			b.Fatal(err)
		}
	}
}

// Load never panics; it gives a scenario or sorted problems, never both, and
// the same each time.
func FuzzLoad(f *testing.F) {
	for _, name := range []string{"coast.yaml", "many.yaml", "chain.yaml", "wait-ring.bad.yaml", "plan-on-itself.bad.yaml", "law-unit.bad.yaml"} {
		data, err := os.ReadFile("testdata/" + name)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(data, "circuits.vx.slots=4")
	}
	f.Add([]byte("a: &a [*a]"), "=")
	f.Add([]byte("run: &a {length: 1s}\ndefaults: *a"), "run.length=[2s]")
	f.Add([]byte("? [a]\n: b\n"), "plans=1")
	files := os.DirFS("testdata")
	f.Fuzz(func(t *testing.T, data []byte, set string) {
		s, err := Load("f.yaml", data, files, []string{set})
		again, err2 := Load("f.yaml", data, files, []string{set})
		if fmt.Sprint(err) != fmt.Sprint(err2) {
			t.Fatalf("two loads differ:\n%v\n%v", err, err2)
		}
		if problems, ok := err.(Problems); (s == nil) != ok || ok && len(problems) == 0 {
			t.Fatalf("a scenario %v with the error %v", s != nil, err)
		}
		if s != nil && (again.Hash != s.Hash || len(s.Plans) == 0) {
			t.Fatalf("scenario %+v", s)
		}
	})
}
