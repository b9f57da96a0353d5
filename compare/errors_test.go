package compare_test

import (
	"context"
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"strconv"
	"strings"
	"testing"

	"modelmend/compare"
)

func kindOf(t *testing.T, k compare.Coefficient, kind string) compare.StandardError {
	t.Helper()
	for _, e := range k.Errors {
		if e.Kind == kind {
			return e
		}
	}
	t.Fatalf("%s has no %s standard error", k.Name, kind)
	return compare.StandardError{}
}

// TestPetersenThroughTheProgram: standard errors of the published test panel (Petersen 2009), the file read, designed, reduced and fitted by the
// program; values of testdata/petersen/values.json, all of which agree with the printed ones.
func TestPetersenThroughTheProgram(t *testing.T) {
	raw, err := os.ReadFile("../testdata/petersen/data.csv")
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		clusters []string
		errors   compare.ErrorSpec
		constant float64
		x        float64
		df       float64
	}{
		{nil, compare.ErrorSpec{}, 0.02835931626566530882504568, 0.02858328779128332121402995, 4998},
		{nil, compare.ErrorSpec{Kind: "robust", Variant: "HC1"}, 0.02836067223138867423443961, 0.02839516146794210270978458, 4998},
		{[]string{"firm"}, compare.ErrorSpec{}, 0.06701270369877281410344129, 0.05059572588402956000853248, 499},
		{[]string{"year"}, compare.ErrorSpec{}, 0.02338672110094894292811790, 0.03338891341192645535506182, 9},
		{[]string{"firm", "year"}, compare.ErrorSpec{}, 0.06506391819938935628813187, 0.05355802294493773808236690, 9},
	} {
		s := newStudy("y = x")
		s.Clusters, s.Errors = c.clusters, c.errors
		got, err := compare.Run(context.Background(), text(t, string(raw)), s, compare.Options{})
		if err != nil {
			t.Fatal(err)
		}
		for name, want := range map[string]float64{"constant": c.constant, "x": c.x} {
			k := coefficient(t, got.Alternatives[0], name)
			if math.Abs(k.SE/want-1) > 1e-11 {
				t.Errorf("%v %v: %s: %.15g, want %.15g", c.clusters, c.errors, name, k.SE, want)
			}
			if k.Errors[0].DF != c.df || k.Errors[0].SE != k.SE {
				t.Errorf("%v: %s: %g degrees of freedom, want %g", c.clusters, name, k.Errors[0].DF, c.df)
			}
			if v := got.Alternatives[0].Covariance; math.Abs(math.Sqrt(v[map[string]int{"constant": 0, "x": 3}[name]])-k.SE) > 1e-12 {
				t.Errorf("%v: the covariance matrix does not hold the square of %g", c.clusters, k.SE)
			}
		}
		warned := false
		for _, n := range got.Notes {
			warned = warned || n.Code == "few-clusters"
		}
		if warned != (len(c.clusters) > 0 && c.df == 9) {
			t.Errorf("%v: warned of few clusters: %v", c.clusters, warned)
		}
	}
}

// TestErrorsAroundTheMap compares robust and autocorrelation errors of every kind of alternative with the matrix formulas in plain loops: for ridge and
// components the residuals of least squares within the remedy's map, for a drop its own residuals and leverages.
func TestErrorsAroundTheMap(t *testing.T) {
	rng := rand.New(rand.NewPCG(17, 3))
	const n, p = 50, 3
	all := rows{}
	var cells [][]float64
	for i := range n {
		c := rng.NormFloat64()
		x := []float64{50 + 4*(c+0.2*rng.NormFloat64()), c + 0.2*rng.NormFloat64(), 0.1 * rng.NormFloat64()}
		y := 0.2*x[0] + x[1] + 5*x[2] + (0.5+math.Abs(c))*rng.NormFloat64()
		all.x, all.y = append(all.x, x), append(all.y, y)
		cells = append(cells, append([]float64{y}, append(x, float64(i))...))
	}
	s := newStudy("y = a + b + c")
	s.Time, s.Errors.Kind = "t", "robust"
	s.Remedies = []compare.RemedySetting{{Remedy: "ridge", Option: "penalty", Number: 0.3}, {Remedy: "components", Option: "count", Number: 2}}
	got, err := compare.Run(context.Background(), numbers(t, []string{"y", "a", "b", "c", "t"}, cells), s, compare.Options{})
	if err != nil {
		t.Fatal(err)
	}
	mean, sxx, _, _ := all.moments()
	inverse := func(m [][]float64) [][]float64 {
		out := make([][]float64, len(m))
		for i := range out {
			out[i] = make([]float64, len(m))
		}
		for j := range m {
			e := make([]float64, len(m))
			e[j] = 1
			for i, v := range plainSolve(m, e) {
				out[i][j] = v
			}
		}
		return out
	}
	// map of the slopes on centred X'y, residuals and leverages of each alternative.
	type form struct {
		w    [][]float64
		fit  plainFit
		keep []int
	}
	asIs := plainSubset(all, []int{0, 1, 2})
	forms := map[string]form{"as-is": {inverse(sxx), asIs, []int{0, 1, 2}}}
	penalised := [][]float64{}
	for i := range p {
		penalised = append(penalised, append([]float64{}, sxx[i]...))
		penalised[i][i] *= 1.3
	}
	forms["ridge"] = form{inverse(penalised), asIs, []int{0, 1, 2}}
	d := make([]float64, p)
	r := make([][]float64, p)
	for i := range p {
		d[i] = math.Sqrt(sxx[i][i])
	}
	for i := range p {
		r[i] = make([]float64, p)
		for j := range p {
			r[i][j] = sxx[i][j] / d[i] / d[j]
		}
	}
	lambda, v := jacobi(r)
	w := make([][]float64, p)
	for i := range p {
		w[i] = make([]float64, p)
		for j := range p {
			for m := range 2 {
				w[i][j] += v[i][m] * v[j][m] / lambda[m] / d[i] / d[j]
			}
		}
	}
	forms["components"] = form{w, asIs, []int{0, 1, 2}}
	small := [][]float64{{sxx[0][0], sxx[0][2]}, {sxx[2][0], sxx[2][2]}}
	si := inverse(small)
	forms["drop:b"] = form{[][]float64{{si[0][0], 0, si[0][1]}, {0, 0, 0}, {si[1][0], 0, si[1][1]}}, plainSubset(all, []int{0, 2}), []int{0, 2}}
	checked := 0
	for _, a := range got.Alternatives {
		f, ok := forms[a.Key]
		if !ok {
			continue
		}
		checked++
		e, h := make([]float64, n), make([]float64, n)
		b := inverse(sxx)
		if a.Key == "drop:b" {
			b = f.w
		}
		for i := range n {
			e[i] = all.y[i] - f.fit.constant
			h[i] = 1.0 / n
			for j := range p {
				e[i] -= f.fit.slopes[j] * all.x[i][j]
				for k := range p {
					h[i] += (all.x[i][j] - mean[j]) * b[j][k] * (all.x[i][k] - mean[k])
				}
			}
		}
		score := func(i, j int) float64 { // what row i adds to slope j
			s := 0.0
			for k := range p {
				s += f.w[j][k] * (all.x[i][k] - mean[k])
			}
			return s
		}
		constant := func(i int) float64 {
			s := 1.0 / n
			for j := range p {
				s -= score(i, j) * mean[j]
			}
			return s
		}
		lags := int(4 * math.Pow(n/100.0, 2.0/9))
		check := func(name string, of func(i int) float64) {
			t.Helper()
			k := coefficient(t, a, name)
			if k.Status == "zero" {
				return
			}
			hc3, series := 0.0, 0.0
			for i := range n {
				hc3 += math.Pow(of(i)*e[i]/(1-h[i]), 2)
				for l := range n {
					if gap := i - l; gap >= -lags && gap <= lags {
						series += (1 - math.Abs(float64(gap))/float64(lags+1)) * of(i) * e[i] * of(l) * e[l]
					}
				}
			}
			if g := kindOf(t, k, "robust").SE; math.Abs(g/math.Sqrt(hc3)-1) > 1e-8 || k.SE != g {
				t.Errorf("%s %s: robust %.12g, want %.12g; shown %g", a.Key, name, g, math.Sqrt(hc3), k.SE)
			}
			if g := kindOf(t, k, "autocorrelation").SE; math.Abs(g/math.Sqrt(series)-1) > 1e-8 {
				t.Errorf("%s %s: autocorrelation %.12g, want %.12g", a.Key, name, g, math.Sqrt(series))
			}
		}
		for j, name := range []string{"a", "b", "c"} {
			check(name, func(i int) float64 { return score(i, j) })
		}
		check("constant", constant)
	}
	if checked != 4 {
		t.Errorf("%d alternatives were checked, want 4: %v", checked, got.NotApplicable)
	}
	// The realised factor, from its definition with leverages of the same fit: net and centred regressor, the same residuals.
	for _, l := range got.Ledger {
		others := [][]int{{1, 2}, {0, 2}, {0, 1}}[l.Column]
		target := rows{x: all.x}
		for i := range n {
			target.y = append(target.y, all.x[i][l.Column])
		}
		aux := plainSubset(target, others)
		var netTop, net, ownTop, own float64
		for i := range n {
			e := all.y[i] - asIs.constant
			hi := 1.0 / n
			for j := range p {
				e -= asIs.slopes[j] * all.x[i][j]
				for k := range p {
					hi += (all.x[i][j] - mean[j]) * inverse(sxx)[j][k] * (all.x[i][k] - mean[k])
				}
			}
			e /= 1 - hi
			nx := target.y[i] - aux.constant
			for j := range p {
				nx -= aux.slopes[j] * all.x[i][j]
			}
			cx := target.y[i] - mean[l.Column]
			netTop += nx * nx * e * e
			net += nx * nx
			ownTop += cx * cx * e * e
			own += cx * cx
		}
		want := math.Sqrt(netTop) / net / (math.Sqrt(ownTop) / own)
		if o := l.Others[0]; o.Kind != "robust" || math.Abs(o.Factor/want-1) > 1e-8 {
			t.Errorf("realised factor of column %d: %s %.10g, want %.10g", l.Column, o.Kind, o.Factor, want)
		}
		if !strings.Contains(l.Sentence, "(robust errors)") {
			t.Errorf("the sentence does not name the errors: %s", l.Sentence)
		}
	}
	// The path of a tuned alternative uses the chosen kind as well.
	for _, a := range got.Alternatives {
		if a.Key != "ridge" {
			continue
		}
		path := got.Path(a)
		if g, want := path[a.Fitted.Tuning.Chosen].Coefficients[1].SE, coefficient(t, a, "a").SE; math.Abs(g/want-1) > 1e-12 {
			t.Errorf("ridge: standard error %g on the path, %g on the ladder", g, want)
		}
	}
}

// TestLeverageOfOne: a row that a dummy singles out leaves HC3 without a value, with the line and the way out; classical errors stay.
func TestLeverageOfOne(t *testing.T) {
	table := text(t, "y,x,d\n1,1,0\n3,2,0\n2,3,0\n5,4,1\n4,5,0\n6,7,0\n5,8,0\n")
	s := newStudy("y = x + d")
	s.Errors.Kind = "robust"
	c, err := compare.Run(context.Background(), table, s, compare.Options{})
	if err != nil {
		t.Fatal(err)
	}
	k := coefficient(t, c.Alternatives[0], "x")
	if !math.IsNaN(k.SE) || !strings.Contains(k.SEReason, "line 5") || !strings.Contains(k.SEReason, "HC1") {
		t.Errorf("standard error %g, reason %q", k.SE, k.SEReason)
	}
	if e := kindOf(t, k, "classical"); !(e.SE > 0) {
		t.Errorf("classical %+v", e)
	}
}

// TestErrorKeys: an impossible choice says what is missing.
func TestErrorKeys(t *testing.T) {
	names, cells := panel(2, 20, 5)
	for _, c := range []struct {
		set  func(*compare.Study)
		want string
	}{
		{func(s *compare.Study) { s.Errors.Kind = "clustered" }, "need clusters"},
		{func(s *compare.Study) { s.Errors.Kind = "autocorrelation" }, "with time"},
		{func(s *compare.Study) { s.Errors.Kind, s.Time = "autocorrelation", "period" }, "cluster by period"},
		{func(s *compare.Study) { s.Errors.Kind = "sturdy" }, "robust"},
	} {
		s := newStudy(panelEquation)
		c.set(s)
		_, err := compare.Run(context.Background(), numbers(t, names, cells), s, compare.Options{})
		if err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%v, want %q", err, c.want)
		}
	}
}

// TestErrorsAgainstLibrary holds HC0-HC4, clusters one-way and two-way, and Newey-West at several lags to numpy (testdata/reference-errors/values.json,
// made by .ci/reference/errors.py), on Longley's series and the wage survey.
func TestErrorsAgainstLibrary(t *testing.T) {
	raw, err := os.ReadFile("../testdata/reference-errors/values.json")
	if err != nil {
		t.Fatal(err)
	}
	var values struct {
		Longley struct {
			Regressors              []string
			Robust, Autocorrelation map[string][]float64
		}
		Wages struct {
			Regressors []string
			Robust     map[string][]float64
			Occupation []float64
			TwoWay     []float64 `json:"occupation and sector"`
		}
	}
	if err := json.Unmarshal(raw, &values); err != nil {
		t.Fatal(err)
	}
	run := func(file, equation, rel string, set func(*compare.Study), names []string, want []float64) {
		t.Helper()
		data, err := os.ReadFile("../testdata/" + file + "/data.csv")
		if err != nil {
			t.Fatal(err)
		}
		s := newStudy(equation)
		set(s)
		for _, r := range []string{"drop", "drop-by-rule", "index", "components", "ridge", "center"} {
			s.Remedies = append(s.Remedies, compare.RemedySetting{Remedy: r, Off: true})
		}
		c, err := compare.Run(context.Background(), text(t, string(data)), s, compare.Options{})
		if err != nil {
			t.Fatal(err)
		}
		tolerance := map[string]float64{"longley": 1e-8, "wages": 1e-10}[file] // numpy in float64 on a condition number of 1e5
		for i, name := range names {
			if k := coefficient(t, c.Alternatives[0], name); math.Abs(k.SE/want[i]-1) > tolerance {
				t.Errorf("%s %s %s: %.14g, numpy %.14g", file, rel, name, k.SE, want[i])
			}
		}
	}
	longley := "employed = deflator + gnp + unemployed + armed_forces + population + year"
	wages := "ln(wage) = education + experience + union"
	for variant, want := range values.Longley.Robust {
		run("longley", longley, variant, func(s *compare.Study) { s.Errors = compare.ErrorSpec{Kind: "robust", Variant: variant} }, values.Longley.Regressors, want)
		run("wages", wages, variant, func(s *compare.Study) { s.Errors = compare.ErrorSpec{Kind: "robust", Variant: variant} }, values.Wages.Regressors, values.Wages.Robust[variant])
	}
	for text, want := range values.Longley.Autocorrelation {
		lags, err := strconv.Atoi(text)
		if err != nil {
			t.Fatal(err)
		}
		run("longley", longley, text+" lags", func(s *compare.Study) {
			s.Time, s.Errors = "year", compare.ErrorSpec{Kind: "autocorrelation", Lags: &lags}
		}, values.Longley.Regressors, want)
	}
	run("longley", longley, "the rule's 2 lags", func(s *compare.Study) { s.Time = "year" }, values.Longley.Regressors, values.Longley.Autocorrelation["2"])
	run("wages", wages, "occupation", func(s *compare.Study) { s.Clusters = []string{"occupation"} }, values.Wages.Regressors, values.Wages.Occupation)
	run("wages", wages, "two-way", func(s *compare.Study) { s.Clusters = []string{"occupation", "sector"} }, values.Wages.Regressors, values.Wages.TwoWay)
}

// TestErrorsTooClose: regressors that all but depend on each other leave robust errors without a value, and a reason; classical ones are computed in
// double-double and stay.
func TestErrorsTooClose(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 6))
	var cells [][]float64
	for range 40 {
		x := rng.NormFloat64()
		cells = append(cells, []float64{x + rng.NormFloat64(), x, x + 1e-7*rng.NormFloat64()})
	}
	c, err := compare.Run(context.Background(), numbers(t, []string{"y", "a", "b"}, cells), newStudy("y = a + b"), compare.Options{})
	if err != nil {
		t.Fatal(err)
	}
	k := coefficient(t, c.Alternatives[0], "a")
	if e := kindOf(t, k, "robust"); !math.IsNaN(e.SE) || !strings.Contains(e.Reason, "too close") {
		t.Errorf("robust %+v", e)
	}
	if e := kindOf(t, k, "classical"); !(e.SE > 1e5) {
		t.Errorf("classical %+v", e)
	}
}
