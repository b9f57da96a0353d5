package compare_test

import (
	"math"
	"math/rand/v2"
	"sort"
	"testing"

	"modelmend/compare"
)

// This file holds a plain, slow implementation of the nested cross-validation, written from the definitions and sharing nothing with
// the program: rows as float64, Gauss elimination, Jacobi rotations. It is the yardstick of TestNestedAgainstPlain.

type rows struct {
	x [][]float64
	y []float64
}

func (r rows) pick(keep func(i int) bool) rows {
	var out rows
	for i := range r.y {
		if keep(i) {
			out.x = append(out.x, r.x[i])
			out.y = append(out.y, r.y[i])
		}
	}
	return out
}

// moments returns means, centred cross-products, centred X'y and mean of y.
func (r rows) moments() (mean []float64, s [][]float64, xy []float64, my float64) {
	n, p := float64(len(r.y)), len(r.x[0])
	mean = make([]float64, p)
	for i := range r.y {
		my += r.y[i] / n
		for j := range p {
			mean[j] += r.x[i][j] / n
		}
	}
	s, xy = make([][]float64, p), make([]float64, p)
	for j := range p {
		s[j] = make([]float64, p)
	}
	for i := range r.y {
		for j := range p {
			a := r.x[i][j] - mean[j]
			xy[j] += a * (r.y[i] - my)
			for k := range p {
				s[j][k] += a * (r.x[i][k] - mean[k])
			}
		}
	}
	return mean, s, xy, my
}

// plainSolve solves a x = b by Gauss elimination with row exchanges.
func plainSolve(a [][]float64, b []float64) []float64 {
	n := len(b)
	m := make([][]float64, n)
	for i := range m {
		m[i] = append(append([]float64{}, a[i]...), b[i])
	}
	for c := range n {
		best := c
		for i := c; i < n; i++ {
			if math.Abs(m[i][c]) > math.Abs(m[best][c]) {
				best = i
			}
		}
		m[c], m[best] = m[best], m[c]
		for i := range n {
			if i != c {
				f := m[i][c] / m[c][c]
				for k := c; k <= n; k++ {
					m[i][k] -= f * m[c][k]
				}
			}
		}
	}
	x := make([]float64, n)
	for i := range x {
		x[i] = m[i][n] / m[i][i]
	}
	return x
}

// jacobi returns eigenvalues (descending) and eigenvectors (columns) of a symmetric matrix.
func jacobi(a [][]float64) (values []float64, vectors [][]float64) {
	n := len(a)
	m, v := make([][]float64, n), make([][]float64, n)
	for i := range n {
		m[i] = append([]float64{}, a[i]...)
		v[i] = make([]float64, n)
		v[i][i] = 1
	}
	for range 60 {
		for p := range n {
			for q := p + 1; q < n; q++ {
				if m[p][q] == 0 {
					continue
				}
				theta := (m[q][q] - m[p][p]) / (2 * m[p][q])
				t := math.Copysign(1, theta) / (math.Abs(theta) + math.Sqrt(theta*theta+1))
				c := 1 / math.Sqrt(t*t+1)
				s := t * c
				for k := range n {
					m[k][p], m[k][q] = c*m[k][p]-s*m[k][q], s*m[k][p]+c*m[k][q]
				}
				for k := range n {
					m[p][k], m[q][k] = c*m[p][k]-s*m[q][k], s*m[p][k]+c*m[q][k]
					v[k][p], v[k][q] = c*v[k][p]-s*v[k][q], s*v[k][p]+c*v[k][q]
				}
			}
		}
	}
	order := make([]int, n)
	for i := range order {
		order[i] = i
	}
	sort.Slice(order, func(i, j int) bool { return m[order[i]][order[i]] > m[order[j]][order[j]] })
	vectors = make([][]float64, n)
	for i := range n {
		vectors[i] = make([]float64, n)
	}
	for k, o := range order {
		values = append(values, m[o][o])
		for i := range n {
			vectors[i][k] = v[i][o]
		}
	}
	return values, vectors
}

// plainFit is a constant and slopes.
type plainFit struct {
	constant float64
	slopes   []float64
}

func (f plainFit) sse(r rows) float64 {
	sum := 0.0
	for i := range r.y {
		e := r.y[i] - f.constant
		for j, b := range f.slopes {
			e -= b * r.x[i][j]
		}
		sum += e * e
	}
	return sum
}

func withSlopes(mean []float64, my float64, b []float64) plainFit {
	c := my
	for j := range b {
		c -= mean[j] * b[j]
	}
	return plainFit{c, b}
}

// plainRidge solves (S + kD) b = X'y.
func plainRidge(r rows, k float64) plainFit {
	mean, s, xy, my := r.moments()
	for j := range s {
		s[j][j] *= 1 + k
	}
	return withSlopes(mean, my, plainSolve(s, xy))
}

// plainComponents regresses on the first m eigenvectors of the correlation matrix.
func plainComponents(r rows, m int) plainFit {
	mean, s, xy, my := r.moments()
	p := len(xy)
	d := make([]float64, p)
	for j := range d {
		d[j] = math.Sqrt(s[j][j])
	}
	corr := make([][]float64, p)
	for j := range p {
		corr[j] = make([]float64, p)
		for k := range p {
			corr[j][k] = s[j][k] / d[j] / d[k]
		}
	}
	values, vectors := jacobi(corr)
	b := make([]float64, p)
	for k := range m {
		g := 0.0
		for j := range p {
			g += vectors[j][k] * xy[j] / d[j]
		}
		for j := range p {
			b[j] += vectors[j][k] * g / values[k] / d[j]
		}
	}
	return withSlopes(mean, my, b)
}

func plainSubset(r rows, keep []int) plainFit {
	mean, s, xy, my := r.moments()
	sub, rhs := make([][]float64, len(keep)), make([]float64, len(keep))
	for i, a := range keep {
		rhs[i] = xy[a]
		for _, b := range keep {
			sub[i] = append(sub[i], s[a][b])
		}
	}
	b := make([]float64, len(xy))
	for i, v := range plainSolve(sub, rhs) {
		b[keep[i]] = v
	}
	return withSlopes(mean, my, b)
}

// plainIndex merges the columns in group into the mean of their z-scores, signs aligned with the first.
func plainIndex(r rows, group []int) plainFit {
	mean, s, _, my := r.moments()
	p, n := len(mean), float64(len(r.y))
	w := make([]float64, p)
	for _, g := range group {
		w[g] = 1 / (float64(len(group)) * math.Sqrt(s[g][g]/(n-1)))
		if s[group[0]][g] < 0 {
			w[g] = -w[g]
		}
	}
	merged := rows{y: r.y}
	for i := range r.y {
		var row []float64
		v := 0.0
		for j := range p {
			if w[j] != 0 {
				v += w[j] * r.x[i][j]
			} else {
				row = append(row, r.x[i][j])
			}
		}
		merged.x = append(merged.x, append(row, v))
	}
	all := make([]int, len(merged.x[0]))
	for j := range all {
		all[j] = j
	}
	fit := plainSubset(merged, all)
	b := make([]float64, p)
	k := 0
	for j := range p {
		if w[j] != 0 {
			b[j] = w[j] * fit.slopes[len(all)-1]
		} else {
			b[j] = fit.slopes[k]
			k++
		}
	}
	return withSlopes(mean, my, b)
}

// plainNested chooses among candidates by the remaining folds and returns the error on the held-out one.
func plainNested(r rows, fold []int32, f int32, count, folds int, later bool, fit func(rows, int) plainFit) (mse float64, chosen int) {
	train := r.pick(func(i int) bool { return fold[i] != f })
	held := r.pick(func(i int) bool { return fold[i] == f })
	best := math.Inf(1)
	for c := range count {
		sum := 0.0
		for g := range int32(folds) {
			if g == f {
				continue
			}
			inner := r.pick(func(i int) bool { return fold[i] != f && fold[i] != g })
			sum += fit(inner, c).sse(r.pick(func(i int) bool { return fold[i] == g }))
		}
		if sum < best || (later && sum == best) {
			best, chosen = sum, c
		}
	}
	return fit(train, chosen).sse(held) / float64(len(held.y)), chosen
}

// TestNestedAgainstPlain compares every alternative, fold by fold, with the plain implementation above.
func TestNestedAgainstPlain(t *testing.T) {
	for _, c := range []struct {
		name string
		n    int
		spec compare.FoldSpec
	}{
		{"five folds, two repeats", 53, compare.FoldSpec{Kind: "random", Count: 5, Repeats: 2}},
		{"leave one out", 18, compare.FoldSpec{}},
	} {
		t.Run(c.name, func(t *testing.T) {
			rng := rand.New(rand.NewPCG(11, uint64(c.n)))
			r := rows{}
			var cells [][]float64
			for range c.n {
				common := rng.NormFloat64()
				x := []float64{100 + 3*(common+0.2*rng.NormFloat64()), 5 + common + 0.2*rng.NormFloat64(), rng.NormFloat64(), 0.01 * (rng.NormFloat64() - common)}
				y := 2 + 0.3*x[0] - 0.4*x[1] + 0.5*x[2] + 20*x[3] + 2*rng.NormFloat64()
				r.x, r.y = append(r.x, x), append(r.y, y)
				cells = append(cells, append([]float64{y}, x...))
			}
			table := numbers(t, []string{"y", "a", "b", "c", "d"}, cells)
			study := newStudy("y = a + b + c + d")
			study.Folds = c.spec
			study.Cutoffs.VIF = 5
			study.Groups = []compare.NamedGroup{{Name: "concept", Members: []string{"a", "b", "d"}}}
			got := runStudy(t, table, study)
			folds := got.Plan.Count
			grid := got.Problem.Penalties
			if len(grid) != 101 {
				t.Fatalf("%d penalties", len(grid))
			}
			seen := 0
			for _, a := range got.Alternatives {
				var direct func(rows) plainFit
				var path func(rows, int) plainFit
				count, later := 0, false
				switch a.Key {
				case "as-is":
					direct = func(r rows) plainFit { return plainRidge(r, 0) }
				case "drop:a":
					direct = func(r rows) plainFit { return plainSubset(r, []int{1, 2, 3}) }
				case "drop:b":
					direct = func(r rows) plainFit { return plainSubset(r, []int{0, 2, 3}) }
				case "index:concept:mean":
					direct = func(r rows) plainFit { return plainIndex(r, []int{0, 1, 3}) }
				case "ridge":
					path, count, later = func(r rows, i int) plainFit { return plainRidge(r, grid[i]) }, len(grid), true
				case "components":
					path, count = func(r rows, i int) plainFit { return plainComponents(r, i) }, 5
				default:
					continue
				}
				seen++
				for _, f := range a.Out.Folds {
					fold := make([]int32, len(r.y))
					for i := range fold {
						fold[i] = int32(got.Plan.Of(f.Repeat, i))
					}
					var mse float64
					if direct != nil {
						held := r.pick(func(i int) bool { return fold[i] == int32(f.Fold) })
						mse = direct(r.pick(func(i int) bool { return fold[i] != int32(f.Fold) })).sse(held) / float64(len(held.y))
					} else {
						var chosen int
						mse, chosen = plainNested(r, fold, int32(f.Fold), count, folds, later, path)
						want := float64(chosen)
						if a.Key == "ridge" {
							want = grid[chosen]
						}
						if f.Chosen != want {
							t.Errorf("%s, repeat %d, fold %d: chose %v, plain implementation %v", a.Key, f.Repeat, f.Fold, f.Chosen, want)
						}
					}
					near(t, a.Key, f.MSE, mse, 1e-8)
				}
			}
			if seen < 6 {
				t.Errorf("only %d of the six alternatives were compared", seen)
			}
		})
	}
}
