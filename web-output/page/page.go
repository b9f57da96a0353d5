// Package page renders one self-contained HTML file: a memo that is complete without script and better with it.
//
// A view.Results goes in; HTML comes out, all or nothing. Script, style and data are inlined under a strict content policy; nothing is
// fetched. Names from the data are text wherever they stand. Before it stands chart, after it cmd.
package page

import (
	"bytes"
	"crypto/sha256"
	"embed"
	"encoding/base64"
	"encoding/json"
	"fmt"
	"html/template"
	"io"
	"strconv"
	"strings"
	"sync"

	"modelmend/web-output/chart"
	"modelmend/web-output/view"
)

//go:embed page.tmpl assets/css/*.css assets/js/*.js assets/third-party/echarts/echarts.js
var files embed.FS

// styles and modules are joined in this order.
var (
	styles  = []string{"base", "table", "figure", "print"}
	modules = []string{"format", "state", "paths", "interval", "charts", "kinds", "ladder", "matrix", "tuning", "truths", "copy", "main"}
)

// assets are the parts that are the same for every page.
type assets struct {
	style, library, script string
	policy                 string
	template               *template.Template
}

var loadAssets = sync.OnceValues(func() (*assets, error) {
	a := &assets{}
	var err error
	if a.style, err = join("assets/css/", styles, ".css", func(s string) string { return s }); err != nil {
		return nil, err
	}
	body, err := join("assets/js/", modules, ".js", withoutModuleWords)
	if err != nil {
		return nil, err
	}
	a.script = "(() => {\n\"use strict\";\n" + body + "})();\n"
	lib, err := files.ReadFile("assets/third-party/echarts/echarts.js")
	if err != nil {
		return nil, err
	}
	// A label that reads __proto__ must not reach Object.prototype through a cache keyed by text.
	a.library = "delete Object.prototype.__proto__;\n" + string(lib)
	a.policy = fmt.Sprintf("default-src 'none'; script-src '%s' '%s'; style-src-elem '%s'; style-src-attr 'unsafe-inline'; img-src data: blob:; base-uri 'none'; form-action 'none'",
		hash(a.library), hash(a.script), hash(a.style))
	a.template, err = template.New("page.tmpl").Funcs(functions).ParseFS(files, "page.tmpl")
	return a, err
})

func join(folder string, names []string, ending string, edit func(string) string) (string, error) {
	var b strings.Builder
	for _, n := range names {
		raw, err := files.ReadFile(folder + n + ending)
		if err != nil {
			return "", err
		}
		b.WriteString(edit(string(raw)))
		b.WriteByte('\n')
	}
	return b.String(), nil
}

// withoutModuleWords turns a module into plain script: import lines go, the word export goes.
func withoutModuleWords(s string) string {
	var b strings.Builder
	for _, line := range strings.SplitAfter(s, "\n") {
		if strings.HasPrefix(line, "import ") {
			continue
		}
		b.WriteString(strings.TrimPrefix(line, "export "))
	}
	return b.String()
}

func hash(s string) string {
	sum := sha256.Sum256([]byte(s))
	return "sha256-" + base64.StdEncoding.EncodeToString(sum[:])
}

// slim leaves out of the page's data what results.json alone needs: the fold of every row, the covariances, texts that stand in the page already, the
// kinds of standard error (they are written down shorter, see errorsIn), and digits that nothing shows.
func slim(r *view.Results) *view.Results {
	out := *r
	out.Run.Folds.Assignment = [][]int{}
	out.Cards, out.NotApplicable, out.Run.Study = []view.Card{}, []view.NotApplicable{}, ""
	out.Alternatives = append([]view.Alternative{}, r.Alternatives...)
	for i := range out.Alternatives {
		a := &out.Alternatives[i]
		a.Covariance = [][]view.Num{}
		a.Coefficients, a.Derived = lighter(a.Coefficients), lighter(a.Derived)
		a.Tests, a.BreakEven, a.WorstCoverage, a.Costs, a.Notes = []view.Test{}, []view.BreakEven{}, []view.WorstCoverage{}, []string{}, []view.Note{}
		a.Simulation = append([]view.Simulation{}, a.Simulation...)
		for k := range a.Simulation {
			a.Simulation[k] = lightSimulation(a.Simulation[k])
		}
		a.OutOfSample.Folds, a.OutOfSample.Apart = []view.FoldError{}, nil
		if a.Tuning == nil {
			continue
		}
		t := *a.Tuning
		t.Path = append([]view.PathPoint{}, t.Path...)
		for k := range t.Path {
			t.Path[k].Coefficients = fewer(t.Path[k].Coefficients)
			t.Path[k].Derived = fewer(t.Path[k].Derived)
		}
		if t.Resampled != nil { // the shares stand in the chart's options already
			t.Resampled = &view.TuningResampled{Low: six(t.Resampled.Low), Median: six(t.Resampled.Median), High: six(t.Resampled.High), Shares: []view.Num{}}
		}
		a.Tuning = &t
	}
	return &out
}

// step packs one step of a path: coefficients, then derived ones, four numbers each, as paths.js unpacks them.
type step [2][][4]view.Num

// packPaths takes the coefficients of the paths out of slimmed results and returns them packed, by place of the alternative: names would take up more
// room than the numbers.
func packPaths(r *view.Results) map[int][]step {
	out := map[int][]step{}
	pack := func(list []view.PathCoefficient) [][4]view.Num {
		packed := [][4]view.Num{}
		for _, c := range list {
			packed = append(packed, [4]view.Num{c.Estimate, c.StandardError, c.EstimatedBias, c.EstimatedMSE})
		}
		return packed
	}
	for i := range r.Alternatives {
		t := r.Alternatives[i].Tuning
		if t == nil {
			continue
		}
		for k := range t.Path {
			p := &t.Path[k]
			out[i] = append(out[i], step{pack(p.Coefficients), pack(p.Derived)})
			p.Coefficients, p.Derived = []view.PathCoefficient{}, []view.PathCoefficient{}
		}
	}
	return out
}

// lighter rounds what was resampled.
func lighter(list []view.Coefficient) []view.Coefficient {
	out := append([]view.Coefficient{}, list...)
	for i := range out {
		out[i].Resampled = sixOf(out[i].Resampled)
		out[i].Errors = []view.StandardError{}
	}
	return out
}

func sixOf(k *view.Resampled) *view.Resampled {
	if k == nil {
		return nil
	}
	return &view.Resampled{StandardError: six(k.StandardError), Low: six(k.Low), High: six(k.High),
		BiasCorrected: view.Limits{Low: six(k.BiasCorrected.Low), High: six(k.BiasCorrected.High)},
		SharePositive: six(k.SharePositive), ShareNegative: six(k.ShareNegative), Used: k.Used}
}

func fewer(list []view.PathCoefficient) []view.PathCoefficient {
	out := make([]view.PathCoefficient, len(list))
	for i, c := range list {
		out[i] = view.PathCoefficient{Estimate: six(c.Estimate), StandardError: six(c.StandardError), EstimatedBias: six(c.EstimatedBias), EstimatedMSE: six(c.EstimatedMSE)}
	}
	return out
}

// six rounds to six significant digits.
func six(n view.Num) view.Num {
	v, err := strconv.ParseFloat(strconv.FormatFloat(float64(n), 'g', 6, 64), 64)
	if err != nil {
		return n
	}
	return view.Num(v)
}

// Script returns the joined script of the page, for checks.
func Script() (string, error) {
	a, err := loadAssets()
	if err != nil {
		return "", err
	}
	return a.script, nil
}

// Write renders the page to w, all or nothing. It returns an error when a number cannot be written or w fails.
func Write(w io.Writer, r *view.Results) error {
	a, err := loadAssets()
	if err != nil {
		return err
	}
	charts, err := chart.Build(r)
	if err != nil {
		return err
	}
	choices, errors := choicesOf(r), errorsIn(r)
	lean := slim(r)
	paths := packPaths(lean)
	data, err := json.Marshal(struct {
		Results *view.Results  `json:"results"`
		Paths   map[int][]step `json:"paths"`
		Charts  chart.Options  `json:"charts"`
		Choices []choice       `json:"choices"`
		Errors  []errorsOf     `json:"errors"`
	}{lean, paths, charts, choices, errors})
	if err != nil {
		return fmt.Errorf("the page's data cannot be written: %w", err)
	}
	p := &content{Results: r, Choices: choices, Errors: errors, Data: template.JS(data), Style: template.CSS(a.style), Library: template.JS(a.library), Script: template.JS(a.script), Policy: a.policy}
	p.fill()
	var b bytes.Buffer
	if err := a.template.Execute(&b, p); err != nil {
		return fmt.Errorf("the page cannot be rendered: %w", err)
	}
	_, err = w.Write(b.Bytes())
	return err
}
