package browser

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"github.com/chromedp/chromedp"
	"github.com/chromedp/chromedp/kb"
)

type kinded struct {
	Run struct {
		StandardErrors []struct{ Kind, Text, Warning string }
	}
	Alternatives []struct {
		Label        string
		Coefficients []struct {
			Name, Status string
			Estimate     *float64
			Errors       []struct {
				Kind                                              string
				StandardError, Degrees, TRatio, PValue, Low, High *float64
			}
		}
	}
	Diagnosis struct {
		Ledger []struct {
			Focal  bool
			Others []struct {
				Kind                             string
				StandardError, Factor, Low, High *float64
				ConclusionChanges                bool
			}
		}
	}
}

// TestKinds: under every kind of standard error, errors, ratios and thick lines of every rung are those of results.json; bias, resampled lines and
// out-of-sample errors stay; details list every kind; the matrix follows; keyboard and address work.
func TestKinds(t *testing.T) {
	for name, args := range map[string][]string{"three kinds, time": longley(), "two kinds": {"demo"}} {
		t.Run(name, func(t *testing.T) {
			file := write(t, args...)
			var r kinded
			results(t, file, &r)
			kinds := r.Run.StandardErrors
			b := open(t, file, "", 1280, 900)
			start := eval[[]string](b, drawings+`(document)`)
			stay := `[...document.querySelectorAll("tbody.rung:not(.yours)")].map(t => [...["estimate", "bias", "root", "told", "prior"].map(f => t.querySelector('[data-f="' + f + '"]').textContent), ...[...t.querySelectorAll("small")].map(s => s.textContent).filter(s => s.startsWith("resampled"))].join("|")).join("\n")`
			kept := eval[string](b, stay)
			coefficient := eval[string](b, `document.querySelector("#choose").selectedOptions[0].textContent`)
			checked := 0
			for k, kind := range kinds {
				pick(b, "kind", k)
				if got := eval[string](b, stay); got != kept {
					t.Errorf("%s: what should stay has moved:\n%s\nwas\n%s", kind.Kind, got, kept)
				}
				said := eval[string](b, `document.querySelector("p.kind").innerText`)
				if !strings.Contains(said, kind.Text[1:]) || !strings.Contains(said, strings.TrimPrefix(kind.Warning, "w")) {
					t.Errorf("%s: the line says %q", kind.Kind, said)
				}
				if got := eval[string](b, `document.querySelector("table.ladder [data-kind]").textContent`); got != kind.Kind {
					t.Errorf("the caption speaks of %s, want %s", got, kind.Kind)
				}
				rows := eval[[][]string](b, `[...document.querySelectorAll("tbody.rung:not(.yours)")].map(t => [t.querySelector('[data-f="se"]').firstChild.textContent, (s => s ? s.textContent : "")([...t.querySelectorAll('[data-f="se"] small')].find(s => s.textContent.startsWith("×"))), ...[...t.querySelectorAll('[data-f="kinds"] li')].map(l => l.textContent)])`)
				lines := eval[[][]float64](b, `[...document.querySelectorAll("tbody.rung:not(.yours) td.axis svg")].map(s => { const d = s.querySelector("circle"), r = s.querySelector("rect.bar"); return d && r ? [parseFloat(d.getAttribute("cx")), parseFloat(r.getAttribute("x")), parseFloat(r.getAttribute("width"))] : []; })`)
				matrix := eval[[]string](b, `[...document.querySelectorAll("table.matrix td[data-a]")].map(c => c.dataset.a + " " + c.dataset.c + " " + (c.querySelector("small") ? c.querySelector("small").textContent : ""))`)
				base := math.NaN()
				scale := 0.0
				for i, a := range r.Alternatives {
					for j, c := range a.Coefficients {
						for _, e := range c.Errors {
							if e.Kind != kind.Kind || e.StandardError == nil {
								continue
							}
							what := a.Label + ", " + c.Name + ", " + kind.Kind
							for _, m := range matrix {
								if at := fmt.Sprintf("%d %d ", i, j); strings.HasPrefix(m, at) {
									agree(t, what+", matrix", strings.TrimPrefix(m, at), e.StandardError)
								}
							}
							if c.Name != coefficient {
								continue
							}
							checked++
							agree(t, what+", standard error", rows[i][0], e.StandardError)
							if i == 0 {
								base = *e.StandardError
								scale = lines[0][2] / (*e.High - *e.Low)
							}
							ratio := *e.StandardError / base
							agree(t, what+", ratio", strings.TrimPrefix(rows[i][1], "× "), &ratio)
							if w := scale * (*e.High - *e.Low); math.Abs(lines[i][2]-w) > 0.02 {
								t.Errorf("%s: the line is %.2f %% wide, want %.2f", what, lines[i][2], w)
							}
							if left := lines[i][0] - scale*(*c.Estimate-*e.Low); math.Abs(lines[i][1]-left) > 0.03 {
								t.Errorf("%s: the line begins at %.2f %%, want %.2f", what, lines[i][1], left)
							}
							line := rows[i][2+k]
							if !strings.HasPrefix(line, kind.Kind+": standard error ") {
								t.Errorf("%s: the details say %q", what, line)
								continue
							}
							words := strings.Fields(strings.ReplaceAll(line, ",", ""))
							agree(t, what+", details", words[3], e.StandardError)
							agree(t, what+", t-ratio", words[5], e.TRatio)
							agree(t, what+", degrees", words[7], e.Degrees)
							agree(t, what+", low", words[len(words)-3], e.Low)
							agree(t, what+", high", words[len(words)-1], e.High)
						}
					}
				}
			}
			if checked < 20 {
				t.Errorf("only %d intervals were compared", checked)
			}
			last := len(kinds) - 1
			if !strings.Contains(hash(b), fmt.Sprintf("e=%d", last)) {
				t.Errorf("the address is %q", hash(b))
			}
			c := open(t, file, hash(b), 1280, 900)
			if got, want := rungText(c, 1, "se"), rungText(b, 1, "se"); got != want {
				t.Errorf("a shared address shows %s, want %s", got, want)
			}
			// A rung of the reader's choice holds no error of a kind that its path does not hold.
			slider := eval[string](c, `[...document.querySelectorAll("[data-slider]")].pop().dataset.slider`)
			c.do(chromedp.Focus("#slider-"+slider), chromedp.KeyEvent(kb.ArrowRight))
			if got := eval[string](c, `(e => e.querySelector('[data-f="se"]').textContent + " " + e.querySelector('[data-f="said"]').textContent)(document.querySelector("tbody.yours:not([hidden])"))`); !strings.HasPrefix(got, "– no "+kinds[last].Kind+" standard error along the path") {
				t.Errorf("the reader's rung says %q", got)
			}
			c.quiet()
			b.do(chromedp.Focus(`input[name="kind"]:checked`, chromedp.ByQuery))
			for range last {
				b.do(chromedp.KeyEvent(kb.ArrowLeft))
			}
			if got := eval[[]string](b, drawings+`(document)`); strings.Join(got, "\n") != strings.Join(start, "\n") {
				t.Error("going round the kinds leaves another drawing")
			}
			// The ledger's table.
			for _, l := range r.Diagnosis.Ledger {
				if !l.Focal {
					continue
				}
				rows := eval[[][]string](b, `[...document.querySelector("table.others").querySelectorAll("tbody tr")].map(r => [...r.children].map(c => c.textContent))`)
				for i, o := range l.Others {
					agree(t, o.Kind+", ledger", rows[i][1], o.StandardError)
					agree(t, o.Kind+", factor", rows[i][3], o.Factor)
					agree(t, o.Kind+", low", strings.Split(rows[i][4], " to ")[0], o.Low)
					if rows[i][0] != o.Kind || (rows[i][6] == "yes") != o.ConclusionChanges {
						t.Errorf("the ledger says %q", rows[i])
					}
				}
				break
			}
			b.quiet()
		})
	}
}
