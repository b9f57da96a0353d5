package remedy_test

import (
	"fmt"
	"math"
	"testing"

	"modelmend/remedy"
)

// learned fits the one variant of a remedy with its options set.
func learned(t *testing.T, key string, numbers map[string]float64) *remedy.Fitted {
	t.Helper()
	p, tr, _ := problem(t, asWritten, unit)
	p.Settings = remedy.Settings{Numbers: numbers}
	r, _ := remedy.Find(key)
	vs, not := r.Variants(p)
	if len(vs) != 1 {
		t.Fatalf("%s: %v", key, not)
	}
	return vs[0].Learn(tr)
}

func sameSlopes(t *testing.T, what string, got, want []float64, rel float64) {
	t.Helper()
	for j := range want {
		if math.Abs(got[j]-want[j]) > rel*math.Abs(want[j]) {
			t.Errorf("%s, slope %d: %v, want %v", what, j, got[j], want[j])
		}
	}
}

// TestShrinkingIdentities, by hand: all components of partial least squares are the model left alone; one component is along the covariances with y in
// standardised units; an elastic net without penalty is the model left alone, with all of it on squares ridge at the same penalty, and at a penalty of
// 1/mix nothing.
func TestShrinkingIdentities(t *testing.T) {
	_, tr, _ := problem(t, asWritten, unit)
	s := tr.Sample
	least := s.LeastSquares(false).Slopes
	sameSlopes(t, "all components", learned(t, "partial-least-squares", map[string]float64{"partial-least-squares.count": 6}).Slopes, least, 1e-14)
	sameSlopes(t, "no component", learned(t, "partial-least-squares", map[string]float64{"partial-least-squares.count": 0}).Slopes, make([]float64, 6), 0)
	// b = a r/scale with a such that the residual has no part along the score: a = r'r / r'Rr.
	one := make([]float64, 6)
	var rr, rcr float64
	for i := range one {
		rr += s.CorrelationY(i) * s.CorrelationY(i)
		for j := range one {
			rcr += s.CorrelationY(i) * s.Correlation(i, j) * s.CorrelationY(j)
		}
	}
	for j := range one {
		one[j] = rr / rcr * s.CorrelationY(j) * math.Sqrt(s.YY.Float()) / s.Scale()[j].Float()
	}
	sameSlopes(t, "one component", learned(t, "partial-least-squares", map[string]float64{"partial-least-squares.count": 1}).Slopes, one, 1e-12)

	sameSlopes(t, "penalty zero", learned(t, "elastic-net", map[string]float64{"elastic-net.penalty": 0}).Slopes, least, 1e-14)
	for _, k := range []float64{0.003, 0.2, 5} {
		sameSlopes(t, fmt.Sprintf("mix 0, penalty %g", k), learned(t, "elastic-net", map[string]float64{"elastic-net.mix": 0, "elastic-net.penalty": k}).Slopes,
			s.Spectrum(nil).RidgeSlopes(k), 1e-10)
	}
	for _, mix := range []float64{0.25, 0.5, 1} {
		f := learned(t, "elastic-net", map[string]float64{"elastic-net.mix": mix, "elastic-net.penalty": 1 / mix})
		sameSlopes(t, "the end of the grid", f.Slopes, make([]float64, 6), 0)
		for j, st := range f.Status {
			if st != remedy.Zero {
				t.Errorf("slope %d is %s", j, st)
			}
		}
		// The first regressor enters where the penalty on sizes equals the largest correlation with y.
		most := 0.0
		for j := range 6 {
			most = math.Max(most, math.Abs(s.CorrelationY(j)))
		}
		for step, want := range map[float64]int{1 + 1e-9: 0, 1 - 1e-9: 1} {
			if f := learned(t, "elastic-net", map[string]float64{"elastic-net.mix": mix, "elastic-net.penalty": step * most / mix}); f.Columns != want {
				t.Errorf("mix %g, %g times the largest correlation: %d kept, want %d", mix, step, f.Columns, want)
			}
		}
	}
}

// TestNetRefusesAMixBeyondOne and says why.
func TestNetRefusesAMixBeyondOne(t *testing.T) {
	p, _, _ := problem(t, asWritten, unit)
	p.Settings = remedy.Settings{Numbers: map[string]float64{"elastic-net.mix": 1.5}}
	r, _ := remedy.Find("elastic-net")
	if vs, not := r.Variants(p); len(vs) != 0 || len(not) != 1 {
		t.Errorf("%d variants, %v", len(vs), not)
	}
}
