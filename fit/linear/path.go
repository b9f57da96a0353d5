package linear

import "gonum.org/v1/gonum/mat"

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
	base := sp.ComponentSlopes(r)
	ee := h.SSE(base)
	out := make([]float64, count)
	if r == 0 {
		for i := range out {
			out[i] = ee
		}
		return out
	}
	ze := h.residualMoments(sp, base)
	zz := h.turned(sp)
	d, zzd := make([]float64, r), make([]float64, r)
	for i := range out {
		for k := range d {
			d[k] = (weight(i, k) - 1/sp.Sigma[k]) * sp.UZ[k]
		}
		sse := ee
		for k := range d {
			v := 0.0
			row := zz[k*r : k*r+r]
			for l, x := range d {
				v += row[l] * x
			}
			zzd[k] = v
			sse += d[k] * (v - 2*ze[k])
		}
		out[i] = max(0, sse)
	}
	return out
}

// residualMoments returns Z'e for the residuals of the slopes, Z the held-out rows along the directions.
func (h *HeldOut) residualMoments(sp *Spectrum, slopes []float64) []float64 {
	p, r := h.P, sp.Rank
	out := make([]float64, r)
	for i, col := range sp.Cols {
		if sp.scale[col] == 0 {
			continue
		}
		v := h.r[col]
		for j := range p {
			if slopes[j] != 0 {
				v = v.Sub(h.s[col*p+j].MulFloat(slopes[j]))
			}
		}
		x := v.Float() / sp.scale[col]
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
	if least := sp.Sigma[r-1]; least*least < thin {
		return h.turnedExactly(sp)
	}
	s := mat.NewDense(m, m, nil)
	for i, a := range sp.Cols {
		for j, b := range sp.Cols {
			if d := sp.scale[a] * sp.scale[b]; d > 0 {
				s.Set(i, j, h.s[a*h.P+b].Float()/d)
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
