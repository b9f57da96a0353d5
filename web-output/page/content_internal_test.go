package page

import (
	"encoding/json"
	"os"
	"strings"
	"testing"

	"modelmend/web-output/view"
)

func table[T any](t *testing.T, name string) []T {
	t.Helper()
	raw, err := os.ReadFile("testdata/" + name)
	if err != nil {
		t.Fatal(err)
	}
	var rows []T
	if err := json.Unmarshal(raw, &rows); err != nil {
		t.Fatal(err)
	}
	return rows
}

// TestTold holds what a rung says of the procedure repeated to a table made by hand; ladder.test.js holds its twin to the same.
func TestTold(t *testing.T) {
	for _, r := range table[struct {
		Run       view.Resampling
		Estimate  view.Num
		Resampled *view.Resampled
		Text      string
	}](t, "told.json") {
		if got := told(r.Resampled, r.Estimate, r.Run); got != r.Text {
			t.Errorf("got  %q\nwant %q", got, r.Text)
		}
	}
}

// TestAxes holds the ladder's axis and its thin lines to a table made by hand; interval.test.js holds its twin to the same.
func TestAxes(t *testing.T) {
	for _, r := range table[struct {
		Note            string
		Values, More    []view.Num
		Low, High       float64
		Again           [2]view.Num
		From, To        view.Num
		CutLow, CutHigh bool
		Beyond          string
	}](t, "axes.json") {
		a := newWiderAxis(r.Values, r.More)
		if a.Low != r.Low || a.High != r.High {
			t.Errorf("%s: axis from %v to %v, want %v to %v", r.Note, a.Low, a.High, r.Low, r.High)
		}
		k := &view.Resampled{Low: r.Again[0], High: r.Again[1]}
		s := a.stretch(k)
		if s.Shown == r.From.IsNone() || s.Shown && (s.From != float64(r.From) || s.To != float64(r.To)) || s.CutLow != r.CutLow || s.CutHigh != r.CutHigh {
			t.Errorf("%s: %+v", r.Note, s)
		}
		if got := said(rung{Has: true, Again: s, Shown: view.Coefficient{Resampled: k}}); got != r.Beyond {
			t.Errorf("%s: says %q, want %q", r.Note, got, r.Beyond)
		}
	}
}

func TestPortion(t *testing.T) {
	for share, want := range map[view.Num]string{0: "none", 1: "all", 0.0005: "under 0.1\u00a0%", 0.00301: "0.3\u00a0%", 0.0495: "5.0\u00a0%", 0.125: "13\u00a0%", 0.5: "50\u00a0%", 0.993: "99.3\u00a0%", 0.9996: "over 99.9\u00a0%"} {
		if got := portion(share); got != want {
			t.Errorf("%v: %q, want %q", share, got, want)
		}
	}
	if got := portion(view.None()); got != "–" {
		t.Errorf("nothing: %q", got)
	}
}

// TestChosenAgain: the sentence on what was chosen, with the edges of the grid said where they were chosen.
func TestChosenAgain(t *testing.T) {
	path := make([]view.PathPoint, 3)
	for _, c := range []struct {
		parameter string
		k         *view.TuningResampled
		want      string
	}{
		{"penalty", &view.TuningResampled{Low: 0, Median: 0.0123456, High: 2, Shares: []view.Num{0.041, 0.859, 0.1}},
			"In 999 resamples the chosen penalty lies between 0 and 2.00 (the middle 95 %), median 0.0123; in 14 % it is at an edge of the grid: no penalty in 4.1 %, the largest penalty tried in 10 %."},
		{"penalty", &view.TuningResampled{Low: 1, Median: 1, High: 1, Shares: []view.Num{0, 1, 0}}, "In 999 resamples the chosen penalty lies between 1.00 and 1.00 (the middle 95 %), median 1.00; it is never at an edge of the grid."},
		{"components", &view.TuningResampled{Low: 1, Median: 2, High: 2, Shares: []view.Num{0, 0.3, 0.7}},
			"In 999 resamples the chosen number of components lies between 1 and 2 (the middle 95 %), median 2; in 70 % it is at the edge of the grid, all 2 components."},
		{"components", &view.TuningResampled{Low: 0, Median: 1, High: 1, Shares: []view.Num{0.5, 0.5, 0}},
			"In 999 resamples the chosen number of components lies between 0 and 1 (the middle 95 %), median 1; in 50 % it is at the edge of the grid, no component."},
		{"components", nil, ""},
	} {
		got := chosenAgain(&view.Tuning{Parameter: c.parameter, Path: path, Resampled: c.k}, 999)
		if got = strings.ReplaceAll(got, "\u00a0", " "); got != c.want {
			t.Errorf("got  %q\nwant %q", got, c.want)
		}
	}
}

// TestSlimResamples: the page's data carries resampled numbers with six digits and leaves the results as they are.
func TestSlimResamples(t *testing.T) {
	k := &view.Resampled{StandardError: 0.123456789, Low: -1.00000049, High: 2, SharePositive: 0.999999999999984, Used: 7}
	r := &view.Results{Alternatives: []view.Alternative{{Coefficients: []view.Coefficient{{Resampled: k}, {}},
		Tuning: &view.Tuning{Resampled: &view.TuningResampled{Median: 0.123456789, Shares: []view.Num{1}}}}}}
	s := slim(r)
	if got := s.Alternatives[0].Coefficients[0].Resampled; got.StandardError != 0.123457 || got.Low != -1 || got.SharePositive != 1 || got.Used != 7 {
		t.Errorf("%+v", got)
	}
	if got := s.Alternatives[0].Tuning.Resampled; got.Median != 0.123457 {
		t.Errorf("%+v", got)
	}
	if s.Alternatives[0].Coefficients[1].Resampled != nil || k.StandardError != 0.123456789 || r.Alternatives[0].Tuning.Resampled.Median != 0.123456789 {
		t.Error("slimming changed the results")
	}
}
