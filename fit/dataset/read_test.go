package dataset

import (
	"crypto/sha256"
	"encoding/csv"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"math"
	"math/big"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"unicode/utf16"
)

// The expected values are read off the small tables by hand, unless a check names another source.

func mustRead(t *testing.T, text string) *Table {
	t.Helper()
	table, err := Read(strings.NewReader(text), "t.csv")
	if err != nil {
		t.Fatal(err)
	}
	return table
}

// cells prints a column: numbers in full, texts in quotes, - for a missing cell.
func cells(c *Column, rows int) string {
	out := make([]string, rows)
	for row := range rows {
		switch {
		case c.IsMissing(row):
			out[row] = "-"
		case c.Kind == Number:
			out[row] = fmt.Sprint(c.Hi[row])
		default:
			out[row] = fmt.Sprintf("%q", c.Levels[c.Codes[row]])
		}
	}
	return strings.Join(out, " ")
}

func TestReadLayouts(t *testing.T) {
	for _, c := range []struct {
		name, text, delimiter string
		columns               []string // name: cells
		lines                 []int
	}{
		{"plain", "a,b\n1,x\n2,y\n", ",", []string{"a: 1 2", `b: "x" "y"`}, []int{2, 3}},
		{"no last line end", "a,b\n1,x", ",", []string{"a: 1", `b: "x"`}, []int{2}},
		{"CRLF", "a,b\r\n1,x\r\n2,y\r\n", ",", []string{"a: 1 2", `b: "x" "y"`}, []int{2, 3}},
		{"CR", "a,b\r1,x\r2,y\r", ",", []string{"a: 1 2", `b: "x" "y"`}, []int{2, 3}},
		{"byte-order mark", "\xef\xbb\xbfa,b\n1,2\n", ",", []string{"a: 1", "b: 2"}, []int{2}},
		{"byte-order mark and quote", "\xef\xbb\xbf\"a\",b\n1,2\n", ",", []string{"a: 1", "b: 2"}, []int{2}},
		{"blank lines at the end", "a,b\n1,2\n\n  \n\n", ",", []string{"a: 1", "b: 2"}, []int{2}},
		{"blank line between", "a,b\n1,2\n\n3,4\n", ",", []string{"a: 1 3", "b: 2 4"}, []int{2, 4}},
		{"blank lines first", "\n\na,b\n1,2\n", ",", []string{"a: 1", "b: 2"}, []int{4}},
		{"one column", "a\n1\n2\n", ",", []string{"a: 1 2"}, []int{2, 3}},
		{"one column, blank line is a missing value", "a\n1\n\n2\n\n", ",", []string{"a: 1 - 2"}, []int{2, 3, 4}},
		{"one column of text, blank after number", "a\n1\n\nx\n", ",", []string{`a: "1" - "x"`}, []int{2, 3, 4}},
		{"blanks trimmed", " a , b\t\n 1 ,\t x y \n", ",", []string{"a: 1", `b: "x y"`}, []int{2}},
		{"blanks kept in quotes", "a,b\n1,\" x \"\n", ",", []string{"a: 1", `b: " x "`}, []int{2}},
		{"blanks around quotes", "a,b\n1 , \"x,y\" \n", ",", []string{"a: 1", `b: "x,y"`}, []int{2}},
		{"quoted numbers", "\"a\",\"b\"\n\"1\",\"-2.5\"\n", ",", []string{"a: 1", "b: -2.5"}, []int{2}},
		{"doubled quote", "a,b\n1,\"say \"\"x\"\"\"\n", ",", []string{"a: 1", `b: "say \"x\""`}, []int{2}},
		{"quote inside", "a,b\n1,5\" pipe\n", ",", []string{"a: 1", `b: "5\" pipe"`}, []int{2}},
		{"line end in quotes", "a,b\n1,\"x\r\ny\"\n2,z\n", ",", []string{"a: 1 2", `b: "x\ny" "z"`}, []int{2, 4}},
		{"empty quotes", "a,b\n\"\",2\n1,3\n", ",", []string{"a: - 1", "b: 2 3"}, []int{2, 3}},
		{"semicolon", "a;b\n1;x\n", ";", []string{"a: 1", `b: "x"`}, []int{2}},
		{"tab", "a\tb\n1\tx\n", "\t", []string{"a: 1", `b: "x"`}, []int{2}},
		{"tab with empty cells", "a\tb\tc\n\t\t3\n1\t\t\n", "\t", []string{"a: - 1", "b: - -", "c: 3 -"}, []int{2, 3}},
		{"commas in text, tabs between", "a\tb\n1\tx, y\n2\tz\n", "\t", []string{"a: 1 2", `b: "x, y" "z"`}, []int{2, 3}},
		{"commas in quotes, semicolons between", "\"a,b\";c\n\"1,2,x\";3\n\"y,z\";4\n", ";", []string{`a,b: "1,2,x" "y,z"`, "c: 3 4"}, []int{2, 3}},
		{"both agree, numbers decide", "x,y;z\n1,5;2\n2,5;3\n", ";", []string{"x,y: 1.5 2.5", "z: 2 3"}, []int{2, 3}},
		{"numbers and text", "a\n1\nx\nNA\n2\n", ",", []string{`a: "1" "x" - "2"`}, []int{2, 3, 4, 5}},
		{"text first", "a\nNA\nx\n1\n", ",", []string{`a: - "x" "1"`}, []int{2, 3, 4}},
		{"missing first", "a,b\nNA,.\n2,x\n", ",", []string{"a: - 2", `b: - "x"`}, []int{2, 3}},
		{"all missing", "a,b\n1,NA\n2,\n", ",", []string{"a: 1 2", "b: - -"}, []int{2, 3}},
		{"infinite is text", "a\n1\ninf\nInfinity\n", ",", []string{`a: "1" "inf" "Infinity"`}, []int{2, 3, 4}},
		{"not missing marks", "a\nna\nNULL\nnan\nN.A.\n-\n", ",", []string{`a: "na" "NULL" "nan" "N.A." "-"`}, []int{2, 3, 4, 5, 6}},
		{"forms of numbers", "a\n+1\n-.5\n2.\n1e3\n1E-2\n007\n", ",", []string{"a: 1 -0.5 2 1000 0.01 7"}, []int{2, 3, 4, 5, 6, 7}},
		{"not numbers", "a\n0x10\n1_000\n1e\n1d5\n--1\n5%\n$5\n1e999\n", ",",
			[]string{`a: "0x10" "1_000" "1e" "1d5" "--1" "5%" "$5" "1e999"`}, []int{2, 3, 4, 5, 6, 7, 8, 9}},
		{"decimal comma", "a;b\n1,5;10\n-,25;1234\n", ";", []string{"a: 1.5 -0.25", "b: 10 1234"}, []int{2, 3}},
		{"decimal comma and exponent", "a\tb\n1,5e2\tx\n", "\t", []string{"a: 150", `b: "x"`}, []int{2}},
		{"comma and point in two columns", "a;b\n1,5;2.5\n", ";", []string{"a: 1.5", "b: 2.5"}, []int{2}},
		{"three decimals throughout", "a;b\n1,234;x\n2,345;y\n", ";", []string{"a: 1.234 2.345", `b: "x" "y"`}, []int{2, 3}},
		{"three decimals beside true decimals", "a;b\n1,234;2,5\n7;3\n", ";", []string{"a: 1.234 7", "b: 2.5 3"}, []int{2, 3}},
		{"three decimals after a zero", "a\tb\n0,125\tx\n", "\t", []string{"a: 0.125", `b: "x"`}, []int{2}},
		{"points in groups of three without commas elsewhere", "a;b\n1.234;x\n", ";", []string{"a: 1.234", `b: "x"`}, []int{2}},
		{"groups among text are text", "a,b\n\"1,234\",x\nn,y\n", ",", []string{`a: "1,234" "n"`, `b: "x" "y"`}, []int{2, 3}},
		{"dates are text", "a,b\n2020-01-01,1.2.2020\n2020-01-02,2.2.2020\n", ",",
			[]string{`a: "2020-01-01" "2020-01-02"`, `b: "1.2.2020" "2.2.2020"`}, []int{2, 3}},
		{"letters of many languages", "région;日本\nÉvora;1\n", ";", []string{`région: "Évora"`, "日本: 1"}, []int{2}},
		{"some names are numbers", "country,2019\nA,1\n", ",", []string{`country: "A"`, "2019: 1"}, []int{2}},
	} {
		t.Run(c.name, func(t *testing.T) {
			table := mustRead(t, c.text)
			if table.Delimiter != c.delimiter {
				t.Errorf("delimiter: got %q, want %q", table.Delimiter, c.delimiter)
			}
			var got []string
			for _, column := range table.Columns {
				got = append(got, column.Name+": "+cells(column, table.Rows))
			}
			if !slices.Equal(got, c.columns) {
				t.Errorf("got %q, want %q", got, c.columns)
			}
			if !slices.Equal(table.Lines, c.lines) || table.Rows != len(c.lines) {
				t.Errorf("lines: got %v of %d rows, want %v", table.Lines, table.Rows, c.lines)
			}
			checkConsistent(t, table)
		})
	}
}

// checkConsistent checks what holds for every table.
func checkConsistent(t *testing.T, table *Table) {
	t.Helper()
	if len(table.Lines) != table.Rows {
		t.Fatalf("%d lines for %d rows", len(table.Lines), table.Rows)
	}
	for _, c := range table.Columns {
		missing, marks := 0, 0
		for row := range table.Rows {
			if c.IsMissing(row) {
				missing++
			}
		}
		for _, n := range c.MissingAs {
			marks += n
		}
		if missing != c.Missing || marks != c.Missing {
			t.Fatalf("%q: %d missing cells, %d counted, %d by what stood there", c.Name, missing, c.Missing, marks)
		}
		switch c.Kind {
		case Number:
			if len(c.Hi) != table.Rows || c.Lo != nil && len(c.Lo) != table.Rows || c.Codes != nil || c.NumericCells != table.Rows-missing {
				t.Fatalf("%q: lengths %d, %d of %d", c.Name, len(c.Hi), len(c.Lo), table.Rows)
			}
		case Text:
			if len(c.Codes) != table.Rows || c.Hi != nil || c.Lo != nil {
				t.Fatalf("%q: %d codes of %d", c.Name, len(c.Codes), table.Rows)
			}
			if !slices.IsSorted(c.Levels) || len(slices.Compact(slices.Clone(c.Levels))) != len(c.Levels) {
				t.Fatalf("%q: levels %q", c.Name, c.Levels)
			}
		case Empty:
			if missing != table.Rows {
				t.Fatalf("%q: empty with %d of %d missing", c.Name, missing, table.Rows)
			}
		default:
			t.Fatalf("%q: kind %d", c.Name, c.Kind)
		}
	}
}

func TestNumbersKeepTheirDigits(t *testing.T) {
	texts := []string{"0.1", "83.0", "1234567890123456789", "-6.860120914", "1e22", "0.12345678901234567890123", "-1.1139726638793945", "3"}
	table := mustRead(t, "a\n"+strings.Join(texts, "\n")+"\n")
	for row, text := range texts {
		// Reference: math/big with 200 bits.
		want, _, err := big.ParseFloat(text, 10, 200, big.ToNearestEven)
		if err != nil {
			t.Fatal(err)
		}
		v := table.Columns[0].Value(row)
		got := new(big.Float).SetPrec(200).Add(big.NewFloat(v.Hi), big.NewFloat(v.Lo))
		gap, _ := new(big.Float).Quo(new(big.Float).Sub(got, want), want).Float64()
		if math.Abs(gap) > 1e-31 {
			t.Errorf("%s: got %v + %v, relative gap %g", text, v.Hi, v.Lo, gap)
		}
	}
	if c := mustRead(t, "a\n1\n2.5\n1e20\n").Columns[0]; c.Lo != nil {
		t.Errorf("low parts for numbers that a float64 holds: %v", c.Lo)
	}
}

func TestDecimals(t *testing.T) {
	for _, c := range []struct {
		text string
		want int
	}{{"1\n20\n", 0}, {"1.5\n1.250\n", 3}, {"2.5e-3\n", 4}, {"1.25e1\n", 1}, {"1.25e7\n", 0}, {"5e-2\n", 2}, {"1.\n", 0}, {"NA\n", 0}, {"x\n1.5\n", 0}} {
		if got := mustRead(t, "a\n"+c.text).Columns[0].Decimals; got != c.want {
			t.Errorf("%q: got %d, want %d", c.text, got, c.want)
		}
	}
	if got := mustRead(t, "a;b\n1,25;1\n").Columns[0].Decimals; got != 2 {
		t.Errorf("decimal comma: got %d, want 2", got)
	}
}

func TestMissingMarks(t *testing.T) {
	table := mustRead(t, "a,b\n1,x\n,\nNA,NA\nN/A,\"\"\nn/a,y\n.,.\nnull,null\nNaN,NaN\n\" NA\",y\n NA ,y\n")
	want := map[string]int{"": 1, "NA": 2, "N/A": 1, "n/a": 1, ".": 1, "null": 1, "NaN": 1}
	a, _ := table.Column("a")
	if a.Kind != Text || a.FirstStray != "" { // " NA" in quotes is text, and most cells are missing or text
		t.Errorf("kind %d, stray %q", a.Kind, a.FirstStray)
	}
	if fmt.Sprint(a.MissingAs) != fmt.Sprint(want) || a.Missing != 8 {
		t.Errorf("got %d: %v, want %v", a.Missing, a.MissingAs, want)
	}
	b, _ := table.Column("b")
	if b.Missing != 6 || b.MissingAs[""] != 2 {
		t.Errorf("got %d: %v", b.Missing, b.MissingAs)
	}
}

func TestFirstStray(t *testing.T) {
	table := mustRead(t, "a,b,c\n1,x,1\n2,y,2\nabout 3,1,3\n4,z,\"1,234\"\nNA,2,n.a.\n")
	for i, want := range []struct {
		kind    Kind
		stray   string
		line    int
		numbers int
	}{{Text, "about 3", 4, 3}, {Text, "", 0, 2}, {Text, "1,234", 5, 3}} {
		c := table.Columns[i]
		if c.Kind != want.kind || c.FirstStray != want.stray || c.FirstStrayLine != want.line || c.NumericCells != want.numbers {
			t.Errorf("%s: got kind %d, %q in line %d, %d numbers", c.Name, c.Kind, c.FirstStray, c.FirstStrayLine, c.NumericCells)
		}
	}
}

func TestTableFacts(t *testing.T) {
	text := "a;b\n1,5;2\n\n2,5;3\n"
	table := mustRead(t, text)
	sum := sha256.Sum256([]byte(text)) // the standard library
	if table.Hash != hex.EncodeToString(sum[:]) {
		t.Errorf("hash: got %s", table.Hash)
	}
	if !table.DecimalComma || table.Name != "t.csv" || !slices.Equal(table.Names(), []string{"a", "b"}) {
		t.Errorf("got %+v", table)
	}
	want := []string{"decimal comma read because the delimiter is a semicolon: a", "1 blank line between rows left out"}
	if !slices.Equal(table.Notes, want) {
		t.Errorf("notes: got %q, want %q", table.Notes, want)
	}
	if _, ok := table.Column("A"); ok {
		t.Error("a name was matched without its case")
	}
	if v := table.Columns[0].Value(1); v.Hi != 2.5 || v.Lo != 0 {
		t.Errorf("value: got %v", v)
	}
	if v := mustRead(t, "a\nx\n").Columns[0].Value(0); !math.IsNaN(v.Hi) {
		t.Errorf("value of a text: got %v", v)
	}
}

func utf16Bytes(text string, big bool) string {
	var b strings.Builder
	for _, u := range utf16.Encode([]rune("\ufeff" + text)) {
		if big {
			b.WriteByte(byte(u >> 8))
			b.WriteByte(byte(u))
		} else {
			b.WriteByte(byte(u))
			b.WriteByte(byte(u >> 8))
		}
	}
	return b.String()
}

func TestUTF16(t *testing.T) {
	for _, big := range []bool{false, true} {
		table := mustRead(t, utf16Bytes("städte\trent\nKöln\t1\n𝔸\t2\n", big))
		if got := cells(table.Columns[0], 2); got != `"Köln" "𝔸"` || table.Columns[0].Name != "städte" {
			t.Errorf("got %s", got)
		}
		if !slices.Equal(table.Notes, []string{"converted from UTF-16 to UTF-8"}) {
			t.Errorf("notes: got %q", table.Notes)
		}
	}
}

func TestFileErrors(t *testing.T) {
	bare := strings.ReplaceAll(utf16Bytes("name,rent\nx,1\ny,2\n", false), "\xff\xfe", "")
	for _, c := range []struct {
		name, content string
		reason        Reason
		says          string
	}{
		{"empty", "", NoContent, "an empty file"},
		{"blanks only", " \n\r\n\t\n", NoContent, "an empty file"},
		{"mark only", "\xef\xbb\xbf", NoContent, "an empty file"},
		{"header only", "a,b\n", HeaderOnly, "add rows"},
		{"header and blank lines", "a,b\n\n\n", HeaderOnly, "add rows"},
		{"binary", "a,b\n1,\x002\n", Binary, "byte 7"},
		{"binary further on", "a,b\n" + strings.Repeat("1,2\n", 3000) + "\x00", Binary, "byte 12005"},
		{"gzip", "\x1f\x8b\x08\x00", OtherFormat, "gzip"},
		{"zip", "PK\x03\x04", OtherFormat, "spreadsheet"},
		{"parquet", "PAR1", OtherFormat, "Parquet"},
		{"UTF-16 without mark", bare, NotUTF8, "UTF-16"},
		{"UTF-16 cut", "\xff\xfea\x00b", NotUTF8, "middle of a character"},
		{"UTF-32", "\xff\xfe\x00\x00a\x00\x00\x00", NotUTF8, "UTF-32"},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, err := Read(strings.NewReader(c.content), "t.csv")
			var e *FileError
			if !errors.As(err, &e) {
				t.Fatalf("got %v, want a *FileError", err)
			}
			if e.Reason != c.reason || !strings.Contains(e.Error(), c.says) || !strings.HasPrefix(e.Error(), "t.csv: ") || e.Advice == "" {
				t.Errorf("got reason %d: %v", e.Reason, e)
			}
		})
	}
}

func TestPathErrors(t *testing.T) {
	dir := t.TempDir()
	for _, c := range []struct {
		path   string
		reason Reason
		says   string
	}{
		{filepath.Join(dir, "absent.csv"), NotFound, "no such file"},
		{dir, Directory, "a folder"},
		{filepath.Join(dir, "a.csv.gz"), NotFound, "no such file"},
		{filepath.Join(dir, "a.xlsx"), OtherFormat, "reads CSV and TSV"},
		{filepath.Join(dir, "a.parquet"), NotFound, "no such file"},
	} {
		_, err := ReadFile(c.path)
		var e *FileError
		if !errors.As(err, &e) || e.Reason != c.reason || !strings.Contains(e.Error(), c.says) || e.Path != c.path {
			t.Errorf("%s: got %v", c.path, err)
		}
	}
	if _, err := ReadFile(filepath.Join(dir, "absent.csv")); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("the error of the system is lost: %v", err)
	}
	path := filepath.Join(dir, "a.csv")
	if err := os.WriteFile(path, []byte("a,b\n1,2\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	table, err := ReadFile(path)
	if err != nil || table.Name != path || table.Rows != 1 {
		t.Errorf("got %+v, %v", table, err)
	}
}

// failing gives some text and then an error.
type failing struct{ text io.Reader }

func (f failing) Read(p []byte) (int, error) {
	n, err := f.text.Read(p)
	if err == io.EOF {
		err = errors.New("the disk is gone")
	}
	return n, err
}

func TestReaderThatFails(t *testing.T) {
	for _, n := range []int{1, 5000} {
		_, err := Read(failing{strings.NewReader("a,b\n" + strings.Repeat("1,2\n", n))}, "t.csv")
		var e *FileError
		if !errors.As(err, &e) || e.Reason != Unreadable || !strings.Contains(err.Error(), "the disk is gone") {
			t.Errorf("%d rows: got %v", n, err)
		}
	}
}

func TestLayoutErrors(t *testing.T) {
	for _, c := range []struct {
		name, text             string
		reason                 Reason
		line, field, character int
		says                   string
	}{
		{"too few", "a,b\n1,2\n3\n", Ragged, 3, 0, 0, "found 1 field, expected 2"},
		{"too many", "a,b\n1,2\n3,4,5\n", Ragged, 3, 0, 0, "found 3 fields, expected 2"},
		{"ragged after a blank line", "a,b\n1,2\n\n3,4,5\n", Ragged, 4, 0, 0, `delimiter ","`},
		{"ragged after a value of two lines", "a,b\n\"x\ny\",2\n3\n", Ragged, 4, 0, 0, "found 1 field"},
		{"decimal comma between commas", "a,b\n1,5,2\n", Ragged, 2, 0, 0, "put quotes around"},
		{"open quote", "a,b\n1,\"x\n2,y\n", OpenQuote, 2, 2, 3, "close the quote"},
		{"open quote in the header", "a,\"b\n1,2\n", OpenQuote, 1, 2, 3, "close the quote"},
		{"text after a quote", "a,b\n1,2\nä,\"x\"y\n", AfterQuote, 3, 2, 6, "double a quote"},
		{"no name", "a,,c\n1,2,3\n", NoName, 1, 2, 0, "name the column"},
		{"no name, blanks", "a,\" \"\n1,2\n", NoName, 1, 2, 0, "name the column"},
		{"delimiter after the last name", "a,b,\n1,2,\n", NoName, 1, 3, 0, "name the column"},
		{"same name", "a,b,a\n1,2,3\n", SameName, 1, 3, 0, `the name "a" again, expected a name that field 1`},
		{"header of numbers", "1,2\n3,4\n", NumberHeader, 1, 0, 0, "add a first row"},
		{"header of decimal commas", "1,5;2\n3;4\n", NumberHeader, 1, 0, 0, "add a first row"},
		{"Latin-1", "name,rent\nK\xf6ln,1\n", NotUTF8, 2, 0, 2, `0xF6 ('ö' in Latin-1)`},
		{"other bytes", "name,rent\r\nx,1\r\n\x93y\x94,2\r\n", NotUTF8, 3, 0, 1, "0x93, expected"},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, err := Read(strings.NewReader(c.text), "t.csv")
			var e *LayoutError
			if !errors.As(err, &e) {
				t.Fatalf("got %v, want a *LayoutError", err)
			}
			if e.Reason != c.reason || e.Line != c.line || e.Field != c.field || e.Character != c.character || !strings.Contains(e.Error(), c.says) {
				t.Errorf("got reason %d, line %d, field %d, character %d: %v", e.Reason, e.Line, e.Field, e.Character, e)
			}
			if e.Path != "t.csv" || e.Found == "" || e.Expected == "" || e.Advice == "" {
				t.Errorf("a part of the message is missing: %#v", e)
			}
		})
	}
}

func TestCellErrors(t *testing.T) {
	for _, c := range []struct {
		name, text  string
		line, field int
		cell, says  string
	}{
		{"comma beside commas", "a,b\n1,2\n3,\"1,234\"\n", 3, 2, "1,234", "semicolons between fields"},
		{"decimal comma beside commas", "a,b\n1,\"1,5\"\n", 2, 2, "1,5", "decimal point"},
		{"two groups", "a;b\nx;1,234,567\n", 2, 2, "1,234,567", "without thousands separators"},
		{"groups and decimals", "a,b\nx,\"1,234.5\"\n", 2, 2, "1,234.5", "without thousands separators"},
		{"points in groups and a comma", "a;b\nx;1.234,5\n", 2, 2, "1.234,5", "without thousands separators"},
		{"blank", "a,b\nx,12\ny,1 234\n", 3, 2, "1 234", "without thousands separators"},
		{"no-break space", "a,b\nx,1\u00a0234\n", 2, 2, "1\u00a0234", "without thousands separators"},
		{"apostrophe", "a,b\nx,-1'234.5\n", 2, 2, "-1'234.5", "without thousands separators"},
		{"comma after point", "a;b\n1.5;x\n2;x\n2,5;x\n", 4, 1, "2,5", `the decimal sign of "1.5" in line 2`},
		{"point after comma", "a;b\n1,5;x\n2;x\n2.5;x\n", 4, 1, "2.5", `the decimal sign of "1,5" in line 2`},
		{"groups or decimals, tab", "a\tb\n1,234\tx\n", 2, 1, "1,234", "cannot be a thousands separator"},
		{"groups or decimals, points elsewhere", "a;b\n1,234;2.5\n", 2, 1, "1,234", "cannot be a thousands separator"},
		{"groups or decimals, small whole numbers", "a;b\n999;x\n1,234;y\n", 3, 1, "1,234", "cannot be a thousands separator"},
		{"points in groups, commas elsewhere", "a;b\n1.234;2,5\n", 2, 1, "1.234", "a decimal comma, as in other columns"},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, err := Read(strings.NewReader(c.text), "t.csv")
			var e *CellError
			if !errors.As(err, &e) {
				t.Fatalf("got %v, want a *CellError", err)
			}
			if e.Line != c.line || e.Field != c.field || e.Cell != c.cell || !strings.Contains(e.Error(), c.says) || e.Advice == "" {
				t.Errorf("got line %d, field %d, cell %q: %v", e.Line, e.Field, e.Cell, e)
			}
		})
	}
}

// plainRecords are the records of a text by encoding/csv of the standard library, without blanks around the fields;
// ok is false where it refuses the text or splits it by other rules than ours: a CR that ends a line on its own, or
// blanks beside a quote.
func plainRecords(text string, delimiter rune) (records [][]string, ok bool) {
	if strings.Contains(strings.ReplaceAll(text, "\r\n", ""), "\r") {
		return nil, false
	}
	r := csv.NewReader(strings.NewReader(text))
	r.Comma, r.FieldsPerRecord = delimiter, -1
	records, err := r.ReadAll()
	if err != nil {
		return nil, false
	}
	return plain(records), true
}

// plain trims every field and leaves out records of one empty field.
func plain(records [][]string) [][]string {
	var out [][]string
	for _, record := range records {
		trimmed := make([]string, len(record))
		for i, field := range record {
			trimmed[i] = strings.Trim(field, " \t\u00a0")
		}
		if len(trimmed) > 1 || trimmed[0] != "" {
			out = append(out, trimmed)
		}
	}
	return out
}

func ownRecords(text string, delimiter byte) ([][]string, *splitError) {
	s := newSplitter(text, delimiter)
	var out [][]string
	for {
		_, ok, err := s.next()
		if err != nil || !ok {
			return plain(out), err
		}
		record := make([]string, len(s.fields))
		for i, f := range s.fields {
			record[i] = f.text
		}
		out = append(out, record)
	}
}

var seeds = []string{"a,b\n1,2\n", "a;b\r\n\"x;\"\"y\"\"\r\nz\";2,5\r\n", "a\tb\n\t\n", "a,b\n1,\" x \"\n\n\"\",\"\"\n", "\"a\"\n\"\n", "a,b\r1,2\r",
	"a,b\n1 234,x\n", "a;b\n1.234;2,5\n", "\xff\xfea\x00\n\x001\x00", "a\n1\n\nx\n", "a,b\n1,\"x\"y\n", "a,b\n1e5,-.5e-3\nNA,.\n"}

func FuzzSplit(f *testing.F) {
	for _, s := range seeds {
		f.Add(s, uint8(0))
		f.Add(s, uint8(1))
	}
	f.Fuzz(func(t *testing.T, text string, which uint8) {
		delimiter := ",;\t"[which%3]
		got, wrong := ownRecords(text, delimiter)
		want, ok := plainRecords(text, rune(delimiter))
		if !ok {
			return
		}
		if wrong != nil {
			t.Fatalf("%q: %+v", text, wrong)
		}
		if fmt.Sprintf("%q", got) != fmt.Sprintf("%q", want) {
			t.Fatalf("%q: got %q, encoding/csv gives %q", text, got, want)
		}
	})
}

func FuzzRead(f *testing.F) {
	for _, s := range seeds {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, content []byte) {
		table, err := Read(strings.NewReader(string(content)), "t.csv")
		if err != nil {
			var file *FileError
			var layout *LayoutError
			var cell *CellError
			if !errors.As(err, &file) && !errors.As(err, &layout) && !errors.As(err, &cell) {
				t.Fatalf("an error without a type: %v", err)
			}
			if layout != nil && layout.Line < 1 || cell != nil && cell.Line < 1 {
				t.Fatalf("an error without a line: %v", err)
			}
			return
		}
		checkConsistent(t, table)
		if table.Rows == 0 || len(table.Columns) == 0 {
			t.Fatalf("a table of %d rows and %d columns", table.Rows, len(table.Columns))
		}
	})
}

// TestReferenceFiles reads files of the project and checks facts that their sources publish.
func TestReferenceFiles(t *testing.T) {
	t.Run("longley", func(t *testing.T) {
		table := readReference(t, "longley")
		// Longley (1967), Journal of the American Statistical Association 62, 819-841, as in the first row of the NIST
		// StRD data set of that name: 16 years, a price deflator of 83.0 in 1947.
		if table.Rows != 16 || len(table.Columns) != 7 {
			t.Fatalf("got %d rows and %d columns", table.Rows, len(table.Columns))
		}
		deflator, ok := table.Column("deflator")
		if !ok || deflator.Kind != Number || deflator.Decimals != 1 || deflator.Hi[0] != 83 {
			t.Errorf("got %+v", deflator)
		}
	})
	t.Run("wages", func(t *testing.T) {
		table := readReference(t, "wages")
		// The counts are those in values.json beside the data (Berndt 1991, The Practice of Econometrics): 96 union
		// members, 350 married, and age = education + experience + 6 in all rows but the one in line 445.
		gender, ok := table.Column("gender")
		if table.Rows != 534 || !ok || gender.Kind != Text || !slices.Equal(gender.Levels, []string{"female", "male"}) {
			t.Fatalf("got %d rows, %+v", table.Rows, gender)
		}
		value := func(name string, row int) float64 {
			c, _ := table.Column(name)
			return c.Hi[row]
		}
		members, married := 0.0, 0.0
		var exceptions []int
		for row := range table.Rows {
			members += value("union", row)
			married += value("married", row)
			if value("age", row) != value("education", row)+value("experience", row)+6 {
				exceptions = append(exceptions, table.Lines[row])
			}
		}
		if members != 96 || married != 350 || !slices.Equal(exceptions, []int{445}) {
			t.Errorf("got %v members, %v married, exceptions in lines %v", members, married, exceptions)
		}
	})
}

func readReference(t *testing.T, name string) *Table {
	t.Helper()
	path := filepath.Join("..", "..", "testdata", name, "data.csv")
	table, err := ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	return table
}

func BenchmarkRead(b *testing.B) {
	var text strings.Builder
	text.WriteString("id,year,rent,area,district,share,income\n")
	for i := range 400_000 {
		fmt.Fprintf(&text, "%d,%d,%d.%02d,%d,district %d,0.%06d,%d\n", i, 1990+i%30, 300+i%900, i%100, 20+i%150, i%40, i%1_000_000, 20_000+i%50_000)
	}
	content := text.String()
	b.Run("rows=4e5/columns=7", func(b *testing.B) {
		b.SetBytes(int64(len(content)))
		b.ReportAllocs()
		for b.Loop() {
			if _, err := Read(strings.NewReader(content), "t.csv"); err != nil {
				b.Fatal(err)
			}
		}
	})
}

func ExampleRead() {
	// Invented rents.
	file := "rent;area;district\n850,5;60;North\nNA;45;South\n"
	table, err := Read(strings.NewReader(file), "flats.csv")
	if err != nil {
		fmt.Println(err)
		return
	}
	rent, _ := table.Column("rent")
	fmt.Println(table.Rows, rent.Value(0), rent.IsMissing(1), rent.MissingAs)
	fmt.Println(table.Notes[0])
	// Output:
	// 2 850.5 true map[NA:1]
	// decimal comma read because the delimiter is a semicolon: rent
}
