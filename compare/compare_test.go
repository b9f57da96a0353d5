package compare_test

import (
	"context"
	"fmt"
	"math"
	"path/filepath"
	"reflect"
	"strconv"
	"strings"
	"testing"

	"modelmend/compare"
	"modelmend/fit/collinear"
	"modelmend/fit/dataset"
	"modelmend/remedy"
)

func near(t *testing.T, name string, got, want, rel float64) {
	t.Helper()
	if !(math.Abs(got-want) <= rel*math.Abs(want)) {
		t.Errorf("%s: got %.15g, want %.15g", name, got, want)
	}
}

func newStudy(eq string) *compare.Study {
	return &compare.Study{Data: "table.csv", Equation: eq, Purpose: compare.Explain, Seed: compare.DefaultSeed, Cutoffs: collinear.DefaultCutoffs()}
}

func numbers(t testing.TB, names []string, cells [][]float64) *dataset.Table {
	t.Helper()
	var b strings.Builder
	b.WriteString(strings.Join(names, ",") + "\n")
	for _, row := range cells {
		for j, v := range row {
			if j > 0 {
				b.WriteByte(',')
			}
			b.WriteString(strconv.FormatFloat(v, 'g', -1, 64))
		}
		b.WriteByte('\n')
	}
	return text(t, b.String())
}

func text(t testing.TB, csv string) *dataset.Table {
	t.Helper()
	table, err := dataset.Read(strings.NewReader(csv), "table.csv")
	if err != nil {
		t.Fatal(err)
	}
	return table
}

func published(t testing.TB, name string) *dataset.Table {
	t.Helper()
	table, err := dataset.ReadFile(filepath.Join("..", "testdata", name, "data.csv"))
	if err != nil {
		t.Fatal(err)
	}
	return table
}

func runStudy(t testing.TB, table *dataset.Table, study *compare.Study) *compare.Comparison {
	t.Helper()
	c, err := compare.Run(context.Background(), table, study, compare.Options{Workers: 2})
	if err != nil {
		t.Fatal(err)
	}
	return c
}

func find(t testing.TB, c *compare.Comparison, key string) *compare.Alternative {
	t.Helper()
	for _, a := range c.Alternatives {
		if a.Key == key {
			return a
		}
	}
	var have []string
	for _, a := range c.Alternatives {
		have = append(have, a.Key)
	}
	t.Fatalf("no alternative %q among %v; not applicable: %+v", key, have, c.NotApplicable)
	return nil
}

func coefficient(t testing.TB, a *compare.Alternative, name string) compare.Coefficient {
	t.Helper()
	for _, list := range [][]compare.Coefficient{a.Coefficients, a.Derived} {
		for _, k := range list {
			if k.Name == name {
				return k
			}
		}
	}
	t.Fatalf("%s has no coefficient %q", a.Key, name)
	return compare.Coefficient{}
}

// TestPairedInterval: hand-made differences. dbar = 2, S^2 = 10/4 = 2.5 for {0,1,2,3,4}; with J = 5 and share 1/9 the variance is
// 2.5*(1/5+1/9) = 0.777...; t with 4 df at 95 % is 2.776445 (printed in any table as 2.776).
// Formula: Nadeau and Bengio (2003), Machine Learning 52(3), 239-281.
func TestPairedInterval(t *testing.T) {
	got := compare.PairedInterval([]float64{0, 1, 2, 3, 4}, 1.0/9)
	half := 2.7764451051977987 * math.Sqrt(2.5*(1.0/5+1.0/9))
	near(t, "mean", got.Estimate, 2, 1e-15)
	near(t, "low", got.Low, 2-half, 1e-10)
	near(t, "high", got.High, 2+half, 1e-10)
	// The factor of 50 splits in ten folds: 1/50 + 1/9 = 0.1311.
	d := make([]float64, 50)
	for i := range d {
		d[i] = float64(i % 2)
	}
	s2 := 50 * 0.25 / 49
	wide := compare.PairedInterval(d, 1.0/9)
	near(t, "half width", (wide.High-wide.Low)/2, 2.0095752371292397*math.Sqrt(s2*0.131111111111111), 1e-7)
	if one := compare.PairedInterval([]float64{1}, 0.1); !math.IsNaN(one.Low) {
		t.Error("one split has no interval")
	}
}

// TestLongley: certified coefficients and standard deviations (NIST StRD, Longley), and values of Longley (1967) recomputed at 50
// digits: leave-one-out error, ridge at the Hoerl-Kennard-Baldwin penalty, components.
func TestLongley(t *testing.T) {
	study := newStudy("employed = deflator + gnp + unemployed + armed_forces + population + year")
	study.Remedies = []compare.RemedySetting{{Remedy: "ridge", Option: "penalty", Number: 0.000400814755686, Names: []string{"0.000400814755686"}},
		{Remedy: "components", Option: "count", Number: 3, Names: []string{"3"}}}
	c := runStudy(t, published(t, "longley"), study)
	a := find(t, c, "as-is")
	certified := [][2]float64{{-3482258.63459582, 890420.383607373}, {15.0618722713733, 84.9149257747669}, {-0.0358191792925910, 0.0334910077722432},
		{-2.02022980381683, 0.488399681651699}, {-1.03322686717359, 0.214274163161675}, {-0.0511041056535807, 0.226073200069370}, {1829.15146461355, 455.478499142212}}
	for i, k := range a.Coefficients {
		near(t, k.Name, k.Estimate, certified[i][0], 2e-14)
		near(t, k.Name+", standard error", k.SE, certified[i][1], 1e-14)
	}
	near(t, "residual standard deviation", a.S, 304.854073561965, 1e-14)
	near(t, "R2", a.R2, 0.995479004577296, 1e-14)
	near(t, "leave-one-out error", a.Out.RMSE, 424.771449, 1e-8)
	near(t, "PRESS", a.Out.RMSE*a.Out.RMSE*16, 2886892.54145212, 1e-13)
	r := find(t, c, "ridge")
	slopes := []float64{-4.42387625921, -0.00751963364045, -1.59637644171, -0.907548323587, -0.145161012795, 1357.69794713}
	sds := []float64{67.2108984676, 0.0163327045100, 0.268287392446, 0.190860056268, 0.147929692306, 282.104504110}
	for j := range slopes {
		near(t, "ridge slope", r.Coefficients[j+1].Estimate, slopes[j], 1e-10)
		near(t, "ridge standard error given the penalty", r.Coefficients[j+1].SE, sds[j], 1e-10)
		if p := r.Coefficients[j+1].Posterior; !(p > r.Coefficients[j+1].SE) {
			t.Errorf("posterior sd %v is not larger than the sampling sd", p)
		}
	}
	near(t, "effective degrees of freedom", r.Fitted.Tuning.Degrees[r.Fitted.Tuning.Chosen], 5.320219, 1e-6)
	// Leave-one-out with the scaling learned again in each fold, at this penalty: 406.92.
	if math.Abs(r.Out.RMSE-406.92) > 0.005 {
		t.Errorf("ridge leave-one-out error %v, want 406.92", r.Out.RMSE)
	}
	for _, k := range r.Fitted.Tuning.Candidates {
		switch k.Rule {
		case "hoerl-kennard-baldwin":
			near(t, k.Rule, k.Value, 0.000400814755686, 1e-11)
		case "generalized-cross-validation":
			near(t, k.Rule, k.Value, 0.000199726547146890641, 1e-11)
		}
	}
	p := find(t, c, "components")
	for j, want := range []float64{94.7878942992, 0.0126742143340, -1.16149134529, -0.598729576585, 0.153862145455, 202.957526638} {
		near(t, "three components", p.Coefficients[j+1].Estimate, want, 1e-11)
	}
	for k, want := range []float64{42.662, 5.397, 10.660, 0.555, 3.960, 1.717} {
		if got := math.Abs(p.Fitted.Tuning.Components[k].T); math.Abs(got-want) > 0.0005 {
			t.Errorf("t-ratio of component %d: %v, want %v", k+1, got, want)
		}
	}
	// Jolliffe's point on these data: component 5 holds 0.04 % of the regressors' variance, yet its |t| is 3.96.
	found := false
	for _, n := range p.Description.Notes {
		found = found || (n.Code == "dropped-component-matters" && strings.Contains(n.Text, "component 5"))
	}
	if !found {
		t.Errorf("no warning about component 5: %+v", p.Description.Notes)
	}
}

// TestFrenchImports: Malinvaud (1968), 1949-59: coefficients, factors 186/1.02/186 and the two-component regression, as printed and
// recomputed at 50 digits.
func TestFrenchImports(t *testing.T) {
	study := newStudy("import = doprod + stock + consum")
	study.Rows = "year <= 1959"
	study.Remedies = []compare.RemedySetting{{Remedy: "components", Option: "count", Number: 2, Names: []string{"2"}}}
	c := runStudy(t, published(t, "french-imports"), study)
	for j, want := range []float64{-10.1279881552310793, -0.0513961597134035286, 0.586949042664403647, 0.286848675639427671} {
		near(t, "least squares", find(t, c, "as-is").Coefficients[j].Estimate, want, 1e-14)
	}
	for j, want := range []float64{-9.13010782405953005, 0.0727798113228186307, 0.609220120524336275} {
		near(t, "two components", find(t, c, "components").Coefficients[j].Estimate, want, 1e-11)
	}
	for j, want := range []float64{186, 1.02, 186} {
		if got := c.Diagnosis.VIF[j]; math.Abs(got-want) > 0.005*want {
			t.Errorf("factor %d: %v, printed %v", j, got, want)
		}
	}
	if c.Design.Rows != 11 || c.Design.SetAside[0].Reason != "outside the sample" || c.Design.SetAside[0].Count != 7 {
		t.Errorf("rows %d, set aside %+v", c.Design.Rows, c.Design.SetAside)
	}
}

// TestWorkersDoNotMatter: the same numbers for any number of workers.
func TestWorkersDoNotMatter(t *testing.T) {
	table := published(t, "wages")
	study := newStudy("ln(wage) = education + experience + age + union + gender + sector")
	one, err := compare.Run(context.Background(), table, study, compare.Options{Workers: 1})
	if err != nil {
		t.Fatal(err)
	}
	four, err := compare.Run(context.Background(), table, study, compare.Options{Workers: 4})
	if err != nil {
		t.Fatal(err)
	}
	for i, a := range one.Alternatives {
		b := four.Alternatives[i]
		if fmt.Sprintf("%v", a.Out) != fmt.Sprintf("%v", b.Out) || fmt.Sprintf("%v", a.Coefficients) != fmt.Sprintf("%v", b.Coefficients) {
			t.Errorf("%s differs between one and four workers", a.Key)
		}
	}
}

// curved is an invented table with a square, a product and two copies of one concept.
func curved(t testing.TB) *dataset.Table {
	var b strings.Builder
	b.WriteString("y,x,z,w,v,place\n")
	state := uint64(7)
	next := func() float64 { // a small generator of our own, so that the table never changes
		state = state*6364136223846793005 + 1442695040888963407
		return float64(state>>40)/float64(1<<24) - 0.5
	}
	for i := range 120 {
		x, z := 10+4*next(), 3+2*next()
		w := x + 0.3*next()
		y := 1 + 0.5*x + 0.2*x*x - 0.7*z + 0.3*x*z + 0.4*w + next()
		fmt.Fprintf(&b, "%.6f,%.4f,%.4f,%.4f,%.4f,%s\n", y, x, z, w, next(), []string{"north", "south", "west"}[i%3])
	}
	return text(t, b.String())
}

// TestCentringChangesOnlyMeaning: predictions, the top-order coefficient, its standard error and the effect at the mean stay the
// same; lower-order coefficients become the effects at the mean (METHODS: identity, by hand).
func TestCentringChangesOnlyMeaning(t *testing.T) {
	study := newStudy("y = x + z + x^2 + x*z + v + place")
	study.Focal = []string{"x"}
	c := runStudy(t, curved(t), study)
	as, ce := find(t, c, "as-is"), find(t, c, "center")
	near(t, "out-of-sample error", ce.Out.RMSE, as.Out.RMSE, 1e-14)
	for _, name := range []string{"x^2", "x*z", "v", "place=south"} {
		a, b := coefficient(t, as, name), coefficient(t, ce, name)
		near(t, name, b.Estimate, a.Estimate, 1e-12)
		near(t, name+", standard error", b.SE, a.SE, 1e-9)
		if b.Status != remedy.Estimated {
			t.Errorf("%s: status %q", name, b.Status)
		}
	}
	for _, name := range []string{"x", "z", "constant"} {
		if s := coefficient(t, ce, name).Status; s != remedy.Different {
			t.Errorf("%s: status %q, want a different quantity", name, s)
		}
	}
	ea, ec := coefficient(t, as, "effect of x"), coefficient(t, ce, "effect of x")
	near(t, "effect of x", ec.Estimate, ea.Estimate, 1e-12)
	near(t, "effect of x, standard error", ec.SE, ea.SE, 1e-9)
	// By hand: the centred coefficient of x is b_x + 2 b_xx mean(x) + b_xz mean(z), which is the effect at the means.
	near(t, "centred x is the effect at the means", coefficient(t, ce, "x").Estimate, ea.Estimate, 1e-12)
	near(t, "its standard error", coefficient(t, ce, "x").SE, ea.SE, 1e-7)
	mx, mz := c.Problem.Sample.Mean[0].Float(), c.Problem.Sample.Mean[1].Float()
	hand := coefficient(t, as, "x").Estimate + 2*coefficient(t, as, "x^2").Estimate*mx + coefficient(t, as, "x*z").Estimate*mz
	near(t, "effect by hand", ea.Estimate, hand, 1e-12)
}

func TestCentringNeedsLowerOrders(t *testing.T) {
	study := newStudy("y = x*z + v")
	c := runStudy(t, curved(t), study)
	for _, n := range c.NotApplicable {
		if n.Key == "center" {
			if !strings.Contains(n.Reason, "add x and z") {
				t.Errorf("reason %q does not name what is missing", n.Reason)
			}
			return
		}
	}
	t.Error("centring was offered although x and z are missing")
}

// TestDropRespectsBuiltOnTerms: dropping x takes its square and product along, or is refused where they are of interest.
func TestDropRespectsBuiltOnTerms(t *testing.T) {
	study := newStudy("y = x + z + x^2 + x*z + w + v")
	study.Keep = []string{"z"}
	c := runStudy(t, curved(t), study)
	d := find(t, c, "drop:x")
	if got := c.Problem.Names; !reflect.DeepEqual(d.Variant.Removes, []int{0, 2, 3}) {
		t.Errorf("drop:x removes %v of %v", d.Variant.Removes, got)
	}
	for _, name := range []string{"x", "x^2", "x*z"} {
		if k := coefficient(t, d, name); k.Status != remedy.Zero || k.Estimate != 0 || !math.IsNaN(k.SE) {
			t.Errorf("%s: %+v, want zero without standard error", name, k)
		}
	}
	study.Focal = []string{"x*z"}
	c = runStudy(t, curved(t), study)
	for _, a := range c.Alternatives {
		if a.Key == "drop:x" {
			t.Error("drop:x was offered although x*z is of interest")
		}
	}
}

// TestExactDependency: compare never refuses it: members have no coefficient, others do, and the remedies that can still be fitted are.
func TestExactDependency(t *testing.T) {
	var b strings.Builder
	b.WriteString("y,a,b,c,d\n")
	state := uint64(3)
	next := func() int {
		state = state*6364136223846793005 + 1442695040888963407
		return int(state >> 58)
	}
	for range 60 {
		x, z, d := next(), next(), next()
		fmt.Fprintf(&b, "%d,%d,%d,%d,%d\n", 3*x-z+d+next()/8, x, z, x+2*z+5, d)
	}
	c := runStudy(t, text(t, b.String()), newStudy("y = a + b + c + d"))
	a := find(t, c, "as-is")
	for _, name := range []string{"a", "b", "c", "constant"} {
		k := coefficient(t, a, name)
		if k.Status != remedy.NotIdentified || !math.IsNaN(k.Estimate) || !math.IsNaN(k.SE) || k.SEReason == "" {
			t.Errorf("%s: %+v, want not identified", name, k)
		}
	}
	if k := coefficient(t, a, "d"); k.Status != remedy.Estimated || math.IsNaN(k.SE) {
		t.Errorf("d: %+v, want estimated", k)
	}
	if got := c.Diagnosis.Dependencies[0].Equation; got != "c = a + 2*b + 5" {
		t.Errorf("dependency %q", got)
	}
	drop := find(t, c, "drop:c")
	if k := coefficient(t, drop, "a"); k.Status != remedy.Estimated || math.IsNaN(k.SE) {
		t.Errorf("after dropping c, a is %+v", k)
	}
	near(t, "dropping an exact combination changes no prediction", drop.Out.RMSE, a.Out.RMSE, 1e-9)
	for _, key := range []string{"ridge", "components"} {
		alt := find(t, c, key)
		if k := coefficient(t, alt, "a"); math.IsNaN(k.Estimate) || math.IsNaN(k.SE) || !math.IsNaN(k.Bias) {
			t.Errorf("%s: %+v, want an estimate without a bias", key, k)
		}
	}
}

// TestMoreRegressorsThanRows: honest about what cannot be said.
func TestMoreRegressorsThanRows(t *testing.T) {
	var cells [][]float64
	names := []string{"y"}
	for j := range 12 {
		names = append(names, fmt.Sprintf("x%d", j))
	}
	state := uint64(5)
	for range 10 {
		row := []float64{}
		for range names {
			state = state*6364136223846793005 + 1442695040888963407
			row = append(row, float64(state>>50))
		}
		cells = append(cells, row)
	}
	c := runStudy(t, numbers(t, names, cells), newStudy("y = "+strings.Join(names[1:], " + ")))
	if !math.IsNaN(c.S) {
		t.Errorf("residual sd %v with no degrees of freedom", c.S)
	}
	for _, a := range c.Alternatives {
		for _, k := range a.Coefficients {
			if !a.Variant.OwnVariance && !math.IsNaN(k.SE) {
				t.Errorf("%s, %s: standard error %v without a residual variance", a.Key, k.Name, k.SE)
			}
		}
		if math.IsNaN(a.Out.RMSE) || math.IsInf(a.Out.RMSE, 0) {
			t.Errorf("%s: error %v", a.Key, a.Out.RMSE)
		}
	}
}

// TestIndexRestriction: F of the index equals the Wald test of the proportionality restriction, computed by fit/linear; the sum index has
// equal raw slopes; the index's own coefficient times the weight is the implied slope.
func TestIndexRestriction(t *testing.T) {
	study := newStudy("y = x + w + z + v")
	study.Groups = []compare.NamedGroup{{Name: "concept", Members: []string{"x", "w"}}}
	c := runStudy(t, curved(t), study)
	sum := find(t, c, "index:concept:sum")
	near(t, "equal slopes", coefficient(t, sum, "x").Estimate, coefficient(t, sum, "w").Estimate, 1e-13)
	near(t, "own coefficient", coefficient(t, sum, "concept").Estimate, coefficient(t, sum, "x").Estimate, 1e-13)
	near(t, "its standard error", coefficient(t, sum, "concept").SE, coefficient(t, sum, "x").SE, 1e-10)
	fit, err := c.Problem.Sample.Restrict([]float64{1, -1, 0, 0}, []float64{0})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "F is Wald", sum.Description.Tests[0].Statistic, fit.Wald/(c.S*c.S), 1e-9)
	near(t, "restricted slope", coefficient(t, sum, "z").Estimate, fit.Slopes[2], 1e-11)
	mean := find(t, c, "index:concept:mean")
	w := mean.Fitted.Weights
	near(t, "implied slopes stand as the weights", coefficient(t, mean, "x").Estimate/coefficient(t, mean, "w").Estimate, w[0]/w[1], 1e-12)
	near(t, "weights are 1/(2 sd)", w[0], 1/(2*c.Problem.Sample.SD(0)), 1e-13)
}

func TestStudyErrorsNameTheKey(t *testing.T) {
	table := curved(t)
	for _, c := range []struct {
		name string
		edit func(*compare.Study)
		want []string
	}{
		{"focal", func(s *compare.Study) { s.Focal = []string{"areas"} }, []string{"focal", `"areas"`}},
		{"keep", func(s *compare.Study) { s.Keep = []string{"ww"} }, []string{"keep", "did you mean w"}},
		{"group name", func(s *compare.Study) { s.Groups = []compare.NamedGroup{{Name: "x", Members: []string{"z", "w"}}} }, []string{"groups", "another name"}},
		{"small group", func(s *compare.Study) { s.Groups = []compare.NamedGroup{{Name: "g", Members: []string{"z"}}} }, []string{"at least two"}},
		{"remedy", func(s *compare.Study) { s.Remedies = []compare.RemedySetting{{Remedy: "rigde", Off: true}} }, []string{"no remedy", "rigde"}},
		{"option", func(s *compare.Study) {
			s.Remedies = []compare.RemedySetting{{Remedy: "ridge", Option: "lambda", Number: 1}}
		}, []string{"ridge.lambda", "ridge.penalty"}},
		{"negative", func(s *compare.Study) {
			s.Remedies = []compare.RemedySetting{{Remedy: "ridge", Option: "penalty", Number: -1}}
		}, []string{"-1 is not allowed"}},
		{"smallest", func(s *compare.Study) { s.SmallestEffect = []compare.NamedNumber{{Name: "x", Value: -2}} }, []string{"smallest_effect", "positive"}},
		{"folds", func(s *compare.Study) { s.Folds = compare.FoldSpec{Kind: "random", Count: 500} }, []string{"500 folds"}},
		{"fold column", func(s *compare.Study) { s.Folds = compare.FoldSpec{Kind: "column", Columns: []string{"plac"}} }, []string{"did you mean place"}},
		{"as-is off", func(s *compare.Study) { s.Remedies = []compare.RemedySetting{{Remedy: "as-is", Off: true}} }, []string{"cannot be switched off"}},
	} {
		s := newStudy("y = x + z + w + v")
		c.edit(s)
		_, err := compare.Run(context.Background(), table, s, compare.Options{})
		if err == nil {
			t.Errorf("%s: accepted", c.name)
			continue
		}
		for _, w := range c.want {
			if !strings.Contains(err.Error(), w) {
				t.Errorf("%s: %q does not say %q", c.name, err, w)
			}
		}
	}
}

func TestCancelStops(t *testing.T) {
	ctx, stop := context.WithCancel(context.Background())
	stop()
	if _, err := compare.Run(ctx, curved(t), newStudy("y = x + z"), compare.Options{}); err != context.Canceled {
		t.Errorf("got %v", err)
	}
}
