package compare

import (
	"context"
	"fmt"
	"math"
	"strings"
	"sync"

	"modelmend/fit/design"
	"modelmend/fit/figures"
	"modelmend/fit/folds"
	"modelmend/fit/tail"
	"modelmend/remedy"
)

// OutOfSample is the error on held-out rows, everything learned inside the training rows.
type OutOfSample struct {
	RMSE, R2       float64
	Difference     Interval // mean squared error, alternative minus as-is
	RMSEDifference float64
	Folds          []Fold
	TestShare      float64 // n_test / n_train, averages over splits
}

// Interval is an estimate with its 95 % limits.
type Interval struct{ Estimate, Low, High float64 }

// Fold is one held-out fold.
type Fold struct {
	Repeat, Fold, Rows int
	MSE                float64
	Chosen             float64 // the tuning chosen inside; NaN without tuning
	sse, sst           float64
	train              int
	own                bool    // learned on rows of its own
	base               float64 // then: squared error of as-is on the same held-out rows
}

// Leak sets random folds, which the study asks for, beside those that keep together what it declares to belong together.
type Leak struct {
	Kind string // the kind of split that keeps together
	Text string
}

// measureLeak learns all alternatives again in folds that keep clusters or stretches of time together, where the study asks for folds that do not.
func (c *Comparison) measureLeak(ctx context.Context, choices []choice, light bool, opt Options) error {
	kind := c.Study.keptTogether()
	if kind == "" || (c.Plan.Kind != folds.Random && c.Plan.Kind != folds.LeaveOneOut) {
		return nil
	}
	p, err := c.plan(FoldSpec{})
	if err != nil {
		return err
	}
	red, err := c.reduceAs(p, opt)
	if err != nil {
		return err
	}
	own, err := c.ofChoices(choices, p, opt)
	if err != nil {
		return err
	}
	got, err := c.outOfSample(ctx, foldParts(red, p.Window, light), choices, own, opt)
	if err != nil {
		return err
	}
	for i, a := range c.Alternatives {
		o := summarize(got[i], got[0], p.Window != nil)
		a.OutApart = &o
	}
	what := "rows of one cluster (" + strings.Join(c.Study.Clusters, ", ") + ")"
	if len(c.Study.Clusters) == 0 {
		what = "neighbours in time (" + c.Study.Time + ")"
	}
	a := c.Alternatives[0]
	c.Leak = &Leak{kind, fmt.Sprintf("folds of kind %s put %s on both sides of a split, so that what they share leaks into the training rows: the out-of-sample error of the model left alone is %s with them and %s with %s",
		c.Plan.Kind, what, figures.Fixed(a.Out.RMSE, 4), figures.Fixed(a.OutApart.RMSE, 4), map[string]string{"clusters": "whole clusters held out", "blocks": "contiguous blocks of time held out", "rolling": "later periods predicted from earlier ones"}[kind])}
	c.Notes = append(c.Notes, design.Note{Code: "folds-leak", Text: c.Leak.Text})
	return nil
}

// outOfSample learns every variant on the training rows of every fold and predicts the held-out ones. Result: [variant][split].
func (c *Comparison) outOfSample(ctx context.Context, repeats []*parts, choices []choice, own []*ownRows, opt Options) ([][]Fold, error) {
	type place struct{ repeat, fold int }
	var places []place
	for r, p := range repeats {
		for f := range p.outer() {
			places = append(places, place{r, f})
		}
	}
	out := make([][]Fold, len(choices))
	for i := range out {
		out[i] = make([]Fold, len(places))
	}
	var mu sync.Mutex
	done := 0
	err := each(ctx, len(places), opt.Workers, func(k int) {
		p := places[k]
		t, held := repeats[p.repeat].training(p.fold)
		var asIs *remedy.Fitted
		for i, ch := range choices {
			if own[i] != nil {
				out[i][k] = own[i].learnFold(ch.variant, p.repeat, p.fold, asIs, t.Sample)
				continue
			}
			fit := ch.variant.Learn(t)
			if i == 0 {
				asIs = fit
			}
			f := Fold{Repeat: p.repeat, Fold: p.fold, Rows: held.N, sse: held.SSE(fit.Slopes), sst: held.SST(), Chosen: math.NaN(), train: t.Sample.N}
			f.MSE = f.sse / float64(held.N)
			if fit.Tuning != nil {
				f.Chosen = fit.Tuning.Values[fit.Tuning.Chosen]
			}
			out[i][k] = f
		}
		if opt.Progress != nil {
			mu.Lock()
			done++
			opt.Progress("splits learned", done, len(places))
			mu.Unlock()
		}
	})
	return out, err
}

// summarize pools the folds of one alternative and compares them with those of as-is.
func summarize(folds, asIs []Fold, rolling bool) OutOfSample {
	o := OutOfSample{Folds: folds}
	var sse, sst, rows, base float64
	d := make([]float64, len(folds))
	var test, train float64
	for k, f := range folds {
		sse += f.sse
		sst += f.sst
		rows += float64(f.Rows)
		if f.own {
			base += f.base
			d[k] = f.MSE - f.base/float64(f.Rows)
		} else {
			base += asIs[k].sse
			d[k] = f.MSE - asIs[k].MSE
		}
		test += float64(f.Rows)
		train += float64(f.train)
	}
	o.RMSE = math.Sqrt(sse / rows)
	o.R2 = 1 - sse/sst
	o.RMSEDifference = o.RMSE - math.Sqrt(base/rows)
	o.TestShare = test / train
	if rolling {
		o.Difference = RollingInterval(d)
	} else {
		o.Difference = PairedInterval(d, o.TestShare)
	}
	return o
}

// PairedInterval returns the mean of the per-split differences d_1..d_J in mean squared error with a 95 % interval that allows for
// overlapping training sets:
//
//	dbar +- t_{J-1} sqrt( S^2 (1/J + share) ),  S^2 the sample variance of the d_j, share = n_test/n_train.
//
// No unbiased estimate of that variance exists (Bengio and Grandvalet 2004). The limits are NaN for fewer than two splits.
//
// Source: Nadeau and Bengio (2003), Machine Learning 52(3), 239-281.
func PairedInterval(d []float64, share float64) Interval {
	j := float64(len(d))
	mean := 0.0
	for _, v := range d {
		mean += v
	}
	mean /= j
	if j < 2 {
		return Interval{mean, math.NaN(), math.NaN()}
	}
	s2 := 0.0
	for _, v := range d {
		s2 += (v - mean) * (v - mean)
	}
	s2 /= j - 1
	half := tail.TQuantile(0.95, j-1) * math.Sqrt(s2*(1/j+share))
	return Interval{mean, mean - half, mean + half}
}

// RollingInterval returns the mean of the per-fold differences d_1..d_J in mean squared error, in time order, with a 95 % interval from their
// autocorrelation-robust variance,
//
//	dbar +- t_{J-1} sqrt( (g_0 + 2 sum_l (1 - l/(L+1)) g_l) / J ),  L = floor(4 (J/100)^(2/9)),
//
// g_l their autocovariances with divisor J-1. Comparisons of nested models need care even so (Clark and West 2007). The limits are NaN for fewer than
// three folds.
//
// Source: Newey and West (1987), Econometrica 55(3), 703-708, for the variance.
func RollingInterval(d []float64) Interval {
	j := float64(len(d))
	mean := 0.0
	for _, v := range d {
		mean += v / j
	}
	if j < 3 {
		return Interval{mean, math.NaN(), math.NaN()}
	}
	auto := func(l int) float64 {
		g := 0.0
		for i := l; i < len(d); i++ {
			g += (d[i] - mean) * (d[i-l] - mean)
		}
		return g / (j - 1)
	}
	v := auto(0)
	lags := int(4 * math.Pow(j/100, 2.0/9))
	for l := 1; l <= lags && l < len(d); l++ {
		v += 2 * (1 - float64(l)/float64(lags+1)) * auto(l)
	}
	half := tail.TQuantile(0.95, j-1) * math.Sqrt(math.Max(0, v)/j)
	return Interval{mean, mean - half, mean + half}
}
