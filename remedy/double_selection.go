package remedy

import (
	"fmt"
	"math"
	"slices"

	"modelmend/fit/linear"
	"modelmend/fit/tail"
)

// select chooses controls for coefficients of interest by the lasso, twice over, and fits by least squares what was chosen.
var _ = register(Remedy{
	Key:   "select",
	Title: "Controls chosen by double selection",
	Order: 18,
	Does: "Chooses, by a lasso with a penalty from theory, the controls that predict the dependent variable and those that predict each coefficient of interest's " +
		"regressor, and fits least squares with all of them. Regressors of interest and those to be kept are always in. The choice is made again on the " +
		"training rows of every fold, resample and simulated sample.",
	Assumes: "Few controls matter, for the dependent variable and for the regressors of interest, beside the number of rows; errors are independent and, for the penalty " +
		"used here, of equal variance. All controls that matter are among the candidates.",
	Buys: "A shorter list of controls without the usual price of choosing: a control that the first choice misses is caught by the second, so that the conventional " +
		"standard error of the coefficients of interest stays valid in large samples.",
	Costs: "In small samples the penalty can miss controls in both choices, and the bias of leaving them out can be large beside the standard error (Wüthrich and Zhu 2023). Nothing is " +
		"won where a control is tangled with a regressor of interest: it predicts it, and is chosen. Coefficients of the controls are not for inference.",
	Means:   "The coefficient of interest is a partial association beside the chosen controls; a control that is not chosen is set to zero, which is no finding that it has no effect.",
	Referee: "Is it plausible that few controls matter? Which controls theory demands were not chosen? Would the coefficient move with all of them in, as when the model is left alone?",
	Sources: []string{
		"Belloni, Chernozhukov and Hansen (2014), The Review of Economic Studies 81(2), 608-650",
		"Wüthrich and Zhu (2023), The Review of Economics and Statistics 105(4), 982-997 (small samples)",
		"Giannone, Lenza and Primiceri (2021), Econometrica 89(5), 2409-2437 (a critique of sparsity)",
	},
	Variants: doubleVariants,
})

// The penalty on a standardised slope is penaltyFactor * sigma * z(1 - penaltyLevel/(2p)), p the number of candidates. The values are the customary ones of
// Belloni, Chernozhukov and Hansen (from memory).
const (
	penaltyFactor = 1.1
	penaltyLevel  = 0.05
	mostRounds    = 15 // of estimating sigma
)

func doubleVariants(p *Problem) ([]Variant, []NotApplicable) {
	d := doubleFit{p: p}
	for j := range p.Names {
		switch {
		case p.Focal[j]:
			d.focal = append(d.focal, j)
		case p.Keep[j]:
			d.kept = append(d.kept, j)
		default:
			d.controls = append(d.controls, j)
		}
	}
	switch {
	case len(d.focal) == 0:
		return nil, []NotApplicable{{"select:double", "no coefficient of interest was named: controls are chosen for one"}}
	case len(d.controls) == 0:
		return nil, []NotApplicable{{"select:double", "every regressor is of interest or to be kept: there are no controls to choose from"}}
	}
	return []Variant{{Key: "select:double", Label: "Controls by double selection", OwnVariance: true,
		Summary: fmt.Sprintf("Least squares on %s with those of %d controls that a lasso keeps for the dependent variable or for it.", join(p.names(d.focal)), len(d.controls)),
		Learn:   d.learn, Describe: d.describe}}, nil
}

type doubleFit struct {
	p                     *Problem
	focal, kept, controls []int
}

// choice is what was chosen: by the lasso of y, by that of each regressor of interest, and all together.
type choice struct {
	byY     []int
	byFocal [][]int
	union   []int
}

// choose runs the lassos on one sample, regressors to be kept partialled out of everything.
func (d doubleFit) choose(s *linear.Sample) choice {
	c, r, _, _ := s.Standardized()
	p := s.P
	// The correlation matrix with y as its last row and column.
	q := p + 1
	a := make([]float64, q*q)
	for i := range p {
		copy(a[i*q:i*q+p], c[i*p:(i+1)*p])
		a[i*q+p], a[p*q+i] = r[i], r[i]
	}
	a[p*q+p] = 1
	spent := 0 // degrees of freedom
	if s.Constant {
		spent++
	}
	for _, k := range d.kept {
		if linear.PartialOut(a, q, k) {
			spent++
		}
	}
	n := float64(s.N - spent)
	candidates := d.candidates(a, q)
	out := choice{byY: lassoChoice(a, q, p, candidates, n)}
	chosen := make([]bool, p)
	mark := func(cols []int) {
		for _, j := range cols {
			chosen[j] = true
		}
	}
	mark(out.byY)
	for _, f := range d.focal {
		cols := lassoChoice(a, q, f, candidates, n)
		out.byFocal = append(out.byFocal, cols)
		mark(cols)
	}
	for j, c := range chosen {
		if c {
			out.union = append(out.union, j)
		}
	}
	return out
}

// candidates are the controls that vary beside what was partialled out.
func (d doubleFit) candidates(a []float64, q int) []int {
	var out []int
	for _, j := range d.controls {
		if a[j*q+j] > linear.Unvaried {
			out = append(out, j)
		}
	}
	return out
}

// lassoChoice returns the candidates that a lasso of column target keeps, a the q x q cross-products of everything and n the degrees of freedom of a mean.
//
// With unit-length columns z and the target y the lasso minimises |y - Zb|²/2 + l sum|b_j|, l = 1.1 sigma z(1 - 0.05/(2p)): since z_j'e has standard deviation
// sigma under errors of equal variance, that keeps out, with probability 95 %, every column that has nothing to say. It is the penalty
// lambda = 2 c sqrt(n) z(1 - gamma/(2p)) of the paper on |y - Xb|²/n + lambda/n sum of sigma * root(mean x_j²) |b_j|, times n/2. Sigma is that of y to begin
// with, then that of the residuals of least squares on what is kept, until what is kept stays the same.
func lassoChoice(a []float64, q, target int, candidates []int, n float64) []int {
	m := len(candidates)
	yy := a[target*q+target]
	if m == 0 || !(yy > linear.Unvaried) {
		return nil
	}
	c, r := make([]float64, m*m), make([]float64, m)
	for i, j := range candidates {
		di := math.Sqrt(a[j*q+j])
		for k, l := range candidates {
			c[i*m+k] = a[j*q+l] / di / math.Sqrt(a[l*q+l])
		}
		c[i*m+i] = 1
		r[i] = a[j*q+target] / di / math.Sqrt(yy) // y of unit length too
	}
	quantile := penaltyFactor * tail.NormalQuantile(1-penaltyLevel/(2*float64(m)))
	sigma := 1 / math.Sqrt(n)
	var kept []int
	for round := range mostRounds {
		b := linear.NewNet(c, r).Solve(quantile*sigma, 0)
		var now []int
		for i, v := range b {
			if v != 0 {
				now = append(now, i)
			}
		}
		if round > 0 && slices.Equal(now, kept) {
			break
		}
		kept = now
		left := n - float64(len(kept))
		if left <= 0 {
			break
		}
		sigma = math.Sqrt(math.Max(0, linear.Unexplained(c, r, kept)) / left)
	}
	out := make([]int, len(kept))
	for i, k := range kept {
		out[i] = candidates[k]
	}
	return out
}

func (d doubleFit) learn(t Training) *Fitted {
	chosen := d.choose(t.Sample)
	in := make([]bool, t.Sample.P)
	for _, cols := range [][]int{d.focal, d.kept, chosen.union} {
		for _, j := range cols {
			in[j] = true
		}
	}
	var keep, gone []int
	status := make([]Status, len(in))
	for j, yes := range in {
		if yes {
			keep, status[j] = append(keep, j), Estimated
		} else {
			gone, status[j] = append(gone, j), Zero
		}
	}
	if len(gone) == 0 {
		return learnAsIs(t)
	}
	if !t.Final {
		if b, inverse, ok := t.Sample.Without(gone, t.Covariance); ok {
			f := &Fitted{Slopes: b, Columns: len(keep), Status: status}
			if t.Covariance {
				f.Factor = t.Sample.WithConstant(inverse)
			}
			return f
		}
	}
	return fitBasis(t, selection(t.Sample.P, keep), len(keep), Estimated)
}

func (d doubleFit) describe(f *Final) Description {
	p := f.Problem
	chosen := d.choose(p.Sample)
	out := Description{}
	for _, j := range d.focal {
		out.Meaning = append(out.Meaning, Meaning{p.Names[j], "the association while " + others(p.names(chosen.union)) + " stay the same; the conventional standard error is valid for it, in large " +
			"samples, if few controls matter"})
	}
	for _, j := range d.controls {
		if slices.Contains(chosen.union, j) {
			out.Meaning = append(out.Meaning, Meaning{p.Names[j], "a chosen control: its own standard error takes the choice as given and is not for inference"})
		} else {
			out.Meaning = append(out.Meaning, Meaning{p.Names[j], "not chosen, and so set to zero, which is no finding that it has no effect"})
		}
	}
	for _, j := range d.kept {
		out.Meaning = append(out.Meaning, Meaning{p.Names[j], "kept whatever the choice"})
	}
	text := "chosen for the dependent variable: " + join(p.names(chosen.byY))
	for i, j := range d.focal {
		text += "; for " + p.Names[j] + ": " + join(p.names(chosen.byFocal[i]))
	}
	out.Notes = append(out.Notes, Note{"controls-chosen", text})
	if len(chosen.union) == len(d.controls) {
		out.Notes = append(out.Notes, Note{"all-controls", "every control is chosen: on all rows this is the model left alone"})
	}
	out.Notes = append(out.Notes, Note{"small-sample", fmt.Sprintf("with %d rows and %d controls the penalty can miss controls in both choices; compare with the model left alone, whose coefficient needs no choice", p.Sample.N, len(d.controls))})
	for _, j := range d.focal {
		for _, k := range p.dependents(j) {
			if !p.Focal[k] && !p.Keep[k] {
				out.Notes = append(out.Notes, Note{"terms-chosen-singly", p.Names[k] + " is built on " + p.Names[j] + " and is taken for a control like any other; name it with focal or keep if it belongs to it"})
			}
		}
	}
	for _, j := range d.controls {
		if p.Category[j] != "" {
			out.Notes = append(out.Notes, Note{"dummies-selected", "dummies of one category are chosen one by one, which depends on the base category"})
			break
		}
	}
	out.Costs = append(out.Costs,
		fmt.Sprintf("left out: %d of %d controls", len(d.controls)-len(chosen.union), len(d.controls)),
		"the penalty is the one for errors of equal variance, sigma estimated in rounds; under unequal variances it can keep too few or too many",
		"the standard error of a coefficient of interest leaves out the bias of controls that both choices miss, which small samples make likely (Wüthrich and Zhu 2023)")
	return out
}

func others(names []string) string {
	if len(names) == 0 {
		return "no controls"
	}
	return join(names)
}
