// Package collinear says which regressors are tangled with which, and how badly.
//
// Samples of a design go in (as written, with the constant, and with the variables of powers and products centred);
// inflation factors, condition indexes, variance shares, term-group factors, near-dependencies written as equations
// and graded reasons come out. It refuses nothing: an exact dependency is an answer. Before it stands linear, after it
// remedy.
package collinear

import (
	"fmt"
	"math"
	"slices"
	"sort"
	"strings"

	"modelmend/fit/figures"
	"modelmend/fit/linear"
	"modelmend/fit/reduction"
)

// Kind grades a reason or a dependency.
type Kind string

// Substantive: two or more real quantities move together. Structural: it comes from powers, products or the dummies of
// one category and goes away by centring or another base. Location: one regressor against the constant, a matter of its
// zero point. Exact: a linear identity.
const (
	Substantive Kind = "substantive"
	Structural  Kind = "structural"
	Location    Kind = "location"
	Exact       Kind = "exact"
)

// Cutoffs are reference marks, rules of thumb and no verdicts.
type Cutoffs struct {
	VIF            float64 // 10: usually attributed to Marquardt (1970), Technometrics 12, 591-612
	ConditionIndex float64 // 30: Belsley, Kuh and Welsch (1980), Regression Diagnostics
	VarianceShare  float64 // 0.5: the same
}

// DefaultCutoffs returns the marks that are usual in the trade.
func DefaultCutoffs() Cutoffs { return Cutoffs{VIF: 10, ConditionIndex: 30, VarianceShare: 0.5} }

// Input is a design as this package sees it; slices run over the p regressors unless said otherwise.
type Input struct {
	Names    []string
	Sample   *linear.Sample // as written
	Raw      *linear.Sample // [1 x] about zero, the constant first
	Centered *linear.Sample // variables of powers and products centred before they are multiplied; nil: same as Sample
	// CenteredRaw is Raw for the centred columns; nil: same as Raw.
	CenteredRaw *linear.Sample
	Groups      []Group // term groups, covering every regressor once
	Decimals    []int   // decimals in the data; -1 for computed columns
	// Each gives the rows block by block: the regressors and the file line of each row. It may be called several times.
	Each    func(yield func(cols []reduction.Column, lines []int) error) error
	Cutoffs Cutoffs
}

// Group is a set of columns that belong together.
type Group struct {
	Name     string
	Columns  []int
	Category bool // the dummies of one category
}

// Report is the diagnosis.
type Report struct {
	VIF            []float64 // +Inf where exact
	CenteredVIF    []float64
	GeneralizedVIF []float64 // by group
	CenteredIndex  []float64 // ascending from 1; +Inf for exact
	ScaledIndex    []float64
	Shares         [][]float64 // coefficient (constant first) x dimension of ScaledIndex; rows sum to 1
	Dependencies   []Dependency
	Reasons        []Reason
	Flagged        bool
	Tangled        []bool
}

// Reason is one ground for the flag (substantive, exact) or a remark (structural, location).
type Reason struct {
	Kind    Kind
	Text    string
	Members []int
}

// Dependency is a relation x_Left = Constant + sum Coefficients*x_Columns that holds exactly or nearly.
type Dependency struct {
	Left         int
	Columns      []int
	Coefficients []float64
	Constant     float64
	R2           float64
	Kind         Kind
	Simple       bool // coefficients are simple numbers and the relation holds to the data's own decimals in RowsHolding rows
	RowsHolding  int
	RowsUsed     int
	Exceptions   []int // file lines, at most ten
	Index        float64
	Equation     string
}

// Members returns the regressors of the relation, the left one first.
func (d Dependency) Members() []int { return append([]int{d.Left}, d.Columns...) }

// Diagnose computes the report. Cost O(p^3) and one pass over the rows for each candidate equation.
func Diagnose(in Input) *Report {
	if in.Centered == nil {
		in.Centered, in.CenteredRaw = in.Sample, in.Raw
	}
	r := &Report{VIF: in.Sample.InflationFactors(), CenteredVIF: in.Centered.InflationFactors()}
	for _, g := range in.Groups {
		if len(g.Columns) == 1 { // the column's own factor, which is at hand
			r.GeneralizedVIF = append(r.GeneralizedVIF, r.VIF[g.Columns[0]])
			continue
		}
		r.GeneralizedVIF = append(r.GeneralizedVIF, in.Sample.GeneralizedInflation(g.Columns))
	}
	r.CenteredIndex, _ = indexes(in.Sample)
	r.ScaledIndex, r.Shares = indexes(in.Raw)
	r.Dependencies = append(exactDependencies(in, r), nearDependencies(in, r)...)
	r.Reasons = reasons(in, r)
	r.Tangled = make([]bool, len(in.Names))
	for _, reason := range r.Reasons {
		if reason.Kind == Substantive || reason.Kind == Exact {
			r.Flagged = true
			for _, j := range reason.Members {
				r.Tangled[j] = true
			}
		}
	}
	for _, d := range r.Dependencies {
		if d.Kind == Substantive || d.Kind == Exact {
			for _, j := range d.Members() {
				r.Tangled[j] = true
			}
		}
	}
	return r
}

// indexes returns the scaled condition indexes of the sample's columns in ascending order and each coefficient's variance
// shares, phi_jk = v_jk^2/mu_k^2 over the row sum. A dimension without variation has index +Inf and takes the whole
// variance of the coefficients in it.
//
// Source: Belsley, Kuh and Welsch (1980), Regression Diagnostics, section 3.2.
func indexes(s *linear.Sample) (index []float64, shares [][]float64) {
	sp := s.Spectrum(nil)
	m, r := len(sp.Cols), sp.Rank
	for k := range r {
		index = append(index, sp.Sigma[0]/sp.Sigma[k])
	}
	for k := r; k < m; k++ {
		index = append(index, math.Inf(1))
	}
	shares = make([][]float64, m)
	for i := range m {
		row := make([]float64, m)
		null := 0.0
		for k := r; k < m; k++ {
			v := sp.Null[i*(m-r)+k-r]
			row[k] = v * v
			null += v * v
		}
		if null > 1e-14 {
			for k := range row {
				row[k] /= null
				if k < r {
					row[k] = 0
				}
			}
		} else {
			sum := 0.0
			for k := range r {
				v := sp.V[i*r+k] / sp.Sigma[k]
				row[k] = v * v
				sum += row[k]
			}
			for k := range row {
				row[k] /= sum
				if k >= r {
					row[k] = 0
				}
			}
		}
		shares[i] = row
	}
	return index, shares
}

// involved returns the slopes whose variance shares, summed over the dimensions beyond the cut-off, exceed the mark
// (Belsley, Kuh and Welsch's way with competing dependencies), and which the others of them explain at least by half:
// so that two matters of origin, each against the constant, are not added up.
func involved(raw, centered *linear.Sample, c Cutoffs, constant bool) []int {
	index, shares := indexes(raw)
	first := 0
	if constant {
		first = 1
	}
	var cand []int
	for i := first; i < len(shares); i++ {
		sum := 0.0
		for k, v := range shares[i] {
			if index[k] >= c.ConditionIndex && !math.IsInf(index[k], 1) { // exact dependencies are a reason of their own
				sum += v
			}
		}
		if sum > c.VarianceShare {
			cand = append(cand, i-first)
		}
	}
	for {
		kept := cand[:0:0]
		for _, j := range cand {
			if _, _, r2 := centered.Auxiliary(j, without(cand, j)); r2 >= 0.5 {
				kept = append(kept, j)
			}
		}
		if len(kept) == len(cand) {
			return cand
		}
		cand = kept
	}
}

func intersect(a, b []int) []int {
	var out []int
	for _, j := range a {
		if slices.Contains(b, j) {
			out = append(out, j)
		}
	}
	return out
}

func without(set []int, j int) []int {
	var out []int
	for _, i := range set {
		if i != j {
			out = append(out, i)
		}
	}
	return out
}

func reasons(in Input, r *Report) []Reason {
	var out []Reason
	for _, d := range r.Dependencies {
		if d.Kind == Exact {
			out = append(out, Reason{Exact, "exact dependency: " + d.Equation, d.Members()})
		}
	}
	category := map[int]int{} // column -> group, for dummies of one category
	for g, group := range in.Groups {
		if group.Category {
			for _, j := range group.Columns {
				category[j] = g
			}
		}
	}
	var hard, soft []int
	for j, v := range r.VIF {
		if math.IsInf(v, 1) || v < in.Cutoffs.VIF {
			continue
		}
		if g, ok := category[j]; ok && perDegree(r.GeneralizedVIF[g], len(in.Groups[g].Columns)) < in.Cutoffs.VIF {
			soft = append(soft, j)
			continue
		}
		if r.CenteredVIF[j] >= in.Cutoffs.VIF {
			hard = append(hard, j)
		} else {
			soft = append(soft, j)
		}
	}
	if len(hard) > 0 {
		out = append(out, Reason{Substantive, fmt.Sprintf("inflation factor of %s or more: %s", short(in.Cutoffs.VIF), list(in.Names, hard, r.CenteredVIF)), hard})
	}
	constant := in.Sample.Constant
	inv := involved(in.Raw, in.Sample, in.Cutoffs, constant)
	largest := math.Inf(1)
	for k := len(r.ScaledIndex) - 1; k >= 0; k-- {
		if !math.IsInf(r.ScaledIndex[k], 1) {
			largest = r.ScaledIndex[k]
			break
		}
	}
	// What is still involved once powers and products are formed about the means is substantive; the rest is a matter of origin.
	still := inv
	if in.Centered != in.Sample {
		still = intersect(inv, involved(in.CenteredRaw, in.Centered, in.Cutoffs, constant))
	}
	tie := func(cols []int) string {
		return fmt.Sprintf("condition index %s ties %s together (each has more than %s of its variance there)", short(largest), list(in.Names, cols, nil), short(in.Cutoffs.VarianceShare))
	}
	if len(still) >= 2 {
		out = append(out, Reason{Substantive, tie(still), still})
	}
	if len(inv) >= 2 && len(still) < len(inv) {
		var rest []int
		for _, j := range inv {
			if len(still) < 2 || !slices.Contains(still, j) {
				rest = append(rest, j)
			}
		}
		if len(rest) >= 2 {
			out = append(out, Reason{Structural, tie(rest) + "; centring undoes it", rest})
		}
	}
	if len(soft) > 0 {
		out = append(out, Reason{Structural, fmt.Sprintf("inflation factor of %s or more from powers, products or a small base category alone: %s",
			short(in.Cutoffs.VIF), list(in.Names, soft, r.VIF)), soft})
	}
	return append(out, locations(in, r, inv)...)
}

// locations names regressors whose dimension ties them to the constant alone.
func locations(in Input, r *Report, inv []int) []Reason {
	if !in.Sample.Constant {
		return nil
	}
	taken := map[int]bool{}
	for _, j := range inv {
		taken[j] = true
	}
	var out []Reason
	for j := range in.Names {
		if taken[j] || r.VIF[j] >= in.Cutoffs.VIF {
			continue
		}
		sum := 0.0
		for k, v := range r.Shares[j+1] {
			if r.ScaledIndex[k] >= in.Cutoffs.ConditionIndex {
				sum += v
			}
		}
		if sum > in.Cutoffs.VarianceShare {
			out = append(out, Reason{Location, fmt.Sprintf("%s varies little around a mean far from zero, which ties it to the constant only; "+
				"counting it from another zero point removes this and changes no slope", in.Names[j]), []int{j}})
		}
	}
	return out
}

func perDegree(v float64, degrees int) float64 { return math.Pow(v, 1/float64(degrees)) }

// PerDegree returns a group's generalised factor to the power 1/degrees, which is on the scale of a plain factor.
func PerDegree(v float64, degrees int) float64 { return perDegree(v, degrees) }

func list(names []string, cols []int, vif []float64) string {
	sorted := append([]int{}, cols...)
	if vif != nil {
		sort.SliceStable(sorted, func(a, b int) bool { return vif[sorted[a]] > vif[sorted[b]] })
	}
	var parts []string
	for _, j := range sorted {
		if vif != nil {
			parts = append(parts, fmt.Sprintf("%s (%s)", names[j], short(vif[j])))
		} else {
			parts = append(parts, names[j])
		}
	}
	if len(parts) > 8 {
		parts = append(parts[:8], fmt.Sprintf("and %d more", len(parts)-8))
	}
	return strings.Join(parts, ", ")
}

// short prints a number for prose.
func short(v float64) string { return figures.Short(v, 3) }
