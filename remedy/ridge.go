package remedy

import (
	"fmt"
	"math"

	"modelmend/fit/folds"
	"modelmend/fit/linear"
)

// ridge shrinks standardised slopes towards zero; the constant is never penalised.
var _ = register(Remedy{
	Key:   "ridge",
	Title: "Ridge regression",
	Order: 50,
	Does: "Adds a penalty on the squared standardised slopes. The penalty is on the correlation form, so it depends neither on units nor " +
		"on the number of rows, and is chosen by cross-validation inside the training rows among zero and a hundred values.",
	Assumes: "Standardised slopes are of like size and not large; a slope that is large while others are small is shrunk too much.",
	Buys:    "Less variance, most of it in the thin directions where tangled regressors differ; often steadier predictions.",
	Costs: "Bias towards zero of unknown size. Standard errors given the penalty leave out that bias and the choice of the penalty. Ridging " +
		"gives no new tests: the classical t and F under a fixed shrinkage are those of least squares.",
	Means: "A shrunken association: the estimate leans towards zero by an amount that depends on all the regressors. Seen as Bayes would, the penalty is a " +
		"normal prior around zero with variance s²/(penalty x (n-1) x the regressor's variance).",
	Referee: "How was the penalty chosen, and inside which rows? Why shrink the coefficient of interest? Are intervals read as if unbiased?",
	Sources: []string{
		"Hoerl and Kennard (1970), Technometrics 12(1), 55-67",
		"Golub, Heath and Wahba (1979), Technometrics 21(2), 215-223",
		"Hoerl, Kennard and Baldwin (1975), Communications in Statistics 4(2), 105-123",
		"Lawless and Wang (1976), Communications in Statistics - Theory and Methods 5(4), 307-323",
		"Obenchain (1977), Technometrics 19(4), 429-439",
		"Smith and Campbell (1980), Journal of the American Statistical Association 75(369), 74-81 (a critique)",
	},
	Options: []Option{
		{"ridge.penalty", NumberOption, "use this penalty instead of choosing one"},
		{"ridge.spare", ColumnsOption, "regressors that are not penalised"},
	},
	Variants: ridgeVariants,
})

func ridgeVariants(p *Problem) ([]Variant, []NotApplicable) {
	spare := p.Settings.Columns["ridge.spare"]
	if len(spare) >= len(p.Names) {
		return nil, []NotApplicable{{"ridge", "every regressor is spared the penalty"}}
	}
	summary := "Standardised slopes shrunk towards zero, the penalty chosen by cross-validation."
	if _, fixed := p.Settings.Numbers["ridge.penalty"]; fixed {
		summary = "Standardised slopes shrunk towards zero by the penalty that the user fixed."
	}
	if len(spare) > 0 {
		summary += " Not penalised: " + join(p.names(spare)) + "."
	}
	r := ridgeFit{p: p, spare: spare}
	out := []Variant{{Key: "ridge", Label: "Ridge", Summary: summary, Learn: r.learn, Describe: r.describe}}
	// A coefficient of interest that is tangled should not be shrunk itself: the others are, beside it.
	var focal []int
	tangled := false
	for j, f := range p.Focal {
		if f {
			focal = append(focal, j)
			tangled = tangled || p.Tangled[j]
		}
	}
	if tangled && len(spare) == 0 && len(focal) < len(p.Names) {
		r := ridgeFit{p: p, spare: focal}
		out = append(out, Variant{Key: "ridge:focal-spared", Label: "Ridge, " + join(p.names(focal)) + " spared",
			Summary: "Standardised slopes shrunk towards zero, but for " + join(p.names(focal)) + ", which the penalty leaves out.", Learn: r.learn, Describe: r.describe})
	}
	return out, nil
}

type ridgeFit struct {
	p     *Problem
	spare []int
}

// values returns the penalties tried and the place of the fixed one, or -1.
func (r ridgeFit) values() ([]float64, int) {
	fixed, ok := r.p.Settings.Numbers["ridge.penalty"]
	if !ok {
		return r.p.Penalties, -1
	}
	return withFixed(r.p.Penalties, fixed)
}

func (r ridgeFit) learn(t Training) *Fitted {
	values, at := r.values()
	tuning := &Tuning{Parameter: "penalty", Fixed: at >= 0, Values: values, OnSquares: true}
	if at < 0 || t.Final {
		tuning.MSE, tuning.MSESD = tune(t.Inner, len(values), func(s Split) []float64 {
			sp := s.Train.Spectrum(r.spare)
			return s.Held.PathSSE(sp, len(values), func(i, k int) float64 { return sp.Sigma[k] / (sp.Sigma[k]*sp.Sigma[k] + values[i]) })
		})
	}
	tuning.Chosen = at
	if at < 0 {
		tuning.Chosen = smallest(tuning.MSE, true)
	}
	sp := t.Sample.Spectrum(r.spare)
	penalty := values[tuning.Chosen]
	f := &Fitted{Slopes: r.slopes(t.Sample, sp, penalty), Tuning: tuning, Columns: t.Sample.P}
	switch {
	case t.Final:
		r.finish(t.Sample, sp, f)
	case t.Covariance:
		f.Factor = r.factor(t.Sample, sp, penalty)
	}
	return f
}

// factor is the sampling covariance over sigma^2 given the penalty, W S W in the slopes.
func (r ridgeFit) factor(s *linear.Sample, sp *linear.Spectrum, penalty float64) []float64 {
	switch {
	case penalty == 0:
		return s.LeastSquares(true).Factor(s)
	case len(r.spare) == 0:
		return s.WithConstant(sp.RidgeSampling(penalty))
	}
	return s.Factor(s.PenalizedInverse(penalty, r.spare))
}

// slopes at penalty 0 are least squares, solved in double-double rather than through the spectrum.
func (r ridgeFit) slopes(s *linear.Sample, sp *linear.Spectrum, penalty float64) []float64 {
	if penalty == 0 {
		return s.LeastSquares(false).Slopes
	}
	return sp.RidgeSlopes(penalty)
}

func (r ridgeFit) finish(s *linear.Sample, sp *linear.Spectrum, f *Fitted) {
	t := f.Tuning
	for _, v := range t.Values {
		t.Slopes = append(t.Slopes, r.slopes(s, sp, v))
		t.Degrees = append(t.Degrees, sp.RidgeDegrees(v))
	}
	// The ridge slopes are W X'y, so their covariance with the least-squares slopes is sigma^2 W.
	cross := func(penalty float64) []float64 {
		switch {
		case penalty == 0:
			return r.factor(s, sp, 0)
		case len(r.spare) == 0:
			return s.WithConstant(sp.RidgeMap(penalty))
		}
		return s.WithConstant(s.PenalizedInverse(penalty, r.spare))
	}
	t.Factor = func(i int) []float64 { return r.factor(s, sp, t.Values[i]) }
	t.Cross = func(i int) []float64 { return cross(t.Values[i]) }
	penalty := t.Values[t.Chosen]
	f.Factor = r.factor(s, sp, penalty)
	f.Cross = cross(penalty)
	if penalty > 0 {
		m := s.PenalizedInverse(penalty, r.spare)
		f.Posterior = make([]float64, s.P)
		for j := range f.Posterior {
			f.Posterior[j] = m[j*s.P+j]
		}
	}
}

func (r ridgeFit) describe(f *Final) Description {
	p, t := f.Problem, f.Fitted.Tuning
	d := Description{Meaning: []Meaning{{"", "shrunken towards zero; not a plain partial association"}}}
	penalty := t.Values[t.Chosen]
	for _, c := range r.spare {
		d.Meaning = append(d.Meaning, Meaning{p.Names[c], "not penalised itself, but it takes up what the others lose"})
	}
	if penalty == 0 {
		d.Meaning[0].Text = "the chosen penalty is zero: this is least squares"
		d.Notes = append(d.Notes, Note{"penalty-zero", "cross-validation chose no penalty at all: ridge is the model left alone here"})
	}
	if !t.Fixed && t.Chosen == len(t.Values)-1 {
		d.Notes = append(d.Notes, Note{"penalty-at-edge", "the chosen penalty is the largest of the grid: the data support no slopes at all, or the equation is wrong"})
	}
	d.Costs = append(d.Costs,
		fmt.Sprintf("about %s of %d degrees of freedom remain", say(t.Degrees[t.Chosen]), f.AsIs.Rank),
		"the interval is the estimate plus and minus t standard errors given the penalty; it is not centred on the true value",
		"the standard error leaves out the bias and the choice of the penalty")
	t.Candidates = r.candidates(f)
	return d
}

// candidates lists what other published rules would choose.
func (r ridgeFit) candidates(f *Final) []Candidate {
	p, t := f.Problem, f.Fitted.Tuning
	s := p.Sample
	sp := s.Spectrum(r.spare)
	n := float64(s.N)
	var out []Candidate
	if len(t.MSE) > 0 && !math.IsNaN(t.MSE[0]) {
		out = append(out, Candidate{"one-standard-error", "the largest penalty whose error is within one standard error of the smallest", t.Values[oneStandardError(t, true)]})
	}
	constant := 0.0
	if p.Constant {
		constant = 1
	}
	gcv, slope := r.generalized(f.AsIs.RSS, constant, n, sp)
	out = append(out, Candidate{"generalized-cross-validation", "smallest generalised cross-validation (Golub, Heath and Wahba 1979), the whole range scanned", refine(t.Values, gcv, slope)})
	if p.Rows != nil && s.N <= folds.Exact {
		if k, ok := r.leaveOneOut(sp); ok {
			out = append(out, Candidate{"leave-one-out", "smallest leave-one-out error, the scaling held at that of all rows", k})
		}
	}
	if f.AsIs.NotIdentified == nil && !math.IsNaN(f.S) && len(r.spare) == 0 {
		var length, explained float64
		for j, b := range f.AsIs.Slopes {
			length += b * b * s.S[j*s.P+j].Float()
			explained += b * s.R[j].Float()
		}
		v := float64(s.P) * f.S * f.S
		out = append(out,
			Candidate{"hoerl-kennard-baldwin", "p s²/(b'b) on standardised slopes (Hoerl, Kennard and Baldwin 1975)", v / length},
			Candidate{"lawless-wang", "p s²/(b'Sb), the inverse of the F statistic (Lawless and Wang 1976)", v / explained})
	}
	return out
}

// oneStandardError returns the place farthest towards more shrinkage whose error is within one standard error of the smallest.
func oneStandardError(t *Tuning, towardsEnd bool) int {
	best := smallest(t.MSE, towardsEnd)
	limit := t.MSE[best] + t.MSESD[best]
	place := best
	for i := range t.MSE {
		if t.MSE[i] <= limit && ((towardsEnd && i > place) || (!towardsEnd && i < place)) {
			place = i
		}
	}
	return place
}

// generalized returns the generalised cross-validation criterion (RSS/n)/(1-(1+df)/n)^2 of a penalty and the derivative of its logarithm, from
//
//	RSS(k) = RSS(0) + sum u^2 k^2/(l+k)^2,  df(k) = sum l/(l+k),
//
// with l the eigenvalues and u the parts of y along the directions.
func (r ridgeFit) generalized(rss0, constant, n float64, sp *linear.Spectrum) (value, slope func(k float64) float64) {
	parts := func(k float64) (rss, rssSlope, df, dfSlope float64) {
		rss, df = rss0, float64(sp.Spared())
		for i, sigma := range sp.Sigma {
			l, u := sigma*sigma, sp.UZ[i]
			w := l + k
			rss += u * u * k * k / (w * w)
			rssSlope += 2 * u * u * k * l / (w * w * w)
			df += l / w
			dfSlope -= l / (w * w)
		}
		return rss, rssSlope, df, dfSlope
	}
	value = func(k float64) float64 {
		rss, _, df, _ := parts(k)
		e := 1 - (constant+df)/n
		return rss / n / (e * e)
	}
	slope = func(k float64) float64 {
		rss, rssSlope, df, dfSlope := parts(k)
		return rssSlope/rss + 2*dfSlope/n/(1-(constant+df)/n)
	}
	return value, slope
}

// refine finds the smallest value of f over the grid and narrows it down between its neighbours to where the slope changes its sign. The whole grid
// is scanned, since f may have several minima; a minimum at an end of the grid stays there.
func refine(grid []float64, f, slope func(float64) float64) float64 {
	best := 0
	for i, k := range grid {
		if f(k) < f(grid[best]) {
			best = i
		}
	}
	lo, hi := grid[max(0, best-1)], grid[min(len(grid)-1, best+1)]
	if !(slope(lo) < 0 && slope(hi) > 0) {
		return grid[best]
	}
	for range 200 {
		mid := lo + (hi-lo)/2
		if mid <= lo || mid >= hi {
			break
		}
		if slope(mid) < 0 {
			lo = mid
		} else {
			hi = mid
		}
	}
	return lo
}

// leaveOneOut returns the penalty of the grid with the smallest sum of squared e_i/(1-h_ii); it takes one pass over the rows
// for the scores and one over the scores for each penalty.
func (r ridgeFit) leaveOneOut(sp *linear.Spectrum) (float64, bool) {
	if len(r.spare) > 0 {
		return 0, false
	}
	s := r.p.Sample
	scores, y := r.scores(sp)
	values, _ := r.values()
	floor := 0.0
	if s.Constant {
		floor = 1 / float64(s.N)
	}
	best, bestValue := 0.0, math.Inf(1)
	for _, k := range values {
		press := 0.0
		for i := range y {
			fitted, h := 0.0, floor
			row := scores[i*sp.Rank : (i+1)*sp.Rank]
			for m, u := range row {
				w := sp.Sigma[m] * sp.Sigma[m] / (sp.Sigma[m]*sp.Sigma[m] + k)
				fitted += u * w * sp.UZ[m]
				h += u * u * w
			}
			if 1-h < 1e-12 {
				press = math.Inf(1)
				break
			}
			e := (y[i] - fitted) / (1 - h)
			press += e * e
		}
		if press <= bestValue {
			best, bestValue = k, press
		}
	}
	return best, !math.IsInf(bestValue, 1)
}

// scores returns the left singular vectors of the unit-length regressors (n x rank) and the centred y.
func (r ridgeFit) scores(sp *linear.Spectrum) (u, y []float64) {
	s := r.p.Sample
	mean := make([]float64, s.P)
	for j := range mean {
		mean[j] = s.Mean[j].Float()
	}
	scale := s.Scale()
	my := s.MeanY.Float()
	r.p.Rows(func(x []float64, yi float64) {
		y = append(y, yi-my)
		for m := range sp.Rank {
			v := 0.0
			for i, c := range sp.Cols {
				if d := scale[c].Float(); d > 0 {
					v += (x[c] - mean[c]) / d * sp.V[i*sp.Rank+m]
				}
			}
			u = append(u, v/sp.Sigma[m])
		}
	})
	return u, y
}
