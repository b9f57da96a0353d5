package linear

import (
	"errors"
	"math"

	"modelmend/fit/doubledouble"
)

// ErrRestrictions is returned when restrictions contradict or repeat each other, or the design is exactly dependent.
var ErrRestrictions = errors.New("the restrictions are not independent of each other, or the design is exactly dependent")

// Restricted is a least-squares fit under linear restrictions.
type Restricted struct {
	Slopes []float64
	RSS    float64
	// Covariance over sigma^2 of the slopes, p x p row-major: S^-1 - S^-1 R'(R S^-1 R')^-1 R S^-1.
	Covariance []float64
	// Wald is (Rb-r)'(R S^-1 R')^-1(Rb-r), the rise of the residual sum of squares.
	Wald float64
}

// Restrict fits the slopes under R b = r, R q x p row-major:
//
//	b_R = b - S^-1 R'(R S^-1 R')^-1 (R b - r).
//
// It returns ErrRestrictions when R does not have full row rank. Cost O(p^3) in double-double.
//
// Source: Theil (1971), Principles of Econometrics, section 1.8 (from memory).
func (s *Sample) Restrict(r []float64, rhs []float64) (*Restricted, error) {
	p, q := s.P, len(rhs)
	free := s.LeastSquares(true)
	if free.NotIdentified != nil {
		return nil, ErrRestrictions
	}
	// g = S^-1 R' (p x q), m = R g (q x q), gap = R b - r.
	g, m, gap := make([]number, p*q), make([]number, q*q), make([]number, q)
	for i := range p {
		for k := range q {
			for j := range p {
				if w := r[k*p+j]; w != 0 {
					g[i*q+k] = g[i*q+k].Add(free.inverse[i*p+j].MulFloat(w))
				}
			}
		}
	}
	for k := range q {
		gap[k] = doubledouble.From(-rhs[k])
		for j := range p {
			w := r[k*p+j]
			gap[k] = gap[k].Add(free.slopes[j].MulFloat(w))
			for l := range q {
				m[k*q+l] = m[k*q+l].Add(g[j*q+l].MulFloat(w))
			}
		}
	}
	inv, err := invertSymmetric(m, q)
	if err != nil {
		return nil, err
	}
	out := &Restricted{Slopes: make([]float64, p), Covariance: make([]float64, p*p)}
	step := make([]number, q) // m^-1 gap
	var wald number
	for k := range q {
		for l := range q {
			step[k] = step[k].Add(inv[k*q+l].Mul(gap[l]))
		}
		wald = wald.Add(step[k].Mul(gap[k]))
	}
	for i := range p {
		b := free.slopes[i]
		for k := range q {
			b = b.Sub(g[i*q+k].Mul(step[k]))
		}
		out.Slopes[i] = b.Float()
		for j := range p {
			v := free.inverse[i*p+j]
			for k := range q {
				for l := range q {
					v = v.Sub(g[i*q+k].Mul(inv[k*q+l]).Mul(g[j*q+l]))
				}
			}
			out.Covariance[i*p+j] = v.Float()
		}
	}
	out.Wald = math.Max(0, wald.Float())
	out.RSS = free.RSS + out.Wald
	return out, nil
}

// invertSymmetric inverts a positive definite matrix after scaling it to unit diagonal.
func invertSymmetric(m []number, q int) ([]number, error) {
	scale := make([]number, q)
	for k := range q {
		if m[k*q+k].Hi <= 0 {
			return nil, ErrRestrictions
		}
		scale[k] = m[k*q+k].Sqrt()
	}
	a := make([]number, q*q)
	for k := range q {
		for l := range q {
			a[k*q+l] = m[k*q+l].Div(scale[k]).Div(scale[l])
		}
	}
	f := factorise(q, a, nil)
	if f.rank < q {
		return nil, ErrRestrictions
	}
	return unscale(f.inverse(), scale), nil
}
