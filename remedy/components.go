package remedy

import (
	"fmt"
	"math"
	"slices"

	"modelmend/fit/linear"
)

// components regresses on the leading principal components of the standardised regressors.
var _ = register(Remedy{
	Key:   "components",
	Title: "Principal-components regression",
	Order: 40,
	Does: "Rotates the standardised regressors into uncorrelated components, keeps the first few, and takes the fit back to the user's " +
		"regressors. How many to keep is chosen by cross-validation inside the training rows.",
	Assumes: "The directions in which the regressors hardly vary have no bearing on the dependent variable.",
	Buys:    "The thin directions, where tangled regressors differ, no longer blow up the variance.",
	Costs: "Each dropped component is a restriction on the slopes; where it is false, slopes are biased by an amount that the standard errors leave out. " +
		"A component with little variance can matter for the dependent variable.",
	Means:   "A slope implied by the kept components: it shares in what the whole bundle of regressors does.",
	Referee: "Why should the dropped directions not matter? How many components, chosen how? Was the coefficient of interest rotated away?",
	Sources: []string{
		"Massy (1965), Journal of the American Statistical Association 60(309), 234-256",
		"Jolliffe (1982), Journal of the Royal Statistical Society, Series C 31(3), 300-303",
		"Hadi and Ling (1998), The American Statistician 52(1), 15-19",
	},
	Options: []Option{
		{"components.count", CountOption, "keep this many components instead of choosing"},
		{"components.spare", ColumnsOption, "regressors that are left out of the rotation and kept as they are"},
	},
	Variants: componentVariants,
})

func componentVariants(p *Problem) ([]Variant, []NotApplicable) {
	c := componentFit{p: p, spare: p.Settings.Columns["components.spare"]}
	for j := range p.Names {
		if !slices.Contains(c.spare, j) {
			c.rotated = append(c.rotated, j)
		}
	}
	if len(c.rotated) < 2 {
		return nil, []NotApplicable{{"components", "it takes at least two regressors to rotate"}}
	}
	summary := "Least squares on the leading components of the standardised regressors, their number chosen by cross-validation."
	if v, fixed := p.Settings.Numbers["components.count"]; fixed {
		if int(v) > len(c.rotated) {
			return nil, []NotApplicable{{"components", fmt.Sprintf("%g components were asked for, there are %d", v, len(c.rotated))}}
		}
		summary = fmt.Sprintf("Least squares on the first %g components of the standardised regressors, as the user fixed.", v)
	}
	if len(c.spare) > 0 {
		summary += " Left out of the rotation: " + join(p.names(c.spare)) + "."
	}
	return []Variant{{Key: "components", Label: "Principal components", Summary: summary, Learn: c.learn, Describe: c.describe}}, nil
}

type componentFit struct {
	p       *Problem
	spare   []int
	rotated []int
}

// path returns the slopes for each number of components on one sample.
func (c componentFit) path(s *linear.Sample) func(int) []float64 {
	if len(c.spare) == 0 {
		sp := s.Spectrum(nil)
		return func(count int) []float64 {
			if count >= sp.Rank { // all components: least squares, solved in double-double
				return s.LeastSquares(false).Slopes
			}
			return sp.ComponentSlopes(count)
		}
	}
	sp := s.Keep(c.rotated).Spectrum(nil)
	return func(count int) []float64 {
		a, m := c.basis(s, sp, count)
		return fitBasis(Training{Sample: s}, a, m, Implied).Slopes
	}
}

// errors returns the squared error of each number of components on a split.
func (c componentFit) errors(s Split, count int) []float64 {
	if len(c.spare) > 0 {
		return oneByOne(s, count, c.path(s.Train))
	}
	sp := s.Train.Spectrum(nil)
	return s.Held.PathSSE(sp, count, func(m, k int) float64 {
		if k >= m {
			return 0
		}
		return 1 / sp.Sigma[k]
	})
}

// basis holds the spared regressors as they are and count directions over the rotated ones.
func (c componentFit) basis(s *linear.Sample, sp *linear.Spectrum, count int) (a []float64, m int) {
	count = min(count, sp.Rank)
	m = len(c.spare) + count
	a = make([]float64, s.P*m)
	for k, j := range c.spare {
		a[j*m+k] = 1
	}
	scale := s.Scale()
	for i, j := range c.rotated {
		if d := scale[j].Float(); d > 0 {
			for k := range count {
				a[j*m+len(c.spare)+k] = sp.V[i*sp.Rank+k] / d
			}
		}
	}
	return a, m
}

func (c componentFit) learn(t Training) *Fitted {
	fixed, ok := c.p.Settings.Numbers["components.count"]
	tuning := &Tuning{Parameter: "components", Fixed: ok}
	for k := range len(c.rotated) + 1 {
		tuning.Values = append(tuning.Values, float64(k))
	}
	if !ok || t.Final {
		tuning.MSE, tuning.MSESD = tune(t.Inner, len(tuning.Values), func(s Split) []float64 { return c.errors(s, len(tuning.Values)) })
	}
	if ok {
		tuning.Chosen = int(fixed)
	} else {
		tuning.Chosen = smallest(tuning.MSE, false)
	}
	path := c.path(t.Sample)
	f := &Fitted{Slopes: path(tuning.Chosen), Tuning: tuning, Columns: len(c.spare) + tuning.Chosen}
	switch {
	case t.Final:
		c.finish(t.Sample, f, path)
	case t.Covariance:
		f.Factor = c.factor(t.Sample, tuning.Chosen)
	}
	return f
}

// factor is the covariance over sigma^2 of the fit on so many components.
func (c componentFit) factor(s *linear.Sample, count int) []float64 {
	if len(c.spare) > 0 {
		a, m := c.basis(s, s.Keep(c.rotated).Spectrum(nil), count)
		return fitBasis(Training{Sample: s, Covariance: true}, a, m, Implied).Factor
	}
	sp := s.Spectrum(nil)
	if count >= sp.Rank {
		return s.LeastSquares(true).Factor(s)
	}
	return s.WithConstant(sp.ComponentMap(count)) // M S M' = M for a projection
}

func (c componentFit) finish(s *linear.Sample, f *Fitted, path func(int) []float64) {
	t := f.Tuning
	sp := s.Keep(c.rotated).Spectrum(nil)
	if sp.Rank < len(c.rotated) { // no more components than dimensions
		t.Values, t.MSE, t.MSESD = t.Values[:sp.Rank+1], t.MSE[:sp.Rank+1], t.MSESD[:sp.Rank+1]
		t.Chosen = min(t.Chosen, sp.Rank)
		f.Columns = len(c.spare) + t.Chosen
	}
	for k := range t.Values {
		t.Slopes = append(t.Slopes, path(k))
		t.Degrees = append(t.Degrees, float64(len(c.spare)+k))
	}
	t.Factor = func(k int) []float64 { return c.factor(s, k) }
	f.Factor = t.Factor(t.Chosen)
	f.Status = make([]Status, s.P)
	for j := range f.Status {
		f.Status[j] = Implied
		if slices.Contains(c.spare, j) || (t.Chosen == len(c.rotated) && len(c.spare) == 0) {
			f.Status[j] = Estimated
		}
		if t.Chosen == 0 && !slices.Contains(c.spare, j) {
			f.Status[j] = Zero
		}
	}
}

func (c componentFit) describe(f *Final) Description {
	p, t := f.Problem, f.Fitted.Tuning
	d := Description{Meaning: []Meaning{{"", fmt.Sprintf("implied by %d of %d components of the standardised regressors", t.Chosen, len(t.Values)-1)}}}
	if t.Chosen == len(c.rotated) {
		d.Meaning[0].Text = "all components are kept: this is least squares"
		d.Notes = append(d.Notes, Note{"all-components", "cross-validation kept every component: this is the model left alone"})
	}
	for _, j := range c.spare {
		d.Meaning = append(d.Meaning, Meaning{p.Names[j], "left out of the rotation: its own coefficient beside the components"})
	}
	c.spectrum(f)
	if len(c.spare) == 0 && f.AsIs.NotIdentified == nil && !math.IsNaN(f.S) && f.S > 0 {
		d.Tests = append(d.Tests, c.droppedTests(f)...)
	} else {
		d.Tests = append(d.Tests, restrictionTests(f, "restriction that the dropped directions have no effect")...)
	}
	if t.Chosen < len(c.rotated) {
		d.BreakEven = breakEvens(f)
	}
	for k, comp := range t.Components {
		if !comp.Kept && comp.Share < 0.05 && math.Abs(comp.T) > 2 {
			d.Notes = append(d.Notes, Note{"dropped-component-matters", fmt.Sprintf("component %d is dropped with %s %% of the regressors' variance, yet its t-ratio is %s: "+
				"little variance does not mean little bearing on the dependent variable (Jolliffe 1982)", k+1, say(100*comp.Share), say(comp.T))})
		}
	}
	d.Costs = append(d.Costs,
		fmt.Sprintf("%d directions of the regressors are given up", len(t.Values)-1-t.Chosen),
		"the interval is the estimate plus and minus t standard errors given the number of components; it is not centred on the true value",
		"the standard error leaves out the bias and the choice of the number of components")
	var dummies []string
	for j, cat := range p.Category {
		if cat != "" && !slices.Contains(c.spare, j) {
			dummies = append(dummies, p.Names[j])
		}
	}
	if len(dummies) > 0 {
		d.Notes = append(d.Notes, Note{"dummies-rotated", "dummies are rotated with the other regressors, which depends on the base category; components.spare can leave them out"})
	}
	if len(t.MSE) > 0 && !math.IsNaN(t.MSE[0]) {
		t.Candidates = []Candidate{{"one-standard-error", "the fewest components whose error is within one standard error of the smallest", t.Values[oneStandardError(t, false)]}}
	}
	return d
}

// spectrum fills in what each component is.
func (c componentFit) spectrum(f *Final) {
	t, s := f.Fitted.Tuning, f.Problem.Sample
	sp := s.Keep(c.rotated).Spectrum(nil)
	total := 0.0
	for _, v := range sp.Sigma {
		total += v * v
	}
	for k := range sp.Rank {
		comp := Component{Variance: sp.Sigma[k] * sp.Sigma[k], Loadings: make([]float64, s.P), Kept: k < t.Chosen, T: math.NaN()}
		comp.Share = comp.Variance / total
		for i, j := range c.rotated {
			comp.Loadings[j] = sp.V[i*sp.Rank+k]
		}
		if len(c.spare) == 0 && f.S > 0 {
			comp.T = sp.UZ[k] / f.S
		}
		t.Components = append(t.Components, comp)
	}
}

// droppedTests are those that the dropped components have no effect: F is the mean of their squared t-ratios.
func (c componentFit) droppedTests(f *Final) []Test {
	sum, q := 0.0, 0.0
	for _, comp := range f.Fitted.Tuning.Components {
		if !comp.Kept {
			sum += comp.T * comp.T
			q++
		}
	}
	if q == 0 {
		return nil
	}
	return criteria(sum/q, q, f.DF, fmt.Sprintf("restriction that the %g dropped components have no effect", q))
}
