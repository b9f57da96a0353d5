package dataset

import (
	"fmt"
	"math"
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"
)

// same compares two tables; NaN equals NaN.
func same(t *testing.T, what string, a, b *Table) {
	t.Helper()
	strip := func(tb *Table) string {
		var s strings.Builder
		fmt.Fprintf(&s, "%d %v %q %v %q\n", tb.Rows, tb.Lines, tb.Delimiter, tb.DecimalComma, tb.Notes)
		for _, c := range tb.Columns {
			fmt.Fprintf(&s, "%+v\n", *c)
		}
		return s.String()
	}
	if strip(a) != strip(b) {
		t.Errorf("%s: pieces give another table\n%.3000s\n%.3000s", what, strip(a), strip(b))
	}
}

// TestPiecesChangeNothing: a text read in small pieces side by side gives the table, or the error, of one go.
func TestPiecesChangeNothing(t *testing.T) {
	rng := rand.New(rand.NewPCG(31, 32))
	cells := []func() string{
		func() string { return fmt.Sprintf("%.3f", rng.NormFloat64()) },
		func() string { return fmt.Sprint(rng.IntN(1000)) },
		func() string {
			return []string{"", "NA", ".", "1e5", "-0", "+3", "12345678901234567890", "0.1234567890123456789"}[rng.IntN(8)]
		},
		func() string { return []string{"north", "south", "3", "NaN", "a b"}[rng.IntN(5)] },
		func() string {
			if rng.IntN(200) == 0 {
				return "stray"
			}
			return fmt.Sprint(rng.IntN(9))
		},
		func() string { return "" },
	}
	for round := range 60 {
		end := []string{"\n", "\r\n"}[round%2]
		var b strings.Builder
		b.WriteString("a,b,c,d,e,f" + end)
		for i := range 200 + rng.IntN(100) {
			for j, cell := range cells {
				if j > 0 {
					b.WriteByte(',')
				}
				b.WriteString(cell())
			}
			b.WriteString(end)
			if round%5 == 0 && i%37 == 0 {
				b.WriteString(end)
			}
			if round == 7 && i == 150 {
				b.WriteString("1,2,3" + end) // ragged
			}
			if round == 8 && i == 120 {
				b.WriteString("1,2,3,4,5,\r6" + end) // a lone return: read in one go
			}
		}
		text := b.String()
		for _, need := range []func(string) bool{nil, func(n string) bool { return n != "c" && n != "e" }} {
			whole, err := buildIn("t.csv", text, need, math.MaxInt/4)
			parts, perr := buildIn("t.csv", text, need, 500+rng.IntN(700))
			if !reflect.DeepEqual(err, perr) {
				t.Fatalf("round %d: errors %v and %v", round, err, perr)
			}
			if err == nil {
				same(t, fmt.Sprintf("round %d", round), whole, parts)
			}
		}
	}
}

// TestSkippedColumns: columns that are not asked for keep their name only; layout errors in them are still found.
func TestSkippedColumns(t *testing.T) {
	only := func(n string) bool { return n == "y" }
	tb, err := buildIn("t.csv", "y,x\n1,1,234\n", only, pieceBytes)
	if err == nil {
		t.Errorf("a ragged row was accepted: %+v", tb)
	}
	tb, err = buildIn("t.csv", "y,x\n1,abc\n2,3\n", only, pieceBytes)
	if err != nil {
		t.Fatal(err)
	}
	if c := tb.Columns[1]; c.Kind != Skipped || c.Hi != nil || c.Codes != nil || c.Name != "x" {
		t.Errorf("skipped column %+v", c)
	}
	if c := tb.Columns[0]; c.Kind != Number || c.Hi[1] != 2 {
		t.Errorf("needed column %+v", c)
	}
}
