package reduction

import (
	"math"
	"slices"

	"modelmend/fit/doubledouble"
)

// Units holds rows, or groups of rows, ready to be summed again with other weights: the stuff of resampling and of nested folds. Columns are taken
// about their means over all rows and divided by their standard deviations (in a model without constant: about zero, divided by the root mean
// square), so that float64 serves where the regressors are not too close to an exact dependency.
//
// A unit is what is drawn as a whole: a row, a group of rows dealt at random, a cluster. Each piece of a unit lies in one fold and stays there,
// however often the unit is drawn.
type Units struct {
	Q        int // p regressors and the dependent variable
	Constant bool
	Center   []float64 // q
	Scale    []float64 // q, never zero
	Folds    int
	Count    int // units

	unit   []int32 // by piece
	start  []int   // start[f]: the first piece of fold f; pieces stand in order of their folds
	stride int
	data   []float64 // pieces x stride: a row of q values, or the sums of a group
	rows   bool
}

// Width is the length of the sums of q columns: the number of rows, q sums, q(q+1)/2 cross-products.
func Width(q int) int { return 1 + q + q*(q+1)/2 }

// newUnits takes centre and scale from all rows.
func newUnits(red *Reduction) *Units {
	q := red.P + 1
	u := &Units{Q: q, Constant: red.Constant, Center: make([]float64, q), Scale: make([]float64, q)}
	n := float64(red.Total.N)
	for j := range q {
		v := red.Total.Cross(j, j)
		if red.Constant && n > 0 {
			mean := red.Total.Sum(j).Div(doubledouble.From(n))
			u.Center[j] = mean.Add(red.Origin[j]).Float()
			v = v.Sub(mean.Mul(red.Total.Sum(j)))
		}
		u.Scale[j] = math.Sqrt(math.Max(0, v.Float()) / math.Max(1, n))
		if u.Scale[j] == 0 || math.IsInf(u.Scale[j], 0) || math.IsNaN(u.Scale[j]) {
			u.Scale[j] = 1
		}
	}
	return u
}

// NewUnits takes the rows of the columns (the dependent variable last) that red was made of; row i belongs to unit[i], one of count, and to
// fold[i], one of folds. Where units hold several rows of one fold, these are summed once. Cost O(n q), or O(n q^2) where rows are summed.
func NewUnits(red *Reduction, cols []Column, unit []int32, count int, fold []int32, folds int) *Units {
	u := newUnits(red)
	u.Count, u.Folds = count, folds
	n := len(unit)
	order := make([]int, n)
	for i := range order {
		order[i] = i
	}
	slices.SortStableFunc(order, func(a, b int) int {
		if fold[a] != fold[b] {
			return int(fold[a]) - int(fold[b])
		}
		return int(unit[a]) - int(unit[b])
	})
	pieces := 0
	for k, i := range order {
		if k == 0 || unit[i] != unit[order[k-1]] || fold[i] != fold[order[k-1]] {
			pieces++
		}
	}
	u.rows = 2*pieces > n
	u.stride = u.Q
	if u.rows {
		pieces = n
	} else {
		u.stride = Width(u.Q)
	}
	u.data = make([]float64, pieces*u.stride)
	u.unit = make([]int32, 0, pieces)
	u.start = make([]int, folds+1)
	z := make([]float64, u.Q)
	for k, i := range order {
		if u.rows || k == 0 || unit[i] != unit[order[k-1]] || fold[i] != fold[order[k-1]] {
			u.unit = append(u.unit, unit[i])
			u.start[fold[i]+1]++
		}
		at := len(u.unit) - 1
		if u.rows {
			z = u.data[at*u.stride : (at+1)*u.stride]
		}
		for j, c := range cols {
			v := c.Hi[i] - u.Center[j]
			if c.Lo != nil {
				v += c.Lo[i]
			}
			z[j] = v / u.Scale[j]
		}
		if !u.rows {
			addRow(u.data[at*u.stride:(at+1)*u.stride], z, 1)
		}
	}
	for f := range folds {
		u.start[f+1] += u.start[f]
	}
	return u
}

// GroupUnits makes a unit of each group of rows whose moments are known; group g lies in fold[g]. Groups without rows are units that add nothing.
// Cost O(groups q^2).
func GroupUnits(red *Reduction, groups []*Moments, fold []int32, folds int) *Units {
	u := newUnits(red)
	u.Count, u.Folds = len(groups), folds
	u.stride = Width(u.Q)
	order := make([]int, len(groups))
	for g := range order {
		order[g] = g
	}
	slices.SortStableFunc(order, func(a, b int) int { return int(fold[a]) - int(fold[b]) })
	u.data = make([]float64, len(groups)*u.stride)
	u.start = make([]int, folds+1)
	shift := u.shift(red)
	for at, g := range order {
		u.unit = append(u.unit, int32(g))
		u.start[fold[g]+1]++
		u.take(groups[g], shift, u.data[at*u.stride:(at+1)*u.stride])
	}
	for f := range folds {
		u.start[f+1] += u.start[f]
	}
	return u
}

// FoldUnits makes a unit of each fold of one repeat: nothing is drawn, but sums over training rows are formed.
func FoldUnits(red *Reduction, repeat int) *Units {
	fold := make([]int32, len(red.Parts[repeat]))
	for f := range fold {
		fold[f] = int32(f)
	}
	return GroupUnits(red, red.Parts[repeat], fold, len(fold))
}

// shift is the way from the origin of the moments to the centre of the units.
func (u *Units) shift(red *Reduction) []doubledouble.Number {
	d := make([]doubledouble.Number, u.Q)
	for j := range d {
		d[j] = doubledouble.From(u.Center[j]).Sub(red.Origin[j])
	}
	return d
}

// take writes moments as sums about the centre, in units of the scale.
func (u *Units) take(m *Moments, shift []doubledouble.Number, out []float64) {
	n := float64(m.N)
	out[0] = n
	k := 1 + u.Q
	for i := range u.Q {
		si := m.Sum(i)
		out[1+i] = si.Sub(shift[i].MulFloat(n)).Float() / u.Scale[i]
		for j := i; j < u.Q; j++ {
			v := m.Cross(i, j)
			if u.Constant {
				v = v.Sub(shift[i].Mul(m.Sum(j))).Sub(shift[j].Mul(si)).Add(shift[i].Mul(shift[j]).MulFloat(n))
			}
			out[k] = v.Float() / u.Scale[i] / u.Scale[j]
			k++
		}
	}
}

// Sum forms the sums of every fold with unit k counted weight[k] times, for several weightings at once: the result is [weighting][fold], each of
// length Width(Q). A whole or zero weight is as good as any other. Cost O(pieces q^2) a weighting where units are rows or small groups.
func (u *Units) Sum(weights [][]float64) [][][]float64 {
	w := Width(u.Q)
	buf := make([]float64, len(weights)*u.Folds*w)
	out := make([][][]float64, len(weights))
	for b := range out {
		out[b] = make([][]float64, u.Folds)
		for f := range out[b] {
			out[b][f], buf = buf[:w:w], buf[w:]
		}
	}
	for f := range u.Folds {
		if u.rows {
			for b, wt := range weights {
				u.sumRows(out[b][f], wt, u.start[f], u.start[f+1])
			}
			continue
		}
		for at := u.start[f]; at < u.start[f+1]; at++ {
			piece := u.data[at*u.stride : (at+1)*u.stride]
			for b, wt := range weights {
				if v := wt[u.unit[at]]; v != 0 {
					addScaled(out[b][f], piece, v)
				}
			}
		}
	}
	return out
}

func addScaled(sum, x []float64, w float64) {
	x = x[:len(sum)]
	for i := range sum {
		sum[i] += w * x[i]
	}
}

// sumRows adds rows four at a time.
func (u *Units) sumRows(sum, weight []float64, from, to int) {
	var rows [4][]float64
	var w [4]float64
	have := 0
	for at := from; at < to; at++ {
		v := weight[u.unit[at]]
		if v == 0 {
			continue
		}
		rows[have], w[have] = u.data[at*u.stride:(at+1)*u.stride], v
		if have++; have == 4 {
			addRows(sum, &rows, &w)
			have = 0
		}
	}
	for k := range have {
		addRow(sum, rows[k], w[k])
	}
}

func addRow(sum, z []float64, w float64) {
	q := len(z)
	sum[0] += w
	k := 1 + q
	for i, v := range z {
		a := w * v
		sum[1+i] += a
		c := sum[k : k+q-i]
		x := z[i:][:len(c)]
		for j := range c {
			c[j] += a * x[j]
		}
		k += q - i
	}
}

func addRows(sum []float64, z *[4][]float64, w *[4]float64) {
	q := len(z[0])
	z0, z1, z2, z3 := z[0], z[1][:q], z[2][:q], z[3][:q]
	sum[0] += w[0] + w[1] + w[2] + w[3]
	k := 1 + q
	for i := range q {
		a0, a1, a2, a3 := w[0]*z0[i], w[1]*z1[i], w[2]*z2[i], w[3]*z3[i]
		sum[1+i] += (a0 + a1) + (a2 + a3)
		c := sum[k : k+q-i]
		x0, x1, x2, x3 := z0[i:][:len(c)], z1[i:][:len(c)], z2[i:][:len(c)], z3[i:][:len(c)]
		for j := range c {
			c[j] += (a0*x0[j] + a1*x1[j]) + (a2*x2[j] + a3*x3[j])
		}
		k += q - i
	}
}
