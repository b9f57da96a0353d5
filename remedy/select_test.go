package remedy_test

import (
	"fmt"
	"math"
	"math/bits"
	"reflect"
	"testing"

	"modelmend/fit/linear"
	"modelmend/fit/reduction"
	"modelmend/remedy"
)

// walsh is a column of ones and minus ones in 64 rows; different ones are uncorrelated and have mean zero.
func walsh(k int) []float64 {
	out := make([]float64, 64)
	for i := range out {
		out[i] = 1 - 2*float64(bits.OnesCount(uint(i&k))%2)
	}
	return out
}

// selected runs double selection on d = 2 x1 + w and y = d + own x1 + 3 x2 + third x3 + e, all of x1, ..., x4, w and e uncorrelated with variance one.
func selected(t *testing.T, own, third float64, keep ...int) (*remedy.Fitted, remedy.Description) {
	t.Helper()
	x1, x2, x3, x4, w, e := walsh(1), walsh(2), walsh(4), walsh(8), walsh(16), walsh(32)
	d, y := make([]float64, 64), make([]float64, 64)
	for i := range y {
		d[i] = 2*x1[i] + w[i]
		y[i] = d[i] + own*x1[i] + 3*x2[i] + third*x3[i] + e[i] + 5
	}
	var cols []reduction.Column
	for _, c := range [][]float64{d, x1, x2, x3, x4} {
		cols = append(cols, reduction.Column{Hi: c})
	}
	red, err := reduction.Reduce(cols, reduction.Column{Hi: y}, true, reduction.Split{}, 1)
	if err != nil {
		t.Fatal(err)
	}
	p := &remedy.Problem{Names: []string{"d", "x1", "x2", "x3", "x4"}, Constant: true, Monomials: make([][]remedy.Factor, 5), Category: make([]string, 5),
		Focal: []bool{true, false, false, false, false}, Keep: make([]bool, 5), Tangled: make([]bool, 5), Sample: linear.NewSample(red, red.Total)}
	for _, j := range keep {
		p.Keep[j] = true
	}
	r, _ := remedy.Find("select")
	vs, not := r.Variants(p)
	if len(vs) != 1 {
		t.Fatal(not)
	}
	f := vs[0].Learn(remedy.Training{Sample: p.Sample, Final: true})
	as := p.Sample.LeastSquares(true)
	return f, vs[0].Describe(&remedy.Final{Problem: p, Fitted: f, RSS: p.Sample.RSS(f.Slopes), AsIs: as, S: math.Sqrt(as.RSS / 58), DF: 58})
}

// TestDoubleSelection, worked by hand. On uncorrelated columns a lasso keeps those whose product with the target exceeds the penalty, 8 times their
// coefficient in the target against k sigma, k = 1.1 x 2.4977 = 2.7475 with the normal quantile of 1 - 0.05/8 for four candidates.
//
// y on the controls, own = -2.2, third = 0.4: coefficients -0.2, 3, 0.4, 0. First sigma² = 64 (0.04 + 9 + 0.16 + 2)/63: penalty 9.27, kept x2 (24). Then
// sigma² = 64 (0.04 + 0.16 + 2)/62: penalty 4.14, kept x2 alone (3.2 for x3, 1.6 for x1). d on the controls: coefficient 2 of x1, 16 against 6.19 and then 2.79:
// kept x1. Least squares on d, x1 and x2: 1, -2.2 and 3, the parts of x3 and e being uncorrelated with all three. Choosing once, for y, would miss x1: the
// coefficient of d would be (2 x -0.2 + 1)/5 = 0.12.
func TestDoubleSelection(t *testing.T) {
	f, d := selected(t, -2.2, 0.4)
	for j, want := range []float64{1, -2.2, 3, 0, 0} {
		if math.Abs(f.Slopes[j]-want) > 1e-12 {
			t.Errorf("slope %d: %v, want %v", j, f.Slopes[j], want)
		}
	}
	if want := []remedy.Status{remedy.Estimated, remedy.Estimated, remedy.Estimated, remedy.Zero, remedy.Zero}; !reflect.DeepEqual(f.Status, want) {
		t.Errorf("status %v, want %v", f.Status, want)
	}
	// Variance over sigma² of the coefficient of d beside x1: one over the squares of w, 1/64.
	if v := f.Factor[1*6+1]; math.Abs(v-1.0/64) > 1e-15 {
		t.Errorf("variance factor of d is %v, want 1/64", v)
	}
	if got, want := d.Notes[0].Text, "chosen for the dependent variable: x2; for d: x1"; got != want {
		t.Errorf("%q, want %q", got, want)
	}
	// Where x1 has nothing to say of y but through d, y itself has it at 2: both lassos keep it.
	if _, d := selected(t, 0, 0.4); d.Notes[0].Text != "chosen for the dependent variable: x1 and x2; for d: x1" {
		t.Error(d.Notes[0].Text)
	}
}

// TestDoubleSelectionAtTheThreshold, by hand: with x2 kept, x3 is kept too from where 64 c² = k² 64 (0.04 + c² + 2)/62, that is c = root(2.04 k²/62 / (1 - k²/62)),
// with k = 1.1 x 2.497705474412374 (scipy 1.10.1, scipy.stats.norm.ppf(1 - 0.05/8)). With x2 in by the user's word it is partialled out, three
// candidates are left, k = 1.1 x 2.3939797998185104 (the same, 1 - 0.05/6), and sigma² = 64 (0.04 + c² + 2)/62 all along.
func TestDoubleSelectionAtTheThreshold(t *testing.T) {
	for _, v := range []struct {
		quantile float64
		keep     []int
	}{{2.497705474412374, nil}, {2.3939797998185104, []int{2}}} {
		k := 1.1 * v.quantile
		c := math.Sqrt(2.04 * k * k / 62 / (1 - k*k/62))
		for step, want := range map[float64]remedy.Status{1 - 1e-9: remedy.Zero, 1 + 1e-9: remedy.Estimated} {
			f, _ := selected(t, -2.2, step*c, v.keep...)
			if f.Status[3] != want || f.Status[2] != remedy.Estimated {
				t.Errorf("kept %v, %g times the threshold: x2 is %s and x3 %s, want %s", v.keep, step, f.Status[2], f.Status[3], want)
			}
		}
	}
}

// TestDoubleSelectionNeedsAFocus and controls, and says so.
func TestDoubleSelectionNeedsAFocus(t *testing.T) {
	p, _, _ := problem(t, asWritten, unit)
	r, _ := remedy.Find("select")
	p.Focal = make([]bool, 6)
	if vs, not := r.Variants(p); len(vs) != 0 || len(not) != 1 {
		t.Errorf("without a coefficient of interest: %d variants, %v", len(vs), not)
	}
	p.Focal = []bool{true, true, true, true, true, false}
	p.Keep[5] = true
	if vs, not := r.Variants(p); len(vs) != 0 || fmt.Sprint(not) == "[]" {
		t.Errorf("without controls: %d variants, %v", len(vs), not)
	}
}
