// Package linear solves least squares and its relatives on reduced rows.
//
// A reduction goes in; out come samples (centred cross-products), estimates, inverses, ranks, spectra and held-out
// errors. It decides rank by its own stated tolerance on the scaled design, never by a solver's luck, and is the only
// package that uses matrix factorisations. Before it stands reduction, after it collinear.
package linear

import (
	"math"
	"sync"

	"modelmend/fit/doubledouble"
	"modelmend/fit/reduction"
)

// number is shorthand for the double-double numbers that all cross-products are kept in.
type number = doubledouble.Number

// Tolerance is the rank tolerance: a design whose unit-length (centred) columns have a smallest singular value
// below Tolerance times the largest is treated as exactly dependent. Double-double cross-products resolve singular
// values down to about 1e-15; 1e-13 leaves room for data rounded when they were computed in float64.
const Tolerance = 1e-13

// Sample holds the second moments of one set of rows, about the means when the model has a constant, else about zero.
//
// S is p x p in row-major order, R = X'y (p), YY = y'y, all centred alike; Mean and MeanY are zero without constant.
type Sample struct {
	N        int
	P        int
	Constant bool
	Mean     []number
	MeanY    number
	S        []number
	R        []number
	YY       number

	once     sync.Once
	spectrum *Spectrum

	light                  *light // float64 moments instead of S, R and YY
	solveOnce, inverseOnce sync.Once
	solved                 *solved
}

// NewSample centres the moments m of the reduction red. Cost O(p^2).
func NewSample(red *reduction.Reduction, m *reduction.Moments) *Sample {
	p := red.P
	s := &Sample{N: m.N, P: p, Constant: red.Constant, Mean: make([]number, p), S: make([]number, p*p), R: make([]number, p)}
	shift := make([]number, p+1) // means about the origin
	if red.Constant && m.N > 0 {
		for j := range p + 1 {
			shift[j] = m.Sum(j).Div(doubledouble.From(float64(m.N)))
		}
		for j := range p {
			s.Mean[j] = shift[j].Add(red.Origin[j])
		}
		s.MeanY = shift[p].Add(red.Origin[p])
	}
	about := func(i, j int) number {
		v := m.Cross(i, j)
		if red.Constant {
			v = v.Sub(shift[i].Mul(m.Sum(j)))
		}
		return v
	}
	for i := range p {
		for j := i; j < p; j++ {
			v := about(i, j)
			if i == j {
				// What rounding leaves of a column without variation is zero.
				if v.Hi <= 1e-28*m.Cross(i, i).Hi {
					v = number{}
				}
			}
			s.S[i*p+j], s.S[j*p+i] = v, v
		}
		s.R[i] = about(i, p)
	}
	for i := range p {
		if s.S[i*p+i].Hi == 0 {
			for j := range p {
				s.S[i*p+j], s.S[j*p+i] = number{}, number{}
			}
			s.R[i] = number{}
		}
	}
	s.YY = about(p, p)
	return s
}

// SD returns the standard deviation of regressor j with divisor n-1 (n without constant).
func (s *Sample) SD(j int) float64 {
	d := float64(s.N - 1)
	if !s.Constant {
		d = float64(s.N)
	}
	if s.light != nil {
		return math.Sqrt(s.light.s[j*s.P+j] / d)
	}
	return math.Sqrt(s.S[j*s.P+j].Float() / d)
}

// Scale returns the root of the diagonal of S, the length of each (centred) column.
func (s *Sample) Scale() []number {
	if s.light != nil {
		return numbers(s.light.scale())
	}
	d := make([]number, s.P)
	for j := range d {
		d[j] = s.S[j*s.P+j].Sqrt()
	}
	return d
}

// Correlation returns the correlation of regressors i and j (of uncentred columns without constant), NaN for a
// column without variation.
func (s *Sample) Correlation(i, j int) float64 {
	if l := s.light; l != nil {
		return l.s[i*s.P+j] / math.Sqrt(l.s[i*s.P+i]*l.s[j*s.P+j])
	}
	d := s.S[i*s.P+i].Mul(s.S[j*s.P+j])
	if d.Hi <= 0 {
		return math.NaN()
	}
	return s.S[i*s.P+j].Div(d.Sqrt()).Float()
}

// CorrelationY returns the correlation of regressor i with the dependent variable.
func (s *Sample) CorrelationY(i int) float64 {
	d := s.S[i*s.P+i].Mul(s.YY)
	if d.Hi <= 0 {
		return math.NaN()
	}
	return s.R[i].Div(d.Sqrt()).Float()
}

// ConstantFor returns the constant that goes with the slopes, ybar - xbar'b; 0 in a model without constant.
func (s *Sample) ConstantFor(slopes []float64) float64 {
	if !s.Constant {
		return 0
	}
	c := s.MeanY
	for j, b := range slopes {
		c = c.Sub(s.Mean[j].MulFloat(b))
	}
	return c.Float()
}

// RSS returns the residual sum of squares of the slopes on these rows (with the constant of ConstantFor),
// y'y - 2 b'X'y + b'X'X b, in double-double. Cost O(p^2).
func (s *Sample) RSS(slopes []float64) float64 {
	if s.light != nil {
		return s.light.quadratic(slopes)
	}
	return math.Max(0, quadratic(s.P, s.S, s.R, s.YY, slopes).Float())
}

func quadratic(p int, S, R []number, YY number, b []float64) number {
	out := YY
	for i := range p {
		if b[i] == 0 {
			continue
		}
		row := S[i*p : i*p+p]
		// b_i * (b_i S_ii + 2 sum_{j>i} b_j S_ij - 2 R_i)
		t := row[i].MulFloat(b[i])
		for j := i + 1; j < p; j++ {
			if b[j] != 0 {
				t = t.Add(row[j].MulFloat(2 * b[j]))
			}
		}
		t = t.Sub(R[i].MulFloat(2))
		out = out.Add(t.MulFloat(b[i]))
	}
	return out
}

// Transform returns the sample of the m regressors X*A, where a is p x m in row-major order: S' = A'SA. The factors
// of a are taken as exact. Cost O(p^2 m).
func (s *Sample) Transform(a []float64, m int) *Sample {
	p := s.P
	if s.light != nil {
		out := &Sample{N: s.N, P: m, Constant: s.Constant, Mean: make([]number, m), MeanY: s.MeanY, light: s.transformLight(a, m)}
		for l := range p {
			for i := range m {
				if w := a[l*m+i]; w != 0 {
					out.Mean[i] = out.Mean[i].Add(s.Mean[l].MulFloat(w))
				}
			}
		}
		return out
	}
	out := &Sample{N: s.N, P: m, Constant: s.Constant, Mean: make([]number, m), MeanY: s.MeanY,
		S: make([]number, m*m), R: make([]number, m), YY: s.YY}
	sa := make([]number, p*m)
	for i := range p {
		for l := range p {
			v := s.S[i*p+l]
			for j := range m {
				if w := a[l*m+j]; w != 0 {
					sa[i*m+j] = sa[i*m+j].Add(v.MulFloat(w))
				}
			}
		}
	}
	for l := range p {
		for i := range m {
			w := a[l*m+i]
			if w == 0 {
				continue
			}
			out.Mean[i] = out.Mean[i].Add(s.Mean[l].MulFloat(w))
			out.R[i] = out.R[i].Add(s.R[l].MulFloat(w))
			for j := range m {
				out.S[i*m+j] = out.S[i*m+j].Add(sa[l*m+j].MulFloat(w))
			}
		}
	}
	return out
}

// Keep returns the sample of the regressors in cols, in that order.
func (s *Sample) Keep(cols []int) *Sample {
	m := len(cols)
	if s.light != nil {
		out := &Sample{N: s.N, P: m, Constant: s.Constant, Mean: make([]number, m), MeanY: s.MeanY, light: s.light.keep(cols)}
		for i, c := range cols {
			out.Mean[i] = s.Mean[c]
		}
		return out
	}
	out := &Sample{N: s.N, P: m, Constant: s.Constant, Mean: make([]number, m), MeanY: s.MeanY,
		S: make([]number, m*m), R: make([]number, m), YY: s.YY}
	for i, c := range cols {
		out.Mean[i], out.R[i] = s.Mean[c], s.R[c]
		for j, d := range cols {
			out.S[i*m+j] = s.S[c*s.P+d]
		}
	}
	return out
}

// HeldOut holds the moments of rows that a fit has not seen, about the means of its training rows.
type HeldOut struct {
	N     int
	P     int
	s     []number
	r     []number
	yy    number
	light *light // instead of s, r and yy

	mu    sync.Mutex
	along *along
}

// NewHeldOut takes the moments m of held-out rows to the centre of the training sample. Cost O(p^2).
func NewHeldOut(red *reduction.Reduction, m *reduction.Moments, training *Sample) *HeldOut {
	p := red.P
	h := &HeldOut{N: m.N, P: p, s: make([]number, p*p), r: make([]number, p)}
	shift := make([]number, p+1)
	if red.Constant {
		for j := range p {
			shift[j] = training.Mean[j].Sub(red.Origin[j])
		}
		shift[p] = training.MeanY.Sub(red.Origin[p])
	}
	n := float64(m.N)
	about := func(i, j int) number {
		v := m.Cross(i, j)
		if red.Constant {
			v = v.Sub(shift[i].Mul(m.Sum(j))).Sub(shift[j].Mul(m.Sum(i))).Add(shift[i].Mul(shift[j]).MulFloat(n))
		}
		return v
	}
	for i := range p {
		for j := i; j < p; j++ {
			v := about(i, j)
			h.s[i*p+j], h.s[j*p+i] = v, v
		}
		h.r[i] = about(i, p)
	}
	h.yy = about(p, p)
	return h
}

// SSE returns the sum of squared prediction errors of the slopes (with the training constant). Cost O(p^2).
func (h *HeldOut) SSE(slopes []float64) float64 {
	if h.light != nil {
		return h.light.quadratic(slopes)
	}
	return math.Max(0, quadratic(h.P, h.s, h.r, h.yy, slopes).Float())
}

// SST returns the squared deviations of the held-out values from the training mean (from zero without constant).
func (h *HeldOut) SST() float64 {
	if h.light != nil {
		return h.light.yy
	}
	return h.yy.Float()
}

// NewRawSample returns the uncentred sample of [1 x]: p+1 columns about zero, the constant's first. In a model without
// constant it is the p columns alone. It serves condition indexes with the constant; it has no dependent variable.
func NewRawSample(red *reduction.Reduction, m *reduction.Moments) *Sample {
	p, k := red.P, 0
	if red.Constant {
		k = 1
	}
	q := p + k
	s := &Sample{N: m.N, P: q, Mean: make([]number, q), S: make([]number, q*q), R: make([]number, q)}
	n := doubledouble.From(float64(m.N))
	set := func(i, j int, v number) { s.S[i*q+j], s.S[j*q+i] = v, v }
	if k == 1 {
		set(0, 0, n)
	}
	for i := range p {
		oi := red.Origin[i]
		if k == 1 {
			set(0, i+1, m.Sum(i).Add(oi.Mul(n)))
		}
		for j := i; j < p; j++ {
			oj := red.Origin[j]
			v := m.Cross(i, j).Add(oi.Mul(m.Sum(j))).Add(oj.Mul(m.Sum(i))).Add(oi.Mul(oj).Mul(n))
			set(i+k, j+k, v)
		}
	}
	return s
}
