package equation

import (
	"errors"
	"fmt"
	"math/big"
	"slices"
	"strings"
	"testing"
)

// The expected values in this file are read off the grammar in the package comment by hand, unless a row names
// another source.

// tree prints e with every operand in parentheses, so that a test sees the structure.
func tree(e *Expr) string {
	args := make([]string, len(e.Args))
	for i, a := range e.Args {
		args[i] = tree(a)
	}
	switch e.Kind {
	case Name:
		return "[" + e.Text + "]"
	case Number:
		return e.Text
	case Call:
		if e.HasBase {
			args = append(args, "base "+e.Base)
		}
		return e.Text + "(" + strings.Join(args, " ") + ")"
	case Power:
		return fmt.Sprintf("power(%s %d)", args[0], e.Power)
	}
	names := map[Kind]string{Product: "product", Ratio: "ratio", Sum: "sum", Difference: "difference", Negative: "negative"}
	return names[e.Kind] + "(" + strings.Join(args, " ") + ")"
}

func TestParseExprStructure(t *testing.T) {
	for _, c := range []struct{ text, tree, name string }{
		{"area", "[area]", "area"},
		{`"floor area"`, "[floor area]", "floor area"},
		{`'floor area'^2`, "power([floor area] 2)", `"floor area"^2`},
		{`"say ""a"""`, `[say "a"]`, `say "a"`},
		{`'it''s' * x`, `product([it's] [x])`, `"it's"*x`},
		{`"say ""a""" * x`, `product([say "a"] [x])`, `"say ""a"""*x`},
		{`"ln" * x`, "product([ln] [x])", "ln*x"},
		{"a*b*c", "product(product([a] [b]) [c])", "a*b*c"},
		{"a*(b*c)", "product([a] product([b] [c]))", "a*b*c"},
		{"a/b*c", "product(ratio([a] [b]) [c])", "a/b*c"},
		{"a/(b*c)", "ratio([a] product([b] [c]))", "a/(b*c)"},
		{"a/b/c", "ratio(ratio([a] [b]) [c])", "a/b/c"},
		{"a/(b/c)", "ratio([a] ratio([b] [c]))", "a/(b/c)"},
		{"a*(b/c)", "product([a] ratio([b] [c]))", "a*(b/c)"},
		{"a*b^2", "product([a] power([b] 2))", "a*b^2"},
		{"(a*b)^2", "power(product([a] [b]) 2)", "(a*b)^2"},
		{"(a^2)^3", "power(power([a] 2) 3)", "(a^2)^3"},
		{"a^1", "[a]", "a"},
		{"((a))", "[a]", "a"},
		{"a-b-c", "difference(difference([a] [b]) [c])", "(a-b-c)"},
		{"a-(b-c)", "difference([a] difference([b] [c]))", "(a-(b-c))"},
		{"a+b*c", "sum([a] product([b] [c]))", "(a+b*c)"},
		{"(a+b)*c", "product(sum([a] [b]) [c])", "(a+b)*c"},
		{"area + 20*rooms", "sum([area] product(20 [rooms]))", "(area+20*rooms)"},
		{"-a^2", "negative(power([a] 2))", "(-a^2)"},
		{"(-a)^2", "power(negative([a]) 2)", "(-a)^2"},
		{"-a*b+c", "sum(negative(product([a] [b])) [c])", "(-a*b+c)"},
		{"exp(-a)", "exp(negative([a]))", "exp(-a)"},
		{"a*(-2)", "product([a] negative(2))", "a*(-2)"},
		{"a+(-b)", "sum([a] negative([b]))", "(a+(-b))"},
		{"-(-a)", "negative(negative([a]))", "(-(-a))"},
		{"ln(a/b)", "ln(ratio([a] [b]))", "ln(a/b)"},
		{"sqrt( abs( a ) )", "sqrt(abs([a]))", "sqrt(abs(a))"},
		{"log10(a)*exp(b)", "product(log10([a]) exp([b]))", "log10(a)*exp(b)"},
		{"categories(district)", "categories([district])", "categories(district)"},
		{`categories(district, 'North End')`, "categories([district] base North End)", `categories(district,"North End")`},
		{`categories(year, 1990)`, "categories([year] base 1990)", "categories(year,1990)"},
		{`categories(year, "1990")`, "categories([year] base 1990)", "categories(year,1990)"},
		{`categories(t, -1)`, "categories([t] base -1)", "categories(t,-1)"},
		{`categories(t, "-")`, "categories([t] base -)", `categories(t,"-")`},
		{"lag", "[lag]", "lag"},
		{"in*or", "product([in] [or])", "in*or"},
		{"1.50e3*a", "product(1.50e3 [a])", "1.50e3*a"},
		{".5*a", "product(.5 [a])", ".5*a"},
		{"préçis.é_1*日本", "product([préçis.é_1] [日本])", "préçis.é_1*日本"},
		{"e\u0301tat", "[e\u0301tat]", "e\u0301tat"},
		{"a\u00a0+\n\tb", "sum([a] [b])", "(a+b)"},
	} {
		t.Run(c.text, func(t *testing.T) {
			e, err := ParseExpr(c.text)
			if err != nil {
				t.Fatal(err)
			}
			if got := tree(e); got != c.tree {
				t.Errorf("tree: got %s, want %s", got, c.tree)
			}
			if got := e.String(); got != c.name {
				t.Errorf("name: got %s, want %s", got, c.name)
			}
		})
	}
}

func TestParseEquation(t *testing.T) {
	// The equation of the design document, without lag.
	text := `ln(rent) = area + rooms + area^2 + area*distance + age/income + district + (age - school) + "floor area"`
	q, err := Parse(text)
	if err != nil {
		t.Fatal(err)
	}
	want := `ln(rent) = area + rooms + area^2 + area*distance + age/income + district + (age-school) + "floor area"`
	if got := q.String(); got != want {
		t.Errorf("got %s, want %s", got, want)
	}
	if q.Text != text {
		t.Errorf("text: got %s", q.Text)
	}
	names := []string{"area", "rooms", "area^2", "area*distance", "age/income", "district", "(age-school)", "floor area"}
	for i, term := range q.Terms {
		if term.String() != names[i] {
			t.Errorf("term %d: got %s, want %s", i, term, names[i])
		}
	}
	if source := text[q.Terms[6].Pos:q.Terms[6].End]; source != "(age - school)" {
		t.Errorf("place of the difference: got %q", source)
	}
	if source := text[q.Terms[3].Pos:q.Terms[3].End]; source != "area*distance" {
		t.Errorf("place of the product: got %q", source)
	}
	if got := q.Terms[3].Columns(); !slices.Equal(got, []string{"area", "distance"}) {
		t.Errorf("columns: got %v", got)
	}
}

func TestColumnsAreDistinctAndInOrder(t *testing.T) {
	e, err := ParseExpr("b*a/ln(b+c)")
	if err != nil {
		t.Fatal(err)
	}
	if got := e.Columns(); !slices.Equal(got, []string{"b", "a", "c"}) {
		t.Errorf("got %v", got)
	}
}

func TestNumberKeepsDigits(t *testing.T) {
	e, err := ParseExpr("0.1234567890123456789012345*x")
	if err != nil {
		t.Fatal(err)
	}
	v := e.Args[0].Value
	// Reference: math/big with 200 bits.
	want, _, err := big.ParseFloat("0.1234567890123456789012345", 10, 200, big.ToNearestEven)
	if err != nil {
		t.Fatal(err)
	}
	got := new(big.Float).SetPrec(200).Add(big.NewFloat(v.Hi), big.NewFloat(v.Lo))
	gap, _ := new(big.Float).Sub(got, want).Float64()
	if gap > 1e-31 || gap < -1e-31 {
		t.Errorf("got %v, gap %g", v, gap)
	}
}

// marked are texts with the place of the error marked by the sign § before it, and a part of the message or advice.
var markedEquations = []struct{ marked, says string }{
	{"rent §~ area", "write = between"},
	{"rent §<- area", "write = between"},
	{"rent §:= area", "write = between"},
	{"rent §== area", "write one ="},
	{"area §-> rent", "dependent variable first"},
	{"y = a§:b", "write * for a product"},
	{"y = a §| b", "keys of their own"},
	{"y = a §% b", "write * for a product or / for a ratio"},
	{"y = a §& b", "write + between terms"},
	{"y = §@a", "plain word"},
	{"y = a§**2", "write ^ for a power"},
	{"y = §[a]", "round parentheses"},
	{"y = a + §{b}", "round parentheses"},
	{"y = a §; b", "one equation"},
	{"y = a §< b", "rows condition"},
	{"y §>= b", "rows condition"},
	{"y §!= b", "rows condition"},
	{"y = a §! b", "write not"},
	{"y = §`floor area`", "plain quotes"},
	{"y = §“floor area”", "plain quotes"},
	{"y = a§×b", "write * for a product"},
	{"y = a§²", "write ^2"},
	{"y = (a §− b)", "plain minus"},
	{"y = §_a", `"_area"`},
	{"y = §.a", "starts with a letter"},
	{"y = a §$ b", "in quotes"},
	{"y = a §\\ b", "in quotes"},
	{"y = a§\u200b + b", "an invisible sign"},
	{"y = §20rooms", "write 20*rooms for a product"},
	{"y = §2nd_floor + b", `"2nd_floor" in quotes`},
	{"y = §1.234.567*a", "no thousands separators"},
	{"y = §1e999*a", "smaller number"},
	{"y = a §- b", "join terms with +"},
	{"y = §-a", "without the minus"},
	{"y = a + §-b", "without the minus"},
	{"y = a*§-b", "(-2)"},
	{"y = §1 + a", "constant: false"},
	{"y = a + §0", "constant: false"},
	{"y = a + §ln(2)", "constant: false"},
	{"y = a + §(2*3)", "constant: false"},
	{"y = a §- 1", "join terms with +"},
	{"§", "write the dependent variable"},
	{"  §", "write the dependent variable"},
	{"y§", `expected "="`},
	{"y + a§", `expected "="`},
	{"§= a", "the dependent variable"},
	{"§5 = a", "with a column in it"},
	{"y = a §= b", "one ="},
	{"y = §= b", "one ="},
	{"y =§", "a term here"},
	{"y = a +§", "a term here"},
	{"y = a + §+ b", "between the two signs"},
	{"y = §+ b", "between the two signs"},
	{"y = a*§", "missing at the end"},
	{"y = a*§/b", "before this sign"},
	{"y = §*b", "before this sign"},
	{"y = ln(§)", "as in ln(area)"},
	{"y = (§)", "before this parenthesis"},
	{"y = a^§2.5", "whole power"},
	{"y = a^§1e2", "whole power"},
	{"y = a^§-1", "1/area"},
	{"y = a^§0", "a power of 0"},
	{"y = a^§n", "digits after ^"},
	{"y = a^§(2)", "digits after ^"},
	{"y = a^§1234567890", "at most 9 digits"},
	{"y = a^2§^3", "(area^2)^3"},
	{"y = §(a + b", "write the missing )"},
	{"y = ln§(a", "write the missing )"},
	{"§(y = a", "write the missing )"},
	{"y = a§)", "delete this parenthesis"},
	{"y§) = a", "delete this parenthesis"},
	{"y = §log(a)", "write ln for the natural logarithm"},
	{"y = §Ln(a)", "write ln"},
	{"y = §sqr(a)", "write sqrt"},
	{"y = §category(a)", "write categories"},
	{"y = §area(rooms)", "area*(...) for a product"},
	{"y = §lag(a, 1)", "not available in this version"},
	{"y = §change(a)", "not available in this version"},
	{"y = a§,b", "join terms with +"},
	{"y = 1§,5*a", "1.5"},
	{"1§,5*y = a", "1.5"},
	{"y = ln(1§,500*a)", "1500 without a thousands separator"},
	{"y = ln(a§, b)", "one argument"},
	{"y = (a§, b)", "join terms with +"},
	{`y = §"floor area`, "close the text"},
	{`y = a + §'floor "area"`, "close the text with '"},
	{`y = §"" + a`, "the name of a column"},
	{"y = floor §area", `"floor area" in quotes`},
	{"y = a §2", "an operator between"},
	{"y = 2 §a", "an operator between"},
	{"y = a §(b)", "unknown function"},
	{"y = (a)§(b)", "an operator between"},
	{"y = a + b + §a", "a second time"},
	{"y = a*b + §(a * b)", "a second time"},
	{"y = a + §a^1", "a second time"},
	{`y = a + §"a"`, "a second time"},
	{`y = "a*b" + §a*b`, "rename the column"},
	{"y = a + §y", "delete this term"},
	{"ln(y) = §ln( y )", "delete this term"},
	{"y = categories(§)", "categories(district)"},
	{"y = categories(§2)", "categories(district)"},
	{"y = categories(a§+b)", "categories of one column"},
	{"y = categories(a, §North)", `"North" in quotes`},
	{"y = categories(a, §)", "a base level"},
	{`y = categories(a, "b"§, "c")`, "one base level"},
	{"y = ln(§categories(a))", "a term of its own"},
	{"y = (a + §categories(b))", "a term of its own"},
	{"y = §categories(b)^2", "a term of its own"},
	{"y = a/§categories(b)", "a term of its own"},
	{"§categories(y) = a", "a term of its own"},
	{"y = a\n  + §~b", `expected "="`},
	{"y = §\xff", "UTF-8"},
	{"日本 = 語 §$", "in quotes"},
}

// unmark returns the text without its mark and the byte offset of the mark.
func unmark(t *testing.T, marked string) (string, int) {
	t.Helper()
	before, after, ok := strings.Cut(marked, "§")
	if !ok {
		t.Fatalf("no mark in %q", marked)
	}
	return before + after, len(before)
}

func checkSyntaxError(t *testing.T, err error, text string, pos int, says string) {
	t.Helper()
	var e *SyntaxError
	if !errors.As(err, &e) {
		t.Fatalf("got %v, want a *SyntaxError", err)
	}
	if e.Pos != pos {
		t.Errorf("place: got %d, want %d\n%v", e.Pos, pos, e)
	}
	if e.Text != text {
		t.Errorf("text: got %q", e.Text)
	}
	if e.Found == "" || e.Expected == "" || e.Advice == "" {
		t.Errorf("a part of the message is missing: %#v", e)
	}
	if !strings.Contains(e.Error(), says) {
		t.Errorf("the message does not hold %q:\n%v", says, e)
	}
	for _, part := range []string{e.Found, e.Expected, e.Advice} {
		if strings.HasSuffix(part, ".") {
			t.Errorf("a final stop: %q", part)
		}
	}
}

func TestEquationErrors(t *testing.T) {
	for _, c := range markedEquations {
		// "a (b)" reads as a call of the name before the blank, so its mark stands at the name.
		marked := strings.Replace(c.marked, "y = a §(b)", "y = §a (b)", 1)
		t.Run(c.marked, func(t *testing.T) {
			text, pos := unmark(t, marked)
			_, err := Parse(text)
			checkSyntaxError(t, err, text, pos, c.says)
		})
	}
}

func TestParseExprErrors(t *testing.T) {
	for _, c := range []struct{ marked, says string }{
		{"§", "column name"},
		{"area §= 2", "without ="},
		{"a §b", "an operator"},
		{"a+§", "missing at the end"},
		{"-§-a", "(-2)"},
	} {
		t.Run(c.marked, func(t *testing.T) {
			text, pos := unmark(t, c.marked)
			_, err := ParseExpr(text)
			checkSyntaxError(t, err, text, pos, c.says)
		})
	}
}

func TestCaretStandsUnderThePlace(t *testing.T) {
	long := strings.Repeat("a+", 100) + "$" + strings.Repeat("+b", 100)
	for _, c := range []struct{ name, text, want string }{
		{"plain", "rent ~ area", "character 6: found \"~\", expected \"=\"\n  rent ~ area\n       ^\n" + equalsAdvice},
		{"two bytes a sign", "é = ü $ b", "character 7:\n  é = ü $ b\n        ^"},
		{"two columns a sign", "日本 = 語 $", "character 8:\n  日本 = 語 $\n            ^"},
		{"mark without a column", "e\u0301 = a $", "character 8:\n  e\u0301 = a $\n        ^"},
		{"second line", "y = a\n + $ b", "character 10:\n   + $ b\n     ^"},
		{"tab", "y =\ta $", "character 7:\n  y = a $\n        ^"},
		{"end", "y = a +", "character 8:\n  y = a +\n         ^"},
		{"cut on both sides", "y = (" + long, "character 206:\n  ... " + strings.Repeat("a+", 30) + "$" +
			strings.Repeat("+b", 24) + "+ ...\n  " + strings.Repeat(" ", 64) + "^"},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, err := Parse(c.text)
			if err == nil {
				t.Fatal("no error")
			}
			first, rest, _ := strings.Cut(err.Error(), "\n")
			wantFirst, wantRest, _ := strings.Cut(c.want, "\n")
			if !strings.HasPrefix(first, wantFirst) || !strings.HasPrefix(rest, wantRest) {
				t.Errorf("got\n%v\nwant\n%s", err, c.want)
			}
		})
	}
}

func TestLimits(t *testing.T) {
	nested := func(n int) string { return "y = " + strings.Repeat("(", n) + "a" + strings.Repeat(")", n) }
	chain := func(sign string, n int) string { return "y = (a" + strings.Repeat(sign+"a", n-1) + ")" }
	wide := "y = a0"
	for i := 1; i < 3000; i++ {
		wide += fmt.Sprintf(" + a%d", i)
	}
	for _, c := range []struct {
		name, text string
		ok         bool
	}{
		{"depth at the limit", nested(maxDepth), true},
		{"depth over the limit", nested(maxDepth + 1), false},
		{"calls over the limit", "y = " + strings.Repeat("abs(", maxDepth+1) + "a" + strings.Repeat(")", maxDepth+1), false},
		{"far over the limit", "y = " + strings.Repeat("(", 90_000), false},
		{"sum at the limit", chain("+", maxChain), true},
		{"sum over the limit", chain("-", maxChain+1), false},
		{"product over the limit", chain("*", maxChain+1), false},
		{"3000 terms", wide, true},
		{"length at the limit", "y = " + strings.Repeat("a", maxText-4), true},
		{"length over the limit", "y = " + strings.Repeat("a", maxText-3), false},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, err := Parse(c.text)
			if (err == nil) != c.ok {
				t.Errorf("got %.200v", err)
			}
			if err != nil && len(err.Error()) > 1000 {
				t.Errorf("a message of %d bytes", len(err.Error()))
			}
		})
	}
}

func TestNearest(t *testing.T) {
	columns := []string{"area", "Rent", "rooms", "floor area", "age", "rent2", "distance"}
	for _, c := range []struct {
		word  string
		among []string
		want  []string
	}{
		{"rent", columns, []string{"Rent", "rent2"}},                         // case first, then one insertion
		{"aera", columns, []string{"area"}},                                  // one swap of neighbors
		{"floor_area", columns, []string{"floor area"}},                      // one replacement
		{"distnace", columns, []string{"distance"}},                          // one swap
		{"zzzzzz", columns, nil},                                             // nothing near
		{"area", columns, nil},                                               // the word itself is left out, no other is near
		{"x1", []string{"x2", "x3", "x4", "x5"}, []string{"x2", "x3", "x4"}}, // at most three, in order
		{"", []string{"a", "b"}, nil},
		{"kitten", []string{"sitting"}, nil},             // distance 3 (Wagner and Fischer's classic), over 7/3
		{"sunday", []string{"saturday"}, nil},            // distance 3, over 8/3
		{"abc", []string{"abd", "abd"}, []string{"abd"}}, // each name once
		{"ÄREA", []string{"ärea"}, []string{"ärea"}},
	} {
		if got := Nearest(c.word, c.among); !slices.Equal(got, c.want) {
			t.Errorf("%q: got %q, want %q", c.word, got, c.want)
		}
	}
}

func TestEditDistance(t *testing.T) {
	// By hand: the shortest lists of insertions, deletions, replacements and swaps.
	for _, c := range []struct {
		a, b string
		want int
	}{
		{"kitten", "sitting", 3}, {"sunday", "saturday", 3}, {"ab", "ba", 1}, {"ca", "abc", 3}, {"", "abc", 3}, {"abc", "", 3},
		{"abcd", "badc", 2}, {"same", "same", 0},
	} {
		if got := editDistance([]rune(c.a), []rune(c.b)); got != c.want {
			t.Errorf("%q to %q: got %d, want %d", c.a, c.b, got, c.want)
		}
	}
}

func FuzzParse(f *testing.F) {
	for _, c := range markedEquations {
		f.Add(strings.Replace(c.marked, "§", "", 1))
	}
	f.Add(`ln(rent) = area + area^2*("floor area"-2)^3/b + categories(district, "North") + exp(-x)`)
	f.Add(`y = a*(b*(c/d)) + (-a+(-b))*c`)
	f.Fuzz(func(t *testing.T, text string) {
		q, err := Parse(text)
		if err != nil {
			var e *SyntaxError
			if !errors.As(err, &e) || e.Pos < 0 || e.Pos > len(text) || e.Error() == "" {
				t.Fatalf("%q: %v", text, err)
			}
			return
		}
		printed := q.String()
		again, err := Parse(printed)
		if err != nil {
			t.Fatalf("%q printed as %q: %v", text, printed, err)
		}
		if again.String() != printed {
			t.Fatalf("%q printed as %q, then as %q", text, printed, again.String())
		}
		for i, term := range q.Terms {
			if term.Pos < 0 || term.End > len(text) || term.Pos >= term.End {
				t.Fatalf("%q: place %d to %d", text, term.Pos, term.End)
			}
			if !slices.Equal(term.Columns(), again.Terms[i].Columns()) {
				t.Fatalf("%q: columns %q and %q", text, term.Columns(), again.Terms[i].Columns())
			}
		}
	})
}

func ExampleParse() {
	q, err := Parse(`ln(rent) = area + area*distance + 'floor area'^2`)
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Println(q.Dependent)
	for _, term := range q.Terms {
		fmt.Println(term, term.Columns())
	}
	_, err = Parse("rent ~ area")
	fmt.Println(err)
	// Output:
	// ln(rent)
	// area [area]
	// area*distance [area distance]
	// "floor area"^2 [floor area]
	// character 6: found "~", expected "="
	//   rent ~ area
	//        ^
	// write = between the dependent variable and its terms, as in rent = area + rooms
}
