package linear

import (
	"math"

	"gonum.org/v1/gonum/mat"

	"modelmend/fit/doubledouble"
)

// factor is a pivoted Cholesky factorisation of a p x p matrix with unit (or zero) diagonal, in double-double:
// row i of l belongs to original column i, A = l l' on the pivoted columns.
type factor struct {
	p, rank  int
	l        []number // p x p row-major, only the first rank columns used
	pivots   []int    // original columns in pivot order, length rank
	smallest float64  // the smallest accepted pivot
}

// factorise pivots on the largest remaining diagonal, the columns in first before the others. It stops when every
// remaining diagonal is below Tolerance squared.
func factorise(p int, a []number, first []int) *factor {
	f := &factor{p: p, l: make([]number, p*p), smallest: math.Inf(1)}
	d := make([]number, p)
	for i := range p {
		d[i] = a[i*p+i]
	}
	done := make([]bool, p)
	step := func(k int) {
		root := d[k].Sqrt()
		r := f.rank
		f.smallest = math.Min(f.smallest, d[k].Hi)
		f.l[k*p+r] = root
		done[k] = true
		for i := range p {
			if done[i] {
				continue
			}
			v := a[i*p+k]
			li, lk := f.l[i*p:i*p+r], f.l[k*p:k*p+r]
			for c := range li {
				v = v.Sub(li[c].Mul(lk[c]))
			}
			v = v.Div(root)
			f.l[i*p+r] = v
			d[i] = d[i].Sub(v.Mul(v))
		}
		f.pivots = append(f.pivots, k)
		f.rank++
	}
	for _, k := range first {
		if !done[k] && d[k].Hi > Tolerance*Tolerance {
			step(k)
		}
	}
	for {
		best := -1
		for i := range p {
			if !done[i] && d[i].Hi > Tolerance*Tolerance && (best < 0 || d[i].Hi > d[best].Hi) {
				best = i
			}
		}
		if best < 0 {
			return f
		}
		step(best)
	}
}

// forward solves l z = r on the pivoted columns; z has length rank.
func (f *factor) forward(r []number) []number {
	z := make([]number, f.rank)
	for k, col := range f.pivots {
		v := r[col]
		for c := range k {
			v = v.Sub(f.l[col*f.p+c].Mul(z[c]))
		}
		z[k] = v.Div(f.l[col*f.p+k])
	}
	return z
}

// backward solves l' x = z for the pivoted columns and returns x at the original places, zero elsewhere.
func (f *factor) backward(z []number) []number {
	x := make([]number, f.p)
	for k := f.rank - 1; k >= 0; k-- {
		v := z[k]
		for c := k + 1; c < f.rank; c++ {
			v = v.Sub(f.l[f.pivots[c]*f.p+k].Mul(x[f.pivots[c]]))
		}
		x[f.pivots[k]] = v.Div(f.l[f.pivots[k]*f.p+k])
	}
	return x
}

// inverse returns the inverse of the full-rank matrix.
func (f *factor) inverse() []number {
	p := f.p
	out := make([]number, p*p)
	unit := make([]number, p)
	for j := range p {
		unit[j] = doubledouble.From(1)
		col := f.backward(f.forward(unit))
		unit[j] = number{}
		for i := range p {
			out[i*p+j] = col[i]
		}
	}
	return out
}

// scaled returns S with its columns scaled to unit length, and the lengths; a column without variation stays zero.
func (s *Sample) scaled() (a, scale []number) {
	p := s.P
	scale = s.Scale()
	inv := make([]number, p)
	for j := range p {
		if scale[j].Hi > 0 {
			inv[j] = doubledouble.From(1).Div(scale[j])
		}
	}
	a = make([]number, p*p)
	for i := range p {
		for j := i; j < p; j++ {
			v := s.S[i*p+j].Mul(inv[i]).Mul(inv[j])
			if i == j && v.Hi > 0 {
				v = doubledouble.From(1)
			}
			a[i*p+j], a[j*p+i] = v, v
		}
	}
	return a, scale
}

// Fit is a least-squares fit of all regressors of a sample.
type Fit struct {
	Slopes []float64 // p
	// Exact slopes and inverse cross-products beyond float64.
	slopes []number
	// Inverse is (X'X)^-1 of the centred regressors, p x p row-major; where the design is exactly dependent it is the
	// inverse on the estimable directions (the pseudo-inverse in standardised units).
	Inverse       []float64
	inverse       []number // Inverse before rounding; nil for an exactly dependent design
	RSS           float64
	Rank          int
	NotIdentified []bool // per regressor; nil when the design has full rank
}

// LeastSquares fits all regressors of the sample. Where they are exactly dependent the slopes are the shortest ones in
// standardised units, and NotIdentified marks those that have no value of their own. withInverse asks for Inverse.
//
// Cost O(p^3) in double-double.
func (s *Sample) LeastSquares(withInverse bool) *Fit {
	p := s.P
	if s.light != nil {
		return s.leastSquaresLight(withInverse)
	}
	a, scale := s.scaled()
	f := factorise(p, a, nil)
	if f.rank < p || f.smallest < 1e-22 {
		sp := s.Spectrum(nil)
		if sp.Rank < p {
			return s.deficient(sp, withInverse)
		}
	}
	rs := make([]number, p)
	for j := range p {
		rs[j] = s.R[j].Div(scale[j])
	}
	b := f.backward(f.forward(rs))
	fit := &Fit{Slopes: make([]float64, p), slopes: make([]number, p), Rank: p}
	rss := s.YY
	for j := range p {
		rss = rss.Sub(b[j].Mul(rs[j]))
		fit.slopes[j] = b[j].Div(scale[j])
		fit.Slopes[j] = fit.slopes[j].Float()
	}
	fit.RSS = math.Max(0, rss.Float())
	if withInverse {
		fit.inverse = unscale(f.inverse(), scale)
		fit.Inverse = floats(fit.inverse)
	}
	return fit
}

// unscale takes the inverse of a scaled matrix to the user's units, in place.
func unscale(inv, scale []number) []number {
	p := len(scale)
	for i := range p {
		for j := range p {
			inv[i*p+j] = inv[i*p+j].Div(scale[i]).Div(scale[j])
		}
	}
	return inv
}

func floats(a []number) []float64 {
	out := make([]float64, len(a))
	for i, v := range a {
		out[i] = v.Float()
	}
	return out
}

func numbers(a []float64) []number {
	out := make([]number, len(a))
	for i, v := range a {
		out[i] = doubledouble.From(v)
	}
	return out
}

// Factor returns the covariance of the fit's coefficients over sigma^2, the constant first where the sample has one:
// q x q row-major, q = p+1 or p. The fit must have been asked for its inverse.
func (f *Fit) Factor(s *Sample) []float64 {
	if f.inverse != nil {
		return s.withConstant(f.inverse)
	}
	return s.withConstant(numbers(f.Inverse))
}

// Factor returns the covariance over sigma^2 of the coefficients of slopes = M X'y (M p x p row-major), the constant
// first where the sample has one: M S M' for the slopes, 1/n + xbar' M S M' xbar for the constant.
func (s *Sample) Factor(m []float64) []float64 { return s.withConstant(s.sandwich(m)) }

func (s *Sample) withConstant(v []number) []float64 {
	p := s.P
	if !s.Constant {
		return floats(v)
	}
	q := p + 1
	out := make([]float64, q*q)
	total := doubledouble.From(1).Div(doubledouble.From(float64(s.N)))
	for i := range p {
		var c number
		for j := range p {
			c = c.Add(v[i*p+j].Mul(s.Mean[j]))
			out[(i+1)*q+j+1] = v[i*p+j].Float()
		}
		total = total.Add(c.Mul(s.Mean[i]))
		out[i+1], out[(i+1)*q] = -c.Float(), -c.Float()
	}
	out[0] = total.Float()
	return out
}

func (s *Sample) deficient(sp *Spectrum, withInverse bool) *Fit {
	p := s.P
	fit := &Fit{Slopes: sp.ComponentSlopes(sp.Rank), Rank: sp.Rank, NotIdentified: sp.Unidentified()}
	fit.slopes = make([]number, p)
	for j, b := range fit.Slopes {
		fit.slopes[j] = doubledouble.From(b)
	}
	fit.RSS = s.RSS(fit.Slopes)
	if withInverse {
		fit.Inverse = sp.ComponentMap(sp.Rank)
	}
	return fit
}

// Constant returns the constant of the fit, ybar - xbar'b, computed before the slopes are rounded.
func (f *Fit) Constant(s *Sample) float64 {
	if !s.Constant {
		return 0
	}
	c := s.MeanY
	for j, b := range f.slopes {
		c = c.Sub(s.Mean[j].Mul(b))
	}
	return c.Float()
}

// Spectrum is the singular value decomposition of the unit-length (centred) regressors outside spare, after the spared
// ones have been partialled out. Singular values run from large to small; for no spared regressors Sigma^2 are the
// eigenvalues of the correlation matrix.
type Spectrum struct {
	Rank  int       // of the rotated columns
	Sigma []float64 // rank
	V     []float64 // m x rank row-major: directions over the rotated columns
	Null  []float64 // m x (m-rank): the directions without variation
	UZ    []float64 // rank: U'y, the part of y along each direction
	Cols  []int     // the rotated columns, m of them

	p     int
	spare []int
	f     *factor
	z     []number
	swept []sweep // of a light sample, instead of f and z
	scale []float64
}

// Spectrum returns the decomposition with the given columns spared; the one without spared columns is kept for the
// next call. Cost O(p^3).
func (s *Sample) Spectrum(spare []int) *Spectrum {
	if len(spare) == 0 {
		s.once.Do(func() { s.spectrum = s.decompose(nil) })
		return s.spectrum
	}
	return s.decompose(spare)
}

func (s *Sample) decompose(spare []int) *Spectrum {
	p := s.P
	if s.light != nil {
		return s.decomposeLight(spare)
	}
	a, scale := s.scaled()
	sp := &Spectrum{p: p, spare: spare, scale: make([]float64, p)}
	isSpare := make([]bool, p)
	for _, j := range spare {
		isSpare[j] = true
	}
	for j := range p {
		sp.scale[j] = scale[j].Float()
		if !isSpare[j] {
			sp.Cols = append(sp.Cols, j)
		}
	}
	sp.f = factorise(p, a, spare)
	rs := make([]number, p)
	for j := range p {
		if scale[j].Hi > 0 {
			rs[j] = s.R[j].Div(scale[j])
		}
	}
	sp.z = sp.f.forward(rs)
	held := 0 // pivots that are spared columns
	for held < sp.f.rank && isSpare[sp.f.pivots[held]] {
		held++
	}
	for rank := sp.f.rank - held; ; rank-- {
		if sp.rotate(held, rank) {
			return sp
		}
	}
}

// rotate decomposes the first rank pivots after the held ones; it reports whether they pass the rank tolerance.
func (sp *Spectrum) rotate(held, rank int) bool {
	m := len(sp.Cols)
	sp.Rank, sp.Sigma, sp.V, sp.UZ = rank, nil, nil, nil
	if rank == 0 {
		sp.Null = identity(m)
		return true
	}
	lt := mat.NewDense(rank, m, nil)
	for i, col := range sp.Cols {
		for k := range rank {
			lt.Set(k, i, sp.f.l[col*sp.f.p+held+k].Float())
		}
	}
	var svd mat.SVD
	if !svd.Factorize(lt, mat.SVDFull) {
		panic("linear: singular value decomposition did not converge")
	}
	sigma := svd.Values(nil)
	if sigma[rank-1] < Tolerance*sigma[0] {
		return false
	}
	var u, v mat.Dense
	svd.UTo(&u)
	svd.VTo(&v)
	sp.Sigma = sigma
	sp.V = make([]float64, m*rank)
	sp.Null = make([]float64, m*(m-rank))
	sp.UZ = make([]float64, rank)
	for k := range rank {
		// The sign of a direction is arbitrary; its largest loading is made positive, so that it does not depend on the solver.
		sign := 1.0
		best := 0.0
		for i := range m {
			if x := v.At(i, k); math.Abs(x) > best*(1+1e-9) {
				best = math.Abs(x)
				sign = math.Copysign(1, x)
			}
		}
		for i := range m {
			sp.V[i*rank+k] = sign * v.At(i, k)
		}
		for c := range rank {
			sp.UZ[k] += sign * u.At(c, k) * sp.z[held+c].Float()
		}
	}
	for i := range m {
		for k := rank; k < m; k++ {
			sp.Null[i*(m-rank)+k-rank] = v.At(i, k)
		}
	}
	return true
}

func identity(m int) []float64 {
	out := make([]float64, m*m)
	for i := range m {
		out[i*m+i] = 1
	}
	return out
}

// Unidentified marks regressors that take part in an exact dependency.
func (sp *Spectrum) Unidentified() []bool {
	out := make([]bool, sp.p)
	m := len(sp.Cols)
	w := m - sp.Rank
	for i, col := range sp.Cols {
		for k := range w {
			if math.Abs(sp.Null[i*w+k]) > 1e-7 {
				out[col] = true
			}
		}
	}
	return out
}

// slopes takes weights on the directions to slopes in the user's units, the spared regressors fitted freely.
func (sp *Spectrum) slopes(weight func(k int) float64) []float64 {
	m, r := len(sp.Cols), sp.Rank
	if sp.f == nil {
		return sp.slopesLight(weight)
	}
	std := make([]number, sp.p)
	for i, col := range sp.Cols {
		v := 0.0
		for k := range r {
			v += sp.V[i*r+k] * weight(k) * sp.UZ[k]
		}
		std[col] = doubledouble.From(v)
	}
	if len(sp.spare) > 0 {
		sp.backToSpared(std, m)
	}
	out := make([]float64, sp.p)
	for j := range out {
		if sp.scale[j] > 0 {
			out[j] = std[j].Float() / sp.scale[j]
		}
	}
	return out
}

// backToSpared solves for the spared slopes given the rotated ones: l11' b1 = z1 - l21' b2.
func (sp *Spectrum) backToSpared(std []number, m int) {
	held := sp.f.rank
	isRotated := make([]bool, sp.p)
	for _, c := range sp.Cols {
		isRotated[c] = true
	}
	for k, c := range sp.f.pivots {
		if isRotated[c] {
			held = k
			break
		}
	}
	for k := held - 1; k >= 0; k-- {
		v := sp.z[k]
		for c := k + 1; c < held; c++ {
			v = v.Sub(sp.f.l[sp.f.pivots[c]*sp.p+k].Mul(std[sp.f.pivots[c]]))
		}
		for _, c := range sp.Cols {
			v = v.Sub(sp.f.l[c*sp.p+k].Mul(std[c]))
		}
		std[sp.f.pivots[k]] = v.Div(sp.f.l[sp.f.pivots[k]*sp.p+k])
	}
}

// RidgeSlopes returns the slopes (S + penalty*D)^-1 X'y in the user's units, D the diagonal of S with zeros at spared
// regressors: the penalty is on the correlation form, free of units and of n. Cost O(p^2).
func (sp *Spectrum) RidgeSlopes(penalty float64) []float64 {
	return sp.slopes(func(k int) float64 { return sp.Sigma[k] / (sp.Sigma[k]*sp.Sigma[k] + penalty) })
}

// RidgeDegrees returns the effective degrees of freedom of the slopes: the spared ones plus the sum of
// lambda/(lambda+penalty).
func (sp *Spectrum) RidgeDegrees(penalty float64) float64 {
	d := float64(sp.Spared())
	for _, s := range sp.Sigma {
		d += s * s / (s*s + penalty)
	}
	return d
}

// Spared returns the number of spared regressors that are fitted.
func (sp *Spectrum) Spared() int {
	if sp.f == nil {
		return len(sp.swept)
	}
	held := 0
	for _, c := range sp.f.pivots {
		for _, j := range sp.spare {
			if c == j {
				held++
			}
		}
	}
	return held
}

// ComponentSlopes returns the slopes of principal-components regression with the first count components of the
// standardised regressors; 0 <= count <= Rank. Cost O(p^2).
func (sp *Spectrum) ComponentSlopes(count int) []float64 {
	return sp.slopes(func(k int) float64 {
		if k >= count {
			return 0
		}
		return 1 / sp.Sigma[k]
	})
}

// ComponentMap returns the matrix M, p x p row-major, with slopes = M X'y for the first count components; for count =
// Rank it is the pseudo-inverse of S in standardised units. Only for a spectrum without spared regressors.
func (sp *Spectrum) ComponentMap(count int) []float64 {
	return sp.mapWith(func(k int) float64 {
		if k >= count {
			return 0
		}
		return 1 / (sp.Sigma[k] * sp.Sigma[k])
	})
}

// RidgeMap returns the matrix M, p x p row-major, with slopes = M X'y at the penalty. Only for a spectrum without spared
// regressors.
func (sp *Spectrum) RidgeMap(penalty float64) []float64 {
	return sp.mapWith(func(k int) float64 { return 1 / (sp.Sigma[k]*sp.Sigma[k] + penalty) })
}

func (sp *Spectrum) mapWith(weight func(k int) float64) []float64 {
	p, r := sp.p, sp.Rank
	out := make([]float64, p*p)
	w := make([]float64, r)
	for k := range w {
		w[k] = weight(k)
	}
	for i, ci := range sp.Cols {
		for j, cj := range sp.Cols {
			v := 0.0
			for k := range r {
				v += sp.V[i*r+k] * w[k] * sp.V[j*r+k]
			}
			if d := sp.scale[ci] * sp.scale[cj]; d > 0 {
				out[ci*p+cj] = v / d
			}
		}
	}
	return out
}

// PenalizedInverse returns (S + penalty*D)^-1 with D zero at spared regressors, p x p row-major, in double-double before
// rounding. A column without variation, or an exact dependency at penalty 0, gives NaN in every entry.
func (s *Sample) PenalizedInverse(penalty float64, spare []int) []float64 {
	p := s.P
	if s.light != nil {
		s = s.heavy()
	}
	a, scale := s.scaled()
	isSpare := make([]bool, p)
	for _, j := range spare {
		isSpare[j] = true
	}
	for j := range p {
		if !isSpare[j] {
			a[j*p+j] = a[j*p+j].AddFloat(penalty)
		}
	}
	f := factorise(p, a, nil)
	out := make([]float64, p*p)
	if f.rank < p {
		for i := range out {
			out[i] = math.NaN()
		}
		return out
	}
	return floats(unscale(f.inverse(), scale))
}

// sandwich returns M S M' (p x p row-major): the covariance over sigma^2 of slopes = M X'y with independent errors of
// equal variance. Cost O(p^3).
func (s *Sample) sandwich(m []float64) []number {
	p := s.P
	if s.light != nil {
		s = s.heavy()
	}
	ms := make([]number, p*p)
	for i := range p {
		for k := range p {
			w := m[i*p+k]
			if w == 0 {
				continue
			}
			for j := range p {
				ms[i*p+j] = ms[i*p+j].Add(s.S[k*p+j].MulFloat(w))
			}
		}
	}
	out := make([]number, p*p)
	for i := range p {
		for j := i; j < p; j++ {
			var v number
			for k := range p {
				v = v.Add(ms[i*p+k].MulFloat(m[j*p+k]))
			}
			out[i*p+j], out[j*p+i] = v, v
		}
	}
	return out
}

// Embed returns A B A' for a basis A (p x m row-major) and B (m x m): the way back from fitted combinations to slopes.
func Embed(p, m int, a, b []float64) []float64 {
	if m == 0 {
		return make([]float64, p*p)
	}
	var t, out mat.Dense
	am := mat.NewDense(p, m, a)
	t.Mul(am, mat.NewDense(m, m, b))
	out.Mul(&t, am.T())
	return out.RawMatrix().Data
}

// RidgeSampling returns (S+kD)^-1 S (S+kD)^-1, p x p row-major: the sampling covariance of the ridge slopes over sigma^2
// given the penalty. Only for a spectrum without spared regressors.
func (sp *Spectrum) RidgeSampling(penalty float64) []float64 {
	return sp.mapWith(func(k int) float64 {
		l := sp.Sigma[k] * sp.Sigma[k]
		return l / ((l + penalty) * (l + penalty))
	})
}

// WithConstant adds the constant to v, the covariance of slopes over sigma^2 (p x p row-major): q x q, the constant
// first; v itself in a model without constant.
func (s *Sample) WithConstant(v []float64) []float64 { return s.withConstant(numbers(v)) }
