package compare

import (
	"fmt"
	"math"
	"slices"

	"modelmend/fit/figures"
	"modelmend/fit/tail"
)

// LedgerEntry splits the standard error of one as-is coefficient into its four causes,
//
//	SE = s / (sqrt(n-1) sd) * sqrt(VIF),
//
// and sets beside it the error at VIF = 1, which holds the estimate, s and sd fixed: another sample would bring others.
type LedgerEntry struct {
	Column                      int
	Focal                       bool
	Estimate, S, OwnSD, VIF     float64
	Rows                        int
	SE, SEUntangled             float64
	Low, High                   float64
	LowUntangled, HighUntangled float64
	SmallestEffect              float64 // NaN where none is declared
	ConclusionChanges           bool
	Others                      []LedgerOther // other kinds of standard error, the chosen one first
	Reason                      string
	Sentence                    string
}

// LedgerOther sets the standard error of one kind other than the classical beside what it would be if the other regressors were orthogonal to this one,
// at the same residuals: its realised factor, as the root of VIF is the classical one's.
type LedgerOther struct {
	Kind                        string
	SE, Factor, SEUntangled     float64
	Low, High                   float64
	LowUntangled, HighUntangled float64
	ConclusionChanges           bool
	Reason                      string
}

func (c *Comparison) ledger() {
	c.Ledger = nil
	order := append([]int{}, c.Focal...)
	for j := range c.Problem.Names {
		if !slices.Contains(c.Focal, j) {
			order = append(order, j)
		}
	}
	for _, j := range order {
		c.Ledger = append(c.Ledger, c.entry(j))
	}
}

func (c *Comparison) entry(j int) LedgerEntry {
	nan := math.NaN()
	s := c.Problem.Sample
	name := c.Problem.Names[j]
	e := LedgerEntry{Column: j, Focal: slices.Contains(c.Focal, j), Estimate: c.AsIs.Slopes[j], S: c.S, OwnSD: s.SD(j), VIF: c.Diagnosis.VIF[j], Rows: s.N,
		SE: nan, SEUntangled: nan, Low: nan, High: nan, LowUntangled: nan, HighUntangled: nan, SmallestEffect: c.Smallest[j]}
	if c.AsIs.NotIdentified != nil && c.AsIs.NotIdentified[j] {
		e.Estimate = nan
		e.Reason = "not identified: it takes part in an exact dependency"
		e.Sentence = name + " has no coefficient of its own: the data hold an exact dependency that it takes part in."
		return e
	}
	if math.IsNaN(c.S) {
		e.Reason = "no degrees of freedom are left for the residual variance"
		e.Sentence = fmt.Sprintf("There are as many coefficients as rows: the data say nothing about the precision of %s.", name)
		return e
	}
	p := len(c.Problem.Names)
	e.SE = c.S * math.Sqrt(c.AsIs.Inverse[j*p+j])
	e.SEUntangled = e.SE / math.Sqrt(e.VIF)
	t := tail.TQuantile(0.95, c.DF)
	e.Low, e.High = e.Estimate-t*e.SE, e.Estimate+t*e.SE
	e.LowUntangled, e.HighUntangled = e.Estimate-t*e.SEUntangled, e.Estimate+t*e.SEUntangled
	now := conclusion(e.Low, e.High, e.SmallestEffect)
	then := conclusion(e.LowUntangled, e.HighUntangled, e.SmallestEffect)
	e.ConclusionChanges = now != then
	shown := LedgerOther{SE: e.SE, Factor: math.Sqrt(e.VIF), SEUntangled: e.SEUntangled, Low: e.Low, High: e.High, LowUntangled: e.LowUntangled, HighUntangled: e.HighUntangled,
		ConclusionChanges: e.ConclusionChanges}
	for _, k := range c.ErrorKinds {
		if k.Name == Classical {
			continue
		}
		o := c.other(k, j, e.Estimate)
		if o.Reason == "" {
			before, after := conclusion(o.Low, o.High, e.SmallestEffect), conclusion(o.LowUntangled, o.HighUntangled, e.SmallestEffect)
			o.ConclusionChanges = before != after
			if k.Name == c.kind().Name {
				shown, now, then = o, before, after
			}
		}
		e.Others = append(e.Others, o)
	}
	e.ConclusionChanges = shown.ConclusionChanges
	e.Sentence = c.sentence(shown, name, now, then)
	return e
}

// other states one kind of standard error of as-is coefficient j. Untangled, the score of the coefficient is its own regressor about its mean times the
// residual, so that its variance is the middle's diagonal over (sum of squares)^2.
func (c *Comparison) other(k ErrorKind, j int, estimate float64) LedgerOther {
	a, f := c.Alternatives[0], c.frame
	o := LedgerOther{Kind: k.Name, SE: math.NaN(), Factor: math.NaN()}
	w := make([]float64, f.q)
	w[f.k+j] = 1
	v, reason := a.variance(k.Name, w)
	if reason != "" {
		o.Reason = reason
		return o
	}
	o.SE = math.Sqrt(v)
	squares := float64(f.n)
	if f.k == 1 {
		squares--
	}
	own := math.Sqrt(a.middles.of[k.Name].Diagonal()[f.k+j]) / squares / f.scale[j]
	o.SEUntangled, o.Factor = own, o.SE/own
	df := k.df
	if math.IsNaN(df) {
		df = c.DF
	}
	t := tail.TQuantile(0.95, df)
	o.Low, o.High = estimate-t*o.SE, estimate+t*o.SE
	o.LowUntangled, o.HighUntangled = estimate-t*own, estimate+t*own
	return o
}

// conclusion says where an interval lies against zero and, where one is declared, the smallest effect of interest.
func conclusion(low, high, smallest float64) string {
	var where string
	switch {
	case low > 0:
		where = "is positive throughout"
	case high < 0:
		where = "is negative throughout"
	default:
		where = "includes zero"
	}
	if math.IsNaN(smallest) {
		return where
	}
	switch {
	case low >= smallest || high <= -smallest:
		return where + " and beyond the smallest effect of interest"
	case low > -smallest && high < smallest:
		return where + " and within the smallest effect of interest"
	}
	return where + " and leaves open whether the effect is large enough to matter"
}

func (c *Comparison) sentence(e LedgerOther, name, now, then string) string {
	factor := e.Factor
	kind := ""
	if e.Kind != "" {
		kind = " (" + e.Kind + " errors)"
	}
	s := fmt.Sprintf("The interval of %s%s, %s to %s, %s. ", name, kind, brief(e.Low), brief(e.High), now)
	switch {
	case len(c.Problem.Names) == 1:
		return s + "It is the only regressor: collinearity plays no part."
	case factor < 1.05:
		return s + "The other regressors hardly touch its standard error: collinearity plays no part."
	case e.ConclusionChanges:
		return s + fmt.Sprintf("The other regressors make its standard error %s times what it would be untangled (%s instead of %s); at the same estimate, the interval of an untangled design, %s to %s, %s.",
			brief(factor), brief(e.SE), brief(e.SEUntangled), brief(e.LowUntangled), brief(e.HighUntangled), then)
	}
	return s + fmt.Sprintf("Its standard error is %s times what it would be untangled (%s instead of %s), but at the same estimate an untangled design would say the same: its interval, %s to %s, %s.",
		brief(factor), brief(e.SE), brief(e.SEUntangled), brief(e.LowUntangled), brief(e.HighUntangled), again(then))
}

func again(then string) string {
	if then == "includes zero" {
		return "would still include zero"
	}
	return then
}

// brief prints a number for prose.
func brief(v float64) string { return figures.Short(v, 3) }
