package main

import (
	"errors"
	"fmt"
	"runtime/debug"

	"github.com/spf13/cobra"

	"modelmend/compare"
	"modelmend/fit/dataset"
	"modelmend/fit/design"
	"modelmend/fit/equation"
	"modelmend/web-output/view"
)

// compareFlags are those that say where the result goes.
type compareFlags struct {
	out  string
	json string
}

func (f *compareFlags) register(cmd *cobra.Command) {
	cmd.Flags().StringVar(&f.out, "out", "modelmend-out", "folder for the page and the results")
	cmd.Flags().StringVar(&f.json, "json", "", "write the results file here instead of a folder; - for standard output")
}

func newCompare() *cobra.Command {
	var s studyFlags
	var f compareFlags
	cmd := &cobra.Command{
		Use: "compare STUDY|DATA", Short: "Fit every remedy and write the comparison", Args: oneArg("a study file or a table"),
		Long: "compare reads a study file (.yaml, .yml) or a table with --equation, diagnoses the model, fits every remedy that applies on the\n" +
			"same rows and folds, and writes a folder with the interactive page (index.html) and the results file (results.json).",
		Example: "  modelmend compare study.yaml\n  modelmend compare flats.csv --equation \"ln(rent) = area + rooms + distance\" --focal area",
		RunE: func(cmd *cobra.Command, args []string) error {
			study, table, err := s.load(cmd, args[0])
			if err != nil {
				return err
			}
			return runCompare(cmd, study, table, s.workers, f)
		},
	}
	s.register(cmd)
	f.register(cmd)
	return cmd
}

func runCompare(cmd *cobra.Command, study *compare.Study, table *dataset.Table, workers int, f compareFlags) error {
	if f.json == "" {
		if err := checkFolder(f.out); err != nil {
			return err
		}
	}
	if !table.Streamed() {
		// A small table: resamples leave much garbage behind beside little that stays, so that collecting it less often saves half the time.
		defer debug.SetGCPercent(debug.SetGCPercent(400))
	}
	bar := newProgress(cmd.ErrOrStderr())
	c, err := compare.Run(cmd.Context(), table, study, compare.Options{Workers: workers, Progress: bar.step})
	bar.end()
	if err != nil {
		return classify(err)
	}
	r := view.Build(c, writeStudy(study), version)
	if f.json != "" {
		return writeResults(cmd, r, f.json)
	}
	files, err := outputs(r)
	if err != nil {
		return err
	}
	if err := cmd.Context().Err(); err != nil {
		return err
	}
	if err := writeFolder(f.out, files); err != nil {
		return err
	}
	_, err = fmt.Fprint(cmd.OutOrStdout(), plain(compareText(r, f.out)))
	return err
}

func writeResults(cmd *cobra.Command, r *view.Results, path string) error {
	b, err := resultsJSON(r)
	if err != nil {
		return err
	}
	if path == "-" {
		_, err = cmd.OutOrStdout().Write(b)
		return err
	}
	return writeWhole(path, b)
}

// classify marks errors in what the user wrote as wrong use; the rest is an analysis that failed.
func classify(err error) error {
	var syntax *equation.SyntaxError
	var study *compare.StudyError
	var column *design.UnknownColumnError
	if errors.As(err, &syntax) || errors.As(err, &study) || errors.As(err, &column) {
		return &usageError{err}
	}
	return err
}

func newCheck() *cobra.Command {
	var s studyFlags
	var json string
	var fail bool
	cmd := &cobra.Command{
		Use: "check STUDY|DATA", Short: "Say what is tangled, fit nothing else", Args: oneArg("a study file or a table"),
		Long: "check reads a study file or a table with --equation and reports inflation factors, near-dependencies and what they cost.",
		RunE: func(cmd *cobra.Command, args []string) error {
			study, table, err := s.load(cmd, args[0])
			if err != nil {
				return err
			}
			bar := newProgress(cmd.ErrOrStderr())
			c, err := compare.Check(cmd.Context(), table, study, compare.Options{Workers: s.workers, Progress: bar.step})
			bar.end()
			if err != nil {
				return classify(err)
			}
			r := view.Build(c, writeStudy(study), version)
			if json != "" {
				err = writeResults(cmd, r, json)
			} else {
				_, err = fmt.Fprint(cmd.OutOrStdout(), plain(checkText(r)))
			}
			if err == nil && fail && r.Diagnosis.Flagged {
				return errFlagged
			}
			return err
		},
	}
	s.register(cmd)
	cmd.Flags().StringVar(&json, "json", "", "write the results file here instead of a report; - for standard output")
	cmd.Flags().BoolVar(&fail, "fail-when-flagged", false, "exit with 3 when the model is flagged for a substantive or exact reason")
	return cmd
}
