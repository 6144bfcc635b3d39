package boltjournal_test

import (
	"errors"
	"os"
	"path/filepath"
	"strconv"
	"syscall"
	"testing"

	"example.com/wideberth/mapstore/journal"
	"example.com/wideberth/mapstore/journal/boltjournal"
	"example.com/wideberth/mapstore/journal/journaltest"
)

// swapMedium puts a device in the place of the open journal file, so that writes and
// syncs go there while the mapped pages stay. The result undoes it.
func swapMedium(t *testing.T, path, device string) (undo func()) {
	t.Helper()
	entries, err := os.ReadDir("/proc/self/fd")
	if err != nil {
		t.Skip(err)
	}
	for _, e := range entries {
		if to, _ := os.Readlink("/proc/self/fd/" + e.Name()); to != path {
			continue
		}
		fd, err := strconv.Atoi(e.Name())
		if err != nil {
			t.Fatal(err)
		}
		saved, err := syscall.Dup(fd)
		if err != nil {
			t.Fatal(err)
		}
		d, err := os.OpenFile(device, os.O_RDWR, 0)
		if err != nil {
			t.Skip(err)
		}
		defer d.Close()
		if err := syscall.Dup3(int(d.Fd()), fd, syscall.O_CLOEXEC); err != nil {
			t.Fatal(err)
		}
		return func() {
			if err := errors.Join(syscall.Dup3(saved, fd, syscall.O_CLOEXEC), syscall.Close(saved)); err != nil {
				t.Fatal(err)
			}
		}
	}
	t.Fatalf("%s is not open", path)
	return nil
}

// TestMediumFails lets the medium fail in two ways. /dev/full refuses writes: appends
// work again as soon as it stops. /dev/null takes them and cannot sync: from then on
// nobody knows what is on disk, so the journal reads and takes no more appends until
// it is opened again.
func TestMediumFails(t *testing.T) {
	for _, c := range []struct {
		device  string
		cause   error
		resumes bool
	}{
		{"/dev/full", syscall.ENOSPC, true},
		{"/dev/null", syscall.EINVAL, false}, // of fdatasync on a device
	} {
		t.Run(filepath.Base(c.device), func(t *testing.T) {
			path, recs := filled(t, 30)
			j := open(t, path)
			last := recs["hall"][29]
			for i := range 8 { // make free pages, so that the file need not grow
				r := last
				if err := j.PutSnapshot(t.Context(), journal.Snapshot{
					Floor: "hall", Version: r.Version, Digest: r.Digest, Content: make([]byte, 30_000>>i)}); err != nil {
					t.Fatal(err)
				}
			}
			next := journaltest.Next("hall", last)
			undo := swapMedium(t, path, c.device)
			err := j.Append(t.Context(), next)
			undo()
			if !errors.Is(err, c.cause) {
				t.Fatalf("append gives %v, want %v", err, c.cause)
			}
			check := func(j *boltjournal.Journal, want int64) {
				t.Helper()
				if good, err := journal.Verify(t.Context(), j, "hall"); good != want || err != nil {
					t.Errorf("the journal checks out up to %d, %v; want %d", good, err, want)
				}
			}
			check(j, 30)
			err = j.Append(t.Context(), next)
			if c.resumes {
				if err != nil {
					t.Errorf("append once there is room again: %v", err)
				}
				check(j, 31)
			} else {
				if err == nil || !errors.Is(err, c.cause) {
					t.Errorf("append after a failed sync: %v", err)
				}
				check(j, 30)
			}
			if err := j.Close(); err != nil {
				t.Fatal(err)
			}
			j = open(t, path)
			if !c.resumes {
				if err := j.Append(t.Context(), next); err != nil {
					t.Errorf("append after opening again: %v", err)
				}
			}
			check(j, 31)
		})
	}
}
