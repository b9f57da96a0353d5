package remedy

// as-is: least squares with every regressor, the yardstick of the comparison.
var _ = register(Remedy{
	Key:   "as-is",
	Title: "Leave it alone",
	Order: 0,
	Does:  "Keeps the equation as it is and fits it by least squares.",
	Assumes: "The equation holds what it should. Collinearity breaks none of the assumptions behind least squares: " +
		"estimates stay unbiased and intervals stay valid.",
	Buys:  "Unbiased coefficients with their plain meaning, and intervals that cover what they claim.",
	Costs: "Wide intervals for tangled coefficients. They are the honest report of how little the data say about them one by one.",
	Means: "Each coefficient is the association with the dependent variable while the other regressors stay the same.",
	Referee: "Is the interval of the coefficient of interest too wide to answer the question? If not, why do anything? " +
		"If so, would more data or a different question help?",
	Sources: []string{
		"Goldberger (1991), A Course in Econometrics, Harvard University Press",
		"O'Brien (2007), Quality & Quantity 41(5), 673-690",
		"Conlisk (1971), Western Economic Journal 9(4), 393-407",
	},
	Variants: func(p *Problem) ([]Variant, []NotApplicable) {
		return []Variant{{
			Key: "as-is", Label: "Leave it alone", Summary: "Least squares with every regressor.", OwnVariance: true,
			Learn:    learnAsIs,
			Describe: describeAsIs,
		}}, nil
	},
})

func learnAsIs(t Training) *Fitted {
	fit := t.Sample.LeastSquares(t.covariance())
	f := &Fitted{Slopes: fit.Slopes, Columns: fit.Rank, Status: make([]Status, len(fit.Slopes))}
	for j := range f.Status {
		f.Status[j] = Estimated
		if fit.NotIdentified != nil && fit.NotIdentified[j] {
			f.Status[j] = NotIdentified
		}
	}
	if t.covariance() {
		f.Factor = fit.Factor(t.Sample)
	}
	return f
}

func describeAsIs(f *Final) Description {
	d := Description{Meaning: []Meaning{{"", "the association while every other regressor stays the same"}}}
	if f.AsIs.NotIdentified != nil {
		var cols []int
		for j, bad := range f.AsIs.NotIdentified {
			if bad {
				cols = append(cols, j)
			}
		}
		d.Notes = append(d.Notes, Note{"not-identified", "the data fix no separate coefficients for " + join(f.Problem.names(cols)) +
			": they depend on each other exactly; remove one of them, merge them, or state a restriction"})
	}
	return d
}
