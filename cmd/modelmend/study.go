package main

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"

	"go.yaml.in/yaml/v3"

	"modelmend/compare"
	"modelmend/fit/collinear"
	"modelmend/fit/equation"
)

// studyKeys are the keys of a study file in this version, in the order in which they are written.
var studyKeys = []string{"data", "equation", "focal", "purpose", "smallest_effect", "keep", "groups", "rows", "remedies", "constant", "clusters", "time", "standard_errors", "folds", "seed", "resamples", "simulations", "cutoffs", "show_small_cells"}

// laterKeys are planned and refused by name, so that nobody thinks they were heeded.
var laterKeys = []string{"restrictions", "prior", "weights", "unit", "within", "declared"}

// studyError quotes the line of a study file.
type studyError struct {
	file  string
	line  int
	text  string
	found string
}

func (e *studyError) Error() string {
	s := fmt.Sprintf("%s:%d: %s", e.file, e.line, e.found)
	if e.text != "" {
		s += "\n    " + e.text
	}
	return s
}

func newStudy() *compare.Study {
	return &compare.Study{Purpose: compare.Explain, Seed: compare.DefaultSeed, Resamples: compare.DefaultResamples, Simulations: compare.SimulationsBySize, Cutoffs: collinear.DefaultCutoffs()}
}

// readStudy reads a study file; the data path in it is taken relative to the study's folder by the caller.
func readStudy(path string) (*compare.Study, error) {
	raw, err := os.ReadFile(path)
	if err != nil {
		return nil, fmt.Errorf("cannot read the study: %w", err)
	}
	return parseStudy(path, raw)
}

// parseStudy reads strict YAML: unknown keys, wrong types and repeated keys are errors that quote the line.
func parseStudy(name string, raw []byte) (*compare.Study, error) {
	p := studyParser{file: name, lines: strings.Split(string(raw), "\n"), study: newStudy()}
	var doc yaml.Node
	if err := yaml.Unmarshal(raw, &doc); err != nil {
		return nil, &usageError{fmt.Errorf("%s: this is not valid YAML: %s", name, strings.TrimPrefix(err.Error(), "yaml: "))}
	}
	if len(doc.Content) == 0 {
		return nil, wrongUse("%s is empty; a study needs at least data and equation", name)
	}
	if err := p.mapping(doc.Content[0], "the study", func(key, value *yaml.Node) error { return p.key(key, value) }); err != nil {
		return nil, &usageError{err}
	}
	return p.study, nil
}

type studyParser struct {
	file  string
	lines []string
	study *compare.Study
}

func (p *studyParser) fail(n *yaml.Node, format string, args ...any) error {
	e := &studyError{file: p.file, line: n.Line, found: fmt.Sprintf(format, args...)}
	if n.Line >= 1 && n.Line <= len(p.lines) {
		e.text = strings.TrimSpace(p.lines[n.Line-1])
	}
	return e
}

func (p *studyParser) mapping(n *yaml.Node, what string, each func(key, value *yaml.Node) error) error {
	if n.Kind == yaml.AliasNode {
		return p.fail(n, "aliases are not used in study files; write the value again")
	}
	if n.Kind != yaml.MappingNode {
		return p.fail(n, "%s must be a list of `key: value` lines", what)
	}
	seen := map[string]bool{}
	for i := 0; i+1 < len(n.Content); i += 2 {
		k := n.Content[i]
		if seen[k.Value] {
			return p.fail(k, "%q is given twice", k.Value)
		}
		seen[k.Value] = true
		if err := each(k, n.Content[i+1]); err != nil {
			return err
		}
	}
	return nil
}

func (p *studyParser) key(key, value *yaml.Node) error {
	s := p.study
	var err error
	switch key.Value {
	case "data":
		s.Data, err = p.text(value, "data")
	case "equation":
		s.Equation, err = p.text(value, "equation")
	case "focal":
		s.Focal, err = p.names(value, "focal")
	case "keep":
		s.Keep, err = p.names(value, "keep")
	case "rows":
		s.Rows, err = p.text(value, "rows")
	case "purpose":
		var v string
		if v, err = p.text(value, "purpose"); err == nil {
			if s.Purpose, err = purpose(v); err != nil {
				err = p.fail(value, "%s", err)
			}
		}
	case "smallest_effect":
		err = p.mapping(value, "smallest_effect", func(k, v *yaml.Node) error {
			x, err := p.number(v, "smallest_effect")
			s.SmallestEffect = append(s.SmallestEffect, compare.NamedNumber{Name: k.Value, Value: x})
			return err
		})
	case "groups":
		err = p.mapping(value, "groups", func(k, v *yaml.Node) error {
			g := compare.NamedGroup{Name: k.Value}
			var err error
			if v.Kind == yaml.MappingNode { // members with their weights
				err = p.mapping(v, "group "+k.Value, func(member, weight *yaml.Node) error {
					w, err := p.number(weight, "the weight of "+member.Value)
					g.Members, g.Weights = append(g.Members, member.Value), append(g.Weights, w)
					return err
				})
			} else {
				g.Members, err = p.names(v, "group "+k.Value)
			}
			s.Groups = append(s.Groups, g)
			return err
		})
	case "remedies":
		err = p.mapping(value, "remedies", p.remedy)
	case "constant":
		var v bool
		v, err = p.boolean(value, "constant")
		s.NoConstant = !v
	case "show_small_cells":
		s.ShowSmallCells, err = p.boolean(value, "show_small_cells")
	case "clusters":
		s.Clusters, err = p.names(value, "clusters")
	case "time":
		s.Time, err = p.text(value, "time")
	case "standard_errors":
		err = p.errors(value)
	case "folds":
		err = p.folds(value)
	case "seed":
		var v float64
		if v, err = p.number(value, "seed"); err == nil {
			if v != math.Trunc(v) || math.Abs(v) > 1<<53 {
				return p.fail(value, "seed must be a whole number")
			}
			s.Seed = int64(v)
		}
	case "resamples", "simulations":
		var v float64
		if v, err = p.number(value, key.Value); err == nil {
			if bad := checkResamples(v); bad != "" {
				return p.fail(value, "%s: %s", key.Value, bad)
			}
			if key.Value == "resamples" {
				s.Resamples = int(v)
			} else {
				s.Simulations = int(v)
			}
		}
	case "cutoffs":
		err = p.mapping(value, "cutoffs", func(k, v *yaml.Node) error {
			x, err := p.number(v, k.Value)
			if err != nil {
				return err
			}
			if err := setCutoff(&s.Cutoffs, k.Value, x); err != nil {
				return p.fail(k, "%s", err)
			}
			return nil
		})
	default:
		return p.unknown(key)
	}
	return err
}

func (p *studyParser) unknown(key *yaml.Node) error {
	if slices.Contains(laterKeys, key.Value) {
		return p.fail(key, "%q is planned but not available in this version; take the line out", key.Value)
	}
	if near := equation.Nearest(key.Value, studyKeys); len(near) > 0 {
		return p.fail(key, "%q is not a key of a study; did you mean %s?", key.Value, near[0])
	}
	return p.fail(key, "%q is not a key of a study; the keys are %s", key.Value, strings.Join(studyKeys, ", "))
}

func (p *studyParser) text(n *yaml.Node, what string) (string, error) {
	if n.Kind != yaml.ScalarNode || n.Tag == "!!null" {
		return "", p.fail(n, "%s must be one text", what)
	}
	return n.Value, nil
}

func (p *studyParser) number(n *yaml.Node, what string) (float64, error) {
	if n.Kind == yaml.ScalarNode && (n.Tag == "!!int" || n.Tag == "!!float") {
		if v, err := strconv.ParseFloat(n.Value, 64); err == nil && !math.IsInf(v, 0) && !math.IsNaN(v) {
			return v, nil
		}
	}
	return 0, p.fail(n, "%s must be a number", what)
}

func (p *studyParser) boolean(n *yaml.Node, what string) (bool, error) {
	if n.Kind == yaml.ScalarNode && n.Tag == "!!bool" {
		return n.Value == "true", nil
	}
	return false, p.fail(n, "%s must be true or false", what)
}

// names accepts one name or a list.
func (p *studyParser) names(n *yaml.Node, what string) ([]string, error) {
	if n.Kind == yaml.ScalarNode && n.Tag != "!!null" {
		return []string{n.Value}, nil
	}
	if n.Kind != yaml.SequenceNode {
		return nil, p.fail(n, "%s must be a list of names, such as [area, rooms]", what)
	}
	var out []string
	for _, c := range n.Content {
		if c.Kind != yaml.ScalarNode || c.Tag == "!!null" {
			return nil, p.fail(c, "%s must be a list of names", what)
		}
		out = append(out, c.Value)
	}
	return out, nil
}

func (p *studyParser) remedy(key, value *yaml.Node) error {
	s := p.study
	if value.Kind == yaml.ScalarNode && value.Tag == "!!bool" {
		if value.Value == "false" {
			s.Remedies = append(s.Remedies, compare.RemedySetting{Remedy: key.Value, Off: true})
		}
		return nil
	}
	return p.mapping(value, "remedies: "+key.Value, func(k, v *yaml.Node) error {
		set := compare.RemedySetting{Remedy: key.Value, Option: k.Value}
		if v.Kind == yaml.SequenceNode {
			names, err := p.names(v, k.Value)
			if err != nil {
				return err
			}
			set.Names = names
		} else if v.Kind == yaml.ScalarNode && (v.Tag == "!!int" || v.Tag == "!!float") {
			x, err := p.number(v, k.Value)
			if err != nil {
				return err
			}
			set.Number = x
			set.Names = []string{v.Value}
		} else {
			name, err := p.text(v, k.Value)
			if err != nil {
				return err
			}
			set.Names, set.Number = []string{name}, math.NaN()
		}
		s.Remedies = append(s.Remedies, set)
		return nil
	})
}

// errors accepts a kind, or a mapping with its settings.
func (p *studyParser) errors(value *yaml.Node) error {
	e := &p.study.Errors
	kind := func(v *yaml.Node) (err error) {
		if e.Kind, err = p.text(v, "standard_errors"); err == nil && !slices.Contains(compare.ErrorNames, e.Kind) {
			err = p.fail(v, "standard errors of kind %q are not available; write one of %s", e.Kind, strings.Join(compare.ErrorNames, ", "))
		}
		return err
	}
	if value.Kind == yaml.ScalarNode {
		return kind(value)
	}
	return p.mapping(value, "standard_errors", func(k, v *yaml.Node) (err error) {
		switch k.Value {
		case "kind":
			return kind(v)
		case "variant":
			if e.Variant, err = p.text(v, "variant"); err == nil && !slices.Contains(compare.Variants, e.Variant) {
				err = p.fail(v, "robust standard errors have no variant %q; write one of %s", e.Variant, strings.Join(compare.Variants, ", "))
			}
		case "lags":
			var x float64
			if x, err = p.number(v, "lags"); err == nil {
				if x != math.Trunc(x) || x < 0 || x > 1e6 {
					return p.fail(v, "lags must be a whole number from 0 on")
				}
				lags := int(x)
				e.Lags = &lags
			}
		case "small_sample":
			e.SmallSample, err = p.boolean(v, "small_sample")
		default:
			err = p.fail(k, "%q is not a key of standard_errors; the keys are kind, variant, lags, small_sample", k.Value)
		}
		return err
	})
}

func (p *studyParser) folds(value *yaml.Node) error {
	f := &p.study.Folds
	return p.mapping(value, "folds", func(k, v *yaml.Node) error {
		switch k.Value {
		case "kind":
			kind, err := p.text(v, "kind")
			if err != nil {
				return err
			}
			if !slices.Contains(compare.FoldKinds, kind) {
				return p.fail(v, "folds of kind %q are not available; write one of %s", kind, strings.Join(compare.FoldKinds, ", "))
			}
			f.Kind = kind
		case "count", "repeats":
			x, err := p.number(v, k.Value)
			if err != nil {
				return err
			}
			if x != math.Trunc(x) || x < 1 || x > 1e6 {
				return p.fail(v, "%s must be a whole number from 1 on", k.Value)
			}
			if k.Value == "count" {
				f.Count = int(x)
			} else {
				f.Repeats = int(x)
			}
		case "gap":
			x, err := p.number(v, "gap")
			if err != nil {
				return err
			}
			if x != math.Trunc(x) || x < 0 || x > 1e6 {
				return p.fail(v, "gap must be a whole number of periods from 0 on")
			}
			f.Gap = int(x)
		case "column":
			names, err := p.names(v, "column")
			if err != nil {
				return err
			}
			f.Columns = names
			if f.Kind == "" {
				f.Kind = "column"
			}
		default:
			return p.fail(k, "%q is not a key of folds; the keys are kind, count, repeats, gap, column", k.Value)
		}
		return nil
	})
}

func purpose(v string) (compare.Purpose, error) {
	switch p := compare.Purpose(v); p {
	case compare.Explain, compare.Predict, compare.Describe:
		return p, nil
	}
	return "", fmt.Errorf("purpose %q is not known; write explain, predict or describe", v)
}

func setCutoff(c *collinear.Cutoffs, name string, v float64) error {
	if !(v > 0) {
		return fmt.Errorf("a cut-off must be positive")
	}
	switch name {
	case "vif":
		if v <= 1 {
			return fmt.Errorf("an inflation factor is never below 1: write a larger cut-off")
		}
		c.VIF = v
	case "condition_index":
		c.ConditionIndex = v
	case "variance_share":
		if v >= 1 {
			return fmt.Errorf("a variance share is below 1: write a smaller cut-off")
		}
		c.VarianceShare = v
	default:
		return fmt.Errorf("%q is not a cut-off; they are vif, condition_index, variance_share", name)
	}
	return nil
}

// writeStudy renders the effective study as YAML, every setting that matters spelled out; reading it again gives the same
// study.
func writeStudy(s *compare.Study) string {
	doc := &yaml.Node{Kind: yaml.MappingNode}
	add := func(key string, v *yaml.Node) {
		doc.Content = append(doc.Content, &yaml.Node{Kind: yaml.ScalarNode, Value: key}, v)
	}
	text := func(v string) *yaml.Node { n := &yaml.Node{}; n.SetString(v); return n }
	number := func(v float64) *yaml.Node {
		return &yaml.Node{Kind: yaml.ScalarNode, Value: strconv.FormatFloat(v, 'g', -1, 64)}
	}
	list := func(v []string) *yaml.Node {
		n := &yaml.Node{Kind: yaml.SequenceNode, Style: yaml.FlowStyle}
		for _, x := range v {
			n.Content = append(n.Content, text(x))
		}
		return n
	}
	add("data", text(s.Data))
	add("equation", text(s.Equation))
	if len(s.Focal) > 0 {
		add("focal", list(s.Focal))
	}
	add("purpose", text(string(s.Purpose)))
	if len(s.SmallestEffect) > 0 {
		m := &yaml.Node{Kind: yaml.MappingNode, Style: yaml.FlowStyle}
		for _, e := range s.SmallestEffect {
			m.Content = append(m.Content, text(e.Name), number(e.Value))
		}
		add("smallest_effect", m)
	}
	if len(s.Keep) > 0 {
		add("keep", list(s.Keep))
	}
	if len(s.Groups) > 0 {
		m := &yaml.Node{Kind: yaml.MappingNode}
		for _, g := range s.Groups {
			if g.Weights == nil {
				m.Content = append(m.Content, text(g.Name), list(g.Members))
				continue
			}
			weights := &yaml.Node{Kind: yaml.MappingNode, Style: yaml.FlowStyle}
			for i, member := range g.Members {
				weights.Content = append(weights.Content, text(member), number(g.Weights[i]))
			}
			m.Content = append(m.Content, text(g.Name), weights)
		}
		add("groups", m)
	}
	if s.Rows != "" {
		add("rows", text(s.Rows))
	}
	if len(s.Remedies) > 0 {
		add("remedies", remedyNode(s.Remedies, text, number, list))
	}
	if s.NoConstant {
		add("constant", &yaml.Node{Kind: yaml.ScalarNode, Value: "false"})
	}
	if len(s.Clusters) > 0 {
		add("clusters", list(s.Clusters))
	}
	if s.Time != "" {
		add("time", text(s.Time))
	}
	if e := s.Errors; e != (compare.ErrorSpec{}) {
		m := &yaml.Node{Kind: yaml.MappingNode, Style: yaml.FlowStyle}
		put := func(k string, v *yaml.Node) { m.Content = append(m.Content, text(k), v) }
		if e.Kind != "" {
			put("kind", text(e.Kind))
		}
		if e.Variant != "" {
			put("variant", text(e.Variant))
		}
		if e.Lags != nil {
			put("lags", number(float64(*e.Lags)))
		}
		if e.SmallSample {
			put("small_sample", &yaml.Node{Kind: yaml.ScalarNode, Value: "true"})
		}
		add("standard_errors", m)
	}
	if f := s.Folds; f.Gap > 0 || f.Kind != "" || f.Count > 0 || f.Repeats > 0 || len(f.Columns) > 0 {
		m := &yaml.Node{Kind: yaml.MappingNode, Style: yaml.FlowStyle}
		put := func(k string, v *yaml.Node) { m.Content = append(m.Content, text(k), v) }
		if f.Kind != "" {
			put("kind", text(f.Kind))
		}
		if f.Count > 0 {
			put("count", number(float64(f.Count)))
		}
		if f.Repeats > 0 {
			put("repeats", number(float64(f.Repeats)))
		}
		if f.Gap > 0 {
			put("gap", number(float64(f.Gap)))
		}
		if len(f.Columns) > 0 {
			put("column", list(f.Columns))
		}
		add("folds", m)
	}
	add("seed", &yaml.Node{Kind: yaml.ScalarNode, Value: strconv.FormatInt(s.Seed, 10)})
	if s.Resamples != compare.DefaultResamples {
		add("resamples", &yaml.Node{Kind: yaml.ScalarNode, Value: strconv.Itoa(s.Resamples)})
	}
	if s.Simulations != compare.SimulationsBySize {
		add("simulations", &yaml.Node{Kind: yaml.ScalarNode, Value: strconv.Itoa(s.Simulations)})
	}
	if s.Cutoffs != collinear.DefaultCutoffs() {
		m := &yaml.Node{Kind: yaml.MappingNode, Style: yaml.FlowStyle}
		m.Content = append(m.Content, text("vif"), number(s.Cutoffs.VIF), text("condition_index"), number(s.Cutoffs.ConditionIndex), text("variance_share"), number(s.Cutoffs.VarianceShare))
		add("cutoffs", m)
	}
	if s.ShowSmallCells {
		add("show_small_cells", &yaml.Node{Kind: yaml.ScalarNode, Value: "true"})
	}
	b, err := yaml.Marshal(doc)
	if err != nil {
		panic("study cannot be written: " + err.Error())
	}
	return string(b)
}

func remedyNode(list []compare.RemedySetting, text func(string) *yaml.Node, number func(float64) *yaml.Node, names func([]string) *yaml.Node) *yaml.Node {
	m := &yaml.Node{Kind: yaml.MappingNode}
	at := map[string]*yaml.Node{}
	for _, s := range list {
		if s.Off {
			m.Content = append(m.Content, text(s.Remedy), &yaml.Node{Kind: yaml.ScalarNode, Value: "false"})
			continue
		}
		inner := at[s.Remedy]
		if inner == nil {
			inner = &yaml.Node{Kind: yaml.MappingNode, Style: yaml.FlowStyle}
			at[s.Remedy] = inner
			m.Content = append(m.Content, text(s.Remedy), inner)
		}
		if _, err := strconv.ParseFloat(strings.Join(s.Names, ","), 64); err == nil {
			inner.Content = append(inner.Content, text(s.Option), number(s.Number))
		} else {
			inner.Content = append(inner.Content, text(s.Option), names(s.Names))
		}
	}
	return m
}

// isStudy tells a study from a table by its ending alone.
func isStudy(path string) bool {
	switch strings.ToLower(filepath.Ext(path)) {
	case ".yaml", ".yml":
		return true
	}
	return false
}

// checkResamples says what is wrong with a number of resamples or simulated samples, or nothing. Fewer than 99 leave nothing beyond a 2.5 % point
// worth the name.
func checkResamples(v float64) string {
	if v != 0 && (v != math.Trunc(v) || v < 99 || v > 100000) {
		return fmt.Sprintf("%g is not allowed; write 0 for none, or a whole number from 99 to 100000", v)
	}
	return ""
}
