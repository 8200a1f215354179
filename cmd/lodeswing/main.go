// Command lodeswing measures magnet toys from phone clips. What comes in: a
// clip and a rig file. What goes out: a result folder, and an exit status that
// a script can act on.
package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/signal"
	"syscall"
)

// Exit statuses, as the help of the root command states them.
const (
	statusDone     = 0
	statusFailed   = 1
	statusWrongUse = 2
	statusReject   = 3
)

// usageError is a command called with wrong words: exit status 2.
type usageError struct{ err error }

func (e usageError) Error() string { return e.err.Error() }
func (e usageError) Unwrap() error { return e.err }

// wrongUse marks an error as the caller's: exit status 2.
func wrongUse(format string, args ...any) error {
	return usageError{fmt.Errorf(format, args...)}
}

// errReject says that the work was done and the verdict is reject: exit status 3.
var errReject = errors.New("the verdict is reject")

func main() { os.Exit(run(os.Args[1:], os.Stdout, os.Stderr)) }

// run executes one command line and returns its exit status. The first Ctrl-C
// cancels the work, so that nothing half-written stays; a second one kills.
func run(args []string, stdout, stderr io.Writer) int {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer stop()
	context.AfterFunc(ctx, stop)

	root := rootCommand()
	root.SetArgs(args)
	root.SetOut(stdout)
	root.SetErr(stderr)
	err := root.ExecuteContext(ctx)
	switch {
	case err == nil:
		return statusDone
	case errors.Is(err, errReject):
		return statusReject
	case ctx.Err() != nil:
		fmt.Fprintln(stderr, "lodeswing: stopped; nothing half-written was left")
		return statusFailed
	}
	fmt.Fprintln(stderr, "lodeswing:", err)
	var usage usageError
	if errors.As(err, &usage) {
		return statusWrongUse
	}
	return statusFailed
}
