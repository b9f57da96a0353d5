package equation

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"

	"modelmend/fit/doubledouble"
)

// The expected values are read off the grammar and the truth tables by hand, unless a row names another source.

func TestConditionText(t *testing.T) {
	for _, c := range []struct{ text, want string }{
		{"year >= 1990 and area < 400", "year >= 1990 and area < 400"},
		{`district=="North"`, `district = "North"`},
		{"a = 1 or b = 2 and c = 3", "a = 1 or (b = 2 and c = 3)"},
		{"(a = 1 or b = 2) and c = 3", "(a = 1 or b = 2) and c = 3"},
		{"((a = 1) and (b = 2))", "a = 1 and b = 2"},
		{"not a = 1 and b = 2", "not a = 1 and b = 2"},
		{"not (a = 1 and b = 2)", "not (a = 1 and b = 2)"},
		{"not not a = 1", "not not a = 1"},
		{"a in (1, -2,3.5)", "a in (1, -2, 3.5)"},
		{`d not in ('it''s', "b")`, `d not in ("it's", "b")`},
		{`"floor area"*2 > (b+1)^2`, `"floor area"*2 > (b+1)^2`},
		{"(a+b) > 3", "a+b > 3"},
		{"((a+b)*2) > 3", "(a+b)*2 > 3"},
		{"t < -5", "t < -5"},
		{"ln(a) > 0", "ln(a) > 0"},
		{`"and" = 1 and "or" > 2`, `"and" = 1 and "or" > 2`},
		{`"in"+1 > 2`, `"in"+1 > 2`},
		{`d = ""`, `d = ""`},
		{"a - b - 1 <= c / d", "a-b-1 <= c/d"},
	} {
		got, err := ParseCondition(c.text)
		if err != nil {
			t.Errorf("%s: %v", c.text, err)
			continue
		}
		if got.String() != c.want {
			t.Errorf("%s: got %s, want %s", c.text, got, c.want)
		}
	}
}

func TestClausesKeepTheirText(t *testing.T) {
	for _, c := range []struct {
		text string
		want []string
	}{
		{"year >= 1990  and  (a=1 or b = 2) and not c<3", []string{"year >= 1990", "(a=1 or b = 2)", "not c<3"}},
		{" a = 1 or b = 2 ", []string{"a = 1 or b = 2"}},
		{"(a = 1 and b = 2)", []string{"a = 1", "b = 2"}},
		{"(a = 1 and b = 2) and c = 3", []string{"(a = 1 and b = 2)", "c = 3"}},
	} {
		got, err := ParseCondition(c.text)
		if err != nil {
			t.Fatal(err)
		}
		var texts []string
		for _, clause := range got.Clauses {
			texts = append(texts, clause.Text)
		}
		if !slices.Equal(texts, c.want) {
			t.Errorf("%s: got %q, want %q", c.text, texts, c.want)
		}
	}
}

var markedConditions = []struct{ marked, says string }{
	{"§", "a condition such as"},
	{"area§", "one of = != < <= > >="},
	{"(area)§", "one of = != < <= > >="},
	{"area >§", "after >"},
	{"(area > §)", "after >"},
	{"area > §and b = 1", `"and" in quotes`},
	{"§and b = 1", "before and"},
	{"a = 1 and§", "missing at the end"},
	{"a = 1 and §or b = 2", "before or"},
	{"not§", "missing at the end"},
	{"a = §not b", "before a whole comparison"},
	{"1 < a §< 3", "two comparisons"},
	{"(a = 1) §= 2", "two comparisons"},
	{"a = §(b = 2)", "a comparison"},
	{"§(a = 1) + 2 > 3", "a comparison"},
	{"ln(a §= 1)", "close the parenthesis"},
	{"ln(a §and b) = 1", "close the parenthesis"},
	{"a = 1 §AND b = 2", "and in small letters"},
	{"a §IN (1)", "in in small letters"},
	{"a = 1 §&& b = 2", "write and"},
	{"a = 1 §& b = 2", "write and"},
	{"a = 1 §| b = 2", "write or"},
	{"a = 1 §|| b = 2", "write or"},
	{"§!a = 1", "write not"},
	{"a §<> 1", "!="},
	{"a §=> 1", ">="},
	{"a §=< 1", "<="},
	{"a §=! 1", "!="},
	{"a §~ 1", "write = for equal"},
	{"a §:= 1", "write = for equal"},
	{"a §≥ 1", ">="},
	{"a §≠ 1", "!="},
	{"a = 1§:3", "write a range"},
	{"a = 1 §; b = 2", "write commas in a list"},
	{"a §% 2 = 0", "ratio"},
	{"a = 1 §b = 2", "an operator"},
	{"a = 1 §in (2)", "write and"},
	{"a §b", `"a b" in quotes`},
	{"a = 1§)", "delete this parenthesis"},
	{"§(a = 1", "write the missing )"},
	{"a in §(1, 2", "write the missing )"},
	{"a in §1", "values in parentheses"},
	{"a in (§)", "a value here"},
	{"a in (1, §)", "a value here"},
	{"a in (1 §2)", "commas between"},
	{"a in (§North)", `"North"`},
	{"a in (-§\"b\")", "after the minus"},
	{"a not §= 1", "not in"},
	{"a > 1§,500", "1500 without"},
	{"a = §'b", "close the text"},
	{"§lag(a) = 1", "not available"},
	{"§categories(a) = 1", "compare the column itself"},
	{"§log(a) = 1", "ln"},
	{"a = 1 or §AND(b = 2)", "and in small letters"},
	{"a = §\xff", "UTF-8"},
}

func TestConditionErrors(t *testing.T) {
	for _, c := range markedConditions {
		t.Run(c.marked, func(t *testing.T) {
			text, pos := unmark(t, c.marked)
			_, err := ParseCondition(text)
			checkSyntaxError(t, err, text, pos, c.says)
		})
	}
}

func TestConditionDepth(t *testing.T) {
	for _, c := range []struct {
		name, text string
		ok         bool
	}{
		{"parentheses at the limit", strings.Repeat("(", maxDepth) + "a=1" + strings.Repeat(")", maxDepth), true},
		{"parentheses over the limit", strings.Repeat("(", maxDepth+1) + "a=1" + strings.Repeat(")", maxDepth+1), false},
		{"not at the limit", strings.Repeat("not ", maxDepth) + "a=1", true},
		{"not over the limit", strings.Repeat("not ", maxDepth+1) + "a=1", false},
		{"5000 clauses", "a=1" + strings.Repeat(" and a=1", 5000), true},
	} {
		if _, err := ParseCondition(c.text); (err == nil) != c.ok {
			t.Errorf("%s: got %.200v", c.name, err)
		}
	}
}

// study is a small invented table: four rows, with something missing in each column but year.
var study = map[string]Accessor{
	"year":       {Values: Numbers, Hi: []float64{1989, 1990, 1991, 1992}},
	"area":       {Values: Numbers, Hi: []float64{50, 60, math.NaN(), -1}},
	"floor area": {Values: Numbers, Hi: []float64{50, 61, 1, math.NaN()}},
	"share":      numbersOf("0.1", "0.3", "0.30", "0.1000000000000000055511151231257827"),
	"district":   {Values: Texts, Codes: []int32{0, 1, -1, 2}, Levels: []string{"North", "South", "it's"}},
	"home":       {Values: Texts, Codes: []int32{1, 0, 0, 0}, Levels: []string{"East", "North"}},
	"nothing":    {Values: NoValues},
	"North":      {Values: Numbers, Hi: []float64{1, 2, 3, 1992}},
}

func numbersOf(texts ...string) Accessor {
	a := Accessor{Values: Numbers}
	for _, s := range texts {
		v, err := doubledouble.Parse(s)
		if err != nil {
			panic(err)
		}
		a.Hi, a.Lo = append(a.Hi, v.Hi), append(a.Lo, v.Lo)
	}
	return a
}

func lookup(name string) (Accessor, bool) {
	a, ok := study[name]
	return a, ok
}

func TestEvaluation(t *testing.T) {
	for _, c := range []struct{ text, want string }{ // t true, f false, ? unknown, a letter a row
		{"year >= 1990", "fttt"},
		{"year > 1990", "fftt"},
		{"year < 1990", "tfff"},
		{"year <= 1990", "ttff"},
		{"year = 1990", "ftff"},
		{"year != 1990", "tftt"},
		{"1990 < year", "fftt"},
		{"area > 55", "ft?f"},
		{"not area > 55", "tf?t"},
		{"area > 55 and year >= 1990", "ft?f"},
		{"area > 55 and year = 1992", "ffff"},
		{"area > 55 or year = 1991", "fttf"},
		{"area > 55 or year = 1989", "tt?f"},
		{"area = \"floor area\"", "tf??"},
		{"area < \"floor area\"", "ft??"},
		{"\"floor area\" = 1", "fft?"},
		{"\"floor area\"-1 = area", "ft??"},
		{"area in (50, -1)", "tf?t"},
		{"area not in (50, -1)", "ft?f"},
		{"area in (50, \"floor area\")", "tf??"},
		{`district = "North"`, "tf?f"},
		{`district != "North"`, "ft?t"},
		{`"North" = district`, "error"}, // a column North exists, and it is a number
		{`"South" = district`, "ft?f"},
		{`district in ('it''s', "South")`, "ft?t"},
		{`district not in ("North")`, "ft?t"},
		{`district = "nowhere"`, "ff?f"},
		{`district = home`, "tf?f"},
		{`year = "North"`, "ffft"}, // a numeric column beside a number
		{"nothing = 1", "????"},
		{`nothing = "a"`, "????"},
		{"nothing+1 < year", "????"},
		{"nothing in (1)", "????"},
		{"nothing = 1 or year > 0", "tttt"},
		{"nothing = 1 and year < 0", "ffff"},
		{"ln(area) > 0", "tt??"}, // no logarithm of a negative number
		{"1/(year-1990) > 0", "f?tt"},
		{"sqrt(abs(area)) = 1", "ff?t"},
		{"exp(0*year) = 1", "tttt"},
		{"log10(year-1982) > 0.9", "fttt"}, // of 7, 8, 9 and 10, against 10^0.9 = 7.943
		{"share = 0.3", "fttf"},
		{"share = 0.1", "tfff"},   // the last row differs from 0.1 in the 18th digit
		{"share*3 = 0.3", "tfff"}, // 3 times the float64 next to 0.1 rounds to 0.30000000000000004
		{"share < 0.1000000000000000001", "tfff"},
		{"-area = 1", "ff?t"},
		{"area = -1", "ff?t"},
		{"(area+year)^2 > 0 and not (district = 'South' or year < 1990)", "ff?t"},
	} {
		t.Run(c.text, func(t *testing.T) {
			condition, err := ParseCondition(c.text)
			if err != nil {
				t.Fatal(err)
			}
			f, err := condition.Compile(lookup)
			if c.want == "error" {
				if err == nil {
					t.Fatal("no error")
				}
				return
			}
			if err != nil {
				t.Fatal(err)
			}
			var got strings.Builder
			for row := range 4 {
				got.WriteString(map[Truth]string{False: "f", True: "t", Unknown: "?"}[f(row)])
			}
			if got.String() != c.want {
				t.Errorf("got %s, want %s", got.String(), c.want)
			}
		})
	}
}

// TestThreeValuedLogic checks "and", "or" and "not" against the strong tables of Kleene (1938): with false = 0,
// unknown = 1/2 and true = 1 they are minimum, maximum and 1 - x.
func TestThreeValuedLogic(t *testing.T) {
	worth := map[Truth]int{False: 0, Unknown: 1, True: 2}
	constant := func(v Truth) func(int) Truth { return func(int) Truth { return v } }
	all := []Truth{False, True, Unknown}
	for _, a := range all {
		if got := worth[negated(constant(a))(0)]; got != 2-worth[a] {
			t.Errorf("not %v: got %d", a, got)
		}
		for _, b := range all {
			if got := worth[every([]func(int) Truth{constant(a), constant(b)})(0)]; got != min(worth[a], worth[b]) {
				t.Errorf("%v and %v: got %d", a, b, got)
			}
			if got := worth[anyOf([]func(int) Truth{constant(a), constant(b)})(0)]; got != max(worth[a], worth[b]) {
				t.Errorf("%v or %v: got %d", a, b, got)
			}
		}
	}
}

func TestCompileErrors(t *testing.T) {
	for _, c := range []struct{ marked, says string }{
		{"year > 1990 and §aera > 5", `unknown column "aera"`},
		{"year > §rea", "unknown column"},
		{"year+§aera > 5", "unknown column"},
		{"§aera in (1)", "unknown column"},
		{"district = §North_End", "in quotes"},
		{"district = §5", `"5" in quotes`},
		{"§5 = district", `"5" in quotes`},
		{"district = §year", "text column"},
		{"year = §\"1990\"", "1990 without quotes"},
		{"year in (1, §\"1990\")", "1990 without quotes"},
		{"year = §\"South\"", "a number"},
		{"district in (\"a\", §5)", `"5" in quotes`},
		{"§district < \"South\"", "with = or !="},
		{"year < §\"South\"", "unknown column"},
		{"year < §district", "with = or !="},
		{"§district+1 > 2", "in arithmetic"},
		{"ln(§district) > 2", "in arithmetic"},
		{"§\"North\" = district", "text column"},
		{"§\"Elsewhere\" > 2", "unknown column"},
	} {
		t.Run(c.marked, func(t *testing.T) {
			text, pos := unmark(t, c.marked)
			condition, err := ParseCondition(text)
			if err != nil {
				t.Fatal(err)
			}
			_, err = condition.Compile(lookup)
			checkSyntaxError(t, err, text, pos, c.says)
		})
	}
}

func TestCompileClauses(t *testing.T) {
	condition, err := ParseCondition(`year >= 1990 and area > 55 and district != "it's"`)
	if err != nil {
		t.Fatal(err)
	}
	clauses, err := condition.CompileClauses(lookup)
	if err != nil {
		t.Fatal(err)
	}
	var got []string
	for i, f := range clauses {
		var truths []string
		for row := range 4 {
			truths = append(truths, f(row).String())
		}
		got = append(got, condition.Clauses[i].Text+": "+strings.Join(truths, " "))
	}
	want := []string{
		"year >= 1990: false true true true",
		"area > 55: false true unknown false",
		`district != "it's": true true unknown false`,
	}
	if !slices.Equal(got, want) {
		t.Errorf("got %q, want %q", got, want)
	}
}

func TestConditionColumns(t *testing.T) {
	condition, err := ParseCondition(`"floor area" > b and (c in ("x", "y") or not d = "z") and e = f+"g h"`)
	if err != nil {
		t.Fatal(err)
	}
	if got := condition.Columns(); !slices.Equal(got, []string{"floor area", "b", "c", "d", "e", "f", "g h"}) {
		t.Errorf("got %q", got)
	}
}

func FuzzParseCondition(f *testing.F) {
	for _, c := range markedConditions {
		f.Add(strings.Replace(c.marked, "§", "", 1))
	}
	f.Add(`year >= 1990 and (a*(b-c) != "x" or not d in (1, -2, 'z')) and "and" < -e^2`)
	f.Fuzz(func(t *testing.T, text string) {
		condition, err := ParseCondition(text)
		if err != nil {
			var e *SyntaxError
			if !errors.As(err, &e) || e.Pos < 0 || e.Pos > len(text) || e.Error() == "" {
				t.Fatalf("%q: %v", text, err)
			}
			return
		}
		printed := condition.String()
		again, err := ParseCondition(printed)
		if err != nil {
			t.Fatalf("%q printed as %q: %v", text, printed, err)
		}
		if again.String() != printed {
			t.Fatalf("%q printed as %q, then as %q", text, printed, again.String())
		}
		for _, values := range []Accessor{{Values: Numbers, Hi: []float64{1, math.NaN()}}, {Values: Texts, Codes: []int32{0, -1}, Levels: []string{"x"}}} {
			columns := func(string) (Accessor, bool) { return values, true }
			first, err := condition.Compile(columns)
			second, errAgain := again.Compile(columns)
			if (err == nil) != (errAgain == nil) {
				t.Fatalf("%q: %v, printed %q: %v", text, err, printed, errAgain)
			}
			for row := 0; err == nil && row < 2; row++ {
				if first(row) != second(row) {
					t.Fatalf("%q: %v, printed %q: %v", text, first(row), printed, second(row))
				}
			}
		}
	})
}

func BenchmarkCondition(b *testing.B) {
	const n = 1_000_000
	year := Accessor{Values: Numbers, Hi: make([]float64, n)}
	share := Accessor{Values: Numbers, Hi: make([]float64, n), Lo: make([]float64, n)}
	district := Accessor{Values: Texts, Codes: make([]int32, n), Levels: []string{"East", "North", "South"}}
	for i := range n {
		year.Hi[i], share.Hi[i], district.Codes[i] = float64(1900+i%120), float64(i%10)/10, int32(i%3)
	}
	columns := map[string]Accessor{"year": year, "share": share, "district": district}
	condition, err := ParseCondition(`year >= 1990 and share < 0.7 and (district != "North" or ln(year) > 7.6)`)
	if err != nil {
		b.Fatal(err)
	}
	f, err := condition.Compile(func(name string) (Accessor, bool) { a, ok := columns[name]; return a, ok })
	if err != nil {
		b.Fatal(err)
	}
	b.Run("n=1e6", func(b *testing.B) {
		b.ReportAllocs()
		for b.Loop() {
			for row := range n {
				f(row)
			}
		}
	})
}

func ExampleCondition_Compile() {
	condition, err := ParseCondition(`year >= 1990 and district in ("North", "South")`)
	if err != nil {
		fmt.Println(err)
		return
	}
	columns := map[string]Accessor{
		"year":     {Values: Numbers, Hi: []float64{1989, 1990, math.NaN()}},
		"district": {Values: Texts, Codes: []int32{0, 0, 0}, Levels: []string{"North"}},
	}
	used, err := condition.Compile(func(name string) (Accessor, bool) { a, ok := columns[name]; return a, ok })
	if err != nil {
		fmt.Println(err)
		return
	}
	for row := range 3 {
		fmt.Println(used(row))
	}
	// Output:
	// false
	// true
	// unknown
}
