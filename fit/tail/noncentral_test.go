package tail

import (
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

// number is a JSON number, or a text of one where it is infinite or has more digits than a float64.
type number float64

func (n *number) UnmarshalJSON(raw []byte) error {
	v, err := strconv.ParseFloat(strings.Trim(string(raw), `"`), 64)
	*n = number(v)
	return err
}

// library holds the values of testdata/choosing, made by .ci/reference/choosing.py with mpmath: areas under densities, to 20 digits.
type library struct {
	Normal         []struct{ Z, Below number }
	NormalQuantile []struct{ P, Z number }
	Central        []struct{ X, Q, DF, Above number }
	Noncentral     []struct{ X, Q, DF, NCP, Above number }
	Quantile       []struct{ P, Q, DF, NCP, X number }
}

func values(t *testing.T) (l library) {
	t.Helper()
	raw, err := os.ReadFile(filepath.Join("..", "..", "testdata", "choosing", "values.json"))
	if err == nil {
		err = json.Unmarshal(raw, &l)
	}
	if err != nil {
		t.Fatal(err)
	}
	if len(l.Normal) == 0 || len(l.NormalQuantile) == 0 || len(l.Central) == 0 || len(l.Noncentral) == 0 || len(l.Quantile) == 0 {
		t.Fatal("the file of values lacks a part")
	}
	return l
}

func TestLibrary(t *testing.T) {
	l := values(t)
	for _, c := range l.Normal {
		near(t, "normal below "+text(c.Z), Normal(float64(c.Z)), float64(c.Below), 2e-15)
	}
	for _, c := range l.NormalQuantile {
		near(t, "normal quantile of "+text(c.P), NormalQuantile(float64(c.P)), float64(c.Z), 2e-15)
	}
	for _, c := range l.Central {
		near(t, "F beyond "+text(c.X, c.Q, c.DF), F(float64(c.X), float64(c.Q), float64(c.DF)), float64(c.Above), 1e-13)
	}
	for _, c := range l.Noncentral {
		near(t, "noncentral F beyond "+text(c.X, c.Q, c.DF, c.NCP), NoncentralF(float64(c.X), float64(c.Q), float64(c.DF), float64(c.NCP)), float64(c.Above), 2e-13)
	}
	for _, c := range l.Quantile {
		near(t, "noncentral F quantile "+text(c.P, c.Q, c.DF, c.NCP), NoncentralFQuantile(float64(c.P), float64(c.Q), float64(c.DF), float64(c.NCP)), float64(c.X), 1e-13)
	}
}

func text(v ...number) string {
	var s []string
	for _, n := range v {
		s = append(s, strconv.FormatFloat(float64(n), 'g', -1, 64))
	}
	return strings.Join(s, " ")
}

func TestNoncentralClosedForms(t *testing.T) {
	// By hand: with q = 1 and a known variance, F = (Z + m)^2 with m^2 = ncp, so P(F > x) = Phi(m - sqrt x) + Phi(-m - sqrt x).
	for _, ncp := range []float64{1e-3, 1, 30, 1e4, 1e6} {
		m := math.Sqrt(ncp)
		for _, gap := range []float64{-6, -1, 0.5, 2, 9, 20} {
			if root := m + gap; root > 0 {
				rel := 1e-12
				if ncp > 1e5 {
					rel = 1e-11 // rounding of the root itself counts 20 sqrt(ncp) times
				}
				near(t, "q = 1, known variance, "+text(number(ncp), number(gap)), NoncentralF(root*root, 1, math.Inf(1), ncp), Normal(m-root)+Normal(-m-root), rel)
			}
		}
	}
	// By hand: chi-square with 2 degrees of freedom has the upper tail exp(-x/2), so F with 2 and infinitely many exp(-x).
	near(t, "F, 2 and infinitely many", F(30, 2, math.Inf(1)), math.Exp(-30), 1e-13)
	near(t, "its quantile", NoncentralFQuantile(0.05, 2, math.Inf(1), 0), -math.Log(0.05), 1e-14)
	// By hand: F(2, d2) has the upper tail (1 + 2f/d2)^(-d2/2), here with 20 million.
	near(t, "F, 2 and 2e7", F(30, 2, 2e7), math.Exp(-1e7*math.Log1p(60/2e7)), 1e-13)
	// By hand: as df grows F's law tends to that with df = +Inf; the gap is of the order of x/df.
	near(t, "1e15 degrees of freedom", NoncentralF(4, 3, 1e15, 3), NoncentralF(4, 3, math.Inf(1), 3), 1e-13)
	// By hand: t with infinitely many degrees of freedom is normal.
	near(t, "t quantile, infinitely many", TQuantile(0.95, math.Inf(1)), 1.959963984540054, 1e-14) // Abramowitz and Stegun, from memory
}

func TestNoncentralIsCentralAtZero(t *testing.T) {
	for _, x := range []float64{0.01, 1, 5, 300} {
		if NoncentralF(x, 3, 40, 0) != F(x, 3, 40) {
			t.Errorf("at %v the noncentral tail with noncentrality 0 is not the central one", x)
		}
		near(t, "a noncentrality of 1e-12", NoncentralF(x, 3, 40, 1e-12), F(x, 3, 40), 1e-9)
	}
}

func TestNoncentralInvariants(t *testing.T) {
	// Further out is rarer, a larger noncentrality makes it less rare, and the quantile goes back to where the tail came from.
	for _, q := range []float64{0.5, 1, 7, 60} {
		for _, df := range []float64{1, 12, 900, 2e7, math.Inf(1)} {
			for _, ncp := range []float64{0, 0.3, 1, 50, 1e3, 1e4} {
				last := 1.0
				for _, x := range []float64{0.1, 0.9, 1.1, 4, 20, 300} {
					x *= 1 + ncp/q
					p := NoncentralF(x, q, df, ncp)
					if !(p <= last && p >= 0) || p == last && p < 1 && p > 0 {
						t.Errorf("tail %v after %v at x %v, q %v, df %v, ncp %v", p, last, x, q, df, ncp)
					}
					last = p
					if more := NoncentralF(x, q, df, ncp+1); more < p*(1-1e-12) {
						t.Errorf("tail falls from %v to %v as the noncentrality rises, at x %v, q %v, df %v, ncp %v", p, more, x, q, df, ncp)
					}
					if p > 1e-250 && p < 0.9 {
						// What a relative error of the tail does to x is that over the elasticity of the tail, which is at least 0.2 here.
						near(t, "round trip "+text(number(x), number(q), number(df), number(ncp)), NoncentralFQuantile(p, q, df, ncp), x, 5e-12)
					}
				}
			}
		}
	}
}

func TestUnderflow(t *testing.T) {
	// Where the first terms of the sum underflow it starts later. By hand as above: about 1e-250, 34 standard deviations out.
	near(t, "far out", NoncentralF(134*134, 1, math.Inf(1), 1e4), Normal(-34), 1e-12)
	for _, p := range []float64{NoncentralF(1e12, 1, math.Inf(1), 1e4), NoncentralF(1e9, 3, 1e9, 2), F(1e300, 1, 1e5), NoncentralF(math.MaxFloat64, 5, 200, 10)} {
		if !(p >= 0 && p < 1e-280) {
			t.Errorf("a tail without a float64 is %v", p)
		}
	}
}

func TestNoncentralRefusals(t *testing.T) {
	inf, nan := math.Inf(1), math.NaN()
	for _, c := range [][4]float64{{nan, 1, 1, 1}, {1, 0, 1, 1}, {1, -1, 1, 1}, {1, inf, 1, 1}, {1, nan, 1, 1}, {1, 1, 0, 1}, {1, 1, nan, 1}, {1, 1, 1, -1}, {1, 1, 1, nan},
		{1, 1, 1, inf}, {1, 1, 1, MaxNoncentrality * (1 + 1e-15)}} {
		if p := NoncentralF(c[0], c[1], c[2], c[3]); !math.IsNaN(p) {
			t.Errorf("NoncentralF(%v) is %v", c, p)
		}
		c[0] = 0.05
		if x := NoncentralFQuantile(c[0], c[1], c[2], c[3]); !math.IsNaN(x) && c != [4]float64{0.05, 1, 1, 1} {
			t.Errorf("NoncentralFQuantile(%v) is %v", c, x)
		}
	}
	for _, p := range []float64{0, 1, -1, 2, nan} {
		if !math.IsNaN(NoncentralFQuantile(p, 1, 10, 1)) || !math.IsNaN(NormalQuantile(p)) || !math.IsNaN(TQuantile(p, 10)) {
			t.Errorf("a quantile of %v is a number", p)
		}
	}
	if NoncentralF(0, 1, 5, 1) != 1 || NoncentralF(-3, 1, 5, 1) != 1 || NoncentralF(inf, 1, 5, 1) != 0 || NoncentralF(5e-324, 1, 5, 1) != 1 {
		t.Error("the ends of the law are wrong")
	}
	if !(NoncentralF(1, 1, 1, MaxNoncentrality) > 0.9) || !math.IsInf(NoncentralFQuantile(1e-200, 1, 0.5, 0), 1) {
		t.Error("the last noncentrality, or a quantile beyond the numbers, is wrong")
	}
	if !math.IsNaN(Normal(nan)) || Normal(math.Inf(-1)) != 0 || Normal(inf) != 1 || Normal(0) != 0.5 || NormalQuantile(0.5) != 0 {
		t.Error("the ends or the middle of the normal law are wrong")
	}
}

func TestNormalRoundTrip(t *testing.T) {
	for p := 1e-307; p < 0.5; p *= 7.3 {
		z := NormalQuantile(p)
		// The rounding of z counts z^2 times.
		near(t, "normal round trip", Normal(z), p, 4e-16*(1+z*z))
		if p > 1e-3 && NormalQuantile(1-p) != -NormalQuantile(1-(1-p)) {
			t.Errorf("the quantiles of %v and of the other side differ", p)
		}
	}
}

func BenchmarkNoncentralF(b *testing.B) {
	for _, ncp := range []float64{0, 1, 100, 1e4, 1e6} {
		b.Run("ncp="+text(number(ncp)), func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				NoncentralF(1.1+ncp, 1, 100, ncp)
			}
		})
	}
}

func BenchmarkNoncentralFQuantile(b *testing.B) {
	for _, ncp := range []float64{0, 1, 1e4} {
		b.Run("ncp="+text(number(ncp)), func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				NoncentralFQuantile(0.05, 2, 100, ncp)
			}
		})
	}
}

func BenchmarkNormal(b *testing.B) {
	for b.Loop() {
		Normal(-3)
	}
}
