package remedy

import (
	"fmt"
	"math"
	"strings"

	"modelmend/fit/linear"
	"modelmend/fit/tail"
)

// more-data is not a fit but a plan: how many rows it would take, and where new ones would help most.
var _ = register(Remedy{
	Key:   "more-data",
	Title: "Gather more data",
	Order: 90,
	Does: "Fits nothing. It works out how many rows of the same pattern a narrower interval would take, how many if the regressors were not tangled, and " +
		"in which direction of the regressors one new row would narrow the interval most.",
	Assumes: "New rows follow the same equation with the same residual variance; for the number of rows, also the same pattern of regressors.",
	Buys:    "The only cure that adds information. More rows of the same pattern narrow the interval with the root of their number, whatever the inflation factor.",
	Costs: "Time and money. More rows of the same pattern leave the inflation factor where it is; only rows that break the pattern lower it. Pooling with " +
		"another sample assumes that its slopes are the same, which can be tested.",
	Means:   "Coefficients keep their meaning.",
	Referee: "Could the pattern be broken by design: another place, period, price? Are there other samples that this one can be joined with?",
	Sources: []string{
		"Conlisk (1971), Western Economic Journal 9(4), 393-407",
		"Silvey (1969), Journal of the Royal Statistical Society, Series B 31(3), 539-552",
		"Goldberger (1991), A Course in Econometrics, Harvard University Press",
	},
	Variants: func(*Problem) ([]Variant, []NotApplicable) { return nil, nil },
	Plan:     planMoreData,
})

// Plan is what a remedy that fits nothing works out for one coefficient of interest.
type Plan struct {
	Coefficient string
	HalfWidth   float64 // of the 95 % interval now
	Targets     []Target
	// Direction is where one new row would help most: offsets from the means, in the user's units, the root mean square over the regressors being one
	// standard deviation; empty beside a reason.
	Direction []NamedValue
	Gain      float64 // share by which that row narrows the standard error
	Reason    string
	Text      string
}

// Target is a half width and the rows it takes.
type Target struct {
	What      string
	HalfWidth float64
	Rows      float64 // of the same pattern
	Untangled float64 // if the regressor were not tangled with others
}

func planMoreData(f *Final) []Plan {
	p := f.Problem
	if f.AsIs.NotIdentified != nil || math.IsNaN(f.S) || f.S == 0 {
		return nil
	}
	s := p.Sample
	n := float64(s.N)
	var out []Plan
	for j, focal := range p.Focal {
		if !focal {
			continue
		}
		se := f.S * math.Sqrt(f.AsIs.Inverse[j*s.P+j])
		vif := f.AsIs.Inverse[j*s.P+j] * math.Pow(s.Scale()[j].Float(), 2)
		plan := Plan{Coefficient: p.Names[j], HalfWidth: tail.TQuantile(0.95, f.DF) * se}
		target := func(what string, half float64) {
			rows := n * math.Pow(plan.HalfWidth/half, 2)
			plan.Targets = append(plan.Targets, Target{what, half, math.Ceil(rows), math.Ceil(rows / vif)})
		}
		target("an interval of half the width", plan.HalfWidth/2)
		if b := math.Abs(f.AsIs.Slopes[j]); b > 0 && b < plan.HalfWidth {
			target("an interval that leaves out zero, at the same estimate", b)
		}
		if p.Smallest != nil && p.Smallest[j] > 0 && p.Smallest[j] < plan.HalfWidth {
			target("an interval as narrow as the smallest effect of interest on either side", p.Smallest[j])
		}
		plan.direct(f, j)
		plan.say(n)
		out = append(out, plan)
	}
	return out
}

// direct finds the row of a given length whose addition lowers the variance of coefficient j most. With C the covariance over sigma^2 in standardised
// units and a its column j, a row z about the means lowers C_jj by (a'z)^2 / (1 + 1/n + z'Cz), which is largest, for z'z = p, along
// ((1+1/n)/p I + C)^-1 a.
func (plan *Plan) direct(f *Final, j int) {
	p := f.Problem
	s := p.Sample
	for k := range p.Names {
		if degree(p.Monomials[k]) >= 2 {
			plan.Reason = p.Names[k] + " is a power or product and cannot be set by itself"
			return
		}
		if p.Category[k] != "" {
			plan.Reason = p.Names[k] + " is a dummy and cannot be moved a little"
			return
		}
	}
	size := float64(s.P)
	ridge := (1 + 1/float64(s.N)) / size
	c := make([]float64, s.P*s.P)
	m := make([]float64, s.P*s.P)
	a := make([]float64, s.P)
	for i := range s.P {
		for k := range s.P {
			c[i*s.P+k] = f.AsIs.Inverse[i*s.P+k] * s.SD(i) * s.SD(k)
			m[i*s.P+k] = c[i*s.P+k]
		}
		m[i*s.P+i] += ridge
		a[i] = c[i*s.P+j]
	}
	z, ok := linear.SolvePositive(m, s.P, a)
	if !ok {
		plan.Reason = "the regressors are too close to an exact dependency"
		return
	}
	length, along, spread := 0.0, 0.0, 0.0
	for _, v := range z {
		length += v * v
	}
	for i := range z {
		z[i] *= math.Sqrt(size / length)
	}
	for i := range z {
		along += a[i] * z[i]
		for k := range z {
			spread += z[i] * c[i*s.P+k] * z[k]
		}
	}
	after := c[j*s.P+j] - along*along/(1+1/float64(s.N)+spread)
	plan.Gain = 1 - math.Sqrt(after/c[j*s.P+j])
	for i, v := range z {
		plan.Direction = append(plan.Direction, NamedValue{p.Names[i], v * s.SD(i)})
	}
}

func (plan *Plan) say(n float64) {
	var parts []string
	for _, t := range plan.Targets {
		parts = append(parts, fmt.Sprintf("%s takes about %s rows of this pattern, %s if %s were not tangled", t.What, say(t.Rows), say(t.Untangled), plan.Coefficient))
	}
	plan.Text = fmt.Sprintf("With %s rows the interval of %s is the estimate plus and minus %s; ", say(n), plan.Coefficient, say(plan.HalfWidth)) + strings.Join(parts, "; ") + "."
	if plan.Reason != "" || len(plan.Direction) == 0 {
		return
	}
	var moves []string
	for _, d := range plan.Direction {
		moves = append(moves, fmt.Sprintf("%s %s", d.Name, signed(d.Value)))
	}
	if len(moves) > 6 {
		moves = append(moves[:6], "and so on")
	}
	plan.Text += fmt.Sprintf(" One new row helps most at the means with %s (or the opposite): it would narrow the standard error by %s %%.", strings.Join(moves, ", "), say(100*plan.Gain))
}

func signed(v float64) string {
	if v < 0 {
		return say(v)
	}
	return "+" + say(v)
}
