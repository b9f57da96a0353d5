package remedy

import (
	"fmt"
	"math"
	"slices"
)

// difference fits the equation in changes from one period to the next.
var _ = register(Remedy{
	Key:   "difference",
	Title: "First differences",
	Order: 60,
	Does: "Takes from every variable its value one period before, and fits the changes of the dependent variable on the changes of the regressors. Regressors that " +
		"move together because they share a trend often hardly do in their changes. It is offered where the study declares time.",
	Assumes: "The effect runs within the period, and what is lost with the levels, their long-run relation, is not what the paper is about.",
	Buys:    "Common trends no longer tangle the regressors, nor pass for an association.",
	Costs: "Long-run information is thrown away, and with it much of the variation; measurement error weighs more. If the errors of the level equation were " +
		"independent, those of the changes no longer are.",
	Means: "The change in the dependent variable that goes with a change in the regressor from one period to the next: a short-run quantity, not the one in levels. " +
		"The constant is a drift.",
	Referee: "Are the variables integrated, or related in the long run? Why is the short run of interest? What do the errors of the changes look like?",
	Sources: []string{
		"Plosser and Schwert (1978), Journal of Monetary Economics 4(4), 637-660",
		"Granger and Newbold (1974), Journal of Econometrics 2(2), 111-120",
		"Griliches and Hausman (1986), Journal of Econometrics 31(1), 93-118 (measurement error)",
	},
	Variants: differenceVariants,
})

func differenceVariants(p *Problem) ([]Variant, []NotApplicable) {
	no := func(reason string) ([]Variant, []NotApplicable) { return nil, []NotApplicable{{"difference", reason}} }
	switch {
	case p.Order == nil:
		return no("the study declares no time with one row a period")
	case len(p.Order) < len(p.Names)+4:
		return no("too few periods are left once one is lost")
	}
	r := &Rows{X: make([][]float64, len(p.Names)), Y: make([]float64, len(p.Order)), Skip: make([]bool, len(p.Order))}
	var x [][]float64
	var y []float64
	p.Rows(func(row []float64, v float64) {
		x = append(x, slices.Clone(row))
		y = append(y, v)
	})
	for j := range r.X {
		r.X[j] = make([]float64, len(y))
	}
	step := p.step()
	skipped := 0
	for k, i := range p.Order {
		if k == 0 || (step > 0 && math.Abs(p.Time[i]-p.Time[p.Order[k-1]]-step) > 1e-9*step) {
			r.Skip[i] = true
			skipped++
			continue
		}
		before := p.Order[k-1]
		r.Y[i] = y[i] - y[before]
		for j := range r.X {
			r.X[j][i] = x[i][j] - x[before][j]
		}
	}
	v := differenceFit{p: p, rows: r, skipped: skipped, total: len(y)}
	for j := range p.Names {
		if p.steady(r, j) {
			v.trends = append(v.trends, j)
		} else {
			v.keep = append(v.keep, j)
		}
	}
	if len(v.keep) == 0 {
		return no("no regressor changes by unequal steps")
	}
	return []Variant{{
		Key: "difference", Label: "First differences", OwnVariance: true, Rows: r,
		Summary:  fmt.Sprintf("Changes from one period to the next, %d of them, by least squares.", len(y)-skipped),
		Learn:    v.learn,
		Describe: v.describe,
	}}, nil
}

// step is the smallest gap between neighbouring periods, 0 where time has no numbers.
func (p *Problem) step() float64 {
	least := math.Inf(1)
	for k := 1; k < len(p.Order); k++ {
		if gap := p.Time[p.Order[k]] - p.Time[p.Order[k-1]]; gap > 0 {
			least = math.Min(least, gap)
		}
	}
	if math.IsInf(least, 1) {
		return 0
	}
	return least
}

// steady reports whether a column changes by the same step in every row: a trend, which the drift takes up.
func (p *Problem) steady(r *Rows, j int) bool {
	first, have := 0.0, false
	for i, skip := range r.Skip {
		switch {
		case skip:
		case !have:
			first, have = r.X[j][i], true
		case math.Abs(r.X[j][i]-first) > 1e-12*math.Abs(first):
			return false
		}
	}
	return have
}

type differenceFit struct {
	p              *Problem
	rows           *Rows
	keep, trends   []int
	skipped, total int
}

func (d differenceFit) learn(t Training) *Fitted {
	return fitBasis(t, selection(len(d.p.Names), d.keep), len(d.keep), Different)
}

func (d differenceFit) describe(f *Final) Description {
	p := d.p
	q, k := p.q(), p.offset()
	out := Description{Status: slices.Clone(f.Fitted.Status), Meaning: []Meaning{{"", "the association of changes from one period to the next, those of the other regressors held the same: a short-run quantity"}}}
	for j := range out.Status {
		if out.Status[j] == Estimated || out.Status[j] == Implied {
			out.Status[j] = Different
		}
	}
	for _, j := range d.trends {
		out.Status[j] = NotIdentified
	}
	if step := d.trendStep(); step != 0 {
		j := d.trends[0]
		out.Status[j] = Different
		out.Report = make([]float64, q*q)
		for i := range q {
			out.Report[i*q+i] = 1
		}
		out.Report[(k+j)*q+k+j], out.Report[(k+j)*q] = 0, 1/step
		out.Meaning = append(out.Meaning, Meaning{p.Names[j], "the drift of the changes, for one unit of the trend"})
	}
	out.Costs = append(out.Costs, fmt.Sprintf("%d of %d rows have no row one period before them and are left out", d.skipped, d.total),
		"it answers a question about changes; its errors are scored on forecasts of the dependent variable itself, its value one period before being known")
	if s := d.tangle(f); s != "" {
		out.Notes = append(out.Notes, Note{"differences-tangled", s})
	}
	return out
}

// trendStep is the step of the only trend in a model with constant, else 0.
func (d differenceFit) trendStep() float64 {
	if len(d.trends) != 1 || !d.p.Constant {
		return 0
	}
	for i, skip := range d.rows.Skip {
		if !skip {
			return d.rows.X[d.trends[0]][i]
		}
	}
	return 0
}

// tangle says how the inflation factors move.
func (d differenceFit) tangle(f *Final) string {
	if f.Sample == nil {
		return ""
	}
	before := d.p.Sample.InflationFactors()
	after := f.Sample.Keep(d.keep).InflationFactors()
	worst := 0
	for i, j := range d.keep {
		if before[j] > before[d.keep[worst]] {
			worst = i
		}
	}
	return fmt.Sprintf("in changes the inflation factor of %s is %s, in levels %s", d.p.Names[d.keep[worst]], say(after[worst]), say(before[d.keep[worst]]))
}
