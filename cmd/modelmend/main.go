// Command modelmend compares remedies for regressors that move together.
//
// Arguments, study files and tables come in; verdicts, pages and results files go out. It holds no statistics: it reads,
// calls compare, and writes what view, page and the terminal make of the comparison. Nothing imports it.
package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/signal"
	"syscall"
	"time"
)

// The exit statuses.
const (
	statusDone    = 0
	statusFailed  = 1
	statusWrong   = 2
	statusFlagged = 3
)

func main() {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	finished := make(chan int, 1)
	go func() { finished <- run(ctx, os.Args[1:], os.Stdout, os.Stderr) }()
	status := statusFailed
	select {
	case status = <-finished:
	case <-ctx.Done():
		// Whatever is at work may take a while to notice. Files are put into place whole, so that leaving now leaves nothing half-written.
		select {
		case status = <-finished:
		case <-time.After(patience):
			fmt.Fprintln(os.Stderr, "modelmend: stopped")
		}
	}
	stop()
	os.Exit(status)
}

// patience is how long an interrupted run may take to end by itself.
const patience = 150 * time.Millisecond

// run executes one command line and returns the exit status: 0 done, 1 the analysis failed, 2 wrong use, 3 flagged (only
// when asked for).
func run(ctx context.Context, args []string, out, errOut io.Writer) int {
	root := newRoot(out, errOut)
	root.SetArgs(args)
	err := root.ExecuteContext(ctx)
	var wrong *usageError
	switch {
	case err == nil:
		return statusDone
	case errors.Is(err, errFlagged):
		return statusFlagged
	case errors.Is(err, context.Canceled):
		fmt.Fprintln(errOut, "modelmend: stopped; nothing was written")
		return statusFailed
	case errors.As(err, &wrong):
		fmt.Fprintln(errOut, "modelmend: "+plain(err.Error()))
		return statusWrong
	}
	fmt.Fprintln(errOut, "modelmend: "+plain(err.Error()))
	return statusFailed
}

// errFlagged ends `check --fail-when-flagged` on a flagged model.
var errFlagged = errors.New("the model is flagged")

// usageError is a command line or study that cannot be meant; it exits with 2.
type usageError struct{ err error }

func (e *usageError) Error() string { return e.err.Error() }
func (e *usageError) Unwrap() error { return e.err }

func wrongUse(format string, args ...any) error { return &usageError{fmt.Errorf(format, args...)} }
