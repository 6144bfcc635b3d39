package boltjournal_test

import (
	"bytes"
	"context"
	"errors"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"example.com/wideberth/mapstore/journal"
	"example.com/wideberth/mapstore/journal/boltjournal"
	"example.com/wideberth/mapstore/journal/journaltest"
	bolt "go.etcd.io/bbolt"
)

func TestWrongFiles(t *testing.T) {
	dir := t.TempDir()
	write := func(name string, b []byte) string {
		path := filepath.Join(dir, name)
		if err := os.WriteFile(path, b, 0o600); err != nil {
			t.Fatal(err)
		}
		return path
	}
	other := filepath.Join(dir, "other.db")
	db, err := bolt.Open(other, 0o600, nil)
	if err != nil {
		t.Fatal(err)
	}
	if err := db.Update(func(tx *bolt.Tx) error { _, err := tx.CreateBucket([]byte("mail")); return err }); err != nil {
		t.Fatal(err)
	}
	if err := db.Close(); err != nil {
		t.Fatal(err)
	}
	for name, c := range map[string]struct {
		path string
		want error
	}{
		"text":                  {write("notes.txt", []byte("buckets of tulips\n")), boltjournal.ErrNotJournal},
		"large text":            {write("large.txt", bytes.Repeat([]byte("buckets of tulips\n"), 4000)), boltjournal.ErrNotJournal},
		"empty":                 {write("empty", nil), boltjournal.ErrNotJournal},
		"zeros":                 {write("zeros", make([]byte, 1<<16)), boltjournal.ErrNotJournal},
		"another bbolt file":    {other, boltjournal.ErrNotJournal},
		"a folder":              {dir, nil},
		"a folder that is not":  {filepath.Join(dir, "no", "floors.journal"), os.ErrNotExist},
		"an unreadable folder?": {filepath.Join(write("plain", nil), "floors.journal"), nil},
	} {
		before, _ := os.ReadFile(c.path)
		_, err := boltjournal.Open(c.path, boltjournal.Options{})
		if err == nil || c.want != nil && !errors.Is(err, c.want) || !strings.Contains(err.Error(), c.path) {
			t.Errorf("%s: error %v, want %v naming %s", name, err, c.want, c.path)
		}
		if after, _ := os.ReadFile(c.path); !bytes.Equal(before, after) {
			t.Errorf("%s: the file was written to", name)
		}
	}
}

func TestSecondHolderIsToldWhy(t *testing.T) {
	path := filepath.Join(t.TempDir(), "floors.journal")
	open(t, path)
	_, err := boltjournal.Open(path, boltjournal.Options{LockTimeout: time.Millisecond})
	if !errors.Is(err, boltjournal.ErrLocked) || !strings.Contains(err.Error(), path) {
		t.Errorf("error is %v", err)
	}
}

func TestNewFileLeavesNothingElse(t *testing.T) {
	dir := t.TempDir()
	open(t, filepath.Join(dir, "floors.journal"))
	entries, err := os.ReadDir(dir)
	if err != nil || len(entries) != 1 {
		t.Fatalf("folder holds %v, %v", entries, err)
	}
	info, err := entries[0].Info()
	if err != nil || info.Mode().Perm() != 0o600 {
		t.Errorf("mode is %v, %v", info.Mode(), err)
	}
}

func TestBackup(t *testing.T) {
	path, recs := filled(t, 6)
	j := open(t, path)
	to := filepath.Join(t.TempDir(), "backup.journal")
	if err := j.BackupTo(t.Context(), to); err != nil {
		t.Fatal(err)
	}
	if err := j.Append(t.Context(), journaltest.Next("hall", recs["hall"][5])); err != nil {
		t.Fatal(err)
	}
	if err := readAll(t, to, recs); err != nil {
		t.Errorf("the backup: %v", err)
	}
	if err := j.BackupTo(t.Context(), to); !errors.Is(err, os.ErrExist) {
		t.Errorf("backup onto a file: %v", err)
	}
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	to = filepath.Join(t.TempDir(), "second.journal")
	if err := j.BackupTo(ctx, to); !errors.Is(err, context.Canceled) {
		t.Errorf("backup with an ended context: %v", err)
	}
	if _, err := os.Stat(to); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("a backup that failed left its file: %v", err)
	}
}

// TestWaitingWriterHeedsItsContext holds the journal's turn with a slow append.
func TestAppendersQueueWithTheirContexts(t *testing.T) {
	j := open(t, filepath.Join(t.TempDir(), "floors.journal"))
	big := journaltest.Next("dock", journal.Record{})
	big.Payload = make([]byte, journal.MaxPayloadBytes)
	big = big.Seal()
	done := make(chan error, 1)
	go func() { done <- j.Append(t.Context(), big) }()
	// Whatever the two's order, an append that its context ended wrote nothing and one
	// that was taken is there.
	ctx, cancel := context.WithTimeout(t.Context(), 5*time.Millisecond)
	defer cancel()
	err := j.Append(ctx, journaltest.Next("hall", journal.Record{}))
	head, headErr := j.Head(t.Context(), "hall")
	if headErr != nil || (err == nil) != (head == 1) || err != nil && !errors.Is(err, context.DeadlineExceeded) {
		t.Errorf("append gave %v, head is %d, %v", err, head, headErr)
	}
	if err := <-done; err != nil {
		t.Error(err)
	}
}
