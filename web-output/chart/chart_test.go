package chart_test

import (
	"encoding/json"
	"math"
	"strings"
	"testing"

	"modelmend/web-output/chart"
	"modelmend/web-output/view"
)

func results(name string) *view.Results {
	k := func(v float64) []view.PathCoefficient { return []view.PathCoefficient{{Estimate: view.Num(v)}} }
	a := view.Alternative{Key: "as-is", Coefficients: []view.Coefficient{{Name: name}}, OutOfSample: view.OutOfSample{Folds: []view.FoldError{{MSE: 2}, {MSE: 3}}}}
	r := view.Alternative{Key: "ridge", Coefficients: a.Coefficients, OutOfSample: view.OutOfSample{Folds: []view.FoldError{{MSE: 1}, {MSE: 5}}},
		Tuning: &view.Tuning{Parameter: "penalty", Path: []view.PathPoint{{Value: 0, Error: 4, Coefficients: k(2)}, {Value: 0.1, Error: 3, Coefficients: k(1)}, {Value: 1, Error: view.None(), Coefficients: k(math.NaN())}}}}
	return &view.Results{
		Alternatives: []view.Alternative{a, r},
		Diagnosis: view.Diagnosis{
			Regressors:     []view.Regressor{{Name: name, SD: 3}},
			VarianceShares: view.VarianceShares{Coefficients: []string{name}, Dimensions: []view.Num{1}, Shares: [][]view.Num{{1}}},
			Correlations:   view.Correlations{Names: []string{name}, Values: [][]view.Num{{view.None()}}},
		},
	}
}

// TestOptions: every chart is there, in a fixed order and with the numbers of the view; names from the data are not: the page adds them
// as text.
func TestOptions(t *testing.T) {
	o, err := chart.Build(results("</script><script>alert(1)</script>"))
	if err != nil {
		t.Fatal(err)
	}
	if got, want := strings.Join(o.Names, " "), "shares correlations ridge-path ridge-error folds"; got != want {
		t.Errorf("charts %q, want %q", got, want)
	}
	b, err := json.Marshal(o)
	if err != nil {
		t.Fatal(err)
	}
	if strings.Contains(string(b), "alert") || strings.Contains(string(b), "https://") {
		t.Error("a name or an address stands in the options")
	}
	var all map[string]struct {
		Series []struct {
			ID   string
			Data []struct{ Value []*float64 }
		}
	}
	if err := json.Unmarshal(b, &all); err != nil {
		t.Fatal(err)
	}
	path := all["ridge-path"].Series[0]
	if path.ID != "slope-0" || len(path.Data) != 2 || *path.Data[0].Value[0] != 0.1 || *path.Data[0].Value[1] != 3 {
		t.Errorf("path %+v: want the penalty 0.1 first (zero has no place on a logarithmic axis) and the slope times its standard deviation", path)
	}
	if path.Data[1].Value[1] != nil {
		t.Error("a missing number is drawn")
	}
	folds := all["folds"].Series[0].Data
	if len(folds) != 2 || *folds[0].Value[0] != -1 || *folds[1].Value[0] != 2 {
		t.Errorf("folds %+v, want differences -1 and 2", folds)
	}
	if n := len(all["correlations"].Series[0].Data); n != 0 {
		t.Errorf("%d cells drawn for a correlation that is missing", n)
	}
	withheld := results("a")
	withheld.Alternatives[0].OutOfSample.Reason = "withheld"
	if o, err := chart.Build(withheld); err != nil || strings.Contains(strings.Join(o.Names, " "), "folds") {
		t.Errorf("charts %v (%v): withheld errors are drawn", o.Names, err)
	}
	again, _ := chart.Build(results("</script><script>alert(1)</script>"))
	c, _ := json.Marshal(again)
	if string(b) != string(c) {
		t.Error("options differ from run to run")
	}
}

// TestColumns: what was chosen in the resamples stands in a second grid of the error curve, over the same axis.
func TestColumns(t *testing.T) {
	r := results("x")
	r.Alternatives[1].Tuning.Resampled = &view.TuningResampled{Shares: []view.Num{0.25, 0.123456789, 0.626543211}}
	o, err := chart.Build(r)
	if err != nil {
		t.Fatal(err)
	}
	b, err := json.Marshal(o)
	if err != nil {
		t.Fatal(err)
	}
	var all map[string]struct {
		Grid   []any
		XAxis  []struct{ GridIndex int }
		Series []struct {
			ID                     string
			XAxisIndex, YAxisIndex int
			Data                   []struct{ Value []float64 }
		}
	}
	if err := json.Unmarshal(b, &all); err != nil {
		t.Fatal(err)
	}
	e := all["ridge-error"]
	if len(e.Grid) != 2 || len(e.XAxis) != 2 || e.XAxis[1].GridIndex != 1 || len(e.Series) != 2 {
		t.Fatalf("%+v: want two grids, two axes and two series", e)
	}
	if c := e.Series[1]; c.ID != "chosen" || c.XAxisIndex != 1 || c.YAxisIndex != 1 || len(c.Data) != 2 || c.Data[0].Value[0] != 0.1 || c.Data[0].Value[1] != 0.123457 {
		t.Errorf("columns %+v: want the penalty 0.1 first, since zero has no place, with its share to six digits", c)
	}
}
