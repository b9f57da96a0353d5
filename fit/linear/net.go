package linear

import "math"

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
}

// NewNet starts at zero. c and r are kept, not copied, and not changed.
func NewNet(c, r []float64) *Net {
	p := len(r)
	return &Net{p: p, c: c, r: r, b: make([]float64, p), factor: make([]float64, p*p), x: make([]float64, p)}
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
		if !n.factorise(l2) {
			return false
		}
		m := len(n.active)
		x := n.x[:m]
		for i, j := range n.active {
			x[i] = n.r[j] - l1*n.signs[i]
		}
		solveLower(n.factor, m, x)
		solveUpper(n.factor, m, x)
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

// relist lists the coordinates that are not zero, with their signs.
func (n *Net) relist() {
	n.active, n.signs = n.active[:0], n.signs[:0]
	for j, v := range n.b {
		if v != 0 {
			n.active = append(n.active, j)
			n.signs = append(n.signs, math.Copysign(1, v))
		}
	}
}

// factorise makes the Cholesky factor of the active columns, unless it has it already.
func (n *Net) factorise(l2 float64) bool {
	m := len(n.active)
	if l2 == n.l2 && len(n.factored) == m {
		same := true
		for i, j := range n.active {
			same = same && n.factored[i] == j
		}
		if same {
			return true
		}
	}
	n.factored = n.factored[:0]
	a := n.factor[:m*m]
	for i, j := range n.active {
		row := n.c[j*n.p : j*n.p+n.p]
		for k, l := range n.active[:i] {
			a[i*m+k] = row[l]
		}
		a[i*m+i] = row[j] + l2
	}
	if !cholesky(a, m) {
		return false
	}
	n.factored = append(n.factored, n.active...)
	n.l2 = l2
	return true
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
		solveLower(n.factor, m, col)
		for _, v := range col {
			trace += v * v
		}
	}
	return float64(m) - l2*trace
}
