package journal

import (
	"context"
	"errors"
)

// Kind says how a version came to be. The numbers are on disk and on the wire.
type Kind uint8

// The kinds.
const (
	Created  Kind = iota + 1 // version 1
	Patched                  // a list of edits was carried out
	Restored                 // an old version's content was brought back
)

// Record is one version as the journal keeps it.
type Record struct {
	Floor     string
	Version   int64
	Kind      Kind
	Base      int64 // the base its author named
	Author    string
	Reason    string
	RequestID string   // empty when the author gave none
	TimeUs    int64    // microseconds since 1970 UTC
	Payload   []byte   // settings, edits, or the restored version, in the store's encoding
	Digest    [32]byte // of the resulting content
	Prev      [32]byte // Hash of the record before; zero for version 1
	Hash      [32]byte // SHA-256 over everything above; Seal sets it
}

// Snapshot is a whole version's content.
type Snapshot struct {
	Floor   string
	Version int64
	Digest  [32]byte // as in the version's record
	Content []byte   // in floor's encoding
}

// The bounds of what a journal takes. A record or snapshot beyond them is
// ErrInvalid.
const (
	// MaxPayloadBytes bounds Record.Payload. A push is bounded far below it by the
	// service's message limit.
	MaxPayloadBytes = 64 << 20
	// MaxTextBytes bounds floor, author, reason and request id, each. 500
	// characters of four bytes fit.
	MaxTextBytes = 4096
	// MaxSnapshotBytes bounds Snapshot.Content. The largest floor, 2^28 cells of two
	// bits, is 64 MiB without its features.
	MaxSnapshotBytes = 1 << 30
	// MaxReadBytes is how much payload one Read gathers before it stops short of
	// its limit.
	MaxReadBytes = 16 << 20
)

// The failures that a caller tells apart.
var (
	// ErrConflict: the record's version is not the head plus one.
	ErrConflict = errors.New("journal: another writer appended this version")
	// ErrCorrupt: what was read does not check out. The error is a *CorruptError.
	ErrCorrupt = errors.New("journal: record is damaged")
	// ErrFormat: the error is a *FormatError.
	ErrFormat = errors.New("journal: format is newer than this program")
	// ErrClosed: the journal has been closed.
	ErrClosed = errors.New("journal: closed")
	// ErrInvalid: a record or snapshot that no journal takes: beyond the bounds, not
	// sealed, not chained to the record before, or with a request id that the floor
	// has used before. It is a fault of the program that wrote it.
	ErrInvalid = errors.New("journal: record does not fit")
)

// Reader reads a journal. All methods are safe for concurrent use and give up
// with ctx's error when ctx ends first.
type Reader interface {
	// Floors are the ids that have records, in byte order.
	Floors(ctx context.Context) ([]string, error)
	// Head is the newest version, 0 when the floor has no record. The newest record
	// is checked.
	Head(ctx context.Context, floor string) (int64, error)
	// Read gives records from version from on, in order, each checked, the first
	// one against the record before it. It gives at most limit of them, and stops
	// earlier once it has gathered MaxReadBytes of payload, but gives at least one
	// when there is one and limit is not below 1. Versions below 1 count as 1. No
	// records and no error means that from is above the head.
	Read(ctx context.Context, floor string, from int64, limit int) ([]Record, error)
	// Latest is the newest snapshot at or below version; ok is false when there is
	// none. A damaged one is a *CorruptError that names its version, so that a caller
	// may go on to the one below.
	Latest(ctx context.Context, floor string, version int64) (s Snapshot, ok bool, err error)
	// Find is the version that a request id was carried out as, 0 when there is none
	// and for the empty id.
	Find(ctx context.Context, floor, requestID string) (int64, error)
}

// Journal is a Reader that can be appended to by any number of writers.
type Journal interface {
	Reader
	// Append makes a sealed record durable before it returns. ErrConflict when
	// r.Version is not the head plus one, ErrInvalid when the record does not fit
	// otherwise; nothing is written in both cases.
	Append(ctx context.Context, r Record) error
	// PutSnapshot keeps a version's content, to bound recovery. The version must have
	// a record of the same digest. Only a bounded number of snapshots is kept, the
	// newest ones always (Spare decides); records are all kept.
	PutSnapshot(ctx context.Context, s Snapshot) error
	// Close lets go of the files. Calls after it fail with ErrClosed.
	Close() error
}
