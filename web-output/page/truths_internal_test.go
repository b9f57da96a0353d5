package page

import (
	"testing"

	"modelmend/web-output/view"
)

// TestKindLines holds what is said of every kind to a table made by hand; kinds.test.js holds its twin to the same.
func TestKindLines(t *testing.T) {
	for _, r := range table[struct {
		Kinds      []view.ErrorKind
		T, Degrees []view.Num
		Reasons    []string
		SE, P      []view.Num
		Estimate   view.Num
		Lines      [][2]string
	}](t, "kinds.json") {
		got := kindLines(r.Kinds, errorsOf{T: r.T, Degrees: r.Degrees, Reasons: r.Reasons}, kindsOf{r.SE, r.P}, r.Estimate)
		if len(got) != len(r.Lines) {
			t.Fatalf("%d lines, want %d", len(got), len(r.Lines))
		}
		for i, l := range got {
			if l.Name != r.Lines[i][0] || l.Text != r.Lines[i][1] {
				t.Errorf("got  %q\nwant %q", l, r.Lines[i])
			}
		}
	}
}

// TestTruthRows holds a row under a truth to a table made by hand; truths.test.js holds its twin to the same.
func TestTruthRows(t *testing.T) {
	for _, r := range table[struct {
		Note, Status, Said     string
		Simulation             view.Simulation
		Hollow                 bool
		Coverage, Points, Give string
		At, From, Width        view.Num
	}](t, "truths.json") {
		a := view.Alternative{Coefficients: []view.Coefficient{{Name: "x", Status: r.Status}}, Simulation: []view.Simulation{r.Simulation}}
		row := truthRowOf(&a, 0, "as-estimated", "x", shareAxis())
		if row.Said != r.Said || row.Hollow != r.Hollow || tenth(row.Coverage) != r.Coverage || points(row.CoverageError) != r.Points || give(row.BiasError) != r.Give {
			t.Errorf("%s: says %q, hollow %v, %s %s, bias %s", r.Note, row.Said, row.Hollow, tenth(row.Coverage), points(row.CoverageError), give(row.BiasError))
		}
		if row.Mark.Shown == r.At.IsNone() || row.Mark.Shown && (row.Mark.At != float64(r.At) || row.Mark.From != float64(r.From) || row.Mark.Width != float64(r.Width)) {
			t.Errorf("%s: drawn %+v", r.Note, row.Mark)
		}
	}
}

// TestSentence: a capital at the start, whatever the letter; nothing is broken.
func TestSentence(t *testing.T) {
	for s, want := range map[string]string{"": "", "a b": "A b", "écart": "Écart", "0 rows": "0 rows", "\xff": "\xff"} {
		if got := sentence(s); got != want {
			t.Errorf("%q: %q", s, got)
		}
	}
}
