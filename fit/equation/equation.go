// Package equation reads the equation language: school algebra in, a tree of terms out.
//
// In goes text such as `ln(rent) = area + rooms + area^2 + age/income`, a single expression, or a condition on
// rows such as `year >= 1990 and district != "North"`. Out comes a tree with canonical names and, for a
// condition, a compiled test that answers true, false or unknown for a row. It refuses, with the place marked by
// a caret and one thing to do, everything that the grammar does not hold, text over 100,000 bytes and nesting
// deeper than 200. It knows no data: which columns exist and what is in them is asked of the caller.
// Before it stands dataset, after it design.
//
// The grammar of an equation:
//
//	equation = expr "=" term { "+" term } ;
//	expr     = [ "-" ] term { ( "+" | "-" ) term } ;
//	term     = factor { ( "*" | "/" ) factor } ;                 read from left to right
//	factor   = atom [ "^" whole ] ;                              whole: 1 to 9 digits, at least 1
//	atom     = name | number | function "(" expr ")" | "(" expr ")"
//	         | "categories" "(" name [ "," base ] ")" ;          base: a quoted text or a number
//	name     = letter { letter | digit | "_" | "." } | quoted ;  quoted: "..." or '...', the quote doubled inside
//
// The grammar of a condition, with expr as above:
//
//	condition  = conjunct { "or" conjunct } ;
//	conjunct   = test { "and" test } ;
//	test       = "not" test | "(" condition ")" | comparison ;
//	comparison = expr ( "=" | "==" | "!=" | "<" | "<=" | ">" | ">=" ) expr
//	           | expr [ "not" ] "in" "(" item { "," item } ")" ;  item: a quoted text or a number
package equation

import (
	"modelmend/fit/doubledouble"
)

// Limits on what is read.
const (
	maxText  = 100_000 // bytes of text
	maxDepth = 200     // nested parentheses, calls and "not"
	maxChain = 1000    // operands of one unbroken sum or product, which bounds the depth of the tree
	maxWhole = 9       // digits of a power
)

// Kind says what an Expr is.
type Kind int

// The kinds of expression.
const (
	Name       Kind = iota + 1 // a column
	Number                     // a constant
	Call                       // a function of one argument, or categories
	Power                      // Args[0] to the whole power Power, at least 2
	Product                    // Args[0] * Args[1]
	Ratio                      // Args[0] / Args[1]
	Sum                        // Args[0] + Args[1]
	Difference                 // Args[0] - Args[1]
	Negative                   // -Args[0]
)

// Expr is a node of the tree. A power of one is read as its base, parentheses leave no node.
type Expr struct {
	Kind    Kind
	Text    string              // Name: the column name, unquoted; Number: digits as written; Call: the function
	Value   doubledouble.Number // Number only
	Power   int                 // Power only, at least 2
	Args    []*Expr             // operands in written order: two for Product, Ratio, Sum and Difference, else one
	Base    string              // Call "categories": the named base level, or ""
	HasBase bool                // Call "categories": a base level was named
	Pos     int                 // byte offset in the source text where the expression starts, its parentheses included
	End     int                 // byte offset just after the expression
}

// Columns returns the distinct raw column names in e, in order of appearance; empty when e is a constant.
func (e *Expr) Columns() []string {
	var names []string
	seen := map[string]bool{}
	e.walk(func(x *Expr) {
		if x.Kind == Name && !seen[x.Text] {
			seen[x.Text] = true
			names = append(names, x.Text)
		}
	})
	return names
}

// walk calls visit for e and everything below it, in written order.
func (e *Expr) walk(visit func(*Expr)) {
	visit(e)
	for _, arg := range e.Args {
		arg.walk(visit)
	}
}

// Equation is a dependent variable and its terms. Each term holds at least one column, no two terms are the same,
// and none is the dependent variable itself. Whether there is a constant is not a matter of the equation.
type Equation struct {
	Text      string // as given
	Dependent *Expr
	Terms     []*Expr // at least one, in written order
}

// functions of one number, in the order in which they are offered to the user; categories is apart.
var functions = []string{"ln", "log10", "sqrt", "exp", "abs", "categories"}

// laterFunctions are words of the language that need keys which this version does not read.
var laterFunctions = []string{"lag", "change"}
