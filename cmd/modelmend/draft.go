package main

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"unicode"

	"github.com/spf13/cobra"
	"go.yaml.in/yaml/v3"

	"modelmend/fit/dataset"
	"modelmend/fit/equation"
)

func nan() float64 { return math.NaN() }

func newDraft() *cobra.Command {
	var output string
	cmd := &cobra.Command{
		Use: "draft DATA", Short: "Write a commented study file to start from", Args: oneArg("a table"),
		RunE: func(cmd *cobra.Command, args []string) error {
			t, err := dataset.ReadFile(args[0])
			if err != nil {
				return err
			}
			data := args[0]
			if output != "" && !filepath.IsAbs(data) { // a study names its table from its own folder
				from, ferr := filepath.Abs(filepath.Dir(output))
				to, terr := filepath.Abs(data)
				if rel, err := filepath.Rel(from, to); ferr == nil && terr == nil && err == nil {
					data = filepath.ToSlash(rel)
				}
			}
			text := draft(data, t)
			if output == "" {
				_, err = fmt.Fprint(cmd.OutOrStdout(), plain(text))
				return err
			}
			if _, err := os.Lstat(output); err == nil {
				return wrongUse("%s exists already; choose another name with -o", output)
			}
			return writeWhole(output, []byte(text))
		},
	}
	cmd.Flags().StringVarP(&output, "output", "o", "", "write to this file instead of standard output")
	return cmd
}

// draft looks at the columns and writes a study that a newcomer edits.
func draft(path string, t *dataset.Table) string {
	var b strings.Builder
	fmt.Fprintf(&b, "# A study for %s: %d rows, %d columns. Edit it, then run: modelmend compare THIS-FILE\n#\n# Columns:\n", oneLine(t.Name), t.Rows, len(t.Columns))
	for _, c := range t.Columns {
		fmt.Fprintf(&b, "#   %-28s %s\n", oneLine(c.Name), oneLine(describeColumn(c)))
	}
	eq := exampleEquation(t)
	if eq == "" {
		eq = "write = your + equation"
	}
	fmt.Fprintf(&b, "\ndata: %s\nequation: %s   # your model: + between terms, * product, ^ power, ln(x); text columns become categories\n", yamlText(path), yamlText(eq))
	b.WriteString(`# focal: [NAME]                  # the coefficients the paper is about
# purpose: explain               # explain | predict | describe
# smallest_effect: {NAME: 0.01}  # an effect smaller than this would not matter
# keep: [NAME]                   # never dropped or merged: needed for identification
# groups: {concept: [NAME, NAME]}  # regressors that measure one concept and may be merged
# rows: year >= 1990             # the sample, if not all rows
# constant: true
# clusters: NAME                 # rows with the same value belong together
# time: NAME                     # the column that orders the rows
# standard_errors: classical     # classical | robust | clustered | autocorrelation
# folds: {kind: random, count: 10, repeats: 5}
# resamples: 999                 # 0: none
# simulations: 1000              # samples for each truth; 0: none
# seed: 20260101
`)
	return b.String()
}

// oneLine keeps a name from the file inside a comment: whatever could end a line becomes a blank.
func oneLine(s string) string {
	return strings.Map(func(r rune) rune {
		if !unicode.IsPrint(r) {
			return ' '
		}
		return r
	}, s)
}

// yamlText writes s as one YAML scalar on one line.
func yamlText(s string) string {
	if oneLine(s) == s {
		return "'" + strings.ReplaceAll(s, "'", "''") + "'"
	}
	b, err := yaml.Marshal(&yaml.Node{Kind: yaml.ScalarNode, Style: yaml.DoubleQuotedStyle, Value: s})
	if err != nil {
		panic("a text cannot be written as YAML: " + err.Error())
	}
	return strings.TrimSuffix(string(b), "\n")
}

func describeColumn(c *dataset.Column) string {
	var s string
	switch c.Kind {
	case dataset.Number:
		s = "number"
		if skewed(c) {
			s += ", positive and skewed: ln(...) may suit it"
		}
	case dataset.Text:
		if c.NumericCells > 0 && c.FirstStray != "" && c.NumericCells > len(c.Codes)/2 {
			s = fmt.Sprintf("mostly numbers, but line %d holds %q", c.FirstStrayLine, c.FirstStray)
		} else {
			s = fmt.Sprintf("text, %d levels", len(c.Levels))
		}
	default:
		s = "no values at all"
	}
	if c.Missing > 0 && c.Kind != dataset.Empty {
		s += fmt.Sprintf(", %d missing", c.Missing)
	}
	return s
}

// skewed: every value positive and a mean far above the median, judged by the third moment (common practice, no source).
func skewed(c *dataset.Column) bool {
	n, sum := 0.0, 0.0
	for i, v := range c.Hi {
		if c.IsMissing(i) {
			continue
		}
		if v <= 0 {
			return false
		}
		n++
		sum += v
	}
	mean := sum / n
	var m2, m3 float64
	for i, v := range c.Hi {
		if !c.IsMissing(i) {
			m2 += (v - mean) * (v - mean)
			m3 += (v - mean) * (v - mean) * (v - mean)
		}
	}
	return m2 > 0 && m3/n/math.Pow(m2/n, 1.5) > 1
}

// exampleEquation takes the first number column as the dependent variable and the next few columns as regressors.
func exampleEquation(t *dataset.Table) string {
	var names []string
	for _, c := range t.Columns {
		usable := c.Kind == dataset.Number || (c.Kind == dataset.Text && len(names) > 0 && len(c.Levels) <= 12)
		if usable && varies(c) {
			names = append(names, equation.Quote(c.Name))
		}
		if len(names) == 5 {
			break
		}
	}
	if len(names) < 2 {
		return ""
	}
	return names[0] + " = " + strings.Join(names[1:], " + ")
}

// varies takes it for granted where the values are not at hand.
func varies(c *dataset.Column) bool {
	if c.Kind == dataset.Text {
		return len(c.Levels) > 1
	}
	if c.Kind == dataset.Number && c.Hi == nil {
		return true
	}
	first := math.NaN()
	for i, v := range c.Hi {
		if c.IsMissing(i) {
			continue
		}
		if math.IsNaN(first) {
			first = v
		} else if v != first {
			return true
		}
	}
	return false
}
