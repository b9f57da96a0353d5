package browser

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"github.com/chromedp/chromedp"
)

// imports is a study of eleven rows: an interval of the procedure repeated is too wide for the drawing.
func imports(focal string) []string {
	return []string{"compare", "testdata/french-imports/data.csv", "--equation", "import = doprod + stock + consum", "--rows", "year <= 1959", "--focal", focal}
}

// choose takes another coefficient.
func choose(b *tab, i int) {
	b.Helper()
	b.do(chromedp.Evaluate(fmt.Sprintf(`(() => { const s = document.querySelector("#choose"); s.value = "%d"; s.dispatchEvent(new Event("change")); })()`, i), nil))
}

// drawings lists, for each rung of a document, every drawn element with its numbers, and every text beside it.
const drawings = `(doc => [...doc.querySelectorAll("table.ladder svg.ticks text, tbody.rung:not(.yours)")].map(e => {
  if (e.tagName === "text") return "tick " + parseFloat(e.getAttribute("x")) + " " + e.textContent;
  const shapes = [...e.querySelectorAll("td.axis svg.interval *")].map(s => [s.tagName, s.getAttribute("class"), s.getAttribute("d"), ...["x", "y", "x1", "x2", "y1", "y2", "cx", "cy", "width", "height"].map(a => s.hasAttribute(a) ? parseFloat(s.getAttribute(a)) : "")].join(" "));
  const texts = ["said", "estimate", "se", "bias", "root", "meaning", "kinds", "told", "prior"].map(f => f + ": " + e.querySelector('[data-f="' + f + '"]').textContent + (e.querySelector('[data-f="' + f + '"]').hidden ? " (hidden)" : ""));
  return [...shapes, ...texts].join("\n");
}))`

// TestRedrawAgrees: what the script draws is what the file already held, and is so again after another coefficient and another unit.
func TestRedrawAgrees(t *testing.T) {
	for name, args := range map[string][]string{"demo": {"demo"}, "imports": imports("stock"), "not resampled": append(imports("stock"), "--resamples", "0")} {
		t.Run(name, func(t *testing.T) {
			file := write(t, args...)
			raw, err := os.ReadFile(file)
			if err != nil {
				t.Fatal(err)
			}
			text, err := json.Marshal(strings.Split(string(raw), `<script type="application/json"`)[0])
			if err != nil {
				t.Fatal(err)
			}
			b := open(t, file, "", 1280, 900)
			first := eval[[]string](b, drawings+`(new DOMParser().parseFromString(`+string(text)+`, "text/html"))`)
			same := func(when string) {
				t.Helper()
				drawn := eval[[]string](b, drawings+`(document)`)
				if len(first) < 5 || len(drawn) != len(first) {
					t.Fatalf("%s: %d drawings, the file holds %d", when, len(drawn), len(first))
				}
				for i := range first {
					if first[i] != drawn[i] {
						t.Errorf("%s: the file holds\n%s\nthe script draws\n%s", when, first[i], drawn[i])
					}
				}
			}
			same("at first")
			choose(b, 1)
			b.do(chromedp.Click(`input[name="unit"][value="sd"]`, chromedp.ByQuery))
			if strings.Join(eval[[]string](b, drawings+`(document)`), "\n") == strings.Join(first, "\n") {
				t.Error("another coefficient and unit leave the drawing as it was")
			}
			choose(b, 0)
			b.do(chromedp.Click(`input[name="unit"][value="raw"]`, chromedp.ByQuery))
			same("back again")
			b.quiet()
		})
	}
}

type again struct {
	StandardError, Low, High, SharePositive, ShareNegative *float64
	BiasCorrected                                          struct{ Low, High *float64 }
	Used                                                   int
}

var between = regexp.MustCompile(`lie between (\S+) and (\S+) \(bias-corrected and accelerated: (\S+) to ([^)]+)\)`)

// TestResampledAgree: for every coefficient the resampled standard error, the thin line and the sentence say what results.json says, and
// nothing is drawn where nothing was resampled; the columns under the error curves hold the shares.
func TestResampledAgree(t *testing.T) {
	file := write(t, "demo")
	b := open(t, file, "", 1280, 900)
	raw, err := os.ReadFile(filepath.Join(filepath.Dir(file), "results.json"))
	if err != nil {
		t.Fatal(err)
	}
	var r struct {
		Run          struct{ Resampling struct{ Count int } }
		Alternatives []struct {
			Key, Label   string
			Coefficients []struct {
				Name, Status string
				Estimate     *float64
				PosteriorSD  *float64
				Resampled    *again
			}
			Tuning *struct {
				Parameter string
				Path      []struct{ Value float64 }
				Resampled struct{ Shares []float64 }
			}
		}
	}
	if err := json.Unmarshal(raw, &r); err != nil {
		t.Fatal(err)
	}
	lines, priors := 0, 0
	for i, name := range eval[[]string](b, `[...document.querySelector("#choose").options].map(o => o.textContent)`) {
		choose(b, i)
		rows := eval[[][]string](b, `[...document.querySelectorAll("tbody.rung:not(.yours)")].map(t => { const f = (n) => t.querySelector('[data-f="' + n + '"]').textContent; return [[...t.querySelectorAll('[data-f="se"] small')].map(s => s.textContent).find(s => s.startsWith("resampled ")) || "", f("told"), f("prior"), String(t.querySelectorAll("line.again").length), String(t.querySelectorAll("line.cap, svg.arrow").length)]; })`)
		for k, a := range r.Alternatives {
			for _, c := range a.Coefficients {
				if c.Name != name {
					continue
				}
				what, row := a.Label+", "+name, rows[k]
				if c.Resampled == nil {
					if row[0]+row[1] != "" || row[3] != "0" {
						t.Errorf("%s: nothing was resampled, yet it shows %q", what, row)
					}
					continue
				}
				lines++
				agree(t, what+", resampled", strings.TrimPrefix(row[0], "resampled "), c.Resampled.StandardError)
				if row[3] != "1" || row[4] != "2" {
					t.Errorf("%s: %s thin lines with %s ends", what, row[3], row[4])
				}
				m := between.FindStringSubmatch(row[1])
				if m == nil {
					t.Errorf("%s: the sentence is %q", what, row[1])
					continue
				}
				for n, want := range []*float64{c.Resampled.Low, c.Resampled.High, c.Resampled.BiasCorrected.Low, c.Resampled.BiasCorrected.High} {
					agree(t, what+", limits", m[n+1], want)
				}
				if left := r.Run.Resampling.Count - c.Resampled.Used; left > 0 != strings.Contains(row[1], "had no value of its own") {
					t.Errorf("%s: %d resamples without a value, and the sentence is %q", what, left, row[1])
				}
				if c.PosteriorSD != nil {
					priors++
					agree(t, what+", posterior", strings.TrimSuffix(row[2][strings.LastIndex(row[2], " ")+1:], "."), c.PosteriorSD)
				} else if row[2] != "" {
					t.Errorf("%s: no prior is implied, yet it says %q", what, row[2])
				}
			}
		}
	}
	if lines < 100 || priors < 5 {
		t.Errorf("only %d thin lines and %d posteriors were compared", lines, priors)
	}
	for _, a := range r.Alternatives {
		if a.Tuning == nil {
			continue
		}
		drawn := eval[[][]float64](b, fmt.Sprintf(`echarts.getInstanceByDom(document.querySelector('[data-chart="%s-error"]')).getOption().series.find(s => s.id === "chosen").data.map(d => d.value)`, a.Key))
		table := eval[[]string](b, fmt.Sprintf(`[...document.querySelectorAll('[aria-label="%s: the numbers along the path"] tbody tr')].map(r => r.lastElementChild.textContent)`, a.Label))
		if len(table) != len(a.Tuning.Path) {
			t.Fatalf("%s: %d rows in the table, %d on the path", a.Label, len(table), len(a.Tuning.Path))
		}
		skip := len(a.Tuning.Path) - len(drawn)
		for i, d := range drawn {
			if math.Abs(d[1]-a.Tuning.Resampled.Shares[i+skip]) > 1e-6 || math.Abs(d[0]-a.Tuning.Path[i+skip].Value) > 1e-9 {
				t.Errorf("%s: column %d is %v, results.json says %v", a.Label, i, d, a.Tuning.Resampled.Shares[i+skip])
			}
			if (table[i+skip] == "none") != (a.Tuning.Resampled.Shares[i+skip] == 0) {
				t.Errorf("%s: the table says %q of a share of %v", a.Label, table[i+skip], a.Tuning.Resampled.Shares[i+skip])
			}
		}
		// A value stands at the same place in both grids.
		apart := eval[float64](b, fmt.Sprintf(`(() => { const c = echarts.getInstanceByDom(document.querySelector('[data-chart="%s-error"]')), v = %v; return Math.abs(c.convertToPixel({xAxisIndex: 0}, v) - c.convertToPixel({xAxisIndex: 1}, v)); })()`, a.Key, a.Tuning.Path[len(a.Tuning.Path)-1].Value))
		if apart > 0.01 {
			t.Errorf("%s: the curve and its columns are %.2f px apart", a.Label, apart)
		}
	}
	b.quiet()
}

// TestCutLine: a thin line that is too wide ends in an arrow within its cell and says how far it goes; the legend explains both lines in
// words; on a phone too.
func TestCutLine(t *testing.T) {
	file := write(t, imports("stock")...)
	for _, width := range []int64{1280, 360} {
		b := open(t, file, "", width, 900)
		cut := eval[[]string](b, `[...document.querySelectorAll("tbody.rung:not([hidden])")].filter(t => t.querySelector("svg.arrow")).map(t => t.querySelector('[data-f="said"]').textContent)`)
		if len(cut) == 0 {
			t.Fatal("no thin line is cut: another study is needed here")
		}
		for _, said := range cut {
			if !strings.Contains(said, "the thin line goes on to −") {
				t.Errorf("a cut line says %q", said)
			}
		}
		if out := eval[int](b, `[...document.querySelectorAll("svg.arrow path, line.cap, line.again")].filter(p => { if (p.closest(".legend") || !p.checkVisibility()) return false; const r = p.getBoundingClientRect(), c = p.closest("td").getBoundingClientRect(); return r.left < c.left - 1 || r.right > c.right + 1; }).length`); out != 0 {
			t.Errorf("%d ends stand outside their cell at %d px", out, width)
		}
		if words := eval[string](b, `document.querySelector(".legend").innerText`); !strings.Contains(words, "Thick line and dot") || !strings.Contains(words, "Thin line below") || !strings.Contains(words, "An arrow") {
			t.Errorf("the legend says %q", words)
		}
		if w := eval[int64](b, `document.documentElement.scrollWidth`); w > width {
			t.Errorf("the page is %d px wide at %d px: %s", w, width, wide(b))
		}
		b.quiet()
		b.picture(fmt.Sprintf("cut-%d", width))
	}
}

// TestNotResampled: with resampling off the page has one interval a rung, and says that nothing was resampled.
func TestNotResampled(t *testing.T) {
	b := open(t, write(t, append(imports("consum"), "--resamples", "0")...), "", 1280, 900)
	if n := eval[int](b, `document.querySelectorAll(".again, .arrow, #ladder .legend, .readings").length`); n != 0 {
		t.Errorf("%d marks of resamples without resamples", n)
	}
	if n := eval[int](b, `[...document.querySelectorAll("tbody.rung td.axis svg")].filter(s => s.getAttribute("height") !== "26").length`); n != 0 {
		t.Errorf("%d rungs have room for a second line", n)
	}
	if text := eval[string](b, `document.querySelector("#ladder").innerText`); !strings.Contains(text, "The procedure was not resampled.") {
		t.Error("the ladder does not say that nothing was resampled")
	}
	b.quiet()
	b.picture("not-resampled-desktop")
}
