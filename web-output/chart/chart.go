// Package chart turns view data into chart options; it is the only importer of go-echarts.
//
// A view.Results goes in; out come named options as JSON, without functions, labels or colours: categories and series are numbered,
// and the page's script attaches names, formatters and the theme. Before it stands view, after it page.
package chart

import (
	"encoding/json"
	"fmt"
	"strconv"

	"github.com/go-echarts/go-echarts/v2/charts"
	"github.com/go-echarts/go-echarts/v2/opts"

	"modelmend/web-output/view"
)

// Options holds the options of each chart by its name on the page, in a fixed order.
type Options struct {
	Names   []string
	Options []json.RawMessage
}

// MarshalJSON writes the options as one object, keys in order of Names.
func (o Options) MarshalJSON() ([]byte, error) {
	out := []byte{'{'}
	for i, name := range o.Names {
		if i > 0 {
			out = append(out, ',')
		}
		key, err := json.Marshal(name)
		if err != nil {
			return nil, err
		}
		out = append(append(append(out, key...), ':'), o.Options[i]...)
	}
	return append(out, '}'), nil
}

// element is a go-echarts chart as far as this package uses it.
type element interface {
	Validate()
	JSON() map[string]interface{}
}

func (o *Options) add(name string, c element) error {
	c.Validate()
	b, err := json.Marshal(c.JSON())
	if err != nil {
		return fmt.Errorf("chart %s: %w", name, err)
	}
	o.Names = append(o.Names, name)
	o.Options = append(o.Options, b)
	return nil
}

// Build returns the options of every chart that the results call for: shares and correlations (heat strips), and for each tuned
// alternative the paths of its coefficients and its error curve.
func Build(r *view.Results) (Options, error) {
	var o Options
	d := r.Diagnosis
	if len(d.VarianceShares.Coefficients) > 0 {
		if err := o.add("shares", heat("shares", len(d.VarianceShares.Dimensions), len(d.VarianceShares.Coefficients), 0, 1,
			func(i, j int) view.Num { return d.VarianceShares.Shares[j][i] })); err != nil {
			return o, err
		}
	}
	if n := len(d.Correlations.Names); n > 0 {
		if err := o.add("correlations", heat("correlations", n, n, -1, 1, func(i, j int) view.Num { return d.Correlations.Values[j][i] })); err != nil {
			return o, err
		}
	}
	for _, a := range r.Alternatives {
		if a.Tuning == nil || len(a.Tuning.Path) < 2 {
			continue
		}
		if err := o.add(a.Key+"-path", paths(r, a)); err != nil {
			return o, err
		}
		if a.Tuning.Path[0].Error.IsNone() {
			continue
		}
		if err := o.add(a.Key+"-error", errorCurve(a)); err != nil {
			return o, err
		}
	}
	if len(r.Alternatives) > 1 && r.Alternatives[0].OutOfSample.Reason == "" {
		if err := o.add("folds", folds(r)); err != nil {
			return o, err
		}
	}
	return o, nil
}

// short rounds to six significant digits, more than a line can show.
func short(n view.Num) view.Num {
	v, err := strconv.ParseFloat(strconv.FormatFloat(float64(n), 'g', 6, 64), 64)
	if err != nil {
		return n
	}
	return view.Num(v)
}

// coarse rounds to four significant digits: still finer than a pixel of a path.
func coarse(n view.Num) view.Num {
	v, err := strconv.ParseFloat(strconv.FormatFloat(float64(n), 'g', 4, 64), 64)
	if err != nil {
		return n
	}
	return view.Num(v)
}

func numbered(n int) []string {
	out := make([]string, n)
	for i := range out {
		out[i] = strconv.Itoa(i)
	}
	return out
}

// heat is a grid of cells coloured by value; a missing value is left out.
func heat(id string, columns, rows int, low, high float32, at func(i, j int) view.Num) *charts.HeatMap {
	c := charts.NewHeatMap()
	c.SetGlobalOptions(
		charts.WithInitializationOpts(opts.Initialization{ChartID: id}),
		charts.WithXAxisOpts(opts.XAxis{Type: "category", Data: numbered(columns), Position: "top"}),
		charts.WithYAxisOpts(opts.YAxis{Type: "category", Data: numbered(rows)}),
		charts.WithVisualMapOpts(opts.VisualMap{Min: low, Max: high, Show: opts.Bool(false)}),
	)
	var data []opts.HeatMapData
	for j := range rows {
		for i := range columns {
			if v := at(i, j); !v.IsNone() {
				data = append(data, opts.HeatMapData{Value: []any{i, j, short(v)}})
			}
		}
	}
	c.AddSeries("c0", data, charts.WithSeriesId("cells"))
	return c
}

// axisFor is the axis of a tuning: logarithmic for penalties (zero has no place on it), whole numbers for components.
func axisFor(t *view.Tuning) (opts.XAxis, int) {
	if t.Parameter == "penalty" {
		return opts.XAxis{Type: "log", Name: "penalty", NameLocation: "middle", NameGap: 28}, 1
	}
	return opts.XAxis{Type: "value", Name: "components", NameLocation: "middle", NameGap: 28, MinInterval: 1}, 0
}

// paths draws every slope in standard-deviation units against the tuning.
func paths(r *view.Results, a view.Alternative) *charts.Line {
	axis, first := axisFor(a.Tuning)
	c := charts.NewLine()
	c.SetGlobalOptions(charts.WithInitializationOpts(opts.Initialization{ChartID: a.Key + "-path"}), charts.WithXAxisOpts(axis),
		charts.WithYAxisOpts(opts.YAxis{Type: "value", Name: "slope times standard deviation", Scale: opts.Bool(true)}))
	offset := len(a.Coefficients) - len(r.Diagnosis.Regressors)
	for j, g := range r.Diagnosis.Regressors {
		var data []opts.LineData
		for _, p := range a.Tuning.Path[first:] {
			v := view.Num(float64(p.Coefficients[offset+j].Estimate) * float64(g.SD))
			data = append(data, opts.LineData{Value: []any{coarse(p.Value), coarse(v)}})
		}
		c.AddSeries(fmt.Sprintf("c%d", j), data, charts.WithSeriesId(fmt.Sprintf("slope-%d", j)), charts.WithLineChartOpts(opts.LineChart{ShowSymbol: opts.Bool(a.Tuning.Parameter != "penalty")}))
	}
	return c
}

// errorCurve draws the cross-validated mean squared error against the tuning and, where the procedure was resampled, how often each value
// was chosen: columns in a second grid beneath, over the same axis.
func errorCurve(a view.Alternative) *charts.Line {
	axis, first := axisFor(a.Tuning)
	c := charts.NewLine()
	c.SetGlobalOptions(charts.WithInitializationOpts(opts.Initialization{ChartID: a.Key + "-error"}), charts.WithXAxisOpts(axis),
		charts.WithYAxisOpts(opts.YAxis{Type: "value", Name: "mean squared error", Scale: opts.Bool(true)}))
	var data []opts.LineData
	for _, p := range a.Tuning.Path[first:] {
		data = append(data, opts.LineData{Value: []any{short(p.Value), short(p.Error)}})
	}
	c.AddSeries("c0", data, charts.WithSeriesId("error"), charts.WithLineChartOpts(opts.LineChart{ShowSymbol: opts.Bool(a.Tuning.Parameter != "penalty")}))
	if r := a.Tuning.Resampled; r != nil && len(r.Shares) == len(a.Tuning.Path) {
		axis.GridIndex = 1
		c.SetGlobalOptions(charts.WithGridOpts(opts.Grid{}, opts.Grid{}))
		c.ExtendXAxis(axis)
		c.ExtendYAxis(opts.YAxis{Type: "value", Name: "share of the resamples", GridIndex: 1})
		bars := charts.NewCustom() // drawn by the page's script: a series of bars would widen its axis, and leave the curve's
		var shares []opts.CustomData
		for i, p := range a.Tuning.Path[first:] {
			shares = append(shares, opts.CustomData{Value: []any{p.Value, short(r.Shares[first+i])}})
		}
		bars.AddSeries("c1", shares, charts.WithSeriesId("chosen"), charts.WithCustomChartOpts(opts.CustomChart{XAxisIndex: 1, YAxisIndex: 1}))
		c.Overlap(bars)
	}
	return c
}

// folds draws, for every alternative but the first, the difference to as-is in mean squared error on each held-out fold.
func folds(r *view.Results) *charts.Scatter {
	c := charts.NewScatter()
	n := len(r.Alternatives) - 1
	c.SetGlobalOptions(charts.WithInitializationOpts(opts.Initialization{ChartID: "folds"}),
		charts.WithXAxisOpts(opts.XAxis{Type: "value", Name: "mean squared error, alternative minus left alone", NameLocation: "middle", NameGap: 28}),
		charts.WithYAxisOpts(opts.YAxis{Type: "category", Data: numbered(n)}))
	var data []opts.ScatterData
	for i, a := range r.Alternatives[1:] {
		for k, f := range a.OutOfSample.Folds {
			base := r.Alternatives[0].OutOfSample.Folds[k].MSE
			data = append(data, opts.ScatterData{Value: []any{short(view.Num(float64(f.MSE) - float64(base))), i}})
		}
	}
	c.AddSeries("c0", data, charts.WithSeriesId("differences"))
	return c
}
