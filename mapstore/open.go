package mapstore

import (
	"context"
	"errors"
	"fmt"
	"time"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/journal"
)

// Recovery says what Open did.
type Recovery struct {
	Floors   int      // floors that are ready
	Versions int      // versions that they have, all together
	Replayed int      // records that were carried out
	Refused  []string // ids of damaged floors, which are not served
	Notes    []string // what was found wrong and what was done, in words
}

// Open reads the journal and makes every floor's head ready: from the newest
// journal snapshot that is good, carrying out the records after it and comparing
// each digest.
//
// A floor whose records do not check out is refused, not mended: its versions were
// acknowledged, so serving it without them would be serving another map. It is in
// Refused, with a note, and every call for it gives the reason (journal.ErrCorrupt);
// the other floors are served. A damaged journal snapshot is no loss: an older one is
// used, with a note. Open fails for a journal of a newer format (journal.ErrFormat),
// one that cannot be read, and ctx's end.
func Open(ctx context.Context, j journal.Journal, o Options) (*Store, Recovery, error) {
	switch {
	case o.KeepVersions < 0:
		return nil, Recovery{}, wrong("KeepVersions", "%d, wanted 0 (for %d) or more", o.KeepVersions, DefaultKeepVersions)
	case o.SnapshotEvery < 0:
		return nil, Recovery{}, wrong("SnapshotEvery", "%d, wanted 0 (for %d) or more", o.SnapshotEvery, DefaultSnapshotEvery)
	}
	s := &Store{
		journal: j, keep: o.KeepVersions, every: int64(o.SnapshotEvery), now: o.Now, report: o.Report,
		create: newTurn(), floors: map[string]*floorState{}, refused: map[string]error{},
	}
	if s.keep == 0 {
		s.keep = DefaultKeepVersions
	}
	if s.every == 0 {
		s.every = DefaultSnapshotEvery
	}
	if s.now == nil {
		s.now = time.Now
	}
	if s.report == nil {
		s.report = func(error) {}
	}
	ids, err := j.Floors(ctx)
	if err != nil {
		return nil, Recovery{}, err
	}
	s.ctx, s.end = context.WithCancel(context.WithoutCancel(ctx))
	var rec Recovery
	for _, id := range ids {
		if err := s.add(ctx, id, &rec); err != nil {
			s.Close()
			return nil, rec, fmt.Errorf("floor %q: %w", id, err)
		}
	}
	return s, rec, nil
}

// add loads a floor from the journal, or refuses it. The caller has the turn to
// create, or is alone.
func (s *Store) add(ctx context.Context, id string, rec *Recovery) error {
	f, replayed, notes, err := s.load(ctx, id)
	rec.Notes = append(rec.Notes, notes...)
	if errors.Is(err, journal.ErrCorrupt) {
		good, _ := journal.Verify(ctx, s.journal, id)
		if err := ctx.Err(); err != nil {
			return err
		}
		rec.Refused = append(rec.Refused, id)
		rec.Notes = append(rec.Notes, refusal(id, good, err))
		s.mu.Lock()
		s.refused[id] = err
		s.mu.Unlock()
		return nil
	}
	if err != nil {
		return err
	}
	rec.Floors++
	rec.Versions += int(f.head().Info.Version)
	rec.Replayed += replayed
	s.mu.Lock()
	if s.closed {
		s.mu.Unlock()
		return ErrClosed
	}
	s.floors[id] = f
	s.mu.Unlock()
	s.snapshotIfDue(f)
	return nil
}

func refusal(id string, good int64, err error) string {
	read := "none of its records can be read"
	if good > 0 {
		read = fmt.Sprintf("its records 1 to %d read well", good)
	}
	return fmt.Sprintf("floor %q is refused: %v; %s. Nothing was changed or left out: what is damaged was acknowledged, "+
		"so the floor is not served without it. Restore the journal from a backup", id, err, read)
}

// load makes a floor's newest versions ready.
func (s *Store) load(ctx context.Context, id string) (f *floorState, replayed int, notes []string, err error) {
	head, err := s.journal.Head(ctx, id)
	if err != nil {
		return nil, 0, nil, err
	}
	if head == 0 {
		return nil, 0, nil, &journal.CorruptError{Floor: id, What: "the floor has no records"}
	}
	f = &floorState{id: id, write: newTurn(), changed: make(chan struct{}), building: map[int64]*build{}}
	err = journal.Walk(ctx, s.journal, id, 1, 1, func(r *journal.Record) error {
		f.created = time.UnixMicro(r.TimeUs).UTC()
		return nil
	})
	if err != nil {
		if !errors.Is(err, journal.ErrCorrupt) {
			return nil, 0, nil, err
		}
		notes = append(notes, fmt.Sprintf("floor %q: when it was created is not known any more: %v", id, err))
	}
	start, content, more, err := s.nearest(ctx, id, head)
	notes = append(notes, more...)
	if err != nil {
		return nil, 0, notes, err
	}
	f.snapped = start
	if len(more) > 0 { // a damaged one: have a good one written soon
		f.snapped = head - s.every
	}
	err = journal.Walk(ctx, s.journal, id, max(start, 1), head, func(r *journal.Record) error {
		e, err := decodeEntry(r)
		if err != nil {
			return err
		}
		switch {
		case r.Version == start:
			err = sameDigest(r, content)
		default:
			replayed++
			content, err = s.carryOut(ctx, f, r, &e, content)
		}
		if err != nil {
			return err
		}
		f.publish(&Snapshot{Info: infoOf(r, &e), Map: content}, r.Hash, s.keep)
		return nil
	})
	if err == nil && len(f.held) == 0 {
		err = &journal.CorruptError{Floor: id, Version: head, What: "the newest record is not given"}
	}
	return f, replayed, notes, err
}

// nearest is the content of the newest journal snapshot at or below a version that
// is good, and its version; 0 and nil when there is none. One that is damaged is
// passed over with a note.
func (s *Store) nearest(ctx context.Context, id string, version int64) (at int64, m *floor.Map, notes []string, err error) {
	for version > 0 {
		snap, ok, err := s.journal.Latest(ctx, id, version)
		if c, damaged := errors.AsType[*journal.CorruptError](err); damaged && c.Version > 0 {
			notes = append(notes, fmt.Sprintf("floor %q: a journal snapshot was passed over, an older one is used: %v", id, err))
			version = min(version, c.Version) - 1
			continue
		}
		if err != nil || !ok {
			return 0, nil, notes, err
		}
		m, err := floor.Decode(snap.Content)
		if err == nil && m.Digest() == snap.Digest {
			return snap.Version, m, notes, nil
		}
		if err == nil {
			err = errors.New("its content does not have its digest")
		}
		notes = append(notes, fmt.Sprintf("floor %q: the journal snapshot of version %d was passed over, an older one is used: %v", id, snap.Version, err))
		version = snap.Version - 1
	}
	return 0, nil, notes, nil
}

// carryOut is replay for records of every kind.
func (s *Store) carryOut(ctx context.Context, f *floorState, r *journal.Record, e *entry, before *floor.Map) (*floor.Map, error) {
	if r.Kind != journal.Restored {
		if before == nil && r.Kind != journal.Created {
			return nil, &journal.CorruptError{Floor: r.Floor, Version: r.Version, What: "the first record does not create the floor"}
		}
		return replay(r, e, before)
	}
	old, err := s.content(ctx, f, e.restored)
	if err != nil {
		return nil, err
	}
	return old, sameDigest(r, old)
}

// Sync reads what other writers of the journal have added: versions, and floors.
// A store that is the journal's only writer never needs it.
func (s *Store) Sync(ctx context.Context) error {
	ids, err := s.journal.Floors(ctx)
	if err != nil {
		return err
	}
	for _, id := range ids {
		f, err := s.lookup(id)
		switch {
		case errors.Is(err, ErrNoFloor):
			_, err = s.adopt(ctx, id)
		case err == nil:
			err = s.syncFloor(ctx, f)
		case errors.Is(err, journal.ErrCorrupt):
			err = nil // known, and said at every call
		}
		if err != nil {
			return err
		}
	}
	return nil
}

// adopt loads a floor that another writer has created.
func (s *Store) adopt(ctx context.Context, id string) (*floorState, error) {
	done, err := take(ctx, s.create)
	if err != nil {
		return nil, err
	}
	defer done()
	if f, err := s.lookup(id); !errors.Is(err, ErrNoFloor) {
		return f, err
	}
	if err := s.add(ctx, id, new(Recovery)); err != nil {
		return nil, err
	}
	return s.lookup(id)
}

func (s *Store) syncFloor(ctx context.Context, f *floorState) error {
	if head, err := s.journal.Head(ctx, f.id); err != nil || head <= f.head().Info.Version {
		return err
	}
	done, err := take(ctx, f.write)
	if err != nil {
		return err
	}
	defer done()
	return s.catchUp(ctx, f)
}

// catchUp reads the records after the head. The caller has the turn.
func (s *Store) catchUp(ctx context.Context, f *floorState) error {
	head := f.head()
	chain := journal.Chain{Floor: f.id, Version: head.Info.Version, Hash: f.hash}
	content := head.Map
	err := journal.Walk(ctx, s.journal, f.id, chain.Version+1, 0, func(r *journal.Record) error {
		if err := chain.Next(r); err != nil {
			return err
		}
		e, err := decodeEntry(r)
		if err != nil {
			return err
		}
		if content, err = s.carryOut(ctx, f, r, &e, content); err != nil {
			return err
		}
		f.publish(&Snapshot{Info: infoOf(r, &e), Map: content}, r.Hash, s.keep)
		return nil
	})
	s.snapshotIfDue(f)
	return err
}

// snapshotIfDue has the head's content written to the journal when enough versions
// have come since the last time. It does not wait for it.
func (s *Store) snapshotIfDue(f *floorState) {
	f.mu.Lock()
	head := f.held[len(f.held)-1]
	due := !f.snapping && head.Info.Version-f.snapped >= s.every
	f.snapping = f.snapping || due
	f.mu.Unlock()
	if !due {
		return
	}
	done := func(err error) {
		f.mu.Lock()
		defer f.mu.Unlock()
		f.snapping = false
		if err == nil {
			f.snapped = head.Info.Version
		}
	}
	if !s.background(func() {
		err := s.journal.PutSnapshot(s.ctx, journal.Snapshot{
			Floor: f.id, Version: head.Info.Version, Digest: head.Info.Digest, Content: head.Map.Encode()})
		done(err)
		if err != nil && !errors.Is(err, context.Canceled) {
			s.report(fmt.Errorf("floor %q: the journal snapshot of version %d was not written: %w", f.id, head.Info.Version, err))
		}
	}) {
		done(ErrClosed)
	}
}
