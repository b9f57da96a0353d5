package main

import (
	"bytes"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strings"
	"testing"
	"time"
)

// TestMain lets the test binary stand in for the program: with MODELMEND_AS_PROGRAM set it runs main.
func TestMain(m *testing.M) {
	if os.Getenv("MODELMEND_AS_PROGRAM") != "" {
		main()
		return
	}
	os.Exit(m.Run())
}

// TestInterrupt: a run that is interrupted ends with status 1, says so and leaves no folder behind.
func TestInterrupt(t *testing.T) {
	if runtime.GOOS == "windows" {
		t.Skip("an interrupt cannot be sent to another process there")
	}
	var b strings.Builder
	b.WriteString("y,a,b,c,d,e,f\n")
	for i := range 4000 {
		fmt.Fprintf(&b, "%d,%d,%d,%d,%d,%d,%d\n", i%97, i%89, i%83, i%79, i%73, i%71, i%67)
	}
	data := filepath.Join(t.TempDir(), "t.csv")
	if err := os.WriteFile(data, []byte(b.String()), 0o600); err != nil {
		t.Fatal(err)
	}
	out := filepath.Join(t.TempDir(), "out")
	// Leave-one-out over 4,000 rows learns sixteen million tunings: it is certainly still at work when the interrupt comes.
	cmd := exec.Command(os.Args[0], "compare", data, "-e", "y = a + b + c + d + e + f", "--folds", "leave-one-out", "--out", out)
	cmd.Env = append(os.Environ(), "MODELMEND_AS_PROGRAM=1")
	var errOut bytes.Buffer
	cmd.Stderr = &errOut
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	time.Sleep(500 * time.Millisecond)
	if err := cmd.Process.Signal(os.Interrupt); err != nil {
		t.Fatal(err)
	}
	err := cmd.Wait()
	if code := cmd.ProcessState.ExitCode(); err == nil || code != statusFailed {
		t.Errorf("status %d (%v), want 1", code, err)
	}
	if !strings.Contains(errOut.String(), "stopped") {
		t.Errorf("standard error says %q", errOut.String())
	}
	if _, err := os.Stat(out); !os.IsNotExist(err) {
		t.Error("a folder was left behind")
	}
}
