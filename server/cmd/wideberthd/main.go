// Command wideberthd is the wideberth server.
//
//	wideberthd serve         answer calls until SIGTERM or SIGINT
//	wideberthd demo          play one night on a fictional auction hall
//	wideberthd healthcheck   ask a running server whether it is serving
//	wideberthd version       say what was built
//
// Exit codes: 0 when all went well, 1 on failure, 2 for a wrong command line or
// configuration, 5 when a server asked for its health cannot be reached.
package main

import (
	"context"
	"errors"
	"fmt"
	"os"
	"os/signal"
	"syscall"

	"example.com/wideberth/server"
)

// Exit codes.
const (
	exitFailure     = 1
	exitUsage       = 2
	exitUnreachable = 5
)

func main() { os.Exit(run()) }

func run() int {
	ctx, stop := signal.NotifyContext(context.Background(), syscall.SIGTERM, os.Interrupt)
	defer stop()
	// A second signal ends the process at once.
	defer context.AfterFunc(ctx, stop)()
	cmd := newRoot(os.Environ())
	cmd.SetOut(os.Stdout)
	cmd.SetErr(os.Stderr)
	err := cmd.ExecuteContext(ctx)
	if err == nil {
		return 0
	}
	fmt.Fprintf(os.Stderr, "wideberthd: %v\n", err)
	return exitCode(err)
}

// exitCode tells a wrong command line and a silent server from other failures.
func exitCode(err error) int {
	var config *server.ConfigError
	var usage *usageError
	var away *unreachableError
	switch {
	case errors.As(err, &config), errors.As(err, &usage):
		return exitUsage
	case errors.As(err, &away):
		return exitUnreachable
	}
	return exitFailure
}
