package remedy_test

import (
	"fmt"
	"math"
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"

	"modelmend/fit/linear"
	"modelmend/fit/reduction"
	"modelmend/remedy"
)

// problem builds an invented problem: a, b and c move together, d is a square's base, e its square, f a dummy. Rows may be
// reordered and regressors rescaled.
func problem(t *testing.T, order func(n int) []int, scale []float64) (*remedy.Problem, remedy.Training, *reduction.Reduction) {
	t.Helper()
	const n = 60
	rng := rand.New(rand.NewPCG(21, 22))
	cols := make([]reduction.Column, 6)
	y := reduction.Column{}
	for range n {
		base := rng.NormFloat64()
		d := 2 + rng.NormFloat64()
		x := []float64{base + 0.2*rng.NormFloat64(), base + 0.2*rng.NormFloat64(), base + 0.3*rng.NormFloat64(), d, d * d, math.Round(rng.Float64())}
		v := rng.NormFloat64()
		for j := range x {
			v += x[j] * float64(j%3)
			cols[j].Hi = append(cols[j].Hi, x[j])
		}
		y.Hi = append(y.Hi, v)
	}
	fold := make([]int32, n)
	for i := range fold {
		fold[i] = int32(i % 5)
	}
	rows := order(n)
	pick := func(c reduction.Column, f float64) reduction.Column {
		out := reduction.Column{}
		for _, i := range rows {
			out.Hi = append(out.Hi, f*c.Hi[i])
		}
		return out
	}
	moved := make([]reduction.Column, len(cols))
	for j := range cols {
		moved[j] = pick(cols[j], scale[j])
	}
	movedFold := make([]int32, n)
	for k, i := range rows {
		movedFold[k] = fold[i]
	}
	red, err := reduction.Reduce(moved, pick(y, 1), true, reduction.Split{Cell: movedFold, Cells: 5, Fold: [][]int32{{0, 1, 2, 3, 4}}, Counts: []int{5}}, 2)
	if err != nil {
		t.Fatal(err)
	}
	s := linear.NewSample(red, red.Total)
	one := func(a string, k int) []remedy.Factor { return []remedy.Factor{{Atom: a, Power: k}} }
	p := &remedy.Problem{
		Names: []string{"a", "b", "c", "d", "d^2", "f=yes"}, Constant: true,
		Monomials: [][]remedy.Factor{one("a", 1), one("b", 1), one("c", 1), one("d", 1), one("d", 2), nil},
		Category:  []string{"", "", "", "", "", "f"},
		Focal:     []bool{false, false, false, true, false, false}, Keep: make([]bool, 6), Tangled: []bool{true, true, true, true, true, false},
		Groups: []remedy.Group{{Name: "concept", Columns: []int{0, 1, 2}, ByUser: true}},
		Sample: s, Penalties: []float64{0, 0.001, 0.01, 0.1, 1, 10},
		Rows: func(yield func(x []float64, y float64)) {
			x := make([]float64, 6)
			for k := range rows {
				for j := range x {
					x[j] = moved[j].Hi[k]
				}
				yield(x, y.Hi[rows[k]])
			}
		},
	}
	tr := remedy.Training{Sample: s, Final: true}
	for _, part := range red.Parts[0] {
		train := linear.NewSample(red, red.Total.Minus(part))
		tr.Inner = append(tr.Inner, remedy.Split{Train: train, Held: linear.NewHeldOut(red, part, train)})
	}
	return p, tr, red
}

func asWritten(n int) []int {
	out := make([]int, n)
	for i := range out {
		out[i] = i
	}
	return out
}

func reversed(n int) []int {
	out := asWritten(n)
	for i := range out {
		out[i] = n - 1 - i
	}
	return out
}

var unit = []float64{1, 1, 1, 1, 1, 1}

// TestEveryRemedyConforms runs the same checks on all registered remedies; a new file is seen without editing this test.
func TestEveryRemedyConforms(t *testing.T) {
	for _, r := range remedy.All() {
		t.Run(r.Key, func(t *testing.T) {
			for _, s := range r.Sources {
				if len(s) < 20 || !strings.ContainsAny(s, "0123456789") {
					t.Errorf("source %q has no year", s)
				}
			}
			for _, o := range r.Options {
				if !strings.HasPrefix(o.Key, r.Key+".") || o.Text == "" {
					t.Errorf("option %+v is not of this remedy or says nothing", o)
				}
			}
			p, tr, red := problem(t, asWritten, unit)
			before := fmt.Sprintf("%v %v %v %v", p.Names, p.Monomials, p.Tangled, p.Groups)
			variants, _ := r.Variants(p)
			if len(variants) == 0 {
				t.Fatal("offers nothing on a problem with a tangle, a group, a square and a dummy")
			}
			sample := fmt.Sprintf("%v", tr.Sample.S)
			for _, v := range variants {
				conform(t, p, tr, red, v)
			}
			if sample != fmt.Sprintf("%v", tr.Sample.S) || before != fmt.Sprintf("%v %v %v %v", p.Names, p.Monomials, p.Tangled, p.Groups) {
				t.Error("the problem was changed")
			}
			rowOrder(t, r, variants, tr)
			rescaling(t, r, variants, tr)
		})
	}
}

func conform(t *testing.T, p *remedy.Problem, tr remedy.Training, red *reduction.Reduction, v remedy.Variant) {
	t.Helper()
	if !strings.HasPrefix(v.Key, strings.Split(v.Key, ":")[0]) || v.Label == "" || v.Summary == "" {
		t.Errorf("%s: label or summary is missing", v.Key)
	}
	f := v.Learn(tr)
	if len(f.Slopes) != 6 || (len(f.Factor) == 49) == (f.NoErrors != "") || (f.NoErrors != "" && f.Factor != nil) {
		t.Fatalf("%s: %d slopes, factor of %d, no errors because %q", v.Key, len(f.Slopes), len(f.Factor), f.NoErrors)
	}
	for j, b := range f.Slopes {
		if math.IsNaN(b) || math.IsInf(b, 0) {
			t.Errorf("%s: slope %d is %v", v.Key, j, b)
		}
		if f.NoErrors != "" {
			continue
		}
		if x := f.Factor[(j+1)*7+j+1]; !(x >= 0) {
			t.Errorf("%s: variance factor %d is %v", v.Key, j, x)
		}
	}
	again := v.Learn(tr)
	if !reflect.DeepEqual(f.Slopes, again.Slopes) {
		t.Errorf("%s: learning twice gives two answers", v.Key)
	}
	as := tr.Sample.LeastSquares(true)
	s := math.Sqrt(as.RSS / 53)
	final := &remedy.Final{Problem: p, Fitted: f, RSS: tr.Sample.RSS(f.Slopes), AsIs: as, S: s, DF: 53}
	d := v.Describe(final)
	if len(d.Meaning) == 0 {
		t.Errorf("%s: says nothing of what coefficients mean", v.Key)
	}
	for _, test := range d.Tests {
		if !(test.P >= 0 && test.P <= 1) || test.Text == "" {
			t.Errorf("%s: test %+v", v.Key, test)
		}
	}
	if f.Tuning != nil {
		if len(f.Tuning.MSE) != len(f.Tuning.Values) || len(f.Tuning.Slopes) != len(f.Tuning.Values) {
			t.Errorf("%s: path of %d values, %d errors, %d slopes", v.Key, len(f.Tuning.Values), len(f.Tuning.MSE), len(f.Tuning.Slopes))
		}
		if !reflect.DeepEqual(f.Tuning.Slopes[f.Tuning.Chosen], f.Slopes) {
			t.Errorf("%s: the chosen point of the path is not the fit", v.Key)
		}
		if got := f.Tuning.Factor(f.Tuning.Chosen); len(got) != len(f.Factor) {
			t.Errorf("%s: the factor of the chosen point has %d entries, that of the fit %d", v.Key, len(got), len(f.Factor))
		}
		if len(f.Tuning.Degrees) != len(f.Tuning.Values) {
			t.Errorf("%s: %d degrees of freedom for %d values", v.Key, len(f.Tuning.Degrees), len(f.Tuning.Values))
		}
	}
	// Inside a fold nothing but training rows is seen.
	train := linear.NewSample(red, red.Total.Minus(red.Parts[0][2]))
	inner := remedy.Training{Sample: train}
	for g, part := range red.Parts[0] {
		if g != 2 {
			m := linear.NewSample(red, red.Total.Minus(red.Parts[0][2]).Minus(part))
			inner.Inner = append(inner.Inner, remedy.Split{Train: m, Held: linear.NewHeldOut(red, part, m)})
		}
	}
	if g := v.Learn(inner); len(g.Slopes) != 6 || math.IsNaN(g.Slopes[0]) {
		t.Errorf("%s: cannot be learned inside a fold", v.Key)
	}
}

// rowOrder: the same rows in another order give the same fit.
func rowOrder(t *testing.T, r remedy.Remedy, variants []remedy.Variant, tr remedy.Training) {
	p, other, _ := problem(t, reversed, unit)
	moved, _ := r.Variants(p)
	for i, v := range variants {
		a, b := v.Learn(tr), moved[i].Learn(other)
		for j := range a.Slopes {
			if math.Abs(a.Slopes[j]-b.Slopes[j]) > 1e-9*(math.Abs(a.Slopes[j])+1e-6) {
				t.Errorf("%s: slope %d is %v, with rows reversed %v", v.Key, j, a.Slopes[j], b.Slopes[j])
			}
		}
	}
}

// rescaling: a regressor in other units has its slope in other units, and nothing else changes; but for the raw sum, whose
// meaning depends on units and which says so.
func rescaling(t *testing.T, r remedy.Remedy, variants []remedy.Variant, tr remedy.Training) {
	scale := []float64{1, 100, 1, 1, 1, 1}
	p, other, _ := problem(t, asWritten, scale)
	moved, _ := r.Variants(p)
	for i, v := range variants {
		if strings.HasSuffix(v.Key, ":sum") {
			continue
		}
		a, b := v.Learn(tr), moved[i].Learn(other)
		for j := range a.Slopes {
			if want := a.Slopes[j] / scale[j]; math.Abs(b.Slopes[j]-want) > 1e-8*(math.Abs(want)+1e-6) {
				t.Errorf("%s: slope %d is %v in other units, want %v", v.Key, j, b.Slopes[j], want)
			}
		}
	}
}

func TestOrderAndLookUp(t *testing.T) {
	all := remedy.All()
	if all[0].Key != "as-is" {
		t.Errorf("%s stands first, want as-is", all[0].Key)
	}
	for _, key := range []string{"as-is", "drop", "index", "components", "partial-least-squares", "ridge", "elastic-net", "select", "center"} {
		if _, ok := remedy.Find(key); !ok {
			t.Errorf("no remedy %q", key)
		}
	}
	if _, ok := remedy.Find("nothing"); ok {
		t.Error("found a remedy that does not exist")
	}
}

// TestSpareLeavesOut: a spared regressor is not penalised and not rotated: at a huge penalty, or with no component, its slope is that of
// the regression on it alone (by hand: the others are shrunk to zero).
func TestSpareLeavesOut(t *testing.T) {
	p, tr, _ := problem(t, asWritten, unit)
	p.Settings = remedy.Settings{
		Numbers: map[string]float64{"ridge.penalty": 1e12, "components.count": 0},
		Columns: map[string][]int{"ridge.spare": {5}, "components.spare": {5}},
	}
	alone := tr.Sample.Keep([]int{5}).LeastSquares(false).Slopes[0]
	for _, key := range []string{"ridge", "components"} {
		r, _ := remedy.Find(key)
		vs, not := r.Variants(p)
		if len(vs) != 1 {
			t.Fatalf("%s: %v", key, not)
		}
		f := vs[0].Learn(tr)
		if math.Abs(f.Slopes[5]-alone) > 1e-6*math.Abs(alone) {
			t.Errorf("%s: the spared slope is %v, want %v", key, f.Slopes[5], alone)
		}
		for j := range 5 {
			if math.Abs(f.Slopes[j]) > 1e-6 {
				t.Errorf("%s: slope %d is %v, want next to nothing", key, j, f.Slopes[j])
			}
		}
	}
}
