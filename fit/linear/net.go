package linear

import (
	"math"
	"slices"
)

// Standardized returns, in float64, the correlation matrix of the regressors (p x p row-major; of the uncentred columns in a model without constant), their
// correlations with the dependent variable, their lengths (roots of the diagonal of S) and that of the dependent variable. A column without variation
// has zeros throughout. A slope in standardised units times length over scale is one in the user's units. Cost O(p^2).
func (s *Sample) Standardized() (c, r, scale []float64, length float64) {
	if s.light != nil {
		c, r, scale = s.light.scaled()
		length = math.Sqrt(math.Max(0, s.light.yy))
	} else {
		a, d := s.scaled()
		c, scale = floats(a), floats(d)
		r = make([]float64, s.P)
		for j := range r {
			if d[j].Hi > 0 {
				r[j] = s.R[j].Div(d[j]).Float()
			}
		}
		length = math.Sqrt(math.Max(0, s.YY.Float()))
	}
	for j := range r {
		if length > 0 {
			r[j] /= length
		}
	}
	return c, r, scale, length
}

// netTolerance is how far the conditions of a minimum may be missed, in units of a correlation.
const netTolerance = 1e-11

// mostSweeps bounds the sweeps that are made where the kept columns are exactly dependent and nothing is solved at once.
const mostSweeps = 10000

// Net minimises, in standardised units,
//
//	b'Cb/2 - r'b + l1 sum|b_j| + l2/2 sum b_j^2
//
// at one pair of penalties after the other, each starting from the last: coordinates are moved one by one (b_j = soft(r_j - sum C_jk b_k, l1)/(C_jj + l2)) to
// find which are not zero, and those are then solved at once, their signs given, as far as no sign changes. Both lower the sum of squares with its
// penalties, so that it ends. It ends when the conditions of a minimum hold: the gradient r - Cb - l2 b is l1 times the sign of b_j where b_j is not
// zero, and at most l1 (to 1e-11) elsewhere. Columns without variation stay zero.
//
// Coordinate descent: Friedman, Hastie and Tibshirani (2010), Journal of Statistical Software 33(1), 1-22.
type Net struct {
	p      int
	c, r   []float64
	b      []float64
	active []int
	signs  []float64 // of the active ones

	factor   []float64 // of C + l2 among factored
	factored []int
	l2       float64
	x        []float64
	trial    []int

	// Where most columns are kept and the spectrum of C is known, it stands in for the factor.
	all                *Spectrum
	along, byEach      []float64 // V'r, V'signs
	known, fresh       []float64 // the signs that byEach belongs to, zero at what is left out
	turned             bool
	weights, inverse   []float64
	out                []int // what is left out
	mu, small, columns []float64
}

// NewNet starts at zero. c and r are kept, not copied, and not changed.
func NewNet(c, r []float64) *Net {
	p := len(r)
	return &Net{p: p, c: c, r: r, b: make([]float64, p), factor: make([]float64, p*p), x: make([]float64, p)}
}

// Know tells the spectrum of C, which saves work where most columns are kept. One that is not of full rank is of no use and ignored.
func (n *Net) Know(sp *Spectrum) {
	if sp.Rank < n.p || len(sp.Cols) < n.p || n.p < 2 {
		return
	}
	n.all = sp
	b := make([]float64, 6*n.p)
	for i, to := range []*[]float64{&n.along, &n.byEach, &n.known, &n.fresh, &n.weights, &n.inverse} {
		*to = b[i*n.p : (i+1)*n.p]
	}
	turn(sp, n.r, n.along)
}

// turn gives V'x.
func turn(sp *Spectrum, x, to []float64) {
	clear(to)
	for i, v := range x {
		axpy(v, sp.V[i*sp.Rank:(i+1)*sp.Rank], to)
	}
}

// solveMost gives (C + l2)^-1 (r - l1 signs) for the active columns from the spectrum of all of them, those left out, J, being held at zero: with
// M = V (Lambda + l2)^-1 V' it is M(r - l1 signs) - M_J mu, M_JJ mu = (M(r - l1 signs))_J. Cost O(p^2) for few left out, whatever l2.
func (n *Net) solveMost(x []float64, l1, l2 float64) bool {
	p := n.p
	clear(n.fresh)
	for i, j := range n.active {
		n.fresh[j] = n.signs[i]
	}
	if !n.turned || !slices.Equal(n.known, n.fresh) {
		copy(n.known, n.fresh)
		turn(n.all, n.known, n.byEach)
		n.turned = true
	}
	for k, s := range n.all.Sigma {
		n.inverse[k] = 1 / (s*s + l2)
		n.weights[k] = (n.along[k] - l1*n.byEach[k]) * n.inverse[k]
	}
	n.out = n.out[:0]
	for j, s := range n.known {
		if s == 0 {
			n.out = append(n.out, j)
		}
	}
	if m := len(n.out); m > 0 {
		n.mu = append(n.mu[:0], make([]float64, m)...)
		n.small = append(n.small[:0], make([]float64, m*m)...)
		n.columns = append(n.columns[:0], make([]float64, m*p)...)
		for i, j := range n.out {
			v, c := n.all.V[j*p:(j+1)*p], n.columns[i*p:(i+1)*p]
			for k, w := range n.inverse {
				c[k] = w * v[k]
			}
			n.mu[i] = dot(v, n.weights)
			for h, l := range n.out[:i+1] {
				n.small[i*m+h] = dot(c, n.all.V[l*p:(l+1)*p])
			}
		}
		if !cholesky(n.small, m) {
			return false
		}
		solveLower(n.small, m, n.mu)
		solveUpper(n.small, m, n.mu)
		for i, v := range n.mu {
			axpy(-v, n.columns[i*p:(i+1)*p], n.weights)
		}
	}
	for i, j := range n.active {
		x[i] = dot(n.weights, n.all.V[j*p:(j+1)*p])
	}
	return true
}

// Solve returns the minimum at l1, l2 >= 0; the slice is reused by the next call.
func (n *Net) Solve(l1, l2 float64) []float64 {
	for range 10 * (n.p + 1) {
		if !n.settle(l1, l2) {
			n.sweep(l1, l2)
		}
		if !n.enter(l1, l2) {
			break
		}
	}
	return n.b
}

// settle solves the active coordinates at once, dropping those whose sign would change; it reports false where they are exactly dependent.
func (n *Net) settle(l1, l2 float64) bool {
	for len(n.active) > 0 {
		m := len(n.active)
		x := n.x[:m]
		if n.all == nil || l2 == 0 || 4*(n.p-m) > n.p || !n.solveMost(x, l1, l2) {
			if !n.factorise(l2) {
				return false
			}
			for i, j := range n.active {
				x[i] = n.r[j] - l1*n.signs[i]
			}
			n.back(x, false)
		}
		step, at := 1.0, -1
		if l1 > 0 {
			for i, j := range n.active {
				if x[i]*n.signs[i] <= 0 {
					if t := n.b[j] / (n.b[j] - x[i]); at < 0 || t < step {
						step, at = t, i
					}
				}
			}
		}
		if at < 0 {
			for i, j := range n.active {
				n.b[j] = x[i]
			}
			if l1 == 0 {
				n.relist() // signs were free
			}
			return true
		}
		for i, j := range n.active {
			n.b[j] += step * (x[i] - n.b[j])
		}
		n.b[n.active[at]] = 0
		n.relist()
	}
	return true
}

// relist leaves out of the active coordinates those at zero and notes the signs of the others.
func (n *Net) relist() {
	n.active = slices.DeleteFunc(n.active, func(j int) bool { return n.b[j] == 0 })
	n.signs = n.signs[:0]
	for _, j := range n.active {
		n.signs = append(n.signs, math.Copysign(1, n.b[j]))
	}
}

// factorise makes the Cholesky factor of the active columns, row by row (p numbers apart), keeping the rows that it has already.
func (n *Net) factorise(l2 float64) bool {
	have := 0
	if l2 == n.l2 {
		for have < min(len(n.factored), len(n.active)) && n.factored[have] == n.active[have] {
			have++
		}
	}
	n.l2 = l2
	n.factored = n.factored[:have]
	for i := have; i < len(n.active); i++ {
		j := n.active[i]
		from := n.c[j*n.p : j*n.p+n.p]
		row := n.factor[i*n.p : i*n.p+i+1]
		for k, l := range n.active[:i] {
			row[k] = (from[l] - dot(row[:k], n.factor[k*n.p:k*n.p+k])) / n.factor[k*n.p+k]
		}
		d := from[j] + l2 - dot(row[:i], row[:i])
		if !(d > lightTolerance) {
			return false
		}
		row[i] = math.Sqrt(d)
		n.factored = append(n.factored, j)
	}
	return true
}

// back solves for x with the factor, forward only where half is set.
func (n *Net) back(x []float64, half bool) {
	for i := range x {
		row := n.factor[i*n.p : i*n.p+i+1]
		x[i] = (x[i] - dot(row[:i], x[:i])) / row[i]
	}
	if half {
		return
	}
	for i := len(x) - 1; i >= 0; i-- {
		row := n.factor[i*n.p : i*n.p+i+1]
		x[i] /= row[i]
		v := x[i]
		for c, f := range row[:i] {
			x[c] -= v * f
		}
	}
}

// gradient is r_j - sum C_jk b_k.
func (n *Net) gradient(j int) float64 {
	g := n.r[j]
	row := n.c[j*n.p : j*n.p+n.p]
	for _, k := range n.active {
		g -= row[k] * n.b[k]
	}
	return g
}

// enter moves the coordinates at zero that the conditions want away from it; it reports whether there were any.
func (n *Net) enter(l1, l2 float64) bool {
	n.trial = n.trial[:0]
	for j, v := range n.b {
		if v == 0 && n.c[j*n.p+j] > 0 && math.Abs(n.gradient(j)) > l1+netTolerance {
			n.trial = append(n.trial, j)
		}
	}
	for _, j := range n.trial { // one after the other, since each changes the gradient of the next
		if n.move(j, l1, l2) {
			n.active = append(n.active, j)
		}
	}
	if len(n.trial) > 0 {
		n.relist()
	}
	return len(n.trial) > 0
}

// move takes one coordinate to its minimum, the others held; it reports whether it is not zero.
func (n *Net) move(j int, l1, l2 float64) bool {
	d := n.c[j*n.p+j]
	n.b[j] = soft(n.gradient(j)+d*n.b[j], l1) / (d + l2)
	return n.b[j] != 0
}

// soft takes v towards zero by l.
func soft(v, l float64) float64 {
	switch {
	case v > l:
		return v - l
	case v < -l:
		return v + l
	}
	return 0
}

// sweep moves the active coordinates in turn until none moves by more than 1e-13.
func (n *Net) sweep(l1, l2 float64) {
	for range mostSweeps {
		most := 0.0
		for _, j := range n.active {
			was := n.b[j]
			n.move(j, l1, l2)
			most = math.Max(most, math.Abs(n.b[j]-was))
		}
		if most <= 1e-13 {
			break
		}
	}
	n.relist()
}

// Active is the number of coordinates that are not zero.
func (n *Net) Active() int { return len(n.active) }

// Degrees returns the effective degrees of freedom of the last solution, the trace of C(C + l2)^-1 over the columns that are not zero; for the lasso
// (l2 = 0) that is their number.
//
// Source: Zou, Hastie and Tibshirani (2007), The Annals of Statistics 35(5), 2173-2192, for the lasso.
func (n *Net) Degrees(l2 float64) float64 {
	m := len(n.active)
	if l2 == 0 || m == 0 || !n.factorise(l2) {
		return float64(m)
	}
	trace := 0.0 // of (C + l2)^-1 = K'K, K the inverse of the factor
	col := make([]float64, m)
	for j := range m {
		clear(col)
		col[j] = 1
		n.back(col, true)
		for _, v := range col {
			trace += v * v
		}
	}
	return float64(m) - l2*trace
}

// Unvaried is the share of a column's variation beside others below which nothing is left of it.
const Unvaried = lightTolerance

// PartialOut takes column k out of the others in a q x q matrix of cross-products whose diagonal began at one, in place; its own row and column become zero. It
// reports whether there was anything left of it to take out.
func PartialOut(a []float64, q, k int) bool {
	d := a[k*q+k]
	if d > Unvaried {
		row := slices.Clone(a[k*q : k*q+q])
		for i := range q {
			axpy(-row[i]/d, row, a[i*q:i*q+q])
		}
	}
	for i := range q {
		a[k*q+i], a[i*q+k] = 0, 0
	}
	return d > Unvaried
}

// Unexplained returns 1 - R² of least squares on the columns in keep, C their correlations and r those with the dependent variable, all p of them; a column
// that depends on those before it is passed over.
func Unexplained(c, r []float64, keep []int) float64 {
	p := len(r)
	var used []int
	var l [][]float64
	var z []float64
	out := 1.0
	for _, j := range keep {
		row := make([]float64, len(used)+1)
		for k, i := range used {
			row[k] = (c[j*p+i] - dot(row[:k], l[k][:k])) / l[k][k]
		}
		m := len(used)
		d := c[j*p+j] - dot(row[:m], row[:m])
		if !(d > Unvaried) {
			continue
		}
		row[m] = math.Sqrt(d)
		v := (r[j] - dot(row[:m], z)) / row[m]
		out -= v * v
		used, l, z = append(used, j), append(l, row), append(z, v)
	}
	return out
}
