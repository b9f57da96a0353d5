package view

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"modelmend/compare"
	"modelmend/fit/collinear"
	"modelmend/fit/design"
	"modelmend/remedy"
)

// AssignmentLimit is the number of used rows up to which the fold of every row is written down.
const AssignmentLimit = 10000

// Build turns a comparison (or a diagnosis alone) into plain data. study is the effective study as YAML, toolVersion the
// program's version. Cost O(p^3) for every value of a tuning path.
func Build(c *compare.Comparison, study, toolVersion string) *Results {
	r := &Results{
		Format: Format, Version: Version,
		Equation: c.Equation.String(), Dependent: c.Design.Dependent,
		FocalDeclared: c.FocalDeclared, Purpose: string(c.Study.Purpose), Invented: c.Study.Invented,
		Focal: []string{}, Alternatives: []Alternative{}, NotApplicable: []NotApplicable{}, Notes: []Note{}, Cards: []Card{},
	}
	for _, j := range c.Focal {
		r.Focal = append(r.Focal, c.Problem.Names[j])
	}
	r.Run = buildRun(c, study, toolVersion)
	r.Diagnosis = buildDiagnosis(c)
	for _, a := range c.Alternatives {
		r.Alternatives = append(r.Alternatives, buildAlternative(c, a))
	}
	r.Simulations = Simulations{Count: c.Simulation.Count, Truths: []Truth{}, Reason: c.Simulation.Reason, Text: c.Simulation.Sentence()}
	for _, t := range c.Simulation.Truths {
		r.Simulations.Truths = append(r.Simulations.Truths, Truth{t.Name, t.Text})
	}
	r.Plans = []Plan{}
	for _, p := range c.Plans {
		plan := Plan{Coefficient: p.Coefficient, HalfWidth: Num(p.HalfWidth), Targets: []PlanTarget{}, Direction: []NamedValue{}, Gain: Num(p.Gain), Reason: p.Reason, Text: p.Text}
		for _, t := range p.Targets {
			plan.Targets = append(plan.Targets, PlanTarget{t.What, Num(t.HalfWidth), Num(t.Rows), Num(t.Untangled)})
		}
		for _, d := range p.Direction {
			plan.Direction = append(plan.Direction, NamedValue{d.Name, Num(d.Value)})
		}
		r.Plans = append(r.Plans, plan)
	}
	for _, n := range c.NotApplicable {
		r.NotApplicable = append(r.NotApplicable, NotApplicable{n.Key, n.Remedy, n.Reason})
	}
	for _, n := range c.Notes {
		r.Notes = append(r.Notes, Note{n.Code, n.Text})
	}
	for _, n := range c.Table.Notes {
		r.Notes = append(r.Notes, Note{"data", n})
	}
	r.Cards = buildCards(r)
	r.Cautions = Cautions(len(r.Alternatives))
	r.Advice = buildAdvice(c, r)
	r.Answers = answers(c, r)
	r.Verdict = verdict(r.Answers)
	return r
}

// Cautions are the four usual ones, with the number of alternatives that were looked at.
func Cautions(lookedAt int) []Note {
	looked := "A remedy chosen after seeing its results has a standard error that is too small."
	if lookedAt > 0 {
		looked = fmt.Sprintf("%d alternatives were looked at: a remedy chosen after seeing its results has a standard error that is too small.", lookedAt)
	}
	return []Note{
		{"chosen-after-looking", looked},
		{"rules-of-thumb", "Cut-offs for inflation factors and condition indexes are rules of thumb, not verdicts."},
		{"association", "A coefficient is an association; no remedy here turns it into a cause."},
		{"who-decides", "Your field, your referee and your data custodian decide what is acceptable."},
	}
}

func buildRun(c *compare.Comparison, study, toolVersion string) Run {
	run := Run{Tool: "modelmend", ToolVersion: toolVersion, Seed: c.Study.Seed, Data: c.Study.Data, DataHash: "sha256:" + c.Table.Hash, Study: study,
		LookedAt: len(c.Alternatives), Rows: Rows{Read: c.Design.Read, Used: c.Design.Rows, SetAside: []SetAside{}}, Folds: Folds{Assignment: [][]int{}}}
	for _, s := range c.Design.SetAside {
		run.Rows.SetAside = append(run.Rows.SetAside, SetAside{s.Reason, s.Column, s.Count})
	}
	run.StandardErrors = []ErrorKind{}
	for _, k := range c.ErrorKinds {
		run.StandardErrors = append(run.StandardErrors, ErrorKind{k.Name, k.Text, k.Warning})
	}
	rs := c.Resampling
	run.Resampling = Resampling{rs.Count, rs.Kind, rs.Units, rs.Block, rs.Folds, rs.Sentence()}
	if c.Plan == nil {
		run.Folds.AssignmentReason = "nothing was predicted: diagnosis only"
		return run
	}
	f := &run.Folds
	f.Kind, f.Count, f.Repeats = string(c.Plan.Kind), c.Plan.Count, c.Plan.Repeats
	f.Inner = "the inner folds of an outer fold are the remaining outer folds of the same repeat"
	if w := c.Plan.Window; w != nil {
		f.Gap = w.Gap
		f.Inner = fmt.Sprintf("time is cut into %d segments with about as many rows each; the last %d are the outer folds, and the inner folds of each are all earlier segments but the first", len(w.From), f.Count)
	}
	if c.Design.Rows > AssignmentLimit {
		f.AssignmentReason = fmt.Sprintf("more than %d rows were used; the seed gives the same folds again", AssignmentLimit)
		return run
	}
	for repeat := range c.Plan.Fold {
		row := make([]int, c.Design.Rows)
		for i := range row {
			row[i] = c.Plan.Held(repeat, i)
		}
		f.Assignment = append(f.Assignment, row)
	}
	return run
}

func nums(v []float64) []Num {
	out := make([]Num, len(v))
	for i, x := range v {
		out[i] = Num(x)
	}
	return out
}

func buildDiagnosis(c *compare.Comparison) Diagnosis {
	rep, d, s := c.Diagnosis, c.Design, c.Problem.Sample
	out := Diagnosis{Flagged: rep.Flagged, Reasons: []Reason{}, Uncentered: !d.Constant, Regressors: []Regressor{}, Terms: []Term{},
		NearDependencies: []NearDependency{}, Ledger: []LedgerEntry{}, Digits: Num(math.Floor(10*c.Digits) / 10)}
	cut := c.Study.Cutoffs
	out.Cutoffs = Cutoffs{Num(cut.VIF), Num(cut.ConditionIndex), Num(cut.VarianceShare),
		"inflation factor: common practice, usually attributed to Marquardt (1970), objected to by O'Brien (2007); condition index and variance shares: Belsley, Kuh and Welsch (1980)"}
	for _, r := range rep.Reasons {
		out.Reasons = append(out.Reasons, Reason{string(r.Kind), r.Text})
	}
	for j, r := range d.Regressors {
		v := rep.VIF[j]
		g := Regressor{Name: r.Name, Term: d.Terms[r.Term].Name, Kind: string(r.Kind), Focal: c.FocalDeclared && c.Problem.Focal[j], Tangled: rep.Tangled[j],
			VIF: Num(v), VIFCentered: Num(rep.CenteredVIF[j]), Tolerance: Num(1 / v), AuxiliaryR2: Num(1 - 1/v), StandardErrorFactor: Num(math.Sqrt(v)),
			Mean: Num(c.Means[j]), SD: Num(s.SD(j)), StructuralShare: structuralShare(v, rep.CenteredVIF[j])}
		if math.IsInf(v, 1) {
			g.VIFReason = "it depends exactly on other regressors"
			g.Tolerance, g.AuxiliaryR2 = 0, 1
		}
		out.Regressors = append(out.Regressors, g)
	}
	for k, t := range d.Terms {
		term := Term{Name: t.Name, Columns: []string{}, Degrees: len(t.Columns), GeneralizedVIF: Num(rep.GeneralizedVIF[k]),
			PerDegree: Num(collinear.PerDegree(rep.GeneralizedVIF[k], len(t.Columns)))}
		for _, j := range t.Columns {
			term.Columns = append(term.Columns, d.Regressors[j].Name)
		}
		out.Terms = append(out.Terms, term)
	}
	out.ConditionIndexes = ConditionIndexes{nums(rep.ScaledIndex), nums(rep.CenteredIndex)}
	out.VarianceShares = VarianceShares{Coefficients: []string{}, Dimensions: nums(rep.ScaledIndex), Shares: [][]Num{}}
	if d.Constant {
		out.VarianceShares.Coefficients = append(out.VarianceShares.Coefficients, "constant")
	}
	out.VarianceShares.Coefficients = append(out.VarianceShares.Coefficients, d.Names()...)
	for _, row := range rep.Shares {
		out.VarianceShares.Shares = append(out.VarianceShares.Shares, nums(row))
	}
	for _, dep := range rep.Dependencies {
		out.NearDependencies = append(out.NearDependencies, buildDependency(c, dep))
	}
	out.Correlations = correlations(c)
	for _, e := range c.Ledger {
		out.Ledger = append(out.Ledger, LedgerEntry{Coefficient: c.Problem.Names[e.Column], Focal: e.Focal, Estimate: Num(e.Estimate), ResidualSD: Num(e.S), Rows: e.Rows,
			OwnSD: Num(e.OwnSD), VIF: Num(e.VIF), StandardError: Num(e.SE), StandardErrorUntangled: Num(e.SEUntangled), Low: Num(e.Low), High: Num(e.High),
			LowUntangled: Num(e.LowUntangled), HighUntangled: Num(e.HighUntangled), SmallestEffect: Num(e.SmallestEffect), ConclusionChanges: e.ConclusionChanges,
			Others: others(e.Others), Reason: e.Reason, Sentence: e.Sentence})
	}
	return out
}

func others(list []compare.LedgerOther) []LedgerOther {
	out := []LedgerOther{}
	for _, o := range list {
		out = append(out, LedgerOther{o.Kind, Num(o.SE), Num(o.Factor), Num(o.SEUntangled), Num(o.Low), Num(o.High), Num(o.LowUntangled), Num(o.HighUntangled), o.ConclusionChanges, o.Reason})
	}
	return out
}

// structuralShare is 1 - ln(centred)/ln(as written), between 0 and 1; null where there is nothing to share out.
func structuralShare(written, centered float64) Num {
	if math.IsInf(written, 1) || written < 1.05 {
		return None()
	}
	return Num(math.Min(1, math.Max(0, 1-math.Log(centered)/math.Log(written))))
}

func buildDependency(c *compare.Comparison, dep collinear.Dependency) NearDependency {
	names := c.Problem.Names
	n := NearDependency{Left: names[dep.Left], Constant: Num(dep.Constant), Coefficients: []NamedValue{}, Equation: dep.Equation, R2: Num(dep.R2),
		RowsHolding: dep.RowsHolding, RowsUsed: dep.RowsUsed, Exceptions: []int{}, Kind: string(dep.Kind), Members: []string{}, ConditionIndex: Num(dep.Index)}
	for i, j := range dep.Columns {
		n.Coefficients = append(n.Coefficients, NamedValue{names[j], Num(dep.Coefficients[i])})
	}
	n.Exceptions = append(n.Exceptions, dep.Exceptions...)
	for _, j := range dep.Members() {
		n.Members = append(n.Members, names[j])
	}
	return n
}

func correlations(c *compare.Comparison) Correlations {
	s := c.Problem.Sample
	p := s.P
	out := Correlations{Names: append(append([]string{}, c.Problem.Names...), c.Design.Dependent), Values: [][]Num{}}
	for i := range p + 1 {
		row := make([]Num, p+1)
		for j := range p + 1 {
			switch {
			case i == j:
				row[j] = 1
			case i == p:
				row[j] = Num(s.CorrelationY(j))
			case j == p:
				row[j] = Num(s.CorrelationY(i))
			default:
				row[j] = Num(s.Correlation(i, j))
			}
		}
		out.Values = append(out.Values, row)
	}
	return out
}

func buildCoefficient(c compare.Coefficient) Coefficient {
	out := Coefficient{Name: c.Name, Estimate: Num(c.Estimate), StandardError: Num(c.SE), StandardErrorReason: c.SEReason, TRatio: Num(c.T), PValue: Num(c.P),
		Low: Num(c.Low), High: Num(c.High), Status: string(c.Status), EstimatedBias: Num(c.Bias), EstimatedMSE: Num(c.MSE), PosteriorSD: Num(c.Posterior), Errors: []StandardError{}}
	for _, e := range c.Errors {
		out.Errors = append(out.Errors, StandardError{e.Kind, Num(e.SE), e.Reason, Num(e.DF), Num(e.T), Num(e.P), Num(e.Low), Num(e.High)})
	}
	if r := c.Resampled; r != nil && (c.Status != remedy.Zero || r.Zero() < 1) {
		out.Resampled = &Resampled{StandardError: Num(r.SE), Low: Num(r.Low), High: Num(r.High), BiasCorrected: Limits{Num(r.AccLow), Num(r.AccHigh)},
			SharePositive: Num(r.Positive), ShareNegative: Num(r.Negative), ShareZero: Num(r.Zero()), Used: r.Used}
	}
	return out
}

func buildAlternative(c *compare.Comparison, a *compare.Alternative) Alternative {
	out := Alternative{Key: a.Key, Remedy: a.Remedy.Key, Label: a.Variant.Label, Summary: a.Variant.Summary, Coefficients: []Coefficient{}, Derived: []Coefficient{},
		Covariance: [][]Num{}, ResidualSD: Num(a.S), FitRMSE: Num(math.Sqrt(a.RSS / float64(a.Rows))), R2: Num(a.R2), DegreesOfFreedom: Num(a.DF),
		StandardErrorKind: c.ErrorKinds[0].Name, Tests: []Test{}, Meaning: []Meaning{}, Costs: []string{}, Notes: []Note{}, Removes: []string{}, Weights: []NamedValue{}, Simulation: []Simulation{}}
	for _, k := range a.Coefficients {
		out.Coefficients = append(out.Coefficients, buildCoefficient(k))
		if k.Meaning != "" {
			out.Meaning = append(out.Meaning, Meaning{k.Name, k.Meaning})
		}
	}
	for _, k := range a.Derived {
		out.Derived = append(out.Derived, buildCoefficient(k))
		out.Meaning = append(out.Meaning, Meaning{k.Name, k.Meaning})
	}
	q := len(a.Coefficients)
	for i := 0; i < q && a.Covariance != nil; i++ {
		out.Covariance = append(out.Covariance, nums(a.Covariance[i*q:(i+1)*q]))
	}
	if a.Covariance == nil {
		out.CovarianceReason = a.NoCovariance()
	}
	for _, t := range a.Description.Tests {
		critical := Num(t.Critical)
		if t.Critical == 0 {
			critical = None()
		}
		out.Tests = append(out.Tests, Test{t.Name, Num(t.Statistic), nums(t.Degrees), Num(t.P), critical, Num(t.Noncentrality), t.Text})
	}
	out.BreakEven, out.WorstCoverage = []BreakEven{}, []WorstCoverage{}
	for _, b := range a.Description.BreakEven {
		out.BreakEven = append(out.BreakEven, BreakEven{b.Coefficient, Num(b.Bias), Num(b.Estimated), Num(b.Effect), b.Text})
	}
	for _, w := range a.Description.Worst {
		out.WorstCoverage = append(out.WorstCoverage, WorstCoverage{w.Coefficient, Num(w.Correlation), Num(w.Coverage), Num(w.TrueT), w.Text})
	}
	out.Costs = append(out.Costs, a.Description.Costs...)
	for _, n := range a.Description.Notes {
		out.Notes = append(out.Notes, Note{n.Code, n.Text})
	}
	for _, j := range a.Variant.Removes {
		out.Removes = append(out.Removes, c.Problem.Names[j])
	}
	for _, w := range a.Description.Weights {
		out.Weights = append(out.Weights, NamedValue{w.Name, Num(w.Value)})
	}
	for _, s := range a.Simulated {
		out.Simulation = append(out.Simulation, Simulation{Truth: s.Truth, Coefficient: s.Coefficient, True: Num(s.True), Bias: Num(s.Bias), BiasError: Num(s.BiasError),
			SD: Num(s.SD), SDError: Num(s.SDError), RMSE: Num(s.RMSE), RMSEError: Num(s.RMSEError), Coverage: Num(s.Coverage), CoverageError: Num(s.CoverageError),
			WrongSign: Num(s.WrongSign), WrongSignError: Num(s.WrongSignError)})
	}
	o := a.Out
	out.OutOfSample = OutOfSample{RMSE: Num(o.RMSE), R2: Num(o.R2), RMSEDifference: Num(o.RMSEDifference), Folds: []FoldError{},
		Difference: difference(o.Difference)}
	if ap := a.OutApart; ap != nil {
		out.OutOfSample.Apart = &ErrorApart{c.Leak.Kind, Num(ap.RMSE), Num(ap.R2), difference(ap.Difference), Num(ap.RMSEDifference)}
	}
	withheld := !c.Study.ShowSmallCells && slices.ContainsFunc(o.Folds, func(f compare.Fold) bool { return f.Rows < design.SmallCell })
	if withheld { // all of them: a single one would follow from the others and the pooled error
		out.OutOfSample.Reason = fmt.Sprintf("some held-out parts have fewer than %d rows: errors are not shown part by part", design.SmallCell)
	}
	for _, f := range o.Folds {
		e := FoldError{f.Repeat, f.Fold, f.Rows, Num(f.MSE), Num(f.Chosen)}
		if withheld {
			e.MSE = None()
		}
		out.OutOfSample.Folds = append(out.OutOfSample.Folds, e)
	}
	if a.Fitted.Tuning != nil {
		out.Tuning = buildTuning(c, a)
	}
	return out
}

func difference(i compare.Interval) Difference {
	return Difference{"mse", Num(i.Estimate), Num(i.Low), Num(i.High)}
}

func buildTuning(c *compare.Comparison, a *compare.Alternative) *Tuning {
	t := a.Fitted.Tuning
	out := &Tuning{Parameter: t.Parameter, Rule: "cross-validation", Penalty: None(), PenaltyTimes: None(), Components: None(), EffectiveDegrees: Num(t.Degrees[t.Chosen]),
		Chosen: t.Chosen, Candidates: []RuleValue{}, Path: []PathPoint{}, Spectrum: []ComponentInfo{}}
	if t.Fixed {
		out.Rule = "fixed by the user"
	}
	value := t.Values[t.Chosen]
	if t.Parameter == "penalty" {
		out.Penalty = Num(value)
		n := float64(c.Design.Rows)
		if c.Design.Constant {
			n--
		}
		if t.OnSquares {
			out.PenaltyTimes = Num(value * n)
		}
	} else {
		out.Components = Num(value)
	}
	for _, k := range t.Candidates {
		out.Candidates = append(out.Candidates, RuleValue{k.Rule, k.Title, Num(k.Value)})
	}
	for i, p := range c.Path(a) {
		point := PathPoint{Value: Num(t.Values[i]), Error: Num(t.MSE[i]), ErrorSD: Num(t.MSESD[i]), EffectiveDegrees: Num(t.Degrees[i]),
			Coefficients: path(p.Coefficients), Derived: path(p.Derived)}
		out.Path = append(out.Path, point)
	}
	out.AsGoodAs = asGoodAs(t)
	if r := a.TuningResampled; r != nil {
		out.Resampled = &TuningResampled{Num(r.Low), Num(r.Median), Num(r.High), nums(r.Shares)}
	}
	for k, comp := range t.Components {
		out.Spectrum = append(out.Spectrum, ComponentInfo{k + 1, Num(comp.Variance), Num(comp.Share), Num(comp.T), nums(comp.Loadings), comp.Kept})
	}
	return out
}

func path(coefs []compare.Coefficient) []PathCoefficient {
	out := []PathCoefficient{}
	for _, c := range coefs {
		out = append(out, PathCoefficient{Num(c.Estimate), Num(c.SE), Num(c.Bias), Num(c.MSE)})
	}
	return out
}

// asGoodAs finds the unbroken range around the smallest cross-validated error whose errors lie within one standard error of it.
func asGoodAs(t *remedy.Tuning) AsGoodAs {
	best := 0
	for i, v := range t.MSE {
		if v < t.MSE[best] {
			best = i
		}
	}
	if len(t.MSE) == 0 || math.IsNaN(t.MSE[best]) {
		return AsGoodAs{t.Chosen, t.Chosen, "No error curve was computed."}
	}
	limit := t.MSE[best] + t.MSESD[best]
	from, to := best, best
	for from > 0 && t.MSE[from-1] <= limit {
		from--
	}
	for to < len(t.MSE)-1 && t.MSE[to+1] <= limit {
		to++
	}
	what := "penalties from %s to %s predict as well as the best, %s"
	if t.Parameter == "components" {
		what = "%s to %s components predict as well as the best number, %s"
	}
	text := fmt.Sprintf(what, Short(t.Values[from]), Short(t.Values[to]), Short(t.Values[best])) + ", within one standard error of the cross-validated error."
	if from == 0 && to == len(t.MSE)-1 {
		text += " The data hardly speak on this choice."
	}
	return AsGoodAs{from, to, strings.ToUpper(text[:1]) + text[1:]}
}

func buildCards(r *Results) []Card {
	cards := []Card{}
	for _, m := range remedy.All() {
		card := Card{Key: m.Key, Title: m.Title, Does: m.Does, Assumes: m.Assumes, Buys: m.Buys, Costs: m.Costs, Means: m.Means, Referee: m.Referee,
			Sources: append([]string{}, m.Sources...), Options: []Option{}, Variants: []string{}}
		for _, o := range m.Options {
			card.Options = append(card.Options, Option{o.Key, o.Text})
		}
		for _, a := range r.Alternatives {
			if a.Remedy == m.Key {
				card.Variants = append(card.Variants, a.Key)
			}
		}
		cards = append(cards, card)
	}
	return cards
}
