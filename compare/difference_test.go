package compare_test

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"modelmend/compare"
)

// TestDifferences compares first differences with plain least squares on differenced rows: coefficients, errors on held-out blocks scored on forecasts
// of the dependent variable itself, and the error of the model left alone on the same rows. One period is missing: the row after it has no
// difference. The trend has the drift for its coefficient.
func TestDifferences(t *testing.T) {
	rng := rand.New(rand.NewPCG(9, 9))
	var cells [][]float64
	x1, x2, u := 0.0, 0.0, 0.0
	for year := 1950; year < 2000; year++ {
		x1 += 1 + rng.NormFloat64()
		x2 = 0.8*x1 + 0.5*rng.NormFloat64()
		u = 0.6*u + rng.NormFloat64()
		if year != 1973 {
			cells = append(cells, []float64{2*x1 - x2 + 0.3*float64(year-1950) + u, x1, x2, float64(year)})
		}
	}
	order := rng.Perm(len(cells)) // rows in any order
	shuffled := make([][]float64, len(cells))
	for i, k := range order {
		shuffled[k] = cells[i]
	}
	s := newStudy("y = x1 + x2 + t")
	s.Time, s.Focal, s.Resamples = "t", []string{"x1"}, 150
	c, err := compare.Run(context.Background(), numbers(t, []string{"y", "x1", "x2", "t"}, shuffled), s, compare.Options{})
	if err != nil {
		t.Fatal(err)
	}
	a := find(t, c, "difference")
	// By hand: differences of neighbouring years.
	type change struct {
		now int // place in shuffled
		dy  float64
		dx  []float64
	}
	var changes []change
	for i := 1; i < len(cells); i++ {
		if cells[i][3]-cells[i-1][3] == 1 {
			changes = append(changes, change{order[i], cells[i][0] - cells[i-1][0], []float64{cells[i][1] - cells[i-1][1], cells[i][2] - cells[i-1][2]}})
		}
	}
	if len(changes) != 47 || a.Rows != 47 {
		t.Fatalf("%d changes, the program has %d", len(changes), a.Rows)
	}
	rowsOf := func(keep func(i int) bool) rows {
		out := rows{}
		for _, ch := range changes {
			if keep(ch.now) {
				out.x, out.y = append(out.x, ch.dx), append(out.y, ch.dy)
			}
		}
		return out
	}
	all := rowsOf(func(int) bool { return true })
	fit := plainSubset(all, []int{0, 1})
	near := func(name string, got, want float64) {
		t.Helper()
		if math.Abs(got-want) > 1e-8*math.Max(1, math.Abs(want)) {
			t.Errorf("%s: got %.12g, want %.12g", name, got, want)
		}
	}
	near("drift", coefficient(t, a, "constant").Estimate, fit.constant)
	near("trend", coefficient(t, a, "t").Estimate, fit.constant)
	near("x1", coefficient(t, a, "x1").Estimate, fit.slopes[0])
	near("x2", coefficient(t, a, "x2").Estimate, fit.slopes[1])
	mean, sxx, _, _ := all.moments()
	_ = mean
	det := sxx[0][0]*sxx[1][1] - sxx[0][1]*sxx[0][1]
	near("classical standard error", kindOf(t, coefficient(t, a, "x1"), "classical").SE, math.Sqrt(fit.sse(all)/44*sxx[1][1]/det))
	if k := coefficient(t, a, "x1"); k.Status != "different quantity" || !math.IsNaN(k.Bias) || k.Errors[0].Kind != "autocorrelation" {
		t.Errorf("x1 is %s, bias %g, errors %s", k.Status, k.Bias, k.Errors[0].Kind)
	}
	level := func(keep func(i int) bool) rows {
		out := rows{}
		for i, r := range shuffled {
			if keep(i) {
				out.x, out.y = append(out.x, r[1:4]), append(out.y, r[0])
			}
		}
		return out
	}
	sse, base, count := 0.0, 0.0, 0
	has := map[int]bool{}
	for _, ch := range changes {
		has[ch.now] = true
	}
	for f, got := range a.Out.Folds {
		out := func(i int) bool { return c.Plan.Held(0, i) == f }
		in := func(i int) bool { return !out(i) }
		h := rowsOf(out)
		want := plainSubset(rowsOf(in), []int{0, 1}).sse(h)
		near("held-out error", got.MSE, want/float64(len(h.y)))
		sse += want
		count += len(h.y)
		base += plainSubset(level(in), []int{0, 1, 2}).sse(level(func(i int) bool { return out(i) && has[i] }))
	}
	near("out-of-sample error", a.Out.RMSE, math.Sqrt(sse/float64(count)))
	near("difference to the model left alone on the same rows", a.Out.RMSEDifference, math.Sqrt(sse/float64(count))-math.Sqrt(base/float64(count)))
	if r := coefficient(t, a, "x1").Resampled; r == nil || !(r.SE > 0) || r.Used != 150 {
		t.Errorf("resampled: %+v", r)
	}
}

// TestRatio compares an equation per head with plain least squares on divided rows: coefficients, the test that adds 1/size back, and errors scored on
// forecasts of the level.
func TestRatio(t *testing.T) {
	rng := rand.New(rand.NewPCG(19, 9))
	var cells [][]float64
	for range 60 {
		size := math.Exp(rng.NormFloat64())
		a := size * (2 + rng.NormFloat64())
		b := size * (1 + 0.5*rng.NormFloat64())
		cells = append(cells, []float64{size*(1+rng.NormFloat64()*0.5) + 0.7*a - 0.4*b, a, b, size})
	}
	s := newStudy("y = a + b + size")
	s.Remedies = []compare.RemedySetting{{Remedy: "ratio", Option: "by", Names: []string{"size"}}}
	c, err := compare.Run(context.Background(), numbers(t, []string{"y", "a", "b", "size"}, cells), s, compare.Options{})
	if err != nil {
		t.Fatal(err)
	}
	v := find(t, c, "ratio:size")
	divided := func(keep func(i int) bool, extra bool) rows {
		out := rows{}
		for i, r := range cells {
			if keep(i) {
				x := []float64{r[1] / r[3], r[2] / r[3]}
				if extra {
					x = append(x, 1/r[3])
				}
				out.x, out.y = append(out.x, x), append(out.y, r[0]/r[3])
			}
		}
		return out
	}
	all := func(int) bool { return true }
	fit := plainSubset(divided(all, false), []int{0, 1})
	near := func(name string, got, want float64) {
		t.Helper()
		if math.Abs(got-want) > 1e-8*math.Max(1, math.Abs(want)) {
			t.Errorf("%s: got %.12g, want %.12g", name, got, want)
		}
	}
	near("a", coefficient(t, v, "a").Estimate, fit.slopes[0])
	near("b", coefficient(t, v, "b").Estimate, fit.slopes[1])
	near("size", coefficient(t, v, "size").Estimate, fit.constant)
	if k := coefficient(t, v, "constant"); k.Status != "zero" || k.Estimate != 0 {
		t.Errorf("the level equation's constant is %g, %s", k.Estimate, k.Status)
	}
	long := plainSubset(divided(all, true), []int{0, 1, 2})
	f := (fit.sse(divided(all, false)) - long.sse(divided(all, true))) / (long.sse(divided(all, true)) / 56)
	near("F of 1/size", v.Description.Tests[0].Statistic, f)
	sse := 0.0
	for k, got := range v.Out.Folds {
		h := plainSubset(divided(func(i int) bool { return c.Plan.Held(got.Repeat, i) != got.Fold }, false), []int{0, 1})
		want := 0.0
		for i, r := range cells {
			if c.Plan.Held(got.Repeat, i) == got.Fold {
				e := r[0] - h.constant*r[3] - h.slopes[0]*r[1] - h.slopes[1]*r[2]
				want += e * e
			}
		}
		near("held-out error", v.Out.Folds[k].MSE, want/float64(got.Rows))
		sse += want
	}
	near("out-of-sample error", v.Out.RMSE, math.Sqrt(sse/float64(5*len(cells))))
}
