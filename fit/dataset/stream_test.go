package dataset

import (
	"crypto/sha256"
	"errors"
	"fmt"
	"maps"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

func file(t *testing.T, text string) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "t.csv")
	if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
	return path
}

// gathered joins the pieces of a pass.
func gathered(t *testing.T, tb *Table) [][]string {
	t.Helper()
	var out [][]string
	pass := func() error {
		out = nil
		return tb.Each(func(p *Table) error {
			for i := range p.Rows {
				row := []string{fmt.Sprint(p.Lines[i])}
				for _, c := range p.Columns {
					row = append(row, shownCell(c, i))
				}
				out = append(out, row)
			}
			return nil
		})
	}
	err := pass()
	if errors.Is(err, ErrKinds) {
		if err = tb.Survey(); err == nil {
			err = pass()
		}
	}
	if err != nil {
		t.Fatal(err)
	}
	return out
}

func shownCell(c *Column, i int) string {
	switch c.Kind {
	case Number:
		v := c.Value(i)
		return fmt.Sprintf("%v %v", v.Hi, v.Lo)
	case Text:
		if c.Codes[i] < 0 {
			return "missing"
		}
		return c.Levels[c.Codes[i]]
	}
	return "nothing"
}

// TestStreamedIsWhole: a table read piece by piece, plain or compressed, gives the rows of the table read whole, with the same kinds, levels and
// notes.
func TestStreamedIsWhole(t *testing.T) {
	rng := rand.New(rand.NewPCG(41, 42))
	for round := range 40 {
		end := []string{"\n", "\r\n"}[round%2]
		var b strings.Builder
		if round%3 == 0 {
			b.WriteString(bomUTF8)
		}
		b.WriteString("a,b,c,d,e" + end)
		late := round%4 == 0 // a column of numbers turns out to be text
		for i := range 150 {
			c := fmt.Sprint(rng.IntN(50))
			if late && i > 100 && rng.IntN(9) == 0 {
				c = "late"
			}
			d := []string{"north", "south", "NA", "7"}[rng.IntN(4)]
			if round%5 == 0 {
				d = []string{`"x, y"`, `"line` + end + `break"`, `"say ""hi"""`, "plain", `5" pipe`}[rng.IntN(5)]
			}
			gap := ""
			if i > 75 {
				gap = "1.5"
			}
			if round%7 == 0 && rng.IntN(9) == 0 {
				b.WriteString(end)
			}
			fmt.Fprintf(&b, "%.4f,%s,%s,%s,%s%s", rng.NormFloat64(), []string{"", "0.1", "NA", "1e3"}[rng.IntN(4)], c, d, gap, end)
		}
		plain, err := ReadFile(file(t, b.String()))
		if err != nil {
			t.Fatal(err)
		}
		for _, ending := range []string{"", ".gz", ".zst"} {
			path := packed(t, ending, []byte(b.String()))
			tb, err := OpenInPieces(path, nil, 400+rng.IntN(900))
			if err != nil {
				t.Fatal(err)
			}
			sameStreamed(t, fmt.Sprintf("round %d%s", round, ending), tb, plain)
			if want := hashOf(t, path); tb.Hash != want {
				t.Errorf("round %d%s: hash %s, want %s", round, ending, tb.Hash, want)
			}
		}
	}
}

// hashOf is the hash of a file as it is on disk.
func hashOf(t *testing.T, path string) string {
	t.Helper()
	raw, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	return fmt.Sprintf("%x", sha256.Sum256(raw))
}

// sameStreamed surveys a streamed table, passes over it, and compares everything but the hash with the table held.
func sameStreamed(t *testing.T, name string, tb, whole *Table) {
	t.Helper()
	if !tb.Streamed() {
		t.Fatalf("%s was read whole", name)
	}
	if err := tb.Survey(); err != nil {
		t.Fatal(err)
	}
	got := gathered(t, tb)
	if len(got) != whole.Rows || tb.Rows != whole.Rows || !slices.Equal(tb.Notes, whole.Notes) || tb.DecimalComma != whole.DecimalComma {
		t.Fatalf("%s: %d rows, want %d; notes %q, want %q", name, len(got), whole.Rows, tb.Notes, whole.Notes)
	}
	for j, c := range whole.Columns {
		s := tb.Columns[j]
		if s.Name != c.Name || s.Kind != c.Kind || !slices.Equal(s.Levels, c.Levels) || s.Missing != c.Missing || !maps.Equal(s.MissingAs, c.MissingAs) ||
			s.NumericCells != c.NumericCells || s.Decimals != c.Decimals || s.FirstStray != c.FirstStray || s.FirstStrayLine != c.FirstStrayLine {
			t.Errorf("%s: column %+v, want %+v", name, s, c)
		}
		for i := range whole.Rows {
			if got[i][j+1] != shownCell(c, i) || got[i][0] != fmt.Sprint(whole.Lines[i]) {
				t.Fatalf("%s, row %d, column %s: %q in line %s, want %q in line %d", name, i, c.Name, got[i][j+1], got[i][0], shownCell(c, i), whole.Lines[i])
			}
		}
	}
}

// TestStreamedNotes: decimal commas and blank lines are noted as for a table held; blank lines at the end are not.
func TestStreamedNotes(t *testing.T) {
	var b strings.Builder
	b.WriteString("a;b\n")
	for i := range 200 {
		fmt.Fprintf(&b, "%d,5;%d\n", i, i)
		if i%50 == 0 {
			b.WriteString("\n")
		}
	}
	b.WriteString("\n\n")
	path := file(t, b.String())
	whole, err := ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	if len(whole.Notes) != 2 || !strings.HasPrefix(whole.Notes[1], "4 blank lines") {
		t.Fatalf("notes %q", whole.Notes)
	}
	for _, size := range []int{40, 333} {
		tb, err := OpenInPieces(path, nil, size)
		if err != nil {
			t.Fatal(err)
		}
		sameStreamed(t, fmt.Sprint(size), tb, whole)
	}
}

// TestStreamWithoutSurvey: numbers alone need one pass.
func TestStreamWithoutSurvey(t *testing.T) {
	var b strings.Builder
	b.WriteString("a,b\n")
	for i := range 300 {
		fmt.Fprintf(&b, "%d,%d.25\n", i, i)
	}
	tb, err := OpenInPieces(file(t, b.String()), func(n string) bool { return n == "b" }, 300)
	if err != nil {
		t.Fatal(err)
	}
	sum := 0.0
	if err := tb.Each(func(p *Table) error {
		if p.Columns[0].Kind != Skipped || p.Columns[0].Hi != nil {
			t.Fatal("a column that was not asked for was read")
		}
		for _, v := range p.Columns[1].Hi {
			sum += v
		}
		return nil
	}); err != nil {
		t.Fatal(err)
	}
	if want := 300*299/2 + 75.0; math.Abs(sum-want) > 1e-9 || tb.Rows != 300 || tb.Columns[1].Decimals != 2 {
		t.Errorf("sum %v, want %v; %d rows, %d decimals", sum, want, tb.Rows, tb.Columns[1].Decimals)
	}
}

// TestStreamErrors: what is wrong far down is found, a pass can be ended early, and what cannot be cut says so.
func TestStreamErrors(t *testing.T) {
	good := "a,b\n" + strings.Repeat("1,2\n", 500)
	for name, text := range map[string]string{"ragged": good + "1,2,3\n" + good[4:], "latin": good + "1,\xe9\n", "nul": good + "1,\x00\n", "lone return": good + "1,2\r3,4\n"} {
		for _, ending := range []string{"", ".gz", ".zst"} {
			tb, err := OpenInPieces(packed(t, ending, []byte(text)), nil, 200)
			if err != nil {
				t.Fatal(err)
			}
			err = tb.Each(func(*Table) error { return nil })
			if err == nil {
				t.Errorf("%s: no error", name)
			}
			if name == "ragged" {
				var l *LayoutError
				if !errors.As(err, &l) || l.Line != 502 {
					t.Errorf("ragged: %v", err)
				}
			} else if !CannotCut(err) {
				t.Errorf("%s: %v, want a file that cannot be cut", name, err)
			}
		}
	}
	rows := make([]typedRow, 500)
	for _, path := range []string{file(t, good), packed(t, ".gz", []byte(good)), packed(t, ".zst", []byte(good)), writeParquet(t, rows)} {
		tb, err := OpenInPieces(path, nil, 200)
		if err != nil {
			t.Fatal(err)
		}
		enough := errors.New("enough")
		pieces := 0
		if err := tb.Each(func(*Table) error {
			if pieces++; pieces == 3 {
				return enough
			}
			return nil
		}); err != enough || pieces != 3 {
			t.Errorf("%s: an early end gives %v after %d pieces", path, err, pieces)
		}
	}
}
