package linear

import "math"

// exhausted is the length, relative to the largest singular value, below which a further direction is rounding: all that the regressors say of y
// lies in the directions before it.
const exhausted = 1e-13

// Krylov returns the fits of partial least squares with 0, 1, 2, ... components: fit m is least squares over the span of r, Rr, ..., R^(m-1) r, with R the
// correlation matrix of the regressors and r their correlations with y. Each fit is given by its weights on the directions of the spectrum, as
// RidgeSlopes and PathSSE take them: weight k times UZ[k] is the coefficient on direction k.
//
// There are Rank+1 fits. The last is least squares, 1/Sigma[k]; so are those after the point where y leaves no further direction. Only for a spectrum
// without spared regressors. The work is the bidiagonalisation of Golub and Kahan, started at R's side and kept orthogonal to all earlier
// directions. Cost O(rank^3) once the spectrum is known.
//
// Source: Wold, Ruhe, Wold and Dunn (1984), SIAM Journal on Scientific and Statistical Computing 5(3), 735-743, for the method; Golub and
// Kahan (1965), SIAM Journal on Numerical Analysis B 2(2), 205-224, for the recursion (volume and pages from memory; the tests hold it to plain
// deflation).
func (sp *Spectrum) Krylov() [][]float64 {
	r := sp.Rank
	out := make([][]float64, r+1)
	buffer := make([]float64, (r+1)*r)
	for m := range out {
		out[m] = buffer[m*r : (m+1)*r]
	}
	least := out[r]
	for k, s := range sp.Sigma {
		least[k] = 1 / s
	}
	if r < 2 {
		return out
	}
	// Along the directions the regressors are diag(Sigma) and y is UZ.
	work := make([]float64, 2*r*r+4*r)
	vs, qs := work[:r*r], work[r*r:2*r*r] // one row a step: directions in the regressors, scores
	d, w, v, q := work[2*r*r:2*r*r+r], work[2*r*r+r:2*r*r+2*r], work[2*r*r+2*r:2*r*r+3*r], work[2*r*r+3*r:]
	for k, s := range sp.Sigma {
		v[k] = s * sp.UZ[k]
	}
	if norm(v) == 0 {
		return sp.leastFrom(out, 1)
	}
	rho := 0.0
	for m := range r - 1 {
		orthogonalise(v, vs[:m*r])
		theta := norm(v)
		if m > 0 && !(theta > exhausted*sp.Sigma[0]) {
			return sp.leastFrom(out, m+1)
		}
		for k := range v {
			v[k] /= theta
			q[k] = sp.Sigma[k] * v[k]
		}
		copy(vs[m*r:], v)
		if m > 0 {
			axpy(-theta, qs[(m-1)*r:m*r], q)
			orthogonalise(q, qs[:m*r])
		}
		// w solves for the direction that adds score q alone: w = (v - theta w)/rho.
		for k := range w {
			if m > 0 {
				w[k] = v[k] - theta*w[k]
			} else {
				w[k] = v[k]
			}
		}
		rho = norm(q)
		if !(rho > exhausted*sp.Sigma[0]) {
			return sp.leastFrom(out, m+1)
		}
		qu := 0.0
		for k := range q {
			q[k] /= rho
			w[k] /= rho
			qu += q[k] * sp.UZ[k]
		}
		copy(qs[m*r:], q)
		axpy(qu, w, d)
		for k, u := range sp.UZ {
			if u != 0 {
				out[m+1][k] = d[k] / u
			}
		}
		for k, s := range sp.Sigma {
			v[k] = s*q[k] - rho*v[k]
		}
	}
	return out
}

// leastFrom makes fit m and all after it least squares.
func (sp *Spectrum) leastFrom(out [][]float64, m int) [][]float64 {
	for i := m; i < sp.Rank; i++ {
		copy(out[i], out[sp.Rank])
	}
	return out
}

func norm(v []float64) float64 { return math.Sqrt(dot(v, v)) }

// orthogonalise takes the parts along the rows of basis (of unit length) out of v, and again where little was left of it: then rounding may have put
// some back.
func orthogonalise(v, basis []float64) {
	n := len(v)
	before := norm(v)
	for range 3 {
		for at := 0; at < len(basis); at += n {
			row := basis[at : at+n]
			axpy(-dot(row, v), row, v)
		}
		after := norm(v)
		if after > before/2 {
			return
		}
		before = after
	}
}

// WeightedSlopes returns the slopes, in the user's units, that have the coefficient weights[k] * UZ[k] on direction k. Cost O(p^2).
func (sp *Spectrum) WeightedSlopes(weights []float64) []float64 {
	return sp.slopes(func(k int) float64 { return weights[k] })
}
