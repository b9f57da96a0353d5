package linear

import (
	"fmt"
	"math"
	"slices"
	"testing"
)

// deflated is partial least squares as the textbooks write it, on rows: the direction is X'y, its score is taken out of every column, and so on. It
// returns the fitted values for each number of components.
func deflated(x [][]float64, y []float64) [][]float64 {
	n := len(y)
	fit := make([]float64, n)
	out := [][]float64{slices.Clone(fit)}
	for range x {
		t := make([]float64, n)
		for _, col := range x {
			w := 0.0
			for i := range n {
				w += col[i] * y[i]
			}
			for i := range n {
				t[i] += w * col[i]
			}
		}
		tt, ty := 0.0, 0.0
		for i := range n {
			tt += t[i] * t[i]
			ty += t[i] * y[i]
		}
		for _, col := range x {
			load := 0.0
			for i := range n {
				load += col[i] * t[i] / tt
			}
			for i := range n {
				col[i] -= load * t[i]
			}
		}
		for i := range n {
			fit[i] += ty / tt * t[i]
		}
		out = append(out, slices.Clone(fit))
	}
	return out
}

// TestKrylovEqualsDeflation: partial least squares from cross-products gives the fitted values of deflation on rows, for samples of both kinds.
func TestKrylovEqualsDeflation(t *testing.T) {
	for seed := range uint64(6) {
		const n, p = 40, 7
		x, y := random(seed, n, p, 2)
		u, sums, written := lightPair(t, seed, n, p, true, false)
		total := make([]float64, len(sums[0]))
		for _, fold := range sums {
			axpy(1, fold, total)
		}
		light := NewLightSample(u, total)
		heavy := NewSample(written, written.Total)
		plain := sampleOf(t, x, y, true)
		cols := make([][]float64, p)
		yc := slices.Clone(y.Hi)
		center := func(v []float64) {
			m := 0.0
			for _, a := range v {
				m += a / n
			}
			for i := range v {
				v[i] -= m
			}
		}
		center(yc)
		for j := range cols {
			cols[j] = slices.Clone(x[j].Hi)
			center(cols[j])
			l := norm(cols[j])
			for i := range cols[j] {
				cols[j][i] /= l
			}
		}
		raw := make([][]float64, p)
		for j := range raw {
			raw[j] = slices.Clone(cols[j])
		}
		want := deflated(cols, yc)
		sp := plain.Spectrum(nil)
		for m, weights := range sp.Krylov() {
			b := sp.WeightedSlopes(weights)
			for i := range n {
				fit := 0.0
				for j := range p {
					fit += b[j] * plain.Scale()[j].Float() * raw[j][i]
				}
				if math.Abs(fit-want[m][i]) > 1e-9*norm(yc) {
					t.Fatalf("seed %d, %d components, row %d: %v, by deflation %v", seed, m, i, fit, want[m][i])
				}
			}
		}
		a, b := light.Spectrum(nil), heavy.Spectrum(nil)
		ka, kb := a.Krylov(), b.Krylov()
		for m := range ka {
			for j, v := range a.WeightedSlopes(ka[m]) {
				near(t, fmt.Sprintf("seed %d, %d components, slope %d", seed, m, j), v, b.WeightedSlopes(kb[m])[j], 1e-7)
			}
		}
		for j, v := range plain.LeastSquares(false).Slopes {
			near(t, "all components", sp.WeightedSlopes(sp.Krylov()[p])[j], v, 1e-9)
		}
	}
}

// TestKrylovEndsEarly: on uncorrelated regressors of equal variance the first component is already least squares (by hand: R is the unit matrix, so that
// r, Rr, ... are one direction).
func TestKrylovEndsEarly(t *testing.T) {
	sp := &Spectrum{Rank: 3, Sigma: []float64{1, 1, 1}, UZ: []float64{3, -1, 2}}
	for m, w := range sp.Krylov() {
		for k, v := range w {
			want := 1.0
			if m == 0 {
				want = 0
			}
			if math.Abs(v-want) > 1e-14 {
				t.Errorf("%d components, direction %d: %v, want %v", m, k, v, want)
			}
		}
	}
	// Two directions, one component: b = r (r'r)/(r'Rr) with r = (2 u1, u2), R = diag(4, 1): u = (1, 1) gives r'r = 5, r'Rr = 17, so that
	// the coefficients are 10/17 and 5/17 (by hand).
	sp = &Spectrum{Rank: 2, Sigma: []float64{2, 1}, UZ: []float64{1, 1}}
	w := sp.Krylov()[1]
	near(t, "first coefficient", w[0], 10.0/17, 1e-15)
	near(t, "second coefficient", w[1], 5.0/17, 1e-15)
}
