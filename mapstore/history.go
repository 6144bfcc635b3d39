package mapstore

import (
	"context"
	"errors"
	"fmt"
	"slices"
	"sort"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/journal"
)

// rebuiltVersions is how many versions that were rebuilt a floor keeps, the most
// recently used ones.
const rebuiltVersions = 8

// build is an old version being rebuilt.
type build struct {
	done chan struct{} // closed when snap and err are set
	snap *Snapshot
	err  error
}

// At is one version, rebuilt from the journal when it is not in memory: from the
// nearest journal snapshot below it, in time proportional to the distance. Calls for
// the same version at the same time share the work. ErrFutureVersion above the head,
// ErrGone below 1; journal.ErrCorrupt when the way to it is damaged.
func (s *Store) At(ctx context.Context, id string, version int64) (*Snapshot, error) {
	f, err := s.lookup(id)
	if err != nil {
		return nil, err
	}
	return s.at(ctx, f, version)
}

func (s *Store) at(ctx context.Context, f *floorState, version int64) (*Snapshot, error) {
	if err := f.inRange(version); err != nil {
		return nil, err
	}
	if snap := f.get(version); snap != nil {
		return snap, nil
	}
	for {
		f.mu.Lock()
		if snap := f.recallLocked(version); snap != nil {
			f.mu.Unlock()
			return snap, nil
		}
		b := f.building[version]
		mine := b == nil
		if mine {
			b = &build{done: make(chan struct{})}
			f.building[version] = b
		}
		f.mu.Unlock()
		if mine {
			b.snap, b.err = s.rebuild(ctx, f, version)
			f.mu.Lock()
			delete(f.building, version)
			if b.err == nil {
				f.rememberLocked(b.snap)
			}
			f.mu.Unlock()
			close(b.done)
			return b.snap, b.err
		}
		select {
		case <-b.done:
		case <-ctx.Done():
			return nil, ctx.Err()
		}
		// When whoever built it was called off, somebody else has to.
		if !errors.Is(b.err, context.Canceled) && !errors.Is(b.err, context.DeadlineExceeded) {
			return b.snap, b.err
		}
	}
}

func (f *floorState) inRange(version int64) error {
	if version < 1 {
		return fmt.Errorf("%w: version %d of floor %q, the oldest is 1", ErrGone, version, f.id)
	}
	if head := f.head().Info.Version; version > head {
		return fmt.Errorf("%w: version %d of floor %q, the head is %d", ErrFutureVersion, version, f.id, head)
	}
	return nil
}

// recallLocked is a version that was rebuilt before, else nil.
func (f *floorState) recallLocked(version int64) *Snapshot {
	for _, snap := range f.rebuilt {
		if snap.Info.Version == version {
			f.rememberLocked(snap)
			return snap
		}
	}
	return nil
}

// rememberLocked keeps a rebuilt version as the most recently used one.
func (f *floorState) rememberLocked(snap *Snapshot) {
	f.rebuilt = slices.DeleteFunc(f.rebuilt, func(o *Snapshot) bool { return o.Info.Version == snap.Info.Version })
	f.rebuilt = slices.Insert(f.rebuilt, 0, snap)
	if len(f.rebuilt) > rebuiltVersions {
		f.rebuilt = slices.Delete(f.rebuilt, rebuiltVersions, len(f.rebuilt))
	}
}

// closest is the newest content in memory at or below a version, 0 and nil when
// there is none.
func (f *floorState) closest(version int64) (at int64, m *floor.Map) {
	f.mu.RLock()
	defer f.mu.RUnlock()
	if snap := f.getLocked(version); snap != nil {
		return version, snap.Map
	}
	for _, snap := range f.rebuilt {
		if v := snap.Info.Version; v <= version && v > at {
			at, m = v, snap.Map
		}
	}
	return at, m
}

// rebuild makes a version from the journal.
func (s *Store) rebuild(ctx context.Context, f *floorState, version int64) (*Snapshot, error) {
	r, err := s.record(ctx, f.id, version)
	if err != nil {
		return nil, err
	}
	e, err := decodeEntry(&r)
	if err != nil {
		return nil, err
	}
	m, err := s.content(ctx, f, version)
	if err != nil {
		return nil, err
	}
	return &Snapshot{Info: infoOf(&r, &e), Map: m}, sameDigest(&r, m)
}

func (s *Store) record(ctx context.Context, id string, version int64) (journal.Record, error) {
	recs, err := s.journal.Read(ctx, id, version, 1)
	if err != nil {
		return journal.Record{}, err
	}
	if len(recs) == 0 {
		return journal.Record{}, &journal.CorruptError{Floor: id, Version: version, What: "the record is missing"}
	}
	return recs[0], nil
}

// base is a content to start from, and the restores among the records after it.
type base struct {
	low, top int64 // content of low; records low+1 to top were looked through
	content  *floor.Map
	restores []restore
}

// restore is a record that brought a version back.
type restore struct{ at, version int64 }

// base finds the nearest content at or below a version: in memory, in the journal's
// snapshots, or the created version's.
func (s *Store) base(ctx context.Context, f *floorState, version int64) (base, error) {
	b := base{top: version}
	b.low, b.content = f.closest(version)
	if b.low == version {
		return b, nil
	}
	at, content, _, err := s.nearest(ctx, f.id, version)
	if err != nil {
		return b, err
	}
	if at > b.low {
		b.low, b.content = at, content
	}
	if b.low == 0 {
		r, err := s.record(ctx, f.id, 1)
		if err != nil {
			return b, err
		}
		e, err := decodeEntry(&r)
		if err != nil {
			return b, err
		}
		b.low = 1
		if b.content, err = s.carryOut(ctx, f, &r, &e, nil); err != nil {
			return b, err
		}
	}
	err = journal.Walk(ctx, s.journal, f.id, b.low+1, version, func(r *journal.Record) error {
		if r.Kind != journal.Restored {
			return nil
		}
		e, err := decodeEntry(r)
		b.restores = append(b.restores, restore{r.Version, e.restored})
		return err
	})
	return b, err
}

// lastRestore is the last one at or below a version.
func (b *base) lastRestore(version int64) (r restore, ok bool) {
	i := sort.Search(len(b.restores), func(i int) bool { return b.restores[i].at > version })
	if i == 0 {
		return restore{}, false
	}
	return b.restores[i-1], true
}

// content is a version's, from memory or the journal. A restored version's content
// is that of the version it brought back, so the records before a restore need not
// be carried out: content looks for the last restore on the way and goes on from
// what it brought back, as often as needed, and then carries out what is left, the
// oldest stretch first. Each step leads to a lower version, so it ends; the records
// of a stretch are read twice at most.
func (s *Store) content(ctx context.Context, f *floorState, version int64) (*floor.Map, error) {
	type stretch struct{ after, to int64 } // records after+1 to to are patches
	var todo []stretch
	var b base
	for {
		if version < b.low || b.content == nil {
			var err error
			if b, err = s.base(ctx, f, version); err != nil {
				return nil, err
			}
		}
		r, ok := b.lastRestore(version)
		if !ok {
			todo = append(todo, stretch{b.low, version})
			break
		}
		todo = append(todo, stretch{r.at, version})
		version = r.version
	}
	m := b.content
	for _, part := range slices.Backward(todo) {
		if part.after >= part.to {
			continue
		}
		if err := journal.Walk(ctx, s.journal, f.id, part.after+1, part.to, func(r *journal.Record) error {
			e, err := decodeEntry(r)
			if err != nil {
				return err
			}
			m, err = replay(r, &e, m)
			return err
		}); err != nil {
			return nil, err
		}
	}
	return m, nil
}

// Versions are up to limit records, newest first, below the version before (0: from
// the head), at most MaxVersionsPage at a time. Those no longer in memory are read
// from the journal.
func (s *Store) Versions(ctx context.Context, id string, before int64, limit int) ([]VersionInfo, error) {
	f, err := s.lookup(id)
	if err != nil {
		return nil, err
	}
	if before < 0 {
		return nil, wrong("before", "%d, wanted 0 (for the head) or more", before)
	}
	if limit < 1 {
		return nil, wrong("limit", "%d, wanted 1 or more", limit)
	}
	top := f.head().Info.Version
	if before > 0 {
		top = min(top, before-1)
	}
	bottom := max(1, top-int64(min(limit, MaxVersionsPage))+1)
	var list []VersionInfo
	for ; top >= bottom; top-- {
		snap := f.get(top)
		if snap == nil {
			break
		}
		list = append(list, snap.Info)
	}
	if top < bottom {
		return list, nil
	}
	var older []VersionInfo
	if err := journal.Walk(ctx, s.journal, id, bottom, top, func(r *journal.Record) error {
		e, err := decodeEntry(r)
		older = append(older, infoOf(r, &e))
		return err
	}); err != nil {
		return nil, err
	}
	slices.Reverse(older)
	return append(list, older...), nil
}

// Edits are what a patched version was made of; nil for other kinds. They are read
// from the journal; the features they hold must not be written to.
func (s *Store) Edits(ctx context.Context, id string, version int64) ([]floor.Edit, error) {
	f, err := s.lookup(id)
	if err != nil {
		return nil, err
	}
	if err := f.inRange(version); err != nil {
		return nil, err
	}
	r, err := s.record(ctx, id, version)
	if err != nil || r.Kind != journal.Patched {
		return nil, err
	}
	e, err := decodeEntry(&r)
	if err != nil {
		return nil, err
	}
	edits, err := floor.DecodeEdits(e.body)
	if err != nil {
		return nil, &journal.CorruptError{Floor: id, Version: version, What: err.Error()}
	}
	return edits, nil
}
