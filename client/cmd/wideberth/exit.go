package main

import (
	"context"
	"errors"
	"fmt"
	"maps"
	"slices"
	"strings"

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

// words is what went wrong without gRPC's own preamble; the reason is told beside it.
func words(err error) string {
	var inner interface{ GRPCStatus() *status.Status }
	if !errors.As(err, &inner) {
		return err.Error()
	}
	st := inner.GRPCStatus()
	return strings.Replace(err.Error(), st.Err().Error(), st.Message(), 1)
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
	a.notef("wideberth: %s", words(err))
	if all := client.FieldProblems(err); len(all) > 1 { // the message names the first
		for _, p := range all {
			a.notef("  %s: %s", p.Field, p.Problem)
		}
	}
	reason, md := client.ReasonOf(err)
	if reason != "" {
		a.notef("  reason: %s", reason)
		for _, k := range slices.Sorted(maps.Keys(md)) {
			values := strings.Split(md[k], "; ") // conflicts, one after the other
			if len(values) == 1 {
				a.notef("  %s: %s", k, md[k])
				continue
			}
			a.notef("  %s:", k)
			for _, v := range values {
				a.notef("    %s", v)
			}
		}
	}
	switch code {
	case exitConflict:
		a.notef("The floor has changed since that base. See what changed, then push again on the new head:")
		a.notef("  wideberth compare %s %s", md["floor"], md["base_version"])
	case exitUnreachable:
		if status.Code(err) == codes.Unavailable {
			a.notef("Is the server running at %s? A refused TLS certificate looks the same from here.", a.server)
		}
	}
	return code
}
