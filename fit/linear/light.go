package linear

import (
	"math"

	"gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/lapack"
	lapackimpl "gonum.org/v1/gonum/lapack/gonum"

	"modelmend/fit/doubledouble"
	"modelmend/fit/reduction"
)

// A light sample keeps its moments in float64: enough for training rows and resamples where the regressors of all rows are clearly not
// dependent (EnoughForLight), and ten times faster. Moments are taken about the means of all rows first, so that little is lost. Everything that
// Learn may ask for works on light samples; S, R and YY are nil.
type light struct {
	s, r []float64
	yy   float64
	z    []float64 // the means in the units of reduction.Units, q of them
}

// lightTolerance is the eigenvalue of the correlation matrix, relative to the largest, below which a light sample counts as exactly dependent.
const lightTolerance = 1e-11

// EnoughForLight reports whether samples drawn from the rows of s may be light: the smallest eigenvalue of its correlation matrix is above ratio
// times the largest, and the fit is not so close that its residuals would drown in rounding (1 - R2 above 1e-7). Light estimates then keep about
// 15 + log10(ratio) digits.
func EnoughForLight(s *Sample, ratio float64) bool {
	sp := s.Spectrum(nil)
	if sp.Rank < s.P || s.P == 0 {
		return false
	}
	v := sp.Sigma[sp.Rank-1] / sp.Sigma[0]
	return v*v > ratio && s.LeastSquares(false).RSS > 1e-7*s.YY.Float()
}

// NewLightSample makes a sample of the sums of one weighting of the units, as reduction.Units.Sum gives them for one fold, or several added up.
// Cost O(p^2).
func NewLightSample(u *reduction.Units, sums []float64) *Sample {
	q := u.Q
	p := q - 1
	n := sums[0]
	l := &light{s: make([]float64, p*p), r: make([]float64, p), z: make([]float64, q)}
	s := &Sample{N: int(math.Round(n)), P: p, Constant: u.Constant, Mean: make([]number, p), light: l}
	if u.Constant && n > 0 {
		for j := range q {
			l.z[j] = sums[1+j] / n
		}
		for j := range p {
			s.Mean[j] = doubledouble.From(u.Center[j]).AddFloat(u.Scale[j] * l.z[j])
		}
		s.MeanY = doubledouble.From(u.Center[p]).AddFloat(u.Scale[p] * l.z[p])
	}
	k := 1 + q
	zero := false
	for i := range q {
		for j := i; j < q; j++ {
			raw := sums[k]
			k++
			v := raw - l.z[i]*sums[1+j]
			if i == j && v <= 1e-13*raw { // what rounding leaves of a column without variation
				v = 0
			}
			v *= u.Scale[i] * u.Scale[j]
			switch {
			case j < p:
				l.s[i*p+j], l.s[j*p+i] = v, v
				zero = zero || (i == j && v == 0)
			case i < p:
				l.r[i] = v
			default:
				l.yy = v
			}
		}
	}
	if zero {
		for i := range p {
			if l.s[i*p+i] == 0 {
				for j := range p {
					l.s[i*p+j], l.s[j*p+i] = 0, 0
				}
				l.r[i] = 0
			}
		}
	}
	return s
}

// NewLightHeldOut takes the sums of held-out units to the centre of a light training sample of the same units. Cost O(p^2).
func NewLightHeldOut(u *reduction.Units, sums []float64, training *Sample) *HeldOut {
	q := u.Q
	p := q - 1
	n := sums[0]
	z := training.light.z
	h := &HeldOut{N: int(math.Round(n)), P: p, light: &light{s: make([]float64, p*p), r: make([]float64, p)}}
	l := h.light
	k := 1 + q
	for i := range q {
		si := sums[1+i]
		for j := i; j < q; j++ {
			v := (sums[k] - z[i]*sums[1+j] - z[j]*si + z[i]*z[j]*n) * u.Scale[i] * u.Scale[j]
			k++
			switch {
			case j < p:
				l.s[i*p+j], l.s[j*p+i] = v, v
			case i < p:
				l.r[i] = v
			default:
				l.yy = v
			}
		}
	}
	return h
}

func (l *light) quadratic(b []float64) float64 {
	p := len(l.r)
	out := l.yy
	for i, bi := range b {
		if bi == 0 {
			continue
		}
		row := l.s[i*p : i*p+p]
		t := bi * row[i]
		for j := i + 1; j < p; j++ {
			t += 2 * b[j] * row[j]
		}
		out += bi * (t - 2*l.r[i])
	}
	return math.Max(0, out)
}

func (l *light) scale() []float64 {
	p := len(l.r)
	d := make([]float64, p)
	for j := range d {
		d[j] = math.Sqrt(l.s[j*p+j])
	}
	return d
}

// scaled returns the moments of unit-length columns; one without variation stays zero.
func (l *light) scaled() (a, rs, scale []float64) {
	p := len(l.r)
	scale = l.scale()
	inv := make([]float64, p)
	rs = make([]float64, p)
	for j, d := range scale {
		if d > 0 {
			inv[j] = 1 / d
		}
		rs[j] = l.r[j] * inv[j]
	}
	a = make([]float64, p*p)
	for i := range p {
		for j := range p {
			a[i*p+j] = l.s[i*p+j] * inv[i] * inv[j]
		}
		if scale[i] > 0 {
			a[i*p+i] = 1
		}
	}
	return a, rs, scale
}

// cholesky overwrites the lower triangle of a by its factor; it reports whether every pivot passed.
func cholesky(a []float64, p int) bool {
	for k := range p {
		row := a[k*p : k*p+k]
		d := a[k*p+k] - dot(row, row)
		if !(d > lightTolerance) {
			return false
		}
		root := math.Sqrt(d)
		a[k*p+k] = root
		for i := k + 1; i < p; i++ {
			a[i*p+k] = (a[i*p+k] - dot(row, a[i*p:i*p+k])) / root
		}
	}
	return true
}

// dot is the inner product of two slices of one length, added up in four sums, so that one addition need not wait for the last.
func dot(a, b []float64) float64 {
	var s0, s1, s2, s3 float64
	b = b[:len(a)]
	for len(a) >= 4 && len(b) >= 4 {
		s0 += a[0] * b[0]
		s1 += a[1] * b[1]
		s2 += a[2] * b[2]
		s3 += a[3] * b[3]
		a, b = a[4:], b[4:]
	}
	for i, x := range a {
		s0 += x * b[i]
	}
	return (s0 + s1) + (s2 + s3)
}

// solveLower overwrites b by L^-1 b, solveUpper by L'^-1 b.
func solveLower(l []float64, p int, b []float64) {
	for i := range p {
		b[i] = (b[i] - dot(l[i*p:i*p+i], b[:i])) / l[i*p+i]
	}
}

func solveUpper(l []float64, p int, b []float64) {
	for i := p - 1; i >= 0; i-- {
		v := b[i] / l[i*p+i]
		b[i] = v
		for c, x := range l[i*p : i*p+i] {
			b[c] -= v * x
		}
	}
}

// solved is the least-squares fit of a light sample in unit-length columns.
type solved struct {
	factor  []float64 // lower triangle
	b       []float64 // in the user's units
	scale   []float64
	inverse []float64 // of the moments in the user's units, formed when first asked for
}

// solve returns nil where the sample is exactly dependent. It is done once.
func (s *Sample) solve() *solved {
	s.solveOnce.Do(func() {
		a, rs, scale := s.light.scaled()
		if !cholesky(a, s.P) {
			return
		}
		solveLower(a, s.P, rs)
		solveUpper(a, s.P, rs)
		for j := range rs {
			rs[j] /= scale[j]
		}
		s.solved = &solved{factor: a, b: rs, scale: scale}
	})
	return s.solved
}

func (s *Sample) lightInverse() []float64 {
	s.inverseOnce.Do(func() {
		p, v := s.P, s.solved
		// (LL')^-1 = K'K with K = L^-1, both triangles.
		k := make([]float64, p*p)
		for j := range p {
			k[j*p+j] = 1 / v.factor[j*p+j]
			for i := j + 1; i < p; i++ {
				t := 0.0
				for c := j; c < i; c++ {
					t -= v.factor[i*p+c] * k[c*p+j]
				}
				k[i*p+j] = t / v.factor[i*p+i]
			}
		}
		out := make([]float64, p*p)
		for r := range p {
			row := k[r*p : r*p+r+1]
			for i, x := range row {
				o := out[i*p : i*p+i+1]
				for j := range o {
					o[j] += x * row[j]
				}
			}
		}
		for i := range p {
			for j := range i + 1 {
				w := out[i*p+j] / v.scale[i] / v.scale[j]
				out[i*p+j], out[j*p+i] = w, w
			}
		}
		v.inverse = out
	})
	return s.solved.inverse
}

func (s *Sample) leastSquaresLight(withInverse bool) *Fit {
	v := s.solve()
	if v == nil {
		return s.deficient(s.Spectrum(nil), withInverse)
	}
	fit := &Fit{Slopes: append([]float64{}, v.b...), Rank: s.P}
	fit.slopes = numbers(fit.Slopes)
	fit.RSS = s.light.quadratic(fit.Slopes)
	if withInverse {
		fit.Inverse = s.lightInverse()
	}
	return fit
}

// Without returns the least-squares slopes with the columns in gone left out (zero there) and, where asked for, the inverse of the moments of the
// others (p x p, zeros at what is gone), from the inverse C of the full fit:
//
//	b - C_g (C_gg)^-1 b_g,  C - C_g (C_gg)^-1 C_g'.
//
// ok is false where the sample is not light or the full fit is exactly dependent. Cost O(p) for one column, O(p^2) with the inverse, once C is known.
func (s *Sample) Without(gone []int, withInverse bool) (slopes, inverse []float64, ok bool) {
	if s.light == nil || s.solve() == nil {
		return nil, nil, false
	}
	p, m := s.P, len(gone)
	c := s.lightInverse()
	// U = L^-1 D^-1 C_g' with C_gg = D L L' D, so that C_g (C_gg)^-1 x_g = U' (L^-1 D^-1 x_g).
	a := make([]float64, m*m)
	w := make([]float64, m)
	u := make([]float64, m*p)
	for i, g := range gone {
		scale := math.Sqrt(c[g*p+g])
		w[i] = s.solved.b[g] / scale
		for j, h := range gone[:i+1] {
			a[i*m+j] = c[g*p+h] / scale / math.Sqrt(c[h*p+h])
		}
		for j := range p {
			u[i*p+j] = c[g*p+j] / scale
		}
	}
	if !cholesky(a, m) {
		return nil, nil, false
	}
	solveLower(a, m, w)
	for i := range m {
		for k := range i {
			axpy(-a[i*m+k], u[k*p:k*p+p], u[i*p:i*p+p])
		}
		for j := range p {
			u[i*p+j] /= a[i*m+i]
		}
	}
	slopes = append([]float64{}, s.solved.b...)
	for i := range m {
		axpy(-w[i], u[i*p:i*p+p], slopes)
	}
	for _, g := range gone {
		slopes[g] = 0
	}
	if !withInverse {
		return slopes, nil, true
	}
	inverse = append([]float64{}, c...)
	for i := range m {
		row := u[i*p : i*p+p]
		for j, v := range row {
			axpy(-v, row, inverse[j*p:j*p+p])
		}
	}
	for _, g := range gone {
		for j := range p {
			inverse[g*p+j], inverse[j*p+g] = 0, 0
		}
	}
	return slopes, inverse, true
}

// transformLight is Transform; a has few entries that are not zero.
func (s *Sample) transformLight(a []float64, m int) *light {
	p := s.P
	type entry struct {
		j int
		w float64
	}
	rows := make([][]entry, p)
	for i := range p {
		for j := range m {
			if w := a[i*m+j]; w != 0 {
				rows[i] = append(rows[i], entry{j, w})
			}
		}
	}
	out := &light{s: make([]float64, m*m), r: make([]float64, m), yy: s.light.yy}
	sa := make([]float64, m)
	for i := range p {
		if len(rows[i]) == 0 {
			continue
		}
		clear(sa)
		for l, v := range s.light.s[i*p : i*p+p] {
			for _, e := range rows[l] {
				sa[e.j] += v * e.w
			}
		}
		for _, e := range rows[i] {
			out.r[e.j] += e.w * s.light.r[i]
			o := out.s[e.j*m : e.j*m+m]
			for j, v := range sa {
				o[j] += e.w * v
			}
		}
	}
	return out
}

func (l *light) keep(cols []int) *light {
	p, m := len(l.r), len(cols)
	out := &light{s: make([]float64, m*m), r: make([]float64, m), yy: l.yy}
	for i, c := range cols {
		out.r[i] = l.r[c]
		for j, d := range cols {
			out.s[i*m+j] = l.s[c*p+d]
		}
	}
	return out
}

// decomposeLight partials out the spared columns and turns the rest by the eigenvectors of what remains of the correlation matrix.
func (s *Sample) decomposeLight(spare []int) *Spectrum {
	p := s.P
	a, rs, scale := s.light.scaled()
	sp := &Spectrum{p: p, spare: spare, scale: scale}
	isSpare := make([]bool, p)
	for _, j := range spare {
		isSpare[j] = true
	}
	for j := range p {
		if !isSpare[j] {
			sp.Cols = append(sp.Cols, j)
		}
	}
	if len(spare) > 0 {
		sp.partial(a, rs, spare)
	}
	m := len(sp.Cols)
	v := a
	uz := rs
	if m < p {
		v, uz = make([]float64, m*m), make([]float64, m)
		for i, c := range sp.Cols {
			uz[i] = rs[c]
			for j, d := range sp.Cols {
				v[i*m+j] = a[c*p+d]
			}
		}
	}
	lambda := eigen(v, m)
	rank := m
	for rank > 0 && !(lambda[m-rank] > lightTolerance*lambda[m-1]) {
		rank--
	}
	sp.Rank = rank
	sp.Sigma, sp.UZ = make([]float64, rank), make([]float64, rank)
	sp.V, sp.Null = make([]float64, m*rank), make([]float64, m*(m-rank))
	for k := range rank {
		sp.Sigma[k] = math.Sqrt(lambda[m-1-k])
	}
	for i := range m {
		for k := range rank {
			sp.V[i*rank+k] = v[i*m+m-1-k]
		}
		for k := range m - rank {
			sp.Null[i*(m-rank)+k] = v[i*m+k]
		}
	}
	for k := range rank {
		sign, best := 1.0, 0.0
		for i := range m {
			if x := sp.V[i*rank+k]; math.Abs(x) > best*(1+1e-9) {
				best, sign = math.Abs(x), math.Copysign(1, x)
			}
		}
		t := 0.0
		for i := range m {
			x := sign * sp.V[i*rank+k]
			sp.V[i*rank+k] = x
			t += x * uz[i]
		}
		sp.UZ[k] = t / sp.Sigma[k]
	}
	return sp
}

// partial takes the spared columns out of the others, in place, and keeps what leads back to their slopes.
func (sp *Spectrum) partial(a, rs []float64, spare []int) {
	p := sp.p
	for _, k := range spare {
		if !(a[k*p+k] > lightTolerance) {
			continue // no variation left beside the spared ones before it
		}
		sp.swept = append(sp.swept, sweep{col: k, row: append([]float64{}, a[k*p:k*p+p]...), r: rs[k]})
		d := a[k*p+k]
		for i := range p {
			f := a[i*p+k] / d
			if i == k || f == 0 {
				continue
			}
			row := sp.swept[len(sp.swept)-1].row
			for j := range p {
				a[i*p+j] -= f * row[j]
			}
			rs[i] -= f * sp.swept[len(sp.swept)-1].r
		}
		for j := range p {
			a[k*p+j] = 0
		}
		rs[k] = 0
	}
}

// slopesLight is slopes for a light sample.
func (sp *Spectrum) slopesLight(weight func(k int) float64) []float64 {
	r := sp.Rank
	c := make([]float64, r)
	for k := range c {
		c[k] = weight(k) * sp.UZ[k]
	}
	std := make([]float64, sp.p)
	for i, col := range sp.Cols {
		v := 0.0
		for k, x := range sp.V[i*r : i*r+r] {
			v += x * c[k]
		}
		std[col] = v
	}
	sp.backLight(std)
	for j := range std {
		if sp.scale[j] > 0 {
			std[j] /= sp.scale[j]
		} else {
			std[j] = 0
		}
	}
	return std
}

// heavy is the same sample with double-double moments, which hold no more digits than before.
func (s *Sample) heavy() *Sample {
	return &Sample{N: s.N, P: s.P, Constant: s.Constant, Mean: s.Mean, MeanY: s.MeanY, S: numbers(s.light.s), R: numbers(s.light.r), YY: doubledouble.From(s.light.yy)}
}

// sweep is one step of elimination: row' b = r at the time when column col was taken out.
type sweep struct {
	col int
	row []float64
	r   float64
}

// backLight gives the spared slopes (unit-length columns) that go with the rotated ones.
func (sp *Spectrum) backLight(std []float64) {
	for k := len(sp.swept) - 1; k >= 0; k-- {
		s := sp.swept[k]
		v := s.r
		for j, x := range s.row {
			if j != s.col {
				v -= x * std[j]
			}
		}
		std[s.col] = v / s.row[s.col]
	}
}

// eigen overwrites the symmetric m x m matrix a by its eigenvectors (columns) and returns the eigenvalues in ascending order.
func eigen(a []float64, m int) []float64 {
	w := make([]float64, m)
	if m == 0 {
		return w
	}
	work := make([]float64, 34*m+2)
	if !(lapackimpl.Implementation{}).Dsyev(lapack.EVCompute, blas.Upper, m, a, m, w, work, len(work)) {
		panic("linear: eigenvalue decomposition did not converge")
	}
	return w
}

// Root returns a root of the symmetric, positive semidefinite m x m matrix a, which it overwrites: R (m x rank, row-major) with R R' = a, columns
// below lightTolerance of the largest eigenvalue left out. Cost O(m^3).
func Root(a []float64, m int) (root []float64, rank int) {
	lambda := eigen(a, m)
	for rank < m && lambda[m-1-rank] > lightTolerance*lambda[m-1] {
		rank++
	}
	root = make([]float64, m*rank)
	for i := range m {
		for k := range rank {
			root[i*rank+k] = a[i*m+m-1-k] * math.Sqrt(lambda[m-1-k])
		}
	}
	return root, rank
}

// SolvePositive returns the x with A x = b for a symmetric positive definite p x p matrix (row-major, unchanged); ok is false where it is not clearly
// positive. Cost O(p^3).
func SolvePositive(a []float64, p int, b []float64) (x []float64, ok bool) {
	scale := make([]float64, p)
	m := make([]float64, p*p)
	for i := range p {
		scale[i] = math.Sqrt(a[i*p+i])
	}
	for i := range p {
		for j := range p {
			m[i*p+j] = a[i*p+j] / scale[i] / scale[j]
		}
	}
	if !cholesky(m, p) {
		return nil, false
	}
	x = make([]float64, p)
	for i := range x {
		x[i] = b[i] / scale[i]
	}
	solveLower(m, p, x)
	solveUpper(m, p, x)
	for i := range x {
		x[i] /= scale[i]
	}
	return x, true
}
