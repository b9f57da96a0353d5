package equation

import (
	"strings"
	"unicode"
	"unicode/utf8"

	"modelmend/fit/doubledouble"
	"modelmend/fit/figures"
)

type tokenKind int

const (
	endToken tokenKind = iota
	nameToken
	quotedToken
	numberToken
	signToken
	badToken
)

// token is one word or sign. text is the name without quotes, the digits, or the sign.
type token struct {
	kind     tokenKind
	text     string
	value    doubledouble.Number // numberToken
	pos, end int
	err      *SyntaxError // badToken
}

// found describes the token in a message.
func (t token) found(source string) string {
	if t.kind == endToken {
		return "the end"
	}
	if t.kind == quotedToken {
		return figures.Quoted(t.text)
	}
	return figures.Quoted(source[t.pos:t.end])
}

// lexer cuts text into tokens, one call of next at a time.
type lexer struct {
	text      string
	at        int
	condition bool // comparison signs are tokens
}

func (l *lexer) next() token {
	l.skipBlanks()
	if l.at >= len(l.text) {
		return token{kind: endToken, pos: len(l.text), end: len(l.text)}
	}
	r, _ := utf8.DecodeRuneInString(l.text[l.at:])
	switch {
	case unicode.IsLetter(r):
		return l.name()
	case r == '"' || r == '\'':
		return l.quoted(byte(r))
	case isDigit(r) || r == '.' && l.digitAt(l.at+1):
		return l.number()
	}
	return l.sign()
}

func (l *lexer) skipBlanks() {
	for l.at < len(l.text) {
		r, size := utf8.DecodeRuneInString(l.text[l.at:])
		if !unicode.IsSpace(r) {
			return
		}
		l.at += size
	}
}

func isDigit(r rune) bool { return r >= '0' && r <= '9' }

func (l *lexer) digitAt(i int) bool { return i < len(l.text) && isDigit(rune(l.text[i])) }

// inName reports whether r may stand in a plain name after its first letter.
func inName(r rune) bool {
	return unicode.IsLetter(r) || unicode.IsMark(r) || unicode.IsDigit(r) || r == '_' || r == '.'
}

// plainName reports whether s can be written without quotes.
func plainName(s string) bool {
	for i, r := range s {
		if i == 0 && !unicode.IsLetter(r) || !inName(r) || r == utf8.RuneError {
			return false
		}
	}
	return s != ""
}

func (l *lexer) name() token {
	start := l.at
	for l.at < len(l.text) {
		r, size := utf8.DecodeRuneInString(l.text[l.at:])
		if !inName(r) {
			break
		}
		l.at += size
	}
	return token{kind: nameToken, text: l.text[start:l.at], pos: start, end: l.at}
}

func (l *lexer) quoted(quote byte) token {
	start := l.at
	var b strings.Builder
	for i := start + 1; i < len(l.text); i++ {
		if l.text[i] != quote {
			b.WriteByte(l.text[i])
			continue
		}
		if i+1 < len(l.text) && l.text[i+1] == quote {
			b.WriteByte(quote)
			i++
			continue
		}
		l.at = i + 1
		if b.Len() == 0 && !l.condition {
			return l.bad(start, "an empty name", "a column name between the quotes", "write the name of a column between the quotes")
		}
		return token{kind: quotedToken, text: b.String(), pos: start, end: l.at}
	}
	return l.bad(start, "a quote that is not closed", "a second "+string(quote)+" after the text",
		"close the text with "+string(quote)+"; a quote inside a quoted text is doubled")
}

func (l *lexer) number() token {
	start := l.at
	i := l.skipDigits(start)
	if i < len(l.text) && l.text[i] == '.' {
		i = l.skipDigits(i + 1)
	}
	if i < len(l.text) && (l.text[i] == 'e' || l.text[i] == 'E') {
		j := i + 1
		if j < len(l.text) && (l.text[j] == '+' || l.text[j] == '-') {
			j++
		}
		if l.digitAt(j) {
			i = l.skipDigits(j)
		}
	}
	if r, _ := utf8.DecodeRuneInString(l.text[i:]); i < len(l.text) && inName(r) {
		return l.numberRunsOn(start, i)
	}
	l.at = i
	digits := l.text[start:i]
	value, err := doubledouble.Parse(digits)
	if err != nil {
		return l.bad(start, figures.Quoted(digits), "a number below 1.8e308", "write a smaller number")
	}
	return token{kind: numberToken, text: digits, value: value, pos: start, end: i}
}

// numberRunsOn is the error for digits that go on as a name, such as 20rooms or 2nd_floor.
func (l *lexer) numberRunsOn(start, i int) token {
	digits, end := l.text[start:i], i
	for end < len(l.text) {
		r, size := utf8.DecodeRuneInString(l.text[end:])
		if !inName(r) {
			break
		}
		end += size
	}
	word := l.text[start:end]
	if strings.HasPrefix(l.text[i:end], ".") {
		return l.bad(start, figures.Quoted(word), "a number with one point", "write one decimal point and no thousands separators")
	}
	return l.bad(start, figures.Quoted(word), "a number or a name that starts with a letter",
		"write "+digits+"*"+l.text[i:end]+" for a product, or \""+word+"\" in quotes if that is a column")
}

func (l *lexer) skipDigits(i int) int {
	for l.digitAt(i) {
		i++
	}
	return i
}

func (l *lexer) bad(pos int, found, expected, advice string) token {
	l.at = len(l.text)
	return token{kind: badToken, pos: pos, end: pos,
		err: &SyntaxError{Text: l.text, Pos: pos, Found: found, Expected: expected, Advice: advice}}
}

var equationSigns = []string{"+", "-", "*", "/", "^", "(", ")", ",", "="}
var conditionSigns = []string{"!=", "<=", ">=", "==", "<", ">", "+", "-", "*", "/", "^", "(", ")", ",", "="}

func (l *lexer) sign() token {
	rest := l.text[l.at:]
	for _, w := range strangeSigns {
		if strings.HasPrefix(rest, w.sign) && w.in.holds(l.condition) {
			return l.bad(l.at, figures.Quoted(w.sign), w.expected, w.advice)
		}
	}
	signs := equationSigns
	if l.condition {
		signs = conditionSigns
	}
	for _, s := range signs {
		if strings.HasPrefix(rest, s) {
			t := token{kind: signToken, text: s, pos: l.at, end: l.at + len(s)}
			if s == "==" {
				t.text = "="
			}
			l.at = t.end
			return t
		}
	}
	r, size := utf8.DecodeRuneInString(rest)
	if r == '_' || r == '.' || unicode.IsDigit(r) || unicode.IsMark(r) {
		return l.bad(l.at, figures.Quoted(rest[:size]), "a name that starts with a letter", `write the name in quotes, as in "_area"`)
	}
	if r == '!' {
		return l.bad(l.at, figures.Quoted("!"), "a name, a number or a comparison", "write not before a condition and != for not equal")
	}
	if !unicode.IsPrint(r) {
		return l.bad(l.at, "an invisible sign", "a visible one", "delete the sign")
	}
	return l.bad(l.at, figures.Quoted(rest[:size]), "a name, a number or one of + * / ^ ( )",
		`write a column name that holds other signs in quotes, as in "floor area"`)
}

// scope says where a strange sign is strange.
type scope int

const (
	anywhere scope = iota
	equationOnly
	conditionOnly
)

func (s scope) holds(condition bool) bool {
	return s == anywhere || (s == conditionOnly) == condition
}

const (
	equalsAdvice  = "write = between the dependent variable and its terms, as in rent = area + rooms"
	productAdvice = "write * for a product, as in area*distance"
	rowsAdvice    = "write one = in an equation; which rows are used is said in the rows condition"
	quoteAdvice   = `write plain quotes, as in "floor area"`
	aSign         = "one of + * / ^ ( )"
)

// strangeSigns are signs that people write and this language does not hold; longer ones stand before their parts.
var strangeSigns = []struct {
	sign, expected, advice string
	in                     scope
}{
	{"~", `"="`, equalsAdvice, equationOnly},
	{"<-", `"="`, equalsAdvice, equationOnly},
	{":=", `"="`, equalsAdvice, equationOnly},
	{"==", `"="`, "write one =, as in rent = area + rooms", equationOnly},
	{"->", `"+"`, "write the dependent variable first, as in rent = area + rooms", equationOnly},
	{"**", `"^"`, "write ^ for a power, as in area^2", anywhere},
	{"&&", `"and"`, "write and between two conditions", conditionOnly},
	{"&", `"and"`, "write and between two conditions", conditionOnly},
	{"||", `"or"`, "write or between two conditions", conditionOnly},
	{"|", `"or"`, "write or between two conditions", conditionOnly},
	{"<>", `"!="`, "write != for not equal", conditionOnly},
	{"=>", `">="`, "write >= for at least", conditionOnly},
	{"=<", `"<="`, "write <= for at most", conditionOnly},
	{"=!", `"!="`, "write != for not equal", conditionOnly},
	{"~", "a comparison", "write = for equal and != for not equal", conditionOnly},
	{":=", `"="`, "write = for equal", conditionOnly},
	{":", "a comparison", "write a range as year >= 1990 and year <= 1999", conditionOnly},
	{":", `"*"`, productAdvice, equationOnly},
	{"|", aSign, "write only terms in the equation; clusters, weights and fixed effects have keys of their own", equationOnly},
	{"%", aSign, "write * for a product or / for a ratio", anywhere},
	{"&", `"+" or "*"`, "write + between terms and * for a product", equationOnly},
	{"@", aSign, `write a column name as a plain word, or in quotes, as in "floor area"`, anywhere},
	{"!=", `"="`, rowsAdvice, equationOnly},
	{"<=", `"="`, rowsAdvice, equationOnly},
	{">=", `"="`, rowsAdvice, equationOnly},
	{"<", `"="`, rowsAdvice, equationOnly},
	{">", `"="`, rowsAdvice, equationOnly},
	{";", `"+"`, "write one equation, its terms joined with +", equationOnly},
	{";", `"," or "and"`, "write commas in a list and and between two conditions", conditionOnly},
	{"[", `"("`, "write round parentheses", anywhere},
	{"]", `")"`, "write round parentheses", anywhere},
	{"{", `"("`, "write round parentheses", anywhere},
	{"}", `")"`, "write round parentheses", anywhere},
	{"`", "a quote", quoteAdvice, anywhere},
	{"\u2018", "a plain quote", quoteAdvice, anywhere},
	{"\u2019", "a plain quote", quoteAdvice, anywhere},
	{"\u201C", "a plain quote", quoteAdvice, anywhere},
	{"\u201D", "a plain quote", quoteAdvice, anywhere},
	{"\u201E", "a plain quote", quoteAdvice, anywhere},
	{"\u00AB", "a plain quote", quoteAdvice, anywhere},
	{"\u00BB", "a plain quote", quoteAdvice, anywhere},
	{"\u00D7", `"*"`, productAdvice, anywhere},
	{"\u00B7", `"*"`, productAdvice, anywhere},
	{"\u22C5", `"*"`, productAdvice, anywhere},
	{"\u00F7", `"/"`, "write / for a ratio, as in age/income", anywhere},
	{"\u2212", `"-"`, "write a plain minus sign -", anywhere},
	{"\u2013", `"-"`, "write a plain minus sign -", anywhere},
	{"\u2014", `"-"`, "write a plain minus sign -", anywhere},
	{"\u00B2", `"^2"`, "write ^2 for a square, as in area^2", anywhere},
	{"\u00B3", `"^3"`, "write ^3 for a cube, as in area^3", anywhere},
	{"\u2260", `"!="`, "write != for not equal", conditionOnly},
	{"\u2264", `"<="`, "write <= for at most", conditionOnly},
	{"\u2265", `">="`, "write >= for at least", conditionOnly},
}
