package mapstore

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"slices"
	"strings"
	"sync"
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
	Digest    [32]byte // of the content: equal content, equal digest
	Kind      Kind
	Base      int64 // the base its author named; below Version-1 when it was rebased
	Author    string
	Reason    string
	RequestID string
	Time      time.Time // UTC, whole microseconds
	EditCount int
	Touched   geom.Rect // µm; holds all that the version touched, empty when nothing was
	Restored  int64     // the version brought back, 0 for other kinds
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
	Oldest   int64     // the oldest version that can be read; all records are kept, so 1
	Created  time.Time // UTC; zero when version 1's record cannot be read any more
}

// Patch is what Push is given.
type Patch struct {
	Base      int64  // the version its author looked at
	Author    string // 1 to MaxAuthorRunes characters
	Reason    string // 1 to MaxReasonRunes characters
	RequestID string // may be empty: then a repetition is a new patch
	Edits     []floor.Edit
	// ValidateOnly does everything but the append: the answer is what the version
	// would have been, the error the one that the real call would give.
	ValidateOnly bool
	// AllowRebase accepts a base below the head when no feature that the patch names
	// and no cell that it may paint differs between the base and the head.
	AllowRebase bool
}

// Restore is what Store.Restore is given.
type Restore struct {
	Version   int64 // to bring back
	Base      int64 // the head its author looked at; a stale one is refused
	Author    string
	Reason    string
	RequestID string
}

// The failures a caller tells apart, with errors.Is and errors.As. Beside them
// there are *ArgumentError, *StaleBaseError, *floor.EditError, floor.SettingsError,
// the context's errors, and journal.ErrCorrupt for a floor that is refused or a
// version that cannot be rebuilt.
var (
	ErrNoFloor       = errors.New("no such floor")
	ErrFloorExists   = errors.New("floor exists with other settings")
	ErrFloorLimit    = errors.New("no more floors can be made")
	ErrFutureVersion = errors.New("version is above the head")
	ErrGone          = errors.New("version is not held any more")
	ErrRequestReused = errors.New("request id was used for another request")
	ErrJournal       = errors.New("journal cannot be written")
	ErrClosed        = errors.New("store is closed")
)

// StaleBaseError says that a patch's base is not the head.
type StaleBaseError struct {
	Base int64
	Head VersionInfo
	// Conflicts are the features and cells that the patch touches and that differ
	// between the base and the head, in words, at most MaxConflicts. Empty means that
	// the patch would be accepted with AllowRebase.
	Conflicts []string
}

// Error names base, head and conflicts.
func (e *StaleBaseError) Error() string {
	s := fmt.Sprintf("base version %d is stale: the head is version %d", e.Base, e.Head.Version)
	if len(e.Conflicts) == 0 {
		return s + "; nothing that the patch touches differs since, so it would be accepted with rebasing allowed"
	}
	return s + "; " + strings.Join(e.Conflicts, "; ")
}

// Options set a store's bounds. The zero value asks for the defaults.
type Options struct {
	KeepVersions  int // contents held in memory per floor; 0: 1,000
	SnapshotEvery int // versions between journal snapshots; 0: 200
	// Now is read once for each version and written into its record; nil: time.Now.
	Now func() time.Time
	// Report is told of trouble that fails no call: a journal snapshot that could not
	// be written and will be tried again. It may be called from another goroutine.
	// nil: nobody is told.
	Report func(error)
}

// Store keeps every floor's versions.
type Store struct {
	journal journal.Journal
	keep    int
	every   int64
	now     func() time.Time
	report  func(error)

	ctx    context.Context // ends at Close
	end    context.CancelFunc
	create chan struct{} // a turn: holds one token, taken to add a floor

	mu      sync.RWMutex
	floors  map[string]*floorState
	refused map[string]error // floors that are in the journal but damaged
	closed  bool
	work    sync.WaitGroup // snapshots being written
}

// Close stops watches and lets go of the contents; calls after it fail with
// ErrClosed, calls under way end as they would have. It waits for journal snapshots
// that are being written. It does not close the journal.
func (s *Store) Close() error {
	s.mu.Lock()
	s.closed = true
	s.floors = nil
	s.mu.Unlock()
	s.end()
	s.work.Wait()
	return nil
}

// lookup is a floor's state.
func (s *Store) lookup(id string) (*floorState, error) {
	s.mu.RLock()
	defer s.mu.RUnlock()
	if s.closed {
		return nil, ErrClosed
	}
	if f := s.floors[id]; f != nil {
		return f, nil
	}
	if err := s.refused[id]; err != nil {
		return nil, fmt.Errorf("floor %q is refused: %w", id, err)
	}
	return nil, fmt.Errorf("%w: %q", ErrNoFloor, cut(id))
}

// Floor is one floor.
func (s *Store) Floor(id string) (FloorInfo, error) {
	f, err := s.lookup(id)
	if err != nil {
		return FloorInfo{}, err
	}
	return f.info(), nil
}

// Floors are all floors, by id, without those that are refused.
func (s *Store) Floors() []FloorInfo {
	s.mu.RLock()
	defer s.mu.RUnlock()
	list := make([]FloorInfo, 0, len(s.floors))
	for _, f := range s.floors {
		list = append(list, f.info())
	}
	slices.SortFunc(list, func(a, b FloorInfo) int { return cmp.Compare(a.ID, b.ID) })
	return list
}

// Head is the newest version.
func (s *Store) Head(id string) (*Snapshot, error) {
	f, err := s.lookup(id)
	if err != nil {
		return nil, err
	}
	return f.head(), nil
}

// background runs work that Close waits for; not at all once the store is closed.
func (s *Store) background(work func()) bool {
	s.mu.RLock()
	defer s.mu.RUnlock()
	if s.closed {
		return false
	}
	s.work.Go(work)
	return true
}

// floorState is one floor in memory.
type floorState struct {
	id      string
	created time.Time
	write   chan struct{} // a turn: holds one token, taken to make a version
	hash    [32]byte      // of the head's record; belongs to whoever has the turn

	mu       sync.RWMutex
	held     []*Snapshot // without a gap, rising, at most Store.keep; the last is the head
	changed  chan struct{}
	snapped  int64 // version of the newest journal snapshot
	snapping bool  // one is being written
	rebuilt  []*Snapshot
	building map[int64]*build
}

func newTurn() chan struct{} {
	c := make(chan struct{}, 1)
	c <- struct{}{}
	return c
}

// take waits for a turn; the result gives it back.
func take(ctx context.Context, turn chan struct{}) (done func(), err error) {
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	select {
	case <-turn:
		return func() { turn <- struct{}{} }, nil
	case <-ctx.Done():
		return nil, ctx.Err()
	}
}

func (f *floorState) info() FloorInfo {
	h := f.head()
	return FloorInfo{ID: f.id, Settings: h.Map.Settings(), Head: h.Info, Oldest: 1, Created: f.created}
}

func (f *floorState) head() *Snapshot {
	f.mu.RLock()
	defer f.mu.RUnlock()
	return f.held[len(f.held)-1]
}

// headAndChange is the head and what is closed when there is a newer one.
func (f *floorState) headAndChange() (*Snapshot, <-chan struct{}) {
	f.mu.RLock()
	defer f.mu.RUnlock()
	return f.held[len(f.held)-1], f.changed
}

// get is a version when it is held in memory, else nil.
func (f *floorState) get(version int64) *Snapshot {
	f.mu.RLock()
	defer f.mu.RUnlock()
	return f.getLocked(version)
}

func (f *floorState) getLocked(version int64) *Snapshot {
	if len(f.held) == 0 {
		return nil
	}
	if i := version - f.held[0].Info.Version; i >= 0 && i < int64(len(f.held)) {
		return f.held[i]
	}
	return nil
}

// publish makes snap the head. The caller has the turn.
func (f *floorState) publish(snap *Snapshot, hash [32]byte, keep int) {
	f.hash = hash
	f.mu.Lock()
	defer f.mu.Unlock()
	f.held = append(f.held, snap)
	for len(f.held) > keep {
		f.held[0] = nil
		f.held = f.held[1:]
	}
	close(f.changed)
	f.changed = make(chan struct{})
}
