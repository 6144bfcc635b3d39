// Command wideberth is the operator's tool of a wideberth service: it shows floors
// and their versions, pushes patches, asks for routes and draws them.
//
// Data goes to stdout, everything else to stderr; nothing is coloured. With
// --output json every command prints protobuf's JSON mapping of the contract's
// messages, watch, reach, roadmap and grown one object a line, and trial and version an object of their own.
//
// Exit codes, which scripts may rely on:
//
//	0  done
//	1  failed for a reason that has no code of its own
//	2  the command line is wrong
//	3  rejected by validation: a file, a field or the floor's state does not allow it
//	4  version conflict: the base is stale, look at the new head and push again
//	5  the server cannot be reached, or did not answer in time
//	6  refused: there is no route (plan), not for every pair (reach), or over no roadmap
//	   (compare-roadmaps)
package main

import (
	"context"
	"io"
	"os"
	"os/signal"
	"syscall"
)

func main() {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	code := run(ctx, os.Args[1:], os.Getenv, os.Stdout, os.Stderr)
	stop()
	os.Exit(code)
}

// run carries out one command line and gives its exit code.
func run(ctx context.Context, args []string, getenv func(string) string, stdout, stderr io.Writer) int {
	a := &app{getenv: getenv, stdout: stdout, stderr: stderr}
	root := a.root()
	root.SetArgs(args)
	root.SetOut(stdout) // help that was asked for
	root.SetErr(stderr)
	err := root.ExecuteContext(ctx)
	if err != nil && !a.started {
		err = usageError{err} // before a command ran, only the command line can be wrong
	}
	return a.report(err)
}
