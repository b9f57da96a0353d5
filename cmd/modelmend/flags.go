package main

import (
	"fmt"
	"path/filepath"
	"slices"
	"strconv"
	"strings"

	"github.com/spf13/cobra"

	"modelmend/compare"
	"modelmend/fit/dataset"
)

// studyFlags are the flags that check and compare share: every study key has one, and a flag overrides the study.
type studyFlags struct {
	equation, purpose, rows, folds string
	time, errors                   string
	clusters                       []string
	focal, keep, groups, smallest  []string
	sets, skip, cutoffs            []string
	constant, showSmall            bool
	seed                           int64
	workers, resamples, simulate   int
}

func (f *studyFlags) register(cmd *cobra.Command) {
	fl := cmd.Flags()
	fl.StringVarP(&f.equation, "equation", "e", "", `the model, such as "ln(rent) = area + rooms + area^2"`)
	fl.StringSliceVar(&f.focal, "focal", nil, "coefficients the paper is about")
	fl.StringVar(&f.purpose, "purpose", "", "explain, predict or describe")
	fl.StringArrayVar(&f.smallest, "smallest-effect", nil, "an effect smaller than this would not matter, such as area=0.002")
	fl.StringSliceVar(&f.keep, "keep", nil, "regressors that are never dropped or merged")
	fl.StringArrayVar(&f.groups, "group", nil, "regressors that measure one concept, such as size=area,rooms, or with weights size=area:1,rooms:20")
	fl.StringVar(&f.rows, "rows", "", `the sample, such as "year <= 1959"`)
	fl.StringArrayVar(&f.sets, "set", nil, "fix an option of a remedy, such as ridge.penalty=0.04")
	fl.StringSliceVar(&f.skip, "skip", nil, "remedies to leave out")
	fl.BoolVar(&f.constant, "constant", true, "the model has a constant")
	fl.StringSliceVar(&f.clusters, "clusters", nil, "the column whose equal values mark rows that belong together; two for two-way clusters")
	fl.StringVar(&f.time, "time", "", "the column that orders the rows in time")
	fl.StringVar(&f.errors, "standard-errors", "", "classical, robust, robust:HC1, clustered, autocorrelation, or autocorrelation:3 (lags)")
	fl.StringVar(&f.folds, "folds", "", "10, 10x5 (folds x repeats), leave-one-out, clusters:10x5, blocks:10, rolling:10, rolling:10:gap=1, or column:NAME")
	fl.Int64Var(&f.seed, "seed", compare.DefaultSeed, "seed of the folds and resamples")
	fl.IntVar(&f.resamples, "resamples", compare.DefaultResamples, "times the whole procedure is repeated on resampled rows (0: not at all)")
	fl.IntVar(&f.simulate, "simulations", compare.SimulationsBySize, "samples simulated for each truth (0: none; not given: by size, at most 1000)")
	fl.StringArrayVar(&f.cutoffs, "cutoff", nil, "a reference mark, such as vif=5, condition_index=30, variance_share=0.5")
	fl.BoolVar(&f.showSmall, "show-small-cells", false, "show what rests on fewer than ten rows: names of category levels, errors of held-out parts")
	fl.IntVar(&f.workers, "workers", 0, "cores to use (0: all); the output does not depend on it")
}

// load reads the study or table named by arg, applies the flags, and reads the data.
func (f *studyFlags) load(cmd *cobra.Command, arg string) (*compare.Study, *dataset.Table, error) {
	study := newStudy()
	path := arg
	if isStudy(arg) {
		var err error
		if study, err = readStudy(arg); err != nil {
			return nil, nil, err
		}
		if study.Data == "" {
			return nil, nil, wrongUse("%s: the key data is missing; write the name of the table, such as data: flats.csv", arg)
		}
		path = study.Data
		if !filepath.IsAbs(path) {
			path = filepath.Join(filepath.Dir(arg), path)
		}
	} else {
		study.Data = arg
	}
	if err := f.apply(cmd, study); err != nil {
		return nil, nil, err
	}
	var need func(name string) bool
	if strings.TrimSpace(study.Equation) != "" {
		var err error
		if need, err = study.Columns(); err != nil {
			return nil, nil, classify(err)
		}
	}
	table, err := dataset.Open(path, need)
	if err != nil {
		return nil, nil, err
	}
	table.Name = study.Data
	if need == nil {
		err := table.Survey() // counts the rows and levels of a table that is not held
		if dataset.CannotCut(err) {
			table, err = table.Whole()
		}
		if err != nil {
			return nil, nil, err
		}
		return nil, nil, &usageError{noEquation(arg, table)}
	}
	return study, table, nil
}

// apply lets flags that were given override the study.
func (f *studyFlags) apply(cmd *cobra.Command, s *compare.Study) error {
	given := cmd.Flags().Changed
	var err error
	if given("equation") {
		s.Equation = f.equation
	}
	if given("focal") {
		s.Focal = f.focal
	}
	if given("keep") {
		s.Keep = f.keep
	}
	if given("rows") {
		s.Rows = f.rows
	}
	if given("purpose") {
		if s.Purpose, err = purpose(f.purpose); err != nil {
			return &usageError{err}
		}
	}
	if given("constant") {
		s.NoConstant = !f.constant
	}
	if given("seed") {
		s.Seed = f.seed
	}
	for _, count := range []struct {
		name  string
		given int
		set   *int
	}{{"resamples", f.resamples, &s.Resamples}, {"simulations", f.simulate, &s.Simulations}} {
		if given(count.name) {
			if bad := checkResamples(float64(count.given)); bad != "" {
				return wrongUse("--%s: %s", count.name, bad)
			}
			*count.set = count.given
		}
	}
	if given("show-small-cells") {
		s.ShowSmallCells = f.showSmall
	}
	if given("smallest-effect") {
		s.SmallestEffect = nil
		for _, v := range f.smallest {
			name, value, err := assignment("--smallest-effect", v)
			if err != nil {
				return err
			}
			x, err := strconv.ParseFloat(value, 64)
			if err != nil {
				return wrongUse("--smallest-effect %s: %q is not a number", v, value)
			}
			s.SmallestEffect = append(s.SmallestEffect, compare.NamedNumber{Name: name, Value: x})
		}
	}
	if given("group") {
		s.Groups = nil
		for _, v := range f.groups {
			name, value, err := assignment("--group", v)
			if err != nil {
				return err
			}
			g := compare.NamedGroup{Name: name}
			for _, member := range splitNames(value) {
				at := strings.LastIndex(member, ":")
				if at < 0 {
					g.Members = append(g.Members, member)
					continue
				}
				w, err := strconv.ParseFloat(strings.TrimSpace(member[at+1:]), 64)
				if err != nil {
					return wrongUse("--group %s: the weight %q of %s is not a number", v, member[at+1:], member[:at])
				}
				g.Members, g.Weights = append(g.Members, strings.TrimSpace(member[:at])), append(g.Weights, w)
			}
			if g.Weights != nil && len(g.Weights) != len(g.Members) {
				return wrongUse("--group %s: give every member a weight, such as size=area:1,rooms:20, or none", v)
			}
			s.Groups = append(s.Groups, g)
		}
	}
	for _, v := range f.cutoffs {
		name, value, err := assignment("--cutoff", v)
		if err != nil {
			return err
		}
		x, err := strconv.ParseFloat(value, 64)
		if err != nil {
			return wrongUse("--cutoff %s: %q is not a number", v, value)
		}
		if err := setCutoff(&s.Cutoffs, name, x); err != nil {
			return &usageError{err}
		}
	}
	for _, v := range f.sets {
		if err := applySet(s, v); err != nil {
			return err
		}
	}
	for _, v := range f.skip {
		s.Remedies = append(s.Remedies, compare.RemedySetting{Remedy: v, Off: true})
	}
	if given("clusters") {
		s.Clusters = f.clusters
	}
	if given("time") {
		s.Time = f.time
	}
	if given("standard-errors") {
		if s.Errors, err = errorSpec(f.errors); err != nil {
			return err
		}
	}
	if given("folds") {
		if s.Folds, err = foldSpec(f.folds); err != nil {
			return err
		}
	}
	return nil
}

func assignment(flag, v string) (name, value string, err error) {
	i := strings.LastIndex(v, "=")
	if i <= 0 || i == len(v)-1 {
		return "", "", wrongUse("%s %q: write NAME=VALUE", flag, v)
	}
	return strings.TrimSpace(v[:i]), strings.TrimSpace(v[i+1:]), nil
}

// splitNames splits at commas outside double quotes.
func splitNames(v string) []string {
	var out []string
	quoted, start := false, 0
	for i, r := range v {
		switch {
		case r == '"':
			quoted = !quoted
		case r == ',' && !quoted:
			out = append(out, strings.TrimSpace(v[start:i]))
			start = i + 1
		}
	}
	return append(out, strings.TrimSpace(v[start:]))
}

func applySet(s *compare.Study, v string) error {
	name, value, err := assignment("--set", v)
	if err != nil {
		return err
	}
	remedy, option, ok := strings.Cut(name, ".")
	if !ok {
		return wrongUse("--set %q: write REMEDY.OPTION=VALUE, such as ridge.penalty=0.04", v)
	}
	set := compare.RemedySetting{Remedy: remedy, Option: option, Names: splitNames(value)}
	if set.Number, err = strconv.ParseFloat(value, 64); err != nil {
		set.Number = nan()
	}
	s.Remedies = slices.DeleteFunc(s.Remedies, func(o compare.RemedySetting) bool { return o.Remedy == remedy && o.Option == option && !o.Off })
	s.Remedies = append(s.Remedies, set)
	return nil
}

func errorSpec(v string) (compare.ErrorSpec, error) {
	kind, more, found := strings.Cut(v, ":")
	e := compare.ErrorSpec{Kind: kind}
	ok := slices.Contains(compare.ErrorNames, kind)
	switch {
	case !found:
	case kind == compare.Robust:
		e.Variant = more
		ok = ok && slices.Contains(compare.Variants, more)
	case kind == compare.Autocorrelation:
		lags, err := strconv.Atoi(more)
		e.Lags = &lags
		ok = ok && err == nil && lags >= 0
	default:
		ok = false
	}
	if !ok {
		return e, wrongUse("--standard-errors %q: write classical, robust, robust:HC1, clustered, autocorrelation, or autocorrelation:3", v)
	}
	return e, nil
}

func foldSpec(v string) (compare.FoldSpec, error) {
	if v == "leave-one-out" {
		return compare.FoldSpec{Kind: v}, nil
	}
	if c, ok := strings.CutPrefix(v, "column:"); ok && c != "" {
		return compare.FoldSpec{Kind: "column", Columns: splitNames(c)}, nil
	}
	f := compare.FoldSpec{Kind: "random"}
	rest := v
	if kind, after, found := strings.Cut(v, ":"); slices.Contains([]string{"random", "clusters", "blocks", "rolling"}, kind) {
		if f.Kind = kind; !found {
			return f, nil
		}
		rest = after
	}
	bad := wrongUse("--folds %q: write 10, 10x5, leave-one-out, clusters, clusters:10x5, blocks:10, rolling:10, rolling:10:gap=1, or column:NAME", v)
	rest, gap, gapped := strings.Cut(rest, ":")
	if gapped {
		n, ok := strings.CutPrefix(gap, "gap=")
		var err error
		if f.Gap, err = strconv.Atoi(n); err != nil || !ok || f.Gap < 0 || f.Kind != "rolling" {
			return f, bad
		}
	}
	count, repeats, both := strings.Cut(rest, "x")
	var err error
	if f.Count, err = strconv.Atoi(count); err == nil && both {
		f.Repeats, err = strconv.Atoi(repeats)
	}
	if err != nil || (f.Count < 2 && !(f.Kind == "rolling" && f.Count == 1)) || (both && (f.Repeats < 1 || f.Kind == "blocks" || f.Kind == "rolling")) {
		return f, bad
	}
	return f, nil
}

// noEquation lists the columns and shows a command that would work.
func noEquation(arg string, t *dataset.Table) error {
	var b strings.Builder
	fmt.Fprintf(&b, "no equation was given. %s has %d rows and these columns:\n", t.Name, t.Rows)
	for i, c := range t.Columns {
		if i == 40 {
			fmt.Fprintf(&b, "  and %d more\n", len(t.Columns)-40)
			break
		}
		fmt.Fprintf(&b, "  %-28s %s\n", c.Name, describeColumn(c))
	}
	if eq := exampleEquation(t); eq != "" {
		fmt.Fprintf(&b, "Write, for example:\n  modelmend compare %s --equation %q", arg, eq)
	}
	return fmt.Errorf("%s", strings.TrimRight(b.String(), "\n"))
}
