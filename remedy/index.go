package remedy

import (
	"fmt"
	"math"
	"strings"

	"modelmend/fit/linear"
)

// index merges the regressors of a group into one.
var _ = register(Remedy{
	Key:   "index",
	Title: "Merge into an index",
	Order: 20,
	Does: "Replaces the regressors of a group by one index: the mean of their z-scores, their mean weighted by the inverse of their covariance matrix, " +
		"their sum in raw units, their first principal component, or the sum with the user's own weights. Weights are learned from the regressors of " +
		"the training rows alone, never from the dependent variable.",
	Assumes: "The members measure one concept, so that their coefficients stand in the fixed proportion of the weights.",
	Buys:    "One coefficient for the concept, estimated from what the members have in common.",
	Costs:   "Separate effects of the members are given up; if they differ, the index coefficient is a mixture of them.",
	Means:   "A member's coefficient is implied: the index coefficient times the member's weight.",
	Referee: "Why should the members have equal (or these) weights? Was the index planned? Do the data reject the restriction?",
	Sources: []string{
		"Kling, Liebman and Katz (2007), Econometrica 75(1), 83-119 (mean of z-scores)",
		"Anderson (2008), Journal of the American Statistical Association 103(484), 1481-1495 (inverse covariance)",
		"Filmer and Pritchett (2001), Demography 38(1), 115-132 (first component)",
		"Lubotsky and Wittenberg (2006), Review of Economics and Statistics 88(3), 549-562 (all proxies left in)",
		"Jolliffe (2002), Principal Component Analysis, Springer",
	},
	Variants: indexVariants,
})

// indexMaker learns the weights of the members on raw units from the training rows.
type indexMaker struct {
	method, label, text string
	weights             func(s *linear.Sample, cols []int) []float64
}

var indexMakers = []indexMaker{
	{"mean", "mean of z-scores", "the mean of the members' z-scores, signs aligned to the first member", meanWeights},
	{"inverse-covariance", "inverse covariance", "the mean of the members' z-scores, signs aligned to the first member, weighted by the inverse of their covariance matrix: a member that " +
		"repeats the others counts less", inverseWeights},
	{"sum", "sum", "the sum of the members in raw units", sumWeights},
	{"component", "first component", "the first principal component of the standardised members, its sign such that the first member counts positively", componentWeights},
}

func indexVariants(p *Problem) (out []Variant, not []NotApplicable) {
	if len(p.Groups) == 0 {
		return nil, []NotApplicable{{"index", "no group was named and no two substantive regressors are tangled; name one with groups or --group"}}
	}
	for _, g := range p.Groups {
		if reason := p.cannotMerge(g); reason != "" {
			not = append(not, NotApplicable{"index:" + g.Name, reason})
			continue
		}
		for _, m := range indexMakers {
			key := "index:" + g.Name + ":" + m.method
			if m.method == "sum" && !g.ByUser {
				continue // adding raw units makes sense only where the user says so
			}
			if m.method == "component" && !g.ByUser && len(g.Columns) == 2 {
				not = append(not, NotApplicable{key, "for two members it is the mean of z-scores, which is listed"})
				continue
			}
			if m.method == "inverse-covariance" && len(g.Columns) == 2 {
				if g.ByUser {
					not = append(not, NotApplicable{key, "for two members it is the mean of z-scores, which is listed"})
				}
				continue
			}
			out = append(out, p.indexVariant(key, g, m))
		}
		if g.Weights != nil {
			m := indexMaker{"weights", "the user's weights", "the sum of the members in raw units times the user's weights", func(*linear.Sample, []int) []float64 { return g.Weights }}
			out = append(out, p.indexVariant("index:"+g.Name+":weights", g, m))
		}
	}
	for _, g := range p.Groups {
		if g.ByUser && p.cannotMerge(g) == "" {
			out = append(out, p.allIn(g))
		}
	}
	return out, not
}

// allIn leaves every member of a group in the equation and adds up what they say of one concept, in units of the first member.
func (p *Problem) allIn(g Group) Variant {
	return Variant{
		Key: "index:" + g.Name + ":all-in", Label: "All of " + strings.ReplaceAll(g.Name, "+", " + ") + " left in", OwnVariance: true,
		Summary: "Least squares with every regressor; what " + join(p.names(g.Columns)) + " say of one concept is added up afterwards.",
		Learn:   learnAsIs,
		Describe: func(f *Final) Description {
			d := describeAsIs(f)
			if f.AsIs.NotIdentified != nil {
				return d
			}
			w, ok := combinedWeights(f, g.Columns)
			if !ok {
				d.Notes = append(d.Notes, Note{"no-combined-effect", p.Names[g.Columns[0]] + " has no association with the dependent variable to measure the others by"})
				return d
			}
			own := Derived{Name: g.Name, Weights: make([]float64, p.q()), Status: Estimated,
				Meaning: "the combined effect of " + join(p.names(g.Columns)) + " as signs of one concept, for one unit of the concept on the scale of " + p.Names[g.Columns[0]]}
			for i, c := range g.Columns {
				own.Weights[p.offset()+c] = w[i]
				d.Weights = append(d.Weights, NamedValue{p.Names[c], w[i]})
			}
			d.Derived = append(d.Derived, own)
			d.Costs = append(d.Costs, "the standard error of the combined effect takes the weights as given, though they come from the dependent variable; it is at least as close to zero bias as any index of these members, if they measure one concept with independent errors (Lubotsky and Wittenberg 2006)")
			return d
		},
	}
}

// combinedWeights returns rho_j = cov(y, x_j) / cov(y, x_1), the other regressors taken out of both: with C the inverse of the cross-products and b the
// slopes, these covariances are in proportion to (C_gg)^-1 b_g.
//
// Source: Lubotsky and Wittenberg (2006), Review of Economics and Statistics 88(3), 549-562.
func combinedWeights(f *Final, cols []int) ([]float64, bool) {
	p, m := len(f.AsIs.Slopes), len(cols)
	c, b := make([]float64, m*m), make([]float64, m)
	for i, a := range cols {
		b[i] = f.AsIs.Slopes[a]
		for j, o := range cols {
			c[i*m+j] = f.AsIs.Inverse[a*p+o]
		}
	}
	r, ok := linear.SolvePositive(c, m, b)
	if !ok || math.Abs(r[0]) == 0 {
		return nil, false
	}
	first := r[0]
	for i := range r {
		r[i] /= first
	}
	return r, true
}

// cannotMerge says why a group cannot be merged, or nothing.
func (p *Problem) cannotMerge(g Group) string {
	if len(g.Columns) < 2 {
		return "a group needs at least two regressors"
	}
	for _, c := range g.Columns {
		if p.Category[c] != "" {
			return p.Names[c] + " is a dummy of a category"
		}
		if d := p.dependents(c); len(d) > 0 {
			return fmt.Sprintf("%s also enters %s, which would be left without it", p.Names[c], join(p.names(d)))
		}
		if degree(p.Monomials[c]) > 1 {
			return p.Names[c] + " is a power or product"
		}
	}
	return ""
}

func (p *Problem) indexVariant(key string, g Group, m indexMaker) Variant {
	in := make([]bool, len(p.Names))
	for _, c := range g.Columns {
		in[c] = true
	}
	var others []int
	for j := range p.Names {
		if !in[j] {
			others = append(others, j)
		}
	}
	width := len(others) + 1
	basis := func(s *linear.Sample) []float64 {
		a := make([]float64, len(p.Names)*width)
		for k, j := range others {
			a[j*width+k+1] = 1
		}
		for i, w := range m.weights(s, g.Columns) {
			a[g.Columns[i]*width] = w
		}
		return a
	}
	return Variant{
		Key: key, Label: fmt.Sprintf("Index %s, %s", strings.ReplaceAll(g.Name, "+", " + "), m.label), OwnVariance: true,
		Summary: fmt.Sprintf("%s merged into one: %s.", join(p.names(g.Columns)), m.text),
		Learn: func(t Training) *Fitted {
			a := basis(t.Sample)
			f := fitBasis(t, a, width, Implied)
			f.Weights = make([]float64, len(p.Names))
			for _, c := range g.Columns {
				f.Weights[c] = a[c*width]
			}
			return f
		},
		Describe: func(f *Final) Description { return describeIndex(f, g, m) },
	}
}

func describeIndex(f *Final, g Group, m indexMaker) Description {
	p := f.Problem
	d := Description{Meaning: []Meaning{{"", "the association while the index and the other regressors stay the same"}}}
	var rule []string
	square := 0.0
	for _, c := range g.Columns {
		w := f.Fitted.Weights[c]
		square += w * w
		d.Weights = append(d.Weights, NamedValue{p.Names[c], w})
		rule = append(rule, fmt.Sprintf("%s %s", say(w), p.Names[c]))
		d.Meaning = append(d.Meaning, Meaning{p.Names[c], "implied by the index: its coefficient times the weight " + say(w)})
	}
	own := Derived{Name: g.Name, Weights: make([]float64, p.q()), Status: Estimated,
		Meaning: "one unit of the index " + strings.Join(rule, " + ") + " (weights on raw units), the other regressors held the same"}
	for _, c := range g.Columns {
		own.Weights[p.offset()+c] = f.Fitted.Weights[c] / square
	}
	d.Derived = append(d.Derived, own)
	d.Tests = restrictionTests(f, "restriction that the coefficients stand in the proportion of the index weights")
	d.BreakEven = breakEvens(f)
	d.Costs = append(d.Costs, fmt.Sprintf("separate effects of %s are given up: %d coefficients become one", join(p.names(g.Columns)), len(g.Columns)))
	if m.method != "sum" && m.method != "weights" {
		d.Costs = append(d.Costs, "the weights come from the data; the standard errors take them as given")
	}
	for _, c := range g.Columns[1:] {
		if (m.method == "mean" || m.method == "inverse-covariance") && f.Fitted.Weights[c] < 0 {
			d.Notes = append(d.Notes, Note{"sign-aligned", fmt.Sprintf("%s enters with a minus sign, because %s %s", p.Names[c], why(f, g, c), p.Names[g.Columns[0]])})
		}
	}
	return d
}

// why a member has a negative weight: it moves against the first, or the others say more than it does.
func why(f *Final, g Group, c int) string {
	if f.Problem.Sample.Correlation(g.Columns[0], c) < 0 {
		return "it moves against"
	}
	return "with the others given, it corrects what they repeat of"
}

// inverseWeights gives the members, as z-scores with aligned signs, the row sums of the inverse of their correlation matrix over the sum of all its
// entries, 1'C^-1 / (1'C^-1 1), and takes them to raw units. A member without variation adds nothing; dependent members share (the inverse is that
// on the directions in which they vary).
//
// Source: Anderson (2008), Journal of the American Statistical Association 103(484), 1481-1495.
func inverseWeights(s *linear.Sample, cols []int) []float64 {
	sign := make([]float64, len(cols))
	for i, c := range cols {
		if s.SD(c) > 0 {
			sign[i] = 1
			if i > 0 && s.Correlation(cols[0], c) < 0 {
				sign[i] = -1
			}
		}
	}
	sp := s.Keep(cols).Spectrum(nil)
	w := make([]float64, len(cols))
	for k := range sp.Rank {
		along := 0.0
		for i := range cols {
			along += sp.V[i*sp.Rank+k] * sign[i]
		}
		for i := range cols {
			w[i] += sp.V[i*sp.Rank+k] * along / (sp.Sigma[k] * sp.Sigma[k])
		}
	}
	total := 0.0
	for i := range w {
		total += w[i] * sign[i]
	}
	for i, c := range cols {
		if sign[i] == 0 || total == 0 {
			w[i] = 0
			continue
		}
		w[i] /= total * s.SD(c)
	}
	return w
}

// meanWeights gives each member sign/(count * sd), the sign of its correlation with the first member.
func meanWeights(s *linear.Sample, cols []int) []float64 {
	w := make([]float64, len(cols))
	for i, c := range cols {
		sd := s.SD(c)
		if sd == 0 {
			continue // no variation in these rows: it adds nothing
		}
		w[i] = 1 / (float64(len(cols)) * sd)
		if i > 0 && s.Correlation(cols[0], c) < 0 {
			w[i] = -w[i]
		}
	}
	return w
}

func sumWeights(_ *linear.Sample, cols []int) []float64 {
	w := make([]float64, len(cols))
	for i := range w {
		w[i] = 1
	}
	return w
}

// componentWeights gives each member its loading on the first principal component over its sd.
func componentWeights(s *linear.Sample, cols []int) []float64 {
	k := s.Keep(cols)
	sp := k.Spectrum(nil)
	w := make([]float64, len(cols))
	if sp.Rank == 0 {
		return w
	}
	sign := 1.0
	if sp.V[0] < 0 {
		sign = -1
	}
	for i := range cols {
		if sd := k.SD(i); sd > 0 {
			w[i] = sign * sp.V[i*sp.Rank] / sd
		}
	}
	return w
}
