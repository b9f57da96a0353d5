package page

import (
	"html/template"
	"math"
	"slices"
	"strconv"
	"strings"
	"unicode"
	"unicode/utf8"

	"modelmend/fit/figures"
	"modelmend/web-output/view"
)

// choice is a coefficient that the ladder can be drawn for.
type choice struct {
	Name    string   `json:"name"`
	Derived bool     `json:"derived"`
	SD      view.Num `json:"sd"` // of the regressor, for standard-deviation units; null where it has none
}

// choicesOf lists them: the effect of a focal variable that enters several terms first, then the focal coefficients, the rest, and what
// single remedies add.
func choicesOf(r *view.Results) []choice {
	if len(r.Alternatives) == 0 {
		return []choice{}
	}
	sd := func(name string) view.Num {
		for _, g := range r.Diagnosis.Regressors {
			if g.Name == name {
				return g.SD
			}
		}
		return view.None()
	}
	out := []choice{}
	add := func(name string, derived bool, s view.Num) {
		if !slices.ContainsFunc(out, func(c choice) bool { return c.Name == name && c.Derived == derived }) {
			out = append(out, choice{name, derived, s})
		}
	}
	for _, k := range r.Alternatives[0].Derived {
		add(k.Name, true, sd(strings.TrimPrefix(k.Name, "effect of ")))
	}
	for _, f := range r.Focal {
		add(f, false, sd(f))
	}
	for _, k := range r.Alternatives[0].Coefficients {
		if k.Name != "constant" {
			add(k.Name, false, sd(k.Name))
		}
	}
	for _, a := range r.Alternatives {
		for _, k := range a.Derived {
			add(k.Name, true, view.None())
		}
	}
	return out
}

// content is what the template sees.
type content struct {
	Results *view.Results
	Choices []choice
	Errors  []errorsOf
	Data    template.JS
	Style   template.CSS
	Library template.JS
	Script  template.JS
	Policy  string

	Math   template.HTML
	Ledger []ledgerFigure
	Focus  choice
	Axis   axis
	Rungs  []rung
	Tuned  []tuned
	Tall   bool // rungs have room for a second interval
	Prior  bool // a prior is implied somewhere
	WhatIf *whatIf
	Leak   string // what random folds hide, where it was measured
}

// axis maps values to percentages of the width.
type axis struct {
	Low, High float64
	Ticks     []tick
}

type tick struct {
	At   float64 // per cent
	Text string
}

func (a axis) at(v float64) float64 {
	if a.High == a.Low {
		return 50
	}
	return math.Round((2+96*(v-a.Low)/(a.High-a.Low))*100) / 100
}

// newAxis spans the values with round ticks; zero is always on it.
func newAxis(values ...view.Num) axis { return newWiderAxis(values, nil) }

// newWiderAxis spans the values, and reaches for more of them by no more than half that span at either end: one very wide interval must
// not squash the rest.
func newWiderAxis(values, more []view.Num) axis {
	a := axis{Low: 0, High: 0}
	span := func(list []view.Num, low, high float64) {
		for _, v := range list {
			if !v.IsNone() {
				a.Low, a.High = math.Min(a.Low, math.Max(low, float64(v))), math.Max(a.High, math.Min(high, float64(v)))
			}
		}
	}
	span(values, math.Inf(-1), math.Inf(1))
	if a.High == a.Low {
		a.High = a.Low + 1
	}
	reach := (a.High - a.Low) / 2
	span(more, a.Low-reach, a.High+reach)
	step := niceStep((a.High - a.Low) / 4)
	for k := math.Ceil(a.Low / step); k*step <= a.High+step*1e-9; k++ {
		a.Ticks = append(a.Ticks, tick{a.at(k * step), Figure(k*step, 3)})
	}
	return a
}

func niceStep(raw float64) float64 {
	base := math.Pow(10, math.Floor(math.Log10(raw)))
	for _, m := range []float64{1, 2, 5, 10} {
		if m*base >= raw {
			return m * base
		}
	}
	return 10 * base
}

// ledgerFigure is one focal coefficient's precision, ready to draw.
type ledgerFigure struct {
	view.LedgerEntry
	RootRows, Factor float64
	Axis             axis
	Now, Then        mark
	Zero             float64
	Effects          []float64
}

// mark is an interval on an axis, in per cent.
type mark struct {
	From, Width, At float64
	Shown           bool
}

func (a axis) mark(estimate, low, high view.Num) mark {
	if estimate.IsNone() {
		return mark{}
	}
	m := mark{At: a.at(float64(estimate)), Shown: true}
	if !low.IsNone() && !high.IsNone() {
		m.From = a.at(float64(low))
		m.Width = math.Round((a.at(float64(high))-m.From)*100) / 100
	}
	return m
}

// stretch is the interval of the procedure repeated on an axis, in per cent; an end that lies beyond the axis is cut there.
type stretch struct {
	From, To        float64
	CutLow, CutHigh bool
	Shown           bool
}

func (a axis) stretch(r *view.Resampled) stretch {
	if r == nil || r.Low.IsNone() || r.High.IsNone() {
		return stretch{}
	}
	low, high := float64(r.Low), float64(r.High)
	return stretch{a.at(math.Min(a.High, math.Max(a.Low, low))), a.at(math.Max(a.Low, math.Min(a.High, high))), low < a.Low, high > a.High, true}
}

// rung is one alternative on the ladder, for the coefficient shown first.
type rung struct {
	view.Alternative
	Index   int
	Shown   view.Coefficient
	Has     bool
	Mark    mark
	Again   stretch
	Said    string
	Told    string     // what repeating the procedure gave
	Kinds   []kindLine // every kind of standard error
	Missing string     // that the kind shown is missing
	Prior   string     // the posterior standard deviation, where a prior is implied
	Ratio   view.Num   // standard error over that of as-is
	RootMSE view.Num
	Meaning string
	Card    view.Card
	Hollow  bool
}

// rungmark is one rung's drawing: the interval given the tuning at Middle and, where there is room, that of the procedure repeated below it.
type rungmark struct {
	Band, Mark          mark
	Again               stretch
	Zero                float64
	Hollow              bool
	Height, Middle, Top float64
}

// lineEnd is one end of a thin line: a cap, or an arrow where it is cut.
type lineEnd struct {
	At       float64
	Cut, Low bool
}

// tuned is a tuned alternative with the first focal coefficient's path.
type tuned struct {
	view.Alternative
	Index   int
	Last    int
	Chosen  view.PathPoint
	Rows    []tunedRow
	Penalty bool
	Told    string // what was chosen in the resamples
	Unseen  string // the share of no penalty, which has no place on a logarithmic axis
}

type tunedRow struct {
	Value, Degrees, Error, ErrorSD, Estimate, StandardError, Share view.Num
}

func (p *content) fill() {
	r := p.Results
	p.Math = equationMath(r.Equation, r.Diagnosis.Uncentered)
	for _, e := range r.Diagnosis.Ledger {
		if !e.Focal {
			continue
		}
		f := ledgerFigure{LedgerEntry: e, RootRows: math.Sqrt(float64(e.Rows - 1)), Factor: math.Sqrt(float64(e.VIF))}
		if r.Diagnosis.Uncentered {
			f.RootRows = math.Sqrt(float64(e.Rows))
		}
		values := []view.Num{e.Low, e.High, e.LowUntangled, e.HighUntangled, e.SmallestEffect}
		f.Axis = newAxis(values...)
		f.Now = f.Axis.mark(e.Estimate, e.Low, e.High)
		f.Then = f.Axis.mark(e.Estimate, e.LowUntangled, e.HighUntangled)
		f.Zero = f.Axis.at(0)
		if !e.SmallestEffect.IsNone() {
			for _, v := range []float64{-float64(e.SmallestEffect), float64(e.SmallestEffect)} {
				if v >= f.Axis.Low && v <= f.Axis.High {
					f.Effects = append(f.Effects, f.Axis.at(v))
				}
			}
		}
		p.Ledger = append(p.Ledger, f)
	}
	if len(p.Choices) > 0 {
		p.Focus = p.Choices[0]
		p.fillLadder()
		p.fillTuned()
		p.fillTruths()
	}
	for _, n := range r.Notes {
		if n.Code == "folds-leak" {
			p.Leak = n.Text
		}
	}
}

// pick finds the chosen coefficient in an alternative.
func pick(a view.Alternative, c choice) (view.Coefficient, int, bool) {
	list := a.Coefficients
	if c.Derived {
		list = a.Derived
	}
	for i, k := range list {
		if k.Name == c.Name {
			return k, i, true
		}
	}
	return view.Coefficient{}, -1, false
}

func (p *content) fillLadder() {
	r := p.Results
	var values, more []view.Num
	base := view.None()
	p.Tall = r.Run.Resampling.Count > 0
	for i, a := range r.Alternatives {
		g := rung{Alternative: a, Index: i, Ratio: view.None(), RootMSE: view.None()}
		at := 0
		g.Shown, at, g.Has = pick(a, p.Focus)
		if i == 0 {
			base = g.Shown.StandardError
		}
		if g.Has {
			g.Shown.Resampled = sixOf(g.Shown.Resampled)
			own := p.Errors[i].Coefficients
			if p.Focus.Derived {
				own = p.Errors[i].Derived
			}
			g.Kinds = kindLines(r.Run.StandardErrors, p.Errors[i], own[at], g.Shown.Estimate)
			if len(own[at].SE) > 0 && own[at].SE[0].IsNone() && p.Errors[i].Reasons[0] != "" {
				g.Missing = "no " + r.Run.StandardErrors[0].Kind + " standard error"
			}
			g.Told = told(g.Shown.Resampled, g.Shown.Estimate, r.Run.Resampling)
			if d := g.Shown.PosteriorSD; !d.IsNone() {
				g.Prior = posterior(d)
			}
			values = append(values, g.Shown.Estimate, g.Shown.Low, g.Shown.High)
			if k := g.Shown.Resampled; k != nil {
				more = append(more, k.Low, k.High)
			}
			g.Ratio = view.Num(float64(g.Shown.StandardError) / float64(base))
			g.RootMSE = view.Num(math.Sqrt(float64(g.Shown.EstimatedMSE)))
			g.Hollow = g.Shown.Status == "different quantity"
		}
		for _, m := range a.Meaning {
			if m.Coefficient == p.Focus.Name {
				g.Meaning = m.Text
			}
		}
		for _, c := range r.Cards {
			if c.Key == a.Remedy {
				g.Card = c
			}
		}
		p.Rungs = append(p.Rungs, g)
	}
	p.Axis = newWiderAxis(values, more)
	for i := range p.Rungs {
		g := &p.Rungs[i]
		if g.Has {
			g.Mark = p.Axis.mark(g.Shown.Estimate, g.Shown.Low, g.Shown.High)
			g.Again = p.Axis.stretch(g.Shown.Resampled)
		}
		g.Said = said(*g)
		for _, c := range append(append([]view.Coefficient{}, g.Coefficients...), g.Derived...) {
			p.Prior = p.Prior || !c.PosteriorSD.IsNone()
		}
	}
}

// said is what stands under a rung's drawing: a status that draws nothing or draws otherwise, and how far a cut line goes.
func said(g rung) string {
	var parts []string
	switch {
	case !g.Has:
		parts = append(parts, "no such coefficient")
	case g.Shown.Status == "zero":
		parts = append(parts, "set to zero")
	case g.Shown.Status == "not identified":
		parts = append(parts, "not identified")
	case g.Shown.Status == "different quantity":
		parts = append(parts, "a different quantity")
	}
	if g.Missing != "" {
		parts = append(parts, g.Missing)
	}
	var ends []string
	if g.Again.CutLow {
		ends = append(ends, "to "+Figure(float64(g.Shown.Resampled.Low), 3))
	}
	if g.Again.CutHigh {
		ends = append(ends, "to "+Figure(float64(g.Shown.Resampled.High), 3))
	}
	if len(ends) > 0 {
		parts = append(parts, "the thin line goes on "+strings.Join(ends, " and "))
	}
	return strings.Join(parts, "; ")
}

// told says what repeating the whole procedure gave for one coefficient. It is the twin of told in ladder.js.
func told(k *view.Resampled, estimate view.Num, r view.Resampling) string {
	if k == nil || estimate.IsNone() || r.Count == 0 {
		return ""
	}
	s := "Repeated " + strconv.Itoa(r.Count) + " times on resampled " + r.Drawn + ": "
	switch {
	case k.Used == 0:
		return s + "the coefficient never had a value of its own."
	case k.Low.IsNone() || k.High.IsNone():
		s += "too few values for limits"
	default:
		s += "the middle 95\u00a0% of the estimates lie between " + Figure(float64(k.Low), 3) + " and " + Figure(float64(k.High), 3)
		if b := k.BiasCorrected; b.Low.IsNone() || b.High.IsNone() {
			s += " (bias-corrected and accelerated limits cannot be formed)"
		} else {
			s += " (bias-corrected and accelerated: " + Figure(float64(b.Low), 3) + " to " + Figure(float64(b.High), 3) + ")"
		}
	}
	if !k.SharePositive.IsNone() && !k.ShareNegative.IsNone() {
		sign, share := "positive", k.SharePositive
		if k.ShareNegative > share {
			sign, share = "negative", k.ShareNegative
		}
		s += "; " + portion(share) + " are " + sign
		if zero := 1 - float64(k.SharePositive) - float64(k.ShareNegative); zero > 5e-6 {
			s += ", " + portion(view.Num(zero)) + " zero"
		}
		if e := float64(estimate); e > 0 && sign == "negative" || e < 0 && sign == "positive" && share > 0 {
			own := "negative"
			if e > 0 {
				own = "positive"
			}
			s += ", though the estimate itself is " + own
		}
	}
	s += "."
	if left := r.Count - k.Used; left > 0 {
		s += " In " + strconv.Itoa(left) + " of the " + strconv.Itoa(r.Count) + " it had no value of its own."
	}
	return s
}

// posterior is the twin of posterior in ladder.js.
func posterior(d view.Num) string {
	return "Where this alternative is read as a prior, the posterior standard deviation is " + Figure(float64(d), 3) + "."
}

// portion says a share in per cent: whole numbers, one decimal near the ends, never 0 or 100 for what is not. It is the twin of portion
// in format.js.
func portion(share view.Num) string {
	p := 100 * float64(share)
	switch {
	case share.IsNone():
		return "–"
	case p <= 0:
		return "none"
	case p >= 100:
		return "all"
	case p < 0.1:
		return "under 0.1\u00a0%"
	case p > 99.9:
		return "over 99.9\u00a0%"
	case p < 5 || p > 95:
		return strconv.FormatFloat(math.Floor(10*p+0.5)/10, 'f', 1, 64) + "\u00a0%"
	}
	return strconv.FormatFloat(math.Floor(p+0.5), 'f', 0, 64) + "\u00a0%"
}

// chosenAgain says what was chosen in the resamples, and how often at an edge of what was tried.
func chosenAgain(t *view.Tuning, count int) string {
	k := t.Resampled
	if k == nil || len(k.Shares) != len(t.Path) || len(k.Shares) < 2 {
		return ""
	}
	what, show, first, last := "number of components", plain, "no component", "all "+strconv.Itoa(len(t.Path)-1)+" components"
	if t.Parameter == "penalty" {
		what, show, first, last = "penalty", func(v view.Num) string { return Figure(float64(v), 3) }, "no penalty", "the largest penalty tried"
	}
	s := "In " + strconv.Itoa(count) + " resamples the chosen " + what + " lies between " + show(k.Low) + " and " + show(k.High) + " (the middle 95\u00a0%), median " + show(k.Median)
	low, high := six(k.Shares[0]), six(k.Shares[len(k.Shares)-1])
	switch {
	case low > 0 && high > 0:
		return s + "; in " + portion(low+high) + " it is at an edge of the grid: " + first + " in " + portion(low) + ", " + last + " in " + portion(high) + "."
	case low > 0:
		return s + "; in " + portion(low) + " it is at the edge of the grid, " + first + "."
	case high > 0:
		return s + "; in " + portion(high) + " it is at the edge of the grid, " + last + "."
	}
	return s + "; it is never at an edge of the grid."
}

func plain(v view.Num) string { return strconv.FormatFloat(float64(v), 'f', -1, 64) }

func (p *content) fillTuned() {
	for i, a := range p.Results.Alternatives {
		if a.Tuning == nil || len(a.Tuning.Path) < 2 {
			continue
		}
		t := tuned{Alternative: a, Index: i, Last: len(a.Tuning.Path) - 1, Chosen: a.Tuning.Path[a.Tuning.Chosen], Penalty: a.Tuning.Parameter == "penalty"}
		_, at, _ := pick(a, p.Focus)
		t.Told = chosenAgain(a.Tuning, p.Results.Run.Resampling.Count)
		if t.Told != "" && t.Penalty && a.Tuning.Path[0].Value == 0 && a.Tuning.Resampled.Shares[0] > 0 {
			t.Unseen = portion(six(a.Tuning.Resampled.Shares[0]))
		}
		for k, pt := range a.Tuning.Path {
			row := tunedRow{Value: pt.Value, Degrees: pt.EffectiveDegrees, Error: pt.Error, ErrorSD: pt.ErrorSD, Estimate: view.None(), StandardError: view.None()}
			if t.Told != "" {
				row.Share = six(a.Tuning.Resampled.Shares[k])
			}
			list := pt.Coefficients
			if p.Focus.Derived {
				list = pt.Derived
			}
			if at >= 0 && at < len(list) {
				row.Estimate, row.StandardError = list[at].Estimate, list[at].StandardError
			}
			t.Rows = append(t.Rows, row)
		}
		p.Tuned = append(p.Tuned, t)
	}
}

// Figure prints a number with so many significant digits, a true minus sign, and no exponent where the size allows. It is the twin of
// format.js; both are held to the same table in the tests.
func Figure(v float64, digits int) string {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return "–"
	}
	if v == 0 {
		return "0"
	}
	s := strconv.FormatFloat(awayFromTie(v, digits), 'e', digits-1, 64)
	exp, _ := strconv.Atoi(s[strings.IndexByte(s, 'e')+1:])
	if exp < -5 || exp >= 9 {
		mantissa := s[:strings.IndexByte(s, 'e')]
		if strings.Contains(mantissa, ".") {
			mantissa = strings.TrimRight(strings.TrimRight(mantissa, "0"), ".")
		}
		return minus(mantissa) + "e" + minus(strconv.Itoa(exp))
	}
	f, _ := strconv.ParseFloat(s, 64)
	return minus(strconv.FormatFloat(f, 'f', max(0, digits-1-exp), 64))
}

// awayFromTie moves a value that lies exactly between two figures to the one further from zero, as script does.
func awayFromTie(v float64, digits int) float64 {
	s := strconv.FormatFloat(math.Abs(v), 'e', 60, 64)
	tail := s[:strings.IndexByte(s, 'e')]
	if tail = strings.Replace(tail, ".", "", 1)[digits:]; tail[0] == '5' && strings.Trim(tail[1:], "0") == "" {
		return math.Nextafter(v, math.Copysign(math.Inf(1), v))
	}
	return v
}

func minus(s string) string { return strings.Replace(s, "-", "−", 1) }

// sentence begins a text with a capital.
func sentence(s string) string {
	r, n := utf8.DecodeRuneInString(s)
	if n == 0 || r == utf8.RuneError {
		return s
	}
	return string(unicode.ToUpper(r)) + s[n:]
}

// apart says what is kept together in the folds set beside random ones.
func apart(kind string) string {
	switch kind {
	case "clusters":
		return "whole clusters held out"
	case "blocks":
		return "stretches of time held out"
	case "rolling":
		return "later periods predicted from earlier ones"
	}
	return kind
}

var functions = template.FuncMap{
	"num":  func(v view.Num) string { return Figure(float64(v), 3) },
	"fig":  func(v float64) string { return Figure(v, 3) },
	"num4": func(v view.Num) string { return Figure(float64(v), 4) },
	"percent": func(v view.Num) string {
		if v.IsNone() {
			return "–"
		}
		return figures.Percent(float64(v))
	},
	"factor": func(v view.Num, reason string) string {
		if v.IsNone() && reason != "" {
			return "exact"
		}
		return Figure(float64(v), 3)
	},
	"coefOf":   func(a view.Alternative, i int) view.Coefficient { return a.Coefficients[i] },
	"words":    func(s []string) string { return strings.Join(s, ", ") },
	"none":     func(v view.Num) bool { return v.IsNone() },
	"sentence": sentence,
	"stop":     func(s string) string { return strings.TrimSuffix(s, ".") + "." },
	"lead":     func(s string) string { before, _, _ := strings.Cut(s, " ("); return before },
	"after":    func(s string) string { return strings.TrimPrefix(s, strings.SplitN(s, " (", 2)[0]) },
	"percents": func(s string) string { return strings.ReplaceAll(s, " %", "\u00a0%") },
	"folds":    view.FoldSentence,
	"of":       view.Of,
	"tenth":    tenth,
	"give":     give,
	"points":   points,
	"apart":    apart,
	"coverage": func(r truthRow, nominal float64) coverageMark { return coverageMark{r.Mark, nominal, r.Hollow} },
	"plain":    plain,
	"portion":  portion,
	"tip":      func(at float64, cut, low bool) lineEnd { return lineEnd{at, cut, low} },
	"rootnum":  func(v view.Num) string { return Figure(math.Sqrt(float64(v)), 3) },
	"share": func(v view.Num) string {
		if v.IsNone() {
			return "–"
		}
		return minus(strconv.FormatFloat(float64(v), 'f', 3, 64))
	},
	"sixty":     func(v view.Num) string { return strconv.FormatFloat(60*float64(v), 'f', 1, 64) },
	"little":    func(v view.Num) bool { return v.IsNone() || v < 0.005 },
	"lowdigits": func(v view.Num) bool { return v < 6 },
	"rungmark": func(band mark, g rung, a axis, tall bool) rungmark {
		m := rungmark{Band: band, Mark: g.Mark, Again: g.Again, Zero: a.at(0), Hollow: g.Hollow, Height: 26, Middle: 13, Top: 11.5}
		if tall {
			m.Height, m.Middle, m.Top = 36, 12, 10.5
		}
		return m
	},
}
