package main

import (
	"bytes"
	"embed"
	"fmt"

	"github.com/spf13/cobra"

	"modelmend/fit/dataset"
)

//go:embed demo/study.yaml demo/flats.csv
var demoFiles embed.FS

func newDemo() *cobra.Command {
	var f compareFlags
	var workers int
	cmd := &cobra.Command{
		Use: "demo", Short: "Run the main job on the built-in invented study", Args: noArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			raw, err := demoFiles.ReadFile("demo/study.yaml")
			if err != nil {
				return err
			}
			study, err := parseStudy("demo/study.yaml", raw)
			if err != nil {
				return err
			}
			data, err := demoFiles.ReadFile("demo/" + study.Data)
			if err != nil {
				return fmt.Errorf("the built-in study names a table that is not built in: %w", err)
			}
			table, err := dataset.Read(bytes.NewReader(data), study.Data)
			if err != nil {
				return err
			}
			study.Invented = true
			return runCompare(cmd, study, table, workers, f)
		},
	}
	f.register(cmd)
	cmd.Flags().IntVar(&workers, "workers", 0, "cores to use (0: all); the output does not depend on it")
	return cmd
}
