package mapstore_test

import (
	"context"
	"fmt"
	"os"
	"slices"
	"time"

	"example.com/wideberth/mapstore/journal/boltjournal"
)

type ctx = context.Context

var background = context.Background()

func reverse[T any](s []T) { slices.Reverse(s) }

// child runs this test binary as another process of a test: "crash <run> <path>" or
// "full <path>". What it has to complain about goes to standard error.
func child(job string) int {
	var run int
	var path string
	var err error
	if _, e := fmt.Sscanf(job, "crash %d %s", &run, &path); e == nil {
		err = crashChild(path, run)
	} else if _, e := fmt.Sscanf(job, "full %s", &path); e == nil {
		err = fullChild(path)
	} else {
		err = fmt.Errorf("no job is called %q", job)
	}
	if err != nil {
		fmt.Fprintln(os.Stderr, err)
		return 1
	}
	return 0
}

func openJournal(path string) (*boltjournal.Journal, error) {
	return boltjournal.Open(path, boltjournal.Options{LockTimeout: 10 * time.Second})
}
