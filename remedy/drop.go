package remedy

import (
	"fmt"
	"math"

	"modelmend/fit/figures"
	"modelmend/fit/pretest"
	"modelmend/fit/tail"
)

// drop removes one tangled regressor at a time, each as an alternative of its own: the tool does not choose among them.
var _ = register(Remedy{
	Key:   "drop",
	Title: "Drop a regressor",
	Order: 10,
	Does: "Leaves one tangled regressor out, with the powers and products built on it, and fits the rest by least squares. " +
		"Every tangled regressor that is neither of interest nor to be kept is tried in turn.",
	Assumes: "The true coefficient of what is dropped is zero, or what it would add is meant to be credited to the regressors that stay.",
	Buys:    "Smaller standard errors for the regressors that were tangled with it.",
	Costs: "The kept coefficients move by exactly what the dropped regressor used to carry (the omitted-variable identity). The usual " +
		"standard errors hold only if the choice was made without looking at the results.",
	Means: "A kept coefficient becomes a total association: its own part plus the dropped regressor's part that moves with it.",
	Referee: "Does theory put the dropped regressor in the equation? Was it dropped before or after seeing the estimates? " +
		"What are the estimates of the long equation?",
	Sources: []string{
		"Gelbach (2016), Journal of Labor Economics 34(2), 509-543",
		"Leeb and Pötscher (2005), Econometric Theory 21(1), 21-59",
		"Judge and Bock (1978), The Statistical Implications of Pre-Test and Stein-Rule Estimators in Econometrics, North-Holland",
	},
	Variants: dropVariants,
})

func dropVariants(p *Problem) (out []Variant, not []NotApplicable) {
	seen := map[string]bool{}
	any := false
	for j, tangled := range p.Tangled {
		if !tangled {
			continue
		}
		any = true
		name := p.Names[j]
		removes := append([]int{j}, p.dependents(j)...)
		if c := p.Category[j]; c != "" {
			name, removes = c, nil
			for k := range p.Names {
				if p.Category[k] == c {
					removes = append(removes, k)
				}
			}
		}
		key := "drop:" + name
		if seen[key] {
			continue
		}
		seen[key] = true
		if reason := p.cannotRemove(removes); reason != "" {
			not = append(not, NotApplicable{key, reason})
			continue
		}
		if len(removes) >= len(p.Names) {
			not = append(not, NotApplicable{key, "nothing would be left of the equation"})
			continue
		}
		out = append(out, p.dropVariant(key, name, removes))
	}
	if !any {
		not = append(not, NotApplicable{"drop", "no regressor is tangled with another"})
	}
	return out, not
}

// cannotRemove says why the columns may not be removed, or nothing.
func (p *Problem) cannotRemove(cols []int) string {
	for _, c := range cols {
		switch {
		case p.Focal[c] && c == cols[0]:
			return p.Names[c] + " is a coefficient of interest"
		case p.Focal[c]:
			return fmt.Sprintf("%s goes with it, and that is a coefficient of interest", p.Names[c])
		case p.Keep[c] && c == cols[0]:
			return p.Names[c] + " is to be kept"
		case p.Keep[c]:
			return fmt.Sprintf("%s goes with it, and that is to be kept", p.Names[c])
		}
	}
	return ""
}

func (p *Problem) dropVariant(key, name string, removes []int) Variant {
	gone := make([]bool, len(p.Names))
	for _, c := range removes {
		gone[c] = true
	}
	var keep []int
	for j := range p.Names {
		if !gone[j] {
			keep = append(keep, j)
		}
	}
	basis := selection(len(p.Names), keep)
	status := make([]Status, len(p.Names))
	for j := range status {
		status[j] = Estimated
		if gone[j] {
			status[j] = Zero
		}
	}
	return Variant{
		Key: key, Label: "Drop " + name, Removes: removes, OwnVariance: true,
		Summary: "Least squares without " + join(p.names(removes)) + ".",
		Learn: func(t Training) *Fitted {
			if !t.Final {
				if b, inverse, ok := t.Sample.Without(removes, t.Covariance); ok {
					f := &Fitted{Slopes: b, Columns: len(keep), Status: status}
					if t.Covariance {
						f.Factor = t.Sample.WithConstant(inverse)
					}
					return f
				}
			}
			return fitBasis(t, basis, len(keep), Estimated)
		},
		Describe: func(f *Final) Description { return describeDrop(f, removes, keep) },
	}
}

func describeDrop(f *Final, removes, keep []int) Description {
	p := f.Problem
	var d Description
	d.Tests = restrictionTests(f, "restriction that "+join(p.names(removes))+has(removes)+" no effect")
	d.BreakEven = breakEvens(f)
	if len(removes) == 1 && f.AsIs.NotIdentified == nil && !math.IsNaN(f.S) && f.S > 0 {
		d.Tests = append(d.Tests, singleT(f, removes[0]))
		v := f.AsIs.Inverse[removes[0]*len(p.Names)+removes[0]]
		effect := pretest.BreakEven(f.S * math.Sqrt(v))
		for i := range d.BreakEven {
			b := &d.BreakEven[i]
			b.Effect = effect
			b.Text += fmt.Sprintf("; that is as long as the true coefficient of %s is below %s in size, one of its standard errors (it is estimated at %s)",
				p.Names[removes[0]], say(effect), say(f.AsIs.Slopes[removes[0]]))
		}
		d.Worst = worstCoverages(f, removes[0])
	}
	// The omitted-variable identity: kept coefficients move by Gamma * b(dropped), Gamma from regressing each dropped
	// regressor on the kept ones.
	moves := make([][]float64, len(removes))
	for i, c := range removes {
		moves[i], _, _ = p.Sample.Auxiliary(c, keep)
	}
	for k, j := range keep {
		text := ""
		for i, c := range removes {
			if g := moves[i][k]; math.Abs(g)*p.Sample.SD(j) > 1e-3*p.Sample.SD(c) {
				text += fmt.Sprintf("%s%s times the coefficient of %s", sign(g), say(math.Abs(g)), p.Names[c])
			}
		}
		if text == "" {
			text = "the association while the other kept regressors stay the same; it hardly moves with what was dropped"
		} else {
			text = "its own association" + text
		}
		d.Meaning = append(d.Meaning, Meaning{p.Names[j], text})
	}
	if f.AsIs.NotIdentified == nil {
		for k, j := range keep {
			if !p.Focal[j] {
				continue
			}
			sum := 0.0
			for i, c := range removes {
				sum += moves[i][k] * f.AsIs.Slopes[c]
			}
			d.Costs = append(d.Costs, fmt.Sprintf("the coefficient of %s moves by %s, from %s to %s: exactly what %s used to carry",
				p.Names[j], say(sum), say(f.AsIs.Slopes[j]), say(f.Fitted.Slopes[j]), join(p.names(removes))))
		}
	}
	d.Costs = append(d.Costs, "the standard errors shown are valid only if the choice to drop "+join(p.names(removes))+" was made without looking at the results")
	return d
}

// worstCoverages says how far the coverage of the usual interval can fall for each coefficient of interest when column j is dropped only because it is
// not significant: recomputed at the correlation of the two estimates here, for normal errors of known variance.
func worstCoverages(f *Final, j int) []WorstCoverage {
	p := f.Problem
	n := len(p.Names)
	var out []WorstCoverage
	for k, focal := range p.Focal {
		if !focal || k == j {
			continue
		}
		r := f.AsIs.Inverse[k*n+j] / math.Sqrt(f.AsIs.Inverse[k*n+k]*f.AsIs.Inverse[j*n+j])
		if !(math.Abs(r) < 1) {
			continue
		}
		w := WorstCoverage{Coefficient: p.Names[k], Correlation: r}
		w.Coverage, w.TrueT = pretest.WorstCoverage(r, ruleMark, 0.95)
		w.Text = fmt.Sprintf("if %s is dropped only because its |t| is below 1.96, the usual 95 %% interval of %s covers as little as %s in the worst case (the two estimates correlate by %s; "+
			"worst where the true t-ratio of %s is %s)", p.Names[j], p.Names[k], figures.Percent(w.Coverage), say(r), p.Names[j], say(w.TrueT))
		out = append(out, w)
	}
	return out
}

func sign(v float64) string {
	if v < 0 {
		return " minus "
	}
	return " plus "
}

func has(cols []int) string {
	if len(cols) == 1 {
		return " has"
	}
	return " have"
}

// singleT compares the dropped coefficient's t-ratio with the marks at which dropping pays in mean squared error.
func singleT(f *Final, j int) Test {
	v := f.AsIs.Inverse[j*len(f.AsIs.Slopes)+j]
	t := f.AsIs.Slopes[j] / (f.S * math.Sqrt(v))
	test := Test{Name: "single-t", Statistic: t, Degrees: []float64{f.DF}, P: tail.T(t, f.DF)}
	var verdict string
	switch {
	case math.Abs(t) < 1:
		verdict = "under both marks"
	case t*t < 2:
		verdict = "over |t| = 1 and under t² = 2: the two marks disagree"
	default:
		verdict = "over both marks"
	}
	test.Text = fmt.Sprintf("t-ratio of %s %s: %s. Below |t| = 1 the plug-in rule says that dropping lowers the mean squared error "+
		"of the kept slopes (the residual variance falls); below t² = 2 the rule with an unbiased estimate of the noncentrality says so. "+
		"Neither is a test", f.Problem.Names[j], say(t), verdict)
	return test
}
