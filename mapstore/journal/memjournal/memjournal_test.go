package memjournal_test

import (
	"testing"

	"example.com/wideberth/mapstore/journal"
	"example.com/wideberth/mapstore/journal/journaltest"
	"example.com/wideberth/mapstore/journal/memjournal"
)

func TestConformance(t *testing.T) {
	journaltest.Run(t, func(t *testing.T) journaltest.Opener {
		var s memjournal.Storage
		return func() (journal.Journal, error) { return s.Open(), nil }
	})
}
