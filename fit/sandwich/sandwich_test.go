package sandwich

import (
	"encoding/csv"
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"strconv"
	"testing"
)

// line fits y on a constant and x, and returns residuals, (X'X)^-1 and leverages, in plain float64.
func line(x, y []float64) (rows [][]float64, e []float64, inverse []float64, h []float64) {
	n := float64(len(x))
	var sx, sy, sxx, sxy float64
	for i := range x {
		sx += x[i]
		sy += y[i]
		sxx += x[i] * x[i]
		sxy += x[i] * y[i]
	}
	det := n*sxx - sx*sx
	inverse = []float64{sxx / det, -sx / det, -sx / det, n / det}
	b1 := (n*sxy - sx*sy) / det
	b0 := (sy - b1*sx) / n
	for i := range x {
		rows = append(rows, []float64{1, x[i]})
		e = append(e, y[i]-b0-b1*x[i])
		h = append(h, inverse[0]+2*x[i]*inverse[1]+x[i]*x[i]*inverse[3])
	}
	return rows, e, inverse, h
}

func near(t *testing.T, name string, got, want, rel float64) {
	t.Helper()
	if !(math.Abs(got-want) <= rel*math.Abs(want)+1e-300) {
		t.Errorf("%s: got %.15g, want %.15g", name, got, want)
	}
}

// TestPetersen holds White and clustered standard errors to the published test panel (testdata/petersen, Petersen 2009): all digits of the values
// recomputed with 50 digits, which agree with every printed one.
func TestPetersen(t *testing.T) {
	f, err := os.Open("../../testdata/petersen/data.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	records, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	var x, y []float64
	var firm, year []int32
	for _, r := range records[1:] {
		number := func(s string) float64 {
			v, err := strconv.ParseFloat(s, 64)
			if err != nil {
				t.Fatal(err)
			}
			return v
		}
		firm, year = append(firm, int32(number(r[0]))-1), append(year, int32(number(r[1]))-1)
		x, y = append(x, number(r[2])), append(y, number(r[3]))
	}
	var values struct {
		Recomputed struct {
			HC0  []string `json:"se_HC0"`
			HC1  []string `json:"se_HC1"`
			Firm []string `json:"se_firm"`
			Year []string `json:"se_year"`
			Two  []string `json:"se_two_way_each_part_adjusted"`
		}
	}
	raw, err := os.ReadFile("../../testdata/petersen/values.json")
	if err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(raw, &values); err != nil {
		t.Fatal(err)
	}
	rows, e, inverse, h := line(x, y)
	n := len(x)
	hc0, hc1 := NewMiddle(2), NewMiddle(2)
	byFirm, byYear, both := NewClusters(2, 500), NewClusters(2, 10), NewClusters(2, 5000)
	for i, r := range rows {
		for kind, m := range map[Kind]*Middle{HC0: hc0, HC1: hc1} {
			w, _ := Weight(kind, n, 2, h[i])
			m.Add(r, w*e[i]*e[i])
		}
		byFirm.Add(firm[i], r, e[i])
		byYear.Add(year[i], r, e[i])
		both.Add(firm[i]*10+year[i], r, e[i])
	}
	a, ga := byFirm.Middle(n, 2)
	b, gb := byYear.Middle(n, 2)
	ab, gab := both.Middle(n, 2)
	if ga != 500 || gb != 10 || gab != 5000 {
		t.Errorf("%d firms, %d years, %d cells", ga, gb, gab)
	}
	for _, c := range []struct {
		name string
		m    *Middle
		want []string
	}{{"HC0", hc0, values.Recomputed.HC0}, {"HC1", hc1, values.Recomputed.HC1}, {"firm", a, values.Recomputed.Firm}, {"year", b, values.Recomputed.Year},
		{"firm and year", TwoWay(a, b, ab), values.Recomputed.Two}} {
		v := c.m.Between(inverse)
		for j := range 2 {
			want, _ := strconv.ParseFloat(c.want[j], 64)
			near(t, c.name, math.Sqrt(v[j*2+j]), want, 1e-10)
		}
	}
}

// TestByHand: x = 0, 1, 2, 3 and y = 1, 0, 2, 5. By hand: slope 7/5, constant -1/10, residuals 11/10, -13/10, -7/10, 9/10; leverages 7/10, 3/10, 3/10,
// 7/10. The slope is the sum of (x - 3/2)/5 times y, so that its HC variance is the sum of w (x-3/2)^2 e^2 / 25:
// (9/4 (121+81)/100 w1 + 1/4 (169+49)/100 w2) / 25 with the weights w1 of the ends and w2 of the middle.
func TestByHand(t *testing.T) {
	rows, e, inverse, h := line([]float64{0, 1, 2, 3}, []float64{1, 0, 2, 5})
	for i, want := range []float64{1.1, -1.3, -0.7, 0.9} {
		near(t, "residual", e[i], want, 1e-13)
		near(t, "leverage", h[i], []float64{0.7, 0.3, 0.3, 0.7}[i], 1e-13)
	}
	for _, c := range []struct {
		kind   Kind
		w1, w2 float64
	}{{HC0, 1, 1}, {HC1, 2, 2}, {HC2, 10.0 / 3, 10.0 / 7}, {HC3, 100.0 / 9, 100.0 / 49}, {HC4, math.Pow(0.3, -1.4), math.Pow(0.7, -0.6)}} { // HC4: n h/k = 4*0.7/2, 4*0.3/2
		m := NewMiddle(2)
		for i, r := range rows {
			w, ok := Weight(c.kind, 4, 2, h[i])
			if !ok {
				t.Fatal("refused")
			}
			m.Add(r, w*e[i]*e[i])
		}
		near(t, string(c.kind), m.Between(inverse)[3], (2.25*2.02*c.w1+0.25*2.18*c.w2)/25, 1e-12)
	}
	// Newey and West with one lag, by hand for the slope: scores s = (x-3/2) e / 5 = -33/100, 13/100, -7/100, 27/100; variance
	// sum s^2 + 2 (1/2) (s1 s2 + s2 s3 + s3 s4) = (1089+169+49+729)/10^4 + (-429-91-189)/10^4 = 1327/10^4.
	s := NewSeries(2, 1)
	for i, r := range rows {
		s.Add(r, e[i])
	}
	near(t, "one lag", s.Middle().Between(inverse)[3], 0.1327, 1e-12)
	none := NewSeries(2, 0)
	for i, r := range rows {
		none.Add(r, e[i])
	}
	near(t, "no lag", none.Middle().Between(inverse)[3], (2.25*2.02+0.25*2.18)/25, 1e-12)
	if Lags(16) != 2 || Lags(100) != 4 || Lags(1000) != 6 { // 4 (0.16)^(2/9) = 2.66; 4; 4 * 10^(2/9) = 6.67
		t.Errorf("lags %d %d %d", Lags(16), Lags(100), Lags(1000))
	}
	if _, ok := Weight(HC3, 4, 2, 1); ok {
		t.Error("a leverage of one was accepted")
	}
	if _, ok := Weight(HC1, 4, 2, 1); !ok {
		t.Error("HC1 needs no leverage")
	}
}

// TestBruteForce compares with the definitions in plain loops: all pairs of rows for clusters and lags.
func TestBruteForce(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 5))
	const n, q, lags = 30, 3, 4
	x, e := make([][]float64, n), make([]float64, n)
	a, b := make([]int32, n), make([]int32, n)
	bread := make([]float64, q*q)
	for i := range bread {
		bread[i] = rng.NormFloat64()
	}
	ca, cb, cab, series := NewClusters(q, 5), NewClusters(q, 4), NewClusters(q, 20), NewSeries(q, lags)
	for i := range n {
		x[i] = []float64{1, rng.NormFloat64(), rng.NormFloat64()}
		e[i], a[i], b[i] = rng.NormFloat64(), int32(rng.IntN(5)), int32(rng.IntN(4))
		ca.Add(a[i], x[i], e[i])
		cb.Add(b[i], x[i], e[i])
		cab.Add(a[i]*4+b[i], x[i], e[i])
		series.Add(x[i], e[i])
	}
	brute := func(weight func(i, j int) float64) []float64 {
		m := make([]float64, q*q)
		for i := range n {
			for j := range n {
				w := weight(i, j)
				for k := range q {
					for l := range q {
						m[k*q+l] += w * e[i] * e[j] * x[i][k] * x[j][l]
					}
				}
			}
		}
		out := make([]float64, q*q)
		for i := range q {
			for j := range q {
				for k := range q {
					for l := range q {
						out[i*q+j] += bread[i*q+k] * m[k*q+l] * bread[j*q+l]
					}
				}
			}
		}
		return out
	}
	same := func(name string, got, want []float64) {
		t.Helper()
		for i := range want {
			if math.Abs(got[i]-want[i]) > 1e-10*(1+math.Abs(want[i])) {
				t.Errorf("%s: entry %d: got %.12g, want %.12g", name, i, got[i], want[i])
			}
		}
	}
	is := func(c bool) float64 {
		if c {
			return 1
		}
		return 0
	}
	ma, ga := ca.Middle(n, q)
	mb, gb := cb.Middle(n, q)
	mab, gab := cab.Middle(n, q)
	f := func(g int) float64 { return float64(g) / float64(g-1) * (n - 1) / (n - q) }
	same("clusters", ma.Between(bread), brute(func(i, j int) float64 { return f(ga) * is(a[i] == a[j]) }))
	same("two-way", TwoWay(ma, mb, mab).Between(bread), brute(func(i, j int) float64 {
		return f(ga)*is(a[i] == a[j]) + f(gb)*is(b[i] == b[j]) - f(gab)*is(a[i] == a[j] && b[i] == b[j])
	}))
	same("lags", series.Middle().Between(bread), brute(func(i, j int) float64 {
		return math.Max(0, 1-math.Abs(float64(i-j))/(lags+1))
	}))
	// Clusters of one row each are HC0 times n/(n-1) (n-1)/(n-k) = n/(n-k), which is HC1.
	single, hc1 := NewClusters(q, n), NewMiddle(q)
	for i := range n {
		single.Add(int32(i), x[i], e[i])
		w, _ := Weight(HC1, n, q, 0)
		hc1.Add(x[i], w*e[i]*e[i])
	}
	ms, _ := single.Middle(n, q)
	same("one row a cluster", ms.Between(bread), hc1.Between(bread))
}
