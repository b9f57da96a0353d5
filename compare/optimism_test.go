package compare

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"modelmend/fit/dataset"
)

// TestNestedErrorIsHonest: over samples of 40 rows, the mean out-of-sample error of the nested form is the true error of a procedure learned on 32
// rows, which is known because the law is; the error curve at its own minimum, which the tuning was chosen on, promises too much. The difference is
// measured and logged.
func TestNestedErrorIsHonest(t *testing.T) {
	const n, p, sigma = 40, 7, 3.0
	rng := rand.New(rand.NewPCG(21, 22))
	// x_j = 1.5 c + e_j, so the covariance is I + 2.25 * ones; slopes alternate.
	beta := make([]float64, p)
	for j := range beta {
		beta[j] = 0.6 * float64(1-2*(j%2))
	}
	sample := func(rows int) *dataset.Table {
		var b strings.Builder
		b.WriteString("y,x0,x1,x2,x3,x4,x5,x6")
		for range rows {
			c, y, line := rng.NormFloat64(), sigma*rng.NormFloat64(), ""
			for j := range p {
				x := 1.5*c + rng.NormFloat64()
				y += beta[j] * x
				line += fmt.Sprintf(",%.17g", x)
			}
			fmt.Fprintf(&b, "\n%.17g%s", y, line)
		}
		table, err := dataset.Read(strings.NewReader(b.String()), "law.csv")
		if err != nil {
			t.Fatal(err)
		}
		return table
	}
	study := func(folds int) *Study {
		return &Study{Equation: "y = x0 + x1 + x2 + x3 + x4 + x5 + x6", Seed: 4, Folds: FoldSpec{Kind: "random", Count: folds, Repeats: 1}}
	}
	trueError := func(a *Alternative) float64 {
		constant := a.Coefficients[0].Estimate
		sum, squares := 0.0, 0.0
		for j := range p {
			d := a.Coefficients[1+j].Estimate - beta[j]
			sum += d
			squares += d * d
		}
		return sigma*sigma + constant*constant + squares + 2.25*sum*sum
	}
	type stat struct{ truth, nested, plain, gap []float64 }
	stats := map[string]*stat{"as-is": {}, "ridge": {}, "components": {}, "drop-by-rule": {}}
	for range calibrationSamples() {
		c, err := Run(context.Background(), sample(n), study(5), Options{})
		if err != nil {
			t.Fatal(err)
		}
		small, err := Run(context.Background(), sample(n*4/5), study(4), Options{}) // what an outer fold learns on: 32 rows, four inner folds
		if err != nil {
			t.Fatal(err)
		}
		for _, a := range c.Alternatives {
			if s := stats[a.Key]; s != nil {
				mse := a.Out.RMSE * a.Out.RMSE
				s.nested = append(s.nested, mse)
				if tn := a.Fitted.Tuning; tn != nil {
					s.plain = append(s.plain, tn.MSE[tn.Chosen])
					s.gap = append(s.gap, mse-tn.MSE[tn.Chosen])
				}
			}
		}
		for _, a := range small.Alternatives {
			if s := stats[a.Key]; s != nil {
				s.truth = append(s.truth, trueError(a))
			}
		}
	}
	moments := func(v []float64) (mean, se float64) {
		for _, x := range v {
			mean += x / float64(len(v))
		}
		for _, x := range v {
			se += (x - mean) * (x - mean)
		}
		return mean, math.Sqrt(se) / float64(len(v))
	}
	for key, s := range stats {
		if len(s.truth) < 50 || len(s.nested) < 50 {
			t.Errorf("%s: only %d and %d samples", key, len(s.truth), len(s.nested))
			continue
		}
		truth, a := moments(s.truth)
		nested, b := moments(s.nested)
		if math.Abs(nested-truth) > 4*math.Hypot(a, b) {
			t.Errorf("%s: nested error %.3f (%.3f), true error %.3f (%.3f)", key, nested, b, truth, a)
		}
		if s.plain == nil {
			continue
		}
		plain, _ := moments(s.plain)
		gap, g := moments(s.gap)
		t.Logf("%s: true %.2f, nested %.2f, at the minimum of the curve %.2f: too low by %.1f %%", key, truth, nested, plain, 100*gap/nested)
		if gap < 4*g {
			t.Errorf("%s: the curve's minimum is lower than the nested error by %.3f (%.3f); it should be clearly too low", key, gap, g)
		}
	}
}
