package view

import (
	"fmt"
	"math"
	"strings"

	"modelmend/compare"
	"modelmend/fit/collinear"
	"modelmend/fit/figures"
)

// Short prints three significant digits for prose.
func Short(v float64) string { return figures.Short(v, 3) }

// Four prints four significant digits, trailing zeros kept, as errors that lie close together need.
func Four(v Num) string { return figures.Fixed(float64(v), 4) }

// answers says in plain sentences what there is to say, the coefficient of interest first.
func answers(c *compare.Comparison, r *Results) Answers {
	a := Answers{Problem: []string{}}
	for _, e := range c.Ledger {
		if !e.Focal {
			continue
		}
		sentence := e.Sentence
		if !c.FocalDeclared {
			sentence = "No coefficient of interest was named; the most entangled is " + c.Problem.Names[e.Column] + ". " + sentence
		}
		a.Problem = append(a.Problem, sentence)
	}
	a.Tangles = tangleSentence(c)
	a.Sign = signSentence(c, r)
	a.Prediction = predictionSentence(r)
	a.Tuning = tuningSentence(r)
	a.Truth = truthSentence(r)
	return a
}

// verdict lists the answers for the terminal, most important first.
func verdict(a Answers) []string {
	out := append([]string{}, a.Problem...)
	for _, s := range []string{a.Tangles, a.Sign, a.Prediction} {
		if s != "" {
			out = append(out, s)
		}
	}
	return out
}

// tuningSentence says what was chosen and how much the choice matters.
func tuningSentence(r *Results) string {
	var parts []string
	for _, a := range r.Alternatives {
		if a.Tuning == nil {
			continue
		}
		how := "cross-validation chose"
		if a.Tuning.Rule != "cross-validation" {
			how = "the user fixed"
		}
		if a.Tuning.Parameter == "penalty" {
			parts = append(parts, fmt.Sprintf("%s: %s the penalty %s, which leaves %s effective degrees of freedom", a.Label, how, Short(float64(a.Tuning.Penalty)), Short(float64(a.Tuning.EffectiveDegrees))))
		} else {
			parts = append(parts, fmt.Sprintf("%s: %s %s of %d components", a.Label, how, Short(float64(a.Tuning.Components)), len(a.Tuning.Path)-1))
		}
	}
	if len(parts) == 0 {
		return ""
	}
	return strings.Join(parts, ". ") + "."
}

func tangleSentence(c *compare.Comparison) string {
	var exact, substantive, structural []string
	for _, d := range c.Diagnosis.Dependencies {
		switch d.Kind {
		case collinear.Exact:
			exact = append(exact, relation(c, d, "depends exactly on"))
		case collinear.Substantive:
			substantive = append(substantive, relation(c, d, "moves with"))
		case collinear.Structural:
			structural = append(structural, c.Problem.Names[d.Left])
		}
	}
	switch {
	case len(exact) > 0:
		more := ""
		if len(exact) > 3 {
			more = fmt.Sprintf("; and %d more", len(exact)-3)
		}
		return "An exact dependency leaves coefficients without a value: " + strings.Join(first(exact, 3), "; ") + more + ". Remove one of its members, merge them, or state a restriction."
	case len(substantive) > 0:
		s := "Two or more real quantities move together: " + strings.Join(first(substantive, 3), "; ") + "."
		if len(substantive) > 3 {
			s = strings.TrimSuffix(s, ".") + fmt.Sprintf("; and %d more.", len(substantive)-3)
		}
		return s
	case c.Diagnosis.Flagged:
		return "Regressors move together, though no single near-dependency stands out."
	case len(structural) > 0:
		return "What is tangled comes from powers, products or dummies alone (" + strings.Join(first(structural, 3), ", ") + "): a matter of where variables count from, and no cause for a remedy."
	}
	return "No regressors are tangled beyond the usual marks."
}

// relation is the equation of a dependency, or where it is long how many take part.
func relation(c *compare.Comparison, d collinear.Dependency, verb string) string {
	if len(d.Columns) <= 5 {
		return d.Equation
	}
	return fmt.Sprintf("%s %s %d other regressors", c.Problem.Names[d.Left], verb, len(d.Columns))
}

func first(s []string, n int) []string {
	if len(s) > n {
		return s[:n]
	}
	return s
}

// signSentence says whether the sign of the first focal coefficient survives every alternative that speaks of the same quantity.
func signSentence(c *compare.Comparison, r *Results) string {
	if len(r.Alternatives) < 2 || len(c.Focal) == 0 {
		return ""
	}
	name := c.Problem.Names[c.Focal[0]]
	base, flips, same := Num(math.NaN()), []string{}, 0
	low, high := math.Inf(1), math.Inf(-1)
	for _, a := range r.Alternatives {
		for _, k := range a.Coefficients {
			if k.Name != name || k.Estimate.IsNone() || k.Status == "different quantity" || k.Status == "zero" {
				continue
			}
			if a.Key == "as-is" {
				base = k.Estimate
			}
			same++
			low, high = math.Min(low, float64(k.Estimate)), math.Max(high, float64(k.Estimate))
			if !base.IsNone() && float64(base)*float64(k.Estimate) < 0 {
				flips = append(flips, a.Label)
			}
		}
	}
	switch {
	case base.IsNone() || same < 2:
		return ""
	case len(flips) > 0:
		return fmt.Sprintf("The sign of %s is not the same under every remedy: it flips under %s.", name, strings.Join(first(flips, 4), ", "))
	}
	return fmt.Sprintf("The sign of %s is the same under all %d alternatives that speak of it; the estimate runs from %s to %s.", name, same, Short(low), Short(high))
}

func predictionSentence(r *Results) string {
	if len(r.Alternatives) < 2 {
		return ""
	}
	best, better, worse := 0, 0, 0
	for i, a := range r.Alternatives {
		if a.OutOfSample.RMSE < r.Alternatives[best].OutOfSample.RMSE*(1-1e-12) {
			best = i
		}
		if a.OutOfSample.Difference.High < 0 {
			better++
		}
		if a.OutOfSample.Difference.Low > 0 {
			worse++
		}
	}
	b, as := r.Alternatives[best], r.Alternatives[0]
	if best == 0 {
		return fmt.Sprintf("No alternative predicts held-out rows better than the model left alone (out-of-sample error %s); %d do clearly worse.", Four(as.OutOfSample.RMSE), worse)
	}
	s := fmt.Sprintf("%s has the smallest out-of-sample error, %s against %s for the model left alone", b.Label, Four(b.OutOfSample.RMSE), Four(as.OutOfSample.RMSE))
	if b.OutOfSample.Difference.High < 0 {
		return s + "; the difference is beyond its uncertainty."
	}
	return s + "; the difference is within its uncertainty."
}

// lowCoverage is the share of samples below which a nominal 95 % interval is said to cover too little: a mark of this project's own.
const lowCoverage = 0.9

// Simulated finds what an alternative does to a coefficient under a truth, and whether its estimates there can be compared: they are of the same quantity,
// and not set to zero in every sample.
func (a *Alternative) Simulated(truth, coefficient string) (s Simulation, comparable bool) {
	status := "absent"
	for _, k := range append(append([]Coefficient{}, a.Derived...), a.Coefficients...) {
		if k.Name == coefficient {
			status = k.Status
			break
		}
	}
	for _, s := range a.Simulation {
		if s.Truth == truth && s.Coefficient == coefficient {
			return s, (status == "estimated" || status == "implied" || status == "zero") && s.SD != 0
		}
	}
	return Simulation{}, false
}

// Of names a coefficient, or an effect, within a sentence.
func Of(coefficient string) string {
	if strings.HasPrefix(coefficient, "effect of ") {
		return "the " + coefficient
	}
	return "the coefficient of " + coefficient
}

// truthSentence says, for the first coefficient and truth that were simulated, which alternative comes closest and whose intervals cover too little.
func truthSentence(r *Results) string {
	if r.Simulations.Count == 0 || len(r.Alternatives) == 0 || len(r.Alternatives[0].Simulation) == 0 {
		return ""
	}
	base := r.Alternatives[0].Simulation[0]
	best, nearest, label := 0, base, ""
	var low, decided []string
	least, leastLabel, judged := math.Inf(1), "", 0
	for i := range r.Alternatives {
		a := &r.Alternatives[i]
		s, ok := a.Simulated(base.Truth, base.Coefficient)
		if !ok {
			continue
		}
		if s.RMSE < nearest.RMSE {
			best, nearest, label = i, s, a.Label
		}
		if s.Coverage.IsNone() {
			continue
		}
		judged++
		if float64(s.Coverage)+2*float64(s.CoverageError) >= lowCoverage {
			continue
		}
		low = append(low, a.Label)
		if a.Remedy == "drop-by-rule" {
			decided = append(decided, fmt.Sprintf("%s: %s", a.Label, wholePercent(s.Coverage)))
		}
		if c := float64(s.Coverage); c < least {
			least, leastLabel = c, a.Label
		}
	}
	text := "If the truth is what was estimated, "
	if best == 0 || float64(base.RMSE-nearest.RMSE) < 2*math.Hypot(float64(base.RMSEError), float64(nearest.RMSEError)) {
		text += fmt.Sprintf("no alternative comes clearly closer to %s than the model left alone, whose root mean squared error is %s", Of(base.Coefficient), Short(float64(base.RMSE)))
	} else {
		text += fmt.Sprintf("%s comes closest to %s, with a root mean squared error of %s against %s for the model left alone", label, Of(base.Coefficient), Short(float64(nearest.RMSE)), Short(float64(base.RMSE)))
		if c := nearest; !c.Coverage.IsNone() && float64(c.Coverage)+2*float64(c.CoverageError) < lowCoverage {
			text += fmt.Sprintf(", but its 95 %% interval holds the truth in %s of the samples", only(c.Coverage))
		}
	}
	switch {
	case judged == 0:
		return text + "."
	case len(low) == 0:
		return text + ". No nominal 95 % interval holds it in clearly under 90 % of the samples."
	}
	hold := "hold"
	if len(low) == 1 {
		hold = "holds"
	}
	text += fmt.Sprintf(". Of %d nominal 95 %% intervals %d %s it in clearly under 90 %% of the samples, ", judged, len(low), hold)
	if len(decided) > 0 {
		which := "the drop"
		if len(decided) > 1 {
			which = "the drops"
		}
		return text + fmt.Sprintf("among them %s that the data decide (%s).", which, strings.Join(first(decided, 3), "; "))
	}
	return text + fmt.Sprintf("least often that of %s (%s).", leastLabel, wholePercent(Num(least)))
}

func only(share Num) string {
	if share == 0 {
		return "none"
	}
	return "only " + wholePercent(share)
}

func wholePercent(share Num) string {
	return fmt.Sprintf("%.0f %%", math.Floor(100*float64(share)+0.5))
}

// FoldSentence says how rows were held out.
func FoldSentence(f Folds) string {
	times := "once"
	if f.Repeats == 2 {
		times = "twice"
	} else if f.Repeats > 2 {
		times = fmt.Sprintf("%d times over", f.Repeats)
	}
	switch f.Kind {
	case "":
		return ""
	case "leave-one-out":
		return "Each row is held out in turn"
	case "clusters":
		return fmt.Sprintf("Whole clusters are dealt into %d folds, %s, so that no cluster stands on both sides of a split", f.Count, times)
	case "blocks":
		return fmt.Sprintf("Time is cut into %d stretches of neighbouring periods, each held out in turn", f.Count)
	case "rolling":
		s := fmt.Sprintf("The last %d segments of time are held out in turn, each predicted from earlier periods alone", f.Count)
		switch {
		case f.Gap == 1:
			s += ", the period just before it left out"
		case f.Gap > 1:
			s += fmt.Sprintf(", the %d periods just before it left out", f.Gap)
		}
		return s
	case "column":
		if f.Repeats > 1 {
			return fmt.Sprintf("Columns of the data name the folds, up to %d in each of %d repeats", f.Count, f.Repeats)
		}
		return fmt.Sprintf("A column of the data names the %d folds", f.Count)
	}
	return fmt.Sprintf("Rows are dealt at random into %d folds, %s", f.Count, times)
}

// buildAdvice gives advice only where the reason is plain: it leaves the model alone when the focal coefficient is not
// entangled, when its conclusion would be the same untangled, or (to predict) when no gain is beyond its uncertainty.
func buildAdvice(c *compare.Comparison, r *Results) Advice {
	a := Advice{Purpose: r.Purpose, Reasons: []string{}, WouldChange: []string{}}
	if len(r.Alternatives) == 0 {
		a.Reasons = append(a.Reasons, "nothing was compared: diagnosis only")
		return a
	}
	if c.AsIs.NotIdentified != nil {
		a.Reasons = append(a.Reasons, "an exact dependency must be resolved first: remove one of its members, merge them, or state a restriction")
		return a
	}
	if c.Study.Purpose == compare.Predict {
		return predictAdvice(a, r)
	}
	changes := false
	for _, e := range c.Ledger {
		if !e.Focal {
			continue
		}
		name := c.Problem.Names[e.Column]
		switch {
		case e.Reason != "":
			a.Reasons = append(a.Reasons, "the coefficient of "+name+": "+e.Reason)
			changes = true
		case !c.Diagnosis.Tangled[e.Column]:
			a.Reasons = append(a.Reasons, fmt.Sprintf("the coefficient of %s is not tangled: its inflation factor is %s", name, Short(e.VIF)))
		case !e.ConclusionChanges:
			a.Reasons = append(a.Reasons, fmt.Sprintf("the conclusion on %s would be the same if it were untangled, at the same estimate", name))
		default:
			changes = true
			a.Reasons = append(a.Reasons, fmt.Sprintf("the conclusion on %s would be another if it were untangled, at the same estimate: a remedy is worth a discussion, and the choice depends on what theory says of the regressors tangled with it", name))
		}
	}
	if !changes {
		a.Recommended = "as-is"
	}
	a.WouldChange = append(a.WouldChange, "another coefficient of interest, a declared smallest effect, or knowledge from outside the data about the tangled regressors")
	return a
}

func predictAdvice(a Advice, r *Results) Advice {
	best, second := 0, -1
	for i, alt := range r.Alternatives {
		if alt.OutOfSample.RMSE < r.Alternatives[best].OutOfSample.RMSE {
			best = i
		}
	}
	for i, alt := range r.Alternatives {
		if i != best && (second < 0 || alt.OutOfSample.RMSE < r.Alternatives[second].OutOfSample.RMSE) {
			second = i
		}
	}
	b := r.Alternatives[best]
	if best != 0 && b.OutOfSample.Difference.High < 0 {
		a.Recommended = b.Key
		if second >= 0 {
			a.RunnerUp = r.Alternatives[second].Key
		}
		a.Reasons = append(a.Reasons, fmt.Sprintf("it has the smallest out-of-sample error, %s, and its gain over the model left alone is beyond its uncertainty", Short(float64(b.OutOfSample.RMSE))))
	} else {
		a.Recommended = "as-is"
		if best != 0 {
			a.RunnerUp = b.Key
		}
		a.Reasons = append(a.Reasons, "no alternative's gain in out-of-sample error is beyond its uncertainty")
	}
	a.WouldChange = append(a.WouldChange, "new rows from another time or place than those held out")
	return a
}
