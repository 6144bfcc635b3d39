package mapstore

import (
	"bytes"
	"context"
	"errors"
	"fmt"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/mapstore/journal"
)

// maxRaces is how often in a row a push may find that another writer of the
// journal was faster; each time that writer made a version.
const maxRaces = 100

// maxEditBytes is how long a patch's encoded edits may be; the rest of a payload is
// the entry's own.
const maxEditBytes = journal.MaxPayloadBytes - 64

// draft is a version before it is given a place in the chain.
type draft struct {
	kind      Kind
	base      int64
	author    string
	reason    string
	requestID string
	entry     entry
	content   *floor.Map
}

// CreateFloor makes a floor at version 1; the same id with the same settings again
// gives the floor as it now stands. ErrFloorExists when the settings differ,
// ErrFloorLimit beyond MaxFloors, floor.SettingsError, *ArgumentError.
func (s *Store) CreateFloor(ctx context.Context, id string, set floor.Settings, author, requestID string) (FloorInfo, error) {
	for _, err := range []error{checkFloorID(id), checkText("author", author, MaxAuthorRunes), checkRequestID(requestID)} {
		if err != nil {
			return FloorInfo{}, err
		}
	}
	m, err := floor.New(set)
	if err != nil {
		return FloorInfo{}, err
	}
	f, err := s.lookup(id)
	if errors.Is(err, ErrNoFloor) {
		if f, err = s.makeFloor(ctx, id, m, author, requestID); errors.Is(err, journal.ErrConflict) {
			f, err = s.adopt(ctx, id)
		}
	}
	if err != nil {
		return FloorInfo{}, err
	}
	if info := f.info(); info.Settings == m.Settings() {
		return info, nil
	}
	return FloorInfo{}, fmt.Errorf("%w: %q", ErrFloorExists, id)
}

// makeFloor gives the floor that there is by now, or a new one; ErrConflict when
// another writer made it.
func (s *Store) makeFloor(ctx context.Context, id string, m *floor.Map, author, requestID string) (*floorState, error) {
	done, err := take(ctx, s.create)
	if err != nil {
		return nil, err
	}
	defer done()
	f, err := s.lookup(id)
	if !errors.Is(err, ErrNoFloor) {
		return f, err
	}
	s.mu.RLock()
	n := len(s.floors) + len(s.refused)
	s.mu.RUnlock()
	if n >= MaxFloors {
		return nil, fmt.Errorf("%w: there are %d, at most %d are kept", ErrFloorLimit, n, MaxFloors)
	}
	d := draft{kind: journal.Created, author: author, requestID: requestID, content: m,
		entry: entry{touched: geom.EmptyRect(), body: floor.EncodeSettings(m.Settings())}}
	r, snap := s.draw(id, 1, [32]byte{}, &d)
	if err := s.append(ctx, r); err != nil {
		return nil, err
	}
	f = &floorState{id: id, created: snap.Info.Time, write: newTurn(), changed: make(chan struct{}), building: map[int64]*build{}}
	f.publish(snap, r.Hash, s.keep)
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.closed {
		return nil, ErrClosed
	}
	s.floors[id] = f
	return f, nil
}

// draw makes the record and the snapshot of a draft.
func (s *Store) draw(id string, version int64, prev [32]byte, d *draft) (journal.Record, *Snapshot) {
	r := journal.Record{
		Floor: id, Version: version, Kind: d.kind, Base: d.base,
		Author: d.author, Reason: d.reason, RequestID: d.requestID, TimeUs: s.now().UnixMicro(),
		Payload: d.entry.encode(), Digest: d.content.Digest(), Prev: prev,
	}.Seal()
	return r, &Snapshot{Info: infoOf(&r, &d.entry), Map: d.content}
}

// append makes a record durable. The error is ErrConflict, the context's, or an
// ErrJournal.
func (s *Store) append(ctx context.Context, r journal.Record) error {
	err := s.journal.Append(ctx, r)
	switch {
	case err == nil, errors.Is(err, journal.ErrConflict):
		return err
	case ctx.Err() != nil && errors.Is(err, ctx.Err()):
		return err
	}
	return fmt.Errorf("%w: floor %q, version %d: %w", ErrJournal, r.Floor, r.Version, err)
}

// Push makes a new version by carrying out p's edits, all or none. repeated says
// that the request id had been carried out before and the first answer is given
// again; ErrRequestReused when it had been for something else.
//
// A base below the head is a *StaleBaseError, unless p.AllowRebase is set and nothing
// that the patch touches differs between base and head; the patch is then carried
// out on the head. A base above the head is ErrFutureVersion. Edits that cannot be
// carried out are a *floor.EditError. When the journal does not take the version
// the error is an ErrJournal; nothing has changed then, and later pushes may work.
func (s *Store) Push(ctx context.Context, id string, p Patch) (v VersionInfo, repeated bool, err error) {
	if err := p.check(); err != nil {
		return v, false, err
	}
	f, err := s.lookup(id)
	if err != nil {
		return v, false, err
	}
	if p.AllowRebase && p.Base < f.head().Info.Version {
		// Rebuild an old base before taking the turn, so that other writers need not
		// wait. What goes wrong goes wrong again below.
		_, _ = s.at(ctx, f, p.Base)
	}
	return s.makeVersion(ctx, f, p.RequestID, p.ValidateOnly, p.repeats, func(head *Snapshot) (draft, error) {
		if p.Base != head.Info.Version {
			if err := s.judgeBase(ctx, f, &p, head); err != nil {
				return draft{}, err
			}
		}
		return p.draft(head)
	})
}

// draft carries p out on the head: once as given, and once from its encoding, which
// is what a replay will do.
func (p *Patch) draft(head *Snapshot) (draft, error) {
	m, err := head.Map.Apply(p.Edits)
	if err != nil {
		return draft{}, err
	}
	body := floor.EncodeEdits(p.Edits)
	if len(body) > maxEditBytes {
		return draft{}, wrong("patch.edits", "%d bytes encoded, wanted at most %d; use several patches", len(body), maxEditBytes)
	}
	edits, err := floor.DecodeEdits(body)
	if err != nil {
		return draft{}, fmt.Errorf("%w: the edits cannot be read back: %w", ErrJournal, err)
	}
	again, err := head.Map.Apply(edits)
	if err != nil {
		return draft{}, fmt.Errorf("%w: the edits cannot be carried out when read back: %w", ErrJournal, err)
	}
	if again.Digest() != m.Digest() {
		return draft{}, fmt.Errorf("%w: the edits give another content when read back", ErrJournal)
	}
	return draft{
		kind: journal.Patched, base: p.Base, author: p.Author, reason: p.Reason, requestID: p.RequestID, content: again,
		entry: entry{edits: len(edits), touched: floor.TouchedBy(edits, head.Map), body: body},
	}, nil
}

// repeats says whether r is the record of p.
func (p *Patch) repeats(r *journal.Record, e *entry) bool {
	if r.Kind != journal.Patched || r.Base != p.Base || r.Author != p.Author || r.Reason != p.Reason || e.edits != len(p.Edits) {
		return false
	}
	for i := range p.Edits {
		if k := p.Edits[i].Kind; k < floor.PutFeature || k > floor.ClearRect || k == floor.PutFeature && p.Edits[i].Feature == nil {
			return false // no such patch was ever accepted
		}
	}
	return bytes.Equal(e.body, floor.EncodeEdits(p.Edits))
}

// Restore makes a new version whose content equals an old one. A base below the
// head is a *StaleBaseError. The other failures are as for Push, and as for At of
// the version to bring back.
func (s *Store) Restore(ctx context.Context, id string, r Restore) (v VersionInfo, repeated bool, err error) {
	if err := r.check(); err != nil {
		return v, false, err
	}
	f, err := s.lookup(id)
	if err != nil {
		return v, false, err
	}
	// Rebuild the old version before taking the turn. What goes wrong goes wrong again
	// below, after the request id was looked up.
	_, _ = s.at(ctx, f, r.Version)
	return s.makeVersion(ctx, f, r.RequestID, false, r.repeats, func(head *Snapshot) (draft, error) {
		switch {
		case r.Base > head.Info.Version:
			return draft{}, futureBase(f.id, r.Base, head)
		case r.Base < head.Info.Version:
			return draft{}, s.staleRestore(f, r.Base, head)
		}
		old, err := s.at(ctx, f, r.Version)
		if err != nil {
			return draft{}, err
		}
		return draft{
			kind: journal.Restored, base: r.Base, author: r.Author, reason: r.Reason, requestID: r.RequestID, content: old.Map,
			entry: entry{restored: r.Version, touched: floor.Diff(head.Map, old.Map).Bounds(head.Map.Settings())},
		}, nil
	})
}

func (r *Restore) repeats(rec *journal.Record, e *entry) bool {
	return rec.Kind == journal.Restored && rec.Base == r.Base && rec.Author == r.Author && rec.Reason == r.Reason && e.restored == r.Version
}

// makeVersion is what all writers of a floor have in common: the turn, the request
// id, the append, and another writer who was faster. drawUp is called with the head
// on top of which the version is to stand, again for each new head.
func (s *Store) makeVersion(ctx context.Context, f *floorState, requestID string, validateOnly bool,
	repeats func(*journal.Record, *entry) bool, drawUp func(head *Snapshot) (draft, error),
) (v VersionInfo, repeated bool, err error) {
	done, err := take(ctx, f.write)
	if err != nil {
		return v, false, err
	}
	defer done()
	for range maxRaces {
		if v, repeated, err = s.answerAgain(ctx, f, requestID, repeats); err != nil || repeated {
			return v, repeated, err
		}
		head := f.head()
		d, err := drawUp(head)
		if err != nil {
			return VersionInfo{}, false, err
		}
		r, snap := s.draw(f.id, head.Info.Version+1, f.hash, &d)
		if validateOnly {
			return snap.Info, false, nil
		}
		err = s.append(ctx, r)
		if err == nil {
			f.publish(snap, r.Hash, s.keep)
			s.snapshotIfDue(f)
			return snap.Info, false, nil
		}
		if !errors.Is(err, journal.ErrConflict) {
			return VersionInfo{}, false, err
		}
		if err := s.catchUp(ctx, f); err != nil {
			return VersionInfo{}, false, err
		}
	}
	return VersionInfo{}, false, fmt.Errorf("%w: another writer of floor %q was faster %d times in a row", ErrJournal, f.id, maxRaces)
}

// answerAgain is the first answer to a request id. The caller has the turn.
func (s *Store) answerAgain(ctx context.Context, f *floorState, requestID string, repeats func(*journal.Record, *entry) bool,
) (v VersionInfo, repeated bool, err error) {
	if requestID == "" {
		return v, false, nil
	}
	at, err := s.journal.Find(ctx, f.id, requestID)
	if err != nil || at == 0 {
		return v, false, err
	}
	r, err := s.record(ctx, f.id, at)
	if err != nil {
		return v, false, err
	}
	e, err := decodeEntry(&r)
	if err != nil {
		return v, false, err
	}
	if !repeats(&r, &e) {
		return v, false, fmt.Errorf("%w: %q made version %d of floor %q", ErrRequestReused, requestID, at, f.id)
	}
	if at > f.head().Info.Version { // an append of which we were told that it failed, or another writer's
		if err := s.catchUp(ctx, f); err != nil {
			return v, false, err
		}
	}
	return infoOf(&r, &e), true, nil
}
