package equation

import (
	"slices"
	"strings"
)

// Quote returns a column name as it must be written inside an expression: as it is when it is a plain word, else in double
// quotes, those inside doubled.
func Quote(name string) string {
	if e, err := ParseExpr(name); err == nil && e.Kind == Name && e.Text == name && !strings.HasPrefix(name, `"`) && !slices.Contains([]string{"and", "or", "not", "in"}, name) {
		return name
	}
	return quote(name)
}
