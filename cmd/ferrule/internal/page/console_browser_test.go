package page

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"math"
	"net/http/httptest"
	"strings"
	"testing"
	"time"

	"github.com/chromedp/chromedp"

	"ferrule/scenarios/result"
	"ferrule/scenarios/study"
)

// visitConsole opens the page of a server in a new tab.
func visitConsole(t *testing.T, s *httptest.Server, scheme string, wide, high int64) *visit {
	t.Helper()
	tab, stop := chromedp.NewContext(browser(t))
	t.Cleanup(stop)
	if err := chromedp.Do(tab); err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithTimeout(tab, time.Minute)
	t.Cleanup(cancel)
	v := &visit{ctx: ctx, t: t, home: s.URL + "/"}
	v.watch()
	v.call(chromedp.EmulateViewport(wide, high))
	v.scheme(scheme)
	v.call(chromedp.Navigate(s.URL + "/"))
	v.until("the map", `document.querySelectorAll("#over line").length === 3`)
	return v
}

// until waits for an expression to hold.
func (v *visit) until(what, expression string) {
	v.t.Helper()
	for end := time.Now().Add(15 * time.Second); !ask[bool](v, expression); time.Sleep(20 * time.Millisecond) {
		if time.Now().After(end) {
			v.t.Fatalf("waited for %s in vain; the page says %q at %q", what, ask[string](v, `document.getElementById("said").textContent`), ask[string](v, `document.getElementById("clock").textContent`))
		}
	}
}

// press clicks a control as a person does, in its middle.
func (v *visit) press(id string) {
	v.t.Helper()
	v.clickAt(ask[[]float64](v, fmt.Sprintf(`(() => { const e = document.getElementById(%q); e.scrollIntoView({block: "center"}); const r = e.getBoundingClientRect(); return [r.x + r.width / 2, r.y + r.height / 2] })()`, id)))
}

// clickFibre clicks a fibre so far along it, from its first end.
func (v *visit) clickFibre(name string, part float64) {
	v.t.Helper()
	v.clickAt(ask[[]float64](v, fmt.Sprintf(`(() => {
		const l = document.querySelector('#over [data-fibre=%q]');
		document.getElementById("over").scrollIntoView({block: "center"});
		const [x, y] = ["x", "y"].map((k) => Number(l.getAttribute(k + 1)) + %g * (Number(l.getAttribute(k + 2)) - Number(l.getAttribute(k + 1))));
		const p = new DOMPoint(x, y).matrixTransform(document.getElementById("over").getScreenCTM());
		return [p.x, p.y];
	})()`, name, part)))
}

func (v *visit) clickAt(p []float64) {
	v.t.Helper()
	v.call(chromedp.MouseClickXY(p[0], p[1]))
}

// figure is what the strip of a class shows.
func figure(class, what string) string {
	return fmt.Sprintf(`document.querySelector('[data-class=%q] [data-figure=%q]').textContent`, class, what)
}

// A person starts the run, cuts a fibre with a click, sees loss and the circuit
// return, repairs it, moves an aggregate and saves; the saved acts, replayed,
// give the bytes of the session.
func TestConsoleByHand(t *testing.T) {
	sc := towns(t, "30s")
	c, s := served(t, sc, Guard{})
	v := visitConsole(t, s, "light", 1200, 1000)
	if ask[bool](v, `"hacked" in window || document.querySelector("img") !== null`) {
		t.Error("a text of the scenario has become markup")
	}
	if text := ask[string](v, `document.getElementById("about").textContent`); !strings.Contains(text, "<img src=x") {
		t.Errorf("the text of the scenario is shown as %q", text)
	}
	if n := ask[int](v, `document.querySelectorAll("#map .circuit.up").length`); n != 3 {
		t.Errorf("%d circuits are drawn before the clock runs", n)
	}
	v.press("pause")
	v.until("traffic", figure("gold", "delivered")+`.includes("kb/s") && `+figure("gold", "lost")+` === "0 %"`)
	v.clickFibre("ayre-brough", 1.0/3)
	v.until("the cut on the map", `document.querySelectorAll("#map .cut").length === 1`)
	v.until("loss in a strip", `[...document.querySelectorAll('[data-class="gold"] .strip-part path')][1].getAttribute("d").includes(" 2.0")`)
	v.until("the circuit on a detour", `[...document.querySelectorAll("#map .circuit.detoured title")].some((e) => e.textContent.startsWith("ab,"))`)
	v.until("no more loss", figure("gold", "lost")+` === "0 %"`)
	v.shoot("console-cut")
	v.clickFibre("ayre-brough", 0.8)
	v.until("the repair", `document.querySelectorAll("#map .cut").length === 0`)
	ask[bool](v, `document.getElementById("circuit").value = "x", true`)
	v.press("set-up")
	v.until("the circuit", `[...document.querySelectorAll("#map .circuit.up title")].some((e) => e.textContent.startsWith("x,"))`)
	v.press("move")
	v.until("the move", `document.getElementById("moved").textContent.includes("calls")`)
	v.press("return")
	v.until("the return", `document.getElementById("moved").textContent === "nothing"`)
	// With the keyboard only: to a fibre, and Enter.
	ask[bool](v, `document.querySelector('#over [data-fibre="ayre-coe"]').focus(), true`)
	v.call(chromedp.KeyEvent("\r"))
	v.until("the second cut", `document.activeElement.getAttribute("aria-label") === "repair ayre-coe"`)
	ask[bool](v, `(() => { const s = document.getElementById("speed"); s.value = "0"; s.dispatchEvent(new Event("change", {bubbles: true})); return true })()`)
	v.until("the end", `document.getElementById("clock").textContent.endsWith("over")`)
	saved := ask[string](v, `(() => { const r = new XMLHttpRequest(); r.open("GET", document.getElementById("save").href, false); r.send(); return r.responseText })()`)
	v.clean()

	var run *result.Run
	if err := c.sessions[1].do(t.Context(), func() { run = c.sessions[1].session.Result() }); err != nil {
		t.Fatal(err)
	}
	want, err := result.Encode(run)
	if err != nil {
		t.Fatal(err)
	}
	again, err := study.Replay(t.Context(), sc, []byte(saved), "saved", study.Options{Cores: 2})
	if err != nil {
		t.Fatalf("%v\n%s", err, saved)
	}
	got, err := result.Encode(again)
	if err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal(got, want) {
		t.Error("the replay gives other bytes than the session")
	}
	if len(again.Cuts) != 2 || math.Abs(again.Cuts[0].WhereKm-120) > 1 || again.Cuts[0].ToS == nil || len(again.Steps) != 6 {
		data, _ := json.Marshal(again.Cuts)
		t.Errorf("cuts %s, %d steps", data, len(again.Steps))
	}
}

// The console is light or dark, and fits a narrow window.
func TestConsoleSchemes(t *testing.T) {
	_, s := served(t, towns(t, "30s"), Guard{})
	light := visitConsole(t, s, "light", 1200, 1000)
	dark := visitConsole(t, s, "dark", 1200, 1000)
	if l, d := light.shoot("console-light"), dark.shoot("console-dark"); l < 0.8 || d > 0.25 {
		t.Errorf("brightness of %.2f in light, %.2f in dark", l, d)
	}
	narrow := visitConsole(t, s, "light", 390, 1000)
	narrow.shoot("console-narrow")
	if wide := ask[int](narrow, "document.documentElement.scrollWidth"); wide > 390 {
		t.Errorf("a window of 390 pixels shows a page of %d", wide)
	}
	light.clean()
	narrow.clean()
}
