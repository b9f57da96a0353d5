package remedy

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"modelmend/fit/figures"
	"modelmend/fit/linear"
	"modelmend/fit/pretest"
)

// fitBasis fits the m combinations X*A (A p x m row-major) by least squares and states the result on the p regressors. A
// regressor that no combination holds is zero; one whose combination is not identified is not identified.
func fitBasis(t Training, a []float64, m int, held Status) *Fitted {
	p := t.Sample.P
	sub := t.Sample.Transform(a, m)
	fit := sub.LeastSquares(t.covariance())
	f := &Fitted{Slopes: make([]float64, p), Status: make([]Status, p), Columns: fit.Rank}
	for i := range p {
		f.Status[i] = Zero
		for j := range m {
			w := a[i*m+j]
			if w == 0 {
				continue
			}
			f.Slopes[i] += w * fit.Slopes[j]
			switch {
			case fit.NotIdentified != nil && fit.NotIdentified[j]:
				f.Status[i] = NotIdentified
			case f.Status[i] == NotIdentified:
			case single(a, m, j):
				f.Status[i] = Estimated
			default:
				f.Status[i] = held
			}
		}
	}
	if t.covariance() {
		f.Factor = embed(fit.Factor(sub), a, p, m, t.Sample.Constant)
	}
	return f
}

// single reports whether combination j is one regressor by itself.
func single(a []float64, m, j int) bool {
	n := 0
	for i := 0; i < len(a)/m; i++ {
		if a[i*m+j] != 0 {
			n++
		}
	}
	return n == 1
}

// embed takes the covariance factor of (constant, combinations) to (constant, regressors).
func embed(factor, a []float64, p, m int, constant bool) []float64 {
	if !constant {
		return linear.Embed(p, m, a, factor)
	}
	q, r := p+1, m+1
	b := make([]float64, q*r)
	b[0] = 1
	for i := range p {
		copy(b[(i+1)*r+1:(i+2)*r], a[i*m:(i+1)*m])
	}
	return linear.Embed(q, r, b, factor)
}

// selection returns the basis that keeps the columns in keep.
func selection(p int, keep []int) []float64 {
	a := make([]float64, p*len(keep))
	for j, c := range keep {
		a[c*len(keep)+j] = 1
	}
	return a
}

// restrictionTests are the tests of the linear restrictions that a fit with the given RSS and free slopes imposes on the model left alone: the F
// test ((RSS_R - RSS)/q) / s^2 on q and n-k degrees of freedom, which equals the Wald test, and the mean-squared-error criteria.
func restrictionTests(f *Final, what string) []Test {
	q := float64(f.AsIs.Rank - f.Fitted.Columns)
	if q <= 0 || math.IsNaN(f.S) || f.S == 0 {
		return nil
	}
	return criteria(math.Max(0, f.RSS-f.AsIs.RSS)/q/(f.S*f.S), q, f.DF, what)
}

// criteria holds the F statistic of q restrictions against three hypotheses: they are true; imposing them lowers the mean squared error of every
// combination of coefficients; imposing them lowers that of the fitted values.
func criteria(stat, q, df float64, what string) []Test {
	c := pretest.MeanSquaredError(stat, q, df, 0.05)
	degrees := []float64{q, df}
	out := []Test{{Name: "restriction", Statistic: stat, Degrees: degrees, P: c.Exact.P, Critical: c.Exact.Critical,
		Text: fmt.Sprintf("%s: F(%g, %g) = %s, p-value %s. A large p-value does not show that the restriction is true.", what, q, df, say(stat), sayP(c.Exact.P))}}
	verdict := func(c pretest.Criterion) string {
		if stat > c.Critical {
			return "rejected"
		}
		return "not rejected, which is no proof"
	}
	what = "that imposing it lowers the mean squared error of every combination of coefficients (Toro-Vizcarrondo and Wallace 1968)"
	if q == 1 {
		what = "that imposing it lowers the mean squared error, of every combination of coefficients as of the fitted values (Toro-Vizcarrondo and Wallace 1968)"
	}
	out = append(out, Test{Name: "strong-mse", Statistic: stat, Degrees: degrees, P: c.Strong.P, Critical: c.Strong.Critical, Noncentrality: c.Strong.Noncentrality,
		Text: fmt.Sprintf("hypothesis %s: F = %s against %s at 5 %%, p-value %s: %s.", what, say(stat), say(c.Strong.Critical), sayP(c.Strong.P), verdict(c.Strong))})
	if q > 1 {
		out = append(out, Test{Name: "weak-mse", Statistic: stat, Degrees: degrees, P: c.SecondWeak.P, Critical: c.SecondWeak.Critical, Noncentrality: c.SecondWeak.Noncentrality,
			Text: fmt.Sprintf("hypothesis that imposing it lowers the mean squared error of the fitted values (Wallace 1972): F = %s against %s at 5 %%, p-value %s: %s.",
				say(stat), say(c.SecondWeak.Critical), sayP(c.SecondWeak.P), verdict(c.SecondWeak))})
	}
	return out
}

// breakEvens says, for each coefficient of interest, how large the bias may be before the restrictions of a least-squares fit do harm: what they take off
// its variance, at the residual variance of the model left alone.
func breakEvens(f *Final) []BreakEven {
	if f.AsIs.NotIdentified != nil || math.IsNaN(f.S) || f.S == 0 {
		return nil
	}
	p := f.Problem
	var out []BreakEven
	for j, focal := range p.Focal {
		if !focal {
			continue
		}
		i := p.offset() + j
		long := f.AsIs.Inverse[j*len(p.Names)+j]
		bias := f.S * pretest.BreakEvenBias(long, f.Fitted.Factor[i*p.q()+i])
		if math.IsNaN(bias) {
			continue
		}
		b := BreakEven{Coefficient: p.Names[j], Bias: bias, Effect: math.NaN(), Estimated: f.Fitted.Slopes[j] - f.AsIs.Slopes[j]}
		if bias < 1e-3*f.S*math.Sqrt(long) {
			b.Text = fmt.Sprintf("%s gains nothing to speak of", b.Coefficient)
		} else {
			b.Text = fmt.Sprintf("%s has a smaller mean squared error than when left alone as long as the true bias is below %s; the estimate moves by %s", b.Coefficient, say(bias), say(b.Estimated))
		}
		out = append(out, b)
	}
	return out
}

// tune cross-validates count values on the inner splits: errors must return each value's sum of squared errors on the held-out rows of a split,
// everything learned on its training rows. It returns each value's mean squared error over all held-out rows and its standard error over the
// splits.
func tune(inner []Split, count int, errors func(Split) []float64) (mse, sd []float64) {
	mse, sd = make([]float64, count), make([]float64, count)
	if len(inner) == 0 {
		for i := range mse {
			mse[i], sd[i] = math.NaN(), math.NaN()
		}
		return mse, sd
	}
	sum, squares := make([]float64, count), make([]float64, count)
	rows := 0
	for _, s := range inner {
		rows += s.Held.N
		for i, e := range errors(s) {
			mse[i] += e
			m := e / float64(s.Held.N)
			sum[i] += m
			squares[i] += m * m
		}
	}
	j := float64(len(inner))
	for i := range mse {
		mse[i] /= float64(rows)
		mean := sum[i] / j
		v := math.Max(0, squares[i]-j*mean*mean) / math.Max(1, j-1)
		sd[i] = math.Sqrt(v / j)
	}
	return mse, sd
}

// oneByOne evaluates slopes one value at a time.
func oneByOne(s Split, count int, slopes func(i int) []float64) []float64 {
	out := make([]float64, count)
	for i := range out {
		out[i] = s.Held.SSE(slopes(i))
	}
	return out
}

// smallest returns the place of the smallest value; of equal ones the last when later is set, else the first.
func smallest(v []float64, later bool) int {
	best := 0
	for i := range v {
		if v[i] < v[best] || (later && v[i] == v[best]) {
			best = i
		}
	}
	return best
}

// withFixed puts a value that the user fixed into an ascending grid, unless it is there, and returns its place.
func withFixed(grid []float64, fixed float64) ([]float64, int) {
	at, there := slices.BinarySearch(grid, fixed)
	if there {
		return grid, at
	}
	return slices.Insert(slices.Clone(grid), at, fixed), at
}

// say prints a number for prose.
func say(v float64) string { return figures.Short(v, 4) }

func sayP(p float64) string {
	if p < 0.001 {
		return "below 0.001"
	}
	return strconv.FormatFloat(p, 'f', 3, 64)
}

func join(names []string) string {
	switch len(names) {
	case 0:
		return "nothing"
	case 1:
		return names[0]
	}
	return strings.Join(names[:len(names)-1], ", ") + " and " + names[len(names)-1]
}
