package remedy

import (
	"fmt"
	"slices"
)

// center states powers and products about the means of their variables.
var _ = register(Remedy{
	Key:   "center",
	Title: "Centre powers and products",
	Order: 30,
	Does: "Takes the mean (of the training rows) from every variable that enters a power or product, before it is multiplied. It is the same " +
		"model written about another origin.",
	Assumes: "Every lower-order part of a power or product is in the equation; otherwise centring would be another model.",
	Buys:    "Lower-order coefficients that speak of the middle of the data, and inflation factors without the part that powers and products make.",
	Costs:   "Nothing, and it cures nothing: fit, predictions, the top-order coefficient and its standard error are the same to the last digit.",
	Means:   "A lower-order coefficient becomes the effect at the mean of the variables it is multiplied with: a different quantity from the one written down.",
	Referee: "If nothing changes but the meaning of the lower-order coefficients, which of the two quantities is the paper about?",
	Sources: []string{
		"Marquardt (1980), Journal of the American Statistical Association 75(369), 87-91",
		"Belsley (1984), The American Statistician 38(2), 73-77 (an objection)",
		"Shieh (2011), British Journal of Mathematical and Statistical Psychology 64(3), 462-477",
	},
	Variants: centerVariants,
})

func centerVariants(p *Problem) ([]Variant, []NotApplicable) {
	top := p.products()
	if len(top) == 0 {
		return nil, []NotApplicable{{"center", "no powers or products"}}
	}
	if !p.Constant {
		return nil, []NotApplicable{{"center", "the model has no constant to take up the shift"}}
	}
	if missing := p.missingLower(top); len(missing) > 0 {
		return nil, []NotApplicable{{"center", "centring would change the model: add " + join(missing)}}
	}
	var atoms []string
	for _, k := range top {
		for _, f := range p.Monomials[k] {
			if !slices.Contains(atoms, f.Atom) {
				atoms = append(atoms, f.Atom)
			}
		}
	}
	return []Variant{{
		Key: "center", Label: "Centre", OwnVariance: true,
		Summary:  "The same model with " + join(atoms) + " counted from the mean.",
		Learn:    learnAsIs,
		Describe: func(f *Final) Description { return describeCenter(f, atoms) },
	}}, nil
}

// products lists the columns of degree two or more.
func (p *Problem) products() []int {
	var out []int
	for k := range p.Names {
		if degree(p.Monomials[k]) >= 2 {
			out = append(out, k)
		}
	}
	return out
}

// missingLower lists lower-order parts of the columns that are not in the equation.
func (p *Problem) missingLower(cols []int) []string {
	var missing []string
	for _, k := range cols {
		for _, part := range parts(p.Monomials[k]) {
			if degree(part) > 0 && p.column(part) < 0 {
				if name := monomialName(part); !slices.Contains(missing, name) {
					missing = append(missing, name)
				}
			}
		}
	}
	return missing
}

// parts lists every monomial that divides m, the empty one and m itself included.
func parts(m []Factor) [][]Factor {
	out := [][]Factor{nil}
	for _, f := range m {
		var next [][]Factor
		for k := 0; k <= f.Power; k++ {
			for _, base := range out {
				part := slices.Clone(base)
				if k > 0 {
					part = append(part, Factor{f.Atom, k})
				}
				next = append(next, part)
			}
		}
		out = next
	}
	return out
}

// column finds the column with the factors of m in any order, or -1.
func (p *Problem) column(m []Factor) int {
	for k, other := range p.Monomials {
		if len(other) != len(m) || len(m) == 0 {
			continue
		}
		same := true
		for _, f := range m {
			same = same && slices.Contains(other, f)
		}
		if same {
			return k
		}
	}
	return -1
}

func monomialName(m []Factor) string {
	name := ""
	for i, f := range m {
		if i > 0 {
			name += "*"
		}
		name += f.Atom
		if f.Power > 1 {
			name += fmt.Sprintf("^%d", f.Power)
		}
	}
	return name
}

func describeCenter(f *Final, atoms []string) Description {
	p := f.Problem
	d := Description{Report: p.centerMap(), Status: make([]Status, len(p.Names))}
	for j := range p.Names {
		d.Status[j] = Estimated
		if len(p.dependents(j)) > 0 {
			d.Status[j] = Different
			d.Meaning = append(d.Meaning, Meaning{p.Names[j], "the effect at the mean of " + join(atoms) + ", not at their zero"})
		} else if degree(p.Monomials[j]) >= 2 {
			d.Meaning = append(d.Meaning, Meaning{p.Names[j], "unchanged by centring"})
		} else {
			d.Meaning = append(d.Meaning, Meaning{p.Names[j], "unchanged: the variable enters no power or product"})
		}
	}
	if f.AsIs.NotIdentified != nil {
		for j, bad := range f.AsIs.NotIdentified {
			if bad {
				d.Status[j] = NotIdentified
			}
		}
	}
	d.Costs = append(d.Costs, "fit, predictions, top-order coefficients and their standard errors are those of the model left alone; only the lower-order coefficients now answer another question")
	return d
}

// centerMap takes (constant, slopes) as written to (constant, slopes) about the means: with x = (x - m) + m, a column
// prod x^k contributes prod C(k,i) m^(k-i) to the part prod (x-m)^i.
func (p *Problem) centerMap() []float64 {
	q := p.q()
	out := make([]float64, q*q)
	out[0] = 1
	entering := map[string]bool{}
	for _, k := range p.products() {
		for _, f := range p.Monomials[k] {
			entering[f.Atom] = true
		}
	}
	mean := func(atom string) float64 {
		if !entering[atom] {
			return 0
		}
		return p.Sample.Mean[p.column([]Factor{{atom, 1}})].Float()
	}
	for k := range p.Names {
		if len(p.Monomials[k]) == 0 {
			out[(k+1)*q+k+1] = 1
			continue
		}
		for _, part := range parts(p.Monomials[k]) {
			coef := 1.0
			for _, f := range p.Monomials[k] {
				i := 0
				for _, g := range part {
					if g.Atom == f.Atom {
						i = g.Power
					}
				}
				coef *= binomial(f.Power, i)
				for range f.Power - i {
					coef *= mean(f.Atom)
				}
			}
			if coef == 0 {
				continue
			}
			row := 0
			if degree(part) > 0 {
				row = p.column(part) + 1
			}
			out[row*q+k+1] += coef
		}
	}
	return out
}

func binomial(n, k int) float64 {
	out := 1.0
	for i := range k {
		out = out * float64(n-i) / float64(i+1)
	}
	return out
}
