package mapstore

import (
	"context"
	"fmt"
	"sync"
)

// Await waits until the head is at least version and gives the head, or ctx's
// error, or ErrClosed.
func (s *Store) Await(ctx context.Context, id string, version int64) (*Snapshot, error) {
	f, err := s.lookup(id)
	if err != nil {
		return nil, err
	}
	for {
		head, changed := f.headAndChange()
		if head.Info.Version >= version {
			return head, nil
		}
		select {
		case <-changed:
		case <-ctx.Done():
			return nil, ctx.Err()
		case <-s.ctx.Done():
			return nil, ErrClosed
		}
	}
}

// Event is a version that is new to a watch.
type Event struct {
	Info    VersionInfo
	Skipped int64 // versions between this event and the one before that were not given
}

// Watch gives versions as they appear, in order. It holds no goroutine and no
// queue of its own, only the version that it gave last: one that falls more than
// WatchBacklog versions behind is given the head next, with the count of those it
// was not given.
type Watch struct {
	store *Store
	floor *floorState

	once   sync.Once
	closed chan struct{}

	mu   sync.Mutex
	last int64 // the version given last
}

// Watch starts after a version; 0 means that the head is the first event.
// ErrFutureVersion when the version is above the head.
func (s *Store) Watch(id string, after int64) (*Watch, error) {
	f, err := s.lookup(id)
	if err != nil {
		return nil, err
	}
	head := f.head().Info.Version
	switch {
	case after < 0:
		return nil, wrong("after_version", "%d, wanted 0 (for the head) or more", after)
	case after > head:
		return nil, fmt.Errorf("%w: watching floor %q after version %d, the head is %d", ErrFutureVersion, id, after, head)
	case after == 0:
		after = head - 1
	}
	return &Watch{store: s, floor: f, last: after, closed: make(chan struct{})}, nil
}

// Next waits for the next event, or gives ctx's error or, after Close of the watch
// or of the store, ErrClosed. A version that is there already is given whatever the
// state of ctx.
func (w *Watch) Next(ctx context.Context) (Event, error) {
	for {
		select {
		case <-w.closed:
			return Event{}, ErrClosed
		case <-w.store.ctx.Done():
			return Event{}, ErrClosed
		default:
		}
		head, changed := w.floor.headAndChange()
		if e, ok := w.take(head); ok {
			return e, nil
		}
		select {
		case <-changed:
		case <-ctx.Done():
			return Event{}, ctx.Err()
		case <-w.closed:
		case <-w.store.ctx.Done():
		}
	}
}

// take is the event that follows the last one; ok is false when there is none yet.
func (w *Watch) take(head *Snapshot) (e Event, ok bool) {
	w.mu.Lock()
	defer w.mu.Unlock()
	if head.Info.Version <= w.last {
		return Event{}, false
	}
	next := head
	if head.Info.Version-w.last <= WatchBacklog {
		if snap := w.floor.get(w.last + 1); snap != nil {
			next = snap
		}
	}
	e = Event{Info: next.Info, Skipped: next.Info.Version - w.last - 1}
	w.last = next.Info.Version
	return e, true
}

// Close ends the watch and every Next that waits on it.
func (w *Watch) Close() { w.once.Do(func() { close(w.closed) }) }
