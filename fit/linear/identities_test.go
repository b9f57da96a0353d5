package linear

import (
	"math"
	"math/rand/v2"
	"testing"

	"modelmend/fit/reduction"
)

func near(t *testing.T, name string, got, want, rel float64) {
	t.Helper()
	gap := math.Abs(got - want)
	if !(gap <= rel*math.Max(math.Abs(want), 1e-300)) {
		t.Errorf("%s: got %.17g, want %.17g, relative gap %.2g", name, got, want, gap/math.Abs(want))
	}
}

// random makes n rows of p regressors that share a common part, and y.
func random(seed uint64, n, p int, common float64) ([]reduction.Column, reduction.Column) {
	rng := rand.New(rand.NewPCG(seed, 99))
	x := make([]reduction.Column, p)
	for j := range x {
		x[j].Hi = make([]float64, n)
	}
	y := reduction.Column{Hi: make([]float64, n)}
	for i := range n {
		c := rng.NormFloat64()
		for j := range x {
			x[j].Hi[i] = (common*c + rng.NormFloat64()) * math.Pow(10, float64(j%3)) // unlike units
			y.Hi[i] += x[j].Hi[i] * math.Pow(10, -float64(j%3)) * float64(j-1)
		}
		y.Hi[i] += 3 + 2*rng.NormFloat64()
	}
	return x, y
}

// subset takes rows from a to b.
func subset(x []reduction.Column, y reduction.Column, keep func(int) bool) ([]reduction.Column, reduction.Column) {
	out := make([]reduction.Column, len(x))
	var yy reduction.Column
	for i := range y.Hi {
		if !keep(i) {
			continue
		}
		for j := range x {
			out[j].Hi = append(out[j].Hi, x[j].Hi[i])
		}
		yy.Hi = append(yy.Hi, y.Hi[i])
	}
	return out, yy
}

// TestInflationIdentities checks closed forms and invariances of inflation factors, by hand.
func TestInflationIdentities(t *testing.T) {
	for seed := range uint64(20) {
		x, y := random(seed, 60, 5, 2)
		s := sampleOf(t, x, y, true)
		vif := s.InflationFactors()
		sum, inverse, lambda := 0.0, 0.0, 0.0
		for _, v := range vif {
			sum += v
			if v < 1 {
				t.Errorf("factor %v below 1", v)
			}
		}
		for _, sg := range s.Spectrum(nil).Sigma {
			inverse += 1 / (sg * sg)
			lambda += sg * sg
		}
		near(t, "sum of factors is the sum of inverse eigenvalues", sum, inverse, 1e-11)
		near(t, "eigenvalues sum to p", lambda, 5, 1e-13)
		for j := range x {
			var others []int
			for k := range x {
				if k != j {
					others = append(others, k)
				}
			}
			_, _, r2 := s.Auxiliary(j, others)
			near(t, "factor is 1/(1-R2) of the auxiliary regression", vif[j], 1/(1-r2), 1e-10)
			near(t, "generalised factor of one column", s.GeneralizedInflation([]int{j}), vif[j], 1e-10)
		}
		// Units and shifts change nothing.
		moved := make([]reduction.Column, len(x))
		for j := range x {
			for _, v := range x[j].Hi {
				moved[j].Hi = append(moved[j].Hi, 8*v+16)
			}
		}
		for j, v := range sampleOf(t, moved, y, true).InflationFactors() {
			near(t, "units and shifts", v, vif[j], 1e-11)
		}
		two := s.Keep([]int{0, 1})
		r := two.Correlation(0, 1)
		near(t, "two regressors", two.InflationFactors()[0], 1/(1-r*r), 1e-12)
	}
}

func TestSquareOnWholeNumbers(t *testing.T) {
	// By hand: for x = 1..N the squared correlation of x and x^2 gives 19.90625 at N = 10; exact rational arithmetic gives the
	// others; the limit is 16.
	for n, want := range map[int]float64{10: 19.90625, 100: 16.30762304921969, 1000: 16.03007512030048} {
		var x, x2 reduction.Column
		for i := 1; i <= n; i++ {
			x.Hi = append(x.Hi, float64(i))
			x2.Hi = append(x2.Hi, float64(i*i))
		}
		for _, v := range sampleOf(t, []reduction.Column{x, x2}, x, true).InflationFactors() {
			near(t, "x and its square", v, want, 1e-14)
		}
	}
}

// TestRidgeIdentities: penalty 0 is least squares; a growing penalty shrinks the slopes in the metric of D and the degrees of
// freedom, to zero; ridge is least squares on data with rows sqrt(k) D^(1/2) added (by hand).
func TestRidgeIdentities(t *testing.T) {
	for seed := range uint64(10) {
		x, y := random(seed, 40, 4, 1.5)
		s := sampleOf(t, x, y, true)
		sp := s.Spectrum(nil)
		ols := s.LeastSquares(false).Slopes
		for j, b := range sp.RidgeSlopes(0) {
			near(t, "penalty 0", b, ols[j], 1e-10)
		}
		last, lastDegrees := math.Inf(1), math.Inf(1)
		for _, k := range []float64{0, 1e-4, 0.01, 0.3, 2, 50, 1e6} {
			norm := 0.0
			slopes := sp.RidgeSlopes(k)
			for j, b := range slopes {
				norm += b * b * s.S[j*s.P+j].Float()
			}
			if norm >= last || sp.RidgeDegrees(k) >= lastDegrees {
				t.Errorf("penalty %v: norm or degrees of freedom do not fall", k)
			}
			last, lastDegrees = norm, sp.RidgeDegrees(k)
		}
		if last > 1e-6*s.YY.Float() {
			t.Errorf("slopes do not vanish: %v", last)
		}
		const k = 0.37
		augmented(t, x, y, s, k, sp.RidgeSlopes(k))
		for j, b := range sp.ComponentSlopes(4) {
			near(t, "all components", b, ols[j], 1e-10)
		}
		m := sp.RidgeMap(k)
		w := s.PenalizedInverse(k, nil)
		for i := range m {
			near(t, "two ways to the ridge map", m[i], w[i], 1e-9)
		}
		for i, v := range sp.RidgeSampling(k) {
			near(t, "W S W", v, s.sandwich(w)[i].Float(), 1e-8)
		}
		// Sparing a regressor: the same as the direct solution.
		spared := s.Spectrum([]int{2}).RidgeSlopes(k)
		direct := s.PenalizedInverse(k, []int{2})
		for i := range spared {
			v := 0.0
			for j := range spared {
				v += direct[i*s.P+j] * s.R[j].Float()
			}
			near(t, "spared regressor", spared[i], v, 1e-9)
		}
	}
}

func augmented(t *testing.T, x []reduction.Column, y reduction.Column, s *Sample, k float64, want []float64) {
	t.Helper()
	n, p := len(y.Hi), len(x)
	ax := make([]reduction.Column, p)
	var ay reduction.Column
	for i := range n {
		for j := range x {
			ax[j].Hi = append(ax[j].Hi, x[j].Hi[i]-s.Mean[j].Float())
		}
		ay.Hi = append(ay.Hi, y.Hi[i]-s.MeanY.Float())
	}
	for l := range p {
		for j := range x {
			v := 0.0
			if j == l {
				v = math.Sqrt(k * s.S[j*p+j].Float())
			}
			ax[j].Hi = append(ax[j].Hi, v)
		}
		ay.Hi = append(ay.Hi, 0)
	}
	for j, b := range sampleOf(t, ax, ay, false).LeastSquares(false).Slopes {
		near(t, "augmented rows", want[j], b, 1e-9)
	}
}

// TestTrainingIsTotalMinusFold: moments of the training rows got by subtraction give the same fit and the same held-out
// error as rows taken one by one; the closed form of leave-one-out residuals e/(1-h) holds (by hand).
func TestTrainingIsTotalMinusFold(t *testing.T) {
	x, y := random(5, 45, 4, 3)
	fold := make([]int32, 45)
	for i := range fold {
		fold[i] = int32(i)
	}
	red, err := reduction.Reduce(x, y, true, reduction.Split{Cell: fold, Cells: 45, Fold: [][]int32{fold}, Counts: []int{45}}, 2)
	if err != nil {
		t.Fatal(err)
	}
	all := NewSample(red, red.Total)
	full := all.LeastSquares(true)
	for f, part := range red.Parts[0] {
		train := NewSample(red, red.Total.Minus(part))
		fit := train.LeastSquares(false)
		tx, ty := subset(x, y, func(i int) bool { return i != f })
		direct := sampleOf(t, tx, ty, true).LeastSquares(false)
		for j := range fit.Slopes {
			near(t, "slopes by subtraction", fit.Slopes[j], direct.Slopes[j], 1e-12)
		}
		sse := NewHeldOut(red, part, train).SSE(fit.Slopes)
		// e_i and h_ii of the full fit
		e := y.Hi[f] - full.Constant(all)
		h := 1 / 45.0
		for i := range x {
			e -= x[i].Hi[f] * full.Slopes[i]
			for j := range x {
				h += (x[i].Hi[f] - all.Mean[i].Float()) * full.Inverse[i*4+j] * (x[j].Hi[f] - all.Mean[j].Float())
			}
		}
		near(t, "leave-one-out residual", math.Sqrt(sse), math.Abs(e/(1-h)), 1e-9)
	}
}

// TestOmittedVariableAndPartialling: b_short - b_long = Gamma b_long(dropped); slopes of a partialled-out regression are those of
// the long one (Frisch and Waugh 1933; Lovell 1963); both exact.
func TestOmittedVariableAndPartialling(t *testing.T) {
	for seed := range uint64(10) {
		x, y := random(seed, 50, 4, 1)
		s := sampleOf(t, x, y, true)
		long := s.LeastSquares(false).Slopes
		keep := []int{0, 1, 3}
		short := s.Keep(keep).LeastSquares(false).Slopes
		gamma, _, _ := s.Auxiliary(2, keep)
		for i, j := range keep {
			near(t, "omitted-variable identity", short[i]-long[j], gamma[i]*long[2], 1e-9)
		}
		// Residual of x0 on the others, then y on it alone.
		others := []int{1, 2, 3}
		g, c, _ := s.Auxiliary(0, others)
		var r reduction.Column
		for i := range y.Hi {
			v := x[0].Hi[i] - c
			for k, o := range others {
				v -= g[k] * x[o].Hi[i]
			}
			r.Hi = append(r.Hi, v)
		}
		near(t, "partialled-out slope", sampleOf(t, []reduction.Column{r}, y, true).LeastSquares(false).Slopes[0], long[0], 1e-9)
	}
}

// TestRestrictions: F of the restriction equals the rise of the residual sum of squares; a selection of columns is the same as
// restricting the others to zero; restrictions hold exactly; contradictions are refused.
func TestRestrictions(t *testing.T) {
	x, y := random(3, 50, 4, 1)
	s := sampleOf(t, x, y, true)
	free := s.LeastSquares(true)
	drop := []float64{0, 0, 1, 0}
	fit, err := s.Restrict(drop, []float64{0})
	if err != nil {
		t.Fatal(err)
	}
	kept := s.Keep([]int{0, 1, 3}).LeastSquares(true)
	near(t, "residual sum of squares", fit.RSS, kept.RSS, 1e-12)
	near(t, "Wald", fit.Wald, kept.RSS-free.RSS, 1e-9)
	for i, j := range []int{0, 1, 3} {
		near(t, "slopes", fit.Slopes[j], kept.Slopes[i], 1e-11)
		near(t, "variance", fit.Covariance[j*4+j], kept.Inverse[i*3+i], 1e-11)
	}
	eq := []float64{1, 0, 0, 2, 0, 1, -1, 0}
	fit, err = s.Restrict(eq, []float64{3, 0.5})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "first restriction", fit.Slopes[0]+2*fit.Slopes[3], 3, 1e-12)
	near(t, "second restriction", fit.Slopes[1]-fit.Slopes[2], 0.5, 1e-11)
	near(t, "its residual sum of squares", fit.RSS, s.RSS(fit.Slopes), 1e-11)
	if _, err := s.Restrict([]float64{1, 0, 0, 0, 2, 0, 0, 0}, []float64{1, 3}); err == nil {
		t.Error("contradicting restrictions were accepted")
	}
}

// TestRankTolerance: one step each side of the tolerance. x2 = x1 + d*z with z orthogonal to x1 has a centred smallest
// singular value of about |d|/sqrt(2) relative to the largest, by hand.
func TestRankTolerance(t *testing.T) {
	var x1, z, y []float64
	for i := range 64 {
		s := float64(1 - 2*(i&1))
		u := float64(1 - 2*(i>>1&1))
		x1, z, y = append(x1, s), append(z, u), append(y, s+u+float64(i%5))
	}
	for _, c := range []struct {
		d         float64
		dependent bool
	}{{1e-11, false}, {1e-12, false}, {1e-14, true}, {0, true}} {
		var x2 reduction.Column
		for i := range x1 {
			hi, lo := x1[i]+c.d*z[i], 0.0
			lo = c.d*z[i] - (hi - x1[i]) // the digits that float64 drops
			x2.Hi, x2.Lo = append(x2.Hi, hi), append(x2.Lo, lo)
		}
		fit := sampleOf(t, []reduction.Column{{Hi: x1}, x2}, reduction.Column{Hi: y}, true).LeastSquares(true)
		if got := fit.NotIdentified != nil; got != c.dependent {
			t.Errorf("distance %g: taken for dependent: %v, want %v", c.d, got, c.dependent)
		}
	}
}

// TestPooledSpectrumOfDependentDesign: with x3 = x1 + x2 exactly, the fit and estimable coefficients are those of the design without x3.
func TestPooledSpectrumOfDependentDesign(t *testing.T) {
	x, y := random(8, 40, 3, 1)
	sum := reduction.Column{}
	for i := range y.Hi {
		sum.Hi = append(sum.Hi, math.Round(x[0].Hi[i]*1e6)/1e6)
		x[0].Hi[i] = sum.Hi[i]
		x[1].Hi[i] = math.Round(x[1].Hi[i]*1e6) / 1e6
		hi := x[0].Hi[i] + x[1].Hi[i]
		b := hi - x[0].Hi[i]
		sum.Hi[i] = hi
		sum.Lo = append(sum.Lo, (x[0].Hi[i]-(hi-b))+(x[1].Hi[i]-b))
	}
	s := sampleOf(t, append(append([]reduction.Column{}, x...), sum), y, true)
	fit := s.LeastSquares(true)
	if fit.Rank != 3 || fit.NotIdentified == nil {
		t.Fatalf("rank %d, not identified %v", fit.Rank, fit.NotIdentified)
	}
	for j, want := range []bool{true, true, false, true} {
		if fit.NotIdentified[j] != want {
			t.Errorf("column %d: not identified is %v", j, fit.NotIdentified[j])
		}
	}
	base := sampleOf(t, x, y, true).LeastSquares(true)
	near(t, "residual sum of squares", fit.RSS, base.RSS, 1e-11)
	near(t, "the identified slope", fit.Slopes[2], base.Slopes[2], 1e-11)
	near(t, "its variance", fit.Inverse[2*4+2], base.Inverse[2*3+2], 1e-10)
	deps := s.Dependencies()
	if len(deps) != 1 {
		t.Fatalf("dependencies: %v", deps)
	}
	vif := s.InflationFactors()
	for j, want := range []bool{true, true, false, true} {
		if math.IsInf(vif[j], 1) != want {
			t.Errorf("factor of column %d is %v", j, vif[j])
		}
	}
}

// TestPathAgreesWithPlainErrors: the error curve along the directions is that of the slopes one by one, on tame and on thin designs.
func TestPathAgreesWithPlainErrors(t *testing.T) {
	for _, common := range []float64{1, 30, 3000} {
		x, y := random(12, 60, 5, common)
		fold := make([]int32, 60)
		for i := range fold {
			fold[i] = int32(i % 6)
		}
		red, err := reduction.Reduce(x, y, true, reduction.Split{Cell: fold, Cells: 6, Fold: [][]int32{{0, 1, 2, 3, 4, 5}}, Counts: []int{6}}, 1)
		if err != nil {
			t.Fatal(err)
		}
		train := NewSample(red, red.Total.Minus(red.Parts[0][2]))
		held := NewHeldOut(red, red.Parts[0][2], train)
		sp := train.Spectrum(nil)
		penalties := []float64{0, 1e-8, 1e-4, 0.1, 3, 1e4}
		got := held.PathSSE(sp, len(penalties), func(i, k int) float64 { return sp.Sigma[k] / (sp.Sigma[k]*sp.Sigma[k] + penalties[i]) })
		for i, k := range penalties {
			near(t, "ridge", got[i], held.SSE(sp.RidgeSlopes(k)), 1e-9)
		}
		got = held.PathSSE(sp, 6, func(m, k int) float64 {
			if k >= m {
				return 0
			}
			return 1 / sp.Sigma[k]
		})
		for m, v := range got {
			near(t, "components", v, held.SSE(sp.ComponentSlopes(m)), 1e-9)
		}
	}
}
