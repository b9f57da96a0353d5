package compare

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"modelmend/fit/dataset"
	"modelmend/fit/folds"
	"modelmend/fit/reduction"
	"modelmend/fit/tail"
	"modelmend/remedy"
)

// TestAcceleratedInterval holds the intervals to an independent computation: .ci/reference/accelerated.py (Python 3.11.7, statistics module).
func TestAcceleratedInterval(t *testing.T) {
	values := make([]float64, 999)
	for b := range values {
		values[b] = math.Exp(tail.NormalQuantile((float64(b) + 0.5) / 999))
	}
	deleted := make([]float64, 50)
	for i := range deleted {
		deleted[i] = 1 + math.Pow(float64(i)/50, 3)
	}
	rand.New(rand.NewPCG(1, 2)).Shuffle(len(values), func(i, j int) { values[i], values[j] = values[j], values[i] })
	values = append(values, math.NaN()) // a resample in which the coefficient has no value is left out
	r := spread(&Coefficient{Estimate: 0.9}, values, deleted)
	for _, c := range []struct {
		name      string
		got, want float64
	}{
		{"acceleration", r.Acceleration, -0.025201916014}, {"z0", r.BiasOffset, -0.104318097025},
		{"low", r.Low, 0.1397129861}, {"high", r.High, 7.1575307902}, {"accelerated low", r.AccLow, 0.1003668151}, {"accelerated high", r.AccHigh, 5.3283407281},
	} {
		if math.Abs(c.got-c.want) > 1e-9*math.Max(1, math.Abs(c.want)) {
			t.Errorf("%s: got %.12g, want %.12g", c.name, c.got, c.want)
		}
	}
	if r.Used != 999 || r.Positive != 1 || r.Negative != 0 {
		t.Errorf("used %d, positive %g, negative %g", r.Used, r.Positive, r.Negative)
	}
	far := spread(&Coefficient{Estimate: -5}, values, deleted)
	if !math.IsNaN(far.AccLow) || math.IsNaN(far.Low) {
		t.Errorf("an estimate outside all resamples has no accelerated interval; got %g", far.AccLow)
	}
}

// TestSharesAreCounted: a share is a count over a count; what holds in all of 999 is 1, and not a little less.
func TestSharesAreCounted(t *testing.T) {
	const n = 999
	ones, covered := make([]float64, n), make([]bool, n)
	for i := range ones {
		ones[i], covered[i] = 1, true
	}
	if r := tuned([]float64{0, 1}, ones); r.Shares[1] != 1 || r.Shares[0] != 0 {
		t.Errorf("shares %v", r.Shares)
	}
	if s := sumUp(AsEstimated, "x", -2, ones, covered); s.Coverage != 1 || s.WrongSign != 1 || s.CoverageError != 0 {
		t.Errorf("coverage %v with error %v, wrong sign %v", s.Coverage, s.CoverageError, s.WrongSign)
	}
	covered[0] = false
	if s := sumUp(AsEstimated, "x", 2, ones, covered); s.Coverage != 998./999 || s.WrongSign != 0 {
		t.Errorf("coverage %v, wrong sign %v", s.Coverage, s.WrongSign)
	}
}

// table makes a table of n rows of p tangled regressors.
func madeTable(t testing.TB, seed uint64, n, p int, common float64) (*dataset.Table, *Study) {
	t.Helper()
	rng := rand.New(rand.NewPCG(seed, 77))
	var b strings.Builder
	b.WriteString("y")
	eq := "y ="
	for j := range p {
		fmt.Fprintf(&b, ",x%d", j)
		if j > 0 {
			eq += " +"
		}
		eq += fmt.Sprintf(" x%d", j)
	}
	for range n {
		c := rng.NormFloat64()
		y := 3 * rng.NormFloat64()
		row := ""
		for j := range p {
			x := common*c + rng.NormFloat64()
			y += x * float64(j%3)
			row += fmt.Sprintf(",%g", x)
		}
		fmt.Fprintf(&b, "\n%g%s", y, row)
	}
	table, err := dataset.Read(strings.NewReader(b.String()), "made.csv")
	if err != nil {
		t.Fatal(err)
	}
	return table, &Study{Data: "made.csv", Equation: eq, Purpose: Explain, Seed: DefaultSeed}
}

// TestNoCopyOnBothSides: each row has an indicator of its own, so that the training and held-out moments of a resample show how often each row is in
// them: as often as drawn in one fold, and nowhere else.
func TestNoCopyOnBothSides(t *testing.T) {
	const n = 13
	var b strings.Builder
	b.WriteString("y")
	eq := "y = d0"
	for i := range n - 1 {
		fmt.Fprintf(&b, ",d%d", i)
		if i > 0 {
			eq += fmt.Sprintf(" + d%d", i)
		}
	}
	for i := range n {
		fmt.Fprintf(&b, "\n%d", i*i%7)
		for j := range n - 1 {
			if i == j {
				b.WriteString(",1")
			} else {
				b.WriteString(",0")
			}
		}
	}
	table, err := dataset.Read(strings.NewReader(b.String()), "made.csv")
	if err != nil {
		t.Fatal(err)
	}
	s := &Study{Equation: eq, Seed: 5, NoConstant: true, Folds: FoldSpec{Kind: "random", Count: 3, Repeats: 2}}
	c, red, err := prepare(context.Background(), table, s, Options{}, true)
	if err != nil {
		t.Fatal(err)
	}
	source := c.rowSource(red)
	for b := range 50 {
		w := draw(5, b, n, 1)
		sums := source.light
		if sums == nil {
			t.Fatal("indicators are as far from dependent as can be")
		}
		parts := sums.Sum([][]float64{w})[0]
		for i := range n - 1 {
			in := 0
			k := 1 + n // the cross-products of n columns: n-1 indicators and y
			for j := range i {
				k += n - j
			}
			for f, part := range parts {
				times := math.Round(part[k] * sums.Scale[i] * sums.Scale[i])
				if times == 0 {
					continue
				}
				in++
				if int(times) != int(w[i]) || f != c.Plan.Of(0, i) {
					t.Fatalf("resample %d: row %d is %g times in fold %d; drawn %g times, its fold is %d", b, i, times, f, w[i], c.Plan.Of(0, i))
				}
			}
			if (in == 1) != (w[i] > 0) {
				t.Fatalf("resample %d: row %d lies in %d folds, drawn %g times", b, i, in, w[i])
			}
		}
	}
}

// TestSourcesAgree: float64 and double-double resamples, and rows against groups of one row each, give the same fits.
func TestSourcesAgree(t *testing.T) {
	table, s := madeTable(t, 4, 60, 4, 2)
	c, red, err := prepare(context.Background(), table, s, Options{}, true)
	if err != nil {
		t.Fatal(err)
	}
	choices := c.variants()
	light := c.rowSource(red)
	if light.light == nil {
		t.Fatal("expected a light source")
	}
	n := c.Design.Rows
	unit, of := make([]int32, n), make([]int32, n)
	for i := range unit {
		unit[i], of[i] = int32(i), int32(c.Plan.Of(0, i))
	}
	cols := append(c.Design.Columns(), c.Design.Y)
	var weights [][]float64
	for b := range 20 {
		weights = append(weights, draw(9, b, n, 1))
	}
	got, want := newReplicates(len(choices), 20, 5), newReplicates(len(choices), 20, 5)
	for b, p := range light.weighted(weights) {
		got.learn(choices, p.whole(), nil, b)
	}
	heavy := *light
	heavy.light = nil
	heavy.heavy = weighted(red, cols, unit, of, c.Plan.Counts[0])
	for b, p := range heavy.weighted(weights) {
		want.learn(choices, p.whole(), nil, b)
	}
	for i, ch := range choices {
		for k, v := range want.values[i] {
			if g := got.values[i][k]; math.Abs(g-v) > 1e-8*math.Max(1, math.Abs(v)) {
				t.Errorf("%s: resample %d: %.15g, want %.15g", ch.variant.Key, k/5, g, v)
			}
		}
		for b, v := range want.chosen[i] {
			if g := got.chosen[i][b]; g != v && !(math.IsNaN(g) && math.IsNaN(v)) {
				t.Errorf("%s: resample %d chose %g, want %g", ch.variant.Key, b, g, v)
			}
		}
	}
}

// TestCopiesStayTogether repeats the case of a leaking resample: with 60 rows and five tangled regressors, tuning collapses when copies of a row are
// dealt into folds one by one, and does not when they stay together. (The collapse was computed outside this project on another design of the same
// size: medians 0.12 leaking, 0.70 kept together, 0.52 in original samples.)
func TestCopiesStayTogether(t *testing.T) {
	var together, leaking, original []float64
	for seed := range uint64(12) {
		table, s := madeTable(t, seed, 60, 5, 3)
		s.Folds = FoldSpec{Kind: "random", Count: 5, Repeats: 1}
		c, red, err := prepare(context.Background(), table, s, Options{}, true)
		if err != nil {
			t.Fatal(err)
		}
		var ridge choice
		for _, ch := range c.variants() {
			if ch.variant.Key == "ridge" {
				ridge = ch
			}
		}
		penalty := func(tr remedy.Training) float64 {
			f := ridge.variant.Learn(tr)
			return math.Log(f.Tuning.Values[max(1, f.Tuning.Chosen)])
		}
		source := c.rowSource(red)
		ones := make([]float64, 60)
		for i := range ones {
			ones[i] = 1
		}
		original = append(original, penalty(source.weighted([][]float64{ones})[0].whole()))
		cols := append(c.Design.Columns(), c.Design.Y)
		for b := range 20 {
			w := draw(int64(1000+seed), b, 60, 1)
			together = append(together, penalty(source.weighted([][]float64{w})[0].whole()))
			// Each copy as a row of its own, dealt into folds at random.
			var unit []int32
			for i, times := range w {
				for range int(times) {
					unit = append(unit, int32(i))
				}
			}
			again := rowsOf(cols, unit)
			p, err := folds.NewRandom(60, 5, 1, int64(b), false)
			if err != nil {
				t.Fatal(err)
			}
			own, of := make([]int32, 60), make([]int32, 60)
			for i := range own {
				own[i], of[i] = int32(i), int32(p.Of(0, i))
			}
			leaky := rowSource{units: 60, folds: 5, heavy: weighted(red, again, own, of, 5)}
			leaking = append(leaking, penalty(leaky.weighted([][]float64{ones})[0].whole()))
		}
	}
	a, l, o := median(together), median(leaking), median(original)
	t.Logf("median penalty: original samples %.3g, copies together %.3g, copies leaking %.3g", math.Exp(o), math.Exp(a), math.Exp(l))
	if l > a-math.Log(2) {
		t.Errorf("median penalty %.3g with copies together, %.3g leaking: the leak should halve it at least", math.Exp(a), math.Exp(l))
	}
	if a < o-math.Log(2) {
		t.Errorf("median penalty %.3g with copies together, %.3g in original samples: tuning collapsed", math.Exp(a), math.Exp(o))
	}
}

func median(v []float64) float64 {
	s := append([]float64{}, v...)
	for i := range s {
		for j := i; j > 0 && s[j] < s[j-1]; j-- {
			s[j], s[j-1] = s[j-1], s[j]
		}
	}
	return quantile(s, 0.5)
}

// TestResampledAgainstFormula: with errors whose spread grows with a regressor, the resampled standard error of least squares is that of the
// heteroskedasticity-robust formula (White 1980), written out here in plain loops, and not the classical one. With 2,000 resamples the standard
// deviation has a standard error of 1.6 %; the formula and the pairs scheme differ by terms of order 1/n.
func TestResampledAgainstFormula(t *testing.T) {
	for _, n := range []int{400, 20000} { // rows, then groups of rows
		rng := rand.New(rand.NewPCG(8, 8))
		var b strings.Builder
		b.WriteString("y,x,z")
		x, z, y := make([]float64, n), make([]float64, n), make([]float64, n)
		for i := range n {
			x[i] = rng.NormFloat64()
			z[i] = x[i] + 0.5*rng.NormFloat64()
			y[i] = 1 + x[i] + (0.3+math.Abs(x[i]))*rng.NormFloat64()
			fmt.Fprintf(&b, "\n%.17g,%.17g,%.17g", y[i], x[i], z[i])
		}
		table, err := dataset.Read(strings.NewReader(b.String()), "made.csv")
		if err != nil {
			t.Fatal(err)
		}
		c, err := Run(context.Background(), table, &Study{Equation: "y = x + z", Seed: 3, Resamples: 2000, Focal: []string{"x"}}, Options{})
		if err != nil {
			t.Fatal(err)
		}
		wantKind := DrawRows
		if n > folds.Exact {
			wantKind = DrawGroups
		}
		if c.Resampling.Kind != wantKind {
			t.Errorf("n = %d: drawn were %s", n, c.Resampling.Kind)
		}
		// x net of z and the constant, and the residuals of y on both.
		mean := func(v []float64) float64 {
			s := 0.0
			for _, a := range v {
				s += a / float64(n)
			}
			return s
		}
		mx, mz, my := mean(x), mean(z), mean(y)
		var xx, xz, zz, xy, zy float64
		for i := range n {
			xx += (x[i] - mx) * (x[i] - mx)
			xz += (x[i] - mx) * (z[i] - mz)
			zz += (z[i] - mz) * (z[i] - mz)
			xy += (x[i] - mx) * (y[i] - my)
			zy += (z[i] - mz) * (y[i] - my)
		}
		det := xx*zz - xz*xz
		bx, bz := (zz*xy-xz*zy)/det, (xx*zy-xz*xy)/det
		var top, bottom, rss float64
		for i := range n {
			net := x[i] - mx - xz/zz*(z[i]-mz)
			e := y[i] - my - bx*(x[i]-mx) - bz*(z[i]-mz)
			top += net * net * e * e
			bottom += net * net
			rss += e * e
		}
		robust, classical := math.Sqrt(top)/bottom, math.Sqrt(rss/float64(n-3)/bottom)
		k := c.Alternatives[0].Coefficients[1]
		if k.Name != "x" || k.Resampled == nil {
			t.Fatalf("n = %d: %+v", n, k)
		}
		r := k.Resampled
		if math.Abs(r.SE/robust-1) > 0.08 || robust < 1.15*classical {
			t.Errorf("n = %d: resampled %g, robust formula %g, classical %g", n, r.SE, robust, classical)
		}
		half := 1.96 * robust
		if math.Abs(r.Low-(k.Estimate-half)) > 0.3*half || math.Abs(r.High-(k.Estimate+half)) > 0.3*half || math.Abs(r.AccLow-r.Low) > 0.3*half {
			t.Errorf("n = %d: intervals %g to %g (accelerated %g to %g), estimate %g, robust standard error %g", n, r.Low, r.High, r.AccLow, r.AccHigh, k.Estimate, robust)
		}
		for _, a := range c.Alternatives {
			if a.Fitted.Tuning == nil {
				continue
			}
			sum := 0.0
			for _, v := range a.TuningResampled.Shares {
				sum += v
			}
			if math.Abs(sum-1) > 1e-9 || a.TuningResampled.Low > a.TuningResampled.High {
				t.Errorf("%s: shares of the chosen values add up to %g", a.Key, sum)
			}
		}
	}
}

// TestResamplesDoNotDependOnWorkers: every number is the same for one core and for several.
func TestResamplesDoNotDependOnWorkers(t *testing.T) {
	table, s := madeTable(t, 2, 80, 3, 2)
	s.Resamples = 120
	text := func(workers int) string {
		c, err := Run(context.Background(), table, s, Options{Workers: workers})
		if err != nil {
			t.Fatal(err)
		}
		var b strings.Builder
		for _, a := range c.Alternatives {
			for _, k := range a.Coefficients {
				fmt.Fprintf(&b, "%s %s %+v\n", a.Key, k.Name, *k.Resampled)
			}
			fmt.Fprintf(&b, "%+v\n", a.TuningResampled)
		}
		return b.String()
	}
	if one := text(1); one != text(4) {
		t.Error("one worker and four differ")
	}
}

// TestDependentResamples: a dummy that four rows hold is missing from some resamples; these are counted out, and said so.
func TestDependentResamples(t *testing.T) {
	var b strings.Builder
	b.WriteString("y,x,d")
	for i := range 40 {
		d := 0
		if i < 3 {
			d = 1
		}
		fmt.Fprintf(&b, "\n%d,%d,%d", (i*i)%11, i, d)
	}
	table, err := dataset.Read(strings.NewReader(b.String()), "made.csv")
	if err != nil {
		t.Fatal(err)
	}
	c, err := Run(context.Background(), table, &Study{Equation: "y = x + d", Seed: 3, Resamples: 500, Focal: []string{"x"}}, Options{})
	if err != nil {
		t.Fatal(err)
	}
	d := c.Alternatives[0].Coefficients[2].Resampled
	// A resample misses three given rows of 40 with probability (37/40)^40 = 0.0442: 22 of 500, standard deviation 4.6.
	if missing := 500 - d.Used; missing < 4 || missing > 41 {
		t.Errorf("the dummy had no value in %d of 500 resamples, expected about 22", missing)
	}
	if x := c.Alternatives[0].Coefficients[1].Resampled; x.Used != 500 {
		t.Errorf("x had a value in %d of 500 resamples", x.Used)
	}
}

// weighted sums rows in double-double.
func weighted(red *reduction.Reduction, cols []reduction.Column, unit, of []int32, folds int) func([]float64) *reduction.Reduction {
	return func(w []float64) *reduction.Reduction { return red.Weighted(cols, unit, of, folds, w) }
}

// rowsOf takes rows in the order named.
func rowsOf(cols []reduction.Column, rows []int32) []reduction.Column {
	out := make([]reduction.Column, len(cols))
	for j := range out {
		for _, i := range rows {
			out[j].Hi = append(out[j].Hi, cols[j].Hi[i])
		}
	}
	return out
}
