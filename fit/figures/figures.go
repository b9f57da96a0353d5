// Package figures prints numbers, and texts that the user wrote, for prose.
//
// A number and a count of significant digits go in, or a text; text comes out. It refuses nothing: what is not a finite number is said in words.
// It stands first in the flow and imports nothing of the project.
package figures

import (
	"math"
	"strconv"
	"unicode/utf8"
)

// Short prints v with so many significant digits and no trailing zeros: 0.05, 12300, 1.2e-09.
func Short(v float64, digits int) string {
	if text, ok := unusual(v); ok {
		return text
	}
	s := strconv.FormatFloat(v, 'g', digits, 64)
	if plain(v) {
		f, _ := strconv.ParseFloat(s, 64)
		return strconv.FormatFloat(f, 'f', -1, 64)
	}
	return s
}

// Fixed prints v with so many significant digits, trailing zeros kept, as numbers that are compared need: 0.1770.
func Fixed(v float64, digits int) string {
	if text, ok := unusual(v); ok {
		return text
	}
	s := strconv.FormatFloat(v, 'e', digits-1, 64)
	if !plain(v) {
		return s
	}
	f, _ := strconv.ParseFloat(s, 64)
	if f == 0 {
		return "0"
	}
	return strconv.FormatFloat(f, 'f', max(0, digits-1-int(math.Floor(math.Log10(math.Abs(f))))), 64)
}

func unusual(v float64) (string, bool) {
	switch {
	case math.IsNaN(v):
		return "not available", true
	case math.IsInf(v, 0):
		return "infinite", true
	}
	return "", false
}

// plain: an exponent would be harder to read than the digits.
func plain(v float64) bool {
	a := math.Abs(v)
	return v == 0 || (a >= 1e-6 && a < 1e9)
}

// Percent prints a share with one decimal, three where it is nearly but not quite the whole: 99.981 %.
func Percent(share float64) string {
	if text, ok := unusual(share); ok {
		return text
	}
	if share > 0.9995 && share < 1 {
		return strconv.FormatFloat(math.Min(99.999, 100*share), 'f', 3, 64) + " %"
	}
	return strconv.FormatFloat(100*share, 'f', 1, 64) + " %"
}

// Quoted quotes what the user or a file wrote for a message and cuts it at 60 signs.
func Quoted(s string) string {
	if utf8.RuneCountInString(s) > 60 {
		s = string([]rune(s)[:57]) + "..."
	}
	return strconv.Quote(s)
}
