package equation

import (
	"slices"
	"strings"
)

// conditionWords are reserved in a condition; a column of such a name is written in quotes there.
var conditionWords = []string{"and", "or", "not", "in"}

// Condition is a test of a row: the clauses joined by and.
type Condition struct {
	Text    string    // as given
	Clauses []*Clause // at least one, in written order
}

// Clause is one part of a condition, between two words "and" that are in no parentheses. A condition whose outermost
// word is "or" or "not" is one clause.
type Clause struct {
	Text string // as written, without blanks around it
	Test *Test
}

// TestKind says what a Test is.
type TestKind int

// The kinds of test.
const (
	Compare TestKind = iota + 1 // Left Op Right
	Member                      // Left is one of Items, or none of them when Negated
	Every                       // all of Parts
	Any                         // at least one of Parts
	Not                         // Parts[0] does not hold
)

// Test is a node of a condition.
type Test struct {
	Kind        TestKind
	Op          string // Compare: = != < <= > >=
	Left, Right Side   // Compare both, Member only Left
	Items       []Side // Member
	Negated     bool   // Member
	Parts       []*Test
	Pos, End    int // byte offsets in the source text
}

// Side is an operand of a comparison. A quoted text on its own is a column or a text value; Compile decides
// which, by what the columns are.
type Side struct {
	Expr   *Expr // nil where there is none
	Quoted bool  // Expr is of kind Name and stands in quotes on its own
}

// ParseCondition reads a condition on rows, as in `year >= 1990 and district in ("North", "South")`.
//
// "and" binds more tightly than "or", and "not" more tightly than both. It returns a *SyntaxError when the text is
// not a condition.
func ParseCondition(text string) (*Condition, error) {
	p, err := newParser(text, true)
	if err != nil {
		return nil, err
	}
	test, wrong := p.wholeCondition()
	if wrong != nil {
		return nil, wrong
	}
	c := &Condition{Text: text}
	parts := []*Test{test}
	if test.Kind == Every {
		parts = test.Parts
	}
	for _, part := range parts {
		c.Clauses = append(c.Clauses, &Clause{Text: strings.TrimSpace(text[part.Pos:part.End]), Test: part})
	}
	return c, nil
}

func (p *parser) wholeCondition() (*Test, *SyntaxError) {
	if p.tok.kind == endToken {
		return nil, p.unexpected("a condition", "write a condition such as year >= 1990")
	}
	s, err := p.alternatives()
	if err != nil {
		return nil, err
	}
	test, err := p.test(s)
	if err != nil {
		return nil, err
	}
	if p.tok.kind != endToken {
		return nil, p.afterCondition()
	}
	return test, nil
}

// afterCondition is the error for a token that cannot follow a complete condition.
func (p *parser) afterCondition() *SyntaxError {
	lower := strings.ToLower(p.tok.text)
	switch {
	case p.tok.kind == nameToken && p.tok.text != lower && slices.Contains(conditionWords, lower):
		return p.unexpected("and, or or the end", "write "+lower+" in small letters")
	case p.tok.kind == signToken && isComparison(p.tok.text):
		return p.unexpected("and, or or the end", "write two comparisons, as in 1 < area and area < 9")
	case p.isWord("in") || p.isWord("not"):
		return p.unexpected("and, or or the end", "write and or or between two conditions")
	}
	return p.afterOperand("and, or or the end")
}

// test returns the test of a part, or an error when the part is a number.
func (p *parser) test(s part) (*Test, *SyntaxError) {
	if s.test != nil {
		return s.test, nil
	}
	lower := strings.ToLower(p.tok.text)
	if p.tok.kind == nameToken && p.tok.text != lower && slices.Contains(conditionWords, lower) {
		return nil, p.unexpected("a comparison", "write "+lower+" in small letters")
	}
	if p.isSign(",") || p.tok.kind == nameToken && !slices.Contains(conditionWords, p.tok.text) || p.tok.kind == quotedToken ||
		p.tok.kind == numberToken || p.isSign("(") {
		return nil, p.afterOperand("a comparison")
	}
	return nil, p.unexpected("a comparison", "write one of = != < <= > >= or in (...) after the column")
}

// alternatives reads conjunctions joined by or; alone it may be a number, as in (area+1).
func (p *parser) alternatives() (part, *SyntaxError) {
	return p.joined("or", Any, p.conjunction)
}

func (p *parser) conjunction() (part, *SyntaxError) {
	return p.joined("and", Every, p.single)
}

func (p *parser) joined(word string, kind TestKind, operand func() (part, *SyntaxError)) (part, *SyntaxError) {
	first, err := operand()
	if err != nil || !p.isWord(word) {
		return first, err
	}
	left, err := p.test(first)
	if err != nil {
		return part{}, err
	}
	all := &Test{Kind: kind, Parts: []*Test{left}, Pos: left.Pos}
	for p.isWord(word) {
		p.take()
		next, err := operand()
		if err != nil {
			return part{}, err
		}
		test, err := p.test(next)
		if err != nil {
			return part{}, err
		}
		all.Parts = append(all.Parts, test)
		all.End = test.End
	}
	return part{test: all}, nil
}

// single reads a negation or a comparison.
func (p *parser) single() (part, *SyntaxError) {
	if !p.isWord("not") {
		return p.comparison()
	}
	t := p.take()
	if err := p.enter(t.pos); err != nil {
		return part{}, err
	}
	defer p.leave()
	inner, err := p.single()
	if err != nil {
		return part{}, err
	}
	test, err := p.test(inner)
	if err != nil {
		return part{}, err
	}
	return part{test: &Test{Kind: Not, Parts: []*Test{test}, Pos: t.pos, End: test.End}}, nil
}

func isComparison(sign string) bool {
	return sign == "=" || sign == "!=" || sign == "<" || sign == "<=" || sign == ">" || sign == ">="
}

func (p *parser) comparison() (part, *SyntaxError) {
	left, err := p.sum()
	if err != nil {
		return part{}, err
	}
	switch {
	case p.tok.kind == signToken && isComparison(p.tok.text):
		if left.test != nil {
			return part{}, p.afterCondition()
		}
		op := p.take().text
		if err := p.noSide(); err != nil {
			return part{}, err
		}
		right, err := p.sum()
		if err != nil {
			return part{}, err
		}
		if right.test != nil {
			_, err := p.number(right)
			return part{}, err
		}
		if p.tok.kind == signToken && isComparison(p.tok.text) {
			return part{}, p.afterCondition()
		}
		return part{test: &Test{Kind: Compare, Op: op, Left: side(left), Right: side(right), Pos: left.expr.Pos, End: right.expr.End}}, nil
	case p.isWord("in") || p.isWord("not"):
		return p.membership(left)
	}
	return left, nil
}

// noSide refuses an end or a reserved word after a comparison sign.
func (p *parser) noSide() *SyntaxError {
	if p.tok.kind == endToken || p.isSign(")") {
		return p.unexpected("what the column is compared with", "write a number, a column or a quoted text after "+p.last.text)
	}
	return nil
}

func side(s part) Side { return Side{Expr: s.expr, Quoted: s.quoted} }

// membership reads [not] in ( ... ) after its left side.
func (p *parser) membership(left part) (part, *SyntaxError) {
	if left.test != nil {
		return part{}, p.afterCondition()
	}
	m := &Test{Kind: Member, Left: side(left), Pos: left.expr.Pos}
	if p.isWord("not") {
		m.Negated = true
		p.take()
		if !p.isWord("in") {
			return part{}, p.unexpected(`"in"`, "write not in (...), or and not between two conditions")
		}
	}
	p.take()
	open := p.tok
	if !p.isSign("(") {
		return part{}, p.unexpected(`"("`, `write the values in parentheses, as in district in ("North", "South")`)
	}
	p.take()
	for {
		item, err := p.item()
		if err != nil {
			return part{}, err
		}
		m.Items = append(m.Items, item)
		if !p.isSign(",") {
			break
		}
		p.take()
	}
	if !p.isSign(")") {
		if p.tok.kind == endToken {
			return part{}, p.fail(open.pos, "a parenthesis that is not closed", `a ")" that closes it`, "write the missing ) after the last value")
		}
		return part{}, p.unexpected(`"," or ")"`, "write commas between the values")
	}
	m.End = p.take().end
	return part{test: m}, nil
}

// item reads one value of a list: a quoted text or a number with or without a minus.
func (p *parser) item() (Side, *SyntaxError) {
	start, negative := p.tok.pos, false
	if p.isSign("-") {
		negative = true
		p.take()
	}
	switch {
	case p.tok.kind == numberToken:
		t := p.take()
		e := &Expr{Kind: Number, Text: t.text, Value: t.value, Pos: t.pos, End: t.end}
		if negative {
			e = &Expr{Kind: Negative, Args: []*Expr{e}, Pos: start, End: t.end}
		}
		return Side{Expr: e}, nil
	case negative:
		return Side{}, p.unexpected("a number", "write a number after the minus")
	case p.tok.kind == quotedToken:
		t := p.take()
		return Side{Expr: &Expr{Kind: Name, Text: t.text, Pos: t.pos, End: t.end}, Quoted: true}, nil
	case p.tok.kind == nameToken:
		return Side{}, p.unexpected("a number or a quoted text", "write the text in quotes, "+quote(p.tok.text))
	}
	return Side{}, p.unexpected("a number or a quoted text", "write a value here or delete the comma before it")
}

// misplacedWord is the error for and, or, not or in where a column should stand.
func (p *parser) misplacedWord() *SyntaxError {
	if p.tok.text == "not" {
		return p.unexpected("a column name or a number", "write not before a whole comparison, as in not area > 9")
	}
	return p.unexpected("a column name or a number",
		"write what is missing before "+p.tok.text+", or "+quote(p.tok.text)+" in quotes if that is a column")
}

// Columns returns the distinct names that are or may be columns, in order of appearance: plain names, quoted names in
// arithmetic and those left of a comparison. A quoted text on the right or in a list is not among them.
func (c *Condition) Columns() []string {
	var names []string
	add := func(s Side, value bool) {
		if s.Expr == nil || value && s.Quoted {
			return
		}
		for _, n := range s.Expr.Columns() {
			if !slices.Contains(names, n) {
				names = append(names, n)
			}
		}
	}
	for _, clause := range c.Clauses {
		clause.Test.walk(func(t *Test) {
			add(t.Left, false)
			add(t.Right, true)
		})
	}
	return names
}

func (t *Test) walk(visit func(*Test)) {
	visit(t)
	for _, part := range t.Parts {
		part.walk(visit)
	}
}

// String returns the canonical text of c. ParseCondition of it gives a condition with the same String.
func (c *Condition) String() string {
	parts := make([]string, len(c.Clauses))
	for i, clause := range c.Clauses {
		inner := clause.Test.Kind == Every || clause.Test.Kind == Any && len(c.Clauses) > 1
		parts[i] = grouped(clause.Test.text(), inner)
	}
	return strings.Join(parts, " and ")
}

func grouped(s string, yes bool) string {
	if yes {
		return "(" + s + ")"
	}
	return s
}

func (t *Test) text() string {
	switch t.Kind {
	case Compare:
		return t.Left.text() + " " + t.Op + " " + t.Right.text()
	case Member:
		items := make([]string, len(t.Items))
		for i, item := range t.Items {
			items[i] = item.text()
		}
		word := " in ("
		if t.Negated {
			word = " not in ("
		}
		return t.Left.text() + word + strings.Join(items, ", ") + ")"
	case Not:
		return "not " + grouped(t.Parts[0].text(), t.Parts[0].Kind == Every || t.Parts[0].Kind == Any)
	}
	word := " and "
	if t.Kind == Any {
		word = " or "
	}
	parts := make([]string, len(t.Parts))
	for i, part := range t.Parts {
		parts[i] = grouped(part.text(), part.Kind == Every || part.Kind == Any)
	}
	return strings.Join(parts, word)
}

func (s Side) text() string {
	if s.Quoted {
		return quote(s.Expr.Text)
	}
	var b strings.Builder
	printer{out: &b, reserved: conditionWords}.expr(s.Expr)
	return b.String()
}
