package design

import (
	"errors"
	"fmt"
	"slices"

	"modelmend/fit/dataset"
	"modelmend/fit/doubledouble"
	"modelmend/fit/equation"
	"modelmend/fit/reduction"
)

// source is what a design needs to form its rows again: its table is not held in memory.
type source struct {
	table *dataset.Table
	eq    *equation.Equation
	rows  *equation.Condition
	opt   Options
	terms []sourceTerm
	keep  []int                          // places of the regressors among all columns formed; nil before Settle
	shift map[string]doubledouble.Number // means of atoms, for centred columns
	means map[string]bool                // atoms and raw columns whose means are wanted: those of terms that are more than a column
}

// sourceTerm is a term with the levels of its category, all of them, in order.
type sourceTerm struct {
	expr     *equation.Expr
	category string // raw column name, "" for a number
	levels   []string
	base     string
	hasBase  bool
}

// Streamed reports whether the rows are read from the file at each pass.
func (d *Design) Streamed() bool { return d.source != nil }

// buildStream forms the design of a table that is not held: regressors for every level of every category, the base among them, until Settle has
// seen how many rows each one has.
func buildStream(t *dataset.Table, eq *equation.Equation, opt Options) (*Design, error) {
	b := &builder{table: t, eq: eq}
	if err := b.checkColumns(); err != nil {
		return nil, err
	}
	d := &Design{Dependent: eq.Dependent.String(), Constant: !opt.NoConstant, means: map[string]float64{}, YDecimals: b.decimals(eq.Dependent),
		source: &source{table: t, eq: eq, rows: opt.Rows, opt: opt, means: map[string]bool{}}}
	for k, e := range eq.Terms {
		if e.Kind != equation.Name {
			for _, f := range factorsOf(e) {
				d.source.means[f.Atom] = true
			}
			for _, name := range e.Columns() {
				d.source.means[name] = true
			}
		}
		st := sourceTerm{expr: e}
		if col, base, has := b.category(e); col != nil {
			if col.Kind != dataset.Text {
				return nil, ErrWhole // numbers as categories need all values at hand
			}
			if len(col.Levels) > 500 {
				return nil, b.refuse(e, fmt.Sprintf("column %q with %d distinct values", col.Name, len(col.Levels)), "a category of at most 500 levels", "merge levels first, or leave it out")
			}
			st.category, st.levels, st.base, st.hasBase = col.Name, col.Levels, base, has
			for _, l := range col.Levels {
				d.Regressors = append(d.Regressors, Regressor{Name: col.Name + "=" + l, Kind: Dummy, Term: k, Variables: []string{col.Name}, Category: col.Name, Level: l})
			}
		} else {
			d.Regressors = append(d.Regressors, Regressor{Name: e.String(), Kind: kindOf(e), Term: k, Variables: e.Columns(), Decimals: b.decimals(e), expr: e, Factors: factorsOf(e)})
		}
		d.source.terms = append(d.source.terms, st)
	}
	return d, nil
}

// ErrWhole says that the design needs its table in memory.
var ErrWhole = errors.New("the design needs the whole table")

// Pass reads the table once: the used rows block by block, the regressors and then the dependent variable. The first whole pass settles Rows, Read,
// SetAside and the means. Only for a streamed design.
func (d *Design) Pass(yield func(cols []reduction.Column, lines []int) error) error {
	return d.pass(nil, yield)
}

// pass forms rows; shift centres the atoms of powers and products.
func (d *Design) pass(shift map[string]doubledouble.Number, yield func(cols []reduction.Column, lines []int) error) error {
	s := d.source
	var aside []SetAside
	used, read := 0, 0
	sums := map[string]doubledouble.Number{}
	err := s.table.Each(func(piece *dataset.Table) error {
		b := &builder{table: piece, eq: s.eq, reason: make([]int, piece.Rows)}
		if err := b.sample(s.rows); err != nil {
			return err
		}
		if err := b.evaluateStream(s.terms); err != nil {
			return err
		}
		var index, lines []int
		for i, r := range b.reason {
			if r == 0 {
				index = append(index, i)
				lines = append(lines, piece.Lines[i])
			}
		}
		read += piece.Rows
		used += len(index)
		aside = mergeAside(aside, b.reasons)
		if len(index) == 0 {
			return nil
		}
		b.addSums(sums, s.means, index)
		return yield(d.columns(b, index, shift), lines)
	})
	if err != nil {
		return err
	}
	if d.Rows == 0 {
		d.Read, d.Rows = read, used
		slices.SortStableFunc(aside, func(a, b SetAside) int { return a.order - b.order })
		d.SetAside = aside
		if used == 0 {
			return &RefusedError{s.table.Name, fmt.Sprintf("none of the %d rows can be used: %s", read, describeSetAside(aside)), "look at the columns named, or change the sample"}
		}
		s.shift = map[string]doubledouble.Number{}
		n := doubledouble.From(float64(used))
		for name, v := range sums {
			s.shift[name] = v.Div(n)
			d.means[name] = v.Float() / float64(used)
		}
	}
	return nil
}

// evaluateStream computes the dependent variable and the number terms of a piece.
func (b *builder) evaluateStream(terms []sourceTerm) (err error) {
	b.atoms = map[string]reduction.Column{}
	b.missing()
	if b.y, err = b.eval(b.eq.Dependent); err != nil {
		return err
	}
	for _, st := range terms {
		t := termVectors{expr: st.expr}
		if st.category != "" {
			t.category, _ = b.table.Column(st.category)
		} else if t.values, err = b.eval(st.expr); err != nil {
			return err
		}
		b.terms = append(b.terms, t)
	}
	return nil
}

// addSums adds up the atoms and raw columns that are wanted over the rows used.
func (b *builder) addSums(sums map[string]doubledouble.Number, wanted map[string]bool, index []int) {
	for name, v := range b.atoms {
		if !wanted[name] {
			continue
		}
		sum := sums[name]
		for _, i := range index {
			sum = sum.Add(v.At(i))
		}
		sums[name] = sum
	}
	for _, e := range b.eq.Terms {
		for _, name := range e.Columns() {
			c, _ := b.table.Column(name)
			if _, atom := b.atoms[name]; atom || !wanted[name] || c.Kind != dataset.Number {
				continue
			}
			sum := sums[name]
			for _, i := range index {
				sum = sum.Add(c.Value(i))
			}
			sums[name] = sum
		}
	}
}

func mergeAside(all, more []SetAside) []SetAside {
	for _, m := range more {
		found := false
		for i := range all {
			if all[i].Reason == m.Reason && all[i].Column == m.Column {
				all[i].Count += m.Count
				found = true
			}
		}
		if !found {
			all = append(all, m)
		}
	}
	return all
}

// columns forms the regressors of the rows in index, the dependent variable last.
func (d *Design) columns(b *builder, index []int, shift map[string]doubledouble.Number) []reduction.Column {
	var all []reduction.Column
	for k, t := range b.terms {
		st := d.source.terms[k]
		if t.category != nil {
			first := len(all)
			for range st.levels {
				all = append(all, reduction.Column{Hi: make([]float64, len(index))})
			}
			for i, row := range index {
				all[first+int(t.category.Codes[row])].Hi[i] = 1
			}
			continue
		}
		values := t.values
		if factors := factorsOf(st.expr); shift != nil && degreeOf(factors) > 1 {
			values = about(factors, b.atoms, shift, b.reason)
		}
		all = append(all, b.cut(values, index))
	}
	if d.source.keep != nil {
		kept := make([]reduction.Column, 0, len(d.source.keep)+1)
		for _, j := range d.source.keep {
			kept = append(kept, all[j])
		}
		all = kept
	}
	return append(all, b.cut(b.y, index))
}

func degreeOf(factors []Factor) int {
	n := 0
	for _, f := range factors {
		n += f.Power
	}
	return n
}

// Settle finishes a streamed design after its first pass, given how many rows every provisional regressor is not zero in: bases are chosen, levels
// without rows go. It returns the places of the regressors that stay. varies says whether a provisional regressor, or the dependent variable
// last, has any variation.
func (d *Design) Settle(count func(j int) int, varies func(j int) bool) (keep []int, err error) {
	b := &builder{table: d.source.table, eq: d.source.eq}
	var regressors []Regressor
	var terms []termVectors
	j := 0
	for _, st := range d.source.terms {
		if st.category == "" {
			keep = append(keep, j)
			regressors = append(regressors, d.Regressors[j])
			j++
			continue
		}
		var present []int
		for i := range st.levels {
			if count(j+i) > 0 {
				present = append(present, i)
			}
		}
		if len(present) < 2 {
			return nil, b.refuse(st.expr, fmt.Sprintf("column %q with %d distinct value among the rows used", st.category, len(present)), "a category of at least two levels", "leave it out of the equation")
		}
		base := present[0]
		if st.hasBase {
			base = slices.IndexFunc(st.levels, func(l string) bool { return l == st.base })
			if base < 0 || count(j+base) == 0 {
				var have []string
				for _, i := range present[:min(6, len(present))] {
					have = append(have, st.levels[i])
				}
				return nil, b.refuse(st.expr, fmt.Sprintf("the base %q", st.base), fmt.Sprintf("a level of %q among the rows used", st.category), "its levels are "+quoteList(have))
			}
		}
		hidden := 0
		for _, i := range present {
			if i == base {
				continue
			}
			r := d.Regressors[j+i]
			if count(j+i) < SmallCell && !d.source.opt.ShowSmallCells {
				hidden++
				r.Level = fmt.Sprintf("(small level %d)", hidden)
				r.Name = r.Category + "=" + r.Level
			}
			keep = append(keep, j+i)
			regressors = append(regressors, r)
		}
		if hidden > 0 {
			d.Notes = append(d.Notes, smallCells(hidden, st.category))
		}
		c, _ := d.source.table.Column(st.category)
		terms = append(terms, termVectors{category: c, base: st.levels[base], baseRows: count(j + base)})
		j += len(st.levels)
	}
	for k, place := range keep {
		if d.Constant && !varies(place) {
			return nil, sameInAll(b.table.Name, regressors[k].Name, d.Rows)
		}
	}
	if !varies(len(d.Regressors)) {
		return nil, nothingToExplain(b.table.Name, d.Dependent, d.Rows)
	}
	for k := range regressors {
		if r := &regressors[k]; r.expr != nil {
			r.Decimals = b.decimals(r.expr) // known for certain after a pass
		}
	}
	d.YDecimals = b.decimals(d.source.eq.Dependent)
	d.Regressors = regressors
	d.source.keep = keep
	d.Terms = groupTerms(d)
	if err := b.checkNames(d); err != nil {
		return nil, err
	}
	b.terms = terms
	b.notes(d)
	return keep, nil
}

// PassCentered is Pass with every variable of a power or product centred at its mean before it is multiplied; only after a first Pass.
func (d *Design) PassCentered(yield func(cols []reduction.Column, lines []int) error) error {
	return d.pass(d.source.shift, yield)
}
