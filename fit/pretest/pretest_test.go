package pretest

import (
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"

	"gonum.org/v1/gonum/mat"

	"modelmend/fit/tail"
)

func near(t *testing.T, name string, got, want, gap float64) {
	t.Helper()
	if !(math.Abs(got-want) <= gap) {
		t.Errorf("%s: got %.17g, want %.17g, gap %.2g", name, got, want, math.Abs(got-want))
	}
}

// Critical values at 5 % as a computation of the project, made before this package with other means, printed them; the last row is exact to
// its digits from chi-square and noncentral chi-square. By hand: 3.8415 is 1.95996^2, 2.9957 is -ln 0.05. TestLibrary in fit/tail holds the same
// values to 13 digits. The central columns stand in any table of F.
var criticals = []struct {
	df     float64
	values [7]float64 // q = 1: central, strong; q = 2: central, strong, second weak; q = 3: strong, second weak
}{
	{10, [7]float64{4.9646, 9.2858, 4.1028, 5.9926, 7.6631, 4.8781, 6.9705}},
	{20, [7]float64{4.3512, 8.0368, 3.4928, 5.0717, 6.4268, 4.0619, 5.7339}},
	{30, [7]float64{4.1709, 7.6703, 3.3158, 4.8045, 6.0681, 3.8261, 5.3761}},
	{60, [7]float64{4.0012, 7.3259, 3.1504, 4.5547, 5.7327, 3.6061, 5.0420}},
	{120, [7]float64{3.9201, 7.1615, 3.0718, 4.4360, 5.5733, 3.5017, 4.8832}},
	{math.Inf(1), [7]float64{3.8415, 7.0021, 2.9957, 4.3211, 5.4191, 3.4008, 4.7296}},
}

func TestCriticalValues(t *testing.T) {
	for _, row := range criticals {
		one, two, three := MeanSquaredError(1, 1, row.df, 0.05), MeanSquaredError(1, 2, row.df, 0.05), MeanSquaredError(1, 3, row.df, 0.05)
		got := [7]Criterion{one.Exact, one.Strong, two.Exact, two.Strong, two.SecondWeak, three.Strong, three.SecondWeak}
		for i, want := range row.values {
			near(t, fmt.Sprintf("column %d, %v degrees of freedom", i+1, row.df), got[i].Critical, want, 0.00005001)
		}
		if one.SecondWeak != one.Strong || two.Strong.Noncentrality != 1 || two.SecondWeak.Noncentrality != 2 || two.Exact.Noncentrality != 0 {
			t.Error("a criterion has another noncentrality than it says")
		}
	}
}

func TestPValues(t *testing.T) {
	// An F at the critical value has the size as its P.
	at := MeanSquaredError(1, 3, 40, 0.1)
	for name, c := range map[string]Criterion{"exact": at.Exact, "strong": at.Strong, "second weak": at.SecondWeak} {
		again := MeanSquaredError(c.Critical, 3, 40, 0.1)
		p := map[string]float64{"exact": again.Exact.P, "strong": again.Strong.P, "second weak": again.SecondWeak.P}[name]
		near(t, name, p, 0.1, 1e-13)
	}
	// The plain F test is the first one; each weaker hypothesis is harder to reject.
	c := MeanSquaredError(5, 2, 30, 0.05)
	if c.Exact.P != tail.F(5, 2, 30) || !(c.Exact.P < c.Strong.P && c.Strong.P < c.SecondWeak.P) {
		t.Errorf("P values %v", c)
	}
	for _, bad := range []Criteria{MeanSquaredError(1, 0, 30, 0.05), MeanSquaredError(1, 2, -1, 0.05), MeanSquaredError(1, 2, 30, 0), MeanSquaredError(1, 2, 30, 1), MeanSquaredError(1, math.Inf(1), 30, 0.05)} {
		if !math.IsNaN(bad.Exact.Critical) || !math.IsNaN(bad.Exact.P) || !math.IsNaN(bad.Strong.P) || !math.IsNaN(bad.SecondWeak.Critical) {
			t.Errorf("what is impossible gave %v", bad)
		}
	}
	for _, f := range []float64{-1, math.NaN()} {
		if c := MeanSquaredError(f, 2, 30, 0.05); !math.IsNaN(c.Strong.P) || math.IsNaN(c.Strong.Critical) {
			t.Errorf("an F of %v gave %v", f, c)
		}
	}
}

// TestStrongCriterion holds the marks against the algebra of restricted least squares: for two restrictions on four coefficients whose discrepancies
// have noncentrality 1, no combination of coefficients loses, and one breaks even; the fitted values break even at 2.
func TestStrongCriterion(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	draw := func(r, c int) *mat.Dense {
		m := mat.NewDense(r, c, nil)
		m.Apply(func(_, _ int, _ float64) float64 { return rng.NormFloat64() }, m)
		return m
	}
	x, restrict, d := draw(9, 4), draw(2, 4), draw(2, 1)
	var cross, inverse, half, v, vInverse, w, unit mat.Dense // sigma = 1
	cross.Mul(x.T(), x)
	inverse.Inverse(&cross)
	half.Mul(&inverse, restrict.T())
	v.Mul(restrict, &half)
	vInverse.Inverse(&v)
	unit.Mul(&vInverse, d)
	w.Mul(d.T(), &unit)
	d.Scale(1/math.Sqrt(w.At(0, 0)), d) // now d'V^-1 d = 1
	unit.Mul(&vInverse, d)
	bias := func(c *mat.Dense) float64 { // c' S^-1 R' V^-1 d
		var a, b mat.Dense
		a.Mul(&half, &unit)
		b.Mul(c.T(), &a)
		return math.Abs(b.At(0, 0))
	}
	room := func(c *mat.Dense) float64 {
		var a, b, e, long, gain mat.Dense
		a.Mul(&inverse, c)
		long.Mul(c.T(), &a)
		b.Mul(restrict, &a)
		e.Mul(&vInverse, &b)
		gain.Mul(b.T(), &e)
		return BreakEvenBias(long.At(0, 0), long.At(0, 0)-gain.At(0, 0))
	}
	for range 200 {
		if c := draw(4, 1); bias(c) > room(c) {
			t.Fatalf("bias %v beyond %v though the noncentrality is 1", bias(c), room(c))
		}
	}
	var worst mat.Dense
	worst.Mul(restrict.T(), &unit)
	near(t, "the combination that breaks even", bias(&worst), room(&worst), 1e-12)
	summed, allowed := 0.0, 0.0
	for i := range 9 {
		row := mat.NewDense(4, 1, mat.Row(nil, i, x))
		summed += 2 * math.Pow(bias(row), 2) // discrepancies grown by the root of 2: noncentrality 2
		allowed += math.Pow(room(row), 2)
	}
	near(t, "the fitted values break even", summed, allowed, 1e-12)
}

func TestBreakEven(t *testing.T) {
	// By hand, two standardised regressors with correlation 0.6 and sigma = 1: Var(b1) = Var(b2) = 1/0.64 in the long model, 1 in the short one,
	// and dropping the second moves b1 by 0.6 of its coefficient. Both marks name the same coefficient, 1.25.
	near(t, "one restriction", BreakEven(1/0.8), 1.25, 0)
	near(t, "its bias", BreakEvenBias(1/0.64, 1), 0.6*1.25, 1e-15)
	if BreakEvenBias(2, 2) != 0 || BreakEvenBias(2, 2*(1+1e-15)) != 0 || BreakEven(0) != 0 {
		t.Error("nothing to gain leaves no room")
	}
	for _, v := range []float64{BreakEven(-1), BreakEven(math.NaN()), BreakEvenBias(1, 1.1), BreakEvenBias(-1, -2), BreakEvenBias(1, -1), BreakEvenBias(math.NaN(), 1), BreakEvenBias(math.Inf(1), 1)} {
		if !math.IsNaN(v) {
			t.Errorf("what is impossible gave %v", v)
		}
	}
}

func TestLibrary(t *testing.T) {
	raw, err := os.ReadFile(filepath.Join("..", "..", "testdata", "choosing", "values.json"))
	if err != nil {
		t.Fatal(err)
	}
	// Made by .ci/reference/choosing.py with mpmath: an integral over the other estimate, to 20 digits.
	var library struct {
		Coverage []struct {
			R, Delta, Cut, Level float64
			Covered              float64 `json:",string"`
		}
		Worst []struct {
			R, Cut, Level  float64
			Covered, Delta float64 `json:",string"`
		}
	}
	if err := json.Unmarshal(raw, &library); err != nil {
		t.Fatal(err)
	}
	if len(library.Coverage) == 0 || len(library.Worst) == 0 {
		t.Fatal("the file of values lacks a part")
	}
	for _, c := range library.Coverage {
		near(t, fmt.Sprintf("coverage %v", c), Coverage(c.R, c.Delta, c.Cut, c.Level), c.Covered, 2e-15)
	}
	for _, c := range library.Worst {
		covered, delta := WorstCoverage(c.R, c.Cut, c.Level)
		near(t, fmt.Sprintf("worst coverage %v", c), covered, c.Covered, 2e-15)
		near(t, fmt.Sprintf("where it is reached %v", c), delta, c.Delta, 2e-8)
	}
}

func TestWorstCoverage(t *testing.T) {
	// Worst coverage of a nominal 95 % interval with the cut-off 1.96, in per cent as an earlier computation of the project printed it.
	for _, c := range []struct{ r, percent float64 }{{0.5, 87.2}, {0.7, 73.3}, {0.8, 59.7}, {0.9, 38.4}, {0.95, 23.3}, {0.99, 7.3}} {
		covered, delta := WorstCoverage(c.r, 1.96, 0.95)
		near(t, fmt.Sprint("r = ", c.r), 100*covered, c.percent, 0.05001)
		near(t, "the coverage there", Coverage(c.r, delta, 1.96, 0.95), covered, 0)
	}
	// No delta of a dense grid covers less.
	for _, r := range []float64{0.02, 0.3, -0.6, 0.9, 0.99, 0.9999, 1 - 1e-9} {
		for _, cut := range []float64{0.1, 0.7, 1.414, 2.576, 5, 12} {
			covered, delta := WorstCoverage(r, cut, 0.9)
			if !(covered >= 0 && covered < 0.9 && delta >= 0 && delta < cut+10) {
				t.Errorf("r %v, cut %v: worst %v at %v", r, cut, covered, delta)
			}
			for i := range 400 {
				for _, at := range []float64{float64(i) * (cut + 5) / 400, math.Pow(10, 1.4-float64(i)/34)} {
					if c := Coverage(r, at, cut, 0.9); c < covered-1e-14 {
						t.Fatalf("r %v, cut %v: %v at %v, but worst is %v at %v", r, cut, c, at, covered, delta)
					}
				}
			}
		}
	}
	for _, c := range []struct{ r, cut, covered, delta float64 }{{0, 1.96, 0.95, 0}, {0.9, 0, 0.95, 0}, {0.9, math.Inf(1), 0, math.Inf(1)}, {0, math.Inf(1), 0.95, 0}} {
		if covered, delta := WorstCoverage(c.r, c.cut, 0.95); covered != c.covered || delta != c.delta {
			t.Errorf("r %v, cut %v: %v at %v", c.r, c.cut, covered, delta)
		}
	}
}

// TestCoverageSimulated regresses drawn data on one or two regressors; nothing of Coverage is used. Two rows hold all there is: x1 = (1, 0) and
// x2 = (r, s) have length 1 and correlation r, the true coefficient of x1 is 0 and sigma is 1.
func TestCoverageSimulated(t *testing.T) {
	const draws = 200_000
	rng := rand.New(rand.NewPCG(1, 2))
	for _, c := range []struct{ r, delta, cut, level, factor float64 }{
		{0.5, 2, 1.96, 0.95, 1.959964}, {0.9, 1.5, 1.96, 0.95, 1.959964}, {-0.9, 0.4, 1.96, 0.95, 1.959964}, {0.99, 0.6, 1.96, 0.95, 1.959964}, {0.99, 4, 1.96, 0.95, 1.959964},
		{0.7, -3, 2.576, 0.9, 1.644854}, {0.8, 0, 1, 0.9, 1.644854}, {0.9, 1, math.Inf(1), 0.95, 1.959964},
	} {
		s := math.Sqrt(1 - c.r*c.r)
		hits := 0
		for range draws {
			beta2 := c.delta / s // the estimate's standard deviation is 1/s
			y1, y2 := c.r*beta2+rng.NormFloat64(), s*beta2+rng.NormFloat64()
			b2 := y2 / s // the second row holds x2 alone
			estimate, sd := y1-c.r*b2, 1/s
			if math.Abs(b2*s) <= c.cut {
				estimate, sd = y1, 1 // x1'y over x1'x1
			}
			if math.Abs(estimate) <= c.factor*sd {
				hits++
			}
		}
		want := Coverage(c.r, c.delta, c.cut, c.level)
		near(t, fmt.Sprintf("simulated %v", c), float64(hits)/draws, want, 4*math.Sqrt(want*(1-want)/draws))
	}
}

func TestCoverageEdges(t *testing.T) {
	inf, nan := math.Inf(1), math.NaN()
	for _, delta := range []float64{0, 0.3, 2, 50, inf} {
		for _, cut := range []float64{0, 1, 1.96, 8, inf} {
			if c := Coverage(0, delta, cut, 0.95); c != 0.95 {
				t.Errorf("uncorrelated regressors: coverage %v at delta %v, cut %v", c, delta, cut)
			}
			if c := Coverage(0.97, delta, cut, 0.95); c != Coverage(-0.97, -delta, cut, 0.95) || c != Coverage(-0.97, delta, cut, 0.95) {
				t.Errorf("a sign counts at delta %v, cut %v", delta, cut)
			}
		}
		if c := Coverage(0.9, delta, 0, 0.95); c != 0.95 {
			t.Errorf("never dropped: coverage %v", c)
		}
	}
	// By hand: always dropped and nothing given up, the short model's interval is right.
	near(t, "always dropped, delta 0", Coverage(0.9, 0, inf, 0.95), 0.95, 1e-15)
	// By hand: the limit as delta grows is the level, or with the regressor always dropped 0.
	near(t, "a large delta", Coverage(0.9, 40, 1.96, 0.95), 0.95, 1e-15)
	if Coverage(0.9, inf, 1.96, 0.95) != 0.95 || Coverage(0.9, inf, inf, 0.95) != 0 {
		t.Error("an infinite delta does not give the limit")
	}
	near(t, "r close to 0", Coverage(1e-9, 1, 1.96, 0.95), 0.95, 1e-9)
	// By hand, r -> 1 with delta > 0: the short interval always misses, and the long one covers, |w| <= c, if |delta+w| > cut besides:
	// for delta = 1 and cut = 1, level = 0.95, w in (0, c) alone, half of 0.95 (w < -2 is beyond -c).
	near(t, "r close to 1", Coverage(1-1e-14, 1, 1, 0.95), 0.475, 1e-6)
	// By hand, r -> 1 with delta = 0: the short model is right, P(|w| <= cut) 0.95, and the long one covers if cut < |w| <= c.
	short := 1 - 2*tail.Normal(-1)
	near(t, "r close to 1, delta 0", Coverage(1-1e-14, 0, 1, 0.95), short*0.95+0.95-short, 1e-6)
	for _, c := range [][4]float64{{1, 1, 1, 0.95}, {-1, 1, 1, 0.95}, {nan, 1, 1, 0.95}, {0.5, nan, 1, 0.95}, {0.5, 1, -1, 0.95}, {0.5, 1, nan, 0.95}, {0.5, 1, 1, 0}, {0.5, 1, 1, 1}, {0.5, 1, 1, nan}} {
		if v := Coverage(c[0], c[1], c[2], c[3]); !math.IsNaN(v) {
			t.Errorf("Coverage(%v) is %v", c, v)
		}
		if v, at := WorstCoverage(c[0], c[2], c[3]); !math.IsNaN(c[1]) && !(math.IsNaN(v) && math.IsNaN(at)) {
			t.Errorf("WorstCoverage(%v) is %v at %v", c, v, at)
		}
	}
}

func ExampleWorstCoverage() {
	covered, delta := WorstCoverage(0.9, 1.96, 0.95)
	fmt.Printf("%.1f %% instead of 95 %%, where the dropped effect is %.2f of its standard errors\n", 100*covered, delta)
	// Output: 38.4 % instead of 95 %, where the dropped effect is 1.48 of its standard errors
}

func BenchmarkCoverage(b *testing.B) {
	b.ReportAllocs()
	for b.Loop() {
		Coverage(0.9, 1.5, 1.96, 0.95)
	}
}

func BenchmarkWorstCoverage(b *testing.B) {
	for _, r := range []float64{0.5, 0.9, 0.9999} {
		b.Run(fmt.Sprint("r=", r), func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				WorstCoverage(r, 1.96, 0.95)
			}
		})
	}
}

func BenchmarkMeanSquaredError(b *testing.B) {
	b.ReportAllocs()
	for b.Loop() {
		MeanSquaredError(5, 3, 100, 0.05)
	}
}
