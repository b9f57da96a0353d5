package tail

import (
	"math"
	"testing"
)

func near(t *testing.T, name string, got, want, rel float64) {
	t.Helper()
	if math.Abs(got-want) > rel*math.Abs(want) {
		t.Errorf("%s: got %.17g, want %.17g, relative gap %.2g", name, got, want, math.Abs(got-want)/math.Abs(want))
	}
}

func TestClosedForms(t *testing.T) {
	// By hand: t with 1 df is the Cauchy law, P(|T|>t) = 2 atan(1/t)/pi; with 2 df P(|T|>t) = 1 - t/sqrt(2+t^2).
	for _, x := range []float64{0.1, 1, 3, 50, 1e6, 1e12} {
		near(t, "t, 1 df", T(x, 1), 2*math.Atan(1/x)/math.Pi, 1e-13)
	}
	near(t, "t, 2 df", T(2, 2), 1-2/math.Sqrt(6), 1e-13)
	// By hand: F(2, d2) has the upper tail (1 + 2f/d2)^(-d2/2).
	for _, f := range []float64{0.5, 3, 400, 1e5} {
		near(t, "F, 2 and 100 df", F(f, 2, 100), math.Pow(1+2*f/100, -50), 1e-12)
	}
	// By hand: T^2 has the F law with 1 and df degrees of freedom.
	near(t, "t squared is F", T(20, 30), F(400, 1, 30), 1e-12)
	// By hand: quantiles tan(pi level/2) for 1 df, and level*sqrt(2/(1-level^2)) for 2 df.
	near(t, "quantile, 1 df", TQuantile(0.95, 1), math.Tan(math.Pi*0.475), 1e-12)
	near(t, "quantile, 2 df", TQuantile(0.95, 2), 0.95*math.Sqrt(2/(1-0.95*0.95)), 1e-12)
}

func TestFarOut(t *testing.T) {
	for _, c := range []struct {
		name      string
		got, want float64
		rel       float64
	}{
		// The series of the incomplete beta function summed with 60 digits by .ci/reference/tails.py.
		{"t(30) beyond 2.042", T(2.042, 30), 0.05002867065619788170, 1e-13},
		{"t(30) beyond 20", T(20, 30), 6.74908366577128660549e-19, 1e-12},
		{"F(3,100) beyond 400", F(400, 3, 100), 1.55232065489861259873e-55, 1e-12},
	} {
		near(t, c.name, c.got, c.want, c.rel)
	}
}

func TestPublishedQuantiles(t *testing.T) {
	// Two-sided 5 % points as printed in any table of Student's t (Fisher and Yates tables, from memory).
	for _, c := range []struct{ df, want float64 }{{5, 2.571}, {9, 2.262}, {10, 2.228}, {30, 2.042}, {120, 1.980}} {
		if got := TQuantile(0.95, c.df); math.Abs(got-c.want) > 0.0005 {
			t.Errorf("t quantile with %v df: got %v, table says %v", c.df, got, c.want)
		}
	}
	if !math.IsNaN(TQuantile(0.95, 0)) || !math.IsNaN(T(1, -1)) || !math.IsNaN(F(1, 0, 3)) {
		t.Error("impossible degrees of freedom must give NaN")
	}
}
