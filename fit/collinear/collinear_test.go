package collinear_test

import (
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"

	"modelmend/fit/collinear"
	"modelmend/fit/dataset"
	"modelmend/fit/design"
	"modelmend/fit/equation"
	"modelmend/fit/linear"
	"modelmend/fit/reduction"
)

// diagnose runs the whole way from a table to the report.
func diagnose(t *testing.T, table *dataset.Table, eq string, opt design.Options) (*design.Design, *collinear.Report) {
	t.Helper()
	q, err := equation.Parse(eq)
	if err != nil {
		t.Fatal(err)
	}
	d, err := design.Build(table, q, opt)
	if err != nil {
		t.Fatal(err)
	}
	reduce := func(cols []reduction.Column) (*linear.Sample, *linear.Sample) {
		red, err := reduction.Reduce(cols, d.Y, d.Constant, reduction.Split{}, 1)
		if err != nil {
			t.Fatal(err)
		}
		return linear.NewSample(red, red.Total), linear.NewRawSample(red, red.Total)
	}
	in := collinear.Input{Names: d.Names(), Each: d.Each, Cutoffs: collinear.DefaultCutoffs()}
	in.Sample, in.Raw = reduce(d.Columns())
	if d.HasProducts() && d.Constant {
		in.Centered, in.CenteredRaw = reduce(d.Centered())
	}
	for _, r := range d.Regressors {
		in.Decimals = append(in.Decimals, r.Decimals)
	}
	for _, g := range d.Terms {
		in.Groups = append(in.Groups, collinear.Group{Name: g.Name, Columns: g.Columns, Category: g.Category})
	}
	return d, collinear.Diagnose(in)
}

func readTable(t *testing.T, name string) *dataset.Table {
	t.Helper()
	table, err := dataset.ReadFile(filepath.Join("..", "..", "testdata", name, "data.csv"))
	if err != nil {
		t.Fatal(err)
	}
	return table
}

// inline makes a table from columns of numbers.
func inline(t *testing.T, names []string, rows int, value func(row, col int) string) *dataset.Table {
	t.Helper()
	var b strings.Builder
	b.WriteString(strings.Join(names, ",") + "\n")
	for i := range rows {
		cells := make([]string, len(names))
		for j := range names {
			cells[j] = value(i, j)
		}
		b.WriteString(strings.Join(cells, ",") + "\n")
	}
	table, err := dataset.Read(strings.NewReader(b.String()), "inline.csv")
	if err != nil {
		t.Fatal(err)
	}
	return table
}

func num(v float64) string { return strconv.FormatFloat(v, 'g', -1, 64) }

func near(t *testing.T, name string, got, want, rel float64) {
	t.Helper()
	if !(math.Abs(got-want) <= rel*math.Abs(want)) {
		t.Errorf("%s: got %.15g, want %.15g", name, got, want)
	}
}

type published struct {
	Recomputed map[string]json.RawMessage
}

type block struct {
	VIF     []string   `json:"vif"`
	Eigen   []string   `json:"corr_eigenvalues"`
	Indexes []string   `json:"bkw_condition_indexes"`
	Shares  [][]string `json:"bkw_variance_proportions_rows_by_index"`
}

func readBlock(t *testing.T, name, part string) block {
	t.Helper()
	raw, err := os.ReadFile(filepath.Join("..", "..", "testdata", name, "values.json"))
	if err != nil {
		t.Fatal(err)
	}
	var b block
	if part == "" {
		var p struct{ Recomputed block }
		if err := json.Unmarshal(raw, &p); err != nil {
			t.Fatal(err)
		}
		return p.Recomputed
	}
	var p published
	if err := json.Unmarshal(raw, &p); err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(p.Recomputed[part], &b); err != nil {
		t.Fatal(err)
	}
	return b
}

func float(t *testing.T, s string) float64 {
	t.Helper()
	v, err := strconv.ParseFloat(s, 64)
	if err != nil {
		t.Fatal(err)
	}
	return v
}

// TestPublishedDiagnoses compares with values recomputed at 50 digits from published data and, where the sources print them,
// agreeing with the printed ones. Sources: Longley (1967), Journal of the American Statistical Association 62, 819-841;
// Woods, Steinour and Starke (1932), Industrial and Engineering Chemistry 24, 1207-1214 (the Hald data); Malinvaud (1968),
// Statistical Methods of Econometrics (French imports 1949-59); Cobb and Douglas (1928), American Economic Review 18.
func TestPublishedDiagnoses(t *testing.T) {
	for _, c := range []struct{ name, part, eq, rows string }{
		{"longley", "full", "employed = deflator + gnp + unemployed + armed_forces + population + year", ""},
		{"hald", "", "heat = x1_c3a + x2_c3s + x3_c4af + x4_c2s", ""},
		{"french-imports", "sample_1949_1959", "import = doprod + stock + consum", "year <= 1959"},
		{"cobb-douglas", "unrestricted", "ln(output) = ln(labor) + ln(capital)", ""},
	} {
		t.Run(c.name, func(t *testing.T) {
			opt := design.Options{}
			if c.rows != "" {
				cond, err := equation.ParseCondition(c.rows)
				if err != nil {
					t.Fatal(err)
				}
				opt.Rows = cond
			}
			_, r := diagnose(t, readTable(t, c.name), c.eq, opt)
			want := readBlock(t, c.name, c.part)
			rel := 1e-12
			if strings.Contains(c.eq, "ln(") {
				rel = 1e-11 // logarithms are computed in float64
			}
			for j, v := range want.VIF {
				near(t, "inflation factor", r.VIF[j], float(t, v), rel)
			}
			first := float(t, want.Eigen[0])
			for k, v := range want.Eigen {
				near(t, "centred condition index", r.CenteredIndex[k], math.Sqrt(first/float(t, v)), rel)
			}
			for k, v := range want.Indexes {
				near(t, "scaled condition index", r.ScaledIndex[k], float(t, v), 1e-9)
			}
			for k, row := range want.Shares {
				for i, v := range row {
					if got, w := r.Shares[i][k], float(t, v); math.Abs(got-w) > 1e-9*w+1e-14 {
						t.Errorf("variance share of coefficient %d in dimension %d: got %.12g, want %.12g", i, k, got, w)
					}
				}
			}
			for i, row := range r.Shares {
				sum := 0.0
				for _, v := range row {
					sum += v
				}
				near(t, fmt.Sprintf("shares of coefficient %d", i), sum, 1, 1e-12)
			}
			if c.name != "hald" && !r.Flagged {
				t.Errorf("not flagged")
			}
		})
	}
}

// TestBauer: the modified Bauer matrix holds x5 = 2 x4 exactly; its scaled singular values are printed in Belsley, Kuh and
// Welsch (1980), Regression Diagnostics, section 3.4. The dependent variable is invented (the matrix has none) and the model
// has no constant.
func TestBauer(t *testing.T) {
	raw, err := os.ReadFile(filepath.Join("..", "..", "testdata", "bauer", "data.csv"))
	if err != nil {
		t.Fatal(err)
	}
	lines := strings.Split(strings.TrimSpace(strings.ReplaceAll(string(raw), "\r", "")), "\n")
	for i := range lines {
		if i == 0 {
			lines[i] += ",invented"
		} else {
			lines[i] += fmt.Sprintf(",%d", []int{3, -1, 4, 1, -5, 9}[i-1])
		}
	}
	table, err := dataset.Read(strings.NewReader(strings.Join(lines, "\n")), "bauer.csv")
	if err != nil {
		t.Fatal(err)
	}
	_, r := diagnose(t, table, "invented = x1 + x2 + x3 + x4 + x5", design.Options{NoConstant: true})
	if len(r.Dependencies) == 0 || r.Dependencies[0].Kind != collinear.Exact || r.Dependencies[0].Equation != "x5 = 2*x4" {
		t.Fatalf("dependencies: %+v", r.Dependencies)
	}
	for _, reason := range r.Reasons {
		if reason.Kind != collinear.Exact && (slices.Contains(reason.Members, 3) || slices.Contains(reason.Members, 4)) {
			t.Errorf("reason %+v names members of the exact dependency again", reason)
		}
	}
	for k, want := range []float64{1, 1.038538, 1.325775, 15.9971} { // printed values
		near(t, "scaled condition index", r.ScaledIndex[k], want, 5e-7)
	}
	if !math.IsInf(r.ScaledIndex[4], 1) {
		t.Errorf("the fifth index is %v, want infinite", r.ScaledIndex[4])
	}
	for j, want := range []bool{false, false, false, true, true} {
		if math.IsInf(r.VIF[j], 1) != want {
			t.Errorf("inflation factor of x%d: %v", j+1, r.VIF[j])
		}
	}
	for i := range 3 { // x1, x2, x3 share the index 16 (printed 0.994, 0.994, 0.953)
		near(t, "variance share", r.Shares[i][3], []float64{0.994, 0.994, 0.953}[i], 6e-4)
	}
}

// TestWageSurvey: in the 1985 survey age = education + experience + 6 but for one row, line 445 (counted in the data).
func TestWageSurvey(t *testing.T) {
	table := readTable(t, "wages")
	union, married := 0, 0
	payUnion, payOther, nUnion := 0.0, 0.0, 0.0
	u, _ := table.Column("union")
	m, _ := table.Column("married")
	w, _ := table.Column("wage")
	for i := range table.Rows {
		if u.Hi[i] == 1 {
			union++
			payUnion += w.Hi[i]
			nUnion++
		} else {
			payOther += w.Hi[i]
		}
		if m.Hi[i] == 1 {
			married++
		}
	}
	if union != 96 || married != 350 || payUnion/nUnion <= payOther/(534-nUnion) {
		t.Errorf("union %d, married %d: want 96 and 350, and union members earning more", union, married)
	}
	_, r := diagnose(t, table, "ln(wage) = education + experience + age + union + gender + sector", design.Options{})
	if len(r.Dependencies) != 1 {
		t.Fatalf("dependencies: %+v", r.Dependencies)
	}
	if got, want := r.Dependencies[0].Equation, "age = education + experience + 6 (holds in 533 of 534 rows; not in line 445)"; got != want {
		t.Errorf("got %q, want %q", got, want)
	}
	if !r.Flagged {
		t.Error("not flagged")
	}
	if !r.Tangled[0] || !r.Tangled[1] || !r.Tangled[2] || r.Tangled[3] {
		t.Errorf("tangled: %v", r.Tangled)
	}
}

// TestHarmlessModelsAreNotFlagged: a year and noise tie a regressor to the constant only; a variable and its square are a matter
// of origin. By construction; the condition indexes involved are beyond 30 all the same.
func TestHarmlessModelsAreNotFlagged(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	noise := make([][]float64, 40)
	for i := range noise {
		noise[i] = []float64{rng.NormFloat64(), rng.NormFloat64(), rng.NormFloat64()}
	}
	table := inline(t, []string{"y", "year", "x", "z"}, 40, func(i, j int) string {
		return num([]float64{noise[i][0], 1970 + float64(i), noise[i][1], 100 + 3*noise[i][2]}[j])
	})
	_, r := diagnose(t, table, "y = year + x", design.Options{})
	if r.Flagged || r.ScaledIndex[2] < 30 {
		t.Errorf("a year and noise: flagged %v, index %v, reasons %+v", r.Flagged, r.ScaledIndex, r.Reasons)
	}
	if len(r.Reasons) != 1 || r.Reasons[0].Kind != collinear.Location {
		t.Errorf("reasons: %+v", r.Reasons)
	}
	_, r = diagnose(t, table, "y = year + z", design.Options{})
	if r.Flagged {
		t.Errorf("two matters of origin: flagged, reasons %+v", r.Reasons)
	}
	squares := inline(t, []string{"y", "x"}, 10, func(i, j int) string { return num([]float64{noise[i][0], float64(i + 1)}[j]) })
	_, r = diagnose(t, squares, "y = x + x^2", design.Options{})
	near(t, "a variable and its square on 1..10", r.VIF[0], 19.90625, 1e-13) // exact, by hand
	near(t, "after centring", r.CenteredVIF[0], 1, 1e-12)
	if r.Flagged || len(r.Reasons) == 0 || r.Reasons[0].Kind != collinear.Structural {
		t.Errorf("a square: flagged %v, reasons %+v", r.Flagged, r.Reasons)
	}
	if len(r.Dependencies) != 1 || r.Dependencies[0].Kind != collinear.Structural {
		t.Errorf("dependencies %+v", r.Dependencies)
	}
}

// TestCompetingDependencies: of four near-copies of one variable only one passes one half in the strongest dimension; summed over
// the dimensions beyond the mark all are involved (Belsley, Kuh and Welsch 1980 on competing dependencies).
func TestCompetingDependencies(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	table := inline(t, []string{"y", "a", "b", "c", "d", "e"}, 80, func() func(i, j int) string {
		var base float64
		return func(i, j int) string {
			if j == 0 {
				base = rng.NormFloat64()
				return num(rng.NormFloat64())
			}
			if j == 5 {
				return num(rng.NormFloat64())
			}
			return num(base + 0.05*rng.NormFloat64())
		}
	}())
	_, r := diagnose(t, table, "y = a + b + c + d + e", design.Options{})
	if !r.Flagged {
		t.Fatal("not flagged")
	}
	for j, want := range []bool{true, true, true, true, false} {
		if r.Tangled[j] != want {
			t.Errorf("regressor %d: tangled %v", j, r.Tangled[j])
		}
	}
	if len(r.Dependencies) != 3 {
		t.Errorf("%d dependencies, want 3 for four copies", len(r.Dependencies))
	}
}

// TestProductHidesNothing: with x*z in the model and x and z nearly the same, the group factor is near 1, yet the column factors
// stay high after centring, and the model is flagged. By construction.
func TestProductHidesNothing(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 6))
	var x, z float64
	table := inline(t, []string{"y", "x", "z", "w"}, 200, func(i, j int) string {
		switch j {
		case 0:
			x = 3 + rng.NormFloat64()
			z = x + 0.14*rng.NormFloat64()
			return num(rng.NormFloat64())
		case 1:
			return num(x)
		case 2:
			return num(z)
		}
		return num(rng.NormFloat64())
	})
	d, r := diagnose(t, table, "y = x + z + x*z + w", design.Options{})
	if len(d.Terms) != 2 {
		t.Fatalf("terms: %+v", d.Terms)
	}
	if g := r.GeneralizedVIF[0]; g > 1.1 {
		t.Errorf("group factor %v, want near 1", g)
	}
	if r.CenteredVIF[0] < 20 || r.CenteredVIF[1] < 20 || r.CenteredVIF[2] > 2 {
		t.Errorf("factors after centring: %v", r.CenteredVIF)
	}
	if !r.Flagged || !r.Tangled[0] || !r.Tangled[1] {
		t.Errorf("flagged %v, tangled %v", r.Flagged, r.Tangled)
	}
}

// TestExactIdentityIsNamed: an identity that holds in every row is exact, written in whole numbers, with no minus sign before a
// regressor.
func TestExactIdentityIsNamed(t *testing.T) {
	rng := rand.New(rand.NewPCG(7, 8))
	for _, c := range []struct {
		eq, want string
		value    func(a, b float64) float64
	}{
		{"y = a + b + c", "c = a + b + 6", func(a, b float64) float64 { return a + b + 6 }},
		{"y = c + a + b", "c = a + b + 6", func(a, b float64) float64 { return a + b + 6 }},
		{"y = a + b + c", "b = 2*a + 0.5*c", func(a, b float64) float64 { return 2*b - 4*a }},
		{"y = a + b + c", "a = b + c", func(a, b float64) float64 { return a - b }},
	} {
		table := inline(t, []string{"y", "a", "b", "c"}, 30, func() func(i, j int) string {
			var a, b float64
			return func(i, j int) string {
				switch j {
				case 0:
					a, b = float64(rng.IntN(500))/10, float64(rng.IntN(900))/10
					return num(rng.NormFloat64())
				case 1:
					return num(a)
				case 2:
					return num(b)
				}
				return strconv.FormatFloat(c.value(a, b), 'f', 1, 64)
			}
		}())
		_, r := diagnose(t, table, c.eq, design.Options{})
		if len(r.Dependencies) != 1 || r.Dependencies[0].Kind != collinear.Exact || r.Dependencies[0].Equation != c.want {
			t.Errorf("%s: got %+v, want %q", c.eq, r.Dependencies, c.want)
		}
	}
}

// TestGroupFactorInvariance: the generalised factor of {x, x^2} against another regressor does not change by centring, and that of a
// category not by another base (Fox and Monette 1992).
func TestGroupFactorInvariance(t *testing.T) {
	rng := rand.New(rand.NewPCG(9, 10))
	levels := []string{"east", "north", "west"}
	var x float64
	table := inline(t, []string{"y", "x", "w", "place"}, 90, func(i, j int) string {
		switch j {
		case 0:
			x = 5 + rng.NormFloat64()
			return num(rng.NormFloat64())
		case 1:
			return num(x)
		case 2:
			return num(x*0.5 + rng.NormFloat64() + float64(i%3))
		}
		return levels[i%3]
	})
	_, r := diagnose(t, table, `y = x + x^2 + w + categories(place, "east")`, design.Options{})
	_, s := diagnose(t, table, `y = x + x^2 + w + categories(place, "west")`, design.Options{})
	near(t, "another base", s.GeneralizedVIF[2], r.GeneralizedVIF[2], 1e-10)
	mean := 5.25
	shifted := inline(t, []string{"y", "x", "w", "place"}, 90, func(i, j int) string {
		c := table.Columns[j]
		if j == 3 {
			return c.Levels[c.Codes[i]]
		}
		if j == 1 {
			return num(c.Hi[i] - mean)
		}
		return num(c.Hi[i])
	})
	_, u := diagnose(t, shifted, `y = x + x^2 + w + categories(place, "east")`, design.Options{})
	near(t, "another origin", u.GeneralizedVIF[0], r.GeneralizedVIF[0], 1e-8)
}
