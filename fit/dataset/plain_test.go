package dataset

import (
	"math"
	"reflect"
	"strings"
	"testing"
)

// bothWays reads a text without quotes the plain way and the general way.
func bothWays(text string) (plain, general *Table, perr, gerr error) {
	plain, perr = buildIn("t.csv", text, nil, 1)
	general, gerr = buildIn("t.csv", text, nil, math.MaxInt/4)
	return
}

// FuzzPlain: the plain way of reading agrees with the general one, which is itself held against encoding/csv and strconv, on every input.
func FuzzPlain(f *testing.F) {
	for _, s := range []string{"a,b\n1,2\n3.5,-0\n", "a,b\n1,\n\n \n2,x\n", "a;b\n1,5;2\n+3; 4\n", "a\tb\n1\t2\n\t\n", "a,b\n1,2,3\n", "a,b\n1\n", "a,b\r\n.5,5.\r\n-.,-\r\n", "a,b\n1234567890123456,0.000000000000001\n",
		"a,b\n1.2.3,1e5\n0x1,NaN\n", "a,b\n \u00a0\n1,2"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		if strings.ContainsRune(s, '"') || len(s) > 5000 {
			return
		}
		plain, general, perr, gerr := bothWays(s)
		if !reflect.DeepEqual(perr, gerr) {
			t.Fatalf("%q: errors %v and %v", s, perr, gerr)
		}
		if gerr == nil {
			same(t, s, plain, general)
		}
	})
}
