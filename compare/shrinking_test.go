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

// TestWithoutStandardErrors: what has no formula says so everywhere and is resampled all the same; how often a regressor is kept is one less the share of
// resamples in which it is exactly zero, and said where it changes from resample to resample.
func TestWithoutStandardErrors(t *testing.T) {
	raw, err := os.ReadFile(filepath.Join("..", "testdata", "hald", "data.csv"))
	if err != nil {
		t.Fatal(err)
	}
	study := newStudy("heat = x1_c3a + x2_c3s + x3_c4af + x4_c2s")
	study.Focal, study.Resamples, study.Simulations = []string{"x1_c3a"}, 200, 50
	study.Errors = compare.ErrorSpec{Kind: compare.Robust}
	c := runStudy(t, text(t, string(raw)), study)
	for _, key := range []string{"elastic-net", "partial-least-squares"} {
		a := find(t, c, key)
		if a.Covariance != nil || a.NoCovariance() != a.Fitted.NoErrors || a.Fitted.NoErrors == "" {
			t.Errorf("%s: covariance %v, reason %q", key, a.Covariance, a.NoCovariance())
		}
		for _, k := range a.Coefficients {
			if !math.IsNaN(k.SE) || !math.IsNaN(k.MSE) || k.SEReason == "" || k.Resampled == nil || !(k.Resampled.SE > 0) {
				t.Errorf("%s, %s: %+v", key, k.Name, k)
			}
		}
		for _, s := range a.Simulated {
			if !math.IsNaN(s.Coverage) || !(s.RMSE > 0) {
				t.Errorf("%s, %s: coverage %v, root mean squared error %v", key, s.Truth, s.Coverage, s.RMSE)
			}
		}
		for _, p := range c.Path(a) {
			for _, k := range p.Coefficients {
				if !math.IsNaN(k.SE) || math.IsNaN(k.Estimate) {
					t.Errorf("%s: step %+v", key, k)
				}
			}
		}
	}
	net := find(t, c, "elastic-net")
	between := false
	for _, k := range net.Coefficients[1:] {
		r := k.Resampled
		if z := r.Zero(); math.Abs(z+r.Positive+r.Negative-1) > 1e-9 {
			t.Errorf("%s: shares %v, %v and %v", k.Name, r.Positive, r.Negative, z)
		} else if z > 0 && z < 1 {
			between = true
		}
	}
	said := slices.ContainsFunc(net.Description.Notes, func(n remedy.Note) bool { return n.Code == "kept-in-resamples" })
	if !between || !said {
		t.Errorf("some regressor kept in some resamples only: %v; said: %v", between, said)
	}
	if k := find(t, c, "as-is"); slices.ContainsFunc(k.Description.Notes, func(n remedy.Note) bool { return n.Code == "kept-in-resamples" }) {
		t.Error("the model left alone keeps everything, yet it is said how often")
	}
}
