package collinear

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"sort"
	"strconv"
	"strings"

	"modelmend/fit/doubledouble"
	"modelmend/fit/figures"
	"modelmend/fit/linear"
	"modelmend/fit/reduction"
)

// exactDependencies writes each exact dependency as an equation, in simple numbers where the data allow.
func exactDependencies(in Input, r *Report) []Dependency {
	var out []Dependency
	for _, e := range in.Sample.Dependencies() {
		d := Dependency{Left: e.Left, Columns: e.Columns, Coefficients: e.Coefficients, Constant: e.Constant,
			R2: 1, Kind: Exact, RowsUsed: in.Sample.N, RowsHolding: in.Sample.N, Index: math.Inf(1)}
		if simple, ok := simplify(in, r, d); ok && simple.RowsHolding == simple.RowsUsed {
			d = simple
		}
		d.Equation = write(in.Names, d)
		out = append(out, d)
	}
	return out
}

// nearDependencies picks left-hand regressors by pivoting: of the regressors still to be explained the one with the
// highest inflation factor is written on the smallest subset of the others that reaches 99 % of what all of them
// explain, and is then set aside; until no factor among the rest reaches the cut-off.
func nearDependencies(in Input, r *Report) []Dependency {
	exactLeft := map[int]bool{}
	for _, d := range in.Sample.Dependencies() {
		exactLeft[d.Left] = true
	}
	inPool := map[int]bool{}
	for j, v := range r.VIF {
		if v >= in.Cutoffs.VIF && !exactLeft[j] {
			inPool[j] = true
		}
	}
	for _, j := range involved(in.Raw, in.Sample, in.Cutoffs, in.Sample.Constant) {
		if !exactLeft[j] {
			inPool[j] = true
		}
	}
	var pool []int
	for j := range in.Names {
		if inPool[j] {
			pool = append(pool, j)
		}
	}
	// The relation among involved regressors need not be as tight as the cut-off where only the condition index speaks.
	var out []Dependency
	for len(pool) > 1 && len(out) < len(in.Names) {
		factors := in.Sample.Keep(pool).InflationFactors()
		best := 0
		for i := range pool {
			if factors[i] > factors[best] {
				best = i
			}
		}
		if math.IsInf(factors[best], 1) {
			break
		}
		least := in.Cutoffs.VIF
		if len(out) == 0 {
			least = math.Min(least, 2)
		}
		if factors[best] < least {
			break
		}
		left := pool[best]
		rest := without(pool, left)
		d := relation(in, r, left, rest)
		d.Kind = gradeDependency(in, d)
		if len(r.ScaledIndex) > 0 {
			d.Index = indexFor(r, len(out))
		}
		d.Equation = write(in.Names, d)
		out = append(out, d)
		pool = rest
	}
	return out
}

// indexFor gives the k-th largest finite condition index.
func indexFor(r *Report, k int) float64 {
	var finite []float64
	for _, v := range r.ScaledIndex {
		if !math.IsInf(v, 1) {
			finite = append(finite, v)
		}
	}
	if len(finite)-1-k < 0 {
		return math.NaN()
	}
	return finite[len(finite)-1-k]
}

func gradeDependency(in Input, d Dependency) Kind {
	members := map[int]bool{}
	for _, j := range d.Members() {
		members[j] = true
	}
	for _, g := range in.Groups {
		inside := 0
		for _, j := range g.Columns {
			if members[j] {
				inside++
			}
		}
		if inside == len(members) && g.Category {
			return Structural
		}
	}
	if in.Centered != in.Sample {
		_, _, r2 := in.Centered.Auxiliary(d.Left, d.Columns)
		if 1/(1-r2) < in.Cutoffs.VIF && 1/(1-d.R2) >= in.Cutoffs.VIF {
			return Structural
		}
	}
	return Substantive
}

// relation regresses left on the smallest subset of rest that reaches 99 % of the R2 of all, and tries simple numbers.
func relation(in Input, r *Report, left int, rest []int) Dependency {
	_, _, full := in.Sample.Auxiliary(left, rest)
	cols := smallestSubset(in.Sample, left, rest, 0.99*full)
	d := Dependency{Left: left, Columns: cols, RowsUsed: in.Sample.N}
	d.Coefficients, d.Constant, d.R2 = in.Sample.Auxiliary(left, cols)
	if simple, ok := simplify(in, r, d); ok {
		return simple
	}
	if l := leftWithoutMinus(d, r.VIF); l != left {
		members := without(d.Members(), l)
		sort.Ints(members)
		alt := Dependency{Left: l, Columns: members, RowsUsed: d.RowsUsed}
		alt.Coefficients, alt.Constant, alt.R2 = in.Sample.Auxiliary(l, members)
		positive := true
		for _, c := range alt.Coefficients {
			positive = positive && c >= 0
		}
		if positive {
			return alt
		}
	}
	return d
}

// smallestSubset searches subsets by size, all of them while they are few, else by adding the best one.
func smallestSubset(s *linear.Sample, left int, rest []int, enough float64) []int {
	m := len(rest)
	for size := 1; size < m; size++ {
		if choose(m, size) > 1500 {
			break
		}
		var best []int
		bestR2 := -1.0
		combos(m, size, func(idx []int) {
			cols := make([]int, size)
			for i, k := range idx {
				cols[i] = rest[k]
			}
			if _, _, r2 := s.Auxiliary(left, cols); r2 > bestR2 {
				best, bestR2 = cols, r2
			}
		})
		if bestR2 >= enough {
			return best
		}
	}
	var cols []int
	for len(cols) < m {
		best, bestR2 := -1, -1.0
		for _, j := range rest {
			if slices.Contains(cols, j) {
				continue
			}
			if _, _, r2 := s.Auxiliary(left, append(append([]int{}, cols...), j)); r2 > bestR2 {
				best, bestR2 = j, r2
			}
		}
		cols = append(cols, best)
		if bestR2 >= enough {
			break
		}
	}
	sort.Ints(cols)
	return cols
}

func choose(n, k int) int {
	out := 1
	for i := range k {
		out = out * (n - i) / (i + 1)
		if out > 1<<20 {
			return out
		}
	}
	return out
}

func combos(n, k int, visit func([]int)) {
	idx := make([]int, k)
	for i := range idx {
		idx[i] = i
	}
	for {
		visit(idx)
		i := k - 1
		for i >= 0 && idx[i] == n-k+i {
			i--
		}
		if i < 0 {
			return
		}
		idx[i]++
		for j := i + 1; j < k; j++ {
			idx[j] = idx[j-1] + 1
		}
	}
}

// simplify rounds each coefficient to the nearest integer, half, tenth or power of ten, takes the constant as the median
// remainder in the data's own decimals, and accepts when the rounded relation holds to those decimals in at least
// 95 % of the rows. The left side becomes the one that needs no minus sign before a regressor.
func simplify(in Input, r *Report, d Dependency) (Dependency, bool) {
	if len(d.Columns) == 0 {
		return d, false
	}
	rounded := make([]float64, len(d.Coefficients))
	for i, c := range d.Coefficients {
		v, ok := simpleNumber(c)
		if !ok {
			return d, false
		}
		rounded[i] = v
	}
	d.Coefficients = rounded
	if l := leftWithoutMinus(d, r.VIF); l != d.Left {
		if alt, ok := solveFor(d, l); ok {
			d = alt
		}
	}
	decimals := 0
	computed := false
	for _, j := range d.Members() {
		if in.Decimals[j] < 0 {
			computed = true
		}
		decimals = max(decimals, in.Decimals[j])
	}
	head, size := start(in, d, computed)
	tolerance := 0.5 * math.Pow10(-decimals) * (1 - 1e-9)
	if computed {
		// Computed columns have no decimals of their own: only rounding in the last place is allowed.
		d.Constant, tolerance = median(head), 1e-11*size
	} else {
		d.Constant = roundTo(median(head), decimals)
	}
	holding := 0
	for _, v := range head {
		if math.Abs(v-d.Constant) <= tolerance {
			holding++
		}
	}
	if float64(holding) < 0.9*float64(len(head)) {
		return d, false // no use looking at all rows
	}
	return count(in, d, tolerance)
}

// headRows is how many rows the constant of a simple relation is taken from.
const headRows = 4000

// errEnough ends a pass early.
var errEnough = errors.New("enough rows")

// start returns the remainders of the first rows and, when all is set, the largest size of what is added up in any row.
func start(in Input, d Dependency, all bool) (head []float64, size float64) {
	in.Each(func(cols []reduction.Column, _ []int) error {
		for i := range cols[d.Left].Hi {
			v, s := remainder(cols, d, i)
			size = math.Max(size, s)
			if len(head) < headRows {
				head = append(head, v)
			} else if !all {
				return errEnough
			}
		}
		return nil
	})
	return head, size
}

// count looks at every row.
func count(in Input, d Dependency, tolerance float64) (Dependency, bool) {
	d.RowsHolding, d.RowsUsed, d.Exceptions = 0, 0, nil
	err := in.Each(func(cols []reduction.Column, lines []int) error {
		for i := range cols[d.Left].Hi {
			v, _ := remainder(cols, d, i)
			d.RowsUsed++
			if math.Abs(v-d.Constant) <= tolerance {
				d.RowsHolding++
			} else if len(d.Exceptions) < 10 {
				d.Exceptions = append(d.Exceptions, lines[i])
			}
		}
		return nil
	})
	d.Simple = err == nil && float64(d.RowsHolding) >= 0.95*float64(d.RowsUsed)
	if !d.Simple {
		d.RowsHolding, d.RowsUsed, d.Exceptions = 0, in.Sample.N, nil
	}
	return d, d.Simple
}

// remainder returns x_left - sum c*x in one row, and the largest size of what is added up.
func remainder(cols []reduction.Column, d Dependency, row int) (rest, size float64) {
	v := cols[d.Left].At(row)
	size = math.Abs(v.Hi)
	for k, j := range d.Columns {
		// 0.1 and its multiples are meant as decimals.
		t := cols[j].At(row).Mul(decimalNumber(d.Coefficients[k]))
		size = math.Max(size, math.Abs(t.Hi))
		v = v.Sub(t)
	}
	return v.Float(), size
}

func decimalNumber(c float64) doubledouble.Number {
	v, err := doubledouble.Parse(strconv.FormatFloat(c, 'g', 12, 64))
	if err != nil {
		return doubledouble.From(c)
	}
	return v
}

func median(v []float64) float64 {
	s := append([]float64{}, v...)
	sort.Float64s(s)
	return s[len(s)/2]
}

func roundTo(v float64, decimals int) float64 {
	f := math.Pow10(decimals)
	return math.Round(v*f) / f
}

// simpleNumber returns the simple number within 2 % of c: an integer, a half, a tenth or a power of ten.
func simpleNumber(c float64) (float64, bool) {
	fits := func(v float64) bool { return v != 0 && math.Abs(v-c) <= 0.02*math.Abs(v) }
	for _, step := range []float64{1, 0.5, 0.1} {
		if v := math.Round(c/step) * step; fits(v) {
			return roundTo(v, 1), true
		}
	}
	if c != 0 {
		v := math.Copysign(math.Pow(10, math.Round(math.Log10(math.Abs(c)))), c)
		if fits(v) {
			return v, true
		}
	}
	return 0, false
}

// leftWithoutMinus returns the member which, standing alone on the left, leaves no minus sign before a regressor; among
// several the one with the highest inflation factor; d.Left when there is none.
func leftWithoutMinus(d Dependency, vif []float64) int {
	best, bestVIF := d.Left, -1.0
	members := d.Members()
	weights := append([]float64{-1}, d.Coefficients...) // 0 = sum weights*x + constant
	for i, l := range members {
		ok := true
		for k := range members {
			if k != i && -weights[k]/weights[i] < 0 {
				ok = false
			}
		}
		if ok && vif[l] > bestVIF {
			best, bestVIF = l, vif[l]
		}
	}
	return best
}

// solveFor writes the relation with another regressor on the left, if its coefficients stay simple.
func solveFor(d Dependency, left int) (Dependency, bool) {
	members := d.Members()
	weights := append([]float64{-1}, d.Coefficients...)
	out := Dependency{Left: left, R2: d.R2, Kind: d.Kind, RowsUsed: d.RowsUsed, RowsHolding: d.RowsHolding, Index: d.Index}
	var w float64
	for i, l := range members {
		if l == left {
			w = weights[i]
		}
	}
	type pair struct {
		col  int
		coef float64
	}
	var pairs []pair
	for i, l := range members {
		if l == left {
			continue
		}
		v := -weights[i] / w
		s, ok := simpleNumber(v)
		if !ok || math.Abs(s-v) > 1e-12*math.Abs(v) {
			return d, false
		}
		pairs = append(pairs, pair{l, s})
	}
	sort.Slice(pairs, func(a, b int) bool { return pairs[a].col < pairs[b].col })
	for _, p := range pairs {
		out.Columns = append(out.Columns, p.col)
		out.Coefficients = append(out.Coefficients, p.coef)
	}
	out.Constant = -d.Constant / w
	return out, true
}

// write sets the relation as text. Simple and exact relations use "="; others "≈" and three significant digits.
func write(names []string, d Dependency) string {
	var b strings.Builder
	b.WriteString(names[d.Left])
	sign, digits := " ≈ ", 3
	if d.Simple || d.Kind == Exact {
		sign, digits = " = ", 12
		if !d.Simple {
			digits = 6
		}
	}
	b.WriteString(sign)
	first := true
	term := func(v float64, name string) {
		switch {
		case first && v < 0:
			b.WriteString("-")
		case !first && v < 0:
			b.WriteString(" - ")
		case !first:
			b.WriteString(" + ")
		}
		first = false
		a := math.Abs(v)
		switch {
		case name == "":
			b.WriteString(figures.Short(a, digits))
		case figures.Short(a, digits) == "1":
			b.WriteString(name)
		default:
			b.WriteString(figures.Short(a, digits) + "*" + name)
		}
	}
	for i, j := range d.Columns {
		term(d.Coefficients[i], names[j])
	}
	if d.Constant != 0 || first {
		term(d.Constant, "")
	}
	switch {
	case d.Kind == Exact:
	case d.Simple && d.RowsHolding == d.RowsUsed:
		fmt.Fprintf(&b, " (holds in all %d rows)", d.RowsUsed)
	case d.Simple && d.RowsUsed-d.RowsHolding == 1:
		fmt.Fprintf(&b, " (holds in %d of %d rows; not in line %d)", d.RowsHolding, d.RowsUsed, d.Exceptions[0])
	case d.Simple:
		fmt.Fprintf(&b, " (holds in %d of %d rows)", d.RowsHolding, d.RowsUsed)
	}
	return b.String()
}
