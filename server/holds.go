package server

import (
	"sync"
	"time"

	"example.com/wideberth/mapstore"
)

// maxHolds bounds how many versions are held at once, all floors together. Should
// it be reached, the one that was due first is let go first.
const maxHolds = 10_000

type holdKey struct {
	floor   string
	version int64
}

type hold struct {
	snap  *mapstore.Snapshot
	until time.Time
}

// holds keeps the versions that routes were planned on readable, whatever the
// store lets go of. A held version costs little: it shares what it has in common
// with its neighbours.
type holds struct {
	now func() time.Time
	mu  sync.Mutex
	by  map[holdKey]hold
	due time.Time // when the first of them may be due
}

func newHolds(now func() time.Time) *holds { return &holds{now: now, by: map[holdKey]hold{}} }

// keep holds a version for d from now on.
func (h *holds) keep(snap *mapstore.Snapshot, d time.Duration) {
	now := h.now()
	h.mu.Lock()
	defer h.mu.Unlock()
	h.by[holdKey{snap.Info.Floor, snap.Info.Version}] = hold{snap, now.Add(d)}
	if now.Before(h.due) && len(h.by) <= maxHolds {
		return
	}
	first, next := holdKey{}, time.Time{}
	for k, v := range h.by {
		if !now.Before(v.until) {
			delete(h.by, k)
		} else if next.IsZero() || v.until.Before(next) {
			first, next = k, v.until
		}
	}
	if len(h.by) > maxHolds {
		delete(h.by, first)
	}
	h.due = next
}

// get is a held version, nil when it is not held.
func (h *holds) get(floor string, version int64) *mapstore.Snapshot {
	h.mu.Lock()
	defer h.mu.Unlock()
	return h.by[holdKey{floor, version}].snap
}
