package equation

import (
	"slices"
	"strconv"
	"strings"
)

// String returns the canonical name of e: no spaces, operands in written order, products without inner
// parentheses, a sum, difference or negative in parentheses. The name of a column alone stands as it is; inside a
// composite it is quoted where it is not a plain word: `floor area`, but `"floor area"^2`.
func (e *Expr) String() string {
	if e.Kind == Name {
		return e.Text
	}
	return e.quotedString()
}

// quotedString is String with a lone column quoted as well, so that it can be read again.
func (e *Expr) quotedString() string {
	var b strings.Builder
	printer{out: &b}.operand(e, e.Kind == Sum || e.Kind == Difference || e.Kind == Negative)
	return b.String()
}

// String returns the canonical text of q, with spaces around = and around the + between terms.
// Parse of it gives an equation with the same String.
func (q *Equation) String() string {
	terms := make([]string, len(q.Terms))
	for i, t := range q.Terms {
		terms[i] = t.quotedString()
	}
	return q.Dependent.quotedString() + " = " + strings.Join(terms, " + ")
}

// printer writes expressions; reserved words are quoted like names that are not plain.
type printer struct {
	out      *strings.Builder
	reserved []string
}

func (w printer) expr(e *Expr) {
	switch e.Kind {
	case Name:
		w.name(e.Text)
	case Number:
		w.out.WriteString(e.Text)
	case Call:
		w.call(e)
	case Power:
		w.operand(e.Args[0], e.Args[0].Kind != Name && e.Args[0].Kind != Number && e.Args[0].Kind != Call)
		w.out.WriteString("^" + strconv.Itoa(e.Power))
	case Product:
		w.pair(e, "*", isSigned(e.Args[0]), isSigned(e.Args[1]) || e.Args[1].Kind == Ratio)
	case Ratio:
		w.pair(e, "/", isSigned(e.Args[0]), isSigned(e.Args[1]) || e.Args[1].Kind == Ratio || e.Args[1].Kind == Product)
	case Sum:
		w.pair(e, "+", false, isSigned(e.Args[1]))
	case Difference:
		w.pair(e, "-", false, isSigned(e.Args[1]))
	case Negative:
		w.out.WriteByte('-')
		w.operand(e.Args[0], isSigned(e.Args[0]))
	}
}

// isSigned reports whether e needs parentheses inside a product.
func isSigned(e *Expr) bool { return e.Kind == Sum || e.Kind == Difference || e.Kind == Negative }

func (w printer) pair(e *Expr, sign string, groupFirst, groupSecond bool) {
	w.operand(e.Args[0], groupFirst)
	w.out.WriteString(sign)
	w.operand(e.Args[1], groupSecond)
}

func (w printer) operand(e *Expr, group bool) {
	if group {
		w.out.WriteByte('(')
	}
	w.expr(e)
	if group {
		w.out.WriteByte(')')
	}
}

func (w printer) call(e *Expr) {
	w.out.WriteString(e.Text + "(")
	w.expr(e.Args[0])
	if e.HasBase {
		w.out.WriteByte(',')
		if isNumberText(e.Base) {
			w.out.WriteString(e.Base)
		} else {
			w.out.WriteString(quote(e.Base))
		}
	}
	w.out.WriteByte(')')
}

func (w printer) name(s string) {
	if !plainName(s) || slices.Contains(w.reserved, s) {
		s = quote(s)
	}
	w.out.WriteString(s)
}

// quote puts s in double quotes, those inside doubled.
func quote(s string) string { return `"` + strings.ReplaceAll(s, `"`, `""`) + `"` }
