package main

import (
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// TestReadmeTranscripts runs each block of the README that starts with a command and compares what it prints.
func TestReadmeTranscripts(t *testing.T) {
	root, err := filepath.Abs(filepath.Join("..", ".."))
	if err != nil {
		t.Fatal(err)
	}
	raw, err := os.ReadFile(filepath.Join(root, "README.md"))
	if err != nil {
		t.Fatal(err)
	}
	t.Chdir(root)
	out := filepath.Join(t.TempDir(), "out")
	run := 0
	blocks := strings.Split(strings.ReplaceAll(string(raw), "\r\n", "\n"), "```\n")
	for i := 1; i < len(blocks); i += 2 {
		command, want, _ := strings.Cut(blocks[i], "\n")
		line, ok := strings.CutPrefix(command, "$ go run ./cmd/modelmend ")
		if !ok {
			t.Errorf("a block starts with %q, not with a command", command)
			continue
		}
		run++
		args := words(line)
		if args[0] == "demo" || args[0] == "compare" {
			args = append(args, "--out", out)
		}
		_, o, e := call(t, args...)
		got := withoutPage(o + e)
		if want = withoutPage(want); got != want {
			t.Errorf("%s\nprints:\n%s\nthe README says:\n%s", command, got, want)
		}
	}
	if run < 3 {
		t.Errorf("only %d commands were run", run)
	}
}

// withoutPage drops the line with the address of the page, which differs from machine to machine.
func withoutPage(s string) string {
	var kept []string
	for _, l := range strings.Split(strings.TrimRight(s, "\n"), "\n") {
		if !strings.HasPrefix(l, "Page: file://") {
			kept = append(kept, l)
		}
	}
	return strings.Join(kept, "\n")
}

// words splits a command line at blanks outside double quotes.
func words(s string) []string {
	var out []string
	for i, part := range strings.Split(s, `"`) {
		if i%2 == 1 {
			out = append(out, part)
			continue
		}
		out = append(out, strings.Fields(part)...)
	}
	return out
}
