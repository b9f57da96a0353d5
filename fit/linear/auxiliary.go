package linear

import (
	"math"
)

// InflationFactors returns the variance inflation factor of each regressor,
//
//	v_j = 1 / (1 - R_j^2) = S_jj (S^-1)_jj,
//
// where R_j^2 comes from regressing column j on the other columns and the constant (uncentred in a model without
// constant). Length p, no unit, at least 1. It is +Inf for a column that depends exactly on the others or does not
// vary. Cost O(p^3).
//
// Source: Marquardt (1970), Technometrics 12(3), 591-612.
func (s *Sample) InflationFactors() []float64 {
	fit := s.LeastSquares(true)
	out := make([]float64, s.P)
	if fit.NotIdentified == nil {
		for j := range out {
			out[j] = math.Max(1, fit.inverse[j*s.P+j].Mul(s.S[j*s.P+j]).Float())
		}
		return out
	}
	// With exact dependencies: the others' factors come from any largest independent set, which contains them all.
	a, _ := s.scaled()
	cols := factorise(s.P, a, nil).pivots[:fit.Rank]
	kept := s.Keep(cols)
	inv := kept.LeastSquares(true)
	for j := range out {
		out[j] = math.Inf(1)
	}
	for i, c := range cols {
		if !fit.NotIdentified[c] {
			out[c] = math.Max(1, inv.Inverse[i*len(cols)+i]*s.S[c*s.P+c].Float())
		}
	}
	return out
}

// LogDeterminant returns the log determinant of the correlation matrix of the regressors in cols; -Inf when they are
// exactly dependent. The empty set has 0.
func (s *Sample) LogDeterminant(cols []int) float64 {
	if len(cols) == 0 {
		return 0
	}
	k := s.Keep(cols)
	a, _ := k.scaled()
	f := factorise(k.P, a, nil)
	if f.rank < k.P {
		return math.Inf(-1)
	}
	sum := 0.0
	for i, c := range f.pivots {
		sum += 2 * math.Log(f.l[c*f.p+i].Float())
	}
	return sum
}

// GeneralizedInflation returns det R11 det R22 / det R for the regressors in group against all others: the squared
// ratio of the volumes of their joint confidence ellipsoids. It is 1 when group is everything and +Inf where an exact
// dependency crosses the two sets.
//
// Source: Fox and Monette (1992), Journal of the American Statistical Association 87, 178-183.
func (s *Sample) GeneralizedInflation(group []int) float64 {
	in := make([]bool, s.P)
	for _, j := range group {
		in[j] = true
	}
	var rest, all []int
	for j := range s.P {
		if s.S[j*s.P+j].Hi == 0 {
			continue
		}
		all = append(all, j)
		if !in[j] {
			rest = append(rest, j)
		}
	}
	d := s.LogDeterminant(group) + s.LogDeterminant(rest) - s.LogDeterminant(all)
	if math.IsNaN(d) {
		return math.NaN()
	}
	return math.Max(1, math.Exp(d))
}

// Auxiliary regresses regressor left on the regressors in cols (and the constant): coefficients in the user's units in
// the order of cols, the constant, and R2 (uncentred without constant). Dependent cols share the shortest solution.
func (s *Sample) Auxiliary(left int, cols []int) (coef []float64, constant, r2 float64) {
	k := s.Keep(cols)
	for i, c := range cols {
		k.R[i] = s.S[c*s.P+left]
	}
	k.YY = s.S[left*s.P+left]
	k.MeanY = s.Mean[left]
	fit := k.LeastSquares(false)
	r2 = math.NaN()
	if yy := k.YY.Float(); yy > 0 {
		r2 = math.Max(0, 1-fit.RSS/yy)
	}
	return fit.Slopes, fit.Constant(k), r2
}

// Dependencies returns the exact dependencies among the regressors, each as a regressor written on the others that it
// depends on: a pivoted factorisation in double-double leaves one such regressor for every missing rank.
func (s *Sample) Dependencies() []Dependency {
	a, scale := s.scaled()
	f := factorise(s.P, a, nil)
	rank := min(f.rank, s.Spectrum(nil).Rank)
	isPivot := make([]bool, s.P)
	for _, c := range f.pivots[:rank] {
		isPivot[c] = true
	}
	var out []Dependency
	for j := range s.P {
		if isPivot[j] {
			continue
		}
		d := Dependency{Left: j}
		if scale[j].Hi > 0 {
			coef, _, _ := s.Auxiliary(j, f.pivots[:rank])
			for i, c := range f.pivots[:rank] {
				if math.Abs(coef[i])*scale[c].Float() > 1e-9*scale[j].Float() {
					d.Columns = append(d.Columns, c)
				}
			}
			d.Coefficients, d.Constant, _ = s.Auxiliary(j, d.Columns)
		} else {
			d.Constant = s.Mean[j].Float()
		}
		out = append(out, d)
	}
	return out
}

// Dependency is an exact relation x_Left = Constant + sum of Coefficients * x_Columns.
type Dependency struct {
	Left         int
	Columns      []int
	Coefficients []float64
	Constant     float64
}

// VouchedDigits returns how many decimal digits of the coefficients the arithmetic can vouch for,
//
//	31 - 2 log10(condition number of the unit-length columns),
//
// between 0 and 15: double-double carries 31 digits and cross-products square the condition number. It is a
// conservative bound for the arithmetic, not for the data.
func VouchedDigits(condition float64) float64 {
	if math.IsInf(condition, 1) || math.IsNaN(condition) {
		return 0
	}
	return math.Max(0, math.Min(15, 31-2*math.Log10(condition)))
}
