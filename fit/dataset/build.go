package dataset

import (
	"fmt"
	"slices"
	"strings"

	"modelmend/fit/figures"
)

// reading is the work on one text.
type reading struct {
	name      string
	text      string
	delimiter byte
	builders  []*builder
	table     *Table
	blanks    int // lines left out
	firstLine int // of a piece
	pending   int // blank lines after the last row
}

// build turns text into a table. Columns that need refuses are skipped: their cells are not looked at. need may be nil.
func build(name, text string, need func(name string) bool) (*Table, error) {
	return buildIn(name, text, need, pieceBytes)
}

// buildIn reads a text of more than two pieces piece by piece.
func buildIn(name, text string, need func(name string) bool, piece int) (*Table, error) {
	if strings.Trim(text, " \t\r\n") == "" {
		return nil, &FileError{Path: name, Reason: NoContent, Found: "an empty file", Advice: "give a file with a row of column names and rows of values"}
	}
	r := &reading{name: name, text: text, delimiter: findDelimiter(text)}
	r.table = &Table{Name: name, Delimiter: string(r.delimiter)}
	s := newSplitter(text, r.delimiter)
	if err := r.header(s); err != nil {
		return nil, err
	}
	for _, b := range r.builders {
		if need != nil && !need(b.column.Name) {
			b.column.Kind = Skipped
		}
	}
	if pieces := r.pieces(s.at, s.line, piece); pieces != nil {
		if err := r.sideBySide(pieces); err != nil {
			return nil, err
		}
	} else {
		if err := r.rows(s); err != nil {
			return nil, err
		}
		r.second(r.again(), false)
	}
	if r.table.Rows == 0 {
		return nil, &FileError{Path: name, Reason: HeaderOnly, Found: "column names and no rows", Advice: "add rows of values below the names"}
	}
	comma, err := checkDecimals(name, r.builders, r.delimiter)
	if err != nil {
		return nil, err
	}
	for _, b := range r.builders {
		b.finish()
		r.table.Columns = append(r.table.Columns, b.column)
	}
	r.table.DecimalComma = comma
	r.table.Notes = notes(comma, r.builders, r.delimiter, r.blanks)
	return r.table, nil
}

// notes says what was decided in reading.
func notes(comma bool, builders []*builder, delimiter byte, blanks int) (out []string) {
	if comma {
		out = append(out, commaNote(builders, delimiter))
	}
	if blanks > 0 {
		out = append(out, count(blanks, "blank line")+" between rows left out")
	}
	return out
}

// header reads the names of the columns from the first line that is not blank.
func (r *reading) header(s *splitter) error {
	for {
		line, ok, wrong := s.next()
		if wrong != nil {
			return r.layout(wrong)
		}
		if ok && s.blank() {
			continue
		}
		names := make([]string, len(s.fields))
		for i, f := range s.fields {
			names[i] = strings.Clone(f.text)
		}
		if err := r.checkNames(names, line); err != nil {
			return err
		}
		capacity := min(r.lineCount(), len(r.text)/len(names)+1)
		for _, name := range names {
			r.builders = append(r.builders, &builder{column: &Column{Name: name}, delimiter: r.delimiter, capacity: capacity})
		}
		r.table.Lines = make([]int, 0, capacity)
		return nil
	}
}

// lineCount is a bound on the rows that is close in most files.
func (r *reading) lineCount() int {
	return max(strings.Count(r.text, "\n"), strings.Count(r.text, "\r")) + 1
}

func (r *reading) checkNames(names []string, line int) error {
	if !slices.ContainsFunc(names, func(s string) bool { return s == "" || !isNumber(s, r.delimiter) }) {
		return &LayoutError{Path: r.name, Line: line, Reason: NumberHeader, Found: "a first row of numbers", Expected: "the names of the columns",
			Advice: "add a first row with a name for each column"}
	}
	first := map[string]int{}
	for i, name := range names {
		if strings.Trim(name, " \t\r\n") == "" {
			return &LayoutError{Path: r.name, Line: line, Field: i + 1, Reason: NoName, Found: "a column without a name", Expected: "a name for each column",
				Advice: "name the column or delete it"}
		}
		if j, taken := first[name]; taken {
			return &LayoutError{Path: r.name, Line: line, Field: i + 1, Reason: SameName, Found: "the name " + figures.Quoted(name) + " again",
				Expected: fmt.Sprintf("a name that field %d does not have already", j), Advice: "rename one of the two columns"}
		}
		first[name] = i + 1
	}
	return nil
}

// rows reads the rows after the header.
func (r *reading) rows(s *splitter) error {
	r.pending = 0
	for {
		line, ok, wrong := s.next()
		if wrong != nil {
			return r.layout(wrong)
		}
		if !ok {
			return nil
		}
		if s.blank() {
			r.pending++
			continue
		}
		r.passBlanks(r.pending, line)
		r.pending = 0
		if len(s.fields) != len(r.builders) {
			return r.ragged(line, len(s.fields))
		}
		for i, f := range s.fields {
			r.builders[i].add(f, line)
		}
		r.table.Lines = append(r.table.Lines, line)
		r.table.Rows++
	}
}

// passBlanks treats blank lines before a row: rows with a missing value in a file of one column, else nothing.
func (r *reading) passBlanks(count, line int) {
	if len(r.builders) > 1 {
		r.blanks += count
		return
	}
	for i := range count {
		r.builders[0].add(cell{}, line-count+i)
		r.table.Lines = append(r.table.Lines, line-count+i)
		r.table.Rows++
	}
}

func (r *reading) ragged(line, fields int) error {
	e := &LayoutError{Path: r.name, Line: line, Reason: Ragged, Found: count(fields, "field"),
		Expected: fmt.Sprintf("%d, one for each column name", len(r.builders)), Advice: "add the missing values, or delete the line if it is not a row"}
	if fields > len(r.builders) {
		e.Advice = "put quotes around a value that holds the delimiter " + figures.Quoted(string(r.delimiter)) + ", or name the additional columns"
	}
	return e
}

func count(n int, word string) string {
	if n == 1 {
		return "1 " + word
	}
	return fmt.Sprintf("%d %ss", n, word)
}

// layout turns a failure of the splitter into the error of the file.
func (r *reading) layout(s *splitError) error {
	e := &LayoutError{Path: r.name, Line: s.line, Character: s.character, Field: s.field, Reason: s.reason}
	if s.reason == OpenQuote {
		e.Found, e.Expected, e.Advice = "a quote that is not closed before the end of the file", `a second " after the value`,
			"close the quote, or double it if it belongs to the value"
		return e
	}
	e.Found, e.Expected, e.Advice = "text after a closed quote", "the delimiter "+figures.Quoted(string(r.delimiter))+" or the end of the line",
		"double a quote that belongs to the value"
	return e
}

// again lists the columns where text came after numbers: their codes are to be gathered in a second reading.
func (r *reading) again() (fields []int) {
	for i, b := range r.builders {
		if b.again {
			fields = append(fields, i)
		}
	}
	return fields
}

// second gathers the codes of the columns in fields. The text was split once without an error, so the same records come again; a piece has no
// header. It touches no other column.
func (r *reading) second(fields []int, piece bool) {
	if len(fields) == 0 {
		return
	}
	for _, f := range fields {
		r.builders[f].rows = 0
		r.builders[f].startCodes()
	}
	s := newSplitter(r.text, r.delimiter)
	header := !piece
	for row := 0; row < r.table.Rows; {
		s.next()
		if s.blank() && (header || len(r.builders) > 1) {
			continue
		}
		if header {
			header = false
			continue
		}
		for _, f := range fields {
			r.builders[f].codeAgain(s.fields[f].text)
		}
		row++
	}
}
