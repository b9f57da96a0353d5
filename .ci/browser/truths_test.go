package browser

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/chromedp/chromedp"
	"github.com/chromedp/chromedp/kb"
)

// results reads the results.json beside a page.
func results(t *testing.T, file string, into any) {
	t.Helper()
	raw, err := os.ReadFile(filepath.Join(filepath.Dir(file), "results.json"))
	if err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(raw, into); err != nil {
		t.Fatal(err)
	}
}

// pick takes a radio button.
func pick(b *tab, name string, i int) {
	b.Helper()
	b.do(chromedp.Click(fmt.Sprintf(`input[name="%s"][value="%d"]`, name, i), chromedp.ByQuery))
}

func longley() []string {
	return []string{"compare", "testdata/longley/data.csv", "--equation", "employed = deflator + gnp + unemployed + armed_forces + population + year", "--focal", "gnp,year", "--time", "year", "--simulations", "200"}
}

// underTruth lists the drawn elements and texts of every row under a truth.
const underTruth = `(doc => [doc.querySelector('[data-f="truth-text"]').textContent, ...[...doc.querySelectorAll("tr[data-truth]")].map(e =>
  [...[...e.querySelectorAll("svg *")].map(s => [s.tagName, s.getAttribute("class"), ...["x", "y", "x1", "x2", "y1", "y2", "cx", "cy", "width", "height"].map(a => s.hasAttribute(a) ? parseFloat(s.getAttribute(a)) : "")].join(" ")),
   ...["said", "coverage", "bias", "sd", "rmse", "wrong"].map(f => f + ": " + e.querySelector('[data-f="' + f + '"]').textContent)].join("\n"))])`

// TestTruths: for every truth and coefficient the rows, and the table of all, say what results.json says; what is drawn at first, and again
// after going round, is what the file held; keyboard and address work.
func TestTruths(t *testing.T) {
	file := write(t, longley()...)
	var r struct {
		Simulations struct {
			Count  int
			Truths []struct{ Name, Text string }
		}
		Alternatives []struct {
			Label      string
			Simulation []struct {
				Truth, Coefficient                                   string
				True, Bias, SD, RMSE, Coverage, CoverageError, Wrong *float64
				WrongSign                                            *float64
			}
		}
	}
	results(t, file, &r)
	raw, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	text, err := json.Marshal(strings.Split(string(raw), `<script type="application/json"`)[0])
	if err != nil {
		t.Fatal(err)
	}
	b := open(t, file, "", 1280, 900)
	first := eval[[]string](b, underTruth+`(new DOMParser().parseFromString(`+string(text)+`, "text/html"))`)
	if len(first) < 5 {
		t.Fatalf("%d rows", len(first))
	}
	same := func(when string) {
		t.Helper()
		for i, got := range eval[[]string](b, underTruth+`(document)`) {
			if got != first[i] {
				t.Errorf("%s: the file holds\n%s\nthe script draws\n%s", when, first[i], got)
			}
		}
	}
	same("at first")
	names := eval[[]string](b, `[...document.querySelector("#truth-of").options].map(o => o.textContent)`)
	if len(names) != 2 || len(r.Simulations.Truths) != 3 {
		t.Fatalf("%d coefficients, %d truths", len(names), len(r.Simulations.Truths))
	}
	table := eval[[][]string](b, `[...document.querySelectorAll("details.all tbody tr")].map(r => [...r.children].map(c => c.firstChild.textContent))`)
	checked := 0
	for n, name := range names {
		b.do(chromedp.Evaluate(fmt.Sprintf(`(() => { const s = document.querySelector("#truth-of"); s.value = "%d"; s.dispatchEvent(new Event("change")); })()`, n), nil))
		for k, truth := range r.Simulations.Truths {
			pick(b, "truth", k)
			rows := eval[[][]string](b, `[...document.querySelectorAll("tr[data-truth]")].map(t => [t.querySelector(".label").textContent, ...["coverage", "bias", "sd", "rmse"].map(f => t.querySelector('[data-f="' + f + '"]').firstChild.textContent), (d => d ? d.getAttribute("cx") : "")(t.querySelector("circle"))])`)
			if got := eval[string](b, `document.querySelector('[data-f="truth-text"]').textContent`); !strings.Contains(got, truth.Text[1:]) || !strings.Contains(got, "the coefficient of "+name) {
				t.Errorf("%s, %s: the text is %q", name, truth.Name, got)
			}
			at := (n*len(r.Simulations.Truths) + k) * (len(r.Alternatives) + 1)
			for i, a := range r.Alternatives {
				for _, s := range a.Simulation {
					if s.Truth != truth.Name || s.Coefficient != name || *s.SD == 0 {
						continue
					}
					what := a.Label + ", " + name + ", " + truth.Name
					if rows[i][0] != a.Label || strings.TrimSpace(table[at+1+i][0]) != a.Label {
						t.Fatalf("%s: the rows are of %s and %s", what, rows[i][0], table[at+1+i][0])
					}
					checked++
					if s.Coverage == nil { // no interval given the tuning, so nothing to count
						if rows[i][1] != "–" || rows[i][5] != "" {
							t.Errorf("%s: there is no coverage; the row says %q and has a dot at %q", what, rows[i][1], rows[i][5])
						}
						continue
					}
					share := 100 * *s.Coverage
					agree(t, what+", coverage", strings.TrimSuffix(rows[i][1], "\u00a0%"), &share)
					agree(t, what+", bias", rows[i][2], s.Bias)
					agree(t, what+", sd", rows[i][3], s.SD)
					agree(t, what+", rmse", rows[i][4], s.RMSE)
					var cx float64
					if _, err := fmt.Sscanf(rows[i][5], "%g%%", &cx); err != nil || math.Abs(cx-(2+96**s.Coverage)) > 0.006 {
						t.Errorf("%s: the dot stands at %s", what, rows[i][5])
					}
					for c := range 4 {
						if table[at+1+i][c+1] != rows[i][c+1] {
							t.Errorf("%s: the table says %s, the row %s", what, table[at+1+i][c+1], rows[i][c+1])
						}
					}
				}
			}
		}
	}
	if checked < 50 {
		t.Errorf("only %d rows were compared", checked)
	}
	if h := hash(b); !strings.Contains(h, "w=2") || !strings.Contains(h, "v=1") {
		t.Errorf("the address is %q", h)
	}
	c := open(t, file, hash(b), 1280, 900)
	if got, want := eval[[]string](c, underTruth+`(document)`), eval[[]string](b, underTruth+`(document)`); strings.Join(got, "\n") != strings.Join(want, "\n") {
		t.Error("a shared address shows another truth")
	}
	c.quiet()
	b.do(chromedp.Evaluate(`(() => { const s = document.querySelector("#truth-of"); s.value = "0"; s.dispatchEvent(new Event("change")); })()`, nil))
	b.do(chromedp.Focus(`input[name="truth"]:checked`, chromedp.ByQuery), chromedp.KeyEvent(kb.ArrowLeft), chromedp.KeyEvent(kb.ArrowLeft))
	same("back again")
	b.quiet()

	phone := open(t, file, "", 360, 800)
	if out := eval[int](phone, `[...document.querySelectorAll("tr[data-truth] svg *")].filter(p => { const r = p.getBoundingClientRect(); return r.left < 0 || r.right > 361; }).length`); out != 0 {
		t.Errorf("%d parts stand outside a phone", out)
	}
	if w := eval[int](phone, `document.documentElement.scrollWidth`); w > 360 {
		t.Errorf("the page is %d px wide on a phone: %s", w, wide(phone))
	}
}

// TestNothingSimulated: the reason in one line, and nothing to choose.
func TestNothingSimulated(t *testing.T) {
	b := open(t, write(t, append(imports("stock"), "--simulations", "0")...), "", 1280, 900)
	if text := eval[string](b, `document.querySelector("#truths").innerText`); !strings.Contains(text, "Nothing was simulated: the study asks for no simulated samples.") {
		t.Errorf("the part says %q", text)
	}
	if n := eval[int](b, `document.querySelectorAll("#truths table, #truths input").length`); n != 0 {
		t.Errorf("%d tables and choices without samples", n)
	}
	b.quiet()
}
