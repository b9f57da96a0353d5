package dataset

import (
	"fmt"

	"modelmend/fit/figures"
)

// Reason says which rule a file breaks.
type Reason int

// The reasons of a FileError.
const (
	NotFound     Reason = iota + 1 // no such file
	Unreadable                     // the system refuses or fails
	Directory                      // a folder
	NoContent                      // nothing in it, or blanks only
	HeaderOnly                     // names but no rows
	Binary                         // not text
	OtherFormat                    // compressed files, spreadsheets and the like
	TooLarge                       // over the limit on bytes
	NotUTF8                        // another encoding; LayoutError when the place is known
	Ragged                         // the reasons of a LayoutError: a row has too many or too few fields
	OpenQuote                      // a quoted field is not closed
	AfterQuote                     // text follows a closed quote
	NoName                         // a column has no name
	SameName                       // two columns share a name
	NumberHeader                   // the first row holds only numbers
)

// FileError says why a file as a whole cannot be read.
type FileError struct {
	Path   string
	Reason Reason
	Found  string // what the file is, ready for a sentence
	Advice string
	Err    error // from the system, or nil
}

// Error returns where, what was found and what to do, on one line.
func (e *FileError) Error() string {
	return fmt.Sprintf("%s: found %s, expected a table as CSV, TSV or Parquet; %s", e.Path, e.Found, e.Advice)
}

// Unwrap returns the error of the system, if there is one.
func (e *FileError) Unwrap() error { return e.Err }

// LayoutError says where the rows, fields or names of a file are wrong.
type LayoutError struct {
	Path            string
	Line            int // from 1
	Field           int // from 1; 0 when it is not about one field
	Character       int // within the line, from 1; 0 when not known
	Reason          Reason
	Found, Expected string // ready for a sentence
	Advice          string
}

// Error returns where, what was found, what was expected and what to do, on one line.
func (e *LayoutError) Error() string {
	where := fmt.Sprintf("%s:%d", e.Path, e.Line)
	if e.Character > 0 {
		where += fmt.Sprintf(": character %d", e.Character)
	}
	if e.Field > 0 {
		where += fmt.Sprintf(": field %d", e.Field)
	}
	return fmt.Sprintf("%s: found %s, expected %s; %s", where, e.Found, e.Expected, e.Advice)
}

// CellError says which cell holds a number that cannot be read without a guess.
type CellError struct {
	Path     string
	Line     int // where the row starts, from 1
	Field    int // from 1
	Name     string
	Cell     string // as written
	Expected string
	Advice   string
}

// Error returns where, what was found, what was expected and what to do, on one line.
func (e *CellError) Error() string {
	return fmt.Sprintf("%s:%d: column %s: found %s, expected %s; %s", e.Path, e.Line, figures.Quoted(e.Name), figures.Quoted(e.Cell), e.Expected, e.Advice)
}
