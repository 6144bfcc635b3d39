// Package journal is where versions are made durable.
package journal

import (
	"context"
	"errors"
)

// Kind says how a version came to be. The numbers are on disk and on the wire.
type Kind uint8

// The kinds.
const (
	Created Kind = iota + 1
	Patched
	Restored
)

// Record is one version as the journal keeps it.
type Record struct {
	Floor     string
	Version   int64
	Kind      Kind
	Base      int64
	Author    string
	Reason    string
	RequestID string
	TimeUs    int64    // microseconds since 1970 UTC
	Payload   []byte   // settings, edits, or the restored version, in floor's encoding
	Digest    [32]byte // of the resulting content
	Prev      [32]byte // Hash of the record before; zero for version 1
	Hash      [32]byte // SHA-256 over everything above
}

// Snapshot is a whole version's content.
type Snapshot struct {
	Floor   string
	Version int64
	Digest  [32]byte
	Content []byte // in floor's encoding
}

// The failures that a caller tells apart.
var (
	ErrConflict = errors.New("journal: another writer appended this version")
	ErrCorrupt  = errors.New("journal: record is damaged")
	ErrFormat   = errors.New("journal: format is newer than this program")
	ErrClosed   = errors.New("journal: closed")
)

// Reader reads a journal.
type Reader interface {
	// Floors are the ids that have records.
	Floors(ctx context.Context) ([]string, error)
	// Head is the newest version, 0 when the floor has no record.
	Head(ctx context.Context, floor string) (int64, error)
	// Read gives up to limit records from version from on, in order.
	Read(ctx context.Context, floor string, from int64, limit int) ([]Record, error)
	// Latest is the newest snapshot at or below version; ok is false when there is none.
	Latest(ctx context.Context, floor string, version int64) (s Snapshot, ok bool, err error)
	// Find is the version that a request id was carried out as, 0 when there is none.
	Find(ctx context.Context, floor, requestID string) (int64, error)
}

// Journal is a Reader that can be appended to by any number of writers.
type Journal interface {
	Reader
	// Append makes a record durable before it returns. ErrConflict when
	// r.Version is not the head plus one.
	Append(ctx context.Context, r Record) error
	// PutSnapshot keeps a version's content, to bound recovery.
	PutSnapshot(ctx context.Context, s Snapshot) error
	// Close lets go of the files.
	Close() error
}
