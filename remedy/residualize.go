package remedy

import (
	"fmt"
	"slices"

	"modelmend/fit/figures"
)

// residualize replaces one regressor by its residual on others, and shows what that does.
var _ = register(Remedy{
	Key:   "residualize",
	Title: "Replace a regressor by its residual",
	Order: 34,
	Does: "Regresses one regressor on others and puts its residual in its place. Only on request (residualize.of and residualize.on): it assigns everything " +
		"that the regressors share to the others.",
	Assumes: "The order of causes is known: the others bring about the one that is replaced, and not the other way round, nor a third both.",
	Buys:    "Regressors without correlation between them. That is bought by decree, not by data.",
	Costs: "The coefficients of the others become those of the model without the replaced regressor, with standard errors that treat the shared part as settled. " +
		"The replaced regressor's own coefficient, its standard error and the fit do not change at all.",
	Means:   "A coefficient of the others becomes a total association, including all that runs through the replaced regressor.",
	Referee: "Why is the shared variance the others' own? What do the results look like with the roles exchanged?",
	Sources: []string{
		"Wurm and Fisicaro (2014), Journal of Memory and Language 72, 37-48",
		"Frisch and Waugh (1933), Econometrica 1(4), 387-401",
	},
	Options: []Option{
		{"residualize.of", ColumnsOption, "the regressor that is replaced by its residual"},
		{"residualize.on", ColumnsOption, "the regressors that it is regressed on"},
	},
	Variants: residualizeVariants,
})

func residualizeVariants(p *Problem) ([]Variant, []NotApplicable) {
	of, on := p.Settings.Columns["residualize.of"], p.Settings.Columns["residualize.on"]
	switch {
	case len(of) == 0 && len(on) == 0:
		return nil, []NotApplicable{{"residualize", "only on request: name residualize.of and residualize.on, if you know which causes which"}}
	case len(of) != 1 || len(on) == 0:
		return nil, []NotApplicable{{"residualize", "name one regressor with residualize.of and at least one other with residualize.on"}}
	case slices.Contains(on, of[0]):
		return nil, []NotApplicable{{"residualize", p.Names[of[0]] + " cannot be regressed on itself"}}
	}
	a, names := p.Names[of[0]], join(p.names(on))
	return []Variant{{
		Key: "residualize:" + a + ":" + p.Names[on[0]], Label: "Residual of " + a, OwnVariance: true,
		Summary:  fmt.Sprintf("%s replaced by its residual on %s.", a, names),
		Learn:    learnAsIs,
		Describe: func(f *Final) Description { return describeResidual(f, of[0], on) },
	}}, nil
}

// describeResidual: with a = g0 + g'b + residual, b_a a + b'b = b_a residual + (b + g b_a)'b + g0 b_a.
func describeResidual(f *Final, a int, on []int) Description {
	p := f.Problem
	q, k := p.q(), p.offset()
	d := Description{Report: make([]float64, q*q), Status: make([]Status, len(p.Names)), Meaning: []Meaning{{"", "unchanged"}}}
	for i := range q {
		d.Report[i*q+i] = 1
	}
	for j := range d.Status {
		d.Status[j] = Estimated
		if f.AsIs.NotIdentified != nil && f.AsIs.NotIdentified[j] {
			d.Status[j] = NotIdentified
		}
	}
	g, constant, r2 := p.Sample.Auxiliary(a, on)
	for i, c := range on {
		d.Report[(k+c)*q+k+a] = g[i]
		d.Status[c] = Different
		d.Meaning = append(d.Meaning, Meaning{p.Names[c], fmt.Sprintf("its own coefficient plus %s times that of %s: everything they share is counted as %s's", say(g[i]), p.Names[a], p.Names[c])})
	}
	if k == 1 {
		d.Report[k+a] = constant
	}
	d.Meaning = append(d.Meaning, Meaning{p.Names[a], "unchanged: its residual has the coefficient, standard error and t-ratio that it has itself"})
	d.Costs = append(d.Costs,
		fmt.Sprintf("%s of the variation of %s is given to %s by decree", figures.Percent(r2), p.Names[a], join(p.names(on))),
		fmt.Sprintf("it says that %s causes %s; with the roles exchanged the same data give another answer", join(p.names(on)), p.Names[a]),
		"standard errors of what is regressed on treat the shared part as settled, and are too small")
	return d
}
