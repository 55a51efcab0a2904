package page

import (
	"bytes"
	"flag"
	"os"
	"strings"
	"testing"

	"github.com/evanw/esbuild/pkg/api"
)

var update = flag.Bool("update", false, "write the bundle anew")

// The committed bundles are what their sources give, byte for byte.
func TestBundleIsFresh(t *testing.T) {
	fresh(t, "web/main.ts", "dist/page.js", licences(t))
	fresh(t, "web/console.ts", "dist/console.js", "")
}

func fresh(t *testing.T, entry, file, head string) {
	t.Helper()
	r := api.Build(api.BuildOptions{
		EntryPoints: []string{entry}, Bundle: true, Format: api.FormatIIFE, Target: api.ES2022, Charset: api.CharsetASCII,
		MinifyWhitespace: true, MinifyIdentifiers: true, MinifySyntax: true, LegalComments: api.LegalCommentsNone,
		Banner: map[string]string{"js": head}, Outfile: "page.js", LogLevel: api.LogLevelSilent,
	})
	for _, e := range append(r.Errors, r.Warnings...) {
		at := ""
		if e.Location != nil {
			at = e.Location.File
		}
		t.Errorf("%s: %s", at, e.Text)
	}
	if t.Failed() {
		return
	}
	built := r.OutputFiles[0].Contents
	if *update {
		if err := os.WriteFile(file, built, 0o644); err != nil {
			t.Fatal(err)
		}
	}
	committed, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal(built, committed) {
		t.Errorf("%s has %d bytes, its sources give %d other ones: run go generate", file, len(committed), len(built))
	}
	if low := strings.ToLower(string(committed)); strings.Contains(low, "</script") || strings.Contains(low, "<!--") || strings.Contains(low, "sourcemappingurl") {
		t.Errorf("%s cannot stand inside a page", file)
	}
}

// licences is the comment at the head of the bundle: that of what is in it and
// is not ours.
func licences(t *testing.T) string {
	t.Helper()
	b, err := os.ReadFile("web/vendor/uplot/LICENSE")
	if err != nil {
		t.Fatal(err)
	}
	return "/* Contains uPlot 1.6.32, as the style sheet of the page contains its rules, under this licence:\n\n" + strings.TrimSpace(string(b)) + "\n*/"
}
