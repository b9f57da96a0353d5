// Package reduction turns rows into fold-wise cross-products in double-double arithmetic.
//
// Columns and a fold plan go in; out come, for every repeat and fold, the sums and cross-products of [x y] about a
// fixed origin, from which every fit, fold, path and diagnosis is computed without another look at the rows: the
// training rows of a fold are the total minus that fold, which is safe in double-double and would not be in float64.
// It refuses columns of unequal length. It stands after design and folds, before linear.
package reduction

import (
	"fmt"
	"math"

	"modelmend/fit/doubledouble"
	"modelmend/fit/parallel"
)

// Column is one column of numbers as high and low parts; Lo may be nil where every digit fits into Hi.
type Column struct{ Hi, Lo []float64 }

// At returns the number in a row, counted from 0.
func (c Column) At(row int) doubledouble.Number {
	if c.Lo == nil {
		return doubledouble.From(c.Hi[row])
	}
	return doubledouble.Number{Hi: c.Hi[row], Lo: c.Lo[row]}
}

// Set puts a number into a row and makes room for low parts at the first one that is not zero.
func (c *Column) Set(row int, v doubledouble.Number) {
	c.Hi[row] = v.Hi
	if v.Lo != 0 && c.Lo == nil {
		c.Lo = make([]float64, len(c.Hi))
	}
	if c.Lo != nil {
		c.Lo[row] = v.Lo
	}
}

// Moments holds n, the sums and the cross-products of q columns about an origin: the entry (i,j), i <= j, of the
// packed upper triangle is the sum over rows of (z_i - o_i)(z_j - o_j).
type Moments struct {
	Q       int
	N       int
	sumHi   []float64
	sumLo   []float64
	crossHi []float64
	crossLo []float64
}

// NewMoments returns the moments of no rows at all, for q columns.
func NewMoments(q int) *Moments {
	t := q * (q + 1) / 2
	buf := make([]float64, 2*(q+t))
	return &Moments{Q: q, sumHi: buf[:q], sumLo: buf[q : 2*q], crossHi: buf[2*q : 2*q+t], crossLo: buf[2*q+t:]}
}

func (m *Moments) at(i, j int) int {
	if i > j {
		i, j = j, i
	}
	return i*m.Q - i*(i-1)/2 + (j - i)
}

// Sum returns the sum of column i about its origin.
func (m *Moments) Sum(i int) doubledouble.Number {
	return doubledouble.From(m.sumHi[i]).AddFloat(m.sumLo[i])
}

// Cross returns the cross-product of columns i and j about their origins.
func (m *Moments) Cross(i, j int) doubledouble.Number {
	k := m.at(i, j)
	return doubledouble.From(m.crossHi[k]).AddFloat(m.crossLo[k])
}

// add puts one row of q values (high and low parts, origin already subtracted) into the moments.
func (m *Moments) add(hi, lo []float64) {
	m.N++
	k := 0
	q := m.Q
	for i := range q {
		a, al := hi[i], lo[i]
		s, e := doubledouble.TwoSum(m.sumHi[i], a)
		m.sumHi[i] = s
		m.sumLo[i] += e + al
		ch := m.crossHi[k : k+q-i]
		cl := m.crossLo[k : k+q-i][:len(ch)]
		bh := hi[i:q]
		bl := lo[i:q]
		for j := range ch {
			b := bh[j]
			p := float64(a * b)
			e := math.FMA(a, b, -p) + (float64(a*bl[j]) + float64(al*b))
			c := ch[j]
			s := c + p
			t := s - c
			cl[j] += ((c - (s - t)) + (p - t)) + e
			ch[j] = s
		}
		k += q - i
	}
}

// add4 is add for four rows in turn, with the same result to the last bit.
func (m *Moments) add4(hi, lo *[4][]float64) {
	m.N += 4
	q := m.Q
	h0, h1, h2, h3 := hi[0][:q], hi[1][:q], hi[2][:q], hi[3][:q]
	l0, l1, l2, l3 := lo[0][:q], lo[1][:q], lo[2][:q], lo[3][:q]
	k := 0
	for i := range q {
		for r := range hi {
			s, e := doubledouble.TwoSum(m.sumHi[i], hi[r][i])
			m.sumHi[i] = s
			m.sumLo[i] += e + lo[r][i]
		}
		a0, a1, a2, a3 := h0[i], h1[i], h2[i], h3[i]
		b0, b1, b2, b3 := l0[i], l1[i], l2[i], l3[i]
		ch := m.crossHi[k : k+q-i]
		cl := m.crossLo[k : k+q-i][:len(ch)]
		x0, x1, x2, x3 := h0[i:][:len(ch)], h1[i:][:len(ch)], h2[i:][:len(ch)], h3[i:][:len(ch)]
		y0, y1, y2, y3 := l0[i:][:len(ch)], l1[i:][:len(ch)], l2[i:][:len(ch)], l3[i:][:len(ch)]
		for j := range ch {
			c, low := ch[j], cl[j]

			p := float64(a0 * x0[j])
			e := math.FMA(a0, x0[j], -p) + (float64(a0*y0[j]) + float64(b0*x0[j]))
			s := c + p
			t := s - c
			low += ((c - (s - t)) + (p - t)) + e
			c = s

			p = float64(a1 * x1[j])
			e = math.FMA(a1, x1[j], -p) + (float64(a1*y1[j]) + float64(b1*x1[j]))
			s = c + p
			t = s - c
			low += ((c - (s - t)) + (p - t)) + e
			c = s

			p = float64(a2 * x2[j])
			e = math.FMA(a2, x2[j], -p) + (float64(a2*y2[j]) + float64(b2*x2[j]))
			s = c + p
			t = s - c
			low += ((c - (s - t)) + (p - t)) + e
			c = s

			p = float64(a3 * x3[j])
			e = math.FMA(a3, x3[j], -p) + (float64(a3*y3[j]) + float64(b3*x3[j]))
			s = c + p
			t = s - c
			low += ((c - (s - t)) + (p - t)) + e

			ch[j], cl[j] = s, low
		}
		k += q - i
	}
}

// settle moves what has gathered in the low parts into the high ones.
func (m *Moments) settle() {
	for i := range m.sumHi {
		m.sumHi[i], m.sumLo[i] = doubledouble.TwoSum(m.sumHi[i], m.sumLo[i])
	}
	for i := range m.crossHi {
		m.crossHi[i], m.crossLo[i] = doubledouble.TwoSum(m.crossHi[i], m.crossLo[i])
	}
}

// combine returns a plus sign times b; sign is a whole number.
func combine(a, b *Moments, sign float64) *Moments {
	out := NewMoments(a.Q)
	out.N = a.N + int(sign)*b.N
	for i := range a.sumHi {
		v := doubledouble.Number{Hi: a.sumHi[i], Lo: a.sumLo[i]}.Add(doubledouble.Number{Hi: b.sumHi[i], Lo: b.sumLo[i]}.MulFloat(sign))
		out.sumHi[i], out.sumLo[i] = v.Hi, v.Lo
	}
	for i := range a.crossHi {
		v := doubledouble.Number{Hi: a.crossHi[i], Lo: a.crossLo[i]}.Add(doubledouble.Number{Hi: b.crossHi[i], Lo: b.crossLo[i]}.MulFloat(sign))
		out.crossHi[i], out.crossLo[i] = v.Hi, v.Lo
	}
	return out
}

// Plus returns the moments of the rows of m and o together; both keep their values. Cost O(q^2).
func (m *Moments) Plus(o *Moments) *Moments { return combine(m, o, 1) }

// Minus returns the moments of the rows of m without those of o, which must be among them. Cost O(q^2).
func (m *Moments) Minus(o *Moments) *Moments { return combine(m, o, -1) }

// Reduction is what remains of the rows: q = p+1 columns, the dependent variable last.
type Reduction struct {
	P        int  // regressors
	Constant bool // false: the origin is zero and moments are never centred
	Origin   []doubledouble.Number
	Total    *Moments
	Parts    [][]*Moments // [repeat][fold]
	// Groups are the cells of the split where cells hold several rows each, else nil.
	Groups []*Moments
}

// Split says how rows fall into folds: row i is in Cell[i], and that cell in Fold[repeat][cell], one of Counts[repeat] folds. The zero value
// asks for the total alone.
type Split struct {
	Cell   []int32
	Cells  int
	Fold   [][]int32
	Counts []int
}

// Reduce forms the moments of the regressors x (p columns of n rows) and of y for every fold of every repeat. With constant the first row
// serves as origin, so that a column with a large mean loses no digits.
//
// Where cells hold several rows each, rows are summed once into cells and cells into folds, so that the cost does not grow with the number
// of repeats. Each sum takes its rows in file order in one worker, so that the result is the same for any number of workers.
//
// It returns an error when columns differ in length. Cost O(n q^2), times the repeats where every row is a cell.
func Reduce(x []Column, y Column, constant bool, split Split, workers int) (*Reduction, error) {
	n := len(y.Hi)
	cols := append(append([]Column{}, x...), y)
	for j, c := range cols {
		if len(c.Hi) != n || (c.Lo != nil && len(c.Lo) != n) {
			return nil, fmt.Errorf("reduction: column %d has %d rows, expected %d", j+1, len(c.Hi), n)
		}
	}
	red := &Reduction{P: len(x), Constant: constant, Origin: make([]doubledouble.Number, len(cols))}
	if constant && n > 0 {
		for j, c := range cols {
			red.Origin[j] = doubledouble.From(c.Hi[0])
		}
	}
	workers = max(1, workers)
	switch {
	case len(split.Fold) == 0:
		red.Total = sums(cols, red.Origin, make([]int32, n), 1, 1)[0]
		return red, nil
	case 2*split.Cells <= n:
		cells := sums(cols, red.Origin, split.Cell, split.Cells, workers)
		red.Groups = cells
		for r, fold := range split.Fold {
			red.Parts = append(red.Parts, gather(cells, fold, split.Counts[r]))
		}
	default:
		for r, fold := range split.Fold {
			of := make([]int32, n)
			for i, c := range split.Cell {
				of[i] = fold[c]
			}
			red.Parts = append(red.Parts, sums(cols, red.Origin, of, split.Counts[r], workers))
		}
	}
	red.addUp()
	return red, nil
}

// addUp forms the total of the parts of the first repeat.
func (r *Reduction) addUp() {
	r.Total = r.Parts[0][0]
	for _, part := range r.Parts[0][1:] {
		r.Total = r.Total.Plus(part)
	}
}

// gather adds the moments of cells into folds.
func gather(cells []*Moments, fold []int32, count int) []*Moments {
	out := make([]*Moments, count)
	for c, m := range cells {
		f := fold[c]
		if out[f] == nil {
			out[f] = m
		} else {
			out[f] = out[f].Plus(m)
		}
	}
	for f := range out {
		if out[f] == nil {
			out[f] = NewMoments(cells[0].Q)
		}
	}
	return out
}

// sums forms the moments of each part; row i is in part of[i]. A worker takes every workers-th part.
func sums(cols []Column, origin []doubledouble.Number, of []int32, parts, workers int) []*Moments {
	out := make([]*Moments, parts)
	for f := range out {
		out[f] = NewMoments(len(cols))
	}
	share(cols, origin, of, out, workers)
	for _, m := range out {
		m.settle()
	}
	return out
}

// share adds rows to the moments of their parts, every workers-th part in one worker.
func share(cols []Column, origin []doubledouble.Number, of []int32, out []*Moments, workers int) {
	workers = max(1, min(workers, len(out)))
	parallel.Each(workers, workers, func(w int) { sumShare(cols, origin, of, out, w, workers) })
}

func sumShare(cols []Column, origin []doubledouble.Number, of []int32, out []*Moments, mine, shares int) {
	q := len(cols)
	// Rows of one part are added four at a time, in file order: the part's sums are then read and written once for the four.
	waiting := make([][4]int32, len(out))
	count := make([]uint8, len(out))
	var hi, lo [4][]float64
	for k := range hi {
		hi[k], lo[k] = make([]float64, q), make([]float64, q)
	}
	load := func(k, row int) {
		for j, c := range cols {
			h, e := doubledouble.TwoSum(c.Hi[row], -origin[j].Hi)
			if c.Lo != nil {
				e += c.Lo[row]
			}
			hi[k][j], lo[k][j] = h, e
		}
	}
	for row, f := range of {
		if int(f)%shares != mine {
			continue
		}
		waiting[f][count[f]] = int32(row)
		if count[f]++; count[f] < 4 {
			continue
		}
		count[f] = 0
		for k, r := range waiting[f] {
			load(k, int(r))
		}
		out[f].add4(&hi, &lo)
	}
	for f, n := range count {
		for k := range n {
			load(0, int(waiting[f][k]))
			out[f].add(hi[0], lo[0])
		}
	}
}

// Accumulator gathers rows block by block, for tables that are not held in memory.
type Accumulator struct {
	red   *Reduction
	cells []*Moments
	begun bool
}

// NewAccumulator makes room for p regressors and the dependent variable in so many cells.
func NewAccumulator(p int, constant bool, cells int) *Accumulator {
	a := &Accumulator{red: &Reduction{P: p, Constant: constant, Origin: make([]doubledouble.Number, p+1)}}
	for range cells {
		a.cells = append(a.cells, NewMoments(p+1))
	}
	return a
}

// Add takes the next rows: the p regressors and the dependent variable last, row i in cell[i]. The first row of all serves as origin. The sums are
// those of Reduce, bit for bit, whatever the blocks and the number of workers. Cost O(n q^2).
func (a *Accumulator) Add(cols []Column, cell []int32, workers int) {
	if len(cell) == 0 {
		return
	}
	if a.red.Constant && !a.begun {
		for j, c := range cols {
			a.red.Origin[j] = doubledouble.From(c.Hi[0])
		}
	}
	a.begun = true
	share(cols, a.red.Origin, cell, a.cells, workers)
}

// Finish gathers the cells into the folds of every repeat; without folds it gives the total alone. The accumulator is spent.
func (a *Accumulator) Finish(fold [][]int32, counts []int) *Reduction {
	for _, m := range a.cells {
		m.settle()
	}
	if len(fold) == 0 {
		a.red.Total = gather(a.cells, make([]int32, len(a.cells)), 1)[0]
		return a.red
	}
	a.red.Groups = a.cells
	for r, f := range fold {
		a.red.Parts = append(a.red.Parts, gather(a.cells, f, counts[r]))
	}
	a.red.addUp()
	return a.red
}

// Keep returns the reduction of the regressors in cols alone.
func (r *Reduction) Keep(cols []int) *Reduction {
	if len(cols) == r.P {
		same := true
		for k, c := range cols {
			same = same && k == c
		}
		if same {
			return r
		}
	}
	out := &Reduction{P: len(cols), Constant: r.Constant}
	all := append(append([]int{}, cols...), r.P)
	for _, c := range all {
		out.Origin = append(out.Origin, r.Origin[c])
	}
	out.Total = r.Total.keep(all)
	for _, m := range r.Groups {
		out.Groups = append(out.Groups, m.keep(all))
	}
	for _, parts := range r.Parts {
		var kept []*Moments
		for _, m := range parts {
			kept = append(kept, m.keep(all))
		}
		out.Parts = append(out.Parts, kept)
	}
	return out
}

func (m *Moments) keep(cols []int) *Moments {
	out := NewMoments(len(cols))
	out.N = m.N
	for i, a := range cols {
		out.sumHi[i], out.sumLo[i] = m.sumHi[a], m.sumLo[a]
		for j := i; j < len(cols); j++ {
			from, to := m.at(a, cols[j]), out.at(i, j)
			out.crossHi[to], out.crossLo[to] = m.crossHi[from], m.crossLo[from]
		}
	}
	return out
}

// Weighted forms the parts of one repeat and their total again, row i counted weight[unit[i]] times (a whole number) in fold[i]. It keeps the
// origin, and all digits. Cost O(n q^2).
func (r *Reduction) Weighted(cols []Column, unit, fold []int32, folds int, weight []float64) *Reduction {
	var row []int
	var of []int32
	for i, u := range unit {
		for range int(weight[u]) {
			row = append(row, i)
			of = append(of, fold[i])
		}
	}
	again := make([]Column, len(cols))
	for j, c := range cols {
		again[j].Hi = make([]float64, len(row))
		for k, i := range row {
			again[j].Set(k, c.At(i))
		}
	}
	out := &Reduction{P: r.P, Constant: r.Constant, Origin: r.Origin}
	out.Parts = [][]*Moments{sums(again, r.Origin, of, folds, 1)}
	out.addUp()
	return out
}

// WeightedGroups is Weighted for whole groups of rows; group g lies in fold[g]. Cost O(groups q^2).
func (r *Reduction) WeightedGroups(fold []int32, folds int, weight []float64) *Reduction {
	out := &Reduction{P: r.P, Constant: r.Constant, Origin: r.Origin, Parts: [][]*Moments{make([]*Moments, folds)}}
	for f := range folds {
		out.Parts[0][f] = NewMoments(r.P + 1)
	}
	for g, m := range r.Groups {
		if weight[g] != 0 {
			out.Parts[0][fold[g]] = combine(out.Parts[0][fold[g]], m, weight[g])
		}
	}
	out.addUp()
	return out
}
