package compare

import (
	"context"
	"errors"
	"math"

	"modelmend/fit/dataset"
	"modelmend/fit/design"
	"modelmend/fit/folds"
	"modelmend/fit/reduction"
)

// errFew says that a streamed table has so few rows in use that they are better held.
var errFew = errors.New("few rows")

// held takes a table into memory where it cannot be passed over: fold columns, clusters, time, leave-one-out, or many folds.
func held(t *dataset.Table, study *Study) (*dataset.Table, error) {
	f := study.Folds
	if !t.Streamed() || (len(study.Clusters) == 0 && study.Time == "" && (f.Kind == "" || f.Kind == "random") && f.Count <= folds.MostFolds) {
		return t, nil
	}
	return t.Whole()
}

// reduceStream designs and reduces a table that is not held, in one pass where its first rows tell the kinds of its columns, else in two.
func (c *Comparison) reduceStream(ctx context.Context, opt Options, set design.Options, folded bool) (*reduction.Reduction, error) {
	for _, col := range c.Table.Columns {
		if col.Kind == dataset.Text {
			if err := c.Table.Survey(); err != nil {
				return nil, err
			}
			break
		}
	}
	red, err := c.passOver(ctx, opt, set, folded)
	if errors.Is(err, dataset.ErrKinds) {
		if err = c.Table.Survey(); err == nil {
			red, err = c.passOver(ctx, opt, set, folded)
		}
	}
	return red, err
}

func (c *Comparison) passOver(ctx context.Context, opt Options, set design.Options, folded bool) (*reduction.Reduction, error) {
	d, err := design.Build(c.Table, c.Equation, set)
	if err != nil {
		return nil, err
	}
	c.Design = d
	if len(d.Regressors) > mostCelled {
		return nil, design.ErrWhole
	}
	cells := 1
	if folded {
		cells = folds.Groups
	}
	acc := reduction.NewAccumulator(len(d.Regressors), d.Constant, cells)
	dealer := folds.NewDealer(c.Study.Seed)
	var wait rowBuffer
	add := func(rows int) {
		cols := wait.take(rows)
		cell := make([]int32, rows)
		if folded {
			dealer.Deal(cell)
		}
		acc.Add(cols, cell, opt.Workers)
	}
	seen := 0
	err = d.Pass(func(cols []reduction.Column, _ []int) error {
		if err := ctx.Err(); err != nil {
			return err
		}
		wait.put(cols)
		seen += len(cols[0].Hi)
		if opt.Progress != nil {
			opt.Progress("rows read", seen, 0)
		}
		for seen > folds.Exact && wait.rows >= folds.Block {
			add(folds.Block)
		}
		return nil
	})
	if err != nil {
		return nil, err
	}
	if d.Rows <= folds.Exact {
		return nil, errFew
	}
	if wait.rows > 0 {
		add(wait.rows)
	}
	var red *reduction.Reduction
	if folded {
		count, repeats := c.Study.Folds.numbers()
		c.Plan = folds.NewDealt(count, repeats, c.Study.Seed)
		red = acc.Finish(c.Plan.Fold, c.Plan.Counts)
	} else {
		red = acc.Finish(nil, nil)
	}
	m := red.Total
	keep, err := d.Settle(func(j int) int {
		return int(math.Round(m.Sum(j).Float() + float64(m.N)*red.Origin[j].Float()))
	}, func(j int) bool {
		n := m.Cross(j, j).MulFloat(float64(m.N))
		return n.Sub(m.Sum(j).Mul(m.Sum(j))).Hi > 1e-28*n.Hi
	})
	if err != nil {
		return nil, err
	}
	return red.Keep(keep), nil
}

// rowBuffer holds rows until there are enough to deal.
type rowBuffer struct {
	cols []reduction.Column
	rows int
}

func (b *rowBuffer) put(cols []reduction.Column) {
	if b.cols == nil {
		b.cols = make([]reduction.Column, len(cols))
	}
	for j, c := range cols {
		to := &b.cols[j]
		if c.Lo != nil && to.Lo == nil {
			to.Lo = make([]float64, len(to.Hi))
		}
		to.Hi = append(to.Hi, c.Hi...)
		if c.Lo != nil {
			to.Lo = append(to.Lo, c.Lo...)
		} else if to.Lo != nil {
			to.Lo = append(to.Lo, make([]float64, len(c.Hi))...)
		}
	}
	b.rows += len(cols[0].Hi)
}

// take gives the first rows and moves the rest to the front.
func (b *rowBuffer) take(rows int) []reduction.Column {
	out := make([]reduction.Column, len(b.cols))
	for j := range b.cols {
		c := &b.cols[j]
		out[j].Hi = append([]float64(nil), c.Hi[:rows]...)
		c.Hi = c.Hi[:copy(c.Hi, c.Hi[rows:])]
		if c.Lo != nil {
			out[j].Lo = append([]float64(nil), c.Lo[:rows]...)
			c.Lo = c.Lo[:copy(c.Lo, c.Lo[rows:])]
		}
	}
	b.rows -= rows
	return out
}

// centered reduces the regressors with the variables of powers and products centred; nil where that changes nothing.
func (c *Comparison) centered(opt Options) (*reduction.Reduction, error) {
	d := c.Design
	if !d.Constant || !d.HasProducts() {
		return nil, nil
	}
	if !d.Streamed() {
		return reduction.Reduce(d.Centered(), d.Y, d.Constant, reduction.Split{}, opt.Workers)
	}
	acc := reduction.NewAccumulator(len(d.Regressors), d.Constant, 1)
	err := d.PassCentered(func(cols []reduction.Column, lines []int) error {
		acc.Add(cols, make([]int32, len(lines)), opt.Workers)
		return nil
	})
	if err != nil {
		return nil, err
	}
	return acc.Finish(nil, nil), nil
}
