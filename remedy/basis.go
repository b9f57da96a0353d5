package remedy

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"modelmend/fit/figures"
	"modelmend/fit/linear"
	"modelmend/fit/tail"
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

// restrictionTest is the F test of the linear restrictions that a fit with the given RSS and free slopes imposes on the
// model left alone: ((RSS_R - RSS)/q) / s^2 on q and n-k degrees of freedom, which equals the Wald test.
func restrictionTest(f *Final, what string) (Test, bool) {
	q := float64(f.AsIs.Rank - f.Fitted.Columns)
	if q <= 0 || math.IsNaN(f.S) || f.S == 0 {
		return Test{}, false
	}
	stat := math.Max(0, f.RSS-f.AsIs.RSS) / q / (f.S * f.S)
	t := Test{Name: "restriction", Statistic: stat, Degrees: []float64{q, f.DF}, P: tail.F(stat, q, f.DF)}
	t.Text = fmt.Sprintf("%s: F(%g, %g) = %s, p-value %s. A large p-value does not show that the restriction is true.",
		what, q, f.DF, say(stat), sayP(t.P))
	return t, true
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
