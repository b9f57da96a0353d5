package page

import (
	"math"
	"strconv"
	"strings"

	"modelmend/web-output/view"
)

// nominal is the share of samples that a 95 % interval should hold the truth in.
const nominal = 0.95

// whatIf is the part on what each alternative does if a truth held: the first truth drawn, all of them in a table.
type whatIf struct {
	Truths       []truthChoice
	Coefficients []string
	Axis         axis
	Nominal      float64 // where the nominal share stands on it
	True         view.Num
	Rows         []truthRow   // of the first truth and coefficient
	All          []truthTable // every truth and coefficient
}

type truthChoice struct {
	Name, Label, Text string
}

type truthTable struct {
	Coefficient string
	Truth       truthChoice
	True        view.Num
	Rows        []truthRow
}

// truthRow is one alternative under one truth.
type truthRow struct {
	view.Simulation
	Label  string
	Index  int
	Said   string
	Mark   mark // coverage, and two Monte Carlo errors either way
	Hollow bool
}

// coverageMark is one row's drawing.
type coverageMark struct {
	Mark    mark
	Nominal float64
	Hollow  bool
}

// truthLabels are short names of the truths, for a choice.
var truthLabels = map[string]string{"as-estimated": "as estimated", "focal-zero": "coefficient of interest zero", "focal-smallest": "the smallest effect of interest", "halfway": "half of what is estimated"}

// shareAxis runs from no sample to all of them; the nominal share is marked in place of the whole.
func shareAxis() axis {
	a := axis{Low: 0, High: 1}
	for _, v := range []float64{0, 0.5, nominal} {
		a.Ticks = append(a.Ticks, tick{a.at(v), strconv.FormatFloat(100*v, 'f', -1, 64) + "\u00a0%"})
	}
	return a
}

// fillTruths prepares the part; nothing is there where nothing was simulated.
func (p *content) fillTruths() {
	r := p.Results
	if r.Simulations.Count == 0 || len(r.Alternatives) == 0 || len(r.Alternatives[0].Simulation) == 0 {
		return
	}
	w := &whatIf{Axis: shareAxis(), Coefficients: simulated(r)}
	w.Nominal = w.Axis.at(nominal)
	for _, t := range r.Simulations.Truths {
		c := truthChoice{t.Name, truthLabels[t.Name], t.Text}
		if c.Label == "" {
			c.Label = t.Name
		}
		w.Truths = append(w.Truths, c)
	}
	for _, name := range w.Coefficients {
		for _, t := range w.Truths {
			table := truthTable{Coefficient: name, Truth: t, True: view.None(), Rows: []truthRow{}}
			for i := range r.Alternatives {
				row := truthRowOf(&r.Alternatives[i], i, t.Name, name, w.Axis)
				if i == 0 {
					table.True = row.True
				}
				table.Rows = append(table.Rows, row)
			}
			w.All = append(w.All, table)
		}
	}
	w.True, w.Rows = w.All[0].True, w.All[0].Rows
	p.WhatIf = w
}

// simulated lists the coefficients that were simulated, in order.
func simulated(r *view.Results) []string {
	out := []string{}
	for _, a := range r.Alternatives {
		for _, s := range a.Simulation {
			seen := false
			for _, n := range out {
				seen = seen || n == s.Coefficient
			}
			if !seen {
				out = append(out, s.Coefficient)
			}
		}
	}
	return out
}

// truthRowOf is the twin of truthRow in truths.js.
func truthRowOf(a *view.Alternative, i int, truth, coefficient string, x axis) truthRow {
	s, comparable := a.Simulated(truth, coefficient)
	row := truthRow{Simulation: lightSimulation(s), Label: a.Label, Index: i}
	switch {
	case s.Truth == "":
		none := view.None()
		row.Simulation = view.Simulation{True: none, Bias: none, BiasError: none, SD: none, SDError: none, RMSE: none, RMSEError: none, Coverage: none, CoverageError: none, WrongSign: none, WrongSignError: none}
		row.Said = "no such coefficient"
		return row
	case s.SD == 0:
		row.Said = "set to zero"
		row.Coverage, row.CoverageError, row.WrongSign = view.None(), view.None(), view.None()
		return row
	case !comparable:
		row.Hollow = true
		row.Said = "a different quantity, in truth " + Figure(float64(row.True), 3)
	}
	if row.Coverage.IsNone() {
		row.Said = strings.TrimPrefix(row.Said+"; no interval", "; ")
		return row
	}
	c, e := float64(row.Coverage), 2*float64(row.CoverageError)
	row.Mark = x.mark(row.Coverage, view.Num(math.Max(0, c-e)), view.Num(math.Min(1, c+e)))
	return row
}

func lightSimulation(s view.Simulation) view.Simulation {
	return view.Simulation{Truth: s.Truth, Coefficient: s.Coefficient, True: six(s.True), Bias: six(s.Bias), BiasError: six(s.BiasError), SD: six(s.SD), SDError: six(s.SDError),
		RMSE: six(s.RMSE), RMSEError: six(s.RMSEError), Coverage: six(s.Coverage), CoverageError: six(s.CoverageError), WrongSign: six(s.WrongSign), WrongSignError: six(s.WrongSignError)}
}

// tenth says a share in per cent with one decimal. It is the twin of tenth in format.js.
func tenth(share view.Num) string {
	if share.IsNone() {
		return "–"
	}
	return strconv.FormatFloat(math.Floor(1000*float64(share)+0.5)/10, 'f', 1, 64) + "\u00a0%"
}

// give says a Monte Carlo error beneath its figure; nothing where there is none. It is the twin of give in format.js.
func give(e view.Num) string {
	if e.IsNone() {
		return ""
	}
	return "± " + Figure(float64(e), 2)
}

// points is give for a share.
func points(e view.Num) string {
	if e.IsNone() {
		return ""
	}
	return "± " + strconv.FormatFloat(math.Floor(1000*float64(e)+0.5)/10, 'f', 1, 64)
}
