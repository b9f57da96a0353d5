package remedy

import (
	"fmt"
	"math"
	"slices"

	"modelmend/fit/linear"
	"modelmend/fit/reduction"
	"modelmend/fit/tail"
)

// ratio divides the whole equation by one of its regressors, such as population.
var _ = register(Remedy{
	Key:   "ratio",
	Title: "Per unit of size",
	Order: 62,
	Does: "Divides the dependent variable and every regressor by one of them that stands for size, such as population. Levels that move together because " +
		"all grow with size hardly do per head. Only on request (ratio.by). In an equation in logarithms the same is a restriction: state that the exponents add up to one.",
	Assumes: "Without size there would be nothing: the level equation has no constant of its own. Error variance grows with the square of size.",
	Buys:    "What the regressors share only through size no longer tangles them, and large units no longer rule the fit.",
	Costs: "It is another equation: the constant of the level equation is set to zero, which can make associations by itself, since all ratios share a " +
		"denominator. The test adds it back.",
	Means: "The change in the dependent variable for one more unit of the regressor in an equation per unit of size; the coefficient of size is the level at which " +
		"the ratios start.",
	Referee: "Is proportionality to size plausible? What happens when one over size is added back? Do the ratios correlate because of their common denominator?",
	Sources: []string{
		"Kuh and Meyer (1955), Econometrica 23(4), 400-416",
		"Kronmal (1993), Journal of the Royal Statistical Society, Series A 156(3), 379-392",
		"Pearson (1897), Proceedings of the Royal Society of London 60, 489-498",
	},
	Options:  []Option{{"ratio.by", ColumnsOption, "the regressor that stands for size"}},
	Variants: ratioVariants,
})

func ratioVariants(p *Problem) ([]Variant, []NotApplicable) {
	no := func(reason string) ([]Variant, []NotApplicable) { return nil, []NotApplicable{{"ratio", reason}} }
	by := p.Settings.Columns["ratio.by"]
	switch {
	case len(by) == 0:
		return no("only on request: name the regressor that stands for size with ratio.by")
	case len(by) > 1:
		return no("one regressor at a time can stand for size")
	case !p.Constant:
		return no("the model has no constant to become the coefficient of " + p.Names[by[0]])
	case p.Rows == nil:
		return no("the table is too large to be held, and its rows must be divided one by one")
	case len(p.Names) < 2:
		return no("there is no other regressor to divide")
	}
	z := by[0]
	v := ratioFit{p: p, z: z, rows: &Rows{X: make([][]float64, len(p.Names)), ScoredX: make([][]float64, len(p.Names))}}
	bad := false
	p.Rows(func(x []float64, y float64) {
		r, size := v.rows, x[z]
		bad = bad || !(size > 0)
		for j := range x {
			ratio, scored := x[j]/size, x[j]
			if j == z {
				ratio, scored = 0, 0
			}
			r.X[j] = append(r.X[j], ratio)
			r.ScoredX[j] = append(r.ScoredX[j], scored)
		}
		r.Y, r.ScoredY = append(r.Y, y/size), append(r.ScoredY, y)
		r.Unit, r.Skip = append(r.Unit, size), append(r.Skip, false)
	})
	if bad {
		return no(p.Names[z] + " is not positive in every row")
	}
	for j := range p.Names {
		if j != z {
			v.keep = append(v.keep, j)
		}
	}
	return []Variant{{
		Key: "ratio:" + p.Names[z], Label: "Per unit of " + p.Names[z], OwnVariance: true, Rows: v.rows,
		Summary:  fmt.Sprintf("The dependent variable and every regressor divided by %s, by least squares.", p.Names[z]),
		Learn:    v.learn,
		Describe: v.describe,
	}}, nil
}

type ratioFit struct {
	p    *Problem
	z    int
	keep []int
	rows *Rows
}

func (r ratioFit) learn(t Training) *Fitted {
	return fitBasis(t, selection(len(r.p.Names), r.keep), len(r.keep), Different)
}

func (r ratioFit) describe(f *Final) Description {
	p := r.p
	q := p.q()
	d := Description{Report: make([]float64, q*q), Status: slices.Clone(f.Fitted.Status)}
	for i := 1; i < q; i++ {
		d.Report[i*q+i] = 1
	}
	d.Report[(1+r.z)*q+1+r.z], d.Report[(1+r.z)*q] = 0, 1 // size has the constant of the ratios; the level equation has none
	for j := range d.Status {
		if d.Status[j] != NotIdentified {
			d.Status[j] = Different
		}
	}
	d.Meaning = []Meaning{{"", "one more unit, in an equation per unit of " + p.Names[r.z]}, {p.Names[r.z], "where the ratios start: the constant of the equation per unit of it"}}
	if f.Sample != nil {
		if test, ok := r.addedBack(f); ok {
			d.Tests = append(d.Tests, test)
		}
	}
	d.Costs = append(d.Costs, "the level equation's constant is set to zero; all ratios share the denominator "+p.Names[r.z],
		"it answers another question; its errors are scored on forecasts of the dependent variable itself, not of the ratio")
	return d
}

// addedBack tests that the level equation has no constant: one over size as one more regressor of the ratios.
func (r ratioFit) addedBack(f *Final) (Test, bool) {
	var cols []reduction.Column
	for _, j := range r.keep {
		cols = append(cols, reduction.Column{Hi: r.rows.X[j]})
	}
	inverse := reduction.Column{}
	for _, z := range r.rows.Unit {
		inverse.Hi = append(inverse.Hi, 1/z)
	}
	red, err := reduction.Reduce(append(cols, inverse), reduction.Column{Hi: r.rows.Y}, true, reduction.Split{}, 1)
	if err != nil {
		return Test{}, false
	}
	s := linear.NewSample(red, red.Total)
	fit := s.LeastSquares(true)
	df := float64(s.N - fit.Rank - 1)
	if fit.NotIdentified != nil || df <= 0 || fit.RSS == 0 {
		return Test{}, false
	}
	m := s.P - 1
	t := fit.Slopes[m] / math.Sqrt(fit.RSS/df*fit.Inverse[m*s.P+m])
	return Test{Name: "restriction", Statistic: t * t, Degrees: []float64{1, df}, P: tail.F(t*t, 1, df),
		Text: fmt.Sprintf("restriction that the level equation has no constant (1/%s added back): F(1, %g) = %s, p-value %s. A large p-value does not show that the restriction is true.",
			r.p.Names[r.z], df, say(t*t), sayP(tail.F(t*t, 1, df)))}, true
}
