package page

import (
	"bytes"
	"context"
	"encoding/json"
	"flag"
	"fmt"
	"html"
	"image/png"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/chromedp/cdproto/emulation"
	weblog "github.com/chromedp/cdproto/log"
	"github.com/chromedp/cdproto/network"
	webpage "github.com/chromedp/cdproto/page"
	"github.com/chromedp/cdproto/runtime"
	"github.com/chromedp/chromedp"

	"ferrule/scenarios/result"
)

var shots = flag.String("shots", "", "directory for screenshots; empty: they are looked at by the tests only")

// A visit is one tab and what went wrong in it.
type visit struct {
	ctx context.Context
	t   *testing.T
	mu  sync.Mutex
	bad []string

	home string // what requests may begin with besides file: and data:
}

func (v *visit) note(format string, args ...any) {
	v.mu.Lock()
	defer v.mu.Unlock()
	v.bad = append(v.bad, fmt.Sprintf(format, args...))
}

// chromium finds the browser. Where it is missing it is installed from Debian's
// packages, which takes root, or sudo without a password.
func chromium(t *testing.T) string {
	t.Helper()
	path, err := exec.LookPath("chromium")
	if err == nil {
		return path
	}
	const install = "apt-get update -qq && DEBIAN_FRONTEND=noninteractive apt-get install -y -qq --no-install-recommends chromium fonts-dejavu-core"
	shell := []string{"sh", "-c", install}
	if os.Getuid() != 0 {
		shell = append([]string{"sudo", "-n"}, shell...)
	}
	if out, err := exec.Command(shell[0], shell[1:]...).CombinedOutput(); err != nil {
		t.Fatalf("these tests need chromium; %s: %v\n%s", install, err, out)
	}
	if path, err = exec.LookPath("chromium"); err != nil {
		t.Fatal(err)
	}
	return path
}

// browser starts one.
func browser(t *testing.T) context.Context {
	t.Helper()
	started.Do(func() {
		path := chromium(t)
		ctx, _ := chromedp.NewExecAllocator(running, append(chromedp.DefaultExecAllocatorOptions[:],
			chromedp.ExecPath(path), chromedp.NoSandbox, chromedp.DisableGPU)...) // with an empty directory of its own
		tab, _ := chromedp.NewContext(ctx) // both end with running
		if err := chromedp.Do(tab); err == nil {
			shared = tab
		} else {
			t.Error(err)
		}
	})
	if shared == nil {
		t.Fatal("there is no browser: see the first failure")
	}
	return shared
}

// One browser serves all tests of the package and ends with them.
var (
	running, quit = context.WithCancel(context.Background())
	started       sync.Once
	shared        context.Context
)

func TestMain(m *testing.M) {
	flag.Parse()
	status := m.Run()
	if shared != nil {
		ctx, stop := context.WithTimeout(shared, 10*time.Second)
		if err := chromedp.Cancel(ctx); err != nil {
			fmt.Fprintln(os.Stderr, "closing the browser:", err)
		}
		stop()
	}
	quit()
	os.Exit(status)
}

// open writes a report to a disk and opens it from there in a new tab, in the
// given colour scheme.
func open(t *testing.T, browser context.Context, r result.Result, scheme string, wide, high int64) *visit {
	t.Helper()
	b, err := Report(r, Options{Command: "ferrule compare small.yaml --seeds 3"})
	if err != nil {
		t.Fatal(err)
	}
	file := filepath.Join(t.TempDir(), "report.html")
	if err := os.WriteFile(file, b, 0o644); err != nil {
		t.Fatal(err)
	}
	tab, stop := chromedp.NewContext(browser)
	t.Cleanup(stop)
	if err := chromedp.Do(tab); err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithTimeout(tab, time.Minute)
	t.Cleanup(cancel)
	v := &visit{ctx: ctx, t: t}
	v.watch()
	v.call(chromedp.EmulateViewport(wide, high))
	v.scheme(scheme)
	v.call(chromedp.Navigate("file://" + file))
	return v
}

// scheme sets the colour scheme that the reader wishes.
func (v *visit) scheme(name string) {
	v.t.Helper()
	_, err := chromedp.Call(v.ctx, emulation.SetEmulatedMedia, emulation.SetEmulatedMediaParams{Features: []*emulation.MediaFeature{{Name: "prefers-color-scheme", Value: name}}})
	v.must(err)
}

// watch notes console errors, exceptions, violations of the policy and every
// request but that for the file itself.
func (v *visit) watch() {
	v.must(chromedp.Listen(v.ctx, func(ev any) {
		switch ev := ev.(type) {
		case *runtime.EventExceptionThrown:
			v.note("exception: %s", ev.ExceptionDetails.Text)
		case *runtime.EventConsoleAPICalled:
			v.note("console: %s", ev.Type)
		case *weblog.EventEntryAdded:
			v.note("log: %s %s", ev.Entry.Level, ev.Entry.Text)
		case *network.EventRequestWillBeSent:
			if (v.home == "" || !strings.HasPrefix(ev.Request.URL, v.home)) && !strings.HasPrefix(ev.Request.URL, "file://") && !strings.HasPrefix(ev.Request.URL, "data:") {
				v.note("request: %s", ev.Request.URL)
			}
		}
	}))
	for _, err := range []error{
		second(chromedp.Call(v.ctx, network.Enable, network.EnableParams{})), second(chromedp.Call(v.ctx, weblog.Enable, struct{}{})),
		second(chromedp.Call(v.ctx, webpage.AddScriptToEvaluateOnNewDocument, webpage.AddScriptToEvaluateOnNewDocumentParams{
			Source: `violations = []; addEventListener("securitypolicyviolation", (e) => violations.push(e.violatedDirective + " " + e.blockedURI))`})),
	} {
		v.must(err)
	}
}

func (v *visit) must(err error) {
	v.t.Helper()
	if err != nil {
		v.t.Fatal(err)
	}
}

func (v *visit) call(a chromedp.Action[chromedp.Void]) {
	v.t.Helper()
	v.must(chromedp.Do(v.ctx, a))
}

// ask evaluates an expression in the page.
func ask[T any](v *visit, expression string) T {
	v.t.Helper()
	x, err := chromedp.Run(v.ctx, chromedp.Evaluate[T](expression))
	v.must(err)
	return x
}

// scroll goes through the whole page, so that everything is drawn.
func (v *visit) scroll() {
	v.t.Helper()
	for y := 0; y < ask[int](v, "document.documentElement.scrollHeight"); y += 600 {
		ask[bool](v, fmt.Sprintf("scrollTo(0, %d), true", y))
		v.call(chromedp.Sleep(15 * time.Millisecond))
	}
	ask[bool](v, "scrollTo(0, 0), true")
}

// clean reports all that went wrong.
func (v *visit) clean() {
	v.t.Helper()
	for _, x := range ask[[]string](v, "violations") {
		v.note("policy: %s", x)
	}
	v.mu.Lock()
	defer v.mu.Unlock()
	for _, b := range v.bad {
		v.t.Error(b)
	}
}

// shoot takes a screenshot and reports its mean brightness, 0 to 1.
func (v *visit) shoot(name string) float64 {
	v.t.Helper()
	data, err := chromedp.Run(v.ctx, chromedp.CaptureScreenshot())
	v.must(err)
	if *shots != "" {
		v.must(os.WriteFile(filepath.Join(*shots, name+".png"), data, 0o644))
	}
	im, err := png.Decode(bytes.NewReader(data))
	v.must(err)
	b, sum := im.Bounds(), 0.0
	for y := b.Min.Y; y < b.Max.Y; y += 7 {
		for x := b.Min.X; x < b.Max.X; x += 7 {
			r, g, bl, _ := im.At(x, y).RGBA()
			sum += float64(r+g+bl) / (3 * 65535)
		}
	}
	return sum / (float64(b.Dx()) * float64(b.Dy()) / 49)
}

// Every kind of report opens from a disk: nothing goes wrong, nothing is asked
// of any host, the map and the charts are there, and every figure written in
// it stands in the JSON of the result.
func TestReportOpensFromDisk(t *testing.T) {
	b := browser(t)
	for kind, r := range samples(t) {
		t.Run(kind, func(t *testing.T) {
			v := open(t, b, r, "light", 1200, 900)
			v.scroll()
			if n := ask[int](v, `document.querySelectorAll("#tails canvas").length`); n < 4 {
				t.Errorf("%d distributions drawn, want one for each class and period", n)
			}
			if n := ask[int](v, `document.querySelectorAll("#times canvas").length`); n != 12 {
				t.Errorf("%d series drawn, want two classes by three figures, all and close up", n)
			}
			if n := ask[int](v, `document.querySelectorAll("#map .circuit").length`); n < 4 {
				t.Errorf("%d circuits on the map, want 4 or more", n)
			}
			if n := ask[int](v, `document.querySelectorAll("#map .risk").length`); n != 3 {
				t.Errorf("%d hatchings on the map, want 3: two fibres in one duct, one of them on a quay too", n)
			}
			v.clean()
			known := numbers(t, r)
			shown := ask[[]string](v, `[...document.querySelectorAll("[data-v]")].flatMap((e) => e.dataset.v.split(" "))`)
			if len(shown) < 100 {
				t.Errorf("%d figures shown", len(shown))
			}
			for _, s := range shown {
				x, err := strconv.ParseFloat(s, 64)
				if err != nil || !known[x] {
					t.Errorf("the report shows %s, which is not in the JSON", s)
				}
			}
		})
	}
}

// numbers are all numbers in the JSON of a result.
func numbers(t *testing.T, r result.Result) map[float64]bool {
	t.Helper()
	data, err := result.Encode(r)
	if err != nil {
		t.Fatal(err)
	}
	var tree any
	if err := json.Unmarshal(data, &tree); err != nil {
		t.Fatal(err)
	}
	known := map[float64]bool{}
	var walk func(any)
	walk = func(x any) {
		switch x := x.(type) {
		case float64:
			known[x] = true
		case []any:
			known[float64(len(x))] = true // "8 seeds"
			for _, y := range x {
				walk(y)
			}
		case map[string]any:
			for _, y := range x {
				walk(y)
			}
		}
	}
	walk(tree)
	return known
}

// No name can become markup, script, style or a request.
func TestHostileNames(t *testing.T) {
	b := browser(t)
	for _, kind := range []string{"run", "comparison"} {
		r := samples(t)[kind]
		v := open(t, b, hostile(t, r), "light", 1200, 900)
		v.scroll()
		if ask[bool](v, `"hacked" in window || document.querySelector("img") !== null || document.scripts.length !== 2`) {
			t.Errorf("%s: a name has become markup", kind)
		}
		if text := ask[string](v, `document.querySelector(".verdicts tbody th").textContent`); !strings.Contains(text, "gold</script>") {
			t.Errorf("%s: the class is shown as %q", kind, text)
		}
		if text := ask[string](v, `document.getElementById("map").textContent`); !strings.Contains(text, "duct</script>") {
			t.Errorf("%s: the map does not show the names", kind)
		}
		v.clean()
	}
}

// A comparison that was interrupted before it had a run of each plan has a
// report all the same.
func TestReportWithoutRuns(t *testing.T) {
	c := *samples(t)["comparison"].(*result.Comparison)
	c.Runs, c.Partial = nil, true
	for _, plans := range [][]result.Compared{c.Plans, c.Plans[:1]} {
		c.Plans = plans
		v := open(t, browser(t), &c, "light", 1200, 900)
		if !ask[bool](v, `document.querySelector(".verdicts").checkVisibility() && document.querySelector(".partial").checkVisibility()`) {
			t.Errorf("%d plans: the verdict is not shown as partial", len(plans))
		}
		ask[bool](v, `document.querySelector("[data-choose]")?.click(), true`)
		v.clean()
	}
}

// A reader chooses a plan and an instant: what is shown follows, with the
// keyboard too.
func TestChoices(t *testing.T) {
	v := open(t, browser(t), samples(t)["comparison"], "light", 1200, 900)
	shown := func() string {
		return ask[string](v, `[...document.querySelectorAll("section[data-of]")].filter((e) => !e.hidden && e.getAttribute("aria-label")).map((e) => e.getAttribute("aria-label")).join()`)
	}
	if got := shown(); got != "verdict on own-way" {
		t.Errorf("at first it shows %q", got)
	}
	ask[bool](v, `document.querySelector('[data-choose="2"]').focus(), true`)
	v.call(chromedp.KeyEvent("\r"))
	if got := shown(); got != "verdict on wide" {
		t.Errorf("with the second plan chosen it shows %q", got)
	}
	looks := func() string {
		return ask[string](v, `[...document.querySelectorAll("#map .circuit")].map((e) => e.querySelector("title").textContent.split(",")[0] + " " + e.getAttribute("class").replace("circuit ", "")).sort().join(", ")`)
	}
	press := func(text string) {
		if !ask[bool](v, fmt.Sprintf(`(() => { const b = [...document.querySelectorAll("#map-controls button")].find((b) => b.textContent === %q); b?.click(); return !!b })()`, text)) {
			t.Fatalf("there is no button %q", text)
		}
	}
	press("as-is")
	press("normal")
	if got := looks(); got != "ab up, ab2 up, ac up, cb up" {
		t.Errorf("in the normal period: %s", got)
	}
	press("just after cut a-b")
	if got, cuts := looks(), ask[int](v, `document.querySelectorAll("#map .cut").length`); got != "ab restoring, ab2 broken, ac up, cb up" && got != "ab restoring, ab2 restoring, ac up, cb up" || cuts != 1 {
		t.Errorf("just after the cut: %s; %d places of cuts", got, cuts)
	}
	ask[bool](v, `document.getElementById("map").scrollIntoView(), true`)
	v.shoot("cut")
	press("after")
	if got := looks(); !strings.Contains(got, "ab detoured") {
		t.Errorf("after the cut: %s", got)
	}
	v.clean()
}

// The page is light or dark as its reader wishes, narrow windows do not make
// it scroll sideways, and it prints on white.
func TestSchemes(t *testing.T) {
	b, r := browser(t), samples(t)["comparison"]
	light := open(t, b, r, "light", 1200, 1600).shoot("light")
	dark := open(t, b, r, "dark", 1200, 1600)
	if d := dark.shoot("dark"); light < 0.8 || d > 0.25 {
		t.Errorf("brightness of %.2f in light, %.2f in dark", light, d)
	}
	narrow := open(t, b, r, "light", 390, 1600)
	narrow.shoot("narrow")
	narrow.scroll()
	if wide := ask[float64](narrow, `Math.max(...[...document.querySelectorAll(".uplot")].map((e) => e.getBoundingClientRect().right))`); wide > 390 {
		t.Errorf("a chart reaches to %.0f of 390 pixels", wide)
	}
	if wide := ask[int](narrow, "document.documentElement.scrollWidth"); wide > 390 {
		t.Errorf("a window of 390 pixels shows a page of %d", wide)
	}
	pdf, err := chromedp.Run(dark.ctx, chromedp.PrintToPDF())
	if err != nil || !bytes.HasPrefix(pdf, []byte("%PDF")) {
		t.Errorf("it does not print: %v", err)
	}
	if *shots != "" {
		dark.must(os.WriteFile(filepath.Join(*shots, "print.pdf"), pdf, 0o644))
	}
	dark.clean()
	narrow.clean()
}

// The policy lets in the page's own program and style sheet only, and the page
// holds nothing that would need more.
func TestPolicy(t *testing.T) {
	b, err := Report(samples(t)["run"], Options{})
	if err != nil {
		t.Fatal(err)
	}
	s := string(b)
	for _, never := range []string{"http://", "https://", "unsafe-", " style=", " onclick=", " src="} {
		for rest := s; ; {
			i := strings.Index(rest, never)
			if i < 0 {
				break
			}
			if around := rest[max(0, i-60):min(len(rest), i+60)]; !slices.ContainsFunc([]string{"www.w3.org"}, func(ok string) bool { return strings.Contains(around, ok) }) {
				t.Errorf("the page holds %q: %q", never, around)
			}
			rest = rest[i+len(never):]
		}
	}
	if clear := html.UnescapeString(s); !strings.Contains(clear, "script-src '"+hash(program)+"';") || !strings.Contains(clear, "content=\"default-src 'none'; ") {
		t.Errorf("no strict policy in %.600s", s)
	}
}

// A report of 30 classes and 80,000 points is painted within a second of being
// opened: charts below the window wait until they are near.
func TestFirstPaint(t *testing.T) {
	b, r := browser(t), many(t, 30, 80_000)
	best := math.Inf(1)
	for range 3 { // the machine may be busy with something else
		v := open(t, b, r, "light", 1200, 900)
		v.call(chromedp.Sleep(200 * time.Millisecond))
		best = min(best, ask[float64](v, `performance.getEntriesByName("first-contentful-paint")[0]?.startTime ?? 1e9`))
		if n := ask[int](v, `document.querySelectorAll("canvas").length`); n > 60 {
			t.Errorf("%d charts are drawn before anyone looks", n)
		}
		v.clean()
		if best < 1000 {
			break
		}
	}
	t.Logf("first paint after %.0f ms", best)
	if best >= 1000 {
		t.Errorf("first paint after %.0f ms, want 1000", best)
	}
}
