package compare

import (
	"context"
	"errors"
	"fmt"
	"math"
	"runtime"
	"slices"
	"sort"
	"strings"

	"modelmend/fit/collinear"
	"modelmend/fit/dataset"
	"modelmend/fit/design"
	"modelmend/fit/equation"
	"modelmend/fit/folds"
	"modelmend/fit/linear"
	"modelmend/fit/reduction"
	"modelmend/remedy"
)

// Options bound a run without changing its result.
type Options struct {
	Workers int // 0: one a core
	// Progress hears how far a stage ("rows read", "splits learned", "resamples learned", "samples simulated") has come; total is 0 where it is not known. It is called from one goroutine at
	// a time and may be nil.
	Progress func(stage string, done, total int)
}

// Comparison is everything that is known once all alternatives are fitted.
type Comparison struct {
	Study         *Study
	Table         *dataset.Table
	Equation      *equation.Equation
	Design        *design.Design
	Plan          *folds.Plan // nil after Check
	Clusters      []*grouping // declared
	Periods       *grouping   // nil where no time is declared
	Leak          *Leak       // nil where the folds keep together what the study says belongs together
	Diagnosis     *collinear.Report
	Digits        float64   // vouched for
	Means         []float64 // of the regressors over the rows used
	Problem       *remedy.Problem
	Focal         []int // declared, or the most tangled regressor
	FocalDeclared bool
	Smallest      []float64 // smallest effect of interest by regressor, NaN where none is declared
	AsIs          *linear.Fit
	S             float64 // residual standard deviation of as-is, NaN without degrees of freedom
	DF            float64
	Ledger        []LedgerEntry
	ErrorKinds    []ErrorKind // computed for every alternative, the one that the ladder shows first; nil after Check
	frame         *frame
	Alternatives  []*Alternative
	Resampling    Resampling
	Simulation    Simulation
	Plans         []remedy.Plan
	NotApplicable []NotApplicable
	Notes         []design.Note
}

// NotApplicable is a remedy or variant that is not offered, and why.
type NotApplicable struct {
	Key, Remedy, Reason string
}

// MostAlternatives bounds the ladder: beyond it, drops of the least tangled regressors are left out.
const MostAlternatives = 40

// Check diagnoses only: design, inflation factors, dependencies, ledger.
func Check(ctx context.Context, t *dataset.Table, study *Study, opt Options) (*Comparison, error) {
	c, _, err := prepare(ctx, t, study, opt, false)
	return c, err
}

// Run diagnoses and fits every alternative. The result does not depend on Options.
//
// Cost: one pass over the rows (one a repeat up to folds.Exact rows), then per split, resample and variant O(p^3).
func Run(ctx context.Context, t *dataset.Table, study *Study, opt Options) (*Comparison, error) {
	c, red, err := prepare(ctx, t, study, opt, true)
	if err != nil {
		return nil, err
	}
	variants := c.variants()
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	if err := c.fitAll(ctx, red, variants, opt); err != nil {
		return nil, err
	}
	return c, nil
}

func prepare(ctx context.Context, t *dataset.Table, study *Study, opt Options, folded bool) (*Comparison, *reduction.Reduction, error) {
	if opt.Workers <= 0 {
		opt.Workers = runtime.GOMAXPROCS(0)
	}
	c := &Comparison{Study: study, Table: t}
	var err error
	if c.Equation, err = equation.Parse(study.Equation); err != nil {
		return nil, nil, err
	}
	var cond *equation.Condition
	if strings.TrimSpace(study.Rows) != "" {
		if cond, err = equation.ParseCondition(study.Rows); err != nil {
			return nil, nil, err
		}
	}
	red, err := c.reduce(ctx, opt, design.Options{NoConstant: study.NoConstant, Rows: cond, ShowSmallCells: study.ShowSmallCells}, folded)
	if err != nil {
		return nil, nil, err
	}
	for _, n := range c.Design.Notes {
		if n.Code != "folds-ignore-time" || study.Time == "" {
			c.Notes = append(c.Notes, n)
		}
	}
	for j := range c.Design.Regressors {
		n := float64(red.Total.N)
		c.Means = append(c.Means, red.Total.Sum(j).Add(red.Origin[j].MulFloat(n)).Float()/n)
	}
	sample := linear.NewSample(red, red.Total)
	if err := c.diagnose(red, sample, opt); err != nil {
		return nil, nil, err
	}
	if err := c.problem(sample); err != nil {
		return nil, nil, err
	}
	c.fitAsIs(sample)
	c.ledger()
	return c, red, nil
}

// reduce forms the design and its cross-products, from memory or in passes over the file.
func (c *Comparison) reduce(ctx context.Context, opt Options, set design.Options, folded bool) (red *reduction.Reduction, err error) {
	if c.Table, err = held(c.Table, c.Study); err != nil {
		return nil, err
	}
	if c.Table.Streamed() {
		red, err = c.reduceStream(ctx, opt, set, folded)
		if !errors.Is(err, errFew) && !errors.Is(err, design.ErrWhole) && !dataset.CannotCut(err) {
			return red, err
		}
		if c.Table, err = c.Table.Whole(); err != nil {
			return nil, err
		}
	}
	if c.Design, err = design.Build(c.Table, c.Equation, set); err != nil {
		return nil, err
	}
	if err := c.resolveKeys(); err != nil {
		return nil, err
	}
	if folded {
		if c.Plan, err = c.plan(c.Study.Folds); err != nil {
			return nil, err
		}
	}
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	return c.reduceAs(c.Plan, opt)
}

// reduceAs reduces the rows held into the folds of a plan; nil: into one total.
func (c *Comparison) reduceAs(p *folds.Plan, opt Options) (*reduction.Reduction, error) {
	var split reduction.Split
	if p != nil {
		split = reduction.Split{Cell: p.Cell, Cells: p.Cells, Fold: p.Fold, Counts: p.Counts}
	}
	return reduction.Reduce(c.Design.Columns(), c.Design.Y, c.Design.Constant, split, opt.Workers)
}

func (c *Comparison) diagnose(red *reduction.Reduction, sample *linear.Sample, opt Options) error {
	d := c.Design
	in := collinear.Input{Names: d.Names(), Sample: sample, Raw: linear.NewRawSample(red, red.Total), Each: d.Each, Cutoffs: c.Study.Cutoffs}
	for _, r := range d.Regressors {
		in.Decimals = append(in.Decimals, r.Decimals)
	}
	for _, t := range d.Terms {
		in.Groups = append(in.Groups, collinear.Group{Name: t.Name, Columns: t.Columns, Category: t.Category})
	}
	cr, err := c.centered(opt)
	if err != nil {
		return err
	}
	if cr != nil {
		in.Centered = linear.NewSample(cr, cr.Total)
		in.CenteredRaw = linear.NewRawSample(cr, cr.Total)
	}
	c.Diagnosis = collinear.Diagnose(in)
	largest := 1.0
	for _, v := range c.Diagnosis.ScaledIndex {
		if !math.IsInf(v, 1) {
			largest = math.Max(largest, v)
		}
	}
	c.Digits = linear.VouchedDigits(largest)
	return nil
}

func (c *Comparison) problem(sample *linear.Sample) error {
	d, study := c.Design, c.Study
	p := len(d.Regressors)
	focal, err := resolveAll(d, "focal", study.Focal)
	if err != nil {
		return err
	}
	keep, err := resolveAll(d, "keep", study.Keep)
	if err != nil {
		return err
	}
	pr := &remedy.Problem{Names: d.Names(), Constant: d.Constant, Focal: marks(p, focal), Keep: marks(p, keep), Tangled: c.Diagnosis.Tangled, Sample: sample}
	for _, r := range d.Regressors {
		var m []remedy.Factor
		for _, f := range r.Factors {
			m = append(m, remedy.Factor{Atom: f.Atom, Power: f.Power})
		}
		pr.Monomials = append(pr.Monomials, m)
		pr.Category = append(pr.Category, r.Category)
	}
	if pr.Settings, _, err = settings(d, study.Remedies); err != nil {
		return err
	}
	c.Smallest = make([]float64, p)
	for j := range c.Smallest {
		c.Smallest[j] = math.NaN()
	}
	for _, s := range study.SmallestEffect {
		cols, err := resolve(d, "smallest_effect", s.Name)
		if err != nil {
			return err
		}
		if !(s.Value > 0) || math.IsInf(s.Value, 0) {
			return &StudyError{"smallest_effect", fmt.Sprintf("%g for %s is not a size", s.Value, s.Name), "write a positive number in the units of the coefficient"}
		}
		for _, j := range cols {
			c.Smallest[j] = s.Value
		}
	}
	if pr.Groups, err = c.groups(focal, keep); err != nil {
		return err
	}
	pr.Penalties = penalties(sample)
	if !d.Streamed() {
		pr.Rows = c.rows
	}
	if c.Periods != nil && c.Periods.Count == d.Rows {
		pr.Order, pr.Time = c.timeOrder(true), c.Periods.Value
	}
	c.Problem = pr
	pr.Smallest = c.Smallest
	c.Focal, c.FocalDeclared = focal, len(focal) > 0
	if k := 1; d.Constant && p+k >= d.Rows {
		c.Notes = append(c.Notes, design.Note{Code: "few-rows", Text: fmt.Sprintf("%d coefficients and %d rows: least squares fits every row, or has no answer of its own, so that as-is, drops and indexes have no residual variance; "+
			"ridge and components can still predict, and no standard error given the tuning can be stated", p+k, d.Rows)})
	}
	if !c.FocalDeclared {
		c.Focal = []int{c.mostTangled()}
		c.Notes = append(c.Notes, design.Note{Code: "no-focal", Text: fmt.Sprintf("no coefficient of interest was named; the verdict speaks of %s, the most entangled one: name yours with focal", d.Regressors[c.Focal[0]].Name)})
	}
	return nil
}

// rows gives the regressors and the dependent variable row by row.
func (c *Comparison) rows(yield func(x []float64, y float64)) {
	d := c.Design
	x := make([]float64, len(d.Regressors))
	for i := range d.Rows {
		for j := range x {
			x[j] = d.Regressors[j].Values.Hi[i]
		}
		yield(x, d.Y.Hi[i])
	}
}

// mostTangled is the regressor with the highest factor after centring; exact dependencies come first.
func (c *Comparison) mostTangled() int {
	best := 0
	for j, v := range c.Diagnosis.CenteredVIF {
		if v > c.Diagnosis.CenteredVIF[best] {
			best = j
		}
	}
	return best
}

// mostProposed bounds the groups that are proposed from tangles.
const mostProposed = 6

// groups are the user's, then those proposed from substantive tangles: never with a focal or kept regressor, a dummy, or a
// variable that enters powers or products.
func (c *Comparison) groups(focal, keep []int) ([]remedy.Group, error) {
	var out []remedy.Group
	d := c.Design
	for _, g := range c.Study.Groups {
		if _, taken := c.Table.Column(g.Name); taken || slices.Contains(d.Names(), g.Name) {
			return nil, &StudyError{"groups", fmt.Sprintf("%q is also the name of a column", g.Name), "give the group another name"}
		}
		cols, err := resolveAll(d, "groups: "+g.Name, g.Members)
		if err != nil {
			return nil, err
		}
		if len(cols) < 2 {
			return nil, &StudyError{"groups", fmt.Sprintf("group %q has %d member", g.Name, len(cols)), "a group needs at least two regressors"}
		}
		for _, o := range out {
			if o.Name == g.Name {
				return nil, &StudyError{"groups", fmt.Sprintf("two groups are called %q", g.Name), "rename one"}
			}
		}
		if g.Weights != nil {
			if len(cols) != len(g.Weights) {
				return nil, &StudyError{"groups", fmt.Sprintf("group %q gives %d weights to %d regressors", g.Name, len(g.Weights), len(cols)), "name each regressor by itself"}
			}
			for i, w := range g.Weights {
				if w == 0 || math.IsNaN(w) || math.IsInf(w, 0) {
					return nil, &StudyError{"groups", fmt.Sprintf("the weight %g of %s is not allowed", w, g.Members[i]), "write a number that is not zero, or leave the member out"}
				}
			}
		}
		out = append(out, remedy.Group{Name: g.Name, Columns: cols, ByUser: true, Weights: g.Weights})
	}
	proposed := 0
	for _, dep := range c.Diagnosis.Dependencies {
		if dep.Kind != collinear.Substantive && dep.Kind != collinear.Exact {
			continue
		}
		if len(d.Regressors) >= d.Rows || proposed == mostProposed {
			break // with as many regressors as rows everything depends on everything
		}
		var cols []int
		for _, j := range dep.Members() {
			if !slices.Contains(focal, j) && !slices.Contains(keep, j) && c.mergeable(j) {
				cols = append(cols, j)
			}
		}
		sort.Ints(cols)
		if len(cols) < 2 || slices.ContainsFunc(out, func(g remedy.Group) bool { return sameSet(g.Columns, cols) }) {
			continue
		}
		var names []string
		for _, j := range cols {
			names = append(names, d.Regressors[j].Name)
		}
		out = append(out, remedy.Group{Name: strings.Join(names, "+"), Columns: cols})
		proposed++
	}
	return out, nil
}

// mergeable regressors are numbers or functions that enter no power or product.
func (c *Comparison) mergeable(j int) bool {
	r := c.Design.Regressors[j]
	if r.Kind != design.Number && r.Kind != design.Function && r.Kind != design.Ratio {
		return false
	}
	for k, o := range c.Design.Regressors {
		if k == j {
			continue
		}
		for _, f := range o.Factors {
			if f.Atom == r.Name {
				return false
			}
		}
	}
	return true
}

func sameSet(a, b []int) bool {
	a, b = slices.Clone(a), slices.Clone(b)
	sort.Ints(a)
	sort.Ints(b)
	return slices.Equal(a, b)
}

// penalties is the grid: zero and 100 values evenly spaced in logarithms from a thousandth of the smallest nonzero
// eigenvalue of the correlation matrix (never under 1e-10) to ten times the largest.
func penalties(s *linear.Sample) []float64 {
	sp := s.Spectrum(nil)
	out := []float64{0}
	if sp.Rank == 0 {
		return out
	}
	smallest := sp.Sigma[sp.Rank-1]
	lo := math.Max(1e-10, 1e-3*smallest*smallest)
	hi := 10 * sp.Sigma[0] * sp.Sigma[0]
	for i := range 100 {
		out = append(out, math.Exp(math.Log(lo)+(math.Log(hi)-math.Log(lo))*float64(i)/99))
	}
	return out
}

func (c *Comparison) fitAsIs(s *linear.Sample) {
	c.AsIs = s.LeastSquares(true)
	c.DF = float64(s.N - c.AsIs.Rank)
	if s.Constant {
		c.DF--
	}
	c.S = math.NaN()
	if c.DF > 0 {
		c.S = math.Sqrt(c.AsIs.RSS / c.DF)
	}
}

// choice is a variant with its remedy.
type choice struct {
	remedy  remedy.Remedy
	variant remedy.Variant
}

func (c *Comparison) variants() []choice {
	_, off, _ := settings(c.Design, c.Study.Remedies)
	var out []choice
	for _, r := range remedy.All() {
		if off[r.Key] {
			c.NotApplicable = append(c.NotApplicable, NotApplicable{r.Key, r.Key, "switched off in the study"})
			continue
		}
		if r.Plan != nil {
			c.Plans = append(c.Plans, r.Plan(&remedy.Final{Problem: c.Problem, AsIs: c.AsIs, S: c.S, DF: c.DF})...)
		}
		vs, not := r.Variants(c.Problem)
		for _, n := range not {
			c.NotApplicable = append(c.NotApplicable, NotApplicable{n.Key, r.Key, n.Reason})
		}
		for _, v := range vs {
			out = append(out, choice{r, v})
		}
	}
	return c.capped(out)
}

// capped leaves out drops of the least tangled regressors beyond MostAlternatives.
func (c *Comparison) capped(all []choice) []choice {
	for len(all) > MostAlternatives {
		worst, least := -1, math.Inf(1)
		for i, ch := range all {
			if len(ch.variant.Removes) > 0 {
				if v := c.Diagnosis.VIF[ch.variant.Removes[0]]; v <= least {
					worst, least = i, v
				}
			}
		}
		if worst < 0 {
			return all
		}
		c.NotApplicable = append(c.NotApplicable, NotApplicable{all[worst].variant.Key, all[worst].remedy.Key,
			fmt.Sprintf("left out: more than %d alternatives, and this regressor is among the least tangled", MostAlternatives)})
		all = slices.Delete(all, worst, worst+1)
	}
	return all
}
