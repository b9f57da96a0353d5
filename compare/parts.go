package compare

import (
	"modelmend/fit/folds"
	"modelmend/fit/linear"
	"modelmend/fit/reduction"
	"modelmend/remedy"
)

// The eigenvalue ratios above which float64 serves: for out-of-sample errors, which are quoted, about eleven digits are kept; for resamples, whose
// spread has two or three, nine.
const (
	foldsLight     = 1e-4
	resamplesLight = 1e-6
)

// parts are the sums of the folds of one repeat (of pieces of time where the split is rolling), in float64 or in double-double, and the rule by which
// some are learned on and others held out.
type parts struct {
	units   *reduction.Units // nil: double-double
	sums    [][]float64
	red     *reduction.Reduction
	moments []*reduction.Moments
	window  *folds.Window // nil: everything but the held-out fold is learned on
}

// pile is the sum of some parts.
type pile struct {
	light []float64
	heavy *reduction.Moments
}

func (p *parts) count() int {
	if p.units != nil {
		return len(p.sums)
	}
	return len(p.moments)
}

// of adds up parts from..to-1.
func (p *parts) of(from, to int) pile {
	switch {
	case to == from+1 && p.units != nil:
		return pile{light: p.sums[from]}
	case to == from+1:
		return pile{heavy: p.moments[from]}
	case p.units != nil:
		out := make([]float64, reduction.Width(p.units.Q))
		for _, s := range p.sums[from:to] {
			for k, v := range s {
				out[k] += v
			}
		}
		return pile{light: out}
	}
	out := reduction.NewMoments(p.red.P + 1)
	for _, m := range p.moments[from:to] {
		out = out.Plus(m)
	}
	return pile{heavy: out}
}

// all adds up every part.
func (p *parts) all() pile {
	if p.units == nil && p.red.Total != nil {
		return pile{heavy: p.red.Total}
	}
	return p.of(0, p.count())
}

// less takes part k off.
func (p *parts) less(a pile, k int) pile {
	if p.units == nil {
		return pile{heavy: a.heavy.Minus(p.moments[k])}
	}
	out := make([]float64, len(a.light))
	for i, v := range a.light {
		out[i] = v - p.sums[k][i]
	}
	return pile{light: out}
}

func (a pile) rows() float64 {
	if a.heavy != nil {
		return float64(a.heavy.N)
	}
	return a.light[0]
}

func (p *parts) sample(a pile) *linear.Sample {
	if p.units == nil {
		return linear.NewSample(p.red, a.heavy)
	}
	return linear.NewLightSample(p.units, a.light)
}

func (p *parts) held(a pile, train *linear.Sample) *linear.HeldOut {
	if p.units == nil {
		return linear.NewHeldOut(p.red, a.heavy, train)
	}
	return linear.NewLightHeldOut(p.units, a.light, train)
}

func (p *parts) split(train, held pile) remedy.Split {
	s := p.sample(train)
	return remedy.Split{Train: s, Held: p.held(held, s)}
}

// outer is the number of folds whose errors are reported.
func (p *parts) outer() int {
	if p.window != nil {
		return len(p.window.From) - p.window.First
	}
	return p.count()
}

// inner splits all rows for tuning: each fold held out in turn, or each segment of time but the first predicted from what is before it. Splits
// without rows on one side, as resamples may have, are left out.
func (p *parts) inner() []remedy.Split {
	if w := p.window; w != nil {
		return p.rolled(len(w.From), p.count())
	}
	return p.partition(p.all(), -1)
}

// partition holds out each fold but one in turn; total is without that one.
func (p *parts) partition(total pile, but int) []remedy.Split {
	var out []remedy.Split
	for g := range p.count() {
		if g == but {
			continue
		}
		if held := p.of(g, g+1); held.rows() > 0 && held.rows() < total.rows() {
			out = append(out, p.split(p.less(total, g), held))
		}
	}
	return out
}

// rolled predicts segments 1..segments-1 from what is before them, held-out pieces before end only.
func (p *parts) rolled(segments, end int) []remedy.Split {
	var out []remedy.Split
	w := p.window
	for g := 1; g < segments; g++ {
		to := min(w.To[g], end)
		if to <= w.From[g] {
			continue
		}
		train, held := p.of(0, w.Before[g]), p.of(w.From[g], to)
		if train.rows() > 0 && held.rows() > 0 {
			out = append(out, p.split(train, held))
		}
	}
	return out
}

// training forms the training rows of one outer fold with their inner splits, and the held-out rows. The inner folds of an outer fold are the
// remaining outer folds; of a rolling one, the earlier segments.
func (p *parts) training(fold int) (remedy.Training, *linear.HeldOut) {
	if w := p.window; w != nil {
		s := w.First + fold
		outer := p.split(p.of(0, w.Before[s]), p.of(w.From[s], w.To[s]))
		return remedy.Training{Sample: outer.Train, Inner: p.rolled(s, w.Before[s])}, outer.Held
	}
	total := p.less(p.all(), fold)
	outer := p.split(total, p.of(fold, fold+1))
	return remedy.Training{Sample: outer.Train, Inner: p.partition(total, fold)}, outer.Held
}

// whole is a training on all rows.
func (p *parts) whole() remedy.Training {
	return remedy.Training{Sample: p.sample(p.all()), Inner: p.inner()}
}

// foldParts gives the parts of every repeat of a reduction.
func foldParts(red *reduction.Reduction, window *folds.Window, light bool) []*parts {
	var out []*parts
	for r, moments := range red.Parts {
		p := &parts{red: red, moments: moments, window: window}
		if light {
			p.units = reduction.FoldUnits(red, r)
			ones := make([]float64, len(moments))
			for f := range ones {
				ones[f] = 1
			}
			p.sums = p.units.Sum([][]float64{ones})[0]
		}
		out = append(out, p)
	}
	return out
}
