package design

import (
	"fmt"
	"math"
	"strconv"

	"modelmend/fit/dataset"
	"modelmend/fit/doubledouble"
	"modelmend/fit/equation"
	"modelmend/fit/reduction"
)

// eval computes an expression for every row that is still used; rows where it has no value are set aside with the
// reason.
func (b *builder) eval(e *equation.Expr) (reduction.Column, error) {
	b.step++
	n := b.table.Rows
	switch e.Kind {
	case equation.Name:
		c, _ := b.table.Column(e.Text)
		v := reduction.Column{Hi: c.Hi, Lo: c.Lo}
		b.remember(e, v)
		return v, nil
	case equation.Number:
		v := reduction.Column{Hi: make([]float64, n)}
		for i := range n {
			v.Set(i, e.Value)
		}
		return v, nil
	}
	args := make([]reduction.Column, len(e.Args))
	for k, a := range e.Args {
		var err error
		if args[k], err = b.eval(a); err != nil {
			return reduction.Column{}, err
		}
	}
	op, err := b.operation(e)
	if err != nil {
		return reduction.Column{}, err
	}
	out := reduction.Column{Hi: make([]float64, n)}
	in := make([]doubledouble.Number, len(args))
	for i := range n {
		if b.reason[i] != 0 {
			out.Hi[i] = math.NaN()
			continue
		}
		for k := range args {
			in[k] = args[k].At(i)
		}
		v, bad := op(in)
		if bad == "" && isBad(v) {
			bad = "value out of range in " + e.String()
		}
		if bad != "" {
			b.setAside(i, bad, firstColumn(e))
			out.Hi[i] = math.NaN()
			continue
		}
		out.Set(i, v)
	}
	b.remember(e, out)
	return out, nil
}

// remember keeps the values of atoms, so that powers and products can be formed again about the means.
func (b *builder) remember(e *equation.Expr, v reduction.Column) {
	if e.Kind != equation.Product && e.Kind != equation.Power {
		b.atoms[e.String()] = v
	} else if hasNumber(e) {
		b.atoms[e.String()] = v
	}
}

func firstColumn(e *equation.Expr) string {
	if cols := e.Columns(); len(cols) > 0 {
		return cols[0]
	}
	return ""
}

// operation returns the arithmetic of a node: the value, or why there is none.
func (b *builder) operation(e *equation.Expr) (func(in []doubledouble.Number) (doubledouble.Number, string), error) {
	switch e.Kind {
	case equation.Product:
		return func(in []doubledouble.Number) (doubledouble.Number, string) {
			v := in[0]
			for _, x := range in[1:] {
				v = v.Mul(x)
			}
			return v, ""
		}, nil
	case equation.Ratio:
		text := "division by zero in " + e.String()
		return func(in []doubledouble.Number) (doubledouble.Number, string) {
			if in[1].Hi == 0 {
				return in[0], text
			}
			return in[0].Div(in[1]), ""
		}, nil
	case equation.Sum:
		return func(in []doubledouble.Number) (doubledouble.Number, string) {
			v := in[0]
			for _, x := range in[1:] {
				v = v.Add(x)
			}
			return v, ""
		}, nil
	case equation.Difference:
		return func(in []doubledouble.Number) (doubledouble.Number, string) { return in[0].Sub(in[1]), "" }, nil
	case equation.Negative:
		return func(in []doubledouble.Number) (doubledouble.Number, string) { return in[0].Neg(), "" }, nil
	case equation.Power:
		return func(in []doubledouble.Number) (doubledouble.Number, string) { return in[0].Power(e.Power), "" }, nil
	case equation.Call:
		return b.function(e)
	}
	return nil, b.refuse(e, "an expression that cannot be computed", "columns, numbers and functions", "write it with columns, numbers and the functions ln, log10, sqrt, exp, abs")
}

func (b *builder) function(e *equation.Expr) (func(in []doubledouble.Number) (doubledouble.Number, string), error) {
	positive := e.Text + " of a value that is not positive"
	switch e.Text {
	case "ln", "log10":
		f := math.Log
		if e.Text == "log10" {
			f = math.Log10
		}
		return func(in []doubledouble.Number) (doubledouble.Number, string) {
			if in[0].Hi <= 0 {
				return in[0], positive
			}
			return doubledouble.From(f(in[0].Float())), ""
		}, nil
	case "sqrt":
		return func(in []doubledouble.Number) (doubledouble.Number, string) {
			if in[0].Hi < 0 {
				return in[0], "sqrt of a negative value"
			}
			return in[0].Sqrt(), ""
		}, nil
	case "exp":
		return func(in []doubledouble.Number) (doubledouble.Number, string) {
			return doubledouble.From(math.Exp(in[0].Float())), ""
		}, nil
	case "abs":
		return func(in []doubledouble.Number) (doubledouble.Number, string) { return in[0].Abs(), "" }, nil
	}
	return nil, b.refuse(e, fmt.Sprintf("function %q", e.Text), "a function of one number", "use ln, log10, sqrt, exp or abs")
}

// sample applies the rows condition: rows outside it, and rows for which it cannot be decided, are set aside.
func (b *builder) sample(cond *equation.Condition) error {
	if cond == nil {
		return nil
	}
	decide, err := cond.Compile(func(name string) (equation.Accessor, bool) {
		c, ok := b.table.Column(name)
		if !ok {
			return equation.Accessor{}, false
		}
		switch c.Kind {
		case dataset.Number:
			return equation.Accessor{Values: equation.Numbers, Hi: c.Hi, Lo: c.Lo}, true
		case dataset.Text:
			return equation.Accessor{Values: equation.Texts, Codes: c.Codes, Levels: c.Levels}, true
		}
		return equation.Accessor{}, true
	})
	if err != nil {
		return err
	}
	for i := range b.table.Rows {
		switch decide(i) {
		case equation.False:
			b.setAside(i, "outside the sample", "")
		case equation.Unknown:
			b.setAside(i, "sample condition undecided by a missing value", "")
		}
	}
	return nil
}

func levelOf(v float64) string { return strconv.FormatFloat(v, 'f', -1, 64) }

// Centered returns the regressors with every variable of a power or product centred at its mean over the used rows before it
// is multiplied.
func (d *Design) Centered() []reduction.Column {
	means := map[string]doubledouble.Number{}
	out := make([]reduction.Column, len(d.Regressors))
	for j, r := range d.Regressors {
		out[j] = r.Values
		if r.degree() < 2 {
			continue
		}
		for _, f := range r.Factors {
			if _, known := means[f.Atom]; !known {
				means[f.Atom] = meanOf(d.atoms[f.Atom])
			}
		}
		out[j] = about(r.Factors, d.atoms, means, make([]int, d.Rows))
	}
	return out
}

// about forms a product of atoms about their means in the rows that are used, those with reason 0; the others hold 1.
func about(factors []Factor, atoms map[string]reduction.Column, means map[string]doubledouble.Number, reason []int) reduction.Column {
	v := reduction.Column{Hi: make([]float64, len(reason))}
	for i := range v.Hi {
		v.Hi[i] = 1
	}
	for _, f := range factors {
		a, mean := atoms[f.Atom], means[f.Atom]
		for i, r := range reason {
			if r == 0 {
				v.Set(i, v.At(i).Mul(a.At(i).Sub(mean).Power(f.Power)))
			}
		}
	}
	return v
}

func meanOf(v reduction.Column) doubledouble.Number {
	var sum doubledouble.Number
	for i := range v.Hi {
		sum = sum.Add(v.At(i))
	}
	return sum.Div(doubledouble.From(float64(len(v.Hi))))
}

// Effect returns the derivative of every regressor with respect to the raw column variable, all raw columns at their
// means over the used rows: the weights that turn slopes into the effect of the variable at the means. ok is false
// when the variable enters fewer than two regressors, or is a category.
func (d *Design) Effect(variable string) (weights []float64, ok bool) {
	weights = make([]float64, len(d.Regressors))
	entering := 0
	for j, r := range d.Regressors {
		if r.expr == nil {
			continue
		}
		_, slope := d.dual(r.expr, variable)
		for _, v := range r.Variables {
			if v == variable {
				entering++
			}
		}
		weights[j] = slope
		if math.IsNaN(slope) || math.IsInf(slope, 0) {
			return nil, false
		}
	}
	return weights, entering >= 2
}

// dual computes an expression and its derivative at the means.
func (d *Design) dual(e *equation.Expr, variable string) (v, dv float64) {
	switch e.Kind {
	case equation.Name:
		if e.Text == variable {
			dv = 1
		}
		return d.means[e.Text], dv
	case equation.Number:
		return e.Value.Float(), 0
	}
	a, da := d.dual(e.Args[0], variable)
	var b, db float64
	if len(e.Args) > 1 {
		b, db = d.dual(e.Args[1], variable)
	}
	switch e.Kind {
	case equation.Product:
		return a * b, da*b + a*db
	case equation.Ratio:
		return a / b, (da*b - a*db) / (b * b)
	case equation.Sum:
		return a + b, da + db
	case equation.Difference:
		return a - b, da - db
	case equation.Negative:
		return -a, -da
	case equation.Power:
		k := float64(e.Power)
		return math.Pow(a, k), k * math.Pow(a, k-1) * da
	}
	switch e.Text {
	case "ln":
		return math.Log(a), da / a
	case "log10":
		return math.Log10(a), da / (a * math.Ln10)
	case "sqrt":
		r := math.Sqrt(a)
		return r, da / (2 * r)
	case "exp":
		return math.Exp(a), math.Exp(a) * da
	case "abs":
		if a < 0 {
			return -a, -da
		}
		return a, da
	}
	return math.NaN(), math.NaN()
}

// HasProducts reports whether some regressor is a power or product.
func (d *Design) HasProducts() bool {
	for _, r := range d.Regressors {
		if r.degree() > 1 {
			return true
		}
	}
	return false
}

// Columns returns the values of the regressors.
func (d *Design) Columns() []reduction.Column {
	out := make([]reduction.Column, len(d.Regressors))
	for j, r := range d.Regressors {
		out[j] = r.Values
	}
	return out
}

// Each gives the used rows block by block: the regressors and the file line of each row.
func (d *Design) Each(yield func(cols []reduction.Column, lines []int) error) error {
	if d.source != nil {
		return d.Pass(yield)
	}
	return yield(d.Columns(), d.Lines)
}

// Names returns the names of the regressors.
func (d *Design) Names() []string {
	out := make([]string, len(d.Regressors))
	for j, r := range d.Regressors {
		out[j] = r.Name
	}
	return out
}
