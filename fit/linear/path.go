package linear

import (
	"math"
	"sync"

	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/mat"
)

// PathSSE returns the sums of squared prediction errors on the held-out rows of count fits that differ only in how they weigh the directions of
// the spectrum: fit i has the coefficient weight(i, k) * UZ[k] on direction k (1/Sigma[k] is least squares). sp must be the spectrum of the
// training sample that h is centred on.
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
	scratch := paths.Get().(*[]float64)
	defer paths.Put(scratch)
	if need := (r + 1) * count; cap(*scratch) < need {
		*scratch = make([]float64, need)
	}
	d, sum := (*scratch)[:r*count], (*scratch)[r*count:(r+1)*count]
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

// paths holds the scratch of PathSSE, which is called so often that its garbage would count.
var paths = sync.Pool{New: func() any { return new([]float64) }}

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
		t := sp.directions()
		a.ze = h.residualMoments(t, base)
		a.zz = h.turned(t, sp.Sigma[sp.Rank-1])
	}
	h.along = a
	return a
}

// directions returns the slopes, in the user's units, that a unit step along each direction of the spectrum makes, p x rank: the spared regressors, if
// any, give way as least squares of the training rows has it.
func (sp *Spectrum) directions() []float64 {
	r := sp.Rank
	out := make([]float64, sp.p*r)
	for i, col := range sp.Cols {
		copy(out[col*r:(col+1)*r], sp.V[i*r:(i+1)*r])
	}
	if len(sp.spare) > 0 {
		std := make([]float64, sp.p)
		for k := range r {
			for j := range std {
				std[j] = out[j*r+k]
			}
			sp.giveWay(std)
			for j, v := range std {
				out[j*r+k] = v
			}
		}
	}
	for j := range sp.p {
		row := out[j*r : (j+1)*r]
		f := 0.0
		if sp.scale[j] > 0 {
			f = 1 / sp.scale[j]
		}
		for k := range row {
			row[k] *= f
		}
	}
	return out
}

// giveWay fills in the spared slopes (unit-length columns) that go with a step in the others.
func (sp *Spectrum) giveWay(std []float64) {
	if sp.f != nil {
		exact := numbers(std)
		z := sp.z
		sp.z = make([]number, len(z))
		sp.backToSpared(exact, len(sp.Cols))
		sp.z = z
		copy(std, floats(exact))
		return
	}
	for k := len(sp.swept) - 1; k >= 0; k-- {
		s := sp.swept[k]
		v := 0.0
		for j, x := range s.row {
			if j != s.col {
				v -= x * std[j]
			}
		}
		std[s.col] = v / s.row[s.col]
	}
}

// residualMoments returns Z'e for the residuals of the slopes, Z the held-out rows along the directions t.
func (h *HeldOut) residualMoments(t []float64, slopes []float64) []float64 {
	p := h.P
	r := len(t) / max(1, p)
	out := make([]float64, r)
	for col := range p {
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
		for k, w := range t[col*r : (col+1)*r] {
			out[k] += w * x
		}
	}
	return out
}

// thin is the eigenvalue below which float64 would lose digits that the error curve needs.
const thin = 1e-5

// turned returns Z'Z along the directions t, r x r.
func (h *HeldOut) turned(t []float64, least float64) []float64 {
	p := h.P
	r := len(t) / p
	if h.light == nil && least*least < thin {
		return floats((&Sample{P: p, S: h.s, R: h.r, Mean: make([]number, p)}).Transform(t, r).S)
	}
	// Columns in units of their own length, so that products are of one size.
	scale, scaled := make([]float64, p), make([]float64, p*r)
	s := make([]float64, p*p)
	at := func(i, j int) float64 {
		if h.light != nil {
			return h.light.s[i*p+j]
		}
		return h.s[i*p+j].Float()
	}
	for j := range p {
		if d := at(j, j); d > 0 {
			scale[j] = math.Sqrt(d)
		} else {
			scale[j] = 1
		}
		for k := range r {
			scaled[j*r+k] = t[j*r+k] * scale[j]
		}
	}
	for i := range p {
		for j := range p {
			s[i*p+j] = at(i, j) / scale[i] / scale[j]
		}
	}
	v := mat.NewDense(p, r, scaled)
	var sv, out mat.Dense
	sv.Mul(mat.NewDense(p, p, s), v)
	out.Mul(v.T(), &sv)
	return out.RawMatrix().Data
}
