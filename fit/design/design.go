// Package design turns a table and an equation into columns of numbers, and knows the way back to the user's terms.
//
// A dataset.Table and an equation.Equation go in; a Design comes out: the dependent variable, the regressors with
// their names, kinds, terms and factors, the rows used, and how many rows were set aside for which reason. It refuses
// unknown columns, text where a number is needed, regressors without variation and samples that are empty. Powers,
// products, ratios and sums are formed in double-double, so that no digit of the data is lost; functions are computed
// in float64. Before it stand dataset and folds, after it reduction.
package design

import (
	"fmt"
	"math"
	"slices"
	"sort"

	"modelmend/fit/dataset"
	"modelmend/fit/doubledouble"
	"modelmend/fit/equation"
	"modelmend/fit/reduction"
)

// Kind says how a regressor is made.
type Kind string

// The kinds of regressor.
const (
	Number   Kind = "number"
	Function Kind = "function" // a function, a sum in parentheses or a multiple of a column
	Power    Kind = "power"
	Product  Kind = "product"
	Ratio    Kind = "ratio"
	Dummy    Kind = "dummy"
)

// Factor is an atom (a column or a function of columns) with its whole power.
type Factor struct {
	Atom  string
	Power int
}

// Regressor is one column of the design.
type Regressor struct {
	Name      string
	Kind      Kind
	Term      int      // place in Design.Terms
	Variables []string // raw columns that it is made of
	Factors   []Factor // numbers, functions, powers and products as factors of atoms; nil for dummies
	Category  string   // canonical name of the category, for a dummy
	Level     string
	Values    reduction.Column
	Decimals  int // decimals in the data; -1 for a computed column
	expr      *equation.Expr
}

// Term is a group of columns judged together: connected by a shared variable, or the dummies of one category.
type Term struct {
	Name     string
	Columns  []int
	Category bool
}

// SetAside counts rows left out for one reason.
type SetAside struct {
	Reason string
	Column string
	Count  int
	order  int // in which reasons are found: the sample, missing values by column, then expressions
}

// Note is a remark on the data or the equation.
type Note struct{ Code, Text string }

// Design is the model as numbers. All columns have Rows values, in file order.
type Design struct {
	Dependent  string
	Y          reduction.Column
	YDecimals  int
	Regressors []Regressor
	Terms      []Term
	Constant   bool
	Rows       int
	Read       int
	Index      []int // table row of each used row
	Lines      []int // file line of each used row
	SetAside   []SetAside
	Notes      []Note
	atoms      map[string]reduction.Column
	means      map[string]float64 // of the raw number columns over the used rows
	source     *source            // nil where the rows are held
}

// Options are what a study adds to the equation.
type Options struct {
	NoConstant     bool
	Rows           *equation.Condition // the sample; nil: all rows
	ShowSmallCells bool                // name category levels with fewer than SmallCell rows
}

// SmallCell is the number of rows under which a category level is not named in any output, unless the user says so.
const SmallCell = 10

// UnknownColumnError names a column that the table does not have.
type UnknownColumnError struct {
	Table string
	Name  string
	Near  []string
	Text  string // the equation
	Pos   int
}

func (e *UnknownColumnError) Error() string {
	advice := "`modelmend draft` lists the columns"
	if len(e.Near) > 0 {
		advice = "did you mean " + quoteList(e.Near) + "?"
	}
	return (&equation.SyntaxError{Text: e.Text, Pos: e.Pos, Found: fmt.Sprintf("the name %q", e.Name), Expected: "a column of " + e.Table, Advice: advice}).Error()
}

func quoteList(names []string) string {
	out := ""
	for i, n := range names {
		if i > 0 {
			out += " or "
		}
		out += fmt.Sprintf("%q", n)
	}
	return out
}

// RefusedError says why a design cannot be built, and one thing to do.
type RefusedError struct {
	Where, Found, Advice string
}

func (e *RefusedError) Error() string {
	s := e.Found
	if e.Where != "" {
		s = e.Where + ": " + s
	}
	if e.Advice != "" {
		s += "; " + e.Advice
	}
	return s
}

// Build forms the design. Cost O(n p). For a streamed table the rows follow by Pass, and Settle finishes the design.
func Build(t *dataset.Table, eq *equation.Equation, opt Options) (*Design, error) {
	if t.Streamed() {
		return buildStream(t, eq, opt)
	}
	b := &builder{table: t, eq: eq, reason: make([]int, t.Rows)}
	if err := b.checkColumns(); err != nil {
		return nil, err
	}
	if err := b.sample(opt.Rows); err != nil {
		return nil, err
	}
	if err := b.evaluate(); err != nil {
		return nil, err
	}
	return b.finish(!opt.NoConstant, opt.ShowSmallCells)
}

// builder gathers full-length vectors first; rows are cut once all reasons to set one aside are known.
type builder struct {
	table   *dataset.Table
	eq      *equation.Equation
	reason  []int // 0: used; else 1 + place in reasons
	reasons []SetAside
	y       reduction.Column
	terms   []termVectors
	atoms   map[string]reduction.Column
	step    int // of the search for reasons, the same for the same equation
}

type termVectors struct {
	expr     *equation.Expr
	category *dataset.Column // nil for a number
	levels   []string
	base     string
	baseRows int
	values   reduction.Column
}

func (b *builder) checkColumns() error {
	for _, e := range append([]*equation.Expr{b.eq.Dependent}, b.eq.Terms...) {
		if err := b.checkExpr(e, true); err != nil {
			return err
		}
	}
	return nil
}

// checkExpr looks up every column; top says that a text column may stand here alone, as a category.
func (b *builder) checkExpr(e *equation.Expr, top bool) error {
	switch e.Kind {
	case equation.Name:
		c, ok := b.table.Column(e.Text)
		if !ok {
			return &UnknownColumnError{b.table.Name, e.Text, equation.Nearest(e.Text, b.table.Names()), b.eq.Text, e.Pos}
		}
		return b.checkType(c, e, top && e != b.eq.Dependent)
	case equation.Call:
		if e.Text == "categories" {
			if !top || e == b.eq.Dependent {
				return b.refuse(e, "categories(...) inside another expression", "a number", "let it be a term of its own; products of categories are not available in this version")
			}
			if len(e.Args) == 1 && e.Args[0].Kind == equation.Name {
				if _, ok := b.table.Column(e.Args[0].Text); !ok {
					return &UnknownColumnError{b.table.Name, e.Args[0].Text, equation.Nearest(e.Args[0].Text, b.table.Names()), b.eq.Text, e.Args[0].Pos}
				}
				return nil
			}
			return b.refuse(e, "categories(...) of something else than a column", "one column", `write categories(year) or categories(district, "North")`)
		}
	}
	for _, a := range e.Args {
		if err := b.checkExpr(a, false); err != nil {
			return err
		}
	}
	return nil
}

func (b *builder) checkType(c *dataset.Column, e *equation.Expr, category bool) error {
	switch {
	case c.Kind == dataset.Empty:
		return b.refuse(e, fmt.Sprintf("column %q, which holds no value in any row", c.Name), "a column with values", "leave it out of the equation")
	case c.Kind == dataset.Text && mostlyNumbers(c):
		return &RefusedError{fmt.Sprintf("%s:%d: column %q", b.table.Name, c.FirstStrayLine, c.Name),
			fmt.Sprintf("%q is not a number, while %d other cells are", c.FirstStray, c.NumericCells),
			fmt.Sprintf("correct the cell, leave it empty, or write categories(%s) if the numbers are labels", equation.Quote(c.Name))}
	case c.Kind == dataset.Text && !category:
		return b.refuse(e, fmt.Sprintf("column %q, which holds text (%q, for one)", c.Name, c.FirstStray), "numbers",
			"a text column can only be a term of its own; products of categories are not available in this version")
	}
	return nil
}

// mostlyNumbers: at least four cells in five are numbers, so that the text is taken for a slip.
func mostlyNumbers(c *dataset.Column) bool {
	text := 0
	for _, code := range c.Codes {
		if code >= 0 {
			text++
		}
	}
	return c.NumericCells > 0 && float64(c.NumericCells) >= 0.8*float64(text)
}

func (b *builder) refuse(e *equation.Expr, found, expected, advice string) error {
	return &equation.SyntaxError{Text: b.eq.Text, Pos: e.Pos, Found: found, Expected: expected, Advice: advice}
}

// setAside marks a row with its first reason.
func (b *builder) setAside(row int, reason, column string) {
	if b.reason[row] != 0 {
		return
	}
	for k, r := range b.reasons {
		if r.Reason == reason && r.Column == column {
			b.reason[row] = k + 1
			b.reasons[k].Count++
			return
		}
	}
	b.reasons = append(b.reasons, SetAside{reason, column, 1, b.step})
	b.reason[row] = len(b.reasons)
}

func (b *builder) evaluate() error {
	b.atoms = map[string]reduction.Column{}
	b.missing()
	var err error
	if b.y, err = b.eval(b.eq.Dependent); err != nil {
		return err
	}
	for _, e := range b.eq.Terms {
		t := termVectors{expr: e}
		if col, base, has := b.category(e); col != nil {
			t.category = col
			t.base = base
			if err := b.levels(&t, e, has); err != nil {
				return err
			}
		} else if t.values, err = b.eval(e); err != nil {
			return err
		}
		b.terms = append(b.terms, t)
	}
	return nil
}

// missing sets aside rows that miss a value in a column of the equation, in the order in which columns appear there.
func (b *builder) missing() {
	var seen []string
	for _, e := range append([]*equation.Expr{b.eq.Dependent}, b.eq.Terms...) {
		for _, name := range e.Columns() {
			if slices.Contains(seen, name) {
				continue
			}
			seen = append(seen, name)
			b.step++
			c, _ := b.table.Column(name)
			if c.Missing == 0 {
				continue
			}
			for i := range b.table.Rows {
				if c.IsMissing(i) {
					b.setAside(i, "missing value", name)
				}
			}
		}
	}
}

// category returns the column behind a categorical term and the base named for it.
func (b *builder) category(e *equation.Expr) (*dataset.Column, string, bool) {
	if e.Kind == equation.Name {
		if c, _ := b.table.Column(e.Text); c.Kind == dataset.Text {
			return c, "", false
		}
		return nil, "", false
	}
	if e.Kind == equation.Call && e.Text == "categories" {
		c, _ := b.table.Column(e.Args[0].Text)
		return c, e.Base, e.HasBase
	}
	return nil, "", false
}

// label is the level of a row as text.
func label(c *dataset.Column, row int) string {
	if c.Kind == dataset.Text {
		return c.Levels[c.Codes[row]]
	}
	return levelOf(c.Value(row).Float())
}

// levels lists the levels among the rows that are still used; the base is taken out.
func (b *builder) levels(t *termVectors, e *equation.Expr, hasBase bool) error {
	counts := map[string]int{}
	numeric := map[string]float64{}
	used := 0
	for i := range b.table.Rows {
		if b.reason[i] == 0 {
			l := label(t.category, i)
			counts[l]++
			used++
			if t.category.Kind == dataset.Number {
				numeric[l] = t.category.Hi[i]
			}
		}
	}
	var levels []string
	for l := range counts {
		levels = append(levels, l)
	}
	if t.category.Kind == dataset.Number {
		sort.Slice(levels, func(i, j int) bool { return numeric[levels[i]] < numeric[levels[j]] })
	} else {
		sort.Strings(levels)
	}
	if len(levels) < 2 {
		return b.refuse(e, fmt.Sprintf("column %q with %d distinct value among the rows used", t.category.Name, len(levels)), "a category of at least two levels", "leave it out of the equation")
	}
	if len(levels) > 500 {
		return b.refuse(e, fmt.Sprintf("column %q with %d distinct values", t.category.Name, len(levels)), "a category of at most 500 levels", "merge levels first, or leave it out")
	}
	if !hasBase {
		t.base = levels[0]
	} else if counts[t.base] == 0 {
		return b.refuse(e, fmt.Sprintf("the base %q", t.base), fmt.Sprintf("a level of %q among the rows used", t.category.Name), "its levels are "+quoteList(levels[:min(6, len(levels))]))
	}
	for _, l := range levels {
		if l != t.base {
			t.levels = append(t.levels, l)
		}
	}
	return nil
}

func (b *builder) finish(constant, showSmall bool) (*Design, error) {
	d := &Design{Dependent: b.eq.Dependent.String(), Constant: constant, Read: b.table.Rows, SetAside: b.reasons,
		atoms: map[string]reduction.Column{}, means: map[string]float64{}}
	for i, r := range b.reason {
		if r == 0 {
			d.Index = append(d.Index, i)
			d.Lines = append(d.Lines, b.table.Lines[i])
		}
	}
	d.Rows = len(d.Index)
	if d.Rows == 0 {
		return nil, &RefusedError{b.table.Name, fmt.Sprintf("none of the %d rows can be used: %s", d.Read, describeSetAside(b.reasons)),
			"look at the columns named, or change the sample"}
	}
	d.Y = b.cut(b.y, d.Index)
	d.YDecimals = b.decimals(b.eq.Dependent)
	for k, t := range b.terms {
		b.addTerm(d, k, t, showSmall)
	}
	for name, v := range b.atoms {
		d.atoms[name] = b.cut(v, d.Index)
	}
	b.rawMeans(d)
	d.Terms = groupTerms(d)
	if err := b.check(d); err != nil {
		return nil, err
	}
	b.notes(d)
	return d, nil
}

func describeSetAside(reasons []SetAside) string {
	out := ""
	for i, r := range reasons {
		if i > 0 {
			out += ", "
		}
		out += fmt.Sprintf("%d %s", r.Count, r.Reason)
		if r.Column != "" {
			out += fmt.Sprintf(" in %q", r.Column)
		}
	}
	return out
}

func (b *builder) cut(v reduction.Column, index []int) reduction.Column {
	if len(index) == len(v.Hi) {
		return v
	}
	c := reduction.Column{Hi: make([]float64, len(index))}
	if v.Lo != nil {
		c.Lo = make([]float64, len(index))
	}
	for i, row := range index {
		c.Hi[i] = v.Hi[row]
		if v.Lo != nil {
			c.Lo[i] = v.Lo[row]
		}
	}
	return c
}

func (b *builder) addTerm(d *Design, k int, t termVectors, showSmall bool) {
	if t.category != nil {
		name := t.category.Name
		hidden := 0
		for _, l := range t.levels {
			col := reduction.Column{Hi: make([]float64, d.Rows)}
			count := 0
			for i, row := range d.Index {
				if label(t.category, row) == l {
					col.Hi[i] = 1
					count++
				}
			}
			if count < SmallCell && !showSmall {
				hidden++
				l = fmt.Sprintf("(small level %d)", hidden)
			}
			d.Regressors = append(d.Regressors, Regressor{Name: name + "=" + l, Kind: Dummy, Term: k, Variables: []string{name},
				Category: name, Level: l, Values: col})
		}
		if hidden > 0 {
			d.Notes = append(d.Notes, smallCells(hidden, name))
		}
		return
	}
	r := Regressor{Name: t.expr.String(), Kind: kindOf(t.expr), Term: k, Variables: t.expr.Columns(), Values: b.cut(t.values, d.Index), Decimals: b.decimals(t.expr), expr: t.expr}
	r.Factors = factorsOf(t.expr)
	d.Regressors = append(d.Regressors, r)
}

// decimals is that of a bare column, -1 for anything computed.
func (b *builder) decimals(e *equation.Expr) int {
	if e.Kind != equation.Name {
		return -1
	}
	c, _ := b.table.Column(e.Text)
	return c.Decimals
}

func (b *builder) rawMeans(d *Design) {
	for _, e := range b.eq.Terms {
		for _, name := range e.Columns() {
			c, _ := b.table.Column(name)
			if c.Kind != dataset.Number {
				continue
			}
			var sum doubledouble.Number
			for _, row := range d.Index {
				sum = sum.Add(c.Value(row))
			}
			d.means[name] = sum.Float() / float64(d.Rows)
		}
	}
}

func kindOf(e *equation.Expr) Kind {
	switch e.Kind {
	case equation.Name:
		return Number
	case equation.Power:
		return Power
	case equation.Product:
		if hasNumber(e) {
			return Function
		}
		return Product
	case equation.Ratio:
		return Ratio
	}
	return Function
}

func hasNumber(e *equation.Expr) bool {
	if e.Kind == equation.Number {
		return true
	}
	if e.Kind == equation.Product || e.Kind == equation.Power {
		for _, a := range e.Args {
			if hasNumber(a) {
				return true
			}
		}
	}
	return false
}

// factorsOf writes a term as powers of atoms; a term that holds a number among its factors is an atom itself.
func factorsOf(e *equation.Expr) []Factor {
	if hasNumber(e) {
		return []Factor{{e.String(), 1}}
	}
	var out []Factor
	var walk func(e *equation.Expr, power int)
	walk = func(e *equation.Expr, power int) {
		switch e.Kind {
		case equation.Product:
			for _, a := range e.Args {
				walk(a, power)
			}
		case equation.Power:
			walk(e.Args[0], power*e.Power)
		default:
			name := e.String()
			for i := range out {
				if out[i].Atom == name {
					out[i].Power += power
					return
				}
			}
			out = append(out, Factor{name, power})
		}
	}
	walk(e, 1)
	return out
}

// groupTerms joins columns that share a variable; the dummies of a category share theirs.
func groupTerms(d *Design) []Term {
	n := len(d.Regressors)
	group := make([]int, n)
	for i := range group {
		group[i] = i
	}
	var find func(i int) int
	find = func(i int) int {
		if group[i] != i {
			group[i] = find(group[i])
		}
		return group[i]
	}
	owner := map[string]int{}
	for j, r := range d.Regressors {
		for _, v := range r.Variables {
			if o, ok := owner[v]; ok {
				a, b := find(o), find(j)
				if a < b {
					group[b] = a
				} else {
					group[a] = b
				}
			} else {
				owner[v] = j
			}
		}
	}
	var terms []Term
	place := map[int]int{}
	for j := range d.Regressors {
		root := find(j)
		k, ok := place[root]
		if !ok {
			k = len(terms)
			place[root] = k
			terms = append(terms, Term{})
		}
		t := &terms[k]
		t.Columns = append(t.Columns, j)
		d.Regressors[j].Term = k
	}
	for k := range terms {
		t := &terms[k]
		var vars []string
		t.Category = true
		for _, j := range t.Columns {
			t.Category = t.Category && d.Regressors[j].Kind == Dummy
			for _, v := range d.Regressors[j].Variables {
				if !slices.Contains(vars, v) {
					vars = append(vars, v)
				}
			}
		}
		t.Name = vars[0]
		for _, v := range vars[1:] {
			t.Name += ", " + v
		}
		if len(t.Columns) == 1 {
			t.Name = d.Regressors[t.Columns[0]].Name
			if t.Category {
				t.Name = d.Regressors[t.Columns[0]].Category
			}
		}
	}
	return terms
}

func (r *Regressor) degree() int { return degreeOf(r.Factors) }

func smallCells(hidden int, category string) Note {
	return Note{"small-cells", fmt.Sprintf("%d levels of %s hold fewer than %d rows and are not named; --show-small-cells names them, if your data custodian allows", hidden, category, SmallCell)}
}

func nothingToExplain(table, dependent string, rows int) error {
	return &RefusedError{table, fmt.Sprintf("the dependent variable %s is the same in all %d rows used", dependent, rows), "there is nothing to explain; look at the sample"}
}

func sameInAll(table, regressor string, rows int) error {
	return &RefusedError{table, fmt.Sprintf("%s is the same in all %d rows used, like the constant", regressor, rows), "leave it out, or widen the sample"}
}

func (b *builder) check(d *Design) error {
	if constantColumn(d.Y) {
		return nothingToExplain(b.table.Name, d.Dependent, d.Rows)
	}
	for _, r := range d.Regressors {
		if d.Constant && constantColumn(r.Values) {
			return sameInAll(b.table.Name, r.Name, d.Rows)
		}
	}
	return b.checkNames(d)
}

func (b *builder) checkNames(d *Design) error {
	names := map[string]bool{}
	for _, r := range d.Regressors {
		if names[r.Name] {
			return &RefusedError{b.table.Name, fmt.Sprintf("two regressors are called %q", r.Name), "rename a column"}
		}
		names[r.Name] = true
	}
	if len(d.Regressors) == 0 {
		return &RefusedError{b.table.Name, "the equation has no regressor", "write at least one after the equals sign"}
	}
	least := 3
	if d.Rows < least {
		return &RefusedError{b.table.Name, fmt.Sprintf("%d rows can be used, at least %d are needed", d.Rows, least), "widen the sample"}
	}
	return nil
}

func constantColumn(c reduction.Column) bool {
	for i := range c.Hi {
		if c.Hi[i] != c.Hi[0] || (c.Lo != nil && c.Lo[i] != c.Lo[0]) {
			return false
		}
	}
	return true
}

func (b *builder) notes(d *Design) {
	for _, t := range b.terms {
		if t.category == nil {
			continue
		}
		count := t.baseRows
		for _, row := range d.Index {
			if label(t.category, row) == t.base {
				count++
			}
		}
		if float64(count) < 0.05*float64(d.Rows) {
			d.Notes = append(d.Notes, Note{"small-base", fmt.Sprintf("the base of %s, %q, holds %d of %d rows: every dummy is compared with few rows; name a larger base with categories(%s, \"...\")",
				t.category.Name, t.base, count, d.Rows, t.category.Name)})
		}
	}
	for _, r := range d.Regressors {
		if r.degree() < 2 {
			continue
		}
		for _, f := range r.Factors {
			if !d.hasPlain(f.Atom) {
				d.Notes = append(d.Notes, Note{"lower-order-missing", fmt.Sprintf("%s stands without %s: the coefficient then depends on where %s counts from", r.Name, f.Atom, f.Atom)})
			}
		}
	}
	if c, ok := b.table.Column("year"); ok && (c.Kind == dataset.Number || c.Kind == dataset.Skipped) {
		d.Notes = append(d.Notes, Note{"folds-ignore-time", "there is a column called year, but no time key: folds ignore time, and a held-out year is predicted from later ones"})
	}
}

func (d *Design) hasPlain(atom string) bool {
	for _, r := range d.Regressors {
		if len(r.Factors) == 1 && r.Factors[0].Power == 1 && r.Factors[0].Atom == atom {
			return true
		}
	}
	return false
}

func isBad(v doubledouble.Number) bool { return math.IsNaN(v.Hi) || math.IsInf(v.Hi, 0) }
