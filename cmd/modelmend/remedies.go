package main

import (
	"fmt"
	"strings"

	"github.com/spf13/cobra"

	"modelmend/fit/equation"
	"modelmend/remedy"
	"modelmend/web-output/view"
)

func newRemedies() *cobra.Command {
	return &cobra.Command{
		Use: "remedies [KEY]", Short: "Say what each remedy does, costs and assumes",
		Args: func(cmd *cobra.Command, args []string) error {
			if len(args) > 1 {
				return wrongUse("%s takes one key at most", cmd.CommandPath())
			}
			return nil
		},
		RunE: func(cmd *cobra.Command, args []string) error {
			if len(args) == 0 {
				_, err := fmt.Fprint(cmd.OutOrStdout(), listRemedies())
				return err
			}
			r, ok := remedy.Find(args[0])
			if !ok {
				var keys []string
				for _, m := range remedy.All() {
					keys = append(keys, m.Key)
				}
				advice := "they are " + strings.Join(keys, ", ")
				if near := equation.Nearest(args[0], keys); len(near) > 0 {
					advice = "did you mean " + near[0] + "?"
				}
				return wrongUse("there is no remedy %q; %s", args[0], advice)
			}
			_, err := fmt.Fprint(cmd.OutOrStdout(), card(r))
			return err
		},
	}
}

func listRemedies() string {
	var b strings.Builder
	for _, r := range remedy.All() {
		fmt.Fprintf(&b, "%-12s %s\n", r.Key, r.Title)
		for _, l := range wrap(r.Does, "") {
			fmt.Fprintf(&b, "             %s\n", l)
		}
	}
	b.WriteString("\n`modelmend remedies KEY` prints the whole card.\n")
	return b.String()
}

// card prints everything that a person must know about a remedy.
func card(r remedy.Remedy) string {
	var b strings.Builder
	fmt.Fprintf(&b, "%s (%s)\n", r.Title, r.Key)
	for _, part := range []struct{ head, text string }{
		{"What it does", r.Does}, {"What it assumes", r.Assumes}, {"What it buys", r.Buys}, {"What it costs", r.Costs},
		{"What its coefficients mean", r.Means}, {"What a referee will ask", r.Referee},
	} {
		fmt.Fprintf(&b, "\n%s\n", part.head)
		for _, l := range wrap(part.text, "") {
			fmt.Fprintf(&b, "  %s\n", l)
		}
	}
	if len(r.Options) > 0 {
		b.WriteString("\nOptions (--set KEY=VALUE)\n")
		for _, o := range r.Options {
			fmt.Fprintf(&b, "  %-18s %s\n", o.Key, o.Text)
		}
	}
	b.WriteString("\nSources\n")
	for _, s := range r.Sources {
		fmt.Fprintf(&b, "  %s\n", s)
	}
	return b.String()
}

func newSchema() *cobra.Command {
	return &cobra.Command{
		Use: "schema", Short: "Print the JSON Schema of the results file", Args: noArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			_, err := cmd.OutOrStdout().Write(view.Schema())
			return err
		},
	}
}
