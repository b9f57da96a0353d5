package equation

import (
	"fmt"
	"math"
	"strings"

	"modelmend/fit/doubledouble"
	"modelmend/fit/figures"
)

// Truth is the outcome of a condition for a row.
type Truth int8

// The outcomes. Unknown is what a missing value, or arithmetic without a finite result, makes of a comparison.
// Such a row is not used, but is counted apart from a row for which the condition is false.
const (
	False Truth = iota
	True
	Unknown
)

// Values is the type of a column as a condition sees it.
type Values int

// The types of column.
const (
	NoValues Values = iota // every value is missing
	Numbers
	Texts
)

// Accessor gives a condition the values of a column. The slices are only read; their length is the number of rows.
type Accessor struct {
	Values Values
	Hi, Lo []float64 // Numbers: the values as Hi + Lo, NaN in Hi where missing; Lo may be nil
	Codes  []int32   // Texts: index into Levels, negative where missing
	Levels []string  // Texts: the distinct values
}

// Compile returns a function that gives the outcome of c for a row, counted from 0.
//
// columns gives the column of a name, and false when there is none. "and", "or" and "not" follow three-valued logic:
// false and unknown is false, true or unknown is true, else what holds an unknown is unknown. A quoted text is a
// column on the left of a comparison and a text value on the right or in a list; it is a column there too when one
// of that name is numeric and the left side is numeric, or with < <= > >=; it is a value on the left when there is no
// column of that name and the right side is a text column. Text is compared with = != and in only, byte for byte.
// Two numbers are equal when they agree to 30 digits, or as float64 when either comes from arithmetic.
//
// It returns a *SyntaxError with the place when a column is unknown, and when a text is compared with a number.
// The function is safe for use from several goroutines. It panics for a row outside the columns.
// Source of the logic: Kleene (1938), Journal of Symbolic Logic 3(4), 150-155 (citation from memory).
func (c *Condition) Compile(columns func(name string) (Accessor, bool)) (func(row int) Truth, error) {
	clauses, err := c.CompileClauses(columns)
	if err != nil {
		return nil, err
	}
	return every(clauses), nil
}

// CompileClauses is Compile for each clause on its own, in the order of c.Clauses, so that the rows that each sets
// aside can be counted.
func (c *Condition) CompileClauses(columns func(name string) (Accessor, bool)) ([]func(row int) Truth, error) {
	k := compiler{text: c.Text, columns: columns}
	out := make([]func(int) Truth, len(c.Clauses))
	for i, clause := range c.Clauses {
		f, err := k.test(clause.Test)
		if err != nil {
			return nil, err
		}
		out[i] = f
	}
	return out, nil
}

type compiler struct {
	text    string
	columns func(string) (Accessor, bool)
}

// operand is a side whose type is known.
type operand struct {
	values  Values
	literal bool   // a text value
	text    string // literal
	column  Accessor
	number  func(int) doubledouble.Number // values == Numbers
	rounded bool                          // number comes from arithmetic
	source  Side
}

func (k compiler) fail(e *Expr, found, expected, advice string) *SyntaxError {
	return &SyntaxError{Text: k.text, Pos: e.Pos, Found: found, Expected: expected, Advice: advice}
}

func (k compiler) test(t *Test) (func(int) Truth, error) {
	switch t.Kind {
	case Compare:
		return k.compare(t)
	case Member:
		return k.member(t)
	}
	parts := make([]func(int) Truth, len(t.Parts))
	for i, part := range t.Parts {
		f, err := k.test(part)
		if err != nil {
			return nil, err
		}
		parts[i] = f
	}
	switch t.Kind {
	case Every:
		return every(parts), nil
	case Any:
		return anyOf(parts), nil
	}
	return negated(parts[0]), nil
}

func every(parts []func(int) Truth) func(int) Truth {
	if len(parts) == 1 {
		return parts[0]
	}
	return func(row int) Truth {
		out := True
		for _, f := range parts {
			switch f(row) {
			case False:
				return False
			case Unknown:
				out = Unknown
			}
		}
		return out
	}
}

func anyOf(parts []func(int) Truth) func(int) Truth {
	return func(row int) Truth {
		out := False
		for _, f := range parts {
			switch f(row) {
			case True:
				return True
			case Unknown:
				out = Unknown
			}
		}
		return out
	}
}

func negated(f func(int) Truth) func(int) Truth {
	return func(row int) Truth {
		switch f(row) {
		case True:
			return False
		case False:
			return True
		}
		return Unknown
	}
}

func unknown(int) Truth { return Unknown }

func truth(b bool) Truth {
	if b {
		return True
	}
	return False
}

func (k compiler) compare(t *Test) (func(int) Truth, error) {
	left, right, err := k.sides(t)
	if err != nil {
		return nil, err
	}
	text := left.values == Texts || right.values == Texts
	switch {
	case left.values == NoValues || right.values == NoValues:
		return unknown, nil
	case left.values != right.values:
		return nil, k.mixed(left, right)
	case text:
		f := sameText(left, right)
		if t.Op == "!=" {
			f = negated(f)
		}
		return f, nil
	}
	return compareNumbers(t.Op, left, right), nil
}

// sides resolves both sides of a comparison; what a quoted text is depends on the other side.
func (k compiler) sides(t *Test) (left, right operand, err error) {
	if t.Op != "=" && t.Op != "!=" {
		return k.orderedSides(t)
	}
	if t.Left.Quoted {
		if _, known := k.columns(t.Left.Expr.Text); !known && k.isTextColumn(t.Right) {
			right, err = k.side(t.Right)
			return literal(t.Left), right, err
		}
	}
	if left, err = k.side(t.Left); err != nil {
		return left, right, err
	}
	if t.Right.Quoted {
		return left, k.value(left, t.Right), nil
	}
	right, err = k.side(t.Right)
	return left, right, err
}

// orderedSides resolves the sides of < <= > >=, which are numbers.
func (k compiler) orderedSides(t *Test) (left, right operand, err error) {
	sides := [2]operand{}
	for i, s := range []Side{t.Left, t.Right} {
		if sides[i], err = k.side(s); err != nil {
			return left, right, err
		}
		if sides[i].values == Texts {
			return left, right, k.fail(s.Expr, "the text column "+figures.Quoted(s.Expr.Text)+" beside "+t.Op, "a number", "compare text with = or != or in")
		}
	}
	return sides[0], sides[1], nil
}

func (k compiler) isTextColumn(s Side) bool {
	if s.Expr.Kind != Name {
		return false
	}
	a, known := k.columns(s.Expr.Text)
	return known && a.Values == Texts
}

// value resolves a quoted text to the right of left: a text value, or a numeric column beside a number.
func (k compiler) value(left operand, s Side) operand {
	if a, known := k.columns(s.Expr.Text); known && a.Values == Numbers && left.values == Numbers {
		return columnOperand(a, s)
	}
	return literal(s)
}

func literal(s Side) operand {
	return operand{values: Texts, literal: true, text: s.Expr.Text, source: s}
}

func columnOperand(a Accessor, s Side) operand {
	o := operand{values: a.Values, column: a, source: s}
	if a.Values == Numbers {
		o.number = numberOf(a)
	}
	return o
}

func numberOf(a Accessor) func(int) doubledouble.Number {
	if a.Lo == nil {
		return func(row int) doubledouble.Number { return doubledouble.Number{Hi: a.Hi[row]} }
	}
	return func(row int) doubledouble.Number { return doubledouble.Number{Hi: a.Hi[row], Lo: a.Lo[row]} }
}

// side resolves a column, a number or arithmetic.
func (k compiler) side(s Side) (operand, error) {
	if s.Expr.Kind == Name {
		a, known := k.columns(s.Expr.Text)
		if !known {
			return operand{}, k.unknownColumn(s.Expr)
		}
		return columnOperand(a, s), nil
	}
	o := operand{values: Numbers, source: s}
	number, missing, err := k.arithmetic(s.Expr)
	if err != nil {
		return o, err
	}
	if missing {
		o.values = NoValues
	}
	o.number = number
	o.rounded = s.Expr.Kind != Number && (s.Expr.Kind != Negative || s.Expr.Args[0].Kind != Number)
	return o, nil
}

func (k compiler) unknownColumn(e *Expr) *SyntaxError {
	return k.fail(e, "the unknown column "+figures.Quoted(e.Text), "a column of the data",
		"write a column name as in the header of the data; text values stand in quotes to the right of the comparison")
}

// arithmetic compiles e; missing is true when one of its columns holds no value at all.
func (k compiler) arithmetic(e *Expr) (f func(int) doubledouble.Number, missing bool, err error) {
	switch e.Kind {
	case Number:
		v := e.Value
		return func(int) doubledouble.Number { return v }, false, nil
	case Name:
		return k.columnNumber(e)
	}
	args := make([]func(int) doubledouble.Number, len(e.Args))
	for i, arg := range e.Args {
		g, none, err := k.arithmetic(arg)
		if err != nil {
			return nil, false, err
		}
		args[i], missing = g, missing || none
	}
	return operation(e, args), missing, nil
}

func (k compiler) columnNumber(e *Expr) (func(int) doubledouble.Number, bool, error) {
	a, known := k.columns(e.Text)
	switch {
	case !known:
		return nil, false, k.unknownColumn(e)
	case a.Values == Texts:
		return nil, false, k.fail(e, "the text column "+figures.Quoted(e.Text)+" in arithmetic", "a numeric column", "compare text with = or != or in")
	case a.Values == NoValues:
		return func(int) doubledouble.Number { return doubledouble.From(math.NaN()) }, true, nil
	}
	return numberOf(a), false, nil
}

// operation returns the function of a composite expression. The transcendental functions are those of float64.
func operation(e *Expr, args []func(int) doubledouble.Number) func(int) doubledouble.Number {
	a := args[0]
	switch e.Kind {
	case Negative:
		return func(row int) doubledouble.Number { return a(row).Neg() }
	case Power:
		return func(row int) doubledouble.Number { return a(row).Power(e.Power) }
	case Call:
		return function(e.Text, a)
	}
	b := args[1]
	switch e.Kind {
	case Product:
		return func(row int) doubledouble.Number { return a(row).Mul(b(row)) }
	case Ratio:
		return func(row int) doubledouble.Number { return a(row).Div(b(row)) }
	case Sum:
		return func(row int) doubledouble.Number { return a(row).Add(b(row)) }
	}
	return func(row int) doubledouble.Number { return a(row).Sub(b(row)) }
}

func function(name string, a func(int) doubledouble.Number) func(int) doubledouble.Number {
	var f func(float64) float64
	switch name {
	case "sqrt":
		return func(row int) doubledouble.Number { return a(row).Sqrt() }
	case "abs":
		return func(row int) doubledouble.Number { return a(row).Abs() }
	case "ln":
		f = math.Log
	case "log10":
		f = math.Log10
	default:
		f = math.Exp
	}
	return func(row int) doubledouble.Number { return doubledouble.From(f(a(row).Float())) }
}

// mixed is the error for a text beside a number.
func (k compiler) mixed(left, right operand) *SyntaxError {
	text, number := left, right
	if right.values == Texts {
		text, number = right, left
	}
	numberSource := k.text[number.source.Expr.Pos:number.source.Expr.End]
	if text.literal {
		advice := "write a number"
		if isNumberText(strings.TrimSpace(text.text)) {
			advice = "write " + strings.TrimSpace(text.text) + " without quotes"
		}
		return k.fail(text.source.Expr, "the text "+figures.Quoted(text.text), "a number, as "+figures.Quoted(numberSource)+" is one", advice)
	}
	advice := "compare the column with a text in quotes"
	if number.source.Expr.Kind == Number {
		advice = "write " + quote(numberSource) + " in quotes"
	}
	return k.fail(number.source.Expr, "the number "+figures.Quoted(numberSource),
		"a text, as "+figures.Quoted(text.source.Expr.Text)+" is a text column", advice)
}

// sameText tells whether two texts are the same, at least one of them a column.
func sameText(left, right operand) func(int) Truth {
	if left.literal && right.literal {
		out := truth(left.text == right.text)
		return func(int) Truth { return out }
	}
	if left.literal {
		left, right = right, left
	}
	if right.literal {
		return textIn(left.column, []string{right.text})
	}
	a, b := left.column, right.column
	return func(row int) Truth {
		i, j := a.Codes[row], b.Codes[row]
		if i < 0 || j < 0 {
			return Unknown
		}
		return truth(a.Levels[i] == b.Levels[j])
	}
}

// textIn tells whether a text column holds one of values.
func textIn(a Accessor, values []string) func(int) Truth {
	in := map[string]bool{}
	for _, v := range values {
		in[v] = true
	}
	wanted := make([]Truth, len(a.Levels))
	for i, level := range a.Levels {
		wanted[i] = truth(in[level])
	}
	return func(row int) Truth {
		i := a.Codes[row]
		if i < 0 {
			return Unknown
		}
		return wanted[i]
	}
}

// compareNumbers compares two numbers; a column beside a constant takes a short path.
func compareNumbers(op string, left, right operand) func(int) Truth {
	below, same, above := outcomes(op)
	rounded := left.rounded || right.rounded
	if left.source.Expr.Kind == Name && left.column.Lo == nil && right.source.Expr.Kind == Number && right.source.Expr.Value.Lo == 0 {
		values, c := left.column.Hi, right.source.Expr.Value.Hi
		return func(row int) Truth {
			switch v := values[row]; {
			case v < c:
				return below
			case v > c:
				return above
			case v == c:
				return same
			}
			return Unknown
		}
	}
	a, b := left.number, right.number
	return func(row int) Truth {
		x, y := a(row), b(row)
		if !x.IsFinite() || !y.IsFinite() {
			return Unknown
		}
		switch order(x, y, rounded) {
		case -1:
			return below
		case 1:
			return above
		}
		return same
	}
}

// outcomes gives what op says of a left side below, equal to and above the right side.
func outcomes(op string) (below, same, above Truth) {
	switch op {
	case "=":
		return False, True, False
	case "!=":
		return True, False, True
	case "<":
		return True, False, False
	case "<=":
		return True, True, False
	case ">":
		return False, False, True
	}
	return False, True, True
}

// order returns -1, 0 or 1 as x is below, equal to or above y. Numbers as read are equal when they agree to 2^-100 of
// their size, because the same decimal written in two ways may differ below that; rounded ones when their float64 agree.
func order(x, y doubledouble.Number, rounded bool) int {
	a, b := x.Hi, y.Hi
	if rounded {
		a, b = x.Float(), y.Float()
	} else if a == b {
		a, b = x.Lo, y.Lo
		if math.Abs(a-b) <= math.Abs(x.Hi)*0x1p-100 {
			return 0
		}
	}
	switch {
	case a < b:
		return -1
	case a > b:
		return 1
	}
	return 0
}

// member compiles [not] in (...).
func (k compiler) member(t *Test) (func(int) Truth, error) {
	left, err := k.side(t.Left)
	if err != nil {
		return nil, err
	}
	var f func(int) Truth
	switch left.values {
	case NoValues:
		f = unknown
	case Texts:
		f, err = k.textMember(left, t)
	default:
		f, err = k.numberMember(left, t)
	}
	if err == nil && t.Negated {
		f = negated(f)
	}
	return f, err
}

func (k compiler) textMember(left operand, t *Test) (func(int) Truth, error) {
	values := make([]string, len(t.Items))
	for i, item := range t.Items {
		if !item.Quoted {
			number, err := k.side(item)
			if err != nil {
				return nil, err
			}
			return nil, k.mixed(left, number)
		}
		values[i] = item.Expr.Text
	}
	return textIn(left.column, values), nil
}

func (k compiler) numberMember(left operand, t *Test) (func(int) Truth, error) {
	parts := make([]func(int) Truth, len(t.Items))
	for i, item := range t.Items {
		right := operand{}
		if item.Quoted {
			right = k.value(left, item)
		} else {
			var err error
			if right, err = k.side(item); err != nil {
				return nil, err
			}
		}
		if right.values != Numbers {
			return nil, k.mixed(left, right)
		}
		parts[i] = compareNumbers("=", left, right)
	}
	return anyOf(parts), nil
}

// String gives the outcome as a word.
func (t Truth) String() string {
	switch t {
	case False:
		return "false"
	case True:
		return "true"
	case Unknown:
		return "unknown"
	}
	return fmt.Sprintf("Truth(%d)", int8(t))
}
