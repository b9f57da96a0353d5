package compare

import (
	"context"
	"fmt"
	"math"
	"slices"
	"strings"

	"modelmend/fit/design"
	"modelmend/fit/folds"
	"modelmend/fit/linear"
	"modelmend/fit/parallel"
	"modelmend/fit/reduction"
	"modelmend/fit/sandwich"
	"modelmend/fit/tail"
	"modelmend/remedy"
)

// The kinds of standard error.
const (
	Classical       = "classical"
	Robust          = "robust"
	Clustered       = "clustered"
	Autocorrelation = "autocorrelation"
)

// ErrorNames are the kinds that a study may name.
var ErrorNames = []string{Classical, Robust, Clustered, Autocorrelation}

// Variants are the forms of robust standard errors that a study may name.
var Variants = []string{"HC0", "HC1", "HC2", "HC3", "HC4"}

// ErrorSpec chooses standard errors. Kind "" is clustered where the study declares clusters, autocorrelation where it declares time, else classical.
type ErrorSpec struct {
	Kind        string
	Variant     string // of robust ones; "" is HC3
	Lags        *int   // of autocorrelation; nil: by the published rule
	SmallSample bool   // autocorrelation: times n/(n-k)
}

// ErrorKind is one kind of standard error that was computed for every alternative.
type ErrorKind struct {
	Name    string
	Text    string // how it is formed
	Warning string // what to hold against it, or ""

	variant sandwich.Kind
	lags    int
	small   bool
	df      float64 // NaN: the fit's own residual degrees of freedom
}

// StandardError is one coefficient's standard error of one kind.
type StandardError struct {
	Kind      string
	SE        float64 // NaN beside a reason
	Reason    string
	DF        float64
	T, P      float64
	Low, High float64
}

// closest is the ratio of the smallest to the largest singular value of the scaled regressors below which the other kinds of error are not stated: rows are
// multiplied in float64, so that about 16 digits less twice its logarithm are right, four at this mark.
const closest = 1e-6

// leastClusters is the number of clusters below which their errors are doubted: common practice, no source.
const leastClusters = 30

// errorKinds decides what is computed; the first is the one that the ladder shows.
func (c *Comparison) errorKinds() ([]ErrorKind, error) {
	spec := c.Study.Errors
	first := spec.Kind
	if first == "" {
		switch {
		case len(c.Clusters) > 0:
			first = Clustered
		case c.Periods != nil && c.Periods.Count == c.Design.Rows:
			first = Autocorrelation
		default:
			first = Classical
		}
	}
	n := c.Design.Rows
	out := []ErrorKind{{Name: Classical, Text: "classical: errors are independent and of equal variance", df: math.NaN()}}
	if first == Robust || n <= folds.Exact { // beyond, it takes one more pass over the rows: only where asked for
		variant := spec.Variant
		if variant == "" {
			variant = "HC3"
		}
		out = append(out, ErrorKind{Name: Robust, Text: "robust (" + variant + "): errors are independent, their variances may differ", variant: sandwich.Kind(variant), df: math.NaN()})
	}
	switch {
	case len(c.Clusters) > 0:
		k := ErrorKind{Name: Clustered, df: math.Inf(1)}
		var parts []string
		for _, g := range c.Clusters {
			k.df = math.Min(k.df, float64(g.Count-1))
			parts = append(parts, fmt.Sprintf("%d clusters of %s", g.Count, g.Column))
		}
		k.Text = fmt.Sprintf("clustered: rows of one cluster may share errors (%s); factor G/(G-1) (n-1)/(n-k), t with %g degrees of freedom", strings.Join(parts, ", "), k.df)
		if k.df+1 < leastClusters {
			k.Warning = fmt.Sprintf("with %g clusters these errors are often too small; under %d is few (common practice, no source)", k.df+1, leastClusters)
		}
		out = append(out, k)
	case first == Clustered:
		return nil, &StudyError{"standard_errors", "clustered standard errors need clusters", "name the column that tells them apart with clusters"}
	}
	switch {
	case c.Periods != nil && c.Periods.Count == n:
		k := ErrorKind{Name: Autocorrelation, small: spec.SmallSample, df: math.NaN()}
		rule := "as the study says"
		if spec.Lags == nil {
			k.lags, rule = sandwich.Lags(n), "by the rule 4 (n/100)^(2/9)"
		} else {
			k.lags = *spec.Lags
		}
		k.lags = min(k.lags, n-1)
		k.Text = fmt.Sprintf("autocorrelation: errors may follow each other in time (Newey and West 1987, Bartlett weights, %d lags %s)", k.lags, rule)
		if k.small {
			k.Text += ", times n/(n-k)"
		}
		out = append(out, k)
	case first == Autocorrelation && c.Periods == nil:
		return nil, &StudyError{"standard_errors", "autocorrelation needs the order of the rows", "name the column that orders them with time"}
	case first == Autocorrelation:
		return nil, &StudyError{"standard_errors", fmt.Sprintf("%d rows share %d values of %s, so that they have no one order in time", n, c.Periods.Count, c.Periods.Column),
			"cluster by " + c.Periods.Column + " instead"}
	}
	i := slices.IndexFunc(out, func(k ErrorKind) bool { return k.Name == first })
	if i < 0 {
		return nil, &StudyError{"standard_errors", fmt.Sprintf("kind %q is not known", first), "write one of " + strings.Join(ErrorNames, ", ")}
	}
	chosen := out[i]
	return append([]ErrorKind{chosen}, slices.Delete(out, i, i+1)...), nil
}

// middles holds the middle of each kind but the classical one, in standardised units, or why there is none.
type middles struct {
	of     map[string]*sandwich.Middle
	reason map[string]string
}

// frame takes covariance factors of (constant, slopes) to standardised units and back.
type frame struct {
	p, k, q, n  int
	mean, scale []float64
	back        []float64 // q x q, from standardised coefficients to the user's
}

func newFrame(sample *linear.Sample) *frame {
	f := &frame{p: sample.P, n: sample.N}
	if sample.Constant {
		f.k = 1
	}
	f.q = f.p + f.k
	f.mean, f.scale = make([]float64, f.p), make([]float64, f.p)
	f.back = make([]float64, f.q*f.q)
	if f.k == 1 {
		f.back[0] = 1
	}
	for j := range f.p {
		f.mean[j] = sample.Mean[j].Float()
		if f.scale[j] = sample.SD(j); f.scale[j] == 0 {
			f.scale[j] = 1
		}
		f.back[(j+f.k)*f.q+j+f.k] = 1 / f.scale[j]
		if f.k == 1 {
			f.back[j+1] = -f.mean[j] / f.scale[j]
		}
	}
	return f
}

// standard takes a factor to standardised units: the constant is then the mean of y, apart from the slopes.
func (f *frame) standard(factor []float64) []float64 {
	out := make([]float64, f.q*f.q)
	if f.k == 1 {
		out[0] = 1 / float64(f.n)
	}
	for i := range f.p {
		for j := range f.p {
			out[(i+f.k)*f.q+j+f.k] = factor[(i+f.k)*f.q+j+f.k] * f.scale[i] * f.scale[j]
		}
	}
	return out
}

// between gives the covariance of (constant, slopes) of one kind, for a fit whose bread is Cross, or Factor where that is nil.
func (f *frame) between(m *sandwich.Middle, fit *remedy.Fitted) []float64 {
	bread := fit.Factor
	if fit.Cross != nil {
		bread = fit.Cross
	}
	b := f.standard(bread)
	whole := make([]float64, f.q*f.q)
	for r := range f.q {
		for l, w := range f.back[r*f.q : (r+1)*f.q] {
			if w == 0 {
				continue
			}
			for s := range f.q {
				whole[r*f.q+s] += w * b[l*f.q+s]
			}
		}
	}
	return m.Between(whole)
}

// collector forms the middles of one alternative, or of as-is, while rows pass by.
type collector struct {
	slopes   []float64 // standardised
	factor   []float64 // of the leverage, standardised, q x q; nil: none needed
	k        int       // coefficients fitted
	robust   *sandwich.Middle
	lone     int // a row with a leverage of one; -1
	clusters []*sandwich.Clusters
	series   *sandwich.Series
}

// sandwiches forms every kind but the classical one for every alternative, in one pass over the design's rows and one over the rows of each alternative
// that has its own.
func (c *Comparison) sandwiches(ctx context.Context, opt Options) error {
	if len(c.ErrorKinds) == 1 && c.ErrorKinds[0].Name == Classical {
		return nil
	}
	var shared []*Alternative
	for _, a := range c.Alternatives {
		if a.own == nil {
			shared = append(shared, a)
			continue
		}
		order := slices.DeleteFunc(c.timeOrder(c.Periods != nil && c.Periods.Count == c.Design.Rows), func(i int) bool { return a.own.rows.Skip[i] })
		err := c.sandwich(ctx, opt, []*Alternative{a}, order, func(yield func([]reduction.Column, []int) error) error { return yield(a.own.cols, order) })
		if err != nil {
			return err
		}
	}
	order := c.timeOrder(c.Periods != nil && c.Periods.Count == c.Design.Rows)
	err := c.sandwich(ctx, opt, shared, order, func(yield func([]reduction.Column, []int) error) error { return c.eachRow(order, yield) })
	c.frame = c.Alternatives[0].frame
	return err
}

// sandwich passes over rows once for alternatives that are learned on them. Residuals and leverages are the alternative's own where it is least squares
// on a smaller design, else those of the first one, as-is.
func (c *Comparison) sandwich(ctx context.Context, opt Options, alternatives []*Alternative, order []int, each func(yield func([]reduction.Column, []int) error) error) error {
	kinds := c.ErrorKinds
	fr := newFrame(alternatives[0].sample)
	p, k, q, n := fr.p, fr.k, fr.q, fr.n
	mean, scale, my := fr.mean, fr.scale, alternatives[0].sample.MeanY.Float()
	kind := func(name string) *ErrorKind {
		if i := slices.IndexFunc(kinds, func(e ErrorKind) bool { return e.Name == name }); i >= 0 {
			return &kinds[i]
		}
		return nil
	}
	robust, series := kind(Robust), kind(Autocorrelation)
	leverage := robust != nil && robust.variant != sandwich.HC0 && robust.variant != sandwich.HC1
	var both *grouping
	if len(c.Clusters) == 2 {
		both = cross(c.Clusters[0], c.Clusters[1])
	}
	newCollector := func(a *Alternative) *collector {
		col := &collector{slopes: make([]float64, p), k: a.Fitted.Columns + k, lone: -1}
		for j := range p {
			col.slopes[j] = a.Fitted.Slopes[j] * scale[j]
		}
		if leverage {
			col.factor = fr.standard(a.Fitted.Factor)
		}
		if robust != nil {
			col.robust = sandwich.NewMiddle(q)
		}
		for _, g := range c.Clusters {
			col.clusters = append(col.clusters, sandwich.NewClusters(q, g.Count))
		}
		if both != nil {
			col.clusters = append(col.clusters, sandwich.NewClusters(q, both.Count))
		}
		if series != nil {
			col.series = sandwich.NewSeries(q, series.lags)
		}
		return col
	}
	asIs := newCollector(alternatives[0])
	collectors := []*collector{asIs}
	of := make([]*collector, len(alternatives))
	for i, a := range alternatives {
		switch {
		case i == 0 || !a.Variant.OwnVariance:
			of[i] = asIs
		default:
			of[i] = newCollector(a)
			collectors = append(collectors, of[i])
		}
	}
	// Rows pass in blocks, in time order where there is one.
	const block = 2048
	x, y := make([]float64, block*q), make([]float64, block)
	row := 0
	add := func(cols []reduction.Column, index []int) {
		for at := 0; at < len(index); at += block {
			part := index[at:min(at+block, len(index))]
			for i, r := range part {
				z := x[i*q : (i+1)*q]
				if k == 1 {
					z[0] = 1
				}
				for j := range p {
					v := cols[j].Hi[r] - mean[j]
					if cols[j].Lo != nil {
						v += cols[j].Lo[r]
					}
					z[j+k] = v / scale[j]
				}
				y[i] = cols[p].Hi[r] - my
			}
			parallel.Each(len(collectors), opt.Workers, func(w int) {
				collectors[w].rows(c, x, y, part, row, q, k, n, robust, both)
			})
			row += len(part)
		}
	}
	err := each(func(cols []reduction.Column, index []int) error {
		if err := ctx.Err(); err != nil {
			return err
		}
		add(cols, index)
		return nil
	})
	if err != nil {
		return err
	}
	for i, a := range alternatives {
		col := of[i]
		a.frame = fr
		a.middles = &middles{of: map[string]*sandwich.Middle{}, reason: map[string]string{}}
		if robust != nil {
			a.middles.of[Robust] = col.robust
			if col.lone >= 0 {
				a.middles.reason[Robust] = c.loneRow(order, col.lone, robust.variant)
			}
		}
		if len(col.clusters) > 0 {
			m, _ := col.clusters[0].Middle(n, col.k)
			if both != nil {
				second, _ := col.clusters[1].Middle(n, col.k)
				joint, _ := col.clusters[2].Middle(n, col.k)
				m = sandwich.TwoWay(m, second, joint)
			}
			a.middles.of[Clustered] = m
		}
		if series != nil {
			m := col.series.Middle()
			if series.small {
				scaled := sandwich.NewMiddle(q)
				scaled.AddScaled(m, float64(n)/float64(n-col.k))
				m = scaled
			}
			a.middles.of[Autocorrelation] = m
		}
		a.covariances = map[string][]float64{}
		if sp := a.sample.Spectrum(nil); sp.Rank > 0 && sp.Sigma[sp.Rank-1] < closest*sp.Sigma[0] {
			for name := range a.middles.of {
				a.middles.reason[name] = "the regressors are too close to an exact dependency for these errors in float64 (singular values a million apart); the classical ones keep their digits"
			}
		}
		for name, m := range a.middles.of {
			if a.middles.reason[name] == "" && a.Fitted.Factor != nil {
				a.covariances[name] = fr.between(m, a.Fitted)
			}
		}
	}
	return nil
}

// loneRow says which row a leverage of one belongs to.
func (c *Comparison) loneRow(order []int, row int, kind sandwich.Kind) string {
	where := "one row"
	if order != nil {
		where = fmt.Sprintf("the row in line %d", c.Design.Lines[order[row]])
	}
	return fmt.Sprintf("%s is fitted exactly whatever its value (leverage one), so that %s divides by zero; HC0 and HC1 do not", where, kind)
}

// rows adds a block of rows; part names them among those used where clusters must be looked up, first is the place of the block's first row.
func (col *collector) rows(c *Comparison, x, y []float64, part []int, first, q, k, n int, robust *ErrorKind, both *grouping) {
	for i := range part {
		z := x[i*q : (i+1)*q]
		e := y[i]
		for j, b := range col.slopes {
			e -= b * z[j+k]
		}
		if col.robust != nil && col.lone < 0 {
			h := 0.0
			if col.factor != nil {
				h = form(z, col.factor)
			}
			w, ok := sandwich.Weight(robust.variant, n, col.k, h)
			if !ok {
				col.lone = first + i
			} else {
				col.robust.Add(z, w*e*e)
			}
		}
		for g, cl := range col.clusters {
			grouping := both
			if g < len(c.Clusters) {
				grouping = c.Clusters[g]
			}
			cl.Add(grouping.Of[part[i]], z, e)
		}
		if col.series != nil {
			col.series.Add(z, e)
		}
	}
}

// cross numbers the pairs of two groupings that occur.
func cross(a, b *grouping) *grouping {
	out := &grouping{Column: a.Column + " and " + b.Column}
	seen := map[[2]int32]int32{}
	for i := range a.Of {
		key := [2]int32{a.Of[i], b.Of[i]}
		k, ok := seen[key]
		if !ok {
			k = int32(len(seen))
			seen[key] = k
		}
		out.Of = append(out.Of, k)
	}
	out.Count = len(seen)
	return out
}

// timeOrder lists the rows used in time order, or as they stand.
func (c *Comparison) timeOrder(sorted bool) []int {
	if c.Design.Streamed() {
		return nil
	}
	order := make([]int, c.Design.Rows)
	for i := range order {
		order[i] = i
	}
	if sorted {
		for i, t := range c.Periods.Of {
			order[t] = i
		}
	}
	return order
}

// eachRow gives the rows used, the regressors and then the dependent variable: those held in the order named, others block by block.
func (c *Comparison) eachRow(order []int, yield func(cols []reduction.Column, index []int) error) error {
	d := c.Design
	if !d.Streamed() {
		return yield(append(append([]reduction.Column{}, d.Columns()...), d.Y), order)
	}
	return d.Pass(func(cols []reduction.Column, lines []int) error {
		index := make([]int, len(lines))
		for i := range index {
			index[i] = i
		}
		return yield(cols, index)
	})
}

// variance is that of the combination w of (constant, slopes) by the kind named; NaN beside a reason.
func (a *Alternative) variance(kind string, w []float64) (v float64, reason string) {
	if a.Fitted.Factor == nil {
		return math.NaN(), a.Fitted.NoErrors
	}
	if kind == Classical {
		if math.IsNaN(a.S) {
			return math.NaN(), "no degrees of freedom are left for the residual variance"
		}
		return a.S * a.S * math.Max(0, form(w, a.Fitted.Factor)), ""
	}
	if r := a.middles.reason[kind]; r != "" {
		return math.NaN(), r
	}
	v = form(w, a.covariances[kind])
	if v < 0 {
		return math.NaN(), "the two-way variance came out negative: the two groupings share too much; cluster one way"
	}
	return v, ""
}

// NoCovariance says why Covariance is nil.
func (a *Alternative) NoCovariance() string {
	for _, k := range a.Coefficients {
		if k.SEReason != "" && k.Status != remedy.Zero && k.Status != remedy.NotIdentified {
			return k.SEReason
		}
	}
	return "no degrees of freedom are left for the residual variance"
}

// errors gives every kind of standard error of the combination w.
func (c *Comparison) errors(a *Alternative, w []float64, estimate float64) []StandardError {
	nan := math.NaN()
	var out []StandardError
	for _, k := range c.ErrorKinds {
		e := StandardError{Kind: k.Name, SE: nan, T: nan, P: nan, Low: nan, High: nan, DF: k.df}
		if math.IsNaN(e.DF) {
			e.DF = a.DF
		}
		var v float64
		if v, e.Reason = a.variance(k.Name, w); e.Reason == "" {
			e.SE = math.Sqrt(v)
			half := tail.TQuantile(0.95, e.DF) * e.SE
			e.Low, e.High = estimate-half, estimate+half
			if e.SE > 0 {
				e.T = estimate / e.SE
				e.P = tail.T(e.T, e.DF)
			}
		}
		out = append(out, e)
	}
	return out
}

// noteErrors says what to hold against the chosen kind.
func (c *Comparison) noteErrors() {
	for _, k := range c.ErrorKinds {
		if k.Warning != "" {
			c.Notes = append(c.Notes, design.Note{Code: "few-clusters", Text: k.Warning})
		}
	}
	if c.ErrorKinds[0].Name == Clustered && len(c.Clusters) > 0 && c.ErrorKinds[0].df+1 < float64(c.AsIs.Rank+1) {
		c.Notes = append(c.Notes, design.Note{Code: "fewer-clusters-than-coefficients",
			Text: fmt.Sprintf("there are %g clusters for %d coefficients: the clustered covariance matrix has not full rank, and joint tests with it mean little", c.ErrorKinds[0].df+1, c.AsIs.Rank+1)})
	}
}
