package dataset

import (
	"fmt"
	"strings"

	"modelmend/fit/figures"
)

// checkDecimals refuses columns of numbers whose decimal sign is not clear, and tells whether any has a comma.
//
// In a file with commas between fields a comma inside a number is refused. In others a column is read with a decimal
// comma when it holds a comma and no point. It is refused when it holds both, when it holds thousands separators, and
// when every comma could be one (1,234) and nothing else speaks for decimals: no other column has a comma that must
// be a decimal one, and either another column has points, or the delimiter is a tab, or the column also holds whole
// numbers under 1000. A column where every point could separate thousands is refused beside a column with
// decimal commas. These rules are our own.
func checkDecimals(path string, builders []*builder, delimiter byte) (decimalComma bool, err error) {
	trueComma, points := false, false
	for _, b := range builders {
		if b.texts > 0 {
			continue
		}
		trueComma = trueComma || b.firstTrueComma.line > 0
		points = points || b.points > 0
	}
	for i, b := range builders {
		if b.texts > 0 {
			continue
		}
		e := &CellError{Path: path, Field: i + 1, Name: b.column.Name}
		if !b.clear(e, trueComma, points, delimiter) {
			return false, e
		}
		decimalComma = decimalComma || b.commas > 0
	}
	if !decimalComma {
		return false, nil
	}
	for i, b := range builders {
		if b.texts == 0 && b.points > 0 && b.points == b.pointGroups {
			return false, &CellError{Path: path, Field: i + 1, Name: b.column.Name, Line: b.firstPoint.line, Cell: b.firstPoint.cell,
				Expected: "a decimal comma, as in other columns, or no sign inside the number",
				Advice:   "write the numbers of this column without thousands separators, or with the same decimal sign as the others"}
		}
	}
	return true, nil
}

// clear reports whether the numbers of the column can be read without a guess; if not, e gets the rest of the message.
func (b *builder) clear(e *CellError, trueComma, points bool, delimiter byte) bool {
	set := func(at spotted, expected, advice string) bool {
		e.Line, e.Cell, e.Expected, e.Advice = at.line, at.cell, expected, advice
		return false
	}
	switch {
	case b.grouped > 0 && delimiter == ',' && shapeOf(b.firstGrouped.cell).form == commaForm:
		return set(b.firstGrouped, "a number without a comma",
			"write the numbers without thousands separators and with a decimal point, or save the file with semicolons between fields")
	case b.grouped > 0:
		return set(b.firstGrouped, "a number without thousands separators", "write the number without separators, as in 1234567.5")
	case b.commas > 0 && b.points > 0:
		at := b.firstComma
		other := b.firstPoint
		if other.line > at.line {
			at, other = other, at
		}
		return set(at, fmt.Sprintf("the decimal sign of %s in line %d", figures.Quoted(other.cell), other.line),
			"write one decimal sign throughout the column and no thousands separators")
	case b.commas > 0 && b.commas == b.commaGroups && !trueComma && (points || delimiter == '\t' || b.shortWholes > 0):
		return set(b.firstComma, "a number whose comma cannot be a thousands separator",
			"write thousands without a separator, and decimals with a point")
	}
	return true
}

// commaNote says which columns were read with a decimal comma.
func commaNote(builders []*builder, delimiter byte) string {
	var names []string
	for _, b := range builders {
		if b.column.Kind == Number && b.commas > 0 {
			names = append(names, b.column.Name)
		}
	}
	if len(names) > 5 {
		names = append(names[:5:5], fmt.Sprintf("%d more", len(names)-5))
	}
	word := "semicolon"
	if delimiter == '\t' {
		word = "tab"
	}
	return fmt.Sprintf("decimal comma read because the delimiter is a %s: %s", word, strings.Join(names, ", "))
}
