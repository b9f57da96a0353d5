package linear

import (
	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/mat"
)

// PathSSE returns the sums of squared prediction errors on the held-out rows of count fits that differ only in how they weigh the directions of
// the spectrum: fit i has the coefficient weight(i, k) * UZ[k] on direction k (1/Sigma[k] is least squares). sp must be the spectrum, without
// spared regressors, of the training sample that h is centred on.
//
// It works on residuals of the least-squares fit, taken in double-double: with d the distance from it along the directions,
//
//	SSE = e'e - 2 d'Z'e + d'Z'Z d,
//
// which loses no digits where the fit is close. Only where a direction is thin enough to matter is Z'Z turned in double-double too.
// Cost O(p^3) once and O(p^2) a fit.
func (h *HeldOut) PathSSE(sp *Spectrum, count int, weight func(i, k int) float64) []float64 {
	r := sp.Rank
	al := h.alongOf(sp)
	out := make([]float64, count)
	for i := range out {
		out[i] = al.ee
	}
	// Direction by direction, all fits at once; d holds the distances of the directions so far.
	d := make([]float64, r*count)
	sum := make([]float64, count)
	for k := range r {
		row := d[k*count : (k+1)*count]
		least := 1 / sp.Sigma[k]
		moved := false
		for i := range row {
			row[i] = (weight(i, k) - least) * sp.UZ[k]
			moved = moved || row[i] != 0
		}
		if !moved {
			continue
		}
		zz := al.zz[k*r : k*r+r]
		for i, x := range row {
			sum[i] = zz[k]*x - 2*al.ze[k]
		}
		for l, z := range zz[:k] {
			axpy(2*z, d[l*count:(l+1)*count], sum)
		}
		for i, x := range row {
			out[i] += x * sum[i]
		}
	}
	for i := range out {
		out[i] = max(0, out[i])
	}
	return out
}

// axpy adds a*x to y.
func axpy(a float64, x, y []float64) {
	blas64.Axpy(a, blas64.Vector{N: len(x), Data: x, Inc: 1}, blas64.Vector{N: len(y), Data: y, Inc: 1})
}

// along holds what PathSSE needs of held-out rows along the directions of one spectrum: e'e, Z'e and Z'Z.
type along struct {
	of     *Spectrum
	ee     float64
	ze, zz []float64
}

// alongOf forms it, or gives the one of the last call where the spectrum is the same.
func (h *HeldOut) alongOf(sp *Spectrum) *along {
	h.mu.Lock()
	defer h.mu.Unlock()
	if h.along != nil && h.along.of == sp {
		return h.along
	}
	base := sp.ComponentSlopes(sp.Rank)
	a := &along{of: sp, ee: h.SSE(base)}
	if sp.Rank > 0 {
		a.ze = h.residualMoments(sp, base)
		a.zz = h.turned(sp)
	}
	h.along = a
	return a
}

// residualMoments returns Z'e for the residuals of the slopes, Z the held-out rows along the directions.
func (h *HeldOut) residualMoments(sp *Spectrum, slopes []float64) []float64 {
	p, r := h.P, sp.Rank
	out := make([]float64, r)
	for i, col := range sp.Cols {
		if sp.scale[col] == 0 {
			continue
		}
		var x float64
		if l := h.light; l != nil {
			x = l.r[col]
			for j, b := range slopes {
				x -= l.s[col*p+j] * b
			}
		} else {
			v := h.r[col]
			for j := range p {
				if slopes[j] != 0 {
					v = v.Sub(h.s[col*p+j].MulFloat(slopes[j]))
				}
			}
			x = v.Float()
		}
		x /= sp.scale[col]
		for k := range r {
			out[k] += sp.V[i*r+k] * x
		}
	}
	return out
}

// thin is the eigenvalue below which float64 would lose digits that the error curve needs.
const thin = 1e-5

// turned returns Z'Z along the directions, r x r.
func (h *HeldOut) turned(sp *Spectrum) []float64 {
	m, r := len(sp.Cols), sp.Rank
	if least := sp.Sigma[r-1]; h.light == nil && least*least < thin {
		return h.turnedExactly(sp)
	}
	s := mat.NewDense(m, m, nil)
	to := s.RawMatrix().Data
	for i, a := range sp.Cols {
		for j, b := range sp.Cols {
			if d := sp.scale[a] * sp.scale[b]; d > 0 {
				if h.light != nil {
					to[i*m+j] = h.light.s[a*h.P+b] / d
				} else {
					to[i*m+j] = h.s[a*h.P+b].Float() / d
				}
			}
		}
	}
	v := mat.NewDense(m, r, sp.V)
	var sv, out mat.Dense
	sv.Mul(s, v)
	out.Mul(v.T(), &sv)
	return out.RawMatrix().Data
}

func (h *HeldOut) turnedExactly(sp *Spectrum) []float64 {
	r := sp.Rank
	basis := make([]float64, h.P*r)
	for i, col := range sp.Cols {
		if sp.scale[col] == 0 {
			continue
		}
		for k := range r {
			basis[col*r+k] = sp.V[i*r+k] / sp.scale[col]
		}
	}
	return floats((&Sample{P: h.P, S: h.s, R: h.r, Mean: make([]number, h.P)}).Transform(basis, r).S)
}
