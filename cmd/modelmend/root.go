package main

import (
	"io"
	"strings"
	"unicode"

	"github.com/spf13/cobra"
)

// version is set by the linker for a release: -ldflags "-X main.version=1.2.3". It holds no build time.
var version = "0.1.0"

func newRoot(out, errOut io.Writer) *cobra.Command {
	root := &cobra.Command{
		Use:   "modelmend",
		Short: "Compare remedies for regressors that move together",
		Long: "modelmend reads a table and an equation, says which regressors are tangled and what that costs the coefficient of interest,\n" +
			"fits every reasonable remedy on the same rows and folds, and writes an interactive comparison.",
		SilenceUsage:  true,
		SilenceErrors: true,
		Args: func(cmd *cobra.Command, args []string) error {
			if len(args) > 0 {
				return wrongUse("%q is not a command; `modelmend --help` lists them", args[0])
			}
			return nil
		},
		RunE: func(cmd *cobra.Command, _ []string) error { return cmd.Help() },
	}
	root.SetOut(out)
	root.SetErr(errOut)
	root.SetFlagErrorFunc(func(_ *cobra.Command, err error) error { return &usageError{err} })
	root.AddCommand(newCheck(), newCompare(), newDemo(), newRemedies(), newDraft(), newSchema(), newVersion())
	return root
}

func newVersion() *cobra.Command {
	return &cobra.Command{
		Use: "version", Short: "Print the version", Args: noArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			_, err := io.WriteString(cmd.OutOrStdout(), "modelmend "+version+"\n")
			return err
		},
	}
}

func noArgs(cmd *cobra.Command, args []string) error {
	if len(args) > 0 {
		return wrongUse("%s takes no arguments, found %q", cmd.CommandPath(), args[0])
	}
	return nil
}

func oneArg(what string) cobra.PositionalArgs {
	return func(cmd *cobra.Command, args []string) error {
		switch {
		case len(args) == 0:
			return wrongUse("%s needs %s", cmd.CommandPath(), what)
		case len(args) > 1:
			return wrongUse("%s takes %s, found %d arguments; put names with blanks in quotes", cmd.CommandPath(), what, len(args))
		}
		return nil
	}
}

// plain strips control characters, so that no name in the data can steer the terminal.
func plain(s string) string {
	return strings.Map(func(r rune) rune {
		if r == '\n' || r == '\t' {
			return r
		}
		if unicode.IsControl(r) || unicode.Is(unicode.Bidi_Control, r) {
			return '�'
		}
		return r
	}, s)
}
