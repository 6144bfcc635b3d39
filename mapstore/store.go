package mapstore

import (
	"context"
	"errors"
	"time"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/mapstore/journal"
)

// Kind says how a version came to be.
type Kind = journal.Kind

// VersionInfo is the record of one version.
type VersionInfo struct {
	Floor     string
	Version   int64
	Digest    [32]byte
	Kind      Kind
	Base      int64
	Author    string
	Reason    string
	RequestID string
	Time      time.Time
	EditCount int
	Touched   geom.Rect // empty when nothing was touched
	Restored  int64
}

// Snapshot is one version: its record and its content. It stays valid for as long as
// anyone holds it.
type Snapshot struct {
	Info VersionInfo
	Map  *floor.Map
}

// FloorInfo is a floor and where it stands.
type FloorInfo struct {
	ID       string
	Settings floor.Settings
	Head     VersionInfo
	Oldest   int64
	Created  time.Time
}

// Patch is what Push is given.
type Patch struct {
	Base         int64
	Author       string
	Reason       string
	RequestID    string
	Edits        []floor.Edit
	ValidateOnly bool
	AllowRebase  bool
}

// Restore is what RestoreVersion is given.
type Restore struct {
	Version   int64 // to bring back
	Base      int64
	Author    string
	Reason    string
	RequestID string
}

// The failures a caller tells apart, with errors.Is and errors.As.
var (
	ErrNoFloor       = errors.New("no such floor")
	ErrFloorExists   = errors.New("floor exists with other settings")
	ErrFutureVersion = errors.New("version is above the head")
	ErrGone          = errors.New("version is not held any more")
	ErrRequestReused = errors.New("request id was used for another request")
	ErrJournal       = errors.New("journal cannot be written")
	ErrClosed        = errors.New("store is closed")
)

// StaleBaseError says that a patch's base is not the head.
type StaleBaseError struct {
	Base      int64
	Head      VersionInfo
	Conflicts []string // names and areas touched since, in words, at most 20
}

func (e *StaleBaseError) Error() string { return "stale base" }

// Options set a store's bounds. The zero value asks for the defaults.
type Options struct {
	KeepVersions  int // contents held in memory per floor; 0: 1,000
	SnapshotEvery int // versions between journal snapshots; 0: 200
	Now           func() time.Time
}

// Store keeps every floor's versions.
type Store struct{}

var errTodo = errors.New("mapstore: not built yet")

// Recovery says what Open did.
type Recovery struct {
	Floors, Versions, Replayed int
	Notes                      []string // what was found wrong and what was done, in words
}

// Open reads the journal and makes every floor's head ready.
func Open(ctx context.Context, j journal.Journal, o Options) (*Store, Recovery, error) {
	return nil, Recovery{}, errTodo
}

// Close stops watches and lets go of the contents. It does not close the journal.
func (s *Store) Close() error { return errTodo }

// CreateFloor makes a floor at version 1; the same call again gives the first answer.
func (s *Store) CreateFloor(ctx context.Context, id string, set floor.Settings, author, requestID string) (FloorInfo, error) {
	return FloorInfo{}, errTodo
}

// Floor is one floor.
func (s *Store) Floor(id string) (FloorInfo, error) { return FloorInfo{}, errTodo }

// Floors are all floors, by id.
func (s *Store) Floors() []FloorInfo { return nil }

// Push makes a new version. repeated says that the request id had been carried out
// before and the first answer is given again.
func (s *Store) Push(ctx context.Context, id string, p Patch) (v VersionInfo, repeated bool, err error) {
	return v, false, errTodo
}

// Restore makes a new version equal to an old one.
func (s *Store) Restore(ctx context.Context, id string, r Restore) (v VersionInfo, repeated bool, err error) {
	return v, false, errTodo
}

// Head is the newest version.
func (s *Store) Head(id string) (*Snapshot, error) { return nil, errTodo }

// At is one version, rebuilt from the journal when it is not in memory.
func (s *Store) At(ctx context.Context, id string, version int64) (*Snapshot, error) {
	return nil, errTodo
}

// Await waits until the head is at least version and gives the head, or ctx's error.
func (s *Store) Await(ctx context.Context, id string, version int64) (*Snapshot, error) {
	return nil, errTodo
}

// Versions are up to limit records, newest first, below the version before (0: from the head).
func (s *Store) Versions(ctx context.Context, id string, before int64, limit int) ([]VersionInfo, error) {
	return nil, errTodo
}

// Edits are what a patched version was made of; nil for other kinds.
func (s *Store) Edits(ctx context.Context, id string, version int64) ([]floor.Edit, error) {
	return nil, errTodo
}

// Event is a version that is new to a watch.
type Event struct {
	Info    VersionInfo
	Skipped int64 // versions between this event and the one before that were not given
}

// Watch gives versions as they appear.
type Watch struct{}

// Watch starts after a version; 0 means that the head is the first event.
func (s *Store) Watch(id string, after int64) (*Watch, error) { return nil, errTodo }

// Next waits for the next event, or gives ctx's error or ErrClosed.
func (w *Watch) Next(ctx context.Context) (Event, error) { return Event{}, errTodo }

// Close ends the watch.
func (w *Watch) Close() {}
