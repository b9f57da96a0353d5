package compare_test

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"slices"
	"testing"

	"modelmend/compare"
	"modelmend/remedy"
)

// shrinking is testdata/shrinking: values of scikit-learn, made by .ci/reference/shrinking.py, which states versions and how penalties are translated (the
// library's alpha is the penalty on the correlation form over n, its l1_ratio the mix, both sides standardised to unit length).
type shrinking struct {
	Cases map[string]struct {
		Net []struct {
			Mix, Penalty, Error float64
			Place               int
			Coefficients        []float64
		}
		Partial []struct {
			Components   int
			Error        *float64
			Coefficients []float64
		}
		Double []struct {
			ByY, ByFocal               []int
			Coefficient, StandardError float64
		}
	}
}

// only switches off everything but as-is and one remedy.
func only(key string) []compare.RemedySetting {
	var out []compare.RemedySetting
	for _, r := range remedy.All() {
		if r.Key != "as-is" && r.Key != key {
			out = append(out, compare.RemedySetting{Remedy: r.Key, Off: true})
		}
	}
	return out
}

// level tells whether two lists of coefficients are the same, each beside the larger of its own size and what moves the fit by as much as 1e-9 of the
// spread of y.
func level(t *testing.T, what string, c *compare.Comparison, got []compare.Coefficient, want []float64, rel float64) {
	t.Helper()
	s := c.Problem.Sample
	for j, w := range want[1:] {
		g := got[j+1].Estimate
		small := 1e-2 * math.Sqrt(s.YY.Float()) / s.Scale()[j].Float()
		if math.Abs(g-w) > rel*math.Max(math.Abs(w), small) || (w == 0) != (g == 0) {
			t.Errorf("%s, %s: got %.12g, want %.12g", what, got[j+1].Name, g, w)
		}
	}
}

func TestShrinkingAgainstReferenceLibrary(t *testing.T) {
	raw, err := os.ReadFile(filepath.Join("..", "testdata", "shrinking", "values.json"))
	if err != nil {
		t.Fatal(err)
	}
	var values shrinking
	if err := json.Unmarshal(raw, &values); err != nil || len(values.Cases) != 5 {
		t.Fatalf("%d cases: %v", len(values.Cases), err)
	}
	for name, want := range values.Cases {
		t.Run(name, func(t *testing.T) {
			raw, err := os.ReadFile(filepath.Join("..", "testdata", "reference-library", name+".json"))
			if err != nil {
				t.Fatal(err)
			}
			var l library
			if err := json.Unmarshal(raw, &l); err != nil {
				t.Fatal(err)
			}
			table, names := withFolds(t, l)
			study := newStudy(l.Equation)
			study.Rows = l.Rows
			study.Folds = compare.FoldSpec{Kind: "column", Columns: names}
			for _, mix := range []float64{0.1, 0.5, 1} {
				study.Remedies = append(only("elastic-net"), compare.RemedySetting{Remedy: "elastic-net", Option: "mix", Number: mix})
				c := runStudy(t, table, study)
				a := find(t, c, "elastic-net")
				path := c.Path(a)
				for _, w := range want.Net {
					if w.Mix != mix {
						continue
					}
					what := fmt.Sprintf("mix %g, penalty %g", mix, w.Penalty)
					near(t, what+", the penalty", a.Fitted.Tuning.Values[w.Place], w.Penalty, 1e-12)
					level(t, what, c, path[w.Place].Coefficients, w.Coefficients, 1e-6)
					near(t, what+", constant", path[w.Place].Coefficients[0].Estimate, w.Coefficients[0], 1e-6)
					near(t, what+", error", a.Fitted.Tuning.MSE[w.Place], w.Error, 1e-7)
				}
				for _, k := range a.Coefficients {
					if !math.IsNaN(k.SE) || k.SEReason == "" {
						t.Errorf("%s has a standard error of %v, reason %q", k.Name, k.SE, k.SEReason)
					}
				}
			}
			study.Remedies = only("partial-least-squares")
			c := runStudy(t, table, study)
			a := find(t, c, "partial-least-squares")
			path := c.Path(a)
			for _, w := range want.Partial {
				what := fmt.Sprintf("%d components", w.Components)
				level(t, what, c, path[w.Components].Coefficients, w.Coefficients, 1e-6)
				if w.Error != nil {
					near(t, what+", error", a.Fitted.Tuning.MSE[w.Components], *w.Error, 1e-6)
				}
			}
			for j, w := range want.Double {
				study.Focal, study.Remedies = []string{l.Regressors[j]}, only("select")
				c := runStudy(t, table, study)
				a := find(t, c, "select:double")
				var in []int
				for i, k := range a.Coefficients[1:] {
					if i != j && k.Status == remedy.Estimated {
						in = append(in, i)
					}
				}
				union := append(slices.Clone(w.ByY), w.ByFocal...)
				slices.Sort(union)
				if union = slices.Compact(union); fmt.Sprint(in) != fmt.Sprint(union) {
					t.Errorf("%s: controls %v, want %v", l.Regressors[j], in, union)
				}
				near(t, "double selection, "+l.Regressors[j], a.Coefficients[j+1].Estimate, w.Coefficient, 1e-7)
				near(t, "its standard error", a.Coefficients[j+1].SE, w.StandardError, 1e-7)
			}
		})
	}
}
