package remedy

import (
	"fmt"
	"math"

	"modelmend/fit/linear"
)

// elastic-net shrinks standardised slopes and sets some of them to zero; the constant is never penalised.
var _ = register(Remedy{
	Key:   "elastic-net",
	Title: "Elastic net",
	Order: 55,
	Does: "Adds a penalty on the sizes and on the squares of the standardised slopes, the dependent variable standardised too, and so sets some slopes to zero. " +
		"The mix of the two is fixed (one half; 1 is the lasso, 0 is ridge), the penalty is chosen by cross-validation inside the training rows among zero and " +
		"sixty values, up to the one at which no slope can be kept whatever the data.",
	Assumes: "Few slopes matter and the others are zero or small. In economic data that may not hold: many small effects are as common as a few large ones.",
	Buys:    "A shorter equation chosen without looking at t-ratios, less variance, often steadier predictions. Beside the lasso, the part on squares keeps tangled regressors together.",
	Costs: "Bias towards zero of unknown size. Which of several tangled regressors is kept is close to arbitrary and changes from sample to sample: read how often each is " +
		"kept over the resamples. There is no formula for standard errors, and resampling the rows does not estimate the spread consistently where true slopes are zero.",
	Means:   "A shrunken association beside the other kept regressors; a zero is a choice of the penalty, not a finding that the regressor has no effect.",
	Referee: "Would the same regressors be kept in another sample? Why this mix? Is a zero read as no effect? Why not inference that is made for selection?",
	Sources: []string{
		"Zou and Hastie (2005), Journal of the Royal Statistical Society, Series B 67(2), 301-320",
		"Tibshirani (1996), Journal of the Royal Statistical Society, Series B 58(1), 267-288",
		"Friedman, Hastie and Tibshirani (2010), Journal of Statistical Software 33(1), 1-22",
		"Zou, Hastie and Tibshirani (2007), The Annals of Statistics 35(5), 2173-2192 (degrees of freedom of the lasso)",
		"Camponovo (2015), Biometrika 102(4), 981-987 (resampling rows is not consistent; journal and pages from memory)",
		"Giannone, Lenza and Primiceri (2021), Econometrica 89(5), 2409-2437 (a critique of sparsity)",
	},
	Options: []Option{
		{"elastic-net.mix", NumberOption, "share of the penalty that is on sizes rather than squares, from 0 (ridge) to 1 (lasso); one half where nothing is said"},
		{"elastic-net.penalty", NumberOption, "use this penalty instead of choosing one"},
	},
	Variants: netVariants,
})

const noNetErrors = "slopes that are set to zero by the data have no standard error by formula; resampled errors are no more than a guide here, since resampling rows " +
	"is not consistent where true slopes are zero"

// The grid of penalties: netSteps values evenly spaced in logarithms up to the one at which nothing can be kept.
const (
	netSteps    = 60
	netSmallest = 1e-4
	netLeastMix = 0.01 // the grid ends at 1/mix, but where the mix is below this
)

func netVariants(p *Problem) ([]Variant, []NotApplicable) {
	n := netFit{mix: 0.5, at: -1}
	if v, ok := p.Settings.Numbers["elastic-net.mix"]; ok {
		if v > 1 {
			return nil, []NotApplicable{{"elastic-net", fmt.Sprintf("a mix of %g was asked for; it runs from 0 to 1", v)}}
		}
		n.mix = v
	}
	n.values = netPenalties(n.mix)
	how := "the penalty chosen by cross-validation."
	if v, ok := p.Settings.Numbers["elastic-net.penalty"]; ok {
		n.values, n.at = withFixed(n.values, v)
		how = "by the penalty that the user fixed."
	}
	label, summary := "Elastic net", fmt.Sprintf("Standardised slopes shrunk and some set to zero (mix %g), ", n.mix)
	switch n.mix {
	case 1:
		label, summary = "Lasso", "Standardised slopes shrunk and some set to zero (lasso), "
	case 0:
		summary = "Standardised slopes shrunk (mix 0: ridge), "
	}
	return []Variant{{Key: "elastic-net", Label: label, Summary: summary + how, Learn: n.learn, Describe: n.describe}}, nil
}

// netPenalties is the grid, the same in every sample: correlations are at most one, so that no slope can be kept at a penalty of 1/mix.
func netPenalties(mix float64) []float64 {
	top := 1 / math.Max(mix, netLeastMix)
	out := []float64{0}
	for i := range netSteps {
		out = append(out, math.Exp(math.Log(netSmallest)+(math.Log(top)-math.Log(netSmallest))*float64(i)/(netSteps-1)))
	}
	out[netSteps] = top
	return out
}

type netFit struct {
	mix    float64
	values []float64
	at     int // place of the value that the user fixed, or -1
}

// path returns the slopes at each penalty from the largest down to place last, in the user's units; at penalty zero they are least squares. degrees, where
// not nil, is filled too.
func (n netFit) path(s *linear.Sample, last int, degrees []float64) [][]float64 {
	c, r, scale, length := s.Standardized()
	net := linear.NewNet(c, r)
	net.Know(s.Spectrum(nil))
	out := make([][]float64, len(n.values))
	buffer := make([]float64, len(n.values)*s.P)
	for i := len(n.values) - 1; i >= last; i-- {
		if n.values[i] == 0 {
			fit := s.LeastSquares(false)
			out[i] = fit.Slopes
			if degrees != nil {
				degrees[i] = float64(fit.Rank)
			}
			continue
		}
		out[i] = buffer[i*s.P : (i+1)*s.P]
		l2 := (1 - n.mix) * n.values[i]
		for j, b := range net.Solve(n.mix*n.values[i], l2) {
			if b != 0 {
				out[i][j] = b * length / scale[j]
			}
		}
		if degrees != nil {
			degrees[i] = net.Degrees(l2)
		}
	}
	return out
}

func (n netFit) learn(t Training) *Fitted {
	tuning := &Tuning{Parameter: "penalty", Fixed: n.at >= 0, Values: n.values, OnSquares: n.mix == 0}
	if n.at < 0 || t.Final {
		tuning.MSE, tuning.MSESD = tune(t.Inner, len(n.values), func(s Split) []float64 {
			slopes := n.path(s.Train, 0, nil)
			return oneByOne(s, len(slopes), func(i int) []float64 { return slopes[i] })
		})
	}
	tuning.Chosen = n.at
	if n.at < 0 {
		tuning.Chosen = smallest(tuning.MSE, true)
	}
	f := &Fitted{Tuning: tuning, NoErrors: noNetErrors}
	if t.Final {
		tuning.Degrees = make([]float64, len(n.values))
		tuning.Slopes = n.path(t.Sample, 0, tuning.Degrees)
		tuning.Factor = func(int) []float64 { return nil }
		f.Slopes = tuning.Slopes[tuning.Chosen]
	} else {
		f.Slopes = n.path(t.Sample, tuning.Chosen, nil)[tuning.Chosen]
	}
	f.Status = make([]Status, t.Sample.P)
	for j, b := range f.Slopes {
		f.Status[j] = Zero
		if b != 0 {
			f.Status[j] = Estimated
			f.Columns++
		}
	}
	return f
}

func (n netFit) describe(f *Final) Description {
	p, t := f.Problem, f.Fitted.Tuning
	d := Description{Meaning: []Meaning{{"", "shrunken towards zero, or set to zero; not a plain partial association"}}}
	penalty := t.Values[t.Chosen]
	var gone []int
	for j, st := range f.Fitted.Status {
		if st == Zero {
			gone = append(gone, j)
			d.Meaning = append(d.Meaning, Meaning{p.Names[j], "set to zero by the penalty, which is no finding that it has no effect"})
		}
	}
	switch {
	case penalty == 0:
		d.Meaning[0].Text = "the chosen penalty is zero: this is least squares"
		d.Notes = append(d.Notes, Note{"penalty-zero", "cross-validation chose no penalty at all: the elastic net is the model left alone here"})
		if t.Fixed {
			d.Notes[0].Text = "the penalty was fixed at zero: the elastic net is the model left alone here"
		}
	case len(gone) == len(p.Names):
		d.Notes = append(d.Notes, Note{"penalty-at-edge", "no regressor is kept: the data support no slopes at all, or the equation is wrong"})
	}
	if len(gone) > 0 {
		d.Costs = append(d.Costs, fmt.Sprintf("set to zero: %d of %d regressors; how often each one is kept over the resamples says how firm that is", len(gone), len(p.Names)))
	} else {
		d.Costs = append(d.Costs, "every regressor is kept, each shrunken")
	}
	d.Costs = append(d.Costs,
		fmt.Sprintf("about %s of %d degrees of freedom remain", say(t.Degrees[t.Chosen]), f.AsIs.Rank),
		"no standard error by formula; the resampled one is a guide only, since resampling rows is not consistent where true slopes are zero (Camponovo 2015)")
	var focal []int
	for _, j := range gone {
		if p.Focal[j] {
			focal = append(focal, j)
		}
	}
	if len(focal) > 0 {
		d.Notes = append(d.Notes, Note{"focal-set-to-zero", "the penalty sets " + join(p.names(focal)) + " to zero, which is of interest: nothing is learned of it here"})
	}
	for _, cat := range p.Category {
		if cat != "" {
			d.Notes = append(d.Notes, Note{"dummies-selected", "dummies of one category are kept or set to zero one by one, which depends on the base category"})
			break
		}
	}
	if len(t.MSE) > 0 && !math.IsNaN(t.MSE[0]) {
		t.Candidates = []Candidate{{"one-standard-error", "the largest penalty whose error is within one standard error of the smallest", t.Values[oneStandardError(t, true)]}}
	}
	return d
}
