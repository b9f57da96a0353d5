package linear

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"modelmend/fit/reduction"
)

// conditions returns how far the conditions of a minimum are missed (Zou and Hastie 2005; by hand from the subgradient of the size): r - Cb - l2 b is
// l1 times the sign of b where b is not zero, and no larger than l1 in size elsewhere.
func conditions(c, r, b []float64, l1, l2 float64) float64 {
	worst := 0.0
	p := len(r)
	for i := range p {
		g := r[i] - l2*b[i]
		for j := range p {
			g -= c[i*p+j] * b[j]
		}
		if b[i] != 0 {
			worst = math.Max(worst, math.Abs(g-l1*math.Copysign(1, b[i])))
		} else {
			worst = math.Max(worst, math.Abs(g)-l1)
		}
	}
	return worst
}

// TestNetConditions: along the path the conditions hold to 1e-10 of a correlation, for tangled regressors and mixes from ridge to lasso.
func TestNetConditions(t *testing.T) {
	for seed := range uint64(40) {
		rng := rand.New(rand.NewPCG(seed, 8))
		p := 1 + rng.IntN(25)
		common := []float64{0, 1, 4, 15}[seed%4]
		x, y := random(seed, p+8+rng.IntN(60), p, common)
		s := sampleOf(t, x, y, seed%3 > 0)
		c, r, _, _ := s.Standardized()
		for _, mix := range []float64{0, 0.05, 0.5, 0.9, 1} {
			net := NewNet(c, r)
			net.Know(s.Spectrum(nil))
			most := 0
			for i := range 80 {
				penalty := 2 * math.Pow(0.85, float64(i))
				l1, l2 := mix*penalty, (1-mix)*penalty
				b := net.Solve(l1, l2)
				if v := conditions(c, r, b, l1, l2); v > 1e-10 {
					t.Fatalf("seed %d, mix %g, penalty %g: conditions missed by %g", seed, mix, penalty, v)
				}
				again := NewNet(c, r).Solve(l1, l2)
				for j := range b {
					if math.Abs(b[j]-again[j]) > 1e-8*(1+math.Abs(b[j])) {
						t.Fatalf("seed %d, mix %g, penalty %g, slope %d: %g after others, %g from zero", seed, mix, penalty, j, b[j], again[j])
					}
				}
				most = max(most, net.Active())
			}
			if most == 0 {
				t.Errorf("seed %d, mix %g: nothing was ever kept", seed, mix)
			}
		}
	}
}

// TestNetClosedForms, by hand: on uncorrelated regressors each slope is its correlation taken towards zero by l1, over 1 + l2; without l1 the net is ridge;
// for two regressors with correlation a, both kept with positive slopes, the slopes are (r1 - l1 - a(r2 - l1)/(1+l2)) / (1+l2 - a²/(1+l2)).
func TestNetClosedForms(t *testing.T) {
	r := []float64{0.5, -0.3, 0.1, 0.2}
	b := NewNet([]float64{1, 0, 0, 0, 0, 1, 0, 0, 0, 0, 1, 0, 0, 0, 0, 1}, r).Solve(0.2, 0.5)
	for j, want := range []float64{0.2, -0.1 / 1.5, 0, 0} {
		if math.Abs(b[j]-want) > 1e-15 {
			t.Errorf("uncorrelated, slope %d: %v, want %v", j, b[j], want)
		}
	}
	const a, l1, l2 = 0.8, 0.1, 0.3
	b = NewNet([]float64{1, a, a, 1}, []float64{0.7, 0.6}).Solve(l1, l2)
	near(t, "two, first slope", b[0], (0.6-a*0.5/(1+l2))/(1+l2-a*a/(1+l2)), 1e-14)
	near(t, "two, second slope", b[1], (0.5-a*0.6/(1+l2))/(1+l2-a*a/(1+l2)), 1e-14)
	x, y := random(3, 50, 6, 3)
	s := sampleOf(t, x, y, true)
	c, r, scale, length := s.Standardized()
	for _, penalty := range []float64{1e-3, 0.1, 7} {
		net := NewNet(c, r)
		ridge := s.Spectrum(nil).RidgeSlopes(penalty)
		for j, v := range net.Solve(0, penalty) {
			near(t, fmt.Sprintf("ridge at %g, slope %d", penalty, j), v*length/scale[j], ridge[j], 1e-10)
		}
		near(t, "degrees of freedom", net.Degrees(penalty), s.Spectrum(nil).RidgeDegrees(penalty), 1e-10)
	}
}

// TestNetOnExactDependencies: a column that is there twice, or has no variation, stops nothing; the conditions still hold. Solved coordinate by coordinate the
// copy gets nothing beside its twin, or shares with it where the penalty is on squares too (equal slopes: by hand, the minimum is unique and
// symmetric).
func TestNetOnExactDependencies(t *testing.T) {
	x, y := random(11, 40, 3, 1)
	flat := reduction.Column{Hi: make([]float64, 40)}
	x = append(x, x[1], flat)
	c, r, _, _ := sampleOf(t, x, y, true).Standardized()
	for _, mix := range []float64{0.5, 1} {
		net := NewNet(c, r)
		for i := range 40 {
			penalty := math.Pow(0.8, float64(i))
			b := net.Solve(mix*penalty, (1-mix)*penalty)
			if v := conditions(c, r, b, mix*penalty, (1-mix)*penalty); v > 1e-10 {
				t.Errorf("mix %g, penalty %g: conditions missed by %g", mix, penalty, v)
			}
			if b[4] != 0 {
				t.Errorf("the column without variation has slope %g", b[4])
			}
			if mix < 1 && math.Abs(b[1]-b[3]) > 1e-9 {
				t.Errorf("penalty %g: twins have slopes %g and %g", penalty, b[1], b[3])
			}
		}
	}
}
