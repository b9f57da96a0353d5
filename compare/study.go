// Package compare fits every remedy to one problem, on the same rows and the same folds.
//
// A table and a Study go in; a Comparison comes out: the diagnosis, the precision ledger, every alternative with its
// coefficients in the user's units, and its out-of-sample error with everything learned inside the training rows. It
// refuses studies that name what the data do not have. Before it stands remedy, after it view.
package compare

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"modelmend/fit/collinear"
	"modelmend/fit/design"
	"modelmend/fit/equation"
	"modelmend/fit/folds"
	"modelmend/remedy"
)

// Purpose says what the model is for.
type Purpose string

// The purposes.
const (
	Explain  Purpose = "explain"
	Predict  Purpose = "predict"
	Describe Purpose = "describe"
)

// Study is everything that a user declares, as in a study file.
type Study struct {
	Data           string
	Equation       string
	Focal          []string
	Purpose        Purpose
	SmallestEffect []NamedNumber
	Keep           []string
	Groups         []NamedGroup
	Rows           string
	Remedies       []RemedySetting
	NoConstant     bool
	Clusters       []string // columns: rows of one cluster belong together; two for two-way clusters
	Time           string   // the column that orders the rows
	Errors         ErrorSpec
	Folds          FoldSpec
	Seed           int64
	Resamples      int // 0: none
	Simulations    int // samples for each truth; 0: none; SimulationsBySize
	Cutoffs        collinear.Cutoffs
	ShowSmallCells bool
	Invented       bool // a built-in study
}

// NamedNumber is a number for one coefficient.
type NamedNumber struct {
	Name  string
	Value float64
}

// NamedGroup is a group of regressors that may be merged.
type NamedGroup struct {
	Name    string
	Members []string
	Weights []float64 // on raw units, by member; nil: none given
}

// RemedySetting fixes one option of a remedy, or switches the remedy off.
type RemedySetting struct {
	Remedy string
	Option string   // "" with Off
	Number float64  // for number and count options
	Names  []string // for column options
	Off    bool
}

// FoldSpec says how rows are split. Kind "" is whole clusters where the study declares them; contiguous blocks of time, or rolling ones for a model
// that is to predict, where it declares time; else random, or leave-one-out under 30 rows.
type FoldSpec struct {
	Kind    string // random | leave-one-out | clusters | blocks | rolling | column
	Count   int    // 0: 10
	Repeats int    // 0: 5
	Columns []string
	Gap     int // rolling: periods left out between what is learned on and what is held out
}

// DefaultSeed is the seed of a study that names none.
const DefaultSeed = 20260101

// Columns reports which columns of the data the study needs: those of the equation, of the sample condition and of the folds.
//
// It returns a *equation.SyntaxError when the equation or the condition cannot be read.
func (s *Study) Columns() (need func(name string) bool, err error) {
	q, err := equation.Parse(s.Equation)
	if err != nil {
		return nil, err
	}
	names := slices.Concat(s.Folds.Columns, s.Clusters, []string{s.Time})
	for _, e := range append([]*equation.Expr{q.Dependent}, q.Terms...) {
		names = append(names, e.Columns()...)
	}
	if strings.TrimSpace(s.Rows) != "" {
		cond, err := equation.ParseCondition(s.Rows)
		if err != nil {
			return nil, err
		}
		names = append(names, cond.Columns()...)
	}
	return func(name string) bool { return slices.Contains(names, name) }, nil
}

// StudyError says which key of a study does not fit the data, and what would.
type StudyError struct {
	Key, Found, Advice string
}

func (e *StudyError) Error() string {
	s := e.Key + ": " + e.Found
	if e.Advice != "" {
		s += "; " + e.Advice
	}
	return s
}

// resolve finds the regressors behind a name: a regressor as written in the equation, or a category (all its dummies).
func resolve(d *design.Design, key, name string) ([]int, error) {
	canonical := name
	if e, err := equation.ParseExpr(name); err == nil {
		canonical = e.String()
	}
	var cols []int
	for j, r := range d.Regressors {
		if r.Name == name || r.Name == canonical {
			return []int{j}, nil
		}
		if r.Category == name || r.Category == canonical {
			cols = append(cols, j)
		}
	}
	if len(cols) > 0 {
		return cols, nil
	}
	advice := "the regressors are " + strings.Join(d.Names()[:min(8, len(d.Regressors))], ", ")
	if near := equation.Nearest(name, d.Names()); len(near) > 0 {
		advice = "did you mean " + strings.Join(near, " or ") + "?"
	}
	return nil, &StudyError{key, fmt.Sprintf("%q is not a regressor of the equation", name), advice}
}

func resolveAll(d *design.Design, key string, names []string) ([]int, error) {
	var out []int
	for _, n := range names {
		cols, err := resolve(d, key, n)
		if err != nil {
			return nil, err
		}
		for _, c := range cols {
			if !slices.Contains(out, c) {
				out = append(out, c)
			}
		}
	}
	return out, nil
}

func marks(n int, cols []int) []bool {
	out := make([]bool, n)
	for _, c := range cols {
		out[c] = true
	}
	return out
}

// settings checks the options of remedies and resolves the regressors in them.
func settings(d *design.Design, list []RemedySetting) (remedy.Settings, map[string]bool, error) {
	out := remedy.Settings{Numbers: map[string]float64{}, Columns: map[string][]int{}}
	off := map[string]bool{}
	for _, s := range list {
		r, ok := remedy.Find(s.Remedy)
		if !ok {
			return out, nil, &StudyError{"remedies", fmt.Sprintf("there is no remedy %q", s.Remedy), "`modelmend remedies` lists them"}
		}
		if s.Off {
			if s.Remedy == "as-is" {
				return out, nil, &StudyError{"remedies", "as-is cannot be switched off", "every other remedy is compared with it"}
			}
			off[s.Remedy] = true
			continue
		}
		key := s.Remedy + "." + s.Option
		i := slices.IndexFunc(r.Options, func(o remedy.Option) bool { return o.Key == key })
		if i < 0 {
			var have []string
			for _, o := range r.Options {
				have = append(have, o.Key)
			}
			advice := s.Remedy + " has no options"
			if len(have) > 0 {
				advice = "it has " + strings.Join(have, ", ")
			}
			return out, nil, &StudyError{"remedies", fmt.Sprintf("%s is not an option", key), advice}
		}
		switch r.Options[i].Kind {
		case remedy.ColumnsOption:
			cols, err := resolveAll(d, key, s.Names)
			if err != nil {
				return out, nil, err
			}
			out.Columns[key] = cols
		default:
			if s.Number < 0 || math.IsNaN(s.Number) || math.IsInf(s.Number, 0) || (r.Options[i].Kind == remedy.CountOption && s.Number != math.Trunc(s.Number)) {
				return out, nil, &StudyError{key, fmt.Sprintf("%g is not allowed", s.Number), r.Options[i].Text + ": a number from 0 on (a whole one for a count)"}
			}
			out.Numbers[key] = s.Number
		}
	}
	return out, off, nil
}

// mostCelled is the number of regressors up to which the rows of a large table are gathered in cells: beyond, a thousand sets of
// cross-products would take more memory than they save work.
const mostCelled = 150

// numbers returns folds and repeats, 10 and 5 where none are named.
func (f FoldSpec) numbers() (count, repeats int) {
	count, repeats = f.Count, f.Repeats
	if count == 0 {
		count = 10
	}
	if repeats == 0 {
		repeats = 5
	}
	return count, repeats
}

// keptTogether is the kind of split that keeps together what the study declares to belong together, or "".
func (s *Study) keptTogether() string {
	switch {
	case len(s.Clusters) > 0:
		return "clusters"
	case s.Time != "" && s.Purpose == Predict:
		return "rolling"
	case s.Time != "":
		return "blocks"
	}
	return ""
}

// FoldKinds are the kinds of split that a study may name.
var FoldKinds = []string{"random", "leave-one-out", "clusters", "blocks", "rolling", "column"}

// plan draws the folds.
func (c *Comparison) plan(spec FoldSpec) (*folds.Plan, error) {
	d, study := c.Design, c.Study
	count, repeats := spec.numbers()
	celled := len(d.Regressors) <= mostCelled
	kind := spec.Kind
	if kind == "" {
		kind = study.keptTogether()
	}
	if kind == "" {
		kind = "random"
		if d.Rows < 30 && spec.Count == 0 {
			kind = "leave-one-out"
		}
	}
	if (kind == "blocks" || kind == "rolling") && c.Periods == nil {
		return nil, &StudyError{"folds", fmt.Sprintf("kind %s needs the order of the rows", kind), "name the column that orders them with time"}
	}
	switch kind {
	case "random":
		return folds.NewRandom(d.Rows, count, repeats, study.Seed, celled)
	case "leave-one-out":
		if d.Rows > 5000 {
			return nil, &StudyError{"folds", fmt.Sprintf("leave-one-out with %d rows would learn every tuning %d times", d.Rows, d.Rows), "use kind: random"}
		}
		return folds.NewLeaveOneOut(d.Rows)
	case "clusters":
		if len(c.Clusters) == 0 {
			return nil, &StudyError{"folds", "kind clusters needs clusters", "name the column that tells them apart with clusters"}
		}
		g := c.Clusters[0]
		if spec.Count == 0 {
			count = min(count, g.Count)
		}
		return folds.NewClusters(g.Of, g.Count, count, repeats, study.Seed)
	case "blocks":
		if spec.Count == 0 {
			count = min(count, c.Periods.Count)
		}
		return folds.NewBlocks(c.Periods.Of, c.Periods.Count, count)
	case "rolling":
		for spec.Count == 0 && count > 1 && folds.Segments(count) > c.Periods.Count {
			count--
		}
		return folds.NewRolling(c.Periods.Of, c.Periods.Count, count, spec.Gap)
	case "column":
		var cols [][]string
		for _, name := range spec.Columns {
			l, err := c.labels(name)
			if err != nil {
				return nil, err
			}
			cols = append(cols, l)
		}
		return folds.FromLabels(cols)
	}
	return nil, &StudyError{"folds", fmt.Sprintf("kind %q is not known", spec.Kind), "write one of " + strings.Join(FoldKinds, ", ")}
}
