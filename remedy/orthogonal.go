package remedy

import "fmt"

// orthogonal states the powers of a variable as orthogonal polynomials.
var _ = register(Remedy{
	Key:   "orthogonal",
	Title: "Orthogonal polynomials",
	Order: 32,
	Does: "Writes the powers of a variable as polynomials that have no correlation with each other over the rows: each power less what the lower ones and the " +
		"constant say of it. It is the same model in other coordinates; the way back to plain powers is exact.",
	Assumes: "Every lower power of a variable is in the equation; otherwise this would be another model.",
	Buys:    "Powers of one variable that are not tangled with each other, and coefficients that say what each power adds to the lower ones.",
	Costs:   "Nothing, and it cures nothing: fit, predictions and the top power's coefficient, standard error and t-ratio are those of plain powers. The polynomials belong to these rows.",
	Means:   "A lower power's coefficient becomes what that power explains when the higher ones are left out of its part of the curve: a different quantity from the one written down.",
	Referee: "What question do the lower-order coefficients answer now? Were the polynomials stored, so that others can predict with them?",
	Sources: []string{
		"Forsythe (1957), Journal of the Society for Industrial and Applied Mathematics 5(2), 74-88",
		"Bradley and Srivastava (1979), The American Statistician 33(1), 11-14",
	},
	Variants: orthogonalVariants,
})

func orthogonalVariants(p *Problem) ([]Variant, []NotApplicable) {
	chains, missing := p.powerChains()
	switch {
	case len(chains) == 0 && len(missing) > 0:
		return nil, []NotApplicable{{"orthogonal", "it would change the model: add " + join(missing)}}
	case len(chains) == 0:
		return nil, []NotApplicable{{"orthogonal", "no powers of one variable"}}
	case !p.Constant:
		return nil, []NotApplicable{{"orthogonal", "the model has no constant to be orthogonal to"}}
	}
	var atoms []string
	for _, chain := range chains {
		atoms = append(atoms, p.Names[chain[0]])
	}
	return []Variant{{
		Key: "orthogonal", Label: "Orthogonal powers", OwnVariance: true,
		Summary:  "The same model with the powers of " + join(atoms) + " as polynomials that are not correlated with each other.",
		Learn:    learnAsIs,
		Describe: func(f *Final) Description { return describeOrthogonal(f, chains) },
	}}, nil
}

// powerChains lists, for each variable with powers of its own, the columns of its powers from one upwards; missing are lower powers not in the equation,
// whose variables are left out.
func (p *Problem) powerChains() (chains [][]int, missing []string) {
	top := map[string]int{}
	var order []string
	for _, m := range p.Monomials {
		if len(m) == 1 && m[0].Power >= 2 {
			if top[m[0].Atom] == 0 {
				order = append(order, m[0].Atom)
			}
			top[m[0].Atom] = max(top[m[0].Atom], m[0].Power)
		}
	}
	for _, atom := range order {
		var chain []int
		for power := 1; power <= top[atom]; power++ {
			part := []Factor{{atom, power}}
			if c := p.column(part); c >= 0 {
				chain = append(chain, c)
			} else {
				missing = append(missing, monomialName(part))
			}
		}
		if len(chain) == top[atom] {
			chains = append(chains, chain)
		}
	}
	return chains, missing
}

func describeOrthogonal(f *Final, chains [][]int) Description {
	p := f.Problem
	q, k := p.q(), p.offset()
	d := Description{Report: make([]float64, q*q), Status: make([]Status, len(p.Names))}
	for i := range q {
		d.Report[i*q+i] = 1
	}
	for j := range d.Status {
		d.Status[j] = Estimated
		if f.AsIs.NotIdentified != nil && f.AsIs.NotIdentified[j] {
			d.Status[j] = NotIdentified
		}
	}
	for _, chain := range chains {
		// Power m is its polynomial plus g times the lower powers and a constant. What a power says of the lower ones goes over to them, from the
		// top down: b_l + sum over m > l of g_ml b_m, with g from least squares on all lower powers at once.
		for m := 1; m < len(chain); m++ {
			coef, constant, _ := p.Sample.Auxiliary(chain[m], chain[:m])
			for l, g := range coef {
				d.Report[(k+chain[l])*q+k+chain[m]] = g
			}
			d.Report[k+chain[m]] = constant
		}
		polynomials(d.Report, q, k, chain)
		for l, c := range chain {
			if d.Status[c] == NotIdentified {
				continue
			}
			if l < len(chain)-1 {
				d.Status[c] = Different
				d.Meaning = append(d.Meaning, Meaning{p.Names[c], fmt.Sprintf("what power %d of %s adds to the lower ones, the higher ones taken out", l+1, p.Names[chain[0]])})
			} else {
				d.Meaning = append(d.Meaning, Meaning{p.Names[c], "unchanged: the top power"})
			}
		}
	}
	d.Meaning = append(d.Meaning, Meaning{"", "unchanged: it enters no power by itself"})
	d.Costs = append(d.Costs, "fit, predictions and top-power coefficients with their standard errors are those of the model left alone; only the lower powers now answer another question")
	return d
}

// polynomials turns the regressions of each power on all lower powers, g, into the way from plain powers to orthogonal ones. With x^m = P_m + sum over l
// of h_ml P_l (P_l the orthogonal polynomials, P_0 = 1), the coefficient on P_l is b_l + sum over m > l of h_ml b_m. As P_m = x^m - sum g_ml x^l,
//
//	x^m = P_m + sum over l of g_ml x^l,  so that  h_ml = sum over j from l to m-1 of g_mj h_jl,  h_ll = 1.
func polynomials(report []float64, q, k int, chain []int) {
	n := len(chain)
	row := func(l int) int { // power l; 0 is the constant
		if l == 0 {
			return 0
		}
		return k + chain[l-1]
	}
	h := make([][]float64, n+1)
	for m := range h {
		h[m] = make([]float64, n+1)
		h[m][m] = 1
		for l := 0; l < m; l++ {
			for j := l; j < m; j++ {
				g := report[row(j)*q+row(m)]
				if m == 1 && j == 0 { // the first power's own mean
					g = 0
				}
				h[m][l] += g * h[j][l]
			}
		}
	}
	for m := 1; m <= n; m++ {
		for l := range m {
			report[row(l)*q+row(m)] = h[m][l]
		}
	}
}
