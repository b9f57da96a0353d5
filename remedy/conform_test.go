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
			asked(p)
			before := fmt.Sprintf("%v %v %v %v", p.Names, p.Monomials, p.Tangled, p.Groups)
			variants, _ := r.Variants(p)
			if r.Plan != nil {
				return // it fits nothing; its plan has a test of its own
			}
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

// asked fills in what remedies offer only on request.
func asked(p *remedy.Problem) {
	p.Settings.Columns = map[string][]int{"residualize.of": {0}, "residualize.on": {1}, "ratio.by": {4}}
	p.Order, p.Time = asWritten(60), make([]float64, 60)
	for i := range p.Time {
		p.Time[i] = float64(i)
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
	asked(p)
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
	asked(p)
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

// TestInverseCovarianceWeights: three members, the first two with correlation 0.8, the third uncorrelated with both. By hand: the inverse of
// [1 .8; .8 1] has row sums 1/(1+.8) = 5/9, so that the weights on z-scores are 5/9, 5/9, 1 over their sum 19/9: 5/19, 5/19, 9/19.
func TestInverseCovarianceWeights(t *testing.T) {
	const n = 24
	cols := make([]reduction.Column, 3)
	y := reduction.Column{}
	for i := range n {
		a := 2 * math.Pi * float64(i) / n
		u, v, w := math.Cos(a), math.Cos(2*a), math.Cos(3*a) // centred, orthogonal, of one length
		for j, x := range []float64{10 * u, -(0.8*u + 0.6*v), 3 * w} {
			cols[j].Hi = append(cols[j].Hi, x)
		}
		y.Hi = append(y.Hi, u+v+w+math.Sin(a))
	}
	red, err := reduction.Reduce(cols, y, true, reduction.Split{}, 1)
	if err != nil {
		t.Fatal(err)
	}
	s := linear.NewSample(red, red.Total)
	p := &remedy.Problem{Names: []string{"a", "b", "c"}, Constant: true, Monomials: make([][]remedy.Factor, 3), Category: make([]string, 3), Focal: make([]bool, 3), Keep: make([]bool, 3),
		Tangled: make([]bool, 3), Groups: []remedy.Group{{Name: "g", Columns: []int{0, 1, 2}, ByUser: true, Weights: []float64{1, 2, -4}}}, Sample: s}
	r, _ := remedy.Find("index")
	variants, _ := r.Variants(p)
	seen := 0
	for _, v := range variants {
		fit := v.Learn(remedy.Training{Sample: s, Final: true})
		var want []float64
		switch v.Key {
		case "index:g:inverse-covariance":
			want = []float64{5.0 / 19 / s.SD(0), -5.0 / 19 / s.SD(1), 9.0 / 19 / s.SD(2)} // b moves against a
		case "index:g:weights":
			want = []float64{1, 2, -4}
		default:
			continue
		}
		seen++
		for j, w := range want {
			got := fit.Weights[j]
			if v.Key != "index:g:weights" && j == 2 {
				got = math.Abs(got) // its correlation with a is zero, and so the sign rounding's
			}
			if math.Abs(got-w) > 1e-12*math.Abs(w) {
				t.Errorf("%s: weight %d is %g, want %g", v.Key, j, got, w)
			}
		}
	}
	if seen != 2 {
		t.Errorf("%d of 2 variants", seen)
	}
}

// TestOtherCoordinates: least squares on regressors written as orthogonal polynomials, and on a residual, formed here row by row, gives the coefficients
// that the remedies report from plain least squares; residuals are those of the other regressors by the definition, fitted with Gauss elimination.
func TestOtherCoordinates(t *testing.T) {
	const n = 30
	x, z, y := make([]float64, n), make([]float64, n), make([]float64, n)
	rng := rand.New(rand.NewPCG(4, 2))
	for i := range n {
		x[i] = 3 + rng.NormFloat64()
		z[i] = 0.7*x[i] + rng.NormFloat64()
		y[i] = 1 + x[i] - 0.4*x[i]*x[i] + 0.1*x[i]*x[i]*x[i] + 0.5*z[i] + rng.NormFloat64()
	}
	power := func(k int) reduction.Column {
		c := reduction.Column{}
		for _, v := range x {
			c.Hi = append(c.Hi, math.Pow(v, float64(k)))
		}
		return c
	}
	plain := []reduction.Column{power(1), power(2), power(3), {Hi: z}}
	sample := func(cols []reduction.Column) *linear.Sample {
		red, err := reduction.Reduce(cols, reduction.Column{Hi: y}, true, reduction.Split{}, 1)
		if err != nil {
			t.Fatal(err)
		}
		return linear.NewSample(red, red.Total)
	}
	// net takes the constant and some columns out of a column, by least squares with one column after the other made orthogonal.
	net := func(c reduction.Column, others ...reduction.Column) reduction.Column {
		ones := make([]float64, n)
		for i := range ones {
			ones[i] = 1
		}
		basis := [][]float64{ones}
		take := func(v []float64) []float64 {
			v = append([]float64{}, v...)
			for range 2 {
				for _, b := range basis {
					var vb, bb float64
					for i := range v {
						vb += v[i] * b[i]
						bb += b[i] * b[i]
					}
					for i := range v {
						v[i] -= vb / bb * b[i]
					}
				}
			}
			return v
		}
		for _, o := range others {
			basis = append(basis, take(o.Hi))
		}
		return reduction.Column{Hi: take(c.Hi)}
	}
	s := sample(plain)
	one := func(a string, k int) []remedy.Factor { return []remedy.Factor{{Atom: a, Power: k}} }
	p := &remedy.Problem{Names: []string{"x", "x^2", "x^3", "z"}, Constant: true, Monomials: [][]remedy.Factor{one("x", 1), one("x", 2), one("x", 3), one("z", 1)},
		Category: make([]string, 4), Focal: make([]bool, 4), Keep: make([]bool, 4), Tangled: make([]bool, 4), Sample: s}
	p.Settings.Columns = map[string][]int{"residualize.of": {3}, "residualize.on": {0}}
	as := s.LeastSquares(true)
	value := append([]float64{as.Constant(s)}, as.Slopes...)
	for key, cols := range map[string][]reduction.Column{
		"orthogonal":  {plain[0], net(plain[1], plain[0]), net(plain[2], plain[0], plain[1]), plain[3]},
		"residualize": {plain[0], plain[1], plain[2], net(plain[3], plain[0])},
	} {
		r, _ := remedy.Find(key)
		variants, not := r.Variants(p)
		if len(variants) != 1 {
			t.Fatalf("%s: %v", key, not)
		}
		fit := variants[0].Learn(remedy.Training{Sample: s, Final: true})
		d := variants[0].Describe(&remedy.Final{Problem: p, Fitted: fit, RSS: as.RSS, AsIs: as, S: 1, DF: 25})
		other := sample(cols)
		want := other.LeastSquares(true)
		expected := append([]float64{want.Constant(other)}, want.Slopes...)
		factor := linear.Embed(5, 5, d.Report, fit.Factor)
		wantFactor := want.Factor(other)
		for i := range 5 {
			got := 0.0
			for j := range 5 {
				got += d.Report[i*5+j] * value[j]
			}
			if math.Abs(got-expected[i]) > 1e-8*(1+math.Abs(expected[i])) {
				t.Errorf("%s: coefficient %d is %.12g, want %.12g", key, i, got, expected[i])
			}
			if math.Abs(factor[i*5+i]-wantFactor[i*5+i]) > 1e-8*wantFactor[i*5+i] {
				t.Errorf("%s: variance factor %d is %.12g, want %.12g", key, i, factor[i*5+i], wantFactor[i*5+i])
			}
		}
	}
}

// TestMoreDataPlan: with rows that are there twice the half width falls by the root of two and the rows needed for half the width now are four times as
// many; the direction is the best of many tried by brute force, each added as a row; all from the definition.
func TestMoreDataPlan(t *testing.T) {
	const n = 25
	rng := rand.New(rand.NewPCG(3, 8))
	cols := make([]reduction.Column, 3)
	y := reduction.Column{}
	for range n {
		c := rng.NormFloat64()
		for j, v := range []float64{10 + 2*c + 0.5*rng.NormFloat64(), c + 0.3*rng.NormFloat64(), 100 * rng.NormFloat64()} {
			cols[j].Hi = append(cols[j].Hi, v)
		}
		y.Hi = append(y.Hi, c+rng.NormFloat64())
	}
	sample := func(extra []float64) *linear.Sample {
		x := make([]reduction.Column, 3)
		for j := range x {
			x[j].Hi = append([]float64{}, cols[j].Hi...)
			if extra != nil {
				x[j].Hi = append(x[j].Hi, extra[j])
			}
		}
		v := reduction.Column{Hi: append([]float64{}, y.Hi...)}
		if extra != nil {
			v.Hi = append(v.Hi, 0)
		}
		red, err := reduction.Reduce(x, v, true, reduction.Split{}, 1)
		if err != nil {
			t.Fatal(err)
		}
		return linear.NewSample(red, red.Total)
	}
	s := sample(nil)
	p := &remedy.Problem{Names: []string{"a", "b", "c"}, Constant: true, Monomials: make([][]remedy.Factor, 3), Category: make([]string, 3), Focal: []bool{false, true, false},
		Keep: make([]bool, 3), Tangled: make([]bool, 3), Smallest: []float64{math.NaN(), 0.1, math.NaN()}, Sample: s}
	as := s.LeastSquares(true)
	r, _ := remedy.Find("more-data")
	plans := r.Plan(&remedy.Final{Problem: p, AsIs: as, S: 0.9, DF: 21})
	if len(plans) != 1 || plans[0].Coefficient != "b" || plans[0].Reason != "" {
		t.Fatalf("%+v", plans)
	}
	plan := plans[0]
	half := 2.079613844727662 * 0.9 * math.Sqrt(as.Inverse[4]) // t(21), common tables
	if math.Abs(plan.HalfWidth-half) > 1e-9*half {
		t.Errorf("half width %g, want %g", plan.HalfWidth, half)
	}
	if plan.Targets[0].Rows != 4*n {
		t.Errorf("half the width takes %g rows, want %d", plan.Targets[0].Rows, 4*n)
	}
	vif := s.InflationFactors()[1]
	if want := math.Ceil(4 * n / vif); plan.Targets[0].Untangled != want {
		t.Errorf("untangled %g rows, want %g", plan.Targets[0].Untangled, want)
	}
	last := plan.Targets[len(plan.Targets)-1]
	if want := math.Ceil(n * half * half / 0.01); math.Abs(last.Rows-want) > 1 || last.HalfWidth != 0.1 {
		t.Errorf("%+v, want %g rows", last, want)
	}
	gain := func(offset []float64) float64 {
		row := make([]float64, 3)
		for j := range row {
			row[j] = s.Mean[j].Float() + offset[j]
		}
		return 1 - math.Sqrt(sample(row).LeastSquares(true).Inverse[4]/as.Inverse[4])
	}
	best := []float64{plan.Direction[0].Value, plan.Direction[1].Value, plan.Direction[2].Value}
	if g := gain(best); math.Abs(g-plan.Gain) > 1e-9 {
		t.Errorf("the row narrows the standard error by %g, the plan says %g", g, plan.Gain)
	}
	for range 2000 {
		z := []float64{rng.NormFloat64(), rng.NormFloat64(), rng.NormFloat64()}
		length := math.Sqrt(z[0]*z[0] + z[1]*z[1] + z[2]*z[2])
		for j := range z {
			z[j] *= math.Sqrt(3) / length * s.SD(j)
		}
		if g := gain(z); g > plan.Gain+1e-9 {
			t.Fatalf("a row at %v narrows the standard error by %g, the plan's by %g", z, g, plan.Gain)
		}
	}
}

// TestAllLeftIn: the weights are partial covariances with y, formed here from residuals on the other regressor; the combined effect is their sum times the
// slopes (Lubotsky and Wittenberg 2006). With proxies of
// z and y = 2 z + ..., it lies closer to 2 than the first proxy's own slope.
func TestAllLeftIn(t *testing.T) {
	const n = 4000
	rng := rand.New(rand.NewPCG(31, 7))
	cols := make([]reduction.Column, 3) // two proxies and a control
	y := reduction.Column{}
	for range n {
		w := rng.NormFloat64()
		z := 0.5*w + rng.NormFloat64()
		for j, v := range []float64{z + 0.8*rng.NormFloat64(), 3*z + 2*rng.NormFloat64(), w} {
			cols[j].Hi = append(cols[j].Hi, v)
		}
		y.Hi = append(y.Hi, 2*z+w+rng.NormFloat64())
	}
	red, err := reduction.Reduce(cols, y, true, reduction.Split{}, 1)
	if err != nil {
		t.Fatal(err)
	}
	s := linear.NewSample(red, red.Total)
	p := &remedy.Problem{Names: []string{"x1", "x2", "w"}, Constant: true, Monomials: make([][]remedy.Factor, 3), Category: make([]string, 3), Focal: make([]bool, 3), Keep: make([]bool, 3),
		Tangled: make([]bool, 3), Groups: []remedy.Group{{Name: "g", Columns: []int{0, 1}, ByUser: true}}, Sample: s}
	r, _ := remedy.Find("index")
	variants, _ := r.Variants(p)
	as := s.LeastSquares(true)
	for _, v := range variants {
		if v.Key != "index:g:all-in" {
			continue
		}
		fit := v.Learn(remedy.Training{Sample: s, Final: true})
		d := v.Describe(&remedy.Final{Problem: p, Fitted: fit, RSS: as.RSS, AsIs: as, S: 1, DF: n - 4})
		// Partial covariances: residuals on the constant and w.
		residual := func(c []float64) []float64 {
			var mc, mw, cw, ww float64
			for i := range c {
				mc += c[i] / n
				mw += cols[2].Hi[i] / n
			}
			for i := range c {
				cw += (c[i] - mc) * (cols[2].Hi[i] - mw)
				ww += (cols[2].Hi[i] - mw) * (cols[2].Hi[i] - mw)
			}
			out := make([]float64, n)
			for i := range c {
				out[i] = c[i] - mc - cw/ww*(cols[2].Hi[i]-mw)
			}
			return out
		}
		e := residual(y.Hi)
		var c1, c2 float64
		x1, x2 := residual(cols[0].Hi), residual(cols[1].Hi)
		for i := range e {
			c1 += e[i] * x1[i]
			c2 += e[i] * x2[i]
		}
		w := d.Derived[0].Weights
		if math.Abs(w[1]-1) > 1e-12 || math.Abs(w[2]-c2/c1) > 1e-9*math.Abs(c2/c1) || w[3] != 0 {
			t.Errorf("weights %v, want 1 and %g", w[1:], c2/c1)
		}
		combined := w[1]*as.Slopes[0] + w[2]*as.Slopes[1]
		if combined > 2 || combined < as.Slopes[0] || 2-combined > 2-as.Slopes[0] {
			t.Errorf("combined effect %g, the first slope %g, the truth 2", combined, as.Slopes[0])
		}
		return
	}
	t.Fatal("no index:g:all-in")
}
