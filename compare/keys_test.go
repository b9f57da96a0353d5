package compare_test

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"modelmend/compare"
)

// panel makes n rows in groups whose members share a regressor pattern and an error, and in periods; rows come in random order.
func panel(seed uint64, groups, each int) (names []string, cells [][]float64) {
	rng := rand.New(rand.NewPCG(seed, 31))
	names = []string{"y", "x1", "x2", "x3", "group", "period"}
	for g := range groups {
		shared, effect := rng.NormFloat64(), 2*rng.NormFloat64()
		for k := range each {
			x1 := shared + 0.3*rng.NormFloat64()
			x2 := x1 + 0.4*rng.NormFloat64()
			x3 := rng.NormFloat64()
			cells = append(cells, []float64{1 + x1 + 0.5*x3 + effect + 0.5*rng.NormFloat64(), x1, x2, x3, float64(g + 100), float64(2000 + (g*each+k)%40)})
		}
	}
	rng.Shuffle(len(cells), func(i, j int) { cells[i], cells[j] = cells[j], cells[i] })
	return names, cells
}

const panelEquation = "y = x1 + x2 + x3"

// TestWholeClustersHeldOut: no cluster lies on both sides of a split, and the errors are those of the same folds given as columns, which are held to a
// plain implementation and to a library elsewhere.
func TestWholeClustersHeldOut(t *testing.T) {
	names, cells := panel(1, 30, 6)
	s := newStudy(panelEquation)
	s.Clusters = []string{"group"}
	s.Folds = compare.FoldSpec{Count: 6, Repeats: 2}
	got, err := compare.Run(context.Background(), numbers(t, names, cells), s, compare.Options{})
	if err != nil {
		t.Fatal(err)
	}
	if got.Plan.Kind != "clusters" || got.Leak != nil {
		t.Fatalf("folds of kind %s, leak %v", got.Plan.Kind, got.Leak)
	}
	for r := range 2 {
		seen := map[float64]int{}
		for i, row := range cells {
			f, ok := seen[row[4]]
			if ok && f != got.Plan.Held(r, i) {
				t.Fatalf("group %g lies in two folds", row[4])
			}
			seen[row[4]] = got.Plan.Held(r, i)
		}
	}
	for i := range cells {
		cells[i] = append(cells[i], float64(got.Plan.Held(0, i)), float64(got.Plan.Held(1, i)))
	}
	by := newStudy(panelEquation)
	by.Folds = compare.FoldSpec{Kind: "column", Columns: []string{"fold0", "fold1"}}
	want, err := compare.Run(context.Background(), numbers(t, append(names, "fold0", "fold1"), cells), by, compare.Options{})
	if err != nil {
		t.Fatal(err)
	}
	for i, a := range got.Alternatives {
		if b := want.Alternatives[i]; math.Abs(a.Out.RMSE-b.Out.RMSE) > 1e-10*b.Out.RMSE || a.Key != b.Key {
			t.Errorf("%s: %g, by columns %s: %g", a.Key, a.Out.RMSE, b.Key, b.Out.RMSE)
		}
	}
}

// TestLeakIsMeasured: with an error that clusters share, random folds promise too much; both errors are there and the note names the leak.
func TestLeakIsMeasured(t *testing.T) {
	names, cells := panel(3, 25, 8)
	for i := range cells { // a regressor that all but names the cluster, so that random folds can learn its error
		cells[i][3] = cells[i][4]*cells[i][4] - 220*cells[i][4] + 0.01*cells[i][3]
		cells[i][0] += 3 * math.Sin(cells[i][4])
	}
	s := newStudy("y = x1 + x2 + x3 + categories(group)")
	s.Clusters = []string{"group"}
	s.Folds = compare.FoldSpec{Kind: "random", Count: 5, Repeats: 2}
	c, err := compare.Run(context.Background(), numbers(t, names, cells), s, compare.Options{})
	if err != nil {
		t.Fatal(err)
	}
	a := c.Alternatives[0]
	if c.Leak == nil || a.OutApart == nil || c.Leak.Kind != "clusters" {
		t.Fatalf("leak %+v", c.Leak)
	}
	if !(a.OutApart.RMSE > 1.5*a.Out.RMSE) {
		t.Errorf("error %g with random folds, %g with clusters held out", a.Out.RMSE, a.OutApart.RMSE)
	}
	found := false
	for _, n := range c.Notes {
		found = found || (n.Code == "folds-leak" && strings.Contains(n.Text, "group") && strings.Contains(n.Text, "leaks"))
	}
	if !found {
		t.Errorf("notes %v", c.Notes)
	}
}

// TestRollingAgainstPlain compares errors and chosen tuning of rolling folds with the plain implementation: each segment from 1 on predicted from the
// earlier ones, the inner folds of an outer one being the segments before it.
func TestRollingAgainstPlain(t *testing.T) {
	for _, gap := range []int{0, 3} {
		names, cells := panel(5, 20, 8)
		s := newStudy(panelEquation)
		s.Time = "period"
		s.Folds = compare.FoldSpec{Kind: "rolling", Count: 4, Gap: gap}
		c, err := compare.Run(context.Background(), numbers(t, names, cells), s, compare.Options{})
		if err != nil {
			t.Fatal(err)
		}
		all := rows{}
		var period []float64
		for _, row := range cells {
			all.x = append(all.x, row[1:4])
			all.y = append(all.y, row[0])
			period = append(period, row[5])
		}
		// 40 periods with four rows each, cut into seven segments: the starts follow from the fold of each row, and from equal shares before.
		w := c.Plan.Window
		segments := len(w.From)
		start := make([]float64, segments+1)
		for s := range start {
			start[s] = math.Inf(1)
		}
		for i := range cells {
			piece := c.Plan.Of(0, i)
			for s := range segments {
				if piece >= w.From[s] && piece < w.To[s] {
					start[s] = math.Min(start[s], period[i])
				}
			}
		}
		for s := 1; s < segments; s++ {
			if width := start[s] - start[s-1]; width < 5 || width > 6 {
				t.Fatalf("segments start at %v", start)
			}
		}
		learn := func(s int) rows { return all.pick(func(i int) bool { return period[i] < start[s]-float64(gap) }) }
		held := func(s int, before float64) rows {
			return all.pick(func(i int) bool { return period[i] >= start[s] && period[i] < start[s+1] && period[i] < before })
		}
		penalties := c.Problem.Penalties
		for _, a := range c.Alternatives {
			for f := range 4 {
				s := segments - 4 + f
				var fit plainFit
				switch a.Key {
				case "as-is":
					fit = plainSubset(learn(s), []int{0, 1, 2})
				case "drop:x2":
					fit = plainSubset(learn(s), []int{0, 2})
				case "ridge":
					best, bestError := 0, math.Inf(1)
					for k, penalty := range penalties {
						sse := 0.0
						for g := 1; g < s; g++ {
							if h := held(g, start[s]-float64(gap)); len(h.y) > 0 {
								sse += plainRidge(learn(g), penalty).sse(h)
							}
						}
						if sse <= bestError {
							best, bestError = k, sse
						}
					}
					if got := a.Out.Folds[f].Chosen; math.Abs(got-penalties[best]) > 1e-9*penalties[best] {
						t.Errorf("gap %d fold %d: chose %g, want %g", gap, f, got, penalties[best])
					}
					fit = plainRidge(learn(s), penalties[best])
				default:
					continue
				}
				h := held(s, math.Inf(1))
				want := fit.sse(h) / float64(len(h.y))
				if got := a.Out.Folds[f]; math.Abs(got.MSE-want) > 1e-9*want || got.Rows != len(h.y) {
					t.Errorf("gap %d: %s fold %d: mean squared error %.12g on %d rows, want %.12g on %d", gap, a.Key, f, got.MSE, got.Rows, want, len(h.y))
				}
			}
		}
	}
}

// TestDefaultFolds: what the study declares decides the split.
func TestDefaultFolds(t *testing.T) {
	names, cells := panel(2, 20, 5)
	for _, c := range []struct {
		name string
		set  func(*compare.Study)
		want string
	}{
		{"nothing", func(*compare.Study) {}, "random"},
		{"clusters", func(s *compare.Study) { s.Clusters = []string{"group"} }, "clusters"},
		{"time", func(s *compare.Study) { s.Time = "period" }, "blocks"},
		{"time, to predict", func(s *compare.Study) { s.Time, s.Purpose = "period", compare.Predict }, "rolling"},
		{"both", func(s *compare.Study) { s.Time, s.Clusters = "period", []string{"group"} }, "clusters"},
	} {
		s := newStudy(panelEquation)
		c.set(s)
		got, err := compare.Run(context.Background(), numbers(t, names, cells), s, compare.Options{})
		if err != nil {
			t.Fatalf("%s: %v", c.name, err)
		}
		if string(got.Plan.Kind) != c.want {
			t.Errorf("%s: folds of kind %s, want %s", c.name, got.Plan.Kind, c.want)
		}
	}
}

// TestResampledClusters: with errors that clusters share and a regressor that varies between clusters alone, the resampled standard error is that of the
// cluster formula (Liang and Zeger 1986), written out in plain loops, and far above the classical one.
func TestResampledClusters(t *testing.T) {
	rng := rand.New(rand.NewPCG(4, 4))
	const groups, each = 120, 10
	var cells [][]float64
	for g := range groups {
		x, effect := rng.NormFloat64(), rng.NormFloat64()
		for range each {
			cells = append(cells, []float64{2*x + effect + rng.NormFloat64(), x, rng.NormFloat64(), float64(g)})
		}
	}
	s := newStudy("y = x + z")
	s.Clusters, s.Resamples = []string{"g"}, 1500
	c, err := compare.Run(context.Background(), numbers(t, []string{"y", "x", "z", "g"}, cells), s, compare.Options{})
	if err != nil {
		t.Fatal(err)
	}
	all := rows{}
	for _, r := range cells {
		all.x, all.y = append(all.x, r[1:3]), append(all.y, r[0])
	}
	fit := plainSubset(all, []int{0, 1})
	mean, sxx, _, _ := all.moments()
	det := sxx[0][0]*sxx[1][1] - sxx[0][1]*sxx[0][1]
	top, rss := 0.0, 0.0
	for g := range groups {
		score := 0.0
		for i := g * each; i < (g+1)*each; i++ {
			e := all.y[i] - fit.constant - fit.slopes[0]*all.x[i][0] - fit.slopes[1]*all.x[i][1]
			net := (sxx[1][1]*(all.x[i][0]-mean[0]) - sxx[0][1]*(all.x[i][1]-mean[1])) / det
			score += net * e
			rss += e * e
		}
		top += score * score
	}
	formula, classical := math.Sqrt(top), math.Sqrt(rss/(groups*each-3)*sxx[1][1]/det)
	got := c.Alternatives[0].Coefficients[1].Resampled.SE
	if c.Resampling.Kind != compare.DrawClusters || c.Resampling.Units != groups {
		t.Errorf("drawn: %d %s", c.Resampling.Units, c.Resampling.Kind)
	}
	if math.Abs(got/formula-1) > 0.1 || formula < 2*classical {
		t.Errorf("resampled %g, cluster formula %g, classical %g", got, formula, classical)
	}
}

// TestResampledBlocks: with errors and a regressor that follow each other closely in time, blocks of periods give a standard error well above that of
// rows drawn one by one, and within a third of the true one, known from many simulated series.
func TestResampledBlocks(t *testing.T) {
	const n, rho = 400, 0.7
	series := func(rng *rand.Rand) (y, x []float64) {
		var u, e float64
		for range n {
			u = rho*u + rng.NormFloat64()
			e = rho*e + rng.NormFloat64()
			x, y = append(x, u), append(y, u+e)
		}
		return y, x
	}
	slope := func(y, x []float64) float64 {
		r := rows{y: y}
		for _, v := range x {
			r.x = append(r.x, []float64{v})
		}
		return plainSubset(r, []int{0}).slopes[0]
	}
	rng := rand.New(rand.NewPCG(12, 1))
	var m, ss float64
	const samples = 2000
	for range samples {
		b := slope(series(rng))
		m += b / samples
		ss += b * b / samples
	}
	truth := math.Sqrt(ss - m*m)
	mean := func(time string) float64 {
		total := 0.0
		for k := range 6 {
			y, x := series(rand.New(rand.NewPCG(uint64(k), 77)))
			var cells [][]float64
			for i := range y {
				cells = append(cells, []float64{y[i], x[i], float64(i)})
			}
			s := newStudy("y = x")
			s.Time, s.Resamples = time, 400
			c, err := compare.Run(context.Background(), numbers(t, []string{"y", "x", "t"}, cells), s, compare.Options{})
			if err != nil {
				t.Fatal(err)
			}
			total += c.Alternatives[0].Coefficients[1].Resampled.SE / 6
		}
		return total
	}
	blocks, single := mean("t"), mean("")
	t.Logf("true %.4f, blocks %.4f, rows %.4f", truth, blocks, single)
	if blocks < 1.25*single || math.Abs(blocks/truth-1) > 0.33 {
		t.Errorf("true standard error %.4f, by blocks %.4f, by rows %.4f", truth, blocks, single)
	}
}

// TestKeyErrors: a key that does not fit says so.
func TestKeyErrors(t *testing.T) {
	names, cells := panel(2, 20, 5)
	for _, c := range []struct {
		set  func(*compare.Study)
		want string
	}{
		{func(s *compare.Study) { s.Clusters = []string{"groop"} }, "did you mean group"},
		{func(s *compare.Study) { s.Clusters = []string{"group", "period", "x1"} }, "two-way"},
		{func(s *compare.Study) { s.Clusters = []string{"group", "group"} }, "named twice"},
		{func(s *compare.Study) { s.Folds = compare.FoldSpec{Kind: "clusters"} }, "needs clusters"},
		{func(s *compare.Study) { s.Folds = compare.FoldSpec{Kind: "blocks"} }, "with time"},
		{func(s *compare.Study) { s.Clusters, s.Folds.Count = []string{"group"}, 21 }, "20 clusters cannot fill 21 folds"},
		{func(s *compare.Study) { s.Time, s.Folds = "period", compare.FoldSpec{Kind: "rolling", Count: 40} }, "ask for at most"},
	} {
		s := newStudy(panelEquation)
		c.set(s)
		_, err := compare.Run(context.Background(), numbers(t, names, cells), s, compare.Options{})
		if err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%+v: %v, want %q", s, err, c.want)
		}
	}
	bad := text(t, "y,x,when\n1,2,2001-03\n2,1,March\n4,3,2001-05\n3,5,2001-06\n")
	s := newStudy("y = x")
	s.Time = "when"
	if _, err := compare.Run(context.Background(), bad, s, compare.Options{}); err == nil || !strings.Contains(err.Error(), `"March" in line 3`) {
		t.Errorf("a month by name: %v", err)
	}
	missing := text(t, "y,x,g\n1,2,a\n2,1,\n4,3,b\n3,5,b\n")
	s = newStudy("y = x")
	s.Clusters = []string{"g"}
	if _, err := compare.Run(context.Background(), missing, s, compare.Options{}); err == nil || !strings.Contains(err.Error(), "line 3") {
		t.Errorf("a missing cluster: %v", err)
	}
}

// TestRollingInterval pins the formula by hand: d = 1, 3, 2, 6, J = 4: lags floor(4 (0.04)^(2/9)) = 1; mean 3, deviations -2, 0, -1, 3; sums of
// squares 14 and of neighbours' products -3; variance (14/3 + 2 (1/2) (-3/3)) / 4 = (11/3)/4; t(3) = 3.182446 (common tables).
func TestRollingInterval(t *testing.T) {
	got := compare.RollingInterval([]float64{1, 3, 2, 6})
	half := 3.1824463052842638 * math.Sqrt(11.0/12)
	if math.Abs(got.Estimate-3) > 1e-12 || math.Abs(got.High-3-half) > 1e-9 || math.Abs(got.Low-3+half) > 1e-9 {
		t.Errorf("got %+v, want 3 plus and minus %g", got, half)
	}
	if fmt.Sprint(compare.RollingInterval([]float64{1, 2}).Low) != "NaN" {
		t.Error("two folds have no interval")
	}
}
