package table

import (
	"bytes"
	"encoding/json"
	"flag"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"
	"unicode/utf8"

	"github.com/google/go-cmp/cmp"

	"ferrule/scenarios/result"
)

var update = flag.Bool("update", false, "rewrite the golden files; explain why in the commit")

func samples() map[string]result.Result {
	return map[string]result.Result{"run": sampleRun(), "batch": sampleBatch(), "compare": sampleComparison(), "check": sampleCheck(), "size": sampleSizing(), "failures": sampleFailures()}
}

func text(t *testing.T, r result.Result, opt Options) string {
	t.Helper()
	var b bytes.Buffer
	if err := Text(&b, r, opt); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

func TestGolden(t *testing.T) {
	for name, r := range samples() {
		var md bytes.Buffer
		if err := Markdown(&md, r, Options{Rows: 2}); err != nil {
			t.Fatal(err)
		}
		for file, got := range map[string]string{
			name + ".txt": text(t, r, Options{Rows: 2}),
			name + ".md":  md.String(),
		} {
			path := filepath.Join("testdata", file)
			if *update {
				if err := os.WriteFile(path, []byte(got), 0o644); err != nil {
					t.Fatal(err)
				}
			}
			want, err := os.ReadFile(path)
			if err != nil {
				t.Fatal(err)
			}
			if d := cmp.Diff(string(want), got); d != "" {
				t.Errorf("%s changed; if meant, rerun with -update and explain why in the commit (-want +got):\n%s", file, d)
			}
		}
	}
}

func TestWidth(t *testing.T) {
	for name, r := range samples() {
		for _, l := range strings.Split(text(t, r, Options{}), "\n") {
			if n := utf8.RuneCountInString(l); n > Width {
				t.Errorf("%s: %d columns, at most %d:\n%s", name, n, Width, l)
			}
			if l != strings.TrimRight(l, " ") {
				t.Errorf("%s: trailing space in %q", name, l)
			}
		}
	}
}

// gather puts every number and every string of a decoded JSON value in sets.
func gather(v any, numbers map[float64]bool, texts map[string]bool) {
	switch v := v.(type) {
	case float64:
		numbers[v] = true
	case string:
		texts[v] = true
	case []any:
		for _, e := range v {
			gather(e, numbers, texts)
		}
	case map[string]any:
		for k, e := range v {
			texts[k] = true // causes of loss are keys
			gather(e, numbers, texts)
		}
	}
}

// sizes gives the SI size of each unit a table may use, written out anew.
var sizes = map[string]float64{"s": 1, "ms": 1e-3, "us": 1e-6, "ns": 1e-9, "Gb/s": 1e9, "Mb/s": 1e6, "kb/s": 1e3, "b/s": 1,
	"GB": 1e9, "MB": 1e6, "kB": 1e3, "B": 1, "min": 60, "%": 1e-2, "ppm": 1e-6, "pp": 1e-2}

var shown = regexp.MustCompile(`[-+]?[0-9][0-9,]*(\.[0-9]+)?(e[-+]?[0-9]+)?`)

// Every number in a table is in the JSON, and equal: each cell's figures stand
// in the encoded result, what the cell prints is those figures to the digits
// it prints, and a cell without figures prints no digit of its own.
func TestEveryNumberIsInTheJSON(t *testing.T) {
	for kind, r := range samples() {
		data, err := result.Encode(r)
		if err != nil {
			t.Fatal(err)
		}
		var v any
		if err := json.Unmarshal(data, &v); err != nil {
			t.Fatal(err)
		}
		numbers, texts := map[float64]bool{}, map[string]bool{}
		gather(v, numbers, texts)
		checked := 0
		for _, c := range cells(layOut(r, Options{})) {
			for _, x := range c.values {
				if !numbers[x] {
					t.Errorf("%s: %q shows %g, which is not in the JSON", kind, c.text, x)
				}
			}
			if len(c.values) > 0 {
				checkShown(t, kind, c, texts)
				checked++
			} else if c.name {
				if !inTexts(texts, c.text) {
					t.Errorf("%s: text %q is not in the JSON", kind, c.text)
				}
			} else if shown.MatchString(withoutNames(c.text, texts)) {
				t.Errorf("%s: %q prints a number that carries no figure", kind, c.text)
			}
		}
		if checked < 10 {
			t.Errorf("%s: only %d cells with figures", kind, checked)
		}
	}
}

func inTexts(texts map[string]bool, s string) bool {
	if texts[s] || texts[strings.ToLower(s)] {
		return true
	}
	for _, c := range result.StandingCautions() {
		if s == c {
			return true
		}
	}
	return false
}

// withoutNames takes out what is printed of names, standards and percentiles.
func withoutNames(s string, texts map[string]bool) string {
	s = regexp.MustCompile(`RFC [0-9]+|\bp[0-9.]+|filled to 80 %`).ReplaceAllString(s, "")
	for _, w := range strings.Fields(s) {
		if texts[strings.Trim(w, ",:")] {
			s = strings.Replace(s, w, "", 1)
		}
	}
	return s
}

// checkShown reads the numbers of a cell back and compares them to its figures.
func checkShown(t *testing.T, kind string, c cell, texts map[string]bool) {
	t.Helper()
	body := withoutNames(c.text, texts)
	found := shown.FindAllString(strings.ReplaceAll(body, "..", " "), -1)
	if len(found) != len(c.values) {
		t.Errorf("%s: %q shows %d numbers for the %d figures %v", kind, c.text, len(found), len(c.values), c.values)
		return
	}
	for i, f := range found {
		x, err := strconv.ParseFloat(strings.ReplaceAll(f, ",", ""), 64)
		if err != nil {
			t.Fatal(err)
		}
		size := sizeOf(body, f)
		_, frac, _ := strings.Cut(f, ".")
		half := 0.5000001 * math.Pow(10, -float64(len(frac))) // of the last digit printed
		if want := c.values[i] / size; math.Abs(x-want) > half && math.Abs(x-want) > 1e-9*math.Abs(want) {
			t.Errorf("%s: %q shows %v for %v", kind, c.text, x*size, c.values[i])
		}
	}
}

// sizeOf is the size of the unit that follows number f in s, or the last unit.
func sizeOf(s, f string) float64 {
	after := s[strings.Index(s, f)+len(f):]
	words := strings.Fields(after)
	for _, w := range words {
		if size, ok := sizes[strings.TrimRight(strings.Split(w, "..")[0], ",;")]; ok {
			return size
		}
	}
	return 1
}

func cells(d *doc) []cell {
	var out []cell
	for _, b := range d.blocks {
		out = append(out, b.line...)
		if b.grid != nil {
			for _, row := range b.grid.rows {
				out = append(out, row...)
			}
		}
	}
	return out
}

// What compare prints, in this order: verdicts, price, then the periods by
// kind, then the network.
func TestOrderOfAComparison(t *testing.T) {
	got := text(t, sampleComparison(), Options{})
	at := 0
	for _, want := range []string{"\nvoice  better", "\nvideo  worse", "\nweb    undecided", "\nprice: +4 slots", "\nNORMAL ", "\nHIT ", "\nAFTER ",
		"\nCHANGE ", "\nNETWORK", "RFC 5481", "audit: ", "acceptance test", "emergency calls", "laser-safety"} {
		i := strings.Index(got[at:], want)
		if i < 0 {
			t.Fatalf("no %q after byte %d of\n%s", want, at, got)
		}
		at += i + 1
	}
}

func TestColourOnlyWhenAsked(t *testing.T) {
	for name, r := range samples() {
		bare, coloured := text(t, r, Options{}), text(t, r, Options{Colour: true})
		if strings.Contains(bare, "\x1b") {
			t.Errorf("%s: escape sequence without colour", name)
		}
		if !strings.Contains(coloured, "\x1b[1m") {
			t.Errorf("%s: no escape sequence with colour", name)
		}
		if d := cmp.Diff(bare, regexp.MustCompile(`\x1b\[[0-9;]*m`).ReplaceAllString(coloured, "")); d != "" {
			t.Errorf("%s: colour moves text (-bare +coloured):\n%s", name, d)
		}
	}
}

func TestHumanUnits(t *testing.T) {
	for _, c := range []struct {
		v    float64
		unit string
		want string
	}{
		{0, "s", "0 s"}, {12.345, "s", "12.3 s"}, {0.0123456, "s", "12.3 ms"}, {8e-5, "s", "80.0 us"}, {3.2e-9, "s", "3.20 ns"},
		{1, "ratio", "100 %"}, {1.5e-3, "ratio", "0.150 %"}, {1.5e-5, "ratio", "15.0 ppm"}, {2.5e-6, "ratio", "2.50 ppm"},
		{2487900000, "bit/s", "2.49 Gb/s"}, {64000, "bit/s", "64.0 kb/s"}, {1500, "B", "1.50 kB"},
		{1234567, "packets", "1,234,567 packets"}, {-0.0042, "s", "-4.20 ms"},
	} {
		if got := number(c.v, c.unit).text; got != c.want {
			t.Errorf("%v %s: %q, want %q", c.v, c.unit, got, c.want)
		}
	}
}

func TestChangeShowsTwoDigitsOfItsInterval(t *testing.T) {
	for _, c := range []struct {
		v    float64
		i    *result.Interval
		want string
	}{
		{-0.00336, &result.Interval{Half: new(8.1e-5)}, "-3.360 ± 0.081 ms"},
		{0.0528, &result.Interval{Half: new(0.0102)}, "+53 ± 10 ms"},
		{0, &result.Interval{Half: new(0.0)}, "0 ± 0 s"},
		{2e-3, &result.Interval{Low: new(1e-3), High: new(4e-3)}, "+2.0 (+1.0..+4.0) ms"},
		{2e-3, nil, "+2.00 ms"},
	} {
		if got := change(&c.v, c.i, "s").text; got != c.want {
			t.Errorf("%v: %q, want %q", c.v, got, c.want)
		}
	}
	if got, want := change(new(-0.29), nil, "ratio").text, "-29.0 pp"; got != want {
		t.Errorf("a difference of percentages reads %q, want %q", got, want)
	}
}

func TestMarkdownEscapes(t *testing.T) {
	var b bytes.Buffer
	r := &result.Check{Findings: []result.Finding{{Severity: result.Note, Subject: "a|b", Text: "x\ny <b> *z*"}}}
	if err := Markdown(&b, r, Options{}); err != nil {
		t.Fatal(err)
	}
	if want := `| note | a\|b | x?y &lt;b&gt; \*z\* |`; !strings.Contains(b.String(), want) {
		t.Errorf("no %s in\n%s", want, b.String())
	}
}

func TestNamesCannotSteerATerminal(t *testing.T) {
	got := text(t, &result.Run{Plan: "a\x1b[2Jb"}, Options{})
	if strings.Contains(got, "\x1b") || !strings.Contains(got, "a?[2Jb") {
		t.Errorf("%q", got)
	}
}

func TestEmptyAndPartialResults(t *testing.T) {
	for _, r := range []result.Result{&result.Run{Head: result.Head{Partial: true}}, &result.Batch{Head: result.Head{Partial: true}},
		&result.Comparison{Head: result.Head{Partial: true}}, &result.Check{Head: result.Head{Partial: true}}} {
		if got := text(t, r, Options{}); !strings.Contains(got, "PARTIAL: interrupted") {
			t.Errorf("%T does not say it is partial:\n%s", r, got)
		}
	}
}

// Names as long as a scenario allows, and figures as large as a run can give,
// still fit.
func TestWidthWithLongNames(t *testing.T) {
	long := func(s string) string { return s + strings.Repeat("x", 64-len(s)) }
	words := strings.NewReplacer(`"voice"`, `"`+long("voice")+`"`, `"web"`, `"`+long("web")+`"`, `"video"`, `"`+long("video")+`"`,
		`"th"`, `"`+long("th")+`"`, `"tarn"`, `"`+long("tarn")+`"`, `"holm"`, `"`+long("holm")+`"`,
		"voice-tn.out", long("voice-tn.out"), "video-tn.out", long("video-tn.out"), "holm-ness", long("holm-ness"),
		"th from tarn", long("th")+" from "+long("tarn"), `"as-is"`, `"`+long("as-is")+`"`,
		"1234567,", "123456789012,", "1234550,", "123456789012,")
	for name, r := range samples() {
		data, err := result.Encode(r)
		if err != nil {
			t.Fatal(err)
		}
		stretched, err := result.Decode([]byte(words.Replace(string(data))))
		if err != nil {
			t.Fatal(err)
		}
		for _, l := range strings.Split(text(t, stretched, Options{}), "\n") {
			if n := utf8.RuneCountInString(l); n > Width {
				t.Errorf("%s: %d columns, at most %d:\n%s", name, n, Width, l)
			}
		}
	}
}
