package equation

import (
	"fmt"
	"strings"
	"unicode"
	"unicode/utf8"
)

// SyntaxError says where a text is wrong, what stands there, what was expected and what to do.
type SyntaxError struct {
	Text     string // the whole text as given
	Pos      int    // byte offset of the place, from 0 to len(Text)
	Found    string // what stands there, ready for a sentence
	Expected string // what could have stood there, ready for a sentence
	Advice   string // one thing to do, or ""
}

// Error returns the message, the line of text with a caret under the place, and the advice, each on its own line.
// The caret stands under the place when wide signs take two columns. A line over 110 signs is cut around the place.
func (e *SyntaxError) Error() string {
	line, caret := e.marked()
	out := fmt.Sprintf("character %d: found %s, expected %s\n  %s\n  %s", e.Character(), e.Found, e.Expected, line, caret)
	if e.Advice != "" {
		out += "\n" + e.Advice
	}
	return out
}

// Character returns the place as a count of signs, from 1.
func (e *SyntaxError) Character() int {
	return utf8.RuneCountInString(e.Text[:e.Pos]) + 1
}

const (
	shownSigns  = 110 // signs of a line shown at most
	shownBefore = 60  // signs kept before the place when a line is cut
)

// marked returns the line that holds the place, fit for a terminal, and the caret line below it.
func (e *SyntaxError) marked() (line, caret string) {
	start := strings.LastIndexAny(e.Text[:e.Pos], "\r\n") + 1
	end := len(e.Text)
	if i := strings.IndexAny(e.Text[e.Pos:], "\r\n"); i >= 0 {
		end = e.Pos + i
	}
	signs := []rune(e.Text[start:end])
	at := utf8.RuneCountInString(e.Text[start:e.Pos])
	prefix, suffix := "", ""
	if len(signs) > shownSigns {
		from := max(0, at-shownBefore)
		to := min(len(signs), from+shownSigns)
		if from > 0 {
			prefix = "... "
		}
		if to < len(signs) {
			suffix = " ..."
		}
		signs, at = signs[from:to], at-from
	}
	width := len(prefix)
	var b strings.Builder
	b.WriteString(prefix)
	for i, r := range signs {
		if !unicode.IsPrint(r) && !unicode.Is(unicode.Mn, r) || r == utf8.RuneError {
			r = ' '
		}
		if i < at {
			width += displayWidth(r)
		}
		b.WriteRune(r)
	}
	b.WriteString(suffix)
	return b.String(), strings.Repeat(" ", width) + "^"
}

// wideRanges are the blocks whose signs take two columns of a terminal. Source: Unicode Standard Annex 11, East
// Asian Width, the blocks that are wide or fullwidth throughout (from memory; it only moves a caret).
var wideRanges = [][2]rune{{0x1100, 0x115F}, {0x2E80, 0x303E}, {0x3041, 0x33FF}, {0x3400, 0x4DBF}, {0x4E00, 0x9FFF},
	{0xA000, 0xA4CF}, {0xAC00, 0xD7A3}, {0xF900, 0xFAFF}, {0xFE30, 0xFE6F}, {0xFF00, 0xFF60}, {0xFFE0, 0xFFE6},
	{0x1F300, 0x1F64F}, {0x1F900, 0x1F9FF}, {0x20000, 0x3FFFD}}

// displayWidth returns the columns a sign takes on a terminal: 0, 1 or 2.
func displayWidth(r rune) int {
	if unicode.In(r, unicode.Mn, unicode.Me) {
		return 0
	}
	for _, w := range wideRanges {
		if r >= w[0] && r <= w[1] {
			return 2
		}
	}
	return 1
}
