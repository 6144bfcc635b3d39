package boltjournal

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"runtime/debug"
	"strings"
	"sync/atomic"
	"time"

	"example.com/wideberth/mapstore/journal"
	bolt "go.etcd.io/bbolt"
	bolterrors "go.etcd.io/bbolt/errors"
)

// ErrLocked says that another process, or another Journal of this one, holds the
// file.
var ErrLocked = errors.New("journal: file is held by another process")

// ErrNotJournal says that the file is something else.
var ErrNotJournal = errors.New("journal: file is not a wideberth journal")

// ErrLostCommit says that one of the file's two leading pages is damaged, so that
// its newest commit may be missing; see Options.AcceptLostCommit. It comes with a
// *journal.CorruptError.
var ErrLostCommit = errors.New("journal: the newest commit may be missing")

// DefaultLockTimeout is how long Open waits for a file that another process holds.
const DefaultLockTimeout = time.Second

// fileMode is that of a new file: the owner's alone.
const fileMode = 0o600

// Options of Open. The zero value asks for the defaults.
type Options struct {
	// LockTimeout is how long to wait for a file that another process holds;
	// 0 means DefaultLockTimeout.
	LockTimeout time.Duration
	// AcceptLostCommit opens a file one of whose two leading pages is damaged, in the
	// state that the other page names. When it was the newer one, the newest commit
	// is missing: an acknowledged version, or a snapshot. Without it such a file is
	// ErrLostCommit. Journal.Accepted says whether it made a difference.
	AcceptLostCommit bool
}

// Journal is one open file. It implements journal.Journal.
type Journal struct {
	db    *bolt.DB
	path  string
	turn  chan struct{}         // holds one token; whoever has it may write
	block atomic.Pointer[error] // set after a failed sync: why no write is taken any more

	accepted error // the damage that AcceptLostCommit let pass

	refused map[string]error // floors that Open found damaged; not written after
}

var _ journal.Journal = (*Journal)(nil)

// Open opens the journal file at path, or makes one when there is none; its folder
// must exist. It checks what the file is and its floors' request ids, in time
// proportional to their number; records are checked as they are read. A floor whose
// request ids are damaged is refused from then on, the others are not.
//
// The error names path. It is ErrLocked, ErrNotJournal, ErrLostCommit, a
// *journal.FormatError for a file of a newer format, a *journal.CorruptError, or
// the system's.
func Open(path string, o Options) (*Journal, error) {
	if o.LockTimeout <= 0 {
		o.LockTimeout = DefaultLockTimeout
	}
	switch info, err := os.Stat(path); {
	case errors.Is(err, fs.ErrNotExist):
		if err := create(path); err != nil {
			return nil, fmt.Errorf("journal %q cannot be made: %w", path, err)
		}
	case err == nil && info.Mode().IsRegular() && info.Size() == 0:
		// bbolt would write an empty database of its own into it. create never leaves
		// such a file behind, so what was here is either lost or another's.
		return nil, fmt.Errorf("%w: %q: it is empty; take it away to begin a new journal", ErrNotJournal, path)
	}
	j := &Journal{path: path, turn: make(chan struct{}, 1), refused: map[string]error{}}
	if err := j.open(o); err != nil {
		return nil, err
	}
	if err := j.inspect(); err != nil {
		j.db.Close()
		return nil, err
	}
	j.turn <- struct{}{}
	return j, nil
}

// open hands the file to bbolt. bbolt reads pages while it opens, so a damaged file
// may make it panic; the file's lock is let go of then.
func (j *Journal) open(o Options) (err error) {
	var file *os.File
	defer func() {
		if errors.Is(err, journal.ErrCorrupt) && file != nil {
			unlock(file)
			file.Close()
		}
	}()
	defer j.guard(&err)()
	j.db, err = bolt.Open(j.path, fileMode, &bolt.Options{
		Timeout:      o.LockTimeout,
		FreelistType: bolt.FreelistMapType,
		NoStatistics: true,
		OpenFile: func(name string, flag int, mode os.FileMode) (*os.File, error) {
			f, err := os.OpenFile(name, flag&^os.O_CREATE, mode)
			file = f
			return f, err
		},
	})
	switch {
	case errors.Is(err, bolterrors.ErrTimeout):
		return fmt.Errorf("%w: %q, waited %v", ErrLocked, j.path, o.LockTimeout)
	case errors.Is(err, bolterrors.ErrInvalid), errors.Is(err, bolterrors.ErrChecksum),
		errors.Is(err, bolterrors.ErrVersionMismatch):
		return fmt.Errorf("%w: %q: both leading pages are unreadable (%v)", ErrNotJournal, j.path, err)
	case err != nil && strings.HasPrefix(err.Error(), "file size too small"):
		return fmt.Errorf("%w: %q: %v", ErrNotJournal, j.path, err)
	case err != nil:
		return fmt.Errorf("journal %q cannot be opened: %w", j.path, err)
	}
	switch err := checkLead(file, j.path, j.db.Info().PageSize); {
	case err == nil:
	case o.AcceptLostCommit:
		j.accepted = err
	default:
		j.db.Close()
		file = nil
		return err
	}
	return nil
}

// create makes an empty journal under another name and then gives it its own, so
// that a crash never leaves half a file at path. When somebody else makes one
// meanwhile, theirs stands.
func create(path string) error {
	dir := filepath.Dir(path)
	f, err := os.CreateTemp(dir, filepath.Base(path)+".new-*")
	if err != nil {
		return err
	}
	name := f.Name()
	defer os.Remove(name)
	if err := f.Close(); err != nil {
		return err
	}
	db, err := bolt.Open(name, fileMode, &bolt.Options{FreelistType: bolt.FreelistMapType})
	if err != nil {
		return err
	}
	err = db.Update(func(tx *bolt.Tx) error {
		if _, err := tx.CreateBucket(floorsBucket); err != nil {
			return err
		}
		b, err := tx.CreateBucket(fileBucket)
		if err != nil {
			return err
		}
		return errors.Join(b.Put(formatKey, fileMark(fileFormat)), b.Put(floorSumKey, withSum(keySum{}.append(nil))))
	})
	if err = errors.Join(err, db.Close()); err != nil {
		return err
	}
	if err := os.Chmod(name, fileMode); err != nil {
		return err
	}
	return publish(name, path)
}

// publish gives the file name the further name path, unless that is taken already,
// and syncs the folder.
func publish(name, path string) error {
	if err := os.Link(name, path); err != nil && !errors.Is(err, fs.ErrExist) {
		// A file system without hard links.
		if err := os.Rename(name, path); err != nil {
			return err
		}
	}
	dir, err := os.Open(filepath.Dir(path))
	if err != nil {
		return err
	}
	defer dir.Close()
	return dir.Sync()
}

// Accepted is the damage that Options.AcceptLostCommit let pass when the file was
// opened; nil when there was none.
func (j *Journal) Accepted() error { return j.accepted }

// Path is the file's.
func (j *Journal) Path() string { return j.path }

// Close waits for calls that are under way and lets go of the file.
func (j *Journal) Close() error { return j.db.Close() }

// guard makes page faults of the mapped file panics, and panics errors: bbolt
// panics on pages that make no sense. The result is to be deferred.
func (j *Journal) guard(err *error) func() {
	old := debug.SetPanicOnFault(true)
	return func() {
		debug.SetPanicOnFault(old)
		if p := recover(); p != nil {
			*err = &journal.CorruptError{File: j.path, What: fmt.Sprintf("a page of the file cannot be read: %v", p)}
		}
	}
}

// view runs fn on a consistent state of the file.
func (j *Journal) view(ctx context.Context, fn func(*bolt.Tx) error) (err error) {
	if err := ctx.Err(); err != nil {
		return err
	}
	defer j.guard(&err)()
	return j.named(j.db.View(fn))
}

// update runs fn and commits what it wrote, one caller at a time.
func (j *Journal) update(ctx context.Context, fn func(*bolt.Tx) error) error {
	if err := ctx.Err(); err != nil {
		return err
	}
	select {
	case <-ctx.Done():
		return ctx.Err()
	case <-j.turn:
	}
	defer func() { j.turn <- struct{}{} }()
	if why := j.block.Load(); why != nil {
		return fmt.Errorf("journal %q takes no more writes until it is opened again: %w", j.path, *why)
	}
	var fnErr error
	err := func() (err error) {
		defer j.guard(&err)()
		return j.db.Update(func(tx *bolt.Tx) error {
			fnErr = fn(tx)
			return fnErr
		})
	}()
	if err == nil || (fnErr != nil && err == fnErr) {
		return j.named(err)
	}
	if !resumable(err) {
		j.block.Store(&err)
	}
	return fmt.Errorf("journal %q cannot be written: %w", j.path, j.named(err))
}

// resumable tells a commit that failed before anything was at stake from one of
// which nobody knows what reached the disk. A refused write or growth leaves the
// old state in force and its pages untouched; everything else, above all a failed
// sync, stops all writing.
func resumable(err error) bool {
	var p *fs.PathError
	return errors.As(err, &p) && p.Op == "write" ||
		errors.Is(err, bolterrors.ErrDatabaseNotOpen) ||
		errors.Is(err, bolterrors.ErrMaxSizeReached) ||
		strings.HasPrefix(err.Error(), "file resize error") // bbolt wraps no cause here
}

// named puts this package's names in place of bbolt's, and the file's into damage.
func (j *Journal) named(err error) error {
	if errors.Is(err, bolterrors.ErrDatabaseNotOpen) {
		return fmt.Errorf("%w: %q", journal.ErrClosed, j.path)
	}
	var c *journal.CorruptError
	if errors.As(err, &c) && c.File == "" {
		c.File = j.path
	}
	var f *journal.FormatError
	if errors.As(err, &f) && f.File == "" {
		f.File = j.path
	}
	return err
}

// BackupTo writes a consistent copy of the whole file to a new file at path, while
// reads and appends go on, and syncs it. It never overwrites. Appends that make the
// file outgrow its mapping wait until the copy is done.
func (j *Journal) BackupTo(ctx context.Context, path string) (err error) {
	f, err := os.OpenFile(path, os.O_WRONLY|os.O_CREATE|os.O_EXCL, fileMode)
	if err != nil {
		return fmt.Errorf("backup of journal %q: %w", j.path, err)
	}
	err = j.view(ctx, func(tx *bolt.Tx) error {
		_, err := tx.WriteTo(contextWriter{ctx, f})
		return err
	})
	if err = errors.Join(err, f.Sync(), f.Close()); err != nil {
		os.Remove(path)
		return fmt.Errorf("backup of journal %q to %q: %w", j.path, path, err)
	}
	return nil
}

// contextWriter stops when its context ends.
type contextWriter struct {
	ctx context.Context
	f   *os.File
}

func (w contextWriter) Write(b []byte) (int, error) {
	if err := w.ctx.Err(); err != nil {
		return 0, err
	}
	return w.f.Write(b)
}
