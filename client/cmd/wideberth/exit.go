package main

import (
	"context"
	"errors"
	"fmt"
	"maps"
	"slices"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"example.com/wideberth/client"
	"example.com/wideberth/client/layout"
	"example.com/wideberth/client/patchfile"
	"example.com/wideberth/client/trial"
)

// The exit codes, see the package comment.
const (
	exitOK          = 0
	exitFailure     = 1
	exitUsage       = 2
	exitRejected    = 3
	exitConflict    = 4
	exitUnreachable = 5
	exitRefused     = 6
)

// usageError is a command line that is wrong.
type usageError struct{ err error }

func (e usageError) Error() string { return e.err.Error() }
func (e usageError) Unwrap() error { return e.err }

func usagef(format string, args ...any) error { return usageError{fmt.Errorf(format, args...)} }

// errRefused is a plan that was answered with a refusal, which has been printed.
var errRefused = errors.New("no route")

// exitCode is the exit code for an error.
func exitCode(err error) int {
	var (
		usage     usageError
		patchErr  *patchfile.Error
		layoutErr *layout.Error
		trialErr  *trial.FileError
	)
	switch {
	case err == nil:
		return exitOK
	case errors.As(err, &usage):
		return exitUsage
	case errors.Is(err, errRefused):
		return exitRefused
	case errors.As(err, &patchErr), errors.As(err, &layoutErr), errors.As(err, &trialErr):
		return exitRejected
	}
	switch status.Code(err) {
	case codes.InvalidArgument, codes.FailedPrecondition, codes.AlreadyExists:
		return exitRejected
	case codes.Aborted:
		return exitConflict
	case codes.Unavailable, codes.DeadlineExceeded:
		return exitUnreachable
	}
	if errors.Is(err, context.DeadlineExceeded) {
		return exitUnreachable
	}
	return exitFailure
}

// report tells stderr what went wrong, with what the service said about it, and
// gives the exit code.
func (a *app) report(err error) int {
	code := exitCode(err)
	switch code {
	case exitOK, exitRefused:
		return code
	case exitUsage:
		a.notef("wideberth: %v", err)
		a.notef("Run wideberth help, or a command with --help.")
		return code
	}
	a.notef("wideberth: %v", err)
	for _, p := range client.FieldProblems(err) {
		a.notef("  %s: %s", p.Field, p.Problem)
	}
	if reason, md := client.ReasonOf(err); reason != "" {
		a.notef("  reason: %s", reason)
		for _, k := range slices.Sorted(maps.Keys(md)) {
			a.notef("  %s: %s", k, md[k])
		}
	}
	switch code {
	case exitConflict:
		a.notef("The floor has changed since that base. Look at what changed, then push again on the new head.")
	case exitUnreachable:
		if status.Code(err) == codes.Unavailable {
			a.notef("Is the server running at %s? A refused TLS certificate looks the same from here.", a.server)
		}
	}
	return code
}
