package equation

import (
	"fmt"
	"slices"
	"strconv"
	"strings"
	"unicode/utf8"

	"modelmend/fit/doubledouble"
	"modelmend/fit/figures"
)

// Parse reads an equation.
//
// It returns a *SyntaxError when the text is not an equation, when a term or the dependent variable holds no
// column, when a term stands there twice, and when the dependent variable is also a term.
func Parse(text string) (*Equation, error) {
	p, err := newParser(text, false)
	if err != nil {
		return nil, err
	}
	q, wrong := p.equation()
	if wrong != nil {
		return nil, wrong
	}
	return q, nil
}

// ParseExpr reads one expression, for instance the name of a coefficient or one side of a restriction. A column
// whose name is not a plain word stands in quotes, as in an equation; the canonical name of such a column alone
// has no quotes and is to be compared with the column names first.
//
// It returns a *SyntaxError when the text is not one expression.
func ParseExpr(text string) (*Expr, error) {
	p, err := newParser(text, false)
	if err != nil {
		return nil, err
	}
	e, wrong := p.singleExpr()
	if wrong != nil {
		return nil, wrong
	}
	return e, nil
}

// parser holds one token of look-ahead. Its methods return a *SyntaxError, nil for success; the exported functions
// turn it into an error, through a name of its own because a nil pointer in an error is not nil.
type parser struct {
	lex   lexer
	tok   token // the next token, not yet taken
	last  token // the token taken last
	depth int
}

// part is what a subexpression turned out to be: a number (expr) or, in a condition, a test.
type part struct {
	expr   *Expr
	quoted bool // expr is a quoted text on its own, a column or a text value
	test   *Test
}

func newParser(text string, condition bool) (*parser, error) {
	if len(text) > maxText {
		return nil, &SyntaxError{Text: text, Pos: 0, Found: fmt.Sprintf("a text of %d bytes", len(text)),
			Expected: fmt.Sprintf("at most %d", maxText), Advice: "write a shorter text"}
	}
	if !utf8.ValidString(text) {
		at := 0
		for at < len(text) {
			r, size := utf8.DecodeRuneInString(text[at:])
			if r == utf8.RuneError && size == 1 {
				break
			}
			at += size
		}
		return nil, &SyntaxError{Text: text, Pos: at, Found: fmt.Sprintf("the byte 0x%02X", text[at]),
			Expected: "text in UTF-8", Advice: "save the text as UTF-8"}
	}
	p := &parser{lex: lexer{text: text, condition: condition}}
	p.tok = p.lex.next()
	return p, nil
}

func (p *parser) take() token {
	p.last = p.tok
	p.tok = p.lex.next()
	return p.last
}

func (p *parser) isSign(sign string) bool { return p.tok.kind == signToken && p.tok.text == sign }

func (p *parser) isWord(word string) bool { return p.tok.kind == nameToken && p.tok.text == word }

func (p *parser) fail(pos int, found, expected, advice string) *SyntaxError {
	return &SyntaxError{Text: p.lex.text, Pos: pos, Found: found, Expected: expected, Advice: advice}
}

// unexpected is the error for the next token, or the error it carries itself.
func (p *parser) unexpected(expected, advice string) *SyntaxError {
	if p.tok.kind == badToken {
		return p.tok.err
	}
	if e := p.commaInNumber(); e != nil {
		return e
	}
	return p.fail(p.tok.pos, p.tok.found(p.lex.text), expected, advice)
}

// commaInNumber recognises 1,5 and 12,500 when the comma is the next token and the digits touch it.
func (p *parser) commaInNumber() *SyntaxError {
	if !p.isSign(",") || p.last.kind != numberToken || p.last.end != p.tok.pos || !p.lex.digitAt(p.tok.end) {
		return nil
	}
	after := p.lex.text[p.tok.end:p.lex.skipDigits(p.tok.end)]
	advice := "write a decimal point, " + p.last.text + "." + after
	if len(after) == 3 {
		advice += ", or " + p.last.text + after + " without a thousands separator"
	}
	return p.fail(p.tok.pos, "a comma inside a number", "a decimal point", advice)
}

// afterOperand is the error for a token that cannot follow a complete operand.
func (p *parser) afterOperand(expected string) *SyntaxError {
	starts := p.tok.kind == nameToken || p.tok.kind == quotedToken || p.tok.kind == numberToken
	switch {
	case p.lex.condition && p.tok.kind == nameToken && slices.Contains(conditionWords, p.tok.text),
		p.tok.kind == signToken && isComparison(p.tok.text):
		return p.unexpected(expected, "close the parenthesis before "+p.tok.text)
	case starts && p.last.kind == nameToken && p.tok.kind == nameToken:
		return p.unexpected(expected, fmt.Sprintf("write an operator between the two, or %q in quotes if that is one column",
			p.last.text+" "+p.tok.text))
	case starts || p.isSign("("):
		return p.unexpected(expected, "write an operator between the two, such as * for a product")
	case p.isSign(")"):
		return p.unexpected(expected, "delete this parenthesis or write the one that opens it")
	case p.isSign("^"):
		return p.unexpected(expected, "write one power, or parentheses around the first, as in (area^2)^3")
	case p.isSign(","):
		return p.unexpected(expected, "join terms with +; a comma only stands inside the parentheses of a function or a list")
	}
	return p.unexpected(expected, "write an operator here or delete this sign")
}

// enter counts nesting; each call is matched by leave.
func (p *parser) enter(pos int) *SyntaxError {
	p.depth++
	if p.depth > maxDepth {
		return p.fail(pos, fmt.Sprintf("nesting deeper than %d", maxDepth), "fewer parentheses", "write the expression with fewer parentheses")
	}
	return nil
}

func (p *parser) leave() { p.depth-- }

func (p *parser) equation() (*Equation, *SyntaxError) {
	const shape = "write the dependent variable, =, and the terms, as in rent = area + rooms"
	if p.tok.kind == endToken {
		return nil, p.unexpected("an equation", shape)
	}
	if p.isSign("=") {
		return nil, p.unexpected("the dependent variable", shape)
	}
	left, err := p.numericSum()
	if err != nil {
		return nil, err
	}
	if !p.isSign("=") && p.tok.kind != endToken {
		return nil, p.afterOperand(`an operator or "="`)
	}
	if err := p.checkDependent(left); err != nil {
		return nil, err
	}
	if p.tok.kind == endToken {
		return nil, p.unexpected(`"="`, shape)
	}
	p.take()
	q := &Equation{Text: p.lex.text, Dependent: left}
	if err := p.terms(q); err != nil {
		return nil, err
	}
	return q, nil
}

// terms reads the right side to the end of the text.
func (p *parser) terms(q *Equation) *SyntaxError {
	taken := map[string]string{} // canonical name -> the same with quotes
	for {
		if err := p.startOfTerm(); err != nil {
			return err
		}
		term, err := p.product()
		if err != nil {
			return err
		}
		if p.tok.kind != endToken && !p.isSign("+") && !p.isSign("-") && !p.isSign("=") {
			return p.afterOperand("an operator or the end")
		}
		if err := p.checkTerm(term.expr, q.Dependent, taken); err != nil {
			return err
		}
		q.Terms = append(q.Terms, term.expr)
		switch {
		case p.tok.kind == endToken:
			return nil
		case p.isSign("+"):
			p.take()
		case p.isSign("-"):
			return p.unexpected(`"+"`, "join terms with +, a coefficient finds its own sign; one regressor that is a difference stands in parentheses, as in (age-school)")
		default:
			return p.unexpected(`"+" or the end`, "write one = in the equation")
		}
	}
}

// startOfTerm refuses what cannot start a term with a word on why.
func (p *parser) startOfTerm() *SyntaxError {
	switch {
	case p.tok.kind == endToken:
		return p.unexpected("a term", "write a term here or delete the sign before it")
	case p.isSign("+"):
		return p.unexpected("a term", "write a term between the two signs or delete one of them")
	case p.isSign("-"):
		return p.unexpected("a term", "write the term without the minus, a coefficient finds its own sign")
	case p.isSign("="):
		return p.unexpected("a term", "write one = in the equation")
	}
	return nil
}

func (p *parser) checkDependent(e *Expr) *SyntaxError {
	if len(e.Columns()) == 0 {
		return p.fail(e.Pos, figures.Quoted(p.lex.text[e.Pos:e.End]), "a dependent variable with a column in it", "write the dependent variable before the =")
	}
	return p.checkCategories(e, false)
}

func (p *parser) checkTerm(e, dependent *Expr, taken map[string]string) *SyntaxError {
	source := figures.Quoted(p.lex.text[e.Pos:e.End])
	if len(e.Columns()) == 0 {
		return p.fail(e.Pos, "the constant "+source, "a term with a column in it",
			"delete it, the constant is in the model by itself; constant: false in the study leaves it out")
	}
	if err := p.checkCategories(e, true); err != nil {
		return err
	}
	name, precise := e.String(), e.quotedString()
	if precise == dependent.quotedString() {
		return p.fail(e.Pos, "the dependent variable "+source+" among the terms", "other columns", "delete this term")
	}
	if before, ok := taken[name]; ok {
		if before == precise {
			return p.fail(e.Pos, source+" a second time", "each term once", "delete one of the two")
		}
		return p.fail(e.Pos, source, "a term with a name of its own",
			"rename the column in the data, because another term is also called "+name)
	}
	taken[name] = precise
	return nil
}

// checkCategories allows categories as a term (whole is true) or as a factor of a product that is a term.
func (p *parser) checkCategories(e *Expr, whole bool) *SyntaxError {
	if e.Kind == Call && e.Text == "categories" {
		if whole {
			return nil
		}
		return p.fail(e.Pos, figures.Quoted("categories"), "a number", "write categories(...) as a term of its own or as a factor of a product")
	}
	for _, arg := range e.Args {
		if err := p.checkCategories(arg, whole && e.Kind == Product); err != nil {
			return err
		}
	}
	return nil
}

func (p *parser) singleExpr() (*Expr, *SyntaxError) {
	if p.tok.kind == endToken {
		return nil, p.unexpected("an expression", "write a column name or an expression such as area^2")
	}
	e, err := p.numericSum()
	if err != nil {
		return nil, err
	}
	if p.tok.kind != endToken {
		if p.isSign("=") {
			return nil, p.unexpected("an operator or the end", "write only one expression here, without =")
		}
		return nil, p.afterOperand("an operator or the end")
	}
	return e, p.checkCategories(e, true)
}

// numericSum reads a sum that must be a number.
func (p *parser) numericSum() (*Expr, *SyntaxError) {
	s, err := p.sum()
	if err != nil {
		return nil, err
	}
	return p.number(s)
}

// number returns the expression of a part, or an error when it is a test.
func (p *parser) number(s part) (*Expr, *SyntaxError) {
	if s.test == nil {
		return s.expr, nil
	}
	return nil, p.fail(s.test.Pos, "a comparison", "a number or a column", "write and or or between two comparisons")
}

// sum reads terms joined by + and -, the first with or without a minus.
func (p *parser) sum() (part, *SyntaxError) {
	start, negative := p.tok.pos, false
	if p.isSign("-") {
		negative = true
		p.take()
	}
	left, err := p.product()
	if err != nil {
		return part{}, err
	}
	if negative {
		e, err := p.number(left)
		if err != nil {
			return part{}, err
		}
		left = part{expr: &Expr{Kind: Negative, Args: []*Expr{e}, Pos: start, End: e.End}}
	}
	return p.chain(left, "+", "-", Sum, Difference, p.product)
}

// product reads factors joined by * and /.
func (p *parser) product() (part, *SyntaxError) {
	left, err := p.factor()
	if err != nil {
		return part{}, err
	}
	return p.chain(left, "*", "/", Product, Ratio, p.factor)
}

// chain folds operands joined by one of two signs from left to right.
func (p *parser) chain(left part, first, second string, firstKind, secondKind Kind, operand func() (part, *SyntaxError)) (part, *SyntaxError) {
	for count := 1; p.isSign(first) || p.isSign(second); count++ {
		if count >= maxChain {
			return part{}, p.fail(p.tok.pos, fmt.Sprintf("more than %d operands", maxChain), "a shorter expression", "write a shorter expression")
		}
		kind := firstKind
		if p.isSign(second) {
			kind = secondKind
		}
		a, err := p.number(left)
		if err != nil {
			return part{}, err
		}
		p.take()
		right, err := operand()
		if err != nil {
			return part{}, err
		}
		b, err := p.number(right)
		if err != nil {
			return part{}, err
		}
		left = part{expr: &Expr{Kind: kind, Args: []*Expr{a, b}, Pos: a.Pos, End: b.End}}
	}
	return left, nil
}

// factor reads an atom and its power.
func (p *parser) factor() (part, *SyntaxError) {
	base, err := p.atom()
	if err != nil || !p.isSign("^") {
		return base, err
	}
	e, err := p.number(base)
	if err != nil {
		return part{}, err
	}
	p.take()
	power, err := p.whole()
	if err != nil {
		return part{}, err
	}
	if p.isSign("^") {
		return part{}, p.afterOperand("an operator")
	}
	if power == 1 {
		return part{expr: e}, nil
	}
	return part{expr: &Expr{Kind: Power, Power: power, Args: []*Expr{e}, Pos: e.Pos, End: p.last.end}}, nil
}

// whole reads the number after ^.
func (p *parser) whole() (int, *SyntaxError) {
	const expected = "a whole power of at least 1"
	switch {
	case p.isSign("-"):
		return 0, p.unexpected(expected, "write a ratio for a negative power, as in 1/area")
	case p.tok.kind != numberToken:
		return 0, p.unexpected(expected, "write digits after ^, as in area^2")
	}
	if strings.Trim(p.tok.text, "0123456789") != "" {
		return 0, p.unexpected(expected, "write a whole power, or sqrt(...) for a square root")
	}
	value, err := strconv.Atoi(p.tok.text)
	if len(p.tok.text) > maxWhole || err != nil {
		return 0, p.unexpected(fmt.Sprintf("a power of at most %d digits", maxWhole), "write a smaller power")
	}
	if value == 0 {
		return 0, p.unexpected(expected, "delete the term, a power of 0 is the constant")
	}
	p.take()
	return value, nil
}

// atom reads a name, a number, a call or something in parentheses.
func (p *parser) atom() (part, *SyntaxError) {
	switch {
	case p.isSign("("):
		return p.grouped()
	case p.tok.kind == nameToken && p.lex.condition && slices.Contains(conditionWords, p.tok.text):
		return part{}, p.misplacedWord()
	case p.tok.kind == nameToken:
		t := p.take()
		if p.isSign("(") {
			e, err := p.call(t)
			return part{expr: e}, err
		}
		return part{expr: &Expr{Kind: Name, Text: t.text, Pos: t.pos, End: t.end}}, nil
	case p.tok.kind == quotedToken:
		t := p.take()
		return part{expr: &Expr{Kind: Name, Text: t.text, Pos: t.pos, End: t.end}, quoted: true}, nil
	case p.tok.kind == numberToken:
		t := p.take()
		return part{expr: &Expr{Kind: Number, Text: t.text, Value: t.value, Pos: t.pos, End: t.end}}, nil
	}
	return part{}, p.noOperand()
}

// noOperand is the error where a name or a number should start.
func (p *parser) noOperand() *SyntaxError {
	const expected = "a column name, a number or a parenthesis"
	switch {
	case p.tok.kind == endToken:
		return p.unexpected(expected, "write what is missing at the end")
	case p.isSign("-"):
		return p.unexpected(expected, "write parentheses around a negative number, as in (-2)")
	case p.isSign(")"):
		return p.unexpected(expected, "write something before this parenthesis or delete it")
	}
	return p.unexpected(expected, "write a column name or a number before this sign, or delete it")
}

// grouped reads what stands in parentheses; its place includes them.
func (p *parser) grouped() (part, *SyntaxError) {
	open := p.tok
	if err := p.enter(open.pos); err != nil {
		return part{}, err
	}
	defer p.leave()
	p.take()
	inner, err := p.inside()
	if err != nil {
		return part{}, err
	}
	if err := p.closing(open); err != nil {
		return part{}, err
	}
	if inner.test != nil {
		inner.test.Pos, inner.test.End = open.pos, p.last.end
		return inner, nil
	}
	inner.expr.Pos, inner.expr.End = open.pos, p.last.end
	return inner, nil
}

func (p *parser) inside() (part, *SyntaxError) {
	if p.lex.condition {
		return p.alternatives()
	}
	return p.sum()
}

// closing takes the parenthesis that closes open.
func (p *parser) closing(open token) *SyntaxError {
	if p.isSign(")") {
		p.take()
		return nil
	}
	if p.tok.kind == endToken || p.isSign("=") && !p.lex.condition {
		return p.fail(open.pos, "a parenthesis that is not closed", `a ")" that closes it`, "write the missing ) or delete this (")
	}
	return p.afterOperand(`an operator or ")"`)
}

// call reads the arguments of a function whose name was just taken.
func (p *parser) call(name token) (*Expr, *SyntaxError) {
	if !slices.Contains(functions, name.text) {
		return nil, p.unknownFunction(name)
	}
	if name.text == "categories" && p.lex.condition {
		return nil, p.fail(name.pos, figures.Quoted(name.text), "a column or a number", "compare the column itself, as in district = \"North\"")
	}
	open := p.tok
	if err := p.enter(open.pos); err != nil {
		return nil, err
	}
	defer p.leave()
	p.take()
	e := &Expr{Kind: Call, Text: name.text, Pos: name.pos}
	var err *SyntaxError
	if name.text == "categories" {
		err = p.categoriesArguments(e)
	} else {
		err = p.oneArgument(e)
	}
	if err != nil {
		return nil, err
	}
	if err := p.closing(open); err != nil {
		return nil, err
	}
	e.End = p.last.end
	return e, nil
}

func (p *parser) oneArgument(e *Expr) *SyntaxError {
	if p.isSign(")") {
		return p.unexpected("what "+e.Text+" is taken of", "write a column or an expression between the parentheses, as in "+e.Text+"(area)")
	}
	arg, err := p.numericSum()
	if err != nil {
		return err
	}
	e.Args = []*Expr{arg}
	if p.isSign(",") {
		return p.unexpected(`")"`, "write "+e.Text+" with one argument")
	}
	return nil
}

// categoriesArguments reads a column and, after a comma, the base level.
func (p *parser) categoriesArguments(e *Expr) *SyntaxError {
	if p.tok.kind != nameToken && p.tok.kind != quotedToken {
		return p.unexpected("a column name", "write categories with a column, as in categories(district)")
	}
	t := p.take()
	e.Args = []*Expr{{Kind: Name, Text: t.text, Pos: t.pos, End: t.end}}
	if p.isSign(")") {
		return nil
	}
	if !p.isSign(",") {
		return p.unexpected(`"," or ")"`, "write categories of one column; make a column of its own for an expression")
	}
	p.take()
	base, err := p.baseLevel()
	if err != nil {
		return err
	}
	e.Base, e.HasBase = base, true
	if p.isSign(",") {
		return p.unexpected(`")"`, "write one base level")
	}
	return nil
}

func (p *parser) baseLevel() (string, *SyntaxError) {
	sign := ""
	if p.isSign("-") {
		sign = "-"
		p.take()
		if p.tok.kind != numberToken {
			return "", p.unexpected("a number", "write the base level as a number or in quotes")
		}
	}
	switch p.tok.kind {
	case quotedToken, numberToken:
		return sign + p.take().text, nil
	case nameToken:
		return "", p.unexpected("a base level in quotes", fmt.Sprintf("write %q in quotes", p.tok.text))
	}
	return "", p.unexpected("a base level", `write the base level in quotes, as in categories(district, "North")`)
}

// unknownFunction is the error for a word before a parenthesis that is not a function of this version.
func (p *parser) unknownFunction(name token) *SyntaxError {
	const expected = "one of the functions ln, log10, sqrt, exp, abs, categories"
	if slices.Contains(laterFunctions, name.text) {
		return p.fail(name.pos, figures.Quoted(name.text), expected,
			name.text+" is not available in this version, because it needs time and unit keys; add the column to the data instead")
	}
	advice := fmt.Sprintf("write %s*(...) for a product", name.text)
	if near := Nearest(name.text, functions); strings.EqualFold(name.text, "log") {
		advice = "write ln for the natural logarithm or log10 for the decimal one"
	} else if len(near) > 0 {
		advice = "write " + strings.Join(near, " or ") + ", or " + name.text + "*(...) for a product"
	}
	if p.lex.condition && (strings.EqualFold(name.text, "and") || strings.EqualFold(name.text, "or") || strings.EqualFold(name.text, "not")) {
		advice = "write " + strings.ToLower(name.text) + " in small letters"
	}
	return p.fail(name.pos, "the unknown function "+figures.Quoted(name.text), expected, advice)
}

// isNumberText reports whether s can stand without quotes as a base level.
func isNumberText(s string) bool {
	digits := strings.TrimPrefix(s, "-")
	l := lexer{text: digits}
	if digits == "" || !isDigit(rune(digits[0])) && digits[0] != '.' {
		return false
	}
	t := l.next()
	if t.kind != numberToken || t.end != len(digits) {
		return false
	}
	_, err := doubledouble.Parse(digits)
	return err == nil
}
