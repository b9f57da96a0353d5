package linear

import (
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"testing"

	"modelmend/fit/doubledouble"
	"modelmend/fit/reduction"
)

// values reads recomputed values (50 digits, from the published data) of one block of testdata/NAME/values.json.
func values(t *testing.T, name, part string, into any) {
	t.Helper()
	raw, err := os.ReadFile(filepath.Join("..", "..", "testdata", name, "values.json"))
	if err != nil {
		t.Fatal(err)
	}
	var all struct{ Recomputed json.RawMessage }
	if err := json.Unmarshal(raw, &all); err != nil {
		t.Fatal(err)
	}
	block := all.Recomputed
	if part != "" {
		var parts map[string]json.RawMessage
		if err := json.Unmarshal(block, &parts); err != nil {
			t.Fatal(err)
		}
		block = parts[part]
	}
	if err := json.Unmarshal(block, into); err != nil {
		t.Fatal(err)
	}
}

func pick(t *testing.T, name string, rows int, y string, x ...string) *Sample {
	t.Helper()
	names, cols := readColumns(t, filepath.Join("..", "..", "testdata", name, "data.csv"))
	get := func(n string) reduction.Column {
		for j, m := range names {
			if m == n {
				c := cols[j]
				if rows > 0 {
					c.Hi, c.Lo = c.Hi[:rows], c.Lo[:rows]
				}
				return c
			}
		}
		t.Fatalf("no column %q", n)
		return reduction.Column{}
	}
	var xs []reduction.Column
	for _, n := range x {
		xs = append(xs, get(n))
	}
	return sampleOf(t, xs, get(y), true)
}

type ridgeRow struct {
	K       string
	Coef    []string
	VIF     []string `json:"vif"`
	Degrees string   `json:"effective_parameters"`
	RSS     string   `json:"rss"`
}

// TestPublishedRidge: ridge on the Hald data (Woods, Steinour and Starke 1932; Hald 1952), on the French imports 1949-59
// (Malinvaud 1968) at the penalties that textbooks tabulate, and on Longley (1967): coefficients, variance factors (the
// diagonal of (R+kI)^-1 R (R+kI)^-1) and effective degrees of freedom, recomputed at 50 digits.
func TestPublishedRidge(t *testing.T) {
	for _, c := range []struct {
		name, part string
		s          *Sample
	}{
		{"hald", "", pick(t, "hald", 0, "heat", "x1_c3a", "x2_c3s", "x3_c4af", "x4_c2s")},
		{"french-imports", "sample_1949_1959", pick(t, "french-imports", 11, "import", "doprod", "stock", "consum")},
		{"longley", "full", pick(t, "longley", 0, "employed", "deflator", "gnp", "unemployed", "armed_forces", "population", "year")},
	} {
		var v struct{ Ridge []ridgeRow }
		values(t, c.name, c.part, &v)
		if len(v.Ridge) == 0 {
			t.Errorf("%s: no ridge values", c.name)
		}
		sp := c.s.Spectrum(nil)
		for _, row := range v.Ridge {
			k := decimal(t, row.K)
			slopes := sp.RidgeSlopes(k)
			near(t, c.name+": constant", c.s.ConstantFor(slopes), decimal(t, row.Coef[0]), 1e-9)
			m := sp.RidgeSampling(k)
			for j, b := range slopes {
				near(t, c.name+": slope", b, decimal(t, row.Coef[j+1]), 1e-9)
				if row.VIF != nil {
					near(t, c.name+": variance factor", m[j*c.s.P+j]*c.s.S[j*c.s.P+j].Float(), decimal(t, row.VIF[j]), 1e-9)
				}
			}
			if row.Degrees != "" {
				near(t, c.name+": degrees", sp.RidgeDegrees(k)+1, decimal(t, row.Degrees), 1e-10)
			}
			near(t, c.name+": residual sum of squares", c.s.RSS(slopes), decimal(t, row.RSS), 1e-9)
		}
	}
}

// TestPublishedComponents: every number of components on the same data.
func TestPublishedComponents(t *testing.T) {
	for _, c := range []struct {
		name, part string
		s          *Sample
	}{
		{"hald", "", pick(t, "hald", 0, "heat", "x1_c3a", "x2_c3s", "x3_c4af", "x4_c2s")},
		{"french-imports", "sample_1949_1959", pick(t, "french-imports", 11, "import", "doprod", "stock", "consum")},
		{"longley", "full", pick(t, "longley", 0, "employed", "deflator", "gnp", "unemployed", "armed_forces", "population", "year")},
	} {
		var v struct {
			PCR map[string]struct{ Coef []string }
		}
		values(t, c.name, c.part, &v)
		if len(v.PCR) != c.s.P {
			t.Errorf("%s: %d numbers of components", c.name, len(v.PCR))
		}
		for m := 1; m <= c.s.P; m++ {
			slopes := c.s.Spectrum(nil).ComponentSlopes(m)
			for j, b := range slopes {
				near(t, c.name, b, decimal(t, v.PCR[string(rune('0'+m))].Coef[j+1]), 1e-12)
			}
		}
	}
}

// TestVarianceFactorFalls: the variance factor at a penalty falls with it, below 1 and towards 0 (a sum of terms v^2 l/(l+k)^2,
// each falling in k: by hand).
func TestVarianceFactorFalls(t *testing.T) {
	s := pick(t, "longley", 0, "employed", "deflator", "gnp", "unemployed", "armed_forces", "population", "year")
	last := make([]float64, s.P)
	for j := range last {
		last[j] = math.Inf(1)
	}
	for _, k := range []float64{0, 1e-5, 1e-3, 0.1, 1, 100} {
		m := s.Spectrum(nil).RidgeSampling(k)
		for j := range last {
			v := m[j*s.P+j] * s.S[j*s.P+j].Float()
			if v >= last[j] {
				t.Errorf("penalty %v, regressor %d: factor %v does not fall from %v", k, j, v, last[j])
			}
			last[j] = v
		}
	}
	for _, v := range last {
		if v > 1 {
			t.Errorf("factor %v stays above 1", v)
		}
	}
}

// TestCobbDouglas: the production function of Cobb and Douglas (1928), American Economic Review 18 (supplement), 139-165, free and
// under constant returns; values recomputed at 50 digits, the rounded ones are those the paper prints (three quarters for labour).
func TestCobbDouglas(t *testing.T) {
	names, cols := readColumns(t, filepath.Join("..", "..", "testdata", "cobb-douglas", "data.csv"))
	if names[1] != "output" || names[2] != "labor" || names[3] != "capital" {
		t.Fatalf("columns %v", names)
	}
	log := func(c reduction.Column) reduction.Column {
		out := reduction.Column{}
		for i := range c.Hi {
			out.Hi = append(out.Hi, math.Log(doubledouble.Number{Hi: c.Hi[i], Lo: c.Lo[i]}.Float()))
		}
		return out
	}
	s := sampleOf(t, []reduction.Column{log(cols[2]), log(cols[3])}, log(cols[1]), true)
	type block struct {
		Coef, SE []string
		F        string
		RSS      string
	}
	var free, tied block
	values(t, "cobb-douglas", "unrestricted", &free)
	values(t, "cobb-douglas", "restricted_constant_returns", &tied)
	fit := s.LeastSquares(true)
	factor := fit.Factor(s)
	sd := math.Sqrt(fit.RSS / 21)
	near(t, "constant", fit.Constant(s), decimal(t, free.Coef[0]), 1e-11)
	for j := range 2 {
		near(t, "free slope", fit.Slopes[j], decimal(t, free.Coef[j+1]), 1e-12)
		near(t, "its standard error", sd*math.Sqrt(factor[(j+1)*3+j+1]), decimal(t, free.SE[j+1]), 1e-12)
	}
	r, err := s.Restrict([]float64{1, 1}, []float64{1})
	if err != nil {
		t.Fatal(err)
	}
	rsd := math.Sqrt(r.RSS / 22)
	near(t, "restricted constant", s.ConstantFor(r.Slopes), decimal(t, tied.Coef[0]), 1e-11)
	for j := range 2 {
		near(t, "restricted slope", r.Slopes[j], decimal(t, tied.Coef[j+1]), 1e-12)
		near(t, "its standard error", rsd*math.Sqrt(r.Covariance[j*2+j]), decimal(t, tied.SE[j+1]), 1e-11)
	}
	near(t, "F", r.Wald/(fit.RSS/21), decimal(t, tied.F), 1e-11)
	near(t, "residual sum of squares", r.RSS, decimal(t, tied.RSS), 1e-12)
	if math.Abs(r.Slopes[0]-0.75) > 0.005 {
		t.Errorf("labour's exponent %v, the paper prints three quarters", r.Slopes[0])
	}
}
