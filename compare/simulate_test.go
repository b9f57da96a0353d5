package compare

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"strings"
	"testing"

	"modelmend/fit/dataset"
)

// longRun is set by .ci/run --long: calibrations then use 2,000 samples, else 200.
func calibrationSamples() int {
	if os.Getenv("MODELMEND_LONG") != "" {
		return 2000
	}
	return 200
}

// tangledRows makes regressors x (n x 4, the first two close to each other), fixed over all samples of a calibration.
func tangledRows(seed uint64, n int) [][]float64 {
	rng := rand.New(rand.NewPCG(seed, 41))
	x := make([][]float64, n)
	for i := range x {
		c := rng.NormFloat64()
		x[i] = []float64{c + 0.3*rng.NormFloat64(), c + 0.3*rng.NormFloat64(), rng.NormFloat64(), 0.5*c + rng.NormFloat64()}
	}
	return x
}

// drawnTable writes y = 1 + x b + e beside the regressors.
func drawnTable(t testing.TB, x [][]float64, b []float64, e func(i int) float64) *dataset.Table {
	t.Helper()
	var s strings.Builder
	s.WriteString("y,x1,x2,x3,x4")
	for i, row := range x {
		y := 1 + e(i)
		for j, v := range row {
			y += b[j] * v
		}
		fmt.Fprintf(&s, "\n%.17g", y)
		for _, v := range row {
			fmt.Fprintf(&s, ",%.17g", v)
		}
	}
	table, err := dataset.Read(strings.NewReader(s.String()), "drawn.csv")
	if err != nil {
		t.Fatal(err)
	}
	return table
}

func drawnStudy() *Study {
	return &Study{Equation: "y = x1 + x2 + x3 + x4", Focal: []string{"x1"}, Seed: 11, Folds: FoldSpec{Kind: "random", Count: 5, Repeats: 1}}
}

// TestSimulationAgainstBruteForce draws samples of rows and runs the whole program on each; bias, spread, coverage and wrong signs must be those that
// the simulation predicts from the folds' cross-products alone, within five Monte Carlo standard errors of both.
func TestSimulationAgainstBruteForce(t *testing.T) {
	const n, sigma = 60, 2.0
	x := tangledRows(5, n)
	rng := rand.New(rand.NewPCG(6, 6))
	b := []float64{0.8, 0.3, -0.5, 0.4}
	first := drawnTable(t, x, b, func(int) float64 { return sigma * rng.NormFloat64() })
	s := drawnStudy()
	s.Simulations = 2000
	c, err := Run(context.Background(), first, s, Options{})
	if err != nil {
		t.Fatal(err)
	}
	samples := calibrationSamples()
	truth := c.Simulation.Truths[0]
	type seen struct {
		est     []float64
		covered int
		wrong   int
	}
	brute := map[string]*seen{}
	for range samples {
		table := drawnTable(t, x, truth.slopes, func(int) float64 { return c.S * rng.NormFloat64() })
		got, err := Run(context.Background(), table, drawnStudy(), Options{})
		if err != nil {
			t.Fatal(err)
		}
		for _, a := range got.Alternatives {
			k := a.Coefficients[1]
			v := brute[a.Key]
			if v == nil {
				v = &seen{}
				brute[a.Key] = v
			}
			v.est = append(v.est, k.Estimate)
			if k.Low <= truth.slopes[0] && truth.slopes[0] <= k.High {
				v.covered++
			}
			if k.Estimate*truth.slopes[0] < 0 {
				v.wrong++
			}
		}
	}
	checked := 0
	for _, a := range c.Alternatives {
		var p *Simulated
		for i := range a.Simulated {
			if a.Simulated[i].Truth == AsEstimated && a.Simulated[i].Coefficient == "x1" {
				p = &a.Simulated[i]
			}
		}
		v := brute[a.Key]
		if p == nil || v == nil || len(v.est) < samples/2 {
			continue // which regressors count as tangled depends on x alone, so every alternative is there each time
		}
		checked++
		m := sumUp(AsEstimated, "x1", truth.slopes[0], v.est, make([]bool, len(v.est)))
		within := func(what string, got, gotError, want, wantError float64) {
			t.Helper()
			if math.Abs(got-want) > 5*math.Hypot(gotError, wantError)+1e-12 {
				t.Errorf("%s: %s predicted %.4f (%.4f), brute force %.4f (%.4f)", a.Key, what, got, gotError, want, wantError)
			}
		}
		count := float64(len(v.est))
		cover, wrong := float64(v.covered)/count, float64(v.wrong)/count
		share := func(p float64) float64 { return math.Sqrt(math.Max(p*(1-p), 1/count) / count) }
		within("bias", p.Bias, p.BiasError, m.Bias, m.BiasError)
		within("standard deviation", p.SD, p.SDError, m.SD, m.SDError)
		within("root mean squared error", p.RMSE, p.RMSEError, m.RMSE, m.RMSEError)
		within("coverage", p.Coverage, p.CoverageError, cover, share(cover))
		within("wrong sign", p.WrongSign, p.WrongSignError, wrong, share(wrong))
		t.Logf("%-18s coverage predicted %.3f, brute force %.3f; sd %.4f, %.4f; bias %.4f, %.4f", a.Key, p.Coverage, cover, p.SD, m.SD, p.Bias, m.Bias)
	}
	if checked < 5 {
		t.Errorf("only %d alternatives were checked", checked)
	}
}

// TestSimulationAgainstFormula: least squares is unbiased, its standard deviation is s root of (X'X)^-1 and its interval covers 95 % (Gauss-Markov
// and normal theory); dropping x2 biases by Gamma b2 (omitted-variable formula) and has the short model's standard deviation.
func TestSimulationAgainstFormula(t *testing.T) {
	x := tangledRows(9, 80)
	rng := rand.New(rand.NewPCG(7, 7))
	table := drawnTable(t, x, []float64{0.5, 0.5, 0, 1}, func(int) float64 { return 1.5 * rng.NormFloat64() })
	s := drawnStudy()
	s.Simulations = 4000
	c, err := Run(context.Background(), table, s, Options{})
	if err != nil {
		t.Fatal(err)
	}
	near := func(what string, got, mc, want float64) {
		t.Helper()
		if math.Abs(got-want) > 4.5*mc {
			t.Errorf("%s: simulated %.5f (%.5f), formula %.5f", what, got, mc, want)
		}
	}
	for _, a := range c.Alternatives {
		for _, p := range a.Simulated {
			switch a.Key {
			case "as-is":
				near(p.Truth+" bias", p.Bias, p.BiasError, 0)
				near(p.Truth+" sd", p.SD, p.SDError, c.S*math.Sqrt(c.AsIs.Inverse[0]))
				near(p.Truth+" coverage", p.Coverage, p.CoverageError, 0.95)
			case "drop:x2":
				gamma, _, _ := c.Problem.Sample.Auxiliary(1, []int{0, 2, 3})
				b2 := c.AsIs.Slopes[1]
				if p.Truth == Halfway {
					b2 /= 2
				}
				near(p.Truth+" bias of the short model", p.Bias, p.BiasError, gamma[0]*b2)
				short := c.Problem.Sample.Keep([]int{0, 2, 3}).LeastSquares(true)
				near(p.Truth+" sd of the short model", p.SD, p.SDError, c.S*math.Sqrt(short.Inverse[0]))
			}
		}
	}
}

// TestSimulationInTinyFolds: with folds of fewer rows than regressors the errors of a fold are drawn from a root of less than full rank.
func TestSimulationInTinyFolds(t *testing.T) {
	x := tangledRows(2, 24)
	rng := rand.New(rand.NewPCG(3, 9))
	table := drawnTable(t, x, []float64{1, 0, 0, 1}, func(int) float64 { return rng.NormFloat64() })
	s := drawnStudy()
	s.Folds = FoldSpec{Kind: "leave-one-out"}
	s.Simulations = 600
	c, err := Run(context.Background(), table, s, Options{})
	if err != nil {
		t.Fatal(err)
	}
	for _, p := range c.Alternatives[0].Simulated {
		if want := c.S * math.Sqrt(c.AsIs.Inverse[0]); math.Abs(p.SD-want) > 4.5*p.SDError || math.Abs(p.Coverage-0.95) > 4.5*p.CoverageError {
			t.Errorf("%s: sd %.4f, formula %.4f; coverage %.3f", p.Truth, p.SD, want, p.Coverage)
		}
	}
}

// TestNoSimulation: every case without one says why.
func TestNoSimulation(t *testing.T) {
	rows := [][]float64{}
	for i := range 30 {
		rows = append(rows, []float64{float64(i), float64(i * 2), float64(i * i % 7), float64(i % 5)})
	}
	table := drawnTable(t, rows, []float64{1, 1, 1, 1}, func(i int) float64 { return float64(i * i % 13) })
	s := drawnStudy()
	s.Simulations = 200
	c, err := Run(context.Background(), table, s, Options{})
	if err != nil {
		t.Fatal(err)
	}
	if c.Simulation.Count != 0 || !strings.Contains(c.Simulation.Sentence(), "exact dependency") {
		t.Errorf("%+v", c.Simulation)
	}
}
