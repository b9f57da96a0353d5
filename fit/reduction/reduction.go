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
	"sync"

	"modelmend/fit/doubledouble"
)

// Column is one column of numbers as high and low parts; Lo may be nil where every digit fits into Hi.
type Column struct{ Hi, Lo []float64 }

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
		cl := m.crossLo[k : k+q-i]
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

// settle moves what has gathered in the low parts into the high ones.
func (m *Moments) settle() {
	for i := range m.sumHi {
		m.sumHi[i], m.sumLo[i] = doubledouble.TwoSum(m.sumHi[i], m.sumLo[i])
	}
	for i := range m.crossHi {
		m.crossHi[i], m.crossLo[i] = doubledouble.TwoSum(m.crossHi[i], m.crossLo[i])
	}
}

func combine(a, b *Moments, sign float64) *Moments {
	out := NewMoments(a.Q)
	out.N = a.N + int(sign)*b.N
	for i := range a.sumHi {
		v := doubledouble.Number{Hi: a.sumHi[i], Lo: a.sumLo[i]}.Add(doubledouble.Number{Hi: sign * b.sumHi[i], Lo: sign * b.sumLo[i]})
		out.sumHi[i], out.sumLo[i] = v.Hi, v.Lo
	}
	for i := range a.crossHi {
		v := doubledouble.Number{Hi: a.crossHi[i], Lo: a.crossLo[i]}.Add(doubledouble.Number{Hi: sign * b.crossHi[i], Lo: sign * b.crossLo[i]})
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
}

// Reduce forms the moments of the regressors x (p columns of n rows) and of y for every fold of every repeat.
// assignment[repeat][row] is the fold, counts[repeat] the number of folds; both may be empty, which gives only the
// total. With constant the first row serves as origin, so that a column with a large mean loses no digits.
//
// The result is the same for any number of workers, as each fold sums its rows in file order.
// It returns an error when columns differ in length. Cost O(repeats n q^2).
func Reduce(x []Column, y Column, constant bool, assignment [][]int32, counts []int, workers int) (*Reduction, error) {
	n := len(y.Hi)
	cols := append(append([]Column{}, x...), y)
	q := len(cols)
	for j, c := range cols {
		if len(c.Hi) != n || (c.Lo != nil && len(c.Lo) != n) {
			return nil, fmt.Errorf("reduction: column %d has %d rows, expected %d", j+1, len(c.Hi), n)
		}
	}
	red := &Reduction{P: len(x), Constant: constant, Origin: make([]doubledouble.Number, q)}
	if constant && n > 0 {
		for j, c := range cols {
			red.Origin[j] = doubledouble.From(c.Hi[0])
		}
	}
	if len(assignment) == 0 {
		assignment, counts = [][]int32{make([]int32, n)}, []int{1}
		red.Parts = reduceAll(cols, red.Origin, assignment, counts, workers)
		red.Total = red.Parts[0][0]
		red.Parts = nil
		return red, nil
	}
	red.Parts = reduceAll(cols, red.Origin, assignment, counts, workers)
	red.Total = red.Parts[0][0]
	for _, part := range red.Parts[0][1:] {
		red.Total = red.Total.Plus(part)
	}
	return red, nil
}

func reduceAll(cols []Column, origin []doubledouble.Number, assignment [][]int32, counts []int, workers int) [][]*Moments {
	parts := make([][]*Moments, len(assignment))
	limit := make(chan struct{}, max(1, workers))
	var wg sync.WaitGroup
	for r := range assignment {
		wg.Add(1)
		limit <- struct{}{}
		go func() {
			defer wg.Done()
			parts[r] = reduceOne(cols, origin, assignment[r], counts[r])
			<-limit
		}()
	}
	wg.Wait()
	return parts
}

func reduceOne(cols []Column, origin []doubledouble.Number, folds []int32, count int) []*Moments {
	q := len(cols)
	out := make([]*Moments, count)
	for f := range out {
		out[f] = NewMoments(q)
	}
	hi, lo := make([]float64, q), make([]float64, q)
	for row, f := range folds {
		for j, c := range cols {
			h, e := doubledouble.TwoSum(c.Hi[row], -origin[j].Hi)
			if c.Lo != nil {
				e += c.Lo[row]
			}
			hi[j], lo[j] = h, e
		}
		out[f].add(hi, lo)
	}
	for _, m := range out {
		m.settle()
	}
	return out
}
