package browser

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/chromedp/cdproto/emulation"
	"github.com/chromedp/cdproto/runtime"
	"github.com/chromedp/chromedp"
	"github.com/chromedp/chromedp/kb"

	"modelmend/fit/dataset"
	"modelmend/fit/equation"
)

// rungText reads one rung's cells.
func rungText(b *tab, rung int, field string) string {
	b.Helper()
	return eval[string](b, fmt.Sprintf(`document.querySelector('tbody.rung:not(.yours)[data-rung="%d"] [data-f="%s"]').textContent`, rung, field))
}

// yours counts the rungs that sliders have added.
func yours(b *tab) int {
	b.Helper()
	return eval[int](b, `document.querySelectorAll("tbody.yours:not([hidden])").length`)
}

func hash(b *tab) string {
	b.Helper()
	return eval[string](b, `location.hash`)
}

// TestMouseAndKeyboard: each control does its work by mouse and by keyboard, and the address keeps what was chosen.
func TestMouseAndKeyboard(t *testing.T) {
	file := write(t, "demo")
	b := open(t, file, "", 1280, 900)

	// Choosing a coefficient, by keyboard: the select takes focus and the arrow moves on.
	before := rungText(b, 0, "estimate")
	b.do(chromedp.Focus("#choose"), chromedp.SendKeys("#choose", kb.ArrowDown))
	if after := rungText(b, 0, "estimate"); after == before {
		t.Errorf("the coefficient stays %s after choosing another", after)
	}
	if !strings.Contains(hash(b), "c=1") {
		t.Errorf("the address is %q", hash(b))
	}
	if name := eval[string](b, `document.querySelector("caption [data-shown]").textContent`); name != eval[string](b, `document.querySelector("#choose").selectedOptions[0].textContent`) {
		t.Errorf("the caption speaks of %q", name)
	}
	b.do(chromedp.SendKeys("#choose", kb.ArrowUp))
	if got := rungText(b, 0, "estimate"); got != before {
		t.Errorf("back at the first coefficient: %s, want %s", got, before)
	}

	// Units, by mouse: per standard deviation and back.
	b.do(chromedp.Click(`input[name="unit"][value="sd"]`, chromedp.ByQuery))
	if got := rungText(b, 0, "estimate"); got == before || !strings.Contains(hash(b), "u=sd") {
		t.Errorf("units: %s, address %q", got, hash(b))
	}
	matrix := `document.querySelector('table.matrix td[data-a="0"][data-c="1"]').firstChild.textContent`
	if got := eval[string](b, matrix); got != rungText(b, 0, "estimate") {
		t.Errorf("the matrix says %s, the ladder %s", got, rungText(b, 0, "estimate"))
	}
	b.do(chromedp.Focus(`input[name="unit"][value="sd"]`, chromedp.ByQuery), chromedp.KeyEvent(kb.ArrowLeft))
	if got := rungText(b, 0, "estimate"); got != before {
		t.Errorf("raw units again: %s, want %s", got, before)
	}

	// Sorting, by mouse and by keyboard, with aria-sort.
	first := `document.querySelector("tbody.rung:not([hidden]) .label").textContent`
	listed := eval[string](b, first)
	b.do(chromedp.Click(`th[data-sort="se"] button`, chromedp.ByQuery))
	if got := eval[string](b, `document.querySelector('th[data-sort="se"]').getAttribute("aria-sort")`); got != "ascending" {
		t.Errorf("aria-sort is %q", got)
	}
	if got := eval[string](b, first); got == listed {
		t.Errorf("sorting by standard error leaves %q first", got)
	}
	b.do(chromedp.Focus(`th[data-sort="se"] button`, chromedp.ByQuery), chromedp.KeyEvent(kb.Enter))
	if got := eval[string](b, `document.querySelector('th[data-sort="se"]').getAttribute("aria-sort")`); got != "descending" {
		t.Errorf("aria-sort is %q after a second press", got)
	}
	b.do(chromedp.KeyEvent(" "))
	if got := eval[string](b, first); got != listed {
		t.Errorf("the third press gives %q first, want the listed order", got)
	}

	// Hiding rungs, by keyboard.
	b.do(chromedp.Focus(`.pick summary`, chromedp.ByQuery), chromedp.KeyEvent(kb.Enter), chromedp.Focus(`input[data-rung="1"]`, chromedp.ByQuery), chromedp.KeyEvent(" "))
	if !eval[bool](b, `document.querySelector('tbody.rung[data-rung="1"]').hidden`) || !strings.Contains(hash(b), "h=1") {
		t.Errorf("rung 1 is not hidden; address %q", hash(b))
	}
	b.do(chromedp.Click("#all"))
	if eval[bool](b, `document.querySelector('tbody.rung[data-rung="1"]').hidden`) {
		t.Error("show all leaves rung 1 hidden")
	}

	// Sliders add a rung: by keyboard for the penalty, by mouse for the components.
	ridge := eval[string](b, `[...document.querySelectorAll("[data-slider]")].pop().dataset.slider`)
	components := eval[string](b, `document.querySelector("[data-slider]").dataset.slider`)
	if yours(b) != 0 {
		t.Error("a rung of the reader's choice stands there before any slider moved")
	}
	b.do(chromedp.Focus("#slider-"+ridge), chromedp.KeyEvent(kb.ArrowRight), chromedp.KeyEvent(kb.ArrowRight))
	if yours(b) != 1 {
		t.Errorf("%d rungs of the reader's choice after moving the penalty", yours(b))
	}
	if got := eval[string](b, fmt.Sprintf(`document.querySelector("#slider-%s").getAttribute("aria-valuetext")`, ridge)); !strings.Contains(got, "effective degrees of freedom") {
		t.Errorf("the slider says %q", got)
	}
	var box map[string]float64
	b.do(chromedp.ScrollIntoView("#slider-"+components), chromedp.Evaluate(fmt.Sprintf(`(() => { const r = document.querySelector("#slider-%s").getBoundingClientRect(); return {x: r.x + r.width * 0.4, y: r.y + r.height / 2}; })()`, components), &box))
	b.do(chromedp.MouseClickXY(box["x"], box["y"]))
	if yours(b) != 2 {
		t.Errorf("%d rungs of the reader's choice after a click on the components", yours(b))
	}
	if !strings.Contains(hash(b), "t"+ridge+"=") || !strings.Contains(hash(b), "t"+components+"=") {
		t.Errorf("the address does not keep the sliders: %q", hash(b))
	}
	kept := hash(b)
	b.do(chromedp.Click(fmt.Sprintf(`[data-reset="%s"]`, ridge), chromedp.ByQuery))
	if yours(b) != 1 {
		t.Errorf("%d rungs after going back to the chosen penalty", yours(b))
	}
	b.do(chromedp.Click(`[data-copy="study"]`, chromedp.ByQuery))
	if got := eval[string](b, `document.querySelector("#live").textContent`); got == "" {
		t.Error("copying says nothing")
	}
	b.quiet()

	// The address restores the view.
	c := open(t, file, kept, 1280, 900)
	if yours(c) != 2 {
		t.Errorf("a shared address shows %d rungs of the reader's choice, want 2", yours(c))
	}
	c.quiet()
}

// TestEveryControlIsReached: the Tab key reaches every control, and each shows its focus.
func TestEveryControlIsReached(t *testing.T) {
	b := open(t, write(t, "demo"), "", 1280, 900)
	want := eval[int](b, `[...document.querySelectorAll("a[href], button, select, input, summary, [tabindex='0']")].filter(e => e.checkVisibility() && !(e.type === "radio" && !e.checked)).length`)
	reached := map[string]bool{}
	for range want + 5 {
		b.do(chromedp.KeyEvent(kb.Tab))
		id := eval[string](b, `(() => { const all = [...document.querySelectorAll("*")]; const e = document.activeElement; const s = getComputedStyle(e); return e === document.body ? "" : all.indexOf(e) + (s.outlineStyle === "none" ? " no focus ring" : ""); })()`)
		if strings.Contains(id, "no focus") {
			t.Errorf("element %s shows no focus", id)
		}
		if id != "" {
			reached[id] = true
		}
	}
	if len(reached) < want {
		t.Errorf("the Tab key reaches %d of %d controls", len(reached), want)
	}
}

// TestNumbersAgree: every rung and column of the ladder says what results.json says, for every coefficient.
func TestNumbersAgree(t *testing.T) {
	file := write(t, "demo")
	b := open(t, file, "", 1280, 900)
	raw, err := os.ReadFile(filepath.Join(filepath.Dir(file), "results.json"))
	if err != nil {
		t.Fatal(err)
	}
	var r struct {
		Alternatives []struct {
			Label        string
			Coefficients []struct {
				Name                                                            string
				Status                                                          string
				Estimate, StandardError, EstimatedBias, EstimatedMSE, Low, High *float64
			}
			OutOfSample struct{ RMSE float64 }
		}
	}
	if err := json.Unmarshal(raw, &r); err != nil {
		t.Fatal(err)
	}
	options := eval[[]string](b, `[...document.querySelector("#choose").options].map(o => o.textContent)`)
	checked := 0
	for i, name := range options {
		b.do(chromedp.Evaluate(fmt.Sprintf(`(() => { const s = document.querySelector("#choose"); s.value = "%d"; s.dispatchEvent(new Event("change")); })()`, i), nil))
		rows := eval[[][]string](b, `[...document.querySelectorAll("tbody.rung:not(.yours)")].map(t => [t.querySelector(".label").textContent, ...["estimate", "se", "bias", "root"].map(f => { const c = t.querySelector('[data-f="' + f + '"]'); return c.firstChild ? c.firstChild.textContent : ""; })])`)
		for k, a := range r.Alternatives {
			for _, c := range a.Coefficients {
				if c.Name != name {
					continue
				}
				checked++
				row := rows[k]
				if row[0] != a.Label {
					t.Fatalf("rung %d is %q, want %q", k, row[0], a.Label)
				}
				agree(t, a.Label+", "+name+", estimate", row[1], c.Estimate)
				agree(t, a.Label+", "+name+", standard error", row[2], c.StandardError)
				if c.Status != "different quantity" {
					agree(t, a.Label+", "+name+", bias", row[3], c.EstimatedBias)
					if c.EstimatedMSE != nil {
						root := math.Sqrt(*c.EstimatedMSE)
						agree(t, a.Label+", "+name+", root", row[4], &root)
					}
				}
			}
		}
	}
	if checked < 100 {
		t.Errorf("only %d numbers were compared", checked)
	}
}

// agree reads a figure as a person would and compares it to three digits.
func agree(t *testing.T, what, shown string, want *float64) {
	t.Helper()
	if want == nil {
		if shown != "–" {
			t.Errorf("%s: shows %q for a missing number", what, shown)
		}
		return
	}
	var got float64
	if _, err := fmt.Sscanf(strings.ReplaceAll(shown, "−", "-"), "%g", &got); err != nil {
		t.Errorf("%s: %q is no number", what, shown)
		return
	}
	if math.Abs(got-*want) > 0.0051*math.Abs(*want)+1e-12 {
		t.Errorf("%s: shows %v, results.json says %v", what, got, *want)
	}
}

// TestHostileNames: names that attack are text; nothing runs, nothing is polluted.
func TestHostileNames(t *testing.T) {
	table, err := dataset.ReadFile(filepath.Join(root, "testdata", "hostile", "names.csv"))
	if err != nil {
		t.Fatal(err)
	}
	var parts []string
	for _, c := range table.Columns[1:] {
		parts = append(parts, equation.Quote(c.Name))
	}
	file := write(t, "compare", "testdata/hostile/names.csv", "--show-small-cells", "--equation", "y = "+strings.Join(parts, " + "))
	b := open(t, file, "", 1280, 900)
	b.do(chromedp.Evaluate(`window.alert = () => { window.attacked = true; }`, nil))
	options := eval[[]string](b, `[...document.querySelector("#choose").options].map(o => o.textContent)`)
	for _, c := range table.Columns[1:] {
		if c.Kind == dataset.Text {
			continue
		}
		found := false
		for _, o := range options {
			found = found || o == c.Name
		}
		if !found {
			t.Errorf("the name %.40q is not among the coefficients as text", c.Name)
		}
	}
	for i := range options {
		b.do(chromedp.Evaluate(fmt.Sprintf(`(() => { const s = document.querySelector("#choose"); s.value = "%d"; s.dispatchEvent(new Event("change")); })()`, i), nil))
	}
	// Tool tips of both heat strips.
	for _, name := range []string{"shares", "correlations"} {
		var at map[string]float64
		b.do(chromedp.ScrollIntoView(fmt.Sprintf(`[data-chart="%s"]`, name), chromedp.ByQuery), chromedp.Evaluate(fmt.Sprintf(`(() => { const r = document.querySelector('[data-chart="%s"]').getBoundingClientRect(); return {x: r.x + r.width * 0.6, y: r.y + r.height * 0.6}; })()`, name), &at))
		b.do(chromedp.MouseEvent("mouseMoved", at["x"], at["y"]), chromedp.MouseEvent("mouseMoved", at["x"]+3, at["y"]+3))
	}
	if eval[bool](b, `window.attacked === true`) {
		t.Error("a name ran as script")
	}
	if got := eval[string](b, `Object.getOwnPropertyNames(Object.prototype).filter(n => n === "prev" || n === "next").join()`); got != "" {
		t.Errorf("Object.prototype has gained %s", got)
	}
	if n := eval[int](b, `document.querySelectorAll("img, body b, svg image").length`); n != 0 {
		t.Errorf("%d elements were made of names", n)
	}
	if n := eval[int](b, `document.querySelectorAll("script").length`); n != 3 {
		t.Errorf("%d scripts, want 3", n)
	}
	b.picture("hostile-desktop")
	b.quiet()
	phone := open(t, file, "", 360, 800)
	if w := eval[int](phone, `document.documentElement.scrollWidth`); w > 360 {
		t.Errorf("with hostile names the page is %d px wide on a phone of 360 px: %s", w, wide(phone))
	}
	phone.quiet()
}

// TestAccessible runs the axe audit in light and dark, on a desk and on a phone.
func TestAccessible(t *testing.T) {
	path := os.Getenv("AXE_JS")
	if path == "" {
		path = filepath.Join("node_modules", "axe-core", "axe.min.js")
	}
	axe, err := os.ReadFile(path)
	if err != nil {
		t.Fatalf("the audit is missing (npm ci in .ci/browser brings it): %v", err)
	}
	file := write(t, "demo")
	for name, c := range map[string]struct {
		width int64
		media []*emulation.MediaFeature
	}{"light": {1280, nil}, "dark": {1280, []*emulation.MediaFeature{dark()}}, "phone": {360, nil}} {
		t.Run(name, func(t *testing.T) {
			b := open(t, file, "", c.width, 900, c.media...)
			b.do(chromedp.Evaluate(`document.querySelectorAll("details").forEach(d => { d.open = true; })`, nil), chromedp.Evaluate(string(axe), nil))
			b.do(chromedp.Evaluate(`axe.run({runOnly: ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa", "best-practice"]}).then(r => { window.audit = {passes: r.passes.length, violations: r.violations.map(v => v.id + ": " + v.nodes.slice(0, 4).map(n => n.html.slice(0, 120) + " " + (n.any[0] ? n.any[0].message : "")).join(" | "))}; })`, nil,
				func(p *runtime.EvaluateParams) *runtime.EvaluateParams { return p.WithAwaitPromise(true) }))
			if n := eval[int](b, `window.audit.passes`); n < 20 {
				t.Errorf("only %d rules passed: was the page seen?", n)
			}
			for _, v := range eval[[]string](b, `window.audit.violations`) {
				t.Error(v)
			}
		})
	}
}

// TestWithoutScript: a readable report with every table.
func TestWithoutScript(t *testing.T) {
	base, err := browser()
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := chromedp.NewContext(base)
	defer cancel()
	var text string
	var controls int
	if err := chromedp.Run(ctx, emulation.SetScriptExecutionDisabled(true), chromedp.Navigate("file://"+write(t, "demo")),
		chromedp.WaitReady("#record"), emulation.SetScriptExecutionDisabled(false),
		chromedp.Evaluate(`document.body.innerText`, &text), chromedp.Evaluate(`[...document.querySelectorAll("button, select, input")].filter(e => e.checkVisibility()).length`, &controls)); err != nil {
		t.Fatal(err)
	}
	for _, want := range []string{"Leave it alone", "Drop glazing", "How they predict", "If this were the truth", "Every truth in one table", "Classical: errors are independent", "Run record", "data custodian"} {
		if !strings.Contains(text, want) {
			t.Errorf("without script the page lacks %q", want)
		}
	}
	if controls != 0 {
		t.Errorf("%d controls that cannot work are shown", controls)
	}
}

// TestCursorsAreDrawn: each tuning chart shows where its slider stands, on the logarithmic axis of the penalty too.
func TestCursorsAreDrawn(t *testing.T) {
	b := open(t, write(t, "demo"), "", 1280, 900)
	n := eval[int](b, `[...document.querySelectorAll(".tuned .chart")].filter(box => echarts.getInstanceByDom(box).getOption().series.some(s => s.markLine && s.markLine.data && s.markLine.data.length && s.markLine.precision > 10)).length`)
	if all := eval[int](b, `document.querySelectorAll(".tuned .chart").length`); n != all || n == 0 {
		t.Errorf("%d of %d tuning charts have a cursor", n, all)
	}
	// The line itself: a path of the accent colour that runs straight down, in each drawing.
	drawn := eval[int](b, `(() => { const accent = getComputedStyle(document.documentElement).getPropertyValue("--accent").trim(); return [...document.querySelectorAll(".tuned .chart")].filter(box => [...box.querySelectorAll("path")].some(p => { const m = /^M(\S+) (\S+)L(\S+) (\S+)$/.exec(p.getAttribute("d") || ""); return p.getAttribute("stroke") === accent && m && m[1] === m[3] && m[2] !== m[4]; })).length; })()`)
	if drawn != n {
		t.Errorf("a cursor is drawn in %d of %d charts", drawn, n)
	}
}
