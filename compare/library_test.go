package compare_test

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"modelmend/compare"
	"modelmend/fit/dataset"
)

// library is a file of testdata/reference-library: values of numpy, scipy and scikit-learn, made by the script in .ci/reference; each file
// states the versions and the command.
type library struct {
	Library, Command, Data, Equation, Rows string
	Regressors                             []string
	Assignment                             [][]int
	Grid                                   []float64
	LeastSquares                           struct{ Coefficients, StandardErrors, VIF []float64 }
	Ridge                                  []struct {
		Penalty, Degrees float64
		Coefficients     []float64
	}
	Components [][]float64
	Folds      struct {
		AsIs  []float64 `json:"as-is"`
		Ridge []struct {
			Penalty float64
			MSE     []float64
		}
		Components [][]float64
		Drop       [][]float64
	}
	Nested map[string]struct {
		Chosen     []int
		MSE        []float64
		RMSE, R2   float64
		Difference []float64
	}
	AsIs struct{ RMSE, R2 float64 }
}

// withFolds appends the library's fold assignment to the data as columns, so that both use the same folds.
func withFolds(t *testing.T, l library) (*dataset.Table, []string) {
	t.Helper()
	raw, err := os.ReadFile(filepath.Join("..", "testdata", l.Data, "data.csv"))
	if err != nil {
		t.Fatal(err)
	}
	lines := strings.Split(strings.TrimRight(strings.ReplaceAll(string(raw), "\r", ""), "\n"), "\n")
	var names []string
	used := len(l.Assignment[0])
	for r := range l.Assignment {
		names = append(names, fmt.Sprintf("fold%d", r))
		lines[0] += "," + names[r]
		for i := 1; i < len(lines); i++ {
			f := 0 // rows outside the sample
			if i <= used {
				f = l.Assignment[r][i-1]
			}
			lines[i] += fmt.Sprintf(",%d", f)
		}
	}
	return text(t, strings.Join(lines, "\n")+"\n"), names
}

// place finds the library's split for one of ours: folds are numbered by first appearance here, by label there.
func place(c *compare.Comparison, l library, f compare.Fold) int {
	k := 0
	for r := range f.Repeat {
		k += c.Plan.Counts[r]
	}
	for i := range c.Plan.Cell {
		if c.Plan.Of(f.Repeat, i) == f.Fold {
			return k + l.Assignment[f.Repeat][i]
		}
	}
	return -1
}

func TestAgainstReferenceLibrary(t *testing.T) {
	files, err := filepath.Glob(filepath.Join("..", "testdata", "reference-library", "*.json"))
	if err != nil || len(files) != 5 {
		t.Fatalf("%d files: %v", len(files), err)
	}
	for _, file := range files {
		t.Run(strings.TrimSuffix(filepath.Base(file), ".json"), func(t *testing.T) {
			raw, err := os.ReadFile(file)
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
			c := runStudy(t, table, study)
			if fmt.Sprint(c.Problem.Names) != fmt.Sprint(l.Regressors) {
				t.Fatalf("regressors %v, want %v", c.Problem.Names, l.Regressors)
			}
			// The library works in float64 on rows: its digits fall with the condition number.
			rel := 1e-8
			a := find(t, c, "as-is")
			for j, k := range a.Coefficients {
				near(t, "least squares, "+k.Name, k.Estimate, l.LeastSquares.Coefficients[j], rel)
				if j > 0 {
					near(t, "standard error, "+k.Name, k.SE, l.LeastSquares.StandardErrors[j-1], rel)
					near(t, "inflation factor, "+k.Name, c.Diagnosis.VIF[j-1], l.LeastSquares.VIF[j-1], rel)
				}
			}
			for i, v := range l.Grid {
				near(t, "penalty grid", c.Problem.Penalties[i], v, 1e-9)
			}
			near(t, "as-is, out-of-sample error", a.Out.RMSE, l.AsIs.RMSE, rel)
			near(t, "as-is, out-of-sample R2", a.Out.R2, l.AsIs.R2, rel)
			for _, f := range a.Out.Folds {
				near(t, "as-is, fold", f.MSE, l.Folds.AsIs[place(c, l, f)], rel)
			}
			for j, name := range c.Problem.Names {
				if !c.Problem.Tangled[j] {
					continue
				}
				for _, f := range find(t, c, "drop:"+name).Out.Folds {
					near(t, "drop "+name+", fold", f.MSE, l.Folds.Drop[j][place(c, l, f)], rel)
				}
			}
			comparePaths(t, c, l, rel)
			for _, key := range []string{"ridge", "components"} {
				alt, want := find(t, c, key), l.Nested[key]
				for _, f := range alt.Out.Folds {
					k := place(c, l, f)
					value := float64(want.Chosen[k])
					if key == "ridge" {
						value = l.Grid[want.Chosen[k]]
					}
					if math.Abs(f.Chosen-value) > 1e-8*value {
						t.Errorf("%s, split %d: chose %v, library %v", key, k, f.Chosen, value)
					}
					near(t, key+", fold", f.MSE, want.MSE[k], rel)
				}
				near(t, key+", out-of-sample error", alt.Out.RMSE, want.RMSE, rel)
				near(t, key+", out-of-sample R2", alt.Out.R2, want.R2, rel)
				near(t, key+", difference", alt.Out.Difference.Estimate, want.Difference[0], 1e-6)
				near(t, key+", lower limit", alt.Out.Difference.Low, want.Difference[1], 1e-6)
				near(t, key+", upper limit", alt.Out.Difference.High, want.Difference[2], 1e-6)
			}
			if fixed := l.Folds.Ridge[1]; true {
				study.Remedies = []compare.RemedySetting{{Remedy: "ridge", Option: "penalty", Number: fixed.Penalty, Names: []string{"0.04"}}}
				r := find(t, runStudy(t, table, study), "ridge")
				for _, f := range r.Out.Folds {
					near(t, "ridge at a fixed penalty, fold", f.MSE, fixed.MSE[place(c, l, f)], rel)
				}
				for j, k := range r.Coefficients {
					near(t, "ridge at a fixed penalty, "+k.Name, k.Estimate, l.Ridge[2].Coefficients[j], rel)
				}
				near(t, "degrees of freedom", r.Fitted.Tuning.Degrees[r.Fitted.Tuning.Chosen], l.Ridge[2].Degrees, rel)
			}
		})
	}
}

// comparePaths holds every number of components against the library.
func comparePaths(t *testing.T, c *compare.Comparison, l library, rel float64) {
	t.Helper()
	alt := find(t, c, "components")
	for m, point := range c.Path(alt) {
		for j, k := range point.Coefficients {
			if want := l.Components[m][j]; math.Abs(want) > 1e-9 {
				near(t, fmt.Sprintf("%d components, %s", m, k.Name), k.Estimate, want, 10*rel)
			}
		}
		// The path's error is the pooled error of the same folds.
		sum, rows := 0.0, 0.0
		for _, f := range alt.Out.Folds {
			sum += l.Folds.Components[m][place(c, l, f)] * float64(f.Rows)
			rows += float64(f.Rows)
		}
		near(t, fmt.Sprintf("%d components, error", m), alt.Fitted.Tuning.MSE[m], sum/rows, 1e-7)
	}
}
