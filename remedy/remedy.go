// Package remedy holds what can be done about tangled regressors, one file a remedy.
//
// A Problem goes in (names, terms, groups, reduced rows); each registered Remedy offers Variants that can be learned
// on any training rows and described on all of them, or says why it does not apply. Everything is stated on the
// user's own regressors and units. Before it stands collinear, after it compare.
//
// Adding a remedy is adding one file with one registered value; commands, comparison, page and reference help are
// derived from it.
package remedy

import (
	"fmt"
	"slices"
	"sort"

	"modelmend/fit/linear"
)

// Remedy is one thing to do, with everything a person must know about it.
type Remedy struct {
	Key     string
	Title   string
	Order   int // place in lists; ties by Key
	Does    string
	Assumes string
	Buys    string
	Costs   string
	Means   string // what its coefficients mean
	Referee string // what a referee will ask
	Sources []string
	Options []Option
	// Variants lists what the remedy offers for the problem, and what does not apply and why. It must not change the problem.
	Variants func(*Problem) ([]Variant, []NotApplicable)
	// Plan works out something that is not a fit, for each coefficient of interest; nil where the remedy has none. Final.Fitted is that of as-is.
	Plan func(*Final) []Plan
}

// Option is a setting of a remedy: `--set KEY=VALUE` or remedies: {remedy: {name: value}} in a study file.
type Option struct {
	Key  string // remedy.name
	Kind OptionKind
	Text string
}

// OptionKind says what an option takes.
type OptionKind int

// The kinds of option.
const (
	NumberOption  OptionKind = iota // a number, not negative
	CountOption                     // a whole number, not negative
	ColumnsOption                   // names of regressors
)

// Settings holds the options that the user fixed, by full key.
type Settings struct {
	Numbers map[string]float64
	Columns map[string][]int
}

// Problem is what every remedy sees: the design and all its rows, reduced. Slices run over the p regressors.
type Problem struct {
	Names     []string
	Constant  bool
	Monomials [][]Factor // the powers and products as factors of atoms; nil for a column that is neither number nor product
	Category  []string   // the category whose dummy the column is, or ""
	Focal     []bool
	Smallest  []float64 // smallest effect of interest, NaN where none is declared; nil: none at all
	Keep      []bool
	Tangled   []bool
	Groups    []Group
	Settings  Settings
	Sample    *linear.Sample
	Penalties []float64 // the grid of ridge penalties, from 0 upwards, the same in every fold
	// Order lists the rows used in time order, where the study declares time and no two rows share a period; Time has the period of each row, NaN where
	// time is text.
	Order []int
	Time  []float64
	// Rows calls yield with the regressors of each row in turn (the slice is reused) and y.
	Rows func(yield func(x []float64, y float64))
}

// Factor is one atom of a power or product with its power.
type Factor struct {
	Atom  string
	Power int
}

// Group is a set of regressors that may be merged.
type Group struct {
	Name    string
	Columns []int
	ByUser  bool
	Weights []float64 // the user's, on raw units; nil: none given
}

// Variant is one alternative.
type Variant struct {
	Key     string
	Label   string
	Summary string // one sentence on what it does here
	Removes []int
	// OwnVariance: standard errors use this fit's own residual variance and degrees of freedom (it is least squares on a
	// smaller design); otherwise those of the model left alone.
	OwnVariance bool
	// Rows are what the variant is learned on instead of the design: another question, whose forecasts are scored on the dependent variable itself.
	Rows *Rows
	// Learn fits the variant on the training rows alone; tuning uses Training.Inner.
	Learn func(Training) *Fitted
	// Describe says what the fit on all rows imposes, costs and means.
	Describe func(*Final) Description
}

// Rows holds one transformed row for each row used, in file order: p columns, the dependent variable, and what is skipped because it has no
// transformed row.
type Rows struct {
	X    [][]float64
	Y    []float64
	Skip []bool
	// A forecast is scored by the squared distance of ScoredY to Unit * constant + sum ScoredX_j slope_j. Nil: ones, Y and X.
	Unit    []float64
	ScoredX [][]float64
	ScoredY []float64
}

// NotApplicable says why a remedy, or one variant of it, is not offered.
type NotApplicable struct {
	Key    string
	Reason string
}

// Training is what one fit may see.
type Training struct {
	Sample *linear.Sample
	Inner  []Split // how the training rows are split for tuning
	// Covariance asks for Fitted.Factor; Final, for everything that is told of the fit to all rows, the covariance included.
	Covariance bool
	Final      bool
}

// covariance reports whether Fitted.Factor is wanted.
func (t Training) covariance() bool { return t.Covariance || t.Final }

// Split is one inner split: rows to learn on, rows to predict.
type Split struct {
	Train *linear.Sample
	Held  *linear.HeldOut
}

// Status says what a reported coefficient is.
type Status string

// The statuses of a coefficient.
const (
	Estimated     Status = "estimated"
	Implied       Status = "implied" // follows from a merged or rotated coefficient
	Zero          Status = "zero"    // set to zero
	Different     Status = "different quantity"
	NotIdentified Status = "not identified"
)

// Fitted is the result of Learn. Slopes are on the user's regressors; the constant is ybar - xbar'b.
type Fitted struct {
	Slopes  []float64
	Status  []Status // p; nil: all estimated
	Columns int      // slopes that were free to move
	Tuning  *Tuning  // nil where nothing is tuned
	Weights []float64
	// NoErrors says why there is no standard error given the tuning, where no formula exists; Factor is then nil and only resamples give a spread.
	NoErrors string
	// For Training.Covariance or Final:
	Factor []float64 // covariance over sigma^2 of (constant, slopes), q x q row-major
	// Only for Training.Final:
	Posterior []float64 // posterior variance over sigma^2 of the slopes, where a prior is implied
	// Cross is the covariance over sigma^2 with the model left alone, q x q; nil: it equals Factor, as for every
	// least-squares fit under linear restrictions.
	Cross []float64
}

// Tuning records how a value was chosen.
type Tuning struct {
	Parameter string // penalty | components
	Fixed     bool
	Chosen    int
	Values    []float64
	MSE       []float64 // cross-validated mean squared error of each value; NaN when fixed by the user and no split was given
	MSESD     []float64 // its standard error over the splits
	Degrees   []float64 // effective degrees of freedom of each value; NaN where no formula gives them
	OnSquares bool      // the penalty is on squares alone, so that (n-1) times it is a multiple of each regressor's variance
	// Only for Training.Final:
	Slopes     [][]float64               // of each value
	Factor     func(value int) []float64 // covariance factor of each value; gives nil where Fitted.NoErrors says why
	Cross      func(value int) []float64 // as Fitted.Cross; nil: equals Factor
	Candidates []Candidate
	Components []Component
}

// Candidate is the value that another published rule chooses.
type Candidate struct {
	Rule  string
	Title string
	Value float64
}

// Component describes one principal direction.
type Component struct {
	Variance float64 // eigenvalue of the correlation matrix
	Share    float64
	T        float64
	Loadings []float64 // p; zero at spared regressors
	Kept     bool
}

// Final is what Describe sees.
type Final struct {
	Problem *Problem
	Sample  *linear.Sample // of Variant.Rows; else nil
	Fitted  *Fitted
	RSS     float64 // of this fit on all rows
	AsIs    *linear.Fit
	S       float64 // residual standard deviation of the model left alone, NaN where it has no degrees of freedom
	DF      float64 // its residual degrees of freedom
}

// Description is what the fit imposes and means.
type Description struct {
	Tests   []Test
	Meaning []Meaning
	Costs   []string
	Notes   []Note
	// Report takes (constant, slopes) to the coefficients to be shown, q x q row-major; nil: as they are.
	Report []float64
	// Reported statuses where Report changes them; nil: those of Fitted.
	Status  []Status
	Derived []Derived
	Weights []NamedValue
	// Of coefficients of interest:
	BreakEven []BreakEven
	Worst     []WorstCoverage
}

// BreakEven is the bias of a coefficient, in its own unit, beyond which the restrictions of a remedy raise its mean squared error; Estimated is how far
// the estimate moves.
type BreakEven struct {
	Coefficient     string
	Bias, Estimated float64
	// Effect is the same in terms of what one dropped regressor's coefficient may truly be; NaN where several restrictions are imposed.
	Effect float64
	Text   string
}

// WorstCoverage is the least coverage of a nominal 95 % interval when the remedy is applied only because a t-ratio is below 1.96.
type WorstCoverage struct {
	Coefficient string
	Correlation float64 // of the two estimates when left alone
	Coverage    float64
	TrueT       float64 // the true t-ratio of what is dropped at which it is reached
	Text        string
}

// Test is one test of what the variant imposes.
type Test struct {
	Name      string // restriction | strong-mse | weak-mse | single-t
	Statistic float64
	Degrees   []float64
	P         float64
	Critical  float64 // at 5 %; 0 where none is stated
	// Noncentrality is the largest one that the hypothesis allows.
	Noncentrality float64
	Text          string
}

// Meaning says what one coefficient means; Coefficient is empty for all of them.
type Meaning struct{ Coefficient, Text string }

// Note is a remark with a stable code.
type Note struct{ Code, Text string }

// NamedValue is a value with a name.
type NamedValue struct {
	Name  string
	Value float64
}

// Derived is a further coefficient: a combination of (constant, slopes), q weights.
type Derived struct {
	Name    string
	Weights []float64
	Status  Status
	Meaning string
}

var registered []Remedy

// register adds a remedy to the list. It panics on a missing field or a taken key, a programmer's slip that any test finds.
func register(r Remedy) Remedy {
	for name, v := range map[string]string{"Key": r.Key, "Title": r.Title, "Does": r.Does, "Assumes": r.Assumes, "Buys": r.Buys,
		"Costs": r.Costs, "Means": r.Means, "Referee": r.Referee} {
		if v == "" {
			panic(fmt.Sprintf("remedy %q: %s is missing", r.Key, name))
		}
	}
	if len(r.Sources) == 0 || r.Variants == nil {
		panic(fmt.Sprintf("remedy %q: Sources or Variants is missing", r.Key))
	}
	for _, o := range registered {
		if o.Key == r.Key {
			panic(fmt.Sprintf("remedy %q is registered twice", r.Key))
		}
	}
	registered = append(registered, r)
	return r
}

// All returns every remedy, by Order and then Key.
func All() []Remedy {
	out := slices.Clone(registered)
	sort.SliceStable(out, func(a, b int) bool {
		if out[a].Order != out[b].Order {
			return out[a].Order < out[b].Order
		}
		return out[a].Key < out[b].Key
	})
	return out
}

// Find returns the remedy with the key.
func Find(key string) (Remedy, bool) {
	for _, r := range registered {
		if r.Key == key {
			return r, true
		}
	}
	return Remedy{}, false
}

// q is the number of coefficients with the constant.
func (p *Problem) q() int { return len(p.Names) + p.offset() }

// offset is 1 where the model has a constant, the place of the first slope among the coefficients.
func (p *Problem) offset() int {
	if p.Constant {
		return 1
	}
	return 0
}

// names returns the names of columns.
func (p *Problem) names(cols []int) []string {
	out := make([]string, len(cols))
	for i, c := range cols {
		out[i] = p.Names[c]
	}
	return out
}

// dependents returns the columns that are built on column j: powers and products that hold all its factors and more.
func (p *Problem) dependents(j int) []int {
	var out []int
	for k := range p.Names {
		if k != j && divides(p.Monomials[j], p.Monomials[k]) {
			out = append(out, k)
		}
	}
	return out
}

// divides reports whether every factor of a stands in b at least to the same power, and b holds more.
func divides(a, b []Factor) bool {
	if len(a) == 0 || len(b) == 0 || degree(b) <= degree(a) {
		return false
	}
	for _, f := range a {
		found := false
		for _, g := range b {
			found = found || (g.Atom == f.Atom && g.Power >= f.Power)
		}
		if !found {
			return false
		}
	}
	return true
}

func degree(m []Factor) int {
	d := 0
	for _, f := range m {
		d += f.Power
	}
	return d
}
