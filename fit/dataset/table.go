// Package dataset reads a table of a CSV, TSV (plain, gzip or zstd) or Parquet file into typed columns, or passes over it piece by piece.
//
// In goes a file, or a reader, whose first row (or schema) names the columns. Out comes a Table: numbers with all the digits
// that were written, text as codes of its distinct values, the missing cells and what stood there, and the line of
// each row. The delimiter (comma, semicolon or tab) is found from the file, and so is a decimal comma where the
// delimiter is not a comma. UTF-8 is read, and UTF-16 with a byte-order mark.
//
// It refuses, and says where and what to do: files that cannot be read or are no text, other encodings, rows of
// unequal length, columns without a name or with the name of another, a first row of numbers, quotes that are not
// closed, thousands separators, and numbers whose decimal sign is not clear. It changes no value and sets no row
// aside. Text in any other 8-bit encoding (Latin-1 and its kin) is refused and not converted, because which one it is
// cannot be told from the bytes and a wrong guess would change names in silence.
//
// Before it stands doubledouble, after it equation and design.
package dataset

import (
	"math"

	"modelmend/fit/doubledouble"
)

// Kind says what a column holds.
type Kind int

// The kinds of column.
const (
	Number  Kind = iota + 1 // numbers, some of them perhaps missing
	Text                    // text, some of it perhaps missing
	Empty                   // no value at all
	Skipped                 // not asked for: nothing is known but the name
)

// Column is one column of a table. A column is Number when every cell that is not missing is a decimal number,
// else Text. A cell is missing when, without the blanks around it, it is empty or one of NA, N/A, n/a, ., null
// and NaN, with or without quotes. "inf" is not a number.
type Column struct {
	Name      string
	Kind      Kind
	Hi, Lo    []float64      // Number: the values as Hi + Lo; Lo is nil when every digit fits into Hi. NaN in Hi where missing.
	Codes     []int32        // Text: index into Levels, -1 where missing
	Levels    []string       // Text: distinct values in byte order
	Missing   int            // count of missing cells
	MissingAs map[string]int // what stood there ("" for nothing) -> count; empty when nothing is missing
	Decimals  int            // Number: most digits after the decimal sign, as written; 1.50 has 2, 2.5e-3 has 4

	NumericCells   int    // cells that are numbers
	FirstStray     string // Text, when most cells are numbers: the first that is not, else ""
	FirstStrayLine int    // the line where the row of FirstStray starts, else 0
}

// IsMissing reports whether the cell of a row, counted from 0, is missing. It panics for a row outside the table,
// unless the column is Empty.
func (c *Column) IsMissing(row int) bool {
	switch c.Kind {
	case Number:
		return math.IsNaN(c.Hi[row])
	case Text:
		return c.Codes[row] < 0
	}
	return true
}

// Value returns the number in a row, counted from 0: NaN in Hi where it is missing and in a column that is not Number.
func (c *Column) Value(row int) doubledouble.Number {
	if c.Kind != Number {
		return doubledouble.From(math.NaN())
	}
	if c.Lo == nil {
		return doubledouble.From(c.Hi[row])
	}
	return doubledouble.Number{Hi: c.Hi[row], Lo: c.Lo[row]}
}

// Table is a file of named columns of one length.
type Table struct {
	Name         string // the path as given
	Columns      []*Column
	Rows         int
	Lines        []int    // line of the file where each row starts, from 1
	Delimiter    string   // ",", ";" or "\t"
	DecimalComma bool     // at least one column was read with a decimal comma
	Hash         string   // hexadecimal SHA-256 of the bytes of the file
	Notes        []string // what was decided in reading that the user may want to know
	stream       *stream  // nil where the rows are held
}

// Column returns the column of a name, matched exactly, and whether there is one.
func (t *Table) Column(name string) (*Column, bool) {
	for _, c := range t.Columns {
		if c.Name == name {
			return c, true
		}
	}
	return nil, false
}

// Names returns the names of the columns in the order of the file.
func (t *Table) Names() []string {
	names := make([]string, len(t.Columns))
	for i, c := range t.Columns {
		names[i] = c.Name
	}
	return names
}
