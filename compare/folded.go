package compare

import (
	"modelmend/fit/linear"
	"modelmend/fit/reduction"
	"modelmend/remedy"
)

// foldedRows gives training and held-out rows of every fold: in float64 where the regressors allow it (linear.EnoughForLight), else in
// double-double.
type foldedRows struct {
	red   *reduction.Reduction
	units *reduction.Units // nil: double-double
	sums  [][][]float64    // [repeat][fold]
	total [][]float64      // by repeat
}

func (c *Comparison) foldedRows(red *reduction.Reduction) *foldedRows {
	rows := &foldedRows{red: red}
	if !linear.EnoughForLight(c.Problem.Sample, foldsLight) {
		return rows
	}
	for r, parts := range red.Parts {
		rows.units = reduction.FoldUnits(red, r)
		ones := make([]float64, len(parts))
		for f := range ones {
			ones[f] = 1
		}
		sums := rows.units.Sum([][]float64{ones})[0]
		rows.sums = append(rows.sums, sums)
		rows.total = append(rows.total, added(sums))
	}
	return rows
}

// The eigenvalue ratios above which float64 serves: for out-of-sample errors, which are quoted, about eleven digits are kept; for resamples, whose
// spread has two or three, nine.
const (
	foldsLight     = 1e-4
	resamplesLight = 1e-6
)

func added(sums [][]float64) []float64 {
	out := make([]float64, len(sums[0]))
	for _, s := range sums {
		for k, v := range s {
			out[k] += v
		}
	}
	return out
}

func less(total, part []float64) []float64 {
	out := make([]float64, len(total))
	for k, v := range total {
		out[k] = v - part[k]
	}
	return out
}

// split learns on all rows but one fold and holds that one out.
func (f *foldedRows) split(repeat, fold int) remedy.Split {
	if f.units == nil {
		train := linear.NewSample(f.red, f.red.Total.Minus(f.red.Parts[repeat][fold]))
		return remedy.Split{Train: train, Held: linear.NewHeldOut(f.red, f.red.Parts[repeat][fold], train)}
	}
	return lightSplit(f.units, f.total[repeat], f.sums[repeat][fold])
}

func lightSplit(u *reduction.Units, total, held []float64) remedy.Split {
	train := linear.NewLightSample(u, less(total, held))
	return remedy.Split{Train: train, Held: linear.NewLightHeldOut(u, held, train)}
}

// training forms the training rows of one outer fold with their inner splits, and the held-out rows. The inner folds of an outer fold are the
// remaining outer folds: training rows = all minus that fold minus the inner one.
func (f *foldedRows) training(repeat, fold int) (remedy.Training, *linear.HeldOut) {
	outer := f.split(repeat, fold)
	t := remedy.Training{Sample: outer.Train}
	if f.units != nil {
		total := less(f.total[repeat], f.sums[repeat][fold])
		for g, held := range f.sums[repeat] {
			if g != fold {
				t.Inner = append(t.Inner, lightSplit(f.units, total, held))
			}
		}
		return t, outer.Held
	}
	part := f.red.Parts[repeat]
	moments := f.red.Total.Minus(part[fold])
	for g := range part {
		if g != fold {
			train := linear.NewSample(f.red, moments.Minus(part[g]))
			t.Inner = append(t.Inner, remedy.Split{Train: train, Held: linear.NewHeldOut(f.red, part[g], train)})
		}
	}
	return t, outer.Held
}
