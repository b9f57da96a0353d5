package remedy

import (
	"fmt"
	"math"

	"modelmend/fit/linear"
)

// partial-least-squares regresses on directions of the standardised regressors that are chosen for their covariance with the dependent variable.
var _ = register(Remedy{
	Key:   "partial-least-squares",
	Title: "Partial least squares",
	Order: 45,
	Does: "Forms directions of the standardised regressors one after the other, each with the largest covariance with what is left of the dependent variable, " +
		"fits on the first few, and takes the fit back to the user's regressors. How many is chosen by cross-validation; the directions are " +
		"learned again in every set of training rows.",
	Assumes: "What matters for the dependent variable lies in few directions, along which the regressors also vary.",
	Buys: "Fewer directions than principal components for the same fit, since a direction that says nothing about the dependent variable is not taken first; " +
		"often good predictions.",
	Costs: "The directions use the dependent variable, so that slopes are no linear function of it: no formula gives their standard errors, only resamples " +
		"with directions and number chosen again. Some directions are stretched rather than shrunk beside least squares. The number of components is no count of " +
		"degrees of freedom; it usually understates them.",
	Means: "A slope implied by directions that the data chose: it shares in what the whole bundle of regressors does, and in the choice.",
	Referee: "How many components, chosen how, and were the directions learned inside the training rows? Where does the standard error come from, " +
		"if the directions use the dependent variable? Why should the coefficient of interest lie in these directions?",
	Sources: []string{
		"Wold, Ruhe, Wold and Dunn (1984), SIAM Journal on Scientific and Statistical Computing 5(3), 735-743",
		"de Jong (1993), Chemometrics and Intelligent Laboratory Systems 18(3), 251-263 (the same fits by another recursion)",
		"Frank and Friedman (1993), Technometrics 35(2), 109-135",
		"Butler and Denham (2000), Journal of the Royal Statistical Society, Series B 62(3), 585-593 (some directions are stretched)",
		"Krämer and Sugiyama (2011), Journal of the American Statistical Association 106(494), 697-705 (degrees of freedom)",
		"Foschi (2025), arXiv:2510.14430 (what the shrinkage looks like)",
	},
	Options: []Option{
		{"partial-least-squares.count", CountOption, "keep this many components instead of choosing"},
	},
	Variants: partialVariants,
})

const noPartialErrors = "the directions use the dependent variable, so that no formula gives a standard error: only resamples do"

func partialVariants(p *Problem) ([]Variant, []NotApplicable) {
	const key = "partial-least-squares"
	if len(p.Names) < 2 {
		return nil, []NotApplicable{{key, "it takes at least two regressors to form directions"}}
	}
	summary := "Least squares on directions chosen for their covariance with the dependent variable, their number chosen by cross-validation."
	if v, fixed := p.Settings.Numbers["partial-least-squares.count"]; fixed {
		if int(v) > len(p.Names) {
			return nil, []NotApplicable{{key, fmt.Sprintf("%g components were asked for, there are %d", v, len(p.Names))}}
		}
		summary = fmt.Sprintf("Least squares on the first %g directions chosen for their covariance with the dependent variable, as the user fixed.", v)
	}
	f := partialFit{p}
	return []Variant{{Key: key, Label: "Partial least squares", Summary: summary, Learn: f.learn, Describe: f.describe}}, nil
}

type partialFit struct{ p *Problem }

// path returns the slopes for each number of components on one sample; beyond the last they are least squares, solved in double-double.
func (c partialFit) path(s *linear.Sample) func(int) []float64 {
	sp := s.Spectrum(nil)
	weights := sp.Krylov()
	return func(count int) []float64 {
		if count >= sp.Rank {
			return s.LeastSquares(false).Slopes
		}
		return sp.WeightedSlopes(weights[count])
	}
}

func (c partialFit) learn(t Training) *Fitted {
	fixed, ok := c.p.Settings.Numbers["partial-least-squares.count"]
	tuning := &Tuning{Parameter: "components", Fixed: ok}
	for k := range len(c.p.Names) + 1 {
		tuning.Values = append(tuning.Values, float64(k))
	}
	if !ok || t.Final {
		tuning.MSE, tuning.MSESD = tune(t.Inner, len(tuning.Values), func(s Split) []float64 {
			sp := s.Train.Spectrum(nil)
			weights := sp.Krylov()
			return s.Held.PathSSE(sp, len(tuning.Values), func(m, k int) float64 { return weights[min(m, sp.Rank)][k] })
		})
	}
	if ok {
		tuning.Chosen = int(fixed)
	} else {
		tuning.Chosen = smallest(tuning.MSE, false)
	}
	path := c.path(t.Sample)
	f := &Fitted{Slopes: path(tuning.Chosen), Tuning: tuning, Columns: tuning.Chosen, NoErrors: noPartialErrors}
	if t.Final {
		c.finish(t.Sample, f, path)
	}
	return f
}

func (c partialFit) finish(s *linear.Sample, f *Fitted, path func(int) []float64) {
	t := f.Tuning
	if rank := s.Spectrum(nil).Rank; rank < s.P { // no more components than dimensions
		t.Values, t.MSE, t.MSESD = t.Values[:rank+1], t.MSE[:rank+1], t.MSESD[:rank+1]
		t.Chosen = min(t.Chosen, rank)
		f.Columns = t.Chosen
	}
	for k := range t.Values {
		t.Slopes = append(t.Slopes, path(k))
		t.Degrees = append(t.Degrees, math.NaN()) // not the number of components, see the card
	}
	t.Degrees[0] = 0
	t.Degrees[len(t.Degrees)-1] = float64(len(t.Degrees) - 1) // least squares
	t.Factor = func(int) []float64 { return nil }
	f.Status = make([]Status, s.P)
	for j := range f.Status {
		f.Status[j] = Implied
		if t.Chosen == 0 {
			f.Status[j] = Zero
		}
	}
	if t.Chosen == s.P {
		for j := range f.Status {
			f.Status[j] = Estimated
		}
	}
}

func (c partialFit) describe(f *Final) Description {
	t := f.Fitted.Tuning
	last := len(t.Values) - 1
	d := Description{Meaning: []Meaning{{"", fmt.Sprintf("implied by %d of %d directions chosen for their covariance with the dependent variable", t.Chosen, last)}}}
	switch t.Chosen {
	case last:
		d.Meaning[0].Text = "all components are kept: this is least squares"
		d.Notes = append(d.Notes, Note{"all-components", "every component is kept: this is the model left alone; its standard errors are not repeated here, since in another sample fewer might be chosen"})
	case 0:
		d.Meaning[0].Text = "no component is kept: every slope is zero"
	}
	d.Costs = append(d.Costs,
		fmt.Sprintf("%d directions of the regressors are given up, which ones being decided with the dependent variable in view", last-t.Chosen),
		"no standard error but the resampled one, directions and their number chosen again in each resample",
		"the number of components is not the number of degrees of freedom that the fit uses up (Krämer and Sugiyama 2011)")
	var dummies []string
	for j, cat := range f.Problem.Category {
		if cat != "" {
			dummies = append(dummies, f.Problem.Names[j])
		}
	}
	if len(dummies) > 0 {
		d.Notes = append(d.Notes, Note{"dummies-rotated", "dummies are rotated with the other regressors, which depends on the base category"})
	}
	if len(t.MSE) > 0 && !math.IsNaN(t.MSE[0]) {
		t.Candidates = []Candidate{{"one-standard-error", "the fewest components whose error is within one standard error of the smallest", t.Values[oneStandardError(t, false)]}}
	}
	return d
}
