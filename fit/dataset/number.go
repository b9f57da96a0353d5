package dataset

import (
	"strings"

	"modelmend/fit/doubledouble"
)

// form is how a cell is written.
type form int

const (
	textForm    form = iota
	wholeForm        // 12, -3, 5e2
	pointForm        // 1.5
	commaForm        // 1,5
	groupedForm      // 1,234,567 or 1 234 or 1.234,5: a thousands separator, beyond doubt
)

// shape is the form of a cell, the digits after its decimal sign, and whether its only sign could be a thousands
// separator: one to three digits, not starting with 0, and three more.
type shape struct {
	form       form
	decimals   int
	groupsLike bool
	short      bool // wholeForm: at most three digits
}

// shapeOf looks at the cell s, which is not empty.
func shapeOf(s string) shape {
	if c := s[0]; (c < '0' || c > '9') && c != '-' && c != '+' && c != '.' && c != ',' {
		return shape{}
	}
	i := 0
	if s[0] == '-' || s[0] == '+' {
		i++
	}
	first := i
	i = skipDigits(s, i)
	before, after := i-first, 0
	out := shape{form: wholeForm}
	if i < len(s) && (s[i] == '.' || s[i] == ',') {
		out.form = pointForm
		if s[i] == ',' {
			out.form = commaForm
		}
		start := i + 1
		i = skipDigits(s, start)
		after = i - start
		out.groupsLike = i == len(s) && after == 3 && before >= 1 && before <= 3 && s[first] != '0'
	}
	if before+after == 0 {
		return shape{}
	}
	out.short = before <= 3
	exponent := 0
	if i < len(s) && (s[i] == 'e' || s[i] == 'E') {
		value, end, ok := readExponent(s, i+1)
		if !ok {
			return shape{}
		}
		exponent, i = value, end
	}
	if i < len(s) {
		if isGrouped(s[first:]) {
			return shape{form: groupedForm}
		}
		return shape{}
	}
	out.decimals = max(0, after-exponent)
	return out
}

func skipDigits(s string, i int) int {
	for i < len(s) && s[i] >= '0' && s[i] <= '9' {
		i++
	}
	return i
}

// readExponent reads digits with or without a sign at i, and stops counting beyond 9999.
func readExponent(s string, i int) (value, end int, ok bool) {
	negative := false
	if i < len(s) && (s[i] == '-' || s[i] == '+') {
		negative = s[i] == '-'
		i++
	}
	end = skipDigits(s, i)
	for j := i; j < end && value < 10_000; j++ {
		value = value*10 + int(s[j]-'0')
	}
	if negative {
		value = -value
	}
	return value, end, end > i
}

// separators are the signs that stand between groups of three digits in one country or another.
var separators = []string{",", ".", " ", "'", "\u2019", "\u00A0", "\u202F"}

// isGrouped reports whether s, without its sign, is a number with one kind of thousands separator.
func isGrouped(s string) bool {
	lead := skipDigits(s, 0)
	if lead < 1 || lead > 3 {
		return false
	}
	for _, sep := range separators {
		rest := s[lead:]
		for strings.HasPrefix(rest, sep) && skipDigits(rest[len(sep):], 0) == 3 {
			rest = rest[len(sep)+3:]
		}
		if len(rest) == len(s)-lead {
			continue
		}
		if rest == "" {
			return true
		}
		if (rest[0] == '.' || rest[0] == ',') && sep != rest[:1] && skipDigits(rest, 1) == len(rest) {
			return true
		}
	}
	return false
}

// parse gives the value of a cell of whole, point or comma form; ok is false when it is too large for a float64.
func parse(s string, f form) (v doubledouble.Number, ok bool) {
	if f == wholeForm && len(s) <= 15 {
		if x, ok := parseWhole(s); ok {
			return doubledouble.From(x), true
		}
	}
	if f == commaForm {
		s = strings.Replace(s, ",", ".", 1)
	}
	v, err := doubledouble.Parse(s)
	return v, err == nil
}

// parseWhole reads up to 15 digits, which a float64 holds exactly.
func parseWhole(s string) (float64, bool) {
	i, negative := 0, false
	if s[0] == '-' || s[0] == '+' {
		negative = s[0] == '-'
		i++
	}
	var n int64
	for ; i < len(s); i++ {
		if s[i] < '0' || s[i] > '9' {
			return 0, false
		}
		n = n*10 + int64(s[i]-'0')
	}
	if negative {
		return -float64(n), true
	}
	return float64(n), true
}

// missingMark returns the mark of a missing cell, a constant, and whether the cell is missing.
func missingMark(s string) (string, bool) {
	switch s {
	case "":
		return "", true
	case ".":
		return ".", true
	case "NA":
		return "NA", true
	case "N/A":
		return "N/A", true
	case "n/a":
		return "n/a", true
	case "null":
		return "null", true
	case "NaN":
		return "NaN", true
	}
	return "", false
}
