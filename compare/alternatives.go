package compare

import (
	"context"
	"math"

	"modelmend/fit/collinear"
	"modelmend/fit/linear"
	"modelmend/fit/parallel"
	"modelmend/fit/reduction"
	"modelmend/fit/tail"
	"modelmend/remedy"
)

// Alternative is one variant fitted to all rows, with its error on held-out rows.
type Alternative struct {
	Key         string
	Remedy      remedy.Remedy
	Variant     remedy.Variant
	Fitted      *remedy.Fitted
	Description remedy.Description
	// Coefficients has the constant first where there is one, then every regressor; Derived holds effects of variables
	// that enter several terms, then what the remedy adds.
	Coefficients []Coefficient
	Derived      []Coefficient
	Covariance   []float64 // of Coefficients, q x q row-major; nil without degrees of freedom
	S            float64   // residual standard deviation behind the standard errors
	DF           float64
	RSS          float64
	R2           float64
	Rows         int // learned on
	Out          OutOfSample
	OutApart     *OutOfSample // with folds that keep clusters or stretches of time together, beside random ones (see Comparison.Leak); else nil
	// TuningResampled is nil where nothing is tuned, the user fixed the value, or nothing was resampled.
	TuningResampled *TuningResampled
	Simulated       []Simulated // by coefficient and truth

	// Of each kind but the classical one; nil where only that is computed.
	frame       *frame
	middles     *middles
	covariances map[string][]float64 // of (constant, slopes), q x q

	own    *ownRows       // nil: learned on the design
	sample *linear.Sample // all rows that it is learned on

	value []float64 // (constant, slopes)
	diff  []float64 // covariance of (value - as-is) over sigma^2, q x q
	asIs  []float64
	exact bool // as-is has a value for every coefficient
	step  bool // one value of a tuning path
	s0    float64
	t     float64 // half width of a 95 % interval in standard errors
}

// Coefficient is one coefficient of an alternative, in the user's units.
type Coefficient struct {
	Name      string
	Estimate  float64
	SE        float64 // NaN beside a reason
	SEReason  string
	T, P      float64
	Low, High float64
	Status    remedy.Status
	Bias      float64 // estimate minus as-is: the plug-in estimate of the bias; NaN where it has no meaning
	MSE       float64 // variance + max(0, bias^2 - variance of the bias estimate), with the as-is residual variance
	Posterior float64
	Meaning   string
	Errors    []StandardError // by kind, the one in SE first; empty for steps of a path
	Resampled *Resampled      // nil where nothing was resampled

	weights []float64 // on (constant, slopes)
}

func (c *Comparison) fitAll(ctx context.Context, red *reduction.Reduction, choices []choice, opt Options) error {
	light := linear.EnoughForLight(c.Problem.Sample, foldsLight)
	parts := foldParts(red, c.Plan.Window, light)
	final := remedy.Training{Sample: c.Problem.Sample, Final: true}
	for _, p := range parts {
		final.Inner = append(final.Inner, p.inner()...)
	}
	c.Alternatives = make([]*Alternative, len(choices))
	own, err := c.ofChoices(choices, c.Plan, opt)
	if err != nil {
		return err
	}
	folds, err := c.outOfSample(ctx, parts, choices, own, opt)
	if err != nil {
		return err
	}
	if err := each(ctx, len(choices), opt.Workers, func(i int) {
		c.Alternatives[i] = c.alternative(choices[i], final, own[i])
	}); err != nil {
		return err
	}
	if c.ErrorKinds, err = c.errorKinds(); err != nil {
		return err
	}
	if err := c.sandwiches(ctx, opt); err != nil {
		return err
	}
	for i, a := range c.Alternatives {
		a.Out = summarize(folds[i], folds[0], c.Plan.Window != nil)
		c.state(a)
	}
	c.ledger()
	c.noteErrors()
	if err := c.measureLeak(ctx, choices, light, opt); err != nil {
		return err
	}
	if err := c.resample(ctx, red, choices, opt); err != nil {
		return err
	}
	return c.simulate(ctx, red, choices, opt)
}

// each runs f for 0..n-1 on so many workers; what has not begun once ctx is done is left.
func each(ctx context.Context, n, workers int, f func(i int)) error {
	parallel.Each(n, workers, func(i int) {
		if ctx.Err() == nil {
			f(i)
		}
	})
	return ctx.Err()
}

// alternative fits one variant to all rows; state then puts it on the user's regressors.
func (c *Comparison) alternative(ch choice, final remedy.Training, own *ownRows) *Alternative {
	sample := c.Problem.Sample
	a := &Alternative{Key: ch.variant.Key, Remedy: ch.remedy, Variant: ch.variant, own: own}
	if own != nil {
		sample = own.sample
		final = remedy.Training{Sample: sample, Final: true}
		for _, p := range own.parts {
			final.Inner = append(final.Inner, p.inner()...)
		}
	}
	a.sample, a.Rows = sample, sample.N
	a.Fitted = ch.variant.Learn(final)
	a.RSS = sample.RSS(a.Fitted.Slopes)
	a.S, a.DF = c.S, c.DF
	if ch.variant.OwnVariance {
		a.DF = float64(sample.N - a.Fitted.Columns)
		if sample.Constant {
			a.DF--
		}
		a.S = math.NaN()
		if a.DF > 0 {
			a.S = math.Sqrt(a.RSS / a.DF)
		}
	}
	a.R2 = 1 - a.RSS/sample.YY.Float()
	f := &remedy.Final{Problem: c.Problem, Fitted: a.Fitted, RSS: a.RSS, AsIs: c.AsIs, S: c.S, DF: c.DF}
	if own != nil {
		f.Sample = own.sample
	}
	a.Description = ch.variant.Describe(f)
	return a
}

// state fills the coefficients of an alternative.
func (c *Comparison) state(a *Alternative) {
	sample := a.sample
	k := 0
	if sample.Constant {
		k = 1
		a.value = []float64{sample.ConstantFor(a.Fitted.Slopes)}
		a.asIs = []float64{c.AsIs.Constant(c.Problem.Sample)}
		if a.Key == "as-is" {
			a.value[0] = a.asIs[0]
		}
	}
	a.value = append(a.value, a.Fitted.Slopes...)
	a.asIs = append(a.asIs, c.AsIs.Slopes...)
	a.exact = c.AsIs.NotIdentified == nil && a.own == nil
	a.s0 = c.S
	kind := c.kind()
	df := kind.df
	if math.IsNaN(df) {
		df = a.DF
	}
	a.t = tail.TQuantile(0.95, df)
	q := len(a.value)
	factor := a.Fitted.Factor
	cross := a.Fitted.Cross
	if cross == nil {
		cross = factor
	}
	if a.exact && factor != nil {
		a.diff = difference(factor, cross, c.AsIs.Factor(c.Problem.Sample))
	}
	status := a.Fitted.Status
	if a.Description.Status != nil {
		status = a.Description.Status
	}
	identity := a.Description.Report == nil
	for i := range q {
		w := make([]float64, q)
		if identity {
			w[i] = 1
		} else {
			copy(w, a.Description.Report[i*q:(i+1)*q])
		}
		st := remedy.Estimated
		name := "constant"
		if i >= k {
			name = c.Problem.Names[i-k]
			if status != nil {
				st = status[i-k]
			}
		} else if !identity && zero(w) {
			st = remedy.Zero
		} else if !identity || a.own != nil {
			st = remedy.Different
		} else if c.constantTouched(status) {
			st = remedy.NotIdentified
		}
		coef := c.coefficient(a, name, w, st)
		coef.Meaning = meaningOf(a.Description.Meaning, name)
		if i >= k && a.Fitted.Posterior != nil {
			coef.Posterior = c.S * math.Sqrt(a.Fitted.Posterior[i-k])
		}
		a.Coefficients = append(a.Coefficients, coef)
	}
	switch kind := c.kind().Name; {
	case a.step || factor == nil:
	case kind != Classical && a.covariances[kind] != nil:
		a.Covariance = covariance(a.Description.Report, a.covariances[kind], q, 1)
	case kind == Classical && !math.IsNaN(a.S):
		a.Covariance = covariance(a.Description.Report, factor, q, a.S*a.S)
	}
	for _, e := range c.effects() {
		if a.own != nil {
			break // another question
		}
		w := make([]float64, q)
		copy(w[k:], e.weights)
		coef := c.coefficient(a, e.name, w, combined(status, e.weights))
		coef.Meaning = "the change in " + c.Design.Dependent + " for one more unit of " + e.variable + ", all terms with it together, at the sample means"
		a.Derived = append(a.Derived, coef)
	}
	for _, dv := range a.Description.Derived {
		coef := c.coefficient(a, dv.Name, dv.Weights, dv.Status)
		coef.Bias, coef.MSE = math.NaN(), math.NaN() // as-is has no such coefficient
		coef.Meaning = dv.Meaning
		a.Derived = append(a.Derived, coef)
	}
}

// kind is the kind of standard error that the ladder shows.
func (c *Comparison) kind() ErrorKind {
	if len(c.ErrorKinds) == 0 { // diagnosis only
		return ErrorKind{Name: Classical, df: math.NaN()}
	}
	return c.ErrorKinds[0]
}

func zero(w []float64) bool {
	for _, v := range w {
		if v != 0 {
			return false
		}
	}
	return true
}

// constantTouched: in an exact dependency that involves a shift the constant has no value of its own either.
func (c *Comparison) constantTouched(status []remedy.Status) bool {
	if status == nil {
		return false
	}
	for _, d := range c.Diagnosis.Dependencies {
		if d.Kind != collinear.Exact || d.Constant == 0 {
			continue
		}
		for _, j := range d.Members() {
			if status[j] == remedy.NotIdentified {
				return true
			}
		}
	}
	return false
}

func meaningOf(list []remedy.Meaning, name string) string {
	general := ""
	for _, m := range list {
		if m.Coefficient == name {
			return m.Text
		}
		if m.Coefficient == "" {
			general = m.Text
		}
	}
	if name == "constant" {
		return ""
	}
	return general
}

// combined is the status of a combination of slopes.
func combined(status []remedy.Status, weights []float64) remedy.Status {
	if status == nil {
		return remedy.Estimated
	}
	out, zero := remedy.Estimated, true
	for j, w := range weights {
		if w == 0 {
			continue
		}
		switch status[j] {
		case remedy.NotIdentified:
			return remedy.NotIdentified
		case remedy.Zero:
			continue
		case remedy.Implied:
			out = remedy.Implied
		}
		zero = false
	}
	if zero {
		return remedy.Zero
	}
	return out
}

// coefficient states the combination w of (constant, slopes).
func (c *Comparison) coefficient(a *Alternative, name string, w []float64, st remedy.Status) Coefficient {
	nan := math.NaN()
	out := Coefficient{Name: name, SE: nan, T: nan, P: nan, Low: nan, High: nan, Status: st, Bias: nan, MSE: nan, Posterior: nan, weights: w}
	out.Estimate = dot(w, a.value)
	if st == remedy.NotIdentified {
		out.Estimate = nan
		out.SEReason = "not identified: it takes part in an exact dependency"
		return out
	}
	variance, reason := a.variance(c.kind().Name, w)
	switch {
	case st == remedy.Zero:
		out.Estimate = 0
		out.SEReason = "set to zero"
	case reason != "":
		out.SEReason = reason
	case a.step:
		out.SE = math.Sqrt(variance)
		out.Low, out.High = out.Estimate-a.t*out.SE, out.Estimate+a.t*out.SE
	}
	if st != remedy.Zero && !a.step {
		out.Errors = c.errors(a, w, out.Estimate)
		e := out.Errors[0]
		out.SE, out.Low, out.High, out.T, out.P = e.SE, e.Low, e.High, e.T, e.P
	}
	if a.exact && st != remedy.Different {
		out.Bias = out.Estimate - dot(w, a.asIs)
		if a.Key == "as-is" {
			out.Bias = 0
		}
		if !math.IsNaN(a.s0) && a.Fitted.Factor != nil {
			out.MSE = meanSquaredError(a.s0, form(w, a.Fitted.Factor), form(w, a.diff), out.Bias, st)
		}
	}
	return out
}

// meanSquaredError estimates variance plus squared bias; the squared plug-in bias is too large by its own variance, which is
// taken off.
func meanSquaredError(s, variance, diff, bias float64, st remedy.Status) float64 {
	if st == remedy.Zero {
		variance = 0
	}
	s2 := s * s
	return s2*math.Max(0, variance) + math.Max(0, bias*bias-s2*math.Max(0, diff))
}

// difference is Var(alternative - as-is)/sigma^2 = F + F0 - C - C'.
func difference(factor, cross, asIs []float64) []float64 {
	q := int(math.Round(math.Sqrt(float64(len(asIs)))))
	out := make([]float64, len(asIs))
	for i := range q {
		for j := range q {
			out[i*q+j] = factor[i*q+j] + asIs[i*q+j] - cross[i*q+j] - cross[j*q+i]
		}
	}
	return out
}

func dot(a, b []float64) float64 {
	v := 0.0
	for i := range a {
		if a[i] != 0 {
			v += a[i] * b[i]
		}
	}
	return v
}

func form(w, m []float64) float64 {
	q := len(w)
	v := 0.0
	for i := range q {
		if w[i] == 0 {
			continue
		}
		for j := range q {
			if w[j] != 0 {
				v += w[i] * m[i*q+j] * w[j]
			}
		}
	}
	return v
}

func covariance(report, factor []float64, q int, s2 float64) []float64 {
	out := factor
	if report != nil {
		out = linear.Embed(q, q, report, factor)
	}
	scaled := make([]float64, len(out))
	for i, v := range out {
		scaled[i] = s2 * v
	}
	return scaled
}

// effect is the derivative of the dependent variable with respect to one raw column at the sample means.
type effect struct {
	name, variable string
	weights        []float64
}

// effects are those of the variables behind the focal coefficients that enter several terms.
func (c *Comparison) effects() []effect {
	var out []effect
	seen := map[string]bool{}
	for _, j := range c.Focal {
		for _, v := range c.Design.Regressors[j].Variables {
			if seen[v] {
				continue
			}
			seen[v] = true
			if w, ok := c.Design.Effect(v); ok {
				out = append(out, effect{"effect of " + v, v, w})
			}
		}
	}
	return out
}

// PathPoint is the fit of a tuned alternative at one value of its tuning.
type PathPoint struct {
	Coefficients []Coefficient
	Derived      []Coefficient
}

// Path states every value of the tuning as the alternative itself is stated: the slider's steps. It is nil where
// nothing is tuned. Cost O(p^3) a value.
func (c *Comparison) Path(a *Alternative) []PathPoint {
	t := a.Fitted.Tuning
	if t == nil {
		return nil
	}
	out := make([]PathPoint, len(t.Values))
	parallel.Each(len(t.Values), 0, func(i int) {
		f := &remedy.Fitted{Slopes: t.Slopes[i], Factor: t.Factor(i), NoErrors: a.Fitted.NoErrors}
		if t.Cross != nil {
			f.Cross = t.Cross(i)
		}
		step := &Alternative{Key: a.Key + " step", Fitted: f, S: a.S, DF: a.DF, step: true, middles: a.middles, own: a.own, sample: a.sample}
		if kind := c.kind().Name; kind != Classical && f.Factor != nil && a.middles.reason[kind] == "" {
			step.covariances = map[string][]float64{kind: a.frame.between(a.middles.of[kind], f)}
		}
		c.state(step)
		out[i] = PathPoint{step.Coefficients, step.Derived}
	})
	return out
}
