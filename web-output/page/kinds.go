package page

import (
	"math"
	"strconv"

	"modelmend/fit/tail"
	"modelmend/web-output/view"
)

// errorsOf holds every kind of standard error of one alternative, six digits each: an interval is the estimate and T standard errors either way. Kinds are
// in the order of run.standardErrors, coefficients in that of the alternative.
type errorsOf struct {
	T            []view.Num `json:"t"` // quantile, by kind
	Degrees      []view.Num `json:"degrees"`
	Coefficients []kindsOf  `json:"coefficients"`
	Derived      []kindsOf  `json:"derived"`
	Reasons      []string   `json:"reasons"` // why a kind is missing, by kind; "" where it is not
}

// kindsOf holds the standard errors of one coefficient and their p-values, by kind; empty where it has none.
type kindsOf struct {
	SE []view.Num `json:"se"`
	P  []view.Num `json:"p"`
}

// errorsIn collects them.
func errorsIn(r *view.Results) []errorsOf {
	kinds := r.Run.StandardErrors
	out := make([]errorsOf, len(r.Alternatives))
	for i, a := range r.Alternatives {
		e := errorsOf{T: blank(len(kinds)), Degrees: blank(len(kinds)), Reasons: make([]string, len(kinds))}
		collect := func(list []view.Coefficient) []kindsOf {
			rows := make([]kindsOf, len(list))
			for j, c := range list {
				rows[j] = kindsOf{[]view.Num{}, []view.Num{}}
				if len(c.Errors) == 0 {
					continue
				}
				rows[j] = kindsOf{blank(len(kinds)), blank(len(kinds))}
				for k, kind := range kinds {
					for _, s := range c.Errors {
						if s.Kind != kind.Kind {
							continue
						}
						rows[j].SE[k], rows[j].P[k] = six(s.StandardError), six(s.PValue)
						if s.Reason != "" {
							e.Reasons[k] = s.Reason
						}
						if !s.Degrees.IsNone() && e.T[k].IsNone() {
							e.Degrees[k], e.T[k] = s.Degrees, six(view.Num(tail.TQuantile(0.95, float64(s.Degrees))))
						}
					}
				}
			}
			return rows
		}
		e.Coefficients, e.Derived = collect(a.Coefficients), collect(a.Derived)
		out[i] = e
	}
	return out
}

func blank(n int) []view.Num {
	out := make([]view.Num, n)
	for i := range out {
		out[i] = view.None()
	}
	return out
}

// kindLine is what a rung's details say of one kind of standard error.
type kindLine struct {
	Name, Text string
}

// kindLines lists them for one coefficient. It is the twin of kindLines in kinds.js.
func kindLines(kinds []view.ErrorKind, e errorsOf, own kindsOf, estimate view.Num) []kindLine {
	out := []kindLine{}
	for k := range own.SE {
		l := kindLine{Name: kinds[k].Kind}
		se := own.SE[k]
		switch {
		case se.IsNone() && e.Reasons[k] != "":
			l.Text = "none: " + e.Reasons[k]
		case se.IsNone() || estimate.IsNone():
			l.Text = "none"
		default:
			half := float64(e.T[k]) * float64(se)
			l.Text = "standard error " + Figure(float64(se), 3) + ", t-ratio " + Figure(float64(estimate)/float64(se), 3) + " with " + plain(view.Num(math.Floor(10*float64(e.Degrees[k])+0.5)/10)) + " degrees of freedom, p-value " + chance(own.P[k]) +
				", interval " + Figure(float64(estimate)-half, 3) + " to " + Figure(float64(estimate)+half, 3)
		}
		out = append(out, l)
	}
	return out
}

// chance says a p-value with three decimals. It is the twin of chance in format.js.
func chance(p view.Num) string {
	switch {
	case p.IsNone():
		return "–"
	case p < 0.0005:
		return "under 0.001"
	}
	return strconv.FormatFloat(math.Floor(1000*float64(p)+0.5)/1000, 'f', 3, 64)
}
