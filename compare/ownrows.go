package compare

import (
	"math"

	"modelmend/fit/folds"
	"modelmend/fit/linear"
	"modelmend/fit/reduction"
	"modelmend/remedy"
)

// ownRows are the rows of a variant that is not learned on the design: transformed rows in the folds of the plan, what their forecasts are scored
// on, and the design's own rows beside them, so that as-is is scored on the same ones.
type ownRows struct {
	rows   *remedy.Rows
	index  []int              // of the rows used, those with a transformed one
	cols   []reduction.Column // transformed, with the dependent variable last; zero where skipped
	sample *linear.Sample
	red    *reduction.Reduction
	parts  []*parts
	score  []*parts // uncentred: what the constant stands on, the scored regressors, the scored dependent variable
	level  []*parts // the design's regressors and dependent variable
}

// ownRows reduces the rows of a variant into the folds of a plan; nil for a variant that is learned on the design.
func (c *Comparison) ownRows(r *remedy.Rows, plan *folds.Plan, opt Options) (*ownRows, error) {
	if r == nil {
		return nil, nil
	}
	o := &ownRows{rows: r}
	cell := []int32{}
	for i, skip := range r.Skip {
		if !skip {
			o.index = append(o.index, i)
			cell = append(cell, plan.Cell[i])
		}
	}
	split := reduction.Split{Cell: cell, Cells: plan.Cells, Fold: plan.Fold, Counts: plan.Counts}
	pick := func(v []float64) reduction.Column {
		out := reduction.Column{Hi: make([]float64, len(o.index))}
		for k, i := range o.index {
			out.Hi[k] = v[i]
		}
		return out
	}
	var x []reduction.Column
	for _, v := range r.X {
		o.cols = append(o.cols, reduction.Column{Hi: v})
		x = append(x, pick(v))
	}
	o.cols = append(o.cols, reduction.Column{Hi: r.Y})
	var err error
	if o.red, err = reduction.Reduce(x, pick(r.Y), c.Design.Constant, split, opt.Workers); err != nil {
		return nil, err
	}
	o.sample = linear.NewSample(o.red, o.red.Total)
	o.parts = foldParts(o.red, plan.Window, false)

	unit := reduction.Column{Hi: make([]float64, len(o.index))}
	for k, i := range o.index {
		unit.Hi[k] = 1
		if r.Unit != nil {
			unit.Hi[k] = r.Unit[i]
		}
	}
	scored := []reduction.Column{unit}
	y := pick(r.Y)
	if r.ScoredX == nil {
		scored = append(scored, x...)
	} else {
		for _, v := range r.ScoredX {
			scored = append(scored, pick(v))
		}
		y = pick(r.ScoredY)
	}
	red, err := reduction.Reduce(scored, y, false, split, opt.Workers)
	if err != nil {
		return nil, err
	}
	o.score = foldParts(red, plan.Window, false)

	var level []reduction.Column
	for _, col := range c.Design.Columns() {
		level = append(level, picked(col, o.index))
	}
	if red, err = reduction.Reduce(level, picked(c.Design.Y, o.index), c.Design.Constant, split, opt.Workers); err != nil {
		return nil, err
	}
	o.level = foldParts(red, plan.Window, false)
	return o, nil
}

// picked takes rows of a column with all its digits.
func picked(c reduction.Column, index []int) reduction.Column {
	out := reduction.Column{Hi: make([]float64, len(index))}
	for k, i := range index {
		out.Set(k, c.At(i))
	}
	return out
}

// ofChoices forms the own rows of every choice that has some.
func (c *Comparison) ofChoices(choices []choice, plan *folds.Plan, opt Options) ([]*ownRows, error) {
	out := make([]*ownRows, len(choices))
	for i, ch := range choices {
		var err error
		if out[i], err = c.ownRows(ch.variant.Rows, plan, opt); err != nil {
			return nil, err
		}
	}
	return out, nil
}

// heldPile adds up the parts that fold f holds out.
func (p *parts) heldPile(f int) pile {
	if w := p.window; w != nil {
		s := w.First + f
		return p.of(w.From[s], w.To[s])
	}
	return p.of(f, f+1)
}

// learnFold learns a variant on its own rows of the training part of a fold, and scores its forecasts of the dependent variable on the held-out ones
// beside those of as-is.
func (o *ownRows) learnFold(v remedy.Variant, repeat, fold int, asIs *remedy.Fitted, asIsTrain *linear.Sample) Fold {
	t, _ := o.parts[repeat].training(fold)
	fit := v.Learn(t)
	score := o.score[repeat]
	held := score.held(score.heldPile(fold), t.Sample)
	slopes := append([]float64{t.Sample.ConstantFor(fit.Slopes)}, fit.Slopes...)
	level := o.level[repeat]
	base := level.held(level.heldPile(fold), asIsTrain)
	f := Fold{Repeat: repeat, Fold: fold, Rows: held.N, sse: held.SSE(slopes), sst: base.SST(), base: base.SSE(asIs.Slopes), own: true, Chosen: math.NaN(), train: t.Sample.N}
	f.MSE = f.sse / float64(held.N)
	if fit.Tuning != nil {
		f.Chosen = fit.Tuning.Values[fit.Tuning.Chosen]
	}
	return f
}
