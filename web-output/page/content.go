package page

import (
	"html/template"
	"math"
	"slices"
	"strconv"
	"strings"

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
func newAxis(values ...view.Num) axis {
	a := axis{Low: 0, High: 0}
	for _, v := range values {
		if !v.IsNone() {
			a.Low, a.High = math.Min(a.Low, float64(v)), math.Max(a.High, float64(v))
		}
	}
	if a.High == a.Low {
		a.High = a.Low + 1
	}
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

// rung is one alternative on the ladder, for the coefficient shown first.
type rung struct {
	view.Alternative
	Index   int
	Shown   view.Coefficient
	Has     bool
	Mark    mark
	Ratio   view.Num // standard error over that of as-is
	RootMSE view.Num
	Meaning string
	Card    view.Card
	Hollow  bool
}

// tuned is a tuned alternative with the first focal coefficient's path.
type tuned struct {
	view.Alternative
	Index   int
	Last    int
	Chosen  view.PathPoint
	Rows    []tunedRow
	Penalty bool
}

type tunedRow struct {
	Value, Degrees, Error, ErrorSD, Estimate, StandardError view.Num
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
	var values []view.Num
	base := view.None()
	for i, a := range r.Alternatives {
		g := rung{Alternative: a, Index: i, Ratio: view.None(), RootMSE: view.None()}
		g.Shown, _, g.Has = pick(a, p.Focus)
		if i == 0 {
			base = g.Shown.StandardError
		}
		if g.Has {
			values = append(values, g.Shown.Estimate, g.Shown.Low, g.Shown.High)
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
	p.Axis = newAxis(values...)
	for i := range p.Rungs {
		g := &p.Rungs[i]
		if g.Has {
			g.Mark = p.Axis.mark(g.Shown.Estimate, g.Shown.Low, g.Shown.High)
		}
	}
}

func (p *content) fillTuned() {
	for i, a := range p.Results.Alternatives {
		if a.Tuning == nil || len(a.Tuning.Path) < 2 {
			continue
		}
		t := tuned{Alternative: a, Index: i, Last: len(a.Tuning.Path) - 1, Chosen: a.Tuning.Path[a.Tuning.Chosen], Penalty: a.Tuning.Parameter == "penalty"}
		_, at, _ := pick(a, p.Focus)
		for _, pt := range a.Tuning.Path {
			row := tunedRow{Value: pt.Value, Degrees: pt.EffectiveDegrees, Error: pt.Error, ErrorSD: pt.ErrorSD, Estimate: view.None(), StandardError: view.None()}
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
	"sentence": func(s string) string { return strings.ToUpper(s[:min(1, len(s))]) + s[min(1, len(s)):] },
	"plain":    func(v view.Num) string { return strconv.FormatFloat(float64(v), 'f', -1, 64) },
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
	"rungmark": func(band, m mark, a axis, hollow bool) map[string]any {
		return map[string]any{"Band": band, "Mark": m, "Zero": a.at(0), "Hollow": hollow}
	},
}
