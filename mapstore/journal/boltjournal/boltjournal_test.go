package boltjournal_test

import (
	"path/filepath"
	"testing"

	"example.com/wideberth/mapstore/journal"
	"example.com/wideberth/mapstore/journal/boltjournal"
	"example.com/wideberth/mapstore/journal/journaltest"
	"go.uber.org/goleak"
)

func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }

func TestConformance(t *testing.T) {
	journaltest.Run(t, func(t *testing.T) journaltest.Opener {
		path := filepath.Join(t.TempDir(), "floors.journal")
		return func() (journal.Journal, error) { return boltjournal.Open(path, boltjournal.Options{}) }
	})
}
